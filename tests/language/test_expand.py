"""What statements mean: networks, values, sources, cables, amplifiers, observers, requirements."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest

from nodal.language.diagnostics import Collector
from nodal.language.expand import expand
from nodal.language.files import Disk
from nodal.language.parse import parse
from nodal.language.program import gather
from nodal.network import Network
from nodal.parts.amplifier import Amplifier
from nodal.parts.cable import Cable
from nodal.parts.capacitor import Capacitor
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.values import Drift, Rating, Tolerance, Trim

SOURCE = "source s: a to ground = 1 V behind 50 Ω\n"


def network(text: str, case: str = "nominal") -> Network:
    collector = Collector()
    program = gather(parse("nodal 1\n" + text, "t.nodal", collector), collector, parse, Disk("t.nodal"))
    expanded = expand(program, case, collector)
    assert [f"{f.code}: {f.message}" for f in collector.found] == []
    assert expanded.network is not None
    return expanded.network


def codes(text: str, case: str = "nominal") -> list[tuple[str, str]]:
    """(code, the characters it points at) of every finding."""
    collector = Collector()
    text = "nodal 1\n" + text
    program = gather(parse(text, "t.nodal", collector), collector, parse, Disk("t.nodal"))
    expand(program, case, collector)
    return [(f.code, text[f.span.start : f.span.end] if f.span else "") for f in collector.found]


def parts(text: str) -> dict[str, tuple[str, str, float]]:
    """Two-terminal parts by name: their nodes by name, and the value."""
    n = network(text)
    return {
        p.name: (n.nodes[p.a], n.nodes[p.b], p.value.nominal)
        for p in n.parts
        if isinstance(p, Resistor | Capacitor | Inductor)
    }


# Networks and names


def test_parallel_and_series_are_drawn_from_the_first_node() -> None:
    assert parts("branch tip: p to q = 9 MΩ ∥ (9.5 pF as head -- 5 Ω) -- 2 nH") == {
        "tip.R1": ("p", "tip.2", 9e6),
        "tip.head": ("p", "tip.1", 9.5e-12),
        "tip.R2": ("tip.1", "tip.2", 5.0),
        "tip.L": ("tip.2", "q", 2e-9),
    }


def test_parts_are_numbered_only_where_several_of_a_kind_are_unnamed() -> None:
    assert list(parts("branch t: p to q = 1 Ω -- 2 Ω as damp -- 1 pF -- 2 pF -- 1 S")) == [
        "t.R1", "t.damp", "t.C1", "t.C2", "t.R2",
    ]  # fmt: skip
    assert list(parts("branch t: p to q = 1 Ω -- 2 Ω as damp")) == ["t.R", "t.damp"]


def test_siemens_make_a_conductance_and_zero_stays_a_part() -> None:
    n = network("branch t: p to q = 2 mS ∥ 0 F ∥ 0 Ω")
    first, second, third = n.parts
    assert isinstance(first, Resistor)
    assert first.conductance
    assert first.siemens == 2e-3
    assert second.value.nominal == third.value.nominal == 0  # type: ignore[attr-defined]


def test_inner_nodes_are_read_but_not_connected_to() -> None:
    n = network(SOURCE + "branch t: a to ground = 1 Ω -- 1 pF\nreading m: t.1 to ground")
    assert n.nodes[n.reading("m").a] == "t.1"
    assert codes("branch t: a to ground = 1 Ω -- 1 pF\nbranch u: t.1 to ground = 1 Ω") == [
        ("inner-node", "t.1")
    ]


def test_names_that_are_words_of_the_language() -> None:
    assert parts("branch branch: input to cable = 1 Ω") == {"branch.R": ("input", "cable", 1.0)}


# Values


def test_arithmetic_by_hand() -> None:
    value = parts("let r = 4 MΩ\nlet skew = 1 %\nbranch t: a to b = r * (1 + skew) / 2 - 3 kΩ")["t.R"][2]
    assert value == 4e6 * 1.01 / 2 - 3e3
    assert parts("branch t: a to b = sqrt(1 nH / 1 pF)")["t.R"][2] == math.sqrt(1e-9 / 1e-12)
    assert parts("branch t: a to b = 1 / (2 * pi * 1 kHz * 1 MΩ)")["t.C"][2] == 1 / (2 * math.pi * 1e3 * 1e6)
    assert parts("branch t: a to b = max(1 Ω, min(3 Ω, 2 Ω), 1 Ω)")["t.R"][2] == 2.0
    assert parts("branch t: a to b = 1 Ω - -2 Ω")["t.R"][2] == 3.0


def test_wire_in_a_branch_is_an_inductor() -> None:
    # Rosa 1908: 100 mm of ⌀1 mm.
    assert parts("branch t: a to b = wire(100 mm, 1 mm)")["t.L"][2] == pytest.approx(99.8292909e-9, rel=1e-9)


def test_qualifiers() -> None:
    text = (
        "branch t: a to b = 9 pF ± 2 % with k = 2 trim 5 pF to 45 pF rated 500 V rms and 250 mW "
        "drift 25 ppm/K and -0.5 ppm/V loss 0.001 as head"
    )
    (part,) = network(text).parts
    assert isinstance(part, Capacitor)
    assert part.name == "t.head"
    assert part.loss == 0.001
    value = part.value
    assert value.tolerance == Tolerance(0.02 * 9e-12, 2.0)
    assert value.trim == Trim(5e-12, 45e-12)
    assert value.ratings == (Rating(500.0, "V", True), Rating(0.25, "W", False))
    assert value.drift == Drift(25e-6, -0.5e-6)
    assert value.formula is None


def test_tolerance_in_points_on_a_percentage() -> None:
    n = network("let skew = 1 % ± 0.1 %\nbranch t: a to b = 1 Ω * (1 + skew)")
    formula = n.part("t.R").value.formula  # type: ignore[attr-defined]
    (random,) = formula.randoms().values()
    assert random.tolerance.half_width == pytest.approx(0.001, rel=1e-15)


def test_a_toleranced_let_is_one_random_quantity_wherever_it_stands() -> None:
    n = network("let c = 14 pF ± 2 pF\nbranch t: a to b = c ∥ 2 * c")
    first, second = (p.value.formula for p in n.parts)  # type: ignore[attr-defined]
    assert first.randoms().keys() == second.randoms().keys() == {"c"}
    drawn = {"c": np.array([12e-12, 16e-12])}
    assert first.evaluate(drawn).tolist() == [12e-12, 16e-12]
    assert second.evaluate(drawn).tolist() == [24e-12, 32e-12]
    assert second.evaluate({}) == n.parts[1].value.nominal  # type: ignore[attr-defined]


def test_formula_through_lets_functions_and_geometry() -> None:
    n = network("let d = 1 mm ± 10 %\nlet l = 2 * d + 98 mm\nbranch t: a to b = wire(l, d)")
    value = n.part("t.L").value  # type: ignore[attr-defined]
    x = 1.05e-3
    expected = 2e-7 * (2 * x + 0.098) * (math.log(4 * (2 * x + 0.098) / x) - 1)  # Rosa 1908
    assert value.formula.evaluate({"d": x}) == pytest.approx(expected, rel=1e-14)


def test_long_chains_of_lets_in_either_order() -> None:
    lines = [f"let x{i} = x{i - 1} + 1 Ω" for i in range(1, 3000)]
    for order in (lines, lines[::-1]):
        assert parts("\n".join(["let x0 = 1 Ω", *order, "branch t: a to b = x2999"]))["t.R"][2] == 3000.0


def test_circles_of_lets_are_named_once() -> None:
    found = codes("let p = q\nlet q = 2 * r\nlet r = p\nlet z = z\nbranch t: a to b = p ∥ z ∥ q")
    assert [code for code, _ in found] == ["let-cycle", "let-cycle"]


def test_wrong_lets_are_reported_once_however_often_they_are_used() -> None:
    assert codes("let p = 1 Ω + 1 F\nbranch t: a to b = p ∥ p\nbranch u: a to b = 2 * p") == [
        ("wrong-dimension", "1 F")
    ]


@pytest.mark.parametrize(
    ("value", "code", "pointed"),
    [
        ("1 kΩ + 2 pF", "wrong-dimension", "2 pF"),
        ("3 V", "wrong-dimension", "3 V"),
        ("1 Ω / (2 - 2)", "division-by-zero", "2 - 2"),
        ("1e300 Ω * 1e300", "overflow", "1e300 Ω * 1e300"),
        ("1 Ω ∥ -3 pF", "negative-value", "-3 pF"),
        ("2 * (1 Ω -- 1 pF)", "network-in-arithmetic", "1 Ω -- 1 pF"),
        ("9 pF trim 12 pF to 3 pF", "trim-reversed", "trim 12 pF to 3 pF"),
        ("9 pF trim 10 pF to 12 pF", "trim-misses-value", "trim 10 pF to 12 pF"),
        ("9 pF ± -1 pF", "negative-tolerance", "-1 pF"),
        ("9 pF ± 1 % ± 1 pF", "qualifier-twice", "± 1 pF"),
        ("1 Ω ∥ unknwn", "unknown-name", "unknwn"),
        ("9 MΩ ± 0.5", "wrong-dimension", "0.5"),
        ("wire(3 mm, 1 mm)", "short-wire", "3 mm"),
    ],
)
def test_spans_of_mistakes_in_values(value: str, code: str, pointed: str) -> None:
    found = codes(f"branch t: a to ground = {value}")
    assert [code for code, _ in found] == [code]
    assert found[0][1].strip("()") == pointed


def test_every_wrong_member_of_a_network_is_reported() -> None:
    assert codes("branch t: a to b = 1 V ∥ 2 A -- 3 s") == [
        ("wrong-dimension", "1 V"), ("wrong-dimension", "2 A"), ("wrong-dimension", "3 s"),
    ]  # fmt: skip


# Sources, drives, contacts, readings


def test_source_networks_and_sides() -> None:
    n = network("source s: a to ground = 5 V behind 2 Ω -- 40 nH\nbranch t: a to ground = 1 MΩ")
    r, inductor, source, t = n.parts
    assert [p.side for p in n.parts] == ["test", "test", "test", "chain"]
    assert [[n.nodes[i] for i in p.nodes] for p in (r, inductor, source)] == [
        ["a", "s.1"],
        ["s.1", "s.emf"],
        ["s.emf", "ground"],
    ]
    assert n.contact("s").a == n.node("a")
    assert n.default_drive == "s"
    assert t.name == "t.R"


def test_current_source_is_shunted() -> None:
    n = network("source s: a to ground = 2 A shunted by 1 kΩ ∥ 1 pF")
    assert [p.kind for p in n.parts] == ["current source", "resistor", "capacitor"]
    assert n.drive("s").unit == "A"
    assert codes("source s: a to ground = 2 A behind 1 kΩ") == [("source-network", "1 kΩ")]


def test_under_test_splits() -> None:
    n = network(
        "under test { source s: a to ground = 1 V behind 1 Ω; branch p: a to ground = 1 pF }\n"
        "contact touch: a to ground\nbranch q: a to ground = 1 MΩ"
    )
    assert {p.name: p.side for p in n.parts} == {"s": "test", "s.R": "test", "p.C": "test", "q.R": "chain"}
    assert [c.name for c in n.contacts] == ["touch"]
    assert codes("under test { branch p: a to ground = 1 pF }\n" + SOURCE) == [("source-outside", "s")]


def test_drives() -> None:
    two = SOURCE + "source t: b to ground = 1 V\nbranch r: a to b = 1 Ω\n"
    assert network(two).default_drive is None
    assert [d.name for d in network(two).drives] == ["s", "t"]
    n = network(two + "drive diff: s by 0.5, t by -1 / 2\ndrive common: s, t")
    assert n.default_drive == "diff"
    assert n.drive("diff").weights == (("s", 0.5), ("t", -0.5))
    assert n.drive("common").weights == (("s", 1.0), ("t", 1.0))
    assert codes(SOURCE + "source i: b to ground = 1 A\ndrive d: s by 1, i by 1") == [("mixed-drive", "i")]


def test_reading_units() -> None:
    n = network(
        SOURCE
        + "reading v: a to ground times 10\nreading i: a to ground times 200 A/V\nreading p: a to ground"
    )
    assert [(r.unit, r.times.nominal) for r in n.readings] == [("V", 10.0), ("A", 200.0), ("V", 1.0)]


def test_reading_on_a_node_that_does_not_exist() -> None:
    assert codes(SOURCE + "reading v: b to ground") == [("unknown-name", "b")]


# Couplings


def test_coupling_by_branch_or_part() -> None:
    text = (
        "branch t: a to b = 1 nH -- 1 Ω\nbranch u: b to ground = 4 nH as core\ncoupling k: t with u.core = "
    )
    n = network(text + "1 nH")
    k = n.part("k")
    assert (k.first, k.second, k.value.nominal, k.coefficient) == ("t.L", "u.core", 1e-9, False)  # type: ignore[attr-defined]
    network(text + "2 nH")
    assert codes(text + "2.01 nH") == [("coupling-beyond-one", "2.01 nH")]
    assert codes(text + "-1.01") == [("coupling-beyond-one", "-1.01")]


# Cables


def cable(fields: str) -> Cable:
    (part,) = network(f"stock k {{ {fields} }}\ncable c: a, ground to b, ground = 2 m of k").parts
    assert isinstance(part, Cable)
    return part


def test_impedance_and_velocity() -> None:
    part = cable("impedance 50 Ω; velocity 0.66")
    assert part.capacitance.nominal == pytest.approx(101.080029e-12, rel=1e-8)  # identity 1/(Z v c)
    assert math.sqrt(part.inductance.nominal / part.capacitance.nominal) == pytest.approx(50, rel=1e-14)


def test_attenuation_gives_the_skin_effect() -> None:
    # The telegraph equations: γ² = Z' Y'; 0.12 dB/m at 100 MHz, dielectric loss and resistance counted.
    part = cable(
        "impedance 50 Ω; velocity 0.66; resistance 30 mΩ/m; conductance 1 nS/m; "
        "attenuation 0.12 dB/m at 100 MHz"
    )
    assert part.skin is not None
    rk, fk = part.skin
    assert fk == 100e6
    s = 2j * math.pi * fk
    z = s * part.inductance.nominal + cmath.sqrt(0.03**2 + 2j * rk**2)
    y = s * part.capacitance.nominal + 1e-9
    assert cmath.sqrt(z * y).real * 20 / math.log(10) == pytest.approx(0.12, rel=1e-12)


def test_attenuation_with_a_lossy_dielectric() -> None:
    # A loss of 0.001 alone attenuates by about π f √(LC) tan δ = 0.5 tan δ ω/v (Pozar, ch. 3).
    part = cable("impedance 50 Ω; velocity 0.66; loss 0.001; attenuation 0.12 dB/m at 100 MHz")
    bare = cable("impedance 50 Ω; velocity 0.66; attenuation 0.12 dB/m at 100 MHz")
    assert part.skin is not None
    assert bare.skin is not None
    dielectric = 0.5 * 0.001 * 2 * math.pi * 1e8 / (0.66 * 299792458.0)
    whole = 0.12 * math.log(10) / 20
    assert part.skin[0] / bare.skin[0] == pytest.approx((whole - dielectric) / whole, rel=2e-3)


def test_a_toleranced_field_is_one_random_quantity_in_every_cable() -> None:
    n = network(
        "stock k { impedance 50 Ω ± 2 %; velocity 0.66 }\n"
        "cable c: a, ground to b, ground = 2 m of k\ncable d: b, ground to e, ground = 1 m of k"
    )
    for part in n.parts:
        assert isinstance(part, Cable)
        assert part.capacitance.formula is not None
        assert part.capacitance.formula.randoms().keys() == {"k.impedance"}
        assert part.inductance.formula is not None
        assert part.inductance.formula.evaluate({"k.impedance": 51.0}) == pytest.approx(
            51 / (0.66 * 299792458.0), rel=1e-14
        )


def test_every_wrong_field_is_reported() -> None:
    found = codes(
        "stock k { capcitance 1 pF/m; resistance 1 Ω/m; resistance 1 Ω/m; loss 1 s; velocity 2 }\n"
        "cable c: a, ground to b, ground = 1 m of k"
    )
    assert [code for code, _ in found] == ["unknown-name", "field-twice", "wrong-dimension", "beyond-one"]


# Amplifiers


def test_amplifier_networks_are_noiseless_parts() -> None:
    n = network(
        "amplifier u: a, b to c, ground { gain 2; poles 3 GHz, 5 GHz q 0.6; zeros 1 GHz; input 1 MΩ ∥ 1 pF; "
        "output 50 Ω -- 1 nH; noise 4 nV/√Hz; common_mode 80 dB at 1 kHz }\nbranch t: a to b = 1 Ω"
    )
    u = n.part("u")
    assert isinstance(u, Amplifier)
    assert u.poles == ((3e9, None), (5e9, 0.6))
    assert u.zeros == ((1e9, None),)
    assert u.common_mode == (pytest.approx(1e4), 1e3)
    assert [n.nodes[i] for i in u.nodes] == ["a", "b", "u.1", "ground"]
    r = n.part("u.output.R")
    assert [n.nodes[i] for i in r.nodes] == ["u.1", "u.output.1"]
    assert {p.name for p in n.parts if p.noiseless} == {"u.input.R", "u.input.C", "u.output.R", "u.output.L"}


def test_transconductance_has_its_output_network_in_parallel() -> None:
    n = network("amplifier u: a, ground to c, ground { transconductance 2 mA/V; output 1 kΩ }")
    assert [n.nodes[i] for i in n.part("u.output.R").nodes] == ["c", "ground"]
    assert [n.nodes[i] for i in n.part("u").nodes] == ["a", "ground", "c", "ground"]


# The rest


def test_sweep_edge_temperature() -> None:
    n = network(
        "sweep 10 Hz to 1 GHz, 60 per decade\nedge 1 ns over 100 ns, top at 80 ns\ntemperature -10 °C"
    )
    assert n.grid is not None
    assert (n.grid.low, n.grid.high, n.grid.per_decade) == (10.0, 1e9, 60.0)
    assert n.stimulus is not None
    assert (n.stimulus.ramp, n.stimulus.window, n.stimulus.top_at) == (1e-9, 100e-9, 80e-9)
    assert n.temperature == pytest.approx(263.15)
    step = network("step over 3 s").stimulus
    assert step is not None
    assert (step.ramp, step.window) == (0.0, 3.0)


def test_requirements() -> None:
    n = network(
        SOURCE + "reading m: a to ground\nlet top = 3 %\n"
        "require a1: gain(m, s) at 0 Hz = 1 ± 1.5 %\n"
        "require a2: flatness(m, 10 kHz) from 1 Hz to 2 MHz <= top   # ripple\n"
        "require a3: gain(m) at 1 MHz >= -3 dB\n"
        "require a4: settling(m, 2 %) <= 4 ns\n"
        "require a5: phase(m) with s at 1 kHz = 0 ° ± 5 °"
    )
    a1, a2, a3, a4, a5 = n.requirements
    assert (a1.figure.text, a1.at, a1.relation, a1.limit, a1.tolerance, a1.unit) == (
        "gain(m, s)",
        0.0,
        "=",
        1.0,
        0.015,
        "",
    )
    assert a2.figure.arguments == ("m", 1e4)
    assert (a2.figure.text, a2.span, a2.limit) == ("flatness(m, 10 kHz)", (1.0, 2e6), 0.03)
    assert a2.text == "flatness(m, 10 kHz) from 1 Hz to 2 MHz <= top"
    assert (a3.limit, a3.unit) == (-3.0, "dB")
    assert (a4.figure.arguments, a4.unit) == (("m", 0.02), "s")
    assert (a5.drive, a5.limit, a5.tolerance, a5.unit) == ("s", 0.0, 5.0, "°")


@pytest.mark.parametrize(
    ("requirement", "code"),
    [
        ("gain(m) at 1 Hz = 1", "require-without-tolerance"),
        ("gain(m) at 1 Hz = 0 ± 1 %", "percent-of-zero"),
        ("gain(q) at 1 Hz >= 1", "unknown-name"),
        ("gian(m) at 1 Hz >= 1", "unknown-name"),
        ("bandwidth(m) >= 3 dB", "wrong-dimension"),
        ("bandwidth(m) at 1 Hz >= 3 Hz", "figure-range"),
        ("impedance(m) at 1 Hz >= 3 Ω", "unknown-name"),
        ("gain(m, s, s) at 1 Hz >= 1", "figure-arguments"),
        ("gain(m) at 1 Hz >= 1 Ω", "wrong-dimension"),
        ("gain(m) at 1 Hz >= 1 ± 1 %", "qualifier-misplaced"),
        ("noise(m) with s <= 1 V", "figure-without-drive"),
        ("gain(m) at 1 Hz = -3 dB ± 1 %", "wrong-dimension"),
        ("flatness(m) from 2 Hz to 1 Hz <= 1 %", "range-reversed"),
    ],
)
def test_wrong_requirements(requirement: str, code: str) -> None:
    assert [c for c, _ in codes(SOURCE + f"reading m: a to ground\nrequire r: {requirement}")] == [code]


def test_a_gain_in_amperes_per_volt() -> None:
    n = network(SOURCE + "reading i: a to ground times 1 A/V\nrequire r: gain(i) at 1 Hz >= 1 A/V")
    assert n.requirements[0].unit == "A/V"
    assert codes(SOURCE + "reading i: a to ground times 1 A/V\nrequire r: gain(i) at 1 Hz >= 1") == [
        ("wrong-dimension", "1")
    ]


def test_the_order_of_lines_changes_nothing_but_numbers_of_nodes() -> None:
    lines = ["let r = 2 * q", "let q = 1 kΩ ± 1 %", SOURCE.strip(), "branch t: a to b = r -- 1 nH",
             "branch u: b to ground = 2 nH", "coupling k: t with u = 0.5", "reading m: t.1 to ground",
             ]  # fmt: skip

    def described(n: Network) -> set[object]:
        return {(p.name, p.kind, tuple(n.nodes[i] for i in p.nodes), p.side) for p in n.parts}

    assert described(network("\n".join(lines))) == described(network("\n".join(lines[::-1])))
