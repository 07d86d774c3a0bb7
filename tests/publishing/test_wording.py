"""Sentences of a judgement: complete, honest, and never mixing the two questions."""

import re

import pandas as pd
import pytest

from portfolio import result
from portfolio.publishing import wording, wording_stability
from portfolio.publishing.numbers import Numbers
from tests.publishing.sample import page_data

N = Numbers(zone="Europe/Vienna")
DATA = page_data(hostile=False)
ROWS = {row["characteristic"]: row for row in DATA.results.to_dict("records")}
LISTED = [row for row in ROWS.values() if wording.proposed(row)]


def sentences(row: dict) -> list[str]:
    told = wording.explanation(row, DATA.plan)
    return [sentence for _, part in told.paragraphs for sentence in part] + wording.reasons(row, N)


def changed(name: str, **fields: object) -> dict:
    return {**ROWS[name], **fields}


def test_every_code_of_a_judgement_has_its_words():
    assert set(wording.CELL) == set(wording.SHORT_CELL) == set(result.CELLS)
    assert set(wording.ROUTE) == set(result.ROUTES)
    assert set(wording.NOT_JUDGED) == set(wording.REMEDY) == set(result.NOT_JUDGED_CODES)
    assert set(wording_stability.SHORT_KIND) == set(wording_stability.WHERE_TO_LOOK) == set(result.INSTABILITY_KINDS)
    assert set(wording_stability.STEADY) | {"negligible"} == set(result.STABILITY_NOTES)
    handled = {"unstable", "not_judged", "not_adjustable"}
    assert set(result.CENTERING_CODES) - handled <= set(wording.CENTERING_REASON)
    assert set(result.CENTERING_CODES) - {"already_centred"} <= set(wording.LEFT) | {"capable_now"}


@pytest.mark.parametrize("name", ROWS)
def test_a_characteristic_is_explained_in_whole_sentences_without_gaps(name):
    told = sentences(ROWS[name])
    assert told
    for sentence in told:
        assert sentence[0].isupper() or sentence[0] in "“0123456789", sentence
        assert sentence.endswith((".", ".”", "?")), sentence
        assert not re.search(r"–|\bnan\b|\bNone\b|\bNaT\b|<NA>|  |\.\.|_", sentence), sentence


@pytest.mark.parametrize("name", ROWS)
def test_stability_is_never_told_by_specification_limits_nor_capability_by_control_limits(name):
    row = ROWS[name]
    if row["stability"] != "not judged":
        for text in (
            wording.stability_sentence(row, N),
            wording.stability_answer(row, N),
            wording.where_to_look(row, N),
        ):
            assert not re.search("specification|tolerance|Cp|Pp|target", text), text
    for text in (wording.capability_sentence(row, N), wording.capability_answer(row)):
        assert "control" not in text and "predict" not in text, text


@pytest.mark.parametrize("name", ROWS)
def test_only_a_predictable_process_is_said_to_fit_or_to_have_a_cpk(name):
    row = ROWS[name]
    text = wording.capability_sentence(row, N)
    if row["stability"] == "unstable":
        assert "Cpk" not in text and not text.startswith(("Fits", "Does not fit", "Close call: Cpk"))
    if row["capability"] == "not judged":
        assert text.startswith("Not judged") and "Cpk" not in text and "Ppk" not in text


@pytest.mark.parametrize("word", ["out of control", "significan", "hypothesis", "reject", "alpha", "outlier", "score"])
def test_the_words_are_those_of_the_trade(word):
    assert not [s for row in ROWS.values() for s in sentences(row) if word in s.lower()]


def test_control_and_specification_limits_are_named_in_full():
    for row in ROWS.values():
        for told in sentences(row):
            for found in re.finditer(r"(\w+)\s+limits?\b", told):
                known = ("control", "specification", "the", "its", "one", "only", "registered", "new", "or", "and", "a")
                assert found[1].lower() in known, told


@pytest.mark.parametrize("row", LISTED, ids=lambda row: row["characteristic"])
def test_a_proposal_says_which_way_how_far_and_at_least_how_far(row):
    text = wording.move_sentence(row, N)
    assert text.startswith("Raise" if row["move"] > 0 else "Lower")
    assert N.quantity(abs(row["move"]), row["unit"], row["sigma_total"]) in text
    assert f"at least by {N.quantity(abs(row['move_least']), row['unit'], row['sigma_total'])}" in text
    assert N.quantity(row["aim"], row["unit"], row["sigma_total"]) in text
    assert f"{row['cpk_centered']:.2f}" in wording.gain_sentence(row, N)


def test_a_move_that_need_not_be_made_has_no_least():
    assert "at least" not in wording.move_sentence(changed("R1 bore", move_least=0.0), N)
    assert "at least" not in wording.least_sentence(changed("R1 bore", move_least=float("nan")), N)


