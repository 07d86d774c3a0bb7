"""The service: runs the plan's two crons until it is stopped, each run in a child process of its own.

The parent only keeps time. A run that crashes, hangs or eats memory ends its child; the service goes on and the next
slot is tried. What was missed while the service was down is recomputed from the store: the newest missed slot is run
once, older ones are passed over and said.
"""

from __future__ import annotations

import ctypes
import json
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from apscheduler.events import EVENT_SCHEDULER_STARTED
from apscheduler.executors.pool import ThreadPoolExecutor
from apscheduler.schedulers.base import BaseScheduler
from apscheduler.schedulers.blocking import BlockingScheduler
from apscheduler.triggers.interval import IntervalTrigger

from portfolio import slots
from portfolio.errors import NEEDS_A_PERSON, StoreBusyError
from portfolio.health import BEAT_SECONDS, health_path
from portfolio.locks import hold
from portfolio.plan import Plan

GRACE_SECONDS = 5
"Time between asking a run to end and ending it."
PR_SET_PDEATHSIG = 1


@dataclass
class Service:
    """Jobs of one plan. `call` runs `portfolio` with arguments and returns its exit code (replaced in tests)."""

    plan: Plan
    call: Callable[[list[str]], int]
    now: Callable[[], datetime] = field(default=lambda: datetime.now(UTC))
    state: dict[str, Any] = field(default_factory=dict)
    _lock: threading.Lock = field(default_factory=threading.Lock)

    @property
    def health_path(self) -> Path:
        """Where the service says how it is."""
        return health_path(self.plan)

    def add_to(self, scheduler: BaseScheduler) -> None:
        """Register the two crons and the beat; one executor, so that runs never overlap."""
        zone = self.plan.portfolio.timezone
        options: dict[str, Any] = {"max_instances": 1, "coalesce": True, "misfire_grace_time": None}
        # The catch-up is an early firing of the same job, so that it can never run beside the planned one.
        early = {"next_run_time": self.now()} if self.missed() else {}
        for name, cron, job in (
            ("pull", self.plan.schedule.pull, self.pull),
            ("publish", self.plan.schedule.publish, self.publish),
        ):
            scheduler.add_job(
                job, slots.trigger(cron, zone), id=name, **options, **(early if name == "publish" else {})
            )
        scheduler.add_job(self.beat, IntervalTrigger(seconds=BEAT_SECONDS), id="beat", executor="beat", **options)

    def pull(self) -> None:
        """Bring in what is new."""
        self._work("pull", ["pull", str(self.plan.path)])

    def publish(self) -> None:
        """The weekly job for every slot that is due: the newest runs, older ones are passed over."""
        now = self.now()
        cron, zone = self.plan.schedule.publish, self.plan.portfolio.timezone
        last = self.state.get("last_slot")
        planned = slots.due(cron, zone, last, now) if last else slots.between(cron, zone, now - slots.FARTHEST, now)
        if not planned:
            return
        *missed, slot = planned
        if last:
            for name in missed:
                say("missed", slot=name, why="the service was not running or the run failed")
        code = self._work("run", ["run", str(self.plan.path), "--slot", slot])
        if code in (0, NEEDS_A_PERSON):
            self.state["last_slot"] = slot
            self.beat()

    def missed(self) -> bool:
        """Whether a slot passed while the service was down."""
        zone = self.plan.portfolio.timezone
        return bool(slots.due(self.plan.schedule.publish, zone, self.state.get("last_slot"), self.now()))

    def beat(self) -> None:
        """Write the health file (replaced in one step, so that a reader never sees half of it)."""
        now, zone = self.now(), self.plan.portfolio.timezone
        with self._lock:
            content = {
                "beat": now.isoformat(timespec="seconds"),
                "pid": os.getpid(),
                **self.state,
                "next_pull": _iso(slots.following(self.plan.schedule.pull, zone, now)),
                "next_publish": _iso(slots.following(self.plan.schedule.publish, zone, now)),
            }
            temporary = self.health_path.with_name(self.health_path.name + ".new")
            temporary.write_text(json.dumps(content, indent=1), encoding="utf-8")
            temporary.replace(self.health_path)

    def _work(self, name: str, arguments: list[str]) -> int:
        self.state.update(running=name, running_since=self.now().isoformat(timespec="seconds"))
        self.beat()
        say("started", job=name)
        code = self.call(arguments)
        self.state.update(running=None, running_since=None, last_job=name, last_code=code)
        self.beat()
        say("ended", job=name, code=code)
        return code


