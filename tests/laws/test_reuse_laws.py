"""What is written once and used in several ways gives the network that writing it out gives, part by part.

Networks are compared whole: kinds, nodes, values with all that is said about them, sides, readings, drives,
requirements. Names of places are taken off where one side has them and the other has not.
"""

from __future__ import annotations

import random
import re
from collections.abc import Callable
from dataclasses import fields
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import nodal
from nodal.network import Network
from nodal.strategies import EVERY, texts

Rename = Callable[[str], str]


def listed(network: Network, rename: Rename = str) -> dict[str, list[str]]:
    """Everything in a network as text, in an order of its own; `rename` changes names in it."""

    def of(thing: object) -> str:
        shown = []
        for field in fields(thing):  # type: ignore[arg-type]
            value = getattr(thing, field.name)
            if field.name == "place":
                continue
            if field.type == "int":
                value = network.nodes[value]
            elif field.name == "terminals":
                value = [network.nodes[node] for node in value]
            shown.append(f"{field.name}={value!r}")
        return rename(f"{type(thing).__name__} " + " ".join(shown))

    return {
        "nodes": sorted(rename(name) for name in network.nodes),
        "parts": sorted(of(part) for part in network.parts),
        "readings": sorted(of(reading) for reading in network.readings),
        "contacts": sorted(of(contact) for contact in network.contacts),
        "drives": sorted(of(drive) for drive in network.drives),
        "requirements": sorted(of(requirement) for requirement in network.requirements),
        "rest": [repr((network.default_drive, network.grid, network.stimulus, network.temperature))],
    }


def nominal(text: str, path: str = "<text>") -> Network:
    return nodal.loads(text, path).network().network


def without(prefix: str) -> Rename:
    return lambda text: text.replace(prefix, "")


# Places and chains, on random networks of every kind of part

NODE = re.compile(r"\bn[0-9]+\b")


def divided(text: str) -> tuple[list[str], list[str]]:
    """The lines of a written network that may stand in an assembly, and the others."""
    lines = text.splitlines()[1:]
    pieces = ("branch", "coupling", "cable", "amplifier")
    inside = [line for line in lines if line.partition(" ")[0] in pieces]
    return inside, [line for line in lines if line not in inside]


def as_assembly(text: str, chooser: random.Random) -> tuple[str, list[str]]:
    """An assembly of a network's parts with everything else, and the nodes it is used with.

    Nodes that nothing outside names are formal ones or the assembly's own, by chance.
    """
    inside, outside = divided(text)
    needed = set(NODE.findall("\n".join(outside)))
    nodes = sorted(set(NODE.findall("\n".join(inside))))
    formal = [node for node in nodes if node in needed or chooser.random() < 0.5]
    chooser.shuffle(formal)
    body = "\n".join(inside)
    for number, node in enumerate(formal):
        body = re.sub(rf"\b{node}\b", f"formal{number}", body)
    listed_ = ", ".join(f"formal{number}" for number, _ in enumerate(formal))
    return "\n".join(["nodal 1", *outside, f"assembly all({listed_}) {{", body, "}"]) + "\n", formal


@settings(max_examples=25)
@given(texts(EVERY), st.randoms(use_true_random=False))
def test_a_place_equals_its_statements_written_out(text: str, chooser: random.Random) -> None:
    assembly, nodes = as_assembly(text, chooser)
    used = nominal(assembly + f"place inner: all({', '.join(nodes)})\n")
    assert listed(used, without("inner.")) == listed(nominal(text))
    outer = {"ground", *nodes, *NODE.findall("\n".join(divided(text)[1]))}
    assert {name for name in used.nodes if not name.startswith("inner.")} <= outer


@settings(max_examples=25)
@given(texts(EVERY), st.randoms(use_true_random=False))
def test_a_chain_of_one_equals_a_place(text: str, chooser: random.Random) -> None:
    assembly, nodes = as_assembly(text, chooser)
    if len(nodes) < 2:
        nodes = [nodes[0], nodes[0]]
        assembly = assembly.replace("all(formal0)", "all(formal0, other)")
    head = ", ".join(f"formal{number}" for number in range(2, len(nodes)))
    assembly = re.sub(r"all\((\w+), (\w+).*?\)", rf"all(\1 to \2{' with ' + head if head else ''})", assembly)
    shared = ", ".join(nodes[2:])
    use = f"all({nodes[0]} to {nodes[1]}{' with ' + shared if shared else ''})\n"
    chain, place = nominal(assembly + "chain u: 1 of " + use), nominal(assembly + "place u: " + use)
    assert listed(chain, lambda name: name.replace("u.1.", "u.")) == listed(place)


# A design with everything in it

