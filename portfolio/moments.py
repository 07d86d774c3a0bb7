"""Dates and times as a person types them."""

from __future__ import annotations

from datetime import date, datetime, time
from typing import TYPE_CHECKING
from zoneinfo import ZoneInfo

from portfolio.errors import UsageError

if TYPE_CHECKING:
    from portfolio.plan import Plan


def moment(text: str | None, plan: Plan, *, whole_day: bool = True) -> datetime | None:
    """A date or ISO time in the plan's zone; a bare date means the end of that day (its start for a change)."""
    if text is None:
        return None
    zone = ZoneInfo(plan.portfolio.timezone)
    if len(text) == 10:
        return datetime.combine(day(text), time(23, 59, 59) if whole_day else time(), zone)
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise UsageError(f"{text!r} is not a time. Use YYYY-MM-DD or YYYY-MM-DDTHH:MM.") from None
    return moment if moment.tzinfo else moment.replace(tzinfo=zone)


def day(text: str) -> date:
    """A date in ISO 8601."""
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise UsageError(f"{text!r} is not a date. Use YYYY-MM-DD.") from None
