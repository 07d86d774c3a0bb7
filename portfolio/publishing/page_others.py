"""Sites, data quality and changes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from portfolio.publishing import charts, names, page_alarms, wording
from portfolio.publishing.numbers import Numbers, missing
from portfolio.result import CELLS, NOT_JUDGED

if TYPE_CHECKING:
    import pandas as pd

    from portfolio.plan import Plan
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
            500,
        )
    families = [
        {
            **family,
            "rows": [
                {
                    "site": member["site"],
                    "name": member["characteristic"],
                    "page": names.page(member["characteristic"]),
                    "index": "" if missing(member["index"]) else f"{member['index_name']} {n.index(member['index'])}",
                    "bounds": ""
                    if missing(member["index_low"])
                    else f"{n.index(member['index_low'])} to {n.index(member['index_high'])}",
                    "n": n.count(member["n"]),
                    "verdict": wording.CELL[member["cell"]],
                    "mean": n.quantity(member["mean"], family["unit"], member["sigma_total"]),
                    "sigma": n.spread(member["sigma_total"], family["unit"]),
                }
                for member in family["rows"]
            ],
        }
        for family in compared["families"]
    ]
    return {
        "sites": rows,
        "families": families,
        "picture": picture,
        "heads": [wording.SHORT_CELL[cell] for cell in CELLS],
    }


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
                "rejected": f"{n.count(row['rows_rejected'])} ({n.share(share)})",
                "empty": n.count(row["rows_empty"]),
                "newest": n.time(row["last_taken"]),
                "message": _text(pull.get("message")),
            }
        )
    never = [pull for name, pull in last.items() if name not in set(data.loads["source"])]
    return {
        "alarms": page_alarms.alarms(data, rows, n),
        "sources": sources,
        "never": [
            {"source": pull["source"], "status": pull["status"], "message": _text(pull["message"])} for pull in never
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
        "why": page_alarms.not_judged(rows, n),
        "unjudged": [
            {
                "name": row["characteristic"],
                "page": row["page"],
                "site": "" if missing(row["site"]) else row["site"],
                "why": wording.NOT_JUDGED[page_alarms.code_of(row)],
                "held": n.count(row["window_measurements"]),
                "last": n.date(row["last"]),
            }
            for row in rows
            if row["cell"] == NOT_JUDGED
        ],
    }


def changes(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> dict[str, Any]:
    """What changes.html lays out: each logged change, the last judgement before it, and the stretch since then."""
    known = {row["characteristic"]: row for row in rows}
    past = data.history[data.history["characteristic"].isin(data.changes["characteristic"])]
    out = []
    for change in data.changes.to_dict("records"):
        row = known.get(change["characteristic"])
        out.append(
            {
                "name": change["characteristic"],
                "page": None if row is None else row["page"],
                "at": n.time(change["changed_at"]),
                "kind": change["kind"],
                "note": _text(change["note"]),
                "since": "no longer registered" if row is None else wording.CELL[row["cell"]],
                "before": _index_before(past, change, n),
                "index": ""
                if row is None or missing(row["index"])
                else f"{row['index_name']} {n.index(row['index'])} ({n.index(row['index_low'])} to "
                f"{n.index(row['index_high'])})",
                "held": "" if row is None else n.count(row["measurements"]),
            }
        )
    return {"logged": out}


def methods(plan: Plan, n: Numbers) -> dict[str, str]:
    """The plan's settings that methods.html names."""
    chosen = plan.judgement
    shares = ("false_discovery", "practical_size", "list_chance", "should_reach_chance", "keep_chance")
    return {
        "weeks": n.count(plan.portfolio.window_weeks),
        "minimum_values": n.count(chosen.minimum_values),
        "minimum_subgroups": n.count(chosen.minimum_subgroups),
        **{name: n.percent(getattr(chosen, name)) for name in shares},
    }


def _index_before(past: pd.DataFrame, change: dict[str, Any], n: Numbers) -> str:
    """The judged index and its bounds in the last judgement up to the change; '' where there was none."""
    own = past[(past["characteristic"] == change["characteristic"]) & (past["as_of"] <= change["changed_at"])]
    own = own[own["index"].notna()]
    if own.empty:
        return ""
    last = own.iloc[-1]
    return f"{n.index(last['index'])} ({n.index(last['index_low'])} to {n.index(last['index_high'])})"


def _text(value: Any) -> str:
    """A text out of the store; empty where there is none."""
    return "" if missing(value) else str(value)
