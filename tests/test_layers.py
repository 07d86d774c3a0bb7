"""An import may only go down: the order of the house, read from the source."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "portfolio"
ANYONE_MAY_USE = {
    "errors",
    "version",
    "result",
    "plan",
    "plan_file",
    "slots",
    "registry",
    "store",
    "session",
    "locks",
    "shipped",
    "terminal",
    "health",
    "moments",
    "summary",
}
LAYERS = [  # from the top down
    {"__main__", "command"},
    {"demo", "schedule", "checks", "starter"},
    {"job", "inquiry", "upkeep", "face", "__init__"},
    {"publishing"},
    {"sites", "export"},
    {"triage"},
    {"engine", "store_reader", "intake"},
    {"conclusion"},
    {"judgement"},
    {"evidence", "sources", "demo_processes", "demo_truth"},
    {"statistics"},
]


def level(module: str) -> int | None:
    for number, layer in enumerate(LAYERS):
        if module in layer:
            return number
    return None


def imports(path: Path) -> set[str]:
    """Our own modules that a file imports, also inside functions; only for types does not count."""
    found = set()
    tree = ast.parse(path.read_text(encoding="utf-8"))
    typing_only = {
        id(child)
        for node in ast.walk(tree)
        if isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING"
        for child in ast.walk(node)
    }
    for node in ast.walk(tree):
        if id(node) in typing_only:
            continue
        if isinstance(node, ast.ImportFrom) and node.module and node.module.split(".")[0] == "portfolio":
            parts = node.module.split(".")
            found |= {parts[1]} if len(parts) > 1 else {alias.name for alias in node.names}
        elif isinstance(node, ast.Import):
            found |= {alias.name.split(".")[1] for alias in node.names if alias.name.startswith("portfolio.")}
    return found


MODULES = sorted(PACKAGE.rglob("*.py"))


@pytest.mark.parametrize("path", MODULES, ids=lambda path: path.relative_to(PACKAGE).as_posix())
def test_imports_only_go_down(path):
    own = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
    used = imports(path) - {own}
    if own in ANYONE_MAY_USE:
        # The shared ground: reading a plan needs the slots, a session needs the store; nothing of the layers.
        assert used <= ANYONE_MAY_USE, f"{own} uses {used - ANYONE_MAY_USE}"
        return
    here = level(own)
    assert here is not None, f"{own} has no place in the layers: add it to LAYERS"
    upward = {name for name in used - ANYONE_MAY_USE if (level(name) is None or level(name) < here)}
    assert not upward, f"{own} imports upward: {upward}"


def test_statistics_know_nothing_of_the_rest():
    for path in sorted((PACKAGE / "statistics").glob("*.py")):
        assert imports(path) <= {"statistics"}, path.name
        words = path.read_text(encoding="utf-8")
        assert "import pandas" not in words and "import duckdb" not in words, path.name


def test_modules_stay_small_enough_to_read_in_one_sitting():
    long = {path.name: n for path in MODULES if (n := len(path.read_text(encoding="utf-8").splitlines())) > 400}
    assert long == {}
