"""Files into the store: nothing lost, nothing twice, nothing silently wrong (store study, table 1.3)."""

from __future__ import annotations

import gzip
from datetime import UTC, datetime
from pathlib import Path

import pandas as pd
import pytest

from portfolio import intake
from portfolio.plan import Limits, Plan, Portfolio, Source
from portfolio.store import Store

NOW = datetime(2026, 6, 1, tzinfo=UTC)
HEADER = "characteristic,taken_at,value\n"
GOOD = [f"A,2026-01-05T06:{minute:02d}:00,{10 + minute / 100:.2f}" for minute in range(40)]


class Plant:
    """A folder with files, pulled into a store of its own."""

    def __init__(self, folder: Path, zone: str = "UTC", rejected_share: float = 0.2, **source) -> None:
        self.folder = folder
        (folder / "in").mkdir(exist_ok=True)
        self.plan = Plan(
            portfolio=Portfolio(timezone=zone),
            source=[Source(name="s", **({"path": "in/*"} | source))],
            limits=Limits(rejected_share=rejected_share),
            path=folder / "plan.toml",
        )

    def file(self, name: str, content: str | bytes) -> Path:
        path = self.folder / "in" / name
        path.write_bytes(content.encode() if isinstance(content, str) else content)
        return path

    def pull(self, units: dict[str, str] | None = None) -> intake.SourceReport:
        with Store.open(self.plan.store_path) as store:
            return intake.pull(store, self.plan, registered=units or {"A": "", "B": ""}, now=NOW)[0]

    def rows(self) -> list[tuple]:
        with Store.open(self.plan.store_path, read_only=True) as store:
            return store.connection.execute(
                "select name, taken_at, value from measurements join characteristics using (characteristic_id) order by all"
            ).fetchall()

    def query(self, text: str) -> list[tuple]:
        with Store.open(self.plan.store_path, read_only=True) as store:
            return store.connection.execute(text).fetchall()

    def rejected(self) -> list[tuple]:
        return self.query("select record_no, column_name, reason from rejected order by record_no")


@pytest.fixture
def plant(tmp_path) -> Plant:
    return Plant(tmp_path)


def lines(*rows: str) -> str:
    return HEADER + "\n".join(rows) + "\n"


def test_a_second_pull_of_the_same_files_changes_nothing(plant):
    plant.file("a.csv", lines(*GOOD))
    first, before = plant.pull(), plant.rows()
    second = plant.pull()
    assert (first.new, first.read, second.status, second.items) == (40, 40, "nothing new", 0)
    assert plant.rows() == before


def test_the_same_content_under_another_name_has_no_effect(plant):
    plant.file("a.csv", lines(*GOOD))
    plant.pull()
    plant.file("b.csv", lines(*GOOD))
    again = plant.pull()
    assert (again.new, again.known, len(plant.rows())) == (0, 40, 40)
    assert "same content as in/a.csv" in again.messages[0]


def test_a_file_that_has_grown_brings_only_what_is_new(plant):
    plant.file("a.csv", lines(*GOOD[:30]))
    plant.pull()
    plant.file("a.csv", lines(*GOOD))
    again = plant.pull()
    assert (again.known, again.new, len(plant.rows())) == (30, 10, 40)


def test_a_corrected_value_replaces_the_old_one_and_is_logged(plant):
    plant.file("a.csv", lines(*GOOD))
    plant.pull()
    plant.file("b.csv", lines("A,2026-01-05T06:03:00,99.5"))
    report = plant.pull()
    assert (report.corrected, report.new) == (1, 0)
    assert ("A", datetime(2026, 1, 5, 6, 3), 99.5) in plant.rows() and len(plant.rows()) == 40
    assert plant.query("select old_value, new_value, old_load_id, load_id from corrections") == [(10.03, 99.5, 1, 2)]


def test_repeated_times_are_replicates_unless_a_key_says_otherwise(plant):
    plant.file("a.csv", lines("A,2026-01-05T06:00:00,1", "A,2026-01-05T06:00:00,1", "A,2026-01-05T06:00:00,2"))
    assert plant.pull().new == 3
    plant.file(
        "b.csv", "characteristic,taken_at,value,measurement_id\nB,2026-01-05T06:00:00,1,x\nB,2026-01-05T06:00:00,2,x\n"
    )
    report = plant.pull()
    assert (report.new, report.known) == (1, 1)
    assert ("B", datetime(2026, 1, 5, 6), 2.0) in plant.rows()  # the last of equal keys wins


