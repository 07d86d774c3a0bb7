"""The rows that pictures are drawn from: one judgement row and its evidence become a few short columns.

Numbers are rounded to what a picture can show, a ten-thousandth of its span, never to a number of significant digits:
1 000 000 003.2 Hz keeps its tenths. Limits and indices stand as they are registered or stored.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd

from portfolio.publishing.charts import DataSet
from portfolio.publishing.numbers import missing

Row = Mapping[str, Any]
Data = dict[str, DataSet]


def control(row: Row, evidence: Row, zone: str) -> tuple[Data, Data]:
    """Location and spread over time with their control limits; no specification value is among the rows."""
    t = local_milliseconds(evidence["taken"], zone)
    m = len(t)
    beyond, signalled = _flagged(evidence)
    location, low, high, centre = _together(
        evidence["location"],
        evidence["location_lower"],
        evidence["location_upper"],
        [evidence["location_centre"]],
    )
    spread, spread_low, spread_high, spread_centre = _together(
        evidence["spread"], evidence["spread_lower"], evidence["spread_upper"], evidence["spread_centre"]
    )
    shown = [i for i, value in enumerate(spread) if value is not None]  # the first moving range does not exist
    change = [] if missing(row.get("since")) else [{"t": local_milliseconds([row["since"]], zone)[0]}]
    return (
        {
            "points": _columns(t, v=location, s=sorted(signalled)),
            "limits": _steps(t, _each(low, m), _each(high, m), _each(centre, m)),
            "change": change,
        },
        {
            "spreads": _columns(
                [t[i] for i in shown],
                v=[spread[i] for i in shown],
                s=[place for place, i in enumerate(shown) if i in beyond],
            ),
            "spreadlimits": _steps(t, _each(spread_low, m), _each(spread_high, m), _each(spread_centre, m)),
        },
    )


def histogram(row: Row, evidence: Row) -> Data:
    """Bins, the fitted curve and the specification limits; no control limit is among the rows."""
    counts = [int(count) for count in evidence["bin_count"]]
    start, width = float(evidence["bin_start"]), float(evidence["bin_width"])
    curve: DataSet = []
    if not missing(row["shape"]) and not missing(row["sigma_total"]) and row["sigma_total"] > 0:
        curve = {"normal": [float(row["mean"]), float(row["sigma_total"]), sum(counts) * width]}
    return {"bins": {"bins": [start, width, counts]}, "curve": curve, "marks": marks(row)}


def centering(row: Row) -> Data:
    """The process now and with the mean at the aim, between the specification limits."""
    sigma = float(row["sigma_total"])
    window = [] if missing(row["aim_low"]) else [{"x": row["aim_low"], "b": row["aim_high"]}]
    return {
        "window": window,
        "now": {"normal": [float(row["mean"]), sigma, 1.0]},
        "after": {"normal": [float(row["aim"]), sigma, 1.0]},
        "marks": marks(row),
    }


def marks(row: Row) -> list[dict[str, Any]]:
    """Specification limits and, where there is one, the aim."""
    named = (("lsl", "limit", "lower limit"), ("usl", "limit", "upper limit"), ("aim", "aim", "aim"))
    return [{"x": row[name], "k": kind, "w": word} for name, kind, word in named if not missing(row.get(name))]


def history(rows: pd.DataFrame, target: float, zone: str) -> Data:
    """The index of earlier judgements with its bounds."""
    columns = {name: rows[name].to_numpy() for name in ("as_of", "index", "index_low", "index_high")}
    judged = np.isfinite(columns["index"].astype(np.float64))
    index, low, high = (_rounded(columns[name][judged], 4) for name in ("index", "index_low", "index_high"))
    return {
        "history": _columns(local_milliseconds(columns["as_of"][judged], zone), v=index, l=low, u=high),
        "target": [{"v": target}],
    }


def overview(target: float) -> Data:
    """Frame of the overview; its points are the list's columns, which the page loads anyway."""
    return {
        "field": [{"x": -0.5, "x2": target, "y": target, "y2": 3.0, "w": "moving the mean is enough"}],
        "targets": [{"v": target}],
    }


def local_milliseconds(moments: Any, zone: str) -> list[int]:
    """Local clock time as milliseconds, so that the axis shows the plant's day."""
    stamps = pd.DatetimeIndex(np.asarray(moments, dtype="datetime64[us]")).tz_localize("UTC").tz_convert(ZoneInfo(zone))
    return [int(moment) for moment in stamps.tz_localize(None).as_unit("ms").asi8]


def _flagged(evidence: Row) -> tuple[set[int], set[int]]:
    """Subgroups beyond the spread limits, and those with a signal of the location."""
    beyond: set[int] = set()
    signalled: set[int] = set()
    for i, rule in zip(evidence["signal_index"], evidence["signal_rule"], strict=True):
        (beyond if rule == "spread" else signalled).add(int(i))
    return beyond, signalled


def _together(*columns: Any) -> list[list[float | None]]:
    """Columns of one picture, rounded to a ten-thousandth of what they span together; None where there is no number."""
    arrays = [np.asarray(column, dtype=np.float64) for column in columns]
    everything = np.concatenate(arrays)
    there = everything[np.isfinite(everything)]
    span = float(np.ptp(there)) if there.size else 0.0
    digits = 4 - math.floor(math.log10(span)) if span > 0 else None
    return [_rounded(array, digits) for array in arrays]


def _rounded(column: Any, digits: int | None) -> list[float | None]:
    values = np.asarray(column, dtype=np.float64).tolist()
    if digits is None:
        return [value if math.isfinite(value) else None for value in values]
    return [round(value, digits) if math.isfinite(value) else None for value in values]


def _columns(t: Sequence[int], **columns: list[Any]) -> dict[str, Any]:
    """Rows over time in the short form of `charts.expanded`."""
    steps = [_short((after - before) / 1000) for before, after in pairwise(t)]
    return {"columns": {"t": [*t[:1], *steps], **columns}}


def _short(seconds: float) -> float | int:
    return int(seconds) if seconds.is_integer() else seconds


def _each(values: list[float | None], m: int) -> list[float | None]:
    """A limit for every subgroup; a single one counts for all."""
    return values * m if len(values) == 1 else values


def _steps(t: list[int], lower: list[Any], upper: list[Any], centre: list[Any]) -> list[dict[str, Any]]:
    """Limits as steps: only where they change, and at the last subgroup."""
    out = []
    before = None
    for i, now in enumerate(zip(lower, upper, centre, strict=True)):
        if now != before or i == len(t) - 1:
            out.append({"t": t[i], "l": now[0], "u": now[1], "c": now[2]})
        before = now
    return out
