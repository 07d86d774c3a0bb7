"""What the documents promise is there, and what is there is documented."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
import typer.main

from portfolio.command import app
from portfolio.plan import Plan
from portfolio.registry import COLUMNS
from portfolio.result import CENTERING_CODES, NOT_JUDGED_CODES

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
COMMANDS = typer.main.get_command(app).commands  # type: ignore[attr-defined]


@pytest.mark.parametrize("name", sorted(COMMANDS))
def test_every_command_has_help_an_example_and_a_line_in_the_readme(name):
    help_text = COMMANDS[name].help
    assert re.search(rf"Example: portfolio {name}\b", help_text)
    assert len(help_text.split("\n")[0]) > 20
    assert f"`portfolio {name}" in README
    for parameter in COMMANDS[name].params:
        assert getattr(parameter, "help", None) or parameter.name == "help", (name, parameter.name)


def test_the_readme_promises_no_command_that_is_not_there():
    assert set(re.findall(r"`portfolio ([a-z]+)", README)) == set(COMMANDS)


def test_ci_runs_exactly_the_readmes_test_line():
    line = re.search(r"^python3 -m venv .*pytest.*$", README, re.MULTILINE)
    assert line is not None
    assert line.group(0) in (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()


def test_the_readme_opens_with_the_job_in_one_paragraph():
    title, paragraph, *_ = README.split("\n\n")
    assert title == "# portfolio"
    assert "centering alone" in paragraph and "static report" in paragraph.replace("\n", " ")


def test_the_plan_in_the_readme_is_a_plan(tmp_path):
    text = re.search(r"```toml\n(.*?)```", README, re.DOTALL)
    assert text is not None
    (tmp_path / "registry.csv").write_text("characteristic,lsl\nA,1\n")
    (tmp_path / "plan.toml").write_text(text.group(1))
    assert Plan.read(tmp_path / "plan.toml").source[0].decimal == ","


def test_every_column_of_the_registry_is_named():
    assert [name for name in COLUMNS if f"`{name}`" not in README] == []


def test_every_code_has_a_sentence():
    from portfolio.publishing import wording

    told = " ".join(
        (ROOT / "portfolio" / "publishing" / name.name).read_text()
        for name in (ROOT / "portfolio/publishing").glob("wording*.py")
    )
    assert [code for code in (*NOT_JUDGED_CODES, *CENTERING_CODES) if f'"{code}"' not in told] == []
    assert wording.reasons is not None


def test_no_document_names_a_registry_host_or_a_path_of_a_machine():
    hosts = re.compile(r"pyp[i]\.org|pythonhoste[d]\.|npmj[s]\.|deb\.debia[n]\.|registry\.npm")
    paths = re.compile(r"(?<![\w./-])/(wor[k]|roo[t]|hom[e])/")
    for name in ("README.md", "DEVELOPERS.md", "CHANGELOG.md", "pyproject.toml", ".ci/run"):
        text = (ROOT / name).read_text(encoding="utf-8")
        assert not hosts.search(text) and not paths.search(text), name
