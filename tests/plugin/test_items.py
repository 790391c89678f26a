"""The pytest plugin: what is collected from designs, how it passes and fails, what it prints."""

from __future__ import annotations

import shutil
from pathlib import Path
from xml.etree import ElementTree

import pytest

from nodal import checking, records
from nodal.response import Response

pytest_plugins = ["pytester"]

# The corner of 1 kΩ and 1 nF is at 159.155 kHz, where |H| = 1/√2; with 2 nF at half of that, |H| = 1/√5.
LOW_PASS = """nodal 1
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
require level: gain(m) at 1 kHz <= 0.5
"""
USER = """nodal 1
include "shared/parts.nodal"
source s: a to ground = 1 V behind 50 Ω
branch r: a to ground = 50 Ω
reading m: a to ground
"""
BROKEN = "nodal 1\nsource s: a to ground = 1 V\nbranch r: a to b = 9 M\n"
ODD = LOW_PASS + "let spare = 3 pF\n"
"""With a warning."""

CIRCUITS = Path(__file__).parents[2] / "circuits"


@pytest.fixture(scope="module", autouse=True)
def _imported(tmp_path_factory) -> None:
    """All that a run imports, which `pytester` would forget again between its runs in this process."""
    path = tmp_path_factory.mktemp("first") / "first.nodal"
    path.write_text(LOW_PASS)
    checking.record_file(str(path))
    checking.check_file(str(path), checking.Wanted())


@pytest.fixture
def run(pytester):
    """Designs in files, then pytest on them in this process."""

    def write_and_run(*arguments: str, **files: str) -> pytest.RunResult:
        for name, text in files.items():
            path = pytester.path / f"{name.replace('__', '/')}.nodal"
            path.parent.mkdir(exist_ok=True)
            path.write_text(text)
        return pytester.runpytest_inprocess(*arguments)

    return write_and_run


def collected(result: pytest.RunResult) -> list[str]:
    return [line for line in result.outlines if "::" in line]


# Collecting


def test_an_item_for_each_requirement_of_each_case(run) -> None:
    more = "case nominal { require dc: gain(m) at 0 Hz = 1 ± 1 % }"
    result = run("--collect-only", "-q", probe=LOW_PASS + more)
    names = ["nominal-level", "nominal-wide", "nominal-dc", "slow-level", "slow-wide"]
    assert collected(result) == [f"probe.nodal::{name}" for name in names]


def test_an_item_for_each_recorded_case(run, pytester) -> None:
    (pytester.path / "probe.nodal").write_text(LOW_PASS)
    checking.record_file(str(pytester.path / "probe.nodal"))
    with open(pytester.path / "probe.figures.toml", "a") as record:
        record.write('[case.gone]\n"gain(m) at 0 Hz" = "1"\n')
    result = run("--collect-only", "-q")
    names = [name.partition("::")[2] for name in collected(result)]
    assert names[4:] == ["nominal-recorded-figures", "slow-recorded-figures", "gone-recorded-figures"]


def test_collecting_solves_nothing(run, pytester, monkeypatch) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("solving")

    (pytester.path / "probe.nodal").write_text(LOW_PASS)
    checking.record_file(str(pytester.path / "probe.nodal"))
    monkeypatch.setattr(Response, "__init__", refuse)
    run("--collect-only").assert_outcomes()
    run().assert_outcomes(failed=6)


def test_files_that_are_only_included_give_nothing(run) -> None:
    result = run("-v", user=USER, shared__parts=SHARED)
    result.assert_outcomes(passed=1)
    assert run("shared").ret == pytest.ExitCode.NO_TESTS_COLLECTED


def test_a_design_without_requirements_gives_nothing(run) -> None:
    assert run(bare=LOW_PASS.partition("require")[0]).ret == pytest.ExitCode.NO_TESTS_COLLECTED


def test_places_of_items(run, pytester) -> None:
    run("--collect-only", user=USER, shared__parts=SHARED, probe=LOW_PASS)
    items, _ = pytester.inline_genitems()
    found = {item.nodeid: item.location for item in items}
    assert found["probe.nodal::slow-wide"] == ("probe.nodal", 8, "probe: slow-wide")
    parts = str(Path("shared", "parts.nodal"))
    assert found["user.nodal::nominal-level"] == (parts, 2, "user: nominal-level")


