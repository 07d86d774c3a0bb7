"""Neighbours that lean on each other: how much, and what is left when that is taken out."""

from __future__ import annotations

import numpy as np

from portfolio.statistics.ragged import Bools, Floats, Ints, equal_lengths


def corrected(serial: Floats, m: Ints) -> Floats:
    """Lag-1 coefficient of an AR(1) process from the sample's, freed of its first-order bias (Kendall 1954)."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.clip(serial + (1 + 4 * serial) / m, -0.99, 0.99)


def residuals(scores: Floats, of: Ints, phi: Floats, rows: Bools) -> tuple[Floats, Ints]:
    """y[i + 1] - phi y[i] of the series marked in `rows` (K,), and their starts (all other series empty)."""
    m = np.where(rows, np.maximum(np.diff(of) - 1, 0), 0)
    start = np.concatenate(([0], np.cumsum(m))).astype(np.int64)
    at = np.repeat(of[:-1], m) + np.arange(start[-1]) - np.repeat(start[:-1], m)
    return scores[at + 1] - np.repeat(phi, m) * scores[at], start


def without_wear(location: Floats, of: Ints, rows: Bools) -> Floats:
    """Location (G,) with the declared saw-tooth taken out of the series marked in `rows`: one slope, free resets.

    A reset is a difference against the prevailing direction of more than four robust standard deviations. The slope
    is common to all teeth (within-tooth regression).
    """
    out = location.copy()
    for m, some in equal_lengths(of):
        chosen = some[rows[some]]
        if m < 4 or not len(chosen):
            continue
        place = of[chosen][:, None] + np.arange(m)
        out[place] = _teeth_removed(location[place])
    return out


def _teeth_removed(x: Floats) -> Floats:
    r, m = x.shape
    steps = np.diff(x, axis=1)
    centre = np.median(steps, axis=1, keepdims=True)
    spread = np.median(np.abs(steps - centre), axis=1, keepdims=True) * 1.4826
    reset = (np.abs(steps - centre) > 4 * np.maximum(spread, 1e-300)) & (np.sign(steps) != np.sign(centre))
    tooth = np.concatenate((np.zeros((r, 1), dtype=np.int64), np.cumsum(reset, axis=1)), axis=1)
    label = (tooth + np.arange(r)[:, None] * (m + 1)).ravel()
    _, group = np.unique(label, return_inverse=True)
    t = np.broadcast_to(np.arange(m, dtype=np.float64), (r, m)).ravel()
    flat = x.ravel()
    n = np.bincount(group)
    t_in = t - (np.bincount(group, t) / n)[group]
    x_in = flat - (np.bincount(group, flat) / n)[group]
    row = np.repeat(np.arange(r), m)
    bottom = np.bincount(row, t_in * t_in)
    slope = np.divide(np.bincount(row, t_in * x_in), bottom, out=np.zeros(r), where=bottom > 0)
    return (x_in - slope[row] * t_in).reshape(r, m)
