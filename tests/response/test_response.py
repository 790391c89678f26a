"""Loading, the split, limits and noise of small networks against hand calculations."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from scipy.constants import k as boltzmann
from scipy.integrate import quad

from nodal.network import Contact, Drive, Network, Reading, SweepGrid
from nodal.parts import (
    Amplifier,
    Cable,
    Capacitor,
    Coupling,
    CurrentSource,
    Inductor,
    Part,
    Resistor,
    VoltageSource,
)
from nodal.response import Response, SingularNetwork, Unavailable
from nodal.values import Value

F = np.array([0.0, 1e-3, 1.0, 1e4, 1e7, 1e9])
S = 2j * np.pi * F


def under_test(part: Part) -> Part:
    """The part, as one of the circuit under test."""
    return replace(part, side="test")


def network(
    *parts: Part, nodes: int = 6, contacts: tuple[tuple[int, int], ...] = ((1, 0),), **more: object
) -> Network:
    """Nodes ground, n1, n2 …; contacts c0, c1 …; every source a drive, the first one the default."""
    sources = [p for p in parts if isinstance(p, VoltageSource | CurrentSource)]
    return Network(
        ("ground", *(f"n{k}" for k in range(1, nodes))),
        parts,
        contacts=tuple(Contact(f"c{k}", a, b) for k, (a, b) in enumerate(contacts)),
        readings=tuple(Reading(f"v{k}", k, 0) for k in range(1, nodes) if any(k in p.nodes for p in parts)),
        drives=tuple(Drive(p.name, ((p.name, 1.0),)) for p in sources),
        default_drive=sources[0].name if sources else None,
        **more,
    )


def thevenin(ohms: float, a: int = 1, b: int = 0, inner: int = 5) -> list[Part]:
    source = VoltageSource("s", inner, b, Value(1.0), terminals=(a, b))
    return [under_test(source), under_test(Resistor("s.R", inner, a, Value(ohms)))]


# A disturbance is computed as such


def test_ten_million_million_to_one() -> None:
    """-Zs/(Zs + Zc) with 1 mΩ and 10 GΩ, to 1e-12 of itself."""
    response = Response(network(*thevenin(1e-3), Resistor("probe", 1, 0, Value(1e10))))
    exact = float(-Fraction(1e-3) / (Fraction(1e-3) + Fraction(1e10)))
    change = response.change(F, "c0")
    assert np.all(np.abs(change.values / exact - 1) < 1e-12)
    assert np.all(change.error < 1e-11)
    assert np.allclose(response.undisturbed(F, "c0").values, 1, rtol=1e-14)


def test_change_over_twelve_decades_of_impedance() -> None:
    for source in (1e-9, 1.0, 1e9):
        for chain in (1e-3, 1.0, 1e12):
            parts = [*thevenin(source), Resistor("p", 1, 2, Value(chain)), Capacitor("c", 2, 0, Value(1e-12))]
            z = chain + 1 / (S[1:] * 1e-12)
            change = Response(network(*parts)).change(F, "c0").values
            assert change[0] == 0
            assert np.allclose(change[1:], -source / (source + z), rtol=1e-11, atol=0)


def test_an_ideal_source_is_not_disturbed_at_all() -> None:
    response = Response(
        network(under_test(VoltageSource("s", 1, 0, Value(1.0))), Resistor("p", 1, 0, Value(1.0)))
    )
    assert np.all(response.change(F, "c0").values == 0)
    response = Response(
        network(
            under_test(VoltageSource("s", 1, 2, Value(1.0))),
            under_test(VoltageSource("t", 2, 0, Value(1.0))),
            Resistor("p", 1, 0, Value(1.0)),
        )
    )
    assert np.all(response.change(F, "c0").values == 0)


def test_no_chain_changes_nothing_and_takes_no_current() -> None:
    response = Response(network(*thevenin(50.0)))
    assert np.all(response.change(F, "c0").values == 0)
    assert np.all(np.isinf(response.impedance(F, "c0").values))


def test_a_chain_that_shorts_the_contact() -> None:
    response = Response(network(*thevenin(50.0), Resistor("p", 1, 0, Value(0.0))))
    assert np.all(response.change(F, "c0").values == -1)
    assert np.all(response.loaded(F, "c0").values == 0)
    assert np.all(response.impedance(F, "c0").values == 0)


def test_capacitors_against_capacitors_at_zero_frequency() -> None:
    """Source through 3 pF, chain 2 pF: the change is -2/5 at every frequency, 0 Hz included."""
    parts = [
        under_test(VoltageSource("s", 5, 0, Value(1.0))),
        under_test(Capacitor("s.C", 5, 1, Value(3e-12))),
        Capacitor("p", 1, 0, Value(2e-12)),
    ]
    response = Response(network(*parts))
    assert np.allclose(response.change(F, "c0").values, -0.4, rtol=1e-14, atol=0)
    assert np.allclose(response.loaded(F, "c0").values, 0.6, rtol=1e-14, atol=0)


def test_a_blocked_source_has_a_change_at_zero_frequency_though_both_voltages_vanish() -> None:
    """u = 1/(1 + 1/(sCR)) → 0 and so does the loaded voltage; their ratio tends to R2/(R1 + R2)."""
    parts = [
        under_test(VoltageSource("s", 5, 0, Value(1.0))),
        under_test(Capacitor("s.C", 5, 1, Value(1e-9))),
        under_test(Resistor("r", 1, 0, Value(1e6))),
        Resistor("p", 1, 0, Value(3e6)),
    ]
    response = Response(network(*parts))
    assert response.undisturbed(0.0, "c0").values == 0
    assert response.change(0.0, "c0").values == pytest.approx(-0.25, rel=1e-14)


# Several contacts, floating sides


def test_two_contacts_on_one_circuit() -> None:
    """A bridge of resistors touched in two places: exact fractions by Cramer's rule on the 2 nodes."""
    r = {"a": 100, "b": 220, "c": 330, "d": 470, "p": 10_000_000, "q": 47_000}
    parts = [
        under_test(VoltageSource("s", 5, 0, Value(1.0))),
        under_test(Resistor("a", 5, 1, Value(r["a"]))),
        under_test(Resistor("b", 1, 0, Value(r["b"]))),
        under_test(Resistor("c", 5, 2, Value(r["c"]))),
        under_test(Resistor("d", 2, 0, Value(r["d"]))),
        Resistor("p", 1, 2, Value(r["p"])),
        Resistor("q", 2, 0, Value(r["q"])),
    ]
    g = {k: Fraction(1, v) for k, v in r.items()}
    y11, y22, y12 = g["a"] + g["b"] + g["p"], g["c"] + g["d"] + g["p"] + g["q"], g["p"]
    det = y11 * y22 - y12**2
    loaded = [(g["a"] * y22 + y12 * g["c"]) / det, (g["c"] * y11 + y12 * g["a"]) / det]
    before = [g["a"] / (g["a"] + g["b"]), g["c"] / (g["c"] + g["d"])]
    response = Response(network(*parts, contacts=((1, 0), (2, 0))))
    for k in range(2):
        exact = float((loaded[k] - before[k]) / before[k])
        assert np.all(np.abs(response.change(F, f"c{k}").values / exact - 1) < 1e-11)
    assert np.allclose(response.impedance(F, "c0").values, 10_047_000, rtol=1e-13)


