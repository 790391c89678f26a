"""Figures on real networks, where they lean on more of a response than its curves."""

from __future__ import annotations

import math

import pytest
import scipy.constants
from support.analytic import call, close

import nodal
from nodal.figures import evaluate

R, C = 1e3, 100e-12
LOW_PASS = """nodal 1
source s: a to ground = 1 V behind 1 kΩ
contact touch: a to ground
branch series: a to b = 1 kΩ
branch shunt: b to ground = 100 pF ∥ 1 MΩ
reading m: b to ground
sweep 1 Hz to 1 GHz, 20 per decade
"""


@pytest.fixture(scope="module")
def response():
    return nodal.loads(LOW_PASS).network().response


@pytest.mark.parametrize("frequency", [0.0, 1e3, 1e6, 1e8])
def test_group_delay_of_one_pole(response, frequency):
    """τ = T/(1 + (ωT)²) with T = C (2R ∥ 1 MΩ), at 0 Hz too: textbook."""
    time = C / (1 / (2 * R) + 1e-6)
    expected = time / (1 + (2 * math.pi * frequency * time) ** 2)
    assert evaluate(call("group_delay", "m"), response, at=frequency).value == close(expected, rel=1e-9)


@pytest.mark.parametrize("frequency", [0.0, 1e6])
def test_group_delay_from_a_contact(response, frequency):
    """From the contact on, the source's resistance counts no more: T = C (R ∥ 1 MΩ)."""
    time = C / (1 / R + 1e-6)
    expected = time / (1 + (2 * math.pi * frequency * time) ** 2)
    found = evaluate(call("group_delay", "m", "touch"), response, at=frequency)
    assert found.value == close(expected, rel=1e-9)


def test_capacitance_at_rest_is_a_limit(response):
    """Y = 1/(R + 1/(G + sC)): dY/ds at 0 is C/(1 + RG)²."""
    found = evaluate(call("capacitance", "touch"), response, at=0.0)
    assert found.value == close(C / (1 + R * 1e-6) ** 2, rel=1e-10)
    assert evaluate(call("resistance", "touch"), response, at=0.0).value == close(R + 1e6)


def test_bandwidth_of_one_pole_in_a_network(response):
    time = C / (1 / (2 * R) + 1e-6)
    found = evaluate(call("bandwidth", "m", 0.0), response)
    assert found.value == close(1 / (2 * math.pi * time), rel=1e-11)


def test_every_resonance_of_a_long_line_is_found():
    """|V| = 1/|cos βl + j (Rs/Z0) sin βl| at the open end of a lossless line behind Rs: textbook.

    Behind 500 Ω on 50 Ω that is 1 at every half wave and passes 1/√2 where sin² βl = 1/99. The sweep alone,
    with 20 points a decade, would see few of the 60 resonances.
    """
    text = """nodal 1
stock line50 { impedance 50 Ω; velocity 0.66 }
source s: a to ground = 1 V behind 500 Ω
cable far: a, ground to b, ground = 20 m of line50
reading m: b to ground
sweep 1 kHz to 300 MHz, 20 per decade
"""
    found = evaluate(call("bandwidth", "m", 0.0), nodal.loads(text).network().response)
    time = 20 / (0.66 * scipy.constants.c)
    offset = math.asin(1 / math.sqrt(99))
    expected = [offset, *(k * math.pi + side * offset for k in range(1, 61) for side in (-1, 1))]
    frequencies = [x / (2 * math.pi * time) for x in expected]
    assert [c.frequency for c in found.crossings] == close(frequencies, rel=1e-10)
    assert [c.direction for c in found.crossings] == ["down", *["up", "down"] * 60]
