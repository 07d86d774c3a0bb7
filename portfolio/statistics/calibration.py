"""Null distributions of the rank statistics, by length of the series.

Made once by permuting the fixed normal scores (`python -m portfolio.statistics.calibration` writes `nulls.npz`, which
travels with the package, so that a first run waits for nothing). Between tabulated lengths p is interpolated; beyond
the 96 % point a generalised Pareto tail keeps p usable far below one in the number of permutations
(Knijnenburg et al. 2009, shape at most 0.1).
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from pathlib import Path

import numpy as np
from scipy.special import ndtri

from portfolio.statistics.ragged import Floats, Ints

FILE = Path(__file__).with_name("nulls.npz")
STATISTICS = ("step", "serial", "cycle", "moving")
TAIL = 0.04
"Share of the null that the Pareto tail describes."
BODY = np.linspace(1.0, TAIL, 97)
"Probabilities of exceedance at which the body is tabulated."
SHAPE_RANGE = (-0.15, 0.1)
TRUSTED = 1e-6
"Below this p the tail goes on as an exponential: a fitted end point would claim certainty."
LONGEST = 20_000


def grid() -> Ints:
    """Tabulated lengths: every one to 60, then steps of about 5 % up to 20,000."""
    far = np.unique(np.round(60 * 1.05 ** np.arange(1, 121)).astype(np.int64))
    return np.concatenate((np.arange(8, 61), far[far < LONGEST], [LONGEST])).astype(np.int64)


def p_value(statistic: str, x: Floats, m: int) -> Floats:
    """p-values of `x` (R,) under the null of series of length `m`; longer than 20,000 uses the longest table."""
    lengths, body, tail = _tables()[statistic]
    scale = np.sqrt(m) if statistic == "serial" else 1.0
    at = np.log(np.clip(m, lengths[0], lengths[-1]))
    high = int(np.clip(np.searchsorted(np.log(lengths), at), 1, len(lengths) - 1))
    low = high - 1
    share = (at - np.log(lengths[low])) / (np.log(lengths[high]) - np.log(lengths[low]))
    logs = [np.log(_one(body[row], tail[row], x * scale)) for row in (low, high)]
    return np.exp((1 - share) * logs[0] + share * logs[1])


def _one(body: Floats, tail: Floats, x: Floats) -> Floats:
    threshold, sigma, shape = tail
    inner = np.interp(x, body, BODY)
    return np.where(x > threshold, _tail(x - threshold, sigma, shape), np.where(np.isnan(x), np.nan, inner))


def _tail(excess: Floats, sigma: float, shape: float) -> Floats:
    """Survival beyond the threshold, times TAIL."""
    beyond = np.maximum(np.nan_to_num(excess), 0.0)
    ratio = TRUSTED / TAIL
    if abs(shape) < 1e-6:
        return np.maximum(TAIL * np.exp(-beyond / sigma), 1e-300)
    trusted = sigma / shape * (ratio ** (-shape) - 1)
    inside = TAIL * np.maximum(1 + shape * np.minimum(beyond, trusted) / sigma, 1e-12) ** (-1 / shape)
    slope = sigma + shape * trusted
    return np.maximum(np.where(beyond > trusted, TRUSTED * np.exp(-(beyond - trusted) / slope), inside), 1e-300)


@cache
def _tables() -> dict[str, tuple[Ints, Floats, Floats]]:
    with np.load(FILE) as file:
        lengths = file["lengths"].astype(np.int64)
        return {
            name: (lengths, file[f"{name}_body"].astype(np.float64), file[f"{name}_tail"].astype(np.float64))
            for name in STATISTICS
        }


def permutations(m: int) -> int:
    """Permutations for a length: 5,000, fewer where a single one is long and its null is smooth anyway."""
    return 20_000 if m <= 60 else 10_000 if m <= 400 else 5_000 if m <= 3_000 else 2_500


def make(statistics: dict[str, Callable[[Floats], Floats]], seed: int = 20261201) -> dict[str, Floats]:
    """Simulate every null: the arrays of `nulls.npz`."""
    lengths = grid()
    out: dict[str, list[Floats]] = {f"{name}_{part}": [] for name in statistics for part in ("body", "tail")}
    for m in lengths.tolist():
        rng = np.random.default_rng([seed, m])
        scores = ndtri((np.arange(1, m + 1) - 0.375) / (m + 0.25))
        found: dict[str, list[Floats]] = {name: [] for name in statistics}
        left = permutations(m)
        while left > 0:
            rows = min(left, max(1, 1_000_000 // m))
            y = rng.permuted(np.broadcast_to(scores, (rows, m)), axis=1)
            for name, function in statistics.items():
                found[name].append(function(y))
            left -= rows
        for name, pieces in found.items():
            x = np.concatenate(pieces) * (np.sqrt(m) if name == "serial" else 1.0)
            x = x[np.isfinite(x)]
            out[f"{name}_body"].append(np.quantile(x, 1 - BODY) if len(x) else np.zeros(len(BODY)))
            out[f"{name}_tail"].append(_fit_tail(x))
    return {"lengths": lengths.astype(np.float64)} | {name: np.array(rows) for name, rows in out.items()}


def _fit_tail(x: Floats) -> Floats:
    """Threshold, scale and shape of a generalised Pareto tail by probability-weighted moments (Hosking & Wallis 1987)."""
    if not len(x):
        return np.array([0.0, 1.0, 0.0])
    threshold = np.quantile(x, 1 - TAIL)
    excess = np.sort(x[x > threshold] - threshold)
    n = len(excess)
    first = excess.mean()
    second = (excess * (1 - (np.arange(1, n + 1) - 0.35) / n)).mean()
    shape = float(np.clip(2 - first / (first - 2 * second), *SHAPE_RANGE))
    return np.array([threshold, first * (1 - shape), shape])


def _main() -> None:
    from portfolio.statistics import exchangeability as ex

    made = make(
        {
            "step": lambda y: ex.step_statistic(y)[0],
            "serial": lambda y: np.abs(ex.lag_one(y)),
            "cycle": lambda y: ex.cycle_statistic(y)[0],
            "moving": lambda y: ex.step_statistic(ex.normal_scores(np.abs(np.diff(y, axis=1))))[0],
        }
    )
    packed = {name: values.astype(np.float32) for name, values in made.items()}
    np.savez_compressed(FILE, allow_pickle=False, **packed)


if __name__ == "__main__":
    _main()
