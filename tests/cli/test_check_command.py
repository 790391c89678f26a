"""`nodal check` and `nodal record`: lines, formats, statuses, several files at once."""

from __future__ import annotations

import json
import math
import os
import signal
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree

import pytest
from click.testing import CliRunner

from nodal import checking
from nodal.cli import main
from nodal.language.diagnostics import DesignError
from nodal.response import Response

# The corner of 1 kΩ and 1 nF is at 159.155 kHz, where |H| = 1/√2; with 2 nF at half of that, |H| = 1/√5.
LOW_PASS = """nodal 1
title "Low-pass"
let c = 1 nF
source s: a to ground = 1 V
branch r: a to b = 1 kΩ
branch c1: b to ground = c
reading m: b to ground
sweep 1 kHz to 10 MHz, 10 per decade
require level: gain(m) at 159154.943 Hz >= 0.7
require wide: bandwidth(m) <= 0.2 MHz
case slow { let c = 2 nF }
"""
SHARED = """nodal 1
stock line { impedance 50 Ω; velocity 0.66 }
assembly rc(a to b) { branch r: a to b = 1 Ω }
"""
PASSING = LOW_PASS.replace("0.7\n", "0.4\n")


def run(*arguments: str, **extra):
    result = CliRunner().invoke(main, list(arguments), **extra)
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


@pytest.fixture
def folder(tmp_path, monkeypatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "probe.nodal").write_text(LOW_PASS)
    return tmp_path


# Text


def test_one_line_a_requirement_grouped_by_case(folder) -> None:
    result = run("check", "probe.nodal")
    assert result.exit_code == 1
    assert result.stderr == ""
    lines = [line.split("  ") for line in result.stdout.splitlines()]
    cells = [[cell.strip() for cell in line if cell.strip()] for line in lines]
    assert cells == [
        ["probe.nodal"],
        ["nominal"],
        ["pass", "level", "gain(m) at 159.154943 kHz >= 0.7", "0.70711", "+1.02 %", "probe.nodal:9"],
        ["pass", "wide", "bandwidth(m) <= 0.2 MHz", "159.16 kHz", "+20.4 %", "probe.nodal:10"],
        ["slow"],
        ["fail", "level", "gain(m) at 159.154943 kHz >= 0.7", "0.44721", "-36.1 %", "probe.nodal:9"],
        ["pass", "wide", "bandwidth(m) <= 0.2 MHz", "79.590 kHz", "+60.2 %", "probe.nodal:10"],
        [],
        ["4 requirements in 1 design: 3 pass, 1 fail"],
    ]


def test_a_file_without_requirements_says_so(folder) -> None:
    (folder / "bare.nodal").write_text("\n".join(LOW_PASS.splitlines()[:8]))
    result = run("check", "bare.nodal")
    assert result.exit_code == 0
    assert result.stdout == "bare.nodal\n  no requirements\n\nno requirements in 1 design\n"


def test_what_cannot_be_computed_is_an_error_and_wins(folder) -> None:
    (folder / "probe.nodal").write_text(LOW_PASS + "require far: bandwidth(m) >= 1 GHz\n")
    result = run("check", "probe.nodal", "--case", "slow")
    assert result.exit_code == 1
    (folder / "probe.nodal").write_text(LOW_PASS + "require low: bandwidth(m, 9 MHz) <= 1 MHz\n")
    result = run("check", "probe.nodal", "--case", "slow")
    assert result.exit_code == 2
    (line,) = (line for line in result.stdout.splitlines() if " low " in line)
    assert line.lstrip().startswith("error")
    assert line.endswith("which proves nothing here")
    assert "1 pass, 1 fail, 1 cannot be computed" in result.stdout


