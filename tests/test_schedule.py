"""The service under a fake clock: the real scheduler's job processing, no threads, no sleeping."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from datetime import UTC, datetime, timedelta

import pytest
import time_machine
from apscheduler.executors.debug import DebugExecutor
from apscheduler.schedulers.base import BaseScheduler

from portfolio.errors import StoreBusyError
from portfolio.health import health_path
from portfolio.locks import hold
from portfolio.plan import Plan, Portfolio, Schedule
from portfolio.schedule import Child, Service, serve


class SteppedScheduler(BaseScheduler):
    """A scheduler that works only when it is told to."""

    def wakeup(self):
        pass

    def shutdown(self, wait=True):
        super().shutdown(wait)

    def step(self):
        return self._process_jobs()


def the_plan(folder, **schedule) -> Plan:
    return Plan(portfolio=Portfolio(timezone="Europe/Vienna"), schedule=Schedule(**schedule), path=folder / "plan.toml")


def served(plan, begin, until, codes=(), last_slot=None):
    """Calls the service makes from `begin` to `until`, and its state at the end."""
    calls, answers = [], list(codes)

    def call(arguments):
        calls.append((datetime.now(UTC).isoformat(timespec="minutes")[:16], *arguments[:1], *arguments[2:]))
        return answers.pop(0) if answers else 0

    service = Service(plan, call)
    service.state["last_slot"] = last_slot
    with time_machine.travel(begin, tick=False) as clock:
        scheduler = SteppedScheduler(
            timezone="Europe/Vienna", executors={"default": DebugExecutor(), "beat": DebugExecutor()}
        )
        service.add_to(scheduler)
        scheduler.remove_job("beat") if scheduler.get_job("beat") else None
        scheduler.start()
        while datetime.now(UTC) < until:
            wait = scheduler.step()
            clock.shift(timedelta(seconds=max(wait or 0, 0.001)))
        scheduler.shutdown()
    return calls, service.state


def utc(text):
    return datetime.fromisoformat(text).replace(tzinfo=UTC)


def test_a_week_has_seven_pulls_and_one_published_run(tmp_path):
    calls, state = served(the_plan(tmp_path), utc("2026-06-01T12:00"), utc("2026-06-08T12:00"))
    assert [call for call in calls if call[1] == "run"] == [
        ("2026-06-08T04:00", "run", "--slot", "2026-06-08T06:00 Europe/Vienna")
    ]
    assert sum(call[1] == "pull" for call in calls) == 7
    assert state["last_slot"] == "2026-06-08T06:00 Europe/Vienna"


def test_the_doubled_autumn_hour_publishes_once(tmp_path):
    calls, _ = served(
        the_plan(tmp_path, publish="30 2 * * sun"), utc("2026-10-24T12:00"), utc("2026-10-26T12:00"),
    )  # fmt: skip
    assert [call[2:] for call in calls if call[1] == "run"] == [("--slot", "2026-10-25T02:30 Europe/Vienna")]


def test_only_the_newest_missed_slot_is_run_after_a_stop(tmp_path, capsys):
    calls, _ = served(
        the_plan(tmp_path), utc("2026-06-24T12:00"), utc("2026-06-24T13:00"), last_slot="2026-06-01T06:00 Europe/Vienna"
    )
    assert [call[3] for call in calls if call[1] == "run"] == ["2026-06-22T06:00 Europe/Vienna"]
    said = [json.loads(line) for line in capsys.readouterr().err.splitlines()]
    assert [line["slot"][:10] for line in said if line["event"] == "missed"] == ["2026-06-08", "2026-06-15"]


def test_a_failed_run_leaves_the_slot_due_and_the_service_alive(tmp_path):
    calls, state = served(
        the_plan(tmp_path), utc("2026-06-08T03:50"), utc("2026-06-15T12:00"), codes=[4],
        last_slot="2026-06-01T06:00 Europe/Vienna",
    )  # fmt: skip
    runs = [call[3] for call in calls if call[1] == "run"]
    assert runs == ["2026-06-08T06:00 Europe/Vienna", "2026-06-15T06:00 Europe/Vienna"]
    assert state["last_code"] == 0


def test_the_health_file_tells_the_last_code_and_the_next_times(tmp_path):
    plan = the_plan(tmp_path)
    served(plan, utc("2026-06-08T03:50"), utc("2026-06-08T12:00"), codes=[1])
    health = json.loads(health_path(plan).read_text())
    assert health["last_code"] == 1
    assert health["last_slot"] == "2026-06-08T06:00 Europe/Vienna"
    assert health["next_publish"].startswith("2026-06-15T04:00")


def test_a_second_service_is_refused(tmp_path):
    plan = the_plan(tmp_path)
    with (
        hold(plan.store_path.with_name(plan.store_path.name + ".service")),
        pytest.raises(StoreBusyError, match="service"),
    ):
        serve(plan)


def test_a_child_that_hangs_is_ended_after_its_time(tmp_path, monkeypatch):
    monkeypatch.setattr("portfolio.schedule.sys.executable", "/bin/sh")
    monkeypatch.setattr("portfolio.schedule.GRACE_SECONDS", 0.2)
    hanging = tmp_path / "hang.sh"
    hanging.write_text("sleep 60\n")
    child = Child(timeout=0.2)
    popen = subprocess.Popen
    monkeypatch.setattr(
        "portfolio.schedule.subprocess.Popen",
        lambda arguments, **options: popen(["/bin/sh", str(hanging)], **options),
    )
    began = time.monotonic()
    assert child.run([]) == -signal.SIGTERM
    assert time.monotonic() - began < 30


def test_sigterm_ends_the_service_in_order(tmp_path):
    (tmp_path / "plan.toml").write_text('[portfolio]\ntitle = "T"\n')
    (tmp_path / "registry.csv").write_text("characteristic,lsl,usl\nA,1,2\n")
    command = [sys.executable, "-m", "portfolio", "schedule", str(tmp_path / "plan.toml")]
    with subprocess.Popen(command, stderr=subprocess.PIPE, text=True) as process:
        assert process.stderr is not None
        for line in process.stderr:
            if '"serving"' in line:
                break
        os.kill(process.pid, signal.SIGTERM)
        rest = process.stderr.read()
        assert process.wait(30) == 0, rest
    assert '"stopped"' in rest
