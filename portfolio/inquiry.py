"""Questions about what is stored; nothing here changes a store."""

from __future__ import annotations

from datetime import datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from portfolio import export as formats
from portfolio import slots
from portfolio.errors import UsageError
from portfolio.health import BEAT_SECONDS, read_health
from portfolio.plan import Plan
from portfolio.result import CONTRACT_COLUMNS
from portfolio.session import nearest, newest, reading, text, utc

if TYPE_CHECKING:
    from portfolio.publishing.wording import Explanation


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
    from portfolio.publishing import wording

    with reading(plan) as store:
        run_id = int(newest(store, plan)["run_id"])
        judgement = store.frame("judgement/results_of_run", run_id=run_id)
        ranking = store.frame("judgement/ranking_of_run", run_id=run_id)
        history = store.frame("history/index_history", run_id=run_id)
    judgement["reasons"] = [wording.reasons(row) for row in judgement.to_dict("records")]
    first = list(CONTRACT_COLUMNS)
    judgement = judgement[first + [name for name in judgement if name not in first]]
    return formats.write(folder, {"judgement": judgement, "ranking": ranking, "history": history})


def rejected(plan: Plan) -> pd.DataFrame:
    """Every row that was set aside, with source, file, line, column and reason."""
    with reading(plan) as store:
        return store.frame("history/rejected")


def changes(plan: Plan) -> pd.DataFrame:
    """Logged changes, newest first."""
    with reading(plan) as store:
        return store.frame("history/changes")


def status(plan: Plan) -> dict[str, Any]:
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
        "last_judged": None if last is None else text(last["judged_at"]),
        "last_as_of": None if last is None else text(last["as_of"]),
        "last_published": None if last is None else text(last["published_at"]),
        "newest_issue": None if last is None else (last["folder"] if isinstance(last["folder"], str) else None),
        "sources": [
            {
                "source": row.source,
                "status": row.status,
                "pulled_at": text(row.pulled_at),
                "message": row.message or "",
            }
            for row in pulls.itertuples()
        ],
    }


def _service(plan: Plan) -> dict[str, Any]:
    """Next times by the plan, and what the service last said of itself."""
    now, zone = utc(None), plan.portfolio.timezone
    health = read_health(plan)
    beat = health.get("beat")
    alive = beat is not None and now - datetime.fromisoformat(str(beat)) < timedelta(seconds=4 * BEAT_SECONDS)
    upcoming = {
        f"next_{name}": None if moment is None else moment.isoformat()
        for name, cron in (("pull", plan.schedule.pull), ("publish", plan.schedule.publish))
        for moment in (slots.following(cron, zone, now),)
    }
    return {"service": "running" if alive else "not running", "service_last_code": health.get("last_code"), **upcoming}
