"""One test a check: what it finds, what it lets pass, and in which words."""

from __future__ import annotations

from dataclasses import replace

import pytest

import nodal
from nodal.design import loads
from nodal.language.codes import BY_CODE
from nodal.language.codes.topology import TOPOLOGY
from nodal.network import Contact, Drive, Network, Reading
from nodal.parts import Coupling, Resistor, VoltageSource
from nodal.topology import CHECKS, Finding, amplifier_loops, check
from nodal.values import Value

FRAME = "nodal 1\nsource s: a to ground = 1 V behind 50 Ω\nbranch load: a to ground = 50 Ω\n"


def found(text: str, code: str) -> list[tuple[str, ...]]:
    """The names of all findings of a code."""
    try:
        diagnostics = loads(text).diagnostics
    except nodal.DesignError as error:
        diagnostics = error.diagnostics
    return [(d.name, d.message) for d in diagnostics if d.code == code]


def test_a_plain_network_has_no_findings() -> None:
    assert check(loads(FRAME).network().network) == []


def test_every_finding_has_a_row_of_its_severity() -> None:
    for row in TOPOLOGY:
        for text in row.examples:
            assert found(text, row.code), row.code
            try:
                diagnostics = loads(text).diagnostics
            except nodal.DesignError as error:
                diagnostics = error.diagnostics
            assert all(d.severity == BY_CODE[d.code].severity for d in diagnostics)


def test_checks_are_all_documented() -> None:
    assert all(one.__doc__ for one in (*CHECKS, amplifier_loops))


def test_no_source() -> None:
    assert len(found("nodal 1\nbranch r: a to ground = 1 Ω", "no-source")) == 1
    assert not found(FRAME, "no-source")


def hand_made() -> Network:
    return Network(
        ("ground", "a", "b"),
        (VoltageSource("s", 1, 0, Value(1.0), side="test"), Resistor("r", 1, 0, Value(1.0))),
        drives=(Drive("s", (("s", 1.0),)),),
        default_drive="s",
    )


def test_nothing_there() -> None:
    good = hand_made()
    assert not [f for f in check(good) if f.code == "nothing-there"]
    bad = replace(
        good,
        parts=(*good.parts, Coupling("k", "r", "l", Value(0.5), coefficient=True)),
        readings=(Reading("screen", 2, 0),),
        contacts=(Contact("touch", 1, 2),),
        drives=(Drive("d", (("q", 1.0),)),),
    )
    lost = [f for f in check(bad) if f.code == "nothing-there"]
    assert [f.names[0] for f in lost] == ["screen", "touch", "k", "k", "d"]
    assert lost[0].arguments["reason"] == 'no part is at "b"'
    assert lost[-1].arguments["reason"] == 'there is no source "q"'


def test_floating_nodes() -> None:
    text = FRAME + "branch r: b to c = 1 Ω ∥ 1 pF\nbranch q: c to d = 1 nF\n"
    assert found(text, "floating-nodes") == [("b", '"b", "c" and "d" have no path to ground')]
    assert not found(text + "branch e: d to ground = 1 TΩ", "floating-nodes")
    assert not found(text + "branch e: d to a = 1 fF", "floating-nodes")
    assert found(text + "branch e: d to ground = 0 F", "floating-nodes")
    amplifier = "amplifier m: b, c to a2, ground {{ gain 1{} }}\nbranch o: a2 to ground = 50 Ω"
    assert found(text + amplifier.format(""), "floating-nodes")
    assert found(text + amplifier.format("; input 1 MΩ"), "floating-nodes")
    assert not found(
        FRAME + "cable k: a, ground to b, ground = 1 m of x\nstock x { resistance 1 Ω/m }", "floating-nodes"
    )


def test_a_cable_without_dielectric_does_not_hold_its_shield() -> None:
    text = (
        FRAME + "stock x {{ inductance 200 nH/m; shield_resistance 1 Ω/m{} }}\n"
        "cable k: a, p to b, q = 1 m of x\nbranch l: b to ground = 1 Ω\n"
    )
    assert found(text.format(""), "floating-nodes") == [("p", '"p" and "q" have no path to ground')]
    assert not found(text.format("; capacitance 100 pF/m"), "floating-nodes")


