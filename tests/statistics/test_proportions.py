"""Intervals of a share against scipy and statsmodels; Newcombe's (1998) table is among the published cases."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from portfolio.statistics import proportions

COUNT = np.array([0, 1, 3, 50, 99, 100])
OF = np.full(6, 100)


@pytest.mark.parametrize("confidence", (0.9, 0.95, 0.998))
def test_both_intervals_agree_with_statsmodels(confidence):
    for ours, method in ((proportions.clopper_pearson, "beta"), (proportions.wilson, "wilson")):
        low, high = ours(COUNT, OF, confidence=confidence)
        theirs = proportion_confint(COUNT, OF, alpha=1 - confidence, method=method)
        assert low == pytest.approx(theirs[0], abs=1e-12)
        assert high == pytest.approx(theirs[1], abs=1e-12)


def test_the_one_sided_bound_agrees_with_scipy():
    expected = [stats.binomtest(k, 100, alternative="less").proportion_ci(0.95, "exact").high for k in COUNT]
    assert proportions.clopper_pearson_upper(COUNT, OF) == pytest.approx(expected, abs=1e-12)


def test_none_of_a_hundred_proves_no_less_than_three_percent():
    """1 - 0.05^(1/n): 2.95 %, 0.99 %, 0.30 % for 100, 300, 1000 (capability study, section 3.5)."""
    bound = proportions.clopper_pearson_upper([0, 0, 0], [100, 300, 1000])
    assert bound == pytest.approx([0.0295, 0.0099, 0.0030], abs=6e-5)
    assert bound == pytest.approx(1 - 0.05 ** (1 / np.array([100, 300, 1000])))


def test_an_impossible_count_gives_no_share():
    for interval in (proportions.clopper_pearson, proportions.wilson):
        low, high = interval([0, -1, 6, 5], [0, 5, 5, 5])
        assert list(np.isnan(low)) == list(np.isnan(high)) == [True, True, True, False]
        assert high[3] == 1
    assert np.isnan(proportions.clopper_pearson_upper([0, 6], [0, 5])).all()


def test_an_impossible_confidence_is_refused_with_its_value():
    for function in (proportions.clopper_pearson, proportions.clopper_pearson_upper, proportions.wilson):
        with pytest.raises(ValueError, match=r"confidence is 1\.5;"):
            function(1, 10, confidence=1.5)
