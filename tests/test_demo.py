"""The invented scenario: reproducible, and judged as what it truly is."""

from __future__ import annotations

import hashlib
from datetime import date
from pathlib import Path

import pandas as pd
import pytest

from portfolio import demo

GOLDEN = Path(__file__).parents[1] / "fixtures" / "demo" / "golden.csv"
UNSTABLE = ["step", "several steps", "drift", "wandering", "cycle", "alternation", "spread", "isolated extremes"]


def digests(folder: Path) -> dict[str, str]:
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def test_the_same_ending_writes_the_same_bytes(tmp_path):
    for name in ("one", "two"):
        demo.write(tmp_path / name, ending=date(2026, 6, 28))
    assert digests(tmp_path / "one") == digests(tmp_path / "two")


def test_another_ending_moves_time_stamps_by_whole_weeks_and_no_value(tmp_path):
    demo.write(tmp_path / "one", ending=date(2026, 6, 28))
    demo.write(tmp_path / "two", ending=date(2026, 7, 15))  # a Wednesday: back to Sunday the 12th
    old = pd.read_csv(tmp_path / "one/incoming/harbour/week-02.csv")
    new = pd.read_csv(tmp_path / "two/incoming/harbour/week-02.csv")
    assert old.drop(columns="time").equals(new.drop(columns="time"))
    moved = pd.to_datetime(new["time"]) - pd.to_datetime(old["time"])
    assert set(moved) == {pd.Timedelta(weeks=2)}


def test_the_demo_brings_what_a_plant_brings(demo_run):
    reports = {source.name: source for source in demo_run.report.pull.sources}
    harbour = reports["harbour gauge room"]
    assert (harbour.corrected, harbour.rejected, harbour.unregistered, harbour.empty) == (3, 3, 1, 1)
    assert harbour.known > 0
    assert reports["mill moulding"].empty > 0
    assert not demo_run.report.needs_a_person
    for source in reports.values():
        assert source.read == source.new + source.known + source.corrected + source.rejected + source.empty


@pytest.fixture(scope="module")
def judged(demo_run) -> pd.DataFrame:
    return demo_run.truth.merge(demo_run.results, on="characteristic", suffixes=("_true", ""))


def test_every_registered_characteristic_has_one_row(demo_run, judged):
    assert len(judged) == len(demo_run.results) == demo_run.truth["characteristic"].nunique()
    assert sum(demo_run.report.judge.counts.values()) == len(judged)


@pytest.mark.parametrize("kind", UNSTABLE)
def test_every_kind_of_instability_is_seen_and_named(judged, kind):
    some = judged[judged["scenario"] == kind]
    assert (some["stability"] == "unstable").all()
    accepted = {kind, "several steps"} if kind in ("step", "wandering") else {kind}
    assert some["instability"].isin(accepted).mean() >= 0.75


def test_a_step_is_dated_within_two_days(judged):
    some = judged[(judged["scenario"] == "step") & (judged["instability"] == "step")]
    assert len(some) >= 4
    away = (some["since"] - pd.to_datetime(some["changed"])).abs()
    assert (away <= pd.Timedelta(days=2, hours=12)).all()


def test_the_day_rhythm_has_its_period(judged):
    periods = judged.loc[judged["scenario"] == "cycle", "period_hours"]
    assert periods.between(23.0, 25.0).all()


def test_clear_cases_are_in_their_true_cell(judged):
    stable = judged[~judged["scenario"].isin(UNSTABLE)]
    clear = {
        "capable": "stable, capable", "reaches": "stable, not capable", "too wide": "stable, not capable",
        "too wide, centred": "stable, not capable", "new limits": "stable, capable", "re-centred": "stable, capable",
    }  # fmt: skip
    some = stable[stable["scenario"].isin(clear)]
    right = some["cell"] == some["scenario"].map(clear)
    assert right.mean() >= 0.97


def test_nobody_is_sent_to_centre_what_centering_cannot_help(judged):
    listed = judged[judged["rank"].notna()]
    assert set(listed["scenario"]) <= {"reaches", "borderline", "layers"}
    missed = judged[(judged["scenario"] == "reaches") & judged["rank"].isna()]
    assert missed.empty


@pytest.mark.parametrize(
    ("scenario", "note"),
    [("too few", "too_few"), ("no limits", "no_limits"), ("silent", "silent"), ("no data", "no_data"),
     ("unit mix-up", "suspect_limits"), ("flatness", "no_shape")],
)  # fmt: skip
def test_what_cannot_be_judged_says_why(judged, scenario, note):
    some = judged[judged["scenario"] == scenario]
    assert (some["cell"] == "not judged").all()
    assert (some["capability_note"] == note).mean() >= 0.9


@pytest.mark.parametrize(
    ("scenario", "reason"),
    [("give-away", "economic_aim"), ("not adjustable", "not_adjustable"), ("cavities", "streams_differ"),
     ("strength", "one_sided")],
)  # fmt: skip
def test_a_move_that_does_not_apply_says_why(judged, scenario, reason):
    some = judged[judged["scenario"] == scenario]
    assert (some["centering"] == "does not apply").all()
    assert (some["centering_reason"] == reason).all()


def test_batches_are_predictable_with_two_layers(judged):
    some = judged[judged["scenario"] == "layers"]
    assert (some["stability"] == "stable").all()
    assert (some["stability_note"] == "layers").all()


def test_an_expected_lean_of_neighbours_is_not_called_unstable(judged):
    assert (judged.loc[judged["scenario"] == "leaning", "stability"] == "stable").all()


def test_true_means_and_sigmas_lie_where_the_judgement_says(judged):
    """Known truth: means within 4 standard errors, sigmas within 4 standard errors, for the calm normal processes."""
    some = judged[
        judged["scenario"].isin(["capable", "reaches", "too wide", "borderline"]) & judged["sigma_total"].notna()
    ]
    away = (some["mean"] - some["mean_true"]).abs() / (some["sigma"] / some["n_effective"] ** 0.5)
    assert (away < 4).all()
    ratio = some["sigma_total"] / some["sigma"]
    assert (ratio.sub(1).abs() < 4 / (2 * some["df_effective"]) ** 0.5 + 0.03).all()  # 0.03: recording step


def test_the_judgement_of_the_demo_is_the_golden_one(judged):
    """Golden: made by this program; a difference is a change of judgement and wants a line in the changelog."""
    golden = pd.read_csv(GOLDEN).set_index("characteristic")
    now = judged.set_index("characteristic").loc[golden.index]
    words = ["cell", "centering", "centering_reason", "route", "instability", "capability_note"]
    different = {
        name: now.index[now[name].fillna("") != golden[name].fillna("")].tolist()
        for name in words
        if (now[name].fillna("") != golden[name].fillna("")).any()
    }
    assert different == {}
    for name in ("index", "index_low", "index_high", "chance_centered", "cpk_centered"):
        pd.testing.assert_series_equal(
            now[name].astype(float), golden[name].astype(float), rtol=1e-6, atol=1e-6, check_names=False
        )
    assert now["rank"].astype("Int64").tolist() == golden["rank"].astype("Int64").tolist()
