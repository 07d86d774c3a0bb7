"""Shapes against scipy's distributions and optimiser, the worked case W09, and what must not depend on anything else."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, stats

from portfolio.statistics import shape_bounds, shape_families, shape_fits, shapes
from portfolio.statistics.shape_families import BOUNDED, FAMILIES, NUMBER
from tests.statistics.worked import CASES

NONE = np.nan
REFERENCE = {
    "normal": lambda p: stats.norm(p[0], p[1]),
    "lognormal": lambda p: stats.lognorm(p[1], scale=np.exp(p[0])),
    "weibull": lambda p: stats.weibull_min(p[0], scale=p[1]),
    "gamma": lambda p: stats.gamma(p[0], scale=p[1]),
    "folded normal": lambda p: stats.foldnorm(p[0] / p[1], scale=p[1]),
    "half-normal": lambda p: stats.halfnorm(scale=p[0]),
    "rayleigh": lambda p: stats.rayleigh(scale=p[0]),
    "student t": lambda p: stats.t(p[2], p[0], p[1]),
}
PARAMETERS = {
    "normal": ([10, 1, NONE], [-3, 0.01, NONE]),
    "lognormal": ([0.2, 0.5, NONE], [4.6, 0.05, NONE]),
    "weibull": ([0.8, 2, NONE], [1.5, 3, NONE], [12, 0.4, NONE]),
    "gamma": ([0.7, 2, NONE], [4, 0.5, NONE], [80, 1, NONE]),
    "folded normal": ([0, 1, NONE], [0.5, 1, NONE], [3, 2, NONE], [4, 1, NONE]),
    "half-normal": ([2, NONE, NONE],),
    "rayleigh": ([0.3, NONE, NONE],),
    "student t": ([5, 2, 3], [0, 1, 8.5]),
}
EACH = [(family, parameters) for family, several in PARAMETERS.items() for parameters in several]


def laid_out(*groups):
    """Sorted values and starts."""
    return (
        np.concatenate([np.sort(np.asarray(group, dtype=float)) for group in groups]),
        np.cumsum([0] + [len(group) for group in groups]),
    )


def fitted(*groups, declared="", lower=NONE, upper=NONE, step=None):
    values, start = laid_out(*groups)
    count = len(groups)
    words = np.array([declared] * count if isinstance(declared, str) else declared, dtype=object)
    return shapes.fit(
        values,
        start,
        words,
        np.full(count, float(lower)),
        np.full(count, float(upper)),
        step=None if step is None else np.full(count, float(step)),
    )


def limits(lower, upper, count=1):
    return np.full(count, float(lower)), np.full(count, float(upper))


def bounded(found, groups, lower, upper, seeds, **more):
    values, start = laid_out(*groups)
    return shape_bounds.bounds(found, values, start, lower, upper, seeds=np.asarray(seeds, dtype=np.uint64), **more)


@pytest.mark.parametrize("family, parameters", EACH)
def test_tails_and_quantiles_agree_with_scipy(family, parameters):
    reference = REFERENCE[family](parameters)
    p = np.array([1e-6, 0.00135, 0.05, 0.5, 0.9, 0.99865, 1 - 1e-6])
    a, b, c = np.array(parameters)
    y = reference.ppf(p)
    assert shape_families.quantile(family, p, a, b, c) == pytest.approx(y, rel=1e-8, abs=1e-12)
    below, above = shape_families.tails(family, y, a, b, c)
    assert below == pytest.approx(reference.cdf(y), rel=1e-8)
    assert above == pytest.approx(reference.sf(y), rel=1e-8)


def test_a_word_that_is_no_family_is_an_error():
    one = np.array(1.0)
    with pytest.raises(ValueError, match="unknown family 'cauchy'"):
        shape_families.tails("cauchy", one, one, one, one)
    with pytest.raises(ValueError, match="unknown family 'cauchy'"):
        shape_families.quantile("cauchy", one / 2, one, one, one)
    with pytest.raises(ValueError, match="unknown shape 'round'; give '' or one of: normal"):
        fitted([1, 2, 3], declared="round")


@pytest.mark.parametrize("family, parameters", EACH)
def test_no_optimiser_finds_a_higher_likelihood_of_scipys_density(family, parameters):
    groups = [REFERENCE[family](parameters).rvs(60, random_state=seed) for seed in range(3)]
    sample = shape_fits.Sample(*laid_out(*groups))
    free = shape_families.FREE[NUMBER[family]]
    found, likelihood = shape_fits.fitted(family, sample)
    for row, group in enumerate(groups):
        start = found[row, :free].copy()
        if family == "normal":
            start[1] *= np.sqrt(59 / 60)  # ours is the unbiased one
        if family == "student t" and np.isinf(start[2]):
            assert likelihood[row] == pytest.approx(stats.norm(*start[:2]).logpdf(group).sum(), rel=1e-9)
            continue
        assert REFERENCE[family](start).logpdf(group).sum() == pytest.approx(likelihood[row], abs=1e-8)

        def loss(p, group=group):
            inside = family != "student t" or shape_fits.FEWEST_FREEDOM <= p[2] <= shape_fits.MOST_FREEDOM
            positive = all(p[1:] > 0) if family in ("normal", "lognormal", "student t") else all(p >= 0)
            return -REFERENCE[family](p).logpdf(group).sum() if inside and positive else 1e12

        best = optimize.minimize(loss, start, method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9})
        assert -best.fun <= likelihood[row] + 1e-6


def test_narrow_values_far_from_zero_keep_their_likelihood():
    """A diameter of 12 mm +- 1 micrometre: every family is evaluated to the last digits that matter."""
    group = np.random.default_rng(5).normal(12, 0.001, 400)
    sample = shape_fits.Sample(*laid_out(group))
    for family in ("lognormal", "gamma", "folded normal"):
        _, likelihood = shape_fits.fitted(family, sample)
        _, normal = shape_fits.fitted("normal", sample)
        assert likelihood[0] == pytest.approx(normal[0], abs=0.01)
    (k, scale, _), likelihood = (part[0] for part in shape_fits.fitted("weibull", sample))
    assert stats.weibull_min(k, scale=scale).logpdf(group).sum() == pytest.approx(likelihood, abs=1e-6)


def test_the_concentration_of_case_w09_has_its_lognormal_figures():
    case = CASES["W09"]
    answer = case["answer"]
    found = fitted(case["values"], declared="lognormal", lower=0, step=case["step"])
    assert found.family[0] == "lognormal" and found.accepted[0]
    assert found.parameters[0, :2] == pytest.approx([answer["log_mean"], answer["log_sd_mle"]], rel=1e-4)
    q = shapes.quantiles(found, shapes.SPREAD)[0]
    assert q == pytest.approx([answer["q00135"], answer["median"], answer["q99865"]], rel=1e-5)
    low, high = limits(case["LSL"], case["USL"])
    index = shapes.indices(found, low, high)
    assert [index.cp[0], index.cpl[0], index.cpu[0], index.cpk[0]] == pytest.approx(
        [answer["Pp_quantile_method"], answer["Ppl"], answer["Ppu"], answer["Ppk_quantile_method"]], rel=1e-5
    )
    assert shapes.ppm(found, low, high)[0] == pytest.approx(answer["ppm"], rel=1e-4)


def test_the_information_criteria_of_case_w09_are_reproduced_and_its_type_stays_open():
    case = CASES["W09"]
    found = fitted(case["values"], step=case["step"])
    for family, expected in case["answer"]["AICc"].items():
        assert found.aicc[0, NUMBER[family]] == pytest.approx(expected, abs=1e-3)
    assert found.family[0] == "normal"  # no other family is better by 2
    declared = fitted(case["values"], declared="concentration", lower=0)
    assert declared.plausible[0, [NUMBER["lognormal"], NUMBER["gamma"]]].all()
    assert not declared.plausible[0, NUMBER["normal"]]


def test_moves_of_case_w09_reach_the_indices_that_the_case_states():
    case = CASES["W09"]
    found = fitted(case["values"], declared="lognormal", lower=0)
    low, high = limits(case["LSL"], case["USL"])
    add, scale = case["answer"]["additive_move"], case["answer"]["scaling_move"]
    moved = shapes.indices(shapes.shifted(found, np.array([add["best_shift_of_median"]])), low, high)
    assert moved.cpk[0] == pytest.approx(add["Ppk_after"], rel=1e-4)
    stretched = shapes.scaled(found, np.array([scale["best_factor"]]))
    assert shapes.indices(stretched, low, high).cpk[0] == pytest.approx(scale["Ppk_after"], rel=1e-4)
    assert shapes.quantiles(stretched, [0.5])[0, 0] == pytest.approx(scale["new_median"], rel=1e-4)


@pytest.mark.parametrize("family", FAMILIES)
def test_a_moved_shape_is_the_shape_of_the_moved_values(family):
    group = REFERENCE[family](PARAMETERS[family][-1]).rvs(200, random_state=11)
    found = fitted(group, declared=family)
    if found.family[0] != family:
        pytest.fail("the sample of the test does not fit its own family")
    p = np.array([0.01, 0.5, 0.99])
    before = shapes.quantiles(found, p)
    assert shapes.quantiles(shapes.shifted(found, np.array([0.7])), p) == pytest.approx(before + 0.7)
    scaled = shapes.scaled(found, np.array([1.3]))
    assert shapes.quantiles(scaled, p) == pytest.approx(1.3 * before)
    assert scaled.fitted[0, NUMBER[family]] == pytest.approx(scaled.parameters[0], nan_ok=True)
    again = fitted(1.3 * group, declared=family)
    assert shapes.quantiles(again, p) == pytest.approx(1.3 * before, rel=1e-6)


def test_scaling_by_nothing_is_refused():
    with pytest.raises(ValueError, match="not above 0"):
        shapes.scaled(fitted(np.arange(1, 30)), np.array([0.0]))


def test_purity_below_one_hundred_percent_is_the_mirror_image_of_impurity():
    group = stats.gamma(2).rvs(300, random_state=4)
    up = fitted(group, declared="concentration", lower=0)
    down = fitted(100 - group, declared="concentration", upper=100)
    assert up.family[0] == down.family[0] != ""
    assert down.parameters[0] == pytest.approx(up.parameters[0], rel=1e-9, nan_ok=True)
    p = np.array([0.00135, 0.2, 0.5, 0.99865])
    assert shapes.quantiles(down, p)[0] == pytest.approx(100 - shapes.quantiles(up, 1 - p)[0], rel=1e-9)
    above, below = shapes.indices(up, *limits(-np.inf, 9)), shapes.indices(down, *limits(91, np.inf))
    assert below.cpl[0] == pytest.approx(above.cpu[0], rel=1e-9)
    assert shapes.ppm(down, *limits(91, np.inf)) == pytest.approx(shapes.ppm(up, *limits(-np.inf, 9)), rel=1e-9)
    both = bounded(down, [100 - group], *limits(91, np.inf), [8]), bounded(up, [group], *limits(-np.inf, 9), [8])
    assert both[0].low == pytest.approx(both[1].low, rel=1e-9)


def test_between_two_bounds_the_nearer_one_is_the_origin():
    near_top = 100 - stats.gamma(2).rvs(100, random_state=4)
    found = fitted(near_top, 100 - near_top, declared="concentration", lower=0, upper=100)
    assert found.location.tolist() == [100, 0] and found.sign.tolist() == [-1, 1]


def test_a_limit_at_the_natural_bound_is_no_limit():
    found = fitted(stats.halfnorm.rvs(size=200, random_state=3), declared="form", lower=0)
    index = shapes.indices(found, *limits(0, 5))
    assert np.isnan(index.cpl[0]) and np.isnan(index.cp[0])
    assert index.cpk[0] == index.cpu[0] == shapes.indices(found, *limits(-np.inf, 5)).cpu[0]
    assert np.isnan(shapes.indices(found, *limits(0, np.inf)).cpk[0])


def test_crossed_limits_have_no_index():
    assert np.isnan(shapes.indices(fitted(np.arange(1.0, 50)), *limits(9, 5)).cpk[0])


def test_parts_per_million_are_those_of_scipy():
    found = fitted(stats.lognorm(0.5).rvs(300, random_state=1), declared="lognormal")
    reference = REFERENCE["lognormal"](found.parameters[0])
    expected = 1e6 * (reference.cdf(0.3) + reference.sf(4))
    assert shapes.ppm(found, *limits(0.3, 4))[0] == pytest.approx(expected, rel=1e-9)


def test_values_at_or_below_zero_leave_only_families_that_can_hold_them():
    group = np.abs(np.round(stats.norm.rvs(size=200, random_state=2), 1))
    assert (group == 0).any()
    found = fitted(group, lower=0)
    available = np.isfinite(found.aicc[0])
    assert available[[NUMBER["half-normal"], NUMBER["folded normal"]]].all()
    assert not available[[NUMBER["weibull"], NUMBER["rayleigh"], NUMBER["lognormal"], NUMBER["gamma"]]].any()
    assert np.isfinite(fitted(group, lower=0, step=0.1).aicc[0, NUMBER["weibull"]])
    negative = fitted(group - 0.5, lower=0)
    assert not np.isfinite(negative.aicc[0, BOUNDED]).any()


def test_a_declared_shape_that_fails_is_tried_once_more_as_if_undeclared():
    group = stats.lognorm(0.8).rvs(300, random_state=6)
    found = fitted(group, group, declared=["dimension", "lognormal"])
    assert found.family.tolist() == ["lognormal", "lognormal"]
    assert found.abandoned.tolist() == [True, False]
    assert found.accepted.all()


def test_an_undeclared_normal_shape_stays_normal_and_a_skewed_one_is_recognised():
    found = fitted(
        stats.norm(12, 0.01).rvs(300, random_state=1),
        stats.lognorm(0.5).rvs(300, random_state=1),
        stats.t(3, 20).rvs(300, random_state=1),
    )
    assert found.family.tolist() == ["normal", "lognormal", "student t"]
    assert found.heavy_tails.tolist() == [False, True, True]
    warned = fitted(stats.t(3, 20).rvs(60, random_state=8), declared="dimension")
    assert warned.heavy_tails[0]


def test_light_tails_fall_back_on_a_cautious_normal():
    group = stats.uniform(9, 2).rvs(300, random_state=1)
    found = fitted(group)
    assert found.family[0] == "normal" and found.cautious[0] and not found.accepted[0]
    assert found.note[0] == "cautious_normal"
    assert found.parameters[0, :2] == pytest.approx([group.mean(), group.std(ddof=1)])


def test_what_fits_nothing_is_refused_and_read_off_the_values_only_from_a_thousand_on():
    rng = np.random.default_rng(3)
    values = np.where(rng.random(3000) < 0.15, rng.normal(30, 1, 3000), rng.normal(20, 1, 3000))
    found = fitted(values[:999], values[:1000], values)
    assert found.note.tolist() == ["no_shape", "empirical", "empirical"]
    assert found.family.tolist() == ["", "empirical", "empirical"]
    assert np.isnan(shapes.quantiles(found, [0.5])[0, 0])
    q = shapes.quantiles(found, shapes.SPREAD)[2]
    assert q == pytest.approx(np.quantile(values, shapes.SPREAD, method="weibull"))
    assert np.isnan(shapes.quantiles(found, [0.2])[2, 0])
    assert np.isnan(shapes.ppm(found, *limits(0, 40, 3))).all()
    moved = shapes.quantiles(shapes.shifted(found, np.array([1.0, 1, 1])), shapes.SPREAD)[2]
    assert moved == pytest.approx(q + 1)
    assert shapes.quantiles(shapes.scaled(found, np.array([1, 1, 2.0])), shapes.SPREAD)[2] == pytest.approx(2 * q)


def test_bounds_read_off_the_values_are_those_of_the_binomial_distribution():
    rng = np.random.default_rng(3)
    values = np.where(rng.random(3000) < 0.15, rng.normal(30, 1, 3000), rng.normal(20, 1, 3000))
    groups = [values[:1000], values]
    found = fitted(*groups)
    middle, limit = np.median(values), 45.0
    both = bounded(found, groups, *limits(-np.inf, limit, 2), [1, 2])
    assert both.low[0] == 0  # 1000 values cannot bound a quantile that 1.35 of them are expected beyond
    largest = np.sort(values)[::-1]
    # the largest of 3000 exceeds the quantile with 98 %, the second largest with 92 %
    assert both.low[1] == pytest.approx((limit - middle) / (largest[0] - middle), rel=1e-3)
    within = int(stats.binom.ppf(0.95, 3000, shapes.SPREAD[0]))
    assert both.high[1] == pytest.approx((limit - middle) / (largest[within] - middle), rel=1e-3)
    chance = both.chance(np.array([both.low[1] / 2, both.low[1] / 2]))
    assert 0.85 < chance[0] < chance[1] <= 1
    assert (both.chance(5.0) < 0.01).all()


@pytest.mark.parametrize("step", (0.1, 0.5))
def test_a_coarse_record_is_not_taken_for_a_strange_shape(step):
    group = np.round(stats.gamma(4).rvs(1000, random_state=9) / step) * step
    coarse = fitted(group, declared="gamma", lower=0, step=step)
    assert coarse.family[0] == "gamma" and not coarse.abandoned[0]


def test_no_result_depends_on_other_characteristics_or_on_their_order(monkeypatch):
    rng = np.random.default_rng(12)
    groups = [
        maker(size)
        for size in (30, 47, 200, 350)
        for maker in (
            lambda n: rng.normal(12, 0.01, n),
            lambda n: rng.gamma(2, 1, n),
            lambda n: np.abs(rng.normal(0.4, 1, n)),
            lambda n: 20 + rng.standard_t(3, n),
            lambda n: rng.weibull(1.3, n),
        )
    ]
    count = len(groups)
    low, high = np.full(count, -np.inf), np.array([np.quantile(group, 0.99) * 1.1 for group in groups])
    seeds = np.arange(count) * 7919 + 3
    whole = fitted(*groups)
    bound = bounded(whole, groups, low, high, seeds)
    assert np.isfinite(bound.low).sum() >= 10
    order = rng.permutation(count)
    monkeypatch.setattr("portfolio.statistics.shape_choice.BLOCK", 300)
    mixed_groups = [groups[i] for i in order]
    mixed = fitted(*mixed_groups)
    mixed_bound = bounded(mixed, mixed_groups, low[order], high[order], seeds[order])
    assert mixed.family.tolist() == whole.family[order].tolist()
    assert mixed.parameters == pytest.approx(whole.parameters[order], nan_ok=True, rel=1e-12)
    assert mixed_bound.low == pytest.approx(bound.low[order], nan_ok=True, rel=1e-12)
    assert mixed_bound.high == pytest.approx(bound.high[order], nan_ok=True, rel=1e-12)
    assert mixed_bound.chance(1.0) == pytest.approx(bound.chance(1.0)[order], nan_ok=True, abs=1e-12)


def test_units_change_no_index_and_no_bound():
    groups = [stats.gamma(3).rvs(120, random_state=1), stats.foldnorm(1).rvs(120, random_state=2)]
    small, large = fitted(*groups), fitted(*[1000 * group for group in groups])
    assert small.family.tolist() == large.family.tolist()
    a = bounded(small, groups, *limits(-np.inf, 9, 2), [5, 6])
    b = bounded(large, [1000 * group for group in groups], *limits(-np.inf, 9000, 2), [5, 6])
    assert b.low == pytest.approx(a.low, rel=1e-6) and b.high == pytest.approx(a.high, rel=1e-6)


def test_bounds_enclose_the_index_and_agree_with_the_chance():
    group = stats.lognorm(0.4).rvs(150, random_state=2)
    found = fitted(group, declared="lognormal")
    low_limit, high_limit = limits(-np.inf, 4)
    low, high, chance = bounded(found, [group], low_limit, high_limit, [3])
    index = shapes.indices(found, low_limit, high_limit).cpk
    assert low[0] < index[0] < high[0]
    assert chance(low)[0] == pytest.approx(0.95, abs=1e-9)
    assert chance(high)[0] == pytest.approx(0.05, abs=1e-9)
    wider = bounded(found, [group], low_limit, high_limit, [3], n_effective=np.array([40.0]))
    assert wider.low[0] < low[0] and wider.high[0] > high[0]
    lenient = bounded(found, [group], low_limit, high_limit, [3], confidence=0.9)
    assert low[0] < lenient.low[0] < lenient.high[0] < high[0]


def test_the_lowest_plausible_family_sets_the_lower_bound():
    group = stats.gamma(6).rvs(80, random_state=5)
    found = fitted(group, declared="concentration")
    names = [family for family, there in zip(FAMILIES, found.plausible[0], strict=True) if there]
    assert len(names) >= 2
    low, high = limits(-np.inf, 20)
    together = bounded(found, [group], low, high, [3])
    alone = [bounded(fitted(group, declared=family), [group], low, high, [3]) for family in names]
    assert together.low[0] == pytest.approx(min(each.low[0] for each in alone), rel=1e-9)
    assert together.high[0] == pytest.approx(max(each.high[0] for each in alone), rel=1e-9)
    assert together.chance(together.low)[0] >= 0.95 and together.chance(together.high)[0] <= 0.05


def test_a_median_outside_its_limit_has_a_negative_index_with_bounds():
    group = stats.gamma(2).rvs(100, random_state=5)
    found = fitted(group, declared="gamma")
    low, high, chance = bounded(found, [group], *limits(-np.inf, 1), [3])
    index = shapes.indices(found, *limits(-np.inf, 1)).cpk
    assert low[0] < index[0] < high[0] < 0
    assert chance(1.33)[0] < 1e-6


def test_normal_refused_and_empty_characteristics_have_no_bounds_of_a_shape():
    rng = np.random.default_rng(1)
    groups = [rng.normal(5, 1, 200), [], [1.0] * 20, [1.0, 2.0, 3.0]]
    found = fitted(*groups)
    assert found.family.tolist() == ["normal", "", "", ""]
    assert found.note.tolist() == ["", "", "no_shape", "no_shape"]
    low, high, chance = bounded(found, groups, *limits(0, 9, 4), [1, 2, 3, 4])
    assert np.isnan(low).all() and np.isnan(high).all() and np.isnan(chance(1.33)).all()
    assert np.isnan(shapes.indices(found, *limits(0, 9, 4)).cpk[1:]).all()


def test_no_characteristic_at_all_is_no_error():
    found = shapes.fit(np.empty(0), np.array([0]), np.empty(0, dtype=object), np.empty(0), np.empty(0))
    assert len(found) == 0
    nothing = np.empty(0)
    low, high, chance = shape_bounds.bounds(
        found, nothing, np.array([0]), nothing, nothing, seeds=np.empty(0, dtype=np.uint64)
    )
    assert len(low) == len(high) == len(chance(1.33)) == 0


def test_a_confidence_that_is_no_probability_is_an_error():
    group = np.arange(1.0, 30)
    with pytest.raises(ValueError, match="confidence is 95"):
        bounded(fitted(group), [group], *limits(0, 40), [1], confidence=95)


def test_the_recording_step_is_taken_out_of_sigma_up_to_two_sigmas():
    """Sheppard (1898): s^2 - step^2 / 12; the simulation behind it is table 4 of the capability study."""
    rng = np.random.default_rng(21)
    for step in (0.25, 0.5, 1.0, 1.5):
        x = rng.normal(rng.random((400, 1)) * step, 1, (400, 500))
        plain = np.std(np.round(x / step) * step, axis=1, ddof=1)
        corrected = shapes.sheppard(plain, np.full(400, step))
        assert np.mean(corrected**2) == pytest.approx(1, abs=0.012)
    sigma = np.array([1.0, 1.0, 1.0, 0.0])
    assert shapes.sheppard(sigma, np.array([np.nan, 0.0, 2.5, 1.0])).tolist() == [1.0, 1.0, 1.0, 0.0]
