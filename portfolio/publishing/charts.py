"""The report's pictures: each kind is compiled to Vega once, without data; rows are put in when it is drawn.

Pages are drawn in the browser (`reports/charts.js`), sheets that need no script here (`svg`). The control chart never
holds a specification limit, the histogram never a control limit.

A data set is a list of rows, or one of three short forms that `expanded` and `charts.js` write out alike:

    {"columns": {"t": [...], "v": [...], "s": [...]}}   t: first moment in ms, then seconds since the moment before;
                                                        s: places of the rows with a signal
    {"bins": [start, width, counts]}                    rows x, b (edges), n
    {"normal": [mean, sigma, area]}                     the curve's rows x, n
"""

from __future__ import annotations

import copy
import json
import re
from collections.abc import Mapping, Sequence
from functools import cache
from itertools import accumulate
from typing import Any

import numpy as np
import vl_convert
from markupsafe import Markup, escape

from portfolio.publishing.chart_templates import KINDS

CURVE_POINTS = 61
CURVE_REACH = 4.2
"A normal curve is drawn to this many sigma on each side."

Rows = Sequence[Mapping[str, Any]]
DataSet = Rows | Mapping[str, Any]


def templates() -> dict[str, dict[str, Any]]:
    """Compiled Vega of each kind of picture, without rows."""
    return copy.deepcopy(_templates())


@cache
def _templates() -> dict[str, dict[str, Any]]:
    return {name: _silent(vl_convert.vegalite_to_vega(build().to_dict())) for name, build in KINDS.items()}


def template_script() -> str:
    """The compiled templates as a classic script: file:// allows no fetch."""
    return "window.portfolioTemplates=" + json.dumps(_templates(), separators=(",", ":"), sort_keys=True) + ";\n"


def svg(
    kind: str, data: Mapping[str, DataSet], label: str, prefix: str, decimal: str = ".", width: int | None = None
) -> Markup:
    """A picture drawn now, for pages that need no script.

    Parameters
    ----------
    kind : a key of `chart_templates.KINDS`
    data : its data sets by name
    label : what a screen reader says; the caption
    prefix : stands before each id of the picture, so that several fit on one page
    decimal : the plan's decimal sign
    width : pixels, where the kind's own width would make the lettering too small or too large
    """
    spec = copy.deepcopy(_templates()[kind])
    if width is not None:
        spec["width"] = width
    known = {entry["name"]: entry for entry in spec["data"]}
    for name, rows in data.items():
        known[name]["values"] = expanded(rows)
    locale = {"decimal": decimal, "thousands": "\u202f", "grouping": [3], "currency": ["", ""]}
    text = vl_convert.vega_to_svg(spec, format_locale=locale, allowed_base_urls=[])
    text = re.sub(r"<[^<>]*>", lambda tag: _fitting(tag.group(), prefix), text)
    said = f' role="img" aria-label="{escape(label)}" class="drawn"'
    return Markup(text.replace(' class="marks"', said, 1))  # Vega escapes its texts; the label is escaped here


def _fitting(tag: str, prefix: str) -> str:
    """A tag without inline style (forbidden by the page's policy) and with ids of its own; text between tags stays."""
    tag = re.sub(r'\sstyle="[^"]*"', "", tag)
    return re.sub(r'(\sid="|url\(#|href="#)', lambda found: found.group() + prefix, tag)


def expanded(data: DataSet) -> list[dict[str, Any]]:
    """The rows of a data set in whichever form; `charts.js` does the same."""
    if not isinstance(data, Mapping):
        return [dict(row) for row in data]
    if "bins" in data:
        start, width, counts = data["bins"]
        return [{"x": start + i * width, "b": start + (i + 1) * width, "n": n} for i, n in enumerate(counts)]
    if "normal" in data:
        return normal_curve(*data["normal"])
    columns = dict(data["columns"])
    length = max((len(column) for name, column in columns.items() if name != "s"), default=0)
    if columns.get("t"):
        first, *steps = columns["t"]
        columns["t"] = list(accumulate((1000 * step for step in steps), initial=first))
    if "s" in columns:
        signalled = set(columns["s"])
        columns["s"] = [int(i in signalled) for i in range(length)]
    return [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]


def normal_curve(mean: float, sigma: float, area: float) -> list[dict[str, float]]:
    """Points of a normal density times `area`, from -4.2 to +4.2 sigma."""
    z = np.linspace(-CURVE_REACH, CURVE_REACH, CURVE_POINTS)
    x = mean + sigma * z
    y = area * np.exp(-0.5 * z**2) / (sigma * np.sqrt(2 * np.pi))
    return [{"x": a, "n": b} for a, b in zip(x.tolist(), y.tolist(), strict=True)]


def _silent(spec: dict[str, Any]) -> dict[str, Any]:
    """Marks, axes and legends say nothing to a screen reader: the figure's caption does (report study, section 7)."""

    def walk(node: Any) -> None:
        if isinstance(node, dict):
            for key in ("marks", "axes", "legends"):
                for part in node[key] if isinstance(node.get(key), list) else []:
                    part["aria"] = False
            for child in node.values():
                walk(child)
        elif isinstance(node, list):
            for child in node:
                walk(child)

    walk(spec)
    spec.pop("description", None)
    return spec
