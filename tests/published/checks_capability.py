"""Published numbers of capability, intervals, variance components, shares and StRD, by the product's public functions.

Each function takes a case of fixtures/published/*.json and returns the keys of its `expected`. scipy only fills what
is no business of the product: normal quantiles and a root search.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from scipy import optimize, stats

from portfolio.statistics import capability, centering, components, constants, exchangeability, proportions
from portfolio.statistics.subgroups import Subgroups, summarise

FOLDER = Path(__file__).parents[2] / "fixtures" / "published"
NONE = np.inf


def _one(*numbers: float) -> list[np.ndarray]:
    return [np.array([float(x)]) for x in numbers]


def _ppm(mean: float, sigma: float, lower: float, upper: float) -> float:
    return float(capability.plugin_ppm(*_one(mean, sigma, lower, upper))[0])


def _cpk(mean: float, sigma: float, lower: float, upper: float) -> float:
    return float(capability.indices(*_one(mean, sigma, lower, upper)).cpk[0])


def recentred(case: dict[str, Any]) -> dict[str, Any]:
    """The printed sigma is the mean range over the rounded factor 2.33; ours has the factor from its integral."""
    i = case["inputs"]
    ours, printed = i["Rbar"] / float(constants.d2(i["n"])), i["Rbar"] / 2.33
    mean, lower, upper = i["mean"], i["LSL"], i["USL"]
    index = capability.indices(*_one(mean, printed, lower, upper))
    moved = centering.centre(*_one(mean, printed, 1e6, 1e6, lower, upper, i["new_mean"], 1.33))
    return {
        "sigma": ours,
        "Z_USL": 3 * float(index.cpu[0]),
        "Z_LSL": 3 * float(index.cpl[0]),
        "p_upper": 1e-6 * _ppm(mean, printed, -NONE, upper),
        "p_lower": 1e-6 * _ppm(mean, printed, lower, NONE),
        "p_total": 1e-6 * _ppm(mean, printed, lower, upper),
        "Cpk": float(index.cpk[0]),
        "Z_centred": 3 * float(moved.cpk_centered[0]),
        "p_centred": 1e-6 * _ppm(i["new_mean"], printed, lower, upper),
        "Cpk_centred": float(moved.cpk_centered[0]),
    }


def ppm_of_cpk(case: dict[str, Any]) -> dict[str, Any]:
    """Least (one tail) and most (both tails) that a Cpk allows."""
    return fallout({"inputs": {"Cp": case["inputs"]["Cpk"]}})


def fallout(case: dict[str, Any]) -> dict[str, Any]:
    """Parts per million outside one limit and outside both, centred."""
    return {c: [_ppm(0, 1, -NONE, 3 * float(c)), _ppm(0, 1, -3 * float(c), 3 * float(c))] for c in case["inputs"]["Cp"]}


def shifted(case: dict[str, Any]) -> dict[str, Any]:
    """Parts per million outside +-k sigma, centred and with the mean 1.5 sigma off."""
    return {
        k: [_ppm(0, 1, -float(k), float(k)), _ppm(1.5, 1, -float(k), float(k))]
        for k in case["inputs"]["spec_half_width_sigma"]
    }


def one_limit(case: dict[str, Any]) -> dict[str, Any]:
    """A lower limit only."""
    i = case["inputs"]
    return {
        "Cpl": _cpk(i["mean"], i["sd"], i["LSL"], NONE),
        "fraction_below": 1e-6 * _ppm(i["mean"], i["sd"], i["LSL"], NONE),
    }


def off_target(case: dict[str, Any]) -> dict[str, Any]:
    """Cpmk is Cpk with the deviation from the target added to sigma."""
    i = case["inputs"]
    out = {}
    for name in ("A", "B"):
        mean, sd = i[name]["mean"], i[name]["sd"]
        index = capability.indices(*_one(mean, sd, i["LSL"], i["USL"]))
        out[name] = {
            "Cp": float(index.cp[0]),
            "Cpk": float(index.cpk[0]),
            "Cpm": float(capability.cpm(*_one(mean, sd, i["LSL"], i["USL"], i["T"]))[0]),
            "Cpmk": _cpk(mean, np.hypot(sd, mean - i["T"]), i["LSL"], i["USL"]),
        }
    return out


def nist_example(case: dict[str, Any]) -> dict[str, Any]:
    """k is the share of half the tolerance by which the mean is off: 1 - Cpk / Cp."""
    i = case["inputs"]
    index = capability.indices(*_one(i["mean"], i["sd"], i["LSL"], i["USL"]))
    cp, cpk = float(index.cp[0]), float(index.cpk[0])
    return {"Cp": cp, "Cpk": cpk, "Cpu": float(index.cpu[0]), "Cpl": float(index.cpl[0]), "k": 1 - cpk / cp}


def piston_rings(case: dict[str, Any]) -> dict[str, Any]:
    """Sigma from the mean range of subgroups of five."""
    values = np.array(case["inputs"]["subgroups"])
    m, size = values.shape
    cut = Subgroups(np.arange(m + 1) * size, np.array([0, m]))
    spans = summarise(values.ravel(), np.arange(values.size), cut).range
    sigma = float(np.mean(spans) / constants.d2(size))
    index = capability.indices(*_one(float(values.mean()), sigma, case["inputs"]["LSL"], case["inputs"]["USL"]))
    return {"sigma_within_R": sigma, "Cp": float(index.cp[0])}


def spread_interval(case: dict[str, Any]) -> dict[str, Any]:
    """Two-sided interval of Cp: one-sided bounds at half of the rest."""
    i = case["inputs"]
    cp = capability.indices(*_one((i["LSL"] + i["USL"]) / 2, i["s"], i["LSL"], i["USL"])).cp
    low, high = capability.spread_bounds(cp, np.array([i["n"] - 1.0]), confidence=(1 + i["confidence"]) / 2)
    return {"Cp": float(cp[0]), "lower": float(low[0]), "upper": float(high[0])}


def bissell_interval(case: dict[str, Any]) -> dict[str, Any]:
    """Two-sided normal approximation of Cpk."""
    i = case["inputs"]
    low, high = capability.bissell_bounds(*_one(i["Cpk_hat"], i["n"], i["n"] - 1), confidence=(1 + i["confidence"]) / 2)
    return {"lower": float(low[0]), "upper": float(high[0])}


def bissell_bound(case: dict[str, Any]) -> dict[str, Any]:
    """The exact bound that verdicts rest on, against Bissell's approximation within the tolerance of the case."""
    out = {}
    for key in case["expected"]:
        cpk, n = (float(x) for x in key.split("/"))
        low, _ = capability.capability_bounds(
            *_one(0, 1, n, n - 1, -NONE, 3 * cpk), confidence=case["inputs"]["confidence_one_sided"]
        )
        out[key] = float(low[0])
    return out


