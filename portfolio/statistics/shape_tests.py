"""Does the fitted family describe the values? Anderson-Darling with the critical value of that family.

Parameters are estimated, so the critical value depends on the family and, for some, on where its shape parameter lies.
"""

from __future__ import annotations

import numpy as np

from portfolio.statistics import shape_families
from portfolio.statistics.normality import MOST
from portfolio.statistics.ragged import Floats, Ints, sums
from portfolio.statistics.shape_fits import Sample

TINY = 1e-300

# 5 % points of A2 with estimated parameters (capability study, table 3.4: simulated there).
PLAIN = 0.752
"Normal and lognormal, of A2 (1 + 0.75/n + 2.25/n^2): D'Agostino & Stephens (1986), from memory."
FIXED = {"weibull": 0.757, "half-normal": 1.48, "rayleigh": 1.30}
FOLDED = ((0.0, 0.5, 1.0, 1.5, 2.0), (1.48, 1.15, 0.81, 0.72, 0.73))
"Folded normal by mean / sigma."
GAMMA = ((0.5, 1.0, 2.0, 4.0), (0.815, 0.78, 0.765, 0.755))
"By shape."
STUDENT = ((0.0, 0.25, 0.33, 0.4, 0.5), (0.61, 0.61, 0.65, 0.69, 0.75))
"Student t by inverse degrees of freedom; simulated for this project, checked in tests/simulation."


def anderson_darling(family: str, parameters: Floats, sample: Sample, step: Floats) -> Floats:
    """A2 of each group (R,) against its fitted family.

    Parameters
    ----------
    parameters : (R, 3)
    sample : R groups, ascending inside each group, in the terms of the family
    step : (R,) recording step, 0 for continuous values. Equal values are spread over the probability of their cell:
        a coarse record is not a strange shape

    At most `normality.MOST` order statistics of each group are looked at.
    """
    values, n, owner, position = _thinned(sample)
    a, b, c = parameters[owner].T
    wide = step[owner] > 0
    if wide.any():
        share = _share_of_cell(values, owner)
        half = step[owner] / 2
        low_below, low_above = shape_families.tails(family, values - half, a, b, c)
        high_below, high_above = shape_families.tails(family, values + half, a, b, c)
        below = low_below + share * (high_below - low_below)
        above = high_above + (1 - share) * (low_above - high_above)
    else:
        below, above = shape_families.tails(family, values, a, b, c)
    start = np.concatenate(([0], np.cumsum(n)))
    mirrored = start[:-1][owner] + n[owner] - 1 - position
    terms = (2 * position + 1) * (np.log(np.maximum(below, TINY)) + np.log(np.maximum(above[mirrored], TINY)))
    out: Floats = -n - sums(terms, start) / n
    return out


def critical(family: str, parameters: Floats, n: Ints) -> Floats:
    """5 % point of A2 for the fitted family, (R,)."""
    looked_at = np.minimum(n, MOST)
    if family in ("normal", "lognormal"):
        return PLAIN / (1 + 0.75 / looked_at + 2.25 / looked_at**2)
    if family == "folded normal":
        return np.interp(parameters[:, 0] / parameters[:, 1], *FOLDED)
    if family == "gamma":
        return np.interp(parameters[:, 0], *GAMMA)
    if family == "student t":
        return np.interp(1 / parameters[:, 2], *STUDENT)
    return np.full(len(n), FIXED[family])


def _thinned(sample: Sample) -> tuple[Floats, Ints, Ints, Ints]:
    """At most MOST evenly ranked values of each group: values, (R,) numbers, owner and position of each value."""
    kept = np.minimum(sample.n, MOST)
    owner = np.repeat(np.arange(len(kept)), kept)
    position = np.arange(kept.sum()) - np.repeat(np.cumsum(kept) - kept, kept)
    if (kept == sample.n).all():
        return sample.values, kept, owner, position
    at = np.floor((position + 0.5) * (sample.n / kept)[owner]).astype(np.int64)
    return sample.values[sample.start[:-1][owner] + at], kept, owner, position


def _share_of_cell(values: Floats, owner: Ints) -> Floats:
    """Equal values evenly over their cell: (1/2, 3/2, ...) / number of equal ones."""
    fresh = np.ones(len(values), dtype=bool)
    fresh[1:] = (values[1:] != values[:-1]) | (owner[1:] != owner[:-1])
    first = np.flatnonzero(fresh)
    count = np.diff(np.concatenate((first, [len(values)])))
    share: Floats = (np.arange(len(values)) - np.repeat(first, count) + 0.5) / np.repeat(count, count)
    return share
