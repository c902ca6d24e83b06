"""What the README shows is what the program does."""

from __future__ import annotations

import re
import shlex
import tomllib
from pathlib import Path

import pytest
from typer.testing import CliRunner

from budgetcheck import assumptions
from budgetcheck.cli import app

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")

SHOWN = re.findall(r"<!-- output of: budgetcheck (.+?) -->\n```text\n(.*?)```", README, re.DOTALL)
PROGRAMS = re.findall(r"```python\n(.*?)```", README, re.DOTALL)
FILES = re.findall(r"```toml\n(.*?)```", README, re.DOTALL)


@pytest.fixture(autouse=True)
def _in_the_project_folder(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


def test_the_readme_has_examples_of_every_kind() -> None:
    """The checks below are not empty."""
    assert SHOWN
    assert PROGRAMS
    assert FILES


@pytest.mark.parametrize(("command", "output"), SHOWN)
def test_shown_output_is_the_output(command: str, output: str) -> None:
    """A screen in the README is what the command prints."""
    assert CliRunner().invoke(app, shlex.split(command)).stdout == output


@pytest.mark.parametrize("program", PROGRAMS)
def test_programs_run(program: str) -> None:
    """A program in the README runs, and its assertions hold."""
    exec(compile(program, "README.md", "exec"), {})


@pytest.mark.parametrize("text", FILES)
def test_assumptions_are_accepted(text: str) -> None:
    """An assumptions file in the README has no fault."""
    assert assumptions.read(tomllib.loads(text)).findings == ()


def test_the_set_up_is_two_commands() -> None:
    """Two commands do all the set-up: one runs the main job, one passes the tests."""
    commands = re.findall(r"```sh\n(.*?)\n```", README, re.DOTALL)
    assert len(commands) == 2
    assert all(command.startswith("python3 -m venv .venv && ") for command in commands)
    assert "budgetcheck assess samples/" in commands[0]
    assert commands[1].endswith("-m pytest")
