"""Variance components against worked cases, statsmodels' analyses of variance and formulas written out one by one."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.formula.api as smf
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.anova import anova_lm

from portfolio.statistics.components import Components, components
from portfolio.statistics.subgroups import Subgroups
from tests.statistics.worked import CASES, near


def split(groups, streams=None, serial=None):
    """Components of one characteristic given as a list of subgroups, and the stream of each value alike."""
    values = np.concatenate([np.asarray(g, dtype=float) for g in groups]) if groups else np.empty(0)
    stream = np.full(len(values), -1) if streams is None else np.concatenate([np.asarray(s) for s in streams])
    start = np.cumsum([0, *(len(g) for g in groups)])
    cut = Subgroups(start, np.array([0, len(groups)]))
    leaning = None if serial is None else np.array([serial])
    return components(values, np.array([0, len(values)]), cut, stream, serial=leaning)


def frame(groups, streams):
    """The same as a table for statsmodels."""
    rows = [(y, s, j) for j, (g, t) in enumerate(zip(groups, streams, strict=True)) for y, s in zip(g, t, strict=True)]
    return pd.DataFrame(rows, columns=["y", "stream", "subgroup"])


def uneven(rng, b=14, between=0.7, streams=None, effect=0.0):
    """Subgroups of 2 to 7 values, streams drawn at random."""
    groups, labels = [], []
    for shift in rng.normal(scale=between, size=b):
        n = int(rng.integers(2, 8))
        label = rng.integers(0, streams, n) if streams else np.zeros(n, dtype=int)
        groups.append(shift + effect * label + rng.normal(size=n))
        labels.append(label)
    return groups, labels


def test_four_cavities_of_a_worked_case():
    case = CASES["W05"]
    values, cut = np.array(case["values"]), np.searchsorted(case["subgroup"], np.arange(14))
    parts = components(values, np.array([0, 52]), Subgroups(cut, np.array([0, 13])), np.array(case["stream"]))
    answer = case["answer"]
    expected = answer["components"]
    assert parts.mean[0] == near(answer["mean"], rel=1e-7)
    assert parts.sigma_overall[0] == near(answer["plain_total_s"], rel=1e-5)
    assert parts.sigma_stream[0] ** 2 == near(expected["var_stream_fixed_model"], rel=1e-5)
    assert parts.sigma_between[0] ** 2 == near(expected["var_round"], rel=1e-5)
    assert parts.sigma_error[0] ** 2 == near(expected["var_error"], rel=1e-5)
    assert parts.stream_p[0] == near(expected["p_F_stream"], rel=1e-5)
    assert parts.between_p[0] == near(expected["p_F_round"], rel=1e-5)
    assert parts.sigma_total[0] == near(answer["levers"]["now"]["sd"], rel=1e-5)
    assert parts.streams[0] == 4


def test_subgroups_of_any_size_follow_the_formulas_written_out():
    """Capability study, section 1; Satterthwaite (1946)."""
    groups, _ = uneven(np.random.default_rng(3))
    sizes = np.array([len(g) for g in groups], dtype=float)
    n, b, grand = sizes.sum(), len(groups), np.concatenate(groups).mean()
    msb = sum(len(g) * (g.mean() - grand) ** 2 for g in groups) / (b - 1)
    msw = sum(((g - g.mean()) ** 2).sum() for g in groups) / (n - b)
    n0 = (n - (sizes**2).sum() / n) / (b - 1)
    var_b = (msb - msw) / n0
    assert var_b > 0
    of_mean = var_b * (sizes**2).sum() / n**2 + msw / n
    nu = (var_b + msw) ** 2 / ((msb / n0) ** 2 / (b - 1) + ((1 - 1 / n0) * msw) ** 2 / (n - b))
    parts = split(groups)
    assert parts.sigma_total[0] ** 2 == pytest.approx(var_b + msw)
    assert parts.sigma_within[0] ** 2 == pytest.approx(msw)
    assert parts.sigma_between[0] ** 2 == pytest.approx(var_b)
    assert parts.n_mean[0] == pytest.approx((var_b + msw) / of_mean)
    assert parts.df[0] == pytest.approx(nu)
    assert parts.between_p[0] == pytest.approx(stats.f_oneway(*groups).pvalue, rel=1e-9)
    assert np.isnan(parts.sigma_stream[0])
    assert np.isnan(parts.stream_p[0])


def test_equal_subgroups_give_the_restricted_likelihood_estimates():
    """In balanced data analysis of variance and REML agree: statsmodels' mixed model is the outside check."""
    rng = np.random.default_rng(11)
    groups = [shift + rng.normal(size=5) for shift in rng.normal(scale=0.8, size=20)]
    parts = split(groups)
    table = frame(groups, [np.zeros(5)] * 20)
    fit = smf.mixedlm("y ~ 1", table, groups=table["subgroup"]).fit(reml=True)
    assert parts.sigma_between[0] ** 2 == pytest.approx(float(fit.cov_re.iloc[0, 0]), rel=1e-3)
    assert parts.sigma_within[0] ** 2 == pytest.approx(float(fit.scale), rel=1e-3)