@pytest.mark.parametrize(
    ("paths", "expected"),
    [
        ("", {"one", "two", "old/one", "old.er"}),
        (".", {"one", "two", "old/one", "old.er"}),
        ("one.nodal", {"one"}),
        ("./old/ two.nodal", {"old/one", "two"}),
        ("t*", {"two"}),
        ("*/*", {"old/one"}),
        ("old", {"old/one"}),
    ],
)
def test_paths_of_the_configuration(run, pytester, paths, expected) -> None:
    pytester.makeini(f"[pytest]\nnodal_paths = {paths}\n")
    files = {"one": LOW_PASS, "two": LOW_PASS, "old__one": LOW_PASS, "old.er": LOW_PASS}
    result = run("--collect-only", "-q", **files)
    assert {line.partition(".nodal::")[0] for line in collected(result)} == expected


def test_paths_are_seen_from_the_configuration_file(run, pytester, monkeypatch) -> None:
    pytester.makeini("[pytest]\nnodal_paths = old\n")
    run("--collect-only", old__one=LOW_PASS, two=LOW_PASS)
    monkeypatch.chdir(pytester.path / "old")
    assert len(collected(run("--collect-only", "-q"))) == 4


def test_a_file_that_the_call_names_is_collected(run, pytester) -> None:
    pytester.makeini("[pytest]\nnodal_paths = old\n")
    assert len(collected(run("--collect-only", "-q", "two.nodal", two=LOW_PASS))) == 4
    assert collected(run("--collect-only", "-q")) == []


def test_cases_of_the_configuration(run, pytester) -> None:
    (pytester.path / "probe.nodal").write_text(LOW_PASS)
    checking.record_file(str(pytester.path / "probe.nodal"))
    pytester.makeini("[pytest]\nnodal_cases = slow other\n")
    names = [line.partition("::")[2] for line in collected(run("--collect-only", "-q"))]
    assert names == ["slow-level", "slow-wide", "slow-recorded-figures"]


# Passing and failing


def test_what_a_failure_says(run) -> None:
    result = run(probe=LOW_PASS)
    result.assert_outcomes(passed=3, failed=1)
    result.stdout.fnmatch_lines(
        [
            "*_ probe: slow-level _*",
            "slow: level",
            "  asked   gain(m) at 159.154943 kHz >= 0.7",
            "  found   0.44721",
            "  margin  -36.1 %",
            "probe.nodal:8",
            "    8 | require level: gain(m) at 159154.943 Hz >= 0.7",
            "FAILED probe.nodal::slow-level - found 0.44721, margin -36.1 %",
        ],
        consecutive=False,
    )
    result.stdout.no_fnmatch_line("*pytest_plugin*")
    result.stdout.no_fnmatch_line("*Traceback*")


def test_a_figure_that_cannot_be_had_fails(run) -> None:
    result = run(probe=LOW_PASS + "require far: bandwidth(m, 9 MHz) >= 1 GHz\n")
    result.stdout.fnmatch_lines(
        ["  asked   bandwidth(m, 9 MHz) >= 1 GHz", "  error   not reached within the sweep, so *",
         "FAILED probe.nodal::nominal-far - cannot be computed: *"]
    )  # fmt: skip


def test_a_failure_of_an_included_requirement_points_there(run) -> None:
    strict = SHARED.replace("<= 0.5", "<= 0.4")
    result = run(user=USER, shared__parts=strict)
    result.assert_outcomes(failed=1)
    result.stdout.fnmatch_lines(["shared*parts.nodal:3", "    3 | require level: gain(m) at 1 kHz <= 0.4"])


def test_one_line_a_failure(run) -> None:
    run("--tb=line", probe=LOW_PASS).stdout.fnmatch_lines(["probe.nodal:8: found 0.44721, margin -36.1 %"])


def test_a_mistake_of_the_program_has_its_traceback(run, monkeypatch) -> None:
    def refuse(*_: object) -> None:
        raise ZeroDivisionError("somewhere in the solver")

    monkeypatch.setattr(Response, "__init__", refuse)
    result = run(probe=LOW_PASS)
    result.assert_outcomes(failed=4)
    result.stdout.fnmatch_lines(["*checks.py*", "E * ZeroDivisionError: somewhere in the solver"])


