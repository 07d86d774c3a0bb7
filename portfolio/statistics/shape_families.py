"""The shapes a characteristic may have: tails and quantiles, each family in its own parameters.

Families other than normal and Student t live on y > 0, the distance from a natural bound. Three parameters each,
NaN where a family has fewer; arrays broadcast against each other.

=============  ===========================  =====================
family         parameters                   unit
=============  ===========================  =====================
normal         mean, sigma, -               unit, unit
lognormal      mean and sigma of ln y, -    -, -
weibull        shape, scale, -              -, unit
gamma          shape, scale, -              -, unit
folded normal  mean, sigma before folding   unit, unit
half-normal    sigma before folding, -, -   unit
rayleigh       sigma of each direction      unit
student t      centre, scale, freedom       unit, unit, - (may be infinite: the normal)
=============  ===========================  =====================
"""

from __future__ import annotations

import numpy as np
from scipy.special import erf, erfc, gammainc, gammaincc, gammaincinv, ndtr, ndtri, stdtr, stdtrit

from portfolio.statistics.ragged import Floats

FAMILIES = ("normal", "lognormal", "weibull", "gamma", "folded normal", "half-normal", "rayleigh", "student t")
NUMBER = {family: index for index, family in enumerate(FAMILIES)}
FREE = np.array([2, 2, 2, 2, 2, 1, 1, 3])
"Free parameters of each family."
BOUNDED = np.array([False, True, True, True, True, True, True, False])
"Families that live on one side of a natural bound."
FOLDED_STEPS = 40
FOLDED_NEAR = 1e-12


def tails(family: str, y: Floats, a: Floats, b: Floats, c: Floats) -> tuple[Floats, Floats]:
    """Probability below and above y; both keep their digits in their own tail. y <= 0 has nothing below it."""
    if family == "normal":
        z = (y - a) / b
        return ndtr(z), ndtr(-z)
    if family == "student t":
        return _student((y - a) / b, c)
    y = np.maximum(y, 0.0)
    with np.errstate(divide="ignore", over="ignore", under="ignore"):
        if family == "lognormal":
            z = (np.log(y) - a) / b
            return ndtr(z), ndtr(-z)
        if family == "weibull":
            power = (y / b) ** a
            return -np.expm1(-power), np.exp(-power)
        if family == "gamma":
            return gammainc(a, y / b), gammaincc(a, y / b)
        if family == "folded normal":
            near, mirrored = (y - a) / b, (-y - a) / b
            return ndtr(near) - ndtr(mirrored), ndtr(-near) + ndtr(mirrored)
        if family == "half-normal":
            z = y / (a * np.sqrt(2))
            return erf(z), erfc(z)
        if family == "rayleigh":
            half = (y / a) ** 2 / 2
            return -np.expm1(-half), np.exp(-half)
    raise ValueError(f"unknown family {family!r}; known are {', '.join(FAMILIES)}")


def quantile(family: str, p: Floats, a: Floats, b: Floats, c: Floats) -> Floats:
    """The y with probability p below it; p strictly between 0 and 1."""
    out: Floats
    if family == "normal":
        out = a + b * ndtri(p)
    elif family == "student t":
        out = a + b * student_quantile(p, c)
    elif family == "lognormal":
        out = np.exp(a + b * ndtri(p))
    elif family == "weibull":
        out = b * (-np.log1p(-p)) ** (1 / a)
    elif family == "gamma":
        out = b * gammaincinv(a, p)
    elif family == "folded normal":
        out = b * _folded_quantile(p, a / b)
    elif family == "half-normal":
        out = a * ndtri((1 + p) / 2)
    elif family == "rayleigh":
        out = a * np.sqrt(-2 * np.log1p(-p))
    else:
        raise ValueError(f"unknown family {family!r}; known are {', '.join(FAMILIES)}")
    return out


def student_quantile(p: Floats, freedom: Floats) -> Floats:
    """Quantile of the standard Student t; infinite degrees of freedom are the normal."""
    p, freedom = np.broadcast_arrays(p, freedom)
    out: Floats = np.where(np.isinf(freedom), ndtri(p), stdtrit(np.where(np.isinf(freedom), 1.0, freedom), p))
    return out


def _student(z: Floats, freedom: Floats) -> tuple[Floats, Floats]:
    z, freedom = np.broadcast_arrays(z, freedom)
    endless = np.isinf(freedom)
    nu = np.where(endless, 1.0, freedom)
    return np.where(endless, ndtr(z), stdtr(nu, z)), np.where(endless, ndtr(-z), stdtr(nu, -z))


def _folded_quantile(p: Floats, ratio: Floats) -> Floats:
    """Quantile of |N(ratio, 1)| by Newton steps from below: both starts are lower bounds of the quantile."""
    p, ratio = np.broadcast_arrays(p, ratio)
    y = np.maximum(np.maximum(ratio + ndtri(p), ndtri((1 + p) / 2)), 1e-300)
    moving = np.ones(y.shape, dtype=bool)
    with np.errstate(invalid="ignore", divide="ignore"):
        for _ in range(FOLDED_STEPS):
            gap = ndtr(y - ratio) - ndtr(-y - ratio) - p
            density = (np.exp(-((y - ratio) ** 2) / 2) + np.exp(-((y + ratio) ** 2) / 2)) / np.sqrt(2 * np.pi)
            step = np.clip(-gap / density, -0.5 * y, 0.5)
            y = np.where(moving, y + step, y)
            moving &= np.abs(step) > FOLDED_NEAR * y
            if not moving.any():
                break
    return y
