"""Figures in git's own diffs, on real repositories: the text conversion and the external driver."""

from __future__ import annotations

import os
import subprocess
from pathlib import Path

import pytest
from support.repositories import NODAL, PROBE, STOCK, Repository, run

from nodal import blobs
from nodal.report import diffing

FILE = "my designs/probe.nodal"


@pytest.fixture
def converted(probe: Repository) -> Repository:
    """The repository with figures in its diffs, as the README says."""
    probe.write(".gitattributes", "*.nodal diff=nodal\n")
    probe.git("config", "diff.nodal.textconv", f"{NODAL} figures --for-diff")
    probe.commit("attributes")
    return probe


def lines(text: str, sign: str) -> set[str]:
    return {line[1:].rstrip() for line in text.splitlines() if line.startswith(sign) and line[1:2] != sign}


def value(figure: str, said: set[str]) -> str:
    (line,) = [line for line in said if line.startswith(figure)]
    return line.partition(": ")[2]


# Text conversion, as git calls it


def test_git_diff_shows_the_text_and_the_figures(converted: Repository) -> None:
    converted.replace(FILE, "10 pF", "12 pF")
    said = converted.git("diff")
    assert "branch load: plug to ground = 1 MΩ ± 1 % ∥ 10 pF" in lines(said, "-")
    assert "branch load: plug to ground = 1 MΩ ± 1 % ∥ 12 pF" in lines(said, "+")
    # 1 m of 100 pF/m and the load: 110 and 112 pF, as capacitors in parallel make it
    assert value("capacitance(drive) at 1 MHz", lines(said, "-")).startswith("110.")
    assert value("capacitance(drive) at 1 MHz", lines(said, "+")).startswith("112.")
    assert any(line.startswith("light: pass, found 110.") for line in lines(said, "-"))
    assert any(line.startswith("light: fail, found 112.") for line in lines(said, "+"))


def test_git_log_and_show_find_old_includes(converted: Repository) -> None:
    converted.replace("lib/stock.nodal", "100 pF", "200 pF")
    converted.replace(FILE, "10 pF", "20 pF")
    second = converted.commit("second")
    converted.replace("lib/stock.nodal", "200 pF", "300 pF")
    converted.replace(FILE, "20 pF", "30 pF")
    third = converted.commit("third")
    (converted.top / "lib/stock.nodal").unlink()  # the work tree plays no part
    log = converted.git("log", "-p", "-2", "--format=commit %s", "--", FILE)
    newest, middle = log.removeprefix("commit ").split("\ncommit ")
    assert newest.startswith("third")
    assert value("capacitance(drive) at 10 kHz", lines(newest, "+")).startswith("330")
    assert value("capacitance(drive) at 10 kHz", lines(newest, "-")).startswith("220")
    assert value("capacitance(drive) at 10 kHz", lines(middle, "+")).startswith("220")
    assert value("capacitance(drive) at 10 kHz", lines(middle, "-")).startswith("110")
    assert f"includes lib/stock.nodal from commit {third[:8]}" in newest
    assert f"includes lib/stock.nodal from commit {second[:8]}" in newest
    show = converted.git("show", "--format=", "HEAD~1", "--", FILE)
    assert lines(show, "+") == lines(middle, "+")


def test_git_never_stops_at_a_broken_or_old_file(converted: Repository) -> None:
    converted.replace(FILE, "branch", "brunch")
    converted.commit("broken")
    converted.write(FILE, "nodal 7\nnew things\n")
    converted.commit("of the future")
    (converted.top / FILE).write_bytes(b"\xff\xfe\x00")
    converted.commit("no text")
    converted.write(FILE, "")
    converted.commit("empty")
    converted.write(FILE, PROBE)
    converted.commit("good again")
    (converted.top / FILE).unlink()
    converted.commit("gone")
    log = converted.git("log", "-p", "--format=commit %s", "--", FILE)
    assert log.count("\ncommit ") == 6
    assert "error[unknown-statement]" in log
    assert "error[newer-version]" in log
    assert "error[not-utf-8]" in log
    assert "error[empty-file]" in log
    assert "Traceback" not in log


def test_files_that_others_include_have_no_figures(converted: Repository) -> None:
    converted.replace("lib/stock.nodal", "100 pF", "101 pF")
    said = converted.git("diff")
    assert lines(said, "+") == {"stock coax { capacitance 101 pF/m; inductance 250 nH/m }"}
    assert "error" not in said


