"""What a family's maximum likelihood estimates would have been with other samples: the draws of the bootstrap.

Where estimates depend on a few sums whose distribution is known, the sums are drawn instead of the values, seeded per
characteristic. The other estimates, measured in the family's own scale, depend only on n and on one shape parameter:
they are simulated once for a grid of both, with the same random numbers at every node, and read off in between.
(Weibull: on n alone, Thoman, Bain & Antle 1969, from memory.) Nothing depends on other characteristics.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, polygamma, psi

from portfolio.statistics import shape_fits
from portfolio.statistics.ragged import Bools, Floats, Ints

DRAWS = 500
"Draws per characteristic and family: the standard error of a standard deviation is 3 %."
SIZES = np.array([8, 10, 13, 16, 20, 25, 32, 40, 50, 64, 80, 100, 125, 160, 200])
"Sample sizes that are simulated; from the next smaller one bias and standard deviation are carried on to n."
NODES = {
    "weibull": np.array([0.0, 1.0]),
    "folded normal": np.array([0.0, 0.25, 0.5, 0.75, 1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 4.0]),
    "student t": np.array([0.002, 0.03, 0.06, 0.1, 0.15, 0.2, 0.27, 0.34, 0.42, 0.5]),
}
"Mean over sigma of the folded normal and inverse degrees of freedom of Student t that are simulated."
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
    n = np.maximum(n, SIZES[0])
    if family not in NODES:
        return Draws(_from_sums(family, parameters, n, seeds), np.ones(len(n)), np.ones(len(n)))
    size = np.searchsorted(SIZES, n, side="right") - 1
    share = SIZES[size] / n
    # Near 0 the folded estimates are pushed off their edge: that bias falls with sqrt(n) only.
    bias = np.sqrt(share) if family == "folded normal" else share
    return Draws(_from_tables(family, parameters, size), bias, np.sqrt(share))


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


def _from_tables(family: str, parameters: Floats, size: Ints) -> Floats:
    a, b, c = (parameters[:, column, None] for column in range(3))
    nodes = NODES[family]
    at = np.zeros_like(a) if family == "weibull" else a / b if family == "folded normal" else 1 / c
    node = np.clip(np.searchsorted(nodes, at[:, 0], side="right") - 1, 0, len(nodes) - 2)
    share = np.clip((at - nodes[node][:, None]) / (nodes[node + 1] - nodes[node])[:, None], 0, 1)[..., None]
    near, far = (_looked_up(family, size, node + more, share[:, 0, 0] != 1 - more) for more in (0, 1))
    drawn = near + share * (far - near)
    out = np.full_like(drawn, np.nan)
    if family == "weibull":
        out[..., 0], out[..., 1] = a * drawn[..., 0], b * drawn[..., 1] ** (1 / a)
    elif family == "folded normal":
        out[..., 0], out[..., 1] = b * drawn[..., 0], b * drawn[..., 1]
    else:
        with np.errstate(divide="ignore"):
            out[..., 0], out[..., 1], out[..., 2] = a + b * drawn[..., 0], b * drawn[..., 1], 1 / drawn[..., 2]
    return out


def _looked_up(family: str, size: Ints, node: Ints, needed: Bools) -> Floats:
    """Tables of each row, (R, DRAWS, 3); zeros where none is needed."""
    out = np.zeros((len(size), DRAWS, 3))
    code = np.where(needed, size * len(NODES[family]) + node, -1)
    for one in np.unique(code[needed]).tolist():
        out[code == one] = _table(family, *divmod(one, len(NODES[family])))
    return out


@cache
def _table(family: str, size: int, node: int) -> Floats:
    """Estimates from DRAWS samples of the family in its own scale, (DRAWS, 3); third column inverse freedom."""
    n, at = int(SIZES[size]), float(NODES[family][node])
    u = uniforms(np.array([n], dtype=np.uint64), 2 * DRAWS * n, family)[0]
    first, second = u[: DRAWS * n], u[DRAWS * n :]
    if family == "weibull":
        values = -np.log(first)
    elif family == "folded normal":
        values = np.abs(at + ndtri(first))
    else:  # the polar method of Bailey (1994)
        values = np.sqrt(np.expm1(-2 * at * np.log(first)) / at) * np.cos(2 * np.pi * second)
    found, _ = shape_fits.fitted(family, shape_fits.Sample(values, np.arange(DRAWS + 1) * n))
    found[:, 2] = 1 / found[:, 2] if family == "student t" else 0.0
    return found


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
