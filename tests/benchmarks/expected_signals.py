"""How many subgroups of a stable normal process carry a signal: makes the table EXPECTED of statistics/charts.py.

Run: python tests/benchmarks/expected_signals.py
"""

from __future__ import annotations

import numpy as np

from portfolio.statistics import charts
from portfolio.statistics.subgroups import form, summarise

LENGTHS = (20, 30, 60, 120, 400)


def simulate(m: int, n: int, between: float, count: int, rng: np.random.Generator) -> float:
    """Average number of signalling subgroups in `count` processes of m subgroups of n."""
    x = (rng.standard_normal((count, m, n)) + between * rng.standard_normal((count, m, 1))).ravel()
    start = np.arange(count + 1) * m * n
    time = np.tile(np.arange(m * n), count)
    groups = form(time, np.full(len(x), -1), start, np.full(count, n if n > 1 else 1), np.full(count, np.nan))
    series = summarise(x, time, groups)
    drawn = charts.control_limits(series, groups, np.full(count, between > 0))
    return float(charts.signals(drawn, series, groups).count.mean())


def main() -> None:
    rng = np.random.default_rng(1)
    for name, n, between in (("individuals", 1, 0.0), ("subgroups", 5, 0.0), ("three-way", 5, 1.0)):
        counts = [simulate(m, n, between, 4_000 if m < 400 else 1_000, rng) for m in LENGTHS]
        # Weighted by 1 / m: a fixed relative error counts the same at every length.
        b, a = np.polyfit(LENGTHS, counts, 1, w=1 / np.array(LENGTHS))
        print(f'"{name}": ({a:.2f}, {b:.4f})  simulated {np.round(counts, 2)}')


if __name__ == "__main__":
    main()
