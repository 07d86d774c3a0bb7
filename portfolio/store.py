"""The DuckDB file: open, migrate, transact, run named queries, back up.

What is written when: a transaction commits to the file and its write-ahead log; `checkpoint` folds the log into the
file and then writes `<store>.state.json`. DuckDB accepts a missing or cut log in silence, so at each start the store
is compared with that state: a store that knows less than it once did is refused.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import duckdb
import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio import shipped
from portfolio.errors import StoreBusyError, StoreError
from portfolio.version import __version__

MAGIC = b"DUCK"
MAGIC_OFFSET = 8


class Store:
    """An open store. Use as a context manager; only one process has it open for writing."""

    def __init__(self, connection: duckdb.DuckDBPyConnection, path: Path, read_only: bool) -> None:
        self.path = path
        self.read_only = read_only
        self.connection = connection

    @classmethod
    def open(
        cls,
        path: Path,
        *,
        read_only: bool = False,
        memory: str = "1GB",
        threads: int = 2,
        temporary_folder: Path | None = None,
    ) -> Self:
        """Open the store, creating or migrating it when it may be written.

        Raises
        ------
        StoreBusyError
            If another process has the file open.
        StoreError
            If the file is missing (read only), not a store, damaged, newer than this program, or knows less than its
            state file.
        """
        path = Path(path)
        _check_file(path, read_only)
        scratch = temporary_folder or path.with_name(path.name + ".tmp")
        config: dict[str, Any] = {
            "threads": threads,
            "memory_limit": memory,
            "temp_directory": str(scratch),
            # A variable of the program must never stand in for a missing table.
            "python_enable_replacements": False,
            # Extensions would be fetched from the network.
            "autoinstall_known_extensions": False,
            "autoload_known_extensions": False,
        }
        try:
            connection = duckdb.connect(str(path), read_only=read_only, config=config)
        except duckdb.Error as error:
            raise _told(path, error) from error
        store = cls(connection, path, read_only)
        try:
            for setting in ("enable_progress_bar=false", "TimeZone='UTC'", "max_temp_directory_size='20GB'"):
                connection.execute(f"SET {setting}")
            store._migrate()
            store._compare_with_state()
        except BaseException:
            connection.close()
            raise
        return store

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; an unclosed connection would keep answering after a restore."""
        self.connection.close()

    # Named queries ------------------------------------------------------------------------------------------------

    def run(self, name: str, **parameters: Any) -> duckdb.DuckDBPyConnection:
        """Run `queries/<name>.sql` with bound parameters."""
        bound = {key: _bindable(value) for key, value in parameters.items()}
        try:
            return self.connection.execute(shipped.text(f"queries/{name}.sql"), bound or None)
        except duckdb.Error as error:
            raise _told(self.path, error, during=name) from error

    def rows(self, name: str, **parameters: Any) -> list[tuple[Any, ...]]:
        """All rows as tuples."""
        return self.run(name, **parameters).fetchall()

    def frame(self, name: str, **parameters: Any) -> pd.DataFrame:
        """All rows as a frame (times without a zone are UTC; whole numbers with gaps are Int64)."""
        return self.arrow(name, **parameters).to_pandas(types_mapper=_PANDAS.get)

    def arrow(self, name: str, **parameters: Any) -> pa.Table:
        """All rows as an Arrow table."""
        bound = {key: _bindable(value) for key, value in parameters.items()}
        try:
            return self.connection.sql(shipped.text(f"queries/{name}.sql"), params=bound or None).to_arrow_table()
        except duckdb.Error as error:
            raise _told(self.path, error, during=name) from error

    def arrays(self, name: str, **parameters: Any) -> dict[str, np.ndarray[Any, Any]]:
        """All rows as one numpy array a column; the query must not return nulls."""
        bound = {key: _bindable(value) for key, value in parameters.items()}
        # A cursor of its own: shards are read from several threads.
        with self.connection.cursor() as cursor:
            try:
                return dict(cursor.execute(shipped.text(f"queries/{name}.sql"), bound or None).fetchnumpy())
            except duckdb.Error as error:
                raise _told(self.path, error, during=name) from error

    def columns(self, table: str) -> list[str]:
        """Column names of a table, in order."""
        return [
            row[0] for row in self.connection.execute("select column_name from (describe " + table + ")").fetchall()
        ]

    # Writing ------------------------------------------------------------------------------------------------------

    @contextmanager
    def transaction(self) -> Iterator[None]:
        """Everything inside becomes visible together, or not at all."""
        self.connection.execute("begin")
        try:
            yield
            self.connection.execute("commit")
        except duckdb.Error as error:
            self._undo()
            raise _told(self.path, error) from error
        except BaseException:
            self._undo()
            raise

    def _undo(self) -> None:
        try:
            self.connection.execute("rollback")
        except duckdb.Error:
            # After a failed commit there is no transaction left to undo; the first error is the one to tell.
            return

    def insert(self, table: str, rows: pa.Table | pd.DataFrame) -> None:
        """Append rows to a table, columns by name; columns that are not given stay empty."""
        if isinstance(rows, pd.DataFrame):
            rows = pa.Table.from_pandas(rows, preserve_index=False)
        names = ", ".join(f'"{name}"' for name in rows.column_names)
        self.connection.register("rows_to_insert", rows)
        try:
            self.connection.execute(f"insert into {table} ({names}) select {names} from rows_to_insert")
        except duckdb.Error as error:
            raise _told(self.path, error, during=f"insert into {table}") from error
        finally:
            self._let_go("rows_to_insert")

    def _let_go(self, name: str) -> None:
        try:
            self.connection.unregister(name)
        except duckdb.Error:
            # Inside a failed transaction nothing can be dropped; the rollback does it, and the first error is told.
            return

    def checkpoint(self) -> None:
        """Fold the log into the file, then note what the store knows."""
        try:
            self.connection.execute("checkpoint")
        except duckdb.Error as error:
            raise _told(self.path, error, during="checkpoint") from error
        _write_state(state_path(self.path), self._knows())

    def size(self) -> int:
        """Bytes of the file and its log."""
        log = self.path.with_name(self.path.name + ".wal")
        return sum(part.stat().st_size for part in (self.path, log) if part.exists())

    # Schema and state ---------------------------------------------------------------------------------------------

    def schema_version(self) -> int:
        """The number of the newest migration this store has."""
        there = self.connection.execute(
            "select count(*) from information_schema.tables where table_name = 'schema_version'"
        ).fetchall()[0][0]
        if not there:
            return 0
        return int(self.connection.execute("select coalesce(max(version), 0) from schema_version").fetchall()[0][0])

    def _migrate(self) -> None:
        migrations = {int(path.name[:4]): path for path in shipped.listing("queries/schema", "[0-9]*.sql")}
        newest, present = max(migrations), self.schema_version()
        if present > newest:
            raise StoreError(
                f"{self.path} was written by a newer portfolio (schema {present}, this program knows {newest}). "
                "Install that version or restore an older backup."
            )
        if present == newest:
            return
        if self.read_only:
            raise StoreError(
                f"{self.path} has schema {present}, this program needs {newest}. Run `portfolio pull` once."
            )
        for number in range(present + 1, newest + 1):
            with self.transaction():
                if number == 1:
                    self.connection.execute(
                        "create table schema_version (version integer primary key, applied_at timestamp not null, "
                        "program varchar not null)"
                    )
                self.connection.execute(migrations[number].read_text(encoding="utf-8"))
                self.connection.execute(
                    "insert into schema_version values ($version, $at, $program)",
                    {"version": number, "at": datetime.now(UTC).replace(tzinfo=None), "program": __version__},
                )
        self.checkpoint()

    def _knows(self) -> dict[str, int]:
        loads, runs = self.connection.execute(
            "select coalesce(max(load_id), 0), (select coalesce(max(run_id), 0) from runs) from loads"
        ).fetchall()[0]
        rows = self.connection.execute("select count(*) from measurements").fetchall()[0][0]
        return {"newest_load": int(loads), "newest_run": int(runs), "measurements": int(rows)}

    def _compare_with_state(self) -> None:
        path = state_path(self.path)
        if not path.exists():
            return
        try:
            state = json.loads(path.read_text(encoding="utf-8"))
        except ValueError as error:
            raise StoreError(
                f"{path} is not readable ({error}). Restore a backup, or delete it if you trust the store."
            ) from error
        known = self._knows()
        behind = [name for name in ("newest_load", "newest_run") if known[name] < int(state.get(name, 0))]
        if behind:
            told = ", ".join(f"{name.replace('_', ' ')} {known[name]} instead of {state[name]}" for name in behind)
            raise StoreError(
                f"{self.path} knows less than it did at the last checkpoint ({told}): its log was lost or an old copy was "
                f"put in its place. Restore a backup; or, if this is intended, delete {path.name}."
            )


