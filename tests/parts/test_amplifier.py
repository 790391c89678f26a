"""Amplifiers against the transfer functions that their fields mean (scipy.signal for the polynomials)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from nodal.network import Drive, Network, Reading
from nodal.parts import Amplifier, CurrentSource, Resistor, VoltageSource
from nodal.response import Response
from nodal.values import Value

F = np.geomspace(1.0, 1e9, 37)


def driven(amplifier: Amplifier) -> Network:
    """Inputs a, b driven by sources, the output loaded."""
    return Network(
        ("ground", "a", "b", "out"),
        (
            VoltageSource("high", 1, 0, Value(1.0)),
            VoltageSource("low", 2, 0, Value(1.0)),
            amplifier,
            Resistor("load", 3, 0, Value(50.0)),
        ),
        readings=(Reading("out", 3, 0),),
        drives=(
            Drive("difference", (("high", 0.5), ("low", -0.5))),
            Drive("common", (("high", 1.0), ("low", 1.0))),
        ),
    )


def test_poles_zeros_and_delay() -> None:
    amplifier = Amplifier(
        "m",
        1,
        2,
        3,
        0,
        gain=Value(-7.0),
        poles=((1e6, None), (3e7, 0.8)),
        zeros=((5e5, None), (2e8, 2.0)),
        delay=3e-9,
    )
    w = 2 * np.pi * np.array([1e6, 3e7, 5e5, 2e8])
    denominator = np.polymul([1 / w[0], 1], [1 / w[1] ** 2, 1 / (0.8 * w[1]), 1])
    numerator = -7.0 * np.polymul([1 / w[2], 1], [1 / w[3] ** 2, 1 / (2.0 * w[3]), 1])
    _, expected = signal.freqs(numerator, denominator, 2 * np.pi * F)
    expected = expected * np.exp(-2j * np.pi * F * 3e-9)
    assert np.allclose(
        Response(driven(amplifier)).reading(F, "out", "difference").values, expected, rtol=1e-11
    )


def test_transconductance_drives_a_current_out_of_its_first_output() -> None:
    amplifier = Amplifier("m", 1, 2, 3, 0, transconductance=Value(0.02))
    values = Response(driven(amplifier)).reading(F, "out", "difference").values
    assert np.allclose(values, 0.02 * 50.0, rtol=1e-14)


def test_common_mode_rejection_falls_above_its_corner() -> None:
    amplifier = Amplifier("m", 1, 2, 3, 0, gain=Value(4.0), poles=((1e7, None),), common_mode=(1e4, 1e3))
    response = Response(driven(amplifier))
    ratio = response.reading(F, "out", "difference").values / response.reading(F, "out", "common").values
    assert np.allclose(ratio, 1e4 / (1 + 1j * F / 1e3), rtol=1e-10)


def test_its_two_noises() -> None:
    """e_n² + (i_n R)² + 4kTR at the input of gain 2 (textbook; R noiseless here but for 4kTR of its own)."""
    network = Network(
        ("ground", "a", "b", "out"),
        (
            CurrentSource("s", 1, 0, Value(1.0)),
            Resistor("r", 1, 0, Value(1e5)),
            Amplifier("m", 1, 0, 3, 0, gain=Value(2.0), noise_voltage=5e-9, current_noise=1e-13),
            Resistor("load", 3, 0, Value(50.0), noiseless=True),
        ),
        readings=(Reading("out", 3, 0, times=Value(10.0)),),
        temperature=290.0,
    )
    expected = 20 * np.sqrt(5e-9**2 + (1e-13 * 1e5) ** 2 + 4 * 1.380649e-23 * 290 * 1e5)
    assert Response(network).noise_density([0.0, 1.0, 1e6], "out") == pytest.approx([expected] * 3, rel=1e-12)