@pytest.mark.parametrize(
    ("chance", "words"),
    [(0.999, "very likely"), (0.95, "very likely"), (0.81, "likely"), (0.5, "more likely than not"),
     (0.3, "rather unlikely"), (0.05, "unlikely"), (float("nan"), "")],
)  # fmt: skip
def test_a_chance_is_told_in_words_too(chance, words):
    assert wording.chance_words(chance) == words


def test_reasons_to_believe_and_doubts_change_sides_with_the_cautious_bound():
    sure, doubtful = changed("R1 bore", cpk_centered_low=1.5), changed("R1 bore", cpk_centered_low=1.2)
    assert any("still reaches 1.33" in text for text in wording.believe(sure, N))
    assert not any("fall short" in text for text in wording.cautions(sure, N))
    assert not any("Cautiously" in text for text in wording.believe(doubtful, N))
    assert any("fall short" in text and "1.20" in text for text in wording.cautions(doubtful, N))


@pytest.mark.parametrize(
    ("adjustable", "told", "doubt"),
    [("yes", "Registered as adjustable", False), ("unknown", "ask before the meeting", True),
     ("no", "Registered as not adjustable: mould dimension", True)],
)  # fmt: skip
def test_who_says_that_it_can_be_moved_is_a_reason_or_a_doubt(adjustable, told, doubt):
    row = changed("R1 bore", adjustable=adjustable, why_not_adjustable="mould dimension")
    assert any(told in text for text in wording.cautions(row, N)) == doubt
    assert any(told in text for text in wording.believe(row, N)) != doubt
    assert told in dict(wording.answers(row, N))["“That machine cannot be moved.”"]


def test_money_is_never_made_up():
    lacking_cost, lacking_volume = ROWS["R3 bore"], ROWS["R4 bore"]
    assert "EUR" not in wording.gain_sentence(lacking_cost, N) and "parts a year" in wording.gain_sentence(
        lacking_cost, N
    )
    assert "a year" not in wording.gain_sentence(lacking_volume, N)
    assert any("cost of a nonconforming part is not registered" in text for text in wording.cautions(lacking_cost, N))
    assert any("volume is not registered" in text for text in wording.cautions(lacking_volume, N))


def test_a_critical_characteristic_below_target_is_contained_first():
    assert wording.cautions(ROWS["R2 bore"], N)[0] == wording.CAUTION
    told = wording.explanation(changed("S09 spread too wide", **{"class": "critical"}), DATA.plan).paragraphs
    assert ("Caution", [wording.CAUTION]) in told
    assert not [
        part for part in wording.explanation(ROWS["S09 spread too wide"], DATA.plan).paragraphs if part[0] == "Caution"
    ]


def test_a_close_call_says_how_many_values_would_tell():
    """Bounds narrow by the root of the number: 60 values reach from 1.17 to 1.36, the target is 0.16 away."""
    row = changed("S14 low on purpose", index=1.17, index_low=0.98, index_high=1.36, target_cpk=1.33, measurements=60,
                  capability="not capable", close_call=True)  # fmt: skip
    needed = 60 * (0.19 / 0.16) ** 2
    assert needed == pytest.approx(84.6, abs=0.1)
    assert "About 85 values would tell" in wording.capability_sentence(row, N)
    assert "leans to not fitting" in wording.capability_sentence(row, N)
    near = {**row, "index": 1.325}
    assert "hardly settle" in wording.capability_sentence(near, N)
    exactly = {**row, "index": 1.33, "capability": "capable"}
    assert "hardly settle" in wording.capability_sentence(exactly, N)


def test_sorted_parts_are_asked_about_only_where_some_are_expected_outside():
    """None of n outside says something only when about three or more are expected: exp(-3) is 5 %."""
    clean = changed("R1 bore", outside_observed=0, measurements=1000, ppm_now=5000.0)
    assert any("ask whether parts are sorted" in text for text in wording.cautions(clean, N))
    assert "although some are expected" in dict(wording.answers(clean, N))["“These are sorted parts.”"]
    rare = {**clean, "ppm_now": 500.0}
    assert not any("sorted" in text for text in wording.cautions(rare, N))
    some = {**clean, "outside_observed": 4}
    assert "4 of 1\u202f000 values" in dict(wording.answers(some, N))["“These are sorted parts.”"]


def test_the_old_tool_is_answered_by_the_stretch():
    said = "“That was the old tool.”"
    assert "no change was logged" in dict(wording.answers(ROWS["R1 bore"], N))[said]
    later = changed("R1 bore", window_measurements=ROWS["R1 bore"]["measurements"] + 100)
    assert dict(wording.answers(later, N))[said].startswith("Only values since 2026-08-31 are judged")


def test_the_gauge_is_answered_by_its_steps():
    said = "“It is the gauge.”"
    fine = changed("R1 bore", recording_step=0.001, sigma_total=0.004)
    coarse = changed("R1 bore", recording_step=0.003, sigma_total=0.004)
    assert "small beside" in dict(wording.answers(fine, N))[said]
    assert "coarse beside" in dict(wording.answers(coarse, N))[said]
    assert "distinct values" in dict(wording.answers(ROWS["R1 bore"], N))[said]


