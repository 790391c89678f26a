"""What a comparison tells: every value that changed and no other, what moved, what flipped."""

from __future__ import annotations

import dataclasses
import json
import math
import shutil
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from support.repositories import ROOT, Repository, run

import nodal
from nodal.design import Design
from nodal.figure_set import FigureRow
from nodal.figures import Result
from nodal.network import FigureCall
from nodal.parts.amplifier import Amplifier
from nodal.parts.base import Part
from nodal.parts.cable import Cable
from nodal.parts.capacitor import Capacitor
from nodal.parts.coupling import Coupling
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import CurrentSource, VoltageSource
from nodal.studies import facts
from nodal.studies.compare import Change, Comparison, changes_of_text, compare, has_moved, relative, settled
from nodal.values import Drift, Rating, Tolerance, Trim, Value

BASE = """nodal 1
title "Base"
let c_in = 14 pF ± 2 pF
source drive: tip to ground = 1 V behind 50 Ω
branch upper: tip to plug = 9 MΩ ± 1 % ∥ (9.5 pF ± 3 % rated 500 V drift 25 ppm/K loss 0.001 as head -- 5 Ω)
branch input: plug to ground = 1 MΩ ∥ c_in
branch comp: plug to ground = 70 pF trim 50 pF to 90 pF
reading screen: plug to ground times 10
sweep 1 kHz to 10 MHz, 5 per decade
edge 1 ns over 100 ns
require low: flatness(screen) <= 20 %
case far { let c_in = 20 pF }
"""


def against(*replacements: tuple[str, str], base: str = BASE) -> Comparison:
    """A text against itself with parts of it replaced."""
    return compare(*both(*replacements, base=base))


def both(*replacements: tuple[str, str], base: str) -> tuple[Design, Design]:
    text = base
    for old, new in replacements:
        assert old in text
        text = text.replace(old, new)
    return nodal.loads(base), nodal.loads(text)


def changes(*replacements: tuple[str, str], base: str = BASE) -> tuple[Change, ...]:
    """The same without solving anything."""
    old, new = both(*replacements, base=base)
    return changes_of_text(old, new, [case for case in old.cases if case in new.cases])


def told(found: Iterable[Change]) -> set[tuple[str, str, str, str]]:
    return {(c.name, c.what, c.old, c.new) for c in found}


# One capacitor of a shipped circuit


def figures(path: Path) -> dict[str, dict[str, Any]]:
    cases = json.loads(run("figures", str(path), "--json").stdout)["cases"]
    return {case: answer["figures"] for case, answer in cases.items()}


def test_one_capacitor_of_a_shipped_circuit(repository: Repository) -> None:
    source = (ROOT / "circuits" / "bench_probe.nodal").read_text()
    path = repository.top / "circuits" / "bench_probe.nodal"
    repository.write("circuits/bench_probe.nodal", source)
    repository.commit()
    before = figures(path)
    repository.git("checkout", "-qb", "scratch")
    repository.replace("circuits/bench_probe.nodal", "9.5 pF", "9.975 pF")
    repository.commit()
    after = figures(path)
    result = run("compare", "HEAD~1:circuits/bench_probe.nodal", "circuits/bench_probe.nodal", "--json")
    assert result.exit_code == 0
    answer = json.loads(result.stdout)
    (change,) = answer["changes"]
    assert (change["name"], change["what"]) == ("tip.head", "capacitance")
    assert (change["old"], change["new"], change["unit"]) == ("9.5 pF", "9.975 pF", "F")
    assert change["old_value"] == 9.5e-12
    assert change["new_value"] == 9.975e-12
    assert change["relative"] == pytest.approx(0.05)
    assert change["cases"] == ["nominal", "spring_tip", "long_clip"]
    for case, found in answer["cases"].items():
        both = set(before[case]) & set(after[case])
        assert len(both) > 15
        expected = {
            label for label in both
            if not math.isclose(before[case][label]["value"], after[case][label]["value"], rel_tol=1e-9)
        }  # fmt: skip
        assert set(found["figures"]) & both == expected
        for label in expected:
            moved = found["figures"][label]
            assert moved["old"] == before[case][label]
            assert moved["new"] == after[case][label]
    text = run("compare", "HEAD~1:circuits/bench_probe.nodal", "circuits/bench_probe.nodal").stdout
    line = next(line for line in text.splitlines() if "tip.head" in line)
    assert line.split() == ["tip.head", "capacitance", "9.5", "pF", "9.975", "pF", "+5.00", "%"]
    for label in expected:
        assert f"  {label}" in text
    assert "flat" in {r["name"] for r in answer["cases"]["spring_tip"]["requirements"]}


