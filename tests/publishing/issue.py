"""A published issue of the sample, made once for the whole session, and a plain reader of its pages."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

from portfolio.publishing import names, pages
from tests.publishing.sample import page_data

SIZE = 110
"Characteristics: more than one page of the list."
FIXED = (
    "index.html",
    "list.html",
    "plain.html",
    "sites.html",
    "quality.html",
    "changes.html",
    "methods.html",
    "meeting.html",
)


@cache
def files() -> dict[str, bytes]:
    """Path and content of every file of the sample's issue."""
    return dict(pages.render(page_data(SIZE)))


@dataclass
class Page(HTMLParser):
    """Elements of a page in order: (tag, attributes), and the text of its scripts, styles and links."""

    text: str
    elements: list[tuple[str, dict[str, str | None]]] = field(default_factory=list)
    inside: dict[str, list[str]] = field(default_factory=dict)
    visible: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self._open = ""
        self.feed(self.text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag in ("script", "style", "title"):
            self._open = tag
            self.inside.setdefault(tag, []).append("")

    def handle_endtag(self, tag: str) -> None:
        self._open = ""

    def handle_data(self, data: str) -> None:
        if self._open:
            self.inside[self._open][-1] += data
        else:
            self.visible.append(data)

    def all(self, tag: str) -> list[dict[str, str | None]]:
        """Attributes of every element of one kind."""
        return [attributes for name, attributes in self.elements if name == tag]


@cache
def read(path: str) -> Page:
    """A page of the sample's issue."""
    return Page(files()[path].decode())


def html_paths(filler: bool = False) -> list[str]:
    """Every page that the issue must have; pages of fillers are alike and left out unless asked for."""
    rows = page_data(SIZE).results["characteristic"]
    return [*FIXED, *(f"c/{names.page(name)}" for name in rows if filler or "filler" not in name)]


def write(folder: Path) -> Path:
    """Publish the sample's issue below `folder`; the issue's own folder."""
    from portfolio.publishing import folder as published

    return published.publish(files().items(), report=folder, slot="2026-W49", keep=1).folder
