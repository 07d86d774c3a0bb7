"""The bound of an index against scipy's non-central t, one at a time, and against its own definition."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, optimize, stats

from portfolio.statistics.noncentral import index_bound


def _by_scipy(c: float, n: float, df: float, level: float) -> float:
    """Root of the non-central t distribution function in its non-centrality."""
    root = 3 * np.sqrt(n)
    half = np.sqrt(1 / (9 * n) + c * c / (2 * df))

    def short(d):
        return stats.nct.cdf(root * c, df, root * d) - level

    return optimize.brentq(short, c - 6 * half, c + 6 * half, xtol=1e-13)


@pytest.mark.parametrize("level", (0.95, 0.05, 0.9))
@pytest.mark.parametrize("n, df", ((10.0, 9.0), (30.0, 29.0), (20.0, 100.0), (200.0, 40.5), (1000.0, 999.0)))
def test_bounds_agree_with_scipys_noncentral_t(n, df, level):
    c = np.array([-1.0, -0.3, -0.05, 0.0, 0.05, 0.2, 0.5, 1.0, 1.33, 2.0, 5.0])
    ours = index_bound(c, np.full(11, n), np.full(11, df), level)
    scipys = [_by_scipy(x, n, df, level) for x in c]
    assert ours == pytest.approx(scipys, abs=1e-7)


@pytest.mark.parametrize("n, df", ((2.0, 1.0), (3.0, 2.0), (6.0, 5.0)))
def test_few_degrees_of_freedom_keep_the_definition(n, df):
    """P(index >= bound) by adaptive integration over s; the trapezoid rule is weakest here."""
    c = np.array([0.2, 0.6, 1.4, 4.0])
    for level in (0.95, 0.05):
        bound = index_bound(c, np.full(4, n), np.full(4, df), level)
        for estimate, b in zip(c, bound, strict=True):

            def density(r, estimate=estimate, b=b):
                return 2 * df * r * stats.chi2.pdf(df * r * r, df) * stats.norm.cdf(3 * np.sqrt(n) * (estimate * r - b))

            p = integrate.quad(density, 0, 12, limit=400, points=[max(b, 0) / estimate])[0]
            assert p == pytest.approx(level, abs=0.003)


def test_the_mirror_image_of_a_process_has_the_mirror_image_of_a_bound():
    c, n, df = np.linspace(-5, 5, 21), np.full(21, 80.0), np.full(21, 77.7)
    assert index_bound(c, n, df, 0.95) == pytest.approx(-index_bound(-c, n, df, 0.05), abs=1e-12)


def test_huge_samples_and_extreme_indices_stay_finite_and_ordered():
    c = np.repeat([-5.0, 0.0, 1.33, 50.0], 3)
    n, df = np.tile([30.0, 1e4, 1e6], 4), np.tile([29.0, 5e3, 1e6], 4)
    low, high = index_bound(c, n, df, 0.95), index_bound(c, n, df, 0.05)
    assert np.isfinite(low).all()
    assert np.isfinite(high).all()
    assert (low < c).all()
    assert (c < high).all()
    width = stats.norm.ppf(0.95) * np.sqrt(1 / (9 * n) + c**2 / (2 * df))  # Bissell (1990), exact in the limit
    many = df > 1e5
    assert (high - c)[many] == pytest.approx(width[many], rel=0.01)
    assert (c - low)[many] == pytest.approx(width[many], rel=0.01)
