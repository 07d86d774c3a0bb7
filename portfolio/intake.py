"""From sources into the store: map, convert, set aside what is wrong, recognise what is known.

One item (file) is one transaction: its rows, its corrections, what was set aside and its line in the ledger appear
together or not at all. A crash leaves the items before it complete and this one absent; the next pull takes it again.
"""

from __future__ import annotations

import tempfile
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import duckdb
import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio.errors import SourceError
from portfolio.plan import Plan, Source
from portfolio.sources import files
from portfolio.sources.files import Item
from portfolio.sources.text import RefusedError
from portfolio.store import Store
from portfolio.terminal import Progress
from portfolio.version import __version__

EARLIEST = datetime(1970, 1, 1, tzinfo=UTC)
AHEAD = timedelta(days=1)
"A time further ahead than this is an error of a clock, not a measurement."


@dataclass
class SourceReport:
    """What one pull brought from one source. Rows add up: read = new + known + corrected + rejected + empty."""

    name: str
    status: str = "nothing new"
    items: int = 0
    read: int = 0
    new: int = 0
    known: int = 0
    corrected: int = 0
    rejected: int = 0
    empty: int = 0
    unregistered: int = 0
    refused: list[tuple[str, str]] = field(default_factory=list)
    messages: list[str] = field(default_factory=list)


def pull(
    store: Store, plan: Plan, *, registered: dict[str, str], progress: Progress | None = None, now: datetime
) -> list[SourceReport]:
    """Take in what is new in every source; a source that fails does not stop the others.

    Rows of characteristics that are not registered are stored and counted: completing the registry later must not
    need the files again.
    """
    store.run("intake/tables")
    store.insert("registered", pa.table({"name": list(registered), "unit": list(registered.values())}))
    reports = [_pull_source(store, plan, source, now, progress) for source in plan.source]
    pull_id = store.rows("intake/next_pull")[0][0]
    with store.transaction():
        store.insert(
            "pulls", pd.DataFrame([_pull_row(pull_id, report, now) for report in reports], columns=_PULL_COLUMNS)
        )
    store.checkpoint()
    return reports


def _pull_source(store: Store, plan: Plan, source: Source, now: datetime, progress: Progress | None) -> SourceReport:
    report = SourceReport(source.name)
    try:
        if source.kind != "files":
            raise SourceError('databases cannot be read by this version. Export to files, and use kind = "files".')
        found = files.items(source, plan, now)
        with tempfile.TemporaryDirectory(prefix=".portfolio-", dir=plan.store_path.parent) as spool:
            for number, item in enumerate(found):
                _pull_item(store, plan, source, item, Path(spool), now, report)
                if progress is not None:
                    progress.counted(number + 1, len(found))
    except SourceError as error:
        report.status = "failed"
        report.messages.append(str(error))
        return report
    if report.refused and not report.items:
        report.status = "failed"
    elif report.items:
        report.status = "done"
    return report


def _pull_item(
    store: Store, plan: Plan, source: Source, item: Item, spool: Path, now: datetime, report: SourceReport
) -> None:
    known = store.rows("intake/known_item", source=source.name, item=item.name, size=item.size, modified=item.modified)
    if known:
        status, reason = known[0]
        if status == "refused":
            report.refused.append((item.name, f"{reason} (unchanged since it was refused)"))
        return
    ledger = _Ledger(store, source, item, now)
    try:
        with files.stage(store.connection, item, source, spool) as staged:
            ledger.sha256 = staged.sha256
            same = store.rows("intake/known_content", source=source.name, sha256=staged.sha256)
            if same:
                rows = int(same[0][1])
                with store.transaction():
                    ledger.write("done", f"same content as {same[0][0]}", read=rows, known=rows)
                report.items += 1
                report.read += rows
                report.known += rows
                report.messages.append(f"{item.name}: the same content as {same[0][0]}")
            else:
                _take_in(store, plan, source, item, staged, ledger, report)
    except RefusedError as error:
        with store.transaction():
            ledger.write("refused", str(error))
        report.refused.append((item.name, str(error)))
    except duckdb.Error as error:
        reason = f"not readable as a table ({str(error).splitlines()[0]}). Check delimiter, quotes and line ends"
        with store.transaction():
            ledger.write("refused", reason)
        report.refused.append((item.name, reason))
    store.checkpoint()