DESIGN = """nodal 1
title "Everything"
let length = 110 mm
let spread = 3 Ω ± 1 %
let twice = 2 * spread
stock coax { impedance 50 Ω; velocity 0.66; loss 0.0004 }
stock core { capacitance 48 pF/m ± 2 %; inductance 270 nH/m; resistance 235 Ω/m }
assembly section(top to bottom with around; r, c = 2 nF, stray = 0.75 pF) {
  let damp = r / 1000
  branch body: top to bottom = r rated 5 kV ∥ (c -- damp)
  branch leak: bottom to around = stray
}
assembly pair(hot to cold; r = 1 kΩ ± 1 %) {
  place first: section(hot to mid with ground; r = r)
  chain rest: 2 of section(mid to cold with ground; r = 2 * r, c = 1 nF)
  branch coil: hot to cold = 1 µH as a -- 100 Ω
  branch coil2: mid to cold = 2 µH -- 10 Ω
  coupling m: coil.a with coil2 = 0.2
}
under test {
  source drive: gate to ground = 1 V behind 25 Ω
  source other: sink to ground = 2 V behind 1 Ω
  branch pad: gate to sink = 2 pF
}
contact touch: gate to ground
contact low: sink to ground
branch lead: gate to tip = wire(length, 0.8 mm) -- spread
branch extra: gate to sink = twice
place p: pair(tip to core)
chain column: 4 of section(core to plug with ground; r = 5 kΩ ± 2 %)
cable flex: plug, ground to box, ground = 1 m of coax
cable second: box, ground to far, ground = 2 m of core
amplifier buffer: far, ground to out, ground { gain 2; poles 100 MHz; output 50 Ω }
branch load: out to ground = 50 Ω
branch tail: far to ground = 1 MΩ ∥ 14 pF trim 5 pF to 20 pF as trimmer
reading screen: out to ground times 10
reading joint: column.2.bottom to p.mid
drive both: drive by 0.5, other by -0.5
sweep 10 Hz to 1 GHz, 60 per decade
edge 1 ns over 100 ns
temperature 30 °C
require ratio: gain(screen) with drive at 0 Hz <= 20
require light: impedance(touch) at 1 kHz >= 1 Ω
"""


def statements(text: str) -> list[str]:
    """Top-level statements, blocks whole."""
    found: list[str] = []
    depth = 0
    for line in text.splitlines():
        if depth:
            found[-1] += "\n" + line
        else:
            found.append(line)
        depth += line.count("{") - line.count("}")
    return found


FIRST, *REST = statements(DESIGN)


def shuffled(block: str, shuffler: random.Random) -> str:
    """A block of several lines with its statements in another order."""
    lines = block.split("\n")
    if len(lines) < 3:
        return block
    inner = lines[1:-1]
    shuffler.shuffle(inner)
    return "\n".join([lines[0], *inner, lines[-1]])


CASES = """case x { let length = 12 mm; let column.2.stray = 1 pF; let p.r = 3 kΩ ± 1 %; omit extra }
case y {
  branch extra: gate to sink = 7 Ω
  branch added: out to ground = 3 pF
  require ratio: gain(screen) with both at 0 Hz <= 30
}
"""


@settings(max_examples=12)
@given(st.randoms(use_true_random=False))
def test_order_changes_nothing(shuffler: random.Random) -> None:
    """That of statements, of those in a block and of those in a case; numbers come from within a branch."""
    rest = [shuffled(block, shuffler) for block in [*REST, *statements(CASES)]]
    shuffler.shuffle(rest)
    straight, other = nodal.loads(DESIGN + CASES), nodal.loads("\n".join([FIRST, *rest]))
    assert set(straight.cases) == set(other.cases) == {"nominal", "x", "y"}
    for case in straight.cases:
        assert listed(straight.network(case).network) == listed(other.network(case).network)


@settings(max_examples=10)
@given(data=st.data())
def test_an_included_file_is_its_text_pasted(
    data: st.DataObject, tmp_path_factory: pytest.TempPathFactory
) -> None:
    """Statements dealt out to files that include each other, in folders; a file taken twice counts once."""
    folder = tmp_path_factory.mktemp("included")
    names = ["main.nodal", "a.nodal", "sub/b.nodal", "sub/c.nodal"]
    body = [*REST[1:], *statements(CASES)]
    owners = data.draw(st.lists(st.integers(0, 3), min_size=len(body), max_size=len(body)))
    includes = {
        "main.nodal": ['include "a.nodal"', 'include "sub/b.nodal"', 'include "./sub/../a.nodal"'],
        "a.nodal": ['title "Not this one"', 'include "sub/c.nodal"'],
        "sub/b.nodal": ['include "c.nodal"', 'include "../a.nodal"'],
        "sub/c.nodal": [],
    }
    (folder / "sub").mkdir()
    for number, name in enumerate(names):
        lines = ["nodal 1", *includes[name]]
        lines += [REST[0]] if name == "main.nodal" else []
        lines += [block for owner, block in zip(owners, body, strict=True) if owner == number]
        (folder / name).write_text("\n".join(lines) + "\n", encoding="utf-8")
    whole, parted = nodal.loads(DESIGN + CASES), nodal.load(str(folder / "main.nodal"))
    assert parted.title == whole.title == "Everything"
    for case in whole.cases:
        assert listed(whole.network(case).network) == listed(parted.network(case).network)


# Cases


def replaced(old: str, new: str) -> Callable[[str], str]:
    def edit(text: str) -> str:
        assert text.count(old) == 1
        return text.replace(old, new)

    return edit


