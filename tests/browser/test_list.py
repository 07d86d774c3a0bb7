"""The list of all characteristics and the first screen that leads into it."""

from __future__ import annotations

import csv
import io
import re

import pytest
from playwright.sync_api import expect

from tests.publishing import issue
from tests.publishing.sample import FORMULA, QUOTES, page_data

DATA = page_data(issue.SIZE)
RESULTS = DATA.results
PAGE = 100
COLUMNS = ("rank", "name", "site", "cell", "index", "indexLow", "after", "chance", "route")


def names(page) -> list[str]:
    return page.locator("#all tbody th").all_text_contents()


def found(page) -> int:
    return int(re.match(r"\d+", page.locator("#found").text_content()).group())


def heads(page) -> list[str | None]:
    return [head.get_attribute("aria-sort") for head in page.locator("#all thead th").all()]


def test_every_characteristic_is_in_the_list_a_hundred_at_a_time(site):
    page = site.visit("list.html")
    assert found(page) == len(RESULTS)
    first = names(page)
    assert len(first) == PAGE and page.locator("#earlier").is_disabled()
    page.locator("#later").click()
    rest = names(page)
    assert len(rest) == len(RESULTS) - PAGE and page.locator("#later").is_disabled()
    assert sorted(first + rest) == sorted(RESULTS["characteristic"])
    assert "page=2" in page.url
    page.go_back()
    assert names(page) == first


def test_words_are_searched_in_any_order_and_any_case(site):
    page = site.visit("list.html")
    page.locator("input[type=search]").fill("VALUES tiny")
    assert names(page) == ["R5 tiny values"]
    assert "search=VALUES" in page.url
    page.locator("input[type=search]").fill("no such thing")
    assert names(page) == [] and "Nothing matches" in page.locator("#found").text_content()
    page.locator("#clear").click()
    assert found(page) == len(RESULTS) and page.locator("input[type=search]").input_value() == ""


@pytest.mark.parametrize("key", ["site", "cell", "route", "centering", "class", "owner"])
def test_each_filter_shows_exactly_the_rows_that_have_the_value(site, key):
    page = site.visit("list.html")
    control = page.locator(f"[data-filter={key}]")
    for value in [option for option in control.locator("option").evaluate_all("o => o.map((x) => x.value)") if option][
        :4
    ]:
        control.select_option(value)
        assert found(page) == int((RESULTS[key] == value).sum()) > 0
    control.select_option("")
    assert found(page) == len(RESULTS)


@pytest.mark.parametrize("column", COLUMNS)
def test_each_column_sorts_both_ways_with_empty_cells_last(site, column):
    page = site.visit("list.html")
    button = page.locator(f"th[data-column={column}] button")
    place = COLUMNS.index(column)
    seen = []
    button.click()
    if column == "rank":  # it was sorted by rank upwards already
        button.click()
    for direction in ("ascending", "descending") if column != "rank" else ("ascending",):
        if column == "rank" and heads(page)[place] != direction:
            button.click()
        assert heads(page)[place] == direction and sum(head is not None for head in heads(page)) == 1
        cells = page.locator(f"#all tbody tr > :nth-child({place + 1})").all_text_contents()
        filled = [bool(cell) for cell in cells]
        assert filled == sorted(filled, reverse=True), "what is empty stands last both ways"
        seen.append([cell for cell in cells if cell])
        button.click()
    if column in ("index", "after"):
        for cells, sign in zip(seen, (1, -1), strict=True):
            values = [sign * float(re.search(r"[-\d.]+$", cell.replace("\u2212", "-")).group()) for cell in cells]
            assert values == sorted(values)


def test_the_state_is_in_the_address_and_comes_back_from_it(site):
    page = site.visit("list.html")
    page.locator("[data-filter=cell]").select_option("stable, not capable")
    page.locator("th[data-column=index] button").click()
    page.locator("input[type=search]").fill("r")
    shown, address = names(page), page.url
    site.visit("methods.html")
    page = site.visit(address.rsplit("/", 1)[1])
    assert names(page) == shown and page.locator("[data-filter=cell]").input_value() == "stable, not capable"
    assert heads(page)[COLUMNS.index("index")] == "ascending"


def test_back_undoes_a_filter(site):
    page = site.visit("list.html")
    page.locator("[data-filter=route]").select_option("re-centre")
    narrowed = found(page)
    page.locator("[data-filter=cell]").select_option("not judged")
    assert found(page) == 0 if "Nothing" not in page.locator("#found").text_content() else True
    page.go_back()
    assert found(page) == narrowed and page.locator("[data-filter=cell]").input_value() == ""


def test_the_rows_shown_are_saved_as_a_safe_table(site):
    page = site.visit("list.html#search=" + "cmd")
    with page.expect_download() as waited:
        page.locator("#save").click()
    text = waited.value.path().read_text(encoding="utf-8-sig")
    rows = list(csv.DictReader(io.StringIO(text)))
    assert [row["name"] for row in rows] == [f"'{FORMULA}"]
    stored = RESULTS[RESULTS["characteristic"] == FORMULA].iloc[0]
    assert float(rows[0]["index"]) == pytest.approx(stored["index"], rel=5e-4)
    site.requests = [url for url in site.requests if not url.startswith("blob:")]


def test_each_count_of_the_first_screen_opens_a_list_of_that_many(site):
    page = site.visit("index.html")
    links = page.locator("main a[href^='list.html#']").evaluate_all(
        "n => n.map((a) => [a.getAttribute('href'), a.textContent])"
    )
    counted = [(href, int(text)) for href, text in links if re.fullmatch(r"\d+", text.strip())]
    assert len(counted) >= 5 + RESULTS["route"].nunique()
    for href, number in counted:
        page = site.visit(href)
        expect(page.locator("#found")).to_have_text(re.compile(rf"^{number} of " if number else "^Nothing"))


def test_the_overview_has_a_point_for_each_characteristic_that_could_be_moved(site):
    page = site.visit("index.html")
    both = RESULTS["cpk_centered"].notna() & RESULTS["index"].notna()
    outlines = page.locator("figure[data-chart=overview] svg g.mark-symbol path").evaluate_all(
        "nodes => nodes.map((n) => n.getAttribute('d'))"
    )
    assert len(outlines) == int(both.sum())
    assert sum("A" not in outline for outline in outlines) == int(RESULTS["rank"].notna().sum())


def test_a_point_of_the_overview_names_its_characteristic_and_opens_its_page(site):
    page = site.visit("index.html")
    figure = page.locator("figure[data-chart=overview]")
    figure.scroll_into_view_if_needed()
    row = RESULTS[RESULTS["characteristic"] == QUOTES].iloc[0]
    places = figure.locator("svg g.mark-symbol path").evaluate_all(
        "nodes => nodes.map((n) => n.getBoundingClientRect()).map((b) => [b.x + b.width / 2, b.y + b.height / 2])"
    )
    told = figure.locator(".told")
    for x, y in places:
        page.mouse.move(x, y)
        if told.text_content() == QUOTES:
            break
    assert told.text_content() == QUOTES and told.locator("bdi").count() == 1
    page.mouse.click(x, y)
    page.wait_for_url("**/c/*.html")
    page.wait_for_selector("body[data-ready]")
    assert page.locator("h1").evaluate("node => node.textContent") == row["characteristic"]
