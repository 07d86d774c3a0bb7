"""The published folder: every issue is a folder of its own that never changes once it is there.

Order of writing: files into `.building-*` beside the issues, synced; its manifest; one rename into place; then the
pointer. A crash between two steps leaves the pointer at the last complete issue and a `.building-*` folder, which the
next publishing removes. Readers never see half a report.
"""

from __future__ import annotations

import hashlib
import json
import os
import re
import shutil
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from portfolio.errors import PublishError

BUILDING = ".building-"
ISSUE = re.compile(r"^(\d{4}-W\d{2})(?:-(\d+))?$")
POINTER = """\
<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; base-uri 'none'">
<meta http-equiv="refresh" content="0; url={folder}/index.html">
<title>Newest issue: {folder}</title>
</head>
<body><p><a href="{folder}/index.html">Open the newest issue, {folder}</a></p></body>
</html>
"""


@dataclass(frozen=True)
class Published:
    """A finished issue."""

    folder: Path
    files: int
    bytes: int


def publish(pages: Iterable[tuple[str, bytes]], *, report: Path, slot: str, keep: int) -> Published:
    """Write an issue named `slot` (or `slot-2` ... when taken) and lead the pointer to it.

    Raises
    ------
    PublishError
        If the folder cannot be written; what was published before stays as it is.
    """
    try:
        report.mkdir(parents=True, exist_ok=True)
        _remove_leftovers(report)
        building = report / f"{BUILDING}{os.getpid()}"
        building.mkdir()
        manifest = _write_all(pages, building)
        folder = _move_into_place(building, report, slot)
        _point_to(folder, report)
        _forget_oldest(report, keep)
    except OSError as error:
        raise PublishError(
            f"{error.filename or report}: {error.strerror}. The report before stays; check rights and free space, then "
            "publish again."
        ) from error
    return Published(folder, len(manifest) + 1, sum(int(entry["size"]) for entry in manifest.values()))


def _write_all(pages: Iterable[tuple[str, bytes]], building: Path) -> dict[str, dict[str, int | str]]:
    manifest: dict[str, dict[str, int | str]] = {}
    folders = {building}
    for name, content in pages:
        path = building / name
        if path.parent not in folders:
            path.parent.mkdir(parents=True, exist_ok=True)
            folders.add(path.parent)
        path.write_bytes(content)
        manifest[name] = {"size": len(content), "sha256": hashlib.sha256(content).hexdigest()}
    ordered = {"files": dict(sorted(manifest.items()))}
    (building / "manifest.json").write_text(json.dumps(ordered, indent=1, sort_keys=True), encoding="utf-8")
    os.sync()
    for place in folders:
        place.chmod(0o755)
    return manifest


def _move_into_place(building: Path, report: Path, slot: str) -> Path:
    number = 1
    while True:
        folder = report / (slot if number == 1 else f"{slot}-{number}")
        if not folder.exists():
            building.rename(folder)
            return folder
        number += 1


def _point_to(folder: Path, report: Path) -> None:
    for name, text in (
        ("newest.json", json.dumps({"folder": folder.name})),
        ("index.html", POINTER.format(folder=folder.name)),
    ):
        temporary = report / f".{name}.new"
        with temporary.open("w", encoding="utf-8") as file:
            file.write(text)
            file.flush()
            os.fsync(file.fileno())
        temporary.chmod(0o644)
        temporary.replace(report / name)


def issues(report: Path) -> list[Path]:
    """Published issues, oldest first."""
    if not report.is_dir():
        return []
    found = [(ISSUE.match(path.name), path) for path in report.iterdir() if path.is_dir()]
    return [path for _, path in sorted(((m.group(1), int(m.group(2) or 1)), path) for m, path in found if m)]


def _forget_oldest(report: Path, keep: int) -> None:
    for path in issues(report)[:-keep]:
        shutil.rmtree(path)


def _remove_leftovers(report: Path) -> None:
    for path in report.glob(f"{BUILDING}*"):
        shutil.rmtree(path)