def test_color_on_demand_only(folder) -> None:
    assert "\x1b" not in run("check", "probe.nodal").stdout
    colored = run("check", "probe.nodal", "--color", "always", color=True).stdout
    assert "\x1b[31mfail\x1b[0m" in colored
    assert "\x1b[32mpass\x1b[0m" in colored
    run("check", "probe.nodal", "-o", "answer.txt", color=True)
    assert (folder / "answer.txt").read_text() == run("check", "probe.nodal").stdout


# Choosing


def test_cases_and_values(folder) -> None:
    assert run("check", "probe.nodal", "--case", "nominal").exit_code == 0
    assert run("check", "probe.nodal", "--case", "nominal", "--let", "c=2 nF").exit_code == 1
    assert run("check", "probe.nodal", "--let", "c=0.5 nF").exit_code == 1  # 318 kHz is above the limit
    result = run("check", "probe.nodal", "--case", "slwo")
    assert result.exit_code == 2
    assert 'did you mean "slow"?' in result.stderr
    assert run("check", "probe.nodal", "--let", "d=1").exit_code == 2


def test_a_case_that_some_files_have(folder) -> None:
    (folder / "other.nodal").write_text(PASSING.replace("slow", "quick"))
    result = run("check", ".", "--case", "quick")
    assert result.exit_code == 0
    assert "2 requirements in 2 designs: 2 pass" in result.stdout


def test_standard_input(folder) -> None:
    result = run("check", "-", input=LOW_PASS)
    assert result.exit_code == 1
    assert "<standard input>:9" in result.stdout


def test_no_solve_reads_and_solves_nothing(folder, monkeypatch) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("solved")

    monkeypatch.setattr(Response, "__init__", refuse)
    (folder / "probe.figures.toml").write_text("no record")
    result = run("check", "probe.nodal", "--no-solve")
    assert result.exit_code == 0
    assert result.stdout.endswith("4 requirements in 1 design: not evaluated\n")
    (folder / "probe.nodal").write_text(LOW_PASS + "branch far: x to y = 1 Ω\nlet idle = 1 Ω\n")
    result = run("check", "probe.nodal", "--no-solve", "--json")
    assert result.exit_code == 2
    assert result.stderr == ""
    found = json.loads(result.stdout)["diagnostics"]
    assert {d["code"] for d in found if d["severity"] == "error"} == {"floating-nodes"}


# Several files


def test_folders_are_walked_and_shared_files_told(folder) -> None:
    (folder / "sub").mkdir()
    (folder / "sub" / "parts.nodal").write_text(SHARED)
    (folder / "sub" / "variant.nodal").write_text('nodal 1\ninclude "../probe.nodal"\n')
    (folder / ".git").mkdir()
    (folder / ".git" / "x.nodal").write_text("nonsense")
    result = run("check", ".")
    assert result.exit_code == 1
    assert "sub/parts.nodal: shared file without source or reading" in result.stdout
    assert "8 requirements in 2 designs: 6 pass, 2 fail" in result.stdout
    assert checking.is_shared("sub/parts.nodal")
    assert not checking.is_shared("sub/variant.nodal")
    (folder / "sub" / "parts.nodal").write_text(SHARED.replace("0.66", "0,66"))
    assert not checking.is_shared("sub/parts.nodal")
    assert run("check", "sub/parts.nodal").exit_code == 2


def test_several_processes_give_the_same_answer_in_order(folder) -> None:
    for number in range(6):
        (folder / f"p{number}.nodal").write_text(LOW_PASS.replace("0.7\n", f"0.{number + 3}\n"))
    (folder / "parts.nodal").write_text(SHARED)
    (folder / "q.nodal").write_text(LOW_PASS.replace("let c =", "let c ="[:-1]))
    together, alone = (run("check", "p1.nodal", ".", "--jobs", jobs) for jobs in ("3", "1"))
    assert together.stdout == alone.stdout
    assert together.stderr == alone.stderr
    assert together.exit_code == alone.exit_code == 2
    names = [line for line in together.stdout.splitlines() if line.endswith(".nodal") and "  " not in line]
    assert names == ["p1.nodal", "p0.nodal", "p2.nodal", "p3.nodal", "p4.nodal", "p5.nodal", "probe.nodal"]


