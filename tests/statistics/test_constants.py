"""Factors of control charts against closed forms and scipy's distributions (printed tables: tests/published)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

from portfolio.statistics.constants import c4, d2, d3, d4


def test_ranges_of_two_and_three_have_their_closed_forms() -> None:
    # Two values: the half-normal distribution times sqrt 2; three: 3 / sqrt pi (Jones 1948, from memory).
    assert d2(2) == pytest.approx(2 / np.sqrt(np.pi), abs=1e-12)
    assert d3(2) == pytest.approx(np.sqrt(2 - 4 / np.pi), abs=1e-11)
    assert d4(2) == pytest.approx(np.sqrt(2) * stats.norm.ppf(0.75), abs=1e-12)
    assert d2(3) == pytest.approx(3 / np.sqrt(np.pi), abs=1e-12)


@pytest.mark.parametrize("n", [4, 9, 25, 100])
def test_the_range_agrees_with_the_studentized_range_of_unlimited_degrees_of_freedom(n: int) -> None:
    def exceeds(w: float) -> float:
        return float(stats.studentized_range.sf(w, n, np.inf))

    mean = integrate.quad(exceeds, 0, 12, limit=200)[0]
    second = integrate.quad(lambda w: 2 * w * exceeds(w), 0, 12, limit=200)[0]
    assert d2(n) == pytest.approx(mean, abs=1e-6)
    assert d3(n) == pytest.approx(np.sqrt(second - mean**2), abs=1e-5)
    assert exceeds(float(d4(n))) == pytest.approx(0.5, abs=1e-7)


def test_c4_is_the_mean_of_chi_over_the_root_of_its_degrees_of_freedom() -> None:
    n = np.array([2.0, 2.5, 5.0, 31.4, 1000.0, 1e6])
    assert c4(n) == pytest.approx(stats.chi.mean(n - 1) / np.sqrt(n - 1), rel=1e-9)


def test_factors_keep_the_shape_of_their_input_and_are_empty_where_they_do_not_apply() -> None:
    n = np.array([[1, 2, 5], [0, 100, 101]])
    assert np.isnan(d2(n)).tolist() == [[True, False, False], [True, False, True]]
    assert np.isnan(d3(n)).tolist() == np.isnan(d4(n)).tolist() == np.isnan(d2(n)).tolist()
    assert np.isnan(c4(n)).tolist() == [[True, False, False], [True, False, False]]
    assert d2(np.array([2.5, np.nan])).tolist() == pytest.approx([np.nan, np.nan], nan_ok=True)
