"""Where shards run: here, a few at a time in threads, with bounded memory. The result does not depend on the cutting.

A shard is a set of characteristics whose values fit in memory together; each is read with one query in chart order.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import Protocol

import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio.conclusion import conclude
from portfolio.judgement import Measured, Values, Window, measure
from portfolio.plan import Judgement
from portfolio.result import STABLE
from portfolio.statistics import ragged
from portfolio.statistics.ragged import Bools, Ints

SHARD_VALUES = 1_500_000
"Values read at once: about 60 MB of arrays, and 20 times that while they are ranked."

Progress = Callable[[int, int], None]


class Reader(Protocol):
    """Values of some characteristics of the registry, by their row numbers (ascending)."""

    def counts(self) -> Ints:
        """Number of values of each registry row, (K,)."""
        ...

    def read(self, rows: Ints) -> Values:
        """The values of these registry rows, in this order."""
        ...


def judge(
    reader: Reader,
    registry: pd.DataFrame,
    window: Window,
    stretch_from: Ints,
    settings: Judgement,
    progress: Progress | None = None,
    *,
    workers: int = 1,
) -> Measured:
    """Both passes over the whole portfolio: concluded rows in the registry's order, and the evidence.

    A characteristic whose verdict (known only after the second pass) is 'two layers' while its chart was drawn with
    one, or the reverse, is measured again with the right limits; usually there are none or a handful.
    """
    shards = list(_shards(reader.counts()))
    measured = []
    # Threads suffice: sorting, logarithms and sums of long arrays work outside the interpreter's lock. The results
    # come back in the order of the shards, so their number and speed change nothing.
    with ThreadPoolExecutor(workers) as pool:
        finished = pool.map(lambda rows: _shard(reader, registry, window, stretch_from, settings, rows), shards)
        for done, one in enumerate(finished):
            measured.append(one)
            if progress is not None:
                progress(done + 1, len(shards))
    order = np.concatenate(shards) if shards else np.empty(0, dtype=np.int64)
    back = np.argsort(order, kind="stable")
    first = pd.concat([m.rows for m in measured], ignore_index=True).iloc[back].reset_index(drop=True)
    evidence = pa.concat_tables([m.evidence for m in measured])
    concluded = conclude(first, registry, window, settings)

    layered = (concluded["stability_note"] == "layers").to_numpy()
    redraw = np.flatnonzero(
        (layered != first["layers_drawn"].to_numpy()) & (concluded["stability"] == STABLE).to_numpy()
    )
    if len(redraw):
        again = _shard(reader, registry, window, stretch_from, settings, redraw, layered[redraw])
        concluded.loc[redraw, ["signals", "expected_signals"]] = again.rows[["signals", "expected_signals"]].to_numpy()
        kept = ~np.isin(evidence["characteristic"].to_numpy(), registry["characteristic"].to_numpy()[redraw])
        evidence = pa.concat_tables([evidence.filter(pa.array(kept)), again.evidence])
    return Measured(rows=concluded, evidence=evidence.sort_by("characteristic"))


def _shard(
    reader: Reader,
    registry: pd.DataFrame,
    window: Window,
    stretch_from: Ints,
    settings: Judgement,
    rows: Ints,
    layers: Bools | None = None,
) -> Measured:
    part = registry.iloc[rows].reset_index(drop=True)
    return measure(reader.read(rows), part, window, stretch_from[rows], settings, layers=layers)


def _shards(counts: Ints) -> Iterator[Ints]:
    """Registry rows cut so that each piece holds at most SHARD_VALUES values (or one characteristic)."""
    begin, held = 0, 0
    for row, count in enumerate(counts.tolist()):
        if held and held + count > SHARD_VALUES:
            yield np.arange(begin, row)
            begin, held = row, 0
        held += count
    if begin < len(counts):
        yield np.arange(begin, len(counts))


class FrameReader:
    """Values of a pandas frame in canonical columns; what `portfolio.judge` uses."""

    def __init__(self, measurements: pd.DataFrame, names: pd.Series[str], window: Window) -> None:
        known = pd.Index(names)
        row = known.get_indexer(measurements["characteristic"])
        time = measurements["taken_at"].to_numpy(dtype="datetime64[us]").astype(np.int64)
        value = measurements["value"].to_numpy(dtype=np.float64)
        keep = (row >= 0) & (time >= window.since) & (time < window.until) & np.isfinite(value)
        columns = [
            _codes(measurements[name])[keep] if name in measurements else np.full(int(keep.sum()), -1, dtype=np.int64)
            for name in ("subgroup", "stream")
        ]
        row, time, value = row[keep], time[keep], value[keep]
        order = np.lexsort((columns[1], columns[0], time, row))
        self._values = Values(
            ragged.starts_of(row[order], len(known)), time[order], columns[0][order], columns[1][order], value[order]
        )

    def counts(self) -> Ints:
        """Number of values of each registry row, (K,)."""
        return ragged.lengths(self._values.start)

    def read(self, rows: Ints) -> Values:
        """The values of these registry rows (ascending)."""
        if len(rows) == len(self._values.start) - 1:
            return self._values
        member = np.zeros(len(self._values.start) - 1, dtype=bool)
        member[rows] = True
        some = self._values.only(member[ragged.owners(self._values.start)])
        return Values(
            np.concatenate((some.start[:-1][member], some.start[-1:])),
            some.time,
            some.subgroup,
            some.stream,
            some.value,
        )


def _codes(column: pd.Series) -> Ints:
    """Text labels as whole numbers, -1 where there is none; equal labels get equal numbers."""
    codes, _ = pd.factorize(column.astype("string"), sort=True)
    return np.asarray(codes, dtype=np.int64)
