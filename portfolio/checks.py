"""`portfolio check`: plan, registry and reachability of the sources, every problem at once, nothing changed."""

from __future__ import annotations

from pathlib import Path

from portfolio import registry
from portfolio.errors import PlanError, Problem, RegistryError
from portfolio.plan import Plan


def everything(path: Path) -> list[Problem]:
    """Every problem of a plan, its registry and its sources; errors first."""
    try:
        plan = Plan.read(path)
    except PlanError as error:
        return error.problems
    problems: list[Problem] = []
    try:
        problems += registry.read(plan.registry_path, plan).problems
    except RegistryError as error:
        problems += error.problems
    for source in plan.source:
        place = f"{path}, [[source]] '{source.name}'"
        if source.kind == "files" and not any(plan.folder.glob(source.path or "")):
            problems.append(
                Problem(
                    f"{place}, path",
                    f"no file matches '{source.path}' yet",
                    "Correct the path, or wait for files",
                    "warning",
                )
            )
    return sorted(problems, key=lambda problem: (problem.severity, problem.place))
