"""Control limits of location and spread charts, and the signals that break them.

Limits come from the process (within-subgroup spread), never from the specification. Vectorised over characteristics:
flat arrays hold one value per subgroup, and `of[i]:of[i + 1]` are the subgroups of characteristic i. The chart is
what is SHOWN; the verdict is another matter (`stability`), because rules made to watch one process as each point
arrives call nearly every stable process unstable when applied to months of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from portfolio.statistics import ragged
from portfolio.statistics.constants import c4, d2, d3
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.subgroups import Series, Subgroups

WIDTH = 3.0
"Control limits stand so many standard errors from the centre line (Shewhart 1931)."
LARGEST_FOR_RANGE = 9
"The range of ten values and more wastes what the standard deviation still sees (ISO 7870-2)."
SPREAD_RULE = 5
ROUNDING = 1e-12
"Relative size of a difference that is only rounding."


@dataclass(frozen=True)
class Rule:
    """`need` of the last `among` points between `low` and `high` sigma on one side of the centre line."""

    need: int
    among: int
    low: float
    high: float


WESTERN_ELECTRIC = (Rule(1, 1, WIDTH, np.inf), Rule(2, 3, 2.0, WIDTH), Rule(4, 5, 1.0, WIDTH), Rule(8, 8, 0.0, WIDTH))
"""Rules 1 to 4 (Western Electric 1956). A point beyond 3 sigma signals by rule 1 and does not count for the others, as
in the exact run lengths of Champ & Woodall (1987); `run_lengths` reproduces their table from these same rules."""


@dataclass(frozen=True)
class Charts:
    """Charts of K characteristics with G subgroups.

    `kind` (K,): 'individuals', 'mean and range', 'mean and s' or 'three-way'. `centre` (K,); `lower`, `upper` (G,)
    of the location; `spread` (G,) what the spread chart plots (moving range, range or s; NaN where there is none) with
    `spread_centre`, `spread_lower`, `spread_upper` (G,). `between_centre`, `between_upper` (K,): moving range of the
    subgroup means, three-way only. `sigma` (K,): standard error of a location point of average size. All in the unit
    of the characteristic; NaN where the stretch is too short for an estimate.
    """

    kind: NDArray[Any]
    centre: Floats
    lower: Floats
    upper: Floats
    spread: Floats
    spread_centre: Floats
    spread_lower: Floats
    spread_upper: Floats
    between_centre: Floats
    between_upper: Floats
    sigma: Floats


@dataclass(frozen=True)
class Signals:
    """`index` (S,) flat subgroup, `rule` (S,) 1-4 of the location or 5 for the spread; `count` (K,) of subgroups."""

    index: Ints
    rule: Ints
    count: Ints


def control_limits(series: Series, subgroups: Subgroups, layers: Bools) -> Charts:
    """Three-sigma limits from the stretch itself.

    Parameters
    ----------
    series, subgroups : G subgroups of K characteristics
    layers : (K,) True: two layers of common cause; the location is judged by the moving range of the subgroup means

    Sources: factors as in ISO 7870-2 and ASTM E2587, from exact constants. Individuals: mean +- 3 MRbar / d2(2).
    Equal sizes to 9: Rbar / d2(n). Larger or varying sizes: s / c4(n) weighted by its information (Burr 1969), each
    subgroup with limits of its own size. Three-way: limits of the means as if they were individuals.
    """
    of = subgroups.of
    owner = ragged.owners(of)
    size = series.size.astype(np.float64)
    smallest, largest = ragged.extremes(size, of)
    single = series.individuals
    ranged = ~single & (smallest == largest) & (largest <= LARGEST_FOR_RANGE)
    by_moving = single | layers  # each location point counts once, whatever its size
    kind = np.select(
        [single, by_moving, ranged], ["individuals", "three-way", "mean and range"], default="mean and s"
    ).astype(object)

    weight = np.where(by_moving[owner], 1.0, size)
    with np.errstate(invalid="ignore", divide="ignore"):
        centre = ragged.sums(weight * series.mean, of) / ragged.sums(weight, of)
        centre += ragged.sums(weight * (series.mean - centre[owner]), of) / ragged.sums(weight, of)
        average_size = ragged.sums(size, of) / ragged.lengths(of)

    moving = moving_ranges(series.mean, of)
    sigma_moving = _average(moving, of) / float(d2(2))
    sigma_within = np.where(
        ranged, _average(series.range, of) / d2(np.where(ranged, largest, np.nan)), sigma_from_s(series, of)
    )
    error = np.where(by_moving[owner], sigma_moving[owner], sigma_within[owner] / np.sqrt(size))

    one = single[owner]
    ranges = (single | ranged)[owner]  # a moving range is the range of two
    spread_centre, spread_lower, spread_upper = spread_limits(
        np.where(one, sigma_moving[owner], sigma_within[owner]), np.where(one, 2.0, size), ranges
    )
    between_centre, _, between_upper = spread_limits(
        np.where(kind == "three-way", sigma_moving, np.nan), np.full(len(of) - 1, 2.0), np.full(len(of) - 1, True)
    )
    return Charts(
        kind=kind,
        centre=centre,
        lower=centre[owner] - WIDTH * error,
        upper=centre[owner] + WIDTH * error,
        spread=np.where(one, moving, np.where(ranges, series.range, series.sd)),
        spread_centre=spread_centre,
        spread_lower=spread_lower,
        spread_upper=spread_upper,
        between_centre=between_centre,
        between_upper=between_upper,
        sigma=np.where(by_moving, sigma_moving, sigma_within / np.sqrt(average_size)),
    )


def spread_limits(sigma: Floats, size: Floats, by_range: Bools) -> tuple[Floats, Floats, Floats]:
    """Centre, lower and upper limit of the range (where `by_range`) or the standard deviation of `size` values, (G,).

    Mean +- 3 standard errors of the statistic in normal data, not below 0 (D3, D4, B3, B4 of ISO 7870-2). NaN for a
    size below 2 and for ranges of more than 100 values.
    """
    of_range = np.where(by_range, size, np.nan)
    share = c4(size)
    mean = np.where(by_range, d2(of_range), share)
    sd = np.where(by_range, d3(of_range), np.sqrt(1 - share**2))
    return mean * sigma, np.maximum(0.0, (mean - WIDTH * sd) * sigma), (mean + WIDTH * sd) * sigma


def sigma_from_s(series: Series, of: Ints) -> Floats:
    """Sigma inside subgroups from their standard deviations, (K,); NaN without a subgroup of two.

    Each s / c4(n) has variance sigma^2 (1 - c4^2) / c4^2; the weights are its inverse (Burr 1969). Equal sizes: mean s
    over c4.
    """
    share = c4(series.size)
    there = np.isfinite(share)
    share = np.where(there, share, 0.5)
    weight = np.where(there, share**2 / (1 - share**2), 0.0)
    total = ragged.sums(weight, of)
    estimate = ragged.sums(weight * np.where(there, series.sd, 0.0) / share, of)
    out: Floats = np.divide(estimate, total, out=np.full(len(total), np.nan), where=total > 0)
    return out


def moving_ranges(x: Floats, of: Ints) -> Floats:
    """|x[i] - x[i - 1]| inside each characteristic, (G,); NaN at the first."""
    out = np.abs(np.diff(x, prepend=np.nan))
    out[of[:-1][np.diff(of) > 0]] = np.nan
    return out


def signals(charts: Charts, series: Series, subgroups: Subgroups) -> Signals:
    """Western Electric rules on the location, and single points beyond the spread limits (rule 5).

    The point that completes a pattern carries the signal. No pattern crosses two characteristics. On a three-way chart
    the moving range of the means gives limits but no signals of its own: it would repeat those of the location.
    """
    of = subgroups.of
    centre = charts.centre[ragged.owners(of)]
    deviation = series.mean - centre
    # A difference in the last digits is rounding, not a signal (constant values have limits of no width).
    deviation = np.where(np.abs(deviation) <= ROUNDING * np.abs(centre), 0.0, deviation)
    with np.errstate(invalid="ignore", divide="ignore"):
        z = deviation / ((charts.upper - centre) / WIDTH)
    found = rules(np.where(np.isnan(z), 0.0, z), of)
    slack = ROUNDING * np.abs(centre)
    with np.errstate(invalid="ignore"):
        beyond = (charts.spread > charts.spread_upper + slack) | (charts.spread < charts.spread_lower - slack)
    found.append(beyond)
    index = np.concatenate([np.flatnonzero(hit) for hit in found]).astype(np.int64)
    rule = np.repeat(np.arange(1, SPREAD_RULE + 1), [int(hit.sum()) for hit in found])
    order = np.lexsort((rule, index))
    count = ragged.sums(np.logical_or.reduce(found), of).astype(np.int64)
    return Signals(index=index[order], rule=rule[order], count=count)


def rules(z: Floats, of: Ints) -> list[Bools]:
    """Which points of the standardised series `z` (G,) complete each rule of WESTERN_ELECTRIC; a list of (G,)."""
    position = np.arange(len(z)) - np.repeat(of[:-1], np.diff(of))
    found = []
    for rule in WESTERN_ELECTRIC:
        hit = np.zeros(len(z), dtype=bool)
        for side in (1, -1):
            inside = (side * z > rule.low) & (side * z <= rule.high)
            hit |= inside & (_last(inside, rule.among, position) >= rule.need)
        found.append(hit)
    return found


def _last(flag: Bools, among: int, position: Ints) -> Ints:
    """How many of the last `among` points of the same characteristic (this one included) are flagged."""
    total = np.concatenate(([0], np.cumsum(flag)))
    end = np.arange(1, len(flag) + 1)
    return np.asarray(total[end] - total[end - np.minimum(among, position + 1)], dtype=np.int64)


# Signalling subgroups of a stable normal process whose limits come from the same stretch: a + b m, fitted to simulated
# processes of m = 20, 30, 60, 120 and 400 subgroups of each size; 'python tests/benchmarks/expected_signals.py'.
EXPECTED_SIZE = (2, 3, 5, 9, 10, 25)
EXPECTED_INDIVIDUALS = (-0.209, 0.02365)
EXPECTED_SUBGROUPS = (
    (-0.115, -0.162, -0.189, -0.201, -0.203, -0.204),
    (0.02482, 0.02130, 0.01990, 0.01969, 0.01844, 0.01812),
)
EXPECTED_THREE_WAY = (
    (-0.180, -0.178, -0.175, -0.171, -0.165, -0.166),
    (0.02454, 0.02132, 0.02003, 0.01973, 0.01852, 0.01837),
)


def expected_signals(m: Ints, individuals: Bools, three_way: Bools, size: Floats) -> Floats:
    """Subgroups with a signal that a stable normal process of `m` subgroups would show on average, (K,).

    `size` (K,): usual subgroup size (NaN where there is none). Small subgroups signal more: the range of two is skewed.
    """
    typical = np.nan_to_num(size, nan=float(EXPECTED_SIZE[0]))
    a, b = (
        np.where(three_way, np.interp(typical, EXPECTED_SIZE, layered), np.interp(typical, EXPECTED_SIZE, plain))
        for layered, plain in zip(EXPECTED_THREE_WAY, EXPECTED_SUBGROUPS, strict=True)
    )
    a, b = np.where(individuals, EXPECTED_INDIVIDUALS[0], a), np.where(individuals, EXPECTED_INDIVIDUALS[1], b)
    return np.asarray(np.maximum(a + b * m, 0.0))


def _average(x: Floats, of: Ints) -> Floats:
    """Mean of each group without its NaN, (K,)."""
    there = np.isfinite(x)
    number = ragged.sums(there, of)
    total = ragged.sums(np.where(there, x, 0.0), of)
    out: Floats = np.divide(total, number, out=np.full(len(number), np.nan), where=number > 0)
    return out
