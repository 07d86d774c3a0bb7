"""Rational subgroups: which values were taken together, and what each subgroup says.

Order of preference: the subgroup that the source gives; a declared number of minutes; a declared size; equal time
stamps; else every value is its own subgroup (individuals). Two characteristics are never joined.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints

MINUTE = 60_000_000  # microseconds


@dataclass(frozen=True)
class Subgroups:
    """`start` (G + 1,) into the flat values; `of` (K + 1,): characteristic i has subgroups of[i] .. of[i + 1] - 1."""

    start: Ints
    of: Ints


@dataclass(frozen=True)
class Series:
    """Each subgroup's `size`, `mean`, `sd`, `range` (NaN for a single value), time of its `first` value; (G,).

    `individuals` (K,): fewer than half of the subgroups hold two values or more. `median_size` (K,).
    """

    size: Ints
    mean: Floats
    sd: Floats
    range: Floats
    first: Ints
    individuals: Bools
    median_size: Floats


def form(time: Ints, label: Ints, start: Ints, size: Ints, minutes: Floats) -> Subgroups:
    """Cut the values of K characteristics into subgroups.

    Parameters
    ----------
    time : (N,) microseconds, ascending inside each characteristic
    label : (N,) subgroup given by the source, -1 where there is none; a label may be used again later, so a
        subgroup is a run of equal labels, and a value without label among labelled ones stands alone
    start : (K + 1,) starts of the characteristics
    size : (K,) declared size, 0 where none; blocks of so many values, the last may be smaller
    minutes : (K,) declared length of a clock slot (counted from 1970-01-01, 0:00 UTC), NaN where none
    """
    n = np.diff(start)
    owner = ragged.owners(start)
    labelled = ragged.sums(label >= 0, start) > 0
    timed = ~labelled & np.isfinite(minutes)
    blocked = ~labelled & ~timed & (size > 1)
    undeclared = ~labelled & ~timed & ~blocked & (size != 1)

    fresh = np.ones(len(time), dtype=bool)
    if labelled.any():
        here = np.flatnonzero(labelled[owner])
        fresh[here] = (label[here] != label[here - 1]) | (label[here] < 0)
    if timed.any():
        here = np.flatnonzero(timed[owner])
        length = np.maximum(np.rint(minutes[owner[here]] * MINUTE).astype(np.int64), 1)
        # Whole microseconds: a value on the hour belongs to the hour that begins.
        fresh[here] = time[here] // length != time[here - 1] // length
    if blocked.any():
        here = np.flatnonzero(blocked[owner])
        fresh[here] = (here - start[owner[here]]) % size[owner[here]] == 0
    if undeclared.any():
        same = np.zeros(len(time), dtype=bool)
        same[1:] = (time[1:] == time[:-1]) & (owner[1:] == owner[:-1])
        shared = same.copy()
        shared[:-1] |= same[1:]
        stamped = undeclared & (2 * ragged.sums(shared, start) > n)
        fresh &= ~(same & stamped[owner])
    fresh[start[:-1][n > 0]] = True

    first = np.flatnonzero(fresh)
    return Subgroups(
        start=np.concatenate((first, [len(time)])).astype(np.int64), of=np.searchsorted(first, start).astype(np.int64)
    )


def summarise(values: Floats, time: Ints, subgroups: Subgroups) -> Series:
    """Mean, spread and time of each subgroup; `values`, `time` (N,)."""
    start, of = subgroups.start, subgroups.of
    size = ragged.lengths(start)
    low, high = ragged.extremes(values, start)
    several = ragged.sums(size > 1, of)
    middle = np.full(len(of) - 1, np.nan)
    m = ragged.lengths(of)
    order = np.lexsort((size, ragged.owners(of)))
    filled = m > 0
    middle[filled] = size[order[of[:-1][filled] + m[filled] // 2]]
    return Series(
        size=size,
        mean=ragged.means(values, start),
        sd=ragged.standard_deviations(values, start),
        range=np.where(size > 1, high - low, np.nan),
        first=time[start[:-1]] if len(size) else np.empty(0, dtype=np.int64),
        individuals=2 * several < m,
        median_size=middle,
    )
