"""An invented judgement with everything that a page may meet: every cell, route, kind and code, and hostile text.

The numbers follow from each row's own invented values by the plain formulas (mean, standard deviation, distance to the
nearer limit), so a page can be checked against them without the program's statistics. The frames go through an
in-memory DuckDB with the product's own schema and queries, so their columns and types are those of a stored run.
"""

from __future__ import annotations

from datetime import datetime, timedelta
from functools import cache
from typing import Any

import duckdb
import numpy as np
import pandas as pd
from scipy import stats

from portfolio import shipped
from portfolio.publishing.pages import PageData
from portfolio.result import INSTABILITY_KINDS
from portfolio.store import _PANDAS

AS_OF = datetime(2026, 11, 30, 5)
BEGAN = datetime(2026, 8, 31, 4)
RUN = 7

SCRIPT = "<script>alert(1)</script>"
IMAGE = '"><img src=x onerror=alert(2)>'
PATH = "../../etc/passwd"
LONG = "a very long name " * 17 + "without end"
TURNED = "\u202egnp.exe \u05e7\u05d5\u05d8\u05e8 \u0642\u0637\u0631"
FORMULA = "=cmd()|' /C calc'!A0"
QUOTES = 'O\'Neil "the" \\ & `bore` </script><!-- {{ 7*7 }}'
EMOJI = "bore 🔩🙂 ½ µm"
RESERVED = "con"
HOSTILE = (SCRIPT, IMAGE, PATH, LONG, TURNED, FORMULA, QUOTES, EMOJI, RESERVED)
CODED = "javascript:alert(3)"


def page_data(n: int = 70, seed: int = 1, hostile: bool = True, **plan: Any) -> PageData:
    """The sample as the pages take it; `plan` are sections of the plan, for example report={"decimal": ","}."""
    from portfolio.plan import Plan

    title = f"Weekly triage {SCRIPT}" if hostile else "Weekly triage"
    made = Plan.model_validate({"portfolio": {"title": title, "timezone": "Europe/Vienna"}, **plan})
    return PageData(plan=made, **sample(n, seed, hostile))


def sample(n: int = 70, seed: int = 1, hostile: bool = True) -> dict[str, Any]:
    """Frames as `pages.collect` reads them out of a store, at least `n` characteristics, and the run as a dict."""
    return {name: part.copy() for name, part in _sample(n, seed, hostile).items()}


@cache
def _sample(n: int, seed: int, hostile: bool) -> dict[str, Any]:
    rng = np.random.default_rng(seed)
    recipes = _recipes(hostile)
    recipes += [{"name": f"F{i:04d} filler", "offset": 0.1} for i in range(len(recipes), n)]
    made = [_build(recipe, rng) for recipe in recipes]
    results = pd.DataFrame([row for row, _ in made])
    _rank(results)
    evidence = pd.DataFrame([drawn for _, drawn in made if drawn is not None])
    return _stored(results, evidence, _others(results, hostile))


