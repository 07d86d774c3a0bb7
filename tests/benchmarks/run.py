"""Speed and memory, as figures and as ratios to a floor measured in the same run. Nothing is asserted.

Run: python tests/benchmarks/run.py            a plant of 400 characteristics, 280,000 measurements
     python tests/benchmarks/run.py 50000000   the same, and judging that many rows already in a store
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

import generate

END = datetime(2026, 6, 29, tzinfo=UTC)
STEP = """
import resource, sys, time
began = time.perf_counter()
from datetime import UTC, datetime
from pathlib import Path
from portfolio import job, registry
from portfolio.plan import Plan
plan = Plan.read(Path(sys.argv[1])); known = registry.read_checked(plan.registry_path, plan)
end = datetime(2026, 6, 29, tzinfo=UTC)
imported = time.perf_counter()
work = {"pull": lambda: job.pull(plan, known), "judge": lambda: job.judge(plan, known, as_of=end),
        "publish": lambda: job.publish(plan), "run": lambda: job.run(plan, known, as_of=end)}[sys.argv[2]]
spent = time.process_time()
work()
done = time.perf_counter()
spent = time.process_time() - spent
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
print(imported - began, done - imported, spent, peak)
"""


@dataclass(frozen=True)
class Measured:
    """Seconds on the clock to import and to work, seconds of processor time of the work, peak memory in MiB."""

    imports: float
    work: float
    processor: float
    peak: float


def step(plan: Path, name: str) -> Measured:
    """One step of the job in a process of its own."""
    out = subprocess.run([sys.executable, "-c", STEP, str(plan), name], capture_output=True, text=True, check=True)
    return Measured(*(float(number) for number in out.stdout.split()[-4:]))


def timed(work: Callable[[], object]) -> tuple[float, float]:
    """Seconds on the clock and of processor time; the second is the fairer where others share the machine."""
    began, spent = time.perf_counter(), time.process_time()
    work()
    return time.perf_counter() - began, time.process_time() - spent


def plant(folder: Path) -> None:
    plan = generate.plant(folder)
    start, _ = timed(lambda: subprocess.run([sys.executable, "-c", "pass"], check=True))
    print(f"400 characteristics, 280,000 measurements; interpreter start {start:.2f} s")
    for name in ("pull", "judge", "publish"):
        found = step(plan, name)
        print(
            f"  {name:8} {found.work:6.2f} s ({found.processor:.2f} s processor; + {found.imports:.2f} s imports), "
            f"peak {found.peak:.0f} MiB"
        )
    again = generate.plant(folder / "again")
    command = [sys.executable, "-m", "portfolio", "run", str(again), "--as-of", "2026-06-28"]
    whole, _ = timed(lambda: subprocess.run(command, check=True, capture_output=True))
    print(f"  portfolio run, everything in one process: {whole:.2f} s")


def store(folder: Path, rows: int) -> None:
    plan = generate.big_store(folder, rows)
    from portfolio.store import Store

    def floor() -> None:
        with Store.open(folder / "portfolio.duckdb", read_only=True) as opened:
            each = max(1, 1_500_000 // (rows // 500))
            for first in range(0, 500, each):
                opened.arrays(
                    "judgement/measurements_in_window",
                    characteristics=list(range(first, min(first + each, 500))),
                    since=datetime(2026, 3, 30, tzinfo=UTC), until=END,
                )  # fmt: skip

    clock, processor = timed(floor)
    found = step(plan, "judge")
    print(f"{rows:,} rows in the store: reading the arrays in order {clock:.1f} s, {processor:.1f} s processor (floor)")
    print(
        f"  judge {found.work:.1f} s = {found.work / clock:.2f} times the floor, {found.processor:.1f} s processor = "
        f"{found.processor / processor:.2f} times, peak {found.peak:.0f} MiB"
    )


def main() -> None:
    with tempfile.TemporaryDirectory(prefix="portfolio-benchmark-") as folder:
        plant(Path(folder) / "plant")
        if len(sys.argv) > 1:
            store(Path(folder) / "store", int(sys.argv[1]))
    print(f"peak of this process {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB")


if __name__ == "__main__":
    main()
