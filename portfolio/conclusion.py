"""Second pass of the judgement: verdicts over all rows at once.

Stability first (false discovery control over the portfolio), then capability. The two never look at each other's
limits: stability knows no specification, capability no control limit. What cannot be judged keeps its row and a code.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from portfolio.judgement import DAY, STABILITY_FIELDS, Window
from portfolio.plan import Judgement
from portfolio.result import NOT_JUDGED, STABLE, UNSTABLE
from portfolio.statistics import capability, discoveries, stability
from portfolio.statistics.ragged import Bools, Floats

FAR_OUTSIDE = 1.0
"Widths of the tolerance between mean and nearest limit from which the limits or the unit are suspected first."
FAR_RATIO = 4.0
"The same with one limit: mean over limit (or its inverse)."
COARSE_STEP = 2.0
"Recording step in sigmas above which no spread can be estimated (capability study, section 4)."
NOISY_GAUGE = 0.9
"Gauge sd as a share of the observed sd above which nothing is left to judge (capability study, section 0)."


def conclude(rows: pd.DataFrame, registry: pd.DataFrame, window: Window, settings: Judgement) -> pd.DataFrame:
    """Add q-values, verdicts, the judged index with bounds, and the reason where there is no verdict.

    Parameters
    ----------
    rows : first-pass rows of the WHOLE portfolio (`judgement.measure`), any order
    registry : the matching registry rows, same order
    """
    out = rows.copy()
    _conclude_stability(out, registry, window, settings)
    _conclude_capability(out, registry, settings)
    return out.drop(columns=[name for name in out.columns if name.startswith("stability.")])


def _conclude_stability(out: pd.DataFrame, registry: pd.DataFrame, window: Window, settings: Judgement) -> None:
    found = stability.Evidence(
        **{name: out[f"stability.{name}"].to_numpy() for name in STABILITY_FIELDS}, **_no_extremes()
    )
    q = discoveries.adjusted(found.p)
    verdict, note = stability.verdict(
        found,
        q,
        level=settings.false_discovery,
        practical_size=settings.practical_size,
        expected=registry["expected"].fillna("").to_numpy(dtype=object),
    )
    silent_after = np.datetime64(int(window.until - settings.silent_days * DAY), "us")
    last = out["last_seen"].to_numpy(dtype="datetime64[us]")
    there = out["window_measurements"].to_numpy() > 0
    silent = there & (last < silent_after)
    reason = np.where(~there, "no_data", np.where(silent, "silent", found.reason))
    judged = reason == ""
    out["stability"] = np.where(judged, verdict, NOT_JUDGED)
    out["stability_note"] = np.where(judged, note, reason)
    out["stability_p"], out["stability_q"] = found.p, q
    unstable = judged & (verdict == UNSTABLE)
    out["instability"] = np.where(unstable, found.kind, "")
    out["since"] = out["since"].where(unstable)
    out["settled_since"] = out["settled_since"].where(unstable)
    for column, values in (
        ("change_size", found.change_size),
        ("change_sigma", found.change_sigma),
        ("spread_ratio", found.spread_ratio),
    ):
        out[column] = np.where(unstable, values, np.nan)
    out["period_hours"] = out["period_hours"].where(unstable)
    out["serial"], out["movement_share"] = found.serial, found.movement_share
    for part in ("step", "serial", "cycle", "spread", "isolated"):
        out[f"p_{part}"] = getattr(found, f"p_{part}")


def _no_extremes() -> dict[str, np.ndarray]:
    """The flat arrays of isolated extremes stay with their shard; the verdict does not need them."""
    empty = np.empty(0, dtype=np.int64)
    return {"extreme_of": empty, "extreme_index": empty}


def _conclude_capability(out: pd.DataFrame, registry: pd.DataFrame, settings: Judgement) -> None:
    stable = (out["stability"] == STABLE).to_numpy()
    out["index_name"] = np.where(stable, "Cpk", "Ppk")
    out["index"] = np.where(stable, out["cpk"], out["ppk"])
    out["index_low"] = np.where(stable, out["cpk_low"], out["ppk_low"])
    out["index_high"] = np.where(stable, out["cpk_high"], out["ppk_high"])
    out["chance_now"] = np.where(stable, out["cpk_chance"], out["ppk_chance"])
    out["ppm_now"] = np.where(stable, out["ppm_stretch"], out["ppm_window"])

    target = registry["target_cpk"].to_numpy(dtype=np.float64)
    verdict, close = capability.verdict(
        out["index_low"].to_numpy(), out["index_high"].to_numpy(), out["index"].to_numpy(), target
    )
    note = _why_not(out, registry, settings)
    judged = note == ""
    out["capability"] = np.where(judged, verdict, NOT_JUDGED)
    out["close_call"] = judged & close
    out["capability_note"] = note
    out["target_cpk"] = target
    for column in ("index", "index_low", "index_high", "chance_now", "ppm_now"):
        out[column] = np.where(judged, out[column], np.nan)
    out["index_name"] = np.where(judged, out["index_name"], "")
    cautious = stable & out["normal_cautious"].to_numpy()
    out["shape"] = np.where(judged, np.where(cautious, "normal, cautious", "normal"), "")


def _why_not(out: pd.DataFrame, registry: pd.DataFrame, settings: Judgement) -> np.ndarray:
    """Code of the first reason that forbids a capability verdict, '' where there is none."""
    lower, upper = registry["lsl"].to_numpy(dtype=np.float64), registry["usl"].to_numpy(dtype=np.float64)
    sigma, mean = out["sigma_total"].to_numpy(), out["mean"].to_numpy()
    gauge_sd = registry["gauge_sd"].to_numpy(dtype=np.float64)
    n, df = out["measurements"].to_numpy(), out["df_effective"].to_numpy()
    stability_note = out["stability_note"].to_numpy()
    unjudged = (out["stability"] == NOT_JUDGED).to_numpy()
    stable = (out["stability"] == STABLE).to_numpy()
    reasons = [
        (np.isnan(lower) & np.isnan(upper), "no_limits"),
        (lower >= upper, "crossed_limits"),
        (stability_note == "no_data", "no_data"),
        (stability_note == "silent", "silent"),
        ((n > 1) & ~(sigma > 0), "constant"),
        (_far_outside(out, mean, lower, upper), "suspect_limits"),
        (out["beyond_bound"].to_numpy(), "outside_bound"),
        (unjudged & (stability_note == "coarse"), "coarse"),
        (out["recording_step"].to_numpy() > COARSE_STEP * sigma, "coarse"),
        (gauge_sd >= NOISY_GAUGE * sigma, "gauge_too_noisy"),
        (n < settings.minimum_values, "too_few"),
        (stable & ~(df >= settings.minimum_df), "too_few"),
        (unjudged, stability_note),
        (stable & (out["normal_refused"] & ~out["normal_cautious"]).to_numpy(), "no_shape"),
    ]
    note = np.full(len(out), "", dtype=object)
    for applies, code in reasons:
        note = np.where((note == "") & applies, code, note)
    return note


def _far_outside(out: pd.DataFrame, mean: Floats, lower: Floats, upper: Floats) -> Bools:
    """Every value outside, and so far that a wrong limit or unit is likelier than a wrong process."""
    with np.errstate(invalid="ignore", divide="ignore"):
        distance = np.fmax(lower - mean, mean - upper)
        two = distance > FAR_OUTSIDE * (upper - lower)
        limit = np.where(np.isnan(upper), lower, upper)
        ratio = np.abs(mean / limit)
        one = (np.isnan(lower) | np.isnan(upper)) & ((ratio > FAR_RATIO) | (ratio < 1 / FAR_RATIO))
    return out["all_outside"].to_numpy() & (two | one)
