"""The page of one characteristic: its pictures and the numbers behind them."""

from __future__ import annotations

import csv
import io
import json
import math
import re

import pandas as pd
import pytest

from portfolio.publishing import charts, names
from portfolio.publishing.numbers import Numbers
from tests.publishing import issue
from tests.publishing.sample import SCRIPT, page_data

DATA = page_data(issue.SIZE)
ROWS = {row["characteristic"]: row for row in DATA.results.to_dict("records")}
EVIDENCE = {row["characteristic"]: row for row in DATA.evidence.to_dict("records")}
LOCATION = "figure[data-chart=control] svg"


def held(page) -> dict:
    return json.loads(page.locator("#data").text_content())


def points(page, kind: str) -> list[str]:
    """Outlines of the points drawn in one figure."""
    return page.locator(f"figure[data-chart={kind}] svg g.mark-symbol path").evaluate_all(
        "nodes => nodes.map((n) => n.getAttribute('d'))"
    )


@pytest.mark.parametrize("name", [SCRIPT, "R6 large values", "S18 changing limits"])
def test_every_figure_is_drawn_with_its_caption_as_the_one_label(site, name):
    page = site.characteristic(name)
    figures = page.locator("figure.chart")
    moved = ROWS[name]["cp"] == ROWS[name]["cp"] and ROWS[name]["centering"] != "already there"
    assert figures.count() == (5 if moved else 4)
    for figure in figures.all():
        assert figure.get_attribute("data-drawn") == "yes"
        svg = figure.locator("svg")
        assert svg.count() == 1 and svg.get_attribute("role") == "img"
        caption = re.sub(r"\s+", " ", figure.locator("figcaption").text_content().strip())
        assert svg.get_attribute("aria-label") == caption and len(caption) > 30
        assert svg.locator("[aria-label]").count() == 0
        box = svg.bounding_box()
        assert box["width"] > 500 and box["height"] > 90


@pytest.mark.parametrize("name", ["S01 fits", "S19 thinned", "U7 isolated extremes"])
def test_each_subgroup_is_a_point_and_each_signal_a_diamond(site, name):
    page = site.characteristic(name)
    evidence = EVIDENCE[name]
    drawn = points(page, "control")
    assert len(drawn) == len(evidence["location"])
    rules = zip(evidence["signal_index"], evidence["signal_rule"], strict=True)
    signals = len({int(i) for i, rule in rules if rule != "spread"})
    assert sum("A" not in outline for outline in drawn) == signals
    caption = page.locator("figure[data-chart=control] figcaption").text_content().replace("\u00a0", " ")
    assert f" {signals} " in caption or (signals == 0 and re.search(r"\b(0|no|none)\b", caption, re.I))


def test_neither_chart_holds_the_limits_of_the_other_question(site):
    for name in ("S01 fits", "R6 large values", SCRIPT):
        page = site.characteristic(name)
        data, row, evidence = held(page), ROWS[name], EVIDENCE[name]
        control = json.dumps([data["control"], data["spread"]])
        assert "limit" not in control.replace('"limits"', "").replace("spreadlimits", "") and "aim" not in control
        for limit in (row["lsl"], row["usl"]):
            assert json.dumps(limit) not in control
        shown = page.locator(f"{LOCATION} text").all_text_contents()
        assert not [text for text in shown if "limit" in text]
        assert not [
            v
            for v in (*evidence["location_lower"], *evidence["location_upper"])
            if json.dumps(v) in json.dumps(data["histogram"])
        ]
        assert page.locator("figure[data-chart=histogram] svg text").all_text_contents().count("upper limit") == 1


def test_the_scale_of_the_location_is_set_by_the_process_alone(site):
    """A characteristic far inside a wide tolerance fills its chart all the same."""
    page = site.characteristic("S01 fits")
    box = page.locator(LOCATION).bounding_box()
    lines = page.locator(f"{LOCATION} g.mark-line path[stroke-dasharray]")
    edges = [lines.nth(i).bounding_box()["y"] for i in range(2)]
    assert abs(edges[0] - edges[1]) > 0.5 * box["height"]


def test_two_charts_over_the_same_time_stand_below_each_other(site):
    page = site.characteristic("S01 fits")
    first = page.locator(f"{LOCATION} g.mark-symbol path").nth(1).bounding_box()
    second = page.locator("figure[data-chart=spread] svg g.mark-symbol path").nth(0).bounding_box()
    centre = [box["x"] + box["width"] / 2 for box in (first, second)]
    assert abs(centre[0] - centre[1]) < 1.5, "the second subgroup and its moving range"


