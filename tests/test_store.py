"""The store: migrations, transactions, the state file, copies, and what it says when something is wrong."""

from __future__ import annotations

import subprocess
import sys
from datetime import UTC, datetime
from pathlib import Path

import pandas as pd
import pytest

from portfolio import store as stores
from portfolio.errors import StoreBusyError, StoreError
from portfolio.locks import hold
from portfolio.store import Store

WHEN = datetime(2026, 1, 5, 6)


def load(number: int) -> pd.DataFrame:
    return pd.DataFrame(
        [{"load_id": number, "source": "s", "item": "i", "started_at": WHEN, "rows_read": 1, "rows_new": 1, "rows_known": 0,
          "rows_corrected": 0, "rows_rejected": 0, "rows_empty": 0, "status": "done", "program": "test"}]
    )  # fmt: skip


@pytest.fixture
def path(tmp_path) -> Path:
    with Store.open(tmp_path / "p.duckdb") as store:
        with store.transaction():
            store.insert("loads", load(1))
        store.checkpoint()
    return tmp_path / "p.duckdb"


def loads(path: Path) -> int:
    with Store.open(path, read_only=True) as store:
        return len(store.rows("history/loads"))


def test_a_new_store_has_the_newest_schema_and_opening_again_changes_nothing(path):
    with Store.open(path) as store:
        version = store.schema_version()
        assert store.connection.execute("select count(*) from schema_version").fetchall() == [(version,)]
    with Store.open(path) as store:
        assert store.schema_version() == version


def test_what_fails_in_a_transaction_leaves_no_trace(path):
    with Store.open(path) as store, pytest.raises(ZeroDivisionError), store.transaction():
        store.insert("loads", load(2))
        raise ZeroDivisionError
    assert loads(path) == 1


def test_a_statement_error_is_told_with_the_query_and_the_store_lives_on(path):
    with Store.open(path) as store:
        with pytest.raises(StoreError, match="loads"), store.transaction():
            store.insert("loads", load(1))  # the same number twice
        assert len(store.rows("history/loads")) == 1


def test_a_variable_of_the_program_never_stands_in_for_a_table(path):
    some_table = pd.DataFrame({"a": [1]})
    with Store.open(path) as store, pytest.raises(Exception, match="some_table"):
        store.connection.execute("select * from some_table")
    assert len(some_table) == 1


def test_a_store_from_a_newer_version_is_refused(path):
    with Store.open(path) as store:
        store.connection.execute("insert into schema_version values (999, now()::timestamp, 'later')")
    with pytest.raises(StoreError, match="newer portfolio"):
        Store.open(path)


def test_a_file_that_is_no_store_is_refused_and_left_alone(tmp_path):
    other = tmp_path / "p.duckdb"
    other.write_bytes(b"SQLite format 3\x00" + b"x" * 100)
    with pytest.raises(StoreError, match="not a DuckDB file"):
        Store.open(other)
    assert other.read_bytes().startswith(b"SQLite")


def test_a_missing_store_cannot_be_read(tmp_path):
    with pytest.raises(StoreError, match="does not exist"):
        Store.open(tmp_path / "none.duckdb", read_only=True)


def test_a_store_that_knows_less_than_its_state_file_is_refused(path):
    """DuckDB accepts a lost log in silence (store study, 3.2); here an old copy is put in the place of the store."""
    old = path.read_bytes()
    with Store.open(path) as store:
        with store.transaction():
            store.insert("loads", load(2))
        store.checkpoint()
    path.write_bytes(old)
    with pytest.raises(StoreError, match="newest load 1 instead of 2"):
        Store.open(path)
    stores.state_path(path).unlink()
    assert loads(path) == 1


def test_a_damaged_state_file_is_told(path):
    stores.state_path(path).write_text("{half")
    with pytest.raises(StoreError, match="not readable"):
        Store.open(path)


def test_a_damaged_store_is_told_when_it_is_read(path):
    content = bytearray(path.read_bytes())
    content[4096 * 3 :] = bytes(len(content) - 4096 * 3)
    path.write_bytes(bytes(content))
    with pytest.raises(StoreError), Store.open(path) as store:
        store.rows("history/loads")


def test_a_backup_is_whole_and_a_restore_keeps_the_replaced_store(path, tmp_path):
    copy = tmp_path / "backup" / "monday.duckdb"
    stores.backup(path, copy)
    with Store.open(path) as store:
        with store.transaction():
            store.insert("loads", load(2))
        store.checkpoint()
    stores.restore(copy, path)
    assert loads(path) == 1
    assert loads(path.with_name("p.duckdb.before-restore")) == 2


def test_a_restore_from_something_else_changes_nothing(path, tmp_path):
    wrong = tmp_path / "wrong.duckdb"
    wrong.write_bytes(b"no store")
    with pytest.raises(StoreError):
        stores.restore(wrong, path)
    assert loads(path) == 1


def test_the_lock_names_its_holder_and_is_free_after_kill(tmp_path):
    script = (
        "import sys, time; from pathlib import Path; from portfolio.locks import hold\n"
        "with hold(Path(sys.argv[1])): print('held', flush=True); time.sleep(60)"
    )
    with subprocess.Popen(
        [sys.executable, "-c", script, str(tmp_path / "s")], stdout=subprocess.PIPE, text=True
    ) as other:
        assert other.stdout is not None and other.stdout.readline() == "held\n"
        with pytest.raises(StoreBusyError, match=f"process {other.pid}"), hold(tmp_path / "s"):
            pass
        other.kill()
        other.wait()
    with hold(tmp_path / "s"):
        pass


def test_times_with_a_zone_are_bound_as_utc(path):
    with Store.open(path) as store:
        frame = store.frame("judgement/last_changes", as_of=datetime(2026, 1, 1, tzinfo=UTC))
    assert list(frame.columns) == ["characteristic", "changed_at"]


def test_every_query_says_what_it_answers():
    from portfolio import shipped

    for folder in ("intake", "judgement", "history", "publishing"):
        for file in shipped.listing(f"queries/{folder}", "*.sql"):
            assert file.read_text(encoding="utf-8").startswith("-- "), file.name
