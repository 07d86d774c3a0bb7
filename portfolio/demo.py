"""The invented scenario: three works of one invented group, 13 weeks, source files with realistic dirt.

Nothing here is real. Values depend on the seed only; another ending shifts time stamps by whole weeks. What every
characteristic truly is, is written beside the demo for tests and read by nothing else.
"""

from __future__ import annotations

import csv
import gzip
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd

from portfolio import demo_truth
from portfolio.demo_processes import SCENARIOS, Process, characteristics
from portfolio.errors import UsageError
from portfolio.plan import Plan
from portfolio.registry import COLUMNS

ZONE = "Europe/Vienna"
WEEKS = 13
SEED = 20260101
PLAN = """\
# An invented group of three works; nothing in it is real.
[portfolio]
title = "Weekly triage, Lakeside group (invented)"
timezone = "Europe/Vienna"
window_weeks = 13

[targets]
default = 1.33
critical = 1.67

[[source]]
name = "harbour gauge room"
path = "incoming/harbour/*.csv"
columns = { characteristic = "feature", taken_at = "time", value = "result", subgroup = "sample", part_id = "part", unit = "dimension" }

[[source]]
name = "mill moulding"
path = "incoming/mill/*.csv.gz"
delimiter = ";"
decimal = ","
encoding = "cp1252"
time_format = "%d.%m.%Y %H:%M:%S"
columns = { characteristic = "name", taken_at = "taken", value = "reading", subgroup = "shot", stream = "cavity" }

[[source]]
name = "quarry filling"
path = "incoming/quarry/filler*.csv"
layout = "wide"
columns = { taken_at = "time", subgroup = "draw" }

[[source]]
name = "quarry laboratory"
path = "incoming/quarry/laboratory.parquet"

[schedule]
pull = "30 5 * * *"
publish = "0 6 * * mon"
"""


@dataclass(frozen=True)
class Demo:
    """Where the plan was written and where its data end (aware)."""

    plan: Path
    end: datetime


def write(folder: Path, *, ending: date | None = None, seed: int = SEED) -> Demo:
    """Write plan, registry, source files, logged changes and the truth into `folder`.

    `ending`: last day of data, moved back to a Sunday (default: the last Sunday before today).
    """
    if (folder / "plan.toml").exists() and "invented" not in (folder / "plan.toml").read_text(encoding="utf-8")[:80]:
        raise UsageError(f"{folder / 'plan.toml'} exists and is not a demo. Name another folder.")
    day = ending or datetime.now(ZoneInfo(ZONE)).date() - timedelta(days=1)
    sunday = day - timedelta(days=(day.weekday() + 1) % 7)
    start = datetime.combine(sunday - timedelta(days=7 * WEEKS - 1), time())
    rng = np.random.default_rng(seed)
    processes = characteristics(rng)
    for part in ("harbour", "mill", "quarry"):
        (folder / "incoming" / part).mkdir(parents=True, exist_ok=True)
    values = pd.concat([_values(process, start, rng) for process in processes], ignore_index=True)
    _write_harbour(folder / "incoming/harbour", values[values["site"] == "Harbour"], start)
    _write_mill(folder / "incoming/mill", values[values["site"] == "Mill"], start)
    _write_quarry(folder / "incoming/quarry", values[values["site"] == "Quarry"])
    _write_registry(folder / "registry.csv", processes, start)
    _write_changes(folder / "changes.csv", processes, start)
    demo_truth.write(folder / "truth", processes, start)
    (folder / "plan.toml").write_text(PLAN, encoding="utf-8")
    end = datetime.combine(sunday + timedelta(days=1), time(), ZoneInfo(ZONE))
    return Demo(folder / "plan.toml", end.astimezone(UTC))


def log_changes(plan: Plan) -> int:
    """Record the changes that lie beside a demo plan; repeating it changes nothing."""
    from portfolio import upkeep

    rows = pd.read_csv(plan.folder / "changes.csv")
    for row in rows.itertuples():
        moment = datetime.fromisoformat(str(row.changed_at)).replace(tzinfo=ZoneInfo(ZONE))
        upkeep.log_change(plan, str(row.characteristic), str(row.kind), moment, str(row.note), "setter")
    return len(rows)


def _values(process: Process, start: datetime, rng: np.random.Generator) -> pd.DataFrame:
    """The measurements of one characteristic in the order of time."""
    m, n = process.subgroups, process.size
    level = SCENARIOS[process.scenario](process, m, n, rng)  # (m, n) values
    step = timedelta(days=7 * process.weeks) / max(m, 1)
    # Samples are drawn between 06:00 and 22:00, so that no clock change makes a time ambiguous.
    offsets = np.arange(m) * (step / timedelta(seconds=1))
    days, seconds = np.divmod(offsets, 86_400)
    moments = days * 86_400 + 6 * 3_600 + seconds * (16 / 24) + process.minute * 60
    within = np.arange(n) * (0 if process.streams else 45)
    seconds_all = (moments[:, None] + within[None, :]).ravel().round().astype(np.int64)
    return pd.DataFrame(
        {
            "site": process.site,
            "characteristic": process.name,
            "taken_at": np.datetime64(start, "s") + seconds_all.astype("timedelta64[s]"),
            "value": np.round(level.ravel() / process.resolution) * process.resolution,
            "subgroup": np.repeat(np.arange(1, m + 1), n),
            "stream": np.tile([f"cavity {k + 1}" for k in range(n)], m) if process.streams else "",
            "part": np.arange(1, m * n + 1),
            "unit": process.unit,
            "digits": max(0, round(-np.log10(process.resolution))),
        }
    )


