"""Bounds of the index where the shape is not normal, and the chance that it reaches its target.

One family chosen and then taken for known would promise too much: the lowest bound of all plausible families is taken,
and the highest above (capability study, 3.3). Each comes from a parametric bootstrap, freed of its bias, with normal
limits on the logarithm of the index. Normal shapes have exact bounds in `capability` and are left out here.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from scipy import stats
from scipy.special import betainc, ndtr, ndtri

from portfolio.statistics import shape_draws, shapes
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.shape_choice import EMPIRICAL, SPREAD, Shapes
from portfolio.statistics.shape_families import BOUNDED, FAMILIES, NUMBER

SMALLEST = 0.1
"Index below which its logarithm says nothing: limits on the index itself are taken."
ROWS = 200
"Characteristics whose draws are held at once."


@dataclass(frozen=True)
class Chance:
    """P(index >= target), called with targets (K,) or one number; (K,), NaN where the shape is normal or refused.

    Average over the plausible families by their Akaike weights (Burnham & Anderson 2002), so that it is at least 0.95
    wherever the lower bound reaches the target. Where quantiles come from the values themselves: the beta posterior
    (Jeffreys) of the fraction beyond the point at which the index equals the target.
    """

    count: int
    row: Ints
    centre: Floats
    sigma: Floats
    logarithmic: Bools
    weight: Floats
    empirical: _Tails

    def __call__(self, target: ArrayLike) -> Floats:
        """The chance of each characteristic."""
        goal = np.broadcast_to(np.asarray(target, dtype=np.float64), (self.count,))
        at = goal[self.row]
        with np.errstate(divide="ignore", invalid="ignore"):
            score = np.where(self.logarithmic, np.log(np.maximum(at, 0.0)), at)
            each = ndtr((self.centre - score) / self.sigma)
        total = np.bincount(self.row, self.weight, self.count)
        with np.errstate(invalid="ignore"):
            out: Floats = np.bincount(self.row, self.weight * each, self.count) / np.where(total > 0, total, np.nan)
        self.empirical.add_chance(out, goal)
        return out


class Bounds(NamedTuple):
    """One-sided confidence bounds (K,) and the chance of a target; NaN where the shape is normal or refused."""

    low: Floats
    high: Floats
    chance: Callable[[ArrayLike], Floats]


def bounds(
    found: Shapes,
    ordered: Floats,
    start: Ints,
    lower: Floats,
    upper: Floats,
    *,
    confidence: float = 0.95,
    seeds: np.ndarray,
    n_effective: Floats | None = None,
) -> Bounds:
    """One-sided bounds of the index (`shapes.indices(...).cpk`) by the nearest limit.

    Parameters
    ----------
    found : shapes of K characteristics with the fits of their plausible families
    ordered, start : the values that were fitted, sorted inside each characteristic
    lower, upper : (K,) specification limits, -inf / +inf where there is none
    confidence : probability of each one-sided bound
    seeds : (K,) uint64, one per characteristic: its draws depend on nothing else
    n_effective : (K,) number of independent values that the values are worth, where neighbours lean on each other or
        subgroups differ; default all of them

    Raises
    ------
    ValueError
        If `confidence` is not between 0 and 1.

    Source
    ------
    Capability study, section 3.3 (coverage measured there and in tests/simulation).
    """
    if not 0 < confidence < 1:
        raise ValueError(f"confidence is {confidence}; give a probability between 0 and 1, such as 0.95")
    count = len(found)
    n = np.diff(start).astype(np.float64)
    if n_effective is not None:
        n = np.where(n_effective > 0, np.minimum(n, n_effective), n)
    wanted = found.accepted & (found.family != "normal")
    best = np.where(wanted, found.aicc.min(axis=1, where=found.plausible, initial=np.inf), 0.0)
    z = float(ndtri(confidence))
    low, high = np.full(count, np.inf), np.full(count, -np.inf)
    parts = []
    for number, family in enumerate(FAMILIES):
        for rows in _pieces(np.flatnonzero(wanted & found.plausible[:, number])):
            near, far = _limits(found, family, rows, lower, upper)
            centre, sigma, logarithmic = _of_family(family, found, rows, n[rows], near, far, seeds[rows])
            known = np.isfinite(centre)
            weight = np.exp(-(found.aicc[rows, number] - best[rows]) / 2)
            parts.append((rows[known], centre[known], sigma[known], logarithmic[known], weight[known]))
            ends = [np.where(logarithmic, np.exp(e), e) for e in (centre - z * sigma, centre + z * sigma)]
            low[rows], high[rows] = np.fmin(low[rows], ends[0]), np.fmax(high[rows], ends[1])
    row, centre, sigma, logarithmic, weight = (
        (np.concatenate(column) for column in zip(*parts, strict=True))
        if parts
        else (np.empty(0, dtype=np.int64), np.empty(0), np.empty(0), np.empty(0, dtype=bool), np.empty(0))
    )
    low, high = np.where(np.isinf(low), np.nan, low), np.where(np.isinf(high), np.nan, high)
    tails = _Tails(np.flatnonzero(found.family == EMPIRICAL), found.parameters, ordered, start, lower, upper)
    tails.add_bounds(low, high, confidence)
    return Bounds(low, high, Chance(count, row, centre, sigma, logarithmic, weight, tails))


def _pieces(rows: Ints) -> list[Ints]:
    return [rows[at : at + ROWS] for at in range(0, len(rows), ROWS)]


def _limits(found: Shapes, family: str, rows: Ints, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """The limits that values can pass, for the chosen shape and for this one."""
    near, far = shapes.open_limits(found, lower, upper)
    near, far = near[rows], far[rows]
    if BOUNDED[NUMBER[family]]:
        location, sign = found.location[rows], found.sign[rows]
        with np.errstate(invalid="ignore"):
            near = np.where((sign > 0) & (near <= location), -np.inf, near)
            far = np.where((sign < 0) & (far >= location), np.inf, far)
    return near, far


def _of_family(
    family: str, found: Shapes, rows: Ints, n: Floats, lower: Floats, upper: Floats, seeds: np.ndarray
) -> tuple[Floats, Floats, Bools]:
    """Bias-corrected centre and standard deviation of the (log) index, and whether it is the logarithm."""
    parameters = found.fitted[rows, NUMBER[family]]
    location, sign = found.location[rows], found.sign[rows]
    q = shapes.from_bound(family, SPREAD, parameters[:, None], location[:, None], sign[:, None])
    estimate = shapes.index_of(q, lower, upper)
    low_is_near = ~(estimate.cpl > estimate.cpu) & np.isfinite(estimate.cpl)
    drawn = shape_draws.estimates(family, parameters, n, seeds)
    place, way = location[:, None], sign[:, None]
    middle = shapes.from_bound(family, SPREAD[1], drawn.parameters, place, way)
    tail = shapes.from_bound(family, np.where(low_is_near, SPREAD[0], SPREAD[2])[:, None], drawn.parameters, place, way)
    limit = np.where(low_is_near, lower, upper)[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        index = (limit - middle) / (tail - middle)
        logarithmic = (estimate.cpk > SMALLEST) & (index > 0).all(axis=1)
        score = np.where(logarithmic[:, None], np.log(np.where(index > 0, index, 1.0)), index)
        at = np.where(logarithmic, np.log(np.where(logarithmic, estimate.cpk, 1.0)), estimate.cpk)
    bias = (score.mean(axis=1) - at) * drawn.bias_factor
    sigma = score.std(axis=1, ddof=1) * drawn.sigma_factor
    return at - bias, sigma, logarithmic


@dataclass(frozen=True)
class _Tails:
    """Shapes read off the values: what their extreme order statistics say about the 0.135 % quantiles."""

    rows: Ints
    quantiles: Floats
    ordered: Floats
    start: Ints
    lower: Floats
    upper: Floats

    def add_bounds(self, low: Floats, high: Floats, confidence: float) -> None:
        """Distribution-free bounds from the binomial number of values beyond a quantile; 0 where none exists.

        The lower bound needs n >= ln(1 - confidence) / ln(1 - 0.00135): 2218 values at 95 %.
        """
        if not len(self.rows):
            return
        rows, first, after = self.rows, self.start[self.rows], self.start[self.rows + 1]
        n = after - first
        most = np.asarray(stats.binom.ppf(confidence, n, SPREAD[0]), dtype=np.int64)
        least = np.asarray(stats.binom.ppf(1 - confidence, n, SPREAD[0]), dtype=np.int64)
        least -= stats.binom.cdf(least, n, SPREAD[0]) > 1 - confidence
        middle = self.quantiles[rows, 1]
        inner = np.stack([self.ordered[first + most], self.ordered[after - 1 - most]])
        outer = np.stack([self.ordered[first + np.maximum(least, 0)], self.ordered[after - 1 - np.maximum(least, 0)]])
        limit = np.stack([self.lower[rows], self.upper[rows]])
        with np.errstate(invalid="ignore", divide="ignore"):
            sure = np.where(least >= 0, (limit - middle) / (outer - middle), 0.0)
            sure = np.where(np.isfinite(limit), np.minimum(sure, (limit - middle) / (outer - middle)), np.nan)
            most_index = np.where(np.isfinite(limit), (limit - middle) / (inner - middle), np.nan)
        low[rows], high[rows] = np.fmin(*sure), np.fmin(*most_index)

    def add_chance(self, out: Floats, target: Floats) -> None:
        """Fill the rows that are read off the values."""
        if not len(self.rows):
            return
        middle, goal = self.quantiles[:, 1], np.where(target > 0, target, np.nan)
        chance = []
        for limit, way in ((self.lower, -1.0), (self.upper, 1.0)):
            with np.errstate(invalid="ignore"):
                edge = middle + (limit - middle) / goal
            beyond, n = self._beyond(edge, way)
            each = betainc(beyond + 0.5, n - beyond + 0.5, SPREAD[0])
            chance.append(np.where(np.isfinite(limit[self.rows]), each, np.nan))
        out[self.rows] = np.fmin(*chance)

    def _beyond(self, edge: Floats, way: float) -> tuple[Floats, Floats]:
        """Number of values beyond the edge (K,) in each of the rows, and their number."""
        beyond = np.empty(len(self.rows))
        n = np.empty(len(self.rows))
        for place, row in enumerate(self.rows.tolist()):  # few and long: one search each
            inside = self.ordered[self.start[row] : self.start[row + 1]]
            at = np.searchsorted(inside, edge[row], side="left" if way < 0 else "right")
            beyond[place], n[place] = at if way < 0 else len(inside) - at, len(inside)
        return beyond, n
