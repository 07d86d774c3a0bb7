"""The weekly job, step by step: pull, judge, publish.

Each step takes the store's lock, does its work in transactions, and leaves the store checkpointed. A crash between
two steps leaves the results of the finished ones; every step can be repeated without effect on what is done.
"""

from __future__ import annotations

import hashlib
import time
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio import engine, intake, triage
from portfolio.errors import PublishError, UsageError
from portfolio.intake import SourceReport
from portfolio.judgement import Measured, Window
from portfolio.plan import Plan
from portfolio.registry import Registry
from portfolio.result import CELLS
from portfolio.session import newest, utc, writing
from portfolio.store import Store
from portfolio.store_reader import StoreReader
from portfolio.terminal import Progress
from portfolio.version import __version__


@dataclass(frozen=True)
class PullReport:
    """What a pull brought in, source by source."""

    sources: list[SourceReport]
    needs_a_person: bool


@dataclass(frozen=True)
class JudgeReport:
    """A finished judgement: how many characteristics in each cell, how many on the centering list."""

    run_id: int
    as_of: datetime
    counts: dict[str, int]
    listed: int
    seconds: float


@dataclass(frozen=True)
class PublishReport:
    """A published issue."""

    folder: Path
    index: Path
    files: int
    bytes: int
    seconds: float
    left_over: tuple[Path, ...] = ()
    "Folders of old issues that could not be removed now; the next publishing tries again."


@dataclass(frozen=True)
class RunReport:
    """The three steps of the weekly job."""

    pull: PullReport
    judge: JudgeReport
    publish: PublishReport

    @property
    def needs_a_person(self) -> bool:
        """True when the job ran but something wants a look (exit code 1)."""
        return self.pull.needs_a_person


def pull(
    plan: Plan, registry: Registry, *, progress: Progress | None = None, now: datetime | None = None
) -> PullReport:
    """Bring new measurements of every source into the store."""
    moment = utc(now)
    with writing(plan) as store:
        _record_registry(store, registry, moment)
        units = registry.units()
        reports = intake.pull(store, plan, registered=units, progress=progress, now=moment)
    troubled = any(report.status == "failed" or report.refused for report in reports)
    return PullReport(sources=reports, needs_a_person=troubled)


def judge(
    plan: Plan,
    registry: Registry,
    *,
    as_of: datetime | None = None,
    slot: str | None = None,
    progress: Progress | None = None,
) -> JudgeReport:
    """Judge every characteristic of the registry over the window that ends at `as_of` (default now), and store it."""
    began = time.perf_counter()
    until = utc(as_of)
    since = until - timedelta(weeks=plan.portfolio.window_weeks)
    with writing(plan) as store:
        version = _record_registry(store, registry, utc(None))
        rows = registry.as_of(until)
        if rows.empty:
            raise UsageError(f"{plan.registry_path}: no characteristic is valid at {until:%Y-%m-%d}. Check valid_from.")
        window = Window(_micros(since), _micros(until))
        reader = StoreReader(store, rows["characteristic"], since, until)
        stretch = _stretches(store, rows, until, window)
        measured = engine.judge(
            reader, rows, window, stretch, plan.judgement, progress=_counted(progress), workers=plan.limits.threads
        )
        previous = store.frame("judgement/previous_ranking", as_of=until)
        decided = triage.decide(measured.rows, rows, plan.judgement, previous if len(previous) else None)
        run_id = _save(store, plan, measured, decided, until, since, version, slot, time.perf_counter() - began)
    counts = decided.results["cell"].value_counts().to_dict()
    return JudgeReport(
        run_id=run_id,
        as_of=until,
        counts={cell: int(counts.get(cell, 0)) for cell in CELLS},
        listed=int(decided.results["rank"].notna().sum()),
        seconds=time.perf_counter() - began,
    )