def test_open_current_source() -> None:
    text = "nodal 1\nsource s: a to ground = 1 A{}\nbranch r: a to b = 1 Ω\nbranch q: b to {} = 1 Ω\n"
    assert found(text.format("", "c"), "open-current-source") == [
        ("s", 'the current of "s" has no way back from "a", "b" and "c"')
    ]
    assert not found(text.format("", "c"), "floating-nodes")
    assert not found(text.format("", "ground"), "open-current-source")
    assert not found(text.format(" shunted by 1 GΩ", "c"), "open-current-source")


def test_source_loops() -> None:
    two = "nodal 1\nsource s: a to ground = 1 V\nsource t: b to ground = 1 V\nsource u: a to b = 1 V\n"
    assert found(two, "source-loop") == [("u", "ideal voltages in a loop contradict each other: u, s and t")]
    assert not found(two.replace("to b = 1 V", "to b = 1 V behind 1 mΩ"), "source-loop")
    short = "nodal 1\nsource s: a to ground = 1 V\nbranch r: a to b = 0 Ω\nbranch q: b to ground = {}\n"
    assert found(short.format("0 H"), "source-loop") == [
        ("s", "ideal voltages in a loop contradict each other: s, r.R and q.L")
    ]
    assert not found(short.format("1 nH"), "source-loop")


def test_a_loop_of_shorts_alone_is_harmless() -> None:
    text = FRAME + "branch r: a to b = 0 Ω\nbranch q: a to b = 0 H\nbranch p: b to ground = 1 Ω"
    assert loads(text).diagnostics == []


def test_impossible_couplings() -> None:
    coils = "".join(f"branch {n}: a to ground = 1 µH\n" for n in "xyz")
    text = (
        FRAME
        + coils
        + "coupling xy: x.L with y.L = 0.9\ncoupling yz: y.L with z.L = 0.9\ncoupling xz: x.L with z.L = {}"
    )
    assert found(text.format(-0.9), "impossible-coupling") == [
        ("xy", "the couplings among x.L, y.L and z.L are too strong together")
    ]
    # 2 k² - 1 is the least coupling that two of k leave to the third (the determinant is zero there).
    assert not found(text.format(2 * 0.9**2 - 1), "impossible-coupling")
    assert found(text.format(2 * 0.9**2 - 1 - 1e-9), "impossible-coupling")


def test_impossible_shields() -> None:
    text = (
        FRAME + "stock x {{ inductance {} nH/m; shield_inductance 1 µH/m\n"
        "capacitance 1 pF/m; shield_coupling 0.5 }}\n"
        "cable k: a, ground to b, q = 1 m of x\nbranch l: b to q = 1 Ω\nbranch e: q to ground = 1 Ω\n"
    )
    assert found(text.format(249.9), "impossible-shield")
    assert not found(text.format(250), "impossible-shield")


SPLIT = (
    "nodal 1\nunder test {\nsource s: a to ground = 1 V behind 50 Ω\nbranch r: a to b = 1 kΩ\n"
    "branch e: b to ground = 1 kΩ\n}\ncontact t: a to ground\nbranch p: a to c = 1 MΩ\n"
    "branch q: c to ground = 1 MΩ\n"
)


def test_meeting_sides() -> None:
    assert not found(SPLIT, "sides-meet")
    text = SPLIT + "branch w: b to c = 1 MΩ\n"
    assert [name for name, _ in found(text, "sides-meet")] == ["b"]
    assert not found(text + "contact u: b to ground\n", "sides-meet")


def test_sources_alone_need_no_contact() -> None:
    text = "nodal 1\nsource s: a to ground = 1 V\nsource t: b to ground = 1 V\nbranch r: a to b = 1 Ω\n"
    assert not found(text, "sides-meet")


