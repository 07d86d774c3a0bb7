"""The rows that pictures are drawn from: one judgement row and its evidence become a few short columns."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd

from portfolio.publishing.charts import normal_curve
from portfolio.publishing.numbers import missing

Row = Mapping[str, Any]
Rows = dict[str, list[dict[str, Any]]]


def control(row: Row, evidence: Row, zone: str) -> tuple[Rows, Rows]:
    """Location and spread over time with their control limits; no specification value is among the rows."""
    t = local_milliseconds(evidence["taken"], zone)
    m = len(t)
    beyond, signalled = _flagged(evidence)
    location = _column(evidence["location"])
    limits = [_each(_column(evidence[f"location_{side}"]), m) for side in ("lower", "upper")]
    centre = [_digits(evidence["location_centre"])] * m
    change = [] if missing(row.get("since")) else [{"t": local_milliseconds([row["since"]], zone)[0]}]
    spread = _column(evidence["spread"])
    around = [_each(_column(evidence[f"spread_{side}"]), m) for side in ("lower", "upper", "centre")]
    return (
        {
            "points": [
                {"t": a, "v": v, "s": int(i in signalled)} for i, (a, v) in enumerate(zip(t, location, strict=True))
            ],
            "limits": _constant_parts(t, limits[0], limits[1], centre),
            "change": change,
        },
        {
            "spreads": [
                {"t": a, "v": v, "s": int(i in beyond)}
                for i, (a, v) in enumerate(zip(t, spread, strict=True))
                if v is not None
            ],
            "spreadlimits": _constant_parts(t, around[0], around[1], around[2]),
        },
    )


def histogram(row: Row, evidence: Row) -> Rows:
    """Bins, the fitted curve and the specification limits; no control limit is among the rows."""
    counts = [int(c) for c in evidence["bin_count"]]
    first, width = evidence["bin_start"], evidence["bin_width"]
    bins = [
        {"x": _digits(first + i * width), "b": _digits(first + (i + 1) * width), "n": c} for i, c in enumerate(counts)
    ]
    curve = []
    if row["shape"] and not missing(row["sigma_total"]) and row["sigma_total"] > 0:
        curve = normal_curve(row["mean"], row["sigma_total"], -math.inf, math.inf, sum(counts) * width)
    return {"bins": bins, "curve": curve, "marks": marks(row)}


def centering(row: Row) -> Rows:
    """The process now and with the mean at the aim, between the specification limits."""
    sigma = row["sigma_total"]
    window = []
    if not missing(row["aim_low"]):
        window = [{"x": _digits(row["aim_low"]), "b": _digits(row["aim_high"])}]
    return {
        "window": window,
        "now": normal_curve(row["mean"], sigma, -math.inf, math.inf, 1.0),
        "after": normal_curve(row["aim"], sigma, -math.inf, math.inf, 1.0),
        "marks": marks(row),
    }


def marks(row: Row) -> list[dict[str, Any]]:
    """Specification limits and, where there is one, the aim."""
    out = [
        {"x": _digits(row[name]), "k": "limit", "w": word}
        for name, word in (("lsl", "lower limit"), ("usl", "upper limit"))
        if not missing(row[name])
    ]
    if not missing(row.get("aim")):
        out.append({"x": _digits(row["aim"]), "k": "aim", "w": "aim"})
    return out


def history(rows: pd.DataFrame, target: float, zone: str) -> Rows:
    """The index of earlier judgements with its bounds."""
    kept = rows[rows["index"].notna()]
    t = local_milliseconds(kept["as_of"], zone)
    return {
        "history": [
            {"t": a, "v": _digits(v), "l": _digits(low), "u": _digits(high)}
            for a, v, low, high in zip(t, kept["index"], kept["index_low"], kept["index_high"], strict=True)
        ],
        "target": [{"v": target}],
    }


def overview(results: pd.DataFrame, target: float) -> Rows:
    """Index now against index if only the mean were moved; predictable characteristics with both."""
    some = results[results["cpk_centered"].notna() & results["index"].notna()]
    return {
        "field": [{"x": -0.5, "x2": target, "y": target, "y2": 3.0, "w": "moving the mean is enough"}],
        "targets": [{"v": target}],
        "points": [
            {"x": _digits(x), "y": _digits(y), "k": "listed" if pd.notna(rank) else "other", "i": int(i)}
            for i, x, y, rank in zip(some.index, some["index"], some["cpk_centered"], some["rank"], strict=True)
        ],
    }


def local_milliseconds(moments: Any, zone: str) -> list[int]:
    """Local clock time as milliseconds, so that the axis shows the plant's day."""
    stamps = pd.DatetimeIndex(np.asarray(moments, dtype="datetime64[us]")).tz_localize("UTC").tz_convert(ZoneInfo(zone))
    return list((stamps.tz_localize(None).asi8 // 1000).tolist())


def _flagged(evidence: Row) -> tuple[set[int], set[int]]:
    """Subgroups beyond the spread limits, and those with a signal of the location."""
    beyond: set[int] = set()
    signalled: set[int] = set()
    for i, rule in zip(evidence["signal_index"], evidence["signal_rule"], strict=True):
        (beyond if rule == "spread" else signalled).add(int(i))
    return beyond, signalled


def _column(values: Any) -> list[float | None]:
    """Numbers of one picture to six digits of the largest; None where there is none."""
    x = np.asarray(values, dtype=np.float64)
    there = np.isfinite(x)
    if not there.any():
        return [None] * len(x)
    largest = float(np.abs(x[there]).max())
    rounded = np.round(x, 5 - math.floor(math.log10(largest))) if largest else x
    return [v if ok else None for v, ok in zip(rounded.tolist(), there.tolist(), strict=True)]


def _each(values: list[float | None], m: int) -> list[float | None]:
    """A limit for every subgroup; a single one counts for all."""
    return values * m if len(values) == 1 else values


def _constant_parts(t: list[int], lower: list[Any], upper: list[Any], centre: list[Any]) -> list[dict[str, Any]]:
    """Limits as steps: only where they change, and at the last subgroup."""
    out = []
    before = None
    for i, now in enumerate(zip(lower, upper, centre, strict=True)):
        if now != before or i == len(t) - 1:
            out.append({"t": t[i], "l": now[0], "u": now[1], "c": now[2]})
        before = now
    return out


def _digits(value: Any) -> float | None:
    return None if missing(value) or not math.isfinite(value) else float(f"{value:.6g}")