def test_an_aim_off_the_middle_is_named():
    said = "“We run off the middle on purpose.”"
    row = ROWS["R1 bore"]
    assert "No other aim" in dict(wording.answers(row, N))[said]
    other = changed("R1 bore", aim=row["aim"] + 0.1 * (row["usl"] - row["lsl"]))
    assert "The registered aim is" in dict(wording.answers(other, N))[said]


def test_where_the_spread_must_fall_it_says_by_how_much_and_which_part_to_start_with():
    row = changed(
        "S09 spread too wide", sigma_total=0.004, needed_sigma=0.003, sigma_between=0.0024, sigma_stream=0.002
    )
    assert "fall by at least 25\u202f%" in wording.centering_sentence(row, N)
    # Shares of the variance: 0.36, 0.25 and the rest, 0.39.
    assert (
        "39\u202f% within subgroups, 36\u202f% between subgroups, 25\u202f% between streams"
        in wording.spread_sentence(row, N)
    )
    single = {**row, "sigma_between": float("nan"), "sigma_stream": float("nan")}
    assert wording.spread_sentence(single, N) == ""
    steady = {**row, "sigma_between": 0.0002, "sigma_stream": float("nan")}
    assert wording.spread_sentence(steady, N).startswith("Nearly all of the variance is within subgroups")


def test_a_mean_that_cannot_be_moved_waits_for_the_next_tool():
    row = ROWS["R9 fixed mould"]
    assert wording.step_sentence(row) == "Correct the mean at the next tool change."
    assert "mould dimension" in wording.centering_sentence(row, N)


def test_the_period_of_a_cycle_is_named_only_as_well_as_it_is_known():
    """A period P in a record of length T is known to about P squared over T."""
    row = ROWS["U4 cycle"]  # 24 hours in a record of three months
    assert "about 24 hours (a day)" in wording.stability_sentence(row, N)
    assert "(a day)" not in wording.stability_sentence({**row, "period_hours": 25.5}, N)
    assert "several subgroups" in wording.stability_sentence({**row, "period_hours": float("nan")}, N)


def test_a_change_that_has_settled_says_what_to_do():
    assert "Settled since 2026-10-24: log the cause" in wording.stability_sentence(ROWS["U0 step"], N)
    assert "Settled" not in wording.stability_sentence(ROWS["U2 drift"], N)


def test_signals_stand_beside_what_a_stable_process_shows():
    assert wording.signals_sentence(changed("S01 fits", signals=0), N).startswith("No subgroup carries")
    assert wording.signals_sentence(changed("S01 fits", signals=1), N).startswith("1 subgroup carries")
    many = wording.signals_sentence(changed("S01 fits", signals=24, expected_signals=16.7), N)
    assert many.startswith("24 subgroups carry") and "about 17." in many
    assert wording.signals_sentence(ROWS["N01 no data"], N) == ""


def test_what_cannot_be_judged_says_why_once_and_what_to_do():
    told = wording.explanation(ROWS["N02 silent"], DATA.plan)
    text = " ".join(sentence for _, part in told.paragraphs for sentence in part)
    assert text.count(wording.NOT_JUDGED["silent"]) == 1
    assert wording.REMEDY["silent"] in text


def test_reasons_are_the_most_important_first_and_never_said_twice():
    told = wording.reasons(ROWS["R1 bore"], N)
    assert told[0].startswith("Moving the mean alone should reach") and len(told) == len(set(told))
    assert wording.reasons(ROWS["U0 step"], N)[0].startswith("Not predictable")
    assert wording.reasons(ROWS["N07 no limits"], N)[0] == "Not judged: no specification limit is registered."


def test_a_code_without_a_sentence_is_an_error_and_not_a_gap():
    with pytest.raises(ValueError, match="no sentence for the code 'moonlight'"):
        wording.reasons(changed("R1 bore", reason_codes=["moonlight"]), N)


def test_facts_hold_every_number_that_is_known_and_nothing_else():
    facts = wording.explanation(ROWS["N01 no data"], DATA.plan).facts
    assert "mean" not in facts and "reason_codes" not in facts and facts["cell"] == "not judged"
    assert not [name for name, value in facts.items() if isinstance(value, float) and pd.isna(value)]


def test_the_plans_decimal_sign_and_zone_are_used():
    plan = page_data(hostile=False, report={"decimal": ","}).plan
    told = wording.explanation(ROWS["R1 bore"], plan)
    text = " ".join(sentence for _, part in told.paragraphs for sentence in part)
    assert "0,0104" in text and not re.search(r"\d\.\d", text)


def test_an_item_that_left_the_list_has_a_reason_in_words():
    assert wording.left_list("capable_now") == "target reached"
    assert "_" not in wording.left_list("something_new")
