"""Reads a window of measurements out of the store for the engine, shard by shard."""

from __future__ import annotations

from datetime import datetime

import numpy as np
import pandas as pd

from portfolio.judgement import Values
from portfolio.statistics.ragged import Ints
from portfolio.store import Store


class StoreReader:
    """Implements `engine.Reader` on a store; `names` are the registry's characteristics in row order."""

    def __init__(self, store: Store, names: pd.Series[str], since: datetime, until: datetime) -> None:
        self._store = store
        self._bounds = {"since": since, "until": until}
        known = store.arrays("judgement/characteristics_in_window", **self._bounds)
        place = pd.Index(known["name"]).get_indexer(pd.Index(names))
        there = place >= 0
        self._ids = np.where(there, known["characteristic_id"][place], -1).astype(np.int64) if len(place) else place
        self._counts = np.where(there, known["measurements"][place], 0).astype(np.int64) if len(place) else place

    def counts(self) -> Ints:
        """Number of values of each registry row, (K,)."""
        return self._counts

    def read(self, rows: Ints) -> Values:
        """The values of these registry rows, in this order."""
        ids = self._ids[rows]
        wanted = ids[ids >= 0]
        got = self._store.arrays("judgement/measurements_in_window", characteristics=wanted.tolist(), **self._bounds)
        found = got["characteristic_id"].astype(np.int64)
        begin = np.searchsorted(found, ids, side="left")
        length = np.where(ids >= 0, np.searchsorted(found, ids, side="right") - begin, 0)
        start = np.concatenate(([0], np.cumsum(length))).astype(np.int64)
        in_order = bool((np.diff(wanted) > 0).all())
        pick = slice(None) if in_order else np.repeat(begin - start[:-1], length) + np.arange(start[-1])
        return Values(
            start,
            got["taken_at"][pick].astype(np.int64),
            got["subgroup"][pick].astype(np.int64),
            got["stream"][pick].astype(np.int64),
            got["value"][pick].astype(np.float64),
        )
