"""Worked cases with answers computed by scipy alone (fixtures/worked_cases.json: invented data, fixed seed)."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

FILE = Path(__file__).parents[2] / "fixtures" / "worked_cases.json"
CASES: dict[str, Any] = {case["id"]: case for case in json.loads(FILE.read_text(encoding="utf-8"))["cases"]}


def near(expected: Any, *, rel: float = 0.005, abs: float = 1e-12) -> Any:
    """Within half a percent, as the cases are printed."""
    return pytest.approx(expected, rel=rel, abs=abs)


def limits(case: dict[str, Any]) -> tuple[float, float]:
    """Specification limits; infinite where there is none."""
    return (
        -np.inf if case["LSL"] is None else float(case["LSL"]),
        np.inf if case["USL"] is None else float(case["USL"]),
    )


def one(*numbers: float) -> list[np.ndarray]:
    """Each number as an array of one characteristic."""
    return [np.array([float(x)]) for x in numbers]
