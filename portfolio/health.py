"""What the service last said of itself: a small file beside the store, replaced in one step."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from portfolio.plan import Plan

BEAT_SECONDS = 30
"How often the service says that it is alive."


def health_path(plan: Plan) -> Path:
    """The health file of the service, beside the store."""
    return plan.store_path.with_name(plan.store_path.name + ".health.json")


def read_health(plan: Plan) -> dict[str, Any]:
    """What the service last said of itself; empty when it never ran here."""
    path = health_path(plan)
    return dict(json.loads(path.read_text(encoding="utf-8"))) if path.exists() else {}
