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
work()
done = time.perf_counter()
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
print(f"{imported - began:.2f} {done - imported:.2f} {peak:.0f}")
"""


def step(plan: Path, name: str) -> tuple[float, float, float]:
    """One step in a process of its own: seconds to import, seconds of work, peak memory in MiB."""
    out = subprocess.run([sys.executable, "-c", STEP, str(plan), name], capture_output=True, text=True, check=True)
    imports, work, peak = out.stdout.split()
    return float(imports), float(work), float(peak)


def timed(work: Callable[[], object]) -> float:
    began = time.perf_counter()
    work()
    return time.perf_counter() - began


def plant(folder: Path) -> None:
    plan = generate.plant(folder)
    start = timed(lambda: subprocess.run([sys.executable, "-c", "pass"], check=True))
    print(f"400 characteristics, 280,000 measurements; interpreter start {start:.2f} s")
    for name in ("pull", "judge", "publish"):
        imports, work, peak = step(plan, name)
        print(f"  {name:8} {work:6.2f} s (+ {imports:.2f} s imports), peak {peak:.0f} MiB")
    again = generate.plant(folder / "again")
    whole = timed(lambda: subprocess.run([sys.executable, "-m", "portfolio", "run", str(again), "--as-of", "2026-06-28"],
                                         check=True, capture_output=True))  # fmt: skip
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

    least = timed(floor)
    _, work, peak = step(plan, "judge")
    print(f"{rows:,} rows in the store: reading the arrays in order {least:.1f} s (floor)")
    print(f"  judge {work:.1f} s = {work / least:.2f} times the floor, peak {peak:.0f} MiB")


def main() -> None:
    with tempfile.TemporaryDirectory(prefix="portfolio-benchmark-") as folder:
        plant(Path(folder) / "plant")
        if len(sys.argv) > 1:
            store(Path(folder) / "store", int(sys.argv[1]))
    print(f"peak of this process {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB")


if __name__ == "__main__":
    main()
