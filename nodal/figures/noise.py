"""Noise of a reading (Nyquist 1928: 4kT Re Y in every passive part; amplifiers by their own densities)."""

from __future__ import annotations

import numpy as np

from nodal.figures.base import Asked, Floats, Result
from nodal.figures.search import Span, integral, travel_time


def noise_density(asked: Asked, frequencies: Floats) -> Floats:
    """One-sided amplitude density at the displayed reading, its unit per √Hz; source resistance included."""
    return asked.response.noise_density(frequencies, asked.reading)


def noise(asked: Asked, span: Span) -> Result:
    """√(∫ density² df) over the span: rms at the displayed reading, in its unit.

    Integrated adaptively to about 1e-9, with breaks at every decade, at lightly damped poles and at each
    half wave of the longest cable.
    """
    low, high = span
    if high <= low:
        return Result(0.0, asked.unit)
    bottom = low if low > 0.0 else min(high, 1.0) * 1e-3
    decades = int(np.ceil(np.log10(high) - np.log10(bottom)))
    breaks = [np.array([low, high]), np.geomspace(bottom, high, decades + 1)]
    poles = asked.response.lightly_damped()
    breaks.append(poles[(poles > low) & (poles < high)])
    time = travel_time(asked.response.network)
    if time > 0.0 and high * time > 0.5:
        halves = min(int(2.0 * high * time), 50_000)
        breaks.append(np.linspace(bottom, high, halves + 1))
    points = np.unique(np.concatenate(breaks))
    points = points[(points >= low) & (points <= high)]

    def power(f: Floats) -> Floats:
        return asked.response.noise_density(f, asked.reading) ** 2

    total, _ = integral(power, points)
    return Result(float(np.sqrt(total)), asked.unit)
