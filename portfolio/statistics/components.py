"""Variance components of a stretch: within subgroups, between them, between streams; and how well they are known.

The total sigma that a process is judged by adds all of them. Degrees of freedom and the effective number of values
for the mean say how well: when periods differ, 1,000 values of 25 periods are worth little more than 25
(capability study, section 2.4). Streams are fixed (the same cavities run next week, in the same shares); subgroups
are random.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.streams import Streams, split_by_stream
from portfolio.statistics.subgroups import Subgroups

D2_OF_TWO = 2 / np.sqrt(np.pi)


@dataclass(frozen=True)
class Components:
    """All (K,). Sigmas in the unit of the characteristic; NaN where they cannot be estimated or do not apply.

    `sigma_overall` plain standard deviation; `sigma_within` inside subgroups with the streams in it (individuals:
    mean moving range / d2); `sigma_total` what the process is judged by, its square being the sum of those of
    `sigma_between` (NaN for individuals), `sigma_stream` (NaN without streams) and `sigma_error` (what is left).
    `n_mean` effective number of values for the mean (sigma_total / sqrt(n_mean) is its standard error), `df` effective
    degrees of freedom of `sigma_total`; `between_p`, `stream_p` p-values of the F tests; `streams` number of named
    streams (0 where none are named).
    """

    n: Ints
    mean: Floats
    sigma_overall: Floats
    sigma_within: Floats
    sigma_between: Floats
    sigma_stream: Floats
    sigma_error: Floats
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
    values : (N,) unit of the characteristic, in the order in which `subgroups` cuts them
    start : (K + 1,) starts of the characteristics
    stream : (N,) stream of each value, -1 where none is named
    serial : (K,) lag-1 autocorrelation of the subgroup means (individuals: of the values) of characteristics whose
        neighbours lean on each other, NaN where it does not apply

    Source
    ------
    One-way analysis of variance with unequal sizes, Satterthwaite (1946) for the degrees of freedom; streams by
    fitting constants (Henderson 1953, method 3 with fixed streams; equal to method 1 in balanced data, and unbiased
    where streams are spread unevenly over subgroups); autocorrelation: capability study, section 1, carried over from
    values to subgroup means. All formulas beside `_estimate`.
    """
    n = np.diff(start)
    mean = ragged.means(values, start)
    overall = ragged.standard_deviations(values, start)
    left = values - np.repeat(mean, n)  # sums of squares keep their digits (StRD)
    leaning = np.full(len(n), np.nan) if serial is None else np.where(np.abs(serial) < 1, serial, np.nan)

    design = _design(left, start, subgroups)
    alike = _estimate(design, design.squares, design.between, np.ones(len(n)), leaning)
    found, between_p, stream_p = alike, alike.between_p, np.full(len(n), np.nan)

    split = split_by_stream(left, start, subgroups, stream)
    if split.used.any():
        differing = _estimate(design, *_without_streams(design, split), leaning, split)
        # Streams whose means differ by no more than their noise are one stream.
        found = _choose(split.used & (differing.stream > 0), differing, alike)
        between_p = np.where(split.used, differing.between_p, between_p)
        stream_p = np.where(split.used, differing.stream_p, stream_p)

    within = np.where(design.layered, design.inside / np.maximum(design.n - design.b, 1), _moving(values, start) ** 2)
    enough = n > 1
    return Components(
        n=n,
        mean=mean,
        sigma_overall=overall,
        sigma_within=np.sqrt(np.where(enough, within, np.nan)),
        sigma_between=np.sqrt(np.where(design.layered, found.between, np.nan)),
        sigma_stream=np.sqrt(np.where(split.used, found.stream, np.nan)),
        sigma_error=np.sqrt(np.where(enough, found.error, np.nan)),
        sigma_total=np.sqrt(np.where(enough, found.between + found.stream + found.error, np.nan)),
        n_mean=np.where(enough, found.n_mean, np.nan),
        df=np.where(enough, found.df, np.nan),
        between_p=between_p,
        stream_p=stream_p,
        streams=split.named,
    )


@dataclass(frozen=True)
class _Design:
    """Sizes and sums of squares of K characteristics cut into subgroups, all (K,)."""

    n: Floats  # values
    b: Floats  # subgroups
    squared: Floats  # sum of squared subgroup sizes, divided by n
    squares: Floats  # about the mean
    inside: Floats  # about the subgroup means
    between: Floats  # of the subgroup means about the mean, weighted with their sizes
    layered: Bools  # at least half of several subgroups hold several values


def _design(left: Floats, start: Ints, subgroups: Subgroups) -> _Design:
    of = subgroups.of
    n, b = np.diff(start).astype(np.float64), np.diff(of).astype(np.float64)
    size = np.diff(subgroups.start).astype(np.float64)
    means = ragged.means(left, subgroups.start)
    inside = ragged.sums(ragged.squares_about(left, subgroups.start, means), of)
    with np.errstate(invalid="ignore", divide="ignore"):
        squared = ragged.sums(size**2, of) / n
    return _Design(
        n=n,
        b=b,
        squared=squared,
        squares=ragged.sums(left**2, start),
        inside=inside,
        between=ragged.sums(size * means**2, of),
        layered=(n > b) & (b > 1) & (2 * ragged.sums(size > 1, of) >= b),
    )


