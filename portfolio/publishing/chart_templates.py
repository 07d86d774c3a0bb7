"""What each kind of picture looks like, in Altair and without a single row.

Colours are CSS variables, so one picture serves light, dark and print. Field names are short and fixed: nothing that
comes from outside is ever part of a name, a title or an expression.
"""

from __future__ import annotations

from collections.abc import Callable

import altair as alt

INK, MUTED, LINE = "var(--ink)", "var(--muted)", "var(--line)"
PROCESS, CONTROL, SPECIFICATION, SIGNAL, AFTER = (
    "var(--process)", "var(--control)", "var(--specification)", "var(--signal)", "var(--after)",
)  # fmt: skip
FONT = "Liberation Sans, Arial, sans-serif"
WIDTH = 640
LABEL_ROOM = 52
"Pixels kept for the numbers at the left, so that two pictures over the same time stand exactly below each other."

TICK_TIMES = {
    "year": "%Y", "quarter": "%b", "month": "%b", "week": "%d %b", "date": "%d %b", "day": "%d %b",
    "hours": "%H:%M", "minutes": "%H:%M", "seconds": "%H:%M:%S", "milliseconds": ":%S.%L",
}  # fmt: skip
"The first of January is labelled with its year, a first of a month with the month, hours only where days are short."


def _tick_numbers(axis: str) -> str:
    """Vega expression of a tick's text: as it is, or as 1.2·10⁻⁹ with one power for the whole axis.

    Very small numbers always get the power; large ones only where the axis is wide enough against its position to be
    told by the digits before it (1 000 000 003 stays as it is).
    """
    low, high = f"domain('{axis}')[0]", f"domain('{axis}')[1]"
    largest = f"max(abs({low}), abs({high}))"
    power = f"floor(log({largest}) / LN10 + 1e-9)"
    digits = "'⁰¹²³⁴⁵⁶⁷⁸⁹'"
    tens = f"abs({power}) >= 10 ? substring({digits}, floor(abs({power}) / 10), floor(abs({power}) / 10) + 1) : ''"
    ones = f"substring({digits}, abs({power}) % 10, abs({power}) % 10 + 1)"
    wide = f"({largest} >= 1e7 && ({high} - {low}) / {largest} > 1e-4)"
    mantissa = f"format(datum.value / pow(10, {power}), '.6~f')"
    powered = f"{mantissa} + '·10' + ({power} < 0 ? '⁻' : '') + ({tens}) + {ones}"
    return f"datum.value === 0 ? '0' : ({largest} < 1e-4 || {wide}) ? {powered} : datum.label"


def _named(name: str) -> alt.NamedData:
    return alt.NamedData(name=name)


def _dressed(chart: alt.LayerChart, *, height: int, width: int = WIDTH) -> alt.LayerChart:
    return (
        chart.properties(width=width, height=height, autosize=alt.AutoSizeParams(type="fit-x", contains="padding"))
        .configure(background="transparent", font=FONT, padding=4, aria=False)
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
        scale=alt.Scale(type="utc"),  # the rows hold the plant's clock time
        axis=alt.Axis(grid=False, format=TICK_TIMES, labelFlush=True, labelOverlap=True, tickCount=8),
    )


def _measured(field: str) -> alt.Y:
    return alt.Y(
        f"{field}:Q",
        title=None,
        scale=alt.Scale(zero=False, nice=True),
        axis=alt.Axis(tickCount=5, minExtent=LABEL_ROOM, labelExpr=_tick_numbers("y")),
    )


def _over_time(points: str, limits: str, sizes: list[int]) -> list[alt.Chart]:
    """Limits as steps, centre line, path and points; a signal differs in shape, size and colour."""
    borders = [
        alt.Chart(_named(limits))
        .mark_line(interpolate="step-after", stroke=CONTROL, strokeDash=[6, 3], strokeWidth=1.4)
        .encode(x=_time(), y=_measured(side))
        for side in ("l", "u")
    ]
    centre = (
        alt.Chart(_named(limits))
        .mark_line(interpolate="step-after", stroke=CONTROL, strokeWidth=1)
        .encode(x=_time(), y=_measured("c"))
    )
    path = (
        alt.Chart(_named(points))
        .mark_line(stroke=PROCESS, strokeWidth=1, opacity=0.55)
        .encode(x=_time(), y=_measured("v"))
    )
    dots = (
        alt.Chart(_named(points))
        .mark_point(filled=True, opacity=1)
        .encode(
            x=_time(),
            y=_measured("v"),
            shape=alt.Shape("s:N", scale=alt.Scale(domain=[0, 1], range=["circle", "diamond"]), legend=None),
            size=alt.Size("s:N", scale=alt.Scale(domain=[0, 1], range=sizes), legend=None),
            color=alt.Color("s:N", scale=alt.Scale(domain=[0, 1], range=[PROCESS, SIGNAL]), legend=None),
        )
    )
    return [*borders, centre, path, dots]