@pytest.mark.parametrize("path", sorted((ROOT / "circuits").glob("*.nodal")), ids=lambda path: path.stem)
def test_a_circuit_is_like_itself(path: Path) -> None:
    result = run("compare", str(path), str(path), "--exit-code")
    assert result.exit_code == 0
    assert "no difference" in result.stdout


def test_the_way_a_text_is_written_makes_no_difference() -> None:
    lines = BASE.splitlines()
    turned = "\n".join([lines[0], "# another comment", *reversed(lines[1:])])
    turned = turned.replace("9.5 pF", "0.0095 nF").replace("∥", "||").replace("1 MΩ", "1e6 ohm")
    turned = turned.replace("± 3 %", "+- 0.285 pF").replace("5 Ω)", "(2 Ω + 3 Ω))")
    found = compare(nodal.loads(BASE), nodal.loads(turned))
    assert found.figures > 0  # solved, since parts stand in another order
    assert not found.differs


# What the text says


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("9.5 pF", "10 pF", ("upper.head", "capacitance", "9.5 pF", "10 pF")),
        ("9 MΩ ± 1 %", "9 MΩ ± 0.5 %", ("upper.R1", "tolerance", "± 1 %", "± 0.5 %")),
        ("9 MΩ ± 1 %", "9 MΩ ± 1 % with k = 2", ("upper.R1", "tolerance", "± 1 %", "± 1 % with k = 2")),
        ("9 MΩ ± 1 %", "9 MΩ", ("upper.R1", "tolerance", "± 1 %", "")),
        ("50 pF to 90 pF", "50 pF to 95 pF", ("comp.C", "trim", "50 pF to 90 pF", "50 pF to 95 pF")),
        ("rated 500 V", "rated 1 kV and 2 W", ("upper.head", "rated", "500 V", "1 kV and 2 W")),
        ("rated 500 V", "rated 500 V rms", ("upper.head", "rated", "500 V", "500 V rms")),
        ("25 ppm/K", "25 ppm/K and 2 ppm/V", ("upper.head", "drift", "25 ppm/K", "25 ppm/K and 2 ppm/V")),
        ("loss 0.001", "loss 0.002", ("upper.head", "loss", "0.001", "0.002")),
        ("70 pF trim", "70.0000000001 pF trim", ("comp.C", "capacitance", "70 pF", "70.0000000001 pF")),
        ("1 V behind", "2 V behind", ("drive", "amplitude", "1 V", "2 V")),
        ("times 10", "times 11", ("screen", "times", "10", "11")),
        ("times 10", "times 10 A/V", ("screen", "times", "10", "10 A/V")),
        ("screen: plug to ground", "screen: plug to tip",
         ("screen", "between", "plug to ground", "plug to tip")),
        ("comp: plug to", "comp: tip to", ("comp.C", "between", "plug to ground", "tip to ground")),
        ("1 kHz to", "2 kHz to",
         ("", "sweep", "1 kHz to 10 MHz, 5 per decade", "2 kHz to 10 MHz, 5 per decade")),
        ("edge 1 ns", "edge 2 ns", ("", "edge", "edge 1 ns over 100 ns", "edge 2 ns over 100 ns")),
        ('"Base"', '"Top"', ("", "title", "Base", "Top")),
        ("edge", "temperature 50 °C; edge", ("", "temperature", "296.15 K", "323.15 K")),
        ("edge", "allow unused-let: x; edge", ("", "allowed", "", "unused-let: x")),
        ("edge", "contact touch: tip to ground; edge", ("touch", "added", "", "tip to ground")),
        ("edge", "drive both: drive by 2; edge", ("both", "added", "", "drive by 2")),
        ("edge", "branch extra: tip to plug = 1 nH; edge",
         ("extra.L", "added", "", "inductor, 1 nH, tip to plug")),
        ("branch comp: plug to ground = 70 pF trim 50 pF to 90 pF\n", "",
         ("comp.C", "gone", "capacitor, 70 pF, 50 pF to 90 pF, plug to ground", "")),
        ("branch comp:", "branch matching:", ("matching.C", "renamed", "comp.C", "matching.C")),
        ("c_in = 20 pF", "c_in = 21 pF", ("c_in", "value", "20 pF", "21 pF")),
        ("14 pF ± 2 pF", "14 pF ± 1 pF", ("c_in", "tolerance", "± 2 pF", "± 1 pF")),
        ("14 pF ± 2 pF", "15 pF ± 2 pF", ("input.C", "capacitance", "14 pF", "15 pF")),
    ],
)  # fmt: skip
def test_a_change_of_the_text(old: str, new: str, expected: tuple[str, str, str, str]) -> None:
    found = changes((old, new))
    assert expected in told(found)
    assert {(c.name, c.what) for c in found} <= {
        expected[:2], ("c_in", "value"), ("input.C", "capacitance"), ("input.C", "tolerance"),
        ("", "default drive"), ("touch", "added"), ("drive", "gone"),
    }  # fmt: skip