@pytest.mark.parametrize("seed", (1, 2, 3))
def test_uneven_crossed_streams_are_tested_as_statsmodels_does(seed):
    groups, labels = uneven(np.random.default_rng(seed), streams=3, effect=0.4)
    parts = split(groups, labels)
    fit = smf.ols("y ~ C(stream) + C(subgroup)", frame(groups, labels)).fit()
    table = anova_lm(fit, typ=2)
    assert parts.stream_p[0] == pytest.approx(table.loc["C(stream)", "PR(>F)"], rel=1e-7)
    assert parts.between_p[0] == pytest.approx(table.loc["C(subgroup)", "PR(>F)"], rel=1e-7)
    assert parts.sigma_error[0] ** 2 == pytest.approx(fit.mse_resid, rel=1e-9)
    total = parts.sigma_stream**2 + parts.sigma_between**2 + parts.sigma_error**2
    assert parts.sigma_total**2 == pytest.approx(total)


def test_streams_that_own_their_subgroups_are_compared_with_what_subgroups_vary_by():
    """Nested and balanced: F = MS stream / MS subgroup within stream (common practice)."""
    rng = np.random.default_rng(5)
    labels = [np.full(4, j % 3) for j in range(15)]
    groups = [0.5 * (j % 3) + shift + rng.normal(size=4) for j, shift in enumerate(rng.normal(size=15))]
    means = np.array([g.mean() for g in groups])
    of_stream = np.array([means[i::3].mean() for i in range(3)])
    ms_stream = 4 * 5 * ((of_stream - means.mean()) ** 2).sum() / 2
    ms_subgroup = 4 * sum(((means[i::3] - of_stream[i]) ** 2).sum() for i in range(3)) / 12
    parts = split(groups, labels)
    assert parts.stream_p[0] == pytest.approx(stats.f.sf(ms_stream / ms_subgroup, 2, 12))
    assert parts.sigma_stream[0] ** 2 * 3 / 2 == pytest.approx((ms_stream - ms_subgroup) / 20)


def test_individuals_of_several_streams_are_split_by_one_way_analysis():
    rng = np.random.default_rng(9)
    label = np.tile([0, 1, 2], 20)
    values = rng.normal(size=60) + label
    parts = split([[x] for x in values], [[s] for s in label])
    by_stream = [values[label == s] for s in range(3)]
    assert parts.stream_p[0] == pytest.approx(stats.f_oneway(*by_stream).pvalue)
    mse = np.mean([g.var(ddof=1) for g in by_stream])
    assert parts.sigma_error[0] ** 2 == pytest.approx(mse)
    assert parts.sigma_stream[0] ** 2 == pytest.approx((60 * np.var([g.mean() for g in by_stream]) - 2 * mse) / 60)
    assert np.isnan(parts.sigma_between[0])


