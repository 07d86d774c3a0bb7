"""The published folder: every issue is a folder of its own that never changes once it is there.

Order of writing: files into `.building-*` beside the issues, its manifest, all of it forced to the disk; one rename
into place; then the pointer; last of all the oldest issues go. A crash between two steps leaves the pointer at a
complete issue and at most a `.building-*` or `.removing-*` folder, which the next publishing removes. Readers never see
half a report. Only one publisher may work at a time; the store's lock sees to that.
"""

from __future__ import annotations

import errno
import hashlib
import json
import os
import re
import shutil
import tempfile
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from portfolio.errors import PublishError

BUILDING, REMOVING = ".building-", ".removing-"
MANIFEST = "manifest.json"
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
    """A finished issue; `files` and `bytes` count its manifest too. `left_over` could not be removed now."""

    folder: Path
    files: int
    bytes: int
    left_over: tuple[Path, ...] = ()


def publish(pages: Iterable[tuple[str, bytes]], *, report: Path, slot: str, keep: int) -> Published:
    """Write an issue named `slot` (or `slot-2` ... when taken) and lead the pointer to it.

    Parameters
    ----------
    pages : path inside the issue (with `/`) and content of each file
    report : the published folder; made when missing
    slot : ISO week, for example 2026-W48
    keep : issues that stay, the new one included

    Raises
    ------
    PublishError
        If the folder cannot be written; what was published before stays as it is.
    ValueError
        If `slot` is no week, `keep` below 1, or a path leaves the issue or comes twice.
    """
    if keep < 1 or not ISSUE.fullmatch(slot) or ISSUE.fullmatch(slot)[2]:  # type: ignore[index]
        raise ValueError(f"slot {slot!r} must be an ISO week like 2026-W48 and keep ({keep}) at least 1")
    with _told(report):
        if report.exists() and not report.is_dir():
            raise PublishError(f"{report} is a file. The report needs a folder: name another one in the plan.")
        if not report.exists():
            report.mkdir(parents=True)
            _readable(report, 0o755)
        left_over = _remove_leftovers(report)
        building = Path(tempfile.mkdtemp(prefix=BUILDING, dir=report))
    try:
        with _told(report):
            size, files = _write_all(pages, building)
            folder = report / _free_name(report, slot)
            building.rename(folder)
            _forced(report)
            _point_to(folder, report)
    except BaseException:
        # Once renamed, the issue is complete and stays; before, the half of it only takes room.
        shutil.rmtree(building, ignore_errors=True)
        raise
    return Published(folder, files, size, (*left_over, *_forget_oldest(report, folder, keep)))


def issues(report: Path) -> list[Path]:
    """Published issues, oldest week first."""
    if not report.is_dir():
        return []
    found = [(ISSUE.fullmatch(path.name), path) for path in report.iterdir() if path.is_dir()]
    return [path for _, path in sorted(((m[1], int(m[2] or 1)), path) for m, path in found if m)]


def verify(issue: Path) -> list[str]:
    """What differs between an issue and its manifest, in words; empty when it is whole."""
    try:
        listed = json.loads((issue / MANIFEST).read_text(encoding="utf-8"))["files"]
    except (OSError, ValueError, KeyError) as error:
        return [f"{MANIFEST} cannot be read ({error})"]
    there = {path.relative_to(issue).as_posix(): path for path in issue.rglob("*") if path.is_file()}
    there.pop(MANIFEST, None)
    out = [f"{name} is missing" for name in sorted(listed.keys() - there.keys())]
    out += [f"{name} is not in the manifest" for name in sorted(there.keys() - listed.keys())]
    for name in sorted(listed.keys() & there.keys()):
        content = there[name].read_bytes()
        if listed[name] != {"size": len(content), "sha256": hashlib.sha256(content).hexdigest()}:
            out.append(f"{name} was changed")
    return out


def _write_all(pages: Iterable[tuple[str, bytes]], building: Path) -> tuple[int, int]:
    """Every file and the manifest, readable by everyone and on the disk. Bytes and number of files."""
    manifest: dict[str, dict[str, int | str]] = {}
    folders = {building}
    for name, content in pages:
        path = building / _inside(name)
        if name in manifest or name == MANIFEST:
            raise ValueError(f"two files of the issue are called {name!r}")
        if path.parent not in folders:
            path.parent.mkdir(parents=True, exist_ok=True)
            folders.update(p for p in path.parents if p.is_relative_to(building))
        _write(path, content)
        manifest[name] = {"size": len(content), "sha256": hashlib.sha256(content).hexdigest()}
    listing = json.dumps({"files": dict(sorted(manifest.items()))}, indent=1, sort_keys=True).encode()
    _write(building / MANIFEST, listing)
    os.sync()  # one call for thousands of files; syncing each takes minutes on a share
    for place in folders:
        _readable(place, 0o755)
        _forced(place)
    return sum(int(entry["size"]) for entry in manifest.values()) + len(listing), len(manifest) + 1


def _write(path: Path, content: bytes) -> None:
    path.write_bytes(content)
    _readable(path, 0o644)


def _readable(path: Path, mode: int) -> None:
    """Rights for every reader, against a strict umask. A share without such rights may refuse, if they suffice."""
    try:
        path.chmod(mode)
    except PermissionError:
        if path.stat().st_mode & mode != mode:
            raise


def _inside(name: str) -> PurePosixPath:
    path = PurePosixPath(name)
    if not name or path.is_absolute() or ".." in path.parts or "\\" in name:
        raise ValueError(f"{name!r} does not lie inside the issue")
    return path


def _free_name(report: Path, slot: str) -> str:
    """The week, or with the number behind the highest that was ever seen, so that a later repeat sorts later."""
    taken = [int(m[2] or 1) for path in report.iterdir() if (m := ISSUE.fullmatch(path.name)) and m[1] == slot]
    return f"{slot}-{max(taken) + 1}" if taken else slot


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
        _readable(temporary, 0o644)
        temporary.replace(report / name)
    _forced(report)


def _forget_oldest(report: Path, newest: Path, keep: int) -> tuple[Path, ...]:
    """Remove all but `keep` issues, never the one just published; those that cannot be removed now are returned.

    Renamed before they are emptied, so that nobody opens half an issue.
    """
    others = [path for path in issues(report) if path != newest]
    stubborn = []
    for path in others[: max(0, len(others) - (keep - 1))]:
        going = report / f"{REMOVING}{path.name}"
        try:
            path.rename(going)
        except OSError:  # open in a reader's program, for example; the next publishing tries again
            stubborn.append(path)
        else:
            stubborn += _removed(going)
    return tuple(stubborn)


def _remove_leftovers(report: Path) -> list[Path]:
    """Remove what a crash left; what cannot be removed is no reason not to publish, and is returned."""
    return [left for start in (BUILDING, REMOVING) for path in report.glob(f"{start}*") for left in _removed(path)]


def _removed(path: Path) -> list[Path]:
    try:
        shutil.rmtree(path)
    except OSError:
        return [path]
    return []


def _forced(place: Path) -> None:
    """The entries of a folder onto the disk, where the file system knows how."""
    handle = os.open(place, os.O_RDONLY)
    try:
        os.fsync(handle)
    except OSError as error:
        if error.errno not in (errno.EINVAL, errno.ENOTSUP):  # some network shares
            raise
    finally:
        os.close(handle)


@contextmanager
def _told(report: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        raise PublishError(
            f"{error.filename or report}: {error.strerror or error}. What was published before stays; check rights and "
            "free space, then publish again."
        ) from error
