"""Sites, data quality and changes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from portfolio.publishing import charts, wording
from portfolio.publishing.numbers import Numbers, missing
from portfolio.publishing.page_first import alarms, not_judged
from portfolio.result import CELLS, NOT_JUDGED

if TYPE_CHECKING:
    from portfolio.publishing.pages import PageData

GOOD = "stable, capable"


def sites(compared: dict[str, Any], n: Numbers) -> dict[str, Any]:
    """What sites.html lays out: shares with intervals, and the same feature side by side."""
    rows = [
        {
            "site": row["site"],
            "characteristics": n.count(row["characteristics"]),
            "judged": n.count(row["judged"]),
            "cells": [
                {
                    "number": n.count(row["counts"][cell]),
                    "share": n.percent(row["shares"][cell][0]),
                    "interval": f"{n.percent(row['shares'][cell][1])} to {n.percent(row['shares'][cell][2])}",
                }
                for cell in CELLS
            ],
        }
        for row in compared["rows"]
    ]
    several = [row for row in compared["rows"] if row["judged"]]
    picture = None
    if len(several) > 1:
        picture = charts.svg(
            "intervals",
            {
                "rows": [
                    {"w": r["site"], "v": r["shares"][GOOD][0], "l": r["shares"][GOOD][1], "u": r["shares"][GOOD][2]}
                    for r in several
                ]
            },
            "Share of judged characteristics that are predictable and fit the tolerance, by site, with 95 % intervals",
            "s-",
            n.decimal,
        )
    families = [
        {
            **family,
            "rows": [
                {
                    "site": member["site"],
                    "name": member["characteristic"],
                    "index": "" if missing(member["index"]) else f"{member['index_name']} {n.index(member['index'])}",
                    "bounds": ""
                    if missing(member["index_low"])
                    else f"{n.index(member['index_low'])} to {n.index(member['index_high'])}",
                    "n": n.count(member["n"]),
                    "verdict": wording.CELL[member["cell"]],
                    "mean": n.quantity(member["mean"], family["unit"], member["sigma_total"]),
                    "sigma": n.quantity(
                        member["sigma_total"],
                        family["unit"],
                        None if missing(member["sigma_total"]) else member["sigma_total"] / 10,
                    ),
                }
                for member in family["rows"]
            ],
        }
        for family in compared["families"]
    ]
    return {"sites": rows, "families": families, "picture": picture, "heads": [wording.CELL[cell] for cell in CELLS]}


def quality(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> dict[str, Any]:
    """What quality.html lays out: what came in, what was set aside and why, what is missing."""
    last = {row["source"]: row for row in data.pulls.to_dict("records")}
    sources = []
    for row in data.loads.to_dict("records"):
        pull = last.get(row["source"], {})
        share = row["rows_rejected"] / row["rows_read"] if row["rows_read"] else 0.0
        sources.append(
            {
                "source": row["source"],
                "status": pull.get("status", "not pulled"),
                "pulled": n.time(pull.get("pulled_at")),
                "files": n.count(row["items"]),
                "read": n.count(row["rows_read"]),
                "new": n.count(row["rows_new"]),
                "known": n.count(row["rows_known"]),
                "corrected": n.count(row["rows_corrected"]),
                "rejected": f"{n.count(row['rows_rejected'])} ({n.percent(share, 2)})",
                "empty": n.count(row["rows_empty"]),
                "newest": n.time(row["last_taken"]),
                "message": pull.get("message") or "",
            }
        )
    never = [pull for name, pull in last.items() if name not in set(data.loads["source"])]
    return {
        "alarms": alarms(data, rows, n),
        "sources": sources,
        "never": [
            {"source": pull["source"], "status": pull["status"], "message": pull["message"] or ""} for pull in never
        ],
        "reasons": [
            {
                "source": r["source"],
                "reason": r["reason"],
                "rows": n.count(r["rows"]),
                "files": n.count(r["items"]),
                "example": r["example"],
            }
            for r in data.rejected.to_dict("records")
        ],
        "refused": [
            {"source": r["source"], "item": r["item"], "reason": r["reason"]} for r in data.refused.to_dict("records")
        ],
        "unregistered": [
            {"name": r["name"], "number": n.count(r["measurements"])} for r in data.unregistered.to_dict("records")
        ],
        "why": not_judged(rows, n),
        "unjudged": [
            {
                "name": row["characteristic"],
                "page": row["page"],
                "site": "" if missing(row["site"]) else row["site"],
                "why": wording.NOT_JUDGED.get(row["capability_note"] or row["stability_note"], ""),
                "held": n.count(row["window_measurements"]),
                "last": n.date(row["last"]),
            }
            for row in rows
            if row["cell"] == NOT_JUDGED
        ],
    }


def changes(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> dict[str, Any]:
    """What changes.html lays out: logged changes and what the stretch since then looks like."""
    known = {row["characteristic"]: row for row in rows}
    out = []
    for change in data.changes.to_dict("records"):
        row = known.get(change["characteristic"])
        out.append(
            {
                "name": change["characteristic"],
                "page": None if row is None else row["page"],
                "at": n.time(change["changed_at"]),
                "kind": change["kind"],
                "note": change["note"] or "",
                "since": "no longer registered" if row is None else wording.CELL[row["cell"]],
                "index": "" if row is None or missing(row["index"]) else f"{row['index_name']} {n.index(row['index'])}",
                "held": "" if row is None else n.count(row["measurements"]),
            }
        )
    return {"logged": out}