def _recipes(hostile: bool) -> list[dict[str, Any]]:
    """One entry a situation. `offset` is (mean - middle) and `half` half the tolerance, both in sigma."""

    def named(plain: str, nasty: str) -> str:
        return nasty if hostile else plain

    move = {"half": 5.5, "offset": 2.6, "centering": "reaches", "route": "re-centre"}
    listed: list[dict[str, Any]] = [
        {"name": named("R1 bore", SCRIPT), **move, "volume": 250_000, "cost": 4.0, "chart": "mean and range"},
        {"name": named("R2 bore", IMAGE), **move, "offset": -2.2, "volume": 90_000, "cost": 3.0, "class": "critical",
         "owner": named("turning cell", IMAGE), "site": named("Harbour", QUOTES), "streams": 4},
        {"name": named("R3 bore", QUOTES), **move, "offset": 3.1, "volume": 70_000, "cost": None,
         "adjustable": "unknown", "unit": named("mm", SCRIPT)},
        {"name": named("R4 bore", TURNED), **move, "volume": None, "cost": None, "chart": "mean and s"},
        {"name": "R5 tiny values", **move, "centre": 1e-9, "sigma": 2e-11, "unit": "m", "volume": 9_000, "cost": 0.5},
        {"name": "R6 large values", **move, "centre": 1e9, "sigma": 0.8, "unit": "Hz", "volume": 9_000, "cost": 0.4},
        {"name": "R7 around zero", **move, "centre": 0.0, "sigma": 3.0, "unit": "µm", "volume": 8_000, "cost": 0.4},
        {"name": "R8 may reach", **move, "half": 4.1, "offset": 1.2, "centering": "may reach",
         "volume": 5_000, "cost": 1.0},
        {"name": named("R9 fixed mould", PATH), **move, "centering": "does not apply", "reason": "not_adjustable",
         "adjustable": "no", "why": named("mould dimension", SCRIPT)},
    ]  # fmt: skip
    settled: list[dict[str, Any]] = [
        {"name": "S01 fits", "family": "bore", "site": "Harbour"},
        {"name": "S02 fits elsewhere", "family": "bore", "site": "Mill", "offset": 0.8},
        {"name": named("S03 formula", FORMULA), "offset": 0.2},
        {"name": named("S04 long name", LONG), "part": named("P4", LONG)},
        {"name": named("S05 coloured", EMOJI), "chart": "three-way", "stability_note": "layers"},
        {"name": "S06 negligible", "stability_note": "negligible"},
        {"name": "S07 autocorrelated", "stability_note": "autocorrelated"},
        {"name": "S08 short", "stability_note": "short", "m": 22, "route": "collect more", "half": 4.1, "offset": 0.2,
         "reason": "capable_now", "centering": "already there"},
        {"name": "S09 spread too wide", "half": 3.0, "offset": 0.4, "centering": "not alone",
         "route": "narrow the spread"},
        {"name": "S10 centred and wide", "half": 3.2, "offset": 0.0, "reason": "already_centred",
         "centering": "already there", "route": "narrow the spread"},
        {"name": "S11 upper limit only", "lower": False, "half": 5.0, "reason": "one_sided",
         "centering": "does not apply"},
        {"name": "S12 lower limit only", "upper": False, "half": 3.0, "reason": "one_sided",
         "centering": "does not apply", "route": "narrow the spread"},
        {"name": "S13 flatness", "lower": False, "half": 2.5, "reason": "natural_bound",
         "centering": "does not apply", "route": "narrow the spread"},
        {"name": "S14 low on purpose", "half": 4.5, "offset": -1.0, "reason": "economic_aim", "aim": -1.0,
         "centering": "does not apply"},
        {"name": "S15 coupled", **move, "reason": "coupled", "centering": "does not apply",
         "route": "narrow the spread"},
        {"name": "S16 cavities differ", **move, "reason": "streams_differ", "centering": "does not apply",
         "route": "align the streams", "streams": 8, "differ": True},
        {"name": "S17 noisy gauge", "half": 3.0, "centering": "not alone", "route": "improve the gauge"},
        {"name": "S18 changing limits", "chart": "mean and range", "varying": True},
        {"name": "S19 thinned", "m": 250, "thinned": True},
        {"name": "S20 steps of recording", "step": 0.5, "half": 6.0},
        {"name": named("S21 device name", RESERVED), "owner": named("stores", CODED)},
        {"name": "S22 lighter tails", "shape": "normal, cautious"},
    ]  # fmt: skip
    unstable = [
        {"name": f"U{i} {kind}", "kind": kind, "half": 6.0 if i % 2 else 3.0, "settled": kind == "step",
         "machine": named("M1", SCRIPT)}
        for i, kind in enumerate(INSTABILITY_KINDS)
    ]  # fmt: skip
    unjudged: list[dict[str, Any]] = [
        {"name": "N01 no data", "code": "no_data", "m": 0, "route": "collect more"},
        {"name": "N02 silent", "code": "silent", "route": "collect more", "judged_stability": False},
        {"name": "N03 too few", "code": "too_few", "m": 5, "route": "collect more", "judged_stability": False},
        {"name": "N04 one value", "code": "too_few", "m": 1, "k": 1, "chart": "individuals", "route": "collect more",
         "judged_stability": False},
        {"name": "N05 coarse", "code": "coarse", "step": 3.0, "route": "improve the gauge"},
        {"name": "N06 constant", "code": "constant", "constant": True, "judged_stability": False},
        {"name": "N07 no limits", "code": "no_limits", "lower": False, "upper": False},
        {"name": "N08 crossed limits", "code": "crossed_limits", "half": -3.0},
        {"name": "N09 beyond a bound", "code": "outside_bound"},
        {"name": "N10 noisy gauge", "code": "gauge_too_noisy", "route": "improve the gauge"},
        {"name": "N11 no shape", "code": "no_shape", "half": 3.0},
        {"name": named("N12 suspect limits", "N12 " + SCRIPT), "code": "suspect_limits", "offset": 40.0, "half": 5.0},
        {"name": "N13 sorted", "code": "sorted", "reason": "sorted"},
    ]  # fmt: skip
    return listed + settled + unstable + unjudged


