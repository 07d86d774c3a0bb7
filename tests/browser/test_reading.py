"""For every reader: keyboard, narrow windows, dark, without script, on paper, with a screen reader's rules."""

from __future__ import annotations

import json
import re
from importlib import resources

import pytest

from portfolio.publishing import names as page_names
from tests.publishing import issue
from tests.publishing.sample import LONG, SCRIPT, page_data

RESULTS = page_data(issue.SIZE).results
KINDS = [*issue.FIXED, f"c/{page_names.page(SCRIPT)}", f"c/{page_names.page('N01 no data')}"]
AXE = (resources.files("axe_playwright_python") / "axe.min.js").read_text(encoding="utf-8")
RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]


def ready(path: str) -> bool:
    return path != "meeting.html"


def focused(page) -> str:
    return page.evaluate("document.activeElement.outerHTML.slice(0, 200)")


def test_the_first_stop_of_the_keyboard_skips_to_the_content(site):
    page = site.visit("index.html")
    page.keyboard.press("Tab")
    skip = page.locator("a.skip")
    assert "skip" in focused(page) and skip.bounding_box()["x"] >= 0, "it becomes visible"
    page.keyboard.press("Enter")
    page.keyboard.press("Tab")
    assert page.evaluate("document.getElementById('main').contains(document.activeElement)")


def test_the_first_proposal_is_reached_and_opened_by_keyboard_with_a_visible_focus(site):
    page = site.visit("index.html")
    best = RESULTS[RESULTS["rank"] == 1]["characteristic"].iloc[0]
    for _ in range(40):
        page.keyboard.press("Tab")
        outline = page.evaluate("getComputedStyle(document.activeElement).outlineStyle")
        assert outline not in ("none", ""), focused(page)
        if (
            page.evaluate(
                "document.activeElement.closest('.proposal, article') !== null && document.activeElement.tagName"
            )
            == "A"
        ):
            break
    page.keyboard.press("Enter")
    page.wait_for_selector("h1")
    page.wait_for_url("**/c/*.html")
    assert page.locator("h1").evaluate("node => node.textContent") == best


@pytest.mark.parametrize("key", ["Enter", "Space"])
def test_a_column_is_sorted_by_keyboard(site, key):
    page = site.visit("list.html")
    page.locator("th[data-column=index] button").focus()
    page.keyboard.press(key)
    assert page.locator("th[data-column=index]").get_attribute("aria-sort") == "ascending"


def test_short_keys_search_and_turn_pages_and_rest_while_typing(site):
    page = site.visit("list.html")
    page.keyboard.press("/")
    page.keyboard.type("n up?")
    assert page.locator("input[type=search]").input_value() == "n up?"
    assert page.url.startswith("file://") and "list.html" in page.url
    best, second = (RESULTS[RESULTS["rank"] == i]["characteristic"].iloc[0] for i in (1, 2))
    page = site.characteristic(best)
    for key, expected in (("n", second), ("p", best)):
        page.keyboard.press(key)
        page.wait_for_url(f"**/{page_names.page(expected)}")
        page.wait_for_selector("body[data-ready]")
    page.keyboard.press("u")
    page.wait_for_url("**/list.html*")


def test_short_keys_can_be_switched_off_and_the_help_gives_the_focus_back(site):
    page = site.visit("list.html")
    opener = page.locator("#open-keys")
    opener.focus()
    page.keyboard.press("Enter")
    assert page.locator("dialog[open]").count() == 1
    page.locator("dialog input").uncheck()
    page.keyboard.press("Escape")
    assert page.locator("dialog[open]").count() == 0 and "open-keys" in focused(page)
    page.keyboard.press("/")
    assert "search" not in focused(page)
    page.keyboard.press("?")
    page.locator("dialog input").check()
    page.keyboard.press("Escape")
    page.keyboard.press("/")
    assert 'type="search"' in focused(page)


