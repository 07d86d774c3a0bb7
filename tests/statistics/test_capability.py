"""Indices, bounds and chances of normal data against worked cases, scipy's non-central t and direct integration."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from portfolio.statistics import capability
from tests.statistics.integrated import CHANCE, integrated
from tests.statistics.worked import CASES, limits, near, one

NORMAL = ("W01", "W02", "W03", "W07", "W11")


def _case(name):
    """Mean, sigma, n, df, limits and answer of a worked case; W09 is judged on the log scale."""
    case = CASES[name]
    values, (lower, upper), answer = np.array(case["values"]), limits(case), case["answer"]
    if name == "W09":
        values, lower, upper, answer = np.log(values), np.log(lower), np.log(upper), answer["log_scale"]
    data = one(values.mean(), values.std(ddof=1), len(values), len(values) - 1, lower, upper)
    return data, answer, case["target_Cpk"]


@pytest.mark.parametrize("name", (*NORMAL, "W09"))
def test_indices_of_a_worked_case(name):
    (mean, sigma, _, _, lower, upper), answer, _ = _case(name)
    assert (mean[0], sigma[0]) == (near(answer["mean"]), near(answer["s_total"]))
    found = capability.indices(mean, sigma, lower, upper)
    for got, key in ((found.cp, "Pp"), (found.cpl, "Ppl"), (found.cpu, "Ppu"), (found.cpk, "Ppk")):
        expected = answer.get(key)
        assert np.isnan(got[0]) if expected is None else got[0] == near(expected, rel=1e-4)


@pytest.mark.parametrize("name", (*NORMAL, "W09"))
def test_bounds_of_a_worked_case(name):
    (mean, sigma, n, df, lower, upper), answer, _ = _case(name)
    bounds = capability.capability_bounds(mean, sigma, n, df, lower, upper)
    assert [b[0] for b in bounds] == near(answer["Ppk_lower95_upper95_nearest_limit_noncentral_t"], rel=1e-4)
    found = capability.indices(mean, sigma, lower, upper)
    quick = capability.bissell_bounds(found.cpk, n, df)
    assert [b[0] for b in quick] == near(answer["Ppk_lower95_upper95_bissell"], rel=1e-4)
    if "Pp_90pct_two_sided_chi_square" in answer:
        spread = capability.spread_bounds(found.cp, df)
        assert [b[0] for b in spread] == near(answer["Pp_90pct_two_sided_chi_square"], rel=1e-4)


@pytest.mark.parametrize("name", (*NORMAL, "W09"))
def test_chance_verdict_and_ppm_of_a_worked_case(name):
    data, answer, target = _case(name)
    mean, sigma, n, df, lower, upper = data
    assert capability.core_probability(*data, target)[0] == near(answer["P_Ppk_ge_target"], abs=CHANCE)
    assert capability.nearest_limit_probability(*data, target)[0] == near(answer["P_nearest_limit_only"], abs=CHANCE)
    assert capability.plugin_ppm(mean, sigma, lower, upper)[0] == near(answer["ppm_now_plugin"])
    assert capability.expected_ppm(mean, sigma, n, df, lower, upper)[0] == near(answer["ppm_now_expected_student_t"])
    low, high = capability.capability_bounds(*data)
    index = capability.indices(mean, sigma, lower, upper).cpk
    word, close = capability.verdict(low, high, index, np.array([target]))
    said = f"close call, leaning {word[0]}" if close[0] else word[0]
    assert said == answer["verdict"]


@pytest.mark.parametrize("name", ("W01", "W02", "W03", "W07"))
def test_needed_sigma_of_a_worked_case(name):
    (mean, _, _, _, lower, upper), answer, target = _case(name)
    levers = answer["levers"]
    assert capability.needed_sigma(mean, lower, upper, target)[0] == near(levers["needed_total_sd_at_present_mean"])
    if "needed_total_sd_if_centred" in levers:
        middle = (lower + upper) / 2
        assert capability.needed_sigma(middle, lower, upper, target)[0] == near(levers["needed_total_sd_if_centred"])


@pytest.mark.parametrize("df", (25.0, 60.5, 400.0))
@pytest.mark.parametrize("lower", (-np.inf, -4.2, -6.0))
def test_the_core_probability_agrees_with_direct_integration(df, lower):
    for mean, target in ((0.0, 1.33), (0.6, 1.0), (-0.5, 1.67), (1.0, 0.9)):
        data = (mean, 1.0, df + 1, df, lower, 4.5)
        assert capability.core_probability(*one(*data), target)[0] == pytest.approx(
            integrated(*data, target), abs=CHANCE
        )


def test_with_one_limit_the_core_probability_at_the_bound_is_the_confidence():
    df = np.array([25.0, 49.0, 120.0, 2000.0])
    data = (np.zeros(4), np.ones(4), df + 1, df, np.full(4, -np.inf), np.full(4, 4.0))
    for confidence in (0.90, 0.95):
        low, high = capability.capability_bounds(*data, confidence=confidence)
        assert capability.core_probability(*data, low) == pytest.approx(confidence, abs=CHANCE)
        assert capability.core_probability(*data, high) == pytest.approx(1 - confidence, abs=CHANCE)


def test_a_bound_of_the_study_is_met_both_ways():
    """n = 50, Cpu = 1.3333: lower bound 1.09588 (capability study, section 1)."""
    low, _ = capability.capability_bounds(*one(0, 1, 50, 49, -np.inf, 4))
    assert low[0] == pytest.approx(1.09588, abs=5e-6)
    assert integrated(0, 1, 50, 49, -np.inf, 4.0, low[0]) == pytest.approx(0.95, abs=1e-6)


def test_bounds_lie_within_0_007_of_bissell_for_30_to_60_values():
    """Bissell (1990): the capability study measured 0.007 for the indices of its worked cases."""
    n = np.repeat(np.arange(30.0, 61.0, 5.0), 4)
    c = np.tile([0.55, 0.8, 1.2, 1.4], 7)
    low, high = capability.capability_bounds(np.zeros(28), np.ones(28), n, n - 1, np.full(28, -np.inf), 3 * c)
    quick = capability.bissell_bounds(c, n, n - 1)
    assert np.max(np.abs(low - quick[0])) < 0.007
    assert np.max(np.abs(high - quick[1])) < 0.008


def test_the_expected_ppm_is_the_plugged_in_one_averaged_over_what_the_data_leave_open():
    """Guttman (1970), by drawing sigma and mean from their posterior."""
    rng = np.random.default_rng(5)
    draws, mean, s, n, df, lower, upper = 400_000, 0.4, 1.0, 20.0, 16.5, -3.5, 3.0
    sigma = s * np.sqrt(df / rng.chisquare(df, draws))
    centre = mean + sigma / np.sqrt(n) * rng.normal(size=draws)
    drawn = capability.plugin_ppm(centre, sigma, np.full(draws, lower), np.full(draws, upper))
    expected = capability.expected_ppm(*one(mean, s, n, df, lower, upper))[0]
    assert expected == pytest.approx(drawn.mean(), abs=4 * drawn.std() / np.sqrt(draws))
    assert expected > capability.plugin_ppm(*one(mean, s, lower, upper))[0]


def test_no_data_no_spread_no_limits_and_crossed_limits_give_no_number():
    mean, lower, upper = np.zeros(5), np.array([-1, -1, -np.inf, 1, -1.0]), np.array([1, 1, np.inf, -1, 1.0])
    sigma, n, df = np.array([0, np.nan, 1, 1, 1.0]), np.full(5, 30.0), np.array([29, 29, 29, 29, 0.0])
    found = capability.indices(mean, sigma, lower, upper)
    assert np.isnan(found.cpk[:4]).all()
    assert np.isnan(np.array(capability.capability_bounds(mean, sigma, n, df, lower, upper))).all()
    assert np.isnan(capability.core_probability(mean, sigma, n, df, lower, upper, 1.33)).all()
    assert np.isnan(capability.needed_sigma(mean, lower, upper, 1.33)[[2, 3]]).all()


def test_an_impossible_confidence_is_refused_with_its_value():
    with pytest.raises(ValueError, match=r"confidence is 95;"):
        capability.capability_bounds(*one(0, 1, 30, 29, -4, 4), confidence=95)
    with pytest.raises(ValueError, match=r"confidence is 0;"):
        capability.spread_bounds(*one(1, 29), confidence=0)


def test_the_verdict_follows_the_bounds_and_else_the_point_estimate():
    low, high = np.array([1.4, 1.0, 1.1, 1.2, np.nan]), np.array([1.8, 1.3, 1.5, 1.6, np.nan])
    word, close = capability.verdict(low, high, np.array([1.6, 1.2, 1.32, 1.4, np.nan]), np.full(5, 1.33))
    assert list(word) == ["capable", "not capable", "not capable", "capable", "not capable"]
    assert list(close) == [False, False, True, True, False]


def test_the_nodes_are_the_chi_square_quantiles_at_any_degrees_of_freedom():
    df = np.array([1.0, 4.99, 5.0, 5.01, 29.0, 411.5, 1e5, 1e8])
    level = (np.arange(capability.NODES) + 0.5) / capability.NODES
    exact = np.sqrt(df[:, None] / stats.chi2.ppf(level, df[:, None]))
    assert capability.sigma_nodes(df) == pytest.approx(exact, rel=1e-10)
    assert np.isnan(capability.sigma_nodes(np.array([0.0, -1.0, np.nan]))).all()


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    mean=st.floats(-3, 3), sigma=st.floats(0.2, 3), off=st.floats(-1e3, 1e3), scale=st.floats(1e-3, 1e3),
    low=st.floats(0.5, 20), high=st.floats(0.5, 20), wider=st.floats(0, 5),
)  # fmt: skip
def test_shift_scale_and_wider_limits(mean, sigma, off, scale, low, high, wider):
    lower, upper = mean - low, mean + high
    index = capability.indices(*one(mean, sigma, lower, upper))
    bounds = capability.capability_bounds(*one(mean, sigma, 50, 49, lower, upper))
    shifted = capability.indices(*one(mean + off, sigma, lower + off, upper + off))
    scaled = [x * scale for x in (mean, sigma, lower, upper)]
    assert shifted.cpk == pytest.approx(index.cpk, rel=1e-8)
    assert shifted.cp == pytest.approx(index.cp, rel=1e-8)
    assert capability.indices(*one(*scaled)).cpk == pytest.approx(index.cpk, rel=1e-9)
    again = capability.capability_bounds(*one(*scaled[:2], 50, 49, *scaled[2:]))
    assert np.array(again) == pytest.approx(np.array(bounds), rel=1e-8)
    wide = capability.indices(*one(mean, sigma, lower - wider, upper + wider))
    assert wide.cpk[0] >= index.cpk[0] * (1 - 1e-12)
    assert wide.cp[0] >= index.cp[0] * (1 - 1e-12)


def test_characteristics_do_not_influence_each_other():
    rng = np.random.default_rng(7)
    k = 40
    data = [rng.normal(size=k), rng.uniform(0.5, 2, k), rng.uniform(30, 300, k), rng.uniform(25, 300, k),
            np.where(rng.random(k) < 0.2, -np.inf, -4.0), np.full(k, 5.0)]  # fmt: skip
    order = rng.permutation(k)
    for judged in (
        lambda *x: capability.capability_bounds(*x)[0],
        lambda *x: capability.core_probability(*x, 1.33),
        lambda *x: capability.expected_ppm(*x),
    ):
        alone = np.concatenate([judged(*[x[i : i + 1] for x in data]) for i in range(k)])
        assert judged(*data) == pytest.approx(alone, rel=1e-9)
        assert judged(*[x[order] for x in data]) == pytest.approx(alone[order], rel=1e-9)
