"""The command line as a user meets it: exit codes, messages, JSON. Commands run in this process through their entry point."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from pathlib import Path

import pandas as pd
import pytest

from portfolio import command
from portfolio.locks import hold

VALUES = "characteristic,taken_at,value\n" + "".join(
    f"A,2026-01-{1 + i // 12:02d}T{6 + i % 12:02d}:00:00,{10 + (i * 7 % 11) / 100:.2f}\n" for i in range(120)
)


@pytest.fixture
def plan(tmp_path) -> Path:
    (tmp_path / "in").mkdir()
    (tmp_path / "in" / "a.csv").write_text(VALUES)
    (tmp_path / "registry.csv").write_text("characteristic,lsl,usl,unit\nA,9.8,10.3,mm\nB,1,2,mm\n")
    (tmp_path / "plan.toml").write_text('[portfolio]\ntimezone = "UTC"\n[[source]]\nname = "s"\npath = "in/*.csv"\n')
    return tmp_path / "plan.toml"


@pytest.fixture
def call(monkeypatch, capsys):
    def run(*words: object) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["portfolio", *map(str, words)])
        code = 0
        try:
            command.main()
        except SystemExit as end:
            code = int(end.code or 0)
        told = capsys.readouterr()
        return code, told.out, told.err

    return run


def test_the_weekly_job_and_every_question_about_it(call, plan, tmp_path):
    code, out, err = call("run", plan, "--as-of", "2026-01-10")
    assert (code, "Traceback" in err) == (0, False)
    assert "120 new" in out and "1 not judged" in out and "index.html" in out
    assert call("run", plan, "--as-of", "2026-01-10")[0] == 0  # repeated: another issue, nothing twice
    assert json.loads((plan.parent / "report" / "newest.json").read_text())["folder"].endswith("-2")

    code, out, _ = call("status", plan, "--json")
    facts = json.loads(out)
    assert code == 0 and facts["judgements"] == 2 and facts["sources"][0]["source"] == "s"
    assert "judgements: 2" in call("status", plan)[1]

    code, out, _ = call("explain", plan, "A")
    assert code == 0 and "Is it predictable?" in out and "Cpk" in out
    assert json.loads(call("explain", plan, "A", "--json")[1])["facts"]["characteristic"] == "A"

    code, out, _ = call("export", plan, tmp_path / "out")
    assert code == 0 and len(pd.read_csv(tmp_path / "out" / "judgement.csv")) == 2

    assert call("backup", plan, tmp_path / "copy.duckdb")[0] == 0
    assert call("restore", plan, tmp_path / "copy.duckdb")[0] == 0
    assert json.loads(call("status", plan, "--json")[1])["judgements"] == 2


def test_judge_and_publish_by_themselves(call, plan):
    assert call("pull", plan)[0] == 0
    code, out, _ = call("judge", plan, "--as-of", "2026-01-10T12:00")
    assert code == 0 and "judged 2 characteristics up to 2026-01-10 12:00 UTC" in out
    assert call("publish", plan)[0] == 0


def test_a_logged_change_is_listed_and_begins_a_new_stretch(call, plan):
    call("run", plan, "--as-of", "2026-01-10")
    code, out, _ = call("log", plan, "A", "--kind", "re-centred", "--at", "2026-01-05", "--note", "offset")
    assert code == 0 and "recorded: A, re-centred, 2026-01-05 00:00 UTC" in out
    assert "re-centred" in call("log", plan)[1]
    call("judge", plan, "--as-of", "2026-01-10")
    first = json.loads(call("explain", plan, "A", "--json")[1])["facts"]["first"]
    assert first.startswith("2026-01-05")


def test_rejected_rows_are_listed_and_saved(call, plan, tmp_path):
    (plan.parent / "in" / "b.csv").write_text(VALUES.replace("A,2026-01-01T06:00:00,10.00", "A,2026-01-01T06:00:00,x"))
    assert call("pull", plan)[0] == 0
    code, out, _ = call("rejected", plan)
    assert code == 0 and "in/b.csv, line 2, value: not a number" in out and "1 rows set aside" in out
    call("rejected", plan, "--export", tmp_path / "r.csv")
    assert pd.read_csv(tmp_path / "r.csv")["record_no"].tolist() == [2]


def test_exit_code_1_when_a_file_was_refused_and_the_rest_went_on(call, plan):
    (plan.parent / "in" / "b.csv").write_text("nothing of use\n1\n")
    code, out, _ = call("run", plan, "--as-of", "2026-01-10")
    assert code == 1 and "refused in/b.csv" in out and "published" in out


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("run", "nowhere.toml"), "no such file"),
        (("explain", "PLAN", "C"), "no judgement yet"),
        (("judge", "PLAN", "--as-of", "yesterday"), "not a time"),
        (("log", "PLAN", "Z"), "no characteristic 'Z'"),
        (("log", "PLAN", "A", "--kind", "magic"), "unknown kind"),
        (("publish", "PLAN"), "no judgement yet"),
        (("demo", "FOLDER", "--ending", "soon"), "not a date"),
        (("frobnicate",), "No such command"),
        (("explain", "PLAN"), "Missing argument"),
    ],
)
def test_exit_code_2_on_wrong_use(call, plan, words, told):
    call("pull", plan)
    places = {"PLAN": plan, "FOLDER": plan.parent}
    code, out, err = call(*[places.get(word, word) for word in words])
    assert code == 2, (out, err)
    assert told in err and "Traceback" not in err


def test_an_invalid_plan_or_registry_changes_nothing_and_names_every_problem(call, plan):
    plan.write_text(plan.read_text() + "colour = 1\n[targets]\ndefault = 0.5\n")
    code, _, err = call("run", plan)
    assert code == 2 and err.count("portfolio: ") == 2 and not (plan.parent / "portfolio.duckdb").exists()


def test_an_unknown_characteristic_names_the_nearest(call, plan):
    plan.with_name("registry.csv").write_text("characteristic,lsl,usl\nshaft diameter,9.8,10.3\n")
    call("run", plan, "--as-of", "2026-01-10")
    code, _, err = call("explain", plan, "shaft diametr")
    assert code == 2 and "Did you mean shaft diameter?" in err


def test_exit_code_3_while_another_run_holds_the_store(call, plan):
    with hold(plan.parent / "portfolio.duckdb"):
        code, _, err = call("pull", plan)
    assert code == 3 and "in use by process" in err


def test_exit_code_4_when_the_store_cannot_be_used_and_a_traceback_only_on_demand(call, plan):
    (plan.parent / "portfolio.duckdb").write_bytes(b"this is no store at all")
    code, _, err = call("pull", plan)
    assert code == 4 and "not a DuckDB file" in err and "Traceback" not in err
    assert "Traceback" in call("--debug", "pull", plan)[2]


def test_check_lists_errors_and_warnings(call, plan):
    plan.with_name("registry.csv").write_text("characteristic,lsl,usl\nA,,\nB,2,1\n")
    code, out, _ = call("check", plan)
    assert code == 2 and "error: registry.csv, row 3, lsl" in out and "warning: registry.csv, row 2" in out
    told = json.loads(call("check", plan, "--json")[1])
    assert told["valid"] is False and len(told["problems"]) == 2
    plan.with_name("registry.csv").write_text("characteristic,lsl,usl\nA,1,2\n")
    shutil.rmtree(plan.parent / "in")
    code, out, _ = call("check", plan)
    assert code == 0 and "no file matches" in out


def test_new_then_check_then_run(call, tmp_path):
    code, out, _ = call("new", tmp_path / "triage")
    assert code == 0 and "portfolio check" in out
    assert call("check", tmp_path / "triage" / "plan.toml")[0] == 0
    assert call("new", tmp_path / "triage")[0] == 2


def test_the_module_runs_as_the_command_does():
    out = subprocess.run(
        [sys.executable, "-m", "portfolio", "--version"], capture_output=True, text=True, check=True
    ).stdout
    assert out.startswith("portfolio ")
