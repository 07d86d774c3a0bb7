"""Sentences about order in time. They never mention a specification limit."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from portfolio.publishing.numbers import Numbers, missing
from portfolio.publishing.wording_codes import NOT_JUDGED

Row = Mapping[str, Any]
PLAIN = Numbers()

STEADY = {
    "layers": " Periods differ more than the parts within one period, but in a steady way; the control limits are "
    "drawn for that.",
    "autocorrelated": " Each value leans a little on the one before, so the values say less than their number; the "
    "bounds are widened for that.",
    "short": " The record is short: a smaller change could have gone unseen.",
}
SHORT_KIND = {
    "step": "its level changed on {since}",
    "several steps": "its level changed several times",
    "drift": "its level drifts",
    "wandering": "its level wanders",
    "cycle": "its level rises and falls in a rhythm",
    "alternation": "it alternates up and down",
    "spread": "its spread changed on {since}",
    "isolated extremes": "single values lie far out",
}
WHERE_TO_LOOK = {
    "step": "Ask what was changed around {since}: tool, material, setting, fixture, gauge, program.",
    "several steps": "Put the dates of the steps beside tool changes, set-ups and batches.",
    "drift": "Look for what wears, warms up or is used up. If the wear is planned, register it as expected (wear).",
    "wandering": "Look for slow influences: temperature, bath, material, ageing. Subgroups farther apart tell more.",
    "cycle": "Put the rhythm beside shifts, days, batches and set-ups.",
    "alternation": "Check for two streams in turn, or for adjusting after every part: that makes the spread wider.",
    "spread": "Ask what was changed around {since}: fixture, bearing, material, gauge, operator.",
    "isolated extremes": "Look at these single values first: set-up parts, trials and typing errors look like this.",
}


def stability_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Is it predictable?"""
    if row["stability"] == "not judged":
        return f"Not judged: {NOT_JUDGED[row['stability_note'] or row['capability_note']]}."
    period = f"{n.counted(row['subgroups'], 'subgroup')} from {n.date(row['first'])} to {n.date(row['last'])}"
    if row["stability"] == "unstable":
        return f"Not predictable: {_kind(row, n)} ({period}).{_settled(row, n)}"
    note = row["stability_note"]
    told = STEADY.get(note, "")
    if note == "negligible":
        told = (
            f" A movement can be detected but explains only {n.percent(row['movement_share'])} of the variance: too "
            "small to act on."
        )
    head = "Predictable so far" if note == "short" else "Predictable"
    return f"{head}: {period} behave like one process.{told}"


def stability_answer(row: Row, n: Numbers = PLAIN) -> str:
    """The same in a few words: 'Yes', 'No: its level changed on 2026-10-24'."""
    if row["stability"] == "not judged":
        return "Not judged"
    if row["stability"] == "stable":
        return "So far, yes" if row["stability_note"] == "short" else "Yes"
    told = SHORT_KIND.get(row["instability"], "the order of its values is not that of one process")
    return f"No: {told.format(since=n.date(row['since']))}"


def signals_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """The chart's signals beside what a stable process of that length shows anyway."""
    if row["stability"] == "not judged" or missing(row["signals"]) or missing(row["expected_signals"]):
        return ""
    carry = "carries" if row["signals"] <= 1 else "carry"
    number = n.counted(row["signals"], "subgroup") if row["signals"] else "No subgroup"
    about = n.fixed(row["expected_signals"], 0 if row["expected_signals"] >= 3 else 1)
    return (
        f"{number} {carry} a signal of the control chart; a stable process of this "
        f"length shows about {about}. Signals alone are not the verdict."
    )


def where_to_look(row: Row, n: Numbers = PLAIN) -> str:
    """Where the cause of an instability is found most often (common practice); '' for a predictable process."""
    if row["stability"] != "unstable":
        return ""
    return WHERE_TO_LOOK.get(row["instability"], "").format(since=n.date(row["since"]))


def _kind(row: Row, n: Numbers) -> str:
    size = n.quantity(row["change_size"], row["unit"], row["sigma_within"], sign=True)
    sigma = "" if missing(row["change_sigma"]) else f", {n.fixed(abs(row['change_sigma']), 1)} sigma"
    since = n.date(row["since"])
    kinds = {
        "step": f"the level changed on {since} by {size}{sigma}",
        "several steps": f"the level changed several times, most on {since}, by {size}{sigma}",
        "drift": f"the level drifts, by {size}{sigma} over the period",
        "wandering": "the level wanders; neighbouring subgroups are alike and nothing holds it in place",
        "cycle": f"the level rises and falls with a period of about {_hours(row, n)}",
        "alternation": "the values alternate up and down: two streams in turn, or adjusting after every part",
        "spread": f"the spread changed on {since} to {n.fixed(row['spread_ratio'], 1)} times what it was",
        "isolated extremes": "single subgroups lie too far out to belong to the rest; look at these values first",
    }
    return kinds.get(row["instability"], "the order of the values in time is not that of one process")


def _hours(row: Row, n: Numbers) -> str:
    hours = row["period_hours"]
    if missing(hours):
        return "several subgroups"
    text = f"{n.fixed(hours, 1 if hours < 20 else 0)} hours"
    span = (row["last"] - row["first"]).total_seconds() / 3600 if not missing(row["first"]) else 0.0
    # A period is known to about its square over the length of the record.
    for named, length in (("a shift of eight hours", 8.0), ("half a day", 12.0), ("a day", 24.0), ("a week", 168.0)):
        if span and abs(hours - length) <= min(hours**2 / span, 0.1 * length):
            return f"{text} ({named})"
    return text


def _settled(row: Row, n: Numbers) -> str:
    if missing(row["settled_since"]):
        return ""
    return f" Settled since {n.date(row['settled_since'])}: log the cause, and only what came after will be judged."
