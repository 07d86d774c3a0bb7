"""Pictures: what they hold, what they must never hold, and how they are written."""

from __future__ import annotations

import json
import re
from datetime import datetime, timedelta
from typing import Any
from xml.etree import ElementTree
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from scipy import integrate, stats

from portfolio import shipped
from portfolio.publishing import charts, records
from portfolio.publishing.chart_templates import KINDS
from tests.publishing.sample import IMAGE, SCRIPT, page_data

SVG = "{http://www.w3.org/2000/svg}"
DATA = page_data()
ROWS = {row["characteristic"]: row for row in DATA.results.to_dict("records")}
EVIDENCE = {row["characteristic"]: row for row in DATA.evidence.to_dict("records")}
DRAWN = [name for name in EVIDENCE if ROWS[name]["stability"] != "not judged"]


def numbers(value: Any) -> list[float]:
    if isinstance(value, dict):
        return [n for part in value.values() for n in numbers(part)]
    if isinstance(value, list | tuple):
        return [n for part in value for n in numbers(part)]
    return [float(value)] if isinstance(value, int | float) and not isinstance(value, bool) else []


def texts(svg: str) -> list[str]:
    return ["".join(node.itertext()) for node in ElementTree.fromstring(str(svg)).iter(f"{SVG}text")]


def symbols(svg: str) -> list[str]:
    """Outlines of all points."""
    groups = ElementTree.fromstring(str(svg)).iter(f"{SVG}g")
    return [p.get("d") for g in groups if "mark-symbol" in (g.get("class") or "") for p in g.iter(f"{SVG}path")]


def walk(node: Any):
    yield node
    for child in node.values() if isinstance(node, dict) else node if isinstance(node, list) else []:
        yield from walk(child)


# Templates ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
def test_a_template_is_compiled_without_a_single_row(kind):
    template = charts.templates()[kind]
    assert template["$schema"].startswith("https://vega.github.io/schema/vega/v")
    for entry in template["data"]:
        constant = entry.get("values", [])
        assert constant in ([], [{}]), "layers on a constant have one empty row"
        assert "url" not in entry


@pytest.mark.parametrize("kind", KINDS)
def test_every_colour_is_a_variable_of_the_style(kind):
    text = json.dumps(charts.templates()[kind])
    assert not re.search(r'"#[0-9a-fA-F]{3,8}"', text)
    named = set(re.findall(r"var\((--[a-z]+)\)", text))
    style = shipped.text("reports/style.css")
    meeting = shipped.text("reports/meeting.css")
    assert named
    for name in named:
        assert f"{name}:" in style and f"{name}:" in meeting, name


@pytest.mark.parametrize("kind", KINDS)
def test_marks_and_axes_are_silent_for_screen_readers(kind):
    parts = [
        part
        for node in walk(charts.templates()[kind])
        if isinstance(node, dict)
        for key in ("marks", "axes", "legends")
        for part in (node.get(key) if isinstance(node.get(key), list) else [])
    ]
    assert parts and all(part["aria"] is False for part in parts)


def test_location_has_one_measured_scale_and_signals_differ_in_shape_size_and_colour():
    scales = {scale["name"]: scale for scale in charts.templates()["control"]["scales"]}
    assert set(scales) == {"x", "y", "shape", "size", "color"}
    for name in ("shape", "size", "color"):
        assert len(set(map(str, scales[name]["range"]))) == 2


def test_now_and_after_limit_and_aim_are_told_apart_without_colour():
    for kind in ("centering", "card"):
        marks = [
            node for node in walk(charts.templates()[kind]) if isinstance(node, dict) and node.get("type") == "line"
        ]
        dashes = [str(mark["encode"]["update"].get("strokeDash")) for mark in marks]
        assert len(marks) == 2 and dashes[0] != dashes[1]
        (dash,) = (scale for scale in charts.templates()[kind]["scales"] if scale["name"] == "strokeDash")
        assert dash["domain"] == ["limit", "aim"] and dash["range"] == [[1, 0], [5, 3]]
    for name in ("shape", "size"):
        (scale,) = (scale for scale in charts.templates()["overview"]["scales"] if scale["name"] == name)
        assert len(set(map(str, scale["range"]))) == 2


def test_a_changed_copy_does_not_change_the_template():
    charts.templates()["control"]["data"].clear()
    assert charts.templates()["control"]["data"]


def test_the_script_of_the_templates_is_the_same_each_time_and_cannot_end_its_element():
    script = charts.template_script()
    assert script == charts.template_script()
    assert script.startswith("window.portfolioTemplates={") and "</" not in script


