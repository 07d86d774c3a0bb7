"""What the recording itself does to the values: how many distinct ones there are and how wide a step they move in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from portfolio.statistics.ragged import Floats, Ints, equal_lengths, owners

SAME_STEP = 1e-3
"Two gaps count as the same step when they differ by less than this share (decimal fractions are not exact)."


LONG = 4096


@dataclass(frozen=True)
class Recording:
    """How values are recorded: `distinct` (K,) number of different values, `step` (K,) recording step in units.

    `step` is NaN where fewer than two distinct values exist.
    """

    distinct: Ints
    step: Floats


def sorted_within(values: Floats, start: Ints) -> Floats:
    """The values (N,) sorted inside each group, group by group."""
    out = values[: start[-1]].copy()
    for n, rows in equal_lengths(start):
        if n >= LONG:  # one sort a group: gathering into a matrix would cost more than it saves
            for begin in start[rows].tolist():
                out[begin : begin + n].sort()
        elif n > 1:
            place = start[rows][:, None] + np.arange(n)
            out[place] = np.sort(out[place], axis=1)
    return out


def recording(ordered: Floats, start: Ints, declared: Floats) -> Recording:
    """Distinct values and recording step of each characteristic.

    Parameters
    ----------
    ordered : (N,) values sorted inside each group (`sorted_within`), unit of the characteristic
    start : (K + 1,) starts of the characteristics
    declared : (K,) registered resolution, NaN where none is declared

    The step is the declared one, else the smallest gap between neighbouring distinct values that occurs at least
    twice, else the smallest gap (capability study, section 4).
    """
    owner = owners(start)
    count = len(start) - 1
    fresh = np.ones(len(ordered), dtype=bool)
    fresh[1:] = (ordered[1:] != ordered[:-1]) | (owner[1:] != owner[:-1])
    distinct = np.bincount(owner[fresh], minlength=count).astype(np.int64)

    level, of = ordered[fresh], owner[fresh]
    inside = of[1:] == of[:-1]
    gap, gap_of = np.diff(level)[inside], of[1:][inside]
    # Neighbouring decimals such as 0.1 + 0.2 differ by rounding noise, not by a step of the gauge.
    real = gap > 1e-12 * np.maximum(np.abs(level[1:][inside]), 1e-300)
    gap, gap_of = gap[real], gap_of[real]
    order = np.lexsort((gap, gap_of))
    gap, gap_of = gap[order], gap_of[order]
    repeated = np.zeros(len(gap), dtype=bool)
    repeated[:-1] = (gap_of[1:] == gap_of[:-1]) & (gap[1:] <= gap[:-1] * (1 + SAME_STEP))

    step = np.full(count, np.nan)
    for candidates in (np.ones(len(gap), dtype=bool), repeated):  # the repeated gap wins where there is one
        first, at = np.unique(gap_of[candidates], return_index=True)
        step[first] = gap[candidates][at]
    return Recording(distinct=distinct, step=np.where(declared > 0, declared, step))