def kane(case: dict[str, Any]) -> dict[str, Any]:
    """Ratio of the Cp that pass and fail with the same risk, and the printed second column (see the note)."""
    out = {}
    for n in case["inputs"]["n"]:
        row = []
        for alpha in (0.10, 0.05):
            low, high = capability.spread_bounds(*_one(1, n - 1), confidence=1 - alpha)
            row += [float(high[0] / low[0]), float(high[0])]
        out[str(n)] = row
    return out


def least_estimate(case: dict[str, Any]) -> dict[str, Any]:
    """Factor by which the estimate must exceed the Cp that it is to prove."""
    confidence = case["inputs"]["confidence"]
    return {n: 1 / float(capability.spread_bounds(*_one(1, int(n) - 1), confidence=confidence)[0][0])
            for n in case["expected"]}  # fmt: skip


def _factor(n: int, coverage: float, confidence: float) -> float:
    """One-sided tolerance factor k: an estimated index of k / 3 has its lower bound at the coverage's z / 3."""
    z = float(stats.norm.ppf(coverage))

    def short(k: float) -> float:
        low, _ = capability.capability_bounds(*_one(0, 1, n, n - 1, -NONE, k), confidence=confidence)
        return 3 * float(low[0]) - z

    return float(optimize.brentq(short, z, 10 * z))


def tolerance_factors(case: dict[str, Any]) -> dict[str, Any]:
    """One-sided tolerance factors by the bound of an index."""
    i = case["inputs"]
    return {str(n): _factor(n, i["coverage"], i["confidence"]) for n in i["n"]}


def tolerance_factor(case: dict[str, Any]) -> dict[str, Any]:
    """One factor of the handbook."""
    i = case["inputs"]
    return {"k1_one_sided_noncentral_t": _factor(i["n"], i["coverage"], i["confidence"])}


def _split(values: list[float], group: list[int]) -> tuple[components.Components, int, float]:
    """Components of one characteristic whose groups are subgroups of one size; number and size of the groups."""
    order = np.argsort(np.asarray(group), kind="stable")
    start = np.flatnonzero(np.diff(np.asarray(group)[order], prepend=-1))
    cut = Subgroups(np.append(start, len(order)), np.array([0, len(start)]))
    y = np.asarray(values, dtype=np.float64)[order]
    parts = components.components(y, np.array([0, len(y)]), cut, np.full(len(y), -1))
    return parts, len(start), len(y) / len(start)


def one_way(case: dict[str, Any]) -> dict[str, Any]:
    """The analysis of variance rebuilt from the components: MS between = within + size x between."""
    i = case["inputs"]
    if "groups" in i and isinstance(i["groups"], list):
        values = [x for group in i["groups"] for x in group]
        labels = [at for at, group in enumerate(i["groups"]) for _ in group]
    elif "machine_diameter" in i:
        labels, values = [int(g) for g, _ in i["machine_diameter"]], [x for _, x in i["machine_diameter"]]
    else:
        labels, values = [int(g) for g, _ in i["group_y"]], [x for _, x in i["group_y"]]
    parts, groups, size = _split(values, labels)
    within = float(parts.sigma_within[0] ** 2)
    between = within + size * float(parts.sigma_between[0] ** 2)
    df_between, df_within = groups - 1, len(values) - groups
    return {
        "df_between": df_between,
        "SS_between": between * df_between,
        "MS_between": between,
        "F": between / within,
        "df_within": df_within,
        "SS_within": within * df_within,
        "MS_within": within,
        "resid_sd": float(parts.sigma_within[0]),
    }


