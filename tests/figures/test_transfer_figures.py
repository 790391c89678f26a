"""Figures of transfer functions against closed forms."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from support.analytic import Analytic, call, close

from nodal.figures import evaluate, extreme
from nodal.network import SweepGrid

FC = 12_345.678
WC = 2 * math.pi * FC


def one_pole(s):
    return 0.1 / (1 + s / WC)


def resonance(f0: float, q: float):
    """Low-pass of second order: natural frequency f0, quality factor q."""
    w0 = 2 * math.pi * f0
    return lambda s: 1 / (1 + s / (q * w0) + (s / w0) ** 2)


def test_bandwidth_of_one_pole_is_its_corner():
    """|1/(1 + j f/fc)|² = 1/2 at f = fc, for the reference at 0 Hz."""
    response = Analytic({"screen": one_pole})
    found = evaluate(call("bandwidth", "screen", 0.0), response)
    assert found.value == close(FC, rel=1e-12)
    assert found.unit == "Hz"
    assert [c.direction for c in found.crossings] == ["down"]


def test_the_reference_of_bandwidth_is_the_low_end_of_the_span():
    """(1 + (f/fc)²) = 2 (1 + (f0/fc)²) with the reference at f0."""
    response = Analytic({"screen": one_pole})
    found = evaluate(call("bandwidth", "screen"), response, span=(5e3, 1e6))
    assert found.value == close(FC * math.sqrt(1 + 2 * (5e3 / FC) ** 2), rel=1e-12)


def test_bandwidth_of_two_equal_poles():
    """fc √(√2 - 1): Valley and Wallman 1948."""
    response = Analytic({"screen": lambda s: one_pole(s) ** 2})
    expected = FC * math.sqrt(math.sqrt(2) - 1)
    assert evaluate(call("bandwidth", "screen", 0.0), response).value == close(expected, rel=1e-12)


def test_a_sweep_that_ends_too_early_does_not_reach_the_bandwidth():
    found = evaluate(call("bandwidth", "screen"), Analytic({"screen": one_pole}), span=(1.0, 1e4))
    assert (found.value, found.reason, found.bound) == (None, "not-reached", (">=", 1e4))


def test_all_crossings_of_a_sharp_resonance_are_listed():
    """A pole pair with Q = 10⁵ at 200 kHz beyond the corner of a slower pole pushes |H| up through -3 dB
    and back.

    The crossings are the roots of |H|² = |H(0)|²/2, a cubic in f² solved in 50 digits.
    """
    f0, q = 200e3, 1e5
    w0 = 2 * math.pi * f0
    slow_and_sharp = {"screen": lambda s: 1 / ((1 + s / WC) * (1 + s / (q * w0) + (s / w0) ** 2))}
    response = Analytic(slow_and_sharp, poles=(f0,))
    found = evaluate(call("bandwidth", "screen", 0.0), response)
    with mpmath.workdps(50):
        a, b = 1 / mpmath.mpf(FC) ** 2, 1 / mpmath.mpf(f0) ** 2
        # (1 + a x)((1 - b x)² + b x/q²) - 2 = 0 with x = f²
        p = [b * b, b / mpmath.mpf(q) ** 2 - 2 * b, mpmath.mpf(1)]
        cubic = [a * p[0], a * p[1] + p[0], a * p[2] + p[1], p[2] - 2]
        squares = mpmath.polyroots(cubic[::-1], asc=True, maxsteps=500, extraprec=500)
        roots = sorted(mpmath.sqrt(r.real) for r in squares)
    assert [c.direction for c in found.crossings] == ["down", "up", "down"]
    assert [c.frequency for c in found.crossings] == close([float(r) for r in roots], rel=1e-12)


def test_a_resonance_with_no_skirts_is_found_at_its_pole():
    """1 + band-pass of Q = 10⁹: 2 at its centre, 1 at every other point of any grid."""
    f0, q = 123_456.7, 1e9
    w0 = 2 * math.pi * f0
    hidden = {"screen": lambda s: 1 + (s * w0 / q) / (s * s + s * w0 / q + w0 * w0)}
    found = evaluate(call("peaking", "screen"), Analytic(hidden, poles=(f0,)))
    assert found.value == close(1.0, rel=1e-6)
    assert found.frequency == close(f0, rel=1e-8)


def test_a_dip_between_two_points_of_the_grid_is_found():
    """A narrow notch down to 0.70 half-way between two points of the grid; both its crossings are listed."""
    f0, k = 10 ** (3 + 1 / 40), 0.05
    w0 = 2 * math.pi * f0

    def notch(s):
        u = s / w0
        return (u * u + 0.70 * k * u + 1) / (u * u + k * u + 1)

    response = Analytic({"screen": notch}, grid=SweepGrid(1.0, 1e6, 20.0))
    found = evaluate(call("bandwidth", "screen"), response)
    # With x = f/f0 and v = (x - 1/x)²: |H|² = (v + 0.49 k²)/(v + k²) = 1/2 where v = 0.02 k².
    v = 0.02 * k * k
    upper = (math.sqrt(v) + math.sqrt(v + 4)) / 2
    assert found.value == close(f0 / upper, rel=1e-9)
    assert len(found.crossings) == 2


@pytest.mark.parametrize("q", [0.8, 1.0, 5.0, 1e4])
def test_peaking_of_a_second_order_response(q):
    """Mp = 1/(2ζ√(1 - ζ²)) at f0 √(1 - 2ζ²), ζ = 1/(2q): textbook."""
    zeta = 1 / (2 * q)
    response = Analytic({"screen": resonance(3.3e4, q)}, poles=(3.3e4,) if q > 1 else ())
    found = evaluate(call("peaking", "screen", 0.0), response)
    top = 1 / (2 * zeta * math.sqrt(1 - zeta**2))
    assert found.value == close(top - 1, rel=1e-11)
    assert found.decibels == close(20 * math.log10(top), rel=1e-11)
    assert found.frequency == close(3.3e4 * math.sqrt(1 - 2 * zeta**2), rel=1e-6)


def test_a_response_that_only_falls_has_no_peaking():
    assert evaluate(call("peaking", "screen"), Analytic({"screen": one_pole})).value == 0.0


def test_flatness_counts_departures_both_ways():
    """One pole over 0 Hz to fc/10: 1 - 1/√1.01; a resonance: its peak, see above."""
    falling = evaluate(call("flatness", "screen"), Analytic({"screen": one_pole}), span=(0.0, FC / 10))
    assert falling.value == close(1 - 1 / math.sqrt(1.01), rel=1e-11)
    assert falling.frequency == close(FC / 10)
    assert falling.decibels == close(10 * math.log10(1.01), rel=1e-11)
    ringing = Analytic({"screen": resonance(3.3e4, 5.0)})
    rising = evaluate(call("flatness", "screen"), ringing, span=(0.0, 4e4))
    assert rising.value == close(5 / math.sqrt(1 - 0.01) - 1, rel=1e-11)


def test_gain_and_phase_at_a_frequency():
    response = Analytic({"screen": one_pole})
    at_corner = evaluate(call("gain", "screen"), response, at=FC)
    assert at_corner.value == close(0.1 / math.sqrt(2))
    assert at_corner.decibels == close(-20 - 10 * math.log10(2))
    assert evaluate(call("gain", "screen", 0.0), response, at=FC).value == close(1 / math.sqrt(2))
    assert evaluate(call("phase", "screen"), response, at=FC).value == close(-45)
    assert evaluate(call("phase", "screen", FC), response, at=0.0).value == close(45)


def test_phase_is_in_the_half_open_circle():
    """An inverting reading has +180°, whatever the sign of a zero imaginary part."""
    for sign in (0.0, -0.0):
        inverting = {"screen": lambda s, sign=sign: np.full(np.shape(s), complex(-2.0, sign))}
        response = Analytic(inverting)
        assert evaluate(call("phase", "screen"), response, at=1e3).value == 180.0


def test_gain_over_the_loaded_voltage_of_a_contact():
    shared = resonance(1e5, 2.0)
    response = Analytic({"screen": lambda s: 0.1 * shared(s)}, loaded={"touch": shared})
    assert evaluate(call("gain", "screen", "touch"), response, at=9e4).value == close(0.1, rel=1e-14)
    assert evaluate(call("flatness", "screen", "touch"), response).value < 1e-14


def test_group_delay_of_one_pole():
    """τ = (1/ωc)/(1 + (f/fc)²), textbook."""
    response = Analytic({"screen": one_pole}, slopes={"screen": lambda s: -0.1 / WC / (1 + s / WC) ** 2})
    found = evaluate(call("group_delay", "screen"), response, at=2 * FC)
    assert found.value == close(1 / WC / 5, rel=1e-13)
    relative = evaluate(call("group_delay", "screen", 0.0), response, at=2 * FC)
    assert relative.value == close(-0.8 / WC, rel=1e-13)


def test_rejection_compares_two_drives():
    response = Analytic(
        {"screen": {"difference": lambda s: 2.0 + 0 * s, "common": lambda s: 1e-3 * (1 + s / WC)}},
        drives=("difference", "common"),
        default_drive=None,
    )
    found = evaluate(call("rejection", "screen", "difference", "common"), response, at=FC)
    assert found.value == close(2e3 / math.sqrt(2))
    assert found.decibels == close(20 * math.log10(2e3) - 10 * math.log10(2))


def test_several_sources_without_a_drive_ask_for_one():
    response = Analytic({"screen": one_pole}, drives=("a", "b"), default_drive=None)
    found = evaluate(call("gain", "screen"), response, at=1.0)
    assert (found.value, found.reason) == (None, "unavailable")
    assert "a, b" in found.message


def test_a_zero_reference_asks_for_a_frequency():
    response = Analytic({"screen": lambda s: s / (s + WC)})
    found = evaluate(call("flatness", "screen"), response, span=(0.0, 1e6))
    assert found.reason == "unavailable"
    assert "zero at 0 Hz" in found.message
    assert "flatness(screen, 1 kHz)" in found.message
    assert evaluate(call("bandwidth", "screen", 1e5), response).reason == "not-reached"


def test_extremes_over_a_range():
    response = Analytic({"screen": resonance(3.3e4, 5.0)})
    top = extreme(call("gain", "screen"), response, span=(1e3, 1e6))
    assert top.value == close(5 / math.sqrt(0.99), rel=1e-12)
    low = extreme(call("gain", "screen"), response, which="min", span=(1e3, 1e6))
    assert low.frequency == 1e6
    steepest = extreme(call("phase", "screen"), response, which="magnitude", span=(1e3, 1e6))
    assert steepest.frequency == 1e6


def test_a_figure_says_what_it_needs():
    response = Analytic({"screen": one_pole})
    assert "at which" in evaluate(call("gain", "screen"), response).message
    assert "from where to where" in evaluate(call("flatness", "screen"), response, at=1.0).message
    assert 'no reading "scren"' in evaluate(call("gain", "scren"), response, at=1.0).message
    assert 'no figure "gin"' in evaluate(call("gin", "screen"), response, at=1.0).message
    no_sweep = Analytic({"screen": one_pole}, grid=None)
    assert "no sweep" in evaluate(call("bandwidth", "screen"), no_sweep).message
