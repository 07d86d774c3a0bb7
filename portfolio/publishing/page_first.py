"""The first screen: which few projects do we start, and why should I believe it?"""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING, Any

from portfolio.publishing import charts, page_alarms, records, wording
from portfolio.publishing.numbers import Numbers, missing
from portfolio.result import ROUTES

if TYPE_CHECKING:
    from portfolio.publishing.pages import PageData

WORDS = ("no", "one", "two", "three", "four", "five")
NEXT = 25


def context(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> dict[str, Any]:
    """What index.html lays out."""
    listed = sorted((row for row in rows if not missing(row["rank"])), key=lambda row: row["rank"])
    first, rest = listed[: data.plan.report.cards], listed[data.plan.report.cards :][:NEXT]
    counts = Counter(row["cell"] for row in rows)
    works = {row["site"] for row in rows if not missing(row["site"])}
    target = data.plan.targets["default"]
    judged = len(rows) - counts["not judged"]
    return {
        "headline": _headline(len(first)),
        "lede": _lede(len(rows), len(works), judged, len(listed), n),
        "alarms": page_alarms.alarms(data, rows, n),
        "facts": page_alarms.data_facts(data, rows, n),
        "cards": [card(row, n, f"k{i}-") for i, row in enumerate(first)],
        "cells": {cell: n.count(counts[cell]) for cell in wording.CELL},
        "short_cells": wording.SHORT_CELL,
        "bar": _bar([(cell, counts[cell]) for cell in wording.CELL]),
        "routes": [
            {"route": route, "number": n.count(number), "text": wording.ROUTE[route]}
            for route in ROUTES
            if (number := sum(row["route"] == route for row in rows))
        ],
        "listed": n.count(len(listed)) if listed else "",
        "expected_short": _expected_short(listed, n),
        "not_judged": page_alarms.not_judged(rows, n),
        "next": [line(row, n) for row in rest],
        "news": _news(data, rows),
        "target": n.index(target),
        "drawings": {
            "overview": records.overview(target),
            "decimal": n.decimal,
        },
        "outside_picture": n.count(sum(missing(row["cpk_centered"]) or missing(row["index"]) for row in rows)),
    }


def card(row: dict[str, Any], n: Numbers, prefix: str) -> dict[str, Any]:
    """One proposal with its picture."""
    told = proposal(row, n)
    return {**told, "picture": charts.svg("card", records.centering(row), told["caption"], prefix, n.decimal)}


def proposal(row: dict[str, Any], n: Numbers) -> dict[str, Any]:
    """One proposal with its reasons and its doubts."""
    caption = (
        f"Now and with the mean moved, between the specification limits; the shaded band holds the means that reach "
        f"{n.index(row['target_cpk'])}."
    )
    return {
        **line(row, n),
        "move": wording.move_sentence(row, n),
        "least": wording.least_sentence(row, n),
        "gain": wording.gain_sentence(row, n),
        "believe": wording.believe(row, n),
        "cautions": wording.cautions(row, n),
        "critical": row["class"] in wording.SAFETY_CLASSES,
        "caption": caption,
    }


def line(row: dict[str, Any], n: Numbers) -> dict[str, Any]:
    """One characteristic of the centering list in short."""
    return {
        "rank": "" if missing(row["rank"]) else int(row["rank"]),
        "name": row["characteristic"],
        "page": row["page"],
        "where": place(row),
        "action": wording.action(row, n),
        "now": n.index(row["index"]),
        "after": n.index(row["cpk_centered"]),
        "target": n.index(row["target_cpk"]),
        "chance": n.chance(row["chance_centered"]),
        "likely": wording.chance_words(row["chance_centered"]),
        "ppm_now": n.ppm(row["ppm_now"]),
        "ppm_after": n.ppm(row["ppm_centered"]),
        "parts": n.rough(row["parts_per_year"]),
        "money": n.money(row["saving_per_year"], row["currency"]),
        "saving": _saving(row, n),
    }


def place(row: dict[str, Any]) -> str:
    """Site, part, operation, machine in one line."""
    parts = [str(row[key]) for key in ("site", "part", "operation", "machine") if not missing(row[key])]
    return ", ".join(parts)


def _saving(row: dict[str, Any], n: Numbers) -> list[str]:
    """What a move saves in a year, the weightiest first; empty where neither cost nor volume is registered."""
    out = [] if missing(row["saving_per_year"]) else [n.money(row["saving_per_year"], row["currency"])]
    if not missing(row["parts_per_year"]):
        out.append(f"{n.rough(row['parts_per_year'])} parts")
    return out


def _bar(counts: list[tuple[str, int]]) -> list[dict[str, Any]]:
    """Parts of a bar 1000 wide, in the order of the cells, with a little air between."""
    total = sum(number for _, number in counts) or 1
    out, at = [], 0.0
    for cell, number in counts:
        width = 1000 * number / total
        if number:
            out.append({"cell": cell, "x": round(at, 1), "width": round(max(1.0, width - 2), 1)})
        at += width
    return out


def _expected_short(listed: list[dict[str, Any]], n: Numbers) -> str:
    """How many of the list are expected to fall short: the chances say so themselves."""
    short = sum(1 - row["chance_centered"] for row in listed)
    told = "fewer than one" if short < 0.95 else f"about {n.count(short)}"
    return f"The chances add up: of these {n.count(len(listed))}, {told} will turn out not to reach the target."


def _headline(number: int) -> str:
    if not number:
        return "Nothing to re-centre this week"
    return f"Start {'this one' if number == 1 else f'these {WORDS[number]}'} this week"


def _lede(total: int, works: int, judged: int, listed: int, n: Numbers) -> str:
    where = f" at {n.count(works)} sites" if works > 1 else ""
    head = f"{n.count(total)} characteristics{where}: {n.count(judged)} judged, {n.count(total - judged)} not."
    if not listed:
        return f"{head} For none of them would moving the mean alone be enough and worth it."
    tail = "it is" if listed == 1 else "they are"
    return (
        f"{head} For {n.count(listed)} of them moving the mean alone is enough to reach the target; {tail} ranked by "
        "what a move saves."
    )


def _news(data: PageData, rows: list[dict[str, Any]]) -> dict[str, Any]:
    pages = {row["characteristic"]: row["page"] for row in rows}

    def some(status: str) -> list[dict[str, Any]]:
        part = data.ranking[data.ranking["status"] == status]
        return [
            {
                "name": row["characteristic"],
                "page": pages.get(row["characteristic"]),
                "why": wording.left_list(row["reason"] or ""),
            }
            for row in part.to_dict("records")
        ]

    known_before = bool((data.ranking["status"] != "new").any()) if len(data.ranking) else False
    return {"first_time": not known_before, "new": some("new"), "left": some("left")}