def statement_replaced(start: str, new: str) -> Callable[[str], str]:
    """The one statement that begins so, replaced (by nothing: removed)."""

    def edit(text: str) -> str:
        found = [block for block in statements(text) if block.startswith(start)]
        if not found:
            found = [line for line in text.splitlines() if line.strip().startswith(start)]
        assert len(found) == 1
        return text.replace(found[0] + "\n", new + "\n" if new else "", 1)

    return edit


SECTION = """assembly section(top to bottom with around; r, c = 3 nF, stray = 1 pF) {
  branch body: top to bottom = r ∥ c
  branch leak: bottom to around = stray
}"""


def rewritten(start: str, new: str) -> tuple[str, Callable[[str], str]]:
    """In a case: the statement under its old name; by hand: in place of the one that begins so."""
    return new, statement_replaced(start, new)


def added(new: str) -> tuple[str, Callable[[str], str]]:
    return new, lambda text: text + new + "\n"


EDITS: dict[str, tuple[str, Callable[[str], str]]] = {
    "let": rewritten("let length", "let length = 12 mm"),
    "let with a tolerance": rewritten("let spread", "let spread = 4 Ω ± 2 %"),
    "argument of a place": (
        "let p.r = 3 kΩ ± 2 %",
        replaced("pair(tip to core)", "pair(tip to core; r = 3 kΩ ± 2 %)"),
    ),
    "argument of a chain": (
        "let column.stray = 2 pF",
        replaced("r = 5 kΩ ± 2 %)", "r = 5 kΩ ± 2 %, stray = 2 pF)"),
    ),
    "branch": rewritten("branch lead", "branch lead: gate to tip = 5 nH"),
    "branch that moves": rewritten("branch tail", "branch tail: box to ground = 2 MΩ"),
    "source": rewritten("source other", "source other: sink to ground = 3 V"),
    "stock": rewritten("stock coax", "stock coax { impedance 75 Ω; velocity 0.8 }"),
    "cable": rewritten("cable flex", "cable flex: plug, ground to box, ground = 3 m of core"),
    "assembly": rewritten("assembly section", SECTION),
    "chain": rewritten(
        "chain column", "chain column: 3 of section(core to plug with ground; r = 1 Ω, c = 9 pF)"
    ),
    "amplifier": rewritten("amplifier buffer", "amplifier buffer: far, ground to out, ground { gain 3 }"),
    "reading": rewritten("reading screen", "reading screen: out to ground times 20"),
    "drive": rewritten("drive both", "drive both: drive by 1, other by 1"),
    "requirement": rewritten("require ratio", "require ratio: gain(screen) at 1 Hz <= 7"),
    "sweep": rewritten("sweep", "sweep 1 Hz to 1 MHz, 3 per decade"),
    "edge": rewritten("edge", "step over 1 µs"),
    "temperature": rewritten("temperature", "temperature 40 °C"),
    "omit": ("omit extra", statement_replaced("branch extra", "")),
    "omit a requirement": ("omit light", statement_replaced("require light", "")),
    "addition": added("branch new: far to tip = 3 GΩ"),
    "addition under test": added("under test { branch new2: gate to ground = 1 pF }"),
    "new value": added("let fresh = 3 pF; branch new3: tip to ground = fresh"),
}


@pytest.mark.parametrize("name", EDITS)
def test_each_edit_changes_the_network(name: str) -> None:
    _, edit = EDITS[name]
    assert listed(nominal(edit(DESIGN))) != listed(nominal(DESIGN))
    check([name])


def check(names: list[str]) -> None:
    text, inside = DESIGN, []
    for name in names:
        inside.append(EDITS[name][0])
        text = EDITS[name][1](text)
    # Statements that the edits leave without use are warned of on either side, and do no harm.
    design = nodal.loads(DESIGN + "case edited {\n" + "\n".join(inside) + "\n}\n")
    assert listed(design.network("edited").network) == listed(nominal(text))
    assert listed(design.network().network) == listed(nominal(DESIGN))


@settings(max_examples=15)
@given(st.lists(st.sampled_from(sorted(EDITS)), unique=True, min_size=2, max_size=8))
def test_a_case_equals_the_file_edited_by_hand(names: list[str]) -> None:
    if "chain" in names and "argument of a chain" in names:
        names.remove("argument of a chain")  # by hand it would have to go into the new statement
    check(names)


def test_shipped_designs_can_do_without_their_includes() -> None:
    """The shared file pasted in place of `include`."""
    circuits = Path(__file__).parents[2] / "circuits"
    shared = (circuits / "shared" / "parts.nodal").read_text(encoding="utf-8")
    pasted = re.sub(r"^(nodal 1|title .*)\n", "", shared, flags=re.MULTILINE)
    included = 0
    for path in sorted(circuits.glob("*.nodal")):
        text = path.read_text(encoding="utf-8")
        if "include" not in text:
            continue
        included += 1
        whole = nodal.loads(text.replace('include "shared/parts.nodal"\n', pasted))
        design = nodal.load(str(path))
        for case in design.cases:
            assert listed(design.network(case).network) == listed(whole.network(case).network)
    assert included >= 3
