"""Figures of contacts and of noise against closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.constants
from support.analytic import Analytic, call, close

from nodal.figures import evaluate, extreme
from nodal.network import SweepGrid

R, C = 10e6, 9.5e-12


def parallel(s):
    return R / (1 + s * R * C)


@pytest.mark.parametrize("frequency", [1.0, 1.7e3, 1e6, 1e9])
def test_parallel_equivalents_of_a_parallel_network_are_its_parts(frequency):
    response = Analytic(impedance={"touch": parallel})
    assert evaluate(call("resistance", "touch"), response, at=frequency).value == close(R, rel=1e-9)
    assert evaluate(call("capacitance", "touch"), response, at=frequency).value == close(C, rel=1e-9)
    expected = R / math.hypot(1, 2 * math.pi * frequency * R * C)
    found = evaluate(call("impedance", "touch"), response, at=frequency)
    assert found.value == close(expected, rel=1e-14)


def test_series_resistance_and_capacitance_as_parallel_equivalents():
    """R_p = R (1 + 1/(ωRC)²), C_p = C/(1 + (ωRC)²): textbook."""
    r, c, f = 50.0, 10e-12, 1e8
    x = 2 * math.pi * f * r * c
    response = Analytic(impedance={"touch": lambda s: r + 1 / (s * c)})
    assert evaluate(call("resistance", "touch"), response, at=f).value == close(r * (1 + x**-2))
    assert evaluate(call("capacitance", "touch"), response, at=f).value == close(c / (1 + x**2))


def test_an_open_contact_has_infinite_resistance():
    response = Analytic(impedance={"touch": lambda s: np.full(np.shape(s), np.inf + 0j)})
    assert evaluate(call("impedance", "touch"), response, at=1.0).value == math.inf
    assert evaluate(call("resistance", "touch"), response, at=1.0).value == math.inf


def test_the_least_impedance_of_a_series_resonance_is_its_resistance():
    r, inductance, c = 1e-3, 100e-9, 10e-12
    f0 = 1 / (2 * math.pi * math.sqrt(inductance * c))
    response = Analytic(
        impedance={"touch": lambda s: r + s * inductance + 1 / (s * c)},
        poles=(f0,),
        grid=SweepGrid(1e3, 1e9, 20.0),
    )
    found = extreme(call("impedance", "touch"), response, which="min")
    assert found.value == close(r, rel=1e-9)
    assert found.frequency == close(f0, rel=1e-8)


def test_a_tiny_disturbance_keeps_its_digits():
    """z = -Zs/(Zs + Zc) for 1 mΩ against 10 GΩ: |1 + z| - 1 = z."""
    z = -1e-3 / (1e-3 + 1e10)
    response = Analytic(change={"touch": lambda s: z + 0 * s})
    assert evaluate(call("disturbance", "touch"), response, at=1e3).value == close(z, rel=1e-12)
    quadrature = Analytic(change={"touch": lambda s: 1e-8j + 0 * s})
    assert evaluate(call("disturbance", "touch"), quadrature, at=1e3).value == close(5e-17, rel=1e-12)


def test_error_compares_the_display_with_what_was_there():
    response = Analytic(
        {"screen": lambda s: 0.98 * 0.5 + 0 * s},
        undisturbed={"touch": lambda s: -0.5 + 0 * s},
        loaded={"other": lambda s: 1 + 0 * s},
    )
    found = evaluate(call("error", "screen", "touch"), response, at=1.0)
    assert found.value == close(-0.02, rel=1e-14)
    message = evaluate(call("error", "screen"), response, at=1.0).message
    assert "needs a contact" in message
    assert "touch" in message
    assert "other" in message


def test_error_of_an_ammeter_against_volts_is_refused():
    one = {"touch": lambda s: 1 + 0 * s}
    response = Analytic({"current": lambda s: 1 + 0 * s}, undisturbed=one, unit="A")
    assert "shows A" in evaluate(call("error", "current"), response, at=1.0).message


def test_noise_of_a_resistor_and_a_capacitor_is_kt_over_c():
    """√(kT/C) over all frequencies (64.3579599 µV for 300 K, 1 pF); here over 1 mHz to 10⁶ corners, (2/π)
    atan.
    """
    temperature, r, c = 300.0, 1e6, 1e-12
    fc = 1 / (2 * math.pi * r * c)
    kt = scipy.constants.k * temperature

    def density(f):
        return np.sqrt(4 * kt * r / (1 + (f / fc) ** 2))

    response = Analytic({"screen": lambda s: 1 + 0 * s}, density=density)
    found = evaluate(call("noise", "screen"), response, span=(1e-3, 1e6 * fc))
    missing = 2 / math.pi * (math.atan(1e6) - math.atan(1e-3 / fc))
    assert found.value == close(math.sqrt(kt / c * missing), rel=1e-9)
    assert found.value == close(64.3579599e-6, rel=1e-6)
    assert found.unit == "V"
    whole = evaluate(call("noise", "screen"), response, span=(0.0, 1e6 * fc))
    assert whole.value == close(math.sqrt(kt / c * 2 / math.pi * math.atan(1e6)), rel=1e-9)
    at_corner = evaluate(call("noise_density", "screen"), response, at=fc)
    assert at_corner.value == close(math.sqrt(2 * kt * r), rel=1e-14)
    assert at_corner.unit == "V/√Hz"


def test_noise_through_a_sharp_resonance():
    """∫ |H|² df = (π/2) Q f0 for 1/(1 + s/(Qω0) + (s/ω0)²): noise bandwidth of a second-order low-pass,
    textbook.
    """
    f0, q = 1e5, 1e4

    def density(f):
        u = f / f0
        return 1 / np.sqrt((1 - u * u) ** 2 + (u / q) ** 2)

    response = Analytic({"screen": lambda s: 1 + 0 * s}, density=density, poles=(f0,))
    found = evaluate(call("noise", "screen"), response, span=(0.0, 1e10))
    assert found.value == close(math.sqrt(math.pi / 2 * q * f0), rel=1e-9)
