"""Seeded inputs for speed and memory: a plant of 400 characteristics as files, and millions of rows in a store."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

from portfolio.store import Store

CHARACTERISTICS, SUBGROUPS, SIZE, FILES = 400, 140, 5, 13
START = np.datetime64("2026-03-30T00:00:00")
WEEKS = 13


def plant(folder: Path, seed: int = 7) -> Path:
    """Plan, registry and 13 weekly CSV files: 400 characteristics x 140 subgroups of 5 = 280,000 measurements."""
    rng = np.random.default_rng(seed)
    names = [f"K{i:03d}" for i in range(CHARACTERISTICS)]
    offset = rng.choice([0.0, 0.0, 0.0, 1.5, 2.5], CHARACTERISTICS)
    step = rng.choice([0.0, 0.0, 0.0, 0.0, 1.5], CHARACTERISTICS)
    cube = 10 + 0.1 * (rng.standard_normal((SUBGROUPS, CHARACTERISTICS, SIZE)) + offset[None, :, None])
    cube += 0.1 * step[None, :, None] * (np.arange(SUBGROUPS) > SUBGROUPS // 2)[:, None, None]
    taken = START + (np.arange(SUBGROUPS) * (WEEKS * 7 * 86_400 // SUBGROUPS)).astype("timedelta64[s]")
    shape = (SUBGROUPS, CHARACTERISTICS, SIZE)
    rows = pd.DataFrame(
        {
            "characteristic": np.broadcast_to(np.array(names)[None, :, None], shape).ravel(),
            "taken_at": np.broadcast_to(taken[:, None, None], shape).ravel(),
            "value": cube.round(4).ravel(),
            "subgroup": np.broadcast_to(np.arange(SUBGROUPS)[:, None, None], shape).ravel(),
        }
    )
    (folder / "incoming").mkdir(parents=True, exist_ok=True)
    for number, part in enumerate(np.array_split(np.arange(len(rows)), FILES)):
        rows.iloc[part].to_csv(folder / "incoming" / f"week-{number + 1:02d}.csv", index=False)
    pd.DataFrame({"characteristic": names, "lsl": 9.35, "usl": 10.65, "unit": "mm"}).to_csv(
        folder / "registry.csv", index=False
    )
    (folder / "plan.toml").write_text(
        '[portfolio]\ntimezone = "UTC"\n\n[[source]]\nname = "plant"\npath = "incoming/*.csv"\n', encoding="utf-8"
    )
    return folder / "plan.toml"


def big_store(folder: Path, rows: int, characteristics: int = 500) -> Path:
    """A plan whose store holds `rows` measurements already, inserted sorted as the intake does; subgroups of 5."""
    folder.mkdir(parents=True, exist_ok=True)
    each = rows // characteristics
    names = [f"B{i:04d}" for i in range(characteristics)]
    pd.DataFrame({"characteristic": names, "lsl": 9.35, "usl": 10.65, "subgroup_size": 5}).to_csv(
        folder / "registry.csv", index=False
    )
    (folder / "plan.toml").write_text('[portfolio]\ntimezone = "UTC"\n', encoding="utf-8")
    with Store.open(folder / "portfolio.duckdb", memory="4GB") as store:
        run = store.connection.execute
        run("select setseed(0.5)")
        run(f"insert into characteristics select i, printf('B%04d', i) from range({characteristics}) as r(i)")
        micros = WEEKS * 7 * 86_400_000_000 // each
        block = max(1, 5_000_000 // each)
        for first in range(0, characteristics, block):
            last = min(first + block, characteristics)
            with store.transaction():
                run(
                    f"""insert into measurements (characteristic_id, taken_at, unit_no, value, load_id)
                    select c.i, timestamp '2026-03-30' + to_microseconds(t.j * {micros}), t.j,
                        round(10 + 0.1 * sqrt(-2 * ln(1 - random())) * cos(6.283185307 * random()), 4), 1
                    from range({first}, {last}) as c(i), range({each}) as t(j) order by 1, 2"""
                )
        store.checkpoint()
    return folder / "plan.toml"
