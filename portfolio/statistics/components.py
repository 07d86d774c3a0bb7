"""Variance components of a stretch: within subgroups, between them, between streams; and how much they are known.

The total sigma that a process is judged by adds all of them. Degrees of freedom and the effective number of values
for the mean say how well: when periods differ, 1,000 values of 25 periods are worth little more than 25
(capability study, section 2.4). Streams are fixed (the same cavities run next week); subgroups are random.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.subgroups import Subgroups

D2_OF_TWO = 2 / np.sqrt(np.pi)


@dataclass(frozen=True)
class Components:
    """All (K,). Sigmas in the unit of the characteristic; NaN where they cannot be estimated.

    `n_mean` effective number of values for the mean, `df` effective degrees of freedom of `sigma_total`;
    `between_p`, `stream_p` p-values of the F tests; `streams` number of streams (0 where none are named).
    """

    n: Ints
    mean: Floats
    sigma_overall: Floats
    sigma_within: Floats
    sigma_between: Floats
    sigma_stream: Floats
    sigma_total: Floats
    n_mean: Floats
    df: Floats
    between_p: Floats
    stream_p: Floats
    streams: Ints


def components(
    values: Floats, start: Ints, subgroups: Subgroups, stream: Ints, *, serial: Floats | None = None
) -> Components:
    """Components of K characteristics by moments.

    Parameters
    ----------
    values : (N,), sorted as `subgroups` cuts them; `start` (K + 1,)
    stream : (N,) stream of each value, -1 where none is named
    serial : (K,) autocorrelation of individuals whose neighbours lean on each other, NaN where it does not apply

    Source
    ------
    One-way analysis of variance with unequal sizes; Satterthwaite (1946) for the degrees of freedom; streams by the
    fitting of constants (Henderson 1953); individuals with autocorrelation: capability study, section 1.
    """
    n = np.diff(start)
    mean = ragged.means(values, start)
    overall = ragged.standard_deviations(values, start)
    streamed = _by_stream(values, start, stream, mean)
    # With several streams the layers are looked for in what is left when each stream's own mean is taken out.
    left = values - streamed.effect
    layers = _layers(left, start, subgroups, streamed.lost_df)
    several = layers.several

    total = np.where(several, layers.between + layers.within, overall**2)
    df = np.where(several, layers.df, n - 1.0)
    n_mean = np.where(several, layers.n_mean, n.astype(np.float64))
    between, within = layers.between, layers.within

    split = streamed.count > 1
    rest = np.where(several, layers.between + layers.within, streamed.within)
    total = np.where(split, rest + streamed.variance, total)
    df = np.where(split & ~several, n - streamed.count, df)

    # No variation between subgroups: the plain standard deviation knows as much and more degrees of freedom.
    plain = several & (layers.between == 0) & ~split
    total, df, n_mean = np.where(plain, overall**2, total), np.where(plain, n - 1.0, df), np.where(plain, n, n_mean)

    moving = _moving_sigma(values, start)
    within = np.where(several, within, moving**2)
    if serial is not None:
        leaning = np.isfinite(serial) & ~several
        with np.errstate(divide="ignore", invalid="ignore"):
            eff = n * (1 - serial) / (1 + serial)
            nu = n * (1 - serial**2) / (1 + serial**2) - 1
            wider = overall**2 * (n - 1) / (n - n / eff)
        total, df = np.where(leaning, wider, total), np.where(leaning, nu, df)
        n_mean = np.where(leaning, eff, n_mean)
    enough = n > 1
    return Components(
        n=n,
        mean=mean,
        sigma_overall=overall,
        sigma_within=np.sqrt(within),
        sigma_between=np.where(several, np.sqrt(between), np.nan),
        sigma_stream=np.where(split, np.sqrt(streamed.variance), np.nan),
        sigma_total=np.where(enough, np.sqrt(total), np.nan),
        n_mean=np.where(enough, n_mean, np.nan),
        df=np.where(enough, df, np.nan),
        between_p=layers.p,
        stream_p=streamed.p,
        streams=streamed.count,
    )


@dataclass(frozen=True)
class _Layers:
    several: Bools  # some subgroup holds more than one value
    within: Floats
    between: Floats
    n_mean: Floats
    df: Floats
    p: Floats


def _layers(values: Floats, start: Ints, subgroups: Subgroups, lost: Ints) -> _Layers:
    """Between and within subgroups; `lost` (K,): degrees of freedom that stream means have already taken."""
    of = subgroups.of
    n, b = np.diff(start).astype(np.float64), np.diff(of).astype(np.float64)
    size = np.diff(subgroups.start).astype(np.float64)
    means = ragged.means(values, subgroups.start)
    grand = ragged.means(values, start)
    inside = ragged.sums(ragged.squares_about(values, subgroups.start, means), of)
    outside = ragged.sums(size * (means - grand[ragged.owners(of)]) ** 2, of)
    squared = ragged.sums(size**2, of)
    df_in = n - b - lost
    several = (df_in > 0) & (b > 1) & (2 * ragged.sums(size > 1, of) >= b)
    with np.errstate(divide="ignore", invalid="ignore"):
        msw, msb = inside / df_in, outside / (b - 1)
        n0 = (n - squared / n) / (b - 1)
        between = np.maximum(0.0, (msb - msw) / n0)
        total = between + msw
        n_mean = total / (between * squared / n**2 + msw / n)
        df = total**2 / ((msb / n0) ** 2 / (b - 1) + ((1 - 1 / n0) * msw) ** 2 / df_in)
        p = stats.f.sf(msb / msw, b - 1, df_in)
    return _Layers(several, msw, between, n_mean, df, np.where(several, p, np.nan))


@dataclass(frozen=True)
class _Streams:
    count: Ints
    effect: Floats  # (N,) deviation of the value's stream from the mean of its characteristic
    within: Floats  # variance within streams
    variance: Floats  # component between streams, as it counts in the total
    p: Floats
    lost_df: Ints


def _by_stream(values: Floats, start: Ints, stream: Ints, mean: Floats) -> _Streams:
    """Streams as fixed effects: what their means differ by, freed of the noise of those means."""
    k = len(start) - 1
    owner = ragged.owners(start)
    named = (stream >= 0) & (ragged.sums(stream < 0, start)[owner] == 0)  # every value of it must name its stream
    effect = np.zeros(len(values))
    nothing = np.full(k, np.nan)
    if not named.any():
        return _Streams(np.zeros(k, dtype=np.int64), effect, nothing, np.zeros(k), nothing, np.zeros(k, dtype=np.int64))
    order = np.lexsort((stream, owner))
    order = order[named[order]]
    key_owner, key = owner[order], stream[order]
    fresh = np.ones(len(order), dtype=bool)
    fresh[1:] = (key[1:] != key[:-1]) | (key_owner[1:] != key_owner[:-1])
    first = np.flatnonzero(fresh)
    group = np.concatenate((first, [len(order)])).astype(np.int64)
    group_owner = key_owner[first]
    count = np.bincount(group_owner, minlength=k).astype(np.int64)
    size = np.diff(group).astype(np.float64)
    means = ragged.means(values[order], group)
    effect[order] = np.repeat(means - mean[group_owner], np.diff(group))
    inside = np.bincount(group_owner, ragged.squares_about(values[order], group, means), minlength=k)
    outside = np.bincount(group_owner, size * (means - mean[group_owner]) ** 2, minlength=k)
    n = np.bincount(group_owner, size, minlength=k)
    squared = np.bincount(group_owner, size**2, minlength=k)
    with np.errstate(divide="ignore", invalid="ignore"):
        msw, msb = inside / (n - count), outside / (count - 1)
        n0 = (n - squared / n) / (count - 1)
        # Fixed streams: next week's parts come from the same ones, in the same shares w, so the variance among them
        # is the component times 1 - sum of w squared.
        variance = np.maximum(0.0, (msb - msw) / n0) * (1 - squared / n**2)
        p = stats.f.sf(msb / msw, count - 1, n - count)
    split = (count > 1) & (n > count)
    effect = np.where(split[owner], effect, 0.0)
    return _Streams(
        count, effect, msw, np.where(split, variance, 0.0), np.where(split, p, np.nan), np.where(split, count - 1, 0)
    )


def _moving_sigma(values: Floats, start: Ints) -> Floats:
    step = np.abs(np.diff(values, prepend=np.nan))
    n = np.diff(start)
    step[start[:-1][n > 0]] = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        return ragged.sums(step, start) / (n - 1) / D2_OF_TWO
