"""The family of errors that a user may meet.

    PortfolioError                 exit code
    ├── PlanError                  2   the plan file is wrong
    ├── RegistryError              2   the registry is wrong
    ├── UsageError                 2   wrong use of a command
    ├── StoreBusyError             3   another run holds the store
    ├── StoreError                 4   the store cannot be used
    ├── SourceError                4   no source could be read
    └── PublishError               4   the report could not be written

Each message says where, what, and what to do, in one line.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

DONE, NEEDS_A_PERSON, WRONG_USE, BUSY, FAILED = 0, 1, 2, 3, 4
"""Exit codes of every command (see the contract in DEVELOPERS.md)."""


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong with a plan or registry: where it stands, what it is, what to do."""

    place: str
    what: str
    remedy: str
    severity: Literal["error", "warning"] = "error"

    def __str__(self) -> str:
        return f"{self.place}: {self.what}. {self.remedy}"


class PortfolioError(Exception):
    """Anything that a user can put right; `exit_code` is what the command returns."""

    exit_code = FAILED


class _ListedError(PortfolioError):
    exit_code = WRONG_USE

    def __init__(self, problems: list[Problem] | str) -> None:
        self.problems = [] if isinstance(problems, str) else list(problems)
        super().__init__(problems if isinstance(problems, str) else "\n".join(str(p) for p in problems))


class PlanError(_ListedError):
    """The plan file is missing, unreadable or says something impossible."""


class RegistryError(_ListedError):
    """The registry is missing, unreadable or contradicts itself."""


class UsageError(PortfolioError):
    """A command was used in a way that cannot work."""

    exit_code = WRONG_USE


class StoreBusyError(PortfolioError):
    """Another run holds the store."""

    exit_code = BUSY


class StoreError(PortfolioError):
    """The store is missing, damaged, full or newer than this program."""


class SourceError(PortfolioError):
    """A source of measurements could not be read."""


class PublishError(PortfolioError):
    """The report could not be written."""