def test_individuals_take_the_moving_range_within_and_the_plain_deviation_in_total():
    """Mean moving range 1.5 over d2 = 1.128 (ASTM MNL 7)."""
    parts = split([[x] for x in (1.0, 2.0, 4.0, 3.0, 5.0)])
    assert parts.sigma_within[0] == pytest.approx(1.5 / 1.128, rel=5e-4)
    assert parts.sigma_total[0] == parts.sigma_overall[0] == pytest.approx(np.std([1, 2, 4, 3, 5], ddof=1))
    assert (parts.df[0], parts.n_mean[0]) == (4, 5)


def test_leaning_neighbours_count_for_fewer_values():
    """Capability study, section 1: n(1-r)/(1+r), n(1-r^2)/(1+r^2) - 1, variance x (n-1)/(n - n/n_m)."""
    values = np.random.default_rng(2).normal(size=80)
    plain, leaning = split([[x] for x in values]), split([[x] for x in values], serial=0.6)
    n_m = 80 * 0.4 / 1.6
    assert leaning.n_mean[0] == pytest.approx(n_m)
    assert leaning.df[0] == pytest.approx(80 * 0.64 / 1.36 - 1)
    assert leaning.sigma_total[0] ** 2 == pytest.approx(plain.sigma_total[0] ** 2 * 79 / (80 - 80 / n_m))
    assert split([[x] for x in values], serial=np.nan).df[0] == 79
    assert split([[x] for x in values], serial=0.99).df[0] == 0  # nothing is known: no bound follows


def test_leaning_subgroups_know_their_mean_less_well():
    groups, _ = uneven(np.random.default_rng(8), b=30)
    plain, leaning = split(groups), split(groups, serial=0.5)
    assert leaning.n_mean[0] < 0.5 * plain.n_mean[0]
    assert leaning.df[0] < plain.df[0]
    assert leaning.sigma_total[0] > plain.sigma_total[0]


def test_alike_subgroups_are_judged_by_the_plain_deviation():
    groups = [[1.0, 5.0], [5.0, 1.0], [2.0, 4.0], [4.0, 2.0]]  # all means 3: less than chance
    parts = split(groups)
    assert parts.sigma_between[0] == 0
    assert parts.sigma_total[0] == pytest.approx(np.std(np.concatenate(groups), ddof=1))
    assert (parts.df[0], parts.n_mean[0]) == (7, 8)


def test_alike_streams_are_one_stream():
    groups, _ = uneven(np.random.default_rng(4))
    labels = [np.arange(len(g)) % 2 for g in groups]
    means = [np.concatenate([g[s == i] for g, s in zip(groups, labels, strict=True)]).mean() for i in (0, 1)]
    groups = [g - np.array(means)[s] for g, s in zip(groups, labels, strict=True)]
    parts, one = split(groups, labels), split(groups)
    assert (parts.sigma_stream[0], parts.streams[0]) == (0, 2)
    assert parts.sigma_total == one.sigma_total
    assert parts.df == one.df
    assert parts.stream_p[0] > 0.9


def test_values_without_a_stream_among_named_ones_stay_in_the_total():
    rng = np.random.default_rng(6)
    label = np.tile([0, 1, -1], 20)
    parts = split([[x] for x in rng.normal(size=60) + 3 * label], [[s] for s in label])
    assert parts.streams[0] == 2
    assert parts.sigma_total[0] == pytest.approx(parts.sigma_overall[0], rel=0.02)


@pytest.mark.parametrize("stream", (np.arange(20), np.zeros(20, dtype=int), np.full(20, -1)))
def test_one_stream_or_a_stream_for_each_value_splits_nothing(stream):
    values = np.random.default_rng(1).normal(size=20)
    parts = split([[x] for x in values], [[s] for s in stream])
    assert np.isnan(parts.sigma_stream[0])
    assert parts.sigma_total[0] == pytest.approx(values.std(ddof=1))


