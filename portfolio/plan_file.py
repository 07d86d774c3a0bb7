"""Reads a plan file: every problem at once, each with its place, what is wrong and what to do."""

from __future__ import annotations

import difflib
import os
import re
import tomllib
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit
from zoneinfo import available_timezones

from pydantic import BaseModel, ValidationError

from portfolio.errors import PlanError, Problem
from portfolio.plan import Plan, Source

SECTIONS = {name: field.annotation for name, field in Plan.model_fields.items() if name != "path"}
CANONICAL = (
    "characteristic", "taken_at", "value", "subgroup", "stream", "part_id", "lot", "disposition", "unit",
    "measurement_id",
)  # fmt: skip
"Columns of a measurement (contract)."
SIZE = re.compile(r"^\d+(\.\d+)?\s*(MB|GB|MiB|GiB)$", re.IGNORECASE)


def read(path: Path) -> Plan:
    """Read and check a plan file.

    Raises
    ------
    PlanError
        Lists every problem: a missing file, text that is not TOML, unknown keys (with the nearest known one), values
        out of range, unknown zones, cron lines that are ambiguous or never fire, sources that cannot work.
    """
    name = str(path)
    try:
        data = tomllib.loads(path.read_bytes().decode("utf-8-sig"))
    except FileNotFoundError:
        raise PlanError(
            [Problem(name, "there is no such file", "Name a plan file, or make one with: portfolio new FOLDER")]
        ) from None
    except IsADirectoryError:
        raise PlanError([Problem(name, "this is a folder", f"Name the plan in it: {path / 'plan.toml'}")]) from None
    except UnicodeDecodeError as error:
        raise PlanError([Problem(name, f"the text is not UTF-8 ({error.reason})", "Save the file as UTF-8")]) from None
    except tomllib.TOMLDecodeError as error:
        raise PlanError([Problem(name, f"not valid TOML: {error}", "Mend the line; text needs quotes")]) from None

    problems = _unknown_keys(data, name)
    try:
        plan = Plan.model_validate({**_known(data), "path": path})
    except ValidationError as error:
        problems += [_problem(name, data, item) for item in error.errors() if item["type"] != "extra_forbidden"]
        raise PlanError(_sorted(problems)) from None
    problems += _impossible(plan, name)
    if problems:
        raise PlanError(_sorted(problems))
    return plan


def _known(data: dict[str, Any]) -> dict[str, Any]:
    """The data without unknown keys, so that the other problems are found in the same reading."""
    out: dict[str, Any] = {}
    for section, content in data.items():
        if section not in SECTIONS:
            continue
        if section == "source" and isinstance(content, list):
            fields = Source.model_fields
            out[section] = [
                {key: value for key, value in item.items() if key in fields} if isinstance(item, dict) else item
                for item in content
            ]
        elif isinstance(content, dict) and (model := _model(section)) is not None:
            out[section] = {key: value for key, value in content.items() if key in model.model_fields}
        else:
            out[section] = content
    return out


def _model(section: str) -> type[BaseModel] | None:
    annotation = SECTIONS[section]
    return annotation if isinstance(annotation, type) and issubclass(annotation, BaseModel) else None


def _unknown_keys(data: dict[str, Any], name: str) -> list[Problem]:
    problems = []
    for section, content in data.items():
        if section not in SECTIONS:
            problems.append(_unknown(name, section, list(SECTIONS), "section"))
        elif section == "source" and isinstance(content, list):
            for place, item in _sources(content, name):
                if isinstance(item, dict):
                    problems += [
                        _unknown(place, key, list(Source.model_fields))
                        for key in item
                        if key not in Source.model_fields
                    ]
                    columns = item.get("columns", {})
                    problems += [
                        _unknown(f"{place}, columns", key, list(CANONICAL), "column")
                        for key in (columns if isinstance(columns, dict) else {})
                        if key not in CANONICAL
                    ]
        elif (model := _model(section)) is not None and isinstance(content, dict):
            fields = list(model.model_fields)
            problems += [_unknown(f"{name}, [{section}]", key, fields) for key in content if key not in fields]
    return problems


def _unknown(place: str, key: str, known: list[str], kind: str = "key") -> Problem:
    near = difflib.get_close_matches(key, known, n=1, cutoff=0.5)
    remedy = f"Did you mean '{near[0]}'?" if near else f"Known are: {', '.join(known)}"
    return Problem(place, f"unknown {kind} '{key}'", remedy)


def _sources(content: list[Any], name: str) -> list[tuple[str, Any]]:
    return [
        (f"{name}, [[source]] '{item.get('name', number + 1) if isinstance(item, dict) else number + 1}'", item)
        for number, item in enumerate(content)
    ]


def _problem(name: str, data: dict[str, Any], item: Any) -> Problem:
    location = [str(part) for part in item["loc"]]
    place = name
    if location:
        if location[0] == "source" and len(location) > 1:
            place = _sources(data["source"], name)[int(location[1])][0]
            field = ".".join(location[2:])
        else:
            place = f"{name}, [{location[0]}]"
            field = ".".join(location[1:])
        place = f"{place}, {field}" if field else place
    given = item.get("input")
    shown = f" (it says {given!r})" if isinstance(given, str | int | float | bool) else ""
    return Problem(place, item["msg"][0].lower() + item["msg"][1:] + shown, _remedy(item))