def test_staged_includes_come_from_the_index(converted: Repository) -> None:
    converted.write("lib/stock.nodal", STOCK.replace("100 pF", "150 pF"))
    converted.replace(FILE, "10 pF", "50 pF")
    converted.git("add", "-A")
    converted.replace(FILE, "50 pF", "60 pF")  # git hands out a copy of the staged file
    converted.write("lib/stock.nodal", STOCK.replace("100 pF", "900 pF"))
    said = converted.git("diff", "--cached", "--", FILE)
    assert value("capacitance(drive) at 10 kHz", lines(said, "+")).startswith("200")
    assert "includes lib/stock.nodal from the index" in said


def test_moved_files_and_subfolders(converted: Repository) -> None:
    converted.git("mv", FILE, "my designs/other.nodal")
    converted.replace("my designs/other.nodal", "10 pF", "11 pF")
    converted.commit("moved")
    said = converted.git("log", "-p", "-M", "--format=", "--follow", "--", "other.nodal", folder="my designs")
    assert "rename to my designs/other.nodal" in said
    assert any(line.startswith("capacitance(drive) at 10 kHz: 111") for line in lines(said, "+"))


def test_a_copy_of_which_nothing_is_known(converted: Repository, tmp_path: Path) -> None:
    folder = tmp_path / "git-blob-a1B2c3"
    folder.mkdir()
    (folder / "probe.nodal").write_text(PROBE.replace("10 pF", "17 pF"))
    known = run("figures", "--for-diff", str(folder / "probe.nodal"))
    assert known.exit_code == 0
    assert "includes lib/stock.nodal from the work tree" in known.stdout
    (folder / "stranger.nodal").write_text(PROBE.replace("10 pF", "17 pF"))
    strange = run("figures", "--for-diff", str(folder / "stranger.nodal"))
    assert strange.exit_code == 0
    assert "error[include-unreadable]" in strange.stdout
    assert "includes other files from nowhere" in strange.stdout


@pytest.mark.parametrize("name", ["git-blob-a1B2c3/probe.nodal", "a1B2c3_probe.nodal"])
def test_copies_are_told_by_their_names(converted: Repository, tmp_path: Path, name: str) -> None:
    copy = tmp_path / name
    copy.parent.mkdir(exist_ok=True)
    copy.write_text(PROBE)
    old = blobs.load(str(copy))
    assert old.home is not None
    assert old.home.words.startswith("commit ")
    assert old.home.label.endswith(f":{FILE}")


def test_which_tree_an_external_driver_gets(converted: Repository, tmp_path: Path) -> None:
    copy = tmp_path / "git-blob-a1B2c3" / "probe.nodal"
    copy.parent.mkdir()

    def words(text: str, *, newest: bool) -> str:
        copy.write_text(text)
        name = converted.git("hash-object", str(copy)).strip()
        home = blobs.load(str(copy), path=FILE, name=name, newest=newest).home
        assert home is not None
        return home.words

    first = converted.git("rev-parse", "HEAD~1").strip()[:8]
    last = converted.git("rev-parse", "HEAD").strip()[:8]
    assert words(PROBE, newest=False) == f"commit {first}"
    assert words(PROBE, newest=True) == f"commit {last}"
    staged = PROBE.replace("10 pF", "11 pF")
    converted.write(FILE, staged)
    converted.git("add", "-A")
    assert words(staged, newest=True) == words(staged, newest=False) == "the index"
    converted.commit("second")
    converted.write(FILE, PROBE.replace("10 pF", "12 pF"))
    converted.commit("third")
    assert words(PROBE, newest=True) == f"commit {last}"  # the one before it was replaced
    assert words("nodal 1\n" + PROBE.partition("\n")[2] + "# new\n", newest=True) == "the work tree"
    converted.write(FILE, PROBE)
    converted.git("add", "-A")
    assert words(PROBE, newest=True) == "the index"  # put back, and not committed yet
    assert words(PROBE, newest=False) == f"commit {first}"


