"""Run lengths against closed forms and against the rules that mark the chart (Champ & Woodall: tests/published)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from portfolio.statistics.charts import WESTERN_ELECTRIC, Rule, rules
from portfolio.statistics.run_lengths import average_run_length

ONE_POINT = WESTERN_ELECTRIC[:1]


def test_a_single_point_rule_has_the_geometric_run_length() -> None:
    shift = np.array([0.0, 0.5, -0.5, 2.0, 4.0])
    chance = stats.norm.sf(3 - shift) + stats.norm.cdf(-3 - shift)
    assert average_run_length(ONE_POINT, shift) == pytest.approx(1 / chance, rel=1e-10)


@pytest.mark.parametrize("need", [2, 5, 8])
def test_a_run_on_one_side_far_from_the_centre_has_the_run_length_of_a_coin(need: int) -> None:
    # Shifted by 5 sigma every point lies on one side. Feller (1968), XIII.7, from memory: (1 - p^r) / (q p^r).
    p = stats.norm.cdf(0.4)
    one_sided = (1 - p**need) / ((1 - p) * p**need)
    assert average_run_length([Rule(need, need, 4.6, np.inf)], 5.0) == pytest.approx(one_sided, rel=1e-9)


def test_a_mean_above_and_below_the_centre_by_as_much_run_as_long() -> None:
    shift = np.linspace(0.1, 3, 5)
    assert average_run_length(WESTERN_ELECTRIC, shift) == pytest.approx(average_run_length(WESTERN_ELECTRIC, -shift))


def test_every_further_rule_shortens_the_run() -> None:
    lengths = [float(average_run_length(WESTERN_ELECTRIC[:many], 0.7)) for many in (1, 2, 3, 4)]
    assert lengths == sorted(lengths, reverse=True)
    assert lengths[0] > lengths[-1] > 1


def test_the_marks_on_the_chart_come_as_often_as_the_exact_run_length_says() -> None:
    count, length, shift = 3_000, 700, 0.3
    z = np.random.default_rng(11).normal(shift, 1, (count, length))
    marked = np.logical_or.reduce(rules(z.ravel(), np.arange(count + 1) * length)).reshape(count, length)
    assert marked.any(axis=1).all()  # long enough that no run is cut short
    first = np.argmax(marked, axis=1) + 1
    exact = float(average_run_length(WESTERN_ELECTRIC, shift))
    assert abs(first.mean() - exact) < 4 * first.std() / np.sqrt(count)


@pytest.mark.parametrize("wrong", [[], [Rule(3, 2, 0, 1)], [Rule(0, 2, 0, 1)], [Rule(1, 1, 2, 2)], [Rule(1, 1, -1, 2)]])
def test_rules_that_cannot_work_are_refused(wrong: list[Rule]) -> None:
    with pytest.raises(ValueError, match=r"no rule|need 1 <= need <= among and 0 <= low < high"):
        average_run_length(wrong)