def _build(recipe: dict[str, Any], rng: np.random.Generator) -> tuple[dict[str, Any], dict[str, Any] | None]:
    """One row of results and one of evidence from invented values."""
    chart = recipe.get("chart", "individuals")
    k = recipe.get("k", 1 if chart == "individuals" else 12 if chart == "mean and s" else 5)
    m = recipe.get("m", 60)
    sigma, centre = recipe.get("sigma", 0.004), recipe.get("centre", 25.0)
    mean = centre + recipe.get("offset", 0.0) * sigma
    half = recipe.get("half", 6.0) * sigma
    values = mean + sigma * _pattern(rng, m, k, recipe.get("kind", ""))
    if recipe.get("constant"):
        values[:] = mean
    if "step" in recipe:
        values = np.round(values / (recipe["step"] * sigma)) * recipe["step"] * sigma
    lsl = centre - half if recipe.get("lower", True) else None
    usl = centre + half if recipe.get("upper", True) else None
    row = _registered(recipe, lsl, usl)
    row |= _times(m, k, recipe)
    row |= _moments(values, m, k)
    row |= _stability(recipe, row)
    row |= _capability(recipe, row)
    row |= _centering(recipe, row)
    row["route"] = recipe.get("route") or ("stabilise first" if "kind" in recipe else
                                           "check the data" if "code" in recipe else "leave alone")  # fmt: skip
    row["reason_codes"] = _codes(row)
    return row, _drawn(recipe, row, values, chart, m, k) if m else None


def _pattern(rng: np.random.Generator, m: int, k: int, kind: str) -> np.ndarray:
    """(m, k) values with mean 0 and standard deviation 1, moved in time as the kind says."""
    if m * k < 2:
        return np.zeros((m, k))
    z = rng.standard_normal((m, k))
    when = np.arange(m)[:, None] / m
    z = (
        z
        + {
            "": 0.0,
            "step": 4.0 * (when > 0.6),
            "several steps": 3.0 * (np.floor(when * 4) % 2),
            "drift": 5.0 * when,
            "wandering": np.cumsum(rng.standard_normal((m, 1)), axis=0),
            "cycle": 2.5 * np.sin(2 * np.pi * 5 * when),
            "alternation": 2.0 * (-1.0) ** np.arange(m)[:, None],
            "spread": 2.0 * z * (when > 0.5),
            "isolated extremes": 8.0 * (np.arange(m)[:, None] % 19 == 7),
        }[kind]
    )
    return (z - z.mean()) / z.std(ddof=1)


def _registered(recipe: dict[str, Any], lsl: float | None, usl: float | None) -> dict[str, Any]:
    critical = recipe.get("class") == "critical"
    return {
        "characteristic": recipe["name"], "site": recipe.get("site", "Harbour"), "part": recipe.get("part", "P1"),
        "operation": "turning", "machine": recipe.get("machine", "M01"), "feature": "bore diameter",
        "family": recipe.get("family"), "owner": recipe.get("owner", "turning cell"), "class": recipe.get("class"),
        "unit": recipe.get("unit", "mm"), "lsl": lsl, "usl": usl, "target_cpk": 1.67 if critical else 1.33,
        "adjustable": recipe.get("adjustable", "yes"), "why_not_adjustable": recipe.get("why"), "move_effort": "low",
        "currency": "EUR" if recipe.get("cost") else None,
    }  # fmt: skip


