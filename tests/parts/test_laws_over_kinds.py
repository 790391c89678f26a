"""Laws that hold for every kind of part, each kind in a small two-port of its own.

Sources: reciprocity, passivity and Nyquist's theorem from any textbook on networks (e.g. Desoer and Kuh,
"Basic Circuit Theory"); the scaling laws are dimensional analysis.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import k as boltzmann

from nodal.assemble import assemble
from nodal.network import Drive, Network, Reading
from nodal.parts import (
    KINDS,
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
from nodal.response import Response
from nodal.solver.sweep import solve
from nodal.values import Value

F = np.array([1e-2, 50.0, 3.3e4, 1e6, 47e6, 2.1e9])
TEMPERATURE = 300.0

Make = Callable[[float, float], tuple[Part, ...]]
"""Parts between nodes 1 and 2 (and ground 0, inner 3, 4), impedances times z, frequencies times w."""


def resistor(z: float, w: float) -> tuple[Part, ...]:
    return (Resistor("r", 1, 2, Value(470.0 * z)), Resistor("g", 2, 0, Value(1e-3 / z), conductance=True))


def capacitor(z: float, w: float) -> tuple[Part, ...]:
    return (Capacitor("c", 1, 2, Value(1e-9 / z / w)), Capacitor("d", 2, 0, Value(2e-12 / z / w)))


def lossy_capacitor(z: float, w: float) -> tuple[Part, ...]:
    return (
        Capacitor("c", 1, 2, Value(1e-9 / z), loss=0.02),
        Capacitor("d", 2, 0, Value(2e-12 / z), loss=1e-4),
    )


def inductor(z: float, w: float) -> tuple[Part, ...]:
    return (Inductor("l", 1, 2, Value(1e-6 * z / w)),)


def couplings(coefficients: tuple[float, ...], in_henries: bool = False) -> Make:
    def make(z: float, w: float) -> tuple[Part, ...]:
        sizes = (1e-6, 4e-6, 9e-6)
        ends = ((1, 0), (0, 2), (3, 0))
        coils = [Inductor(n, *e, Value(size * z / w)) for n, e, size in zip("xyz", ends, sizes, strict=True)]
        pairs = (("x", "y", 0, 1), ("y", "z", 1, 2), ("z", "x", 2, 0))
        joined = []
        for (first, second, i, j), k in zip(pairs, coefficients, strict=False):
            value = k * np.sqrt(sizes[i] * sizes[j]) * z / w if in_henries else k
            joined.append(Coupling(first + second, first, second, Value(value), coefficient=not in_henries))
        return (*coils, *joined, Resistor("hold", 3, 0, Value(33.0 * z)))

    return make


def cable(**fields: float) -> Make:
    powers = {
        "resistance": (1, 0),
        "inductance": (1, -1),
        "conductance": (-1, 0),
        "capacitance": (-1, -1),
        "shield_resistance": (1, 0),
        "shield_inductance": (1, -1),
        "shield_coupling": (0, 0),
    }

    def make(z: float, w: float) -> tuple[Part, ...]:
        values = {k: Value(v * z ** powers[k][0] * w ** powers[k][1]) for k, v in fields.items()}
        far = 3 if "shield_resistance" in fields else 0
        bond = (Resistor("bond", 3, 0, Value(0.7 * z)),) if far else ()
        return (Cable("line", 1, 0, 2, far, Value(1.7), **values), *bond)

    return make


def lossy_cable(z: float, w: float) -> tuple[Part, ...]:
    line = Cable(
        "line",
        1,
        0,
        2,
        3,
        Value(1.7),
        inductance=Value(250e-9 * z),
        capacitance=Value(100e-12 / z),
        loss=2e-3,
        skin=(1.2 * z, 1e8),
        shield_resistance=Value(0.02 * z),
        shield_inductance=Value(1e-6 * z),
        shield_coupling=Value(0.9),
    )
    return (line, Resistor("bond", 3, 0, Value(0.7 * z)))


def voltage_source(z: float, w: float) -> tuple[Part, ...]:
    return (VoltageSource("at_rest", 1, 3, Value(1.0)), Resistor("r", 3, 2, Value(22.0 * z)))


def current_source(z: float, w: float) -> tuple[Part, ...]:
    return (CurrentSource("at_rest", 1, 2, Value(1.0)), Resistor("r", 1, 2, Value(22.0 * z)))


def amplifier(z: float, w: float) -> tuple[Part, ...]:
    buffer = Amplifier(
        "m",
        1,
        0,
        3,
        0,
        gain=Value(3.0),
        poles=((1e6 * w, None), (3e7 * w, 0.7)),
        zeros=((5e6 * w, None),),
        delay=1e-9 / w,
        common_mode=(1e4, 1e3 * w),
    )
    return (buffer, Resistor("out", 3, 2, Value(50.0 * z)))


def transconductor(z: float, w: float) -> tuple[Part, ...]:
    return (
        Amplifier(
            "m",
            1,
            0,
            2,
            0,
            transconductance=Value(1e-2 / z),
            poles=((1e6 * w, None),),
            zeros=((2e7 * w, 1.5),),
        ),
    )


CASES: dict[str, tuple[type, Make]] = {
    "resistor": (Resistor, resistor),
    "capacitor": (Capacitor, capacitor),
    "lossy capacitor": (Capacitor, lossy_capacitor),
    "inductor": (Inductor, inductor),
    "coupling": (Coupling, couplings((0.4,))),
    "coupling in henries": (Coupling, couplings((0.4,), in_henries=True)),
    "perfect coupling": (Coupling, couplings((-1.0,))),
    "three couplings": (Coupling, couplings((0.3, -0.4, 0.2))),
    "three tight couplings": (Coupling, couplings((0.9, 0.95, 0.8))),
    "three perfect couplings": (Coupling, couplings((1.0, -1.0, -1.0))),
    "voltage source": (VoltageSource, voltage_source),
    "current source": (CurrentSource, current_source),
    "cable": (Cable, cable(inductance=250e-9, capacitance=100e-12, resistance=0.3, conductance=1e-7)),
    "lossless cable": (Cable, cable(inductance=250e-9, capacitance=100e-12)),
    "shielded cable": (
        Cable,
        cable(
            inductance=400e-9,
            capacitance=80e-12,
            resistance=0.4,
            shield_resistance=0.1,
            shield_inductance=1e-6,
            shield_coupling=0.7,
        ),
    ),
    "attenuating shielded cable": (
        Cable,
        cable(
            inductance=250e-9,
            capacitance=10e-12,
            resistance=1e3,
            conductance=2e-3,
            shield_resistance=20.0,
            shield_inductance=1e-7,
            shield_coupling=0.7,
        ),
    ),
    "cable with skin and loss": (Cable, lossy_cable),
    "amplifier": (Amplifier, amplifier),
    "transconductor": (Amplifier, transconductor),
}
RECIPROCAL = [name for name, (kind, _) in CASES.items() if kind is not Amplifier]
FREE_OF_FIXED_FREQUENCIES = [name for name in CASES if not {"lossy", "loss"} & set(name.split())]


def two_port(name: str, z: float = 1.0, w: float = 1.0) -> Network:
    """The case's parts with resistors at both ports, so that every impedance is finite."""
    ends = (Resistor("one", 1, 0, Value(1e3 * z)), Resistor("two", 2, 0, Value(75.0 * z)))
    parts = (*CASES[name][1](z, w), *ends)
    return Network(
        ("ground", "a", "b", "c", "d"),
        parts,
        readings=(Reading("a", 1, 0), Reading("b", 2, 0)),
        temperature=TEMPERATURE,
    )


