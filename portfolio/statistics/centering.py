"""What moving the mean alone would do: how far, which way, to which index, with what chance.

After the move the mean is where it was set, known no better than before and no better than the machine can be set;
sigma stays what it is. Capability study, sections 1 and 5. Arrays (K,), units of the characteristic.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from portfolio.statistics import capability
from portfolio.statistics.ragged import Bools, Floats, Ints

SURE = 0.90
"Probability that every mean of the sure window reaches the target with."
LEAST_MOVE = 2.0
"A move below so many standard errors of the mean cannot be told from none."
STEPS = 60
NEAR = 1e-7
"Share of sigma to which an edge of the sure window is found."


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
    *, setting_sd: Floats | float = 0.0, confidence: float = 0.95,
) -> Centering:  # fmt: skip
    """What a move of the mean to `aim` would do.

    Parameters
    ----------
    mean, sigma : (K,) estimates
    n_mean, df : (K,) effective number of values behind the mean, effective degrees of freedom of sigma
    lower, upper : (K,) specification limits, -inf / +inf where there is none
    aim : (K,) the intended mean (the middle unless declared); NaN where there is none
    target : (K,) target Cpk
    setting_sd : standard deviation with which a machine is set, in units
    confidence : of the bound after the move

    Source
    ------
    Core formula with the planned mean in place of the estimate; effective number 1 / (1 / n + (setting_sd / s)^2)
    (capability study, section 1). Calibration measured in tests/simulation.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        s = np.where((sigma > 0) & (lower < upper), sigma, np.nan)
        after = 1 / (1 / n_mean + (setting_sd / s) ** 2)
        margin = 3 * target * s
        low, high = lower + margin, upper - margin
        open_window = np.isfinite(aim) & (low <= high)
        window_low, window_high = np.where(open_window, low, np.nan), np.where(open_window, high, np.nan)
        one_sided = np.isfinite(lower) != np.isfinite(upper)
        needed = np.where(one_sided, np.where(np.isfinite(lower), low, high), np.nan)
        limited = np.where(np.isfinite(lower) | np.isfinite(upper), s, np.nan)
    nodes = capability.sigma_nodes(df)
    sure_low, sure_high = _sure_window(nodes, limited, after, lower, upper, target, aim)
    empty = np.isnan(sure_low)
    bound, _ = capability.capability_bounds(aim, s, after, df, lower, upper, confidence=confidence)
    return Centering(
        aim=aim,
        move=aim - mean,
        move_least=_least(mean, np.where(empty, window_low, sure_low), np.where(empty, window_high, sure_high)),
        window_low=window_low,
        window_high=window_high,
        sure_low=sure_low,
        sure_high=sure_high,
        cpk_centered=capability.indices(aim, s, lower, upper).cpk,
        cpk_centered_low=bound,
        chance_centered=capability.probability_at(nodes, aim, limited, after, lower, upper, target),
        chance_now=capability.probability_at(nodes, mean, limited, n_mean, lower, upper, target),
        ppm_now=capability.expected_ppm(mean, limited, n_mean, df, lower, upper),
        ppm_centered=capability.expected_ppm(aim, limited, after, df, lower, upper),
        needed_mean=needed,
    )


def significant(move: Floats, sigma: Floats, n_mean: Floats) -> Bools:
    """Whether a move can be told from zero, (K,): |move| > 2 sigma / sqrt(n)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        found: Bools = np.abs(move) > LEAST_MOVE * sigma / np.sqrt(n_mean)
    return found


def _sure_window(
    nodes: Floats, s: Floats, n: Floats, lower: Floats, upper: Floats, target: Floats, aim: Floats
) -> tuple[Floats, Floats]:
    """Means with P(Cpk >= target) >= SURE, symmetric about the middle; NaN where even the middle is below."""
    out = np.full(len(s), np.nan), np.full(len(s), np.nan)
    two = np.isfinite(lower) & np.isfinite(upper) & np.isfinite(aim)
    middle = (np.where(two, lower, np.nan) + np.where(two, upper, np.nan)) / 2
    best = capability.probability_at(nodes, middle, s, n, lower, upper, target)
    sure = np.flatnonzero(best >= SURE)

    def gain(rows: Ints, half: Floats) -> Floats:
        """Normal score of the chance above that of SURE, falling with the distance from the middle."""
        at = middle[rows] + half
        p = capability.probability_at(nodes[rows], at, s[rows], n[rows], lower[rows], upper[rows], target[rows])
        score: Floats = ndtri(np.clip(p, 1e-15, 1 - 1e-15)) - ndtri(SURE)
        return score

    # Regula falsi (Illinois): the score is nearly straight in the mean, so a few steps are enough.
    near, far = np.zeros(len(sure)), (upper[sure] - lower[sure]) / 2
    at_near, at_far = gain(sure, near), gain(sure, far)
    edge, last = near.copy(), np.zeros(len(sure))
    active = np.flatnonzero(at_far < at_near)
    for _ in range(STEPS):
        if not len(active):
            break
        a, b, fa, fb = near[active], far[active], at_near[active], at_far[active]
        trial = b - fb * (b - a) / (fb - fa)
        f = gain(sure[active], trial)
        inside = f >= 0
        again = np.where(inside, last[active] == 1, last[active] == -1)  # twice on one side: the other counts half
        near[active], far[active] = np.where(inside, trial, a), np.where(inside, b, trial)
        at_near[active] = np.where(inside, f, np.where(again, fa / 2, fa))
        at_far[active] = np.where(inside, np.where(again, fb / 2, fb), f)
        last[active] = np.where(inside, 1, -1)
        done = (np.abs(trial - edge[active]) <= NEAR * s[sure[active]]) | (f == 0)
        edge[active] = trial
        active = active[~done]
    out[0][sure], out[1][sure] = middle[sure] - edge, middle[sure] + edge
    return out


def _least(mean: Floats, low: Floats, high: Floats) -> Floats:
    """Signed distance from the mean into [low, high]; 0 inside, NaN for an empty window."""
    with np.errstate(invalid="ignore"):
        move = np.where(mean < low, low - mean, np.where(mean > high, high - mean, 0.0))
    return np.where(np.isnan(low) | np.isnan(mean), np.nan, move)
