"""Networks of lumped parts with known transfer functions and impedances."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
import scipy.signal
from numpy.testing import assert_allclose
from support.run import curve, impedance, ladder

TAU = 2 * math.pi
RADIAN_PER_SECOND = 1 / TAU  # Hz
GRID = np.logspace(-6, 12, 91)


def test_phase_shift_network() -> None:
    """Three series-C shunt-R sections, unbuffered: -1/29 at ω = 1/(RC√6) (Ginzton and Hollingsworth 1941)."""
    r, c = 4700.0, 22e-9
    sections = ladder([f"{c!r} F"] * 3, [f"{r!r} Ω"] * 3)
    body = f"source s: in to ground = 1 V\n{sections}reading out: out to ground"
    h = curve(body, [1 / (TAU * r * c * math.sqrt(6))])
    assert_allclose(h, -1 / 29, rtol=1e-12)


def test_wien_network() -> None:
    """Series RC over parallel RC: 1/3 at ω = 1/RC (Terman, Radio Engineers' Handbook, 1943)."""
    body = """
    source s: in to ground = 1 V
    branch top: in to out = 10 kΩ -- 15 nF
    branch bottom: out to ground = 10 kΩ ∥ 15 nF
    reading out: out to ground
    """
    assert_allclose(curve(body, [1 / (TAU * 10e3 * 15e-9)]), 1 / 3, rtol=1e-12)


TWIN_T = """
source s: in to ground = 1 V
branch r1: in to a = 1 Ω
branch r2: a to out = 1 Ω
branch c3: a to ground = 2 F
branch c1: in to b = 1 F
branch c2: b to out = 1 F
branch r3: b to ground = 0.5 Ω
reading out: out to ground
"""


def test_twin_t() -> None:
    """Open load, RC = 1: (s² + 1)/(s² + 4s + 1), 0.351123441588 at ω = 2 (Tuttle 1940)."""
    assert_allclose(abs(curve(TWIN_T, [2 * RADIAN_PER_SECOND])), 0.351123441588, rtol=1e-11)
    s = 1j * TAU * GRID
    expected = (s**2 + 1) / (s**2 + 4 * s + 1)
    assert_allclose(curve(TWIN_T, GRID), expected, rtol=1e-12)


def test_twin_t_null() -> None:
    """The null at ω = 1 is as deep as the rounding of the frequency allows (same formula)."""
    assert abs(curve(TWIN_T, [RADIAN_PER_SECOND])[0]) < 1e-15


def test_compensated_divider() -> None:
    """9 MΩ ∥ 11 pF over 1 MΩ ∥ 99 pF divides by ten at every frequency (common practice)."""
    body = """
    source s: tip to ground = 1 V
    branch upper: tip to plug = 9 MΩ ∥ 11 pF
    branch lower: plug to ground = 1 MΩ ∥ 99 pF
    reading out: plug to ground times 10
    """
    h = curve(body, [0.0, 1e3, 1e9, *GRID])
    assert np.max(np.abs(h.real - 1)) < 1e-12
    assert np.max(np.abs(h.imag)) < 1e-12


def test_tip_for_a_five_picofarad_input() -> None:
    """An input of 1 MΩ ∥ 5 pF wants a tip of 9 MΩ ∥ 5/9 pF for a ratio of ten (common practice)."""
    body = f"""
    source s: tip to ground = 1 V
    branch upper: tip to plug = 9 MΩ ∥ {5 / 9!r} pF
    branch lower: plug to ground = 1 MΩ ∥ 5 pF
    reading out: plug to ground
    """
    h = curve(body, [0.0, *GRID])
    assert_allclose(h.real, 0.1, rtol=1e-12)
    assert np.max(np.abs(h.imag)) < 1e-13


def test_undercompensated_divider() -> None:
    """9 MΩ ∥ 10 pF over 1 MΩ ∥ 100 pF: 1/10 at rest, 1/11 at high frequency, one pole at (1/9 + 1) µS / 110
    pF: 99 µs (common practice)."""
    body = """
    source s: tip to ground = 1 V
    branch upper: tip to plug = 9 MΩ ∥ 10 pF
    branch lower: plug to ground = 1 MΩ ∥ 100 pF
    reading out: plug to ground
    """
    frequencies = np.array([0.0, 1.0, 1e3, 1e4, 1e9, 1e13])
    s = 1j * TAU * frequencies
    expected = 1 / 11 + (1 / 10 - 1 / 11) / (1 + s * 99e-6)
    assert_allclose(curve(body, frequencies), expected, rtol=1e-12)


def test_blocking_capacitor_at_zero_frequency() -> None:
    """No direct current through a capacitor: exactly 0, not nearly."""
    body = """
    source s: in to ground = 1 V behind 50 Ω
    branch block: in to out = 100 nF
    branch load: out to ground = 1 MΩ ∥ 20 pF
    reading out: out to ground
    """
    h = curve(body, [0.0, 1.0, 0.0])
    assert h[0] == 0
    assert h[2] == 0
    assert abs(h[1]) > 0.1


def test_column_of_capacitors_at_zero_frequency() -> None:
    """A series string of capacitors divides in inverse proportion to capacitance (charge is conserved on
    each node)."""
    values = [1, 2, 3, 5, 8, 13, 21, 34]
    body = "source s: n0 to ground = 1 V\n"
    for i, value in enumerate(values):
        end = "ground" if i == len(values) - 1 else f"n{i + 1}"
        body += f"branch c{i}: n{i} to {end} = {value} pF\n"
    body += "reading out: n7 to ground\n"
    expected = Fraction(1, values[-1]) / sum(Fraction(1, value) for value in values)
    assert_allclose(curve(body, [0.0, 1e-3, 1e6]), float(expected), rtol=1e-12)


def test_constant_resistance_network() -> None:
    """(R + L) ∥ (R + C) with R = √(L/C) = 50 Ω is 50 Ω at every frequency (Zobel)."""
    body = """
    source s: in to ground = 1 V
    branch one: in to ground = 50 Ω -- 2.5 µH
    branch two: in to ground = 50 Ω -- 1 nF
    """
    z = impedance(body, [0.0, *GRID], "s")
    assert_allclose(z.real, 50, rtol=1e-12)
    assert np.max(np.abs(z.imag)) < 1e-11


def doubly_terminated(values: list[float]) -> str:
    """1 Ω source, series L first, 1 Ω load."""
    lines, here = ["source s: start to ground = 1 V behind 1 Ω\n"], "start"
    for i, value in enumerate(values):
        if i % 2:
            lines.append(f"branch c{i}: {here} to ground = {value!r} F\n")
        else:
            lines.append(f"branch l{i}: {here} to n{i} = {value!r} H\n")
            here = f"n{i}"
    return "".join(lines) + f"branch load: {here} to ground = 1 Ω\nreading out: {here} to ground\n"


RADIANS = np.array([0.0, 0.01, 0.5, 0.9, 1.0, 1.2, 3.0, 30.0])


def test_butterworth_ladder() -> None:
    """n = 5, g = 2 sin((2k - 1)π/10), |H|² = (1/4)/(1 + ω¹⁰) (Matthaei, Young and Jones 1964, section
    4.05)."""
    values = [2 * math.sin((2 * k - 1) * math.pi / 10) for k in range(1, 6)]
    assert_allclose(values[:3], [0.618033988750, 1.61803398875, 2.0], rtol=1e-11)
    h = curve(doubly_terminated(values), RADIANS / TAU)
    assert_allclose(np.abs(h) ** 2, 0.25 / (1 + RADIANS**10), rtol=1e-11)


def test_chebyshev_ladder() -> None:
    """n = 5, 0.1 dB ripple (Matthaei, Young and Jones 1964, section 4.05): against `scipy.signal.cheby1`."""
    values = [1.14681306727, 1.37121255127, 1.97500315750, 1.37121255127, 1.14681306727]
    h = curve(doubly_terminated(values), RADIANS / TAU)
    numerator, denominator = scipy.signal.cheby1(5, 0.1, 1.0, analog=True)
    expected = 0.5 * np.polyval(numerator, 1j * RADIANS) / np.polyval(denominator, 1j * RADIANS)
    assert_allclose(h, expected, rtol=1e-8)


def test_bessel_ladder() -> None:
    """n = 3, unit delay, equal terminations (element values as in Zverev 1967): against
    `scipy.signal.bessel`."""
    values = [1.25502427190, 0.552786404500, 0.192189323599]
    h = curve(doubly_terminated(values), RADIANS / TAU)
    numerator, denominator = scipy.signal.bessel(3, 1.0, analog=True, norm="delay")
    expected = 0.5 * np.polyval(numerator, 1j * RADIANS) / np.polyval(denominator, 1j * RADIANS)
    assert_allclose(h, expected, rtol=1e-9)


def test_voltage_magnification_at_series_resonance() -> None:
    """The capacitor of a series circuit shows -jQ at ω₀ = 1/√(LC), Q = √(L/C)/R (textbook)."""
    body = """
    source s: in to ground = 1 V
    branch loop: in to out = 2 Ω -- 100 µH
    branch c: out to ground = 1 nF
    reading out: out to ground
    """
    q = math.sqrt(100e-6 / 1e-9) / 2
    assert_allclose(curve(body, [1 / (TAU * math.sqrt(100e-6 * 1e-9))]), -1j * q, rtol=1e-11)


def test_all_pass_lattice() -> None:
    """Lattice of L and C arms, L/C = R²: input R, output (1 - sL/R)/(1 + sL/R) across R, floating (Bode
    1945)."""
    body = """
    source s: plus to ground = 1 V
    branch a1: plus to p = 1 µH
    branch a2: ground to q = 1 µH
    branch b1: plus to q = 400 pF
    branch b2: ground to p = 400 pF
    branch load: p to q = 50 Ω
    reading out: p to q
    """
    frequencies = np.array([0.0, 1e5, 3e6, 8e6, 1e8])
    s = 1j * TAU * frequencies
    assert_allclose(curve(body, frequencies), (1 - s * 2e-8) / (1 + s * 2e-8), rtol=1e-11)
    assert_allclose(impedance(body, frequencies, "s"), 50, rtol=1e-11)


def test_inductance_bridge_balances_at_every_frequency() -> None:
    """R, L against R ∥ C: balanced where L = R₂R₃C and R_L R₄ = R₂R₃ (Maxwell)."""
    body = """
    source s: top to ground = 1 V behind 50 Ω
    branch unknown: top to left = 80 Ω -- 8 mH
    branch r2: left to ground = 400 Ω
    branch r3: top to right = 200 Ω
    branch r4: right to ground = 1 kΩ ∥ 100 nF
    reading out: left to right
    """
    h = curve(body, [0.0, 10.0, 1e3, 1e4, 1e6])
    assert np.max(np.abs(h)) < 1e-14


@pytest.mark.parametrize("k", [0.1, 0.9, 1.0])
def test_coupled_coils(k: float) -> None:
    """Secondary open: k√(L₂/L₁); secondary shorted: L₁(1 - k²), 0 at k = 1 (textbook)."""
    coils = f"""
    branch one: in to ground = 4 µH
    branch two: out to ground = 9 µH
    coupling m: one.L with two.L = {k!r}
    """
    ideal = "source s: in to ground = 1 V\n"
    frequencies = np.array([1e3, 1e6, 1e9])
    opened = curve(
        ideal + coils + "branch load: out to ground = 0 S\nreading out: out to ground\n", frequencies
    )
    assert_allclose(opened, k * 1.5, rtol=1e-13)
    shorted = impedance(ideal + coils + "branch strap: out to ground = 0 Ω\n", frequencies, "s")
    assert_allclose(shorted, 1j * TAU * frequencies * 4e-6 * (1 - k * k), rtol=1e-12, atol=1e-12 * 25)


@pytest.mark.parametrize(("second", "sign"), [("mid to ground", 1), ("ground to mid", -1)])
def test_coils_in_series(second: str, sign: int) -> None:
    """L₁ + L₂ ± 2M: aiding and opposing (textbook)."""
    body = f"""
    source s: in to ground = 1 V
    branch one: in to mid = 4 µH
    branch two: {second} = 9 µH
    coupling m: one.L with two.L = 2.5 µH
    """
    frequencies = np.array([1.0, 1e4, 1e8])
    assert_allclose(
        impedance(body, frequencies, "s"), 1j * TAU * frequencies * (13 + sign * 5) * 1e-6, rtol=1e-12
    )


@pytest.mark.parametrize("sign", [1, -1])
def test_two_coupled_resonators(sign: int) -> None:
    """Two equal circuits in resonance, coupled by k, short-circuit their source at ω₀/√(1 ± k) (Terman
    1943)."""
    body = """
    source s: in to ground = 1 V
    branch first: in to ground = 10 µH -- 1 nF
    branch second: a to ground = 10 µH -- 1 nF
    branch closed: a to ground = 0 Ω
    coupling m: first.L with second.L = 0.2
    """
    frequency = 1 / (TAU * math.sqrt(10e-6 * 1e-9) * math.sqrt(1 + sign * 0.2))
    reactance = TAU * frequency * 10e-6
    assert abs(impedance(body, [frequency], "s")[0]) < 1e-12 * reactance


def test_second_order_section_with_a_follower() -> None:
    """Two resistors, two capacitors, gain one: 1/(1 + 2RC₂s + R²C₁C₂s²) (Sallen and Key 1955)."""
    body = """
    source s: in to ground = 1 V
    branch r1: in to a = 10 kΩ
    branch r2: a to b = 10 kΩ
    branch c1: a to out = 20 nF
    branch c2: b to ground = 10 nF
    amplifier follower: b, ground to out, ground { gain 1 }
    reading out: out to ground
    """
    frequencies = np.array([0.0, 10.0, 1e3, 1.125e3, 1e4, 1e6])
    s = 1j * TAU * frequencies
    assert_allclose(curve(body, frequencies), 1 / (1 + 2e-4 * s + 2e-8 * s * s), rtol=1e-10)


def test_gyrator_turns_a_capacitor_into_an_inductor() -> None:
    """Two transconductances back to back, one inverting: C/(g₁g₂) henries (Tellegen 1948)."""
    body = """
    source s: in to ground = 1 V
    amplifier forth: in, ground to x, ground { transconductance 2 mA/V }
    amplifier back: ground, x to in, ground { transconductance 5 mA/V }
    branch c: x to ground = 1 nF
    """
    frequencies = np.array([1e3, 1e6, 1e9])
    assert_allclose(impedance(body, frequencies, "s"), 1j * TAU * frequencies * 1e-9 / 1e-5, rtol=1e-12)


def test_feedback_capacitance_is_multiplied() -> None:
    """A capacitor from input to output of an inverting gain A looks like C(1 + A) (Miller 1920)."""
    body = """
    source s: in to ground = 1 V
    amplifier stage: ground, in to out, ground { gain 9 }
    branch feedback: in to out = 2 pF
    """
    frequencies = np.array([1.0, 1e6, 1e9])
    assert_allclose(1 / impedance(body, frequencies, "s"), 1j * TAU * frequencies * 20e-12, rtol=1e-12)


def test_amplifier_poles_zeros_and_delay() -> None:
    """gain (1 + s/z) e^(-sT) / ((1 + s/p)(1 + s/(qω) + s²/ω²)), the trade's meaning of the words."""
    body = """
    source s: in to ground = 1 V
    amplifier stage: in, ground to out, ground {
      gain 20
      poles 1 MHz, 30 MHz q 0.8
      zeros 10 MHz
      delay 4 ns
    }
    reading out: out to ground
    """
    frequencies = np.array([0.0, 1.0, 1e6, 2e7, 1e9])
    s = 1j * TAU * frequencies
    z, p, w = TAU * 10e6, TAU * 1e6, TAU * 30e6
    expected = 20 * (1 + s / z) * np.exp(-s * 4e-9) / ((1 + s / p) * (1 + s / (0.8 * w) + (s / w) ** 2))
    assert_allclose(curve(body, frequencies), expected, rtol=1e-11)


def test_dissipation_factor_is_flat() -> None:
    """`loss D`: Re Y/Im Y = D within 0.07 % from 1 mHz to 1 THz, Im Y/ω = C at 1 MHz; causality then makes
    C fall by about (2/π)D per neper of frequency (Kramers and Kronig; e.g. IEEE practice for laminates)."""
    body = """
    source s: in to ground = 1 V
    branch part: in to ground = 10 nF loss 0.02
    """
    frequencies = np.logspace(-3, 12, 61)
    y = 1 / impedance(body, frequencies, "s")
    assert_allclose(y.real / y.imag, 0.02, rtol=7e-4)
    c = y.imag / (TAU * frequencies)
    assert_allclose(c[frequencies == 1e6], 10e-9, rtol=1e-12)
    middle = slice(10, 51)
    slope = np.diff(np.log(c[middle])) / np.diff(np.log(frequencies[middle]))
    assert_allclose(slope, -2 / math.pi * math.atan(0.02), rtol=2e-3)
