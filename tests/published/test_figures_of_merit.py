"""Figures of merit whose values are known in closed form."""

from __future__ import annotations

import math

import pytest
from numpy.testing import assert_allclose
from scipy.constants import c as light
from support.run import figure

TAU = 2 * math.pi
ONE_POLE = """
source s: in to ground = 1 V behind 1 kΩ
branch c: in to ground = 100 pF
reading out: in to ground
sweep 1 mHz to 1 GHz, 10 per decade
"""


def test_bandwidth_of_one_pole() -> None:
    """1/(2πRC) (textbook)."""
    assert_allclose(figure(ONE_POLE, "bandwidth", "out").value, 1 / (TAU * 1e-7), rtol=1e-9)


def amplifier(poles: str) -> str:
    return f"""
    source s: in to ground = 1 V
    amplifier stage: in, ground to out, ground {{ gain 3; poles {poles} }}
    reading out: out to ground
    sweep 1 Hz to 10 GHz, 10 per decade
    """


@pytest.mark.parametrize("n", [2, 3, 6])
def test_bandwidth_of_equal_buffered_poles(n: int) -> None:
    """f₀ √(2^(1/n) - 1) (Valley and Wallman 1948)."""
    found = figure(amplifier(", ".join(["10 MHz"] * n)), "bandwidth", "out").value
    assert_allclose(found, 10e6 * math.sqrt(2 ** (1 / n) - 1), rtol=1e-8)


@pytest.mark.parametrize("zeta", [0.1, 0.3, 0.6])
def test_second_order_peak_and_bandwidth(zeta: float) -> None:
    """Peak 1/(2ζ√(1 - ζ²)); -3 dB at ω₀ √(1 - 2ζ² + √(2 - 4ζ² + 4ζ⁴)) (textbook)."""
    body = amplifier(f"10 MHz q {1 / (2 * zeta)!r}")
    assert_allclose(
        figure(body, "peaking", "out").value, 1 / (2 * zeta * math.sqrt(1 - zeta**2)) - 1, rtol=1e-9
    )
    expected = 10e6 * math.sqrt(1 - 2 * zeta**2 + math.sqrt(2 - 4 * zeta**2 + 4 * zeta**4))
    assert_allclose(figure(body, "bandwidth", "out").value, expected, rtol=1e-9)


def test_butterworth_pair_does_not_peak() -> None:
    """q = 1/√2 is maximally flat: |H|² = 1/(1 + (f/f₀)⁴) (Butterworth 1930)."""
    body = amplifier(f"10 MHz q {math.sqrt(0.5)!r}")
    assert_allclose(figure(body, "bandwidth", "out").value, 10e6, rtol=1e-9)
    assert figure(body, "peaking", "out").value < 1e-12
    found = figure(body, "flatness", "out", span=(1.0, 1e6)).value
    assert_allclose(found, 1 - 1 / math.sqrt(1 + 1e-4), rtol=1e-7)


def test_chebyshev_ripple() -> None:
    """n = 5, 0.1 dB (Matthaei, Young and Jones 1964): flatness up to 1 rad/s is the ripple, 1 -
    10^(-0.1/20)."""
    body = """
    source s: a to ground = 1 V behind 1 Ω
    branch l1: a to b = 1.14681306727 H
    branch c2: b to ground = 1.37121255127 F
    branch l3: b to c = 1.97500315750 H
    branch c4: c to ground = 1.37121255127 F
    branch l5: c to d = 1.14681306727 H
    branch load: d to ground = 1 Ω
    reading out: d to ground
    sweep 1 µHz to 10 Hz, 20 per decade
    """
    found = figure(body, "flatness", "out", span=(1e-6, 1 / TAU)).value
    assert_allclose(found, 1 - 10 ** (-0.1 / 20), rtol=1e-8)
    edge = math.cosh(math.acosh(1 / math.sqrt(10**0.01 - 1)) / 5)
    assert_allclose(figure(body, "bandwidth", "out").value, edge / TAU, rtol=1e-8)


def test_group_delay_of_a_bessel_ladder() -> None:
    """n = 3, unit delay (Zverev 1967): with x = ω², delay (225 + 45x + 6x²)/(225 + 45x + 6x² + x³), Storch
    1954."""
    body = """
    source s: a to ground = 1 V behind 1 Ω
    branch l1: a to b = 1.25502427190 H
    branch c2: b to ground = 0.552786404500 F
    branch l3: b to c = 0.192189323599 H
    branch load: c to ground = 1 Ω
    reading out: c to ground
    """
    for omega in (1e-6, 0.3, 1.0, 2.5):
        x = omega**2
        expected = (225 + 45 * x + 6 * x**2) / (225 + 45 * x + 6 * x**2 + x**3)
        assert_allclose(figure(body, "group_delay", "out", at=omega / TAU).value, expected, rtol=1e-9)


