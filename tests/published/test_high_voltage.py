"""Dividers for high voltage: stray capacitance to earth along resistor and capacitor columns."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from support.run import curve, load


def column(n: int, part: str, stray: str, low: str) -> str:
    """n equal parts in series from `n0` to `low`, `stray` from each of the n - 1 joints to ground, a low
    arm."""
    body = "source s: n0 to ground = 1 V\n"
    for i in range(n):
        end = "low" if i == n - 1 else f"n{i + 1}"
        body += f"branch b{i}: n{i} to {end} = {part}\n"
        if i < n - 1:
            body += f"branch e{i}: {end} to ground = {stray}\n"
    return body + f"branch arm: low to ground = {low}\nreading out: low to ground\n"


def test_resistor_with_uniform_earth_capacitance() -> None:
    """Current at the earthed end over the direct current: √(sτ)/sinh √(sτ), τ = RCₑ (Kuffel, Zaengl and
    Kuffel, chapter 3); a low arm r beside it makes it r/(r cosh θ + (R/θ) sinh θ), θ = √(sτ)."""
    r, earth, arm = 1e8, 40e-12, 1e2
    body = f"""
    stock column {{ resistance {r!r} Ω/m; capacitance {earth!r} F/m }}
    source s: top to ground = 1 V
    cable body: top, ground to low, ground = 1 m of column
    branch arm: low to ground = {arm!r} Ω
    reading out: low to ground
    """
    frequencies = np.array([1e-2, 10.0, 100.0, 1e3, 1e5])
    with mpmath.workdps(40):
        expected = []
        for f in frequencies:
            theta = mpmath.sqrt(
                mpmath.mpc(0, 2 * mpmath.pi * mpmath.mpf(float(f))) * mpmath.mpf(r) * mpmath.mpf(earth)
            )
            whole = arm / (arm * mpmath.cosh(theta) + r / theta * mpmath.sinh(theta))
            published = theta / mpmath.sinh(theta) * arm / mpmath.mpf(r)
            assert abs(whole / published - 1) < 1e-4 * abs(theta)
            expected.append(complex(whole))
    assert_allclose(curve(body, frequencies), expected, rtol=1e-10)


def first_moment(body: str) -> float:
    """-H′(0)/H(0), the area under 1 - g(t): the response time. Taken at a frequency whose square no longer
    shows."""
    value, slope = load(body).network().response.derivative([1e-4], "out")
    return float((-slope.values[0] / value.values[0]).real)


@pytest.mark.parametrize("n", [2, 5, 20, 60])
def test_response_time_of_a_lumped_resistor_column(n: int) -> None:
    """N equal lumps with Cₑ/N at the N - 1 joints: τ(N² - 1)/(6N²) (derived: Σ of the joints' Elmore
    times), here with a low arm a trillionth of the column."""
    r, earth = 1e8, 40e-12
    body = column(n, f"{r / n!r} Ω", f"{earth / n!r} F", "100 µΩ")
    tau = r * earth
    assert_allclose(first_moment(body), tau * (n * n - 1) / (6 * n * n), rtol=1e-9)


def test_response_time_of_a_continuous_resistor_column() -> None:
    """τ/6 (Kuffel, Zaengl and Kuffel, chapter 3)."""
    body = """
    stock column { resistance 100 MΩ/m; capacitance 40 pF/m }
    source s: top to ground = 1 V
    cable body: top, ground to low, ground = 1 m of column
    branch arm: low to ground = 100 µΩ
    reading out: low to ground
    """
    assert_allclose(first_moment(body), 1e8 * 40e-12 / 6, rtol=1e-9)


def lumped_column_ratio(n: int, part: Fraction, stray: Fraction, low: Fraction) -> Fraction:
    """v(low)/v(top) of a capacitor column by exact arithmetic, charges from the low end upwards."""
    volts, charge = Fraction(1), low
    for i in range(n):
        volts += charge / part
        if i < n - 1:
            charge += stray * volts
    return 1 / volts


@pytest.mark.parametrize("n", [2, 20, 200])
def test_capacitor_column_at_zero_frequency(n: int) -> None:
    """Charge balance on every joint: against rational arithmetic, at the limit of zero frequency and above
    it."""
    part, stray, low = Fraction(2 * n), Fraction(3, 4 * n), Fraction(100_000)
    body = column(n, f"{2 * n} pF", f"{0.75 / n!r} pF", "100 nF")
    h = curve(body, [0.0, 50.0, 1e6])
    assert_allclose(h, float(lumped_column_ratio(n, part, stray, low)), rtol=1e-12)


def test_earth_capacitance_lowers_the_ratio_of_a_capacitor_column() -> None:
    """x/sinh x, x = √(Cₑ/C) (Kuffel, Zaengl and Kuffel, chapter 3): 0.983525748301 for Cₑ/C = 0.1. A column
    of N parts approaches it as 1/N²: two columns, extrapolated."""
    c, earth, low = 100e-12, 10e-12, 1.0
    factors = []
    for n in (100, 200):
        body = column(n, f"{c * n!r} F", f"{earth / n!r} F", f"{low!r} F")
        factors.append(curve(body, [50.0])[0].real * low / c)
    assert_allclose((4 * factors[1] - factors[0]) / 3, 0.983525748301, rtol=1e-9)


def test_small_earth_capacitance_takes_a_sixth_of_itself() -> None:
    """1 - Cₑ/(6C) to first order in Cₑ (common practice, no source; the N - 1 joints make it (1 - 1/N²) of
    that)."""
    c, earth, low, n = 100e-12, 0.01e-12, 1.0, 100
    factor = curve(column(n, f"{c * n!r} F", f"{earth / n!r} F", f"{low!r} F"), [50.0])[0].real * low / c
    assert_allclose(1 - factor, earth / (6 * c) * (1 - 1 / n**2), rtol=1e-4)


def test_damped_capacitor_divider_is_flat() -> None:
    """Series R and C in every element, RC the same in both arms: the ratio of the capacitors at every
    frequency (Zaengl 1964, the damped capacitive divider without strays)."""
    body = """
    source s: top to ground = 1 V
    branch upper: top to low = 200 Ω -- 500 pF
    branch lower: low to ground = 200 mΩ -- 500 nF
    reading out: low to ground
    """
    assert_allclose(curve(body, [0.0, 1.0, 50.0, 1e6, 1e9]), 1 / 1001, rtol=1e-12)


def test_ten_million_to_one_disturbance() -> None:
    """A 10 GΩ probe on a 1 mΩ source changes the voltage by -Zs/(Zs + Zc), 1e-13 (voltage division): right
    to 1e-9 of itself, though it is below the rounding of the voltages."""
    body = """
    under test { source s: node to ground = 1 V behind 1 mΩ }
    contact touch: node to ground
    branch probe: node to ground = 10 GΩ
    reading out: node to ground
    """
    model = load(body).network()
    for frequencies in ([0.0], [1.0, 1e9]):
        change = model.response.change(frequencies, "touch").values
        assert_allclose(change, -1e-3 / (1e-3 + 1e10), rtol=1e-9)
