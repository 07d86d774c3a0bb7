"""Every sentence of a judgement, once: report, `explain` and export say the same.

A row is a mapping with the columns of `results`. What is not there is left out; nothing is made up. Sentences on order
in time stand in `wording_stability`, those of a proposal in `wording_proposal`, the words of the codes in
`wording_codes`; everything can be had from here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from portfolio.publishing.numbers import THIN, Numbers, missing
from portfolio.publishing.wording_codes import (
    CAUTION,
    CELL,
    CENTERING_REASON,
    LEFT,
    NOT_JUDGED,
    REMEDY,
    ROUTE,
    SAFETY_CLASSES,
    SHORT_CELL,
)
from portfolio.publishing.wording_proposal import (
    action,
    answers,
    believe,
    cautions,
    chance_words,
    gain_sentence,
    least_sentence,
    move_sentence,
    proposed,
)
from portfolio.publishing.wording_stability import (
    PLAIN,
    Row,
    signals_sentence,
    stability_answer,
    stability_sentence,
    where_to_look,
)

if TYPE_CHECKING:
    from portfolio.plan import Plan

__all__ = [
    "CAUTION", "CELL", "CENTERING_REASON", "LEFT", "NOT_JUDGED", "REMEDY", "ROUTE", "SAFETY_CLASSES", "SHORT_CELL",
    "Explanation", "action", "answers", "believe", "capability_answer", "capability_sentence", "cautions",
    "centering_answer", "centering_sentence", "chance_words", "explanation", "gain_sentence", "least_sentence",
    "left_list", "move_sentence", "next_step", "proposed", "reasons", "signals_sentence", "spread_sentence",
    "stability_answer", "stability_sentence", "step_sentence", "where_to_look",
]  # fmt: skip

MOST_MORE = 10.0
"Beyond so many times the present number of values, more values are no way to settle a close call."

LEAST_SHARE = 0.02
"A smaller part of the variance is not worth a word."
LOOK = {
    "within subgroups": ": look at machine, fixture, material and gauge rather than at what changes over time",
    "between subgroups": ": look at what changes over time, such as set-up, batch, temperature and wear",
    "between streams": ": look at what differs from stream to stream",
}


@dataclass(frozen=True)
class Explanation:
    """The whole judgement in words: `paragraphs` (heading, sentences) and the numbers behind them."""

    paragraphs: list[tuple[str, list[str]]]
    facts: dict[str, Any]


def capability_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Does it fit the tolerance? Never mentions a control limit."""
    if row["capability"] == "not judged":
        same = row["stability"] == "not judged" and row["stability_note"] == row["capability_note"]
        text = "Not judged, for the same reason." if same else f"Not judged: {NOT_JUDGED[row['capability_note']]}."
        if not missing(row["outside_observed"]) and row["measurements"] and row["capability_note"] != "no_limits":
            text += (
                f" Outside the limits: {n.count(row['outside_observed'])} of "
                f"{n.counted(row['measurements'], 'value')}; with 95{THIN}% confidence at most "
                f"{n.percent(row['outside_high'], 1)}."
            )
        return text
    name, target = row["index_name"], n.index(row["target_cpk"])
    spread = (
        f"{name} {n.index(row['index'])}, 95{THIN}% bounds {n.index(row['index_low'])} and {n.index(row['index_high'])}"
    )
    if row["close_call"]:
        leans = "fitting" if row["capability"] == "capable" else "not fitting"
        return (
            f"Close call: {spread}; {n.counted(row['measurements'], 'value')} cannot tell on which side of {target} "
            f"the process is. It leans to {leans}. {_more_values(row, n)}"
        )
    if row["stability"] == "unstable":
        fitted = "fitted" if row["capability"] == "capable" else "did not fit"
        return (
            f"What was delivered {fitted} the tolerance ({spread}; target {target}). That is no promise for next week."
        )
    verdict = "Fits the tolerance" if row["capability"] == "capable" else "Does not fit the tolerance"
    return f"{verdict}: {spread}; target {target}."


def capability_answer(row: Row) -> str:
    """The same in a few words."""
    if row["capability"] == "not judged":
        return "Not judged"
    fits = row["capability"] == "capable"
    if row["close_call"]:
        return "Close call, rather yes" if fits else "Close call, rather no"
    if row["stability"] == "unstable":
        return "So far it did" if fits else "It did not"
    return "Yes" if fits else "No"