# What each picture holds ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", DRAWN)
def test_no_specification_value_is_in_the_control_chart_and_no_control_limit_in_the_histogram(name):
    row, evidence = ROWS[name], EVIDENCE[name]
    location, spread = records.control(row, evidence, "UTC")
    held = numbers([location, spread])
    specified = [row[key] for key in ("lsl", "usl") if row[key] == row[key]]
    assert not set(specified) & set(held)
    assert set(location) == {"points", "limits", "change"} and set(spread) == {"spreads", "spreadlimits"}
    histogram = records.histogram(row, evidence)
    assert set(histogram) == {"bins", "curve", "marks"}
    control = [*evidence["location_lower"], *evidence["location_upper"], *evidence["spread_upper"]]
    assert not set(control) & set(numbers(histogram))


@pytest.mark.parametrize("name", DRAWN)
def test_points_limits_and_signals_are_those_of_the_evidence(name):
    row, evidence = ROWS[name], EVIDENCE[name]
    location, spread = records.control(row, evidence, "UTC")
    points = charts.expanded(location["points"])
    span = np.ptp([*evidence["location"], *evidence["location_lower"], *evidence["location_upper"]])
    assert np.allclose([p["v"] for p in points], evidence["location"], rtol=0, atol=span * 1e-4)
    beyond = {i for i, rule in zip(evidence["signal_index"], evidence["signal_rule"], strict=True) if rule != "spread"}
    assert {i for i, p in enumerate(points) if p["s"]} == beyond
    wide = {i for i, rule in zip(evidence["signal_index"], evidence["signal_rule"], strict=True) if rule == "spread"}
    spreads = charts.expanded(spread["spreads"])
    there = [i for i, value in enumerate(evidence["spread"]) if value is not None and np.isfinite(value)]
    assert {there[i] for i, p in enumerate(spreads) if p["s"]} == wide
    assert len(spreads) == len(there) and all(p["v"] is not None for p in spreads)
    moments = [datetime(1970, 1, 1) + timedelta(milliseconds=p["t"]) for p in points]
    assert moments == [np.datetime64(t, "us").astype(datetime) for t in evidence["taken"]]


def test_limits_are_steps_where_they_change_and_reach_the_last_subgroup():
    location, _ = records.control(ROWS["S18 changing limits"], EVIDENCE["S18 changing limits"], "UTC")
    t = [p["t"] for p in charts.expanded(location["points"])]
    assert [step["t"] for step in location["limits"]] == [t[0], t[30], t[-1]]
    widths = [step["u"] - step["l"] for step in location["limits"]]
    assert widths[1] == pytest.approx(1.2 * widths[0], rel=1e-3) and widths[2] == widths[1]


def test_the_first_moving_range_does_not_exist():
    _, spread = records.control(ROWS["S01 fits"], EVIDENCE["S01 fits"], "UTC")
    assert len(charts.expanded(spread["spreads"])) == len(EVIDENCE["S01 fits"]["location"]) - 1


def test_the_date_of_a_change_is_marked_only_where_there_is_one():
    for name, marked in (("U0 step", 1), ("S01 fits", 0)):
        assert len(records.control(ROWS[name], EVIDENCE[name], "UTC")[0]["change"]) == marked


@pytest.mark.parametrize("name", ["R5 tiny values", "R6 large values", "R7 around zero", "S01 fits"])
def test_a_picture_resolves_a_thousandth_of_sigma_at_any_size_of_number(name):
    row, evidence = ROWS[name], EVIDENCE[name]
    points = charts.expanded(records.control(row, evidence, "UTC")[0]["points"])
    error = np.abs(np.subtract([p["v"] for p in points], evidence["location"]))
    assert error.max() < 0.002 * row["sigma_total"]
    marks = {mark["w"]: mark["x"] for mark in records.histogram(row, evidence)["marks"]}
    assert (marks["lower limit"], marks["upper limit"]) == (row["lsl"], row["usl"]), "limits stand as registered"


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("S01 fits", ["lower limit", "upper limit", "aim"]),
        ("S11 upper limit only", ["upper limit"]),
        ("S12 lower limit only", ["lower limit"]),
        ("N07 no limits", []),
    ],
)
def test_only_the_limits_that_exist_are_drawn(name, words):
    assert [mark["w"] for mark in records.marks(ROWS[name])] == words


