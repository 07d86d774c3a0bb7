"""Published constants, control limits and run lengths, by the product's public functions.

Each function takes a case of fixtures/published/*.json and returns the keys of its `expected`.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from portfolio.statistics import capability, charts, ragged, subgroups
from portfolio.statistics import constants as factors
from portfolio.statistics.charts import WESTERN_ELECTRIC, Rule
from portfolio.statistics.run_lengths import average_run_length
from portfolio.statistics.subgroups import Series, Subgroups

ONE = np.array([1.0])


def constants(case: dict[str, Any]) -> dict[str, Any]:
    """Factors of the printed tables: A2, E2, D3, D4 for ranges; A3, B3, B4 for standard deviations."""
    n = np.array(case["inputs"]["n"], dtype=np.float64)
    everywhere = np.ones(len(n))
    found = {}
    for by_range, names in ((True, ("d2", "D3", "D4", "A2")), (False, ("c4", "B3", "B4", "A3"))):
        centre, lower, upper = charts.spread_limits(everywhere, n, np.full(len(n), by_range))
        found |= dict(
            zip(names, (centre, lower / centre, upper / centre, charts.WIDTH / centre / np.sqrt(n)), strict=True)
        )
    found |= {"d2": factors.d2(n), "d3": factors.d3(n), "c4": factors.c4(n), "E2": charts.WIDTH / factors.d2(n)}
    return {
        name: {str(size): float(found[name][at]) for at, size in enumerate(case["inputs"]["n"])}
        for name in case["inputs"]["keys"]
    }


def moving_range_factors(case: dict[str, Any]) -> dict[str, Any]:
    """Factors of the chart of individuals, from the mean and from the median of the moving ranges."""
    span = np.array([case["inputs"]["moving_range_span"]], dtype=np.float64)
    mean, median = float(factors.d2(span)[0]), float(factors.d4(span)[0])
    upper = float(charts.spread_limits(ONE, span, np.array([True]))[2][0])
    return {
        "2.66": charts.WIDTH / mean,
        "3.27": upper / mean,
        "median_X": charts.WIDTH / median,
        "median_mR": upper / median,
        "d4_2": median,
        "d2_2": mean,
    }


def individuals(case: dict[str, Any]) -> dict[str, Any]:
    """Individuals and moving range."""
    x = np.array(case["inputs"]["x"])
    _, drawn, _ = _chart(x, 1)
    assert drawn.kind[0] == "individuals"
    return {
        "mean": float(drawn.centre[0]),
        "MRbar": float(np.nanmean(drawn.spread)),
        "UCL_x": float(drawn.upper[0]),
        "LCL_x": float(drawn.lower[0]),
        "UCL_MR": float(drawn.spread_upper[0]),
    }


def mean_and_range(case: dict[str, Any]) -> dict[str, Any]:
    """Mean and range; the points that the source found outside, counted from 1."""
    values = np.array(case["inputs"]["subgroups"], dtype=np.float64)
    m, n = values.shape
    series, drawn, found = _chart(values.ravel(), n)
    assert drawn.kind[0] == "mean and range"
    sigma = float(drawn.sigma[0] * np.sqrt(n))
    out = _range_chart(drawn) | {"Rbar": float(series.range.mean()), "sigma_within": sigma}
    out["subgroups_out_x"] = (found.index[found.rule == 1] + 1).tolist()
    out["subgroups_out_R"] = (found.index[found.rule == charts.SPREAD_RULE] + 1).tolist()
    out["sd_overall"] = float(ragged.standard_deviations(values.ravel(), np.array([0, m * n]))[0])
    if "LSL" in case["inputs"]:
        limits = [np.array([case["inputs"][name]]) for name in ("LSL", "USL")]
        centre, spread = drawn.centre, np.array([sigma])
        out["Cp"] = float(capability.indices(centre, spread, *limits).cp[0])
        out["fraction_nonconforming"] = 1e-6 * float(capability.plugin_ppm(centre, spread, *limits)[0])
    return out


def mean_and_range_summary(case: dict[str, Any]) -> dict[str, Any]:
    """Mean and range of subgroups of which only mean and range are printed."""
    i = case["inputs"]
    mean, spans = np.array(i["subgroup_means"], dtype=np.float64), np.array(i["subgroup_ranges"], dtype=np.float64)
    m = len(mean)
    series = Series(
        size=np.full(m, i["n"]),
        mean=mean,
        sd=np.full(m, np.nan),
        range=spans,
        first=np.arange(m),
        individuals=np.array([False]),
        median_size=np.array([float(i["n"])]),
    )
    drawn = charts.control_limits(series, Subgroups(np.arange(m + 1) * i["n"], np.array([0, m])), np.array([False]))
    sigma = float(drawn.sigma[0] * np.sqrt(i["n"]))
    half = np.array([float(i["coded_spec_half_width"])])
    index = capability.indices(np.zeros(1), np.array([sigma]), -half, half)
    return _range_chart(drawn) | {"Rbar": float(spans.mean()), "sigma_within": sigma, "Cp": float(index.cp[0])}


def range_limits(case: dict[str, Any]) -> dict[str, Any]:
    """Only the averages are printed, for subgroups of ten (where our chart would plot s): the limits of the range."""
    i = case["inputs"]
    n = np.array([float(i["n"])])
    sigma = i["Rbar"] / factors.d2(n)
    _, lower, upper = charts.spread_limits(sigma, n, np.array([True]))
    half = float(charts.WIDTH * sigma[0] / np.sqrt(i["n"]))
    return {
        "UCL_x": i["xbarbar"] + half,
        "LCL_x": i["xbarbar"] - half,
        "UCL_R": float(upper[0]),
        "LCL_R": float(lower[0]),
    }


def mean_and_s(case: dict[str, Any]) -> dict[str, Any]:
    """Mean and s for subgroups of five (our chart would plot the range): sigma from s, and its limits."""
    values = np.array(case["inputs"]["subgroups"])
    m, n = values.shape
    series, drawn, _ = _chart(values.ravel(), n)
    sigma = charts.sigma_from_s(series, np.array([0, m]))
    centre, lower, upper = charts.spread_limits(sigma, np.array([float(n)]), np.array([False]))
    half = float(charts.WIDTH * sigma[0] / np.sqrt(n))
    return {
        "xbarbar": float(drawn.centre[0]),
        "sbar": float(centre[0]),
        "UCL_x": float(drawn.centre[0]) + half,
        "LCL_x": float(drawn.centre[0]) - half,
        "UCL_s": float(upper[0]),
        "LCL_s": float(lower[0]),
        "sigma_within": float(sigma[0]),
        "sd_of_subgroup_1": float(series.sd[0]),
    }


CHAMP_WOODALL = {
    **dict(zip("1234", WESTERN_ELECTRIC, strict=True)),
    "5": Rule(2, 2, 2.0, 3.0),
    "6": Rule(5, 5, 1.0, 3.0),
    "7": Rule(1, 1, 3.09, np.inf),
    "8": Rule(2, 3, 1.96, 3.09),
    "9": Rule(8, 8, 0.0, 3.09),
}
"""Rules by the numbers of their table."""


def run_length_combinations(case: dict[str, Any]) -> dict[str, Any]:
    """Combinations such as C12: rules 1 and 2 together, process unchanged."""
    shift = case["inputs"]["shift"]
    return {
        name: float(average_run_length([CHAMP_WOODALL[rule] for rule in name[1:]], shift)) for name in case["expected"]
    }


def run_length_all_rules(case: dict[str, Any]) -> dict[str, Any]:
    """All four Western Electric rules after a shift."""
    return _run_lengths(WESTERN_ELECTRIC, case["inputs"]["shift_in_sigma"])


def run_length_one_rule(case: dict[str, Any]) -> dict[str, Any]:
    """Points beyond 3 sigma only."""
    return _run_lengths(WESTERN_ELECTRIC[:1], case["inputs"]["shift_in_sigma_of_plotted_statistic"])


def operating_characteristic(case: dict[str, Any]) -> dict[str, Any]:
    """Means of n values after a shift in sigma of single values: run length and chance of missing the first mean."""
    i = case["inputs"]
    length = float(average_run_length([Rule(1, 1, i["L"], np.inf)], i["shift_sigma"] * np.sqrt(i["n"])))
    return {"beta": 1 - 1 / length, "ARL1": length}


def _run_lengths(rules: tuple[Rule, ...], shifts: list[str]) -> dict[str, float]:
    lengths = average_run_length(rules, [float(shift) for shift in shifts])
    return dict(zip(shifts, lengths.tolist(), strict=True))


def _chart(values: np.ndarray, size: int) -> tuple[Series, charts.Charts, charts.Signals]:
    """Chart of one characteristic in blocks of `size`."""
    time, start = np.arange(len(values)), np.array([0, len(values)])
    cut = subgroups.form(time, np.full(len(values), -1), start, np.array([size]), np.array([np.nan]))
    series = subgroups.summarise(values, time, cut)
    drawn = charts.control_limits(series, cut, np.array([False]))
    return series, drawn, charts.signals(drawn, series, cut)


def _range_chart(drawn: charts.Charts) -> dict[str, float]:
    return {
        "xbarbar": float(drawn.centre[0]),
        "UCL_x": float(drawn.upper[0]),
        "LCL_x": float(drawn.lower[0]),
        "UCL_R": float(drawn.spread_upper[0]),
        "LCL_R": float(drawn.spread_lower[0]),
    }