def _control() -> alt.LayerChart:
    mark = alt.Chart(_named("change")).mark_rule(stroke=SIGNAL, strokeDash=[2, 3], strokeWidth=1.5).encode(x=_time())
    *below, path, dots = _over_time("points", "limits", [14, 90])
    return _dressed(alt.layer(*below, mark, path, dots), height=210)


def _spread() -> alt.LayerChart:
    return _dressed(alt.layer(*_over_time("spreads", "spreadlimits", [10, 80])), height=110)


def _value_axis() -> alt.X:
    return alt.X(
        "x:Q",
        title=None,
        scale=alt.Scale(zero=False, nice=False, padding=28),
        axis=alt.Axis(grid=False, tickCount=7, labelFlush=True, labelOverlap=True, labelExpr=_tick_numbers("x")),
    )


def _limit_rules() -> list[alt.Chart]:
    """Specification limits (solid) and the aim (dashed), each with its word above."""
    colour = alt.Color("k:N", scale=alt.Scale(domain=["limit", "aim"], range=[SPECIFICATION, AFTER]), legend=None)
    dash = alt.StrokeDash("k:N", scale=alt.Scale(domain=["limit", "aim"], range=[[1, 0], [5, 3]]), legend=None)
    rule = alt.Chart(_named("marks")).mark_rule(strokeWidth=1.6).encode(x=_value_axis(), color=colour, strokeDash=dash)
    words = (
        alt.Chart(_named("marks"))
        .mark_text(baseline="bottom", dy=-3, fontSize=11)
        .encode(x=_value_axis(), y=alt.value(0), text="w:N", color=colour)
    )
    return [rule, words]


def _histogram() -> alt.LayerChart:
    count = alt.Y("n:Q", title=None, axis=alt.Axis(tickCount=4, format=",d", tickMinStep=1))
    bars = (
        alt.Chart(_named("bins"))
        .mark_rect(fill="var(--fill)", stroke=PROCESS, strokeWidth=0.8)
        .encode(x=_value_axis(), x2="b:Q", y=count, y2=alt.datum(0))
    )
    curve = (
        alt.Chart(_named("curve"))
        .mark_line(stroke=INK, strokeWidth=1.6)
        .encode(x=_value_axis(), y=alt.Y("n:Q", title=None))
    )
    return _dressed(alt.layer(bars, curve, *_limit_rules()), height=190)


def _curves(height: int, width: int) -> alt.LayerChart:
    axis = alt.Y("n:Q", title=None, axis=None, scale=alt.Scale(zero=True))
    window = alt.Chart(_named("window")).mark_rect(fill="var(--window)", opacity=1).encode(x=_value_axis(), x2="b:Q")
    now = (
        alt.Chart(_named("now"))
        .mark_line(stroke=MUTED, strokeDash=[5, 3], strokeWidth=1.6)
        .encode(x=_value_axis(), y=axis)
    )
    after = alt.Chart(_named("after")).mark_line(stroke=AFTER, strokeWidth=2).encode(x=_value_axis(), y=axis)
    return _dressed(alt.layer(window, now, after, *_limit_rules()), height=height, width=width)


def _centering() -> alt.LayerChart:
    return _curves(170, WIDTH)


def _card() -> alt.LayerChart:
    return _curves(118, 330)


def _history() -> alt.LayerChart:
    rows, target = _named("history"), _named("target")
    axis, scale = alt.Axis(tickCount=5, minExtent=LABEL_ROOM), alt.Scale(zero=False)
    low, index = (alt.Y(f"{field}:Q", title=None, scale=scale, axis=axis) for field in "lv")
    band = alt.Chart(rows).mark_area(color="var(--fill)").encode(x=_time(), y=low, y2="u:Q")
    line = alt.Chart(rows).mark_line(stroke=PROCESS, point={"fill": PROCESS, "size": 18}).encode(x=_time(), y=index)
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
    kinds = ["listed", "other"]
    dots = (
        alt.Chart(_named("points"))
        .mark_point(filled=True, size=46, opacity=0.75)
        .encode(
            x=x,
            y=y,
            shape=alt.Shape("k:N", scale=alt.Scale(domain=kinds, range=["diamond", "circle"]), legend=None),
            color=alt.Color("k:N", scale=alt.Scale(domain=kinds, range=[AFTER, MUTED]), legend=None),
            size=alt.Size("k:N", scale=alt.Scale(domain=kinds, range=[90, 26]), legend=None),
        )
    )
    return _dressed(alt.layer(field, words, *rules, dots), height=320)


KINDS: dict[str, Callable[[], alt.LayerChart]] = {
    "control": _control,
    "spread": _spread,
    "histogram": _histogram,
    "centering": _centering,
    "history": _history,
    "overview": _overview,
    "card": _card,
    "intervals": _intervals,
}
"""Every kind of picture. Data sets of each: control points, limits, change; spread spreads, spreadlimits; histogram
bins, curve, marks; centering and card window, now, after, marks; history history, target; overview field, targets,
points; intervals rows."""
