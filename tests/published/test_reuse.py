"""Networks made of assemblies against closed forms: a probe of two legs, a column of many sections."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from support.run import curve, figure, load

LEGS = """
assembly leg(hot to cold with ref; skew_r = 0 %, skew_c = 0 %) {
  branch upper: hot to cold = 4 MΩ * (1 + skew_r) ∥ 2.5 pF * (1 + skew_c)
  branch lower: cold to ref = 4 MΩ / 99 ∥ 247.5 pF
}
source high: plus to ground = 1 V
source low: minus to ground = 1 V
place p: leg(plus to a with ground; skew_r = 0.05 %)
place n: leg(minus to b with ground; skew_c = 0.5 %)
reading out: a to b
drive difference: high by 0.5, low by -0.5
drive common: high, low
"""


def leg(s: mpmath.mpc, skew_r: mpmath.mpf, skew_c: mpmath.mpf) -> mpmath.mpc:
    """Voltage divider: upper over lower admittance."""
    upper = 1 / (mpmath.mpf(4_000_000) * (1 + skew_r)) + s * mpmath.mpf("2.5e-12") * (1 + skew_c)
    lower = mpmath.mpf(99) / 4_000_000 + s * mpmath.mpf("247.5e-12")
    return upper / (upper + lower)


def rejection(frequency: float) -> float:
    """|(Hp + Hn)/2| over |Hp - Hn|: the reading is the difference of two dividers that share nothing."""
    with mpmath.workdps(50):
        s = mpmath.mpc(0, 2 * mpmath.pi * mpmath.mpf(frequency))
        p = leg(s, mpmath.mpf("0.0005"), mpmath.mpf(0))
        n = leg(s, mpmath.mpf(0), mpmath.mpf("0.005"))
        return float(abs((p + n) / 2) / abs(p - n))


@pytest.mark.parametrize("frequency", [0.0, 1e-3, 1.0, 50.0, 1e3, 1.59e4, 1e5, 1e6, 1e7])
def test_rejection_of_two_unequal_legs(frequency: float) -> None:
    """A resistor 0.05 % off limits it at low frequencies, a capacitor 0.5 % off at high ones."""
    found = figure(LEGS, "rejection", "out", "difference", "common", at=frequency)
    assert_allclose(found.value, rejection(frequency), rtol=1e-9)
    # By first order: 1/(skew · (1 - ratio)), the ratio being a hundredth.
    if frequency in (0.0, 1e7):
        assert_allclose(found.value, 1 / (0.99 * (0.005 if frequency else 0.0005)), rtol=0.01)


def test_least_rejection_between_is_found() -> None:
    """Over the whole range, against a fine grid of the closed form."""
    from nodal import figures
    from nodal.network import FigureCall

    call = FigureCall("rejection", ("out", "difference", "common"), "rejection(out, difference, common)")
    found = figures.extreme(call, load(LEGS).network().response, which="min", span=(1.0, 1e7))
    assert found.value is not None
    assert_allclose(found.value, min(rejection(f) for f in np.geomspace(1.0, 1e7, 200)), rtol=1e-6)


R, EARTH, ARM = 100e6, 40e-12, 10e3
"""Ω, F and Ω: of the whole column, of all its capacitance to earth, of the low arm."""


def column(n: int) -> str:
    """n resistors R/n with Ce/n at the n - 1 inner joints: the last section has no stray."""
    last = f"branch last: {'tip' if n == 1 else 'mid'} to low = {R / n!r} Ω\n"
    body = (
        f"assembly section(top to bottom; r, c) {{ branch r_: top to bottom = r\n"
        f"branch c_: bottom to ground = c }}\n"
        f"chain body: {n - 1} of section(tip to mid; r = {R / n!r} Ω, c = {EARTH / n!r} F)\n"
    )
    ends = f"branch arm: low to ground = {ARM!r} Ω\nreading out: low to ground\n"
    return "source s: tip to ground = 1 V\n" + ends + last + (body if n > 1 else "")


@pytest.mark.parametrize("n", [1, 2, 3, 5, 10, 20, 50, 100, 200])
def test_first_moment_of_a_column(n: int) -> None:
    """[R(N² - 1)/(6N²) + r(N - 1)/(2N)]·R·Ce/(R + r): the sum over the joints of capacitance times the
    resistance to either side in parallel, as far as it moves the arm (Elmore 1948, derived by hand)."""
    moment = (R * (n * n - 1) / (6 * n * n) + ARM * (n - 1) / (2 * n)) * R * EARTH / (R + ARM)
    body = column(n)
    for frequency in (0.0, 1e-3):
        found = figure(body, "group_delay", "out", at=frequency).value
        assert_allclose(found, moment, rtol=1e-9, atol=1e-18)
    # From the phase itself, at a frequency whose cube no longer shows.
    h = curve(body, [1e-2])[0]
    assert_allclose(-np.angle(h) / (2 * np.pi * 1e-2), moment, rtol=1e-6, atol=1e-15)


@pytest.mark.parametrize("n", [2, 7, 31])
def test_first_moment_by_the_joints(n: int) -> None:
    """The closed form itself, against its sum: joint k has R k/N above it and R(N - k)/N + r below."""
    total = sum(EARTH / n * (R * k / n) * (R * (n - k) / n + ARM) / (R + ARM) for k in range(1, n))
    moment = (R * (n * n - 1) / (6 * n * n) + ARM * (n - 1) / (2 * n)) * R * EARTH / (R + ARM)
    assert_allclose(moment, total, rtol=1e-12)
