"""What moving the mean alone would do: how far, which way, to which index, with what chance.

After the move the mean is where it was set, known no better than before and no better than the machine can be set;
sigma stays what it is. Capability study, sections 1 and 5. Arrays (K,), units of the characteristic.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from portfolio.statistics import capability
from portfolio.statistics.ragged import Bools, Floats

SURE = 0.90
"Probability that every mean of the sure window reaches the target with."
HALVINGS = 40
LEAST_MOVE = 2.0
"A move below so many standard errors of the mean cannot be told from none."


@dataclass(frozen=True)
class Centering:
    """All (K,); NaN without an aim (one limit).

    `move` = aim - mean. `window_low/high`: means that reach the target by the point estimate (NaN: none do).
    `sure_low/high`: means that reach it with 90 % probability (NaN: none do). `move_least`: the shortest move into
    the sure window, else into the window; 0 when the mean is inside; NaN when both are empty. `needed_mean`: with one
    limit, the mean at which the index is the target. `ppm_now`, `ppm_centered`: posterior means.
    """

    aim: Floats
    move: Floats
    move_least: Floats
    window_low: Floats
    window_high: Floats
    sure_low: Floats
    sure_high: Floats
    cpk_centered: Floats
    cpk_centered_low: Floats
    chance_centered: Floats
    chance_now: Floats
    ppm_now: Floats
    ppm_centered: Floats
    needed_mean: Floats


def centre(
    mean: Floats, sigma: Floats, n_mean: Floats, df: Floats, lower: Floats, upper: Floats, aim: Floats, target: Floats,
    *, setting_sd: Floats | float = 0.0,
) -> Centering:  # fmt: skip
    """What a move of the mean to `aim` would do.

    Parameters
    ----------
    n_mean, df : effective number of values behind the mean, effective degrees of freedom of sigma
    aim : the intended mean (the middle unless declared); NaN where there is none
    setting_sd : standard deviation with which a machine is set, in units
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where(sigma > 0, sigma, np.nan)
        after = 1 / (1 / n_mean + (setting_sd / s) ** 2)
        margin = 3 * target * s
        low, high = lower + margin, upper - margin
        open_window = np.isfinite(aim) & (low <= high)
        window_low, window_high = np.where(open_window, low, np.nan), np.where(open_window, high, np.nan)
        one_sided = np.isfinite(lower) != np.isfinite(upper)
        needed = np.where(one_sided, np.where(np.isfinite(lower), low, high), np.nan)
    nodes = capability.sigma_nodes(df)
    sure_low, sure_high = _sure_window(s, after, nodes, lower, upper, target, aim)
    chance = np.where(np.isfinite(aim), _chance(aim, s, after, nodes, lower, upper, target), np.nan)
    bound, _ = capability.capability_bounds(aim, s, after, df, lower, upper)
    return Centering(
        aim=aim,
        move=aim - mean,
        move_least=_least(mean, np.where(np.isnan(sure_low), window_low, sure_low),
                          np.where(np.isnan(sure_low), window_high, sure_high)),
        window_low=window_low,
        window_high=window_high,
        sure_low=sure_low,
        sure_high=sure_high,
        cpk_centered=np.where(np.isfinite(aim), capability.indices(aim, s, lower, upper).cpk, np.nan),
        cpk_centered_low=bound,
        chance_centered=chance,
        chance_now=_chance(mean, s, n_mean, nodes, lower, upper, target),
        ppm_now=capability.expected_ppm(mean, s, n_mean, df, lower, upper),
        ppm_centered=np.where(
            np.isfinite(aim), capability.expected_ppm(aim, s, after, df, lower, upper), np.nan
        ),
        needed_mean=needed,
    )  # fmt: skip


def significant(move: Floats, sigma: Floats, n_mean: Floats) -> Bools:
    """Whether a move can be told from zero: |move| > 2 sigma / sqrt(n)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.abs(move) > LEAST_MOVE * sigma / np.sqrt(n_mean)


def _chance(mean: Floats, s: Floats, n: Floats, nodes: Floats, lower: Floats, upper: Floats, target: Floats) -> Floats:
    return capability.core_probability(mean, s, n, np.empty(0), lower, upper, target, nodes=nodes)


def _sure_window(
    s: Floats, n: Floats, nodes: Floats, lower: Floats, upper: Floats, target: Floats, aim: Floats
) -> tuple[Floats, Floats]:
    """Means with P(Cpk >= target) >= SURE, symmetric about the middle; NaN where even the middle is below."""
    two = np.isfinite(lower) & np.isfinite(upper) & np.isfinite(s) & np.isfinite(aim)
    out = np.full(len(s), np.nan), np.full(len(s), np.nan)
    if not two.any():
        return out
    l, u, sd, n, inner, t = lower[two], upper[two], s[two], n[two], nodes[two], target[two]
    middle = (l + u) / 2
    best = _chance(middle, sd, n, inner, l, u, t)
    near, far = np.zeros(len(middle)), (u - l) / 2
    for _ in range(HALVINGS):
        half = (near + far) / 2
        inside = _chance(middle + half, sd, n, inner, l, u, t) >= SURE
        near, far = np.where(inside, half, near), np.where(inside, far, half)
    sure = best >= SURE
    out[0][two] = np.where(sure, middle - near, np.nan)
    out[1][two] = np.where(sure, middle + near, np.nan)
    return out


def _least(mean: Floats, low: Floats, high: Floats) -> Floats:
    """Signed distance from the mean into [low, high]; 0 inside, NaN for an empty window."""
    with np.errstate(invalid="ignore"):
        move = np.where(mean < low, low - mean, np.where(mean > high, high - mean, 0.0))
    return np.where(np.isnan(low), np.nan, move)
