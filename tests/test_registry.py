"""The registry: read from three kinds of file, checked as a whole, as of any moment."""

from __future__ import annotations

from datetime import UTC, datetime

import pandas as pd
import pytest

from portfolio import registry
from portfolio.errors import RegistryError
from portfolio.plan import Plan
from portfolio.registry import Registry

TARGETS = {"default": 1.33, "critical": 1.67}


def read(folder, text: str, name: str = "registry.csv") -> Registry:
    (folder / name).write_bytes(text.encode() if isinstance(text, str) else text)
    return registry.read(folder / name, Plan(path=folder / "plan.toml"))


@pytest.mark.parametrize(
    ("text", "row", "what", "severity"),
    [
        ("characteristic,lsl\n,1\n", "row 2, characteristic", "the name is missing", "error"),
        ("characteristic,lsl\nA,1\nA,2\n", "row 3, characteristic", "stands twice", "error"),
        ("characteristic,lsl,usl\nA,2,1\n", "row 2, lsl", "Swap or correct", "error"),
        ("characteristic,lsl,usl\nA,,\n", "row 2, lsl", "no specification limit", "warning"),
        ("characteristic,lsl\nA,one\n", "row 2, lsl", "'one' is not a number", "error"),
        ("characteristic,lsl,valid_from\nA,1,soon\n", "row 2, valid_from", "YYYY-MM-DD", "error"),
        ("characteristic,lsl,class\nA,1,crucial\n", "row 2, class", "unknown class", "error"),
        ("characteristic,lsl,target_cpk\nA,1,0.8\n", "row 2, target_cpk", "below 1", "error"),
        ("characteristic,lsl,usl,aim\nA,1,2,3\n", "row 2, aim", "outside the limits", "error"),
        ("characteristic,usl,lower_bound\nA,1,2\n", "row 2, lower_bound", "natural bound", "error"),
        ("characteristic,lsl,adjustable\nA,1,maybe\n", "row 2, adjustable", "Use yes, no, unknown", "error"),
        ("characteristic,lsl,adjustable\nA,1,no\n", "row 2, why_not_adjustable", "no reason", "warning"),
        ("characteristic,lsl,expected\nA,1,magic\n", "row 2, expected", "autocorrelation, wear", "error"),
        ("characteristic,lsl,shape\nA,1,round\n", "row 2, shape", "lognormal", "error"),
        ("characteristic,lsl,subgroup_size\nA,1,0\n", "row 2, subgroup_size", "at least one", "error"),
        ("characteristic,lsl,gauge_sd\nA,1,-1\n", "row 2, gauge_sd", "negative", "error"),
        ("characteristic,lsl,unit,family\nA,1,mm,f\nB,1,in,f\n", "row 2, unit", "different units (in, mm)", "error"),
        ("characteristic,lsll\nA,1\n", "registry.csv", "Did you mean 'lsl'?", "error"),
        ("name,lsl\nA,1\n", "registry.csv", "no column 'characteristic'", "error"),
    ],
)  # fmt: skip
def test_each_mistake_has_row_field_and_remedy(tmp_path, text, row, what, severity):
    found = read(tmp_path, text).problems
    assert any(row in str(p) and what in str(p) and p.severity == severity for p in found), [str(p) for p in found]


def test_all_errors_are_raised_together(tmp_path):
    (tmp_path / "registry.csv").write_text("characteristic,lsl,usl,class\nA,2,1,x\nA,2,1,x\n")
    with pytest.raises(RegistryError) as told:
        registry.read_checked(tmp_path / "registry.csv", Plan(path=tmp_path / "plan.toml"))
    assert len(told.value.problems) == 5 and told.value.exit_code == 2


def test_the_same_registry_from_csv_semicolons_parquet_and_xlsx(tmp_path):
    rows = pd.DataFrame(
        {"characteristic": ["A", "Größe"], "lsl": [1.5, 2.25], "usl": [2.0, 3.0], "annual_volume": [1000, None]}
    )
    rows.to_csv(tmp_path / "a.csv", index=False)
    rows.to_csv(tmp_path / "b.csv", index=False, sep=";", decimal=",")
    rows.to_parquet(tmp_path / "c.parquet")
    rows.to_excel(tmp_path / "d.xlsx", index=False)
    plan = Plan(path=tmp_path / "plan.toml")
    digests = {
        registry.read_checked(tmp_path / name, plan).sha256() for name in ("a.csv", "b.csv", "c.parquet", "d.xlsx")
    }
    assert len(digests) == 1


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("r.parquet", b"nothing"),
        ("r.xlsx", b"nothing"),
        ("r.csv", "Größe".encode("latin-1")),
        ("r.csv", b""),
        ("r.doc", b"x"),
    ],
)
def test_a_file_that_is_no_table_is_told(tmp_path, name, content):
    with pytest.raises(RegistryError, match=name):
        read(tmp_path, content, name)


def test_limits_are_those_in_force_at_the_moment(tmp_path):
    text = "characteristic,lsl,usl,valid_from\nA,1,2,\nA,1,3,2026-02-01\nA,1,4,2026-03-01\nB,5,6,2026-02-15\n"
    known = read(tmp_path, text)
    assert known.errors == []

    def at(day: str) -> pd.DataFrame:
        return known.as_of(datetime.fromisoformat(day).replace(tzinfo=UTC)).set_index("characteristic")

    assert at("2026-01-15")["usl"].to_dict() == {"A": 2.0}
    assert at("2026-02-20")["usl"].to_dict() == {"A": 3.0, "B": 6.0}
    assert at("2026-02-20").loc["A", "limits_since"] == pd.Timestamp("2026-02-01")
    assert pd.isna(at("2026-02-20").loc["B", "limits_since"])  # its first limits: no new stretch
    with pytest.raises(ValueError, match="zone"):
        known.as_of(datetime(2026, 1, 1))


def test_targets_come_from_the_row_the_class_or_the_default(tmp_path):
    known = read(tmp_path, "characteristic,lsl,class,target_cpk\nA,1,,\nB,1,critical,\nC,1,critical,2\n")
    assert known.rows["target_cpk"].tolist() == [1.33, 1.67, 2.0]


def test_the_stored_text_is_independent_of_the_order_of_columns_and_reads_back(tmp_path):
    one = read(tmp_path, "characteristic,lsl,usl,owner\nB,1,2,x\nA,1,3,\n")
    two = read(tmp_path, "usl,characteristic,owner,lsl\n3,A,,1\n2,B,x,1\n")
    assert one.sha256() == two.sha256()
    assert Registry.from_json(one.to_json()).to_json() == one.to_json()


def test_blank_lines_and_spaces_do_not_matter(tmp_path):
    known = read(tmp_path, "characteristic , lsl\n  A , 1\n,\n")
    assert known.errors == [] and known.rows["characteristic"].tolist() == ["A"]
