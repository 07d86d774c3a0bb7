"""One shard of characteristics: flat values in, one row each out. The only caller of `statistics/`.

Judging has two passes. `measure` (here) needs the values and looks at each characteristic by itself. `conclude`
(in `conclusion.py`) needs all rows at once, because false discovery control spans the portfolio. A row of `measure`
carries everything that `conclude` needs, so that values are read once.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio import evidence
from portfolio.plan import Judgement
from portfolio.statistics import (
    capability,
    centering,
    charts,
    components,
    gauge,
    normality,
    proportions,
    ragged,
    stability,
)
from portfolio.statistics import subgroups as grouping
from portfolio.statistics.ragged import Bools, Floats, Ints

DAY = 86_400_000_000  # microseconds
STREAMS_DIFFER_P = 0.01
"Streams count as different below this p (capability study, section 6)."
STABILITY_FIELDS = tuple(field.name for field in fields(stability.Evidence) if not field.name.startswith("extreme"))


@dataclass(frozen=True)
class Values:
    """Measurements of K characteristics as flat arrays, sorted by characteristic, time, subgroup.

    `time` in microseconds since 1970 (UTC); `subgroup` and `stream` -1 where there is none; `value` in the unit of
    the characteristic; `start` (K + 1,).
    """

    start: Ints
    time: Ints
    subgroup: Ints
    stream: Ints
    value: Floats

    def only(self, keep: Bools) -> Values:
        """The values marked in `keep` (N,); characteristics may become empty."""
        return Values(
            ragged.taken(self.start, keep), self.time[keep], self.subgroup[keep], self.stream[keep], self.value[keep]
        )


@dataclass(frozen=True)
class Window:
    """The judged time in microseconds since 1970 (UTC), half open."""

    since: int
    until: int


@dataclass(frozen=True)
class Measured:
    """First pass: `rows` one per characteristic in the registry's order, `evidence` what the pages draw."""

    rows: pd.DataFrame
    evidence: pa.Table


