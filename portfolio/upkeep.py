"""What a person does to a portfolio besides running it: log a change, copy the store, put a copy back."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path

from portfolio import store as stores
from portfolio.errors import StoreError, UsageError
from portfolio.locks import hold
from portfolio.plan import Plan
from portfolio.session import utc, writing

CHANGE_KINDS = ("re-centred", "tool change", "gauge change", "new limits", "other")


def log_change(plan: Plan, characteristic: str, kind: str, at: datetime, note: str = "", by: str = "") -> None:
    """Record a change made to a process; the next judgement starts a new stretch there."""
    if kind not in CHANGE_KINDS:
        raise UsageError(f"unknown kind of change {kind!r}. Use one of: {', '.join(CHANGE_KINDS)}.")
    with writing(plan) as store, store.transaction():
        store.run(
            "history/log_change",
            characteristic=characteristic,
            changed_at=utc(at),
            kind=kind,
            note=note,
            logged_at=utc(None),
            logged_by=by,
        )


def back_up(plan: Plan, file: Path) -> None:
    """A verified copy of the store."""
    if not plan.store_path.exists():
        raise StoreError(f"{plan.store_path} does not exist yet: there is nothing to copy.")
    with hold(plan.store_path):
        stores.backup(plan.store_path, file)


def restore(plan: Plan, file: Path) -> None:
    """Put a copy in the place of the store."""
    with hold(plan.store_path):
        stores.restore(file, plan.store_path)
