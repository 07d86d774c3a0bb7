"""How values are spread over streams and subgroups, and what the streams explain.

A stream is a cavity, spindle, nozzle, machine. Streams and subgroups may be crossed (every subgroup holds every
stream), nested (each subgroup comes from one stream) or anything in between; the sums below hold for all.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.subgroups import Subgroups

SMALLEST_EIGENVALUE = 1e-9
"Share of the largest stream below which an eigenvalue of the reduced normal equations counts as zero."


@dataclass(frozen=True)
class Streams:
    """All (K,); sums are NaN-free zeros where `used` is false.

    `named` number of named streams; `used` whether they can be told apart (two named ones, two values each on
    average); `count` groups of values (values without a stream among named ones form a group of their own);
    `inside`, `outside` sums of squares about the stream means and of the stream means; `crossed` sum of n_ij^2 / n_i
    over streams i and subgroups j; `explained` what streams explain inside subgroups, with `rank` degrees of freedom
    (0 when each subgroup comes from one stream).
    """

    named: Ints
    used: Bools
    count: Floats
    inside: Floats
    outside: Floats
    crossed: Floats
    explained: Floats
    rank: Floats


def split_by_stream(left: Floats, start: Ints, subgroups: Subgroups, stream: Ints) -> Streams:
    """Split deviations from the mean (N,) of K characteristics by `stream` (N,), -1 where none is named."""
    k, n = len(start) - 1, np.diff(start)
    owner = ragged.owners(start)
    nothing = np.zeros(k)
    if not (stream >= 0).any():
        none = np.zeros(k, dtype=np.int64)
        return Streams(none, none > 0, nothing + 1, nothing, nothing, nothing, nothing, nothing)
    _, first, label = np.unique(owner * (stream.max() + 2) + stream + 1, return_index=True, return_inverse=True)
    group_owner, group_name = owner[first], stream[first]
    count = np.bincount(group_owner, minlength=k)
    named = np.bincount(group_owner[group_name >= 0], minlength=k).astype(np.int64)
    used = (named > 1) & (2 * count <= n)
    if not used.any():
        return Streams(named, used, nothing + 1, nothing, nothing, nothing, nothing, nothing)

    # Only characteristics with streams go on; their groups are numbered anew, in order of characteristic.
    chosen = used[owner]
    group = (np.cumsum(used[group_owner]) - 1)[label[chosen]]
    of_group = group_owner[used[group_owner]]
    y = left[chosen]
    size = np.bincount(group).astype(np.float64)
    mean = np.bincount(group, y) / size
    mean += np.bincount(group, y - mean[group]) / size
    inside = np.bincount(owner[chosen], (y - mean[group]) ** 2, minlength=k).astype(np.float64)
    outside = np.bincount(of_group, size * mean**2, minlength=k).astype(np.float64)

    subgroup = ragged.owners(subgroups.start)[chosen]
    members = np.diff(subgroups.start).astype(np.float64)
    subgroup_mean = ragged.means(left, subgroups.start)
    cells = sparse.csr_array((np.ones(len(y)), (subgroup, group)), shape=(len(members), len(size)))
    crossed = np.bincount(of_group, cells.power(2).sum(axis=0) / size, minlength=k).astype(np.float64)
    right = size * mean - np.bincount(group, subgroup_mean[subgroup])
    # Reduced normal equations of the streams with the subgroups absorbed: one block a characteristic.
    scaled = sparse.diags_array(1 / np.sqrt(np.maximum(members, 1))) @ cells
    reduced = (sparse.diags_array(size) - scaled.T @ scaled).tocoo()
    explained, rank = _solved(reduced, right, of_group, np.where(used, count, 0))
    return Streams(
        named=named,
        used=used,
        count=np.where(used, count, 1).astype(np.float64),
        inside=inside,
        outside=outside,
        crossed=crossed,
        explained=explained,
        rank=rank,
    )


def _solved(reduced: sparse.coo_array, right: Floats, owner: Ints, count: Ints) -> tuple[Floats, Floats]:
    """r' C^- r and the rank of C for the diagonal blocks C of `reduced`; `count` (K,) sizes of the blocks."""
    explained, rank = np.zeros(len(count)), np.zeros(len(count))
    origin = np.concatenate(([0], np.cumsum(count)))
    rows, columns = reduced.coords
    of_entry = owner[rows]
    for width in np.unique(count[count > 0]).tolist():  # a loop over numbers of streams, not over characteristics
        some = np.flatnonzero(count == width)
        slot = np.full(len(count), -1)
        slot[some] = np.arange(len(some))
        here = slot[of_entry] >= 0
        block = np.zeros((len(some), width, width))
        at = of_entry[here]
        block[slot[at], rows[here] - origin[at], columns[here] - origin[at]] = reduced.data[here]
        r = right[origin[some][:, None] + np.arange(width)]
        value, vector = np.linalg.eigh(block)
        scale = np.abs(np.diagonal(block, axis1=1, axis2=2)).max(axis=1, keepdims=True)
        there = value > SMALLEST_EIGENVALUE * np.maximum(scale, 1.0)
        turned = np.einsum("kij,ki->kj", vector, r)
        explained[some] = np.sum(np.where(there, turned**2 / np.where(there, value, 1.0), 0.0), axis=1)
        rank[some] = there.sum(axis=1)
    return explained, rank
