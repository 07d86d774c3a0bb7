"""What every process of the demo truly is: written beside the demo for tests, read by nothing else."""

from __future__ import annotations

from datetime import datetime, timedelta
from pathlib import Path
from statistics import NormalDist
from typing import Any

import pandas as pd

from portfolio.demo_processes import CAVITIES, CAVITY_NOISE, Process
from portfolio.result import CAPABLE, NOT_CAPABLE, NOT_JUDGED, STABLE, UNSTABLE

UNSTABLE_SCENARIOS = (
    "step", "several steps", "drift", "wandering", "cycle", "alternation", "spread", "isolated extremes",
)  # fmt: skip
NOT_JUDGED_SCENARIOS = ("coarse", "noisy gauge", "too few", "no limits", "unit mix-up", "silent", "no data")
NO_MOVE_SCENARIOS = ("give-away", "not adjustable", "cavities", "strength", "flatness")
"Predictable, but moving the mean is forbidden, senseless or no remedy."
TARGETS = {"critical": 1.67}
DEFAULT_TARGET = 1.33


def write(folder: Path, processes: list[Process], start: datetime) -> None:
    """Write truth.csv: one row per characteristic; `cpk` and `cpk_centered` are empty where they do not exist."""
    folder.mkdir(exist_ok=True)
    rows = [
        {
            "characteristic": process.name,
            "scenario": process.scenario,
            "mean": process.mean,
            "sigma": process.sigma,
            "lsl": process.registered.get("lsl", ""),
            "usl": process.registered.get("usl", ""),
            **answers(process),
            "changed": f"{start + timedelta(days=process.change_day):%Y-%m-%d}" if process.change_day else "",
        }
        for process in processes
    ]
    pd.DataFrame(rows).to_csv(folder / "truth.csv", index=False, lineterminator="\n")


def answers(process: Process) -> dict[str, Any]:
    """Target, true indices and the answers of a judge who knows the process: `cell` and `centering`."""
    target = TARGETS.get(str(process.registered.get("class", "")), DEFAULT_TARGET)
    out: dict[str, Any] = {"target": target, "cpk": "", "cpk_centered": "", "cell": "", "centering": "does not apply"}
    if process.scenario in UNSTABLE_SCENARIOS:
        return out | {"cell": UNSTABLE}
    if process.scenario in NOT_JUDGED_SCENARIOS:
        return out | {"cell": NOT_JUDGED}
    now, centered = _folded_index(process) if process.scenario == "flatness" else _normal_index(process)
    out |= {"cpk": round(now, 4), "cell": f"{STABLE}, {CAPABLE if now >= target else NOT_CAPABLE}"}
    if process.scenario in NO_MOVE_SCENARIOS or centered is None:
        return out
    out["cpk_centered"] = round(centered, 4)
    reaches = "reaches" if centered >= target else "not alone"
    return out | {"centering": "already there" if now >= target else reaches}


def _normal_index(process: Process) -> tuple[float, float | None]:
    """Cpk now and with the mean in the middle; None where there is one limit only."""
    lower, upper = (float(text) if (text := process.registered[name]) else None for name in ("lsl", "usl"))
    mean, sigma = process.mean, process.sigma
    if process.streams:
        mean += sigma * float(CAVITIES.mean())
        sigma *= float(CAVITIES.var() + CAVITY_NOISE**2) ** 0.5
    sides = [upper - mean] if upper is not None else []
    sides += [mean - lower] if lower is not None else []
    centered = None if lower is None or upper is None else (upper - lower) / (6 * sigma)
    return min(sides) / (3 * sigma), centered


def _folded_index(process: Process) -> tuple[float, None]:
    """Half-normal values under one upper limit, by quantiles (ISO 22514-2, from memory): no middle to move to."""
    standard = NormalDist()
    median, far = (process.sigma * standard.inv_cdf((1 + share) / 2) for share in (0.5, 0.99865))
    return (float(process.registered["usl"]) - median) / (far - median), None
