"""What a family's maximum likelihood estimates would have been with other samples: the draws of the bootstrap.

Where estimates depend on a few sums whose distribution is known, the sums are drawn instead of the values. Weibull
estimates relative to the truth depend on n alone (Thoman, Bain & Antle 1969, from memory), so one set of draws serves
all. Folded normal and Student t are simulated, with at most `MOST_VALUES` values per draw: standard errors fall with
sqrt(n), so the rest is known.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, polygamma, psi

from portfolio.statistics import shape_fits
from portfolio.statistics.ragged import Floats, Ints

DRAWS = 200
"Draws per characteristic and family."
MOST_VALUES = 200
PIECE = 1_000_000
"Values simulated at once."
FEWEST = 8
GOLDEN = np.uint64(0x9E3779B97F4A7C15)
Seeds = NDArray[np.uint64]


@dataclass(frozen=True)
class Draws:
    """`parameters` (R, DRAWS, 3); what bias and standard deviation of an index are to be multiplied with, (R,)."""

    parameters: Floats
    bias_factor: Floats
    sigma_factor: Floats


def estimates(family: str, parameters: Floats, n: Floats, seeds: Seeds) -> Draws:
    """Estimates of one family from samples of `n` (R,) values with the given parameters (R, 3), seeded per row."""
    n = np.maximum(n, FEWEST)
    used = np.minimum(np.round(n), MOST_VALUES).astype(np.int64)
    if family == "weibull":
        drawn = _weibull(parameters, used)
    elif family == "folded normal" or family == "student t":
        drawn = _simulated(family, parameters, used, seeds)
    else:
        return Draws(_from_sums(family, parameters, n, seeds), np.ones(len(n)), np.ones(len(n)))
    share = used / n
    # Near 0 the folded estimates are pushed off their edge: that bias falls with sqrt(n) only.
    return Draws(drawn, np.sqrt(share) if family == "folded normal" else share, np.sqrt(share))


def _from_sums(family: str, parameters: Floats, n: Floats, seeds: Seeds) -> Floats:
    a, b, n = parameters[:, :1], parameters[:, 1:2], n[:, None]
    z = ndtri(uniforms(seeds, 2 * DRAWS, family))
    first, second = z[:, :DRAWS], z[:, DRAWS:]
    out = np.full((len(z), DRAWS, 3), np.nan)
    if family == "normal":
        out[..., 0], out[..., 1] = a + b * first / np.sqrt(n), b * np.sqrt(_chi_square(n - 1, second) / (n - 1))
    elif family == "lognormal":
        out[..., 0], out[..., 1] = a + b * first / np.sqrt(n), b * np.sqrt(_chi_square(n - 1, second) / n)
    elif family == "half-normal":
        out[..., 0] = a * np.sqrt(_chi_square(n, first) / n)
    elif family == "rayleigh":
        out[..., 0] = a * np.sqrt(_chi_square(2 * n, first) / (2 * n))
    else:
        out[..., 0], out[..., 1] = _gamma(a, b, n, first, second)
    return out


def _chi_square(freedom: Floats, z: Floats) -> Floats:
    """Chi-square from a normal score. Source: Wilson & Hilferty (1931)."""
    part = 2 / (9 * freedom)
    out: Floats = freedom * np.maximum(1 - part + z * np.sqrt(part), 1e-6) ** 3
    return out


def _gamma(k: Floats, scale: Floats, n: Floats, first: Floats, second: Floats) -> tuple[Floats, Floats]:
    """Estimates from the mean and, independent of it, the log of arithmetic over geometric mean.

    The latter from its exact first three cumulants, as a shifted gamma variable.
    """
    mean = k * scale * _chi_square(2 * n * k, first) / (2 * n * k)
    centre = psi(n * k) - np.log(n) - psi(k)
    variance = polygamma(1, k) / n - polygamma(1, n * k)
    third = polygamma(2, n * k) - polygamma(2, k) / n**2
    alpha = 4 * variance**3 / third**2
    gap = centre + np.sqrt(variance * alpha) * (_chi_square(2 * alpha, second) / (2 * alpha) - 1)
    shape = shape_fits.gamma_shape(np.maximum(gap, 0.02 * centre))
    return shape, mean / shape


def _weibull(parameters: Floats, used: Ints) -> Floats:
    k, scale = parameters[:, :1], parameters[:, 1:2]
    sizes, of = np.unique(used, return_inverse=True)
    pivots = np.stack([_weibull_pivots(int(size)) for size in sizes])[of]
    out = np.full((len(used), DRAWS, 3), np.nan)
    out[..., 0] = k * pivots[:, 0]
    out[..., 1] = scale * pivots[:, 1] ** (1 / k)
    return out


@cache
def _weibull_pivots(n: int) -> Floats:
    """Estimates of shape and scale from DRAWS samples of n standard exponential values, (2, DRAWS)."""
    u = uniforms(np.array([n], dtype=np.uint64), DRAWS * n, "weibull")
    sample = shape_fits.Sample(-np.log(u[0]), np.arange(DRAWS + 1) * n)
    found, _ = shape_fits.fitted("weibull", sample)
    return found[:, :2].T


def _simulated(family: str, parameters: Floats, used: Ints, seeds: Seeds) -> Floats:
    out = np.full((len(used), DRAWS, 3), np.nan)
    for size in np.unique(used).tolist():
        same = np.flatnonzero(used == size)
        piece = max(1, PIECE // (DRAWS * size))
        for at in range(0, len(same), piece):
            rows = same[at : at + piece]
            values = _values(family, parameters[rows], DRAWS * size, seeds[rows])
            sample = shape_fits.Sample(values.ravel(), np.arange(len(rows) * DRAWS + 1) * size)
            out[rows] = shape_fits.fitted(family, sample)[0].reshape(len(rows), DRAWS, 3)
    return out


def _values(family: str, parameters: Floats, count: int, seeds: Seeds) -> Floats:
    """Values of the family, (R, count)."""
    a, b, freedom = (parameters[:, column, None] for column in range(3))
    if family == "folded normal":
        return np.abs(a + b * ndtri(uniforms(seeds, count, family)))
    # Student t by the polar method of Bailey (1994)
    u = uniforms(seeds, 2 * count, family)
    radius = np.sqrt(freedom * np.expm1(-2 / freedom * np.log(u[:, :count])))
    return a + b * radius * np.cos(2 * np.pi * u[:, count:])


def uniforms(seeds: Seeds, count: int, family: str) -> Floats:
    """Numbers strictly between 0 and 1, (R, count), of each seed and family: the same whatever the other rows are.

    Source: SplitMix64, Steele, Lea & Flood (2014), from memory.
    """
    stream = np.array([sum(ord(letter) << 3 * at for at, letter in enumerate(family))], dtype=np.uint64)
    begin = _mixed(np.asarray(seeds, dtype=np.uint64) + GOLDEN * stream)
    bits = _mixed(begin[:, None] + GOLDEN * np.arange(1, count + 1, dtype=np.uint64))
    out: Floats = (bits >> np.uint64(11)).astype(np.float64) * 2.0**-53 + 2.0**-54
    return out


def _mixed(bits: Seeds) -> Seeds:
    bits = (bits ^ (bits >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    bits = (bits ^ (bits >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return bits ^ (bits >> np.uint64(31))
