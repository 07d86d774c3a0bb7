"""Walks every published case: standards, handbook tables, certified data (source and provenance stand in each row).

A case names its check, for example `capability.cp_interval` for `checks_capability.cp_interval`; the check computes the
expected keys with our public functions and the walker compares them within the case's tolerance.
"""

from __future__ import annotations

import importlib.util
import json
import math
from collections.abc import Iterator, Mapping
from functools import cache
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

HERE = Path(__file__).parent
FIXTURES = HERE.parents[1] / "fixtures" / "published"
CASES = [
    pytest.param(case, id=f"{path.stem}/{case['id']}")
    for path in sorted(FIXTURES.glob("*.json"))
    for case in json.loads(path.read_text(encoding="utf-8"))
]


@cache
def checks(name: str) -> ModuleType:
    path = HERE / f"checks_{name}.py"
    spec = importlib.util.spec_from_file_location(f"published_checks_{name}", path)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def leaves(node: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Any]]:
    """Every number (or word) of a nested result with its path."""
    if isinstance(node, Mapping):
        for key, value in node.items():
            yield from leaves(value, (*path, str(key)))
    elif isinstance(node, list | tuple):
        for number, value in enumerate(node):
            yield from leaves(value, (*path, str(number)))
    else:
        yield path, node


def tolerance(case: Mapping[str, Any], path: tuple[str, ...]) -> tuple[float, float]:
    """Absolute and relative tolerance: the nearest named key on the path wins over the general one."""
    general = case.get("tolerance", {})
    chosen = general
    for key in path:
        chosen = general.get("per_key", {}).get(key, chosen)
    return float(chosen.get("abs", 0.0)), float(chosen.get("rel", 0.0))


def differences(case: Mapping[str, Any], computed: Mapping[str, Any]) -> list[str]:
    """What is missing or outside its tolerance."""
    found = dict(leaves(computed))
    out = []
    for path, expected in leaves(case["expected"]):
        name = ".".join(path)
        if path not in found:
            out.append(f"{name}: not computed")
        elif isinstance(expected, bool | str) or expected is None:
            if found[path] != expected:
                out.append(f"{name}: {found[path]!r} instead of {expected!r}")
        else:
            absolute, relative = tolerance(case, path)
            value = float(found[path])
            if math.isnan(value) or abs(expected - value) > absolute + relative * abs(expected):
                out.append(f"{name}: {value!r} instead of {expected!r} (within {absolute} + {relative} rel)")
    return out


@pytest.mark.parametrize("case", CASES)
def test_a_published_value_is_reproduced(case):
    module, _, function = case["check"].partition(".")
    computed = getattr(checks(module), function)(case)
    assert differences(case, computed) == [], case["source"]


@pytest.mark.parametrize("case", CASES)
def test_every_case_names_its_source_and_provenance(case):
    assert case["source"].strip()
    assert case["provenance"].split(";")[0].strip() in {"read here", "from memory"}
    assert set(case) >= {"id", "topic", "inputs", "expected", "tolerance", "check"}


@pytest.mark.parametrize("case", CASES)
def test_every_case_names_a_check_that_exists(case):
    module, _, function = case["check"].partition(".")
    assert callable(getattr(checks(module), function))


def test_no_two_cases_share_a_name():
    names = [case.values[0]["id"] for case in CASES]
    assert len(names) == len(set(names))


def test_there_are_published_cases_of_every_area():
    areas = {path.stem for path in FIXTURES.glob("*.json")}
    assert {"capability", "constants", "control_limits", "intervals", "proportions", "run_lengths", "variance"} <= areas


def test_the_walker_fails_on_a_wrong_and_on_a_missing_value():
    case = {"expected": {"a": 1.0, "b": {"c": 2.0}}, "tolerance": {"abs": 0.1, "per_key": {"b": {"rel": 0.01}}}}
    assert differences(case, {"a": 1.05, "b": {"c": 2.01}}) == []
    assert len(differences(case, {"a": 1.2, "b": {"c": 2.05}})) == 2
    assert differences(case, {"a": 1.0}) == ["b.c: not computed"]
    assert differences(case, {"a": float("nan"), "b": {"c": 2.0}})
