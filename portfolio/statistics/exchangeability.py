"""Is the order of the subgroups in time irrelevant? Rank statistics whose null depends on the length only.

Normal scores make every statistic distribution-free: under a stable process each order of the values is equally
likely, whatever their shape. Series of equal length are handled together as the rows of a matrix.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from scipy.special import ndtri

from portfolio.statistics import calibration
from portfolio.statistics.ragged import Bools, Floats, Ints, equal_lengths

LEAST = 8
"Below this many subgroups no statistic is defined."
SHORTEST_PERIOD = 2.5
LEAST_CYCLES = 4


@dataclass(frozen=True)
class Parts:
    """p-values of the parts, and what the kinds need later; all (K,), NaN or -1 where a series is too short.

    `step_at`, `spread_at`: position (0-based, inside the series) of the first subgroup after the best cut.
    `serial` lag-1 autocorrelation of the scores, `cycles` number of full waves of the best period in the series.
    """

    p_step: Floats
    p_serial: Floats
    p_cycle: Floats
    p_spread: Floats
    step_at: Ints
    spread_at: Ints
    serial: Floats
    cycles: Floats
    scores: Floats = field(repr=False)

    def location(self) -> Floats:
        """Smallest p of the three location parts, (K,)."""
        return np.fmin(np.fmin(self.p_step, self.p_serial), self.p_cycle)


def parts(location: Floats, spread: Floats, of: Ints, individuals: Bools) -> Parts:
    """The four parts of the test for K series at once.

    Parameters
    ----------
    location, spread : (G,) subgroup means and spreads (standardised where sizes vary); `spread` is not read for
        individuals, whose moving ranges of the scores serve instead
    of : (K + 1,) starts of the series
    individuals : (K,)

    Source
    ------
    Scores: Blom (1958). Step: likelihood ratio of one change in a normal mean. Cycle: Fisher (1929), periods of 2.5
    subgroups and more that recur at least 4 times. Stability study, section 3.
    """
    count = len(of) - 1
    nan = np.full(count, np.nan)
    out = Parts(
        nan.copy(), nan.copy(), nan.copy(), nan.copy(),
        np.full(count, -1, dtype=np.int64), np.full(count, -1, dtype=np.int64),
        nan.copy(), nan.copy(), np.full(int(of[-1]), np.nan),
    )  # fmt: skip
    for m, rows in equal_lengths(of):
        if m < LEAST:
            continue
        place = of[rows][:, None] + np.arange(m)
        y = normal_scores(location[place])
        out.scores[place] = y
        # A constant series has no order to test.
        moving = y.std(axis=1) > 0
        step, at = step_statistic(y)
        out.p_step[rows] = np.where(moving, calibration.p_value("step", step, m), np.nan)
        out.step_at[rows] = np.where(moving, at, -1)
        serial = lag_one(y)
        out.serial[rows] = serial
        out.p_serial[rows] = np.where(moving, calibration.p_value("serial", np.abs(serial), m), np.nan)
        cycle, waves = cycle_statistic(y)
        out.p_cycle[rows] = np.where(moving, calibration.p_value("cycle", cycle, m), np.nan)
        out.cycles[rows] = waves
        _spread(out, rows, y, spread, place, individuals[rows], m)
    return out


def _spread(out: Parts, rows: Ints, y: Floats, spread: Floats, place: Ints, single: Bools, m: int) -> None:
    for chosen, series, null, shift in (
        (single, lambda: np.abs(np.diff(y[single], axis=1)), "moving", 1),
        (~single, lambda: spread[place[~single]], "step", 0),
    ):
        if not chosen.any():
            continue
        scores = normal_scores(series())
        moving = scores.std(axis=1) > 0
        statistic, at = step_statistic(scores)
        out.p_spread[rows[chosen]] = np.where(moving, calibration.p_value(null, statistic, m), np.nan)
        out.spread_at[rows[chosen]] = np.where(moving, at + shift, -1)


def normal_scores(x: Floats) -> Floats:
    """Blom's normal scores of each row of x (R, m), mid-ranks for ties: Phi^-1((rank - 3/8) / (m + 1/4))."""
    m = x.shape[1]
    order = np.argsort(x, axis=1, kind="stable")
    ordered = np.take_along_axis(x, order, axis=1)
    scores = np.empty_like(x)
    tied = (np.diff(ordered, axis=1) == 0).any(axis=1)
    plain = ndtri((np.arange(1, m + 1) - 0.375) / (m + 0.25))
    np.put_along_axis(scores, order, np.broadcast_to(plain, x.shape), axis=1)
    if tied.any():
        position = np.arange(m)
        fresh = np.ones((int(tied.sum()), m), dtype=bool)
        fresh[:, 1:] = np.diff(ordered[tied], axis=1) != 0
        first = np.maximum.accumulate(np.where(fresh, position, 0), axis=1)
        closing = np.ones_like(fresh)
        closing[:, :-1] = fresh[:, 1:]
        last = np.minimum.accumulate(np.where(closing, position, m)[:, ::-1], axis=1)[:, ::-1]
        middle = (first + last) / 2 + 1
        some = scores[tied]
        np.put_along_axis(some, order[tied], ndtri((middle - 0.375) / (m + 0.25)), axis=1)
        scores[tied] = some
    return scores


