"""Thermal noise and the noise of amplifiers."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.constants import k as boltzmann
from support.run import figure, load

TAU = 2 * math.pi


def density(body: str, frequencies: object, reading: str = "out") -> np.ndarray:
    return np.asarray(load(body).network().response.noise_density(frequencies, reading))


def test_fifty_ohms_at_290_kelvin() -> None:
    """0.894861118 nV/√Hz (Nyquist 1928 with the CODATA constant)."""
    body = """
    source s: in to ground = 1 V
    branch r: in to out = 50 Ω
    branch open: out to ground = 0 S
    reading out: out to ground
    temperature 16.85 °C
    """
    assert_allclose(density(body, [1.0, 1e6, 1e9]), 0.894861118e-9, rtol=1e-8)


def rc(ohms: str) -> str:
    return f"""
    source s: in to ground = 1 V behind {ohms}
    branch c: in to ground = 1 pF
    reading out: in to ground
    temperature 26.85 °C
    """


@pytest.mark.parametrize(("ohms", "corner"), [("1 kΩ", 1 / (TAU * 1e-9)), ("10 MΩ", 1 / (TAU * 1e-5))])
def test_capacitor_noise_does_not_depend_on_the_resistor(ohms: str, corner: float) -> None:
    """√(kT/C) = 64.3579599 µV rms for 1 pF at 300 K over all frequencies (textbook); from low to high the
    part (2/π)(atan(high/corner) - atan(low/corner)) of the square."""
    low, high = corner * 1e-7, corner * 1e7
    share = 2 / math.pi * (math.atan(high / corner) - math.atan(low / corner))
    found = figure(rc(ohms), "noise", "out", span=(low, high)).value
    assert_allclose(found, 64.3579599e-6 * math.sqrt(share), rtol=1e-8)
    assert_allclose(found, 64.3579599e-6, rtol=1e-6)


def test_capacitor_noise_through_any_network() -> None:
    """kT/C also where inductors and several resistors stand around (equipartition): a damped resonance."""
    body = """
    source s: in to ground = 1 V behind 30 Ω -- 10 µH
    branch c: in to ground = 100 pF ∥ 20 kΩ
    reading out: in to ground
    temperature 26.85 °C
    """
    found = figure(body, "noise", "out", span=(1e-3, 1e14)).value
    assert_allclose(found, math.sqrt(boltzmann * 300 / 100e-12), rtol=1e-6)


def test_noise_of_resistors_in_parallel() -> None:
    """4kT (R₁ ∥ R₂): independent sources add in power (Nyquist 1928)."""
    body = """
    source s: in to ground = 1 V behind 10 kΩ
    branch r: in to ground = 40 kΩ
    reading out: in to ground times 10
    temperature 20 °C
    """
    assert_allclose(density(body, [1e3]), 10 * math.sqrt(4 * boltzmann * 293.15 * 8e3), rtol=1e-9)


def test_noise_of_a_passive_port() -> None:
    """4kT Re Z (Nyquist 1928) with Z = (R + sL) ∥ 1/(sC) written out."""
    body = """
    source s: in to ground = 1 A
    branch coil: in to ground = 12 Ω -- 4 µH
    branch c: in to ground = 50 pF
    reading out: in to ground
    temperature 23 °C
    """
    frequencies = np.array([1e3, 1e6, 1.12e7, 1e8])
    s = 1j * TAU * frequencies
    z = 1 / (1 / (12 + s * 4e-6) + s * 50e-12)
    assert_allclose(density(body, frequencies), np.sqrt(4 * boltzmann * 296.15 * z.real), rtol=1e-9)


def test_noise_of_a_lossy_capacitor() -> None:
    """4kT D/(ωC(1 + D²)) for a dissipation factor D at 1 MHz, where the capacitance is C (Nyquist 1928)."""
    body = """
    source s: in to ground = 1 A
    branch c: in to ground = 1 nF loss 0.02
    reading out: in to ground
    temperature 23 °C
    """
    g = 0.02 * TAU * 1e6 * 1e-9
    resistance = g / (g**2 + (TAU * 1e6 * 1e-9) ** 2)
    assert_allclose(density(body, [1e6]), math.sqrt(4 * boltzmann * 296.15 * resistance), rtol=1e-9)


def test_noise_of_a_matched_attenuating_line() -> None:
    """Whatever its loss, a line of real impedance closed by it at one temperature gives 4kT Z₀ at the other
    end (Nyquist 1928): a distortionless line of 3 nepers."""
    body = """
    stock line { resistance 5 Ω/m; inductance 250 nH/m; conductance 2 mS/m; capacitance 100 pF/m }
    source s: in to ground = 1 V behind 50 Ω
    cable a: in, ground to out, ground = 30 m of line
    reading out: out to ground
    temperature 23 °C
    """
    assert_allclose(density(body, [1.0, 1e6, 1e9]), math.sqrt(4 * boltzmann * 296.15 * 50), rtol=1e-9)


AMPLIFIER = """
source s: in to ground = 1 V behind 2 kΩ
amplifier stage: in, ground to out, ground { gain 20; noise 5 nV/√Hz; current_noise 2 pA/√Hz }
reading out: out to ground
temperature 23 °C
"""


def test_amplifier_noise() -> None:
    """G √(e² + (iR)² + 4kTR): the two uncorrelated generators at the input (textbook, after Rothe and
    Dahlke 1956)."""
    total = (5e-9) ** 2 + (2e-12 * 2e3) ** 2 + 4 * boltzmann * 296.15 * 2e3
    assert_allclose(density(AMPLIFIER, [10.0, 1e6]), 20 * math.sqrt(total), rtol=1e-9)


@pytest.mark.parametrize(
    ("poles", "factor"),
    [
        ("1 MHz", math.pi / 2),
        ("1 MHz, 1 MHz", math.pi / 4),
        (f"1 MHz q {math.sqrt(0.5)!r}", math.pi / math.sqrt(8)),
    ],
)
def test_noise_bandwidth(poles: str, factor: float) -> None:
    """Over the pole frequency: π/2 for one pole, π/4 for two equal ones, π/√8 for a Butterworth pair
    (textbook)."""
    body = f"""
    source s: in to ground = 1 V
    amplifier stage: in, ground to out, ground {{ gain 1; poles {poles}; noise 10 nV/√Hz }}
    reading out: out to ground
    """
    found = figure(body, "noise", "out", span=(1e-3, 1e15)).value
    assert_allclose(found, 10e-9 * math.sqrt(factor * 1e6), rtol=1e-8)