def centering_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """What would moving the mean alone do?"""
    answer, reason, target = row["centering"], row["centering_reason"], n.index(row["target_cpk"])
    if proposed(row):
        sure = "should reach" if answer == "reaches" else "may reach"
        return f"Moving the mean alone {sure} the target. {move_sentence(row, n)} {gain_sentence(row, n)}"
    if reason == "not_adjustable":
        why = "" if missing(row["why_not_adjustable"]) else f" ({row['why_not_adjustable']})"
        return (
            f"The mean cannot be adjusted{why}. Correct it at the next tool change: {move_sentence(row, n)} "
            f"{gain_sentence(row, n)}"
        )
    if reason == "unstable":
        return "Not asked: the mean of a process that is not predictable has no settled place to move from."
    if reason == "not_judged":
        return "Not asked: the characteristic could not be judged."
    text = CENTERING_REASON[reason] if reason else ""
    if answer == "not alone":
        text = (text + " " if text else "") + (
            f"Even with the mean at {n.quantity(row['aim'], row['unit'], row['sigma_total'])} the chance of reaching "
            f"{target} is {n.chance(row['chance_centered'])}.{_needed(row, n)}"
        )
    return text


def centering_answer(row: Row, n: Numbers = PLAIN) -> str:
    """The same in a few words."""
    if proposed(row):
        sure = "Should be enough" if row["centering"] == "reaches" else "May be enough"
        return f"{sure}: Cpk {n.index(row['index'])} to {n.index(row['cpk_centered'])}"
    told = {
        "already_centred": "Nothing: it is centred",
        "unstable": "Not asked",
        "not_judged": "Not asked",
        "not_adjustable": "It cannot be moved",
        "economic_aim": "It is off the middle on purpose",
        "one_sided": "There is no middle",
        "natural_bound": "There is no middle",
        "streams_differ": "One move cannot serve all streams",
        "coupled": "It would move another",
        "sorted": "Not asked: the values look sorted",
    }
    if row["centering_reason"] in told:
        return told[row["centering_reason"]]
    return "Not needed" if row["centering"] == "already there" else "Not enough alone"


def spread_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """By how much the spread must fall, and which part of it is the largest; '' where that is not the question."""
    if row["route"] not in ("narrow the spread", "align the streams") or missing(row["sigma_total"]):
        return ""
    told = [] if row["centering"] == "not alone" else [_needed(row, n).strip()]  # else said there
    parts = _parts_of_variance(row)
    if len(parts) > 1:
        listed = ", ".join(f"{n.percent(share)} {name}" for name, share in parts)
        told.append(f"Where the variance comes from: {listed}. Start with the largest.")
    elif parts:
        told.append(f"Nearly all of the variance is {parts[0][0]}{LOOK[parts[0][0]]}.")
    return " ".join(text for text in told if text)


def step_sentence(row: Row) -> str:
    """The one next step in short."""
    if row["centering_reason"] == "not_adjustable" and row["route"] == "re-centre":
        return "Correct the mean at the next tool change."
    return ROUTE[row["route"]]


def next_step(row: Row, n: Numbers = PLAIN) -> list[str]:
    """What should be done next, and why."""
    if row["cell"] == "not judged":
        return [ROUTE[row["route"]], REMEDY[row["capability_note"] or row["stability_note"]]]
    if proposed(row):
        return [move_sentence(row, n), "Then record the change with “portfolio log”, so that it is followed up."]
    return [text for text in (step_sentence(row), where_to_look(row, n), spread_sentence(row, n)) if text]


def reasons(row: Row, n: Numbers = PLAIN) -> list[str]:
    """Sentences for the codes of a row, most important first."""
    return list(dict.fromkeys(_reason(code, row, n) for code in row["reason_codes"]))


