"""Style and scripts of an issue."""

from __future__ import annotations

import hashlib
import json
import re
from importlib.metadata import version

import pytest

from portfolio.publishing import assets, charts


@pytest.fixture(scope="module")
def kit() -> assets.Assets:
    return assets.collect([])


def test_each_asset_is_named_by_the_digest_of_its_content(kit):
    for path in (kit.style, kit.drawing, kit.templates, kit.charts, kit.report):
        name, digest = re.fullmatch(r"assets/(.+)\.([0-9a-f]{8})\.(?:js|css)", path).groups()
        assert hashlib.sha256(kit.files[path]).hexdigest().startswith(digest), name
    assert assets.hashed("a.css", b"1") != assets.hashed("a.css", b"2")


def test_the_drawing_script_is_the_known_one_and_wrapped(kit):
    content = kit.files[kit.drawing]
    assert hashlib.sha256(content).hexdigest() == assets.DRAWING_SHA256
    assert kit.drawing.startswith(f"assets/drawing-{version('vl-convert-python')}.")
    text = content.decode()
    assert text.startswith("/* Licences: LICENSES.txt */(()=>{") and text.endswith("})();\n")
    assert len(content) < 910_000


def test_it_is_taken_over_from_an_earlier_issue_without_packing_it_again(kit, tmp_path, monkeypatch):
    place = tmp_path / "2026-W47" / kit.drawing
    place.parent.mkdir(parents=True)
    place.write_bytes(kit.files[kit.drawing])
    monkeypatch.setattr(assets, "_bundle", lambda: pytest.fail("packed again"))
    assert assets.collect([tmp_path / "2026-W46", tmp_path / "2026-W47"]).files == kit.files


def test_a_changed_copy_in_the_published_folder_is_never_taken_over(kit, tmp_path, monkeypatch):
    evil = kit.files[kit.drawing] + b"alert(1)"
    place = tmp_path / "2026-W47" / "assets" / assets.hashed(f"{assets.DRAWING}.js", evil)  # its name fits its content
    place.parent.mkdir(parents=True)
    place.write_bytes(evil)
    monkeypatch.setattr(assets, "_bundle", lambda: "packed")
    taken = assets.collect([tmp_path / "2026-W47"])
    assert b"packed" in taken.files[taken.drawing] and b"alert(1)" not in taken.files[taken.drawing]


def test_every_licence_of_the_drawing_script_is_there_in_full(kit):
    text = kit.files["assets/LICENSES.txt"].decode()
    for words in ("Neither the name of the copyright holder", "Permission to use, copy, modify, and/or distribute",
                  "Permission is hereby granted, free of charge", "University of Washington Interactive Data Lab",
                  "Mike Bostock", "Jon Mease"):  # fmt: skip
        assert words in text


def test_no_script_or_style_of_ours_names_a_place_outside_the_folder(kit):
    for path in (kit.style, kit.charts, kit.report, kit.templates):
        text = kit.files[path].decode().replace("https://vega.github.io/schema/vega/v6.json", "")
        assert not re.search(r"https?://|//[a-z]+\.[a-z]", text), path


def test_our_scripts_evaluate_nothing_and_write_no_html(kit):
    for path in (kit.charts, kit.report):
        text = kit.files[path].decode()
        assert not re.search(r"\beval\b|new Function|innerHTML|outerHTML|insertAdjacentHTML|document\.write", text), (
            path
        )


def test_templates_and_drawing_script_speak_the_same_vega(kit):
    spec = json.loads(kit.files[kit.templates].decode().removeprefix("window.portfolioTemplates=").removesuffix(";\n"))
    assert spec == charts.templates()
    majors = {re.search(r"/vega/v(\d+)\.json", template["$schema"])[1] for template in spec.values()}
    assert majors == {"6"}
    assert re.search(rb'version:"6\.\d+\.\d+"|"6\.\d+\.\d+"', kit.files[kit.drawing])


def test_style_and_scripts_stay_inside_their_budget(kit):
    """Report study, section 5: 660 kB beside the small runtime, 307 kB more with the documented bundle."""
    code = [content for path, content in kit.files.items() if not path.endswith(".txt")]
    assert sum(map(len, code)) < 967_000
