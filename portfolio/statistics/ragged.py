"""The one layout of ragged data: flat values and the starts of their groups.

`start` has one entry more than there are groups; group i is `values[start[i]:start[i + 1]]` and may be empty.
Everything here is a pure function of arrays. No group is ever visited in a Python loop.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Bools = NDArray[np.bool_]

CHUNK = 2_000_000
"Values worked on at once: keeps a portfolio of any size below some 200 MB."


def starts_of(keys: Ints, count: int) -> Ints:
    """Starts of the groups 0..count-1 in sorted `keys` (N,); groups without a key are empty. Returns (count + 1,)."""
    return np.searchsorted(keys, np.arange(count + 1)).astype(np.int64)


def lengths(start: Ints) -> Ints:
    """Number of elements of each group, (K,)."""
    return np.diff(start)


def owners(start: Ints) -> Ints:
    """Index of the group that each element belongs to, (N,)."""
    return np.repeat(np.arange(len(start) - 1), np.diff(start))


def sums(values: NDArray[np.generic], start: Ints) -> Floats:
    """Sum of each group, (K,); 0 for an empty group. Pairwise inside each group, so long groups keep their digits."""
    filled = np.flatnonzero(np.diff(start) > 0)
    out = np.zeros(len(start) - 1)
    if len(filled):
        inside = np.asarray(values, dtype=np.float64)[: start[-1]]
        out[filled] = np.add.reduceat(inside, start[:-1][filled])
    return out


def extremes(values: Floats, start: Ints) -> tuple[Floats, Floats]:
    """Smallest and largest value of each group, two (K,) arrays; NaN for an empty group."""
    filled = np.flatnonzero(np.diff(start) > 0)
    low = np.full(len(start) - 1, np.nan)
    high = low.copy()
    if len(filled):
        inside = values[: start[-1]]
        low[filled] = np.minimum.reduceat(inside, start[:-1][filled])
        high[filled] = np.maximum.reduceat(inside, start[:-1][filled])
    return low, high


def means(values: Floats, start: Ints) -> Floats:
    """Mean of each group, (K,); NaN for an empty group. Two passes, so a large offset costs no digits (StRD NumAcc)."""
    n = np.diff(start)
    with np.errstate(invalid="ignore", divide="ignore"):
        first = sums(values, start) / n
    correction = sums(values[: start[-1]] - np.repeat(first, n), start)
    with np.errstate(invalid="ignore", divide="ignore"):
        return first + correction / n


def squares_about(values: Floats, start: Ints, centre: Floats) -> Floats:
    """Sum of squared deviations of each group from `centre` (K,), (K,); 0 for an empty group."""
    deviation = values[: start[-1]] - np.repeat(centre, np.diff(start))
    return sums(deviation * deviation, start)


def standard_deviations(values: Floats, start: Ints) -> Floats:
    """Standard deviation (divisor n - 1) of each group, (K,); NaN below two values."""
    n = np.diff(start)
    squares = squares_about(values, start, means(values, start))
    return np.sqrt(np.divide(squares, n - 1, out=np.full(len(n), np.nan), where=n > 1))


def padded(values: Floats, start: Ints, width: int | None = None) -> Floats:
    """The groups as rows of a (K, width) matrix, filled up with NaN; width defaults to the longest group."""
    n = np.diff(start)
    wide = int(n.max(initial=0)) if width is None else width
    out = np.full((len(n), wide), np.nan)
    column = np.arange(start[-1]) - np.repeat(start[:-1], n)
    out[owners(start), column] = values[: start[-1]]
    return out


def taken(start: Ints, keep: Bools) -> Ints:
    """New starts after keeping only the elements marked in `keep` (N,)."""
    return np.concatenate(([0], np.cumsum(keep)))[start].astype(np.int64)


def equal_lengths(start: Ints) -> Iterator[tuple[int, Ints]]:
    """Groups of equal length, in pieces of bounded size: (length, row numbers)."""
    n = np.diff(start)
    order = np.argsort(n, kind="stable")
    lengths, first = np.unique(n[order], return_index=True)
    for length, begin, end in zip(lengths.tolist(), first.tolist(), [*first[1:].tolist(), len(order)], strict=True):
        rows = order[begin:end]
        piece = max(1, CHUNK // max(length, 1))
        for at in range(0, len(rows), piece):
            yield length, rows[at : at + piece]
