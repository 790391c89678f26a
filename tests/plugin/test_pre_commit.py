"""The hooks for pre-commit, run by pre-commit itself, and how `nodal check` finds whom a change concerns."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
import yaml
from support.repositories import NODAL, PROBE, ROOT, STOCK, Repository, run

from nodal.dependents import with_dependents

HOOKS = ROOT / ".pre-commit-hooks.yaml"


@pytest.fixture
def repository(tmp_path, monkeypatch) -> Repository:
    """A repository with a design, what it includes and a record; the working folder."""
    top = tmp_path / "some designs"
    top.mkdir()
    monkeypatch.chdir(top)
    repository = Repository(top)
    repository.write("lib/stock.nodal", STOCK)
    repository.write("designs/probe.nodal", PROBE)
    repository.write("notes.txt", "not a design\n")
    assert run("record", "designs").exit_code == 0
    repository.commit()
    return repository


@pytest.fixture
def hooks(repository, tmp_path, monkeypatch):
    """pre-commit on what is staged: its status and what it printed."""
    # As in the file, but with the program of this environment in place of an installed one.
    offered = yaml.safe_load(HOOKS.read_text(encoding="utf-8"))
    for hook in offered:
        program, _, rest = hook["entry"].partition(" ")
        assert program == "nodal"
        hook |= {"entry": f"{NODAL} {rest}", "language": "system"}
    config = tmp_path / "config.yaml"
    config.write_text(json.dumps({"repos": [{"repo": "local", "hooks": offered}]}))
    environment = {**os.environ, "PRE_COMMIT_HOME": str(tmp_path / "home"), "PRE_COMMIT_COLOR": "never",
                   "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "utf-8"}  # fmt: skip

    def run_hooks() -> tuple[int, str]:
        repository.git("add", "-A")
        answer = subprocess.run(
            [sys.executable, "-m", "pre_commit", "run", "--config", str(config)],
            capture_output=True, text=True, encoding="utf-8", env=environment, check=False,
        )  # fmt: skip
        return answer.returncode, answer.stdout + answer.stderr

    return run_hooks


def test_the_hooks_are_well_formed() -> None:
    answer = subprocess.run(
        [sys.executable, "-m", "pre_commit", "validate-manifest", str(HOOKS)],
        check=False,
        capture_output=True,
    )
    assert answer.returncode == 0, answer.stdout
    offered = yaml.safe_load(HOOKS.read_text(encoding="utf-8"))
    assert {hook["id"]: hook["entry"] for hook in offered} == {
        "nodal-check": "nodal check --dependents", "nodal-tidy": "nodal tidy --check",
    }  # fmt: skip


def test_changes_that_hold_and_changes_of_other_files(repository, hooks) -> None:
    repository.replace("notes.txt", "not", "still not")
    status, output = hooks()
    assert status == 0
    assert output.count("Skipped") == 2
    repository.replace("designs/probe.nodal", "1 MΩ ± 1 %", "1 MΩ ± 2 %")  # moves no figure
    status, output = hooks()
    assert status == 0, output
    assert output.count("Passed") == 2


def test_only_a_shared_file_changed(repository, hooks) -> None:
    repository.replace("lib/stock.nodal", "100 pF", "105 pF")
    status, output = hooks()
    assert status == 1
    (line,) = (line for line in output.splitlines() if "light" in line)
    assert line.split()[0] == "fail"
    assert "designs/probe.nodal:8" in line
    assert "moved  recorded" in output


def test_only_a_record_changed(repository, hooks) -> None:
    record = Path("designs/probe.figures.toml").read_text()
    line = next(line for line in record.splitlines() if line.startswith('"capacitance(drive) at 1 MHz"'))
    repository.replace("designs/probe.figures.toml", line, '"capacitance(drive) at 1 MHz" = "120 pF"')
    status, output = hooks()
    assert status == 1
    assert "moved" in output
    assert "120 pF -> 110.043776 pF" in output


def test_untidy(repository, hooks) -> None:
    repository.replace("lib/stock.nodal", "nodal 1", "nodal   1")
    status, output = hooks()
    assert status == 1
    assert "not tidy: lib/stock.nodal" in output
    assert output.count("Failed") == 1


def test_a_shared_file_that_was_renamed(repository, hooks) -> None:
    repository.git("mv", "lib/stock.nodal", "lib/stocks.nodal")
    status, output = hooks()
    assert status == 1
    assert "designs/probe.nodal:2:1: error[include-unreadable]" in output


# Whom a change concerns


def dependents(*files: str) -> list[str]:
    return with_dependents(files)[len(files) :]


def test_by_way_of_others_and_from_a_folder_below(repository, monkeypatch) -> None:
    repository.write("lib/more.nodal", 'nodal 1\ninclude "stock.nodal"\n')
    repository.write("designs/deep/third.nodal", 'nodal 1; title "a"; include"../../lib/more.nodal" # why\n')
    repository.write("lib/ring.nodal", 'nodal 1\ninclude "ring.nodal"\n')
    found = ["designs/deep/third.nodal", "designs/probe.nodal", "lib/more.nodal"]
    assert dependents("lib/stock.nodal") == found
    assert dependents("lib/more.nodal") == ["designs/deep/third.nodal"]
    assert dependents("lib/stock.nodal", "designs/probe.nodal") == [found[0], found[2]]
    assert dependents("designs/probe.nodal") == []
    monkeypatch.chdir("lib")
    assert dependents("stock.nodal") == [
        "../designs/deep/third.nodal",
        "../designs/probe.nodal",
        "more.nodal",
    ]


def test_comments_and_texts_include_nothing(repository) -> None:
    other = 'nodal 1\n# include "stock.nodal"\ntitle "include"  # "x" include "stock.nodal"\n'
    repository.write("lib/other.nodal", other)
    assert dependents("lib/stock.nodal") == ["designs/probe.nodal"]


def test_files_with_errors_and_links(repository) -> None:
    repository.write("lib/broken.nodal", 'nodal 1\nbranch = \ninclude "stock.nodal"\n')
    os.symlink("stock.nodal", "lib/link.nodal")
    repository.write("lib/through.nodal", 'nodal 1\ninclude "link.nodal"\n')
    repository.write("lib/not_utf8.nodal", "nodal 1\n")
    Path("lib/not_utf8.nodal").write_bytes(b'nodal 1\ninclude "st\xffck.nodal"\n')
    expected = ["designs/probe.nodal", "lib/broken.nodal", "lib/through.nodal"]
    assert dependents("lib/stock.nodal") == expected
    assert dependents("lib/link.nodal") == expected


def test_ignored_files_are_left_out(repository) -> None:
    repository.write(".gitignore", "build/\n")
    repository.write("build/copy.nodal", 'nodal 1\ninclude "../lib/stock.nodal"\n')
    assert dependents("lib/stock.nodal") == ["designs/probe.nodal"]


def test_what_is_gone_since_the_last_commit_counts(repository) -> None:
    repository.write("lib/other.nodal", 'nodal 1\ninclude "never_was.nodal"\n')
    assert dependents("notes.txt") == []
    os.remove("lib/stock.nodal")
    assert dependents("notes.txt") == ["designs/probe.nodal"]
    repository.commit()
    assert dependents("notes.txt") == []


def test_outside_a_repository(tmp_path, monkeypatch) -> None:
    for folder, text in (("lib", STOCK), ("designs", PROBE)):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "a.nodal").write_text(text.replace("stock.nodal", "a.nodal"))
    monkeypatch.chdir(tmp_path)
    assert dependents("lib/a.nodal") == ["designs/a.nodal"]
    monkeypatch.chdir(tmp_path / "designs")
    assert dependents("../lib/a.nodal") == []


def test_without_git(repository, monkeypatch) -> None:
    monkeypatch.setenv("PATH", "")
    assert dependents("lib/stock.nodal") == ["designs/probe.nodal"]


def test_check_of_dependents(repository) -> None:
    repository.replace("lib/stock.nodal", "100 pF", "105 pF")
    assert run("check", "lib/stock.nodal").exit_code == 0
    result = run("check", "--dependents", "lib/stock.nodal")
    assert result.exit_code == 1
    assert [line for line in result.stdout.splitlines() if line[:1] not in (" ", "")][:2] == [
        "lib/stock.nodal: shared file without source or reading, checked where it is included",
        "designs/probe.nodal",
    ]
    answer = json.loads(run("check", "--dependents", "--json", "lib/stock.nodal").stdout)
    assert [file["file"] for file in answer["files"]] == ["lib/stock.nodal", "designs/probe.nodal"]


def test_a_record_stands_for_its_design(repository) -> None:
    result = run("check", "designs/probe.figures.toml", "designs/probe.nodal")
    assert result.exit_code == 0
    assert result.stdout.count("designs/probe.nodal\n") == 1
    repository.git("mv", "designs/probe.nodal", "designs/other.nodal")
    result = run("check", "designs/probe.figures.toml")
    assert result.exit_code == 2
    expected = "designs/probe.figures.toml records figures of designs/probe.nodal, which does not exist"
    assert f"error[record-without-design]: {expected}" in result.stderr