def test_a_floating_chain() -> None:
    """A battery instrument across a resistor that stands between two others."""
    parts = [
        under_test(VoltageSource("s", 5, 0, Value(1.0))),
        under_test(Resistor("a", 5, 1, Value(100.0))),
        under_test(Resistor("b", 1, 2, Value(200.0))),
        under_test(Resistor("c", 2, 0, Value(300.0))),
        Resistor("p", 1, 3, Value(1e6)),
        Capacitor("q", 3, 2, Value(10e-12)),
    ]
    response = Response(network(*parts, contacts=((1, 2),)))
    source = 200 * 400 / 600
    z = np.append(np.inf, 1e6 + 1 / (S[1:] * 10e-12))
    assert np.isinf(response.impedance(0.0, "c0").values)
    assert np.allclose(response.impedance(F[1:], "c0").values, z[1:], rtol=1e-12)
    assert np.allclose(
        response.change(F, "c0").values, np.append(0, -source / (source + z[1:])), rtol=1e-10, atol=0
    )


def test_a_floating_circuit_on_a_grounded_chain() -> None:
    parts = [
        *thevenin(1e3, a=1, b=2, inner=5),
        under_test(Resistor("d", 1, 2, Value(1e3))),
        Resistor("p", 1, 0, Value(3e6)),
        Resistor("q", 2, 0, Value(2e6)),
    ]
    response = Response(network(*parts, contacts=((1, 2),)))
    assert np.allclose(response.undisturbed(F, "c0").values, 0.5, rtol=1e-14)
    assert np.allclose(response.impedance(F, "c0").values, 5e6, rtol=1e-13)
    assert np.allclose(response.change(F, "c0").values, -500 / 5_000_500, rtol=1e-12, atol=0)