def measure(
    values: Values,
    registry: pd.DataFrame,
    window: Window,
    stretch_from: Ints,
    settings: Judgement,
    *,
    layers: Bools | None = None,
) -> Measured:
    """Measure K characteristics: everything about each that does not need the others.

    Parameters
    ----------
    values : measurements inside `window`
    registry : K rows as of the end of the window (`Registry.as_of`), same order as `values.start`
    stretch_from : (K,) microseconds; values before it count only for the whole window (a logged change or new
        limits starts a new stretch: stability study, section 7)
    settings : thresholds of the plan
    layers : (K,) whether the process has two layers of common cause; None: from this pass's own test
    """
    whole = values
    stretch = values.only(values.time >= stretch_from[ragged.owners(values.start)])
    lower, upper = _limits(registry)
    rows = pd.DataFrame({"characteristic": registry["characteristic"].to_numpy()})

    rows["window_measurements"] = ragged.lengths(whole.start)
    rows["last_seen"] = _last(whole.time, whole.start)
    window_mean = ragged.means(whole.value, whole.start)
    window_sd = ragged.standard_deviations(whole.value, whole.start)
    rows["window_mean"], rows["sigma_overall"] = window_mean, window_sd

    groups = grouping.form(
        stretch.time,
        stretch.subgroup,
        stretch.start,
        registry["subgroup_size"].fillna(0).to_numpy(dtype=np.int64),
        registry["subgroup_minutes"].to_numpy(dtype=np.float64),
    )
    series = grouping.summarise(stretch.value, stretch.time, groups)
    found = stability.assess(
        stretch.value,
        stretch.start,
        groups,
        series,
        minimum_subgroups=settings.minimum_subgroups,
        minimum_values=settings.minimum_values,
        expected=registry["expected"].fillna("").to_numpy(dtype=object),
    )
    for name in STABILITY_FIELDS:
        rows[f"stability.{name}"] = getattr(found, name)
    rows["since"] = _times(series.first, found.change)
    rows["settled_since"] = _times(series.first, found.settled)
    seconds = np.where(ragged.lengths(groups.of) > 1, _span(series.first, groups.of), np.nan) / 1e6
    with np.errstate(invalid="ignore", divide="ignore"):
        rows["period_hours"] = found.period * seconds / (ragged.lengths(groups.of) - 1) / 3600

    if layers is None:
        layers = (found.between_p < stability.LAYERS_P) & (found.p >= stability.LAYERS_P)
    drawn = charts.control_limits(series, groups, layers)
    flagged = charts.signals(drawn, series, groups)
    rows["layers_drawn"] = layers
    rows["signals"] = flagged.count
    rows["expected_signals"] = charts.expected_signals(
        ragged.lengths(groups.of), series.individuals, drawn.kind == "three-way", series.median_size
    )

    rows["measurements"] = ragged.lengths(stretch.start)
    rows["subgroups"] = ragged.lengths(groups.of)
    rows["subgroup_size"] = rows["measurements"] / rows["subgroups"].where(rows["subgroups"] > 0)
    rows["first"], rows["last"] = _first(stretch.time, stretch.start), _last(stretch.time, stretch.start)

    # Neighbours that lean on each other carry less information than their number (capability study, 2.5).
    leaning = (found.p_serial < stability.LAYERS_P) & (found.phi > 0)
    parts = components.components(
        stretch.value, stretch.start, groups, stretch.stream, serial=np.where(leaning, found.phi, np.nan)
    )
    rows["mean"] = parts.mean
    rows["sigma_within"], rows["sigma_between"] = parts.sigma_within, parts.sigma_between
    rows["sigma_stream"], rows["sigma_total"] = parts.sigma_stream, parts.sigma_total
    rows["n_effective"], rows["df_effective"] = parts.n_mean, parts.df
    rows["between_p"], rows["stream_p"], rows["streams"] = parts.between_p, parts.stream_p, parts.streams

    ordered = gauge.sorted_within(stretch.value, stretch.start)
    recorded = gauge.recording(ordered, stretch.start, registry["resolution"].to_numpy(dtype=np.float64))
    rows["distinct_values"], rows["recording_step"] = recorded.distinct, recorded.step
    differ = parts.stream_p < STREAMS_DIFFER_P
    alike = ordered
    if differ.any():
        moved = normality.without_stream_means(stretch.value, stretch.start, stretch.stream, differ)
        alike = gauge.sorted_within(moved, stretch.start)
    shape = normality.normality(alike, stretch.start, recorded.step)
    rows["normal_a2"], rows["normal_refused"], rows["normal_cautious"] = shape.a2, shape.refused, shape.cautious
    outside = ragged.sums(
        (stretch.value < np.repeat(lower, np.diff(stretch.start)))
        | (stretch.value > np.repeat(upper, np.diff(stretch.start))),
        stretch.start,
    )
    rows["outside_observed"] = outside
    rows["outside_high"] = proportions.clopper_pearson_upper(outside, rows["measurements"].to_numpy())

    _add_capability(rows, registry, settings, lower, upper)
    low, high = ragged.extremes(stretch.value, stretch.start)
    rows["beyond_bound"] = (low < registry["lower_bound"].to_numpy(dtype=np.float64)) | (
        high > registry["upper_bound"].to_numpy(dtype=np.float64)
    )
    rows["all_outside"] = (rows["measurements"] > 0) & (outside == rows["measurements"])
    table = evidence.table(
        registry["characteristic"].to_numpy(),
        stretch.value,
        stretch.start,
        groups,
        series,
        drawn,
        flagged,
        recorded.step,
    )
    return Measured(rows=rows, evidence=table)


