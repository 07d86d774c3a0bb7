"""The published folder: whole or not there, whatever happens in between."""

from __future__ import annotations

import errno
import hashlib
import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from portfolio.errors import FAILED, PublishError
from portfolio.publishing import folder
from tests.publishing import crashing

WEEK = "2026-W48"
ROOT = Path(__file__).parents[2]


def publish(report: Path, mark: str = "one", slot: str = WEEK, keep: int = 9) -> folder.Published:
    return folder.publish(crashing.pages(mark), report=report, slot=slot, keep=keep)


def names(report: Path) -> list[str]:
    return sorted(path.name for path in report.iterdir())


def state(place: Path) -> dict[str, tuple[bytes, int]]:
    return {str(p.relative_to(place)): (p.read_bytes(), p.stat().st_mtime_ns) for p in place.rglob("*") if p.is_file()}


def led_to(report: Path) -> Path:
    """The issue that a double click on the pointer opens."""
    page = (report / "index.html").read_text(encoding="utf-8")
    link, refresh = re.search(r'href="(.*?)/index.html"', page)[1], re.search(r"url=(.*?)/index.html", page)[1]
    assert link == refresh
    return report / link


def test_an_issue_holds_the_pages_and_a_manifest_of_their_sizes_and_digests(tmp_path):
    done = publish(tmp_path / "report")
    assert done.folder == tmp_path / "report" / WEEK
    for name, content in crashing.pages("one"):
        assert (done.folder / name).read_bytes() == content
    listed = json.loads((done.folder / "manifest.json").read_text())["files"]
    assert listed["c/a.html"] == {"size": 3, "sha256": hashlib.sha256(b"one").hexdigest()}
    assert (done.files, len(listed)) == (4, 3)
    assert done.bytes == sum(path.stat().st_size for path in done.folder.rglob("*") if path.is_file())
    assert folder.verify(done.folder) == [] and done.left_over == ()


def test_the_pointer_leads_to_the_newest_issue_without_any_script(tmp_path):
    publish(tmp_path, "old", "2026-W47")
    publish(tmp_path)
    assert json.loads((tmp_path / "newest.json").read_text())["folder"] == WEEK
    assert led_to(tmp_path) == tmp_path / WEEK
    page = (tmp_path / "index.html").read_text()
    assert "default-src 'none'" in page and "<script" not in page and ">Open the newest issue, 2026-W48<" in page
    assert names(tmp_path) == ["2026-W47", WEEK, "index.html", "newest.json"]


def test_a_repeat_of_the_week_gets_a_number_and_nothing_published_is_touched(tmp_path):
    first = publish(tmp_path).folder
    before = state(first)
    assert publish(tmp_path, "two").folder.name == "2026-W48-2"
    assert publish(tmp_path, "three").folder.name == "2026-W48-3"
    assert state(first) == before
    assert [path.name for path in folder.issues(tmp_path)] == [WEEK, "2026-W48-2", "2026-W48-3"]


def test_a_number_is_not_given_again_after_its_issue_is_gone(tmp_path):
    for number in range(12):
        newest = publish(tmp_path, str(number), keep=2).folder.name
    assert newest == "2026-W48-12"
    assert [path.name for path in folder.issues(tmp_path)] == ["2026-W48-11", "2026-W48-12"]


def test_the_oldest_issues_go_last_and_others_stay(tmp_path):
    for week in ("2025-W52", "2026-W01", "2026-W09", "2026-W10"):
        publish(tmp_path, week, week, keep=3)
    assert [path.name for path in folder.issues(tmp_path)] == ["2026-W01", "2026-W09", "2026-W10"]


def test_what_is_not_an_issue_is_never_removed(tmp_path):
    for name in ("notes", "2026-W1", "2026-W01-old", "archive-2026-W01"):
        (tmp_path / name).mkdir()
    publish(tmp_path, keep=1)
    publish(tmp_path, keep=1)
    assert {"notes", "2026-W1", "2026-W01-old", "archive-2026-W01"} <= set(names(tmp_path))