def serve(plan: Plan) -> None:
    """Run until SIGTERM or SIGINT. One service a store: a second one raises `StoreBusyError`."""
    lock = plan.store_path.with_name(plan.store_path.name + ".service")
    plan.store_path.parent.mkdir(parents=True, exist_ok=True)
    try:
        with hold(lock):
            _serve(plan)
    except StoreBusyError as error:
        raise StoreBusyError(f"another service works for {plan.path}: {error}. Stop it first.") from error


def _serve(plan: Plan) -> None:
    child = Child(plan.schedule.timeout_minutes * 60)
    service = Service(plan, child.run)
    service.state["last_slot"] = last_published_slot(plan)
    scheduler = BlockingScheduler(
        timezone=plan.portfolio.timezone, executors={"default": ThreadPoolExecutor(1), "beat": ThreadPoolExecutor(1)}
    )
    service.add_to(scheduler)

    stopping, running = threading.Event(), threading.Event()
    received: list[int] = []

    def started(_event: object) -> None:
        service.beat()
        say("serving", plan=str(plan.path), pid=os.getpid())
        running.set()

    def end_in_order() -> None:
        # In a thread of its own: a signal handler may interrupt the very print or wait it would need.
        stopping.wait()
        say("stopping", signal=signal.Signals(received[0]).name)
        child.stop()
        running.wait()
        scheduler.shutdown(wait=True)

    def stop(number: int, _frame: object) -> None:
        if not received:
            received.append(number)
            stopping.set()

    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, stop)
    scheduler.add_listener(started, EVENT_SCHEDULER_STARTED)
    threading.Thread(target=end_in_order, daemon=True).start()
    scheduler.start()
    say("stopped")


class Child:
    """One run in a process of its own: ended with its whole group on timeout or stop, and when the service dies."""

    def __init__(self, timeout: float) -> None:
        self._timeout = timeout
        self._process: subprocess.Popen[bytes] | None = None
        self._stopping = False

    def run(self, arguments: list[str]) -> int:
        """Run `portfolio ARGUMENTS`; the exit code, negative when a signal ended it."""
        if self._stopping:
            return -signal.SIGTERM
        self._process = subprocess.Popen(
            [sys.executable, "-m", "portfolio", *arguments], start_new_session=True, preexec_fn=_die_with_parent
        )
        try:
            return self._process.wait(self._timeout)
        except subprocess.TimeoutExpired:
            say("timeout", seconds=self._timeout, arguments=arguments)
            self.end()
            return self._process.wait()
        finally:
            self._process = None

    def stop(self) -> None:
        """End the present run and start no other."""
        self._stopping = True
        self.end()

    def end(self) -> None:
        """Ask the run to end, then end it."""
        process = self._process
        if process is None:
            return
        for number in (signal.SIGTERM, signal.SIGKILL):
            try:
                os.killpg(process.pid, number)
                process.wait(GRACE_SECONDS)
            except subprocess.TimeoutExpired:
                continue
            except ProcessLookupError:
                return
            return


def _die_with_parent() -> None:
    ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGKILL)


def last_published_slot(plan: Plan) -> str | None:
    """The newest slot that was published, asked in a child process: the service itself never opens the store."""
    if not plan.store_path.exists():
        return None
    answer = subprocess.run(
        [sys.executable, "-m", "portfolio", "status", str(plan.path), "--json"],
        capture_output=True,
        text=True,
        check=False,
    )
    if answer.returncode not in (0, NEEDS_A_PERSON):
        say("unknown", what="last published slot", why=answer.stderr.strip())
        return None
    slot = json.loads(answer.stdout).get("last_slot")
    return slot if isinstance(slot, str) else None


def say(event: str, **facts: object) -> None:
    """One JSON object a line on stderr."""
    line = {"time": datetime.now(UTC).isoformat(timespec="seconds"), "event": event, **facts}
    print(json.dumps(line), file=sys.stderr, flush=True)


def _iso(moment: datetime | None) -> str | None:
    return None if moment is None else moment.isoformat(timespec="seconds")
