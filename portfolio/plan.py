"""plan.toml as a checked model: every setting of the program, its default and the reason for it, once.

Paths in a plan are relative to the plan file. `plan_file.read` finds every problem of a file at once.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

Share = Annotated[float, Field(ge=0.0, le=1.0)]


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class Portfolio(_Section):
    """What is judged and where things lie."""

    title: str = "Weekly triage"
    store: str = "portfolio.duckdb"
    registry: str = "registry.csv"
    report: str = "report"
    timezone: str = "UTC"
    window_weeks: Annotated[int, Field(ge=1, le=520)] = 13
    "Weeks of measurements that are judged; a quarter holds enough subgroups and is still the present process."


class Source(_Section):
    """One place that measurements come from."""

    name: str
    kind: Literal["files", "database"] = "files"
    path: str | None = None
    "Glob of the files, relative to the plan."
    layout: Literal["long", "wide"] = "long"
    "long: one value a row. wide: one column a characteristic."
    columns: dict[str, str] = {}
    "Canonical name = column in the source; names that are not given stand for themselves."
    prefix: str = ""
    "Put before each characteristic's name (wide files of several runs or machines)."
    delimiter: str | None = None
    "Default: found from the header line among comma, semicolon, tab and bar."
    decimal: Literal[".", ","] = "."
    thousands: Literal["", ".", ",", " ", "'"] = ""
    encoding: str = "utf-8"
    time_format: str | None = None
    "strptime format of taken_at; default: ISO 8601. Exactly one format a source: guessing swaps day and month."
    timezone: str | None = None
    "Zone of times without an offset; default: the plan's."
    skip: Annotated[int, Field(ge=0)] = 0
    "Lines before the header."
    empty: Literal["not measured", "reject"] = "not measured"
    "What an empty value means: skipped and counted, or set aside as an error."
    settle_seconds: Annotated[float, Field(ge=0)] = 0.0
    "A file younger than this is left for the next pull (it may still be written)."
    url: str | None = None
    url_env: str | None = None
    query: str | None = None
    overlap_hours: Annotated[float, Field(ge=0)] = 24.0
    "How far a database is read again behind the newest known time: late commits are not lost."


class Schedule(_Section):
    """When the service works, as cron lines in the plan's time zone (days of the week by name)."""

    pull: str = "30 5 * * *"
    publish: str = "0 6 * * mon"
    timeout_minutes: Annotated[float, Field(gt=0)] = 120.0
    "A run that takes longer is ended and counted as failed."


class Judgement(_Section):
    """Thresholds of the judgement. Reasons: the measured studies named in DEVELOPERS.md."""

    false_discovery: Share = 0.05
    "Share of false alarms tolerated among the characteristics called unstable (Benjamini & Hochberg)."
    minimum_subgroups: Annotated[int, Field(ge=8)] = 20
    minimum_values: Annotated[int, Field(ge=20)] = 30
    minimum_df: Annotated[float, Field(ge=5)] = 25.0
    practical_size: Share = 0.05
    "Share of the variance that a movement must explain before it counts as unstable."
    confidence: Annotated[float, Field(gt=0.5, lt=1.0)] = 0.95
    "Each one-sided bound of an index."
    list_chance: Share = 0.5
    "Chance of reaching the target after centering from which a characteristic enters the list."
    should_reach_chance: Share = 0.8
    keep_chance: Share = 0.35
    "A listed characteristic stays until its chance falls below this (no flicker from week to week)."
    setting_sd_share: Annotated[float, Field(ge=0)] = 0.0
    "Uncertainty of setting a machine, as a share of the process sigma."
    silent_days: Annotated[float, Field(gt=0)] = 21.0
    "A characteristic without a value for longer than this is not judged ('no data since')."


class Limits(_Section):
    """What the store may use and how much wrong data is tolerated."""

    memory: str = "1GB"
    threads: Annotated[int, Field(ge=1)] = 2
    temporary_folder: str | None = None
    rejected_share: Share = 0.05
    "A file with a larger share of rows set aside is refused whole."
    keep_evidence_runs: Annotated[int, Field(ge=1)] = 8
    "Judgements whose chart data stay in the store; the verdicts stay for ever."


class Report(_Section):
    """How the report looks."""

    cards: Annotated[int, Field(ge=1, le=5)] = 3
    decimal: Literal[".", ","] = "."
    language: Literal["en"] = "en"
    keep_issues: Annotated[int, Field(ge=1)] = 60


class Plan(_Section):
    """Everything a run needs to know besides the registry. `folder` is where the plan file lies."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    portfolio: Portfolio = Portfolio()
    targets: dict[str, Annotated[float, Field(ge=1.0, le=5.0)]] = {"default": 1.33, "critical": 1.67}
    source: list[Source] = []
    schedule: Schedule = Schedule()
    judgement: Judgement = Judgement()
    limits: Limits = Limits()
    report: Report = Report()
    path: Path = Field(default=Path("plan.toml"), exclude=True)

    @classmethod
    def read(cls, path: Path) -> Plan:
        """Read and check a plan file; `PlanError` lists every problem with its place and remedy."""
        from portfolio import plan_file

        return plan_file.read(Path(path))

    @property
    def folder(self) -> Path:
        """Folder of the plan file; every path of the plan starts here."""
        return self.path.parent

    @property
    def store_path(self) -> Path:
        """The DuckDB file."""
        return self.folder / self.portfolio.store

    @property
    def registry_path(self) -> Path:
        """The registry file."""
        return self.folder / self.portfolio.registry

    @property
    def report_path(self) -> Path:
        """The published folder."""
        return self.folder / self.portfolio.report
