"""The table of all characteristics: columns for the script, and a plain one that needs no script."""

from __future__ import annotations

from typing import Any

from portfolio.publishing import page_alarms, wording
from portfolio.publishing.numbers import Numbers, missing

FILTERS = (
    ("site", "Site"),
    ("cell", "Verdict"),
    ("route", "Next step"),
    ("centering", "Centering"),
    ("class", "Class"),
    ("owner", "Owner"),
    ("alarm", "To look at"),
)


def columns(rows: list[dict[str, Any]], n: Numbers) -> dict[str, list[Any]]:
    """One list a column: what the script searches, sorts and shows."""

    def words(key: str) -> list[str]:
        return ["" if missing(row[key]) else str(row[key]) for row in rows]

    def figures(key: str) -> list[float | None]:
        return [None if missing(row[key]) else float(f"{row[key]:.4g}") for row in rows]

    return {
        "name": words("characteristic"), "page": words("page"), "site": words("site"), "part": words("part"),
        "feature": words("feature"), "unit": words("unit"), "owner": words("owner"), "class": words("class"),
        "cell": words("cell"), "cellText": [wording.CELL[row["cell"]] for row in rows], "route": words("route"),
        "centering": words("centering"), "alarm": [" ".join(page_alarms.kinds_of(row)) for row in rows],
        "rank": [None if missing(row["rank"]) else int(row["rank"]) for row in rows],
        "index": figures("index"), "indexLow": figures("index_low"), "indexHigh": figures("index_high"),
        "after": figures("cpk_centered"), "chance": figures("chance_centered"),
        "indexText": ["" if missing(row["index"]) else f"{row['index_name']} {n.index(row['index'])}" for row in rows],
        "boundsText": [_bounds(row, n) for row in rows],
        "afterText": ["" if missing(row["cpk_centered"]) else n.index(row["cpk_centered"]) for row in rows],
        "chanceText": ["" if missing(row["chance_centered"]) else n.chance(row["chance_centered"]) for row in rows],
    }  # fmt: skip


def context(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """Choices of the filters: what occurs, in the words of the pages."""
    shown = {"cell": wording.CELL, "alarm": page_alarms.KINDS}
    there = {key: {str(row[key]) for row in rows if not missing(row[key])} for key, _ in FILTERS if key != "alarm"} | {
        "alarm": {kind for row in rows for kind in page_alarms.kinds_of(row)}
    }
    return {
        "filters": [
            {
                "key": key,
                "label": label,
                "choices": [{"value": v, "text": shown.get(key, {}).get(v, v)} for v in sorted(there[key])],
            }
            for key, label in FILTERS
        ],
        "total": len(rows),
    }


def plain(rows: list[dict[str, Any]], n: Numbers) -> list[dict[str, str]]:
    """The static list, in the order of the names."""
    return [
        {
            "name": row["characteristic"],
            "page": row["page"],
            "site": "" if missing(row["site"]) else str(row["site"]),
            "cell": wording.CELL[row["cell"]],
            "index": "" if missing(row["index"]) else f"{row['index_name']} {n.index(row['index'])}",
            "bounds": _bounds(row, n),
            "step": row["route"],
        }
        for row in rows
    ]


def _bounds(row: dict[str, Any], n: Numbers) -> str:
    return "" if missing(row["index_low"]) else f"{n.index(row['index_low'])} to {n.index(row['index_high'])}"
