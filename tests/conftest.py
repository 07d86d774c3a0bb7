"""What many tests share: one run of the demo, made once."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from pathlib import Path

import pandas as pd
import pytest

from portfolio import demo, job, registry
from portfolio.face import Weekly
from portfolio.plan import Plan

ENDING = date(2026, 6, 28)


@dataclass(frozen=True)
class DemoRun:
    """A finished demo: plan, reports of the steps, the judgement and the truth."""

    plan: Plan
    report: job.RunReport
    written: demo.Demo
    results: pd.DataFrame
    truth: pd.DataFrame

    @property
    def issue(self) -> Path:
        return self.report.publish.folder


@pytest.fixture(scope="session")
def demo_run(tmp_path_factory) -> DemoRun:
    folder = tmp_path_factory.mktemp("demo")
    written = demo.write(folder, ending=ENDING)
    plan = Plan.read(written.plan)
    known = registry.read_checked(plan.registry_path, plan)
    demo.log_changes(plan)
    report = job.run(plan, known, as_of=written.end)
    truth = pd.read_csv(folder / "truth" / "truth.csv")
    return DemoRun(plan, report, written, Weekly(plan).judgement, truth)
