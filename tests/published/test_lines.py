"""Transmission lines: textbook points of the telegraph equations. Reference formulas in 40-digit
arithmetic."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.constants import c as light
from support.run import curve, impedance, load

TAU = 2 * math.pi
SPEED = 0.66 * light  # m/s
LOSSLESS = "stock line { impedance 50 Ω; velocity 0.66 }\n"
RC_LINE = "stock line { resistance 1 kΩ/m; capacitance 1 nF/m }\n"


def exact(formula: Callable[[Any], Any], frequencies: Any) -> np.ndarray:
    """formula(s) at s = j2πf, evaluated with 40 digits."""
    with mpmath.workdps(40):
        return np.array(
            [complex(formula(mpmath.mpc(0, 2 * mpmath.pi * mpmath.mpf(float(f))))) for f in frequencies]
        )


def loaded_line(load_ohms: str, metres: float = 1.0, drive: str = "1 V") -> str:
    return (
        f"{LOSSLESS}source s: in to ground = {drive}\n"
        f"cable flex: in, ground to out, ground = {metres!r} m of line\n"
        f"branch load: out to ground = {load_ohms}\nreading out: out to ground\n"
    )


def test_quarter_wave_transforms() -> None:
    """100 Ω through a quarter wave of 50 Ω: 25 Ω (Pozar, chapter 2)."""
    assert_allclose(impedance(loaded_line("100 Ω"), [SPEED / 4], "s"), 25, rtol=1e-12)


def test_eighth_wave_transforms() -> None:
    """100 Ω through an eighth of a wave of 50 Ω: 40 - j30 Ω (Pozar, chapter 2)."""
    assert_allclose(impedance(loaded_line("100 Ω"), [SPEED / 8], "s"), 40 - 30j, rtol=1e-12)


@pytest.mark.parametrize("load_ohms", ["100 Ω", "1 MΩ", "3 Ω"])
def test_half_waves_repeat_the_load_voltage(load_ohms: str) -> None:
    """1 m of lossless 50 Ω line at n half waves: the voltage times (-1)ⁿ (Pozar, chapter 2)."""
    n = np.array([0, 1, 2, 3, 10, 101, 1000])
    h = curve(loaded_line(load_ohms), n * SPEED / 2)
    assert_allclose(h, (-1.0) ** n, rtol=0, atol=1e-10)


def test_eighth_wave_stubs() -> None:
    """Shorted: jZ₀; open: -jZ₀ (Pozar, chapter 2)."""
    assert_allclose(impedance(loaded_line("0 Ω"), [SPEED / 8], "s"), 50j, rtol=1e-12)
    assert_allclose(impedance(loaded_line("0 S"), [SPEED / 8], "s"), -50j, rtol=1e-12)


def test_quarter_wave_matching_section() -> None:
    """√(50·200) Ω for a quarter wave matches 200 Ω to 50 Ω (Pozar, chapter 2)."""
    body = """
    stock section { impedance 100 Ω; velocity 0.66 }
    source s: in to ground = 1 V
    cable match: in, ground to out, ground = 0.5 m of section
    branch load: out to ground = 200 Ω
    """
    assert_allclose(impedance(body, [SPEED / 2, 3 * SPEED / 2], "s"), 50, rtol=1e-12)


def test_matched_line_is_a_delay() -> None:
    """Terminated in its own impedance: e^(-sT) at every frequency (textbook)."""
    frequencies = np.array([0.0, 1e3, 1e6, 1.234e8, 1e9, 1e10])
    expected = exact(lambda s: mpmath.exp(-s * mpmath.mpf(3) / mpmath.mpf(SPEED)), frequencies)
    assert_allclose(curve(loaded_line("50 Ω", 3.0), frequencies), expected, rtol=1e-11)


def test_standing_wave_ratio() -> None:
    """100 Ω on 50 Ω: voltage at the load over voltage a quarter wave before it is 2 (Pozar, chapter 2)."""
    body = f"""{LOSSLESS}
    source s: in to ground = 1 V behind 17 Ω
    cable a: in, ground to mid, ground = 0.3 m of line
    cable b: mid, ground to out, ground = 1 m of line
    branch load: out to ground = 100 Ω
    reading near: mid to ground
    reading out: out to ground
    """
    sweep = load(body).network().sweep([SPEED / 4])
    assert_allclose(abs(sweep.reading("out")[0] / sweep.reading("near")[0]), 2, rtol=1e-11)


def test_capacitance_of_fifty_ohms_at_two_thirds() -> None:
    """C′ = 1/(Z₀v): 101.080029 pF/m for 50 Ω at 0.66 c; within 5 % of the catalogue's 101.7 pF/m for the
    common flexible 50 Ω coax (value read in a catalogue)."""
    body = loaded_line("0 S")
    frequency = 10.0
    c = (1 / impedance(body, [frequency], "s")[0]).imag / (TAU * frequency)
    assert_allclose(c, 101.080029e-12, rtol=1e-8)
    assert_allclose(c, 101.7e-12, rtol=0.05)


OPEN_RC = f"""{RC_LINE}
source s: in to ground = 1 V
cable rc: in, ground to out, ground = 1 m of line
reading out: out to ground
"""


def test_open_rc_line() -> None:
    """1/cosh √(sRC), from rest to a hundred nepers (textbook)."""
    frequencies = np.array([1e-3, 1e3, 1e6, 1e7, 1e9, 3e9])
    expected = exact(
        lambda s: 1 / mpmath.cosh(mpmath.sqrt(s * mpmath.mpf(1e3) * mpmath.mpf(1e-9))), frequencies
    )
    assert abs(expected[-1]) < 1e-40
    assert_allclose(curve(OPEN_RC, frequencies), expected, rtol=1e-10)
    assert_allclose(curve(OPEN_RC, [0.0]), 1, rtol=1e-13)


def test_input_of_an_rc_line_at_low_frequency() -> None:
    """Z - 1/(sC) → R/3 (textbook); the next term of the real part is 2R(ωRC)²/945."""
    frequency = 1e-3 / (TAU * 1e3 * 1e-9)
    z = impedance(OPEN_RC, [frequency], "s")[0]
    assert_allclose(z.real, 1e3 / 3, rtol=1e-8)


def test_endless_rc_line() -> None:
    """Followed by a line a thousand times longer: exp(-√(sRC)) (Wigington and Nahman 1957, α = l√(R′C′))."""
    body = f"""{RC_LINE}
    source s: in to ground = 1 V
    cable near: in, ground to out, ground = 1 m of line
    cable far: out, ground to end, ground = 1000 m of line
    branch load: end to ground = 1 MΩ
    reading out: out to ground
    """
    frequencies = np.array([1e3, 1e5, 1e6, 1e8])
    expected = exact(lambda s: mpmath.exp(-mpmath.sqrt(s * mpmath.mpf(1e3) * mpmath.mpf(1e-9))), frequencies)
    assert_allclose(curve(body, frequencies), expected, rtol=1e-10)


def test_distortionless_line() -> None:
    """R/L = G/C and matched: attenuation √(RG) at every frequency, plain delay (Heaviside 1887)."""
    body = """
    stock line { resistance 5 Ω/m; inductance 250 nH/m; conductance 2 mS/m; capacitance 100 pF/m }
    source s: in to ground = 1 V
    cable a: in, ground to out, ground = 2 m of line
    branch load: out to ground = 50 Ω
    reading out: out to ground
    """
    frequencies = np.array([0.0, 1.0, 1e6, 1e8, 1e10])
    expected = exact(lambda s: mpmath.exp(-mpmath.mpf("0.2") - s * mpmath.mpf("1e-8")), frequencies)
    assert_allclose(curve(body, frequencies), expected, rtol=1e-11)


def test_two_pieces_equal_one() -> None:
    """A line cut in two is the same line (uniformity)."""
    stock = (
        "stock line { resistance 0.4 Ω/m; inductance 250 nH/m; conductance 1 µS/m; capacitance 100 pF/m }\n"
    )
    frame = f"""{stock}
    source s: in to ground = 1 V behind 12 Ω
    branch load: out to ground = 300 Ω ∥ 8 pF
    reading out: out to ground
    """
    whole = "cable a: in, ground to out, ground = 1.7 m of line\n"
    cut = """
    cable a: in, ground to mid, ground = 0.6 m of line
    cable b: mid, ground to out, ground = 1.1 m of line
    """
    frequencies = [0.0, 1e3, 1e6, 3.3e7, 1e9]
    assert_allclose(curve(frame + whole, frequencies), curve(frame + cut, frequencies), rtol=1e-10)


def test_constant_k_ladder_is_a_line_below_its_cutoff() -> None:
    """A section of series 2 × L/2 and C across: cosh γ = 1 - ω²LC/2 (Campbell 1903), matched on its image
    impedance."""
    coil, c, n = 1e-6, 400e-12, 12
    omega = 0.6 * 2 / math.sqrt(coil * c)
    image = math.sqrt(coil / c * (1 - omega**2 * coil * c / 4))
    body = "source s: n0 to ground = 1 V\n"
    for i in range(n):
        end = "out" if i == n - 1 else f"n{i + 1}"
        body += f"branch a{i}: n{i} to m{i} = {coil / 2!r} H\n"
        body += f"branch c{i}: m{i} to ground = {c!r} F\n"
        body += f"branch b{i}: m{i} to {end} = {coil / 2!r} H\n"
    body += f"branch load: out to ground = {image!r} Ω\nreading out: out to ground\n"
    theta = math.acos(1 - omega**2 * coil * c / 2)
    assert_allclose(curve(body, [omega / TAU]), np.exp(-1j * n * theta), rtol=1e-11)
    assert_allclose(impedance(body, [omega / TAU], "s"), image, rtol=1e-11)


def between_taps(fields: str, metres: float, onwards: float, frequencies: list[float]) -> np.ndarray:
    """Voltage ratio over `metres` of an endless line: a source, a long piece, the piece, `onwards` metres
    more."""
    body = f"""
    stock line {{ {fields} }}
    source s: in to ground = 1 V
    cable piece: in, ground to out, ground = {metres!r} m of line
    cable rest: out, ground to end, ground = {onwards!r} m of line
    branch load: end to ground = 50 Ω
    reading out: out to ground
    """
    return curve(body, frequencies)


def test_attenuation_as_the_catalogue_gives_it() -> None:
    """0.12 dB/m at 100 MHz: 3 m of an endless line take 0.36 dB there (the meaning of the catalogue's
    number)."""
    h = between_taps("impedance 50 Ω; velocity 0.66; attenuation 0.12 dB/m at 100 MHz", 3.0, 20000.0, [1e8])
    assert_allclose(-20 * np.log10(np.abs(h)), 0.36, rtol=1e-10)


def test_skin_effect_attenuation_grows_with_the_root_of_frequency() -> None:
    """α ≈ R/(2Z₀), R ∝ √f (textbook, low loss; the next order is of (R/ωL)²): 1.1 Ω/m at 100 MHz on 50 Ω
    gives 0.011 Np/m there and ten times that at 10 GHz."""
    h = between_taps("impedance 50 Ω; velocity 0.66; skin 1.1 Ω/m at 100 MHz", 1.0, 20000.0, [1e8, 1e10])
    assert_allclose(-np.log(np.abs(h)), [0.011, 0.11], rtol=5e-3)


def test_skin_effect_impedance() -> None:
    """Z′ = √(R² + 2R_k² s/ω_k): seen at a line shorted at its end, no inductance: R at rest, R_k(1 +
    j)·√(f/f_k) far above (a good conductor's surface impedance has equal parts, textbook)."""
    body = """
    stock line { resistance 20 mΩ/m; skin 1.1 Ω/m at 100 MHz }
    source s: in to ground = 1 V
    cable a: in, ground to out, ground = 1 m of line
    branch short: out to ground = 0 Ω
    """
    z = impedance(body, [0.0, 1e8, 1e12], "s")
    assert_allclose(z[0], 0.02, rtol=1e-12)
    assert_allclose(z[1:], np.array([1.1, 110]) * (1 + 1j), rtol=5e-4)


def test_dielectric_loss_attenuation() -> None:
    """α ≈ ω√(L′C′) tan δ/2 (textbook, low loss; next order tan² δ). D = 0.001; C′ is as written at 1 MHz, and
    causality makes it fall by (2/π) D per neper of frequency."""
    h = between_taps("impedance 50 Ω; velocity 0.66; loss 0.001", 1.0, 2e6, [1e6, 1e8])
    frequencies = np.array([1e6, 1e8])
    fall = 1 - 2 / math.pi * 0.001 * np.log(frequencies / 1e6)
    assert_allclose(-np.log(np.abs(h)), TAU * frequencies / SPEED * np.sqrt(fall) * 0.001 / 2, rtol=1e-4)


SHIELDED = """
stock coax {
  inductance 250 nH/m
  shield_resistance 12 mΩ/m
  shield_inductance 1.2 µH/m
  shield_coupling 1
}
"""


def test_transfer_impedance_of_a_fully_coupled_shield() -> None:
    """Current in the shield alone, coupling 1: the loop sees the shield's resistance and no inductance,
    because the mutual inductance of core and shield is the shield's own (e.g. Ott, Noise Reduction
    Techniques, 1976)."""
    body = f"""{SHIELDED}
    source s: near to ground = 1 A
    cable flex: core, near to ground, ground = 2 m of coax
    branch meter: core to near = 0 S
    reading out: near to core
    """
    frequencies = [1.0, 1e3, 1e6, 1e9]
    assert_allclose(curve(body, frequencies), 0.024, rtol=1e-10)


def test_return_current_moves_into_the_shield() -> None:
    """Core current returns through ground as 1/(1 + s Ls/Rs), the rest in the shield (e.g. Ott, Noise
    Reduction Techniques, 1976); with the 1 mΩ r in which the ground part is measured, Rs/(Rs + r + s Ls)."""
    body = f"""{SHIELDED}
    source s: core to ground = 1 A
    cable flex: core, ground to end, far = 1 m of coax
    branch load: end to far = 50 Ω
    branch bond: far to ground = 1 mΩ
    reading out: far to ground times 1000 A/V
    """
    frequencies = np.array([0.0, 100.0, 1.59e3, 1e5, 1e7])
    s = 1j * TAU * frequencies
    assert_allclose(curve(body, frequencies), 12e-3 / (12e-3 + 1e-3 + s * 1.2e-6), rtol=1e-9)
