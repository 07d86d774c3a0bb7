"""kill -9 at random points of the weekly job: what was acknowledged stays, what was not is taken again."""

from __future__ import annotations

import json
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from portfolio.store import Store

FILES, ROWS = 12, 400


def plant(folder: Path) -> Path:
    (folder / "in").mkdir(parents=True)
    for number in range(FILES):
        lines = ["characteristic,taken_at,value"]
        for row in range(ROWS):
            minute = number * ROWS + row
            lines.append(
                f"C{row % 8},2026-01-{1 + minute // 1440:02d}T{minute // 60 % 24:02d}:{minute % 60:02d}:00,{10 + minute % 7 / 10}"
            )
        (folder / "in" / f"{number:02d}.csv").write_text("\n".join(lines) + "\n")
    names = "\n".join(f"C{i},9,11" for i in range(8))
    (folder / "registry.csv").write_text(f"characteristic,lsl,usl\n{names}\n")
    (folder / "plan.toml").write_text('[portfolio]\ntimezone = "UTC"\n[[source]]\nname = "s"\npath = "in/*.csv"\n')
    return folder / "plan.toml"


def content(plan: Path) -> list[tuple]:
    with Store.open(plan.parent / "portfolio.duckdb", read_only=True) as store:
        facts = store.connection.execute(
            "select name, taken_at, value, unit_no from measurements join characteristics using (characteristic_id) order by all"
        ).fetchall()
        ledger = store.connection.execute("select item, rows_new, status from loads order by item").fetchall()
    return facts + ledger


def command(plan: Path, *words: str) -> list[str]:
    return [sys.executable, "-m", "portfolio", *words, str(plan)]


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory) -> list[tuple]:
    plan = plant(tmp_path_factory.mktemp("calm"))
    subprocess.run(command(plan, "pull"), check=True, capture_output=True)
    return content(plan)


@pytest.mark.parametrize("seed", range(4))
def test_a_pull_killed_again_and_again_ends_with_the_same_store(seed, tmp_path, undisturbed):
    plan, chance = plant(tmp_path / "plant"), random.Random(seed)
    kills = 0
    while kills < 4:
        process = subprocess.Popen(command(plan, "pull"), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        try:
            process.wait(0.9 + 1.2 * chance.random())
            break  # it was faster than the kill
        except subprocess.TimeoutExpired:
            process.send_signal(signal.SIGKILL)
            process.wait()
            kills += 1
    last = subprocess.run(command(plan, "pull"), capture_output=True, text=True, check=False)
    assert last.returncode == 0, last.stderr
    assert content(plan) == undisturbed


def test_a_publishing_killed_leaves_the_pointer_at_a_whole_issue(tmp_path):
    plan = plant(tmp_path / "plant")
    subprocess.run([*command(plan, "run"), "--as-of", "2026-01-05"], check=True, capture_output=True)
    report = plan.parent / "report"
    chance = random.Random(1)
    for _ in range(3):
        process = subprocess.Popen(command(plan, "publish"), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        time.sleep(1.2 + chance.random())
        process.kill()
        process.wait()
        newest = (report / "newest.json").read_text()
        folder = report / newest.split('"')[3]
        assert (folder / "manifest.json").is_file() and (folder / "index.html").is_file()
        manifest = json.loads((folder / "manifest.json").read_text())
        assert all((folder / name).stat().st_size == entry["size"] for name, entry in manifest["files"].items())
    subprocess.run(command(plan, "publish"), check=True, capture_output=True)
    assert not list(report.glob(".building-*"))
