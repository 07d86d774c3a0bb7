"""Isolated extremes: single subgroups too far away to belong to the rest. The one part that needs a shape.

A shape fitted to all values would be chosen by the very outliers under test, so the most forgiving of three shifted
lognormals matched to the middle 90 % decides (stability study, section 4; Johnson's S_L, Johnson 1949).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from portfolio.statistics import ragged
from portfolio.statistics.ragged import Floats, Ints, equal_lengths

Z95 = 1.645
"Normal 95 % point to the digits of the study."
FORGIVING = 1.92
"Standard error of the skewness measure times sqrt(N), for normal data."
DF_SHARE = 0.6
"Degrees of freedom of the reference t per subgroup: the scale comes from two quantiles."
FLAG_P = 0.01
FLATTEST = 1e-6


@dataclass(frozen=True)
class Extremes:
    """`p` (K,); the flagged subgroups as flat arrays `of` (characteristic) and `index` (flat subgroup)."""

    p: Floats
    of: Ints
    index: Ints


def quantiles(values: Floats, start: Ints, probabilities: tuple[float, ...]) -> Floats:
    """Quantiles (linear interpolation) of each group, (K, len(probabilities)); NaN for an empty group."""
    out = np.full((len(start) - 1, len(probabilities)), np.nan)
    for n, rows in equal_lengths(start):
        if n:
            block = values[start[rows][:, None] + np.arange(n)]
            out[rows] = np.quantile(block, probabilities, axis=1).T
    return out


def isolated_extremes(values: Floats, start: Ints, subgroup_start: Ints, of: Ints) -> Extremes:
    """Test every characteristic for subgroups too far out.

    Parameters
    ----------
    values : (N,) single values; `start` (K + 1,) of the characteristics
    subgroup_start : (G + 1,) into values; `of` (K + 1,) into subgroups
    """
    low, middle, high = quantiles(values, start, (0.05, 0.5, 0.95)).T
    n = np.diff(start)
    m = np.diff(of)
    with np.errstate(divide="ignore", invalid="ignore"):
        skew = np.log((high - middle) / (middle - low)) / Z95
    error = FORGIVING / np.sqrt(np.maximum(n, 1))
    deviation = values - np.repeat(middle, n)
    group_owner = np.repeat(np.arange(len(m)), m)
    df = np.maximum(DF_SHARE * m, 1)
    # All three maps share m and df, so the largest p belongs to the smallest z.
    smallest = np.full(int(of[-1]), np.inf)
    farthest = np.full(len(m), np.inf)
    for shift in (-1, 0, 1):
        mapped = _mapped(deviation, n, skew + shift * error, middle - low, high - middle)
        location = ragged.means(mapped, subgroup_start)
        lower, centre, upper = quantiles(location, of, (0.1, 0.5, 0.9)).T
        scale = (upper - lower) / 2.563
        with np.errstate(divide="ignore", invalid="ignore"):
            z = np.abs(location - centre[group_owner]) / scale[group_owner]
        z = np.where(np.isfinite(z), z, 0.0)
        smallest = np.minimum(smallest, z)
        farthest = np.fmin(farthest, ragged.extremes(z, of)[1])
    usable = np.isfinite(skew) & (m > 0)
    single = 2 * stats.t.sf(np.where(usable, farthest, 0.0), df)
    p = np.where(usable, -np.expm1(m * np.log1p(-np.minimum(single, 1 - 1e-12))), np.nan)
    with np.errstate(divide="ignore"):
        critical = np.asarray(stats.t.isf(-np.expm1(np.log1p(-FLAG_P) / np.maximum(m, 1)) / 2, df))
    flagged = np.flatnonzero((smallest > critical[group_owner]) & usable[group_owner])
    return Extremes(p=p, of=group_owner[flagged], index=flagged)


def _mapped(deviation: Floats, n: Ints, skew: Floats, below: Floats, above: Floats) -> Floats:
    """Deviations from the median mapped so that a shifted lognormal of this skewness becomes normal with unit scale."""
    sign = np.where(skew >= 0, 1.0, -1.0)
    size = np.maximum(np.abs(skew), FLATTEST)  # in the limit the map is linear
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        slope = sign * np.expm1(Z95 * size) / np.where(skew >= 0, above, below)
        inner = deviation * np.repeat(slope, n)
        inner += 1
        np.maximum(inner, 1e-9, out=inner)
        np.log(inner, out=inner)
        inner *= np.repeat(sign / size, n)
    return inner
