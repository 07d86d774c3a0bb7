"""The weekly job, step by step: pull, judge, publish; and the questions that the command line asks.

Each step takes the store's lock, does its work in transactions, and leaves the store checkpointed. A crash between
two steps leaves the results of the finished ones; every step can be repeated without effect on what is done.
"""

from __future__ import annotations

import hashlib
import time
from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager, nullcontext
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pyarrow as pa

from portfolio import engine, intake, triage
from portfolio.errors import PublishError, StoreError, UsageError
from portfolio.intake import SourceReport
from portfolio.judgement import Measured, Window
from portfolio.locks import hold
from portfolio.plan import Plan
from portfolio.registry import Registry
from portfolio.result import CELLS
from portfolio.store import Store, backup
from portfolio.store import restore as restore_file
from portfolio.store_reader import StoreReader
from portfolio.terminal import Progress
from portfolio.version import __version__

if TYPE_CHECKING:
    from portfolio.publishing.wording import Explanation

CHANGE_KINDS = ("re-centred", "tool change", "gauge change", "new limits", "other")


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
    moment = _utc(now)
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
    until = _utc(as_of)
    since = until - timedelta(weeks=plan.portfolio.window_weeks)
    with writing(plan) as store:
        version = _record_registry(store, registry, _utc(None))
        rows = registry.as_of(until)
        if rows.empty:
            raise UsageError(f"{plan.registry_path}: no characteristic is valid at {until:%Y-%m-%d}. Check valid_from.")
        window = Window(_micros(since), _micros(until))
        reader = StoreReader(store, rows["characteristic"], since, until)
        stretch = _stretches(store, rows, until, window)
        measured = engine.judge(reader, rows, window, stretch, plan.judgement, progress=_counted(progress))
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
                published_at=_utc(None),
            )
        store.checkpoint()
    index = plan.report_path / "index.html"
    if not index.is_file():
        raise PublishError(f"{index} was not written although publishing ended. Check the disk and publish again.")
    return PublishReport(issue.folder, index, issue.files, issue.bytes, time.perf_counter() - began)


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


def explain(plan: Plan, characteristic: str) -> Explanation:
    """The whole judgement of one characteristic in words, from the newest stored run."""
    from portfolio.publishing import wording

    with reading(plan) as store:
        run = newest(store, plan)
        row = store.frame(
            "judgement/result_of_characteristic", run_id=int(run["run_id"]), characteristic=characteristic
        )
        if row.empty:
            names = store.frame("judgement/results_of_run", run_id=int(run["run_id"]))["characteristic"].tolist()
            raise UsageError(
                f"no characteristic {characteristic!r} in the newest judgement.{nearest(characteristic, names)}"
            )
    return wording.explanation(row.to_dict("records")[0], plan)


def export(plan: Plan, folder: Path) -> list[Path]:
    """The newest judgement, its ranking and the history of the index as CSV, Parquet and JSON."""
    from portfolio import export as formats
    from portfolio.publishing import wording

    with reading(plan) as store:
        run_id = int(newest(store, plan)["run_id"])
        judgement = store.frame("judgement/results_of_run", run_id=run_id)
        ranking = store.frame("judgement/ranking_of_run", run_id=run_id)
        history = store.frame("history/index_history", run_id=run_id)
    judgement["reasons"] = [wording.reasons(row) for row in judgement.to_dict("records")]
    return formats.write(folder, {"judgement": judgement, "ranking": ranking, "history": history})


def rejected(plan: Plan) -> pd.DataFrame:
    """Every row that was set aside, with source, file, line, column and reason."""
    with reading(plan) as store:
        return store.frame("history/rejected")


def log_change(plan: Plan, characteristic: str, kind: str, at: datetime, note: str = "", by: str = "") -> None:
    """Record a change made to a process; the next judgement starts a new stretch there."""
    if kind not in CHANGE_KINDS:
        raise UsageError(f"unknown kind of change {kind!r}. Use one of: {', '.join(CHANGE_KINDS)}.")
    with writing(plan) as store, store.transaction():
        store.run(
            "history/log_change",
            characteristic=characteristic,
            changed_at=_utc(at),
            kind=kind,
            note=note,
            logged_at=_utc(None),
            logged_by=by,
        )


def changes(plan: Plan) -> pd.DataFrame:
    """Logged changes, newest first."""
    with reading(plan) as store:
        return store.frame("history/changes")


def back_up(plan: Plan, file: Path) -> None:
    """A verified copy of the store."""
    if not plan.store_path.exists():
        raise StoreError(f"{plan.store_path} does not exist yet: there is nothing to copy.")
    with hold(plan.store_path):
        backup(plan.store_path, file)


def restore(plan: Plan, file: Path) -> None:
    """Put a copy in the place of the store."""
    with hold(plan.store_path):
        restore_file(file, plan.store_path)