def explanation(row: Row, plan: Plan) -> Explanation:
    """Everything about one characteristic, told as questions."""
    n = Numbers(plan.report.decimal, plan.portfolio.timezone)
    paragraphs = [
        (f"{row['characteristic']}: {CELL[row['cell']]}", [f"Next step: {step_sentence(row)}", *_place(row)]),
        ("Is it predictable?", [s for s in (stability_sentence(row, n), signals_sentence(row, n)) if s]),
        ("Does it fit the tolerance?", [capability_sentence(row, n), *_definition(row, n)]),
        ("What would centering do?", [centering_sentence(row, n)]),
        ("What should be done next?", next_step(row, n)),
    ]
    if proposed(row):
        paragraphs.append(("Why believe it?", believe(row, n)))
        paragraphs.append(("What could be wrong?", cautions(row, n)))
        paragraphs.append(("What may be said against it?", [f"{said} {told}" for said, told in answers(row, n)]))
    elif row["class"] in SAFETY_CLASSES and row["capability"] == "not capable":
        paragraphs.append(("Caution", [CAUTION]))
    facts = {name: value for name, value in row.items() if name != "reason_codes" and not missing(value)}
    return Explanation(paragraphs, facts)


def left_list(reason: str) -> str:
    """Why an item is no longer on the centering list."""
    return LEFT.get(reason, "no longer a case for moving the mean alone")


def _more_values(row: Row, n: Numbers) -> str:
    """How many values would settle a close call if the index stayed: bounds narrow by the root of the number."""
    distance = abs(row["index"] - row["target_cpk"])
    reach = row["index"] - row["index_low"] if row["capability"] == "capable" else row["index_high"] - row["index"]
    factor = (reach / distance) ** 2 if distance > 0 else math.inf
    if factor > MOST_MORE:
        return "It is so near the target that more values will hardly settle it."
    return f"About {n.rough(factor * row['measurements'])} values would tell, if the index stays where it is."


def _needed(row: Row, n: Numbers) -> str:
    """By how much the standard deviation must fall; '' where that is not the way or not known."""
    needed, sigma = row["needed_sigma"], row["sigma_total"]
    if row["route"] != "narrow the spread" or missing(needed) or not needed < sigma:
        return ""
    return (
        f" The standard deviation would have to fall by at least {n.percent(1 - needed / sigma)}, from "
        f"{n.spread(sigma, row['unit'])} to about {n.spread(needed, row['unit'])}."
    )


def _parts_of_variance(row: Row) -> list[tuple[str, float]]:
    """Shares of the total variance that count, largest first; empty where they could not be told apart."""
    total = row["sigma_total"] ** 2
    if not total > 0:
        return []
    shares = [
        (name, float(row[key] ** 2 / total))
        for key, name in (("sigma_between", "between subgroups"), ("sigma_stream", "between streams"))
        if not missing(row[key])
    ]
    if not shares:
        return []
    shares.append(("within subgroups", max(0.0, 1 - sum(share for _, share in shares))))
    return sorted((part for part in shares if part[1] >= LEAST_SHARE), key=lambda part: -part[1])


def _place(row: Row) -> list[str]:
    parts = [str(row[name]) for name in ("site", "part", "operation", "machine", "feature") if not missing(row[name])]
    return [", ".join(parts) + "."] if parts else []


def _definition(row: Row, n: Numbers) -> list[str]:
    if row["capability"] == "not judged":
        return []
    limits = " and ".join(
        f"{word} {n.quantity(row[name], row['unit'], row['sigma_total'])}"
        for name, word in (("lsl", "lower"), ("usl", "upper"))
        if not missing(row[name])
    )
    cautious = " Its tails are lighter than normal (several streams mixed?), so the figure is cautious."
    return [
        f"Specification limits: {limits}. Mean {n.quantity(row['mean'], row['unit'], row['sigma_total'])}, total "
        f"standard deviation {n.spread(row['sigma_total'], row['unit'])}; shape assumed: normal."
        + (cautious if "cautious" in row["shape"] else "")
    ]


def _reason(code: str, row: Row, n: Numbers) -> str:
    head, _, rest = code.partition(":")
    match head:
        case "not_judged":
            return f"Not judged: {NOT_JUDGED[rest or row['stability_note']]}."
        case "unstable" | "stable" | "settled":
            return stability_sentence(row, n)
        case "centering" | "centering_reason":
            return centering_sentence(row, n)
        case "not_capable" | "close_call":
            return capability_sentence(row, n)
        case _:
            raise ValueError(f"no sentence for the code {code!r}")