def test_tolerances_stay_where_only_the_value_changed() -> None:
    assert {(c.name, c.what) for c in changes(("9.5 pF ± 3 %", "9.6 pF ± 3 %"))} == {
        ("upper.head", "capacitance")
    }
    assert {(c.name, c.what) for c in changes(("14 pF ± 2 pF", "15 pF ± 2 pF"))} == {
        ("c_in", "value"), ("input.C", "capacitance")
    }  # fmt: skip


def test_a_change_names_the_cases_it_holds_for() -> None:
    (c_in, part) = changes(("c_in = 20 pF", "c_in = 21 pF"))
    assert (c_in.name, c_in.cases, part.name, part.cases) == ("c_in", ("far",), "input.C", ("far",))
    (head,) = changes(("9.5 pF", "10 pF"))
    assert head.cases == ("nominal", "far")


def test_a_node_with_another_name_is_told_once() -> None:
    found = against(("plug", "box"))
    assert told(found.changes) == {("node plug", "renamed", "plug", "box")}
    assert not found.moved


def test_nodes_that_are_joined_are_no_renaming() -> None:
    base = """nodal 1
source drive: p to ground = 1 V
branch one: p to m = 1 Ω; branch two: p to n = 1 Ω
branch three: m to ground = 2 Ω; branch four: n to ground = 3 Ω
reading out: p to ground
"""
    found = changes(("to m", "to q"), ("to n", "to q"), (": m", ": q"), (": n", ": q"), base=base)
    assert {(c.name, c.what, c.new) for c in found} == {
        ("one.R", "between", "p to q"), ("two.R", "between", "p to q"),
        ("three.R", "between", "q to ground"), ("four.R", "between", "q to ground"),
    }  # fmt: skip


def test_moved_under_test() -> None:
    base = BASE.replace("branch comp", "branch pad: tip to ground = 1 pF; branch comp")
    split = base.replace("source drive", "under test { source drive").replace("50 Ω", "50 Ω }")
    split = split.replace("edge", "contact touch: tip to ground; edge")
    into = split.replace("branch pad: tip to ground = 1 pF;", "").replace(
        "50 Ω }", "50 Ω; branch pad: tip to ground = 1 pF }"
    )
    moved = compare(nodal.loads(split), nodal.loads(into))
    assert told(moved.changes) == {("pad.C", "side", "", "under test")}
    assert any(m.row.call.name == "disturbance" for m in moved.moved)


CHAIN = """nodal 1
assembly section(top to bottom; r) {
  branch body: top to bottom = r ∥ 2 nF
}
source line: tip to ground = 1 V
chain column: 12 of section(tip to low; r = 5 MΩ)
branch arm: low to ground = 100 kΩ
reading meter: low to ground
sweep 1 Hz to 1 kHz, 2 per decade
"""


def test_sections_of_a_chain_are_told_as_one() -> None:
    (change,) = changes(("2 nF", "3 nF"), base=CHAIN)
    assert (change.name, change.count, change.old, change.new) == ("column.*.body.C", 12, "2 nF", "3 nF")
    single = against(("sweep", "case one { let column.7.r = 6 MΩ }\nsweep"), base=CHAIN)
    assert single.cases_added == ("one",)
    base = CHAIN + "case one { let column.7.r = 6 MΩ }\n"
    (change,) = changes(("6 MΩ", "7 MΩ"), base=base)
    assert (change.name, change.count, change.cases) == ("column.7.body.R", 1, ("one",))


