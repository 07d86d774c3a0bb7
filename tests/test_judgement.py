"""The judgement as a pure function: same numbers from the command and from Python, whatever the order or the cutting."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import portfolio
from portfolio import engine
from portfolio.errors import RegistryError
from portfolio.store import Store

NUMBERS = ["mean", "sigma_total", "sigma_within", "index", "index_low", "index_high", "chance_now", "ppm_now", "stability_p",
           "stability_q", "cpk_centered", "chance_centered", "move", "move_least", "score"]  # fmt: skip
WORDS = ["stability", "capability", "cell", "centering", "centering_reason", "route", "instability", "capability_note"]


def some_measurements(seed: int = 1, count: int = 6, m: int = 40, n: int = 5) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    taken = pd.Timestamp("2026-03-02") + pd.to_timedelta(np.arange(m * n) * 10, unit="min")
    frames = []
    for i in range(count):
        value = 10 + i + rng.standard_normal(m * n) * 0.1
        if i % 3 == 1:
            value[m * n // 2 :] += 0.4
        if i % 3 == 2:
            value += 0.25
        frames.append(
            pd.DataFrame(
                {"characteristic": f"C{i}", "taken_at": taken, "value": value, "subgroup": np.arange(m * n) // n}
            )
        )
    return pd.concat(frames, ignore_index=True)


def limits(count: int = 6, half: float = 0.55) -> pd.DataFrame:
    return pd.DataFrame(
        {"characteristic": [f"C{i}" for i in range(count)], "lsl": [10 + i - half for i in range(count)],
         "usl": [10 + i + half for i in range(count)]}
    )  # fmt: skip


def same(one: pd.DataFrame, two: pd.DataFrame) -> None:
    one, two = one.set_index("characteristic"), two.set_index("characteristic").loc[one["characteristic"]]
    for name in WORDS:
        assert one[name].fillna("").tolist() == two[name].fillna("").tolist(), name
    for name in NUMBERS:
        np.testing.assert_allclose(
            one[name].astype(float), two[name].astype(float), rtol=1e-9, atol=1e-12, err_msg=name
        )


def test_python_and_the_command_give_the_same_numbers(demo_run):
    with Store.open(demo_run.plan.store_path, read_only=True) as store:
        measurements = (
            store.connection.sql(
                """select name as characteristic, taken_at, value, s.label as subgroup, m.label as stream
            from measurements join characteristics using (characteristic_id)
            left join labels as s on s.label_id = subgroup_no left join labels as m on m.label_id = stream_no"""
            )
            .to_arrow_table()
            .to_pandas()
        )
    registered = pd.read_csv(demo_run.plan.registry_path)
    unlogged = ~registered["characteristic"].isin(
        demo_run.truth.loc[demo_run.truth["scenario"] == "re-centred", "characteristic"]
    )
    stored = demo_run.results
    result = portfolio.judge(measurements, registered.assign(**{"class": registered["class"].where(registered["class"] != "critical"),
                             "target_cpk": np.where(registered["class"] == "critical", 1.67, np.nan)}),
                             window_weeks=13, as_of=demo_run.written.end)  # fmt: skip
    names = registered.loc[unlogged, "characteristic"].unique()
    one = stored[stored["characteristic"].isin(names)].sort_values("characteristic").reset_index(drop=True)
    two = result[result["characteristic"].isin(names)].sort_values("characteristic").reset_index(drop=True)
    for name in ("mean", "sigma_total", "index", "index_low", "chance_centered", "stability_p"):
        np.testing.assert_allclose(one[name].astype(float), two[name].astype(float), rtol=1e-9, err_msg=name)


def test_the_order_of_rows_and_of_the_registry_changes_nothing():
    measurements, registry = some_measurements(), limits()
    shuffled = measurements.sample(frac=1, random_state=3)
    same(portfolio.judge(measurements, registry), portfolio.judge(shuffled, registry.iloc[::-1]))


def test_the_cutting_into_shards_changes_nothing(monkeypatch):
    measurements, registry = some_measurements(), limits()
    whole = portfolio.judge(measurements, registry)
    monkeypatch.setattr(engine, "SHARD_VALUES", 250)
    same(whole, portfolio.judge(measurements, registry))


@settings(max_examples=15, deadline=None)
@given(shift=st.floats(-1e3, 1e3), scale=st.floats(1e-3, 1e3))
def test_shifting_and_scaling_data_with_their_limits_changes_no_index(shift, scale):
    measurements, registry = some_measurements(count=3), limits(count=3)
    one = portfolio.judge(measurements, registry)
    two = portfolio.judge(
        measurements.assign(value=measurements["value"] * scale + shift),
        registry.assign(lsl=registry["lsl"] * scale + shift, usl=registry["usl"] * scale + shift),
    )
    assert one["cell"].tolist() == two["cell"].tolist()
    for name in ("index", "index_low", "index_high", "cpk_centered", "chance_centered", "stability_p"):
        np.testing.assert_allclose(one[name].astype(float), two[name].astype(float), rtol=1e-5, err_msg=name)


@settings(max_examples=15, deadline=None)
@given(wider=st.floats(0.0, 2.0))
def test_wider_limits_never_lower_an_index(wider):
    measurements = some_measurements(count=3)
    one, two = (portfolio.judge(measurements, limits(count=3, half=half)) for half in (0.55, 0.55 + wider))
    assert (two["index"] >= one["index"] - 1e-12).all()


def test_limits_play_no_part_in_stability():
    measurements = some_measurements()
    one, two = (portfolio.judge(measurements, limits(half=half)) for half in (0.2, 5.0))
    pd.testing.assert_series_equal(one["stability_p"], two["stability_p"])
    assert one["stability"].tolist() == two["stability"].tolist()


def test_an_unstable_process_has_ppk_and_no_cpk_and_is_never_listed():
    result = portfolio.judge(some_measurements(), limits()).set_index("characteristic")
    unstable = result[result["stability"] == "unstable"]
    assert set(unstable.index) == {"C1", "C4"}
    assert (unstable["index_name"] == "Ppk").all()
    assert unstable[["cpk", "cp", "rank", "move", "chance_centered"]].isna().all(axis=None)
    assert (unstable["centering_reason"] == "unstable").all()


def test_every_registered_characteristic_has_a_row_even_without_a_value():
    registry = pd.concat([limits(), pd.DataFrame({"characteristic": ["nothing"], "lsl": [0.0], "usl": [1.0]})])
    row = portfolio.judge(some_measurements(), registry).set_index("characteristic").loc["nothing"]
    assert (row["cell"], row["capability_note"], row["route"]) == ("not judged", "no_data", "collect more")
    assert row["reasons"] == ["Not judged: no value in the judged period."]


def test_no_measurement_at_all_still_gives_a_row_for_each():
    empty = some_measurements().iloc[:0]
    result = portfolio.judge(empty, limits())
    assert result["cell"].tolist() == ["not judged"] * 6


def test_new_limits_begin_a_new_stretch():
    measurements = some_measurements(count=1)
    registry = pd.concat([limits(count=1), limits(count=1, half=0.8).assign(valid_from="2026-03-02T20:00")])
    row = portfolio.judge(measurements, registry).iloc[0]
    assert row["first"] >= pd.Timestamp("2026-03-02T20:00")
    assert row["measurements"] < row["window_measurements"] == 200
    assert row["usl"] == pytest.approx(10.8)


def test_a_contradicting_registry_lists_every_problem():
    bad = limits().assign(lsl=lambda f: f["usl"] + 1, adjustable="perhaps")
    with pytest.raises(RegistryError) as told:
        portfolio.judge(some_measurements(), bad)
    assert len(told.value.problems) == 12


def test_missing_columns_are_named():
    with pytest.raises(ValueError, match="taken_at"):
        portfolio.judge(some_measurements().drop(columns="taken_at"), limits())
