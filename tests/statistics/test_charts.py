"""Control limits and signals: identities, invariances and error rates (worked examples: tests/published)."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from portfolio.statistics import charts
from portfolio.statistics.charts import Charts, Rule, Signals
from portfolio.statistics.subgroups import Series, Subgroups, summarise

LIMITS = ("lower", "upper", "spread", "spread_centre", "spread_lower", "spread_upper")


def drawn(
    values: np.ndarray, sizes: list[int] | np.ndarray, of: list[int], layers: list[bool] | None = None
) -> tuple[Series, Charts, Signals]:
    """Charts of flat values in subgroups of `sizes`; characteristic i has subgroups of[i] .. of[i + 1] - 1."""
    groups = Subgroups(np.concatenate(([0], np.cumsum(sizes))).astype(np.int64), np.array(of, dtype=np.int64))
    series = summarise(np.asarray(values, dtype=np.float64), np.arange(len(values)), groups)
    count = len(of) - 1
    made = charts.control_limits(series, groups, np.array([False] * count if layers is None else layers, dtype=bool))
    return series, made, charts.signals(made, series, groups)


# What is drawn


def test_the_kind_of_chart_follows_the_subgroups() -> None:
    rng = np.random.default_rng(1)
    sizes = [1] * 10 + [5] * 10 + [10] * 10 + [5] * 9 + [4] + [5] * 10 + [1] * 10
    _, made, _ = drawn(
        rng.normal(size=sum(sizes)), sizes, [0, 10, 20, 30, 40, 50, 60, 60], [False] * 4 + [True, True, False]
    )
    assert made.kind.tolist()[:6] == [
        "individuals", "mean and range", "mean and s", "mean and s", "three-way", "individuals",
    ]  # fmt: skip


def test_a_three_way_chart_judges_the_means_as_individuals_and_the_range_within() -> None:
    rng = np.random.default_rng(2)
    values = (rng.normal(size=(25, 1)) + rng.normal(size=(25, 4))).ravel()
    series, three_way, _ = drawn(values, [4] * 25, [0, 25], [True])
    _, of_means, _ = drawn(series.mean, [1] * 25, [0, 25])
    _, within, _ = drawn(values, [4] * 25, [0, 25])
    assert three_way.lower == pytest.approx(of_means.lower)
    assert three_way.upper == pytest.approx(of_means.upper)
    assert three_way.between_centre[0] == pytest.approx(np.nanmean(of_means.spread))
    assert three_way.between_upper[0] == pytest.approx(of_means.spread_upper[0])
    for name in ("spread", "spread_centre", "spread_lower", "spread_upper"):
        assert getattr(three_way, name) == pytest.approx(getattr(within, name))
    assert np.isnan(within.between_centre[0])
    assert np.isnan(within.between_upper[0])


def test_where_the_means_are_judged_as_individuals_each_counts_once_whatever_its_size() -> None:
    rng = np.random.default_rng(9)
    sizes = [2, 3, 9] * 8 + [1, 1, 6] * 8
    series, made, _ = drawn(rng.normal(size=sum(sizes)), sizes, [0, 24, 48], [True, False])
    assert made.kind.tolist() == ["three-way", "individuals"]
    assert made.centre == pytest.approx([series.mean[:24].mean(), series.mean[24:].mean()])
    assert np.ptp(made.upper[:24]) == np.ptp(made.upper[24:]) == 0


def test_each_subgroup_has_limits_of_its_own_size() -> None:
    rng = np.random.default_rng(3)
    sizes = np.array([2, 4, 16] * 8)
    series, made, _ = drawn(rng.normal(10, 2, sizes.sum()), sizes, [0, 24])
    half = made.upper - made.centre[0]
    assert half * np.sqrt(sizes) == pytest.approx(np.full(24, half[0] * np.sqrt(2)))
    assert made.centre[0] == pytest.approx(np.average(series.mean, weights=sizes))
    assert made.spread_centre[2] > made.spread_centre[0]  # c4 rises with the size
    assert made.spread_lower[:3].tolist() == pytest.approx([0, 0, made.spread_lower[2]])
    assert made.spread_lower[2] > 0


def test_sigma_from_standard_deviations_has_no_bias_and_beats_the_plain_average() -> None:
    # Burr (1969): weights by information. Simulated sizes 2 and 12 mixed, sigma = 1.
    rng = np.random.default_rng(4)
    count, sizes = 2_000, np.array([2, 12] * 10)
    start = np.concatenate(([0], np.cumsum(np.tile(sizes, count))))
    of = np.arange(count + 1) * 20
    values = rng.normal(size=start[-1])
    series = summarise(values, np.arange(len(values)), Subgroups(start, of))
    sigma = charts.sigma_from_s(series, of)
    plain = (series.sd / np.sqrt(stats.chi.mean(series.size - 1) ** 2 / (series.size - 1))).reshape(count, 20).mean(1)
    assert abs(sigma.mean() - 1) < 4 * sigma.std() / np.sqrt(count)
    assert sigma.std() < 0.7 * plain.std()


def test_no_spread_limit_is_below_zero_and_range_and_s_agree_for_two_values() -> None:
    sigma, two = np.array([1.5]), np.array([2.0])
    of_range = charts.spread_limits(sigma, two, np.array([True]))
    of_s = charts.spread_limits(sigma, two, np.array([False]))
    assert of_range[1][0] == 0
    for r, s in zip(of_range, of_s, strict=True):
        assert r[0] == pytest.approx(np.sqrt(2) * s[0], abs=1e-10)


def test_sigma_is_the_standard_error_of_a_plotted_point() -> None:
    rng = np.random.default_rng(5)
    sizes = [1] * 30 + [4] * 30 + [4] * 30
    _, made, _ = drawn(rng.normal(size=sum(sizes)), sizes, [0, 30, 60, 90], [False, False, True])
    assert made.sigma == pytest.approx((made.upper - made.lower)[[0, 30, 60]] / 6)


def test_a_characteristic_without_values_or_with_one_value_has_no_limits_and_no_signal() -> None:
    series, made, found = drawn(np.array([3.0, 1, 2, 3]), [1, 1, 1, 1], [0, 0, 1, 4])
    assert np.isnan(made.centre[0])
    assert made.centre[1:].tolist() == [3, 2]
    assert np.isnan(made.upper).tolist() == [True, False, False, False]
    assert found.count.tolist() == [0, 0, 0]
    assert len(series.mean) == 4


# Signals


def marked(z: list[float], of: list[int] | None = None) -> list[list[int]]:
    """Positions marked by each of the four rules."""
    found = charts.rules(np.array(z, dtype=np.float64), np.array([0, len(z)] if of is None else of))
    return [np.flatnonzero(hit).tolist() for hit in found]


def test_one_point_beyond_three_sigma_signals() -> None:
    assert marked([0.1, 3.01, -3.01, 3.0]) == [[1, 2], [], [], []]


def test_the_second_of_three_points_beyond_two_sigma_on_one_side_signals() -> None:
    assert marked([2.1, 0.5, 2.2, -2.1, 2.3, 2.3]) == [[], [2, 4, 5], [], []]
    assert marked([2.1, -2.1, 0.5, 2.1]) == [[], [], [], []]


def test_the_fourth_of_five_points_beyond_one_sigma_on_one_side_signals() -> None:
    assert marked([-1.1, -1.1, 0, -1.1, -1.1]) == [[], [], [4], []]
    assert marked([-1.1, -1.1, 0, 0, -1.1, -1.1]) == [[], [], [], []]


def test_eight_points_in_a_row_on_one_side_signal_and_so_does_each_that_goes_on() -> None:
    assert marked([0.2] * 9) == [[], [], [], [7, 8]]
    assert marked([0.2] * 7 + [-0.2] + [0.2] * 7) == [[], [], [], []]


def test_a_point_on_the_centre_line_is_on_no_side() -> None:
    assert marked([0.2] * 4 + [0.0] + [0.2] * 4) == [[], [], [], []]


def test_a_point_beyond_three_sigma_counts_for_no_other_rule() -> None:
    assert marked([2.5, 3.5]) == [[1], [], [], []]


def test_no_pattern_goes_on_into_the_next_characteristic() -> None:
    assert marked([0.2] * 14, [0, 7, 7, 14]) == [[], [], [], []]
    assert marked([2.5, 2.5, 2.5], [0, 1, 3]) == [[], [2], [], []]


def plainly(z: list[float], rule: Rule) -> list[int]:
    """The rule as a person would read it off the chart, window by window."""
    out = set()
    for end in range(len(z)):
        window = z[max(0, end - rule.among + 1) : end + 1]
        for side in (1, -1):
            inside = [rule.low < side * x and (rule.high >= side * x) for x in window]
            if inside[-1] and sum(inside) >= rule.need:
                out.add(end)
    return sorted(out)


@settings(max_examples=100, deadline=None, derandomize=True)
@given(st.lists(st.lists(st.sampled_from([-3.5, -2.5, -1.5, -0.5, 0.0, 0.5, 1.5, 2.5, 3.5]), max_size=20), max_size=4))
def test_rules_mark_what_a_person_reads_off_each_chart(series: list[list[float]]) -> None:
    of = np.concatenate(([0], np.cumsum([len(z) for z in series]))).astype(np.int64)
    found = charts.rules(np.array([x for z in series for x in z], dtype=np.float64), of)
    for rule, hit in zip(charts.WESTERN_ELECTRIC, found, strict=True):
        for z, a, b in zip(series, of[:-1], of[1:], strict=True):
            assert np.flatnonzero(hit[a:b]).tolist() == plainly(z, rule)


def test_a_subgroup_with_several_signals_counts_once() -> None:
    values = np.random.default_rng(6).normal(size=(40, 5))
    values[20] = [9, -9, 9, 30, 9]  # far off and far apart
    _, _, found = drawn(values.ravel(), [5] * 40, [0, 40])
    assert {1, charts.SPREAD_RULE} <= set(found.rule[found.index == 20].tolist())
    assert found.count[0] == len(set(found.index.tolist()))
    assert found.index.tolist() == sorted(found.index.tolist())


def test_a_jump_between_individuals_shows_on_the_moving_range() -> None:
    values = np.array([0.0, 1, 0, 1, 0, 1, 0, 1, 9, 8, 9, 8, 9, 8, 9, 8])
    _, made, found = drawn(values, [1] * 16, [0, 16])
    assert np.isnan(made.spread[0])
    assert found.index[found.rule == charts.SPREAD_RULE].tolist() == [8]


@pytest.mark.parametrize("value", [0.1, 1e9 + 0.1, -3.3])
def test_constant_values_give_no_signal_whatever_their_digits(value: float) -> None:
    _, _, found = drawn(np.full(60, value), [1] * 20 + [3, 5] * 5, [0, 20, 30])
    assert found.count.tolist() == [0, 0]


def test_means_that_move_while_no_subgroup_varies_inside_are_all_beyond_the_limits() -> None:
    values = np.repeat([1.0, 2.0, 1.0, 2.0], 3)
    _, _, found = drawn(values, [3] * 4, [0, 4])
    assert found.index[found.rule == 1].tolist() == [0, 1, 2, 3]


# Invariances


@st.composite
def portfolios(draw: st.DrawFn) -> tuple[list[np.ndarray], list[list[int]], list[bool]]:
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    sizes = draw(
        st.lists(
            st.one_of(
                st.integers(2, 25).map(lambda m: [1] * m),
                st.tuples(st.integers(2, 12), st.integers(2, 12)).map(lambda p: [p[0]] * p[1]),
                st.lists(st.integers(1, 6), min_size=2, max_size=15),
            ),
            min_size=1,
            max_size=5,
        )
    )
    values = [rng.standard_t(3, sum(s)) for s in sizes]
    return values, sizes, draw(st.lists(st.booleans(), min_size=len(sizes), max_size=len(sizes)))


def together(portfolio: tuple[list[np.ndarray], list[list[int]], list[bool]]) -> tuple[Charts, Signals, np.ndarray]:
    values, sizes, layers = portfolio
    of = np.concatenate(([0], np.cumsum([len(s) for s in sizes])))
    _, made, found = drawn(np.concatenate(values), [n for s in sizes for n in s], of.tolist(), layers)
    return made, found, of


@settings(max_examples=60, deadline=None, derandomize=True)
@given(portfolios(), st.floats(0.01, 100), st.floats(-50, 50))
def test_limits_move_with_the_data_and_signals_stay(
    portfolio: tuple[list[np.ndarray], list[list[int]], list[bool]], scale: float, shift: float
) -> None:
    values, sizes, layers = portfolio
    plain, found, _ = together(portfolio)
    moved, found_again, _ = together(([shift + scale * x for x in values], sizes, layers))
    about = {"rel": 1e-7, "abs": 1e-7 * scale, "nan_ok": True}
    for name in ("centre", "lower", "upper"):
        assert getattr(moved, name) == pytest.approx(shift + scale * getattr(plain, name), **about)
    for name in (*LIMITS[2:], "between_centre", "between_upper", "sigma"):
        assert getattr(moved, name) == pytest.approx(scale * getattr(plain, name), **about)
    assert found_again.index.tolist() == found.index.tolist()
    assert found_again.rule.tolist() == found.rule.tolist()


@settings(max_examples=60, deadline=None, derandomize=True)
@given(portfolios())
def test_a_chart_is_the_same_whoever_its_neighbours_are(
    portfolio: tuple[list[np.ndarray], list[list[int]], list[bool]],
) -> None:
    made, found, of = together(portfolio)
    for i, one in enumerate(zip(*portfolio, strict=True)):
        alone, found_alone, _ = together(tuple([part] for part in one))  # type: ignore[arg-type]
        here = slice(of[i], of[i + 1])
        assert made.kind[i] == alone.kind[0]
        for name in LIMITS:
            assert getattr(made, name)[here] == pytest.approx(getattr(alone, name), rel=1e-12, nan_ok=True)
        for name in ("centre", "between_centre", "between_upper", "sigma"):
            assert getattr(made, name)[i] == pytest.approx(getattr(alone, name)[0], rel=1e-12, nan_ok=True)
        mine = (found.index >= of[i]) & (found.index < of[i + 1])
        assert (found.index[mine] - of[i]).tolist() == found_alone.index.tolist()
        assert found.rule[mine].tolist() == found_alone.rule.tolist()
        assert found.count[i] == found_alone.count[0]


# What a stable process shows


@pytest.mark.parametrize(
    ("m", "n", "layered"),
    [(25, 1, False), (80, 1, False), (50, 2, False), (50, 4, False), (200, 7, False), (60, 5, True)],
)
def test_a_stable_process_shows_as_many_signals_as_announced(m: int, n: int, layered: bool) -> None:
    rng = np.random.default_rng(100 * m + n)
    count = 60_000 // m
    values = rng.normal(size=(count, m, n)) + layered * rng.normal(size=(count, m, 1))
    series, made, found = drawn(
        values.ravel(), np.full(count * m, n), (np.arange(count + 1) * m).tolist(), [layered] * count
    )
    announced = charts.expected_signals(
        np.full(count, m), series.individuals, made.kind == "three-way", series.median_size
    )[0]
    noise = found.count.std() / np.sqrt(count)
    assert abs(found.count.mean() - announced) < 4 * noise + 0.06 * announced  # the fitted line is good to 6 %


def test_a_characteristic_without_subgroups_expects_no_signal_and_no_length_a_negative_number() -> None:
    size, no = np.array([np.nan, 5.0, 5.0]), np.array([False] * 3)
    assert charts.expected_signals(np.array([0, 5, 80]), no, no, size).tolist() == pytest.approx([0, 0, 1.403])


@pytest.mark.slow
def test_the_shown_share_of_stable_characteristics_with_a_signal_is_that_of_the_study() -> None:
    # Stability study, section 1, normal data, m = 120, n = 5: 53 % have a point outside 3 sigma, 79 % break a rule.
    rng = np.random.default_rng(8)
    count, m = 2_000, 120
    _, _, found = drawn(rng.normal(size=count * m * 5), np.full(count * m, 5), (np.arange(count + 1) * m).tolist())
    outside = np.unique(found.index[np.isin(found.rule, (1, charts.SPREAD_RULE))] // m)
    error = 4 * np.sqrt(0.25 * (1 / 600 + 1 / count))  # the study simulated 600
    assert abs(len(outside) / count - 0.53) < error
    assert abs((found.count > 0).mean() - 0.79) < error
