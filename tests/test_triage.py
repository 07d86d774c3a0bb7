"""From verdicts to decisions: gates, hysteresis, ranking, routes."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from portfolio import triage
from portfolio.plan import Judgement
from portfolio.registry import Registry

DEFAULTS = Judgement()


def concluded(**columns) -> pd.DataFrame:
    """Rows as `conclusion.conclude` gives them, every one a fine centering case unless told otherwise."""
    count = max((len(v) for v in columns.values() if isinstance(v, list)), default=1)
    base = {
        "characteristic": [f"C{i}" for i in range(count)], "stability": "stable", "stability_note": "", "instability": "",
        "capability": "not capable", "capability_note": "", "close_call": False, "index_name": "Cpk", "index": 0.9,
        "index_low": 0.8, "index_high": 1.0, "chance_now": 0.01, "ppm_now": 5000.0, "ppm_centered": 1.0,
        "chance_centered": 0.95, "cpk_centered": 1.6, "cpk_centered_low": 1.5, "aim": 10.0, "move": -0.2, "move_least": -0.1,
        "aim_low": 9.9, "aim_high": 10.1, "move_significant": True, "aim_off_middle": False, "stream_p": np.nan,
        "sigma_stream": np.nan, "sigma_total": 0.1, "target_cpk": 1.33, "settled_since": pd.NaT, "cp": 1.6, "cpk": 0.9,
        "cp_within": 1.6, "cpk_within": 0.9,
    }  # fmt: skip
    return pd.DataFrame({**base, **columns}, index=range(count))


def registry(rows: pd.DataFrame, **columns) -> pd.DataFrame:
    frame = pd.DataFrame(
        {"characteristic": rows["characteristic"], "lsl": 9.0, "usl": 11.0, "annual_volume": 100_000.0,
         "cost_per_nonconforming": 2.0, "cost_currency": "EUR", "adjustable": "yes"}
        | columns
    )  # fmt: skip
    known = Registry.from_frame(frame, {"default": 1.33})
    return known.rows.reset_index(drop=True)


def decide(rows: pd.DataFrame, previous: pd.DataFrame | None = None, **columns) -> pd.DataFrame:
    return triage.decide(rows, registry(rows, **columns), DEFAULTS, previous).results.set_index("characteristic")


@pytest.mark.parametrize(
    ("columns", "answer", "reason", "route"),
    [
        ({}, "reaches", "", "re-centre"),
        ({"chance_centered": 0.6}, "may reach", "", "re-centre"),
        ({"chance_centered": 0.49}, "not alone", "", "narrow the spread"),
        ({"move_significant": False}, "not alone", "already_centred", "narrow the spread"),
        ({"stability": "unstable", "instability": "step"}, "does not apply", "unstable", "stabilise first"),
        ({"capability": "capable", "index": 1.5, "chance_now": 0.9}, "already there", "capable_now", "leave alone"),
        ({"index": 1.32, "chance_now": 0.5}, "already there", "capable_now", "collect more"),
        ({"stream_p": 0.001, "sigma_stream": 0.05}, "does not apply", "streams_differ", "align the streams"),
        ({"stream_p": 0.001, "sigma_stream": 0.01}, "reaches", "", "re-centre"),
        ({"capability": "not judged", "capability_note": "no_limits"}, "does not apply", "not_judged", "check the data"),
        ({"capability": "not judged", "capability_note": "too_few"}, "does not apply", "not_judged", "collect more"),
        ({"capability": "not judged", "capability_note": "coarse"}, "does not apply", "not_judged", "improve the gauge"),
    ],
)  # fmt: skip
def test_each_case_has_its_answer_and_one_next_step(columns, answer, reason, route):
    row = decide(concluded(**columns)).iloc[0]
    assert (row["centering"], row["centering_reason"], row["route"]) == (answer, reason, route)


@pytest.mark.parametrize(
    ("registered", "reason", "route"),
    [
        ({"usl": np.nan}, "one_sided", "narrow the spread"),
        ({"lsl": np.nan, "lower_bound": 0.0}, "natural_bound", "narrow the spread"),
        ({"giveaway_cost_per_unit": 0.01}, "economic_aim", "leave alone"),
        ({"adjustable": "no", "why_not_adjustable": "cut into the mould"}, "not_adjustable", "re-centre"),
    ],
)
def test_what_the_registry_forbids_is_no_centering_project(registered, reason, route):
    row = decide(concluded(), **registered).iloc[0]
    assert (row["centering"], row["centering_reason"], row["route"]) == ("does not apply", reason, route)
    assert pd.isna(row["rank"])


def test_a_deliberate_aim_is_left_alone_once_it_is_met():
    row = decide(concluded(aim_off_middle=True, move_significant=False)).iloc[0]
    assert (row["centering_reason"], row["route"]) == ("economic_aim", "leave alone")


def test_the_rank_follows_expected_saving_times_chance():
    rows = concluded(
        characteristic=["a", "b", "c"], ppm_now=[2000.0, 3000.0, 9000.0], chance_centered=[0.99, 0.9, 0.55]
    )
    result = decide(rows, annual_volume=[100_000.0, 100_000.0, 20_000.0])
    assert result["rank"].to_dict() == {"b": 1, "a": 2, "c": 3}
    assert result.loc["a", "saving_per_year"] == pytest.approx(1999e-6 * 100_000 * 2.0)
    assert result.loc["a", "score"] == pytest.approx(result.loc["a", "saving_per_year"] * 0.99)


def test_missing_cost_or_volume_ranks_behind_and_is_never_zero():
    rows = concluded(characteristic=["money", "parts", "neither"], ppm_now=[100.0, 9000.0, 9000.0])
    result = decide(rows, cost_per_nonconforming=[2.0, np.nan, 2.0], annual_volume=[1e5, 1e5, np.nan])
    assert result["rank"].to_dict() == {"money": 1, "parts": 2, "neither": 3}
    assert result["rank_group"].to_dict() == {"money": "money", "parts": "parts", "neither": "ppm"}
    assert pd.isna(result.loc["parts", "saving_per_year"]) and result.loc["parts", "parts_per_year"] > 0
    assert pd.isna(result.loc["neither", "parts_per_year"])


def test_another_currency_is_not_compared_with_the_usual_one():
    rows = concluded(characteristic=["a", "b", "c"], ppm_now=[5000.0, 6000.0, 9000.0])
    result = decide(rows, cost_currency=["EUR", "EUR", "JPY"], cost_per_nonconforming=[2.0, 2.0, 300.0])
    assert result["rank"].to_dict() == {"b": 1, "a": 2, "c": 3}


def test_a_difference_in_the_far_tail_does_not_outrank_a_real_one():
    rows = concluded(characteristic=["tail", "real"], ppm_now=[9.0, 50.0], ppm_centered=[0.0, 1.0])
    result = decide(rows, annual_volume=[1e9, 1e3])
    assert result["rank"].to_dict() == {"real": 1, "tail": 2}


def test_ties_are_settled_by_name():
    rows = concluded(characteristic=["b", "a"])
    assert decide(rows)["rank"].to_dict() == {"a": 1, "b": 2}


def test_a_listed_item_stays_until_its_chance_falls_below_the_lower_gate():
    previous = pd.DataFrame({"characteristic": ["stays", "leaves"], "rank": [1, 2]})
    rows = concluded(characteristic=["stays", "leaves", "outside"], chance_centered=[0.4, 0.3, 0.4])
    decided = triage.decide(rows, registry(rows), DEFAULTS, previous)
    answers = decided.results.set_index("characteristic")["centering"].to_dict()
    assert answers == {"stays": "may reach", "leaves": "not alone", "outside": "not alone"}
    listed = decided.ranking.set_index("characteristic")
    assert listed.loc["stays", "status"] == "stays"
    assert (listed.loc["leaves", "status"], listed.loc["leaves", "reason"]) == ("left", "not alone")


def test_what_left_the_registry_is_said():
    previous = pd.DataFrame({"characteristic": ["gone", "C0"], "rank": [1, 2]})
    rows = concluded()
    ranking = triage.decide(rows, registry(rows), DEFAULTS, previous).ranking.set_index("characteristic")
    assert ranking.loc["gone", "reason"] == "not_registered"
    assert ranking.loc["C0", "status"] == "stays"


def test_an_empty_list_is_a_list():
    rows = concluded(stability="unstable", instability="drift")
    assert len(triage.decide(rows, registry(rows), DEFAULTS).ranking) == 0
