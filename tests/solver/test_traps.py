"""Networks in which an ordinary solution of the nodal equations is wrong, each against 80-digit dense LU.

The list is the project's own (common practice, no source); the reference shares nothing with the solver but
the terms.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from support.systems import Sketch, reference, worst_error

from nodal.solver.limit import limit
from nodal.solver.sweep import solve

OMEGA = 2j * math.pi


def check(sketch, source, outputs, frequencies, bound=1e-10):
    system = sketch.system()
    s = OMEGA * np.asarray(frequencies, dtype=float)
    solution = solve(system, s, [source], outputs)
    for k, point in enumerate(s):
        expected = reference(system, complex(point), source, outputs)
        assert worst_error(solution.values[0, :, k], expected) <= bound, frequencies[k]
        assert solution.error[0, :, k].max() <= bound
    return solution


def floating_shunt(leak, shunt=5e-3):
    """A source drives the shunt's floating circuit through a faint leak; the shunt's drop is read."""
    net = Sketch(4)
    drive = net.source(1, 0)
    net.resistor(1, 2, leak)
    net.resistor(2, 3, shunt)
    net.resistor(3, 0, leak)
    net.resistor(3, 4, 50.0)
    net.resistor(4, 2, 1e3)
    return net, {drive: 1.0}


@pytest.mark.parametrize("leak", [10e9, 1e14, 1e18])
def test_floating_shunt_with_a_faint_leak(leak):
    net, source = floating_shunt(leak)
    check(net, source, [{1: 1.0}, {1: 1.0, 2: -1.0}, {3: 1.0, 2: -1.0}], [1.0, 1e3, 1e9])


@pytest.mark.parametrize("shunt_first", [True, False])
@pytest.mark.parametrize("leak", [10e9, 1e15])
def test_current_through_a_floating_shunt(leak, shunt_first):
    """The large current must not hide the faint leaks that hold the shunt's common voltage."""
    net = Sketch(3)
    if shunt_first:
        net.resistor(1, 2, 5e-3)
    net.resistor(1, 0, leak)
    net.resistor(2, 0, 2 * leak)
    net.capacitor(1, 3, 1e-15)
    net.resistor(3, 0, 1e6)
    if not shunt_first:
        net.resistor(1, 2, 5e-3)
    check(net, {0: 1.0, 1: -1.0}, [{0: 1.0}, {1: 1.0}, {0: 1.0, 1: -1.0}, {2: 1.0}], [1e-3, 50.0, 1e6])


def test_islands_held_by_capacitors_alone():
    net = Sketch(5)
    drive = net.source(1, 0)
    net.capacitor(1, 2, 1e-12)
    net.resistor(2, 3, 1e-3)
    net.capacitor(3, 4, 2e-12)
    net.resistor(4, 5, 10e6)
    net.capacitor(5, 0, 3e-9)
    outputs = [{1: 1.0}, {2: 1.0, 1: -1.0}, {4: 1.0}]
    check(net, {drive: 1.0}, outputs, [1e-6, 1.0, 1e6, 1e12, 1e15])
    values, orders = limit(net.system(), [{drive: 1.0}], outputs)
    series = 1 / (1 / 1e-12 + 1 / 2e-12 + 1 / 3e-9)  # charge balance: capacitors in series
    np.testing.assert_allclose(values[0], [1 - series / 1e-12, 0.0, series / 3e-9], rtol=1e-14, atol=0)
    np.testing.assert_array_equal(orders[0], [0.0, 1.0, 0.0])


def test_loops_of_inductors():
    net = Sketch(3)
    drive = net.source(1, 0)
    net.resistor(1, 2, 50.0)
    first = net.inductor(2, 3, 1e-6)
    second = net.inductor(2, 3, 3e-6)
    third = net.inductor(3, 0, 1e-9)
    outputs = [{first: 1.0}, {second: 1.0}, {third: 1.0}, {2: 1.0}]
    check(net, {drive: 1.0}, outputs, [1e-6, 1e-3, 1e3, 1e9, 1e15])
    values, orders = limit(net.system(), [{drive: 1.0}], outputs)
    # Flux balance: equal flux linkage shares the 20 mA in the inverse ratio of the inductances.
    np.testing.assert_allclose(values[0], [0.015, 0.005, 0.02, 0.0], rtol=1e-14, atol=0)
    np.testing.assert_array_equal(orders[0], [0.0, 0.0, 0.0, 1.0])