def test_an_old_week_published_again_is_not_removed_as_the_oldest(tmp_path):
    for week in ("2026-W46", "2026-W47", "2026-W20"):
        publish(tmp_path, week, week, keep=2)
    assert [path.name for path in folder.issues(tmp_path)] == ["2026-W20", "2026-W47"]
    assert led_to(tmp_path).name == "2026-W20"


def test_everyone_may_read_whatever_the_umask_says(tmp_path):
    before = os.umask(0o077)
    try:
        publish(tmp_path / "report")
    finally:
        os.umask(before)
    for path in [tmp_path / "report", *(tmp_path / "report").rglob("*")]:
        assert path.stat().st_mode & 0o777 == (0o755 if path.is_dir() else 0o644), path


@pytest.mark.parametrize("name", ["../out.html", "/out.html", "c/../../out.html", "c\\out.html", ""])
def test_a_path_that_leaves_the_issue_is_refused(tmp_path, name):
    with pytest.raises(ValueError, match="does not lie inside"):
        folder.publish([("a.html", b""), (name, b"")], report=tmp_path / "report", slot=WEEK, keep=1)
    assert names(tmp_path) == ["report"] and names(tmp_path / "report") == []


@pytest.mark.parametrize("name", ["index.html", "manifest.json"])
def test_two_files_of_one_name_are_refused(tmp_path, name):
    with pytest.raises(ValueError, match="two files"):
        folder.publish([("index.html", b"1"), (name, b"2")], report=tmp_path, slot=WEEK, keep=1)


@pytest.mark.parametrize(("slot", "keep"), [("../x", 1), ("2026-W48-2", 1), ("2026-48", 1), (WEEK, 0)])
def test_a_slot_is_a_week_and_one_issue_stays(tmp_path, slot, keep):
    with pytest.raises(ValueError, match="ISO week"):
        folder.publish([], report=tmp_path, slot=slot, keep=keep)


def test_a_page_that_fails_leaves_nothing_behind(tmp_path):
    publish(tmp_path, "old", "2026-W47")
    before = state(tmp_path)

    def pages():
        yield "index.html", b"half"
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        folder.publish(pages(), report=tmp_path, slot=WEEK, keep=9)
    assert state(tmp_path) == before
    assert names(tmp_path) == ["2026-W47", "index.html", "newest.json"]


@pytest.mark.parametrize("below", ["", "sub"])
def test_a_file_in_the_place_of_the_folder_is_told(tmp_path, below):
    (tmp_path / "report").write_text("a file")
    with pytest.raises(PublishError, match="report") as caught:
        publish(tmp_path / "report" / below)
    assert caught.value.exit_code == FAILED
    assert (tmp_path / "report").read_text() == "a file"


def fail_at(monkeypatch, number: int, code: int) -> list[str]:
    for place, name in crashing.STEPS:
        monkeypatch.setattr(place, name, getattr(place, name))  # undone after the test

    def act(now: int, _name: str) -> None:
        if now == number:
            raise OSError(code, os.strerror(code), str(ROOT / "a file"))

    return crashing.count_steps(act)


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EACCES, errno.EIO])
def test_an_error_at_any_step_leaves_a_complete_report_and_the_next_publishing_succeeds(tmp_path, code):
    number, told = 0, 0
    while True:
        number += 1
        report = tmp_path / str(number)
        publish(report, "before", "2026-W40", keep=2)
        publish(report, "last", "2026-W47", keep=2)
        with pytest.MonkeyPatch.context() as patch:
            seen = fail_at(patch, number, code)
            done = None
            try:
                done = publish(report, keep=2)
            except PublishError as error:
                told += 1
                assert os.strerror(code) in str(error) and "published before stays" in str(error)
                assert not list(report.glob(f"{folder.BUILDING}*")), "room is freed at once"
            ended = len(seen) < number
        if done is not None:
            assert led_to(report) == done.folder
        assert folder.verify(led_to(report)) == []
        assert json.loads((report / "newest.json").read_text())["folder"] in {p.name for p in folder.issues(report)}
        for issue in folder.issues(report):
            assert folder.verify(issue) == []
        after = publish(report, "after", keep=2)
        assert led_to(report) == after.folder and after.left_over == ()
        assert not list(report.glob(".*")), "leftovers are cleared by the next publishing"
        assert len(folder.issues(report)) == 2
        if ended:
            break
    assert told >= 10, "steps were really made to fail"


