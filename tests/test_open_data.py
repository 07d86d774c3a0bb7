"""`portfolio run` on open data; the published facts about them must come out (fixtures/datasets/README.md)."""

from __future__ import annotations

import shutil
from datetime import UTC, datetime
from pathlib import Path

import pandas as pd
import pytest

import portfolio
from portfolio import job, registry
from portfolio.face import Weekly
from portfolio.plan import Plan
from tests import open_data_tables

FIXTURES = Path(__file__).parents[1] / "fixtures"
ROW_161 = pd.Timestamp("2026-03-02 08:00")
THREE_ROWS = pd.Timedelta(minutes=9)


def run(name: str, folder: Path, as_of: datetime) -> pd.DataFrame:
    shutil.copytree(FIXTURES / "open_data" / name, folder / "open_data" / name)
    shutil.copytree(FIXTURES / "datasets", folder / "datasets")
    plan = Plan.read(folder / "open_data" / name / "plan.toml")
    report = job.run(plan, registry.read_checked(plan.registry_path, plan), as_of=as_of)
    assert report.publish.index.is_file()
    assert not report.needs_a_person
    return Weekly(plan).judgement.set_index("characteristic")


@pytest.fixture(scope="module")
def eastman(tmp_path_factory) -> pd.DataFrame:
    return run("tennessee_eastman", tmp_path_factory.mktemp("eastman"), datetime(2026, 3, 4, tzinfo=UTC))


@pytest.fixture(scope="module")
def nist(tmp_path_factory) -> pd.DataFrame:
    return run("nist", tmp_path_factory.mktemp("nist"), datetime(2026, 1, 14, tzinfo=UTC))


def three_minutes(number: str) -> pd.DataFrame:
    """Every value by itself, as recorded every 3 minutes."""
    wide = pd.read_csv(FIXTURES / "datasets" / "tennessee_eastman" / f"run{number}.csv.gz")
    long = wide.melt(id_vars="taken_at", var_name="characteristic", value_name="value")
    known = pd.DataFrame({"characteristic": wide.columns[1:], "lsl": -1e9, "usl": 1e9})
    return portfolio.judge(long, known).set_index("characteristic")


def test_every_variable_of_every_run_has_a_row(eastman):
    assert len(eastman) == 3 * 52
    assert (eastman["window_measurements"] == 960).all()
    assert (eastman["subgroups"] == 48).all()


def test_the_normal_run_is_essentially_stable_in_hourly_subgroups(eastman):
    normal = eastman[eastman.index.str.startswith("run00")]
    assert (normal["stability"] == "unstable").sum() <= 5


@pytest.mark.parametrize(("number", "variable"), [("04", "XMV10"), ("06", "XMEAS01")])
def test_the_published_step_is_dated_at_row_161(number, variable):
    row = three_minutes(number).loc[variable]
    assert row["stability"] == "unstable"
    assert row["instability"] in ("step", "several steps")
    assert abs(row["since"] - ROW_161) <= THREE_ROWS


@pytest.mark.parametrize("name", ["run04 XMV10", "run06 XMEAS01", "run06 XMV03"])
def test_the_published_faults_are_seen_in_hourly_subgroups(eastman, name):
    assert eastman.loc[name, "stability"] == "unstable"
    # XMV03 is published to open fully, not to step at once: the controller takes it there over hours.
    if not name.endswith("XMV03") and eastman.loc[name, "instability"] in ("step", "several steps"):
        assert abs(eastman.loc[name, "since"] - ROW_161) <= pd.Timedelta(hours=1)


def test_neighbours_three_minutes_apart_lean_on_each_other_and_no_step_is_invented():
    """As in any continuous plant the variables are autocorrelated at 3 minutes; no level changes for good."""
    normal = three_minutes("00")
    assert (normal["serial"] > 0.2).sum() > 26
    assert not normal["instability"].isin(["step", "several steps", "drift"]).any()


