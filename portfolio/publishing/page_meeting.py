"""The sheet for the weekly review: one page of decisions, one page of evidence for each proposal. Needs no script."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from portfolio.publishing import charts, page_alarms, records, wording
from portfolio.publishing.numbers import Numbers, missing
from portfolio.publishing.page_first import proposal

if TYPE_CHECKING:
    from portfolio.publishing.pages import PageData

HALF = 380
"Pixels of a picture that takes half the width of a page."


def context(data: PageData, rows: list[dict[str, Any]], n: Numbers) -> dict[str, Any]:
    """What meeting.html lays out."""
    listed = sorted((row for row in rows if not missing(row["rank"])), key=lambda row: row["rank"])
    first = listed[: data.plan.report.cards]
    drawn = {row["characteristic"]: row for row in data.evidence.to_dict("records")}
    return {
        "cards": [_sheet(row, drawn.get(row["characteristic"]), n, i) for i, row in enumerate(first)],
        "alarms": page_alarms.alarms(data, rows, n),
        "facts": page_alarms.data_facts(data, rows, n),
        "waiting": n.counted(len(listed) - len(first), "further characteristic") if len(listed) > len(first) else "",
    }


def _sheet(row: dict[str, Any], evidence: dict[str, Any] | None, n: Numbers, i: int) -> dict[str, Any]:
    out = proposal(row, n)
    out["answers"] = wording.answers(row, n)
    out["stability"] = wording.stability_sentence(row, n)
    out["capability"] = wording.capability_sentence(row, n)
    out["control"] = out["histogram"] = None
    if evidence is not None:
        out["control"] = charts.svg(
            "control",
            records.control(row, evidence, n.zone)[0],
            "Location over time with control limits",
            f"c{i}-",
            n.decimal,
        )
        out["histogram"] = charts.svg(
            "histogram",
            records.histogram(row, evidence),
            "Values against the specification limits",
            f"h{i}-",
            n.decimal,
            HALF,
        )
    out["picture"] = charts.svg("card", records.centering(row), out["caption"], f"k{i}-", n.decimal)
    out["centering"] = charts.svg("centering", records.centering(row), out["caption"], f"z{i}-", n.decimal, HALF)
    return out
