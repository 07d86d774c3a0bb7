"""Progress on a terminal: bars where a person looks on, plain lines elsewhere. Always on stderr."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Self

from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, TaskID, TextColumn, TimeElapsedColumn
from rich.progress import Progress as Bars


class Progress:
    """What long steps tell: `counted(done, total)` inside a `stage`; finished stages leave one line."""

    def __init__(self) -> None:
        self._console = Console(stderr=True, highlight=False, soft_wrap=True)
        self._bars: Bars | None = None
        self._task: TaskID | None = None

    def __enter__(self) -> Self:
        if self._console.is_terminal:
            self._bars = Bars(
                TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeElapsedColumn(),
                console=self._console, transient=True,
            )  # fmt: skip
            self._bars.start()
        return self

    def __exit__(self, *_: object) -> None:
        if self._bars is not None:
            self._bars.stop()
            self._bars = None

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """A step with a name, shown while it runs."""
        if self._bars is None:
            print(f"{name} ...", file=sys.stderr, flush=True)
            yield
            return
        self._task = self._bars.add_task(name, total=None)
        try:
            yield
        finally:
            self._bars.remove_task(self._task)
            self._task = None

    def counted(self, done: int, total: int) -> None:
        """How far the running stage is."""
        if self._bars is not None and self._task is not None:
            self._bars.update(self._task, completed=done, total=total)