@pytest.mark.parametrize("width", [320, 640])
def test_nothing_runs_over_a_narrow_window(sites, width):
    site = sites(viewport={"width": width, "height": 700})
    for path in [*KINDS, f"c/{page_names.page(LONG)}"]:
        page = site.visit(path, ready=ready(path))
        assert page.evaluate("document.documentElement.scrollWidth") <= width, path
        edges = page.locator("figure svg").evaluate_all("nodes => nodes.map((n) => n.getBoundingClientRect().right)")
        assert max(edges, default=0) <= width + 1, path


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_rules_for_accessible_pages_are_kept(sites, scheme):
    """axe-core with the rules of WCAG 2.2 AA; in the dark only what colour can change."""
    site = sites(color_scheme=scheme, viewport={"width": 1280, "height": 900})
    only = {"type": "tag", "values": RULES} if scheme == "light" else {"type": "rule", "values": ["color-contrast"]}
    options = json.dumps({"runOnly": only, "preload": False, "resultTypes": ["violations"]})
    for path in KINDS if scheme == "light" else ["index.html", "list.html", "meeting.html", KINDS[-2]]:
        page = site.visit(path, ready=ready(path))
        page.evaluate("document.querySelectorAll('tbody tr:nth-child(n+30)').forEach((row) => row.remove())")
        page.evaluate(AXE)
        found = page.evaluate(
            f"axe.run(document, {options}).then((r) => r.violations.map((v) => v.id + ': ' + v.nodes[0].html.slice(0, 200)))"
        )
        assert found == [], path


@pytest.mark.parametrize("path", ["list.html", "index.html"])
def test_what_can_be_pressed_is_large_enough(site, path):
    """WCAG 2.2, success criterion 2.5.8: 24 by 24 CSS pixels, links in sentences excepted."""
    page = site.visit(path)
    for button in page.locator("button, select, input, summary").all():
        if button.is_visible():
            box = button.bounding_box()
            assert box["height"] >= 24 and box["width"] >= 24


def test_without_script_the_decision_and_every_number_can_be_read(sites):
    site = sites(java_script_enabled=False)
    page = site.visit("index.html", ready=False)
    best = RESULTS[RESULTS["rank"] == 1].iloc[0]
    shown = page.locator("main").text_content()
    assert best["characteristic"] in shown and f"{best['cpk_centered']:.2f}" in shown
    assert page.locator("article svg").count() >= 3, "the pictures of the proposals are drawn already"
    page = site.visit("list.html", ready=False)
    assert page.locator("noscript a[href='plain.html']").is_visible()
    page = site.visit("plain.html", ready=False)
    assert page.locator("tbody tr").count() == len(RESULTS)
    page = site.visit(f"c/{page_names.page(best['characteristic'])}", ready=False)
    assert f"{best['index']:.2f}" in page.locator("main").text_content()
    page = site.visit("meeting.html", ready=False)
    assert page.locator("svg").count() >= 9


@pytest.mark.parametrize("paper", ["A4", "Letter"])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_meeting_sheet_prints_one_page_of_decisions_and_one_for_each_proposal(sites, pages_of, paper, scheme):
    site = sites(color_scheme=scheme)
    page = site.visit("meeting.html", ready=False)
    printed = pages_of(page.pdf(format=paper, margin=dict.fromkeys(("top", "bottom", "left", "right"), "12mm")))
    assert len(printed) == 4
    for rank in (1, 2, 3):
        row = RESULTS[RESULTS["rank"] == rank].iloc[0]
        for text in (printed[0], printed[rank]):
            assert row["characteristic"][:20] in " ".join(text.split())
        assert f"{row['cpk_centered']:.2f}" in printed[0]
        assert "Is it predictable?" in printed[rank] and "upper limit" in printed[rank]
    assert printed[0].count("Owner") == 3 and printed[0].count("Until") == 3


@pytest.mark.parametrize("path", ["index.html", f"c/{page_names.page('S01 fits')}"])
def test_paper_is_white_and_pictures_print_as_lines(sites, path):
    site = sites(color_scheme="dark")
    page = site.visit(path)
    page.emulate_media(media="print", color_scheme="dark")
    assert page.evaluate("getComputedStyle(document.documentElement).backgroundColor") == "rgb(255, 255, 255)"
    ink = page.evaluate("getComputedStyle(document.body).color")
    assert sum(map(int, re.findall(r"\d+", ink)[:3])) < 150
    printed = page.pdf(format="A4")
    assert printed.startswith(b"%PDF") and b"/Subtype /Image" not in printed


def test_one_picture_serves_light_and_dark(sites):
    colours = set()
    for scheme in ("light", "dark"):
        site = sites(color_scheme=scheme)
        page = site.characteristic("S01 fits")
        colours.add(
            page.locator("figure[data-chart=histogram] svg g.mark-line path").evaluate(
                "n => getComputedStyle(n).stroke"
            )
        )
    assert len(colours) == 2