def gear(case: dict[str, Any]) -> dict[str, Any]:
    """Batches of ten; the chi-square statistic of the handbook compares the plain variance with 0.1 squared."""
    rows = case["inputs"]["diameter_batch"]
    parts, groups, size = _split([x for x, _ in rows], [int(b) for _, b in rows])
    within = float(parts.sigma_within[0] ** 2)
    between = within + size * float(parts.sigma_between[0] ** 2)
    return {
        "anova_F": between / within,
        "SS_batch": between * (groups - 1),
        "SS_resid": within * (len(rows) - groups),
        "sd": float(parts.sigma_overall[0]),
        "chi2_for_sigma_0.1": (len(rows) - 1) * float(parts.sigma_overall[0] ** 2) / 0.1**2,
        "mean": float(parts.mean[0]),
    }


def two_batches(case: dict[str, Any]) -> dict[str, Any]:
    """Two batches as two characteristics of individuals."""
    batch, strength = np.loadtxt(FOLDER / case["inputs"]["csv"], delimiter=",", skiprows=1).T
    order = np.argsort(batch, kind="stable")
    n = np.bincount(batch.astype(int))[1:]
    start = np.concatenate(([0], np.cumsum(n)))
    cut = Subgroups(np.arange(len(batch) + 1), start)
    parts = components.components(strength[order], start, cut, np.full(len(batch), -1))
    sd = parts.sigma_overall
    return {
        "n1": int(parts.n[0]), "n2": int(parts.n[1]), "mean1": float(parts.mean[0]), "mean2": float(parts.mean[1]),
        "sd1": float(sd[0]), "sd2": float(sd[1]), "F": float(sd[0] ** 2 / sd[1] ** 2),
    }  # fmt: skip


def nested(case: dict[str, Any]) -> dict[str, Any]:
    """Wafers as subgroups, cassettes as streams; the handbook's cassettes are random: fixed ones times a / (a - 1)."""
    table = np.genfromtxt(FOLDER / case["inputs"]["csv"], delimiter=",", skip_header=1, usecols=(0, 1, 3))
    cassette, wafer, width = table[:, 0].astype(np.int64), table[:, 1].astype(np.int64), table[:, 2]
    a, b, n = len(np.unique(cassette)), len(np.unique(cassette * 10 + wafer)), 5
    start = np.flatnonzero(np.diff(cassette * 10 + wafer, prepend=-1))
    cut = Subgroups(np.append(start, len(width)), np.array([0, len(start)]))
    parts = components.components(width, np.array([0, len(width)]), cut, cassette)
    site, of_wafer = float(parts.sigma_error[0] ** 2), float(parts.sigma_between[0] ** 2)
    of_cassette = float(parts.sigma_stream[0] ** 2) * a / (a - 1)
    ms_wafer = site + n * of_wafer
    ms_cassette = ms_wafer + n * b / a * of_cassette
    return {
        "N": int(parts.n[0]), "mean": float(parts.mean[0]), "sd": float(parts.sigma_overall[0]),
        "SS_cassette": ms_cassette * (a - 1), "SS_wafer": ms_wafer * (b - a), "SS_site": site * (len(width) - b),
        "MS_cassette": ms_cassette, "MS_wafer": ms_wafer, "MS_site": site,
        "var_cassette": of_cassette, "var_wafer": of_wafer, "var_site": site,
    }  # fmt: skip


def univariate(case: dict[str, Any]) -> dict[str, Any]:
    """Certified mean, standard deviation and lag-1 autocorrelation."""
    i = case["inputs"]
    x = np.array(i["x"], dtype=np.float64) if "x" in i else np.loadtxt(FOLDER / i["csv"], skiprows=1)
    n = len(x)
    cut = Subgroups(np.arange(n + 1), np.array([0, n]))
    parts = components.components(x, np.array([0, n]), cut, np.full(n, -1))
    return {
        "n": int(parts.n[0]),
        "mean": float(parts.mean[0]),
        "sd_n_minus_1": float(parts.sigma_overall[0]),
        "autocorr_lag1": float(exchangeability.lag_one(x[None, :])[0]),
    }


def _shares(case: dict[str, Any], interval: Any) -> dict[str, Any]:
    out = {}
    for key in case["inputs"]["k/n"]:
        low, high = interval(*(int(x) for x in key.split("/")), confidence=case["inputs"]["confidence"])
        out[key] = [float(low), float(high)]
    return out


def clopper_pearson(case: dict[str, Any]) -> dict[str, Any]:
    """Exact interval."""
    return _shares(case, proportions.clopper_pearson)


def wilson(case: dict[str, Any]) -> dict[str, Any]:
    """Score interval."""
    return _shares(case, proportions.wilson)