def _without_streams(design: _Design, split: Streams) -> tuple[Floats, Floats, Floats]:
    """Squares about the stream means, those of the subgroups beyond the streams, number of streams."""
    error = design.inside - split.explained
    return split.inside, np.maximum(split.inside - error, 0.0), split.count


@dataclass(frozen=True)
class _Estimate:
    between: Floats
    stream: Floats
    error: Floats
    n_mean: Floats
    df: Floats
    between_p: Floats
    stream_p: Floats


def _estimate(
    design: _Design, squares: Floats, between: Floats, a: Floats, serial: Floats, split: Streams | None = None
) -> _Estimate:
    """Components of n values in b subgroups and `a` streams; `squares` about stream means, `between` beyond them.

    Expected mean squares (sigma_e error, sigma_b between subgroups, S = sum of n_i (stream mean - mean)^2):
        MS error                      sigma_e^2
        MS subgroups beyond streams   sigma_e^2 + n0 sigma_b^2,  n0 = (n - k_ba) / df_b
        SS streams                    S + (k_ba - k_b) sigma_b^2 + (a - 1) sigma_e^2
    with k_ba = sum n_ij^2 / n_i over streams i and subgroups j, k_b = sum n_j^2 / n. The fixed streams add S / n,
    which is Henderson's component times 1 - sum of squared shares.
    """
    n, b, k_b = design.n, design.b, design.squared
    k_ba = k_b if split is None else split.crossed
    rank = np.zeros(len(n)) if split is None else split.rank
    outside = np.zeros(len(n)) if split is None else split.outside
    error = design.inside - (0.0 if split is None else split.explained)
    df_e, df_b = n - b - rank, b + rank - a
    r = np.where(np.isfinite(serial), serial, 0.0)
    share = (1 - r**2) / (1 + r**2)  # of the degrees of freedom, and 1 / longer of the values for the mean
    longer = np.minimum((1 + r) / (1 - r), np.maximum(b / 2, 1.0))  # two independent values are left at least

    with np.errstate(divide="ignore", invalid="ignore"):
        n0 = (n - k_ba) / df_b
        mse = np.maximum(error, 0.0) / df_e
        msb = between / df_b * (b - 1) / (b - longer)
        freedom_b = df_b * np.maximum(b * share - 1, 0.0) / (b - 1)
        var_b = (msb - mse) / n0
        layered = design.layered & (df_e > 0) & (df_b > 0) & (var_b > 0)

        # Individuals, or no variation between subgroups: one error with all that the streams leave.
        leaning = np.where(design.layered, 1.0, (n - 1) / (n - longer))
        pooled = squares / (n - a) * leaning
        freedom = np.where(design.layered, n - a, (n - a) * np.maximum(n * share - 1, 0.0) / (n - 1))

        var_b, var_e = np.where(layered, var_b, 0.0), np.where(layered, mse, pooled)
        noise = np.where(a > 1, (k_ba - k_b) / np.maximum(a - 1, 1) * var_b + var_e, 0.0)
        stream = np.maximum(outside - (a - 1) * noise, 0.0) / n

        # Satterthwaite: the total is a sum of mean squares with these weights.
        weight_b = np.where(layered, (1 - (k_ba - k_b) / n) / n0, 0.0)
        weight_e = 1 - (a - 1) / n - np.where(layered, weight_b, 0.0)
        total = var_b + stream + var_e
        uncertain = (
            np.where(layered, (weight_b * msb) ** 2 / freedom_b, 0.0)
            + (weight_e * var_e) ** 2 / np.where(layered, df_e, freedom)
            + ((a - 1) * noise**2 + 2 * noise * n * stream) / n**2
        )
        mixed = (layered | (a > 1)) & (total > 0)  # elsewhere whole numbers stay whole
        df = np.where(mixed, total**2 / uncertain, freedom)
        of_mean = (var_b * k_b + var_e) * longer / n
        n_mean = np.where(mixed & (of_mean > 0), total / of_mean, n / longer)

        tested = design.layered & (df_e > 0) & (df_b > 0)
        between_p = np.where(tested, stats.f.sf(between / df_b / mse, df_b, df_e), np.nan)
        stream_p = np.full(len(n), np.nan)
        if split is not None:
            # Connected streams are compared inside subgroups; others against what subgroups vary by.
            inside = tested & (rank == a - 1)
            u = np.where(layered, (k_ba - k_b) / (a - 1) / n0, 0.0)
            df_n = np.where(layered, noise**2 / ((u * msb) ** 2 / freedom_b + ((1 - u) * mse) ** 2 / df_e), freedom)
            stream_p = np.where(
                inside,
                stats.f.sf(split.explained / (a - 1) / mse, a - 1, df_e),
                stats.f.sf(outside / (a - 1) / noise, a - 1, df_n),
            )
    return _Estimate(var_b, stream, var_e, n_mean, df, between_p, stream_p)


def _choose(where: Bools, one: _Estimate, other: _Estimate) -> _Estimate:
    return _Estimate(**{name: np.where(where, getattr(one, name), value) for name, value in vars(other).items()})


def _moving(values: Floats, start: Ints) -> Floats:
    """Mean moving range / d2 of each characteristic, (K,); NaN below two values."""
    step = np.abs(np.diff(values, prepend=np.nan))
    n = np.diff(start)
    step[start[:-1][n > 0]] = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(n > 1, ragged.sums(step, start) / (n - 1) / D2_OF_TWO, np.nan)
