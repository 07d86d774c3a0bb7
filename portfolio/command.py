"""The command line: parse, call, print. No decision lives here.

Exit codes (contract): 0 done; 1 the job ran but something needs a person; 2 wrong use or an invalid plan or registry;
3 the store is in use; 4 the job failed. Errors go to stderr without a traceback unless --debug.
"""

from __future__ import annotations

import json
import sys
import traceback
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from portfolio import moments, summary
from portfolio.errors import DONE, FAILED, NEEDS_A_PERSON, WRONG_USE, PortfolioError, UsageError
from portfolio.version import __version__

if TYPE_CHECKING:
    from portfolio.plan import Plan
    from portfolio.registry import Registry

app = typer.Typer(
    name="portfolio",
    help="Weekly triage of measured characteristics: predictable? capable? and where would centering alone be enough?",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)
PlanFile = Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file.", show_default=True)]
AsJson = Annotated[bool, typer.Option("--json", help="Print JSON instead of text.")]
AsOf = Annotated[
    str | None,
    typer.Option(
        "--as-of", metavar="DATE", help="End of the judged window: YYYY-MM-DD (that day included) or an ISO time."
    ),
]
DEFAULT_PLAN = Path("plan.toml")
_debug = False


def _print_version(wanted: bool) -> None:
    if wanted:
        print(f"portfolio {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    debug: Annotated[bool, typer.Option("--debug", help="Show the traceback of an error.")] = False,
    version: Annotated[
        bool, typer.Option("--version", help="Print the version and end.", is_eager=True, callback=_print_version)
    ] = False,
) -> None:
    global _debug
    _debug = debug


@app.command()
def demo(
    folder: Annotated[Path, typer.Argument(help="Where to write the demo.")] = Path("demo"),
    ending: Annotated[
        str | None, typer.Option(metavar="DATE", help="Last day of the invented data (default: last Sunday).")
    ] = None,
) -> None:
    """Write an invented group of three works, run the whole job on it and say where the report is.

    Example: portfolio demo
    """
    from portfolio import demo as scenario
    from portfolio import job
    from portfolio.plan import Plan

    written = scenario.write(folder, ending=None if ending is None else moments.day(ending))
    plan = Plan.read(written.plan)
    registry = _registry(plan)
    scenario.log_changes(plan)
    _finish_run(plan, job, registry, as_of=written.end)


@app.command()
def new(folder: Annotated[Path, typer.Argument(help="Folder to start in.")]) -> None:
    """Start a new portfolio: a commented plan, a registry template and a folder for files.

    Example: portfolio new triage
    """
    from portfolio import starter

    for path in starter.create(folder):
        print(f"wrote {path}")
    print(
        f"Next: fill in {folder / 'registry.csv'}, put files into {folder / 'incoming'}, then: portfolio check {folder / 'plan.toml'}"
    )


@app.command()
def check(plan: PlanFile = DEFAULT_PLAN, as_json: AsJson = False) -> None:
    """Check plan, registry and sources; lists every problem with its place and remedy. Changes nothing.

    Example: portfolio check plan.toml
    """
    from portfolio.checks import everything

    problems = everything(plan)
    errors = [problem for problem in problems if problem.severity == "error"]
    if as_json:
        print(json.dumps({"valid": not errors, "problems": [vars(problem) for problem in problems]}, indent=1))
    else:
        for problem in problems:
            print(f"{problem.severity}: {problem}")
        print(f"{len(errors)} errors, {len(problems) - len(errors)} warnings")
    if errors:
        raise typer.Exit(WRONG_USE)


@app.command()
def pull(plan: PlanFile = DEFAULT_PLAN) -> None:
    """Bring new measurements into the store; prints for each source what was read, new, known, corrected, rejected.

    Example: portfolio pull plan.toml
    """
    from portfolio import job

    loaded = _plan(plan)
    registry = _registry(loaded)
    with _progress() as progress, progress.stage("pull"):
        report = job.pull(loaded, registry, progress=progress)
    summary.pulled(report)
    raise typer.Exit(NEEDS_A_PERSON if report.needs_a_person else DONE)