def test_rejected_rows_point_at_their_line_with_column_and_reason(plant):
    rows = [*GOOD[:5], "A,2026-01-05T07:00:00,abc", "A,2026-01-05T07:01:00", GOOD[5], "A,2026-01-05T07:02:00,1,2,3",
            "A,never,1", ",2026-01-05T07:03:00,1", "A,2026-01-05T07:04:00,NaN", *GOOD[6:]]  # fmt: skip
    plant.file("a.csv", lines(*rows))
    report = plant.pull()
    assert (report.new, report.rejected, report.read) == (40, 6, 46)
    # The header is line 1.
    assert [(n, reason) for n, _, reason in plant.rejected()] == [
        (7, "not a number"), (8, "missing columns"), (10, "too many columns"), (11, "not a time"), (12, "empty name"),
        (13, "not finite"),
    ]  # fmt: skip
    raw = plant.query("select raw from rejected where record_no = 7")[0][0]
    assert "abc" in raw


@pytest.mark.parametrize(
    ("value", "outcome"),
    [("1e400", "not finite"), ("inf", "not finite"), ("nan", "not finite"), ("1_000", "not a number"), ("0x10", "not a number"),
     ("1 000.5", "not a number"), ("<0.01", "not a number"), ("1.2.3", "not a number"), ("10;5", "not a number"),
     ("+1.5", 1.5), ("-.5", -0.5), ("1e-3", 0.001), (" 7 ", 7.0), ("10.", 10.0)],
)  # fmt: skip
def test_a_value_is_a_number_or_set_aside(plant, value, outcome):
    plant.file("a.csv", lines(*GOOD, f"B,2026-01-05T06:00:00,{value}"))
    plant.pull()
    if isinstance(outcome, str):
        assert plant.rejected() == [(42, "value", outcome)]
    else:
        assert plant.rows()[-1] == ("B", datetime(2026, 1, 5, 6), outcome)


@pytest.mark.parametrize(
    ("value", "outcome"),
    [
        ("1,5", 1.5),
        ("1.234,5", 1234.5),
        ("1.23", "not a number"),
        ("12.34.567,8", "not a number"),
        ("1,2,3", "not a number"),
    ],
)
def test_decimal_comma_with_thousands_points(tmp_path, value, outcome):
    plant = Plant(tmp_path, delimiter=";", decimal=",", thousands=".", rejected_share=1.0)
    plant.file("a.csv", f"characteristic;taken_at;value\nA;2026-01-05T06:00:00;{value}\n")
    plant.pull()
    found = [row[2] for row in plant.rows()] or [row[2] for row in plant.rejected()]
    assert found == [outcome]


def test_a_point_in_a_decimal_comma_file_is_not_guessed(tmp_path):
    plant = Plant(tmp_path, decimal=",", rejected_share=1.0)
    plant.file("a.csv", "characteristic;taken_at;value\nA;2026-01-05T06:00:00;1.234\n")
    plant.pull()
    assert plant.rejected() == [(2, "value", "not a number")]


@pytest.mark.parametrize(
    ("text", "utc"),
    [
        ("2026-01-05T06:00:00", "2026-01-05 05:00:00"),  # the plant's zone is an hour ahead in winter
        ("2026-07-05 06:00:00", "2026-07-05 04:00:00"),
        ("2026-01-05T06:00:00Z", "2026-01-05 06:00:00"),
        ("2026-01-05 06:00:00+02:00", "2026-01-05 04:00:00"),
        ("2026-01-05", "2026-01-04 23:00:00"),
    ],
)
def test_times_are_stored_in_utc_and_an_offset_is_never_dropped(tmp_path, text, utc):
    plant = Plant(tmp_path, zone="Europe/Vienna")
    assert datetime.fromisoformat(utc).replace(tzinfo=UTC) < NOW or text.startswith("2026-07")
    plant.file("a.csv", lines(f"A,{text},1"))
    with Store.open(plant.plan.store_path) as store:
        intake.pull(store, plant.plan, registered={"A": ""}, now=datetime(2026, 12, 1, tzinfo=UTC))
    assert plant.rows()[0][1] == datetime.fromisoformat(utc)


def test_the_hour_that_does_not_exist_is_set_aside_and_the_doubled_one_is_said(tmp_path):
    plant = Plant(tmp_path, zone="Europe/Vienna")
    plant.file("a.csv", lines(*GOOD, "B,2026-03-29T02:30:00,1", "B,2025-10-26T02:30:00,1"))
    report = plant.pull()
    assert plant.rejected() == [(42, "taken_at", "time does not exist")]
    assert any("came twice" in message for message in report.messages)


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("2119-01-01", "time in the future"),
        ("infinity", "not a time"),
        ("1812-01-01", "not a time"),
        ("1960-01-01", "time out of range"),
    ],
)
def test_impossible_times_are_set_aside(plant, text, reason):
    plant.file("a.csv", lines(*GOOD, f"B,{text},1"))
    plant.pull()
    assert plant.rejected() == [(42, "taken_at", reason)]