def test_cases_added_and_gone() -> None:
    found = against(("case far", "case near"))
    assert (found.cases_added, found.cases_gone) == (("near",), ("far",))
    assert found.cases == ("nominal",)
    assert not found.changes
    assert found.differs
    text = run_texts(BASE, BASE.replace("case far", "case near"))
    assert "cases added: near" in text
    assert "cases gone: far" in text


def run_texts(old: str, new: str, *options: str) -> str:
    Path("old.nodal").write_text(old)
    Path("new.nodal").write_text(new)
    return run("compare", "old.nodal", "new.nodal", *options).stdout


@pytest.fixture(autouse=True)
def _here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


# Every value of every kind of part

FULL = Value(2.0, Tolerance(0.1), Trim(1.0, 3.0), (Rating(5.0, "V"),), Drift(1e-6))
PARTS: list[Part] = [
    Resistor("r", 1, 2, FULL),
    Resistor("r", 1, 2, FULL, conductance=True),
    Capacitor("c", 1, 2, FULL, loss=0.1),
    Inductor("l", 1, 2, FULL),
    Coupling("k", "l1", "l2", Value(0.5), coefficient=True),
    VoltageSource("v", 1, 2, FULL),
    CurrentSource("i", 1, 2, FULL),
    Cable("w", 1, 2, 3, 4, FULL, FULL, FULL, FULL, FULL, 0.1, (1.0, 1e6), FULL, FULL, Value(0.5)),
    Amplifier("a", 1, 2, 3, 4, FULL, None, ((1e6, None),), ((2e6, 0.5),), 1e-9, 1e-9, 1e-12, (1e4, 1e3)),
    Amplifier("a", 1, 2, 3, 4, None, FULL),
]
INERT = {"name", "place", "noiseless", "terminals"}
"""What tells parts apart, where they were written, and what follows from what a part stands in."""


def other(value: Any) -> Any:
    """A value that is not this one."""
    match value:
        case Value():
            return dataclasses.replace(value, nominal=value.nominal * 1.25)
        case bool():
            return not value
        case str():
            return "test" if value == "chain" else value + "x"
        case float() | int():
            return value + 3
        case tuple():
            return (other(value[0]), *value[1:]) if value else ((1e6, None),)
        case None:
            return None
    raise AssertionError(value)


@pytest.mark.parametrize("part", PARTS, ids=lambda part: f"{part.kind}")
def test_every_field_of_every_kind_is_told(part: Part) -> None:
    def said(of: Part) -> dict[str, str]:
        return {label: fact.read(12) for label, fact in facts.of_part(of, lambda node: f"n{node}").items()}

    for field in dataclasses.fields(part):  # type: ignore[arg-type]
        value = getattr(part, field.name)
        if field.name not in INERT and value is not None:
            changed = dataclasses.replace(part, **{field.name: other(value)})  # type: ignore[type-var]
            assert said(changed) != said(part), field.name


def test_every_kind_has_a_case() -> None:
    folder = Path(nodal.__file__).parent / "parts"
    kinds = [line.split('"')[1] for path in folder.glob("*.py") for line in path.read_text().splitlines()
             if "kind: ClassVar[str] = " in line]  # fmt: skip
    assert {part.kind for part in PARTS} == set(kinds)


@pytest.mark.parametrize("field", [f.name for f in dataclasses.fields(Value) if f.name != "formula"])
def test_every_property_of_a_value_is_told(field: str) -> None:
    default = {"nominal": 5.0, "ratings": ()}.get(field)
    plain = dataclasses.replace(FULL, **{field: default})
    assert facts.of_value("resistance", plain, "Ω") != facts.of_value("resistance", FULL, "Ω")


@given(st.floats(1e-15, 1e9), st.integers(1, 2**20))
def test_numbers_that_differ_read_differently(value: float, steps: int) -> None:
    moved = value * (1 + steps * 2.0**-39)
    old, new = facts.number(value, "F"), facts.number(moved, "F")
    assert not old.same(new)
    before, after = old.beside(new)
    assert before != after


