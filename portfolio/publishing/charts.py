"""The report's pictures: each kind is built once with Altair, without data, and compiled to Vega.

A page carries its rows as columns of JSON; the browser puts them into the compiled template. Colours are CSS
variables, so one picture serves light, dark and print. The control chart never holds a specification limit, the
histogram never a control limit; data never become part of an expression.
"""

from __future__ import annotations

import copy
import json
import re
from collections.abc import Mapping, Sequence
from functools import cache
from typing import Any

import altair as alt
import numpy as np
import vl_convert
from markupsafe import Markup

INK, MUTED, LINE = "var(--ink)", "var(--muted)", "var(--line)"
PROCESS, CONTROL, SPECIFICATION, SIGNAL, AFTER = (
    "var(--process)", "var(--control)", "var(--specification)", "var(--signal)", "var(--after)",
)  # fmt: skip
FONT = "Liberation Sans, Arial, sans-serif"
CURVE_POINTS = 61
WIDTH = 640


def templates() -> dict[str, dict[str, Any]]:
    """Compiled Vega of each kind of picture, without rows."""
    return copy.deepcopy(_templates())


@cache
def _templates() -> dict[str, dict[str, Any]]:
    made = {
        "control": _control(),
        "spread": _spread(),
        "histogram": _histogram(),
        "centering": _centering(),
        "history": _history(),
        "overview": _overview(),
        "card": _card(),
        "intervals": _intervals(),
    }
    return {name: _silent(vl_convert.vegalite_to_vega(chart.to_dict())) for name, chart in made.items()}


def svg(kind: str, rows: Mapping[str, Sequence[Mapping[str, Any]]], label: str, prefix: str) -> Markup:
    """A picture drawn now, for pages that need no script; `prefix` keeps the ids of several pictures apart."""
    spec = _templates_filled(kind, rows)
    text = vl_convert.vega_to_svg(spec)
    text = re.sub(r'\sstyle="[^"]*"', "", text)
    text = re.sub(r'(\sid="|url\(#|href="#)', lambda m: m.group(1) + prefix, text)
    text = re.sub(r"<svg ", f'<svg role="img" aria-label="{_attribute(label)}" class="drawn" ', text, count=1)
    return Markup(text)  # drawn by Vega, which escapes its texts; the label is escaped above


def _templates_filled(kind: str, rows: Mapping[str, Sequence[Mapping[str, Any]]]) -> dict[str, Any]:
    spec = templates()[kind]
    for entry in spec["data"]:
        if entry["name"] in rows:
            entry["values"] = [dict(row) for row in rows[entry["name"]]]
    return spec


def _attribute(text: str) -> str:
    return text.replace("&", "&amp;").replace('"', "&quot;").replace("<", "&lt;").replace(">", "&gt;")


def _silent(spec: dict[str, Any]) -> dict[str, Any]:
    """Marks, axes and legends say nothing to a screen reader: the figure's caption does (report study, section 7)."""

    def walk(node: Any) -> None:
        if isinstance(node, dict):
            if "marks" in node and isinstance(node["marks"], list):
                for mark in node["marks"]:
                    mark["aria"] = False
            for key in ("axes", "legends"):
                for part in node.get(key, []) if isinstance(node.get(key), list) else []:
                    part["aria"] = False
            for child in node.values():
                walk(child)
        elif isinstance(node, list):
            for child in node:
                walk(child)

    walk(spec)
    spec.pop("description", None)
    return spec


def _named(name: str) -> alt.NamedData:
    return alt.NamedData(name=name)


def _dressed(chart: alt.LayerChart, *, height: int, width: int = WIDTH) -> alt.LayerChart:
    return (
        chart.properties(width=width, height=height, autosize=alt.AutoSizeParams(type="fit-x", contains="padding"))
        .configure(background="transparent", font=FONT, padding=4)
        .configure_view(stroke=None)
        .configure_axis(
            labelColor=MUTED, titleColor=MUTED, domainColor=LINE, tickColor=LINE, gridColor=LINE, gridOpacity=0.6,
            labelFontSize=11, titleFontSize=11, titleFontWeight="normal", labelPadding=4,
        )
    )  # fmt: skip


def _time() -> alt.X:
    return alt.X(
        "t:T",
        title=None,
        scale=alt.Scale(type="utc"),
        axis=alt.Axis(grid=False, format="%d %b", labelFlush=True, labelOverlap=True, tickCount=8),
    )


def _measured(field: str) -> alt.Y:
    return alt.Y(f"{field}:Q", title=None, scale=alt.Scale(zero=False, nice=True), axis=alt.Axis(tickCount=5))


