"""Publishes small issues and dies, for real, at each of its steps in turn. Run as a script by test_folder.

    python crashing.py REPORT    prints a line for each death: step, operation, what the pointer then led to

Every function of the operating system that `folder` uses is counted; in the child of attempt n the n-th call is
answered by SIGKILL, so no cleaning up of Python's can run.
"""

from __future__ import annotations

import json
import os
import shutil
import signal
import sys
from pathlib import Path

from portfolio.publishing import folder

STEPS = [
    (Path, "write_bytes"), (Path, "mkdir"), (Path, "rename"), (Path, "replace"), (Path, "chmod"), (Path, "open"),
    (os, "sync"), (os, "fsync"), (folder.tempfile, "mkdtemp"), (shutil, "rmtree"),
]  # fmt: skip


def pages(mark: str) -> list[tuple[str, bytes]]:
    return [("index.html", f"<p>{mark}</p>".encode()), ("c/a.html", mark.encode()), ("assets/x.css", b"p{}")]


def count_steps(act) -> list[str]:
    """Let `act(number, name)` see every step before it is done; returns the names so far."""
    seen: list[str] = []
    for place, name in STEPS:
        original = getattr(place, name)

        def counted(*args, _name=name, _original=original, **kwargs):
            seen.append(_name)
            act(len(seen), _name)
            return _original(*args, **kwargs)

        setattr(place, name, counted)
    return seen


def die_at(number: int) -> None:
    def act(now: int, name: str) -> None:
        if now == number:
            os.write(1, f"{number} {name} ".encode())
            os.kill(os.getpid(), signal.SIGKILL)

    count_steps(act)


def main(report: Path) -> None:
    folder.publish(pages("before"), report=report, slot="2026-W40", keep=2)
    folder.publish(pages("last"), report=report, slot="2026-W47", keep=2)
    for number in range(1, 1000):
        child = os.fork()
        if not child:
            die_at(number)
            folder.publish(pages(f"attempt {number}"), report=report, slot="2026-W48", keep=2)
            os._exit(0)
        _, status = os.waitpid(child, 0)
        pointed = json.loads((report / "newest.json").read_text())["folder"]
        page = (report / "index.html").read_text()
        led = [path.name for path in folder.issues(report) if f'href="{path.name}/index.html"' in page]
        wrong = [w for path in folder.issues(report) for w in folder.verify(path)]
        print(json.dumps({"json": pointed, "page": led, "wrong": wrong, "died": os.WIFSIGNALED(status)}), flush=True)
        if not os.WIFSIGNALED(status):
            return


if __name__ == "__main__":
    main(Path(sys.argv[1]))
