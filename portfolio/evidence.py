"""What the pages draw: subgroup series, control limits, signals and bins of each characteristic, as list columns.

Long stretches are thinned for drawing; every subgroup with a signal stays and the row says that it was thinned.
"""

from __future__ import annotations

import numpy as np
import pyarrow as pa

from portfolio.statistics import ragged
from portfolio.statistics.charts import Charts, Signals
from portfolio.statistics.ragged import Bools, Floats, Ints
from portfolio.statistics.subgroups import Series, Subgroups

MOST_SUBGROUPS = 250
"Subgroups that a chart shows; more would only overprint (report study, section 5)."
MOST_BINS = 24
RULES = {1: "1", 2: "2", 3: "3", 4: "4", 5: "spread"}


def table(
    names: np.ndarray,
    values: Floats,
    start: Ints,
    groups: Subgroups,
    series: Series,
    drawn: Charts,
    flagged: Signals,
    step: Floats,
) -> pa.Table:
    """One row for each characteristic with at least one value; columns as in the store's table `evidence`."""
    count = len(names)
    keep = _shown(groups.of, flagged)
    of = ragged.taken(groups.of, keep)
    place = np.cumsum(keep) - 1 - np.repeat(of[:-1], np.diff(groups.of))  # position inside the thinned list

    owner = np.repeat(np.arange(count), np.diff(groups.of))
    order = np.lexsort((flagged.rule, flagged.index))
    index, rule = flagged.index[order], flagged.rule[order]
    signals_of = ragged.starts_of(owner[index], count)
    bins, bin_start, bin_width, bins_of = _bins(values, start, step)

    columns = {
        "characteristic": pa.array(names, pa.string()),
        "chart": pa.array(drawn.kind, pa.string()),
        "taken": _lists(pa.array(series.first[keep].astype("datetime64[us]")), of),
        "location": _lists(pa.array(series.mean[keep]), of),
        "spread": _lists(pa.array(drawn.spread[keep], from_pandas=True), of),
        "size": _lists(pa.array(series.size[keep].astype(np.int32)), of),
        "location_centre": pa.array(drawn.centre, from_pandas=True),
        "location_lower": _lists(pa.array(drawn.lower[keep], from_pandas=True), of),
        "location_upper": _lists(pa.array(drawn.upper[keep], from_pandas=True), of),
        "spread_centre": _lists(pa.array(drawn.spread_centre[keep], from_pandas=True), of),
        "spread_lower": _lists(pa.array(drawn.spread_lower[keep], from_pandas=True), of),
        "spread_upper": _lists(pa.array(drawn.spread_upper[keep], from_pandas=True), of),
        "between_centre": pa.array(drawn.between_centre, from_pandas=True),
        "between_upper": pa.array(drawn.between_upper, from_pandas=True),
        "signal_index": _lists(pa.array(place[index].astype(np.int32)), signals_of),
        "signal_rule": _lists(pa.array([RULES[r] for r in rule.tolist()], pa.string()), signals_of),
        "bin_start": pa.array(bin_start, from_pandas=True),
        "bin_width": pa.array(bin_width, from_pandas=True),
        "bin_count": _lists(pa.array(bins.astype(np.int32)), bins_of),
        "thinned": pa.array(np.diff(of) < np.diff(groups.of)),
    }
    return pa.table(columns).filter(pa.array(np.diff(start) > 0))


def _shown(of: Ints, flagged: Signals) -> Bools:
    """Which subgroups are drawn: every stride-th, the last, and every one with a signal."""
    m = np.diff(of)
    stride = np.maximum(1, -(-m // MOST_SUBGROUPS))
    position = np.arange(of[-1]) - np.repeat(of[:-1], m)
    keep = position % np.repeat(stride, m) == 0
    keep[of[1:][m > 0] - 1] = True
    keep[flagged.index] = True
    return keep


def _bins(values: Floats, start: Ints, step: Floats) -> tuple[Ints, Floats, Floats, Ints]:
    """Histogram counts (flat), first edge and width (K,), starts of the counts (K + 1,).

    Bins are whole multiples of the recording step, so that no bin is full only because it holds one step more.
    """
    n = np.diff(start)
    low, high = ragged.extremes(values, start)
    span = high - low
    wanted = np.clip(np.ceil(np.sqrt(n)), 6, MOST_BINS)
    tiny = np.maximum(np.abs(low), 1e-12) * 1e-9
    width = np.where(span > tiny, span / wanted, np.maximum(np.abs(low), 1.0) * 1e-3)
    coarse = np.isfinite(step) & (span > tiny) & (span / np.where(step > 0, step, np.inf) < 4 * MOST_BINS)
    with np.errstate(invalid="ignore", divide="ignore"):
        width = np.where(coarse, step * np.maximum(1, np.ceil(width / step - 1e-9)), width)
    first = np.where(coarse, low - step / 2, np.where(span > tiny, low, low - width / 2))
    with np.errstate(invalid="ignore"):
        number = np.where(n > 0, np.floor((high - first) / width + 1e-9) + 1, 0)
    number = np.nan_to_num(number).astype(np.int64)
    # Without a step the largest value lies on the last edge and belongs to the last full bin.
    number = np.where(~coarse & (number > 1), number - 1, number)
    of = np.concatenate(([0], np.cumsum(number))).astype(np.int64)
    owner = ragged.owners(start)
    inside = np.floor((values - first[owner]) / width[owner] + 1e-9).astype(np.int64)
    inside = np.clip(inside, 0, number[owner] - 1)
    counts = np.bincount(of[owner] + inside, minlength=int(of[-1])).astype(np.int64)
    return counts, first, width, of


def _lists(flat: pa.Array, start: Ints) -> pa.ListArray:
    return pa.ListArray.from_arrays(pa.array(start.astype(np.int32)), flat)