def test_a_copy_with_other_line_ends_is_known(converted: Repository, tmp_path: Path) -> None:
    converted.write(".gitattributes", "*.nodal diff=nodal text eol=crlf\n")
    copy = tmp_path / "git-blob-a1B2c3" / "probe.nodal"
    copy.parent.mkdir()
    copy.write_bytes(PROBE.replace("\n", "\r\n").encode())
    old = blobs.load(str(copy))
    assert old.home is not None
    assert old.home.words.startswith("commit ")
    assert old.design is not None


def test_outside_git_and_standard_input(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("lone.nodal").write_text(PROBE.replace('include "../lib/stock.nodal"\n', STOCK.partition("\n")[2]))
    assert "capacitance(drive)" in run("figures", "--for-diff", "lone.nodal").stdout
    missing = run("figures", "--for-diff", "none.nodal")
    assert missing.exit_code == 0
    assert "error[no-file]" in missing.stdout


def test_a_mistake_of_the_tool_is_said_and_survived(
    converted: Repository, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fails(file: str) -> str:
        raise ArithmeticError("two and two")

    monkeypatch.setattr(diffing, "for_diff", fails)
    result = run("figures", "--for-diff", FILE)
    assert result.exit_code == 0
    assert "ArithmeticError('two and two')" in result.stdout


# The external driver, as git calls it


@pytest.fixture
def driven(converted: Repository) -> Repository:
    converted.git("config", "diff.nodal.command", f"{NODAL} compare --as-git-driver")
    return converted


def test_git_diff_compares(driven: Repository) -> None:
    driven.replace(FILE, "10 pF", "12 pF")
    driven.replace("lib/stock.nodal", "100 pF", "101 pF")
    said = driven.git("diff")
    assert said.startswith("diff lib/stock.nodal\n")
    assert "-stock coax { capacitance 100 pF/m" in said
    assert f"diff {FILE}" in said
    changed = [" ".join(line.split()) for line in said.splitlines()]
    assert "load.C capacitance 10 pF 12 pF +20.0 %" in changed
    assert "flex capacitance 100 pF/m 101 pF/m +1.00 %" in changed
    assert "light flipped pass: 110.0 pF fail: 113.0 pF" in changed
    assert "and the work tree" in said
    plain = driven.git("diff", "--no-ext-diff", "--no-textconv")
    assert "+branch load: plug to ground = 1 MΩ ± 1 % ∥ 12 pF" in plain


def test_git_diff_between_commits_finds_the_last_includes(driven: Repository) -> None:
    driven.replace("lib/stock.nodal", "100 pF", "200 pF")
    driven.commit("the include alone")
    driven.replace(FILE, "10 pF", "12 pF")
    driven.commit("the design alone")
    said = driven.git("diff", "HEAD~1", "HEAD", "--", FILE)
    changed = [" ".join(line.split()) for line in said.splitlines()]
    assert "load.C capacitance 10 pF 12 pF +20.0 %" in changed
    assert not any(line.startswith("flex") for line in changed)


def test_the_driver_never_stops_git(driven: Repository) -> None:
    driven.replace(FILE, "branch", "brunch")
    said = driven.git("diff")
    assert f"{FILE}:5:1: error[unknown-statement]" in said
    assert "+brunch load" in said
    driven.commit("broken")
    driven.write("new.nodal", PROBE.replace("../lib", "lib"))
    driven.git("rm", "-q", FILE)
    driven.git("add", "-A")
    said = driven.git("diff", "--cached", "--no-renames")
    assert "diff new.nodal\nadded\n" in said
    assert f"diff {FILE}\ndeleted\n" in said
    assert "+nodal 1" in said
    assert "-brunch load" in said


def test_the_driver_in_a_merge(driven: Repository) -> None:
    driven.git("checkout", "-qb", "theirs")
    driven.replace(FILE, "10 pF", "11 pF")
    driven.commit()
    driven.git("checkout", "-q", "-")
    driven.replace(FILE, "10 pF", "12 pF")
    driven.commit()
    with pytest.raises(subprocess.CalledProcessError):
        driven.git("merge", "-q", "theirs")
    said = driven.git("diff", "--ours", "--", FILE)
    assert "error[" in said


@pytest.mark.parametrize(
    "arguments", [["x.nodal"], ["x.nodal", "/dev/null", ".", ".", "/dev/null", ".", "."]]
)
def test_odd_calls_of_the_driver(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, arguments: list[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    assert os.listdir() == []
    assert run("compare", "--as-git-driver", *arguments).exit_code == 0
