"""Does the normal shape describe the values at all? If not, an index read off it would flatter or frighten.

Values that are recorded in steps are spread evenly over their cell first, so that a coarse record is not taken for a
strange shape.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints

REFUSED = 1.035
"1 % point of A2 (1 + 0.75/n + 2.25/n^2) with estimated mean and sigma (D'Agostino & Stephens 1986, from memory)."
LIGHT_SKEW = 0.5
MOST = 2_000
"Order statistics that the test looks at: with 100,000 values any real process differs from any shape, and it is no news."


@dataclass(frozen=True)
class Normality:
    """`a2` (K,) Anderson-Darling statistic, adjusted for n; `refused` (K,): the normal shape does not hold.

    `cautious` (K,): refused, but only because the tails are lighter than normal (several streams, a uniform filling of
    the tolerance): the normal figure is then on the safe side.
    """

    a2: Floats
    refused: Bools
    cautious: Bools


def normality(ordered: Floats, start: Ints, step: Floats) -> Normality:
    """Test K characteristics.

    Parameters
    ----------
    ordered : (N,) values sorted inside each characteristic; `start` (K + 1,)
    step : (K,) recording step, NaN or 0 where values are continuous

    Source: Anderson & Darling (1954) with the modification of D'Agostino & Stephens (1986).
    """
    values, start = _thinned(_spread_over_cells(ordered, start, ragged.owners(start), step), start)
    n = np.diff(start)
    owner = ragged.owners(start)
    mean = ragged.means(values, start)
    sd = ragged.standard_deviations(values, start)
    usable = (n >= 8) & (sd > 0)
    scale = np.where(usable, sd, 1.0)
    z = (values - mean[owner]) / scale[owner]
    position = np.arange(len(values)) - start[:-1][owner] + 1
    mirrored = start[:-1][owner] + n[owner] - position
    terms = (2 * position - 1) * (log_ndtr(z) + log_ndtr(-z[mirrored]))
    with np.errstate(divide="ignore", invalid="ignore"):
        a2 = -n - ragged.sums(terms, start) / n
        adjusted = np.where(usable, a2 * (1 + 0.75 / n + 2.25 / n**2), np.nan)
        skew = ragged.sums(z**3, start) / n
        excess = ragged.sums(z**4, start) / n - 3
    refused = adjusted > REFUSED
    return Normality(adjusted, refused, refused & (excess < 0) & (np.abs(skew) < LIGHT_SKEW))


def without_stream_means(values: Floats, start: Ints, stream: Ints, differ: Bools) -> Floats:
    """Values (N,) with the means of the streams made equal in the characteristics marked in `differ` (K,).

    Streams that aim at different places are no strange shape of one process: the shape is looked for inside them.
    """
    out = values.copy()
    owner = ragged.owners(start)
    chosen = np.flatnonzero(differ[owner] & (stream >= 0))
    if not len(chosen):
        return out
    order = chosen[np.lexsort((stream[chosen], owner[chosen]))]
    fresh = np.ones(len(order), dtype=bool)
    fresh[1:] = (stream[order][1:] != stream[order][:-1]) | (owner[order][1:] != owner[order][:-1])
    groups = np.concatenate((np.flatnonzero(fresh), [len(order)])).astype(np.int64)
    means = ragged.means(values[order], groups)
    out[order] += ragged.means(values, start)[owner[order]] - np.repeat(means, np.diff(groups))
    return out


def _thinned(values: Floats, start: Ints) -> tuple[Floats, Ints]:
    """At most MOST order statistics of each characteristic, evenly spaced in rank, and their starts."""
    n = np.diff(start)
    if not (n > MOST).any():
        return values, start
    kept = np.minimum(n, MOST)
    new = np.concatenate(([0], np.cumsum(kept))).astype(np.int64)
    position = np.arange(new[-1]) - np.repeat(new[:-1], kept)
    at = np.floor((position + 0.5) * np.repeat(n / np.maximum(kept, 1), kept)).astype(np.int64)
    return values[np.repeat(start[:-1], kept) + at], new


def _spread_over_cells(ordered: Floats, start: Ints, owner: Ints, step: Floats) -> Floats:
    """Equal values spread evenly over one recording step around them; continuous values stay as they are."""
    if not len(ordered):
        return ordered
    fresh = np.ones(len(ordered), dtype=bool)
    fresh[1:] = (ordered[1:] != ordered[:-1]) | (owner[1:] != owner[:-1])
    first = np.flatnonzero(fresh)
    count = np.diff(np.concatenate((first, [len(ordered)])))
    inside = np.arange(len(ordered)) - np.repeat(first, count)
    share = (inside + 0.5) / np.repeat(count, count) - 0.5
    width = np.where(np.isfinite(step), step, 0.0)[owner]
    return ordered + share * width