def test_an_open_amplifier_input() -> None:
    """Another contact's open input does not keep the first contact's impedance from being found."""
    parts = [
        *thevenin(50.0),
        under_test(Resistor("t", 1, 2, Value(10.0))),
        under_test(Resistor("u", 2, 0, Value(10.0))),
        Resistor("p", 1, 0, Value(1e6)),
        Amplifier("m", 2, 0, 3, 0, gain=Value(1.0)),
        Resistor("load", 3, 0, Value(50.0)),
    ]
    response = Response(network(*parts, contacts=((1, 0), (2, 0))))
    assert np.allclose(response.impedance(F, "c0").values, 1e6, rtol=1e-14)
    assert np.all(np.isinf(response.impedance(F, "c1").values))
    zs = 50 * 20 / 70
    assert np.allclose(response.change(F, "c1").values, -zs / (zs + 1e6), rtol=1e-12, atol=0)


def test_behind_an_ideal_current_source_nothing_is_undisturbed() -> None:
    response = Response(
        network(under_test(CurrentSource("i", 1, 0, Value(1.0))), Resistor("p", 1, 0, Value(5.0)))
    )
    with pytest.raises(Unavailable, match='nothing but the chain carries the current of "i"'):
        response.undisturbed(F, "c0")
    with pytest.raises(Unavailable):
        response.change(F, "c0")
    assert np.allclose(response.loaded(F, "c0").values, 5.0)
    found = response.sweep(F).contacts["c0"]
    assert found.undisturbed is None
    assert "i" in found.missing
    assert np.allclose(found.impedance.values, 5.0)


def test_another_contact_keeps_its_undisturbed_voltage() -> None:
    parts = [
        under_test(CurrentSource("i", 2, 0, Value(1.0))),
        *thevenin(100.0),
        Resistor("p", 1, 0, Value(900.0)),
        Resistor("q", 2, 0, Value(5.0)),
    ]
    response = Response(replace(network(*parts, contacts=((1, 0), (2, 0))), default_drive="s"))
    assert np.allclose(response.change(F, "c0").values, -0.1, rtol=1e-12)


def test_coupling_across_the_split() -> None:
    """R1 and L1 behind the source, L2 with R2 in the chain at the same node: the change by hand."""
    r1, l1, l2, r2, k = 50.0, 100e-9, 40e-9, 1e6, 0.3
    parts = [
        under_test(VoltageSource("s", 5, 0, Value(1.0))),
        under_test(Resistor("r1", 5, 4, Value(r1))),
        under_test(Inductor("l1", 4, 1, Value(l1))),
        Inductor("l2", 1, 2, Value(l2)),
        Resistor("r2", 2, 0, Value(r2)),
        Coupling("k", "l1", "l2", Value(k), coefficient=True),
    ]
    response = Response(network(*parts))
    s = S[1:]
    m = k * np.sqrt(l1 * l2)
    # One current i round the loop: 1 = i (r1 + s l1 + s l2 + 2 s m + r2); the contact stands before l2.
    total = r1 + s * (l1 + l2 + 2 * m) + r2
    expected = -(r1 + s * (l1 + m)) / total
    found = response.change(F, "c0").values
    assert np.allclose(found[1:], expected, rtol=1e-10, atol=0)
    assert found[0] == pytest.approx(-r1 / (r1 + r2), rel=1e-13)
    assert np.allclose(response.impedance(F[1:], "c0").values, s * l2 + r2, rtol=1e-13)