def _remedy(item: Any) -> str:
    context = item.get("ctx", {})
    match item["type"]:
        case "missing":
            return "Add it"
        case "literal_error":
            return f"Use {context['expected']}"
        case "greater_than_equal":
            return f"Use {context['ge']} or more"
        case "less_than_equal":
            return f"Use {context['le']} or less"
        case "greater_than":
            return f"Use more than {context['gt']}"
        case "less_than":
            return f"Use less than {context['lt']}"
        case _:
            return "Correct the value"


def _impossible(plan: Plan, name: str) -> list[Problem]:
    problems = []
    section = f"{name}, [portfolio]"
    zones = available_timezones()
    problems += _zone(f"{section}, timezone", plan.portfolio.timezone, zones)
    if not plan.registry_path.is_file():
        problems.append(
            Problem(f"{section}, registry", f"{plan.registry_path} does not exist", "Name the registry file")
        )
    if plan.portfolio.report in ("", ".", ".."):
        problems.append(Problem(f"{section}, report", "the report needs a folder of its own", 'Use report = "report"'))
    if "default" not in plan.targets:
        problems.append(Problem(f"{name}, [targets]", "there is no default target", "Add: default = 1.33"))
    if not SIZE.match(plan.limits.memory):
        problems.append(
            Problem(f"{name}, [limits], memory", f"{plan.limits.memory!r} is no size", 'Use "1GB" or "800MB"')
        )
    if plan.portfolio.timezone in zones:
        for key, cron in (("pull", plan.schedule.pull), ("publish", plan.schedule.publish)):
            problems += _cron(f"{name}, [schedule], {key}", cron, plan.portfolio.timezone)
    judgement = plan.judgement
    if not judgement.keep_chance <= judgement.list_chance <= judgement.should_reach_chance:
        problems.append(
            Problem(
                f"{name}, [judgement]",
                "the chances must rise: keep_chance, list_chance, should_reach_chance",
                "Defaults are 0.35, 0.5, 0.8",
            )
        )
    seen: set[str] = set()
    for source in plan.source:
        place = f"{name}, [[source]] '{source.name}'"
        if source.name in seen:
            problems.append(Problem(f"{place}, name", "two sources have this name", "Give each its own name"))
        seen.add(source.name)
        problems += _source(source, place, zones)
    return problems


def _source(source: Source, place: str, zones: set[str]) -> list[Problem]:
    problems = []
    if source.timezone is not None:
        problems += _zone(f"{place}, timezone", source.timezone, zones)
    if source.kind == "files":
        if not source.path:
            problems.append(Problem(place, "a source of files needs a path", 'Add: path = "incoming/*.csv"'))
        for key in ("url", "url_env", "query"):
            if getattr(source, key):
                problems.append(
                    Problem(f"{place}, {key}", "this belongs to a database", 'Set kind = "database" or remove it')
                )
        if source.decimal == source.thousands:
            problems.append(Problem(f"{place}, thousands", "the same sign as decimal", "Use another or leave it out"))
        if source.delimiter is not None and len(source.delimiter) != 1:
            problems.append(Problem(f"{place}, delimiter", "one character is needed", 'Use ";", "," or "\\t"'))
        try:
            "".encode(source.encoding)
        except LookupError:
            problems.append(
                Problem(
                    f"{place}, encoding", f"unknown encoding '{source.encoding}'", 'Use "utf-8", "cp1252" or "latin-1"'
                )
            )
        return problems
    if not (source.url or source.url_env):
        problems.append(Problem(place, "a database needs a url", "Add url (without password) or url_env"))
    if not source.query:
        problems.append(
            Problem(place, "a database needs a query", 'Add: query = "select ... where taken_at >= :since"')
        )
    if source.url and urlsplit(source.url).password:
        problems.append(
            Problem(
                f"{place}, url",
                "a password stands in the plan",
                "Take it out; put the whole address into an environment variable and name it in url_env",
            )
        )
    if source.url_env and source.url_env not in os.environ:
        problems.append(
            Problem(
                f"{place}, url_env", f"the environment variable {source.url_env} is not set", "Set it before the run"
            )
        )
    return problems


def _zone(place: str, zone: str, zones: set[str]) -> list[Problem]:
    if zone in zones:
        return []
    near = difflib.get_close_matches(zone, zones, n=1, cutoff=0.5)
    return [
        Problem(place, f"unknown time zone '{zone}'", f"Did you mean '{near[0]}'?" if near else 'Use "Europe/Vienna"')
    ]


def _cron(place: str, cron: str, zone: str) -> list[Problem]:
    from portfolio import slots

    parts = cron.split()
    if len(parts) != 5:
        return [Problem(place, f"'{cron}' has {len(parts)} fields, a cron line has 5", 'Use "0 6 * * mon"')]
    if re.search(r"\d", parts[4]):
        return [
            Problem(place, f"the day of the week '{parts[4]}' is a number, which programs count differently",
                    "Use names: mon, tue, wed, thu, fri, sat, sun")
        ]  # fmt: skip
    try:
        moment = slots.following(cron, zone, datetime.now(UTC))
    except ValueError as error:
        return [Problem(place, f"'{cron}' is no cron line ({error})", 'Use "0 6 * * mon"')]
    if moment is None:
        return [Problem(place, f"'{cron}' never comes", "Correct day and month")]
    return []


def _sorted(problems: list[Problem]) -> list[Problem]:
    return sorted(problems, key=lambda problem: problem.place)
