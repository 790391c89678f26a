"""The pytest plugin where it has nothing to do, and together with pytest-xdist."""

from __future__ import annotations

import re
from collections import defaultdict

import pytest

from nodal.pytest_xdist import LoadGroupScheduling, LoadScheduling

pytest_plugins = ["pytester"]

DESIGN = """nodal 1
source s: a to ground = 1 V behind 1 kΩ
branch c: a to ground = 1 nF
reading m: a to ground
sweep 1 kHz to 10 MHz, 10 per decade
require level: gain(m) at 0 Hz = 1 ± 1 %
require wide: bandwidth(m) >= 150 kHz
require low: gain(m) at 1 MHz <= 0.2
require phase: phase(m) from 0 Hz to 1 MHz <= 90 °
case slow { require wide: bandwidth(m) >= 160 kHz }
case quick { branch c: a to ground = 0.5 nF; omit low; let unused = 1 }
"""
PLAIN = "import pytest\n@pytest.mark.parametrize('n', range(9))\ndef test_plain(n): pass\n"
# Tells which process made the curves of which design.
SPY = """
import os
from nodal.response import Response
first = Response.__init__
def told(self, network):
    with open("solved.txt", "a") as file:
        file.write(f"{os.getpid()} {network.requirements[0].place.path}\\n")
    first(self, network)
Response.__init__ = told
"""


def test_nothing_heavy_is_imported_before_a_design_is_met(pytester) -> None:
    pytester.makepyfile(
        """
        import sys
        def test_modules():
            print([name for name in sorted(sys.modules) if name.partition(".")[0] in
                  ("nodal", "numpy", "scipy", "lark", "networkx", "mpmath", "rich", "quantiphy", "click")])
        """
    )
    # By way of the installed entry point, in a process of its own.
    result = pytester.runpytest_subprocess("-s", "-p", "no:xdist")
    result.assert_outcomes(passed=1)
    assert "['nodal', 'nodal.pytest_plugin']" in result.stdout.str()
    (pytester.path / "bench.nodal").write_text(DESIGN)
    result = pytester.runpytest_subprocess("-s", "-p", "no:xdist")
    assert "'nodal.design'" in result.stdout.str()


@pytest.mark.parametrize("options", [(), ("-n", "2")])
def test_a_project_without_designs_sees_no_change(pytester, options) -> None:
    pytester.makepyfile(test_a=PLAIN, test_b="def test_b():\n    assert 0\n")

    def lines(*more: str) -> list[str]:
        result = pytester.runpytest_subprocess("-v", "-p", "no:cacheprovider", *options, *more)
        kept = (re.sub(r"in [0-9.]+s|gw[01]|[0-9]+%|=+", "", line) for line in result.outlines)
        return sorted(line for line in kept if not line.startswith("plugins:"))

    assert lines() == lines("-p", "no:nodal")


def write_designs(pytester) -> None:
    for name in ("one", "two"):
        (pytester.path / f"{name}.nodal").write_text(DESIGN.replace("; let unused = 1", ""))
    pytester.makeconftest(SPY)
    pytester.makepyfile(test_plain=PLAIN)


def solvers(pytester) -> dict[str, list[str]]:
    """Processes by design, one for each time that curves were begun."""
    found = defaultdict(list)
    for line in (pytester.path / "solved.txt").read_text().splitlines():
        process, _, design = line.partition(" ")
        found[design].append(process)
    return found


@pytest.mark.parametrize("options", ["", "--dist loadfile", "--dist loadgroup"])
def test_a_design_is_solved_by_one_worker(pytester, options) -> None:
    write_designs(pytester)
    result = pytester.runpytest_subprocess("-n", "2", "-v", *options.split())
    result.assert_outcomes(passed=9 + 2 * 10, failed=2)
    result.stdout.fnmatch_lines(["FAILED one.nodal::slow-wide* - found 159.16 kHz, margin -0.524 %"])
    found = solvers(pytester)
    assert set(found) == {"one.nodal", "two.nodal"}
    for processes in found.values():
        assert len(processes) == 3  # the cases
        assert len(set(processes)) == 1


def test_workers_and_records(pytester) -> None:
    write_designs(pytester)
    result = pytester.runpytest_subprocess("-n", "2", "--nodal-record")
    result.assert_outcomes(passed=9 + 2 * 13, failed=2)
    written = [line for line in result.outlines if line.startswith("one.figures.toml: ")]
    assert len(written) == 1
    assert (pytester.path / "two.figures.toml").exists()
    pytester.runpytest_subprocess("-n", "2").assert_outcomes(passed=9 + 2 * 13, failed=2)


def test_workers_and_broken_files(pytester) -> None:
    write_designs(pytester)
    (pytester.path / "four.nodal").write_text("nodal 1\nbranch r: a to b = 9 M\n")
    (pytester.path / "five.nodal").write_text(DESIGN)
    result = pytester.runpytest_subprocess("-n", "2", "--continue-on-collection-errors")
    result.assert_outcomes(passed=9 + 3 * 10, failed=3, errors=1)
    result.stdout.fnmatch_lines(['four.nodal:2:20: error*missing-unit]: "9 M" has no unit'])
    result.stdout.fnmatch_lines(["*five.nodal:11: NodalWarning: unused-let*"])
    result.stdout.no_fnmatch_line("*Traceback*")


def test_strict_markers_without_xdist(pytester) -> None:
    write_designs(pytester)
    result = pytester.runpytest_subprocess("-p", "no:xdist", "--strict-markers", "one.nodal")
    result.assert_outcomes(passed=10, failed=1)


def test_a_scheduler_of_the_project_is_left_alone(pytester) -> None:
    write_designs(pytester)
    pytester.makeconftest(
        """
        from xdist.scheduler import LoadScheduling
        class Mine(LoadScheduling): pass
        def pytest_xdist_make_scheduler(config, log): return Mine(config, log)
        """
    )
    result = pytester.runpytest_subprocess("-n", "2", "-v")
    result.stdout.fnmatch_lines(["scheduling tests via Mine"])


class Scheduler:
    """Stands for xdist's."""

    def __init__(self) -> None:
        self.nodes = ["gw0"]
        self.calls: list[str] = []

    def add_node_collection(self, node: str, collection: list[str]) -> None:
        self.calls.append(f"collection {node} {len(collection)}")

    def schedule(self) -> None:
        self.calls.append("schedule")


def test_without_designs_the_scheduler_stays() -> None:
    scheduler = Scheduler()
    wrapped = LoadScheduling(scheduler, None, None)
    wrapped.add_node_collection("gw0", ["test_a.py::test_nodal", "a.nodal.py::test_b"])
    wrapped.schedule()
    wrapped.schedule()
    assert scheduler.calls == ["collection gw0 2", "schedule", "schedule"]
    assert wrapped.nodes == ["gw0"]


def test_what_is_one_piece_of_work() -> None:
    scheduler = LoadGroupScheduling.__new__(LoadGroupScheduling)
    scope = scheduler._split_scope
    assert scope("circuits/a.nodal::nominal-level") == "circuits/a.nodal"
    assert scope("circuits/a.nodal::nominal-level@circuits/a.nodal") == "circuits/a.nodal"
    assert scope("tests/test_a.py::T::test_b[x::y]") == "tests/test_a.py::T::test_b[x::y]"
    assert scope("tests/test_a.py::test_b@together") == "together"
