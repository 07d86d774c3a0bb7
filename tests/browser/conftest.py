"""A real Chromium on a published folder. Whatever a test looks at, every visit is watched for leaks and complaints."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from urllib.parse import unquote

import pytest
from playwright.sync_api import Browser, BrowserContext, Page, Playwright, expect, sync_playwright

from portfolio.publishing import names
from tests.publishing import issue

ARGUMENTS = [
    "--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update",
    "--disable-default-apps", "--disable-sync", "--no-first-run", "--disable-dev-shm-usage",
]  # fmt: skip
WINDOW = {"width": 1280, "height": 900}
PATIENCE = 20_000
"Milliseconds until a busy machine is taken for a fault."
WATCH = """
window.violations = [];
const seen = (e) => window.violations.push(e.violatedDirective + " " + e.blockedURI);
document.addEventListener("securitypolicyviolation", seen);
"""


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    here = Path(__file__).parent
    for item in items:
        if here in item.path.parents:
            item.add_marker("browser")


@pytest.fixture(scope="session")
def chromium() -> str:
    """The program; without one the tests are left out, unless PORTFOLIO_REQUIRE_BROWSER is 1 (as in CI)."""
    named = os.environ.get("PORTFOLIO_CHROMIUM")
    found = named or shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
    if found and Path(found).exists():
        return found
    if os.environ.get("PORTFOLIO_REQUIRE_BROWSER") == "1":
        pytest.fail("PORTFOLIO_REQUIRE_BROWSER is 1 and there is no Chromium; name one in PORTFOLIO_CHROMIUM")
    pytest.skip("no Chromium; name one in PORTFOLIO_CHROMIUM")


@pytest.fixture(scope="session")
def pages_of() -> Callable[[bytes], list[str]]:
    """The text of each page of a PDF, by poppler's pdftotext."""
    program = shutil.which("pdftotext")
    if program is None:
        missing = pytest.fail if os.environ.get("PORTFOLIO_REQUIRE_BROWSER") == "1" else pytest.skip
        missing("no pdftotext (package poppler-utils)")

    def read(printed: bytes) -> list[str]:
        told = subprocess.run([program, "-layout", "-", "-"], input=printed, capture_output=True, check=True)
        return told.stdout.decode().rstrip("\f").split("\f")

    return read


@pytest.fixture(scope="session")
def playwright() -> Iterator[Playwright]:
    with sync_playwright() as started:
        yield started


@pytest.fixture(scope="session")
def browser(playwright: Playwright, chromium: str) -> Iterator[Browser]:
    expect.set_options(timeout=PATIENCE)
    running = playwright.chromium.launch(executable_path=chromium, args=ARGUMENTS)
    yield running
    running.close()


@pytest.fixture(scope="session")
def published(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The issue's folder; nobody changes it."""
    return issue.write(tmp_path_factory.mktemp("report"))


@dataclass
class Site:
    """An issue seen through one browser window. `complaints` must stay empty unless a test expects some."""

    root: Path
    context: BrowserContext
    page: Page
    requests: list[str] = field(default_factory=list)
    complaints: list[str] = field(default_factory=list)

    @classmethod
    def open(cls, browser: Browser, root: Path, **options: object) -> Site:
        context = browser.new_context(**options)  # type: ignore[arg-type]
        context.set_default_timeout(PATIENCE)
        context.add_init_script(WATCH)
        site = cls(root, context, context.new_page())
        site.page.on("request", lambda request: site.requests.append(request.url))
        site.page.on("pageerror", lambda error: site.complaints.append(f"error: {error}"))
        site.page.on("dialog", lambda dialog: (site.complaints.append(f"dialog: {dialog.message}"), dialog.dismiss()))
        site.page.on(
            "console",
            lambda said: site.complaints.append(f"console: {said.text}") if said.type in ("error", "warning") else None,
        )
        return site

    def visit(self, path: str, *, ready: bool = True) -> Page:
        """Open a page of the issue and wait until its script says that it is done."""
        self.page.goto(f"file://{self.root}/{path}")
        if ready:
            self.page.wait_for_selector("body[data-ready]")
        return self.page

    def characteristic(self, name: str) -> Page:
        return self.visit(f"c/{names.page(name)}")

    def leaks(self) -> list[str]:
        """Addresses that were asked for outside the issue."""
        inside = f"file://{self.root}/"
        return [url for url in self.requests if not unquote(url).startswith((inside, "data:"))]

    def check(self) -> None:
        """What every visit must keep to."""
        violations = self.page.evaluate("window.violations || []")
        assert self.leaks() == []
        assert self.complaints == []
        assert violations == []


@pytest.fixture(scope="session")
def window(browser: Browser, published: Path) -> Iterator[Site]:
    """One window for many tests: a new one costs more than a page."""
    opened = Site.open(browser, published, viewport=WINDOW)
    yield opened
    opened.context.close()


@pytest.fixture
def site(window: Site) -> Iterator[Site]:
    window.page.goto("about:blank")
    window.page.set_viewport_size(WINDOW)  # type: ignore[arg-type]
    window.page.emulate_media()
    window.requests.clear()
    window.complaints.clear()
    yield window
    window.check()


@pytest.fixture
def sites(browser: Browser, published: Path) -> Iterator[object]:
    """Opens windows with other options: `sites(color_scheme="dark")`, `sites(root=..., javascript_enabled=False)`."""
    opened: list[Site] = []

    def make(root: Path | None = None, **options: object) -> Site:
        opened.append(Site.open(browser, root or published, **options))
        return opened[-1]

    yield make
    try:
        for one in opened:
            one.check()
    finally:
        for one in opened:
            one.context.close()
