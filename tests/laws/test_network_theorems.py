"""Theorems of network theory on random networks, through the whole numerical pipeline."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.constants import k as boltzmann

from nodal.network import Network
from nodal.parts.capacitor import Capacitor
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import CurrentSource
from nodal.response import Response
from nodal.strategies import EVERY, LUMPED, PASSIVE, frequencies, networks, rescaled

TAU = 2 * math.pi
SAME = 1e-9
"""Two ways to the same number may differ by this; each is right to 1e-10 where its parts define it that
well."""


def impedances(network: Network, frequency: float, ports: int) -> np.ndarray:
    """Z of the ports `port1` …, driven one by one by currents."""
    response = Response(network)
    return np.array(
        [
            [response.reading([frequency], f"at{i}", drive=f"port{j}").values[0] for j in range(1, ports + 1)]
            for i in range(1, ports + 1)
        ]
    )


@given(networks(PASSIVE, source="current", ports=3), frequencies())
def test_reciprocity(network: Network, frequency: float) -> None:
    """Z = Zᵀ without controlled sources (Lorentz; Rayleigh 1873)."""
    z = impedances(network, frequency, 3)
    own = np.sqrt(np.abs(np.outer(z.diagonal(), z.diagonal())))
    assert np.all(np.abs(z - z.T) <= SAME * np.abs(z) + 1e-12 * own)


@given(networks(EVERY), frequencies())
def test_real_signals(network: Network, frequency: float) -> None:
    """H(-jω) = conj H(jω): what is real in time stays so."""
    h = Response(network).reading([frequency, -frequency], "out").values
    assert abs(h[1] - np.conj(h[0])) <= 1e-10 * abs(h[0])


@given(networks(PASSIVE, source="current", ports=3), frequencies())
def test_passivity(network: Network, frequency: float) -> None:
    """Z + Zᴴ has no negative eigenvalue (a network of passive parts takes power from any excitation)."""
    z = impedances(network, frequency, 3)
    scale = np.diag(1 / np.sqrt(np.abs(z.diagonal())))
    power = scale @ (z + z.conj().T) @ scale
    assert np.linalg.eigvalsh(power)[0] >= -1e-9


@given(
    networks((*LUMPED, "cable", "shielded cable", "amplifier")),
    frequencies(),
    st.sampled_from([2.0**-20, 3.0, 2.0**11]),
)
def test_impedance_scaling(network: Network, frequency: float, factor: float) -> None:
    """All impedances times a factor: voltage ratios stay as they are (textbook)."""
    assume(all(part.kind != "cable" or (not part.skin and not part.loss) for part in network.parts))
    before = Response(network).reading([frequency], "out").values
    after = Response(rescaled(network, impedance=factor)).reading([frequency], "out").values
    assert_allclose(after, before, rtol=SAME, atol=1e-13)


@given(
    networks((*LUMPED, "cable", "shielded cable")), frequencies(), st.sampled_from([2.0**-20, 3.0, 2.0**11])
)
def test_frequency_scaling(network: Network, frequency: float, factor: float) -> None:
    """All L and C over a factor: the same voltage ratios at frequencies larger by it (textbook)."""
    assume(all(part.kind != "cable" or (not part.skin and not part.loss) for part in network.parts))
    before = Response(network).reading([frequency], "out").values
    after = Response(rescaled(network, frequency=factor)).reading([frequency * factor], "out").values
    assert_allclose(after, before, rtol=SAME, atol=1e-13)


def admittance(part: Resistor | Capacitor | Inductor, s: complex) -> complex:
    value = part.value.nominal
    return {"resistor": 1 / value, "capacitor": s * value, "inductor": 1 / (s * value)}[part.kind]


def lumped(network: Network) -> list[Resistor | Capacitor | Inductor]:
    return [part for part in network.parts if isinstance(part, Resistor | Capacitor | Inductor)]


def voltages(network: Network, frequency: float) -> np.ndarray:
    response = Response(network)
    return np.array([0, *(response.node([frequency], name).values[0] for name in network.nodes[1:])])


@given(networks(LUMPED, source="current", decades=4), frequencies(4))
def test_tellegen(network: Network, frequency: float) -> None:
    """Σ V·conj(I) over all parts is the power that the source gives: 1 A at the voltage of its port
    (Tellegen 1952). The currents follow from the voltages part by part, so it is Kirchhoff's current law
    that is tested."""
    v = voltages(network, frequency)
    s = 1j * TAU * frequency
    powers = [abs(v[p.a] - v[p.b]) ** 2 * np.conj(admittance(p, s)) for p in lumped(network)]
    assert abs(sum(powers) - v[1]) <= 1e-9 * (sum(abs(p) for p in powers) + abs(v[1]))


@given(networks(("inductor", "capacitor"), source="current", decades=4), frequencies(4))
def test_foster_reactance_theorem(network: Network, frequency: float) -> None:
    """Without loss, Z = jX and dX/dω ≥ |X|/ω > 0 (Foster 1924)."""
    z, slope = Response(network).derivative([frequency], "at1")
    x, rate = z.values[0].imag, slope.values[0].real
    omega = TAU * frequency
    assert z.values[0].real == 0
    assert rate * omega >= abs(x) * (1 - 1e-9)
    # Energy: ω dX/dω is the sum of the reactive powers' sizes, Σ|X_k||i_k|² for 1 A.
    v = voltages(network, frequency)
    stored = sum(abs(v[p.a] - v[p.b]) ** 2 * abs(admittance(p, 1j * omega)) for p in lumped(network))
    assert_allclose(rate * omega, stored, rtol=1e-8)


@given(st.data(), networks(LUMPED, source="current", decades=4), frequencies(4))
def test_input_impedance_against_change_of_one_part(
    data: st.DataObject, network: Network, frequency: float
) -> None:
    """∂Zin/∂Zk = (ik/I)² (Cohn 1950). For a finite change it holds exactly with the product of the part's
    currents before and after (Tellegen), so nothing is approximated: part k gets double its value."""
    part = data.draw(st.sampled_from(lumped(network)))
    changed = replace(part, value=replace(part.value, nominal=2 * part.value.nominal))
    other = replace(network, parts=tuple(changed if p is part else p for p in network.parts))
    before, after = voltages(network, frequency), voltages(other, frequency)
    s = 1j * TAU * frequency
    currents = [(v[part.a] - v[part.b]) * admittance(p, s) for v, p in ((before, part), (after, changed))]
    difference = (1 / admittance(changed, s) - 1 / admittance(part, s)) * currents[0] * currents[1]
    assert abs(after[1] - before[1] - difference) <= 1e-9 * max(abs(after[1]), abs(before[1]))


@given(networks(("resistor",), source="current", max_extra=8))
def test_foster_sum_rule(network: Network) -> None:
    """Σ effective/own resistance over the parts is nodes - 1 (Foster 1949)."""
    parts = lumped(network)
    total = 0.0
    for part in parts:
        response = Response(
            replace(
                network,
                parts=(*parts, CurrentSource("port1", part.a, part.b, replace(part.value, nominal=1.0))),
            )
        )
        a, b = (response.node([1.0], network.nodes[n]).values[0] if n else 0.0 for n in (part.a, part.b))
        total += (a - b).real / part.value.nominal
    assert_allclose(total, len(network.nodes) - 1, rtol=1e-8)


@given(networks(PASSIVE, source="current", ports=2), frequencies())
def test_nyquist_at_every_port(network: Network, frequency: float) -> None:
    """One-sided density 4kT Re Z at each port of a passive network at one temperature (Nyquist 1928)."""
    network = replace(network, temperature=310.0)
    response = Response(network)
    for i, z in enumerate(impedances(network, frequency, 2).diagonal(), 1):
        density = response.noise_density([frequency], f"at{i}")[0]
        assert abs(density**2 - 4 * boltzmann * 310.0 * z.real) <= 4 * boltzmann * 310.0 * (
            1e-8 * z.real + 1e-11 * abs(z)
        )
