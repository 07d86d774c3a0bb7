"""Names the kind of an instability, its time and its size. Only for series that look disturbed.

The smallest p of {location parts, spread, isolated extremes} names the group; within location the smallest BIC of five
Gaussian models of the normal scores names the kind (stability study, section 6).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from portfolio.statistics.exchangeability import LEAST, Parts, cycle_statistic, lag_one
from portfolio.statistics.ragged import Bools, Floats, Ints, equal_lengths

STEP, STEPS, DRIFT, WANDERING, CYCLE, ALTERNATION = (
    "step", "several steps", "drift", "wandering", "cycle", "alternation",
)  # fmt: skip
SPREAD, ISOLATED = "spread", "isolated extremes"
PARAMETERS = {STEP: 3, STEPS: 5, DRIFT: 1, WANDERING: 1, CYCLE: 3}


@dataclass(frozen=True)
class Kinds:
    """`kind` (K,) '' where a series was not asked for; `group`: location, spread or isolated extremes.

    `main`: first position after the largest change, `other`: after the second one (two steps only), -1 if none.
    """

    kind: np.ndarray
    main: Ints
    other: Ints
    group: np.ndarray
    rhythm: Floats  # share of the variance of the scores that a cycle or an alternation explains, else NaN


def name(parts: Parts, p_isolated: Floats, of: Ints, asked: Bools) -> Kinds:
    """Kinds of the series marked in `asked` (K,)."""
    count = len(of) - 1
    kind = np.full(count, "", dtype=object)
    main = np.full(count, -1, dtype=np.int64)
    other = main.copy()
    rhythm = np.full(count, np.nan)
    stacked = np.stack([parts.location(), parts.p_spread, p_isolated])
    smallest = np.argmin(np.where(np.isnan(stacked), 2.0, stacked), axis=0)
    group = np.array(["location", SPREAD, ISOLATED], dtype=object)[smallest]
    for m, rows in equal_lengths(of):
        if m < LEAST:
            continue
        chosen = rows[asked[rows] & (group[rows] == "location")]
        if len(chosen):
            y = parts.scores[of[chosen][:, None] + np.arange(m)]
            kind[chosen], main[chosen], other[chosen], rhythm[chosen] = _location_kind(y)
    kind[asked & (group == SPREAD)] = SPREAD
    kind[asked & (group == ISOLATED)] = ISOLATED
    spread = asked & (group == SPREAD)
    main[spread] = parts.spread_at[spread]
    return Kinds(kind, main, other, group, rhythm)


def _location_kind(y: Floats) -> tuple[np.ndarray, Ints, Ints, Floats]:
    m = y.shape[1]
    y = y - y.mean(axis=1, keepdims=True)
    total = (y * y).sum(axis=1)
    one, at = _best_cut(y)
    two, also = _second_cut(y, at)
    t = np.arange(m) - (m - 1) / 2
    slope = (y @ t) / (t @ t)
    serial = lag_one(y)
    share = cycle_statistic(y)[0]
    gain = _cycle_gain(y) if np.isfinite(share).all() else np.zeros(len(y))
    left = np.stack(
        [
            total - one,
            total - one - two,
            total - slope**2 * (t @ t),
            total * (1 - serial**2),
            total - gain,
        ]
    )
    penalty = np.log(m) * np.array([PARAMETERS[k] for k in (STEP, STEPS, DRIFT, WANDERING, CYCLE)])
    bic = m * np.log(np.maximum(left, 1e-12 * total) / m) + penalty[:, None]
    best = np.argmin(bic, axis=0)
    kind = np.array([STEP, STEPS, DRIFT, WANDERING, CYCLE], dtype=object)[best]
    kind[(kind == WANDERING) & (serial < 0)] = ALTERNATION
    main = np.where((kind == STEP) | (kind == STEPS), at, -1)
    other = np.where(kind == STEPS, also, -1)
    with np.errstate(invalid="ignore", divide="ignore"):
        rhythm = np.select([kind == CYCLE, kind == ALTERNATION], [gain / total, serial**2], default=np.nan)
    return kind, main, other, rhythm


def _best_cut(y: Floats) -> tuple[Floats, Ints]:
    """Sum of squares that one change of mean explains in each row, and where."""
    m = y.shape[1]
    k = np.arange(3, m - 2)
    gain = np.cumsum(y, axis=1)[:, k - 1] ** 2 * m / (k * (m - k))
    best = np.argmax(gain, axis=1)
    return np.take_along_axis(gain, best[:, None], axis=1)[:, 0], k[best]


def _second_cut(y: Floats, at: Ints) -> tuple[Floats, Ints]:
    """What a second change explains given the first, at least 3 from it and from the ends."""
    m = y.shape[1]
    position = np.arange(1, m)
    c = np.cumsum(y, axis=1)
    before = np.take_along_axis(c, at[:, None] - 1, axis=1)
    left = position[None, :] < at[:, None]
    length = np.where(left, at[:, None], m - at[:, None])
    offset = np.where(left, 0, at[:, None])
    base = np.where(left, 0.0, before)
    sums = np.where(left, before, c[:, -1:] - before)
    k = position[None, :] - offset
    inside = (k >= 3) & (length - k >= 3)
    part = c[:, :-1] - base
    safe = np.where(inside, k * (length - k) / length, 1.0)
    gain = np.where(inside, (part - k / length * sums) ** 2 / safe, 0.0)
    best = np.argmax(gain, axis=1)
    return np.take_along_axis(gain, best[:, None], axis=1)[:, 0], position[best]


def _cycle_gain(y: Floats) -> Floats:
    """Sum of squares that the best admitted sine explains in each row."""
    waves = cycle_statistic(y)[1].astype(np.int64)
    power = np.abs(np.fft.rfft(y, axis=1)) ** 2
    return 2 / y.shape[1] * np.take_along_axis(power, waves[:, None], axis=1)[:, 0]