def test_group_delay_of_a_matched_line() -> None:
    """Length over velocity (textbook)."""
    body = """
    stock line { impedance 50 Ω; velocity 0.7 }
    source s: in to ground = 1 V behind 50 Ω
    cable a: in, ground to out, ground = 2 m of line
    branch load: out to ground = 50 Ω
    reading out: out to ground
    """
    assert_allclose(figure(body, "group_delay", "out", at=1.23e9).value, 2 / (0.7 * light), rtol=1e-10)


@pytest.mark.parametrize(
    ("frequency", "degrees"), [(1 / (TAU * 1e-7), -45.0), (1 / (TAU * 1e-7) * math.sqrt(3), -60.0)]
)
def test_phase_of_one_pole(frequency: float, degrees: float) -> None:
    """-atan(f/f₀) (textbook)."""
    assert_allclose(figure(ONE_POLE, "phase", "out", at=frequency).value, degrees, rtol=1e-11)


def test_gain_of_one_pole_two_octaves_up() -> None:
    """1/√17 at four times the corner (textbook)."""
    assert_allclose(figure(ONE_POLE, "gain", "out", at=4 / (TAU * 1e-7)).value, 1 / math.sqrt(17), rtol=1e-11)


PROBE = """
under test {
  source s: node to ground = 1 V behind 1 kΩ
}
contact touch: node to ground
branch damp: node to core = 200 Ω
branch head: core to ground = 10 MΩ ∥ 8 pF
reading out: core to ground
sweep 1 Hz to 1 GHz, 20 per decade
"""


def test_parallel_equivalents_of_a_probe() -> None:
    """Y = 1/(R + 1/(G + sC)): G_p = Re Y, C_p = Im Y/ω (textbook series-parallel conversion); C_p → C at
    low frequency."""
    omega = TAU * 50e6
    y = 1 / (200 + 1 / (1e-7 + 1j * omega * 8e-12))
    assert_allclose(figure(PROBE, "impedance", "touch", at=50e6).value, abs(1 / y), rtol=1e-11)
    assert_allclose(figure(PROBE, "resistance", "touch", at=50e6).value, 1 / y.real, rtol=1e-10)
    assert_allclose(figure(PROBE, "capacitance", "touch", at=50e6).value, y.imag / omega, rtol=1e-10)
    assert_allclose(figure(PROBE, "resistance", "touch", at=0.0).value, 10e6 + 200, rtol=1e-12)
    assert_allclose(
        figure(PROBE, "capacitance", "touch", at=1e3).value, 8e-12 * (10e6 / (10e6 + 200)) ** 2, rtol=1e-7
    )


def test_disturbance_by_a_probe() -> None:
    """|Zc/(Zs + Zc)| - 1 (Thévenin 1883)."""
    for f in (0.0, 1e3, 1e6, 1e9):
        chain = 200 + 1 / (1e-7 + 1j * TAU * f * 8e-12)
        expected = abs(chain / (1000 + chain)) - 1
        assert_allclose(figure(PROBE, "disturbance", "touch", at=f).value, expected, rtol=1e-8)


def test_rejection_of_an_unequal_pair() -> None:
    """Two 1:1 dividers into a difference: legs R/(R + R) and R/(R + R(1 + δ)); differential gain over
    common gain (derived: a = 1/2, b = 1/(2 + δ): ((a + b)/2)/(a - b))."""
    delta = 0.001
    body = f"""
    source high: plus to ground = 1 V
    source low: minus to ground = 1 V
    branch p1: plus to a = 10 kΩ
    branch p2: a to ground = 10 kΩ
    branch n1: minus to b = {10e3 * (1 + delta)!r} Ω
    branch n2: b to ground = 10 kΩ
    amplifier diff: a, b to out, ground {{ gain 1 }}
    reading out: out to ground
    drive difference: high by 0.5, low by -0.5
    drive common: high by 1, low by 1
    """
    a, b = 0.5, 1 / (2 + delta)
    found = figure(body, "rejection", "out", "difference", "common", at=50.0).value
    assert_allclose(found, (a + b) / 2 / (a - b), rtol=1e-8)