@pytest.mark.parametrize("name", ["S01 fits", "R5 tiny values", "R6 large values", "N06 constant", "N04 one value"])
def test_bins_hold_every_value_and_touch(name):
    bins = charts.expanded(records.histogram(ROWS[name], EVIDENCE[name])["bins"])
    assert sum(bin["n"] for bin in bins) == ROWS[name]["measurements"]
    assert [bin["b"] for bin in bins[:-1]] == [bin["x"] for bin in bins[1:]]


def test_a_curve_is_drawn_only_over_a_shape_that_was_judged():
    assert records.histogram(ROWS["N11 no shape"], EVIDENCE["N11 no shape"])["curve"] == []
    assert records.histogram(ROWS["N06 constant"], EVIDENCE["N06 constant"])["curve"] == []
    assert records.histogram(ROWS["S01 fits"], EVIDENCE["S01 fits"])["curve"]


def test_the_curve_is_the_normal_density_with_the_area_of_the_bars():
    row = ROWS["S01 fits"]
    histogram = records.histogram(row, EVIDENCE["S01 fits"])
    curve = charts.expanded(histogram["curve"])
    _, width, counts = histogram["bins"]["bins"]
    x, y = [p["x"] for p in curve], [p["n"] for p in curve]
    expected = stats.norm.pdf(x, row["mean"], row["sigma_total"]) * sum(counts) * width
    assert np.allclose(y, expected, rtol=1e-12)
    assert integrate.simpson(y, x=x) == pytest.approx(sum(counts) * width, rel=1e-4)


def test_the_centering_picture_holds_both_means_and_the_window_that_reaches_the_target():
    row = next(r for r in ROWS.values() if r["centering"] == "reaches" and r["target_cpk"] == 1.67)
    data = records.centering(row)
    for name, mean in (("now", row["mean"]), ("after", row["aim"])):
        curve = charts.expanded(data[name])
        assert max(curve, key=lambda p: p["n"])["x"] == pytest.approx(mean)
    edges = data["window"][0]
    for edge in (edges["x"], edges["b"]):
        assert min(row["usl"] - edge, edge - row["lsl"]) / (3 * row["sigma_total"]) >= 1.67 - 1e-9
    assert records.centering({**row, "aim_low": np.nan})["window"] == []


def test_history_leaves_out_what_was_not_judged():
    rows = DATA.history[DATA.history["characteristic"] == "S01 fits"].copy()
    rows.loc[rows.index[1], "index"] = np.nan
    data = records.history(rows, 1.33, "UTC")
    points = charts.expanded(data["history"])
    assert len(points) == len(rows) - 1 and data["target"] == [{"v": 1.33}]
    assert [p["v"] for p in points] == [round(v, 4) for v in rows["index"].dropna()]


def test_clock_times_are_those_of_the_plant_also_when_the_clock_changes():
    zone = ZoneInfo("Europe/Vienna")
    moments = [datetime(2026, 10, 24, 22), datetime(2026, 10, 25, 0, 30), datetime(2026, 10, 25, 3)]
    drawn = records.local_milliseconds(moments, "Europe/Vienna")
    for moment, ms in zip(moments, drawn, strict=True):
        local = moment.replace(tzinfo=ZoneInfo("UTC")).astimezone(zone).replace(tzinfo=None)
        assert datetime(1970, 1, 1) + timedelta(milliseconds=ms) == local


def test_columns_are_written_out_as_rows():
    data = {"columns": {"t": [1000, 60, 0.5], "v": [1.0, None, 3.0], "s": [2]}}
    assert charts.expanded(data) == [
        {"t": 1000, "v": 1.0, "s": 0},
        {"t": 61000, "v": None, "s": 0},
        {"t": 61500.0, "v": 3.0, "s": 1},
    ]
    assert charts.expanded({"columns": {"t": [], "v": [], "s": []}}) == []
    assert charts.expanded([{"a": 1}]) == [{"a": 1}]


# Drawn now ------------------------------------------------------------------------------------------------------------


def control_svg(name: str, decimal: str = ".") -> str:
    return charts.svg("control", records.control(ROWS[name], EVIDENCE[name], "UTC")[0], "label", "p-", decimal)


def test_a_drawn_picture_is_well_formed_without_inline_style_and_has_one_label():
    svg = charts.svg("card", records.centering(ROWS["R8 may reach"]), f'now and "after" {IMAGE}', "k-")
    root = ElementTree.fromstring(str(svg))
    assert root.get("role") == "img" and root.get("aria-label") == f'now and "after" {IMAGE}'
    assert not [node for node in root.iter() if node.get("style")]
    assert not [node for node in root.iter() if node is not root and node.get("aria-label")]


