"""Published numbers of shapes that are not normal, by the product's public functions."""

from __future__ import annotations

from typing import Any

import numpy as np

from portfolio.statistics import normality, shapes
from portfolio.statistics.shape_families import quantile, tails

NONE = np.inf


def _index(family: str, parameters: list[float], lower: float, upper: float) -> Any:
    full = np.array([parameters + [np.nan] * (3 - len(parameters))])
    q = shapes.from_bound(family, shapes.SPREAD, full, np.zeros(1), np.ones(1))
    return shapes.index_of(q[None], np.array([lower]), np.array([upper]))


def _fit(x: list[float], declared: str) -> shapes.Shapes:
    ordered, none = np.sort(np.array(x, dtype=float)), np.array([np.nan])
    return shapes.fit(ordered, np.array([0, len(x)]), np.array([declared], dtype=object), none, none)


def exponential(case: dict[str, Any]) -> dict[str, Any]:
    """The exponential is the Weibull of shape 1."""
    i = case["inputs"]
    q = quantile("weibull", np.array(i["p"]), np.array(1.0), np.array(1.0), np.array(np.nan))
    return {"q": q.tolist(), "Cpu": float(_index("weibull", [1, 1], -NONE, i["USL"]).cpu[0])}


def half_normal(case: dict[str, Any]) -> dict[str, Any]:
    """One-sided form error."""
    i = case["inputs"]
    q = quantile("half-normal", np.array(i["p"]), np.array(1.0), np.array(np.nan), np.array(np.nan))
    return {"q": q.tolist(), "Cpu": float(_index("half-normal", [1], -NONE, i["USL"]).cpu[0])}


def weibull(case: dict[str, Any]) -> dict[str, Any]:
    """Both limits inside the support."""
    i = case["inputs"]
    shape, scale, none = np.array(2.0), np.array(10.0), np.array(np.nan)
    index = _index("weibull", [2, 10], i["LSL"], i["USL"])
    return {
        "q": quantile("weibull", np.array(i["p"]), shape, scale, none).tolist(),
        "Cpu": float(index.cpu[0]),
        "Cpl": float(index.cpl[0]),
        "characteristic_life_prob": float(tails("weibull", scale, shape, scale, none)[0]),
    }


def pearson(case: dict[str, Any]) -> dict[str, Any]:
    """Standardised gamma of the given skewness: shape 4 / skewness^2."""
    i = case["inputs"]
    k = 4 / i["skew"] ** 2
    q = quantile("gamma", np.array(i["p"]), np.array(k), np.array(1.0), np.array(np.nan))
    return {"K": ((q - k) / np.sqrt(k)).tolist()}


def ball_bearings(case: dict[str, Any]) -> dict[str, Any]:
    """Maximum likelihood of two families."""
    x = case["inputs"]["x"]
    life, logs = _fit(x, "weibull").parameters[0], _fit(x, "lognormal").parameters[0]
    return {
        "weibull_shape": life[0],
        "weibull_scale": life[1],
        "lognormal_mu": logs[0],
        "lognormal_sigma_mle": logs[1],
    }


def chicks(case: dict[str, Any]) -> dict[str, Any]:
    """Anderson-Darling statistic with estimated mean and sigma, plain and adjusted for n."""
    x = case["inputs"]["x"]
    found = _fit(x, "normal")
    adjusted = normality.normality(np.sort(np.array(x, dtype=float)), np.array([0, len(x)]), np.array([np.nan]))
    return {
        "mean": found.parameters[0, 0],
        "sd": found.parameters[0, 1],
        "A2": found.a2[0],
        "A2_star": adjusted.a2[0],
    }


def roughness(case: dict[str, Any]) -> dict[str, Any]:
    """The same limit on the raw and on the reciprocal scale."""
    i = case["inputs"]
    limit = 1 / i["USL"]
    return {
        "Cpu_raw": float(_index("normal", [i["mean"], i["sd"]], -NONE, i["USL"]).cpu[0]),
        "spec_reciprocal": limit,
        "Cpl_reciprocal": float(_index("normal", [i["mean_reciprocal"], i["sd_reciprocal"]], limit, NONE).cpl[0]),
    }
