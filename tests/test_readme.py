"""The README does not lie: its scenario runs, its Python runs, its reference is that of the code."""

import re
from pathlib import Path

import pytest
from wellshed.scenarios.answering import answer
from wellshed.scenarios.reading import load
from wellshed.scenarios.reference import put_into

README = Path(__file__).resolve().parents[1] / "README.md"
TEXT = README.read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", TEXT, re.MULTILINE | re.DOTALL)


@pytest.fixture
def example(tmp_path, monkeypatch):
    """The README's scenario and levels as files, in the current folder."""
    (scenario,), (levels,) = blocks("yaml"), blocks("csv")
    (tmp_path / "scenario.yaml").write_text(scenario, encoding="utf-8")
    (tmp_path / "levels.csv").write_text(levels, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_the_two_commands_are_one_line_each():
    commands = blocks("sh")
    assert len(commands) == 2
    assert all(len(c.strip().splitlines()) == 1 for c in commands)
    assert "wellshed run scenarios/examples/brindle_mere/scenario.yaml" in commands[0]
    assert "pytest" in commands[1]


def test_the_reference_is_that_of_the_code():
    assert put_into(TEXT) == TEXT, "run: python -m wellshed.scenarios.reference README.md"


def test_pictures_and_files_named_in_it_exist():
    for target in re.findall(r"\]\(([^)#:]+)\)", TEXT):
        assert (README.parent / target).is_file(), target


def test_the_scenario_by_example_is_answered(example):
    answers = answer(load(example / "scenario.yaml"))
    assert all(check.passed for check in answers.checks)
    assert {r.case for r in answers.results} == {"base", "more", "dry"}
    assert answers.fitted.result is not None
    assert answers.fitted.warnings == ()


def test_the_python_by_example_runs(example):
    (code,) = blocks("python")
    names: dict = {}
    exec(compile(code, "README", "exec"), names)
    assert names["solution"].boundary.met
    assert names["answers"].flow.head(300.0, 200.0) > 58.0
