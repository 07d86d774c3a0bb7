"""Every sentence of a judgement, once: report, `explain` and export say the same.

A row is a mapping with the columns of `results`. What is not there is left out; nothing is made up.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from portfolio.publishing.numbers import Numbers, missing

if TYPE_CHECKING:
    from portfolio.plan import Plan

Row = Mapping[str, Any]
PLAIN = Numbers()

CELL = {
    "stable, capable": "predictable and fits the tolerance",
    "stable, not capable": "predictable, does not fit the tolerance",
    "unstable, capable": "not predictable; what was delivered fitted the tolerance",
    "unstable, not capable": "not predictable; what was delivered did not fit the tolerance",
    "not judged": "not judged",
}
ROUTE = {
    "leave alone": "Leave it alone.",
    "re-centre": "Move the mean.",
    "narrow the spread": "Reduce the spread: moving the mean alone is not enough.",
    "align the streams": "Align the streams first: they aim at different places, and one common move cannot serve all.",
    "stabilise first": "Find and remove the cause of the change first.",
    "improve the gauge": "Improve the measurement first.",
    "check the data": "Check the data and the limits first.",
    "collect more": "Collect more values.",
}
NOT_JUDGED = {
    "no_data": "no value in the judged period",
    "silent": "no value for weeks: the flow of data has stopped",
    "too_few": "too few values to judge",
    "coarse": "the gauge is too coarse: the values move in steps as wide as the spread",
    "constant": "all values are equal: there is no variation to judge",
    "no_limits": "no specification limit is registered",
    "crossed_limits": "the registered limits are crossed",
    "outside_bound": "a value lies beyond a natural bound, which is impossible: check the data",
    "gauge_too_noisy": "the gauge's own variation makes up nearly all that is seen",
    "no_shape": "the values do not have the normal shape, so an index read off it would not be honest",
    "suspect_limits": "every value lies far outside: suspect the limits or the unit first",
    "sorted": "the values stop abruptly at a limit: they look sorted",
}
CENTERING_REASON = {
    "one_sided": "Only one limit: there is no middle to move to; farther from the limit is better until cost stops you.",
    "natural_bound": "Zero is the ideal here: there is no middle to move to, only the spread can be reduced.",
    "economic_aim": "The mean stands off the middle on purpose (its aim is registered); this is no centering project.",
    "coupled": "Moving this mean would move another characteristic.",
    "streams_differ": "The streams have different means: one common move cannot centre all of them.",
    "sorted": "The values look sorted; estimate the unsorted process first.",
    "already_centred": "The mean stands at its aim already: moving it would change nothing.",
    "capable_now": "The target is likely met as it is.",
    "not_registered": "No longer in the registry.",
    "not_alone": "Moving the mean alone would no longer be enough.",
}
CAUTION = (
    "This characteristic protects people or is critical. Contain and sort first where parts may be outside; projects "
    "come after. Customer requirements, legal rules and licensed practice go before anything said here."
)
SAFETY_CLASSES = ("critical", "safety")


@dataclass(frozen=True)
class Explanation:
    """The whole judgement in words: `paragraphs` (heading, sentences) and the numbers behind them."""

    paragraphs: list[tuple[str, list[str]]]
    facts: dict[str, Any]


def action(row: Row, n: Numbers = PLAIN) -> str:
    """What to do, in a few words: 'Lower the mean by 0.039 mm'."""
    if row["centering"] in ("reaches", "may reach") or row["route"] == "re-centre":
        return f"{_verb(row)} the mean by {n.quantity(abs(row['move']), row['unit'], row['sigma_total'])}"
    return ROUTE[row["route"]].rstrip(".")


def move_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Which way, how far, at least how far."""
    least = row["move_least"]
    text = f"{action(row, n)}, to {n.quantity(row['aim'], row['unit'], row['sigma_total'])}"
    if not missing(least) and abs(least) > 0:
        text += f" (at least by {n.quantity(abs(least), row['unit'], row['sigma_total'])})"
    return text + "."


def least_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Where to, and the least move that is enough: stands below the action."""
    text = f"From {n.quantity(row['mean'], row['unit'], row['sigma_total'])} to {n.quantity(row['aim'], row['unit'], row['sigma_total'])}"
    if not missing(row["move_least"]) and abs(row["move_least"]) > 0:
        text += f"; {n.quantity(abs(row['move_least']), row['unit'], row['sigma_total'])} is the least that is enough"
    return text + "."


def gain_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """What a move brings: index, chance, parts, money."""
    target = n.index(row["target_cpk"])
    text = (
        f"Cpk goes from {n.index(row['index'])} to {n.index(row['cpk_centered'])}; chance of reaching {target}: "
        f"{n.chance(row['chance_centered'])}. Expected nonconforming parts per million: {n.ppm(row['ppm_now'])} now, "
        f"{n.ppm(row['ppm_centered'])} after."
    )
    if not missing(row.get("parts_per_year")):
        text += f" That is about {n.rough(row['parts_per_year'])} parts a year"
        if not missing(row.get("saving_per_year")):
            text += f", {n.money(row['saving_per_year'], row.get('currency'))} a year"
        text += "."
    return text


def stability_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Is it predictable? Never mentions a specification limit."""
    m = n.count(row["subgroups"])
    period = f"{m} subgroups from {n.date(row['first'])} to {n.date(row['last'])}"
    if row["stability"] == "not judged":
        return f"Not judged: {NOT_JUDGED.get(row['stability_note'] or row['capability_note'], 'see the data')}."
    if row["stability"] == "stable":
        told = {
            "layers": " Periods differ more than the parts within one period, but in a steady way; the control limits "
            "are drawn for that.",
            "negligible": f" A movement can be detected but explains only {n.percent(row['movement_share'])} of the "
            "variance: too small to act on.",
            "autocorrelated": " Each value leans a little on the one before, so the values say less than their number; "
            "the bounds are widened for that.",
            "short": " The record is short: a smaller change could have gone unseen.",
        }
        head = "Predictable so far" if row["stability_note"] == "short" else "Predictable"
        return f"{head}: {period} behave like one process.{told.get(row['stability_note'], '')}"
    return f"Not predictable: {_kind(row, n)} ({period}).{_settled(row, n)}"


