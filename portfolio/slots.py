"""Times at which the service works, as slots: one key for each planned local time.

A slot is named by its LOCAL time and zone ("2026-10-25T02:30 Europe/Vienna"), so that the hour that comes twice in
autumn is one slot. What is due is always recomputed from the last slot that was published; no job store can forget it.
"""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

from apscheduler.triggers.cron import CronTrigger

FARTHEST = timedelta(weeks=8)
"How far back missed slots are looked for; only the newest is run anyway."


def trigger(cron: str, zone: str) -> CronTrigger:
    """The cron line as a trigger in the plan's zone (a bare trigger would take the machine's)."""
    return CronTrigger.from_crontab(cron, timezone=ZoneInfo(zone))


def key(moment: datetime, zone: str) -> str:
    """The name of the slot at this moment."""
    # Through UTC: a local time that the clock skips in spring becomes the hour after it.
    return f"{moment.astimezone(UTC).astimezone(ZoneInfo(zone)):%Y-%m-%dT%H:%M} {zone}"


def start(name: str) -> datetime:
    """The moment (UTC) at which a slot begins; the first of two where the local hour comes twice."""
    local, zone = name.split(" ", 1)
    return datetime.fromisoformat(local).replace(tzinfo=ZoneInfo(zone)).astimezone(UTC)


def between(cron: str, zone: str, after: datetime, until: datetime) -> list[str]:
    """Names of all slots in (after, until], each once, oldest first."""
    firing = trigger(cron, zone)
    names: list[str] = []
    moment = after.astimezone(UTC) + timedelta(microseconds=1)
    while True:
        # Stepping in UTC: an aware local time inside the doubled hour would return the same slot for ever.
        following = firing.get_next_fire_time(None, moment)
        if following is None or following > until:
            return names
        name = key(following, zone)
        if name not in names[-2:]:
            names.append(name)
        moment = following.astimezone(UTC) + timedelta(microseconds=1)


def due(cron: str, zone: str, last_published: str | None, now: datetime) -> list[str]:
    """Slots that were planned since the last published one and have not run, oldest first.

    The newest of them is the one to run now; the others are past. Without any published slot nothing was missed: the
    service begins with the next one.
    """
    if last_published is None:
        return []
    after = max(start(last_published), now - FARTHEST)
    return [name for name in between(cron, zone, after, now) if name != last_published]


def following(cron: str, zone: str, now: datetime) -> datetime | None:
    """The next moment after `now` at which the cron line fires, in UTC; None if it never does."""
    moment = trigger(cron, zone).get_next_fire_time(None, now.astimezone(UTC) + timedelta(microseconds=1))
    return None if moment is None else moment.astimezone(UTC)