def test_choosing_items(run) -> None:
    run("probe.nodal::slow-level", probe=LOW_PASS).assert_outcomes(failed=1)
    run("-k", "slow and not level").assert_outcomes(passed=1, deselected=3)
    run("-k", "nominal-level").assert_outcomes(passed=1, deselected=3)
    run("--deselect", "probe.nodal::slow-level").assert_outcomes(passed=3, deselected=1)


def test_last_failed(run) -> None:
    run(probe=LOW_PASS, other=LOW_PASS.replace("slow", "slower").replace("0.7\n", "0.4\n"))
    again = run("--lf", "-v")
    again.assert_outcomes(failed=1)
    run("--lf", probe=LOW_PASS.replace("0.7\n", "0.4\n")).assert_outcomes(passed=1)


def test_report_of_junit(run, pytester) -> None:
    run("--junit-xml=report.xml", probe=LOW_PASS)
    cases = ElementTree.parse(pytester.path / "report.xml").getroot().findall(".//testcase")
    failed = [case for case in cases if case.find("failure") is not None]
    assert [case.get("name") for case in failed] == ["slow-level"]
    assert failed[0].find("failure").get("message") == "found 0.44721, margin -36.1 %"


def test_the_curves_of_a_file_are_shared(run, monkeypatch) -> None:
    made = []
    first = Response.__init__

    def count(self: Response, *arguments: object) -> None:
        made.append(self)
        first(self, *arguments)

    monkeypatch.setattr(Response, "__init__", count)
    run("--nodal-record", probe=LOW_PASS).assert_outcomes(passed=5, failed=1)
    assert len(made) == 2
    made.clear()
    run().assert_outcomes(passed=5, failed=1)
    assert len(made) == 2


# What is wrong with files


def test_a_broken_file_is_an_error_with_its_diagnostic(run) -> None:
    result = run("--continue-on-collection-errors", broken=BROKEN, probe=LOW_PASS)
    result.assert_outcomes(passed=3, failed=1, errors=1)
    result.stdout.fnmatch_lines(
        [
            "*ERROR collecting broken.nodal*",
            'broken.nodal:3:20: error*missing-unit]: "9 M" has no unit',
            "    3 | branch r: a to b = 9 M",
            "      |                    ^^^",
            "   help: *",
        ],
        consecutive=True,
    )
    result.stdout.no_fnmatch_line("*Traceback*")
    result.stdout.no_fnmatch_line("*.py:*")


def test_a_broken_record_is_an_error_with_its_diagnostic(run, pytester) -> None:
    (pytester.path / "probe.figures.toml").write_text('format = 1\n[case.nominal]\n"gain(m)" = \n')
    result = run(probe=LOW_PASS)
    result.assert_outcomes(errors=1)
    result.stdout.fnmatch_lines(["probe.figures.toml:3:*: error*record-syntax]: *"])
    result.stdout.no_fnmatch_line("*Traceback*")


def test_warnings_are_warnings(run, pytester) -> None:
    result = run(probe=ODD)
    result.assert_outcomes(passed=3, failed=1, warnings=1)
    result.stdout.fnmatch_lines(["probe.nodal:11", "*probe.nodal:11: NodalWarning: unused-let: *spare*"])
    run("-W", "ignore::nodal.pytest_plugin.NodalWarning").assert_outcomes(passed=3, failed=1)
    result = run("-W", "error")
    result.assert_outcomes(errors=1)
    result.stdout.fnmatch_lines(["warning as error: unused-let: *"])
    result.stdout.no_fnmatch_line("*.py:*")
    run(probe=ODD + "allow unused-let: spare\n").assert_outcomes(passed=3, failed=1)


def test_doubtful_curves_are_warned_of_once_a_case(run, monkeypatch) -> None:
    first = Response.__init__

    def doubt(self: Response, *arguments: object) -> None:
        first(self, *arguments)
        self.quality.worst_estimated_error = 2.5e-7

    monkeypatch.setattr(Response, "__init__", doubt)
    result = run("--nodal-record", probe=LOW_PASS)
    result.assert_outcomes(passed=5, failed=1, warnings=2)
    result.stdout.fnmatch_lines(["*NodalWarning: slow: worst estimated relative error of *: 2.5e-07"])


# Recorded figures