def test_a_mistake_in_a_shared_file_is_said_once(folder) -> None:
    (folder / "parts.nodal").write_text(SHARED.replace("50 Ω", "50 F"))
    more = 'include "parts.nodal"\ncable k: b, ground to d, ground = 1 m of line\n'
    more += "branch e: d to ground = 50 Ω\n"
    for name in ("x", "y"):
        (folder / f"{name}.nodal").write_text(LOW_PASS + more)
    result = run("check", "x.nodal", "y.nodal", "parts.nodal")
    assert result.exit_code == 2
    assert result.stderr.count("error[") == 1
    assert result.stdout.splitlines()[-1] == "2 files with errors"


def test_a_process_that_dies_is_said() -> None:
    with pytest.raises(DesignError) as error:
        list(checking._each(os._exit, [3, 3, 3], 2))  # type: ignore[arg-type]
    assert error.value.diagnostics[0].code == "process-died"


def test_nothing_there(folder) -> None:
    (folder / "empty").mkdir()
    for path, code in (("empty", "no-designs"), ("none.nodal", "no-file")):
        result = run("check", path)
        assert result.exit_code == 2
        assert f"error[{code}]" in result.stderr
    assert run("check").exit_code == 2


# Other formats


def test_json_for_one_file(folder) -> None:
    result = run("check", "probe.nodal", "--json")
    assert result.exit_code == 1
    answer = json.loads(result.stdout)
    assert (answer["format"], answer["file"], answer["diagnostics"]) == (1, "probe.nodal", [])
    level = answer["cases"]["slow"]["requirements"][0]
    assert {key: level[key] for key in ("name", "figure", "asked", "status", "path", "line")} == {
        "name": "level", "figure": "gain(m) at 159.154943 kHz", "asked": ">= 0.7", "status": "fail",
        "path": "probe.nodal", "line": 9,
    }  # fmt: skip
    assert level["found"] == pytest.approx(1 / math.sqrt(5), rel=1e-8)
    assert level["margin"] == pytest.approx((1 / math.sqrt(5) - 0.7) / 0.7, rel=1e-7)
    assert answer["cases"]["slow"]["records"] == []


def test_json_for_several_files(folder) -> None:
    (folder / "parts.nodal").write_text(SHARED)
    (folder / "wrong.nodal").write_text("nodal 1\nbranch\n")
    result = run("check", ".", "--json")
    assert result.exit_code == 2
    assert result.stderr == ""
    answer = json.loads(result.stdout)
    assert {f["file"]: f["kind"] for f in answer["files"]} == {
        "parts.nodal": "shared", "probe.nodal": "design", "wrong.nodal": "broken",
    }  # fmt: skip
    assert {d["path"] for d in answer["diagnostics"]} == {"wrong.nodal"}


def test_what_is_infinite_is_null_in_json(folder) -> None:
    (folder / "probe.nodal").write_text(LOW_PASS + "require open: resistance(s) at 0 Hz >= 1 GΩ\n")
    answer = json.loads(run("check", "probe.nodal", "--json").stdout)
    (found,) = (r for r in answer["cases"]["nominal"]["requirements"] if r["name"] == "open")
    assert (found["found"], found["margin"], found["status"]) == (None, None, "pass")
    assert found["reason"] == "infinite"


def test_annotations(folder) -> None:
    (folder / "probe.nodal").write_text(LOW_PASS + "let idle, wrong = 1 Ω\n")
    (folder / "good.nodal").write_text(LOW_PASS + "let idle = 1 %\n")
    lines = run("check", "good.nodal", "probe.nodal", "--format", "github").stdout.splitlines()
    assert lines[0].startswith("::error file=probe.nodal,line=12,col=9,title=") or lines[0].startswith(
        "::warning file=good.nodal,line=12,col=5,title=unused-let::"
    )
    assert {line.split(" ")[0] for line in lines[:3]} == {"::error", "::warning"}
    (level,) = (line for line in lines if "title=slow%3A level" in line)
    assert level.startswith("::error file=good.nodal,line=9,title=slow%3A level::gain(m) at")
    assert level.endswith("found 0.44721, margin -36.1 %25")
    assert lines[-1] == "4 requirements in 1 design: 3 pass, 1 fail; 1 file with errors"


