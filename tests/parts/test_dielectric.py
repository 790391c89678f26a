"""Dielectric loss: loss angle and capacitance at 1 MHz, flatness, passivity, causality."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from nodal.parts.dielectric import Dielectric, LossyCapacitance
from nodal.solver.arithmetic import NumpyArithmetic

LOSSES = [1e-6, 1e-3, 0.02, 0.3]


def relative(loss: float, f: np.ndarray) -> np.ndarray:
    return np.asarray(Dielectric(loss).relative(2j * np.pi * f, NumpyArithmetic()))


@pytest.mark.parametrize("loss", LOSSES)
def test_at_a_megahertz_it_is_what_was_written(loss: float) -> None:
    c = relative(loss, np.array([1e6]))[0]
    assert c.real == pytest.approx(1, rel=1e-14)
    assert -c.imag / c.real == pytest.approx(loss, rel=1e-9)


@pytest.mark.parametrize("loss", LOSSES)
def test_the_loss_factor_is_flat_from_a_millihertz_to_a_terahertz(loss: float) -> None:
    c = relative(loss, np.geomspace(1e-3, 1e12, 300))
    assert np.all(np.abs(-c.imag / c.real / loss - 1) < 7e-4 * (1 + loss**2))


@pytest.mark.parametrize("loss", LOSSES)
def test_it_never_gives_energy(loss: float) -> None:
    f = np.geomspace(1e-12, 1e20, 400)
    (y,) = LossyCapacitance(1e-9, loss).evaluate(2j * np.pi * f, NumpyArithmetic())
    assert np.all(y.real > 0)


def test_real_and_imaginary_part_are_a_causal_pair() -> None:
    """Kramers and Kronig 1926-27: C'(w) - C'(inf) = (2/π) ∫ x χ''(x)/(x² - w²) dx, here over ln x about w."""
    loss, w = 0.02, 2 * np.pi * 1e6
    model = Dielectric(loss)

    def imaginary(x: float) -> float:
        return float(-np.imag(model.relative(1j * x, NumpyArithmetic())))

    def integrand(t: float) -> float:
        # x = w e^t and its mirror w e^-t: the pole at t = 0 cancels in the sum of the two.
        return (
            (imaginary(w * np.exp(t)) * np.exp(t) - imaginary(w * np.exp(-t)) * np.exp(-t)) / np.sinh(t) / 2
        )

    total, _ = quad(integrand, 1e-9, 60, limit=400, epsabs=1e-12)
    infinite = float(np.real(model.relative(1e30, NumpyArithmetic())))
    assert infinite + 2 / np.pi * total == pytest.approx(1, abs=1e-6)
