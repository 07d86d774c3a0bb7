"""The same judgement as CSV, Parquet and JSON."""

from __future__ import annotations

import io
import json

import pandas as pd
import pyarrow.parquet as pq
import pytest

from portfolio import export, inquiry
from portfolio.result import CONTRACT_COLUMNS


@pytest.fixture
def frame() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "characteristic": ["=cmd()", "plain", "+1"],
            "index": [1.25, float("nan"), -0.5],
            "rank": pd.array([1, None, 2], dtype="Int64"),
            "since": pd.to_datetime(["2026-01-05T06:00:00", None, None]),
            "reasons": [["One.", "Two."], [], ["Three."]],
        }
    )


def test_csv_defuses_formulas_and_keeps_numbers(frame):
    text = export.csv_bytes(frame).decode("utf-8-sig")
    back = pd.read_csv(io.StringIO(text))
    assert back["characteristic"].tolist() == ["'=cmd()", "plain", "'+1"]
    assert back["index"].tolist()[0::2] == [1.25, -0.5]
    assert back["since"][0] == "2026-01-05T06:00:00Z"
    assert back["reasons"][0] == "One.; Two."


def test_parquet_keeps_names_and_lists_as_they_are(frame):
    table = pq.read_table(io.BytesIO(export.parquet_bytes(frame)))
    assert table["characteristic"].to_pylist() == frame["characteristic"].tolist()
    assert table["reasons"].to_pylist() == frame["reasons"].tolist()


def test_json_has_null_where_nothing_applies(frame):
    rows = json.loads(export.json_bytes(frame))
    assert rows[1] == {"characteristic": "plain", "index": None, "rank": None, "since": None, "reasons": []}


def test_an_export_of_the_demo_holds_the_contract_in_three_formats(demo_run, tmp_path):
    written = {path.name for path in inquiry.export(demo_run.plan, tmp_path)}
    assert written == {
        f"{name}.{ending}" for name in ("judgement", "ranking", "history") for ending in ("csv", "parquet", "json")
    }
    back = pd.read_csv(tmp_path / "judgement.csv")
    assert tuple(back.columns[: len(CONTRACT_COLUMNS)]) == CONTRACT_COLUMNS
    assert len(back) == len(demo_run.results)
    assert back["reasons"].str.len().gt(0).all()