def coax(net, a, b, metres, per_metre=(0.0, 250e-9, 0.0, 100e-12)):
    r, inductance, g, c = (metres * v for v in per_metre)
    net.line(a, b, lambda s, arithmetic: r + s * inductance, lambda s, arithmetic: g + s * c)


@pytest.mark.parametrize("halves", [1, 2, 3, 10, 101])
def test_half_wave_lines(halves):
    """At n half waves a lossless line gives its load's voltage times (-1)^n (textbook)."""
    net = Sketch(2)
    drive = net.source(1, 0)
    coax(net, 1, 2, 1.0)
    net.resistor(2, 0, 75.0)
    delay = math.sqrt(250e-9 * 100e-12)
    at = halves / (2 * delay)
    solution = check(net, {drive: 1.0}, [{1: 1.0}], [at, at * (1 + 1e-9), at / 1.7])
    assert abs(solution.values[0, 0, 0] - (-1) ** halves) < 1e-10


@pytest.mark.parametrize("resistance", [1e-3, 1e3, 1e5, 1e6])
def test_many_nepers(resistance):
    net = Sketch(3)
    drive = net.source(1, 0)
    net.resistor(1, 2, 50.0)
    coax(net, 2, 3, 1.0, (resistance, 250e-9, 1e-9, 100e-12))
    net.resistor(3, 0, 1e6)
    check(net, {drive: 1.0}, [{1: 1.0}, {2: 1.0}], [1.0, 1e3, 1e6, 1e8], bound=1e-9)


def test_line_at_zero_frequency():
    net = Sketch(2)
    coax(net, 1, 2, 2.0, (0.5, 250e-9, 1e-6, 100e-12))
    net.resistor(2, 0, 50.0)
    values, orders = limit(net.system(), [{0: 1.0}], [{0: 1.0}, {1: 1.0}])
    gamma, wave = 2 * math.sqrt(0.5e-6), math.sqrt(0.5 / 1e-6)
    # Pozar, Microwave Engineering, chapter 2
    expected = wave * (50 + wave * math.tanh(gamma)) / (wave + 50 * math.tanh(gamma))
    assert values[0, 0] == pytest.approx(expected, rel=1e-13)
    assert orders[0, 0] == 0


def test_open_lossless_line_has_an_infinite_impedance_at_zero_frequency():
    net = Sketch(2)
    coax(net, 1, 2, 1.0)
    values, orders = limit(net.system(), [{0: 1.0}, {0: -1.0}], [{0: 1.0}])
    np.testing.assert_array_equal(values, [[math.inf], [-math.inf]])
    np.testing.assert_array_equal(orders, [[-1.0], [-1.0]])


@pytest.mark.parametrize("leakage", [0.0, 1e-15])
def test_fully_coupled_windings(leakage):
    """k = 1: the ratio is that of the turns, at every frequency."""
    net = Sketch(3)
    drive = net.source(1, 0)
    net.resistor(1, 2, 1e-2)
    first, second = net.inductor(2, 0, 1e-3), net.inductor(3, 0, 4e-3)
    net.coupling(first, second, 2e-3 * (1 - leakage))
    net.resistor(3, 0, 1e6)
    outputs = [{2: 1.0}, {1: 1.0}, {first: 1.0}]
    check(net, {drive: 1.0}, outputs, [1e-3, 50.0, 1e6, 1e12])
    values, _ = limit(net.system(), [{drive: 1.0}], outputs)
    np.testing.assert_allclose(values[0], [0.0, 0.0, 100.0], rtol=1e-14, atol=0)


def twin_t(unit=1.0):
    net = Sketch(4)
    drive = net.source(1, 0)
    net.resistor(1, 2, 1.0)
    net.resistor(2, 4, 1.0)
    net.capacitor(2, 0, 2 * unit)
    net.capacitor(1, 3, unit)
    net.capacitor(3, 4, unit)
    net.resistor(3, 0, 0.5)
    return net, drive


def test_twin_t_null():
    """(s² + 1)/(s² + 4 s + 1), open load, RC = 1 (Tuttle 1940): sharp beside the null, exactly zero on it."""
    net, drive = twin_t()
    omega = np.array([0.5, 2.0, 1 + 1e-6, 1 - 1e-9, 1.0])
    solution = solve(net.system(), 1j * omega, [{drive: 1.0}], [{3: 1.0}])
    s = 1j * omega
    expected = (s * s + 1) / (s * s + 4 * s + 1)
    np.testing.assert_allclose(solution.values[0, 0, :2], expected[:2], rtol=1e-14)
    for k in range(5):
        exact = reference(net.system(), complex(s[k]), {drive: 1.0}, [{3: 1.0}])
        if k < 4:
            assert worst_error(solution.values[0, :, k], exact) <= 1e-10
    assert solution.values[0, 0, 4] == 0
    assert solution.error[0, 0, 4] == 0