def impedances(network: Network, f: np.ndarray) -> np.ndarray:
    """Z of the two ports, (points, 2, 2)."""
    assembly = assemble(network)
    ports = [assembly.across(1, 0), assembly.across(2, 0)]
    return solve(assembly.system, 2j * np.pi * f, ports, ports).values.transpose(2, 1, 0)


def test_every_kind_has_a_case() -> None:
    assert {kind for kind, _ in CASES.values()} == set(KINDS)


@pytest.mark.parametrize("name", RECIPROCAL)
def test_reciprocity(name: str) -> None:
    z = impedances(two_port(name), F)
    scale = np.sqrt(np.abs(z[:, 0, 0] * z[:, 1, 1]))
    assert np.all(np.abs(z[:, 0, 1] - z[:, 1, 0]) <= 1e-10 * np.minimum(scale, 1e6 * np.abs(z[:, 0, 1])))


def test_an_amplifier_is_not_reciprocal() -> None:
    z = impedances(two_port("amplifier"), F)
    assert np.all(np.abs(z[:, 1, 0]) > 0)
    assert np.all(z[:, 0, 1] == 0)


@pytest.mark.parametrize("name", RECIPROCAL)
def test_passivity(name: str) -> None:
    z = impedances(two_port(name), F)
    power = np.linalg.eigvalsh(z + z.conj().transpose(0, 2, 1))
    assert np.all(power[:, 0] >= -1e-13 * power[:, 1])


@pytest.mark.parametrize("name", CASES)
def test_real_signals(name: str) -> None:
    network = two_port(name)
    assert np.allclose(impedances(network, -F), impedances(network, F).conj(), rtol=1e-12, atol=0)


@pytest.mark.parametrize("name", CASES)
def test_impedance_scaling(name: str) -> None:
    plain, scaled = impedances(two_port(name), F), impedances(two_port(name, z=370.0), F)
    assert np.allclose(scaled, 370.0 * plain, rtol=1e-10, atol=0)


@pytest.mark.parametrize("name", FREE_OF_FIXED_FREQUENCIES)
def test_frequency_scaling(name: str) -> None:
    plain, scaled = impedances(two_port(name), F), impedances(two_port(name, w=0.013), 0.013 * F)
    assert np.allclose(scaled, plain, rtol=1e-9, atol=0)


@pytest.mark.parametrize("name", RECIPROCAL)
def test_noise_of_a_port_is_that_of_its_resistance(name: str) -> None:
    """4kT Re Z (Nyquist 1928)."""
    network = two_port(name)
    z = impedances(network, F)
    response = Response(network)
    for k, reading in enumerate("ab"):
        expected = np.sqrt(4 * boltzmann * TEMPERATURE * z[:, k, k].real)
        assert np.allclose(response.noise_density(F, reading), expected, rtol=1e-8, atol=0)


@pytest.mark.parametrize("name", CASES)
def test_slope_against_a_difference_quotient(name: str) -> None:
    """dH/ds by central differences (an error of the order of the step squared)."""
    network = two_port(name)
    driven = replace(
        network,
        parts=(*network.parts, CurrentSource("i", 1, 0, Value(1.0))),
        drives=(Drive("i", (("i", 1.0),)),),
        default_drive="i",
    )
    response = Response(driven)
    f = np.array([1e3, 2e6, 3e7])
    step = 1e-5
    value, slope = response.derivative(f, "b")
    assert np.allclose(value.values, response.reading(f, "b").values, rtol=1e-12, atol=0)
    around = response.reading(f * (1 + step), "b").values - response.reading(f * (1 - step), "b").values
    expected = around / (2j * np.pi * f * 2 * step)
    floor = np.abs(value.values / (2 * np.pi * f))
    assert np.all(np.abs(slope.values - expected) <= 1e-6 * np.abs(expected) + 1e-8 * floor)