# Figures


def row(name: str, at: float | None = None) -> FigureRow:
    return FigureRow("m", FigureCall(name, ("m",), f"{name}(m)"), at=at)


NOT_REACHED = Result(None, "Hz", "not-reached", bound=(">=", 1e9))


@pytest.mark.parametrize(
    ("figure", "old", "new", "moved"),
    [
        (row("gain", 1e3), Result(1.0), Result(1.0 + 2e-9), True),
        (row("gain", 1e3), Result(1.0), Result(1.0 + 5e-10), False),
        (row("gain", 1e3), Result(0.0), Result(1e-30), True),
        (row("peaking"), Result(0.0), Result(3e-16), False),
        (row("peaking"), Result(0.0), Result(3e-9), True),
        (row("phase", 1e3), Result(0.0), Result(1e-12), False),
        (row("phase", 1e3), Result(0.0), Result(1e-6), True),
        (row("group_delay", 1e6), Result(0.0), Result(1e-20), False),
        (row("group_delay", 1e6), Result(0.0), Result(1e-15), True),
        (row("resistance", 0.0), Result(math.inf), Result(math.inf), False),
        (row("resistance", 0.0), Result(1e12), Result(math.inf), True),
        (row("bandwidth"), Result(1e8), NOT_REACHED, True),
        (row("bandwidth"), NOT_REACHED, NOT_REACHED, False),
        (row("bandwidth"), NOT_REACHED, Result(None, "Hz", "not-reached", bound=(">=", 2e9)), True),
        (row("gain"), Result(1.0, ""), Result(1.0, "A/V"), True),
    ],
)
def test_what_counts_as_moved(figure: FigureRow, old: Result, new: Result, moved: bool) -> None:
    assert has_moved(figure, old, new) is moved
    assert has_moved(figure, new, old) is moved


def test_what_rounding_leaves_of_nothing_is_nothing() -> None:
    delay = row("group_delay", 1e8)
    assert settled(delay, Result(3e-30, "s")) == Result(0.0, "s")
    assert settled(delay, Result(-3e-12, "s")) == Result(-3e-12, "s")
    assert settled(delay, NOT_REACHED) is NOT_REACHED
    assert settled(row("gain", 1e3), Result(1e-300)).value == 1e-300


def test_relative_changes() -> None:
    assert relative(-2.0, -1.0) == 0.5
    assert relative(0.0, 1.0) is None
    assert relative(1.0, math.inf) is None
    assert relative(None, 1.0) is None


def test_nothing_is_solved_where_no_circuit_changed(monkeypatch: pytest.MonkeyPatch) -> None:
    from nodal.studies import compare as module

    monkeypatch.setattr(module, "Response", None)
    assert not against(('"Base"', '"Base"')).differs
    assert told(against(('"Base"', '"Other"')).changes) == {("", "title", "Base", "Other")}


def test_only_cases_that_changed_are_solved() -> None:
    found = against(("c_in = 20 pF", "c_in = 21 pF"))
    assert {moved.case for moved in found.moved} == {"far"}


def test_a_figure_that_is_no_longer_reached() -> None:
    text = run_texts(BASE, BASE.replace("1 MΩ ∥ c_in", "1 MΩ ∥ 100 nF"))
    assert "not reached" in text
    assert "figures moved" in text


def test_without_a_sweep_or_a_drive() -> None:
    bare = BASE.replace("sweep 1 kHz to 10 MHz, 5 per decade\n", "").replace(
        "require low: flatness(screen) <= 20 %", "require low: gain(screen) at 1 kHz <= 2"
    )
    found = against(("9.5 pF", "10 pF"), base=bare)
    assert {moved.row.label for moved in found.moved} == {"gain(screen) at 1 kHz"}
    assert "no sweep statement" in found.notes[0]
    lent = against(("edge", "sweep 1 kHz to 10 MHz, 5 per decade; edge"), ("9.5 pF", "10 pF"), base=bare)
    assert not lent.notes
    assert len(lent.moved) > 10
    two = BASE.replace("edge", "source second: more to ground = 1 V; branch link: more to plug = 1 MΩ; edge")
    two = two.replace("require low: flatness(screen) <= 20 %", "")
    found = against(("9.5 pF", "10 pF"), base=two)
    assert "choose with --drive" in found.notes[0]
    assert found.moved
    old, new = nodal.loads(two), nodal.loads(two.replace("9.5 pF", "10 pF"))
    assert not compare(old, new, drive="second").notes


