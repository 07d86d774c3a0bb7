"""The Python face: the same judgement as the command, on frames; and the stored judgements as frames."""

from __future__ import annotations

from dataclasses import dataclass
from os import PathLike
from pathlib import Path

import numpy as np
import pandas as pd

from portfolio import engine, triage
from portfolio.judgement import Window
from portfolio.plan import Judgement, Plan
from portfolio.registry import Registry
from portfolio.result import CONTRACT_COLUMNS
from portfolio.session import newest, reading

WEEK = 7 * 86_400_000_000


def judge(
    measurements: pd.DataFrame,
    registry: pd.DataFrame,
    window_weeks: int | None = None,
    target_cpk: float = 1.33,
    *,
    as_of: object = None,
    settings: Judgement | None = None,
) -> pd.DataFrame:
    """Judge every characteristic of a registry.

    Parameters
    ----------
    measurements : frame with `characteristic`, `taken_at` (times without a zone are UTC), `value`; optional
        `subgroup`, `stream`
    registry : frame in the contract's columns; at least `characteristic` and `lsl` or `usl`
    window_weeks : weeks before `as_of` that are judged; None: everything
    target_cpk : target where the registry gives none
    as_of : end of the window; None: just after the last measurement
    settings : thresholds; None: the defaults of a plan

    Returns
    -------
    One row per registered characteristic, sorted by name, with the contract's columns first.

    Raises
    ------
    ValueError
        If a required column is missing or times cannot be read.
    RegistryError
        If the registry contradicts itself; lists every problem.
    """
    from portfolio.publishing import wording

    missing = [name for name in ("characteristic", "taken_at", "value") if name not in measurements]
    if missing:
        raise ValueError(
            f"measurements lack the column(s) {', '.join(missing)}; they have {', '.join(measurements.columns)}"
        )
    taken = pd.to_datetime(measurements["taken_at"], utc=True).dt.tz_localize(None).astype("datetime64[us]")
    values = measurements.assign(taken_at=taken)
    values = values[values["taken_at"].notna() & values["value"].notna()]
    if as_of is None:
        newest = values["taken_at"].max()
        until = (newest if pd.notna(newest) else pd.Timestamp(0)) + pd.Timedelta(1, "us")
    else:
        until = pd.to_datetime(as_of, utc=True).tz_localize(None)
    end = int(np.datetime64(until, "us").astype(np.int64))
    first = values["taken_at"].min()
    begin = int(np.datetime64(first if pd.notna(first) else until, "us").astype(np.int64))
    window = Window(begin if window_weeks is None else end - window_weeks * WEEK, end)

    rows = Registry.from_frame(registry, {"default": target_cpk}).as_of(until.tz_localize("UTC").to_pydatetime())
    limits = rows["limits_since"].to_numpy(dtype="datetime64[us]")
    stretch = np.maximum(np.where(np.isnat(limits), window.since, limits.astype(np.int64)), window.since)
    chosen = settings or Judgement()
    reader = engine.FrameReader(values, rows["characteristic"], window)
    measured = engine.judge(reader, rows, window, stretch, chosen)
    decided = triage.decide(measured.rows, rows, chosen).results
    records = decided.to_dict("records")
    decided["reasons"] = [wording.reasons(row) for row in records]
    first_columns = [name for name in CONTRACT_COLUMNS if name in decided]
    return decided[first_columns + [name for name in decided if name not in first_columns]]


@dataclass(frozen=True)
class Weekly:
    """Stored judgements of one plan as frames; each property reads the store anew."""

    plan: Plan

    @property
    def judgement(self) -> pd.DataFrame:
        """The newest judgement: one row per characteristic."""
        return self._of_newest("judgement/results_of_run")

    @property
    def ranking(self) -> pd.DataFrame:
        """The newest centering list, and what has left it."""
        return self._of_newest("judgement/ranking_of_run")

    @property
    def history(self) -> pd.DataFrame:
        """The judged index of every characteristic in every judgement."""
        return self._of_newest("history/index_history")

    @property
    def runs(self) -> pd.DataFrame:
        """Every judgement that was made, oldest first."""
        with reading(self.plan) as store:
            return store.frame("judgement/runs")

    def _of_newest(self, query: str) -> pd.DataFrame:
        with reading(self.plan) as store:
            return store.frame(query, run_id=int(newest(store, self.plan)["run_id"]))


def open(plan: str | PathLike[str]) -> Weekly:
    """The stored judgements of a plan file."""
    return Weekly(Plan.read(Path(plan)))
