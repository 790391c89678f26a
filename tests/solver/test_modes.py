"""Natural frequencies against closed forms and scipy's zeros of polynomials."""

from __future__ import annotations

import math

import numpy as np
import pytest
from support.systems import Sketch

from nodal.solver.matrix import Term
from nodal.solver.modes import NotLumped, lightly_damped, poles, poles_near


def test_series_resonance():
    """s² L C + s R C + 1 = 0 (textbook)."""
    net = Sketch(3)
    net.source(1, 0)
    net.resistor(1, 2, 3.0)
    net.inductor(2, 3, 1e-9)
    net.capacitor(3, 0, 2e-12)
    found = poles(net.system())
    expected = np.roots([2e-21, 6e-12, 1.0])
    np.testing.assert_allclose(np.sort_complex(found), np.sort_complex(expected), rtol=1e-13)
    np.testing.assert_allclose(lightly_damped(found), [1 / math.sqrt(2e-21)], rtol=1e-13)


def test_butterworth_ladder():
    """Poles of the order-five filter lie on the unit circle (Matthaei, Young, Jones 1964, 4.05)."""
    net = Sketch(4)
    net.source(1, 0)
    g = [2 * math.sin((2 * k - 1) * math.pi / 10) for k in range(1, 6)]
    net.resistor(1, 2, 1.0)
    net.capacitor(2, 0, g[0])
    net.inductor(2, 3, g[1])
    net.capacitor(3, 0, g[2])
    net.inductor(3, 4, g[3])
    net.capacitor(4, 0, g[4])
    net.resistor(4, 0, 1.0)
    expected = np.exp(1j * math.pi * (0.5 + (2 * np.arange(1, 6) - 1) / 10))
    np.testing.assert_allclose(np.sort_complex(poles(net.system())), np.sort_complex(expected), rtol=1e-12)


def test_poles_ten_decades_apart():
    net = Sketch(3)
    net.source(1, 0)
    net.resistor(1, 2, 1.0)
    net.capacitor(2, 0, 1e-12)
    net.resistor(2, 3, 1e6)
    net.capacitor(3, 0, 1e-8)
    a, b = 1e-12 * 1e-8 * 1.0 * 1e6, 1e-8 * 1e6 + (1e-12 + 1e-8) * 1.0
    slow = -2 / (b + math.sqrt(b * b - 4 * a))  # the small root without cancellation
    np.testing.assert_allclose(poles(net.system()).real, [slow, 1 / (a * slow)], rtol=1e-10)


def test_capacitors_in_a_loop_with_a_source_and_an_inductive_cut_add_no_poles():
    net = Sketch(3)
    net.source(1, 0)
    net.capacitor(1, 2, 1e-9)
    net.capacitor(2, 0, 3e-9)
    net.resistor(2, 0, 1e3)
    net.inductor(2, 3, 1e-6)
    net.inductor(3, 0, 2e-6)
    expected = np.roots([4e-9 * 3e-6, 3e-6 / 1e3, 1.0])
    np.testing.assert_allclose(np.sort_complex(poles(net.system())), np.sort_complex(expected), rtol=1e-12)


def test_without_storage_there_are_none():
    net = Sketch(1)
    net.resistor(1, 0, 50.0)
    assert poles(net.system()).shape == (0,)


class SquareRoot:
    """√s, as the admittance of a long line of R and C is."""

    count = 1

    def evaluate(self, s, arithmetic):
        return (arithmetic.sqrt(s),)


def test_functions_are_refused_or_left_out():
    """Without the function R C is left, with its pole at -1/(R C) (textbook)."""
    net = Sketch(1)
    net.capacitor(1, 0, 1e-9)
    net.resistor(1, 0, 1e3)
    net.functions.append(SquareRoot())
    net.terms.append(Term(((0, 1.0),), ((0, 1.0),), f=0))
    with pytest.raises(NotLumped):
        poles(net.system())
    np.testing.assert_allclose(poles(net.system(), ignoring_functions=True), [-1e6], rtol=1e-13)


def test_where_functions_alone_hold_the_equations_none_are_left():
    net = Sketch(2)
    net.capacitor(1, 0, 1e-9)
    net.resistor(1, 0, 1e3)
    net.resistor(2, 0, 1e3)
    net.line(1, 2, lambda s, arithmetic: 1 + s * 1e-7, lambda s, arithmetic: s * 1e-10)
    assert poles(net.system(), ignoring_functions=True).shape == (0,)


def test_poles_near_shifts_of_a_long_ladder():
    """Ladder of N sections L, C, driven at one end and open at the other: ω = 2/√(LC) sin((2k-1)π/(4N+2)).

    Textbook (the chain of beads, one end fixed, one free); value from memory.
    """
    count, henries, farads = 300, 2e-7, 1e-11
    net = Sketch(count + 1)
    net.source(1, 0)
    for k in range(1, count + 1):
        net.inductor(k, k + 1, henries)
        net.capacitor(k + 1, 0, farads)
    k = np.arange(1, count + 1)
    expected = 2 / math.sqrt(henries * farads) * np.sin((2 * k - 1) * math.pi / (4 * count + 2))
    shifts = 1j * np.geomspace(expected[0], expected[-1], 12) * (1 + 0.01j)
    found = poles_near(net.system(), shifts)
    found = found[found.imag > 0]
    assert len(np.unique(np.round(found.imag / expected[0], 3))) >= 24
    for s in found:
        assert abs(s.real) < 1e-6 * abs(s)
        assert np.abs(expected / s.imag - 1).min() < 1e-6
