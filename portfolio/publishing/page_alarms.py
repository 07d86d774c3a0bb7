"""What must be seen before anything is decided: what failed, what is stale, what is dangerous; and how the data were.

Nobody reads logs on a Monday morning, so this stands on the first screen, on the data page and on the meeting sheet.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import pandas as pd

from portfolio.publishing import wording
from portfolio.publishing.names import plain
from portfolio.publishing.numbers import Numbers, missing

if TYPE_CHECKING:
    from portfolio.publishing.pages import PageData

STALE = pd.Timedelta(days=7)
"A weekly report should hold values of its week."
KINDS = {
    "critical": "critical, below target",
    "unjudged": "critical, not judged",
    "suspect": "limits or unit suspect",
    "silent": "no value for weeks",
}
TOLD = {
    "critical": (
        "is below target. Contain first: customer and legal requirements and licensed practice go before any project.",
        "are below target. Contain first: customer and legal requirements and licensed practice go before any project.",
    ),
    "unjudged": ("could not be judged.", "could not be judged."),
    "suspect": (
        "lies wholly outside its limits: a wrong limit or unit is likely.",
        "lie wholly outside their limits: a wrong limit or unit is likely.",
    ),
    "silent": ("has sent nothing for weeks.", "have sent nothing for weeks."),
}
"What is said of one and of several."
NAMED = 3
"So many names stand in a line; the rest is counted and linked."


def alarms(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> list[dict[str, Any]]:
    """Lines of the box 'Look at this first', gravest first: text, items (name, page), more, href."""
    return [
        *_about("critical", rows, n),
        *_about("unjudged", rows, n),
        *_failed(data, n),
        *_about("suspect", rows, n),
        *_about("silent", rows, n),
    ]


def data_facts(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> list[dict[str, str]]:
    """How the data were, in a few numbers, whether anything is wrong or not."""
    asked, delivered = len(data.pulls), int((data.pulls["status"] != "failed").sum())
    read, aside = int(data.loads["rows_read"].sum()), int(data.loads["rows_rejected"].sum())
    unjudged = sum(row["cell"] == "not judged" for row in rows)
    newest = data.loads["last_taken"].max() if len(data.loads) else None
    out = []
    if asked:
        told = f"{n.count(delivered)} of {n.counted(asked, 'source')} delivered, the newest value of {n.date(newest)}"
        out.append({"text": told, "href": "quality.html#sources"})
    if read:
        share = f" ({n.share(aside / read)})" if aside else ""
        out.append(
            {"text": f"{n.count(aside)} of {n.counted(read, 'row')} set aside{share}", "href": "quality.html#aside"}
        )
    if len(data.unregistered):
        told = f"{n.counted(len(data.unregistered), 'measured characteristic')} not registered"
        out.append({"text": told, "href": "quality.html#unregistered"})
    out.append({"text": f"{n.counted(unjudged, 'characteristic')} not judged", "href": "quality.html#unjudged"})
    return out


def not_judged(rows: list[dict[str, Any]], n: Numbers) -> list[dict[str, str]]:
    """Why characteristics were not judged and what to do about it, most frequent first."""
    why = Counter(code_of(row) for row in rows if row["cell"] == "not judged")
    return [
        {"number": n.count(count), "why": wording.NOT_JUDGED[code], "remedy": wording.REMEDY[code]}
        for code, count in why.most_common()
    ]


def code_of(row: dict[str, Any]) -> str:
    """The code that says why a row has no verdict."""
    return str(row["capability_note"] or row["stability_note"])


def kinds_of(row: dict[str, Any]) -> list[str]:
    """Keys of `KINDS` that hold for a characteristic; the list can be filtered by them."""
    critical, judged = row["class"] in wording.SAFETY_CLASSES, row["cell"] != "not judged"
    holds = {
        "critical": critical and judged and row["capability"] == "not capable",
        "unjudged": critical and not judged,
        "suspect": row["capability_note"] == "suspect_limits",
        "silent": row["stability_note"] == "silent",
    }
    return [kind for kind, true in holds.items() if true]


def _about(kind: str, rows: list[dict[str, Any]], n: Numbers) -> Iterable[dict[str, Any]]:
    """One line for all characteristics of a kind."""
    named = [row for row in rows if kind in kinds_of(row)]
    if not named:
        return
    noun = "critical characteristic" if kind in ("critical", "unjudged") else "characteristic"
    told = TOLD[kind][0 if len(named) == 1 else 1]
    yield {
        "text": f"{n.counted(len(named), noun)} {told}",
        "items": [{"name": row["characteristic"], "page": row["page"]} for row in named[:NAMED]],
        "more": n.count(len(named) - NAMED) if len(named) > NAMED else "",
        "href": f"list.html#alarm={kind}",
    }


def _failed(data: PageData, n: Numbers) -> Iterable[dict[str, Any]]:
    as_of = pd.Timestamp(data.run["as_of"])
    for pull in data.pulls.to_dict("records"):
        if pull["status"] == "failed":
            why = plain(pull["message"] or "no reason given")
            yield _line(f"Source “{plain(pull['source'])}” failed at the last pull: {why}", "quality.html#sources")
        elif not missing(pull["rows_read"]) and pull["rows_read"]:
            share = pull["rows_rejected"] / pull["rows_read"]
            if share > data.plan.limits.rejected_share:
                told = (
                    f"Source “{plain(pull['source'])}”: {n.share(share)} of its rows were set aside at the last pull."
                )
                yield _line(told, "quality.html#aside")
    for load in data.loads.to_dict("records"):
        if not missing(load["last_taken"]) and as_of - load["last_taken"] > STALE:
            days = n.counted((as_of - load["last_taken"]).days, "day")
            yield _line(
                f"Source “{plain(load['source'])}” is stale: its newest value is of {n.date(load['last_taken'])}, "
                f"{days} before the judgement.",
                "quality.html#sources",
            )
    if len(data.refused):
        some = ", ".join(plain(str(item)) for item in data.refused["item"].head(NAMED))
        more = " …" if len(data.refused) > NAMED else ""
        yield _line(f"{n.counted(len(data.refused), 'file')} refused whole: {some}{more}", "quality.html#refused")


def _line(text: str, href: str) -> dict[str, Any]:
    return {"text": text, "items": [], "more": "", "href": href}