@app.command()
def judge(plan: PlanFile = DEFAULT_PLAN, as_of: AsOf = None) -> None:
    """Judge every characteristic over the window that ends at DATE (default: now) and store the result.

    Example: portfolio judge plan.toml --as-of 2026-06-30
    """
    from portfolio import job

    loaded = _plan(plan)
    registry = _registry(loaded)
    with _progress() as progress, progress.stage("judge"):
        report = job.judge(loaded, registry, as_of=moments.moment(as_of, loaded), progress=progress)
    summary.judged(report)


@app.command()
def publish(plan: PlanFile = DEFAULT_PLAN) -> None:
    """Write the report of the newest judgement.

    Example: portfolio publish plan.toml
    """
    from portfolio import job

    loaded = _plan(plan)
    with _progress() as progress, progress.stage("publish"):
        report = job.publish(loaded, progress=progress)
    summary.published(report)


@app.command()
def run(
    plan: PlanFile = DEFAULT_PLAN,
    as_of: AsOf = None,
    slot: Annotated[str | None, typer.Option(hidden=True, help="The planned time this run stands for.")] = None,
) -> None:
    """The weekly job: pull, judge, publish.

    Example: portfolio run plan.toml
    """
    from portfolio import job

    loaded = _plan(plan)
    _finish_run(loaded, job, _registry(loaded), as_of=moments.moment(as_of, loaded), slot=slot)


@app.command()
def schedule(plan: PlanFile = DEFAULT_PLAN) -> None:
    """The service: runs the jobs at the plan's times until it is stopped (SIGTERM or Ctrl+C).

    Example: portfolio schedule plan.toml
    """
    from portfolio import schedule as service

    loaded = _plan(plan)
    _registry(loaded)
    service.serve(loaded)


@app.command()
def status(plan: PlanFile = DEFAULT_PLAN, as_json: AsJson = False) -> None:
    """Last and next runs, size of the store, what each source last brought, health of the service.

    Example: portfolio status plan.toml
    """
    from portfolio import inquiry

    facts = inquiry.status(_plan(plan))
    if as_json:
        print(json.dumps(facts, indent=1))
        return
    for name, value in facts.items():
        if isinstance(value, list):
            print(f"{name.replace('_', ' ')}:")
            for item in value:
                print("  " + ", ".join(f"{key.replace('_', ' ')} {text}" for key, text in item.items() if text))
        else:
            print(f"{name.replace('_', ' ')}: {'none' if value is None else value}")


@app.command()
def explain(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file.")],
    characteristic: Annotated[str, typer.Argument(help="Its name in the registry.")],
    as_json: AsJson = False,
) -> None:
    """The whole judgement of one characteristic, in words.

    Example: portfolio explain plan.toml "shaft 12 diameter"
    """
    from portfolio import inquiry

    told = inquiry.explain(_plan(plan), characteristic)
    if as_json:
        print(
            json.dumps({"paragraphs": told.paragraphs, "facts": told.facts}, indent=1, default=str, ensure_ascii=False)
        )
        return
    summary.explained(told)


@app.command()
def rejected(
    plan: PlanFile = DEFAULT_PLAN,
    export: Annotated[Path | None, typer.Option(metavar="FILE", help="Write them to a CSV file instead.")] = None,
) -> None:
    """The rows that were set aside, with file, line and reason.

    Example: portfolio rejected plan.toml --export rejected.csv
    """
    from portfolio import export as formats
    from portfolio import inquiry

    rows = inquiry.rejected(_plan(plan))
    if export is not None:
        export.write_bytes(formats.csv_bytes(rows))
        print(f"wrote {export} ({len(rows)} rows)")
        return
    for row in rows.itertuples():
        where = "whole file" if row.record_no is None or row.record_no != row.record_no else f"line {row.record_no}"
        column = f", {row.column_name}" if isinstance(row.column_name, str) and row.column_name else ""
        print(f"{row.item}, {where}{column}: {row.reason}: {row.raw}")
    print(f"{len(rows)} rows set aside")


