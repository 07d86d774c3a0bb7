"""Finds the files that travel with the program: SQL in `queries/`, templates, style and script in `reports/`.

In a wheel they lie in `_shipped` inside the package; in a checkout beside it.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path

HERE = Path(__file__).resolve().parent


@cache
def folder(name: str) -> Path:
    """The folder `queries` or `reports`, wherever this installation keeps it."""
    for place in (HERE / "_shipped" / name, HERE.parent / name):
        if place.is_dir():
            return place
    raise FileNotFoundError(f"this installation of portfolio lacks its folder {name!r}. Install it again.")


@cache
def text(name: str) -> str:
    """The text of a shipped file, for example `queries/history/changes.sql`."""
    first, rest = name.split("/", 1)
    return (folder(first) / rest).read_text(encoding="utf-8")


def listing(name: str, pattern: str) -> list[Path]:
    """Shipped files of a folder in name order, for example `listing("queries/schema", "*.sql")`."""
    first, _, rest = name.partition("/")
    return sorted((folder(first) / rest).glob(pattern))