def _control() -> alt.LayerChart:
    points, limits, change = _named("points"), _named("limits"), _named("change")
    lines = [
        alt.Chart(limits)
        .mark_line(interpolate="step-after", stroke=CONTROL, strokeDash=[6, 3], strokeWidth=1.4)
        .encode(x=_time(), y=_measured(side))
        for side in ("l", "u")
    ]
    centre = alt.Chart(limits).mark_line(stroke=CONTROL, strokeWidth=1).encode(x=_time(), y=_measured("c"))
    path = alt.Chart(points).mark_line(stroke=PROCESS, strokeWidth=1, opacity=0.55).encode(x=_time(), y=_measured("v"))
    dots = (
        alt.Chart(points)
        .mark_point(filled=True, opacity=1)
        .encode(
            x=_time(),
            y=_measured("v"),
            shape=alt.Shape("s:N", scale=alt.Scale(domain=[0, 1], range=["circle", "diamond"]), legend=None),
            size=alt.Size("s:N", scale=alt.Scale(domain=[0, 1], range=[14, 90]), legend=None),
            color=alt.Color("s:N", scale=alt.Scale(domain=[0, 1], range=[PROCESS, SIGNAL]), legend=None),
        )
    )
    mark = alt.Chart(change).mark_rule(stroke=SIGNAL, strokeDash=[2, 3], strokeWidth=1.5).encode(x=_time())
    return _dressed(alt.layer(*lines, centre, mark, path, dots), height=210)


def _spread() -> alt.LayerChart:
    points, limits = _named("spreads"), _named("spreadlimits")
    lines = [
        alt.Chart(limits)
        .mark_line(interpolate="step-after", stroke=CONTROL, strokeDash=[6, 3], strokeWidth=1.4)
        .encode(x=_time(), y=_measured(side))
        for side in ("l", "u")
    ]
    centre = alt.Chart(limits).mark_line(stroke=CONTROL, strokeWidth=1).encode(x=_time(), y=_measured("c"))
    path = alt.Chart(points).mark_line(stroke=PROCESS, strokeWidth=1, opacity=0.55).encode(x=_time(), y=_measured("v"))
    dots = (
        alt.Chart(points)
        .mark_point(filled=True, opacity=1)
        .encode(
            x=_time(),
            y=_measured("v"),
            shape=alt.Shape("s:N", scale=alt.Scale(domain=[0, 1], range=["circle", "diamond"]), legend=None),
            size=alt.Size("s:N", scale=alt.Scale(domain=[0, 1], range=[10, 80]), legend=None),
            color=alt.Color("s:N", scale=alt.Scale(domain=[0, 1], range=[PROCESS, SIGNAL]), legend=None),
        )
    )
    return _dressed(alt.layer(*lines, centre, path, dots), height=110)


def _value_axis() -> alt.X:
    return alt.X(
        "x:Q",
        title=None,
        scale=alt.Scale(zero=False, nice=False, padding=28),
        axis=alt.Axis(grid=False, tickCount=7, labelFlush=True),
    )


def _limit_rules(width: float = 1.6) -> list[alt.Chart]:
    marks = _named("marks")
    rule = (
        alt.Chart(marks)
        .mark_rule(strokeWidth=width)
        .encode(
            x=_value_axis(),
            color=alt.Color("k:N", scale=alt.Scale(domain=["limit", "aim"], range=[SPECIFICATION, AFTER]), legend=None),
            strokeDash=alt.StrokeDash(
                "k:N", scale=alt.Scale(domain=["limit", "aim"], range=[[1, 0], [5, 3]]), legend=None
            ),
        )
    )
    words = (
        alt.Chart(marks)
        .mark_text(baseline="bottom", dy=-3, fontSize=11)
        .encode(
            x=_value_axis(),
            y=alt.value(0),
            text="w:N",
            color=alt.Color("k:N", scale=alt.Scale(domain=["limit", "aim"], range=[SPECIFICATION, AFTER]), legend=None),
        )
    )
    return [rule, words]


def _histogram() -> alt.LayerChart:
    bars = (
        alt.Chart(_named("bins"))
        .mark_rect(fill="var(--fill)", stroke=PROCESS, strokeWidth=0.8)
        .encode(x=_value_axis(), x2="b:Q", y=alt.Y("n:Q", title=None, axis=alt.Axis(tickCount=4)), y2=alt.datum(0))
    )
    curve = (
        alt.Chart(_named("curve"))
        .mark_line(stroke=INK, strokeWidth=1.6)
        .encode(x=_value_axis(), y=alt.Y("n:Q", title=None))
    )
    return _dressed(alt.layer(bars, curve, *_limit_rules()), height=190)