def status(plan: Plan) -> dict[str, object]:
    """Last run, store size and what the last pull said of each source."""
    with reading(plan) as store:
        runs = store.frame("judgement/runs")
        pulls = store.frame("history/last_pulls")
        size = store.size()
    last = runs.iloc[-1] if len(runs) else None
    published = runs[runs["published_at"].notna() & runs["slot"].notna()]
    return {
        **_service(plan),
        "last_slot": str(published["slot"].iloc[-1]) if len(published) else None,
        "store": str(plan.store_path),
        "store_bytes": size,
        "judgements": len(runs),
        "last_judged": None if last is None else _text(last["judged_at"]),
        "last_as_of": None if last is None else _text(last["as_of"]),
        "last_published": None if last is None else _text(last["published_at"]),
        "newest_issue": None if last is None else (last["folder"] if isinstance(last["folder"], str) else None),
        "sources": [
            {
                "source": row.source,
                "status": row.status,
                "pulled_at": _text(row.pulled_at),
                "message": row.message or "",
            }
            for row in pulls.itertuples()
        ],
    }


def _service(plan: Plan) -> dict[str, object]:
    """Next times by the plan, and what the service last said of itself."""
    from portfolio import schedule, slots

    now, zone = _utc(None), plan.portfolio.timezone
    health = schedule.read_health(plan)
    beat = health.get("beat")
    alive = beat is not None and now - datetime.fromisoformat(str(beat)) < timedelta(seconds=4 * schedule.BEAT_SECONDS)
    upcoming = {
        f"next_{name}": None if moment is None else moment.isoformat()
        for name, cron in (("pull", plan.schedule.pull), ("publish", plan.schedule.publish))
        for moment in (slots.following(cron, zone, now),)
    }
    return {"service": "running" if alive else "not running", "service_last_code": health.get("last_code"), **upcoming}


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
    judged_at = _utc(None)
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


def _stretches(store: Store, rows: pd.DataFrame, until: datetime, window: Window) -> np.ndarray:  # type: ignore[type-arg]
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


def newest(store: Store, plan: Plan) -> dict[str, object]:
    """The newest judgement; `UsageError` when there is none."""
    runs = store.frame("judgement/newest_run")
    if runs.empty:
        raise UsageError(f"{plan.store_path.name} holds no judgement yet. Run: portfolio run {plan.path}")
    return dict(runs.to_dict("records")[0])


@contextmanager
def writing(plan: Plan) -> Iterator[Store]:
    """The store, locked and open for writing."""
    plan.store_path.parent.mkdir(parents=True, exist_ok=True)
    with hold(plan.store_path), _open(plan, read_only=False) as store:
        yield store


@contextmanager
def reading(plan: Plan) -> Iterator[Store]:
    """The store, locked and open for reading."""
    if not plan.store_path.exists():
        raise StoreError(f"{plan.store_path} does not exist yet. Run: portfolio run {plan.path}")
    with hold(plan.store_path), _open(plan, read_only=True) as store:
        yield store


def _open(plan: Plan, *, read_only: bool) -> Store:
    return Store.open(
        plan.store_path,
        read_only=read_only,
        memory=plan.limits.memory,
        threads=plan.limits.threads,
        temporary_folder=None if plan.limits.temporary_folder is None else plan.folder / plan.limits.temporary_folder,
    )


def _stage(progress: Progress | None, name: str) -> AbstractContextManager[None]:
    return nullcontext() if progress is None else progress.stage(name)


def _counted(progress: Progress | None) -> engine.Progress | None:
    return None if progress is None else progress.counted


def _week(as_of: object, plan: Plan) -> str:
    local = pd.Timestamp(as_of).tz_localize(UTC).astimezone(ZoneInfo(plan.portfolio.timezone))  # type: ignore[arg-type]
    year, week, _ = local.isocalendar()
    return f"{year}-W{week:02d}"


def _utc(moment: datetime | None) -> datetime:
    """The moment in UTC, without microseconds; now when none is given."""
    if moment is None:
        return datetime.now(UTC).replace(microsecond=0)
    if moment.tzinfo is None:
        raise ValueError(f"a time without a zone is ambiguous: {moment}")
    return moment.astimezone(UTC)


def _micros(moment: datetime) -> int:
    return int(np.datetime64(moment.replace(tzinfo=None), "us").astype(np.int64))


def _text(moment: object) -> str | None:
    stamp = pd.Timestamp(moment)  # type: ignore[arg-type]
    return None if pd.isna(stamp) else stamp.isoformat() + "Z"


def nearest(name: str, names: list[str]) -> str:
    """A hint for a name that is not known: the nearest ones."""
    from difflib import get_close_matches

    near = get_close_matches(name, names, n=3, cutoff=0.5)
    return f" Did you mean {' or '.join(near)}?" if near else " See list.html of the report for the names."