def _times(m: int, k: int, recipe: dict[str, Any]) -> dict[str, Any]:
    if not m:
        return {"measurements": 0, "subgroups": 0, "window_measurements": 0}
    return {
        "measurements": m * k, "subgroups": m, "window_measurements": m * k, "subgroup_size": float(k),
        "first": BEGAN, "last": BEGAN + timedelta(hours=36 * (m - 1) if m <= 60 else 8 * (m - 1)),
        "streams": recipe.get("streams", 0), "streams_means_differ": recipe.get("differ", False),
    }  # fmt: skip


def _moments(values: np.ndarray, m: int, k: int) -> dict[str, Any]:
    if m * k < 2:
        return {"mean": float(values.mean()) if values.size else None, "distinct_values": values.size}
    total = float(values.std(ddof=1))
    within = float(np.sqrt(values.var(axis=1, ddof=1).mean())) if k > 1 else 0.95 * total
    return {
        "mean": float(values.mean()), "sigma_within": within, "sigma_total": total, "sigma_overall": total,
        "sigma_between": 0.1 * total, "n_effective": float(m * k), "df_effective": float(m * k - 1),
        "distinct_values": len(np.unique(values)), "recording_step": None,
    }  # fmt: skip


def _stability(recipe: dict[str, Any], row: dict[str, Any]) -> dict[str, Any]:
    if not recipe.get("judged_stability", True) or not row["subgroups"]:
        return {"stability": "not judged", "stability_note": recipe["code"], "instability": ""}
    kind = recipe.get("kind", "")
    out: dict[str, Any] = {
        "stability": "unstable" if kind else "stable", "instability": kind, "stability_p": 1e-7 if kind else 0.4,
        "stability_q": 1e-6 if kind else 0.7, "signals": 9 if kind else 2, "expected_signals": 1.4,
        "stability_note": recipe.get("stability_note", ""), "movement_share": 0.5 if kind else 0.02,
    }  # fmt: skip
    if kind:
        sigma = row["sigma_total"]
        out |= {"since": BEGAN + timedelta(days=54), "change_size": 3 * sigma, "change_sigma": 3.0,
                "period_hours": 24.0, "spread_ratio": 2.1}  # fmt: skip
        if recipe.get("settled"):
            out["settled_since"] = BEGAN + timedelta(days=54)
    return out


def _capability(recipe: dict[str, Any], row: dict[str, Any]) -> dict[str, Any]:
    code = recipe.get("code", "")
    out: dict[str, Any] = {"capability": "not judged", "capability_note": code, "close_call": False,
                           "cell": "not judged", "index_name": "", "shape": ""}  # fmt: skip
    values_there = row["measurements"] > 0 and not (row["lsl"] is None and row["usl"] is None)
    if values_there:
        wholly = code == "suspect_limits"
        out |= {"outside_observed": row["measurements"] if wholly else 0, "outside_high": 1.0 if wholly else 0.02}
    if code:
        return out
    mean, sigma, target = row["mean"], row["sigma_total"], row["target_cpk"]
    sides = [
        (row["usl"] - mean) if row["usl"] is not None else np.inf,
        (mean - row["lsl"]) if row["lsl"] is not None else np.inf,
    ]
    index = min(sides) / (3 * sigma)
    both = row["lsl"] is not None and row["usl"] is not None
    width = (row["usl"] - row["lsl"]) / (6 * sigma) if both else None
    stable = row["stability"] == "stable"
    # Large-sample standard error of an index of normal data (from memory; only its size matters here).
    error = float(np.sqrt(1 / (9 * row["n_effective"]) + index**2 / (2 * row["df_effective"])))
    low, high = index - 1.645 * error, index + 1.645 * error
    fits = index >= target
    out |= {
        "capability": "capable" if fits else "not capable", "close_call": bool(low < target < high),
        "index_name": "Cpk" if stable else "Ppk", "index": index, "index_low": low, "index_high": high,
        "chance_now": float(stats.norm.cdf((index - target) / error)), "shape": recipe.get("shape", "normal"),
        "cell": f"{row['stability']}, {'capable' if fits else 'not capable'}", "pp": width, "ppk": index,
        "ppm_now": _ppm(mean, sigma, row["lsl"], row["usl"]),
    }  # fmt: skip
    if stable:
        scale = sigma / row["sigma_within"]
        out |= {
            "cp": width,
            "cpk": index,
            "cp_within": None if width is None else width * scale,
            "cpk_within": index * scale,
        }
    return out


