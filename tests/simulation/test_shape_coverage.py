"""Shapes with known truth against the measured tables of the capability study, section 3.

Truth everywhere: the upper limit lies where the index by quantiles is 1.333. The tables' own replicates are not
stated; their standard errors are taken as those of `TABLE` replicates (0.015 in rows of bounds, as the study says).
Student t is left out where the study counted it into the type 'dimension': here it only warns there.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from scipy import stats

from portfolio.statistics import shape_bounds, shape_draws, shape_fits, shape_tests, shapes

TRUE_INDEX = 4 / 3
TABLE = 1000
REPLICATES = {50: 1000, 100: 1000, 300: 500}
BOUND_REPLICATES = 300
ROUNDING = 0.005


class Streams:
    """Two streams of equal share, `apart` sigmas to each side."""

    def __init__(self, apart):
        self.apart = apart

    def rvs(self, size, random_state):
        return 12 + random_state.normal(size=size) + np.where(random_state.random(size) < 0.5, -self.apart, self.apart)


TRUTHS = {
    "normal cv10%": (stats.norm(10, 1), "dimension"),
    "half-normal": (stats.halfnorm(), "form"),
    "folded mu/s=1": (stats.foldnorm(1), "form"),
    "rayleigh": (stats.rayleigh(), "form"),
    "rice nu/s=2": (stats.rice(2), "form"),
    "lognormal .25": (stats.lognorm(0.25), "concentration"),
    "lognormal .5": (stats.lognorm(0.5), "concentration"),
    "weibull 1.5": (stats.weibull_min(1.5), "form"),
    "weibull 3": (stats.weibull_min(3), "concentration"),
    "gamma 2": (stats.gamma(2), "concentration"),
    "gamma 8": (stats.gamma(8), "concentration"),
    "uniform": (stats.uniform(9, 2), ""),
    "2 streams +-1.5": (Streams(1.5), ""),
    "2 streams +-1": (Streams(1.0), ""),
}


@cache
def sampled(truth, n, replicates):
    rng = np.random.default_rng([n, *truth.encode()])
    return np.sort(TRUTHS[truth][0].rvs((replicates, n), random_state=rng), axis=1)


@cache
def fitted(truth, n, replicates, declared):
    x = sampled(truth, n, replicates)
    none = np.full(replicates, np.nan)
    words = np.full(replicates, declared, dtype=object)
    return shapes.fit(x.ravel(), np.arange(replicates + 1) * n, words, none, none)


def limits(truth, replicates):
    q = TRUTHS[truth][0].ppf(shapes.SPREAD)
    return np.full(replicates, -np.inf), np.full(replicates, q[1] + TRUE_INDEX * (q[2] - q[1]))


def error_of(share, replicates, table=TABLE):
    """Standard error of the difference of two shares."""
    inside = np.clip(share, 0.01, 0.99)
    return np.sqrt(inside * (1 - inside) * (1 / replicates + 1 / table))


def two_errors(share, replicates, table=TABLE):
    """Two standard errors and the rounding of the table."""
    return 2 * error_of(share, replicates, table) + ROUNDING


def assert_as_tabled(cells):
    """Cells (found, tabled, standard error): all within three standard errors, 95 % within two, as chance has it."""
    beyond = {
        cell: (found, tabled)
        for cell, (found, tabled, error) in cells.items()
        if abs(found - tabled) > 2 * error + ROUNDING
    }
    far = {
        cell: (found, tabled)
        for cell, (found, tabled, error) in cells.items()
        if abs(found - tabled) > 3 * error + ROUNDING
    }
    assert not far
    assert len(beyond) <= 0.05 * len(cells), beyond


# table 3.1: median ratio of index and truth for n = 50, 100, 300: undeclared ("gate 2") and by declared type
RATIOS = {
    "half-normal": ((1.00, 1.00, 1.00), (1.01, 1.00, 1.00)),
    "folded mu/s=1": ((0.91, 0.95, 1.00), (0.92, 0.95, 1.00)),
    "rayleigh": ((1.00, 1.00, 1.00), (1.02, 1.01, 1.00)),
    "rice nu/s=2": ((1.04, 1.03, 1.01), (1.04, 1.02, 1.01)),
    "lognormal .25": ((1.11, 1.06, 1.02), (1.09, 1.06, 1.02)),
    "lognormal .5": ((1.14, 1.06, 1.01), (1.13, 1.06, 1.01)),
    "weibull 1.5": ((1.04, 1.00, 1.00), (1.09, 1.04, 1.01)),
    "weibull 3": ((1.00, 1.00, 1.00), (0.98, 1.00, 1.00)),
    "gamma 2": ((1.10, 1.06, 1.02), (1.07, 1.05, 1.02)),
    "gamma 8": ((1.02, 0.99, 0.99), (1.01, 0.99, 0.99)),
}


def test_the_index_is_biased_as_measured_and_no_more():
    cells = {}
    for truth, columns in RATIOS.items():
        for declared, expected in zip(("", TRUTHS[truth][1]), columns, strict=True):
            for n, ratio in zip((50, 100, 300), expected, strict=True):
                replicates = REPLICATES[n]
                found = fitted(truth, n, replicates, declared)
                index = shapes.indices(found, *limits(truth, replicates)).cpk / TRUE_INDEX
                index = index[np.isfinite(index)]
                error = 1.253 * index.std() * np.sqrt(1 / len(index) + 1 / TABLE)
                cells[truth, declared, n] = (float(np.median(index)), ratio, error)
    assert_as_tabled(cells)


# table 3.3, "type group, lowest d<=4": coverage of the lower 95 % bound for n = 50, 100, 300
BY_TYPE = {
    "half-normal": (0.98, 0.97, 0.97),
    "folded mu/s=1": (0.97, 0.96, 0.93),
    "rayleigh": (0.97, 0.99, 0.98),
    "rice nu/s=2": (0.92, 0.95, 0.89),
    "lognormal .25": (0.92, 0.93, 0.94),
    "lognormal .5": (0.91, 0.91, 0.93),
    "weibull 1.5": (0.94, 0.90, 0.96),
    "weibull 3": (0.97, 0.95, 0.95),
    "gamma 2": (0.97, 0.93, 0.88),
    "gamma 8": (0.98, 0.98, 0.99),
}
# "lowest d<=4" for shapes so skewed that the normal is hardly ever chosen
UNDECLARED = {
    "half-normal": (0.98, 0.97, 0.97),
    "folded mu/s=1": (0.97, 0.96, 0.93),
    "rayleigh": (0.99, 1.00, 0.98),
    "lognormal .5": (0.91, 0.91, 0.93),
    "weibull 1.5": (0.98, 0.95, 0.97),
    "gamma 2": (0.95, 0.93, 0.88),
}


@pytest.mark.parametrize(
    "truth, declared, expected",
    [(truth, TRUTHS[truth][1], expected) for truth, expected in BY_TYPE.items()]
    + [(truth, "", expected) for truth, expected in UNDECLARED.items()],
)
def test_the_lowest_plausible_bound_covers_as_measured(truth, declared, expected):
    for n, share in zip((50, 100, 300), expected, strict=True):
        low, high, chance, shaped = bounded(truth, n, declared)
        least = share - 2 * np.hypot(np.sqrt(share * (1 - share) / BOUND_REPLICATES), 0.015) - 0.005
        assert np.mean(low[shaped] <= TRUE_INDEX) >= least, n
        # not measured in the study: the highest upper bound, and how seldom the chance is sure and wrong
        assert np.mean(high[shaped] >= TRUE_INDEX) >= 0.95 - two_errors(0.95, BOUND_REPLICATES) - 0.015, n
        assert np.mean(chance[shaped] >= 0.95) <= 1 - least + 0.05, n


def bounded(truth, n, declared):
    x = sampled(truth, n, BOUND_REPLICATES)
    found = fitted(truth, n, BOUND_REPLICATES, declared)
    low, high, chance = shape_bounds.bounds(
        found,
        x.ravel(),
        np.arange(BOUND_REPLICATES + 1) * n,
        *limits(truth, BOUND_REPLICATES),
        seeds=np.arange(BOUND_REPLICATES, dtype=np.uint64),
    )
    return low, high, chance(TRUE_INDEX), found.accepted & (found.family != "normal")


# table 3.4: 5 % points of A2 with estimated parameters for n = 30, 100, 300
CRITICAL = {
    ("normal", 10, 1): (0.72, 0.75, 0.75),
    ("lognormal", 0, 0.4): (0.73, 0.74, 0.75),
    ("weibull", 2, 1): (0.74, 0.74, 0.77),
    ("gamma", 4, 1): (0.75, 0.75, 0.74),
    ("gamma", 1.5, 1): (0.79, 0.78, 0.77),
    ("folded normal", 0.5, 1): (1.15, 1.15, 1.11),
    ("folded normal", 2, 1): (0.70, 0.73, 0.72),
    ("half-normal", 1, 0): (1.52, 1.47, 1.48),
    ("rayleigh", 1, 0): (1.30, 1.30, 1.30),
}


def drawn(family, a, b, size, seed):
    rng = np.random.default_rng(seed)
    makers = {
        "normal": lambda: rng.normal(a, b, size),
        "lognormal": lambda: rng.lognormal(a, b, size),
        "weibull": lambda: b * rng.weibull(a, size),
        "gamma": lambda: rng.gamma(a, b, size),
        "folded normal": lambda: np.abs(rng.normal(a, b, size)),
        "half-normal": lambda: np.abs(rng.normal(0, a, size)),
        "rayleigh": lambda: rng.rayleigh(a, size),
        "student t": lambda: rng.standard_t(a, size),
    }
    return shape_fits.Sample(np.sort(makers[family](), axis=1).ravel(), np.arange(size[0] + 1) * size[1])


def test_five_percent_of_true_shapes_lie_above_the_tabled_statistic():
    replicates = 2000
    statistics, refused = {}, {}
    for (family, a, b), row in CRITICAL.items():
        for n, expected in zip((30, 100, 300), row, strict=True):
            sample = drawn(family, a, b, (replicates, n), n)
            parameters, _ = shape_fits.fitted(family, sample)
            a2 = shape_tests.anderson_darling(family, parameters, sample, np.zeros(replicates))
            at = np.quantile(a2, [0.95, 0.99])
            # the tail is close to exponential: its rate gives the density at the 5 % point
            error = (at[1] - at[0]) / np.log(5) * np.sqrt(0.95 / 0.05 * (1 / replicates + 1 / TABLE))
            statistics[family, a, n] = (at[0], expected, error)
            share = float(np.mean(a2 > shape_tests.critical(family, parameters, sample.n)))
            refused[family, a, n] = (share, 0.05, error_of(0.05, replicates, np.inf))
    assert_as_tabled(statistics)
    assert_as_tabled(refused)


@pytest.mark.parametrize("freedom", (3.0, 4.0, 6.0))
def test_student_shapes_are_refused_in_five_percent(freedom):
    """Not in the study's table; the critical values are this project's own."""
    sample = drawn("student t", freedom, 1, (1500, 200), 8)
    parameters, _ = shape_fits.fitted("student t", sample)
    a2 = shape_tests.anderson_darling("student t", parameters, sample, np.zeros(1500))
    refused = np.mean(a2 > shape_tests.critical("student t", parameters, sample.n))
    assert refused == pytest.approx(0.05, abs=two_errors(0.05, 1500, 1500))


# table 3.5: accepted / normal as cautious fallback, for n = 50, 100, 300. Folded and Student shapes have critical
# values of their own here (5 % instead of 1 %), so they are left to the tests above.
REFUSALS = {
    "normal cv10%": ((0.98, 0.01), (0.99, 0.01), (0.97, 0.02)),
    "half-normal": ((0.99, 0.00), (0.99, 0.00), (0.98, 0.00)),
    "rayleigh": ((0.99, 0.00), (1.00, 0.00), (0.99, 0.00)),
    "rice nu/s=2": ((0.98, 0.01), (0.97, 0.02), (0.96, 0.02)),
    "lognormal .25": ((0.97, 0.01), (0.96, 0.00), (0.97, 0.00)),
    "lognormal .5": ((0.97, 0.00), (0.97, 0.00), (0.96, 0.00)),
    "weibull 1.5": ((0.99, 0.00), (0.98, 0.00), (0.98, 0.00)),
    "weibull 3": ((0.98, 0.02), (0.98, 0.02), (0.96, 0.03)),
    "gamma 2": ((0.99, 0.00), (0.98, 0.00), (0.96, 0.00)),
    "gamma 8": ((0.98, 0.01), (0.98, 0.00), (0.97, 0.00)),
    "uniform": ((0.43, 0.57), (0.05, 0.95), (0.00, 1.00)),
    "2 streams +-1.5": ((0.60, 0.39), (0.21, 0.79), (0.00, 1.00)),
    "2 streams +-1": ((0.94, 0.05), (0.89, 0.10), (0.59, 0.40)),
}


def test_shapes_are_accepted_and_refused_as_measured():
    cells = {}
    for truth, row in REFUSALS.items():
        for n, (accepted, cautious) in zip((50, 100, 300), row, strict=True):
            found = fitted(truth, n, REPLICATES[n], "")
            cells[truth, n, "accepted"] = (found.accepted.mean(), accepted, error_of(accepted, REPLICATES[n]))
            cells[truth, n, "cautious"] = (found.cautious.mean(), cautious, error_of(cautious, REPLICATES[n]))
    assert_as_tabled(cells)


@pytest.mark.parametrize(
    "family, parameters, n",
    (
        ("gamma", (1.3, 2.0, np.nan), 40),
        ("gamma", (8.0, 1.0, np.nan), 300),
        ("lognormal", (0.0, 0.4, np.nan), 60),
        ("weibull", (1.5, 2.0, np.nan), 45),
        ("weibull", (3.0, 2.0, np.nan), 500),
        ("folded normal", (0.6, 1.0, np.nan), 60),
        ("folded normal", (1.6, 1.0, np.nan), 500),
        ("half-normal", (1.0, np.nan, np.nan), 50),
        ("rayleigh", (1.0, np.nan, np.nan), 50),
        ("student t", (0.0, 1.0, 4.5), 90),
        ("student t", (0.0, 1.0, 7.0), 500),
    ),
)
def test_drawn_estimates_scatter_like_estimates_of_simulated_values(family, parameters, n):
    """Draws by sums and from tables, against fits of values drawn one by one: 99.865 % quantile above the median."""
    replicates = 1500
    scale = 1.0 if np.isnan(parameters[1]) else parameters[1]
    first = parameters[2] if family == "student t" else parameters[0]
    direct, _ = shape_fits.fitted(family, drawn(family, first, scale, (replicates, n), 77))
    estimated = shape_draws.estimates(
        family, np.array([parameters]), np.array([float(n)]), np.array([5], dtype=np.uint64)
    )

    def score(each):
        zero, one = np.zeros(len(each)), np.ones(len(each))
        q = shapes.from_bound(family, shapes.SPREAD[1:], each[:, None], zero[:, None], one[:, None])
        return np.log(q[:, 1] - q[:, 0])

    truth = score(np.array([parameters]))[0]
    simulated, ours = score(direct), score(estimated.parameters[0])
    spread = ours.std() * estimated.sigma_factor[0]
    assert spread == pytest.approx(simulated.std(), rel=2.5 * np.sqrt(1 / replicates + 1 / shape_draws.DRAWS))
    bias = (ours.mean() - truth) * estimated.bias_factor[0]
    error = simulated.std() * np.sqrt(1 / replicates + 1 / shape_draws.DRAWS)
    assert bias == pytest.approx(simulated.mean() - truth, abs=2 * error)