@app.command()
def log(
    plan: PlanFile = DEFAULT_PLAN,
    characteristic: Annotated[str | None, typer.Argument(help="Its name in the registry; leave out to list.")] = None,
    kind: Annotated[str, typer.Option(help="re-centred, tool change, gauge change, new limits or other.")] = "other",
    at: Annotated[str | None, typer.Option(metavar="TIME", help="When it was made (default: now).")] = None,
    note: Annotated[str, typer.Option(help="What was done, in a few words.")] = "",
    by: Annotated[str, typer.Option(help="Who did it.")] = "",
) -> None:
    """Record a change made to a process (a new stretch begins there), or list what was recorded.

    Example: portfolio log plan.toml "shaft 12 diameter" --kind re-centred --at 2026-06-01T10:00 --note "offset -0.02"
    """
    from portfolio import inquiry, upkeep
    from portfolio.session import nearest

    loaded = _plan(plan)
    if characteristic is None:
        for row in inquiry.changes(loaded).itertuples():
            print(f"{row.changed_at:%Y-%m-%d %H:%M} UTC  {row.characteristic}  {row.kind}  {row.note or ''}")
        return
    known = _registry(loaded).units()
    if characteristic not in known:
        raise UsageError(f"no characteristic {characteristic!r} in the registry.{nearest(characteristic, list(known))}")
    moment = moments.moment(at, loaded, whole_day=False) or datetime.now(UTC)
    upkeep.log_change(loaded, characteristic, kind, moment, note, by)
    print(f"recorded: {characteristic}, {kind}, {moment:%Y-%m-%d %H:%M} UTC")


@app.command()
def export(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file.")],
    folder: Annotated[Path, typer.Argument(help="Where to write.")],
) -> None:
    """Judgement, ranking and history as CSV, Parquet and JSON.

    Example: portfolio export plan.toml out
    """
    from portfolio import inquiry

    for path in inquiry.export(_plan(plan), folder):
        print(f"wrote {path}")


@app.command()
def backup(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file.")],
    file: Annotated[Path, typer.Argument(help="The copy to write.")],
) -> None:
    """A consistent copy of the store, verified.

    Example: portfolio backup plan.toml backup/monday.duckdb
    """
    from portfolio import upkeep

    upkeep.back_up(_plan(plan), file)
    print(f"wrote {file}")


@app.command()
def restore(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="The plan file.")],
    file: Annotated[Path, typer.Argument(help="A copy that backup wrote.")],
) -> None:
    """Put a backup in the place of the store; the replaced store is kept beside it.

    Example: portfolio restore plan.toml backup/monday.duckdb
    """
    from portfolio import upkeep

    loaded = _plan(plan)
    upkeep.restore(loaded, file)
    print(f"restored {loaded.store_path} from {file}")


def main() -> None:
    """Entry point: errors become one line and the contract's exit code."""
    try:
        app()
    except PortfolioError as error:
        if _debug:
            traceback.print_exc()
        for line in str(error).splitlines():
            print(f"portfolio: {line}", file=sys.stderr)
        sys.exit(error.exit_code)
    except OSError as error:
        if _debug:
            traceback.print_exc()
        where = f"{error.filename}: " if error.filename else ""
        print(
            f"portfolio: {where}{error.strerror or error}. Check the path, the rights and the free space.",
            file=sys.stderr,
        )
        sys.exit(FAILED)


def _plan(path: Path) -> Plan:
    from portfolio.plan import Plan

    return Plan.read(path)


def _registry(plan: Plan) -> Registry:
    from portfolio import registry

    return registry.read_checked(plan.registry_path, plan)


def _progress() -> Any:
    from portfolio.terminal import Progress

    return Progress()


def _finish_run(plan: Plan, job: Any, registry: Registry, *, as_of: datetime | None, slot: str | None = None) -> None:
    with _progress() as progress:
        report = job.run(plan, registry, as_of=as_of, slot=slot, progress=progress)
    summary.pulled(report.pull)
    summary.judged(report.judge)
    summary.published(report.publish)
    raise typer.Exit(NEEDS_A_PERSON if report.needs_a_person else DONE)