def test_recorded_figures(run, pytester) -> None:
    result = run("--nodal-record", probe=LOW_PASS)
    result.assert_outcomes(passed=5, failed=1)
    result.stdout.fnmatch_lines(["*= recorded figures =*", "probe.figures.toml: * figures, * new"])
    run().assert_outcomes(passed=5, failed=1)

    record = pytester.path / "probe.figures.toml"
    kept = record.read_text()
    line = next(line for line in kept.splitlines() if line.startswith('"bandwidth(m)"'))
    record.write_text(kept.replace(line, '"bandwidth(m)" = "160 kHz"  # as agreed', 1))
    result = run()
    result.assert_outcomes(passed=4, failed=2)
    number = kept.splitlines().index(line) + 1
    result.stdout.fnmatch_lines(
        [
            "nominal: 1 figure not as recorded",
            # Against the gain at 1 kHz: 159154.943 Hz·√(1 + 2 (1/159.154943)²) = 159161.226 Hz.
            f"  probe.figures.toml:{number}: moved  bandwidth(m): 160 kHz -> 159.161226 kHz (-0.524 %)",
            "pytest --nodal-record and nodal record write them down as they are now",
            "FAILED probe.nodal::nominal-recorded-figures - 1 figure not as recorded: *",
        ]
    )
    run("--nodal-record", "-k", "level or slow").assert_outcomes(passed=3, failed=1, deselected=2)
    assert record.read_text() == kept.replace(line, line + "  # as agreed", 1)
    result = run("--nodal-record")
    result.assert_outcomes(passed=5, failed=1)
    result.stdout.no_fnmatch_line("*recorded figures*")


def test_figures_that_are_gone_or_new(run, pytester) -> None:
    run("--nodal-record", probe=LOW_PASS)
    before = records.load(str(pytester.path / "probe.figures.toml"))
    assert before is not None
    result = run(probe=LOW_PASS.replace("case slow", "case slower"))
    result.assert_outcomes(passed=4, failed=3)
    count = len(before.entries["slow"])
    result.stdout.fnmatch_lines([f"{case}: {count} figures not as recorded" for case in ("slower", "slow")])
    run("--nodal-record")
    run().assert_outcomes(passed=5, failed=1)


def test_a_record_is_written_once_for_all_cases(run, monkeypatch) -> None:
    calls = []
    first = checking.record_design
    monkeypatch.setattr(checking, "record_design", lambda *given: calls.append(given) or first(*given))
    run("--nodal-record", probe=LOW_PASS).assert_outcomes(passed=5, failed=1)
    assert len(calls) == 1


def test_nothing_is_recorded_unless_asked_for(run, pytester) -> None:
    run(probe=LOW_PASS)
    run("--nodal-record", "--collect-only")
    assert not (pytester.path / "probe.figures.toml").exists()


def test_a_record_that_cannot_be_written(run, pytester, monkeypatch) -> None:
    def full(path: str, text: str) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(checking, "replace_file", full)
    result = run("--nodal-record", probe=LOW_PASS)
    result.assert_outcomes(passed=4, failed=2)
    result.stdout.fnmatch_lines(["error*cannot-write]: cannot write *.figures.toml: no space left on device"])
    result.stdout.no_fnmatch_line("*Traceback*")


def test_another_working_folder_does_not_misplace_records(run, pytester) -> None:
    (pytester.path / "elsewhere").mkdir()
    pytester.makepyfile(test_a="import os\ndef test_it(): os.chdir('elsewhere')\n")
    first = "def pytest_collection_modifyitems(items): items.sort(key=lambda item: item.path.suffix != '.py')"
    pytester.makeconftest(first)
    run("--nodal-record", probe=LOW_PASS).assert_outcomes(passed=6, failed=1)
    assert (pytester.path / "probe.figures.toml").exists()


# A change


def test_a_changed_capacitor_fails_just_the_items_concerned(run, pytester) -> None:
    for name in ("ideal_divider.nodal", "resistive_probe.nodal", "shared"):
        source = CIRCUITS / name
        copy = shutil.copytree if source.is_dir() else shutil.copy
        copy(source, pytester.path / name)
    result = run("--nodal-record")
    assert result.ret == 0
    design = pytester.path / "ideal_divider.nodal"
    text = design.read_text()
    assert text.count("99 pF") == 1
    design.write_text(text.replace("99 pF", "103.95 pF"))
    result = run()
    failed = {line.split()[1] for line in result.outlines if line.startswith("FAILED")}
    assert failed == {"ideal_divider.nodal::nominal-flat", "ideal_divider.nodal::nominal-recorded-figures"}
