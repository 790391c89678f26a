"""Sweeps, derivatives, limits and singular systems, on random networks against 80-digit dense LU."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st
from support.systems import Sketch, reference, worst_error

from nodal.solver.limit import limit
from nodal.solver.matrix import System, Term
from nodal.solver.plan import Singular, make_plan
from nodal.solver.sweep import derivative, plan_for, solve

EPSILON = float(np.finfo(float).eps)
TWELVE_DECADES = {"resistor": (1e-4, 1e10), "capacitor": (1e-15, 1e-4), "inductor": (1e-10, 1e0)}


@st.composite
def networks(draw):
    """A connected graph of one to twelve nodes with parts of any size, driven at node 1."""
    nodes = draw(st.integers(1, 12))
    net = Sketch(nodes)
    drive = net.source(1, 0) if draw(st.booleans()) else None

    def add(a, b):
        kind = draw(st.sampled_from(sorted(TWELVE_DECADES)))
        low, high = (math.log10(v) for v in TWELVE_DECADES[kind])
        getattr(net, kind)(a, b, 10 ** draw(st.floats(low, high)))

    for node in range(1, nodes + 1):
        add(node, draw(st.integers(0, node - 1)))
    for _ in range(draw(st.integers(0, nodes))):
        a = draw(st.integers(1, nodes))
        add(a, draw(st.integers(0, nodes).filter(lambda b, a=a: b != a)))
    outputs = [{nodes - 1: 1.0}, {nodes - 1: 1.0, 0: -1.0} if nodes > 1 else {0: 1.0}]
    return net, ({0: 1.0} if drive is None else {drive: 1.0}), outputs


def sensitivity(system, s, source, output):
    """Σ|∂ ln H/∂ ln p| over the terms by differences with many digits."""
    base = reference(system, s, source, [output])[0]
    if base == 0:
        return math.inf
    total = mpmath.mpf(0)
    step = 1 + 2.0**-40
    for k, term in enumerate(system.terms):
        moved = Term(term.rows, term.cols, term.g * step, term.c * step, term.f)
        other = System(system.size, (*system.terms[:k], moved, *system.terms[k + 1 :]), system.functions)
        total += abs(reference(other, s, source, [output])[0] / base - 1) * 2**40
    return float(total)


@settings(phases=[Phase.explicit, Phase.generate])  # shrinking takes minutes at these digits
@given(networks(), st.lists(st.floats(-6, 15), min_size=1, max_size=3))
def test_random_networks(example, exponents):
    """The accuracy of the design, section 4, or flagged."""
    net, source, outputs = example
    system = net.system()
    s = 2j * math.pi * 10.0 ** np.array(exponents)
    solution = solve(system, s, [source], outputs)
    for k, point in enumerate(s):
        expected = reference(system, complex(point), source, outputs)
        for at, output in enumerate(outputs):
            if expected[at] == 0:
                parts = reference(system, complex(point), source, [{j: 1.0} for j in output])
                floor = max(abs(complex(v)) for v in parts)
                assert abs(solution.values[0, at, k]) <= 1000 * EPSILON * floor
                continue
            error = worst_error(solution.values[0, at : at + 1, k], expected[at : at + 1])
            if error > 1e-10 and solution.error[0, at, k] <= 1e-10:
                bound = 1000 * EPSILON * sensitivity(system, complex(point), source, output)
                assert error <= bound, (exponents[k], output)


@settings(phases=[Phase.explicit, Phase.generate])  # shrinking takes minutes at these digits
@given(networks())
def test_random_limits(example):
    """The value at a frequency far below every corner tends to the limit, in its order."""
    net, source, outputs = example
    system = net.system()
    values, orders = limit(system, [source], outputs)
    arithmetic = mpmath.mp.clone()
    arithmetic.dps = 900
    for k, output in enumerate(outputs):
        near, nearer = (
            reference(system, arithmetic.mpf(10) ** e, source, [output], digits=900)[0] for e in (-90, -91)
        )
        if near == 0:
            assert values[0, k] == 0
        else:
            order = float(arithmetic.log10(abs(near / nearer)))
            assert orders[0, k] == pytest.approx(order, abs=1e-9)
            if orders[0, k] == 0:
                assert values[0, k] == pytest.approx(float(nearer), rel=1e-14)


@pytest.mark.parametrize("sections", [3, 40])
def test_ladder_at_extreme_values(sections):
    random = np.random.default_rng(sections)
    net = Sketch(sections + 1)
    drive = net.source(1, 0)
    for k in range(1, sections + 1):
        net.resistor(k, k + 1, 10 ** random.uniform(-3, 9))
        net.capacitor(k + 1, 0, 10 ** random.uniform(-15, -6))
        if k % 3 == 0:
            net.inductor(k + 1, 0, 10 ** random.uniform(-9, -3))
    system, outputs = net.system(), [{sections: 1.0}, {1: 1.0}]
    s = 2j * math.pi * np.array([1e-6, 1.0, 1e5])
    solution = solve(system, s, [{drive: 1.0}], outputs)
    for k, point in enumerate(s):
        expected = reference(system, complex(point), {drive: 1.0}, outputs, digits=120)
        for at in range(2):
            if abs(expected[at]) > 1e-290:
                assert worst_error(solution.values[0, at : at + 1, k], expected[at : at + 1]) < 1e-10


def low_pass():
    net = Sketch(2)
    drive = net.source(1, 0)
    net.resistor(1, 2, 1e3)
    net.capacitor(2, 0, 1e-9)
    return net.system(), drive


def test_shapes_and_several_sources():
    system, drive = low_pass()
    s = 2j * math.pi * np.geomspace(1e3, 1e7, 2000)
    amplitude = np.linspace(1, 2, 2000)
    solution = solve(system, s, [{drive: 1.0}, {drive: amplitude}, {1: 1e-3}], [{1: 1.0}, {0: 1.0, 1: -1.0}])
    assert solution.values.shape == solution.error.shape == (3, 2, 2000)
    h = 1 / (1 + s * 1e-6)
    np.testing.assert_allclose(solution.values[0, 0], h, rtol=1e-14)
    np.testing.assert_allclose(solution.values[1, 0], h * amplitude, rtol=1e-14)
    np.testing.assert_allclose(solution.values[2, 0], h, rtol=1e-14)
    np.testing.assert_allclose(solution.values[0, 1], 1 - h, rtol=1e-11)
    assert solution.refined.shape == (2000,)
    assert solution.extended == 0


def test_adjoint_gives_the_same_transfer():
    system, drive = low_pass()
    s = 2j * math.pi * np.array([1e5])
    forward = solve(system, s, [{drive: 1.0}], [{1: 1.0}]).values
    backward = solve(system.transposed(), s, [{1: 1.0}], [{drive: 1.0}]).values
    np.testing.assert_allclose(forward, backward, rtol=1e-14)


def test_derivative_of_a_pole_and_of_a_line():
    system, drive = low_pass()
    s = 2j * math.pi * np.geomspace(1e-3, 1e9, 7)
    value, slope = derivative(system, s, [{drive: 1.0}], [{1: 1.0}])
    np.testing.assert_allclose(value.values[0, 0], 1 / (1 + s * 1e-6), rtol=1e-14)
    np.testing.assert_allclose(slope.values[0, 0], -1e-6 / (1 + s * 1e-6) ** 2, rtol=1e-13)
    assert slope.error.max() <= 1e-11

    net = Sketch(3)
    drive = net.source(1, 0)
    net.resistor(1, 2, 50.0)
    net.line(2, 3, lambda s, arithmetic: s * 5e-8, lambda s, arithmetic: s * 2e-11)  # 50 Ω, 1 ns
    net.resistor(3, 0, 50.0)
    value, slope = derivative(net.system(), s, [{drive: 1.0}], [{2: 1.0}])
    delayed = 0.5 * np.exp(-s * 1e-9)  # a matched line only delays (textbook)
    np.testing.assert_allclose(value.values[0, 0], delayed, rtol=1e-13)
    np.testing.assert_allclose(slope.values[0, 0], -1e-9 * delayed, rtol=1e-12)


def test_a_plan_serves_other_values_of_the_same_structure():
    system, drive = low_pass()
    plan = plan_for(system, [1j])
    terms = tuple(Term(t.rows, t.cols, t.g, t.c * 5, t.f) for t in system.terms)
    s = 1j * np.array([1e6])
    solution = solve(System(system.size, terms), s, [{drive: 1.0}], [{1: 1.0}], plan)
    np.testing.assert_allclose(solution.values[0, 0], 1 / (1 + s * 5e-6), rtol=1e-14)
    with pytest.raises(ValueError, match="structure"):
        solve(System(system.size, terms[:-1]), s, [{drive: 1.0}], [{1: 1.0}], plan)


def test_a_poor_plan_is_replaced():
    """A plan made where the parts weigh quite differently still ends in right answers."""
    net = Sketch(6)
    drive = net.source(1, 0)
    for k in range(1, 6):
        net.inductor(k, k + 1, 1e-6)
        net.capacitor(k, k + 1, 1e-12)
        net.capacitor(k + 1, 0, 1e-9)
    net.resistor(6, 0, 1e6)
    plan = make_plan(net.system(), [1e-6j])
    s = 2j * math.pi * np.array([1e3, 1e6, 1e12])
    solution = solve(net.system(), s, [{drive: 1.0}], [{5: 1.0}], plan)
    for k, point in enumerate(s):
        expected = reference(net.system(), complex(point), {drive: 1.0}, [{5: 1.0}])
        assert worst_error(solution.values[0, :, k], expected) < 1e-10


@pytest.mark.parametrize(
    "call",
    [
        lambda system: solve(system, [1j, 2j], [{1: 1.0}], [{0: 1.0}, {2: 1.0}]),
        lambda system: limit(system, [{1: 1.0}], [{0: 1.0}]),
    ],
)
def test_a_floating_island_is_named(call):
    net = Sketch(5)
    net.resistor(1, 0, 1.0)
    net.resistor(2, 3, 0.3)
    net.capacitor(3, 4, 1e-9)
    net.resistor(2, 4, 0.7)
    net.resistor(3, 4, 0.9)
    net.resistor(3, 5, 1.1)
    net.resistor(2, 5, 1.3)
    with pytest.raises(Singular) as caught:
        call(net.system())
    assert sorted(caught.value.unknowns) == [1, 2, 3, 4]


def test_a_loop_of_ideal_sources_is_named():
    net = Sketch(2)
    first, second = net.source(1, 0), net.source(1, 0)
    net.resistor(1, 2, 1.0)
    net.resistor(2, 0, 1.0)
    with pytest.raises(Singular) as caught:
        solve(net.system(), [1j], [{first: 1.0, second: 0.5}], [{1: 1.0}])
    assert sorted(caught.value.unknowns) == [first, second]


def test_an_unknown_that_nothing_touches_is_named():
    system = System(2, (Term(((0, 1.0),), ((0, 1.0),), g=1.0),))
    with pytest.raises(Singular) as caught:
        make_plan(system, [1j])
    assert caught.value.unknowns == (1,)


def test_a_lossless_resonance_met_exactly():
    net = Sketch(1)
    net.capacitor(1, 0, 1.0)
    net.inductor(1, 0, 1.0)
    solution = solve(net.system(), [1j, 2j], [{0: 1.0}], [{0: 1.0}])
    assert np.isinf(solution.values[0, 0, 0].real)
    assert np.isinf(solution.error[0, 0, 0])
    np.testing.assert_allclose(solution.values[0, 0, 1], 1 / (2j + 1 / 2j), rtol=1e-15)


@pytest.mark.parametrize("s", [[0j], [[1j]], [complex("nan")], [complex("inf")]])
def test_points_that_cannot_be_solved_for(s):
    system, drive = low_pass()
    with pytest.raises(ValueError, match="s must"):
        solve(system, s, [{drive: 1.0}], [{1: 1.0}])


def test_indices_outside_the_system():
    with pytest.raises(IndexError):
        solve(System(1, (Term(((1, 1.0),), ((0, 1.0),), g=1.0),)), [1j], [{0: 1.0}], [{0: 1.0}])


def test_a_function_beside_constants_in_one_equation():
    """1/(1/R + √s): the correction must take the function with its sign (closed form)."""

    class SquareRoot:
        count = 1

        def evaluate(self, s, arithmetic):
            return (arithmetic.sqrt(s),)

    node = ((0, 1.0),)
    system = System(1, (Term(node, node, g=1 / 50), Term(node, node, f=0)), (SquareRoot(),))
    s = 2j * math.pi * np.geomspace(1e-9, 1e9, 400)
    solution = solve(system, s, [{0: 1.0}], [{0: 1.0}])
    np.testing.assert_allclose(solution.values[0, 0], 1 / (1 / 50 + np.sqrt(s)), rtol=1e-14)
    assert solution.error.max() <= 1e-13
    assert not solution.refined.any()