def test_the_tables_hold_what_the_pictures_show(site):
    name = "S01 fits"
    page = site.characteristic(name)
    data = held(page)
    for kind in ("control", "histogram", "history"):
        details = page.locator(f"details[data-table={kind}]")
        details.locator("summary").click()
        details.locator("table").wait_for()
        rows = details.locator("tbody tr").evaluate_all(
            "rows => rows.map((r) => [...r.cells].map((c) => c.textContent))"
        )
        if kind == "control":
            expected = charts.expanded(data["control"]["points"])
            assert [float(row[1].replace("\u2212", "-")) for row in rows] == [p["v"] for p in expected]
            assert [row[4] == "yes" for row in rows] == [bool(p["s"]) for p in expected]
            assert rows[0][0] == "2026-08-31 06:00", "clock time of the plant"
        elif kind == "histogram":
            bins = charts.expanded(data["histogram"]["bins"])
            assert [int(row[2]) for row in rows] == [b["n"] for b in bins]
            assert sum(int(row[2]) for row in rows) == ROWS[name]["measurements"]
            assert float(rows[0][0]) == pytest.approx(bins[0]["x"], rel=1e-11)
        else:
            assert [float(row[1]) for row in rows] == [p["v"] for p in charts.expanded(data["history"]["history"])]
    assert page.locator("details table").count() >= 3


def test_the_browser_draws_the_same_curve_as_the_program(site):
    page = site.characteristic("S01 fits")
    outline = page.locator("figure[data-chart=histogram] svg g.mark-line path").get_attribute("d")
    drawn = [tuple(map(float, pair.split(","))) for pair in re.findall(r"[-\d.]+,[-\d.]+", outline)]
    mean, sigma, area = held(page)["histogram"]["curve"]["normal"]
    expected = charts.normal_curve(mean, sigma, area)
    assert len(drawn) == len(expected)
    top = min(y for _, y in drawn)
    bottom = 190  # the height of the picture's frame: count 0
    highest = max(p["n"] for p in expected)
    for i in (0, 15, 30, 45, 60):
        share = (drawn[i][0] - drawn[0][0]) / (drawn[-1][0] - drawn[0][0])
        assert share == pytest.approx(i / 60, abs=1e-3)
        assert (bottom - drawn[i][1]) / (bottom - top) == pytest.approx(expected[i]["n"] / highest, abs=1e-2)


def test_small_and_large_numbers_have_readable_ticks(site):
    labels = {}
    for name in ("R5 tiny values", "R6 large values", "R7 around zero"):
        page = site.characteristic(name)
        labels[name] = page.locator(f"{LOCATION} text").all_text_contents()
        for figure in ("control", "histogram"):
            texts = page.locator(f"figure[data-chart={figure}] svg text").all_text_contents()
            assert not [text for text in texts if "NaN" in text or "e-" in text or len(text) > 16]
    assert sum(text.endswith("·10⁻⁹") for text in labels["R5 tiny values"]) >= 4
    assert sum(bool(re.fullmatch(r"1\u202f000\u202f000\u202f00\d", text)) for text in labels["R6 large values"]) >= 4


def test_what_was_not_judged_is_told_with_what_there_is_to_see(site):
    for name in ("N01 no data", "N04 one value", "N06 constant", "N07 no limits", "N13 sorted"):
        row = ROWS[name]
        page = site.characteristic(name)
        shown = page.locator("main").text_content()
        assert "Not judged" in shown and "Cpk" not in shown and "NaN" not in shown
        expected = row["characteristic"] in EVIDENCE
        assert (page.locator("figure[data-chart=histogram] svg").count() == 1) == expected
        assert (page.locator(LOCATION).count() == 1) == (row["stability"] != "not judged")


@pytest.mark.parametrize("name", [SCRIPT, "U0 step"])
def test_page_list_sheet_and_table_say_the_same_numbers(site, name):
    row, n = ROWS[name], Numbers()
    page = site.characteristic(name)
    shown = page.locator("main").text_content()
    for key in ("index", "index_low", "index_high"):
        assert n.index(row[key]) in shown
    table = {
        r["characteristic"]: r
        for r in csv.DictReader(io.StringIO(issue.files()["data/judgement.csv"].decode("utf-8-sig")))
    }
    assert math.isclose(float(table[name]["index"]), row["index"], rel_tol=1e-9)
    listed = site.visit(f"list.html#search={name.split()[0]}")
    line = listed.locator(f"#all tbody tr:has(a[href='c/{names.page(name)}'])").text_content()
    assert n.index(row["index"]) in line
    if pd.notna(row["rank"]) and row["rank"] <= 3:
        assert n.index(row["cpk_centered"]) in line
        for path in ("index.html", "meeting.html"):
            told = site.visit(path, ready=path != "meeting.html").locator("main").text_content()
            for value in (row["index"], row["cpk_centered"]):
                assert n.index(value) in told


def test_next_and_previous_follow_the_ranks(site):
    ranked = sorted((row for row in ROWS.values() if pd.notna(row["rank"])), key=lambda row: row["rank"])
    page = site.characteristic(ranked[0]["characteristic"])
    assert page.locator("a[rel=prev]").count() == 0
    for row in ranked[1:4]:
        page.locator("a[rel=next]").click()
        page.wait_for_selector("body[data-ready]")
        assert page.locator("h1").evaluate("node => node.textContent") == row["characteristic"]


def test_pictures_are_drawn_again_when_the_window_changes(site):
    page = site.characteristic("S01 fits")
    page.set_viewport_size({"width": 500, "height": 800})
    page.wait_for_function(
        "() => document.querySelector('figure[data-chart=control] svg').getBoundingClientRect().width < 500"
    )
    assert page.locator(LOCATION).count() == 1
    assert len(points(page, "control")) == len(EVIDENCE["S01 fits"]["location"])