# Limits


def test_a_blocking_capacitor_gives_exactly_nothing() -> None:
    response = Response(
        network(*thevenin(50.0), Capacitor("c", 1, 2, Value(1e-9)), Resistor("r", 2, 0, Value(1e6)))
    )
    assert response.reading(0.0, "v2").values == 0
    assert response.reading(F, "v2").values[0] == 0


def test_a_column_of_capacitors_divides_by_its_capacitances() -> None:
    parts = [Capacitor(f"c{k}", k, (k + 1) % 4, Value(float(k) * 1e-12)) for k in (1, 2, 3)]
    value = Response(network(*thevenin(0.1), *parts)).reading(0.0, "v2").values
    assert value == pytest.approx((1 / 2 + 1 / 3) / (1 + 1 / 2 + 1 / 3), rel=1e-14)


def test_inductors_in_a_loop_share_a_current_by_flux_balance() -> None:
    """Two ideal inductors in parallel: 1/L1 to 1/L2, read over the drop of a third coupled to one of them."""
    parts = [
        *thevenin(50.0),
        Inductor("x", 1, 2, Value(2e-6)),
        Inductor("y", 1, 2, Value(3e-6)),
        Resistor("r", 2, 0, Value(50.0)),
    ]
    response = Response(network(*parts))
    assert response.reading(0.0, "v2").values == pytest.approx(0.5, rel=1e-14)
    value, slope = response.derivative(0.0, "v2")
    assert value.values == pytest.approx(0.5)
    # H = 50/(100 + s L), L = 1.2 µH: dH/ds = -50 L/100².
    assert slope.values == pytest.approx(-50 * 1.2e-6 / 100**2, rel=1e-12)


def test_capacitance_at_rest() -> None:
    """Y = G + sC - …: of a resistor and a capacitor in series, C; of one with an inductor, -L/R²."""
    chain = [Resistor("p", 1, 2, Value(1e3)), Capacitor("c", 2, 0, Value(7e-12))]
    assert Response(network(*thevenin(1.0), *chain)).capacitance_at_rest("c0") == pytest.approx(
        7e-12, rel=1e-13
    )
    chain = [Resistor("p", 1, 2, Value(10.0)), Inductor("c", 2, 0, Value(1e-6))]
    assert Response(network(*thevenin(1.0), *chain)).capacitance_at_rest("c0") == pytest.approx(
        -1e-8, rel=1e-13
    )
    chain = [Inductor("c", 1, 0, Value(1e-6))]
    assert Response(network(*thevenin(1.0), *chain)).capacitance_at_rest("c0") == -np.inf
    assert Response(network(*thevenin(1.0))).capacitance_at_rest("c0") == 0


# Sweeps


def test_a_sweep_is_the_curves_one_by_one() -> None:
    line = Cable("line", 1, 0, 2, 0, Value(1.0), inductance=Value(250e-9), capacitance=Value(100e-12))
    made = network(*thevenin(50.0), line, Resistor("load", 2, 0, Value(75.0)))
    made = replace(made, grid=SweepGrid(1.0, 1e9, 10))
    one, other = Response(made), Response(made)
    found = one.sweep(F, nodes=["n1"])
    same = {"rtol": 1e-12, "atol": 0}
    assert found.drive == "s"
    assert np.allclose(found.readings["v2"].values, other.reading(F, "v2").values, **same)
    assert np.allclose(found.nodes["n1"].values, other.node(F, "n1").values, **same)
    at = found.contacts["c0"]
    assert at.undisturbed is not None
    assert np.allclose(at.loaded.values, other.loaded(F, "c0").values, **same)
    assert np.allclose(at.undisturbed.values, other.undisturbed(F, "c0").values, **same)
    assert np.allclose(at.impedance.values, other.impedance(F, "c0").values, **same)
    assert 0 < found.quality.worst_estimated_error < 1e-11