def publish(plan: Plan, *, progress: Progress | None = None) -> PublishReport:
    """Write the report of the newest judgement, from stored rows only."""
    from portfolio.publishing import folder, pages  # altair takes half a second to import

    began = time.perf_counter()
    with writing(plan) as store:
        run = newest(store, plan)
        data = pages.collect(store, int(run["run_id"]), plan)
        issue = folder.publish(
            pages.render(data, _counted(progress), folder.issues(plan.report_path)),
            report=plan.report_path,
            slot=_week(run["as_of"], plan),
            keep=plan.report.keep_issues,
        )
        with store.transaction():
            store.run(
                "judgement/mark_published",
                run_id=int(run["run_id"]),
                folder=issue.folder.name,
                published_at=utc(None),
            )
        store.checkpoint()
    index = plan.report_path / "index.html"
    if not index.is_file():
        raise PublishError(f"{index} was not written although publishing ended. Check the disk and publish again.")
    return PublishReport(issue.folder, index, issue.files, issue.bytes, time.perf_counter() - began, issue.left_over)


def run(
    plan: Plan,
    registry: Registry,
    *,
    as_of: datetime | None = None,
    slot: str | None = None,
    progress: Progress | None = None,
) -> RunReport:
    """The weekly job: pull, judge, publish."""
    with _stage(progress, "pull"):
        pulled = pull(plan, registry, progress=progress)
    with _stage(progress, "judge"):
        judged = judge(plan, registry, as_of=as_of, slot=slot, progress=progress)
    with _stage(progress, "publish"):
        published = publish(plan, progress=progress)
    return RunReport(pulled, judged, published)


def _save(
    store: Store,
    plan: Plan,
    measured: Measured,
    decided: triage.Decisions,
    until: datetime,
    since: datetime,
    version: int,
    slot: str | None,
    seconds: float,
) -> int:
    run_id, newest_load = store.rows("judgement/next_run")[0]
    judged_at = utc(None)
    run = pd.DataFrame(
        [
            {
                "run_id": run_id,
                "slot": slot,
                "as_of": until.replace(tzinfo=None),
                "window_from": since.replace(tzinfo=None),
                "judged_at": judged_at.replace(tzinfo=None),
                "max_load_id": newest_load,
                "registry_version": version,
                "plan_sha256": hashlib.sha256(plan.model_dump_json().encode()).hexdigest(),
                "program": f"portfolio {__version__}",
                "seconds": round(seconds, 3),
            }
        ]
    )
    results = decided.results.assign(run_id=run_id)
    evidence = measured.evidence.append_column(
        "run_id", pa.array(np.full(len(measured.evidence), run_id, dtype=np.int32))
    )
    with store.transaction():
        store.insert("runs", run)
        store.insert("results", results[[c for c in store.columns("results") if c in results]])
        store.insert("evidence", evidence)
        if len(decided.ranking):
            store.insert("ranking", decided.ranking.assign(run_id=run_id))
        store.run("judgement/forget_old_evidence", keep=plan.limits.keep_evidence_runs)
    store.checkpoint()
    return int(run_id)


def _stretches(store: Store, rows: pd.DataFrame, until: datetime, window: Window) -> np.ndarray:
    """Microseconds from which each characteristic is judged: its last logged change or new limits, else the window."""
    logged = store.frame("judgement/last_changes", as_of=until).set_index("characteristic")["changed_at"]
    change = rows["characteristic"].map(logged).fillna(window.since).to_numpy(dtype=np.int64)
    limits = rows["limits_since"].to_numpy(dtype="datetime64[us]")
    renewed = np.where(np.isnat(limits), window.since, limits.astype(np.int64))
    return np.maximum(np.maximum(change, renewed), window.since)


def _record_registry(store: Store, registry: Registry, now: datetime) -> int:
    digest = registry.sha256()
    known = store.rows("history/known_registry", sha256=digest)
    if not known:
        with store.transaction():
            store.run("history/record_registry", sha256=digest, recorded_at=now, rows_json=registry.to_json())
        known = store.rows("history/known_registry", sha256=digest)
    return int(known[0][0])


def _stage(progress: Progress | None, name: str) -> AbstractContextManager[None]:
    return nullcontext() if progress is None else progress.stage(name)


def _counted(progress: Progress | None) -> engine.Progress | None:
    return None if progress is None else progress.counted


def _week(as_of: object, plan: Plan) -> str:
    local = pd.Timestamp(as_of).tz_localize(UTC).astimezone(ZoneInfo(plan.portfolio.timezone))
    year, week, _ = local.isocalendar()
    return f"{year}-W{week:02d}"


def _micros(moment: datetime) -> int:
    return int(np.datetime64(moment.replace(tzinfo=None), "us").astype(np.int64))