def test_one_time_format_a_source_and_no_guessing_of_day_and_month(tmp_path):
    plant = Plant(tmp_path, time_format="%d/%m/%Y %H:%M", rejected_share=1.0)
    plant.file("a.csv", lines("A,05/01/2026 06:00,1", "A,31/12/2025 06:00,2", "A,12/31/2025 06:00,3"))
    plant.pull()
    assert [row[1] for row in plant.rows()] == [datetime(2025, 12, 31, 6), datetime(2026, 1, 5, 6)]
    assert plant.rejected() == [(4, "taken_at", "not a time")]


@pytest.mark.parametrize(
    ("name", "content", "reason"),
    [
        ("no header", "A,2026-01-05T06:00:00,1\n", "wrong header"),
        ("empty", "", "empty"),
        ("double column", "characteristic,taken_at,value,value\nA,2026-01-05,1,2\n", "more than once"),
        ("wrong columns", "name,time,reading\nA,2026-01-05,1\n", "no column 'characteristic', 'taken_at', 'value'"),
        ("unclosed quote", HEADER + '"A,2026-01-05T06:00:00,1\nA,2026-01-05T06:01:00,1\n', "quote is never closed"),
        ("latin-1", (HEADER + "Größe,2026-01-05T06:00:00,1\n").encode("latin-1"), "cp1252"),
        ("utf-16", (HEADER + "A,2026-01-05T06:00:00,1\n").encode("utf-16"), "UTF-16"),
        ("NUL", HEADER.encode() + b"A\x00,2026-01-05T06:00:00,1\n", "NUL"),
        ("too many bad", HEADER + "A,2026-01-05T06:00:00,x\nA,2026-01-05T06:01:00,1\n", "would be set aside"),
    ],
)  # fmt: skip
def test_a_file_that_cannot_be_used_is_refused_whole_and_says_why(plant, name, content, reason):
    plant.file("bad.csv", content)
    plant.file("good.csv", lines(*GOOD))
    report = plant.pull()
    assert [item for item, _ in report.refused] == ["in/bad.csv"]
    assert reason in report.refused[0][1]
    assert (report.status, report.new, len(plant.rows())) == ("done", 40, 40)  # the other file goes on
    assert plant.query("select status from loads where item = 'in/bad.csv'") == [("refused",)]
    assert "unchanged since" in plant.pull().refused[0][1]  # said again, not read again


def test_other_encodings_line_ends_and_packing_give_the_same_rows(tmp_path):
    text = lines(*GOOD).replace("A,", "Größe,")
    variants = {
        "bom.csv": text.encode("utf-8-sig"),
        "crlf.csv": text.replace("\n", "\r\n").encode(),
        "cr.csv": text.replace("\n", "\r").encode(),
        "mixed.csv": text.replace("\n", "\r\n", 7).encode(),
        "packed.csv.gz": gzip.compress(text.encode()),
    }
    expected = None
    for name, content in variants.items():
        folder = tmp_path / name
        folder.mkdir()
        plant = Plant(folder)
        plant.file(name, content)
        report = plant.pull()
        assert (report.new, report.rejected, report.refused) == (40, 0, []), name
        expected = expected or plant.rows()
        assert plant.rows() == expected, name


@pytest.mark.parametrize("encoding", ["cp1252", "latin-1", "utf-16"])
def test_a_stated_encoding_is_used(tmp_path, encoding):
    plant = Plant(tmp_path, encoding=encoding)
    plant.file("a.csv", lines(*GOOD).replace("A,", "Größe µ,").encode(encoding))
    assert plant.pull().new == 40
    assert plant.rows()[0][0] == "Größe µ"


def test_a_damaged_gzip_is_refused_by_its_checksum(plant):
    packed = bytearray(gzip.compress(lines(*GOOD).encode()))
    packed[-6] ^= 0xFF
    plant.file("a.csv.gz", bytes(packed))
    report = plant.pull()
    assert (report.status, plant.rows()) == ("failed", [])
    assert "damaged" in report.refused[0][1]


def test_columns_are_found_by_name_whatever_their_order_and_extra_ones_are_ignored(plant):
    plant.file("a.csv", "value,remark,taken_at,characteristic\n1.5,ok,2026-01-05T06:00:00,A\n")
    plant.pull()
    assert plant.rows() == [("A", datetime(2026, 1, 5, 6), 1.5)]


def test_a_header_in_the_middle_and_a_quoted_newline_are_what_they_are(plant):
    rows = [*GOOD[:20], HEADER.strip(), *GOOD[20:], '"B\nnew line",2026-01-05T06:00:00,1']
    plant.file("a.csv", lines(*rows))
    report = plant.pull({"A": ""})
    assert (report.new, report.rejected) == (41, 1)
    assert plant.rejected()[0][:1] == (22,)


