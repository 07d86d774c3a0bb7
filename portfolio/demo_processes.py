"""The invented processes of the demo: what is measured, how it behaves, what its registry row says."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from portfolio.statistics.ragged import Floats

WEEKS = 13


@dataclass
class Process:
    """One invented characteristic. `sigma` is the total standard deviation of a calm period, in `unit`."""

    name: str
    site: str
    scenario: str
    unit: str
    mean: float
    sigma: float
    resolution: float
    subgroups: int = 78
    size: int = 5
    streams: bool = False
    weeks: float = WEEKS
    minute: int = 0
    change_day: int = 0
    registered: dict[str, Any] = field(default_factory=dict)


Scenario = Callable[[Process, int, int, np.random.Generator], Floats]


def _noise(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return p.mean + p.sigma * rng.standard_normal((m, n))


def _share(p: Process, m: int) -> int:
    """The subgroup at which the change of this process falls."""
    return int(m * p.change_day / (7 * p.weeks))


def _step(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return _noise(p, m, n, rng) + 1.8 * p.sigma * (np.arange(m) >= _share(p, m))[:, None]


def _several(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    t = np.arange(m) / m
    return _noise(p, m, n, rng) + p.sigma * (2.0 * ((t > 0.3) & (t < 0.6)))[:, None]


def _drift(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return _noise(p, m, n, rng) + 2.5 * p.sigma * np.linspace(-0.5, 0.5, m)[:, None]


def _walk(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    path = _autoregressive(m, 0.93, rng)
    return _noise(p, m, n, rng) + 1.6 * p.sigma * path[:, None]


def _autoregressive(m: int, phi: float, rng: np.random.Generator) -> Floats:
    shocks = rng.standard_normal(m) * np.sqrt(1 - phi**2)
    shocks[0] /= np.sqrt(1 - phi**2)
    lag = np.arange(m)[:, None] - np.arange(m)
    return np.asarray(np.where(lag >= 0, phi ** np.maximum(lag, 0), 0.0) @ shocks)


def _cycle(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    days = np.arange(m) * 7 * p.weeks / m
    return _noise(p, m, n, rng) + 1.3 * p.sigma * np.sin(2 * np.pi * days)[:, None]


def _alternation(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return _noise(p, m, n, rng) + 0.9 * p.sigma * ((-1.0) ** np.arange(m))[:, None]


def _spread(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    wide = np.where(np.arange(m) >= _share(p, m), 2.1, 1.0)[:, None]
    return p.mean + p.sigma * wide * rng.standard_normal((m, n))


def _isolated(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    out = _noise(p, m, n, rng)
    out[rng.choice(m, 3, replace=False)] += 5.5 * p.sigma
    return out


def _batches(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    share = 0.45
    between = p.sigma * np.sqrt(share) * rng.standard_normal((m, 1))
    return p.mean + between + p.sigma * np.sqrt(1 - share) * rng.standard_normal((m, n))


CAVITIES = 0.84 * np.array([-1.4, 0.1, 0.4, 1.5])
"Offsets of the four cavities of a tool, in the sigma of their process."
CAVITY_NOISE = 0.6
"Spread inside one cavity, in the same sigma."


def _cavities(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return p.mean + p.sigma * (CAVITIES[None, :n] + CAVITY_NOISE * rng.standard_normal((m, n)))


def _folded(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return np.abs(p.sigma * rng.standard_normal((m, n)))


def _sorted(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    """Survivors of a full inspection: drawn again until inside the limits."""
    out = _noise(p, m, n, rng)
    low, high = float(p.registered["lsl"]), float(p.registered["usl"])
    while (bad := (out <= low) | (out >= high)).any():
        out[bad] = p.mean + p.sigma * rng.standard_normal(int(bad.sum()))
    return out


def _leaning(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return p.mean + p.sigma * _autoregressive(m, 0.4, rng)[:, None] * np.ones(n)


def _recentred(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return _noise(p, m, n, rng) + 2.2 * p.sigma * (np.arange(m) < _share(p, m))[:, None]


def _inches(p: Process, m: int, n: int, rng: np.random.Generator) -> Floats:
    return _noise(p, m, n, rng) / 25.4


SCENARIOS: dict[str, Scenario] = {
    "capable": _noise, "reaches": _noise, "borderline": _noise, "too wide": _noise, "too wide, centred": _noise,
    "flatness": _folded, "strength": _noise, "step": _step, "several steps": _several, "drift": _drift,
    "wandering": _walk, "cycle": _cycle, "alternation": _alternation, "spread": _spread,
    "isolated extremes": _isolated, "layers": _batches, "cavities": _cavities, "coarse": _noise, "sorted": _sorted,
    "give-away": _noise, "too few": _noise, "no limits": _noise, "new limits": _noise, "unit mix-up": _inches,
    "silent": _noise, "not adjustable": _noise, "no data": _noise, "leaning": _leaning, "re-centred": _recentred,
    "noisy gauge": _noise,
}  # fmt: skip

COUNTS = {
    "capable": 140, "reaches": 18, "borderline": 8, "too wide": 22, "too wide, centred": 12, "flatness": 14,
    "strength": 8, "step": 6, "several steps": 4, "drift": 5, "wandering": 5, "cycle": 4, "alternation": 4,
    "spread": 4, "isolated extremes": 5, "layers": 10, "cavities": 8, "coarse": 5, "sorted": 4, "give-away": 6,
    "too few": 7, "no limits": 4, "new limits": 3, "unit mix-up": 2, "silent": 3, "not adjustable": 4, "no data": 2,
    "leaning": 6, "re-centred": 3,
}  # fmt: skip

MACHINED = (
    "journal diameter",
    "bore diameter",
    "shoulder length",
    "groove width",
    "keyway depth",
    "thread pitch diameter",
)
MOULDED = ("wall thickness", "rim diameter", "clip width", "lid height", "stem diameter", "part mass")
FAMILIES = ("flange bore", "hub length", "cover height", "ring width", "pin diameter", "seat depth")
OWNERS = ("turning cell", "milling cell", "moulding shop", "filling hall", "laboratory")


def characteristics(rng: np.random.Generator) -> list[Process]:
    """Every characteristic of the demo, in a fixed order."""
    out: list[Process] = []
    number = 0
    for scenario, count in COUNTS.items():
        for index in range(count):
            number += 1
            out.append(_one(scenario, index, number, rng))
    out += _families(rng, number)
    for position, process in enumerate(out):
        # Fillers are weighed together (one row of the wide file); elsewhere each characteristic has its own minute.
        process.minute = 0 if process.scenario == "give-away" else position % 7
    return out


def _one(scenario: str, index: int, number: int, rng: np.random.Generator) -> Process:
    if scenario == "give-away":
        return _filling(number, rng)
    if scenario == "leaning":
        return _bath(number, rng)
    moulded = scenario in ("cavities",) or (scenario not in ("flatness", "strength") and index % 3 == 2)
    site = (
        "Mill"
        if moulded
        else ("Quarry" if index % 3 == 1 and scenario in ("flatness", "strength", "layers") else "Harbour")
    )
    feature = (MOULDED if moulded else MACHINED)[number % 6]
    unit, nominal, sigma, resolution = (
        "mm",
        float(rng.integers(8, 120)) / 2,
        float(rng.choice([0.004, 0.008, 0.02])),
        0.001,
    )
    if feature == "part mass":
        unit, nominal, sigma, resolution = "g", float(rng.integers(20, 90)), 0.08, 0.01
    process = Process("", site, scenario, unit, nominal, sigma, resolution)
    # 1.33 needs a width of 8 sigma; `offset` is the distance of the mean from the middle, in sigmas.
    half, offset = _geometry(scenario, index, rng)
    lower, upper = nominal - half * sigma, nominal + half * sigma
    process.mean = nominal + offset * sigma
    registered: dict[str, Any] = {
        "part": f"P{number:03d}", "operation": "moulding" if moulded else "turning", "machine": f"M{1 + number % 17:02d}",
        "feature": feature, "lsl": f"{lower:.6g}", "usl": f"{upper:.6g}",
        "adjustable": "yes" if number % 5 else "unknown", "move_effort": ("low", "medium", "high")[number % 3],
        "annual_volume": int(rng.choice([40_000, 120_000, 350_000])), "cost_currency": "EUR",
        "cost_per_nonconforming": float(rng.choice([0.8, 2.5, 6.0, 14.0])), "owner": OWNERS[2 if moulded else number % 2],
        "subgroup_size": 5,
    }  # fmt: skip
    process.registered = registered
    _special(process, scenario, index, nominal, rng)
    process.name = f"{site[0]}{number:03d} {registered['feature']}"
    return process


def _geometry(scenario: str, index: int, rng: np.random.Generator) -> tuple[float, float]:
    """Half width of the tolerance and offset of the mean, both in sigmas."""
    side = 1.0 if rng.random() < 0.5 else -1.0
    match scenario:
        case "capable" | "leaning" | "silent" | "too few" | "no limits" | "coarse" | "unit mix-up" | "no data":
            return float(rng.uniform(5.6, 7.5)), side * float(rng.uniform(0.0, 0.5))
        case "reaches":
            return float(rng.uniform(5.0, 6.0)), side * float(rng.uniform(2.0, 3.2))
        case "not adjustable":
            return float(rng.uniform(5.0, 5.6)), side * float(rng.uniform(2.0, 2.6))
        case "borderline":
            return float(rng.uniform(4.05, 4.3)), side * float(rng.uniform(0.9, 1.5))
        case "too wide":
            return float(rng.uniform(2.4, 3.3)), side * float(rng.uniform(0.8, 1.5))
        case "too wide, centred":
            return float(rng.uniform(2.4, 3.4)), 0.0
        case "sorted":
            return 1.7, side * 0.4
        case "cavities":
            return 3.3, 0.0
        case "re-centred":
            return 6.2, 0.0
        case _:
            return (7.5 if index % 2 else 4.0), 0.0


def _special(process: Process, scenario: str, index: int, nominal: float, rng: np.random.Generator) -> None:
    """What a scenario changes beside its values."""
    registered = process.registered
    if scenario in ("step", "spread", "re-centred"):
        process.change_day = int(rng.integers(40, 60))
    if scenario == "new limits":
        process.change_day = 44
    if scenario == "cycle":
        process.subgroups, process.size = 8 * 7 * WEEKS, 1
        registered["subgroup_size"] = 1
    if scenario == "flatness":
        process.sigma = 0.006
        registered.update(feature="flatness", lsl="", usl="0.02" if index % 2 else "0.035", lower_bound=0, shape="form")
    if scenario == "strength":
        process.unit, process.mean, process.sigma, process.resolution = "MPa", 520.0, 9.0, 1.0
        registered.update(feature="tensile strength", usl="", lsl="470" if index % 2 else "490")
    if scenario == "cavities":
        process.streams, process.size = True, 4
        registered.update(subgroup_size=4)
    if scenario == "coarse":
        process.resolution = process.sigma * 4
    if scenario == "too few":
        process.subgroups, process.weeks = 9, WEEKS
    if scenario == "silent":
        process.weeks = 8
    if scenario == "no limits":
        registered.update(lsl="", usl="")
    if scenario == "no data":
        process.subgroups = 0
    if scenario == "too wide, centred" and index in (3, 9):
        # What is wide here is the gauge, not the process.
        process.scenario = "noisy gauge"
        registered.update(gauge_sd=f"{0.97 * process.sigma:.3g}", gauge_df=40)
    if scenario == "unit mix-up":
        process.resolution = 0.0001
    if scenario == "not adjustable":
        registered.update(adjustable="no", why_not_adjustable="dimension is cut into the tool")
    if scenario == "reaches" and index in (4, 9):
        registered.update(cost_per_nonconforming="", annual_volume="" if index == 9 else registered["annual_volume"])
    if (scenario == "reaches" and index in (2, 7)) or (scenario == "capable" and index % 20 == 0):
        registered["class"] = "critical"


def _filling(number: int, rng: np.random.Generator) -> Process:
    """Deliberately above the middle: an underweight costs more than a little give-away."""
    label = float(rng.choice([250.0, 500.0, 750.0]))
    sigma = label * 0.003
    process = Process(f"Q{number:03d} fill mass", "Quarry", "give-away", "g", label + 2.6 * sigma, sigma, 0.01)
    process.registered = {
        "part": f"jar {label:.0f} g", "operation": "filling", "machine": f"filler {1 + number % 3}", "feature": "fill mass",
        "lsl": f"{label:.6g}", "usl": f"{label + 9 * sigma:.6g}", "aim": f"{label + 2.6 * sigma:.6g}",
        "giveaway_cost_per_unit": 0.002, "price": 1.9, "reject_price": 0.4, "annual_volume": 900_000,
        "cost_currency": "EUR", "cost_per_nonconforming": 1.5, "adjustable": "yes", "owner": "filling hall",
    }  # fmt: skip
    return process


def _bath(number: int, rng: np.random.Generator) -> Process:
    """One sample a shift; neighbouring samples of a bath are alike."""
    level = float(rng.choice([42.0, 18.0, 65.0]))
    sigma = level * 0.02
    process = Process(f"Q{number:03d} bath concentration", "Quarry", "leaning", "g/l", level, sigma, 0.01, 260, 1)
    process.registered = {
        "part": "plating line", "operation": "chemical bath", "machine": f"tank {1 + number % 4}",
        "feature": "concentration", "lsl": f"{level - 6.5 * sigma:.5g}", "usl": f"{level + 6.5 * sigma:.5g}",
        "adjustable": "yes", "move_effort": "low", "owner": "laboratory", "subgroup_size": 1,
        "expected": "autocorrelation",
    }  # fmt: skip
    return process


def _families(rng: np.random.Generator, number: int) -> list[Process]:
    """The same feature at all three works, each with its own level of skill."""
    out = []
    for index, feature in enumerate(FAMILIES):
        nominal = 20.0 + 6 * index
        for place, (site, sigma, offset) in enumerate(
            (("Harbour", 0.005, 0.3), ("Mill", 0.008, 0.8), ("Quarry", 0.0065, -2.4 if index % 2 else 0.2))
        ):
            scenario = "reaches" if abs(offset) > 2 else "capable" if sigma < 0.006 else "borderline"
            process = Process(
                f"{site[0]}{number + 1 + 3 * index + place:03d} {feature}", site, scenario, "mm",
                nominal + offset * sigma, sigma, 0.001,
            )  # fmt: skip
            process.registered = {
                "part": f"common part {index + 1}", "operation": "turning", "machine": f"M{20 + place}",
                "feature": feature, "family": feature, "lsl": f"{nominal - 0.034:.6g}", "usl": f"{nominal + 0.034:.6g}",
                "adjustable": "yes", "move_effort": "low", "annual_volume": 80_000, "cost_per_nonconforming": 3.0,
                "cost_currency": "EUR", "owner": f"{site} turning cell", "subgroup_size": 5,
            }  # fmt: skip
            out.append(process)
    return out