def _add_capability(
    rows: pd.DataFrame, registry: pd.DataFrame, settings: Judgement, lower: Floats, upper: Floats
) -> None:
    """Indices of the stretch and of the window, their bounds, and what a move of the mean would do."""
    target = registry["target_cpk"].to_numpy(dtype=np.float64)
    mean, total = rows["mean"].to_numpy(), rows["sigma_total"].to_numpy()
    n_mean, df = rows["n_effective"].to_numpy(), rows["df_effective"].to_numpy()

    stretch = capability.indices(mean, total, lower, upper)
    within = capability.indices(mean, rows["sigma_within"].to_numpy(), lower, upper)
    rows["cp"], rows["cpk"] = stretch.cp, stretch.cpk
    rows["cp_within"], rows["cpk_within"] = within.cp, within.cpk
    rows["cpk_low"], rows["cpk_high"] = capability.capability_bounds(
        mean, total, n_mean, df, lower, upper, confidence=settings.confidence
    )

    window_mean, window_sd = rows["window_mean"].to_numpy(), rows["sigma_overall"].to_numpy()
    n = rows["window_measurements"].to_numpy(dtype=np.float64)
    overall = capability.indices(window_mean, window_sd, lower, upper)
    rows["pp"], rows["ppk"] = overall.cp, overall.cpk
    rows["ppk_low"], rows["ppk_high"] = capability.capability_bounds(
        window_mean, window_sd, n, n - 1, lower, upper, confidence=settings.confidence
    )
    rows["ppk_chance"] = capability.core_probability(window_mean, window_sd, n, n - 1, lower, upper, target)
    rows["ppm_window"] = capability.expected_ppm(window_mean, window_sd, n, n - 1, lower, upper)

    both = np.isfinite(lower) & np.isfinite(upper)
    middle = np.where(both, (np.where(both, lower, 0) + np.where(both, upper, 0)) / 2, np.nan)
    declared = registry["aim"].to_numpy(dtype=np.float64)
    aim = np.where(np.isfinite(declared) & both, declared, middle)
    moved = centering.centre(
        mean,
        total,
        n_mean,
        df,
        lower,
        upper,
        aim,
        target,
        setting_sd=settings.setting_sd_share * total,
        confidence=settings.confidence,
    )
    rows["aim"], rows["move"], rows["move_least"] = moved.aim, moved.move, moved.move_least
    rows["aim_low"], rows["aim_high"] = moved.window_low, moved.window_high
    rows["cpk_centered"], rows["cpk_centered_low"] = moved.cpk_centered, moved.cpk_centered_low
    rows["chance_centered"], rows["cpk_chance"] = moved.chance_centered, moved.chance_now
    rows["ppm_stretch"], rows["ppm_centered"] = moved.ppm_now, moved.ppm_centered
    rows["move_significant"] = centering.significant(moved.move, total, n_mean)
    rows["needed_sigma"] = capability.needed_sigma(np.where(np.isfinite(aim), aim, mean), lower, upper, target)
    with np.errstate(invalid="ignore"):
        rows["aim_off_middle"] = np.abs(aim - middle) > 0.05 * (upper - lower) / 2


def _limits(registry: pd.DataFrame) -> tuple[Floats, Floats]:
    lower = registry["lsl"].to_numpy(dtype=np.float64)
    upper = registry["usl"].to_numpy(dtype=np.float64)
    return np.where(np.isnan(lower), -np.inf, lower), np.where(np.isnan(upper), np.inf, upper)


def _first(time: Ints, start: Ints) -> pd.arrays.DatetimeArray:
    return _stamps(time, start[:-1], np.diff(start) > 0)


def _last(time: Ints, start: Ints) -> pd.arrays.DatetimeArray:
    return _stamps(time, start[1:] - 1, np.diff(start) > 0)


def _times(first: Ints, index: Ints) -> pd.arrays.DatetimeArray:
    return _stamps(first, index, index >= 0)


def _stamps(time: Ints, index: Ints, there: Bools) -> pd.arrays.DatetimeArray:
    out = np.full(len(index), np.datetime64("NaT"), dtype="datetime64[us]")
    out[there] = time[index[there]].astype("datetime64[us]")
    return pd.array(out)


def _span(first: Ints, of: Ints) -> Floats:
    """Time from the first to the last subgroup of each characteristic, microseconds, 0 where there is none."""
    filled = np.diff(of) > 0
    out = np.zeros(len(of) - 1)
    out[filled] = first[of[1:][filled] - 1] - first[of[:-1][filled]]
    return out
