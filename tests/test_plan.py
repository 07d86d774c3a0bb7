"""Reading a plan: every problem at once, each with place, what and remedy."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from portfolio import starter
from portfolio.errors import PlanError, UsageError
from portfolio.plan import Plan

GOOD = """
[portfolio]
timezone = "Europe/Vienna"
[[source]]
name = "cmm"
path = "in/*.csv"
"""


def write(folder: Path, text: str) -> Path:
    (folder / "registry.csv").write_text("characteristic,lsl\nA,1\n")
    (folder / "plan.toml").write_text(text, encoding="utf-8")
    return folder / "plan.toml"


def problems(folder: Path, text: str) -> list[str]:
    with pytest.raises(PlanError) as told:
        Plan.read(write(folder, text))
    assert told.value.exit_code == 2
    return [str(problem) for problem in told.value.problems]


def test_a_small_plan_has_all_defaults_and_paths_relative_to_itself(tmp_path):
    plan = Plan.read(write(tmp_path, GOOD))
    assert plan.portfolio.window_weeks == 13 and plan.targets == {"default": 1.33, "critical": 1.67}
    assert plan.store_path == tmp_path / "portfolio.duckdb"


@pytest.mark.parametrize(
    ("text", "place", "what"),
    [
        (GOOD.replace("path =", "pfad ="), "[[source]] 'cmm'", "unknown key 'pfad'"),
        (GOOD + 'colums = { value = "x" }\n', "[[source]] 'cmm'", "Did you mean 'columns'?"),
        (GOOD + 'columns = { valu = "x" }\n', "columns", "Did you mean 'value'?"),
        ("[portfolo]\n", "plan.toml", "Did you mean 'portfolio'?"),
        ('[portfolio]\nwindow_week = 3\n', "[portfolio]", "Did you mean 'window_weeks'?"),
        ("[portfolio]\nwindow_weeks = 0\n", "[portfolio], window_weeks", "Use 1 or more"),
        ('[portfolio]\nwindow_weeks = "many"\n', "window_weeks", "valid integer"),
        ('[portfolio]\ntimezone = "Europe/Wien"\n', "timezone", "unknown time zone"),
        ("[targets]\ndefault = 0.9\n", "[targets], default", "Use 1"),
        ("[targets]\ncritical = 1.67\n", "[targets]", "no default target"),
        ('[schedule]\npublish = "0 6 * * 1"\n', "[schedule], publish", "Use names"),
        ('[schedule]\npull = "0 6 31 2 *"\n', "[schedule], pull", "never comes"),
        ('[schedule]\npull = "0 6 * *"\n', "[schedule], pull", "4 fields"),
        ('[schedule]\npull = "0 25 * * mon"\n', "[schedule], pull", "no cron line"),
        ('[[source]]\nname = "x"\n', "[[source]] 'x'", "needs a path"),
        ('[[source]]\nname = "x"\nkind = "database"\n', "[[source]] 'x'", "needs a url"),
        ('[[source]]\nname = "x"\nkind = "databse"\npath = "a"\n', "kind", "'files' or 'database'"),
        ('[[source]]\nname = "x"\nkind = "database"\nquery = "q"\nurl = "postgresql://u:secret@h/d"\n', "url", "password"),
        ('[[source]]\nname = "x"\nkind = "database"\nquery = "q"\nurl_env = "NOT_SET_HERE"\n', "url_env", "NOT_SET_HERE"),
        (GOOD + GOOD.split("\n", 3)[3], "name", "two sources"),
        (GOOD + 'encoding = "klingon"\n', "encoding", "unknown encoding"),
        (GOOD + 'decimal = ","\nthousands = ","\n', "thousands", "same sign"),
        ("[judgement]\nlist_chance = 0.9\n", "[judgement]", "must rise"),
        ('[limits]\nmemory = "lots"\n', "memory", "no size"),
        ('[portfolio]\nregistry = "none.csv"\n', "registry", "does not exist"),
        ("[portfolio\n", "plan.toml", "not valid TOML"),
    ],
)  # fmt: skip
def test_each_mistake_is_told_with_place_and_remedy(tmp_path, text, place, what):
    told = problems(tmp_path, text)
    assert any(place in problem and what in problem for problem in told), told


def test_every_problem_is_listed_at_once(tmp_path):
    text = '[portfolio]\nwindow_weeks = 0\ntitel = "x"\n[targets]\ndefault = 0.5\n[[source]]\nname = "a"\ndecimal = "x"\ncolor = 1\n'
    assert len(problems(tmp_path, text)) == 5


def test_a_password_is_never_repeated_in_a_message(tmp_path):
    text = '[[source]]\nname = "x"\nkind = "database"\nquery = "q"\nurl = "postgresql://u:hunter2@h/d"\n'
    assert not any("hunter2" in problem for problem in problems(tmp_path, text))


def test_a_missing_plan_says_how_to_make_one(tmp_path):
    with pytest.raises(PlanError, match="portfolio new"):
        Plan.read(tmp_path / "none.toml")


def test_the_commented_plan_of_new_reads_back_as_the_defaults(tmp_path):
    starter.create(tmp_path / "new")
    read = Plan.read(tmp_path / "new" / "plan.toml")
    bare = Plan(source=read.source, path=read.path)
    assert read == bare
    # Every setting of every section is in the text, with its reason where there is one.
    text = (tmp_path / "new" / "plan.toml").read_text()
    for section in (
        type(read.portfolio),
        type(read.judgement),
        type(read.limits),
        type(read.report),
        type(read.schedule),
    ):
        assert all(f"{name} =" in text for name in section.model_fields)
    assert "Share of false alarms tolerated" in text


def test_uncommenting_every_default_changes_nothing(tmp_path):
    starter.create(tmp_path / "new")
    path = tmp_path / "new" / "plan.toml"
    lines = [
        line[2:] if line.startswith("# ") and " = " in line and not line.startswith("# columns") else line
        for line in path.read_text().splitlines()
        if not line.endswith(" =")
    ]
    tomllib.loads("\n".join(lines))
    path.write_text("\n".join(lines))
    read = Plan.read(path)
    assert read == Plan(source=read.source, path=path)


def test_new_does_not_replace_what_is_there(tmp_path):
    starter.create(tmp_path)
    with pytest.raises(UsageError, match="exists already"):
        starter.create(tmp_path)
