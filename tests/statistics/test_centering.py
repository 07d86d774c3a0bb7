"""What a move of the mean would do, against worked cases, direct integration and plain geometry."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from portfolio.statistics import capability, centering
from tests.statistics.integrated import CHANCE, integrated
from tests.statistics.worked import CASES, limits, near, one


def _centred(name, aim=None, setting_sd=0.0):
    case = CASES[name]
    values, (lower, upper), answer = np.array(case["values"]), limits(case), case["answer"]
    if name == "W09":
        values, lower, upper, answer = np.log(values), np.log(lower), np.log(upper), answer["log_scale"]
    middle = (lower + upper) / 2 if np.isfinite(lower + upper) else np.nan
    data = one(values.mean(), values.std(ddof=1), len(values), len(values) - 1, lower, upper)
    return centering.centre(
        *data, *one(middle if aim is None else aim, case["target_Cpk"]), setting_sd=setting_sd
    ), answer


@pytest.mark.parametrize("name", ("W01", "W02", "W03", "W09"))
def test_the_move_of_a_worked_case(name):
    found, answer = _centred(name)
    expected = answer["centering"]
    assert found.aim[0] == near(expected["aim"], rel=1e-6)
    assert found.move[0] == near(expected["move_to_aim"])
    assert found.cpk_centered[0] == near(expected["Ppk_after"], rel=1e-4)
    assert found.chance_centered[0] == near(expected["P_after_ge_target"], abs=CHANCE)
    assert found.chance_now[0] == near(answer["P_Ppk_ge_target"], abs=CHANCE)
    assert found.ppm_centered[0] == near(expected["ppm_after_expected_student_t"])
    assert found.ppm_now[0] - found.ppm_centered[0] == near(expected["ppm_avoided_expected"])


@pytest.mark.parametrize("name", ("W01", "W02", "W03", "W09"))
def test_the_windows_and_the_least_move_of_a_worked_case(name):
    found, answer = _centred(name)
    expected = answer["centering"]
    for got, key in (
        ((found.window_low[0], found.window_high[0]), "aim_window_point"),
        ((found.sure_low[0], found.sure_high[0]), "aim_window_90pct_sure"),
    ):
        if expected[key] is None:
            assert np.isnan(got).all()
        else:
            assert list(got) == near(expected[key], rel=1e-6)
    least = expected["least_move_into_sure_window"]
    if least is None:  # then into the point window, and nowhere where that is empty too
        least = expected.get("least_move_into_point_window", np.nan)
    assert found.move_least[0] == pytest.approx(least, rel=2e-3, nan_ok=True)


@pytest.mark.parametrize("name", ("W07", "W11"))
def test_one_limit_has_no_aim_but_a_needed_mean(name):
    found, answer = _centred(name)
    for field in ("aim", "move", "move_least", "window_low", "sure_low", "cpk_centered", "cpk_centered_low",
                  "chance_centered", "ppm_centered"):  # fmt: skip
        assert np.isnan(getattr(found, field)[0]), field
    assert found.ppm_now[0] == near(answer["ppm_now_expected_student_t"])
    if "one_sided_move" in answer:
        assert found.needed_mean[0] == near(answer["one_sided_move"]["smallest_mean_for_point_target"], rel=1e-6)


def test_an_upper_limit_alone_asks_for_a_mean_below_it():
    found = centering.centre(*one(9, 1, 50, 49, -np.inf, 10, np.nan, 1.33))
    assert found.needed_mean[0] == pytest.approx(10 - 3.99)
    both = centering.centre(*one(9, 1, 50, 49, 0, 10, 5, 1.33))
    assert np.isnan(both.needed_mean[0])


@pytest.mark.parametrize("half", (4.6, 5.0, 6.5))
def test_the_edges_of_the_sure_window_reach_the_target_with_90_percent(half):
    found = centering.centre(*one(0.4, 1, 60, 59, -half, half, 0, 1.33))
    if half < 4.7:
        assert np.isnan(found.sure_low[0])
        assert found.chance_centered[0] < centering.SURE
        return
    assert found.sure_low[0] == pytest.approx(-found.sure_high[0])
    for edge in (found.sure_low[0], found.sure_high[0]):
        assert integrated(edge, 1.0, 60, 59, -half, half, 1.33) == pytest.approx(0.90, abs=CHANCE)


def test_a_mean_inside_the_sure_window_needs_no_move():
    found = centering.centre(*one(0.1, 1, 200, 199, -6, 6, 0, 1.33))
    assert found.sure_low[0] < 0.1 < found.sure_high[0]
    assert found.move_least[0] == 0


def test_a_machine_that_cannot_be_set_exactly_reaches_less():
    """Effective number after the move: 1 / (1 / n + (setting sd / s)^2) (capability study, section 1)."""
    exact, rough = _centred("W03")[0], _centred("W03", setting_sd=0.7525455)[0]  # half of s
    assert rough.chance_centered[0] < exact.chance_centered[0]
    assert rough.cpk_centered_low[0] < exact.cpk_centered_low[0]
    assert rough.ppm_centered[0] > exact.ppm_centered[0]
    assert rough.chance_now[0] == exact.chance_now[0]
    after = 1 / (1 / 30 + 0.25)
    expected = integrated(80.0, 1.505091, after, 29, 73.0, 87.0, 1.33)
    assert rough.chance_centered[0] == pytest.approx(expected, abs=CHANCE)


def test_a_declared_aim_is_honoured_though_the_middle_would_give_more():
    middle, declared = _centred("W03")[0], _centred("W03", aim=81.0)[0]
    assert declared.aim[0] == 81
    assert declared.move[0] > 0 > middle.move[0]
    assert declared.cpk_centered[0] == pytest.approx((87 - 81) / (3 * 1.505091), rel=1e-6)
    assert declared.cpk_centered[0] < middle.cpk_centered[0]
    assert declared.window_low[0] == middle.window_low[0]


def test_the_bound_after_the_move_is_the_bound_of_a_process_found_there():
    found, _ = _centred("W01")
    low, _ = capability.capability_bounds(*one(12, 0.010868866, 50, 49, 11.92, 12.08))
    assert found.cpk_centered_low[0] == pytest.approx(low[0], rel=1e-6)


def test_a_move_counts_only_beyond_two_standard_errors():
    """Capability study, section 5.3."""
    move, sigma, n = np.array([0.19, -0.21, 0.21, np.nan]), np.full(4, 1.0), np.full(4, 100.0)
    assert list(centering.significant(move, sigma, n)) == [False, True, True, False]


def test_no_spread_no_limits_and_crossed_limits_give_no_move():
    mean, sigma = np.zeros(4), np.array([0.0, np.nan, 1.0, 1.0])
    lower, upper = np.array([-4.0, -4.0, -np.inf, 4.0]), np.array([4.0, 4.0, np.inf, -4.0])
    aim = np.array([0.0, 0.0, np.nan, 0.0])
    found = centering.centre(mean, sigma, np.full(4, 30.0), np.full(4, 29.0), lower, upper, aim, np.full(4, 1.33))
    for field in ("move_least", "sure_low", "window_low", "cpk_centered", "chance_centered", "chance_now", "ppm_now"):
        assert np.isnan(getattr(found, field)).all(), field


def _portfolio(rng, k):
    lower = np.where(rng.random(k) < 0.2, -np.inf, -rng.uniform(3, 8, k))
    upper = rng.uniform(3, 8, k)
    aim = np.where(np.isfinite(lower), (np.where(np.isfinite(lower), lower, 0) + upper) / 2, np.nan)
    n = rng.uniform(26, 400, k)
    return [rng.normal(size=k), rng.uniform(0.6, 1.5, k), n, n * 0.9, lower, upper, aim, rng.choice([1.33, 1.67], k)]


def test_characteristics_do_not_influence_each_other_and_may_come_in_any_order():
    rng = np.random.default_rng(12)
    data = _portfolio(rng, 60)
    together = centering.centre(*data)
    order = rng.permutation(60)
    shuffled = centering.centre(*[x[order] for x in data])
    for name, value in vars(together).items():
        alone = np.concatenate([getattr(centering.centre(*[x[i : i + 1] for x in data]), name) for i in range(60)])
        assert value == pytest.approx(alone, rel=1e-6, abs=1e-9, nan_ok=True), name
        assert getattr(shuffled, name) == pytest.approx(value[order], rel=1e-9, abs=1e-12, nan_ok=True), name


@settings(max_examples=40, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6), off=st.floats(-50, 50), scale=st.floats(0.01, 100))
def test_shift_and_scale_move_the_window_and_change_no_chance(seed, off, scale):
    data = _portfolio(np.random.default_rng(seed), 6)
    mean, sigma, n, df, lower, upper, aim, target = data
    plain = centering.centre(*data)
    moved = centering.centre(mean * scale + off, sigma * scale, n, df, lower * scale + off, upper * scale + off,
                             aim * scale + off, target)  # fmt: skip
    for name in ("cpk_centered", "cpk_centered_low", "chance_centered", "chance_now"):
        assert getattr(moved, name) == pytest.approx(getattr(plain, name), rel=1e-6, abs=1e-9, nan_ok=True), name
    for name in ("move", "move_least"):
        expected = getattr(plain, name) * scale
        assert getattr(moved, name) == pytest.approx(expected, rel=1e-5, abs=1e-5 * scale, nan_ok=True), name
    for name in ("window_low", "window_high", "sure_low", "sure_high", "needed_mean"):
        expected = getattr(plain, name) * scale + off
        assert getattr(moved, name) == pytest.approx(expected, rel=1e-6, abs=1e-5 * scale, nan_ok=True), name


@settings(max_examples=40, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_centring_never_lowers_the_index_and_the_least_move_is_never_longer_than_the_whole(seed):
    found = centering.centre(*(data := _portfolio(np.random.default_rng(seed), 20)))
    now = capability.indices(data[0], data[1], data[4], data[5]).cpk
    two = np.isfinite(found.aim)
    assert (found.cpk_centered[two] >= now[two] - 1e-9).all()
    reachable = two & np.isfinite(found.move_least)
    assert (np.abs(found.move_least[reachable]) <= np.abs(found.move[reachable]) + 1e-9).all()
    inside = np.isfinite(found.sure_low)
    assert (found.window_low[inside] <= found.sure_low[inside] + 1e-9).all()