def signals_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """The chart's signals beside what a stable process of that length shows anyway."""
    if missing(row["signals"]) or missing(row["expected_signals"]):
        return ""
    return (
        f"{n.count(row['signals'])} subgroups carry a signal of the control chart; a stable process of this length shows "
        f"about {n.fixed(row['expected_signals'], 0 if row['expected_signals'] >= 3 else 1)}. Signals alone are not the verdict."
    )


def capability_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Does it fit the tolerance? Never mentions a control limit."""
    if row["capability"] == "not judged":
        text = f"Not judged: {NOT_JUDGED.get(row['capability_note'], 'see the data')}."
        if not missing(row.get("outside_observed")) and row["measurements"] and row["capability_note"] != "no_limits":
            text += (
                f" Outside the limits: {n.count(row['outside_observed'])} of {n.count(row['measurements'])} values; with "
                f"95{chr(0x202F)}% confidence at most {n.percent(row['outside_high'], 1)}."
            )
        return text
    name, target = row["index_name"], n.index(row["target_cpk"])
    spread = f"{name} {n.index(row['index'])}, 95{chr(0x202F)}% bounds {n.index(row['index_low'])} and {n.index(row['index_high'])}"
    if row["close_call"]:
        return (
            f"Close call: {spread}; these {n.count(row['measurements'])} values cannot tell on which side of {target} the "
            f"process is. It leans to {'fitting' if row['capability'] == 'capable' else 'not fitting'}. About four times as "
            "many values would halve the range."
        )
    if row["stability"] == "unstable":
        fitted = "fitted" if row["capability"] == "capable" else "did not fit"
        return (
            f"What was delivered {fitted} the tolerance ({spread}; target {target}). That is no promise for next week."
        )
    verdict = "Fits the tolerance" if row["capability"] == "capable" else "Does not fit the tolerance"
    return f"{verdict}: {spread}; target {target}."


def centering_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """What would moving the mean alone do?"""
    answer, reason, target = row["centering"], row["centering_reason"], n.index(row["target_cpk"])
    if answer in ("reaches", "may reach"):
        sure = "should reach" if answer == "reaches" else "may reach"
        return f"Moving the mean alone {sure} the target. {move_sentence(row, n)} {gain_sentence(row, n)}"
    if reason == "not_adjustable":
        why = "" if missing(row.get("why_not_adjustable")) else f" ({row['why_not_adjustable']})"
        return (
            f"The mean cannot be adjusted{why}. Correct it at the next tool change: {move_sentence(row, n)} "
            f"{gain_sentence(row, n)}"
        )
    if reason == "unstable":
        return "Not asked: the mean of a process that is not predictable has no settled place to move from."
    if reason == "not_judged":
        return "Not asked: the characteristic could not be judged."
    text = CENTERING_REASON.get(reason, "")
    if answer == "not alone":
        text = (text + " " if text else "") + (
            f"Even with the mean at {n.quantity(row['aim'], row['unit'], row['sigma_total'])} the chance of reaching {target} is "
            f"{n.chance(row['chance_centered'])}."
        )
        if not missing(row["needed_sigma"]):
            text += (
                f" The standard deviation would have to fall from {n.quantity(row['sigma_total'], row['unit'], row['sigma_total'] / 10)} "
                f"to about {n.quantity(row['needed_sigma'], row['unit'], row['sigma_total'] / 10)}."
            )
    return text


def reasons(row: Row, n: Numbers = PLAIN) -> list[str]:
    """Sentences for the codes of a row, most important first."""
    out: list[str] = []
    for code in row["reason_codes"]:
        sentence = _reason(code, row, n)
        if sentence and sentence not in out:
            out.append(sentence)
    return out


def believe(row: Row, n: Numbers = PLAIN) -> list[str]:
    """Why a proposal can be trusted, and who says that it can be done."""
    out = [
        stability_sentence(row, n),
        f"Enough data: {n.count(row['measurements'])} values, the newest of {n.date(row['last'])}.",
    ]
    if not missing(row.get("cpk_centered_low")):
        cautious = row["cpk_centered_low"]
        word = "still reaches" if cautious >= row["target_cpk"] else "does not reach"
        out.append(
            f"Cautiously read (95{chr(0x202F)}% bound), Cpk after the move is {n.index(cautious)}, which {word} {n.index(row['target_cpk'])}."
        )
    if row.get("adjustable") == "yes":
        effort = "" if missing(row.get("move_effort")) else f", effort: {row['move_effort']}"
        owner = "" if missing(row.get("owner")) else f" (owner: {row['owner']})"
        out.append(f"Registered as adjustable{owner}{effort}.")
    else:
        out.append("Whether the mean can be adjusted is not registered: ask before the meeting.")
    return out


def cautions(row: Row, n: Numbers = PLAIN) -> list[str]:
    """What could be wrong, or must come first."""
    out = []
    if row.get("class") in SAFETY_CLASSES and row["capability"] == "not capable":
        out.append(CAUTION)
    if row["centering"] == "may reach":
        out.append(f"It may fall short: chance {n.chance(row['chance_centered'])}.")
    if not missing(row.get("streams")) and row["streams"] > 1 and not row.get("streams_means_differ"):
        out.append(f"{n.count(row['streams'])} streams are pooled here; check that they aim at the same place.")
    if missing(row.get("saving_per_year")) and row["centering"] in ("reaches", "may reach"):
        lacking = "volume" if missing(row.get("parts_per_year")) else "cost of a nonconforming part"
        out.append(f"The {lacking} is not registered, so no money is stated.")
    out.append("Verify with 25 to 30 parts after the move before calling it done (common practice).")
    return out


def explanation(row: Row, plan: Plan) -> Explanation:
    """Everything about one characteristic, told as questions."""
    n = Numbers(plan.report.decimal, plan.portfolio.timezone)
    paragraphs = [
        (f"{row['characteristic']}: {CELL[row['cell']]}", [f"Next step: {ROUTE[row['route']]}", *_place(row)]),
        ("Is it predictable?", [s for s in (stability_sentence(row, n), signals_sentence(row, n)) if s]),
        ("Does it fit the tolerance?", [capability_sentence(row, n), *_definition(row, n)]),
        ("What would centering do?", [centering_sentence(row, n)]),
    ]
    if row["centering"] in ("reaches", "may reach"):
        paragraphs.append(("Why believe it?", believe(row, n)))
        paragraphs.append(("What could be wrong?", cautions(row, n)))
    elif row.get("class") in SAFETY_CLASSES and row["capability"] == "not capable":
        paragraphs.append(("Caution", [CAUTION]))
    facts = {name: value for name, value in row.items() if name != "reason_codes" and not missing(value)}
    return Explanation(paragraphs, facts)


def left_list(reason: str) -> str:
    """Why an item is no longer on the centering list."""
    known = {
        "unstable": "no longer predictable",
        "not_judged": "no longer judged",
        "already there": "target reached",
        "capable_now": "target reached",
        "not alone": "moving the mean alone is no longer enough",
        "already_centred": "the mean is at its aim",
        "not_adjustable": "registered as not adjustable",
        "economic_aim": "off the middle on purpose",
        "streams_differ": "its streams differ",
        "not_registered": "no longer registered",
    }
    return known.get(reason, reason)


def _verb(row: Row) -> str:
    return "Raise" if row["move"] > 0 else "Lower"


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
    if missing(row.get("settled_since")):
        return ""
    return f" Settled since {n.date(row['settled_since'])}: log the cause, and only what came after will be judged."


def _place(row: Row) -> list[str]:
    parts = [
        str(row[name]) for name in ("site", "part", "operation", "machine", "feature") if not missing(row.get(name))
    ]
    return [", ".join(parts) + "."] if parts else []


def _definition(row: Row, n: Numbers) -> list[str]:
    if row["capability"] == "not judged":
        return []
    limits = " and ".join(
        f"{word} {n.quantity(row[name], row['unit'], row['sigma_total'])}"
        for name, word in (("lsl", "lower"), ("usl", "upper"))
        if not missing(row[name])
    )
    return [
        f"Specification limits: {limits}. Mean {n.quantity(row['mean'], row['unit'], row['sigma_total'])}, total standard "
        f"deviation {n.quantity(row['sigma_total'], row['unit'], row['sigma_total'] / 10)}; shape assumed: normal."
        + (
            " Its tails are lighter than normal (several streams mixed?), so the figure is cautious."
            if "cautious" in row["shape"]
            else ""
        )
    ]


def _reason(code: str, row: Row, n: Numbers) -> str:
    head, _, rest = code.partition(":")
    match head:
        case "not_judged":
            why = rest or row["stability_note"]
            return f"Not judged: {NOT_JUDGED.get(why, why)}."
        case "unstable" | "stable" | "settled":
            return stability_sentence(row, n)
        case "centering":
            return centering_sentence(row, n)
        case "centering_reason":
            return centering_sentence(row, n)
        case "not_capable" | "close_call":
            return capability_sentence(row, n)
        case _:
            raise ValueError(f"no sentence for the code {code!r}")
