"""Assemblies, chains, includes and cases: laws that say what each is short for, and limits."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from nodal.language.builder import NetworkBuilder
from nodal.language.diagnostics import Collector, Diagnostic
from nodal.language.expand import Override, expand
from nodal.language.files import Disk
from nodal.language.parse import parse
from nodal.language.program import gather
from nodal.network import Network

SECTION = """assembly section(top to bottom with shield; r, c = 2 nF, stray = 0.75 pF) {
  branch body: top to bottom = r ∥ c
  branch leak: bottom to shield = stray -- 1 Ω
}
"""
SOURCE = "source line: tip to ground = 1 V\n"


def run(
    text: str, case: str = "nominal", path: str = "t.nodal", overrides: dict[str, Override] | None = None
) -> tuple[Network | None, list[Diagnostic], str]:
    collector = Collector()
    text = "nodal 1\n" + text
    program = gather(parse(text, path, collector), collector, parse, Disk(path))
    return expand(program, case, collector, overrides).network, collector.found, text


def network(text: str, case: str = "nominal", path: str = "t.nodal", **overrides: Override) -> Network:
    found_network, found, _ = run(text, case, path, overrides)
    assert [f"{f.code}: {f.message}" for f in found] == []
    assert found_network is not None
    return found_network


def codes(text: str, case: str = "nominal", path: str = "t.nodal") -> list[str]:
    return [f.code for f in run(text, case, path)[1]]


def described(n: Network, renamed: tuple[str, str] = ("", "")) -> set[tuple[object, ...]]:
    """Parts with node names and values, the same whatever the order."""
    old, new = renamed

    def plain(name: str) -> str:
        return new + name[len(old) :] if old and name.startswith(old) else name

    return {
        (plain(p.name), p.kind, tuple(plain(n.nodes[i]) for i in p.nodes), p.side, p.describe()[0][1].nominal)
        for p in n.parts
    }


def test_a_place_equals_its_statements_written_out() -> None:
    used = network(SECTION + SOURCE + "place p: section(tip to low with ground; r = 5 MΩ)")
    written = network(
        SOURCE + "branch body: tip to low = 5 MΩ ∥ 2 nF\nbranch leak: low to ground = 0.75 pF -- 1 Ω"
    )
    assert described(used, ("p.", "")) == described(written)


def test_a_chain_of_one_equals_a_place() -> None:
    chain = network(SECTION + SOURCE + "chain p: 1 of section(tip to low with ground; r = 5 MΩ ± 1 %)")
    place = network(SECTION + SOURCE + "place p: section(tip to low with ground; r = 5 MΩ ± 1 %)")
    assert described(chain, ("p.1.", "p.")) == described(place)


def test_sections_join_right_to_left() -> None:
    n = network(
        SECTION + SOURCE + "chain c: 3 of section(tip to low with ground; r = 5 MΩ)\n"
        "reading m: c.2.bottom to c.3.top\nreading q: c.3.bottom to ground"
    )
    ends = {
        p.name: [n.nodes[i] for i in p.nodes] for p in n.parts if ".body." in p.name and p.kind == "resistor"
    }
    assert ends == {
        "c.1.body.R": ["tip", "c.1.bottom"],
        "c.2.body.R": ["c.1.bottom", "c.2.bottom"],
        "c.3.body.R": ["c.2.bottom", "low"],
    }
    assert n.reading("m").a == n.reading("m").b == n.node("c.2.bottom")
    assert n.reading("q").a == n.node("low")
    assert "c.3.leak.1" in n.nodes


def test_a_toleranced_argument_is_drawn_once_per_section() -> None:
    text = """assembly two(p to q; v, w = 1 Ω ± 2 %) {
      branch x: p to q = v -- 2 * v
      branch y: p to q = w
    }
    let common = 3 Ω ± 1 %
    chain c: 2 of two(a to ground; v = 1 Ω ± 1 %)
    place d: two(a to ground; v = common)
    place e: two(a to ground; v = common)
    """
    n = network(text)
    randoms = {p.name: set(p.value.formula.randoms()) for p in n.parts}  # type: ignore[attr-defined]
    assert randoms["c.1.x.R1"] == randoms["c.1.x.R2"] == {"c.1.v"}
    assert randoms["c.2.x.R1"] == {"c.2.v"}
    assert randoms["c.1.y.R"] == {"c.1.w"}
    assert randoms["d.x.R1"] == randoms["e.x.R2"] == {"common"}


PIECE = """stock coax { impedance 50 Ω; velocity 0.7 }
let common = 3 Ω ± 1 %
assembly cell(p, g to q; v) { branch x: p to inner = v ∥ v; branch y: inner to q = common -- 2 * v
  branch z: q to g = 1 Ω ± 2 % rated 5 V as shunt }