def test_killed_at_any_step_the_pointer_leads_to_a_complete_issue(tmp_path):
    script = Path(crashing.__file__)
    run = subprocess.run(
        [sys.executable, str(script), str(tmp_path / "report")], capture_output=True, text=True, check=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)}, timeout=60,
    )  # fmt: skip
    lines = [(line[: line.index("{")].split(), json.loads(line[line.index("{") :])) for line in run.stdout.splitlines()]
    deaths, (_, end) = lines[:-1], lines[-1]
    assert not end["died"] and end["json"].startswith(WEEK) and end["page"] == [end["json"]]
    assert len(deaths) >= 20 and all(said["died"] for _, said in deaths)
    assert {"write_bytes", "rename", "replace", "sync", "fsync", "rmtree"} <= {step for (_, step), _ in deaths}
    for (_number, _step), said in deaths:
        assert said["wrong"] == []
        assert len(said["page"]) == 1, "the pointer's link exists"
    assert deaths[0][1]["page"] == ["2026-W47"]
    report = tmp_path / "report"
    assert not list(report.glob(".*")), "the last, whole publishing cleared what the killed ones left"
    assert len(folder.issues(report)) == 2


def test_an_issue_that_cannot_be_removed_is_told_and_publishing_goes_on(tmp_path, monkeypatch):
    publish(tmp_path, "old", "2026-W40", keep=1)
    original = shutil.rmtree

    def refuse(path, *args, **kwargs):
        if Path(path).name.startswith(folder.REMOVING):
            raise PermissionError(errno.EACCES, "in use", str(path))
        original(path, *args, **kwargs)

    monkeypatch.setattr(shutil, "rmtree", refuse)
    done = publish(tmp_path, keep=1)
    assert done.left_over == (tmp_path / ".removing-2026-W40",)
    assert led_to(tmp_path) == done.folder
    again = publish(tmp_path, "two", "2026-W49", keep=2)
    assert again.left_over == (tmp_path / ".removing-2026-W40",), "still there, still told, still no obstacle"


def test_a_share_without_unix_rights_is_accepted_when_everyone_can_read(tmp_path, monkeypatch):
    def refuse(self, mode):
        raise PermissionError(errno.EPERM, "not permitted", str(self))

    monkeypatch.setattr(Path, "chmod", refuse)
    with pytest.raises(PublishError, match="not permitted"):  # mkdtemp makes 0700, which locks readers out
        publish(tmp_path)
    monkeypatch.setattr(folder.tempfile, "mkdtemp", lambda prefix, dir: _made(Path(dir) / f"{prefix}x"))
    publish(tmp_path)
    assert led_to(tmp_path).name == WEEK


def _made(path: Path) -> str:
    path.mkdir(mode=0o755)
    return str(path)


@pytest.mark.parametrize(
    ("harm", "said"),
    [
        (lambda issue: (issue / "c/a.html").unlink(), ["c/a.html is missing"]),
        (lambda issue: (issue / "c/a.html").write_bytes(b"two"), ["c/a.html was changed"]),
        (lambda issue: (issue / "c/b.html").write_bytes(b""), ["c/b.html is not in the manifest"]),
    ],
)
def test_verifying_names_each_difference(tmp_path, harm, said):
    issue = publish(tmp_path).folder
    harm(issue)
    assert folder.verify(issue) == said


def test_an_issue_without_a_readable_manifest_does_not_verify(tmp_path):
    issue = publish(tmp_path).folder
    (issue / "manifest.json").write_text("{")
    assert "manifest.json cannot be read" in folder.verify(issue)[0]
