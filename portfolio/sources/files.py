"""Files of measurements: finds them, and stages one at a time as text that the intake converts.

CSV is read with an explicit list of columns, all as text, never by a sniffer: one bad row once turned a file of 21
rows into one row, in silence (store study, 1.3).
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import duckdb

from portfolio.errors import SourceError
from portfolio.plan import Plan, Source
from portfolio.sources import text
from portfolio.sources.text import RefusedError

CANONICAL = (
    "characteristic", "taken_at", "value", "subgroup", "stream", "part_id", "lot", "disposition", "unit",
    "measurement_id",
)  # fmt: skip
NEEDED = {"long": ("characteristic", "taken_at", "value"), "wide": ("taken_at",)}
KINDS = (".csv", ".txt", ".tsv", ".csv.gz", ".txt.gz", ".tsv.gz", ".parquet")


@dataclass(frozen=True)
class Item:
    """One file as it was found."""

    path: Path
    name: str
    size: int
    modified: datetime

    def unchanged(self) -> bool:
        """Whether the file is still as it was found."""
        now = self.path.stat()
        return now.st_size == self.size and _time(now.st_mtime) == self.modified


def items(source: Source, plan: Plan, now: datetime) -> list[Item]:
    """The files of a source, sorted by name; files younger than `settle_seconds` wait for the next pull.

    Raises
    ------
    SourceError
        If no file matches, or one has a kind that cannot be read.
    """
    paths = sorted(path for path in plan.folder.glob(source.path or "") if path.is_file())
    if not paths:
        raise SourceError(f"no file matches {source.path!r} in {plan.folder}. Correct `path`, or wait for the files.")
    found = []
    for path in paths:
        if not path.name.lower().endswith(KINDS):
            raise SourceError(f"{path.name}: files of this kind are not read. Use {', '.join(KINDS)}.")
        facts = path.stat()
        if not source.settle_seconds or now.timestamp() - facts.st_mtime >= source.settle_seconds:
            name = path.relative_to(plan.folder).as_posix() if path.is_relative_to(plan.folder) else path.as_posix()
            found.append(Item(path, name, facts.st_size, _time(facts.st_mtime)))
    return found


def _time(seconds: float) -> datetime:
    return datetime.fromtimestamp(int(seconds), UTC).replace(tzinfo=None)


@dataclass(frozen=True)
class Staged:
    """The temporary table `raw` is there: `n` (order in the file) and the canonical columns as text.

    `empties` counts the cells of a wide file without a value; `notes` are for a person.
    """

    sha256: str
    empties: int
    notes: list[str]


@contextmanager
def stage(connection: duckdb.DuckDBPyConnection, item: Item, source: Source, spool: Path) -> Iterator[Staged]:
    """Stage one file as the temporary table `raw`, and structural rejects as `reject_errors`; dropped afterwards.

    Raises
    ------
    RefusedError
        If the file as a whole cannot be used.
    """
    copy = spool / "item.csv"
    for table in ("reject_errors", "reject_scans"):  # they grow over the scans of a connection
        connection.execute(f"drop table if exists {table}")
    try:
        if item.path.suffix.lower() == ".parquet":
            yield _parquet(connection, item, source)
        else:
            yield _text(connection, item, source, copy)
    finally:
        copy.unlink(missing_ok=True)


def _text(connection: duckdb.DuckDBPyConnection, item: Item, source: Source, copy: Path) -> Staged:
    ready = text.prepare(item.path, copy, encoding=source.encoding, delimiter=source.delimiter, skip=source.skip)
    mapped = _mapped(ready.header, source)
    # Names are ours (c0, c1 ...): a name of the file never becomes part of a statement.
    own = {name: f"c{number}" for number, name in enumerate(ready.header)}
    reader = connection.execute(
        f"""create or replace temp table read as
        select row_number() over () as n, * from read_csv($path,
            columns={{{", ".join(f"'{column}': 'VARCHAR'" for column in own.values())}}},
            header=true, skip=$skip, delim=$delimiter, quote='"', escape='"', auto_detect=false,
            store_rejects=true, rejects_table='reject_errors', rejects_scan='reject_scans', max_line_size=2000000)""",
        {"path": str(ready.path), "skip": source.skip, "delimiter": ready.delimiter},
    )
    reader.fetchall()
    unclosed = connection.execute("select min(line) from reject_errors where error_type = 'UNQUOTED VALUE'").fetchall()[
        0
    ][0]
    if unclosed is not None:
        raise RefusedError(f"line {unclosed}: a quote is never closed and swallows the lines after it. Mend the file")
    empties = _lay_out(connection, mapped, own, source)
    notes = [] if ready.ends_with_newline else ["the last line has no line end: its value may be cut off"]
    return Staged(ready.sha256, empties=empties, notes=notes)


def _parquet(connection: duckdb.DuckDBPyConnection, item: Item, source: Source) -> Staged:
    try:
        described = connection.execute(
            "select column_name, column_type from (describe select * from read_parquet($path))",
            {"path": str(item.path)},
        ).fetchall()
    except duckdb.Error as error:
        raise RefusedError(f"not a readable Parquet file ({str(error).splitlines()[0]})") from error
    types = dict(described)
    mapped = _mapped(list(types), source)
    time_type = types[mapped["taken_at"]]
    typed = time_type.startswith("TIMESTAMP")
    quoted = {name: '"' + name.replace('"', '""') + '"' for name in types}
    columns = []
    for name in types:
        expression = quoted[name]
        if name == mapped["taken_at"] and typed:
            # Written out in full, with the offset where the file has one, so that one conversion serves all kinds.
            form = "%Y-%m-%d %H:%M:%S.%f" + ("+00:00" if "TIME ZONE" in time_type else "")
            inner = f"timezone('UTC', {expression})" if "TIME ZONE" in time_type else f"{expression}::timestamp"
            expression = f"strftime({inner}, '{form}')"
        columns.append(f"{expression}::varchar as {quoted[name]}")
    connection.execute(
        f"create or replace temp table read as select row_number() over () as n, {', '.join(columns)} "
        "from read_parquet($path)",
        {"path": str(item.path)},
    )
    connection.execute(
        "create or replace temp table reject_errors (line bigint, column_name varchar, error_type varchar, csv_line varchar)"
    )
    empties = _lay_out(connection, mapped, {name: name for name in types}, source)
    return Staged(text.digest(item.path), empties=empties, notes=[])


def _mapped(header: list[str], source: Source) -> dict[str, str]:
    """Canonical name -> column of the file; refuses a file that lacks a needed one."""
    mapped = {name: source.columns.get(name, name) for name in CANONICAL}
    if source.layout == "wide":
        mapped = {name: column for name, column in mapped.items() if name not in ("characteristic", "value")}
    missing = [
        mapped[name]
        for name in mapped
        if mapped[name] not in header and (name in NEEDED[source.layout] or name in source.columns)
    ]
    if missing:
        raise RefusedError(
            f"wrong header: no column {', '.join(repr(name) for name in missing)}; it has {', '.join(header[:20])}. "
            "Set `columns` (or `skip`, `delimiter`) of the source"
        )
    return {name: column for name, column in mapped.items() if column in header}


def _lay_out(connection: duckdb.DuckDBPyConnection, mapped: dict[str, str], own: dict[str, str], source: Source) -> int:
    """Turn the table `read` into `raw` in canonical columns; returns the number of empty cells of a wide file."""

    def column(name: str) -> str:
        return '"' + own[mapped[name]].replace('"', '""') + '"' if name in mapped else "null::varchar"

    shared = ", ".join(f"{column(name)} as {name}" for name in CANONICAL if name not in ("characteristic", "value"))
    if source.layout == "long":
        connection.execute(
            f"create or replace temp table raw as select n, $prefix || {column('characteristic')} as characteristic, "
            f"{column('value')} as value, {shared} from read",
            {"prefix": source.prefix},
        )
        connection.execute("drop table read")
        return 0
    taken = set(mapped.values())
    wide = [name for name in own if name not in taken and name]
    if not wide:
        raise RefusedError("a wide file needs at least one column besides the time")
    connection.execute("create or replace temp table wide_names (place varchar, characteristic varchar)")
    connection.executemany("insert into wide_names values (?, ?)", [(own[name], source.prefix + name) for name in wide])
    cells = ", ".join('"' + own[name].replace('"', '""') + '"' for name in wide)
    connection.execute(
        f"create or replace temp table raw as select n, characteristic, value, {', '.join(n for n in CANONICAL[3:])}, taken_at "
        f"from (unpivot (select n, {shared}, {cells} from read) on {cells} into name place value value) "
        "join wide_names using (place)"
    )
    rows = connection.execute(
        "select (select count(*) from read) * $width - (select count(*) from raw)", {"width": len(wide)}
    )
    empties = int(rows.fetchall()[0][0])
    connection.execute("drop table read")
    return empties
