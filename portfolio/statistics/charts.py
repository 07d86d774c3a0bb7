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
SPREAD_RULE = 5


@dataclass(frozen=True)
class Charts:
    """Charts of K characteristics with G subgroups.

    `kind` (K,): 'individuals', 'mean and range', 'mean and s' or 'three-way'. `centre` (K,); `lower`, `upper` (G,)
    of the location; `spread` (G,) what the spread chart plots (moving range, range or s; NaN where there is none) with
    `spread_centre`, `spread_lower`, `spread_upper` (G,). `between_centre`, `between_upper` (K,): moving range of the
    subgroup means, three-way only. All in the unit of the characteristic.
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
    layers : (K,) True: two layers of common cause; the location is judged by the moving range of the subgroup means

    Sources: factors as in ISO 7870-2 and ASTM E2587, from exact constants. Individuals: mean +- 3 MRbar / d2(2).
    Equal sizes to 9: Rbar / d2(n). Larger or varying sizes: average of s / c4(n), each subgroup with limits of its own
    size. Three-way: limits of the means as if they were individuals.
    """
    of = subgroups.of
    count, owner = len(of) - 1, ragged.owners(of)
    size = series.size.astype(np.float64)
    weight = ragged.sums(size, of)
    with np.errstate(invalid="ignore", divide="ignore"):
        grand = ragged.sums(series.mean * size, of) / weight
    smallest, largest = ragged.extremes(size, of)
    single = series.individuals
    ranged = ~single & (smallest == largest) & (largest <= LARGEST_FOR_RANGE)
    with_s = ~single & ~ranged
    three_way = layers & ~single
    kind = np.select(
        [single, three_way, ranged], ["individuals", "three-way", "mean and range"], default="mean and s"
    ).astype(object)

    moving = moving_ranges(series.mean, of)
    mean_moving = _average(moving, of)
    two = np.full(1, 2)
    d2_two, d3_two = float(d2(two)[0]), float(d3(two)[0])
    sigma_moving = mean_moving / d2_two

    by_range, by_s = series.range / d2(series.size), series.sd / c4(size)
    sigma_within = np.where(ranged, _average(by_range, of), _average(by_s, of))

    standard_error = np.where((single | three_way)[owner], sigma_moving[owner], sigma_within[owner] / np.sqrt(size))
    if single.any():
        grand = np.where(single, ragged.means(series.mean, of), grand)
    lower = grand[owner] - WIDTH * standard_error
    upper = grand[owner] + WIDTH * standard_error

    spread = np.select([single[owner], ranged[owner]], [moving, series.range], default=series.sd)
    centre_factor = np.select([single[owner], ranged[owner]], [np.full(len(size), d2_two), d2(series.size)], c4(size))
    sd_factor = np.select(
        [single[owner], ranged[owner]], [np.full(len(size), d3_two), d3(series.size)], np.sqrt(1 - c4(size) ** 2)
    )
    sigma = np.where(single, sigma_moving, sigma_within)[owner]
    spread_centre = centre_factor * sigma
    return Charts(
        kind=kind,
        centre=grand,
        lower=lower,
        upper=upper,
        spread=spread,
        spread_centre=spread_centre,
        spread_lower=np.maximum(0.0, spread_centre - WIDTH * sd_factor * sigma),
        spread_upper=spread_centre + WIDTH * sd_factor * sigma,
        between_centre=np.where(three_way, mean_moving, np.nan) if count else np.empty(0),
        between_upper=np.where(three_way, mean_moving * (1 + WIDTH * d3_two / d2_two), np.nan)
        if count
        else np.empty(0),
    )


def moving_ranges(x: Floats, of: Ints) -> Floats:
    """|x[i] - x[i - 1]| inside each characteristic, (G,); NaN at the first."""
    out = np.abs(np.diff(x, prepend=np.nan))
    out[of[:-1][np.diff(of) > 0]] = np.nan
    return out


def signals(charts: Charts, series: Series, subgroups: Subgroups) -> Signals:
    """Western Electric rules on the location and single points beyond the spread limits.

    1: beyond 3 sigma. 2: two of three beyond 2 sigma on one side. 3: four of five beyond 1 sigma on one side.
    4: eight in a row on one side. Points beyond 3 sigma signal by rule 1 and do not count for rules 2 to 4 (Champ &
    Woodall 1987). The point that completes a pattern carries the signal. No pattern crosses two characteristics.
    """
    of = subgroups.of
    centre = charts.centre[ragged.owners(of)]
    with np.errstate(invalid="ignore", divide="ignore"):
        z = (series.mean - centre) / ((charts.upper - centre) / WIDTH)
    z = np.where(np.isfinite(z), z, 0.0)
    return _collect(rules(z, of), charts.spread, charts.spread_lower, charts.spread_upper, of)


def rules(z: Floats, of: Ints) -> list[Bools]:
    """Which points of the standardised series `z` (G,) complete each of the four rules; a list of (G,)."""
    position = np.arange(len(z)) - np.repeat(of[:-1], np.diff(of))
    beyond = np.abs(z) > WIDTH
    found = [beyond]
    for need, among, above in ((2, 3, 2.0), (4, 5, 1.0), (8, 8, 0.0)):
        hit = np.zeros(len(z), dtype=bool)
        for side in (1, -1):
            inside = (side * z > above) & ~beyond
            hit |= inside & (_last(inside, among, position) >= need)
        found.append(hit)
    return found


def _last(flag: Bools, among: int, position: Ints) -> Ints:
    """How many of the last `among` points of the same characteristic (this one included) are flagged."""
    total = np.concatenate(([0], np.cumsum(flag)))
    end = np.arange(1, len(flag) + 1)
    return total[end] - total[end - np.minimum(among, position + 1)]


def _collect(found: list[Bools], spread: Floats, lower: Floats, upper: Floats, of: Ints) -> Signals:
    with np.errstate(invalid="ignore"):
        found = [*found, (spread > upper) | (spread < lower)]
    index = np.concatenate([np.flatnonzero(hit) for hit in found]).astype(np.int64)
    rule = np.repeat(np.arange(1, SPREAD_RULE + 1), [int(hit.sum()) for hit in found])
    any_rule = np.logical_or.reduce(found)
    return Signals(index=index, rule=rule, count=ragged.sums(any_rule, of).astype(np.int64))


# Signalling subgroups of a stable normal process with limits from the same stretch: a + b m, by least squares through
# a simulation of 4,000 processes at m = 20, 30, 60, 120, 400 (tests/benchmarks/expected_signals.py, seed 1).
EXPECTED = {"individuals": (-0.22, 0.0237), "subgroups": (-0.19, 0.0203), "three-way": (-0.17, 0.0201)}


def expected_signals(m: Ints, individuals: Bools, three_way: Bools) -> Floats:
    """Subgroups with a signal that a stable normal process of `m` subgroups would show on average, (K,)."""
    a, b = np.select(
        [individuals[None, :], three_way[None, :]],
        [np.array(EXPECTED["individuals"])[:, None], np.array(EXPECTED["three-way"])[:, None]],
        default=np.array(EXPECTED["subgroups"])[:, None],
    )
    return np.maximum(a + b * m, 0.0)


def _average(x: Floats, of: Ints) -> Floats:
    """Mean of each group without its NaN, (K,)."""
    there = np.isfinite(x)
    number = ragged.sums(there, of)
    total = ragged.sums(np.where(there, x, 0.0), of)
    return np.divide(total, number, out=np.full(len(number), np.nan), where=number > 0)