def state_path(store: Path) -> Path:
    """The file that remembers what the store knew at its last checkpoint."""
    return store.with_name(store.name + ".state.json")


def backup(store: Path, file: Path) -> None:
    """A consistent copy of a closed store, verified by opening it; replaces `file` in one step."""
    with Store.open(store) as opened:
        opened.checkpoint()
        known = opened._knows()
    temporary = file.with_name(file.name + ".new")
    file.parent.mkdir(parents=True, exist_ok=True)
    shutil.copyfile(store, temporary)
    with Store.open(temporary, read_only=True) as copy:
        if copy._knows() != known:
            raise StoreError(f"the copy {temporary} does not equal {store}. Check the disk and try again.")
    _synced(temporary)
    temporary.replace(file)


def restore(file: Path, store: Path) -> None:
    """Put a backup in the place of the store; the replaced store is kept as `<store>.before-restore`."""
    if not file.is_file():
        raise StoreError(f"{file} does not exist. Name a file that `portfolio backup` wrote.")
    temporary = store.with_name(store.name + ".new")
    store.parent.mkdir(parents=True, exist_ok=True)
    shutil.copyfile(file, temporary)
    with Store.open(temporary, read_only=True) as copy:
        known = copy._knows()
    _synced(temporary)
    log = store.with_name(store.name + ".wal")
    if store.exists():
        with Store.open(store) as present:
            present.checkpoint()
        store.replace(store.with_name(store.name + ".before-restore"))
    log.unlink(missing_ok=True)
    state_path(store).unlink(missing_ok=True)
    temporary.replace(store)
    _write_state(state_path(store), known)


