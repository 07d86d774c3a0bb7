"""Nothing leaves the folder, nothing hostile runs, and the policy is shown to be able to stop it."""

from __future__ import annotations

import shutil

import pytest

from portfolio.publishing import names
from portfolio.publishing.pages import POLICY
from tests.publishing import issue
from tests.publishing.sample import HOSTILE, IMAGE, SCRIPT, TURNED

OPENED = ["index.html", "list.html", "plain.html", "sites.html", "quality.html", "changes.html", "methods.html"]
ATTACK = f"""<!doctype html><html lang="en"><head><meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="{POLICY}"><title>attack</title>
<script>document.title = "inline ran"</script></head>
<body><img src="nothing" onerror="document.title = 'handler ran'"><img src="https://example.invalid/x.png">
<p style="color: red" id="p">text</p><a id="a" href="javascript:document.title='link ran'">link</a>
<script src="https://example.invalid/x.js"></script></body></html>"""


@pytest.mark.parametrize("path", OPENED)
def test_a_page_opens_without_a_complaint_and_asks_only_for_its_own_folder(site, path):
    page = site.visit(path)
    assert page.locator("h1").count() == 1
    assert len(site.requests) >= 2


def test_the_meeting_sheet_asks_for_nothing_but_itself(site):
    page = site.visit("meeting.html", ready=False)
    assert site.requests == [page.url]
    assert page.locator("svg").count() >= 3


def test_an_attack_page_is_stopped_by_the_same_policy(sites, tmp_path):
    (tmp_path / "attack.html").write_text(ATTACK)
    site = sites(root=tmp_path)
    page = site.visit("attack.html", ready=False)
    page.locator("#a").click()
    outcome = page.evaluate("fetch('https://example.invalid/data').then(() => 'fetched', () => 'stopped')")
    assert outcome == "stopped" and page.title() == "attack"
    assert page.locator("#p").evaluate("node => getComputedStyle(node).color") == "rgb(0, 0, 0)"
    stopped = page.evaluate("window.violations.splice(0).map((v) => v.split(' ')[0])")
    assert {"script-src-elem", "script-src-attr", "style-src-attr", "img-src", "connect-src"} <= set(stopped)
    assert not [url for url in site.requests if url.startswith("http") and "x.png" not in url and "x.js" not in url]
    site.requests.clear()
    site.complaints.clear()


@pytest.mark.parametrize("name", HOSTILE)
def test_a_hostile_name_is_only_text_on_its_page(site, name):
    page = site.characteristic(name)
    assert page.locator("h1").evaluate("node => node.textContent") == name
    assert page.locator("h1 > bdi").count() == 1
    assert page.title().startswith(names.short(name))
    assert page.locator("img").count() == 0
    sources = page.locator("script").evaluate_all("nodes => nodes.map((n) => n.type || n.getAttribute('src'))")
    assert len(sources) == 5 and all(s == "application/json" or s.startswith("../assets/") for s in sources)


def test_hostile_names_are_only_text_in_the_list(site):
    page = site.visit("list.html")
    shown = set()
    for _ in range(2):
        shown |= set(page.locator("#all tbody th a bdi").all_text_contents())
        if page.locator("#later").is_enabled():
            page.locator("#later").click()
    assert set(HOSTILE) <= shown and len(shown) == issue.SIZE
    assert page.locator("#all tbody *:not(tr, td, th, a, bdi)").count() == 0


def test_a_turned_name_cannot_turn_the_title(site):
    page = site.characteristic(TURNED)
    assert "\u202e" not in page.title()


def test_hostile_filters_in_the_address_are_only_text(site):
    page = site.visit(
        "list.html#search=%3Cimg%20src%3Dx%20onerror%3Dalert(1)%3E&sort=constructor&page=-7&cell=__proto__"
    )
    assert page.locator("#all tbody tr").count() == 0
    assert page.locator("#found").text_content().startswith("Nothing matches")
    assert page.locator("img").count() == 0


def test_the_pointer_leads_to_the_newest_issue(sites, published):
    site = sites(root=published.parent)
    page = site.visit("index.html", ready=False)
    page.wait_for_url(f"file://{published}/index.html")
    page.wait_for_selector("body[data-ready]")
    assert page.locator("h1").count() == 1


def test_a_missing_script_is_told_and_everything_in_words_stays(sites, published, tmp_path):
    copy = tmp_path / "issue"
    shutil.copytree(published, copy)
    for path in (copy / "assets").glob("drawing-*"):
        path.unlink()
    site = sites(root=copy)
    page = site.characteristic(SCRIPT)
    assert page.locator("body").get_attribute("data-ready") == "failed"
    for plot in page.locator("figure.chart .plot").all_text_contents():
        assert "could not be drawn" in plot
    assert "Cpk" in page.locator("main").text_content()
    assert site.complaints and all("ERR_FILE_NOT_FOUND" in said for said in site.complaints)
    site.complaints.clear()


def test_hostile_text_in_a_proposal_is_only_text(site):
    page = site.visit("index.html")
    shown = page.locator("main").text_content()
    assert SCRIPT in shown and IMAGE in shown
    assert page.locator("main img").count() == 0
