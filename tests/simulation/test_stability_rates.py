"""Error rates of the stability verdict over whole portfolios, by simulation with known truth and fixed seeds."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from portfolio.statistics import discoveries, stability
from portfolio.statistics.subgroups import form, summarise

SHAPES = {
    "normal": lambda rng, size: rng.standard_normal(size),
    "lognormal .35": lambda rng, size: rng.lognormal(0, 0.35, size),
    "folded": lambda rng, size: np.abs(rng.standard_normal(size)),
    "uniform": lambda rng, size: rng.random(size),
    "gamma 2": lambda rng, size: rng.gamma(2, 1, size),
    "rounded": lambda rng, size: np.round(rng.standard_normal(size) / 0.6) * 0.6,
}


def evidence(x: np.ndarray) -> stability.Evidence:
    """Evidence for x (K, m, n): K characteristics, m subgroups of n."""
    k, m, n = x.shape
    values, start = x.ravel(), np.arange(k + 1) * m * n
    time = np.tile(np.arange(m * n) * 60_000_000, k)
    groups = form(time, np.full(len(values), -1), start, np.full(k, n), np.full(k, np.nan))
    return stability.assess(values, start, groups, summarise(values, time, groups))


def joined(parts: list[stability.Evidence]) -> stability.Evidence:
    names = [name for name in stability.Evidence.__dataclass_fields__ if not name.startswith("extreme")]
    empty = np.empty(0, dtype=np.int64)
    return stability.Evidence(
        **{name: np.concatenate([getattr(part, name) for part in parts]) for name in names},
        extreme_of=empty,
        extreme_index=empty,
    )


def stable_portfolio(rng: np.random.Generator, count: int) -> list[stability.Evidence]:
    """Stable characteristics of mixed shapes and designs."""
    designs = [(60, 1), (120, 1), (25, 5), (60, 5), (78, 5), (120, 4)]
    each = count // (len(SHAPES) * len(designs))
    return [evidence(make(rng, (each, m, n))) for make in SHAPES.values() for m, n in designs]


def disturbed_portfolio(rng: np.random.Generator, count: int) -> list[stability.Evidence]:
    """Steps, drifts, cycles, wandering and widened spread of a size that deserves attention."""
    m, n, each = 78, 5, count // 5
    t = np.arange(m)
    noise = [rng.standard_normal((each, m, n)) for _ in range(5)]
    at = rng.integers(m // 4, 3 * m // 4, (each, 1))
    noise[0] += (1.2 * (t >= at))[:, :, None]
    noise[1] += np.linspace(0, 2, m)[None, :, None]
    noise[2] += np.sin(2 * np.pi * t / 12)[None, :, None]
    noise[3] += np.cumsum(rng.standard_normal((each, m)) * 2 / np.sqrt(m), axis=1)[:, :, None]
    noise[4] *= np.where(t >= at, 2.0, 1.0)[:, :, None]
    return [evidence(x) for x in noise]


def test_stable_characteristics_of_mixed_shapes_are_rarely_called_unstable():
    """2,000 stable ones: at q = .05 over the whole portfolio nearly none is called; at p < .01 about one in a hundred."""
    parts = joined(stable_portfolio(np.random.default_rng(11), 2_016))
    judged = parts.judgeable
    assert judged.sum() == 2_016
    said, _ = stability.verdict(parts, discoveries.adjusted(parts.p))
    assert (said == "unstable").sum() <= 6
    alone = (parts.p[judged] < 0.01).sum()
    # Study, section 1: 0.2 to 2.2 % per cell; the pooled share must lie in the binomial 99.9 % range of 1.5 %.
    assert alone <= stats.binom.isf(0.001, int(judged.sum()), 0.015)
    assert alone >= stats.binom.ppf(0.001, int(judged.sum()), 0.004)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_false_discoveries_stay_near_q_with_thirty_percent_disturbed(seed):
    rng = np.random.default_rng(seed)
    calm, moved = stable_portfolio(rng, 756), disturbed_portfolio(rng, 320)
    parts = joined([*calm, *moved])
    truth = np.concatenate([np.zeros(sum(len(e.m) for e in calm), bool), np.ones(sum(len(e.m) for e in moved), bool)])
    said, _ = stability.verdict(parts, discoveries.adjusted(parts.p))
    called = said == "unstable"
    share = (called & ~truth).sum() / called.sum()
    assert share <= 0.05 + 2 * np.sqrt(0.05 * 0.95 / called.sum())
    assert called[truth].mean() >= 0.80


@pytest.mark.parametrize(
    ("m", "n"), [(20, 5), (37, 1), (37, 5), (60, 1), (60, 5), (240, 1), (240, 5), (1_000, 1), (1_000, 5)]
)
def test_p_values_are_uniform_under_the_null(m, n):
    """Each part by itself, 600 replicates: Kolmogorov-Smirnov against the uniform, with ties by rounding."""
    rng = np.random.default_rng([m, n])
    parts = evidence(np.round(rng.standard_normal((600, m, n)), 2))
    for name in ("p_step", "p_serial", "p_cycle", "p_spread"):
        p = getattr(parts, name)
        assert stats.kstest(p[~np.isnan(p)], "uniform").pvalue > 1e-4, name
    assert stats.binomtest(int((parts.p_step < 0.01).sum()), 600, 0.01).pvalue > 1e-4


def test_independent_batches_are_layers_and_not_instability():
    """Study, section 5: batch effect 0.5 sd, m = 60, n = 5: 93 % end as layers, 1 % unstable."""
    rng = np.random.default_rng(5)
    x = rng.standard_normal((500, 60, 5)) + 0.5 * rng.standard_normal((500, 60, 1))
    parts = evidence(x)
    said, note = stability.verdict(parts, np.where(parts.p < 0.01, 0.01, 1.0))
    assert (note == "layers").mean() >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 500)
    assert (said == "unstable").mean() <= 0.01 + 3 * np.sqrt(0.01 * 0.99 / 500)


@pytest.mark.parametrize(
    ("disturb", "kinds", "share"),
    [
        (lambda t, m, rng, k: 1.5 * (t >= rng.integers(m // 4, 3 * m // 4, (k, 1))), {"step", "several steps"}, 0.72),
        (lambda t, m, rng, k: np.broadcast_to(np.linspace(0, 2, m), (k, m)), {"drift"}, 0.95),
        (lambda t, m, rng, k: np.broadcast_to(np.sin(2 * np.pi * t / 12), (k, m)), {"cycle"}, 0.75),
        (lambda t, m, rng, k: np.broadcast_to(0.75 * (-1.0) ** t, (k, m)), {"alternation"}, 0.98),
    ],
)
def test_the_kind_is_named_right_as_often_as_in_the_study(disturb, kinds, share):
    """Section 6, m = 60, n = 5."""
    rng, k, m = np.random.default_rng(8), 300, 60
    x = rng.standard_normal((k, m, 5)) + disturb(np.arange(m), m, rng, k)[:, :, None]
    parts = evidence(x)
    found = parts.p < 0.01
    right = np.isin(parts.kind[found], list(kinds)).mean()
    assert right >= share - 2 * np.sqrt(share * (1 - share) / found.sum())


def test_a_step_of_one_and_a_half_sd_is_dated_within_three_subgroups():
    rng, k, m = np.random.default_rng(9), 300, 120
    at = rng.integers(m // 4, 3 * m // 4, (k, 1))
    parts = evidence(rng.standard_normal((k, m, 5)) + (1.5 * (np.arange(m) >= at))[:, :, None])
    found = (parts.p < 0.01) & np.isin(parts.kind, ["step", "several steps"])
    position = parts.change - np.arange(k) * m
    assert (np.abs(position - at[:, 0])[found] <= 3).mean() >= 0.97
    assert np.nanmedian(parts.change_size[found]) == pytest.approx(1.5, abs=0.05)


def test_a_change_of_the_subgroup_size_is_no_change_of_the_process():
    """Sampling goes from 5 to 3 in the middle: the share called unstable at p < .01 stays near 1 %."""
    rng, k, m = np.random.default_rng(10), 400, 80
    sizes = np.where(np.arange(m) < m // 2, 5, 3)
    n = int(sizes.sum())
    values, start = rng.standard_normal(k * n), np.arange(k + 1) * n
    label = np.tile(np.repeat(np.arange(m), sizes), k)
    groups = form(np.tile(np.arange(n), k), label, start, np.zeros(k, dtype=np.int64), np.full(k, np.nan))
    parts = stability.assess(values, start, groups, summarise(values, np.tile(np.arange(n), k), groups))
    assert (parts.p < 0.01).sum() <= stats.binom.isf(0.001, k, 0.015)
