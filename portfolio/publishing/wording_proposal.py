"""Sentences of a centering proposal: what to do, what it brings, why to believe it, what could be wrong.

And the answers to what is said against it in the weekly review: each of these arguments has killed good proposals
(common practice).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from portfolio.publishing.numbers import THIN, Numbers, missing
from portfolio.publishing.wording_codes import CAUTION, ROUTE, SAFETY_CLASSES
from portfolio.publishing.wording_stability import PLAIN, stability_sentence

Row = Mapping[str, Any]

LIKELY = ((0.95, "very likely"), (0.8, "likely"), (0.5, "more likely than not"), (0.2, "rather unlikely"))
FINE_STEP = 0.5
"Recording step as a share of the total sigma up to which a gauge's steps do not matter here."
AT_MIDDLE = 0.01
"An aim closer to the middle than this share of the tolerance is the middle."


def proposed(row: Row) -> bool:
    """Whether moving the mean is proposed: the characteristic is on the centering list."""
    return row["centering"] in ("reaches", "may reach")


def action(row: Row, n: Numbers = PLAIN) -> str:
    """What to do, in a few words: 'Lower the mean by 0.039 mm'."""
    if (proposed(row) or row["route"] == "re-centre") and not missing(row["move"]):
        return f"{_verb(row)} the mean by {_measured(row, abs(row['move']), n)}"
    return ROUTE[row["route"]].rstrip(".")


def move_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Which way, how far, at least how far."""
    text = f"{action(row, n)}, to {_measured(row, row['aim'], n)}"
    if _least_counts(row):
        text += f" (at least by {_measured(row, abs(row['move_least']), n)})"
    return text + "."


def least_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """Where to, and the least move that is enough: stands below the action."""
    text = f"From {_measured(row, row['mean'], n)} to {_measured(row, row['aim'], n)}"
    if _least_counts(row):
        text += f"; at least by {_measured(row, abs(row['move_least']), n)}"
    return text + "."


def gain_sentence(row: Row, n: Numbers = PLAIN) -> str:
    """What a move brings: index, chance, parts, money."""
    target = n.index(row["target_cpk"])
    text = (
        f"Cpk goes from {n.index(row['index'])} to {n.index(row['cpk_centered'])}; chance of reaching {target}: "
        f"{n.chance(row['chance_centered'])}. Expected nonconforming parts per million: {n.ppm(row['ppm_now'])} now, "
        f"{n.ppm(row['ppm_centered'])} after."
    )
    if not missing(row["parts_per_year"]):
        text += f" That is about {n.rough(row['parts_per_year'])} parts a year"
        if not missing(row["saving_per_year"]):
            text += f", {n.money(row['saving_per_year'], row['currency'])} a year"
        text += "."
    return text


def chance_words(chance: Any) -> str:
    """A probability in words; '' where there is none."""
    if missing(chance):
        return ""
    return next((word for least, word in LIKELY if chance >= least), "unlikely")


def believe(row: Row, n: Numbers = PLAIN) -> list[str]:
    """Why a proposal can be trusted, and who says that it can be done."""
    out = [
        stability_sentence(row, n),
        f"Enough data: {n.counted(row['measurements'], 'value')}, the newest of {n.date(row['last'])}.",
    ]
    if _cautious_reaches(row):
        out.append(
            f"Cautiously read (95{THIN}% bound), Cpk after the move is {n.index(row['cpk_centered_low'])}, which still "
            f"reaches {n.index(row['target_cpk'])}."
        )
    if row["adjustable"] == "yes":
        out.append(_who(row))
    return out


def cautions(row: Row, n: Numbers = PLAIN) -> list[str]:
    """What could be wrong, or must come first."""
    out = []
    if row["class"] in SAFETY_CLASSES and row["capability"] == "not capable":
        out.append(CAUTION)
    if proposed(row) and not _cautious_reaches(row):
        low = "" if missing(row["cpk_centered_low"]) else f" (Cpk {n.index(row['cpk_centered_low'])})"
        out.append(
            f"It may fall short: the chance of reaching {n.index(row['target_cpk'])} is "
            f"{n.chance(row['chance_centered'])}; cautiously read, it is missed{low}."
        )
    if row["adjustable"] != "yes":
        out.append(_who(row))
    if not missing(row["streams"]) and row["streams"] > 1 and not row["streams_means_differ"]:
        out.append(f"{n.count(row['streams'])} streams are pooled here; check that they aim at the same place.")
    if missing(row["saving_per_year"]) and proposed(row):
        lacking = "volume" if missing(row["parts_per_year"]) else "cost of a nonconforming part"
        out.append(f"The {lacking} is not registered, so no money is stated.")
    if (
        proposed(row)
        and not missing(row["outside_observed"])
        and not row["outside_observed"]
        and not _few_expected(row)
    ):
        out.append("No value lies outside the limits although some are expected: ask whether parts are sorted before.")
    out.append("Verify with 25 to 30 parts after the move before calling it done (common practice).")
    return out


