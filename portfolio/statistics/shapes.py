"""What follows from the shape of each characteristic: quantiles, fractions outside, indices, and shapes that are moved.

Indices of shapes use quantiles (ISO 22514-4), which is the usual index where the shape is normal. How a shape is chosen
and when it is refused stands in `shape_choice`.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike

from portfolio.statistics import shape_families
from portfolio.statistics.capability import Indices
from portfolio.statistics.ragged import Floats
from portfolio.statistics.shape_choice import EMPIRICAL, SPREAD, TYPES, Shapes, fit
from portfolio.statistics.shape_families import BOUNDED, FAMILIES, NUMBER

__all__ = [
    "FAMILIES",
    "SPREAD",
    "TYPES",
    "Shapes",
    "fit",
    "index_of",
    "indices",
    "open_limits",
    "ppm",
    "quantiles",
    "scaled",
    "sheppard",
    "shifted",
]


def quantiles(shapes: Shapes, probabilities: ArrayLike) -> Floats:
    """Quantiles (K, P) in the unit of the characteristic; NaN where refused.

    `probabilities` (P,) strictly between 0 and 1. Shapes read off the values know only `SPREAD`; NaN elsewhere.
    """
    p = np.asarray(probabilities, dtype=np.float64)
    out = np.full((len(shapes), len(p)), np.nan)
    for family in FAMILIES:
        rows = np.flatnonzero(shapes.family == family)
        if len(rows):
            out[rows] = from_bound(
                family, p, shapes.parameters[rows][:, None], shapes.location[rows][:, None], shapes.sign[rows][:, None]
            )
    empirical = shapes.family == EMPIRICAL
    if empirical.any():
        for column, known in enumerate(SPREAD):
            out[np.ix_(empirical, np.isclose(p, known, rtol=1e-9))] = shapes.parameters[empirical, column][:, None]
    return out


def from_bound(family: str, p: Floats, parameters: Floats, location: Floats, sign: Floats) -> Floats:
    """Quantiles of x = location + sign y; `parameters` (..., 3), the rest broadcasts against `parameters[..., 0]`."""
    a, b, c = parameters[..., 0], parameters[..., 1], parameters[..., 2]
    if not BOUNDED[NUMBER[family]]:
        return shape_families.quantile(family, p, a, b, c)
    p, sign = np.broadcast_arrays(p, sign)
    return location + sign * shape_families.quantile(family, np.where(sign > 0, p, 1 - p), a, b, c)


def ppm(shapes: Shapes, lower: Floats, upper: Floats) -> Floats:
    """Parts per million outside the limits (-inf / +inf where there is none) for exactly this shape, (K,).

    A plug-in figure: below one value in the sample it is a statement of the shape, not of the values. NaN where
    refused or read off the values.
    """
    out = np.full(len(shapes), np.nan)
    for number, family in enumerate(FAMILIES):
        rows = np.flatnonzero(shapes.family == family)
        a, b, c = shapes.parameters[rows].T
        near, far = lower[rows], upper[rows]
        if BOUNDED[number]:
            location, sign = shapes.location[rows], shapes.sign[rows]
            near, far = sign * (near - location), sign * (far - location)
            near, far = np.where(sign > 0, near, far), np.where(sign > 0, far, near)
        out[rows] = 1e6 * (
            shape_families.tails(family, near, a, b, c)[0] + shape_families.tails(family, far, a, b, c)[1]
        )
    return out


def open_limits(shapes: Shapes, lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """The limits that values can pass: a limit at or beyond the end of a one-sided shape is none, (K,) each."""
    one_sided = np.isin(shapes.family, np.array(FAMILIES, dtype=object)[BOUNDED])
    with np.errstate(invalid="ignore"):
        no_lower = one_sided & (shapes.sign > 0) & (lower <= shapes.location)
        no_upper = one_sided & (shapes.sign < 0) & (upper >= shapes.location)
    return np.where(no_lower, -np.inf, lower), np.where(no_upper, np.inf, upper)


def indices(shapes: Shapes, lower: Floats, upper: Floats) -> Indices:
    """Cp, Cpl, Cpu, Cpk by the quantile method, (K,) each.

    Cpu = (U - q50) / (q99.865 - q50), Cpl = (q50 - L) / (q50 - q0.135), Cp = (U - L) / (q99.865 - q0.135), with the
    normal probabilities of -3, 0, 3. NaN where refused, where a limit is missing, where limits are crossed. A limit at
    the natural bound of a one-sided shape cannot be passed and counts as missing.

    Source: ISO 22514-4; Clements (1989).
    """
    lower, upper = open_limits(shapes, lower, upper)
    return index_of(quantiles(shapes, SPREAD), lower, upper)


def index_of(q: Floats, lower: Floats, upper: Floats) -> Indices:
    """The indices of quantiles `q` (K, 3) at `SPREAD`."""
    with np.errstate(invalid="ignore", divide="ignore"):
        low, middle, high = q[..., 0], q[..., 1], q[..., 2]
        ordered = np.asarray(lower) < upper
        cpl = np.where(ordered & np.isfinite(lower), (middle - lower) / (middle - low), np.nan)
        cpu = np.where(ordered & np.isfinite(upper), (upper - middle) / (high - middle), np.nan)
        cp = np.where(ordered & np.isfinite(lower) & np.isfinite(upper), (upper - lower) / (high - low), np.nan)
    return Indices(cp, cpl, cpu, np.fmin(cpl, cpu))


def shifted(shapes: Shapes, shift: Floats) -> Shapes:
    """The shapes with every value moved by `shift` (K,), in units: median and both tails move together."""
    parameters, fitted = shapes.parameters.copy(), shapes.fitted.copy()
    for number in np.flatnonzero(~BOUNDED):
        fitted[:, number, 0] += shift
        rows = shapes.family == FAMILIES[number]
        parameters[rows, 0] += shift[rows]
    empirical = shapes.family == EMPIRICAL
    parameters[empirical] += shift[empirical, None]
    return replace(shapes, parameters=parameters, fitted=fitted, location=shapes.location + shift)


def scaled(shapes: Shapes, factor: Floats) -> Shapes:
    """The shapes with the distance of every value from its natural bound multiplied by `factor` (K,) > 0.

    Spread grows with level, as for concentrations and times (capability study, 5.5). Without a bound from 0.
    """
    if (np.asarray(factor) <= 0).any():
        raise ValueError("a factor is not above 0; give how many times larger the values become")
    parameters, fitted = shapes.parameters.copy(), shapes.fitted.copy()
    away = shapes.location
    for number, family in enumerate(FAMILIES):
        rows = shapes.family == family
        fitted[:, number] = _stretched(family, fitted[:, number], factor, away)
        parameters[rows] = _stretched(family, parameters[rows], factor[rows], away[rows])
    empirical = shapes.family == EMPIRICAL
    parameters[empirical] = away[empirical, None] + factor[empirical, None] * (
        parameters[empirical] - away[empirical, None]
    )
    return replace(shapes, parameters=parameters, fitted=fitted)


def _stretched(family: str, parameters: Floats, factor: Floats, away: Floats) -> Floats:
    out = parameters.copy()
    if family in ("normal", "student t"):
        out[:, 0] = away + factor * (out[:, 0] - away)
        out[:, 1] *= factor
    elif family == "lognormal":
        out[:, 0] += np.log(factor)
    elif family in ("weibull", "gamma"):
        out[:, 1] *= factor
    else:
        out[:, :2] *= factor[:, None]
    return out


def sheppard(sigma: Floats, step: Floats) -> Floats:
    """Standard deviation freed of the recording step: sqrt(sigma^2 - step^2 / 12), (K,).

    Unbiased up to a step of 2 sigma; above it nothing helps and sigma is returned as it is (such characteristics are
    not judged). No step: unchanged. Source: Sheppard (1898); capability study, section 4.
    """
    with np.errstate(invalid="ignore"):
        corrects = (step > 0) & (step <= 2 * sigma)
        return np.where(corrects, np.sqrt(sigma**2 - np.where(corrects, step, 0.0) ** 2 / 12), sigma)