def test_ids_of_two_pictures_never_meet():
    data = records.control(ROWS["S01 fits"], EVIDENCE["S01 fits"], "UTC")[0]
    found = []
    for prefix in ("a-", "b-"):
        text = str(charts.svg("control", data, "x", prefix))
        ids = set(re.findall(r'\sid="([^"]+)"', text))
        used = set(re.findall(r'url\(#([^)]+)\)|href="#([^"]+)"', text))
        assert {one or two for one, two in used} <= ids
        assert all(name.startswith(prefix) for name in ids)
        found.append(ids)
    assert not found[0] & found[1]


def test_hostile_names_are_text_in_a_drawn_picture():
    names = [SCRIPT, 'a style="x" id="y" href="#z', "a & b", "</text></svg>"]
    rows = [{"w": name, "v": 0.5, "l": 0.4, "u": 0.6} for name in names]
    svg = charts.svg("intervals", {"rows": rows}, "label", "q-")
    assert "<script" not in str(svg)
    shown = texts(svg)
    for name in names:
        assert name in shown, "shown as it is, nothing stripped"


def test_each_subgroup_is_one_point_and_a_signal_has_another_outline():
    name = next(n for n in DRAWN if any(rule != "spread" for rule in EVIDENCE[n]["signal_rule"]))
    drawn = symbols(control_svg(name))
    location, _ = records.control(ROWS[name], EVIDENCE[name], "UTC")
    signals = sum(p["s"] for p in charts.expanded(location["points"]))
    assert len(drawn) == len(EVIDENCE[name]["location"])
    assert signals and sum("A" not in outline for outline in drawn) == signals, "diamonds have no arcs"


def test_very_small_values_get_one_power_of_ten_for_the_axis():
    labels = [text for text in texts(control_svg("R5 tiny values")) if "·10" in text]
    assert len(labels) >= 4 and {text.split("·10")[1] for text in labels} == {"⁻⁹"}
    assert len(set(labels)) == len(labels)


def test_large_values_with_a_small_spread_are_written_out():
    labels = [text for text in texts(control_svg("R6 large values")) if re.match(r"1.000.000.00\d$", text)]
    assert len(set(labels)) >= 4
    assert not any("·10" in text for text in texts(control_svg("R6 large values")))


def test_large_values_with_a_large_spread_get_a_power_of_ten():
    t = 86_400_000
    data = {"points": [{"t": i * t, "v": 1e9 + i * 1e8, "s": 0} for i in range(9)], "limits": [], "change": []}
    labels = [text for text in texts(charts.svg("control", data, "x", "p-")) if "·10" in text]
    assert labels and {text.split("·10")[1] for text in labels} == {"⁹"}


def test_the_decimal_sign_is_the_plans():
    assert any(re.fullmatch(r"25\.\d+", text) for text in texts(control_svg("S01 fits")))
    comma = texts(control_svg("S01 fits", decimal=","))
    assert any(re.fullmatch(r"25,\d+", text) for text in comma) and not any("." in text for text in comma)


@pytest.mark.parametrize(
    ("hours", "expected"),
    [(24 * 30, r"20\d\d"), (24, r"\d\d [A-Z][a-z]{2}|[A-Z][a-z]{2}"), (0.5, r"\d\d:\d\d")],
)
def test_time_labels_name_the_year_the_day_or_the_hour_as_the_stretch_needs(hours, expected):
    began = datetime(2026, 9, 1).timestamp() * 1000
    rows = [{"t": began + i * hours * 3_600_000, "v": float(i % 7), "s": 0} for i in range(40)]
    labels = texts(charts.svg("control", {"points": rows, "limits": [], "change": []}, "x", "p-"))
    assert any(re.fullmatch(expected, text) for text in labels)


def test_a_constant_characteristic_and_a_single_value_can_be_drawn():
    for name in ("N06 constant", "N04 one value"):
        svg = charts.svg("histogram", records.histogram(ROWS[name], EVIDENCE[name]), "x", "p-")
        assert "lower limit" in texts(svg) and "NaN" not in str(svg)


@pytest.mark.parametrize("name", list(EVIDENCE))
def test_every_picture_of_the_sample_can_be_written_as_json(name):
    row, evidence = ROWS[name], EVIDENCE[name]
    held = [records.control(row, evidence, "UTC"), records.histogram(row, evidence)]
    if row["cpk_centered"] == row["cpk_centered"]:
        held.append(records.centering(row))
    json.dumps(held, allow_nan=False)