def _take_in(
    store: Store, plan: Plan, source: Source, item: Item, staged: files.Staged, ledger: _Ledger, report: SourceReport
) -> None:
    store.run(
        "intake/convert",
        zone=source.timezone or plan.portfolio.timezone,
        format=source.time_format,
        decimal=source.decimal,
        thousands=source.thousands,
        earliest=EARLIEST,
        latest=ledger.now + AHEAD,
        empty_is_error=source.empty == "reject",
    ).fetchall()
    counts = store.frame("intake/counts").iloc[0]
    broken = store.frame("intake/bad_lines")
    set_aside = int(counts["rows_rejected"]) + len(broken)
    read = int(counts["rows_read"]) + len(broken) + staged.empties
    empty = int(counts["rows_empty"]) + staged.empties
    rejected = _rejected(store, source, item, broken, ledger.load_id)
    if read and set_aside / read > plan.limits.rejected_share:
        reason = (
            f"{set_aside} of {read} rows would be set aside, more than {plan.limits.rejected_share:.0%} "
            f"(most often: {rejected['reason'].mode().iloc[0]}). Correct the file or the source's settings"
        )
        with store.transaction():
            store.insert("rejected", rejected)
            ledger.write("refused", reason, read=read, rejected=set_aside, empty=empty)
        report.refused.append((item.name, reason))
        return
    if not item.unchanged():
        report.messages.append(f"{item.name}: still being written, left for the next pull")
        return
    with store.transaction():
        store.run("intake/new_names")
        store.run("intake/new_labels")
        store.run("intake/batch").fetchall()
        store.run("intake/compare", first=counts["first_taken"], last=counts["last_taken"]).fetchall()
        good, known, corrected = (int(value) for value in store.rows("intake/outcome")[0])
        store.run("intake/insert_new", load_id=ledger.load_id)
        if corrected:
            store.run("intake/log_corrections", load_id=ledger.load_id, now=ledger.now)
            store.run("intake/apply_corrections", load_id=ledger.load_id)
        if len(rejected):
            store.insert("rejected", rejected)
        # Equal keys inside one item are one reading; the others count as known.
        repeated = int(counts["rows_read"]) - int(counts["rows_rejected"]) - int(counts["rows_empty"]) - good
        new = good - known - corrected
        ledger.write(
            "done",
            "; ".join(staged.notes) or None,
            read=read,
            new=new,
            known=known + repeated,
            corrected=corrected,
            rejected=set_aside,
            empty=empty,
            first=counts["first_taken"],
            last=counts["last_taken"],
        )
    report.items += 1
    report.read += read
    report.new += new
    report.known += known + repeated
    report.corrected += corrected
    report.rejected += set_aside
    report.empty += empty
    report.unregistered += int(counts["rows_unregistered"])
    report.messages += [f"{item.name}: {note}" for note in staged.notes]
    if not read:
        report.messages.append(f"{item.name}: the file has a header but no rows")
    if counts["rows_doubled_hour"]:
        report.messages.append(
            f"{item.name}: {counts['rows_doubled_hour']} times lie in the hour that came twice; their order is not known"
        )


def _rejected(store: Store, source: Source, item: Item, broken: pd.DataFrame, load_id: int) -> pd.DataFrame:
    """Everything of this item that is set aside, with the line of the file it stands on (the header is a line)."""
    content = store.frame("intake/bad_rows")
    lines = np.sort(broken["line"].to_numpy(dtype=np.int64))
    # The reader numbers only the rows it accepts: count the broken ones before each.
    accepted_before = lines - 2 - np.arange(len(lines))
    n = content["n"].to_numpy(dtype=np.int64)
    content["record_no"] = n + 1 + np.searchsorted(accepted_before, n, side="left") + source.skip
    form = broken.assign(record_no=broken["line"].astype(np.int64) + source.skip)
    columns = ["record_no", "column_name", "reason", "raw"]
    parts = [part[columns] for part in (form, content) if len(part)]
    both = pd.concat(parts, ignore_index=True) if parts else form[columns]
    return both.assign(load_id=load_id, source=source.name, item=item.name)


class _Ledger:
    """The line of one item in `loads`."""

    def __init__(self, store: Store, source: Source, item: Item, now: datetime) -> None:
        self._store, self._source, self._item = store, source, item
        self.now = now
        self.load_id = int(store.rows("intake/next_load")[0][0])
        self.sha256: str | None = None

    def write(
        self,
        status: str,
        reason: str | None,
        *,
        read: int = 0,
        new: int = 0,
        known: int = 0,
        corrected: int = 0,
        rejected: int = 0,
        empty: int = 0,
        first: Any = None,
        last: Any = None,
    ) -> None:
        """Add the line; call inside the transaction of the item."""
        moment = self.now.replace(tzinfo=None)
        row = {
            "load_id": self.load_id, "source": self._source.name, "item": self._item.name, "size": self._item.size,
            "sha256": self.sha256, "modified": self._item.modified, "started_at": moment, "finished_at": moment,
            "rows_read": read, "rows_new": new, "rows_known": known, "rows_corrected": corrected,
            "rows_rejected": rejected, "rows_empty": empty, "first_taken": first, "last_taken": last,
            "status": status, "reason": reason, "program": __version__,
        }  # fmt: skip
        self._store.insert("loads", pd.DataFrame([row]))


_PULL_COLUMNS = [
    "pull_id", "source", "pulled_at", "status", "items", "rows_read", "rows_new", "rows_known", "rows_corrected",
    "rows_rejected", "message",
]  # fmt: skip


def _pull_row(pull_id: int, report: SourceReport, now: datetime) -> dict[str, Any]:
    told = [f"refused {item}: {reason}" for item, reason in report.refused] + report.messages
    return {
        "pull_id": pull_id, "source": report.name, "pulled_at": now.replace(tzinfo=None), "status": report.status,
        "items": report.items, "rows_read": report.read, "rows_new": report.new, "rows_known": report.known,
        "rows_corrected": report.corrected, "rows_rejected": report.rejected, "message": " | ".join(told),
    }  # fmt: skip