# Requirements


def test_requirements_that_flip() -> None:
    found = against(("9.5 pF", "15 pF"))
    flips = {
        (j.case, j.name, j.what, j.old and j.old.status, j.new and j.new.status) for j in found.requirements
    }
    assert ("nominal", "low", "flipped", "pass", "fail") in flips
    text = run_texts(BASE, BASE.replace("9.5 pF", "15 pF"))
    assert "flipped" in text
    assert "pass: " in text
    assert "fail: " in text


@pytest.mark.parametrize(
    ("old", "new", "what"),
    [
        ("<= 20 %", "<= 21 %", "changed"),
        ("require low: flatness(screen)", "require low: peaking(screen)", "changed"),
        ("edge", "require more: gain(screen) at 0 Hz >= 0.5; edge", "added"),
        ("require low: flatness(screen) <= 20 %", "", "gone"),
    ],
)
def test_requirements_that_are_others(old: str, new: str, what: str) -> None:
    found = against((old, new))
    assert {(judged.case, judged.what) for judged in found.requirements} == {("nominal", what), ("far", what)}
    assert not found.moved
    assert found.figures == 0
    assert found.differs


# The command


def test_exit_codes() -> None:
    text = BASE.replace("9.5 pF", "10 pF")
    Path("old.nodal").write_text(BASE)
    Path("new.nodal").write_text(text)
    shutil.copy("old.nodal", "same.nodal")
    assert run("compare", "old.nodal", "new.nodal").exit_code == 0
    assert run("compare", "old.nodal", "new.nodal", "--exit-code").exit_code == 1
    assert run("compare", "old.nodal", "same.nodal", "--exit-code").exit_code == 0


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (["old.nodal"], "wrong-call"),
        (["old.nodal", "new.nodal", "new.nodal"], "wrong-call"),
        (["old.nodal", "new.nodal", "--format", "csv"], "wrong-call"),
        (["old.nodal", "new.nodal", "--case", "none"], "unknown-case"),
        (["old.nodal", "new.nodal", "--drive", "none"], "unknown-drive"),
        (["old.nodal", "."], "is-directory"),
    ],
)
def test_wrong_calls(arguments: list[str], code: str) -> None:
    run_texts(BASE, BASE)
    result = run("compare", *arguments)
    assert result.exit_code == 2
    assert f"error[{code}]" in result.stderr
    assert result.stdout == ""


def test_the_answer_for_programs() -> None:
    answer = json.loads(run_texts(BASE, BASE.replace("9.5 pF", "15 pF"), "--json", "--case", "far"))
    assert answer["format"] == 1
    assert answer["tool"] == f"nodal {nodal.__version__}"
    assert (answer["file"], answer["old"], answer["new"]) == ("new.nodal", "old.nodal", "new.nodal")
    assert answer["differs"] is True
    assert list(answer["cases"]) == ["far"]
    assert answer["cases_added"] == answer["cases_gone"] == answer["notes"] == []
    assert set(answer["changes"][0]) == {
        "section", "name", "what", "old", "new", "old_value", "new_value", "unit", "relative",
        "cases", "count",
    }  # fmt: skip
    figures = answer["cases"]["far"]["figures"]
    assert 0 < len(figures) <= answer["figures_compared"]
    assert set(next(iter(figures.values()))) == {"old", "new", "relative"}


def test_text_stays_within_a_hundred_columns_and_plain() -> None:
    text = run_texts(BASE, BASE.replace("9.5 pF", "15 pF").replace("<= 20 %", "<= 21 %"))
    assert max(map(len, text.splitlines())) <= 100
    assert "\x1b" not in text
    assert "\x1b" in run_texts(BASE, BASE.replace("9.5 pF", "15 pF"), "--color", "always")


def test_digits_tell_small_moves_apart() -> None:
    text = run_texts(BASE, BASE.replace("9.5 pF", "9.5000001 pF"))
    lines = [line for line in text.splitlines() if "capacitance(drive)" in line]
    assert lines
    for line in lines:
        old, new = line.split()[-6], line.split()[-4]
        assert old != new
