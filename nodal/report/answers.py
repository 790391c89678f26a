"""What the commands answer with, before any thought of how it looks: curves of a sweep, a set of figures."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from nodal.figure_names import ratio_unit
from nodal.figure_set import FigureRow as FigureRow
from nodal.figure_set import FiguresAnswer as FiguresAnswer
from nodal.figure_set import figures as figures
from nodal.figure_set import whole_decades as whole_decades
from nodal.figures.search import Span, crossings, grid, maximum, minimum
from nodal.response import Curve, Quality, Response, Unavailable

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class ContactCurves:
    """Curves of one contact; None where the network has no such thing (`message` says why)."""

    impedance: Complexes | None
    loaded: Complexes | None
    undisturbed: Complexes | None
    change: Complexes | None
    message: str = ""


@dataclass(frozen=True, slots=True)
class SweepAnswer:
    """One case's curves over `frequency` (Hz), per unit of `drive`; `unit` is the drive's."""

    drive: str
    unit: str
    frequency: Floats
    readings: dict[str, Complexes]
    reading_units: dict[str, str]
    """V/V comes as "", A/V as "A/V"."""
    nodes: dict[str, Complexes]
    contacts: dict[str, ContactCurves]
    quality: Quality


def sweep(response: Response, frequencies: Floats, drive: str | None, nodes: Sequence[str]) -> SweepAnswer:
    """All readings and contacts, and the nodes asked for. `drive` None is the default drive, which must
    exist.

    Raises `Unavailable` where the whole network has no solution; what a contact does not have is None there.
    """
    network = response.network
    chosen = network.drive(drive or network.default_drive or "")
    found = response.sweep(frequencies, drive=chosen.name, nodes=nodes, contacts=())
    return SweepAnswer(
        chosen.name,
        chosen.unit,
        frequencies,
        {name: curve.values for name, curve in found.readings.items()},
        {reading.name: ratio_unit(reading.unit, chosen.unit) for reading in network.readings},
        {name: curve.values for name, curve in found.nodes.items()},
        {c.name: _contact(response, frequencies, c.name, chosen.name) for c in network.contacts},
        response.quality,
    )


def _contact(response: Response, frequencies: Floats, name: str, drive: str) -> ContactCurves:
    messages: list[str] = []

    def tried(curve: Callable[[], Curve]) -> Complexes | None:
        try:
            return curve().values
        except Unavailable as why:
            messages.append(str(why))
            return None

    return ContactCurves(
        impedance=tried(lambda: response.impedance(frequencies, name)),
        loaded=tried(lambda: response.loaded(frequencies, name, drive)),
        undisturbed=tried(lambda: response.undisturbed(frequencies, name, drive)),
        change=tried(lambda: response.change(frequencies, name, drive)),
        message=messages[0] if messages else "",
    )


@dataclass(frozen=True, slots=True)
class Point:
    """A frequency worth a row of its own, Hz, and why."""

    frequency: float
    kind: str
    subject: str = ""
    """The reading or contact it belongs to."""


def points_of_interest(response: Response, span: Span, drive: str | None, most: int = 12) -> list[Point]:
    """Half-power crossings, interior peaks and dips of the readings, least impedances, resonances;
    ascending.

    At most `most`, the more telling kinds first.
    """
    x = grid(response, span)
    found: list[Point] = []
    for reading in response.network.readings:

        def size(f: Floats, name: str = reading.name) -> Floats:
            return np.abs(response.reading(f, name, drive).values)

        ends = size(np.array(span))
        reference = ends[0] if ends[0] > 0.0 else float(np.max(size(x)))
        if not 0.0 < reference < math.inf:
            continue
        level = reference / math.sqrt(2.0)
        found += [Point(c.frequency, "-3 dB", reading.name) for c in crossings(size, x, level)[:4]]
        where, top = maximum(size, x)
        if top > 1.001 * max(ends):
            found.append(Point(where, "peak", reading.name))
        where, bottom = minimum(size, x)
        if bottom < 0.999 * min(ends):
            found.append(Point(where, "dip", reading.name))
    for contact in response.network.contacts:

        def seen(f: Floats, name: str = contact.name) -> Floats:
            return np.abs(response.impedance(f, name).values)

        try:
            where, least = minimum(seen, x)
            if least < 0.999 * min(seen(np.array(span))):
                found.append(Point(where, "least |Z|", contact.name))
        except Unavailable:
            continue
    for pole in response.lightly_damped():
        near = any(abs(math.log(pole / p.frequency)) < 0.05 for p in found if p.frequency > 0.0)
        if span[0] < pole < span[1] and not near:
            found.append(Point(float(pole), "resonance"))
    return sorted(found[:most], key=lambda point: point.frequency)
