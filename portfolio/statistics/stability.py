"""The stability verdict: exchangeability in time, calibrated for length and shape; kind, date and size of a change.

`assess` looks at each characteristic by itself. `verdict` needs the q-values of the whole portfolio. Specification
limits are never read here. Method: stability study, sections 3 to 8.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from portfolio.statistics import autocorrelation, kinds, ragged
from portfolio.statistics.exchangeability import Parts, combined, parts
from portfolio.statistics.isolated import isolated_extremes
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.subgroups import Series, Subgroups

LAYERS_P = 0.01
"Between against within subgroups: below this p the process has two layers of common cause."
RESIDUAL_P = 0.01
LEAN_UNDECLARED, LEAN_DECLARED = 0.6, 0.9
"Largest autocorrelation that counts as stable, without and with a declaration in the registry."
SETTLED_SUBGROUPS = 25
SHORT = 25
LOOKS_DISTURBED = 0.2
"Kinds are named below this p: every later verdict 'unstable' lies far below."

Words = NDArray[Any]


@dataclass(frozen=True)
class Evidence:
    """What a verdict needs of each characteristic; (K,) arrays, NaN or -1 where it does not apply.

    `change`, `settled`: flat index of the first subgroup after the largest change / of a settled last stretch.
    `change_size` in the unit of the characteristic, `change_sigma` in within-process sigmas, `period` in subgroups.
    `extreme_of`, `extreme_index`: flat arrays of the isolated extremes (characteristic, flat subgroup).
    """

    m: Ints
    n: Ints
    individuals: Bools
    judgeable: Bools
    reason: Words
    short: Bools
    p_step: Floats
    p_serial: Floats
    p_cycle: Floats
    p_spread: Floats
    p_isolated: Floats
    p: Floats
    between_p: Floats
    movement_share: Floats
    serial: Floats
    phi: Floats
    residual_p: Floats
    wear_p: Floats
    group: Words
    kind: Words
    change: Ints
    change_size: Floats
    change_sigma: Floats
    period: Floats
    spread_ratio: Floats
    settled: Ints
    extreme_of: Ints
    extreme_index: Ints


def assess(
    values: Floats,
    start: Ints,
    subgroups: Subgroups,
    series: Series,
    *,
    minimum_subgroups: int = 20,
    minimum_values: int = 30,
    expected: Words | None = None,
) -> Evidence:
    """Evidence for or against stability of K characteristics.

    Parameters
    ----------
    values : (N,) measurements of the stretch, sorted by characteristic and time; `start` (K + 1,)
    subgroups, series : of the same values (`subgroups.form`, `subgroups.summarise`)
    minimum_subgroups, minimum_values : below these (subgroups, or single values) nothing is judged
    expected : (K,) '' | 'autocorrelation' | 'wear', as declared
    """
    of, single = subgroups.of, series.individuals
    m, n = np.diff(of), np.diff(start)
    declared = np.full(len(m), "", dtype=object) if expected is None else expected
    spread_of_values = _spread(values, start, subgroups, series)
    reason = _why_not(values, start, m, n, single, minimum_subgroups, minimum_values)
    judgeable = reason == ""

    location, spread = _comparable(series, of, spread_of_values)
    found = parts(location, spread, of, single)
    extremes = isolated_extremes(values, start, subgroups.start, of)
    p = combined(found.p_step, found.p_serial, found.p_cycle, found.p_spread, extremes.p)

    phi = autocorrelation.corrected(found.serial, m)
    leaning = judgeable & (phi > 0) & (found.p_serial < LOOKS_DISTURBED)
    residual, residual_of = autocorrelation.residuals(found.scores, of, phi, leaning)
    residual_p = _location_p(residual, residual_of)
    worn = declared == "wear"
    wear_p = np.full(len(m), np.nan)
    if worn.any():
        flat = autocorrelation.without_wear(series.mean, of, worn)
        again = parts(flat, spread, of, single)
        wear_p = np.where(worn, combined(again.p_step, again.p_serial, again.p_cycle, again.p_spread), np.nan)

    asked = judgeable & (p < LOOKS_DISTURBED)
    named = kinds.name(found, extremes.p, of, asked)
    change, size, sigma = _change(series, of, named, spread_of_values.within)
    waves = np.where(named.kind == kinds.CYCLE, found.cycles, np.nan)
    with np.errstate(divide="ignore", invalid="ignore"):
        period = m / waves
    return Evidence(
        m=m, n=n, individuals=single, judgeable=judgeable, reason=reason, short=m < SHORT,
        p_step=_only(found.p_step, judgeable), p_serial=_only(found.p_serial, judgeable),
        p_cycle=_only(found.p_cycle, judgeable), p_spread=_only(found.p_spread, judgeable),
        p_isolated=_only(extremes.p, judgeable), p=_only(p, judgeable),
        between_p=spread_of_values.between_p,
        movement_share=_movement_share(series, of, spread_of_values.total, named.rhythm),
        serial=found.serial, phi=phi, residual_p=residual_p, wear_p=wear_p,
        group=named.group, kind=named.kind, change=change, change_size=size, change_sigma=sigma, period=period,
        spread_ratio=_spread_ratio(series, of, named, single),
        settled=_settled(location, spread, of, single, named, asked),
        extreme_of=extremes.of[judgeable[extremes.of]], extreme_index=extremes.index[judgeable[extremes.of]],
    )  # fmt: skip


def verdict(
    evidence: Evidence,
    q: Floats,
    *,
    level: float = 0.05,
    practical_size: float = 0.05,
    expected: Words | None = None,
) -> tuple[Words, Words]:
    """'stable' / 'unstable' / 'not judged' and a note, (K,) each.

    `q` are the Benjamini-Hochberg values over the WHOLE portfolio. Notes: 'layers' (variation between subgroups),
    'negligible' (a movement too small to matter), 'autocorrelated', 'short' (stable so far).
    """
    declared = np.full(len(q), "", dtype=object) if expected is None else expected
    rejected = evidence.judgeable & (q <= level)
    moves = evidence.group == "location"
    small = rejected & moves & (evidence.movement_share < practical_size)
    largest = np.where(declared == "autocorrelation", LEAN_DECLARED, LEAN_UNDECLARED)
    leans = (
        rejected
        & moves
        & ((evidence.kind == kinds.WANDERING) | (declared == "autocorrelation"))
        & (evidence.phi > 0)
        & (evidence.phi <= largest)
        & (evidence.residual_p >= RESIDUAL_P)
    )
    wears = rejected & (declared == "wear") & (evidence.wear_p >= RESIDUAL_P)
    unstable = rejected & ~small & ~leans & ~wears
    stable = evidence.judgeable & ~unstable
    layered = stable & (evidence.between_p < LAYERS_P)
    note = np.select(
        [small & stable, leans & stable, layered, stable & evidence.short],
        ["negligible", "autocorrelated", "layers", "short"],
        default="",
    ).astype(object)
    said = np.select([unstable, stable], ["unstable", "stable"], default="not judged").astype(object)
    return said, note


@dataclass(frozen=True)
class _Spreads:
    total: Floats  # variance of all values
    within: Floats  # standard deviation within subgroups; individuals: from the moving range
    between: Floats  # variance component between subgroups
    between_p: Floats


def _spread(values: Floats, start: Ints, subgroups: Subgroups, series: Series) -> _Spreads:
    of = subgroups.of
    n, m = np.diff(start), np.diff(of)
    mean = ragged.means(values, start)
    all_squares = ragged.squares_about(values, start, mean)
    inside = ragged.sums(np.nan_to_num(series.sd) ** 2 * (series.size - 1), of)
    with np.errstate(divide="ignore", invalid="ignore"):
        total = all_squares / (n - 1)
        msw = inside / (n - m)
        msb = np.maximum(all_squares - inside, 0) / (m - 1)
        n0 = (n - ragged.sums(series.size.astype(np.float64) ** 2, of) / n) / (m - 1)
        between = np.maximum(0.0, (msb - msw) / n0)
        p = stats.f.sf(msb / msw, m - 1, n - m)
    testable = (n > m) & (m > 1) & (inside > 0)
    step = np.abs(np.diff(series.mean, prepend=np.nan))
    step[of[:-1][m > 0]] = np.nan
    there = ~np.isnan(step)
    ranges = ragged.sums(np.nan_to_num(step), of)
    with np.errstate(divide="ignore", invalid="ignore"):
        moving = ranges / ragged.sums(there, of) / 1.128379167  # d2 of two values: 2 / sqrt(pi)
        within = np.where(series.individuals, moving, np.sqrt(msw))
    return _Spreads(
        total, within, np.where(testable, between, 0.0), np.where(testable & ~series.individuals, p, np.nan)
    )


def _why_not(
    values: Floats, start: Ints, m: Ints, n: Ints, single: Bools, minimum_subgroups: int, minimum_values: int
) -> Words:
    low, high = ragged.extremes(values, start)
    owner = ragged.owners(start)
    inner = (values != low[owner]) & (values != high[owner])
    inner_low, inner_high = ragged.extremes(values[inner], ragged.taken(start, inner))
    coarse = ~(inner_low < inner_high)  # at most the two ends and one value between them
    few = np.where(single, n < minimum_values, m < minimum_subgroups)
    return np.select([few, low == high, coarse], ["too_few", "constant", "coarse"], default="").astype(object)


def _comparable(series: Series, of: Ints, spreads: _Spreads) -> tuple[Floats, Floats]:
    """Location and spread on one footing where subgroup sizes vary: a change of sampling is no change of process."""
    owner = np.repeat(np.arange(len(of) - 1), np.diff(of))
    smallest, largest = ragged.extremes(series.size.astype(np.float64), of)
    varying = (smallest < largest) & ~series.individuals
    if not varying.any():
        return series.mean, np.nan_to_num(series.sd)
    here = varying[owner]
    weight = series.size.astype(np.float64)
    grand = ragged.sums(series.mean * weight, of) / np.maximum(ragged.sums(weight, of), 1)
    variance = spreads.between[owner] + spreads.within[owner] ** 2 / weight
    with np.errstate(divide="ignore", invalid="ignore"):
        z = (series.mean - grand[owner]) / np.sqrt(variance)
        ratio = (weight - 1) * series.sd**2 / spreads.within[owner] ** 2
        level = stats.chi2.cdf(ratio, np.maximum(weight - 1, 1))
    location = np.where(here & np.isfinite(z), z, series.mean)
    # A single value has no spread: it stands in the middle.
    spread = np.where(here, np.where(np.isfinite(level), level, 0.5), np.nan_to_num(series.sd))
    return location, spread


def _location_p(x: Floats, of: Ints) -> Floats:
    """Combined p of the location parts and the moving spread of plain series, (K,); NaN for an empty one."""
    found = parts(x, np.zeros(len(x)), of, np.ones(len(of) - 1, dtype=bool))
    return combined(found.p_step, found.p_serial, found.p_cycle, found.p_spread)


def _movement_share(series: Series, of: Ints, total: Floats, rhythm: Floats) -> Floats:
    """Share of the variance of all values that the movement of the location explains.

    Slow movement by the mean square successive difference; a cycle or an alternation, which that measure does not see,
    by what it explains of the subgroup means.
    """
    m = np.diff(of)
    variance = ragged.standard_deviations(series.mean, of) ** 2
    step = np.diff(series.mean, prepend=np.nan) ** 2
    step[of[:-1][m > 0]] = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        successive = ragged.sums(step, of) / (m - 1)
        slow = np.maximum(0.0, variance - successive / 2) / total
        return np.where(np.isnan(rhythm), slow, rhythm * variance / total)


def _change(series: Series, of: Ints, named: kinds.Kinds, within: Floats) -> tuple[Ints, Floats, Floats]:
    """Flat index of the first subgroup after the largest change; size of the movement in units and in sigmas."""
    m = np.diff(of)
    change = np.where(named.main >= 0, of[:-1] + named.main, -1).astype(np.int64)
    size = np.full(len(m), np.nan)
    owner = np.repeat(np.arange(len(m)), m)
    position = np.arange(of[-1]) - of[:-1][owner]
    stepped = (named.kind == kinds.STEP) | (named.kind == kinds.STEPS)
    begin = np.where((named.other >= 0) & (named.other < named.main), named.other, 0)
    end = np.where(named.other > named.main, named.other, m)
    after = stepped[owner] & (position >= named.main[owner]) & (position < end[owner])
    before = stepped[owner] & (position < named.main[owner]) & (position >= begin[owner])
    new = ragged.means(series.mean[after], ragged.taken(of, after))
    old = ragged.means(series.mean[before], ragged.taken(of, before))
    size[stepped] = (new - old)[stepped]
    drifting = named.kind == kinds.DRIFT
    t = position - ((m - 1) / 2)[owner]
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = ragged.sums(series.mean * t, of) / ragged.sums(t * t, of)
        size[drifting] = (slope * (m - 1))[drifting]
        return change, size, size / within


def _spread_ratio(series: Series, of: Ints, named: kinds.Kinds, single: Bools) -> Floats:
    """Spread after the change over spread before it, where the spread changed."""
    m = np.diff(of)
    owner = np.repeat(np.arange(len(m)), m)
    position = np.arange(of[-1]) - of[:-1][owner]
    step = np.diff(series.mean, prepend=np.nan)
    step[of[:-1][m > 0]] = np.nan
    squares = np.where(single[owner], step**2 / 2, series.sd**2)
    there = ~np.isnan(squares) & (named.kind == kinds.SPREAD)[owner]
    ratio = []
    for side in (position >= named.main[owner], position < named.main[owner]):
        ratio.append(ragged.means(squares[there & side], ragged.taken(of, there & side)))
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.sqrt(ratio[0] / ratio[1])


def _settled(location: Floats, spread: Floats, of: Ints, single: Bools, named: kinds.Kinds, asked: Bools) -> Ints:
    """Flat index of the stretch after the last change if it is long enough and passes the test itself, else -1."""
    m = np.diff(of)
    last = np.maximum(named.main, named.other)
    candidate = asked & (last >= 0) & (m - last >= SETTLED_SUBGROUPS)
    out = np.full(len(m), -1, dtype=np.int64)
    if not candidate.any():
        return out
    owner = np.repeat(np.arange(len(m)), m)
    position = np.arange(of[-1]) - of[:-1][owner]
    keep = candidate[owner] & (position >= last[owner])
    rest: Parts = parts(location[keep], spread[keep], ragged.taken(of, keep), single)
    calm = combined(rest.p_step, rest.p_serial, rest.p_cycle, rest.p_spread) >= RESIDUAL_P
    return np.where(candidate & calm, of[:-1] + last, out)


def _only(p: Floats, judgeable: Bools) -> Floats:
    return np.where(judgeable, p, np.nan)