def _text(values: pd.DataFrame, decimal: str = ".") -> list[str]:
    digits = values["digits"].to_numpy()
    return [f"{value:.{places}f}".replace(".", decimal) for value, places in zip(values["value"], digits, strict=True)]


def _write_harbour(folder: Path, values: pd.DataFrame, start: datetime) -> None:
    """One file a week; dirt: words instead of numbers, a short line, a future time, a file delivered twice, corrections."""
    rows = pd.DataFrame(
        {
            "feature": values["characteristic"],
            "time": values["taken_at"].dt.strftime("%Y-%m-%dT%H:%M:%S"),
            "result": _text(values),
            "sample": values["subgroup"],
            "part": values["part"],
            "dimension": values["unit"],
        }
    )
    week = ((values["taken_at"] - np.datetime64(start)).dt.days // 7).to_numpy()
    first = rows["feature"].iloc[0]
    for number in range(WEEKS):
        text = rows[week == number].to_csv(index=False, lineterminator="\n")
        if number == 3:
            text += f"{first},{_at(start, 27)},no reading,0,90001,mm\n{first},{_at(start, 27)},,0,90002,mm\n"
        if number == 5:
            text += f"{first},{_at(start, 41)},12.01\n"
        if number == 7:
            text += f"{first},2119-01-01T08:00:00,12.00,0,90003,mm\nH99 trial feature,{_at(start, 55)},3.2,0,90004,mm\n"
        (folder / f"week-{number + 1:02d}.csv").write_text(text, encoding="utf-8", newline="")
    copied = (folder / "week-08.csv").read_text(encoding="utf-8")
    (folder / "week-08-sent-again.csv").write_text(copied, encoding="utf-8", newline="")
    mended = rows[(rows["feature"] == first) & (week == 9)].head(3).copy()
    mended["result"] = [f"{float(value) + 0.001:.3f}" for value in mended["result"]]
    (folder / "week-14-corrections.csv").write_text(
        mended.to_csv(index=False, lineterminator="\n"), encoding="utf-8", newline=""
    )


def _at(start: datetime, day: int) -> str:
    return f"{start + timedelta(days=day, hours=9):%Y-%m-%dT%H:%M:%S}"


def _write_mill(folder: Path, values: pd.DataFrame, start: datetime) -> None:
    """One packed file a month: semicolons, decimal comma, code page 1252, day first; some readings are missing."""
    rows = pd.DataFrame(
        {
            "name": values["characteristic"],
            "taken": values["taken_at"].dt.strftime("%d.%m.%Y %H:%M:%S"),
            "reading": _text(values, ","),
            "shot": values["subgroup"],
            "cavity": values["stream"],
            "remark": "",
        }
    )
    rows.loc[rows.index[::997], "reading"] = ""
    rows.loc[rows.index[::1499], "remark"] = "Prüfer 2"
    month = ((values["taken_at"] - np.datetime64(start)).dt.days // 31).to_numpy()
    for number in np.unique(month):
        text = rows[month == number].to_csv(index=False, sep=";", lineterminator="\r\n")
        with gzip.GzipFile(folder / f"moulding-{number + 1}.csv.gz", "wb", mtime=0) as file:
            file.write(text.encode("cp1252"))


def _write_quarry(folder: Path, values: pd.DataFrame) -> None:
    """Fillers as a wide file (one column a characteristic), the laboratory as Parquet."""
    filling = values[values["characteristic"].str.contains("fill mass")]
    wide = filling.pivot_table(index=["taken_at", "subgroup"], columns="characteristic", values="value").reset_index()
    wide = wide.rename(columns={"taken_at": "time", "subgroup": "draw"})
    wide["time"] = wide["time"].dt.strftime("%Y-%m-%d %H:%M:%S")
    (folder / "filler.csv").write_text(
        wide.to_csv(index=False, lineterminator="\n", float_format="%.2f"), encoding="utf-8", newline=""
    )
    rest = values.drop(filling.index)
    rest[["characteristic", "taken_at", "value", "subgroup", "stream"]].astype({"subgroup": str}).to_parquet(
        folder / "laboratory.parquet", index=False
    )


def _write_registry(path: Path, processes: list[Process], start: datetime) -> None:
    rows = []
    for process in processes:
        row: dict[str, Any] = dict.fromkeys(COLUMNS, "")
        row.update(process.registered)
        row.update(
            characteristic=process.name, site=process.site, unit=process.unit, resolution=_plain(process.resolution)
        )
        if process.scenario == "new limits":
            earlier = dict(row)
            earlier.update(lsl=_plain(float(row["lsl"]) - process.sigma), usl=_plain(float(row["usl"]) + process.sigma))
            rows.append(earlier)
            row["valid_from"] = f"{start + timedelta(days=process.change_day):%Y-%m-%d}"
        rows.append(row)
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, COLUMNS, lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def _plain(number: float) -> str:
    return f"{number:.10g}"


def _write_changes(path: Path, processes: list[Process], start: datetime) -> None:
    logged = [process for process in processes if process.scenario == "re-centred"]
    lines = ["characteristic,changed_at,kind,note"]
    for process in logged:
        lines.append(
            f"{process.name},{start + timedelta(days=process.change_day):%Y-%m-%dT%H:%M},re-centred,offset corrected"
        )
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
