"""Weekly triage of a plant's measured characteristics.

>>> import portfolio
>>> result = portfolio.judge(measurements, registry)        # pandas frames in, one row per characteristic out
>>> weekly = portfolio.open("plan.toml")                    # stored judgements, ranking and history as frames
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from portfolio.errors import (
    PlanError,
    PortfolioError,
    PublishError,
    RegistryError,
    SourceError,
    StoreBusyError,
    StoreError,
    UsageError,
)
from portfolio.version import __version__

if TYPE_CHECKING:
    from portfolio.face import judge, open

__all__ = [
    "PlanError",
    "PortfolioError",
    "PublishError",
    "RegistryError",
    "SourceError",
    "StoreBusyError",
    "StoreError",
    "UsageError",
    "__version__",
    "judge",
    "open",
]


def __getattr__(name: str) -> Any:
    # pandas, scipy and duckdb take a second to import; `portfolio --help` shall not wait for them.
    if name in ("judge", "open"):
        from portfolio import face

        return getattr(face, name)
    raise AttributeError(f"module 'portfolio' has no attribute {name!r}")
