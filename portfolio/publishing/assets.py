"""Style and scripts of an issue, named by their content so that an old page never meets a new script.

The drawing script comes out of the vl-convert wheel: nothing is fetched, and the published folder needs no network. It
holds a version of Vega's interpreter older than the fix of CVE-2025-59840, which needs a specification from outside and
a view in the window's namespace; pages here draw only their own compiled templates, and data never become part of one.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

import vl_convert

from portfolio import shipped
from portfolio.publishing import charts

DRAWING = f"drawing-{version('vl-convert-python')}"
DRAWING_SHA256 = "6353574a4faab8bf4d8dcfbce7fb6c52913424d2028e4fbade6647541911bce1"
"Digest of the drawing script that vl-convert-python 1.9.0.post1 packs."


@dataclass(frozen=True)
class Assets:
    """Paths inside the issue and contents."""

    style: str
    drawing: str
    templates: str
    charts: str
    report: str
    files: dict[str, bytes]


def collect(issues: list[Path]) -> Assets:
    """Everything that lies in `assets/` besides the list's data; `issues` are the ones published before."""
    sources = {
        "style": ("style.css", shipped.text("reports/style.css").encode()),
        "drawing": (f"{DRAWING}.js", _drawing(issues)),
        "templates": ("templates.js", charts.template_script().encode()),
        "charts": ("charts.js", shipped.text("reports/charts.js").encode()),
        "report": ("report.js", shipped.text("reports/report.js").encode()),
    }
    paths = {key: f"assets/{hashed(name, content)}" for key, (name, content) in sources.items()}
    files = {paths[key]: content for key, (_, content) in sources.items()}
    files["assets/LICENSES.txt"] = shipped.text("reports/drawing_licences.txt").encode()
    return Assets(**paths, files=files)


def hashed(name: str, content: bytes) -> str:
    """`style.css` becomes `style.1a2b3c4d.css`."""
    stem, _, ending = name.rpartition(".")
    return f"{stem}.{hashlib.sha256(content).hexdigest()[:8]}.{ending}"


def _drawing(issues: list[Path]) -> bytes:
    """The drawing script; taken over from an earlier issue that has exactly the known one.

    Packing it takes two seconds and gives the same bytes each time. The folder may be writable by others, so a copy
    counts only by the digest that stands in this program.
    """
    for issue in reversed(issues):
        for path in (issue / "assets").glob(f"{DRAWING}.*.js"):
            content = path.read_bytes()
            if hashlib.sha256(content).hexdigest() == DRAWING_SHA256:
                return content
    # Wrapped: the bundle declares many short names at top level that would collide with ours.
    return ("/* Licences: LICENSES.txt */(()=>{" + _bundle() + "\n})();\n").encode()


def _bundle() -> str:
    return str(vl_convert.javascript_bundle())  # type: ignore[call-arg]  # its stub asks for an optional argument