def test_shapes_follow_the_frequencies() -> None:
    response = Response(network(*thevenin(50.0), Resistor("r", 1, 0, Value(50.0))))
    assert response.reading(1.0, "v1").values.shape == ()
    assert response.reading(np.ones((2, 3)), "v1").values.shape == (2, 3)
    assert response.reading([], "v1").values.shape == (0,)
    with pytest.raises(ValueError, match="finite"):
        response.reading([np.nan], "v1")


def test_the_drive_has_to_be_chosen_where_there_are_several() -> None:
    made = network(
        under_test(VoltageSource("s", 1, 0, Value(1.0))),
        under_test(CurrentSource("i", 2, 0, Value(1.0))),
        Resistor("r", 1, 2, Value(10.0)),
        Resistor("q", 2, 0, Value(10.0)),
    )
    response = Response(replace(made, default_drive=None))
    with pytest.raises(Unavailable, match="s, i"):
        response.reading(1.0, "v2")
    assert response.reading(1.0, "v2", "i").values == pytest.approx(5.0)
    with pytest.raises(KeyError):
        response.reading(1.0, "v2", "nobody")


def test_a_network_without_a_solution_names_what_moves() -> None:
    made = network(*thevenin(50.0), Resistor("r", 2, 3, Value(1.0)))
    with pytest.raises(SingularNetwork, match=r"voltage of n[23]"):
        Response(made).reading(1.0, "v2")


def test_lightly_damped_poles() -> None:
    """A series RLC: sqrt(1/(LC) - (R/2L)²)/2π."""
    r, ell, c = 3.0, 1e-6, 1e-9
    made = network(*thevenin(r), Inductor("l", 1, 2, Value(ell)), Capacitor("c", 2, 0, Value(c)))
    expected = np.sqrt(1 / (ell * c) - (r / 2 / ell) ** 2) / 2 / np.pi
    assert Response(made).lightly_damped() == pytest.approx([expected], rel=1e-9)
    damped = network(*thevenin(300.0), Inductor("l", 1, 2, Value(ell)), Capacitor("c", 2, 0, Value(c)))
    assert len(Response(damped).lightly_damped()) == 0


# Noise


def test_the_noise_of_a_resistor_over_a_capacitor_is_kt_over_c() -> None:
    """64.3579599 µV rms for 1 pF at 300 K whatever the resistor (common knowledge; from k by definition)."""
    for ohms in (10.0, 1e6):
        made = network(*thevenin(ohms), Capacitor("c", 1, 0, Value(1e-12)), temperature=300.0)
        response = Response(made)
        corner = 1 / (2 * np.pi * ohms * 1e-12)
        total, _ = quad(
            lambda t: float(response.noise_density(corner * np.tan(t), "v1")) ** 2 * corner / np.cos(t) ** 2,  # noqa: B023
            0,
            np.pi / 2 - 1e-9,
            epsrel=1e-9,
        )
        assert np.sqrt(total) == pytest.approx(64.3579599e-6, rel=1e-8)
        assert np.sqrt(total) == pytest.approx(np.sqrt(boltzmann * 300 / 1e-12), rel=1e-8)


def test_noise_at_zero_frequency() -> None:
    made = network(
        *thevenin(1e3), Resistor("p", 1, 2, Value(2e3)), Capacitor("c", 2, 0, Value(1e-12), loss=0.01)
    )
    density = Response(made).noise_density([0.0], "v2")
    assert density == pytest.approx([np.sqrt(4 * boltzmann * 296.15 * 3e3)], rel=1e-12)


def test_a_network_of_noiseless_parts_is_silent() -> None:
    made = network(*(replace(p, noiseless=True) for p in thevenin(1e3)), Capacitor("c", 1, 0, Value(1e-12)))
    assert np.all(Response(made).noise_density(F, "v1") == 0)
