"""Starts a new portfolio: a plan in which every setting is written with its default and reason, and a registry template."""

from __future__ import annotations

import ast
import inspect
import json
import textwrap
from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic_core import PydanticUndefined

from portfolio import plan as model
from portfolio.errors import UsageError
from portfolio.registry import COLUMNS

HEAD = """\
# Plan of one portfolio. Paths are relative to this file. Settings behind '#' stand at their defaults.
# Check it with: portfolio check plan.toml
"""
SOURCE_EXAMPLE = """\
[[source]]
name = "measurements"
path = "incoming/*.csv"
# columns = { characteristic = "feature", taken_at = "time", value = "result" }   # canonical name = column in the file
"""


def create(folder: Path) -> list[Path]:
    """Write plan.toml, registry.csv and the folder incoming/; refuses to replace a plan that is there."""
    plan, registry = folder / "plan.toml", folder / "registry.csv"
    for path in (plan, registry):
        if path.exists():
            raise UsageError(f"{path} exists already. Name another folder.")
    (folder / "incoming").mkdir(parents=True, exist_ok=True)
    plan.write_text(commented_plan(), encoding="utf-8")
    registry.write_text(",".join(COLUMNS) + "\n", encoding="utf-8")
    return [plan, registry, folder / "incoming"]


def commented_plan() -> str:
    """The plan that `portfolio new` writes, made from the model: one place for every default and its reason."""
    parts = [
        HEAD,
        _section("portfolio", model.Portfolio, active=True),
        _targets(),
        SOURCE_EXAMPLE + _fields(model.Source),
    ]
    for name, section in (
        ("schedule", model.Schedule),
        ("judgement", model.Judgement),
        ("limits", model.Limits),
        ("report", model.Report),
    ):
        parts.append(_section(name, section, active=name == "schedule"))
    return "\n".join(parts)


def _targets() -> str:
    lines = ["[targets]", "# Target Cpk by class of characteristic (column `class` of the registry)."]
    lines += [f"{name} = {value}" for name, value in model.Plan.model_fields["targets"].get_default().items()]
    return "\n".join(lines) + "\n"


def _section(name: str, section: type[BaseModel], *, active: bool) -> str:
    return f"[{name}]\n" + _fields(section, active=active)


def _fields(section: type[BaseModel], *, active: bool = False) -> str:
    reasons = _reasons(section)
    lines = []
    for name, field in section.model_fields.items():
        default = field.get_default()
        if section is model.Source and name in ("name", "path", "columns"):
            continue
        if name in reasons:
            lines += ["# " + line for line in textwrap.wrap(reasons[name], 110)]
        if default is None or default is PydanticUndefined:
            lines.append(f"# {name} =")
        else:
            lines.append(("" if active else "# ") + f"{name} = {_toml(default)}")
    return "\n".join(lines) + "\n"


def _reasons(section: type[BaseModel]) -> dict[str, str]:
    """The sentence that stands below each field in the source of the model."""
    tree = ast.parse(textwrap.dedent(inspect.getsource(section))).body[0]
    assert isinstance(tree, ast.ClassDef)
    reasons = {}
    for field, below in zip(tree.body, tree.body[1:], strict=False):
        if (
            isinstance(field, ast.AnnAssign)
            and isinstance(field.target, ast.Name)
            and isinstance(below, ast.Expr)
            and isinstance(below.value, ast.Constant)
        ):
            reasons[field.target.id] = " ".join(str(below.value.value).split())
    return reasons


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {_toml(inner)}" for key, inner in value.items()) + " }" if value else "{}"
    return json.dumps(value)