def test_junit(folder) -> None:
    (folder / "probe.nodal").write_text(LOW_PASS + "require low: bandwidth(m, 9 MHz) <= 1 MHz\n")
    (folder / "wrong.nodal").write_text("nodal 1\nbranch\n")
    assert run("record", "probe.nodal").exit_code == 0
    result = run("check", ".", "--format", "junit", "-o", "checks.xml")
    assert result.exit_code == 2
    suites = ElementTree.parse(folder / "checks.xml").getroot()
    probe, wrong = suites
    assert (probe.get("name"), probe.get("tests"), probe.get("failures"), probe.get("errors")) == (
        "probe.nodal", "8", "1", "2",
    )  # fmt: skip
    found = {test.get("name"): [child.tag for child in test] for test in probe}
    assert found == {
        "nominal-level": [], "nominal-wide": [], "nominal-low": ["error"], "slow-level": ["failure"],
        "slow-wide": [], "slow-low": ["error"], "nominal-figures": [], "slow-figures": [],
    }  # fmt: skip
    assert [child.get("type") for test in wrong for child in test]


def test_progress_bars_are_for_terminals(folder) -> None:
    (folder / "other.nodal").write_text(LOW_PASS)
    command = [sys.executable, "-m", "nodal", "check", "."]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (1, "")


# Records


def test_record_then_check(folder) -> None:
    (folder / "probe.nodal").write_text(PASSING)
    result = run("record", "probe.nodal")
    assert (result.exit_code, result.stderr) == (0, "")
    text = (folder / "probe.figures.toml").read_text()
    assert f'"gain(m) at 159.154943 kHz" = "{math.sqrt(0.5):.9f}"' in text
    result = run("check", "probe.nodal")
    assert result.exit_code == 0
    assert "  figures as recorded\n" in result.stdout
    assert result.stdout.endswith("4 pass; figures as recorded in 1 record\n")
    assert "unchanged" in run("record", "probe.nodal").stdout
    assert (folder / "probe.figures.toml").read_text() == text


def test_a_capacitor_that_changes_moves_figures(folder) -> None:
    """5 % more capacitance: the corner falls by 1/1.05, the gain at 0 Hz stays. The reference of the
    bandwidth is the gain at 1 kHz: f = f0 √(1 + 2 (1 kHz/f0)²)."""
    (folder / "probe.nodal").write_text(PASSING)
    run("record", "probe.nodal")
    (folder / "probe.nodal").write_text(PASSING.replace("let c = 1 nF", "let c = 1.05 nF"))
    result = run("check", "probe.nodal")
    assert result.exit_code == 1
    moved = [line for line in result.stdout.splitlines() if line.lstrip().startswith("moved")]
    # In case slow, c is 2 nF as before.
    assert result.stdout.index("slow") > max(result.stdout.index(line) for line in moved)
    (edge,) = (line for line in moved if "bandwidth(m)" in line)
    corners = (1 / (2e-3 * math.pi * c) for c in (1.0, 1.05))
    before, after = (corner * math.sqrt(1 + 2 / corner**2) for corner in corners)
    assert f"{before:.6f} kHz -> {after:.6f} kHz" in edge
    assert "-4.76 %" in edge
    assert "probe.figures.toml:8" in edge
    assert "gain(m) at 0 Hz" not in result.stdout
    answer = json.loads(run("check", "probe.nodal", "--json").stdout)
    (change,) = (c for c in answer["cases"]["nominal"]["records"] if c["figure"] == "bandwidth(m)")
    assert (change["kind"], change["path"], change["line"]) == ("moved", "probe.figures.toml", 8)
    assert change["change"] == pytest.approx(1 / 1.05 - 1, rel=1e-3)
    result = run("record", ".")
    assert "moved" in result.stdout
    assert run("check", ".").exit_code == 0


