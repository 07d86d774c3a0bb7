"""Style and scripts of an issue, named by their content so that an old page never meets a new script."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

import vl_convert

from portfolio import shipped
from portfolio.publishing import charts

DRAWING = f"drawing-{version('vl-convert-python')}"
LICENCES = """\
drawing-*.js contains Vega, Vega-Lite, Vega-Embed and the Vega expression interpreter
(BSD-3-Clause, (c) University of Washington Interactive Data Lab and contributors) and D3 modules
(ISC / BSD-3-Clause, (c) Mike Bostock and contributors), as packed by vl-convert (BSD-3-Clause).

Redistribution and use in source and binary forms, with or without modification, are permitted provided that the
copyright notices, this list of conditions and the following disclaimer are retained. THIS SOFTWARE IS PROVIDED BY THE
COPYRIGHT HOLDERS AND CONTRIBUTORS "AS IS" AND ANY EXPRESS OR IMPLIED WARRANTIES ARE DISCLAIMED.
"""


@dataclass(frozen=True)
class Assets:
    """Paths inside the issue and contents."""

    style: str
    drawing: str
    templates: str
    charts: str
    report: str
    files: dict[str, bytes]


def _drawing(issues: list[Path]) -> bytes:
    """The drawing script of this version of vl-convert; taken over from an earlier issue where one has it whole.

    Packing it takes two seconds and gives the same bytes each time.
    """
    for issue in reversed(issues):
        for path in (issue / "assets").glob(f"{DRAWING}.*.js"):
            content = path.read_bytes()
            if path.name == hashed(f"{DRAWING}.js", content):
                return content
    # Wrapped: the bundle declares many short names at top level that would collide with ours.
    return ("(()=>{" + _bundle() + "\n})();\n").encode()


def _bundle() -> str:
    return str(vl_convert.javascript_bundle())  # type: ignore[call-arg]  # its stub asks for an optional argument


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
    files["assets/LICENSES.txt"] = LICENCES.encode()
    return Assets(**paths, files=files)


def hashed(name: str, content: bytes) -> str:
    """`style.css` becomes `style.1a2b3c4d.css`."""
    stem, _, ending = name.rpartition(".")
    return f"{stem}.{hashlib.sha256(content).hexdigest()[:8]}.{ending}"
