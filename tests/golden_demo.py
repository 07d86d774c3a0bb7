"""Makes fixtures/demo/golden.csv: the judgement of the demo as the last reviewed program gave it.

Run: python tests/golden_demo.py, then read the difference before it is committed; each one is a change of judgement.
"""

from __future__ import annotations

import tempfile
from datetime import date
from pathlib import Path

import pandas as pd

from portfolio import demo, job, registry
from portfolio.face import Weekly
from portfolio.plan import Plan

GOLDEN = Path(__file__).parents[1] / "fixtures" / "demo" / "golden.csv"
ENDING = date(2026, 6, 28)
WORDS = ["cell", "centering", "centering_reason", "route", "instability", "capability_note"]
NUMBERS = ["index", "index_low", "index_high", "cpk_centered", "chance_centered"]


def table(results: pd.DataFrame) -> pd.DataFrame:
    """The columns that are kept, in order of name."""
    columns = ["characteristic", *WORDS, *NUMBERS, "rank"]
    return results[columns].sort_values("characteristic", ignore_index=True)


def main() -> None:
    with tempfile.TemporaryDirectory(prefix="portfolio-golden-") as folder:
        written = demo.write(Path(folder), ending=ENDING)
        plan = Plan.read(written.plan)
        known = registry.read_checked(plan.registry_path, plan)
        demo.log_changes(plan)
        job.pull(plan, known)
        job.judge(plan, known, as_of=written.end)
        golden = table(Weekly(plan).judgement)
    golden.to_csv(GOLDEN, index=False, float_format="%.9g", lineterminator="\n")


if __name__ == "__main__":
    main()
