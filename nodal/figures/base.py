"""What a figure of merit is given and what it gives back."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from nodal.figure_names import ORIGINS, ArgumentKind, FigureName, unit_of
from nodal.figures.search import Crossing, Span
from nodal.network import FigureCall
from nodal.response import Response, Unavailable

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Result:
    """A figure's value in `unit`, or None with a `reason`.

    "not-reached": the span ends before the value; `bound` says what it proves, (">=", 1e9).
    "unavailable": there is no such value here; `message` says why in a sentence. A value may be infinite.
    `frequency` (Hz) or `instant` (s) is where an extreme stands; `decibels` the same as `value` in dB where
    that makes sense; `crossings` all of a bandwidth's.
    """

    value: float | None
    unit: str = ""
    reason: Literal["not-reached", "unavailable"] | None = None
    message: str = ""
    bound: tuple[Literal["<=", ">="], float] | None = None
    frequency: float | None = None
    decibels: float | None = None
    instant: float | None = None
    crossings: tuple[Crossing, ...] = ()


@dataclass(frozen=True, slots=True)
class Asked:
    """A figure call with its arguments told apart; what the functions of `nodal.figures` work on."""

    row: FigureName
    response: Response
    drive: str | None
    reading: str = ""
    contact: str | None = None
    """The contact asked about, or the one to normalise by."""
    drives: tuple[str, ...] = ()
    reference: float | None = None
    """Hz; None where not given."""
    band: float | None = None
    """Part of the amplitude."""
    origin: str = ORIGINS[0]
    epoch: float | None = None
    """s; None where not given."""
    text: str = ""

    @property
    def unit(self) -> str:
        network = self.response.network
        reading_unit = network.reading(self.reading).unit if self.reading else ""
        if self.row.unit != "gain":
            return unit_of(self.row, reading_unit)
        drive = self.drive or network.default_drive
        under = "V" if self.contact else network.drive(drive).unit if drive else ""
        return unit_of(self.row, reading_unit, under, relative=self.reference is not None)

    def transfer(self, frequencies: Floats) -> Complexes:
        """The reading per unit of the drive, or per loaded volt at the contact where one is given."""
        h = self.response.reading(frequencies, self.reading, self.drive).values
        if self.contact is None:
            return h
        loaded = self.response.loaded(frequencies, self.contact, self.drive).values
        with np.errstate(divide="ignore", invalid="ignore"):
            return h / loaded

    def magnitude(self, frequencies: Floats) -> Floats:
        """|transfer|; `Unavailable` where it is undefined (nothing at the contact to divide by)."""
        size: Floats = np.abs(self.transfer(frequencies))
        if np.isnan(size).any():
            where = frequencies[np.isnan(size)][0]
            raise Unavailable(f"{self.text} has no value at {where:g} Hz: nothing to divide by there")
        return size

    def reference_magnitude(self, span: Span) -> tuple[float, float]:
        """(Hz, |transfer| there): the reference frequency given, else the low end of `span`.

        `Unavailable` where the gain there is zero or has no limit.
        """
        frequency = span[0] if self.reference is None else self.reference
        level = float(self.magnitude(np.array([frequency]))[0])
        if not 0.0 < level < np.inf:
            word = "zero" if level == 0.0 else "infinite"
            inside = ", ".join([self.reading, *([self.contact] if self.contact else [])])
            raise Unavailable(
                f"the gain is {word} at {frequency:g} Hz, so it cannot be the reference; "
                f"name another frequency: {self.row.name}({inside}, 1 kHz)"
            )
        return frequency, level


PointFigure = Callable[[Asked, Floats], Floats]
"""Values at frequencies in Hz (0 allowed); nan where there is none."""

SpanFigure = Callable[[Asked, Span], Result]

EdgeFigure = Callable[[Asked], Result]
"""Of the network's own edge."""


def ask(call: FigureCall, row: FigureName, response: Response, drive: str | None) -> Asked:
    """Tell the arguments of `call` apart; `Unavailable` names what does not exist or does not fit."""
    network = response.network
    known = {
        "reading": tuple(r.name for r in network.readings),
        "contact": tuple(c.name for c in network.contacts),
        "drive": tuple(d.name for d in network.drives),
    }
    if len(call.arguments) < len(row.required):
        raise Unavailable(f"{row.name} needs {' and '.join(row.required)}")
    fields: dict[str, str | float] = {}
    drives: list[str] = []
    given = call.arguments[len(row.required) :]
    kinds = [*row.required, *(_kind(row, argument, known["contact"]) for argument in given)]
    for position, (kind, argument) in enumerate(zip(kinds, call.arguments, strict=True)):
        if position >= len(row.required) and (kind not in row.optional or kind in fields):
            raise Unavailable(f"{row.name} does not take {argument!r} here")
        if kind in known and argument not in known[kind]:
            raise Unavailable(f'there is no {kind} "{argument}"')
        if kind == "drive":
            drives.append(str(argument))
        else:
            fields[kind] = argument

    def number(kind: str) -> float | None:
        return float(fields[kind]) if kind in fields else None

    return Asked(
        row,
        response,
        drive,
        str(fields.get("reading", "")),
        str(fields["contact"]) if "contact" in fields else None,
        tuple(drives),
        number("frequency"),
        number("band"),
        str(fields.get("origin", ORIGINS[0])),
        number("epoch"),
        call.text,
    )


def _kind(row: FigureName, argument: str | float, contacts: Sequence[str]) -> ArgumentKind:
    """What an argument after the required ones is, by its form."""
    if isinstance(argument, float | int):
        return "epoch" if "epoch" in row.optional else "frequency"
    origin = "origin" in row.optional and argument in ORIGINS and argument not in contacts
    return "origin" if origin else "contact"


def decibels(ratio: Floats | float) -> Floats:
    """20 log10 |ratio|, -inf for zero."""
    with np.errstate(divide="ignore"):
        return np.asarray(20.0 * np.log10(np.abs(ratio)), dtype=np.float64)