def test_lithography_varies_between_cassettes_and_between_sites(nist):
    """The handbook's case study: cassettes differ (component 0.2645 of 0.48), and drift over the sequence."""
    row = nist.loc["lithography line width"]
    assert row["between_p"] < 0.01 and row["stream_p"] < 0.01
    assert row["streams"] == 5
    assert row["sigma_between"] ** 2 == pytest.approx(0.2645, rel=0.15)
    assert row["mean"] == pytest.approx(2.53228, abs=1e-5)


def test_furnace_runs_differ(nist):
    row = nist.loc["furnace oxide thickness"]
    assert row["measurements"] == 168 and row["streams"] == 4
    assert row["between_p"] < 0.01


def test_zarr_is_in_control(nist):
    assert nist.loc["zarr calibration factor", "stability"] == "stable"
    assert nist.loc["zarr calibration factor", "mean"] == pytest.approx(9.26146, abs=1e-5)  # handbook 1.4.2.8


def test_flicker_noise_wanders(nist):
    row = nist.loc["flicker noise"]
    assert (row["stability"], row["instability"]) == ("unstable", "wandering")


def test_mavro_is_strongly_autocorrelated(nist):
    row = nist.loc["mavro transmittance"]
    assert row["stability"] == "unstable"
    assert row["serial"] > 0.8  # of the normal scores; certified for the values themselves: 0.937989 (StRD Mavro)


def test_gear_batches_are_too_few_to_judge(nist):
    row = nist.loc["gear diameter"]
    assert row["subgroups"] == 10
    assert (row["stability"], row["capability_note"]) == ("not judged", "too_few")


def test_two_batches_of_a_designed_experiment_are_two_streams_not_told_apart(nist):
    """32 runs, four other factors varied on purpose: the spread they make hides the batches from 32 values."""
    row = nist.loc["ceramic strength"]
    assert (row["measurements"], row["streams"]) == (32, 2)
    assert row["stream_p"] > 0.01


def test_two_batches_of_480_specimens_are_told_apart_by_their_published_difference():
    """Handbook 1.4.2.10: 240 specimens each, means 688.9987 and 611.1559; the time order here is ours."""
    read = pd.read_csv(FIXTURES / "published" / "nist_ceramic.csv")
    pair = read.groupby("batch").cumcount()
    measurements = pd.DataFrame(
        {
            "characteristic": "ceramic strength",
            "taken_at": pd.Timestamp("2026-01-05") + pd.to_timedelta(pair * 10, unit="min"),
            "value": read["strength"],
            "subgroup": pair,
            "stream": read["batch"],
        }
    )
    known = pd.DataFrame({"characteristic": ["ceramic strength"], "lsl": [450.0], "usl": [850.0]})
    row = portfolio.judge(measurements, known).iloc[0]
    assert row["streams"] == 2
    assert row["stream_p"] < 1e-20
    assert row["streams_means_differ"]
    assert row["sigma_stream"] == pytest.approx((688.9987 - 611.1559) / 2, rel=0.01)


@pytest.mark.parametrize(
    ("committed", "made"),
    [
        ("nist/measurements.csv", open_data_tables.nist_measurements),
        ("nist/registry.csv", open_data_tables.nist_registry),
        ("tennessee_eastman/registry.csv", open_data_tables.eastman_registry),
    ],
)
def test_the_committed_tables_are_what_the_published_files_give(committed, made):
    text = made().to_csv(index=False, lineterminator="\n")
    assert (FIXTURES / "open_data" / committed).read_text(encoding="utf-8") == text


@pytest.mark.parametrize(
    ("name", "values", "mean"),
    [
        ("LITHOGRA.DAT", 450, 2.53228),  # handbook 6.6.1
        ("ZARR13.DAT", 195, 9.261460),  # handbook 1.4.2.8
        ("MAVRO.DAT", 50, 2.001856),  # StRD Mavro, certified mean 2.00185600000000
        ("GEAR.DAT", 100, 0.99764),  # handbook 1.3.5.4
    ],
)
def test_the_committed_files_are_the_published_ones(name, values, mean):
    table = open_data_tables.numbers(name)
    column = table if table.ndim == 1 else table[:, 3 if name == "LITHOGRA.DAT" else 0]
    assert len(column) == values
    assert column.mean() == pytest.approx(mean, abs=5e-6)