def test_nothing_one_value_and_equal_values_do_not_trouble_the_others():
    values = np.concatenate(([3.0], np.full(6, 2.0), [1.0, 2.0, 4.0, 8.0]))
    start = np.array([0, 0, 1, 7, 11])
    cut = Subgroups(np.array([0, 1, 3, 5, 7, 9, 11]), np.array([0, 0, 1, 4, 6]))
    parts = components(values, start, cut, np.full(11, -1))
    assert list(parts.n) == [0, 1, 6, 4]
    assert np.isnan(parts.mean[0])
    assert parts.mean[1] == 3
    assert np.isnan(parts.sigma_total[:2]).all()
    assert parts.sigma_total[2] == 0
    assert (parts.n_mean[2], parts.df[2]) == (6, 5)
    assert parts.sigma_total[3] == split([[1.0, 2.0], [4.0, 8.0]]).sigma_total[0]


def _portfolio(rng, k=12):
    """Characteristics of every design side by side."""
    made = [uneven(rng, b=int(rng.integers(5, 20)), streams=int(rng.integers(1, 4)), effect=0.5) for _ in range(k)]
    for i in range(0, k, 4):
        made[i] = [[x] for g in made[i][0] for x in g], [[s] for t in made[i][1] for s in t]
    return made


def _together(made, off=0.0, scale=1.0):
    groups = [np.asarray(g) * scale + off for one, _ in made for g in one]
    values, stream = np.concatenate(groups), np.concatenate([np.asarray(s) for _, t in made for s in t])
    start = np.cumsum([0, *(sum(len(g) for g in one) for one, _ in made)])
    cut = Subgroups(np.cumsum([0, *map(len, groups)]), np.cumsum([0, *(len(one) for one, _ in made)]))
    return components(values, start, cut, stream)


def _assert_same(one: Components, other: Components, order=None):
    for name, value in vars(one).items():
        expected = getattr(other, name) if order is None else getattr(other, name)[order]
        assert value == pytest.approx(expected, rel=1e-7, nan_ok=True), name


def test_characteristics_do_not_influence_each_other_and_may_come_in_any_order():
    rng = np.random.default_rng(21)
    made = _portfolio(rng)
    together = _together(made)
    for i, one in enumerate(made):
        _assert_same(_together([one]), together, slice(i, i + 1))
    order = rng.permutation(len(made))
    _assert_same(_together([made[i] for i in order]), together, order)


@settings(max_examples=25, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6), off=st.floats(-100, 100), scale=st.floats(0.01, 100))
def test_sigmas_scale_with_the_unit_and_counts_do_not(seed, off, scale):
    made = _portfolio(np.random.default_rng(seed), k=5)
    plain, changed = _together(made), _together(made, off=off, scale=scale)
    for name, value in vars(changed).items():
        expected = getattr(plain, name) * (scale if name.startswith("sigma") else 1.0)
        if name == "mean":
            expected = expected * scale + off
        assert value == pytest.approx(expected, rel=1e-6, abs=1e-9 * scale, nan_ok=True), name


@settings(max_examples=25, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_the_order_in_time_changes_no_capability_figure(seed):
    """Only the moving range looks at time; what the verdict uses does not."""
    rng = np.random.default_rng(seed)
    groups, labels = uneven(rng, streams=2, effect=0.5)
    order = rng.permutation(len(groups))
    before, after = split(groups, labels), split([groups[i] for i in order], [labels[i] for i in order])
    _assert_same(before, after)
    values = rng.normal(size=40)
    before, after = split([[x] for x in values]), split([[x] for x in rng.permutation(values)])
    assert before.sigma_total == pytest.approx(after.sigma_total)
    assert (before.df[0], before.n_mean[0]) == (after.df[0], after.n_mean[0])