def test_new_and_stale_figures_fail(folder) -> None:
    (folder / "probe.nodal").write_text(PASSING)
    run("record", ".")
    (folder / "probe.nodal").write_text(PASSING.replace("case slow", "case slower"))
    result = run("check", "probe.nodal")
    assert result.exit_code == 1
    assert "new" in result.stdout
    assert "in the record only" in result.stdout
    assert "slow" in result.stdout


def test_a_case_alone_leaves_the_others_alone(folder) -> None:
    (folder / "probe.nodal").write_text(PASSING)
    run("record", ".")
    assert run("check", "probe.nodal", "--case", "slow").exit_code == 0
    assert run("check", "probe.nodal", "--case", "slow", "--let", "c=3 nF").exit_code == 1
    assert "recorded" not in run("check", "probe.nodal", "--let", "c=3 nF").stdout


def test_a_broken_record_is_a_diagnostic(folder) -> None:
    (folder / "probe.nodal").write_text(PASSING)
    run("record", ".")
    path = folder / "probe.figures.toml"
    path.write_text(path.read_text().replace("[case.slow]", "<<<<<<< ours\n[case.slow]"))
    before = path.read_text()
    for command in ("check", "record"):
        result = run(command, "probe.nodal")
        assert result.exit_code == 2
        assert "error[record-syntax]" in result.stderr
        line = before[: before.index("<<<<")].count("\n") + 1
        assert f"probe.figures.toml:{line}:" in result.stderr
    assert path.read_text() == before


def test_a_broken_design_leaves_its_record(folder) -> None:
    run("record", ".")
    before = (folder / "probe.figures.toml").read_text()
    (folder / "probe.nodal").write_text(LOW_PASS.replace("1 kΩ", "1 k"))
    (folder / "parts.nodal").write_text(SHARED)
    result = run("record", ".")
    assert result.exit_code == 2
    assert "error[" in result.stderr
    assert "parts.nodal: shared file" in result.stdout
    assert (folder / "probe.figures.toml").read_text() == before
    assert not (folder / "parts.figures.toml").exists()


def test_recording_needs_a_file_and_a_place_to_write(folder) -> None:
    assert run("record", "-", input=LOW_PASS).exit_code == 2
    (folder / "probe.figures.toml").mkdir()
    result = run("record", "probe.nodal")
    assert result.exit_code == 2
    assert "error[is-directory]" in result.stderr


def test_nothing_to_record(folder) -> None:
    (folder / "probe.nodal").write_text("\n".join(LOW_PASS.splitlines()[:7]))
    result = run("record", "probe.nodal")
    assert result.exit_code == 0
    assert "nothing to record" in result.stdout
    assert not (folder / "probe.figures.toml").exists()


@pytest.mark.parametrize("everyone", [True, False])
def test_an_interrupt_ends_it_without_a_word(folder, everyone) -> None:
    """A worker waits for a file that never comes: a pipe, held open by the test."""
    os.mkfifo(folder / "pipe.nodal")
    for name in ("x.nodal", "y.nodal"):
        (folder / name).write_text(LOW_PASS)
    command = [sys.executable, "-m", "nodal", "check", "x.nodal", "y.nodal", "pipe.nodal", "-j", "2"]
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
    with (
        subprocess.Popen(command, cwd=folder, text=True, start_new_session=True, **pipes) as process,
        (folder / "pipe.nodal").open("w"),  # opens once a worker reads
    ):
        (os.killpg if everyone else os.kill)(process.pid, signal.SIGINT)
        out, err = process.communicate()
    assert (process.returncode, out, err) == (130, "", "")