def answers(row: Row, n: Numbers = PLAIN) -> list[tuple[str, str]]:
    """What is said against a proposal in the review, each with what the data and the registry answer."""
    return [
        ("“That machine cannot be moved.”", _who(row)),
        ("“That was the old tool.”", _stretch(row, n)),
        ("“These are sorted parts.”", _sorted(row, n)),
        ("“It is the gauge.”", _gauge(row, n)),
        ("“A few parts, really?”", _enough(row, n)),
        ("“We run off the middle on purpose.”", _on_purpose(row, n)),
    ]


def _cautious_reaches(row: Row) -> bool:
    return not missing(row["cpk_centered_low"]) and bool(row["cpk_centered_low"] >= row["target_cpk"])


def _who(row: Row) -> str:
    if row["adjustable"] == "yes":
        effort = "" if missing(row["move_effort"]) else f", effort: {row['move_effort']}"
        owner = "" if missing(row["owner"]) else f" (owner: {row['owner']})"
        return f"Registered as adjustable{owner}{effort}."
    if row["adjustable"] == "no":
        why = "" if missing(row["why_not_adjustable"]) else f": {row['why_not_adjustable']}"
        return f"Registered as not adjustable{why}."
    return "Whether the mean can be adjusted is not registered: ask before the meeting."


def _stretch(row: Row, n: Numbers) -> str:
    since = n.date(row["first"])
    if row["window_measurements"] > row["measurements"]:
        return f"Only values since {since} are judged: a change was logged, or limits changed, before that."
    return f"All values since {since} behave like one process, and no change was logged in between."


def _sorted(row: Row, n: Numbers) -> str:
    outside, all_values = row["outside_observed"], n.counted(row["measurements"], "value")
    if missing(outside):
        return "Ask; the data do not tell."
    if outside:
        return f"Parts outside the limits are among the data: {n.count(outside)} of {all_values}."
    if _few_expected(row):
        return f"Not one of {all_values} lies outside, and none is expected to: the data do not tell. Ask."
    return f"Not one of {all_values} lies outside although some are expected: ask whether parts are sorted before."


def _gauge(row: Row, n: Numbers) -> str:
    step, sigma = row["recording_step"], row["sigma_total"]
    told = f"{n.counted(row['distinct_values'], 'distinct value')}" if not missing(row["distinct_values"]) else ""
    if missing(step) or missing(sigma) or not sigma > 0:
        head = f"{told}: the gauge resolves the spread." if told else ""
    else:
        fine = "small beside" if step <= FINE_STEP * sigma else "coarse beside"
        head = (
            f"It records in steps of {n.step(step, row['unit'])}, {fine} the standard deviation of "
            f"{n.spread(sigma, row['unit'])}."
        )
    return f"{head} The gauge's own error is inside that figure, so the process itself can only be better.".strip()


def _enough(row: Row, n: Numbers) -> str:
    days = (row["last"] - row["first"]).days + 1
    return (
        f"{n.counted(row['measurements'], 'value')} in {n.counted(row['subgroups'], 'subgroup')} over "
        f"{n.counted(days, 'day')}; Cpk lies between {n.index(row['index_low'])} and {n.index(row['index_high'])} "
        f"(95{THIN}% bounds)."
    )


def _on_purpose(row: Row, n: Numbers) -> str:
    middle = (row["lsl"] + row["usl"]) / 2
    if abs(row["aim"] - middle) <= AT_MIDDLE * (row["usl"] - row["lsl"]):
        return "No other aim than the middle is registered. If there is one, register it, and this proposal goes away."
    return f"The registered aim is {_measured(row, row['aim'], n)}; the move leads there, not to the middle."


def _few_expected(row: Row) -> bool:
    """Whether fewer than three of the values would be expected outside: seeing none then says nothing."""
    return missing(row["ppm_now"]) or bool(row["ppm_now"] * 1e-6 * row["measurements"] < 3)


def _least_counts(row: Row) -> bool:
    return not missing(row["move_least"]) and abs(row["move_least"]) > 0


def _measured(row: Row, value: Any, n: Numbers) -> str:
    return n.quantity(value, row["unit"], row["sigma_total"])


def _verb(row: Row) -> str:
    return "Raise" if row["move"] > 0 else "Lower"