def _centering(recipe: dict[str, Any], row: dict[str, Any]) -> dict[str, Any]:
    if row["cell"] == "not judged":
        return {"centering": "does not apply", "centering_reason": "not_judged"}
    if row["stability"] == "unstable":
        return {"centering": "does not apply", "centering_reason": "unstable"}
    reason = recipe.get("reason", "" if "centering" in recipe else "capable_now")
    out: dict[str, Any] = {"centering": recipe.get("centering", "already there"), "centering_reason": reason}
    if row["cp"] is None:
        return out
    mean, sigma, target = row["mean"], row["sigma_total"], row["target_cpk"]
    aim = (row["lsl"] + row["usl"]) / 2 + recipe.get("aim", 0.0) * sigma
    low, high = row["lsl"] + 3 * target * sigma, row["usl"] - 3 * target * sigma
    centered = min(row["usl"] - aim, aim - row["lsl"]) / (3 * sigma)
    error = centered / np.sqrt(2 * row["df_effective"])
    out |= {
        "aim": aim, "move": aim - mean, "cpk_centered": centered, "cpk_centered_low": centered - 1.645 * error,
        "chance_centered": float(stats.norm.cdf((centered - target) / error)),
        "ppm_centered": _ppm(aim, sigma, row["lsl"], row["usl"]),
    }  # fmt: skip
    if low <= high:
        out |= {"aim_low": low, "aim_high": high, "move_least": float(np.clip(mean, low, high) - mean)}
    if out["centering"] == "not alone":
        out["needed_sigma"] = (row["usl"] - row["lsl"]) / (6 * target)
    if out["centering"] in ("reaches", "may reach") and recipe.get("volume"):
        out["parts_per_year"] = (row["ppm_now"] - out["ppm_centered"]) * 1e-6 * recipe["volume"]
        if recipe["cost"]:
            out["saving_per_year"] = out["parts_per_year"] * recipe["cost"]
    return out


def _ppm(mean: float, sigma: float, lsl: float | None, usl: float | None) -> float:
    below = 0.0 if lsl is None else stats.norm.cdf((lsl - mean) / sigma)
    above = 0.0 if usl is None else stats.norm.sf((usl - mean) / sigma)
    return 1e6 * float(below + above)


def _codes(row: dict[str, Any]) -> list[str]:
    if row["cell"] == "not judged":
        return [f"not_judged:{row['capability_note']}"]
    if row["stability"] == "unstable":
        return [f"unstable:{row['instability']}"] + (["settled"] if "settled_since" in row else [])
    codes = [f"centering:{row['centering']}"] if row["centering"] in ("reaches", "may reach", "not alone") else []
    codes += [f"centering_reason:{row['centering_reason']}"] if row["centering_reason"] else []
    codes += ["not_capable"] if row["capability"] == "not capable" else []
    codes += ["close_call"] if row["close_call"] else []
    return [*codes, f"stable:{row['stability_note']}" if row["stability_note"] else "stable"]