def test_ten_million_to_one():
    """1 mΩ source, 10 GΩ probe: the disturbance -Zs/(Zs + Zc) driven as such is right to 1e-9 of itself."""
    net = Sketch(2)
    drive = net.source(1, 0)
    net.resistor(1, 2, 1e-3)
    net.resistor(2, 0, 10e9)
    s = OMEGA * np.geomspace(1.0, 1e9, 5)
    solution = solve(net.system(), s, [{1: -1e-10}, {drive: 1.0}], [{1: 1.0}, {1: 1.0, 0: -1.0}])
    exact = -1e-3 / (1e-3 + 10e9)
    np.testing.assert_allclose(solution.values[0, 0], exact, rtol=1e-12)
    np.testing.assert_allclose(solution.values[1, 1], exact, rtol=1e-12)  # even as a difference of unknowns


def test_a_balanced_bridge_is_exactly_zero():
    net = Sketch(3)
    drive = net.source(1, 0)
    for node in (2, 3):
        net.resistor(1, node, 3e3)
        net.resistor(node, 0, 7e3)
        net.capacitor(node, 0, 1e-12)
    solution = solve(net.system(), OMEGA * np.geomspace(1e3, 1e9, 4), [{drive: 1.0}], [{1: 1.0, 2: -1.0}])
    np.testing.assert_array_equal(solution.values, 0)
    np.testing.assert_array_equal(solution.error, 0)


def test_a_difference_fifty_digits_below_its_voltages():
    """Small where fifty digits are not enough, but no zero: the current of C2 through R (closed form)."""
    net = Sketch(2)
    net.capacitor(1, 0, 1e-9)
    net.resistor(1, 2, 1e-21)
    net.capacitor(2, 0, 1e-25)
    solution = solve(net.system(), OMEGA * np.array([1e-6, 1e-5, 1e-4]), [{0: 1.0}], [{1: 1.0, 0: -1.0}])
    np.testing.assert_allclose(solution.values[0, 0], -1e-21 * 1e-25 / 1e-9, rtol=1e-12)
    assert solution.error.max() <= 1e-11


def test_a_difference_beyond_the_digits_of_its_pair():
    """Nodes alike to 22 digits at the top of a plan for 16 decades: flagged or right (many digits)."""
    net = Sketch(12)
    net.inductor(1, 0, 4.465363456351825e-05)
    net.inductor(2, 1, 0.1595823594175724)
    net.resistor(3, 2, 1 / 2.1265698438742196e-05)
    net.capacitor(4, 0, 1.1979088101938787e-15)
    net.inductor(5, 2, 0.0057952329831471566)
    net.resistor(6, 0, 1 / 4.155492607785581)
    net.inductor(7, 0, 2.9055533723678406e-06)
    net.inductor(8, 7, 0.022205694645991085)
    net.capacitor(9, 1, 5.175444985867266e-11)
    net.inductor(10, 4, 5.27146340464624e-06)
    net.capacitor(11, 2, 1.1173720719042806e-06)
    net.resistor(12, 1, 1 / 3.4257319946151917e-09)
    net.resistor(1, 6, 1 / 413.94950125271924)
    net.capacitor(5, 9, 5.7118426768831514e-05)
    net.capacitor(11, 7, 9.136558157835393e-06)
    net.capacitor(5, 12, 1.0168150903983284e-05)
    net.capacitor(5, 8, 5.371167664866411e-07)
    net.inductor(4, 2, 7.739889506946928e-07)
    net.resistor(11, 6, 1 / 52.47184396674687)
    net.resistor(9, 1, 1 / 1.1743074471910297e-07)
    net.inductor(3, 7, 0.00012511922731247145)
    system, output = net.system(), {11: 1.0, 0: -1.0}
    s = 1j * np.array([1.94823244e12, 1.91685141e-1, 4.03896773e1, 4.87955569e15])
    solution = solve(system, s, [{0: 1.0}], [output])
    for k, at in enumerate(s):
        expected = reference(system, complex(at), {0: 1.0}, [output])[0]
        off = abs(complex(solution.values[0, 0, k]) - expected) / abs(expected)
        assert off <= 1e-10 or solution.error[0, 0, k] > 1e-11
