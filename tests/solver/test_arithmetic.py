"""Each function of each arithmetic against mpmath with 60 digits, slopes against its numerical derivative."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from nodal.solver.arithmetic import Jet, JetArithmetic, MpArithmetic, NumpyArithmetic

POINTS = [1e-9j, -1e-3 + 1e-8j, 0.5 + 2j, -3 - 40j, -1e-12 - 1e-12j, 1e6j, 2.0 + 0j]

FUNCTIONS = {
    "sqrt": (lambda a, x: a.sqrt(x), lambda x: mpmath.sqrt(x)),
    "exp": (lambda a, x: a.exp(x), lambda x: mpmath.exp(x)),
    "expm1": (lambda a, x: a.expm1(x), lambda x: mpmath.expm1(x)),
    "power": (lambda a, x: a.power(x, 0.37), lambda x: mpmath.power(x, 0.37)),
    "rational": (
        lambda a, x: 2 / (1 - x * x) + (3 - x) / x - (-x),
        lambda x: 2 / (1 - x * x) + (3 - x) / x + x,
    ),
    "chosen": (
        lambda a, x: a.select(a.real(x) > 0.25, x * x, 3 * x) + a.select(a.real(x) > 0.25, 1.0, 2.0),
        lambda x: x * x + 1 if mpmath.re(x) > 0.25 else 3 * x + 2,
    ),
}


@pytest.fixture(autouse=True)
def _digits():
    with mpmath.workdps(60):
        yield


def close(value, expected, tolerance):
    assert abs(mpmath.mpmathify(value) - expected) <= tolerance * abs(expected)


@pytest.mark.parametrize("name", FUNCTIONS)
@pytest.mark.parametrize("point", POINTS)
def test_values(name, point):
    formula, expected = FUNCTIONS[name]
    exact = expected(mpmath.mpc(point))
    double = complex(formula(NumpyArithmetic(), np.array([point]))[0])
    close(double, exact, 2e-15 * max(1.0, abs(point.imag) * 1e-1))
    many = MpArithmetic(50)
    close(mpmath.mpmathify(formula(many, many.number(point))), exact, mpmath.mpf(10) ** -45)


@pytest.mark.parametrize("name", FUNCTIONS)
@pytest.mark.parametrize("point", POINTS)
def test_slopes(name, point):
    formula, expected = FUNCTIONS[name]
    exact = mpmath.diff(expected, mpmath.mpc(point), h=abs(mpmath.mpf(abs(point))) * mpmath.mpf(10) ** -20)
    jet = formula(JetArithmetic(NumpyArithmetic()), Jet(np.array([point]), np.array([1.0 + 0j])))
    close(complex(jet.slope[0]), exact, 1e-14 * max(1.0, abs(point.imag) * 1e-1))
    many = MpArithmetic(50)
    jet = formula(JetArithmetic(many), Jet(many.number(point), many.number(1)))
    close(mpmath.mpmathify(jet.slope), exact, mpmath.mpf(10) ** -15)


def test_constants_have_no_slope():
    arithmetic = JetArithmetic(NumpyArithmetic())
    assert arithmetic.sqrt(4.0) == 2.0
    assert arithmetic.exp(0.0) == 1.0
    assert arithmetic.expm1(0.0) == 0.0
    assert arithmetic.power(2.0, 2.0) == 4.0
    assert arithmetic.real(3.0) == 3.0


def test_arrays_with_jets():
    jet = np.array([1.0, 2.0]) * Jet(np.array([3.0, 4.0]), np.array([1.0, 1.0]))
    np.testing.assert_array_equal(jet.value, [3.0, 8.0])
    np.testing.assert_array_equal(jet.slope, [1.0, 2.0])


def test_global_precision_is_left_alone():
    before = mpmath.mp.dps
    assert MpArithmetic(300).digits == 300
    assert mpmath.mp.dps == before
    assert abs(MpArithmetic(300).context.mpf(1) / 3 * 3 - 1) < mpmath.mpf(10) ** -299