def _drawn(
    recipe: dict[str, Any], row: dict[str, Any], values: np.ndarray, chart: str, m: int, k: int
) -> dict[str, Any]:
    """Subgroup series with limits at three standard errors, first rule and spread marked, and the bins."""
    location = values.mean(axis=1)
    spread = np.ptp(values, axis=1) if k > 1 else np.concatenate(([np.nan], np.abs(np.diff(location))))
    if chart == "mean and s":
        spread = values.std(axis=1, ddof=1)
    centre, level = float(location.mean()), float(np.nanmean(spread)) if m > 1 else 0.0
    half = np.full(m, 3 * row.get("sigma_within", 0.0) / np.sqrt(k)) if m > 1 else np.zeros(m)
    if recipe.get("varying"):
        half[m // 2 :] *= 1.2
    lower, upper = centre - half, centre + half
    beyond = np.flatnonzero((location < lower) | (location > upper))
    wide = np.flatnonzero(np.nan_to_num(spread) > 3.0 * level) if level > 0 else np.array([], dtype=int)
    constant = not recipe.get("varying")
    counts, edges = np.histogram(values, bins=min(24, max(6, int(np.sqrt(values.size)))))
    if not np.ptp(values):
        counts, edges = np.array([values.size]), np.array([values.min() - 0.5, values.min() + 0.5])
    hours = np.linspace(0, (row["last"] - row["first"]).total_seconds() / 3600, m)
    return {
        "characteristic": row["characteristic"], "chart": chart,
        "taken": [row["first"] + timedelta(seconds=round(3600 * h)) for h in hours],
        "location": location.tolist(), "spread": [None if np.isnan(s) else float(s) for s in spread], "size": [k] * m,
        "location_centre": centre,
        "location_lower": lower[:1].tolist() if constant else lower.tolist(),
        "location_upper": upper[:1].tolist() if constant else upper.tolist(),
        "spread_centre": [level], "spread_lower": [0.0], "spread_upper": [3.0 * level],
        "between_centre": level if chart == "three-way" else None,
        "between_upper": 3 * level if chart == "three-way" else None,
        "signal_index": [*beyond.tolist(), *wide.tolist()], "signal_rule": ["1"] * len(beyond) + ["spread"] * len(wide),
        "bin_start": float(edges[0]), "bin_width": float(edges[1] - edges[0]), "bin_count": counts.tolist(),
        "thinned": recipe.get("thinned", False),
    }  # fmt: skip


def _rank(results: pd.DataFrame) -> None:
    """By money, then by parts, then by avoided parts per million."""
    listed = results[results["centering"].isin(["reaches", "may reach"])]
    keys = listed.assign(avoided=listed["ppm_now"] - listed["ppm_centered"])
    order = keys.sort_values(
        ["saving_per_year", "parts_per_year", "avoided"], ascending=False, na_position="last"
    ).index
    results["rank"] = pd.Series(range(1, len(order) + 1), index=order).astype("Int64")
    results["score"] = results["saving_per_year"] * results["chance_centered"]


def _others(results: pd.DataFrame, hostile: bool) -> dict[str, pd.DataFrame]:
    """The tables around a judgement."""
    nasty = SCRIPT if hostile else "an example"
    at = AS_OF - timedelta(hours=1)
    load = {"size": 1000, "sha256": "0" * 64, "modified": at, "started_at": at, "finished_at": at,
            "first_taken": BEGAN, "last_taken": at, "program": "portfolio"}  # fmt: skip
    loads = [
        {"load_id": 1, "source": "gauge room", "item": "incoming/a.csv", "rows_read": 12_340, "rows_new": 12_000,
         "rows_known": 300, "rows_corrected": 5, "rows_rejected": 30, "rows_empty": 5, "status": "done", **load},
        {"load_id": 2, "source": "gauge room", "item": f"incoming/{nasty}.csv", "rows_read": 10, "rows_new": 0,
         "rows_known": 0, "rows_corrected": 0, "rows_rejected": 10, "rows_empty": 0, "status": "refused",
         "reason": f"more than 5 % set aside {nasty}", **load},
    ]  # fmt: skip
    rejected = [
        {"load_id": 1, "source": "gauge room", "item": "incoming/a.csv", "record_no": 10 + i, "column_name": "value",
         "reason": "value is not a number" if i % 3 else "time is not readable", "raw": nasty}
        for i in range(30)
    ]  # fmt: skip
    pulls = [
        {"pull_id": 1, "source": "gauge room", "pulled_at": at, "status": "done", "items": 2, "rows_read": 12_350,
         "rows_new": 12_000, "rows_known": 300, "rows_corrected": 5, "rows_rejected": 40, "message": None},
        {"pull_id": 1, "source": "line database", "pulled_at": at, "status": "failed", "items": 0, "rows_read": 0,
         "rows_new": 0, "rows_known": 0, "rows_corrected": 0, "rows_rejected": 0, "message": f"no connection {nasty}"},
    ]  # fmt: skip
    changes = [
        {"change_id": 1, "characteristic": results["characteristic"][0], "changed_at": BEGAN, "kind": "re-centred",
         "note": f"offset corrected {nasty}", "logged_at": at, "logged_by": "setter"},
        {"change_id": 2, "characteristic": "long gone", "changed_at": BEGAN, "kind": "tool change", "note": None,
         "logged_at": at, "logged_by": None},
    ]  # fmt: skip
    listed = results[results["rank"].notna()].sort_values("rank")
    ranking = [
        {"run_id": RUN, "rank": int(r), "characteristic": name, "status": "new" if r % 2 else "stays", "reason": ""}
        for r, name in zip(listed["rank"], listed["characteristic"], strict=True)
    ] + [
        {"run_id": RUN, "rank": None, "characteristic": "S01 fits", "status": "left", "reason": "capable_now"},
        {"run_id": RUN, "rank": None, "characteristic": f"gone {nasty}", "status": "left", "reason": "not_registered"},
    ]  # fmt: skip
    earlier = []
    for weeks in range(4, 0, -1):
        part = results[["characteristic", "index", "index_low", "index_high", "cell", "target_cpk"]].copy()
        shift = 0.05 * weeks * (-1) ** weeks
        part[["index", "index_low", "index_high"]] = part[["index", "index_low", "index_high"]].astype(float) + shift
        earlier.append(part.assign(run_id=RUN - weeks))
    runs = [
        {"run_id": RUN - weeks, "slot": None, "as_of": AS_OF - timedelta(weeks=weeks),
         "judged_at": AS_OF - timedelta(weeks=weeks), "window_from": BEGAN - timedelta(weeks=weeks),
         "program": "portfolio 0.1.0"}
        for weeks in range(4, -1, -1)
    ]  # fmt: skip
    return {
        "loads": pd.DataFrame(loads), "rejected": pd.DataFrame(rejected), "pulls": pd.DataFrame(pulls),
        "changes": pd.DataFrame(changes), "ranking": pd.DataFrame(ranking), "runs": pd.DataFrame(runs),
        "earlier": pd.concat(earlier),
        "characteristics": pd.DataFrame({"characteristic_id": [1], "name": [f"H99 trial feature {nasty}"]}),
        "measurements": pd.DataFrame(
            {"characteristic_id": [1], "taken_at": [at], "unit_no": [1], "value": [1.0], "load_id": [1]}
        ),
    }  # fmt: skip


def _stored(results: pd.DataFrame, evidence: pd.DataFrame, others: dict[str, pd.DataFrame]) -> dict[str, Any]:
    """Through the product's schema and queries, so that columns and types are those of a stored run."""
    with duckdb.connect(config={"python_enable_replacements": False}) as connection:
        connection.execute(shipped.text("queries/schema/0001_store.sql"))

        def insert(table: str, frame: pd.DataFrame) -> None:
            connection.register("given", frame.convert_dtypes())
            names = ", ".join(f'"{name}"' for name in frame)
            connection.execute(f"insert into {table} ({names}) select {names} from given")
            connection.unregister("given")

        def read(query: str, **values: Any) -> pd.DataFrame:
            table = connection.sql(shipped.text(f"queries/{query}.sql"), params=values or None).to_arrow_table()
            return table.to_pandas(types_mapper=_PANDAS.get)

        missing = {"stability": "not judged", "capability": "not judged", "centering": "does not apply",
                   "route": "check the data"}  # fmt: skip
        earlier = others.pop("earlier").assign(**missing)
        earlier["reason_codes"] = [[] for _ in range(len(earlier))]
        insert("results", earlier)
        insert("results", results.assign(run_id=RUN))
        insert("evidence", evidence.assign(run_id=RUN))
        for table, frame in others.items():
            insert(table, frame)
        runs = read("judgement/runs")
        return {
            "run": runs[runs["run_id"] == RUN].to_dict("records")[0],
            "results": read("judgement/results_of_run", run_id=RUN),
            "evidence": read("judgement/evidence_of_run", run_id=RUN),
            "ranking": read("judgement/ranking_of_run", run_id=RUN),
            "pulls": read("history/last_pulls"),
            "loads": read("publishing/rows_by_source"),
            "refused": read("publishing/refused_items"),
            "rejected": read("publishing/rejected_by_reason"),
            "unregistered": read("publishing/unregistered", run_id=RUN),
            "changes": read("history/changes"),
            "history": read("history/index_history", run_id=RUN),
        }