def test_amplifier_loops() -> None:
    text = FRAME + "branch r: a to b = 1 kΩ\namplifier m: b, ground to b, ground {{ gain {}{} }}\n"
    assert [name for name, _ in found(text.format(1, ""), "amplifier-loop")] == ["m"]
    assert not found(text.format(0.5, ""), "amplifier-loop")
    assert not found(text.format(1, "; poles 1 MHz"), "amplifier-loop")
    assert not found(text.format(1, "; output 1 Ω"), "amplifier-loop")
    two = (
        FRAME
        + "amplifier m: b, ground to c, ground { gain 2 }\namplifier n: c, ground to b, ground { gain 0.5 }\n"
        "amplifier o: a, ground to d, ground { gain 2 }\nbranch r: b to d = 1 Ω\n"
        "amplifier p: c, ground to e, ground { gain 2 }\nbranch q: e to ground = 1 Ω"
    )
    ((_, message),) = found(two, "amplifier-loop")
    assert message == "m and n are in a loop that has no solution"


def test_dangling_nodes() -> None:
    text = FRAME + "branch r: a to b = 1 Ω\n"
    assert found(text, "dangling-node") == [("b", 'only "r.R" touches the node "b"')]
    assert not found(text + "reading v: b to ground", "dangling-node")
    assert not found(text + "branch q: b to ground = 1 Ω", "dangling-node")
    assert not found(text + "allow dangling-node: b", "dangling-node")
    assert found(text + "branch q: a to c = 1 Ω\nallow dangling-node: c", "dangling-node")


def test_shorted_parts() -> None:
    text = FRAME + "branch r: a to b = 1 pF ∥ 0 Ω\nbranch q: b to {} = 1 Ω\n"
    assert [name for name, _ in found(text.format("ground"), "shorted-part")] == ["r.C"]
    assert [name for name, _ in found(text.format("a"), "shorted-part")] == ["r.C", "q.R"]


def test_a_shorted_winding_is_no_slip() -> None:
    text = (
        FRAME
        + "branch x: a to ground = 1 µH\nbranch y: b to ground = 1 µH ∥ 0 Ω\ncoupling k: x.L with y.L = 0.9"
    )
    assert not found(text, "shorted-part")


def test_shorted_sources() -> None:
    text = "nodal 1\nsource s: a to ground = 1 {} 1 kΩ\nbranch r: a to ground = {}\n"
    assert [name for name, _ in found(text.format("V behind", "0 Ω"), "source-shorted")] == ["s"]
    assert [name for name, _ in found(text.format("A shunted by", "0 Ω"), "source-shorted")] == ["s"]
    assert not found(text.format("V behind", "1 mΩ"), "source-shorted")


def test_coupling_across_the_split() -> None:
    text = SPLIT.replace("b = 1 kΩ", "b = 1 kΩ -- 1 µH").replace("c = 1 MΩ", "c = 1 MΩ -- 1 µH")
    text += "coupling k: p.L with r.L = 0.1\n"
    assert found(text, "coupling-across-split") == [("k", '"k" couples r.L under test with p.L of the chain')]
    assert not found(text + "allow coupling-across-split: k", "coupling-across-split")


def test_capacitive_nodes() -> None:
    text = FRAME + "branch c: a to b = 1 pF\nbranch d: b to ground = 1 pF\n"
    assert found(text, "capacitive-node") == [("b", '"b" is held by capacitors alone')]
    assert not found(text + "branch e: b to ground = 1 TΩ", "capacitive-node")
    assert not found(text + "branch e: a to b = 1 H", "capacitive-node")


def test_an_error_cannot_be_allowed() -> None:
    finding = check(replace(hand_made(), parts=(), allowed=frozenset({("no-source", "x")})))[0]
    assert isinstance(finding, Finding)
    assert finding.code == "no-source"


@pytest.mark.parametrize("count", [7, 20])
def test_long_lists_are_cut(count: int) -> None:
    chain = "".join(f"branch r{k}: n{k} to n{k + 1} = 1 Ω\n" for k in range(count - 1))
    ((_, message),) = found(FRAME + chain, "floating-nodes")
    assert message.endswith(f"and {count - 6} more have no path to ground")
