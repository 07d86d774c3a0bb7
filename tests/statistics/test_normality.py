"""Whether the normal shape holds: Anderson-Darling against published points and scipy, streams and recording steps apart."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from portfolio.statistics.gauge import sorted_within
from portfolio.statistics.normality import MOST, normality, without_stream_means


def of(rows: np.ndarray, step: float = np.nan):
    k, n = rows.shape
    start = np.arange(k + 1) * n
    return normality(sorted_within(rows.ravel(), start), start, np.full(k, step))


def test_the_statistic_is_that_of_scipy_with_the_published_modification():
    """scipy.stats.anderson gives A2; D'Agostino & Stephens (1986) multiply by 1 + 0.75/n + 2.25/n^2."""
    x = np.random.default_rng(1).gamma(4, size=(5, 80))
    expected = [stats.anderson(row, method=stats.MonteCarloMethod(n_resamples=9, rng=1)).statistic for row in x]
    np.testing.assert_allclose(of(x).a2, np.array(expected) * (1 + 0.75 / 80 + 2.25 / 80**2), rtol=1e-9)


@pytest.mark.parametrize("step", [np.nan, 0.5])
def test_one_normal_process_in_a_hundred_is_refused_whether_recorded_finely_or_in_steps(step):
    """1 % point 1.035 (D'Agostino & Stephens 1986, from memory)."""
    x = np.random.default_rng(2).standard_normal((2_000, 120))
    x = x if np.isnan(step) else np.round(x / step) * step
    refused = int(of(x, step).refused.sum())
    assert stats.binomtest(refused, 2_000, 0.01).pvalue > 1e-3 or refused < 20


def test_skewed_values_are_refused_and_light_tails_are_cautious():
    rng = np.random.default_rng(3)
    skewed, flat = of(np.abs(rng.standard_normal((200, 300)))), of(rng.random((200, 300)))
    assert skewed.refused.mean() > 0.99 and not skewed.cautious.any()
    assert flat.refused.mean() > 0.95 and (flat.cautious == flat.refused).mean() > 0.99


def test_a_hundred_thousand_values_are_judged_like_two_thousand():
    rng = np.random.default_rng(4)
    nearly = rng.standard_normal((3, 50 * MOST)) + 0.02 * rng.standard_exponential((3, 50 * MOST))
    assert not of(nearly).refused.any()


def test_streams_at_different_places_are_no_strange_shape():
    rng = np.random.default_rng(5)
    stream = np.tile(np.arange(4), 100)
    x = rng.standard_normal((1, 400)) + np.array([-6.0, 0.0, 1.0, 9.0])[stream]
    start = np.array([0, 400])
    assert of(x).refused.all()
    alike = without_stream_means(x.ravel(), start, stream, np.array([True]))
    assert not of(alike[None, :]).refused.any()
    assert alike.mean() == pytest.approx(x.mean())
    np.testing.assert_array_equal(without_stream_means(x.ravel(), start, stream, np.array([False])), x.ravel())


def test_constant_and_empty_characteristics_have_no_statistic():
    start = np.array([0, 20, 20])
    found = normality(np.full(20, 3.0), start, np.full(2, np.nan))
    assert np.isnan(found.a2).all() and not found.refused.any()
