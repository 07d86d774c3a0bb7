"""Slots over the clock changes of 2026 (the facts of each date: the tz database)."""

from __future__ import annotations

from datetime import UTC, datetime

import pytest

from portfolio import slots

VIENNA, NEW_YORK = "Europe/Vienna", "America/New_York"


def utc(text: str) -> datetime:
    return datetime.fromisoformat(text).replace(tzinfo=UTC)


@pytest.mark.parametrize(
    ("cron", "zone", "after", "until", "expected"),
    [
        # 2026-10-25 has 02:30 twice in Vienna: one slot.
        ("30 2 * * *", VIENNA, "2026-10-24T12:00", "2026-10-26T12:00", ["2026-10-25T02:30", "2026-10-26T02:30"]),
        ("30 2 * * sun", VIENNA, "2026-10-24T12:00", "2026-10-26T12:00", ["2026-10-25T02:30"]),
        # 2026-03-29 has no 02:30: the run comes an hour later, once.
        ("30 2 * * *", VIENNA, "2026-03-28T12:00", "2026-03-29T12:00", ["2026-03-29T03:30"]),
        # 2026-11-01 has 01:30 twice in New York.
        ("30 1 * * *", NEW_YORK, "2026-10-31T12:00", "2026-11-01T12:00", ["2026-11-01T01:30"]),
        ("0 6 * * mon", VIENNA, "2026-10-20T00:00", "2026-11-03T00:00", ["2026-10-26T06:00", "2026-11-02T06:00"]),
    ],
)
def test_each_local_time_is_one_slot_over_the_clock_changes(cron, zone, after, until, expected):
    found = slots.between(cron, zone, utc(after), utc(until))
    assert found == [f"{local} {zone}" for local in expected]


def test_a_slot_begins_at_its_local_time():
    assert slots.start("2026-07-06T06:00 Europe/Vienna") == utc("2026-07-06T04:00")
    assert slots.start("2026-12-07T06:00 Europe/Vienna") == utc("2026-12-07T05:00")


def test_what_was_missed_is_recomputed_from_the_last_published_slot():
    missed = slots.due("0 6 * * mon", VIENNA, "2026-10-12T06:00 Europe/Vienna", utc("2026-11-03T08:00"))
    assert missed == [f"{day}T06:00 Europe/Vienna" for day in ("2026-10-19", "2026-10-26", "2026-11-02")]
    assert slots.due("0 6 * * mon", VIENNA, missed[-1], utc("2026-11-03T08:00")) == []


def test_a_new_service_has_missed_nothing():
    assert slots.due("0 6 * * mon", VIENNA, None, utc("2026-11-03T08:00")) == []


def test_weekday_names_fire_on_the_day_they_name():
    moment = slots.following("0 6 * * mon", VIENNA, utc("2026-11-03T08:00"))
    assert moment == utc("2026-11-09T05:00")


def test_a_cron_line_that_never_fires_has_no_following_moment():
    assert slots.following("0 6 31 2 *", VIENNA, utc("2026-11-03T08:00")) is None