def step_statistic(y: Floats) -> tuple[Floats, Ints]:
    """Likelihood-ratio statistic of one change of mean in each row, and the first position after it."""
    m = y.shape[1]
    k = np.arange(3, m - 2)
    centred = y - y.mean(axis=1, keepdims=True)
    reached = np.abs(np.cumsum(centred, axis=1)[:, k - 1]) / np.sqrt(k * (m - k) / m)
    best = np.argmax(reached, axis=1)
    sd = y.std(axis=1, ddof=1)
    top = np.take_along_axis(reached, best[:, None], axis=1)[:, 0]
    return np.divide(top, sd, out=np.zeros_like(top), where=sd > 0), k[best]


def lag_one(y: Floats) -> Floats:
    """Lag-1 autocorrelation of each row: overall mean, full sum of squares below (Box & Jenkins; NIST StRD)."""
    centred = y - y.mean(axis=1, keepdims=True)
    squares = (centred * centred).sum(axis=1)
    products = (centred[:, :-1] * centred[:, 1:]).sum(axis=1)
    return np.divide(products, squares, out=np.zeros_like(products), where=squares > 0)


def cycle_statistic(y: Floats) -> tuple[Floats, Floats]:
    """Fisher's g over the admitted periods as g q - ln q (q ordinates), and the number of waves of the largest.

    The shift by ln q makes the statistic nearly independent of the length, so that tables interpolate well.
    """
    m = y.shape[1]
    waves = np.arange(LEAST_CYCLES, int(m / SHORTEST_PERIOD) + 1)
    if len(waves) < 2:
        return np.full(len(y), np.nan), np.full(len(y), np.nan)
    power = np.abs(np.fft.rfft(y - y.mean(axis=1, keepdims=True), axis=1)[:, waves]) ** 2
    best = np.argmax(power, axis=1)
    total = power.sum(axis=1)
    top = np.take_along_axis(power, best[:, None], axis=1)[:, 0]
    share = np.divide(top, total, out=np.full(len(y), np.nan), where=total > 0)
    return share * len(waves) - np.log(len(waves)), waves[best].astype(np.float64)


def combined(*p: Floats) -> Floats:
    """Cauchy combination of p-values (each (K,), NaN = this part does not apply), (K,).

    Source: Liu & Xie (2020); valid under any dependence of the parts in the tail that matters.
    """
    stacked = np.clip(np.stack(p), 1e-15, 1 - 1e-15)
    there = ~np.isnan(stacked)
    number = there.sum(axis=0)
    angles = np.where(there, np.tan((0.5 - np.where(there, stacked, 0.5)) * np.pi), 0.0).sum(axis=0)
    mean = np.divide(angles, number, out=np.full(stacked.shape[1], np.nan), where=number > 0)
    # For very small p the arctangent loses its digits: 1 / (pi t) is its limit.
    with np.errstate(invalid="ignore", divide="ignore"):
        far = 1 / (np.pi * mean)
    return np.where(mean > 1e6, far, 0.5 - np.arctan(mean) / np.pi)
