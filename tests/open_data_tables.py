"""Makes fixtures/open_data/nist/measurements.csv and the registries of the open data from the files as published.

Run: python tests/open_data_tables.py (the result is committed; a test compares it with what this makes).
"""

from __future__ import annotations

import io
from pathlib import Path

import numpy as np
import pandas as pd

FIXTURES = Path(__file__).parents[1] / "fixtures"
DATA = FIXTURES / "datasets"
RUNS = ("00", "04", "06")
START = pd.Timestamp("2026-01-05 06:00")


def numbers(name: str) -> np.ndarray:
    """The table of a .DAT file below its ruler line."""
    text = (DATA / "nist" / name).read_text(encoding="ascii")
    lines = text.splitlines()
    ruler = next(i for i, line in enumerate(lines) if line.strip().startswith("-----"))
    return np.loadtxt(io.StringIO("\n".join(line for line in lines[ruler + 1 :] if line.strip())))


def nist_measurements() -> pd.DataFrame:
    """Long rows in the published order, ten minutes apart; subgroup and stream where the design has them."""
    litho, furnace, gear = numbers("LITHOGRA.DAT"), numbers("FURNACE.DAT"), numbers("GEAR.DAT")
    ceramic = numbers("CERAMIC.DAT")
    ceramic = ceramic[np.argsort(ceramic[:, 6])]
    parts = [
        ("lithography line width", litho[:, 3], litho[:, 0], litho[:, 2]),
        ("furnace oxide thickness", furnace[:, 3], furnace[:, 0], furnace[:, 1]),
        ("zarr calibration factor", numbers("ZARR13.DAT"), None, None),
        ("flicker noise", numbers("FLICKER.DAT"), None, None),
        ("mavro transmittance", numbers("MAVRO.DAT"), None, None),
        ("gear diameter", gear[:, 0], gear[:, 1], None),
        ("ceramic strength", ceramic[:, 5], None, (ceramic[:, 4] + 3) / 2),
    ]
    frames = []
    for name, value, subgroup, stream in parts:
        n = len(value)
        frames.append(
            pd.DataFrame(
                {
                    "characteristic": name,
                    "taken_at": (START + pd.to_timedelta(np.arange(n) * 10, unit="min")).strftime("%Y-%m-%dT%H:%M:%S"),
                    "value": [f"{v:.10g}" for v in value],
                    "subgroup": "" if subgroup is None else subgroup.astype(int),
                    "stream": "" if stream is None else [f"{s:.0f}" for s in stream],
                }
            )
        )
    return pd.concat(frames, ignore_index=True)


def nist_registry() -> pd.DataFrame:
    values = nist_measurements().assign(value=lambda f: f["value"].astype(float)).groupby("characteristic")["value"]
    spread = 5 * values.std()
    rows = pd.DataFrame({"lsl": values.mean() - spread, "usl": values.mean() + spread}).reset_index()
    rows.loc[rows["characteristic"] == "furnace oxide thickness", ["lsl", "usl"]] = [460.0, 660.0]
    return rows.assign(part="open data, invented limits").round(6)


def eastman_registry() -> pd.DataFrame:
    normal = pd.read_csv(DATA / "tennessee_eastman" / "run00.csv.gz").drop(columns="taken_at")
    frames = [
        pd.DataFrame(
            {
                "characteristic": [f"run{run} {name}" for name in normal.columns],
                "part": "open data, invented limits",
                "lsl": (normal.mean() - 5 * normal.std()).map("{:.5g}".format).to_numpy(),
                "usl": (normal.mean() + 5 * normal.std()).map("{:.5g}".format).to_numpy(),
                "subgroup_minutes": 60,
            }
        )
        for run in RUNS
    ]
    return pd.concat(frames, ignore_index=True)


def main() -> None:
    folder = FIXTURES / "open_data"
    nist_measurements().to_csv(folder / "nist" / "measurements.csv", index=False, lineterminator="\n")
    nist_registry().to_csv(folder / "nist" / "registry.csv", index=False, lineterminator="\n")
    eastman_registry().to_csv(folder / "tennessee_eastman" / "registry.csv", index=False, lineterminator="\n")


if __name__ == "__main__":
    main()
