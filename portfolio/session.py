"""The store of a plan, locked and open; and the moments and names that every step shares."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from difflib import get_close_matches
from typing import Any

import pandas as pd

from portfolio.errors import StoreError, UsageError
from portfolio.locks import hold
from portfolio.plan import Plan
from portfolio.store import Store


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


def newest(store: Store, plan: Plan) -> dict[str, Any]:
    """The newest judgement; `UsageError` when there is none."""
    runs = store.frame("judgement/newest_run")
    if runs.empty:
        raise UsageError(f"{plan.store_path.name} holds no judgement yet. Run: portfolio run {plan.path}")
    return dict(runs.to_dict("records")[0])


def utc(moment: datetime | None) -> datetime:
    """The moment in UTC, without microseconds; now when none is given."""
    if moment is None:
        return datetime.now(UTC).replace(microsecond=0)
    if moment.tzinfo is None:
        raise ValueError(f"a time without a zone is ambiguous: {moment}")
    return moment.astimezone(UTC)


def text(moment: Any) -> str | None:
    """ISO 8601 in UTC, None where there is no moment."""
    stamp = pd.Timestamp(moment)
    return None if pd.isna(stamp) else stamp.isoformat() + "Z"


def nearest(name: str, names: list[str]) -> str:
    """A hint for a name that is not known: the nearest ones."""
    near = get_close_matches(name, names, n=3, cutoff=0.5)
    return f" Did you mean {' or '.join(near)}?" if near else " See list.html of the report for the names."


def _open(plan: Plan, *, read_only: bool) -> Store:
    return Store.open(
        plan.store_path,
        read_only=read_only,
        memory=plan.limits.memory,
        threads=plan.limits.threads,
        temporary_folder=None if plan.limits.temporary_folder is None else plan.folder / plan.limits.temporary_folder,
    )
