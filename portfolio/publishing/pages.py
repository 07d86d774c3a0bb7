"""From stored rows to the pages of an issue. `collect` reads; `render` is a pure function of what was read.

Templates lay out, they decide nothing: every sentence comes from `wording`, every number from `numbers`.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import jinja2
import pandas as pd
from markupsafe import Markup

from portfolio import export, shipped, sites
from portfolio.plan import Plan
from portfolio.publishing import assets, names, page_characteristic, page_first, page_list, page_meeting, page_others
from portfolio.publishing.assets import Assets
from portfolio.publishing.numbers import Numbers
from portfolio.publishing.wording import reasons
from portfolio.result import CONTRACT_COLUMNS
from portfolio.store import Store

POLICY = (
    "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; base-uri 'none'; form-action 'none'"
)


@dataclass(frozen=True)
class PageData:
    """Everything an issue says, as frames in the store's columns; `results` sorted by characteristic."""

    run: dict[str, Any]
    results: pd.DataFrame
    evidence: pd.DataFrame
    ranking: pd.DataFrame
    pulls: pd.DataFrame
    loads: pd.DataFrame
    refused: pd.DataFrame
    rejected: pd.DataFrame
    unregistered: pd.DataFrame
    changes: pd.DataFrame
    history: pd.DataFrame
    plan: Plan


def collect(store: Store, run_id: int, plan: Plan) -> PageData:
    """Read everything that the issue of one judgement says."""
    runs = store.frame("judgement/runs")
    return PageData(
        run=dict(runs[runs["run_id"] == run_id].to_dict("records")[0]),
        results=store.frame("judgement/results_of_run", run_id=run_id),
        evidence=store.frame("judgement/evidence_of_run", run_id=run_id),
        ranking=store.frame("judgement/ranking_of_run", run_id=run_id),
        pulls=store.frame("history/last_pulls"),
        loads=store.frame("publishing/rows_by_source"),
        refused=store.frame("publishing/refused_items"),
        rejected=store.frame("publishing/rejected_by_reason"),
        unregistered=store.frame("publishing/unregistered", run_id=run_id),
        changes=store.frame("history/changes"),
        history=store.frame("history/index_history", run_id=run_id),
        plan=plan,
    )


def render(
    data: PageData, progress: Callable[[int, int], None] | None = None, issues: list[Path] | None = None
) -> Iterator[tuple[str, bytes]]:
    """Every file of the issue, path inside the folder and content. `issues` may lend their drawing script."""
    kit = assets.collect(issues or [])
    n = Numbers(data.plan.report.decimal, data.plan.portfolio.timezone)
    rows = [dict(row, page=names.page(row["characteristic"])) for row in data.results.to_dict("records")]
    compared = sites.compare(data.results)
    common = _common(data, n)

    list_data = page_list.columns(rows, n)
    list_script = ("window.portfolioList=" + safe_json(list_data) + ";\n").encode()
    list_path = f"assets/{assets.hashed('list.js', list_script)}"
    yield from kit.files.items()
    yield list_path, list_script

    def page(template: str, root: str = "", **context: Any) -> bytes:
        text = environment().get_template(template).render(root=root, kit=kit, policy=POLICY, **common, **context)
        return text.encode("utf-8")

    yield "index.html", page("index.html", list_path=list_path, **page_first.context(data, rows, n))
    yield "list.html", page("list.html", list_path=list_path, **page_list.context(rows))
    yield "plain.html", page("plain.html", rows=page_list.plain(rows, n))
    yield "sites.html", page("sites.html", **page_others.sites(compared, n))
    yield "quality.html", page("quality.html", **page_others.quality(data, rows, n))
    yield "changes.html", page("changes.html", **page_others.changes(data, rows, n))
    yield "methods.html", page("methods.html", **page_others.methods(data.plan, n))
    yield "meeting.html", _meeting(data, rows, n, common)
    yield from _characteristics(data, rows, n, page, progress)
    yield from _data(data)


def _characteristics(
    data: PageData, rows: list[dict[str, Any]], n: Numbers, page: Callable[..., bytes],
    progress: Callable[[int, int], None] | None,
) -> Iterator[tuple[str, bytes]]:  # fmt: skip
    drawn = {row["characteristic"]: row for row in data.evidence.to_dict("records")}
    history = dict(tuple(data.history[data.history["index"].notna()].groupby("characteristic")))
    neighbours = page_characteristic.neighbours(rows)
    for number, row in enumerate(rows):
        name = row["characteristic"]
        context = page_characteristic.context(row, drawn.get(name), history.get(name), n)
        yield f"c/{row['page']}", page("characteristic.html", root="../", near=neighbours[name], **context)
        if progress is not None and number % 50 == 49:
            progress(number + 1, len(rows))


def _meeting(data: PageData, rows: list[dict[str, Any]], n: Numbers, common: dict[str, Any]) -> bytes:
    style = shipped.text("reports/meeting.css")
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    policy = f"default-src 'none'; style-src 'sha256-{digest}'; img-src data:; base-uri 'none'; form-action 'none'"
    context = page_meeting.context(data, rows, n)
    text = environment().get_template("meeting.html").render(policy=policy, style=Markup(style), **common, **context)
    return text.encode("utf-8")


def _data(data: PageData) -> Iterator[tuple[str, bytes]]:
    told = data.results.copy()
    told["reasons"] = [reasons(row) for row in told.to_dict("records")]
    first = [name for name in CONTRACT_COLUMNS if name in told]
    told = told[first + [name for name in told if name not in first]]
    yield "data/judgement.csv", export.csv_bytes(told)
    yield "data/judgement.parquet", export.parquet_bytes(told)
    yield "data/judgement.json", export.json_bytes(told)
    yield "data/ranking.csv", export.csv_bytes(data.ranking)


def _common(data: PageData, n: Numbers) -> dict[str, Any]:
    newest = data.results["last"].max()
    return {
        "title_of_portfolio": data.plan.portfolio.title,
        "data_to": n.date(newest),
        "judged_at": n.time(data.run["judged_at"]),
        "as_of": n.time(data.run["as_of"]),
        "zone": data.plan.portfolio.timezone,
        "program": data.run["program"],
        "run_id": int(data.run["run_id"]),
        "short": names.short,
    }


@cache
def environment() -> jinja2.Environment:
    """Templates out of `reports/templates`, always escaping; an unknown name is an error, not an empty string."""
    made = jinja2.Environment(
        loader=jinja2.FunctionLoader(lambda name: shipped.text(f"reports/templates/{name}")),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    made.filters["rows_json"] = lambda value: Markup(safe_json(value))  # escaped in safe_json
    made.filters["slug"] = lambda cell: cell.replace(", ", "-").replace(" ", "-")
    return made


def safe_json(value: Any) -> str:
    """JSON that may stand inside a script element: no `<`, `>`, `&` and no line separators as such."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return text


__all__ = ["Assets", "PageData", "collect", "environment", "render", "safe_json"]
