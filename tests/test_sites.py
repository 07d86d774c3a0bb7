"""Comparison of sites."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from statsmodels.stats.proportion import proportion_confint

from portfolio import sites


def results(**columns) -> pd.DataFrame:
    base = {"family": None, "feature": "bore", "unit": "mm", "index_name": "Cpk", "index": 1.5, "index_low": 1.4,
            "index_high": 1.6, "measurements": 100, "mean": 1.0, "sigma_total": 0.1}  # fmt: skip
    count = len(columns["site"])
    return pd.DataFrame({"characteristic": [f"c{i}" for i in range(count)], **base, **columns})


def test_counts_add_up_and_shares_carry_wilson_intervals():
    frame = results(
        site=["A"] * 10 + ["B"] * 4,
        cell=["stable, capable"] * 6 + ["stable, not capable"] * 2 + ["not judged"] * 2 + ["unstable, capable"] * 4,
    )
    rows = {row["site"]: row for row in sites.compare(frame)["rows"]}
    assert rows["A"]["judged"] == 8 and sum(rows["A"]["counts"].values()) == rows["A"]["characteristics"] == 10
    share, low, high = rows["A"]["shares"]["stable, capable"]
    assert share == pytest.approx(6 / 8)
    # Reference: statsmodels, method "wilson" (Wilson 1927).
    assert (low, high) == pytest.approx(proportion_confint(6, 8, 0.05, "wilson"))
    assert rows["A"]["shares"]["not judged"][0] == pytest.approx(0.2)


def test_a_site_where_nothing_was_judged_has_no_share():
    row = sites.compare(results(site=["A"], cell=["not judged"]))["rows"][0]
    assert np.isnan(row["shares"]["stable, capable"]).all()


def test_a_characteristic_without_a_site_is_counted():
    rows = sites.compare(results(site=[None, "A"], cell=["stable, capable"] * 2))["rows"]
    assert {row["site"] for row in rows} == {"A", sites.NO_SITE}


def test_families_need_two_sites_and_are_sorted_by_index_with_the_unjudged_last():
    frame = results(
        site=["A", "B", "C", "A"],
        cell=["stable, capable"] * 2 + ["not judged", "stable, capable"],
        family=["bore"] * 3 + ["alone"],
        index=[1.2, 1.8, np.nan, 2.0],
    )
    families = sites.compare(frame)["families"]
    assert [family["family"] for family in families] == ["bore"]
    assert [row["site"] for row in families[0]["rows"]] == ["B", "A", "C"]


def test_the_demo_compares_six_features_at_three_works(demo_run):
    compared = sites.compare(demo_run.results)
    assert [row["site"] for row in compared["rows"]] == ["Harbour", "Mill", "Quarry"]
    assert sum(row["characteristics"] for row in compared["rows"]) == len(demo_run.results)
    assert len(compared["families"]) == 6
    assert all(len(family["rows"]) == 3 for family in compared["families"])
