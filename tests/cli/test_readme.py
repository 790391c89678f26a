"""The README tells the truth: its file is the shipped one, its answers are what the commands print today."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest
from click.testing import CliRunner

from nodal.cli import main

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
ANSWERS = re.findall(r"^```\n\$ nodal (.*)\n([^`]*)^```$", README, re.MULTILINE)


def test_two_commands_that_begin_with_an_environment() -> None:
    commands = re.findall(r"^python3 -m venv .*$", README, re.MULTILINE)
    assert len(commands) == 2
    assert "nodal figures circuits/bench_probe.nodal" in commands[0]
    assert "pytest" in commands[1]


def test_there_are_answers() -> None:
    assert len(ANSWERS) >= 3


@pytest.mark.parametrize(("call", "answer"), ANSWERS, ids=[call for call, _ in ANSWERS])
def test_answer(call: str, answer: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    monkeypatch.setenv("COLUMNS", "100")
    result = CliRunner().invoke(main, [*shlex.split(call), "--quiet"])
    assert result.exit_code == 0
    assert result.stdout.rstrip() == answer.rstrip()


def test_the_file_of_the_tour_is_the_shipped_one() -> None:
    shown = re.search(r"^```\n(nodal 1\n[^`]*)^```$", README, re.MULTILINE)
    assert shown is not None
    shipped = (ROOT / "circuits" / "bench_probe.nodal").read_text(encoding="utf-8")
    without_opening = re.sub(r"\n# Shows:(.*\n)+?\n", "\n", shipped, count=1)
    assert shown[1] == without_opening
