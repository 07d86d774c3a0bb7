"""How many subgroups of a stable process carry a signal: makes the tables EXPECTED_... of statistics/charts.py.

Run: python tests/benchmarks/expected_signals.py     (about a minute)
"""

from __future__ import annotations

import numpy as np

from portfolio.statistics import charts
from portfolio.statistics.subgroups import form, summarise

LENGTHS = np.array([20, 30, 60, 120, 400])
SIZES = (2, 3, 5, 9, 10, 25)
SUBGROUPS = 800_000  # a cell; standard error of a rate of 0.02 about 1 %


def simulate(m: int, n: int, between: float, count: int, rng: np.random.Generator) -> float:
    """Average number of signalling subgroups in `count` normal processes of m subgroups of n.

    `between` is the standard deviation between subgroups (within is 1); above 0 the chart is a three-way chart.
    """
    x = (rng.standard_normal((count, m, n)) + between * rng.standard_normal((count, m, 1))).ravel()
    start = np.arange(count + 1) * m * n
    time = np.tile(np.arange(m * n), count)
    groups = form(time, np.full(len(x), -1), start, np.full(count, n), np.full(count, np.nan))
    series = summarise(x, time, groups)
    drawn = charts.control_limits(series, groups, np.full(count, between > 0))
    return float(charts.signals(drawn, series, groups).count.mean())


def fitted(n: int, between: float, rng: np.random.Generator) -> tuple[float, float]:
    """Intercept and slope of the signals over m; weighted by 1 / m, so that a relative error counts alike."""
    pieces = 10
    counts = np.array(
        [np.mean([simulate(m, n, between, SUBGROUPS // m // pieces, rng) for _ in range(pieces)]) for m in LENGTHS]
    )
    b, a = np.polyfit(LENGTHS, counts, 1, w=1 / LENGTHS)
    off = float(np.max(np.abs((a + b * LENGTHS) / counts - 1)))
    print(f"# n = {n}: rates {np.round(counts / LENGTHS, 4)}, worst error of the line {off:.1%}")
    return float(a), float(b)


def main() -> None:
    print(f"EXPECTED_SIZE = {SIZES}")
    for name, between, sizes in (("INDIVIDUALS", 0.0, (1,)), ("SUBGROUPS", 0.0, SIZES), ("THREE_WAY", 1.0, SIZES)):
        rng = np.random.default_rng(20)
        a, b = zip(*(fitted(n, between, rng) for n in sizes), strict=True)
        print(f"EXPECTED_{name}:", [f"{x:.3f}" for x in a], [f"{x:.5f}" for x in b])


if __name__ == "__main__":
    main()
