"""Figures of a reading's transfer function: gain, phase, group delay, flatness, bandwidth, peaking,
rejection.

Throughout, H is the reading per unit of the drive; where a contact is given, per loaded volt at that
contact; the reference is |H| at the frequency given, else at the low end of the span.
"""

from __future__ import annotations

import numpy as np

from nodal.figures.base import Asked, Floats, Result, decibels
from nodal.figures.search import Span, crossings, grid, maximum, minimum


def gain(asked: Asked, frequencies: Floats) -> Floats:
    """|H|, in the reading's unit per unit of the drive; |H|/reference, a ratio, where a frequency is given.

    Common usage of the trade; see IEC 60050-312 for the ratio of a measuring chain.
    """
    size = asked.magnitude(frequencies)
    if asked.reference is None:
        return size
    return size / asked.reference_magnitude((asked.reference, asked.reference))[1]


def phase(asked: Asked, frequencies: Floats) -> Floats:
    """arg H in degrees, the principal value in (-180, 180], also over a range; no value where H is zero.

    Positive where the reading leads. With a reference frequency, the phase against that at the reference.
    """
    h = asked.transfer(frequencies)
    if asked.reference is not None:
        h = h * np.conj(asked.transfer(np.array([asked.reference]))[0])
    degrees = np.degrees(np.angle(h))
    # arg of a negative real number with imaginary part -0.0 is -180.
    degrees = np.where(degrees == -180.0, 180.0, degrees)
    return np.where((h == 0.0) | ~np.isfinite(h), np.nan, degrees)


def group_delay(asked: Asked, frequencies: Floats) -> Floats:
    """-dφ/dω in seconds, exactly: -Re((dH/ds)/H), from the derivative of the solution, not from
    differences.

    With a contact, the delay from there to the reading; with a reference frequency, the delay less that
    at the reference. No value where H is zero.
    """

    def delay(f: Floats) -> Floats:
        h, slope = asked.response.derivative(f, asked.reading, asked.drive)
        with np.errstate(divide="ignore", invalid="ignore"):
            total: Floats = -(slope.values / h.values).real
            if asked.contact is not None:
                there, slope_there = asked.response.loaded_derivative(f, asked.contact, asked.drive)
                total = total + (slope_there.values / there.values).real
        return total

    own = delay(frequencies)
    return own if asked.reference is None else own - delay(np.array([asked.reference]))


def rejection(asked: Asked, frequencies: Floats) -> Floats:
    """|H| under the first drive over |H| under the second: common-mode rejection with a difference and a
    common drive.

    Infinite where the second leaves nothing; no value where both do.
    """
    wanted, unwanted = (
        np.abs(asked.response.reading(frequencies, asked.reading, drive).values) for drive in asked.drives
    )
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(wanted / unwanted, dtype=np.float64)


def flatness(asked: Asked, span: Span) -> Result:
    """max over the span of ||H|/reference - 1|; in dB, max of |20 log10(|H|/reference)|."""
    _, reference = asked.reference_magnitude(span)
    x = grid(asked.response, span)
    at_top, top = maximum(asked.magnitude, x)
    at_bottom, bottom = minimum(asked.magnitude, x)
    rise, fall = top / reference - 1.0, 1.0 - bottom / reference
    worst_db = float(np.max(np.abs(decibels(np.array([top, bottom]) / reference))))
    return Result(max(rise, fall), frequency=at_top if rise >= fall else at_bottom, decibels=worst_db)


def peaking(asked: Asked, span: Span) -> Result:
    """max over the span of |H|/reference, less one; in dB, 20 log10 of that maximum. 0 where |H| only
    falls.
    """
    _, reference = asked.reference_magnitude(span)
    where, top = maximum(asked.magnitude, grid(asked.response, span))
    ratio = max(top / reference, 1.0) if asked.reference is None else top / reference
    return Result(ratio - 1.0, frequency=where, decibels=float(decibels(ratio)))


def bandwidth(asked: Asked, span: Span) -> Result:
    """First frequency above the reference where |H| falls through reference/√2 (the half-power, -3 dB
    point).

    All crossings of that level inside the span are listed, also those below the reference frequency. Not
    reached where the span ends first.
    """
    frequency, reference = asked.reference_magnitude(span)
    if frequency >= span[1]:
        return Result(None, "Hz", "not-reached", bound=(">=", span[1]))
    start = min(frequency, span[0])
    found = crossings(asked.magnitude, grid(asked.response, (start, span[1])), reference / np.sqrt(2.0))
    down = [c.frequency for c in found if c.direction == "down" and c.frequency > frequency]
    if not down:
        return Result(None, "Hz", "not-reached", bound=(">=", span[1]), crossings=found)
    return Result(down[0], "Hz", crossings=found)