def _check_file(path: Path, read_only: bool) -> None:
    if not path.exists():
        if read_only:
            raise StoreError(f"{path} does not exist yet. Run `portfolio pull` first.")
        return
    with path.open("rb") as file:
        head = file.read(MAGIC_OFFSET + len(MAGIC))
    if head[MAGIC_OFFSET:] != MAGIC:
        raise StoreError(f"{path} is not a DuckDB file. Name another store in the plan, or restore a backup.")


def _told(path: Path, error: duckdb.Error, during: str = "") -> StoreError | StoreBusyError:
    text = str(error).splitlines()[0] if str(error) else type(error).__name__
    if "Could not set lock" in text or "Conflicting lock" in text:
        return StoreBusyError(f"{path} is open in another program ({text}). Close it and try again.")
    if "No space left" in text:
        return StoreError(
            f"{path}: the disk is full. What was stored before is safe; make room and run again. ({text})"
        )
    place = f"{path}, {during}" if during else str(path)
    return StoreError(f"{place}: {text}")


def _write_state(path: Path, known: dict[str, int]) -> None:
    temporary = path.with_name(path.name + ".new")
    with temporary.open("w", encoding="utf-8") as file:
        json.dump(known, file)
        file.flush()
        os.fsync(file.fileno())
    temporary.replace(path)


def _synced(path: Path) -> None:
    with path.open("rb") as file:
        os.fsync(file.fileno())


def _bindable(value: Any) -> Any:
    if isinstance(value, datetime) and value.tzinfo is not None:
        return value.astimezone(UTC).replace(tzinfo=None)
    if isinstance(value, np.generic):
        return value.item()
    return value


_PANDAS = {
    pa.int8(): pd.Int8Dtype(),
    pa.int16(): pd.Int16Dtype(),
    pa.int32(): pd.Int32Dtype(),
    pa.int64(): pd.Int64Dtype(),
    pa.bool_(): pd.BooleanDtype(),
}