def test_lines_before_the_header_are_skipped_and_counted(tmp_path):
    plant = Plant(tmp_path, skip=2)
    plant.file("a.csv", "made by machine 7\n\n" + lines(*GOOD, "B,2026-01-05T06:00:00,x"))
    assert plant.pull().new == 40
    assert plant.rejected() == [(44, "value", "not a number")]


def test_an_empty_value_is_not_measured_or_an_error_as_the_plan_says(tmp_path):
    (tmp_path / "a").mkdir()
    (tmp_path / "b").mkdir()
    one, two = Plant(tmp_path / "a"), Plant(tmp_path / "b", empty="reject")
    for plant in (one, two):
        plant.file("a.csv", lines(*GOOD, "B,2026-01-05T06:00:00,"))
    first, second = one.pull(), two.pull()
    assert (first.empty, first.rejected, second.empty, second.rejected) == (1, 0, 0, 1)


def test_a_wide_file_gives_one_characteristic_a_column(tmp_path):
    plant = Plant(tmp_path, layout="wide", prefix="run1 ", columns={"taken_at": "time"})
    plant.file("w.csv", "time,A,B\n2026-01-05T06:00:00,1,2\n2026-01-05T06:03:00,,4\n")
    report = plant.pull({"run1 A": ""})
    assert (report.read, report.new, report.empty, report.unregistered) == (4, 3, 1, 2)
    assert [(name, value) for name, _, value in plant.rows()] == [("run1 A", 1.0), ("run1 B", 2.0), ("run1 B", 4.0)]


def test_parquet_keeps_its_times(tmp_path):
    plant = Plant(tmp_path, zone="Europe/Vienna")
    local = pd.DataFrame({"characteristic": ["A"], "taken_at": pd.to_datetime(["2026-01-05 06:00"]), "value": [1.25]})
    aware = local.assign(characteristic="B", taken_at=local["taken_at"].dt.tz_localize("UTC"))
    local.to_parquet(tmp_path / "in" / "local.parquet")
    aware.to_parquet(tmp_path / "in" / "aware.parquet")
    assert plant.pull().new == 2
    assert plant.rows() == [("A", datetime(2026, 1, 5, 5), 1.25), ("B", datetime(2026, 1, 5, 6), 1.25)]


def test_another_unit_than_the_registered_one_is_never_mixed_in(plant):
    plant.file(
        "a.csv",
        "characteristic,taken_at,value,unit\n" + "".join(f"{row},mm\n" for row in GOOD) + "A,2026-01-06,0.4,in\n",
    )
    report = plant.pull({"A": "mm"})
    assert (report.new, report.rejected) == (40, 1)
    assert plant.rejected()[0][2] == "unit differs from the registry"


def test_dispositions_are_understood_or_set_aside(plant):
    words = ["accepted", "NOK", "i.O.", "perhaps", ""]
    body = "".join(f"A,2026-01-05T06:{i:02d}:00,1,{word}\n" for i, word in enumerate(words))
    plant.file("a.csv", "characteristic,taken_at,value,disposition\n" + body)
    plant.pull()
    assert plant.query("select disposition from measurements order by taken_at") == [(1,), (2,), (1,), (None,)]
    assert plant.rejected() == [(5, "disposition", "unknown disposition")]


def test_what_is_not_registered_is_kept_and_counted(plant):
    plant.file("a.csv", lines(*GOOD, "unknown,2026-01-05T06:00:00,1"))
    report = plant.pull({"A": ""})
    assert (report.new, report.unregistered, report.rejected) == (41, 1, 0)


def test_a_source_that_finds_nothing_fails_and_the_next_one_goes_on(tmp_path):
    plant = Plant(tmp_path)
    plant.file("a.csv", lines(*GOOD))
    plan = plant.plan.model_copy(update={"source": [Source(name="missing", path="nowhere/*.csv"), *plant.plan.source]})
    with Store.open(plan.store_path) as store:
        reports = intake.pull(store, plan, registered={}, now=NOW)
    assert [report.status for report in reports] == ["failed", "done"]
    assert "nowhere/*.csv" in reports[0].messages[0]


def test_sums_in_the_ledger_are_the_facts(plant):
    plant.file("a.csv", lines(*GOOD))
    plant.file("b.csv", lines(*GOOD[:3], "B,2026-01-06,1", "B,2026-01-07,"))
    plant.pull()
    for load_id, new in plant.query("select load_id, rows_new from loads"):
        assert plant.query(f"select count(*) from measurements where load_id = {load_id}") == [(new,)]
    for row in plant.query(
        "select rows_read, rows_new + rows_known + rows_corrected + rows_rejected + rows_empty from loads"
    ):
        assert row[0] == row[1]