def _curves(height: int, width: int, stroke: float) -> alt.LayerChart:
    axis = alt.Y("n:Q", title=None, axis=None, scale=alt.Scale(zero=True))
    window = alt.Chart(_named("window")).mark_rect(fill="var(--window)", opacity=1).encode(x=_value_axis(), x2="b:Q")
    now = (
        alt.Chart(_named("now"))
        .mark_line(stroke=MUTED, strokeDash=[5, 3], strokeWidth=stroke)
        .encode(x=_value_axis(), y=axis)
    )
    after = alt.Chart(_named("after")).mark_line(stroke=AFTER, strokeWidth=stroke + 0.4).encode(x=_value_axis(), y=axis)
    return _dressed(alt.layer(window, now, after, *_limit_rules()), height=height, width=width)


def _centering() -> alt.LayerChart:
    return _curves(170, WIDTH, 1.6)


def _card() -> alt.LayerChart:
    return _curves(118, 330, 1.6)


def _history() -> alt.LayerChart:
    rows, target = _named("history"), _named("target")
    band = alt.Chart(rows).mark_area(color="var(--fill)").encode(x=_time(), y=_measured("l"), y2="u:Q")
    line = (
        alt.Chart(rows)
        .mark_line(stroke=PROCESS, point={"fill": PROCESS, "size": 18})
        .encode(x=_time(), y=_measured("v"))
    )
    rule = alt.Chart(target).mark_rule(stroke=SPECIFICATION, strokeDash=[6, 3]).encode(y=alt.Y("v:Q"))
    return _dressed(alt.layer(band, line, rule), height=150)


def _intervals() -> alt.LayerChart:
    rows = _named("rows")
    x = alt.X("v:Q", title=None, scale=alt.Scale(domain=[0, 1]), axis=alt.Axis(format=".0%", tickCount=6))
    y = alt.Y("w:N", title=None, sort=None, axis=alt.Axis(labelLimit=220, ticks=False, domain=False))
    bar = (
        alt.Chart(rows)
        .mark_rule(stroke=PROCESS, strokeWidth=6, opacity=0.35)
        .encode(x=alt.X("l:Q", title=None, scale=alt.Scale(domain=[0, 1])), x2="u:Q", y=y)
    )
    dot = alt.Chart(rows).mark_point(filled=True, size=90, color=PROCESS, opacity=1).encode(x=x, y=y)
    return _dressed(alt.layer(bar, dot), height=120)


def _overview() -> alt.LayerChart:
    x = alt.X(
        "x:Q", title="index now", scale=alt.Scale(domain=[-0.5, 3], clamp=True, nice=False),
        axis=alt.Axis(grid=False, tickCount=7),
    )  # fmt: skip
    y = alt.Y(
        "y:Q", title="index if only the mean were moved to its aim",
        scale=alt.Scale(domain=[0, 3], clamp=True, nice=False), axis=alt.Axis(grid=False, tickCount=6),
    )  # fmt: skip
    field = alt.Chart(_named("field")).mark_rect(fill="var(--window)").encode(x=x, x2="x2:Q", y=y, y2="y2:Q")
    words = (
        alt.Chart(_named("field"))
        .mark_text(align="left", baseline="top", dx=8, dy=8, color=AFTER, fontSize=12)
        .encode(x=x, y=alt.Y("y2:Q"), text="w:N")
    )
    rules = [
        alt.Chart(_named("targets")).mark_rule(stroke=SPECIFICATION, strokeDash=[6, 3]).encode(x=alt.X("v:Q")),
        alt.Chart(_named("targets")).mark_rule(stroke=SPECIFICATION, strokeDash=[6, 3]).encode(y=alt.Y("v:Q")),
    ]
    dots = (
        alt.Chart(_named("points"))
        .mark_point(filled=True, size=46, opacity=0.75)
        .encode(
            x=x,
            y=y,
            shape=alt.Shape(
                "k:N", scale=alt.Scale(domain=["listed", "other"], range=["diamond", "circle"]), legend=None
            ),
            color=alt.Color("k:N", scale=alt.Scale(domain=["listed", "other"], range=[AFTER, MUTED]), legend=None),
            size=alt.Size("k:N", scale=alt.Scale(domain=["listed", "other"], range=[90, 26]), legend=None),
        )
    )
    return _dressed(alt.layer(field, words, *rules, dots), height=320)


def template_script() -> str:
    """The compiled templates as a classic script: file:// allows no fetch."""
    return "window.portfolioTemplates=" + json.dumps(_templates(), separators=(",", ":"), sort_keys=True) + ";\n"


def normal_curve(mean: float, sigma: float, low: float, high: float, area: float) -> list[dict[str, float]]:
    """Points of a normal density times `area` over [low, high]."""
    x = np.linspace(max(low, mean - 4.2 * sigma), min(high, mean + 4.2 * sigma), CURVE_POINTS)
    y = area * np.exp(-0.5 * ((x - mean) / sigma) ** 2) / (sigma * np.sqrt(2 * np.pi))
    return [{"x": _six(a), "n": _six(b)} for a, b in zip(x.tolist(), y.tolist(), strict=True)]


def _six(value: float) -> float:
    return float(f"{value:.6g}")