assembly piece(top, low to top_out, low_out with ref; r, share = 0.5 ± 1 %) {
  let half = r * share
  place a: cell(top, ref to mid; v = half)
  place b: cell(mid, low to top_out; v = 7 Ω ± 1 %)
  cable c: top_out, ref to low_out, ref = 1 m of coax
  amplifier u: mid, low to out, ref { gain 1; input 1 MΩ ± 1 %; output r }
  branch load: out to ref = r
}
"""


def test_many_sections_equal_places_one_after_another() -> None:
    """What is repeated from the second section on, part by part, random quantities and places in the text."""
    use = "piece({0} to {1} with a; r = 5 Ω ± 1 %)"  # a is the left node of the first section too
    count = 6
    chain = network(SOURCE + PIECE + f"chain s: {count} of " + use.format("a, b", "y, z"))
    joints = ["a, b", *(f"j{i}, k{i}" for i in range(1, count)), "y, z"]
    uses = [f"place s{i}: " + use.format(joints[i - 1], joints[i]) + "\n" for i in range(1, count + 1)]
    places = network(SOURCE + PIECE + "".join(uses))

    def plain(name: str) -> str:
        name = re.sub(r"^s\.(\d+)\.(top_out|low_out)$", lambda m: "jk"[m[2] == "low_out"] + m[1], name)
        return re.sub(r"^s\.(\d+)\.", r"s\1.", name)

    def listed(n: Network) -> list[tuple[object, ...]]:
        found = []
        for part in n.parts:
            values = [v for _, v, _ in part.describe()]
            randoms = [
                sorted((plain(name), r.nominal, r.tolerance) for name, r in v.formula.randoms().items())
                for v in values if v.formula is not None
            ]  # fmt: skip
            drawn = [
                v.formula.evaluate({name: 1.5 for name in v.formula.randoms() if plain(name) == "s4.r"})
                for v in values if v.formula is not None
            ]  # fmt: skip
            nodes = [plain(n.nodes[i]) for i in part.nodes]
            nominal = [(v.nominal, v.tolerance, v.ratings) for v in values]
            found.append((plain(part.name), part.kind, nodes, nominal, randoms, drawn, part.place))
        return found

    assert listed(chain) == listed(places)
    assert {plain(name) for name in chain.nodes} == set(places.nodes)
    inner = [(i, node) for i in range(1, count + 1) for node in ("top", "mid", "b.p", "low")]
    read = {f"s.{i}.{node}": f"s{i}.{node}" for i, node in inner}
    more = "".join(f"reading r{i}: {{{i}}} to ground\n" for i in range(len(read)))
    written = SOURCE + PIECE + f"chain s: {count} of " + use.format("a, b", "y, z") + "\n"
    chained = network(written + more.format(*read))
    placed = network(SOURCE + PIECE + "".join(uses) + more.format(*read.values()))
    here = [plain(chained.nodes[r.a]) for r in chained.readings]
    assert here == [placed.nodes[r.a] for r in placed.readings]


def test_a_section_with_a_value_of_its_own_is_not_a_pattern() -> None:
    text = SECTION + SOURCE + "chain c: 6 of section(tip to low with ground; r = 5 MΩ ± 1 %)\n"
    n = network(text + "case x { let c.2.r = 6 MΩ; let c.4.r = 7 MΩ ± 2 % }", "x")
    values = [n.part(f"c.{i}.body.R").value for i in range(1, 7)]  # type: ignore[attr-defined]
    assert [v.nominal for v in values] == [5e6, 6e6, 5e6, 7e6, 5e6, 5e6]
    assert [list(v.formula.randoms()) if v.formula else [] for v in values] == [
        ["c.1.r"], [], ["c.3.r"], ["c.4.r"], ["c.5.r"], ["c.6.r"],
    ]  # fmt: skip


def test_couplings_in_every_section() -> None:
    text = """assembly x(p to q; k) { branch a: p to q = 1 nH; branch b: p to q = 1 nH
      coupling m: a with b = k }
    chain c: 5 of x(a to ground; k = 0.5 ± 1 %)
    """
    n = network(text)
    found = {
        p.name: (p.first, p.second, set(p.value.formula.randoms()))  # type: ignore[attr-defined]
        for p in n.parts
        if p.kind == "coupling"
    }
    assert found == {f"c.{i}.m": (f"c.{i}.a.L", f"c.{i}.b.L", {f"c.{i}.k"}) for i in range(1, 6)}


def test_nested_assemblies_see_the_file_and_not_their_user() -> None:
    text = """let r = 7 Ω
    assembly inner(p to q) { branch b: p to q = r }
    assembly outer(p to q; r) { place i: inner(p to mid); branch b: mid to q = r; let twice = 2 * r
      branch d: p to q = twice }
    place o: outer(a to ground; r = 1 Ω)
    """
    n = network(text)
    assert {p.name: p.value.nominal for p in n.parts} == {"o.i.b.R": 7.0, "o.b.R": 1.0, "o.d.R": 2.0}  # type: ignore[attr-defined]
    assert "o.mid" in n.nodes


def test_couplings_and_cables_inside() -> None:
    text = """stock k { impedance 50 Ω; velocity 0.7 }
    assembly x(p to q) { branch l1: p to q = 1 nH; branch l2: p to q = 1 nH; coupling m: l1.L with l2 = 0.5
      cable c: p, ground to q, ground = 1 m of k }
    place u: x(a to b)
    """
    n = network(text)
    assert {p.name for p in n.parts} == {"u.l1.L", "u.l2.L", "u.m", "u.c"}


def test_mistakes_inside_show_the_place_of_use_and_are_said_once() -> None:
    text = "assembly x(p to q) { branch b: p to q = 1 V }\nchain c: 50 of x(a to ground)"
    _, found, whole = run(text)
    (finding,) = found
    assert finding.span is not None
    assert whole[finding.span.start : finding.span.end] == "1 V"
    ((use, _),) = finding.related
    assert whole[use.start : use.end] == "x(a to ground)"


@pytest.mark.parametrize(
    ("statement", "code"),
    [
        ("place p: section(a to b with ground; r = 1 V)", "wrong-dimension"),
        ("place p: section(a to b with ground; r = 1 Ω, q = 1)", "unknown-name"),
        ("place p: section(a to b; r = 1 Ω)", "wrong-nodes-of-use"),
        ("place p: sectoin(a to b; r = 1 Ω)", "unknown-name"),
        ("chain p: 0 of section(a to b with ground; r = 1 Ω)", "section-count"),
    ],
)
def test_what_follows_from_a_mistake_in_a_use_is_not_said(statement: str, code: str) -> None:
    """That its nodes, inner nodes and parts are missing."""
    text = SECTION + f"{statement}\nreading m: b to p.leak.1\nreading n: p.2.bottom to ground\n"
    text += "branch l: b to ground = 1 nH\nreading o: b to nowhere\n"
    assert [f.code for f in run(text)[1]] == [code, "unknown-name"]
    assert "nowhere" in run(text)[1][-1].message


# Cases

BASE = """let l = 110 mm
under test { source s: a to ground = 1 V behind 50 Ω }
branch lead: b to ground = wire(l, 1 mm)
branch tip: a to b = 1 MΩ
reading m: b to ground
sweep 1 Hz to 1 kHz, 10 per decade
require r1: gain(m) at 1 Hz <= 1
"""


def test_a_case_equals_the_file_edited_by_hand() -> None:
    case = (
        BASE
        + """case x {
      let l = 12 mm
      branch tip: a to b = 2 MΩ ∥ 1 pF
      source s: a to ground = 1 V
      omit lead
      branch short: b to ground = 3 Ω
      sweep 1 Hz to 2 Hz, 3 per decade
      require r1: gain(m) at 1 Hz <= 2
    }"""
    )
    edited = """let l = 12 mm
    under test { source s: a to ground = 1 V }
    branch tip: a to b = 2 MΩ ∥ 1 pF
    reading m: b to ground
    sweep 1 Hz to 2 Hz, 3 per decade
    require r1: gain(m) at 1 Hz <= 2
    branch short: b to ground = 3 Ω
    """
    varied, by_hand = network(case, "x"), network(edited)
    assert described(varied) == described(by_hand)
    assert varied.grid == by_hand.grid
    assert varied.readings == by_hand.readings
    assert [r.limit for r in varied.requirements] == [2.0]
    assert described(network(case)) == described(network(BASE))


def test_case_nominal_holds_requirements_for_itself() -> None:
    text = BASE + "case nominal { require only: gain(m) at 2 Hz <= 1 }\ncase x { let l = 12 mm }"
    assert [r.name for r in network(text).requirements] == ["r1", "only"]
    assert [r.name for r in network(text, "x").requirements] == ["r1"]
    assert codes(BASE + "case nominal { let l = 12 mm }") == ["misplaced"]


def test_arguments_of_places_in_a_case() -> None:
    text = (
        SECTION
        + SOURCE
        + """place p: section(tip to low with ground; r = 5 MΩ)
    chain c: 2 of section(tip to low with ground; r = 5 MΩ)
    case x { let p.r = 6 MΩ ± 1 %; let c.2.stray = 1 pF; let c.c = 3 nF }
    case wrong { let p.rr = 6 MΩ }
    """
    )
    n = network(text, "x")
    assert n.part("p.body.R").value.nominal == 6e6  # type: ignore[attr-defined]
    assert set(n.part("p.body.R").value.formula.randoms()) == {"p.r"}  # type: ignore[attr-defined]
    assert [n.part(f"c.{i}.leak.C").value.nominal for i in (1, 2)] == [0.75e-12, 1e-12]  # type: ignore[attr-defined]
    assert [n.part(f"c.{i}.body.C").value.nominal for i in (1, 2)] == [3e-9, 3e-9]  # type: ignore[attr-defined]
    assert codes(text, "wrong") == ["unknown-name"]


def test_values_from_outside() -> None:
    text = BASE + SECTION + "place p: section(a to b with ground; r = 1 Ω)\ncase x { let l = 12 mm }"
    short = network(text, "x")
    assert network(text, l=0.012).part("lead.L") == short.part("lead.L")
    assert network(text, "x", l=0.11).part("lead.L") == network(text).part("lead.L")
    assert network(text, **{"p.r": 5.0}).part("p.body.R").value.nominal == 5.0  # type: ignore[attr-defined]
    assert [f.code for f in run(text, overrides={"ll": 1.0})[1]] == ["unknown-let"]


@pytest.mark.parametrize(
    ("text", "code"),
    [
        (BASE + "case x { omit led }", "unknown-name"),
        (BASE + "case x { let l = 10 mm; let l = 20 mm }", "duplicate-name"),
        (
            BASE + "case x { sweep 1 Hz to 2 Hz, 3 per decade; sweep 1 Hz to 3 Hz, 3 per decade }",
            "given-twice",
        ),
        (SECTION + "place p: section(a to b; r = 1 Ω)", "wrong-nodes-of-use"),
        (SECTION + "place p: section(a to b with ground)", "argument-missing"),
        (SECTION + "place p: section(a to b with ground; r = 1 Ω, q = 2)", "unknown-name"),
        (SECTION + "place p: sectoin(a to b with ground; r = 1 Ω)", "unknown-name"),
        (SECTION + "chain p: -1 of section(a to b with ground; r = 1 Ω)", "section-count"),
        (SECTION + "chain p: 2.5 of section(a to b with ground; r = 1 Ω)", "section-count"),
    ],
)
def test_mistakes(text: str, code: str) -> None:
    case = "x" if "case x" in text else "nominal"
    assert codes(text, case) == [code]


# Limits: a clear error, soon, and without building anything


@pytest.mark.parametrize(
    "text",
    [
        SECTION + "chain p: 1000000000 of section(a to b with ground; r = 1 Ω)",
        SECTION + "let n = 100000\nchain p: n * 2 of section(a to b with ground; r = 1 Ω)",
        "assembly x(p to q) { branch b: p to q = 1 Ω }\nassembly y(p to q; n) { chain c: n of x(p to q) }\n"
        "chain c: 1000 of y(a to ground; n = 1000)",
        "assembly x0(p to q) { }\n"
        + "".join(
            f"assembly x{i}(p to q) {{ place u: x{i - 1}(p to q); place v: x{i - 1}(p to q) }}\n"
            for i in range(1, 40)
        )
        + "place p: x39(a to ground)",
    ],
)
def test_too_many_parts(text: str, monkeypatch: pytest.MonkeyPatch) -> None:
    added = []
    add = NetworkBuilder.add
    monkeypatch.setattr(NetworkBuilder, "add", lambda *arguments: (added.append(1), add(*arguments)))
    assert codes(text) == ["too-many-parts"]
    assert len(added) <= 1000  # one section of the outer chain at most


def test_recursion_of_assemblies() -> None:
    assert codes("assembly x(p to q) { place i: y(p to q) }\nassembly y(p to q) { place i: x(p to q) }\n"
                 "place u: x(a to ground)") == ["assembly-recursion"]  # fmt: skip


def test_a_thousand_flat_sections() -> None:
    text = SOURCE + "".join(
        f"branch a{i}: n{i} to m{i} = 10 Ω\nbranch b{i}: m{i} to n{i + 1} = 2 nH ± 1 %\n"
        f"branch c{i}: n{i + 1} to ground = 1 pF\n"
        f"branch d{i}: n{i + 1} to ground = 1 GΩ rated 5 V\nbranch e{i}: n{i} to n{i + 1} = 1 fF\n"
        for i in range(1000)
    )
    assert len(network(text).parts) == 5001


# Includes


def test_includes_share_definitions(tmp_path: Path) -> None:
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "shared.nodal").write_text(
        'nodal 1\ntitle "Shared"\ninclude "more.nodal"\n' + SECTION
    )
    (tmp_path / "parts" / "more.nodal").write_text("nodal 1\nlet r_all = 5 MΩ\n")
    text = 'include "parts/shared.nodal"\ninclude "parts/more.nodal"\n' + SOURCE
    text += "place p: section(tip to ground with ground; r = r_all)"
    n = network(text, path=str(tmp_path / "main.nodal"))
    assert n.part("p.body.R").value.nominal == 5e6  # type: ignore[attr-defined]
    assert n.title == ""
    place = n.part("p.body.R").place
    assert place is not None
    assert (place.path, place.line) == (str(tmp_path / "parts" / "shared.nodal"), 5)


def test_includes_stay_inside(tmp_path: Path) -> None:
    inside = tmp_path / "inside"
    inside.mkdir()
    (tmp_path / "out.nodal").write_text("nodal 1\nlet x = 1\n")
    (inside / "link.nodal").symlink_to(tmp_path / "out.nodal")
    (inside / "round.nodal").symlink_to(inside / "round.nodal")
    main = str(inside / "main.nodal")
    for target in ("../out.nodal", str(tmp_path / "out.nodal"), "link.nodal"):
        assert codes(f'include "{target}"', path=main) == ["include-outside"]
    assert codes('include "none.nodal"', path=main) == ["include-unreadable"]
    assert codes('include "round.nodal"', path=main) == ["include-unreadable"]
    (tmp_path / ".git").mkdir()
    assert codes('include "../out.nodal"', path=main) == []


def test_only_designs_are_included(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Another file would be shown in excerpts, and `-` would be standard input."""
    (tmp_path / "secret.txt").write_text("password = 1\n")
    (tmp_path / "link.nodal").symlink_to(tmp_path / "secret.txt")
    (tmp_path / ".nodal").write_text("nodal 1\n")
    monkeypatch.chdir(tmp_path)
    for target in ("secret.txt", "link.nodal", "-", ".", ""):
        (finding,) = run(f'include "{target}"', path="main.nodal")[1]
        assert finding.code == "include-unreadable"
        assert "password" not in finding.message
    assert codes('include ".nodal"', path="main.nodal") == []


def test_include_loops(tmp_path: Path) -> None:
    (tmp_path / "a.nodal").write_text('nodal 1\ninclude "b.nodal"\n')
    (tmp_path / "b.nodal").write_text('nodal 1\ninclude "a.nodal"\n')
    assert codes('include "a.nodal"', path=str(tmp_path / "main.nodal")) == ["include-loop"]
    assert codes('include "main.nodal"', path=str(tmp_path / "main.nodal")) == ["include-loop"]
