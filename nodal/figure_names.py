"""The figures of merit by name: what they are asked about, their unit and a line of description.

A light table without numerics: the language checks `require` statements against it, `nodal.figures` holds a
function for each row, and the command line lists it. Adding a figure adds its row here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

ArgumentKind = Literal["reading", "contact", "drive", "frequency", "band", "origin", "epoch"]

ORIGINS = ("true", "tangent")
"""Where the response parameters of high-voltage measurement count from: where the response sets in, or where
the tangent at its steepest front leaves zero. A contact of such a name is meant as the contact."""

Domain = Literal["point", "span", "edge"]
"""What a figure is a property of: one frequency (`at F`; over a range its extremes count), a whole range of
frequencies (`from F to F`, the sweep where left out), or an edge response (takes neither)."""


@dataclass(frozen=True, slots=True)
class FigureName:
    """One row: a figure, its arguments, unit and meaning.

    `required` arguments stand in this order; the `optional` ones follow in any order, each once at most, and
    are told apart by form (a contact is a name, a frequency a quantity in hertz, an epoch one in seconds, an
    origin one of `ORIGINS`).
    `unit` is an SI symbol, "" for a ratio, or one of the words resolved by `unit_of`: "gain" and "reading".
    `signed` figures are bounded in absolute value by `<=`. `decibels` says whether a limit in dB makes sense:
    the figure's `Result.decibels` then holds the equal of its value.
    """

    name: str
    domain: Domain
    required: tuple[ArgumentKind, ...]
    optional: tuple[ArgumentKind, ...]
    unit: str
    description: str
    signed: bool = False
    decibels: bool = False
    driven: bool = True
    """Whether its value depends on which sources drive."""


_NORMAL: tuple[ArgumentKind, ...] = ("contact", "frequency")
_RECORD: tuple[ArgumentKind, ...] = ("contact", "origin", "epoch")

TABLE: tuple[FigureName, ...] = (
    FigureName(
        "gain",
        "point",
        ("reading",),
        _NORMAL,
        "gain",
        "magnitude of a reading per unit of the drive",
        decibels=True,
    ),
    FigureName(
        "phase", "point", ("reading",), _NORMAL, "°", "phase of a reading, principal value", signed=True
    ),
    FigureName(
        "group_delay",
        "point",
        ("reading",),
        _NORMAL,
        "s",
        "minus the slope of phase over angular frequency",
        signed=True,
    ),
    FigureName(
        "flatness",
        "span",
        ("reading",),
        _NORMAL,
        "",
        "largest relative departure of |gain| from its reference",
        decibels=True,
    ),
    FigureName(
        "bandwidth",
        "span",
        ("reading",),
        _NORMAL,
        "Hz",
        "first frequency above the reference where |gain| falls through 1/√2 of it",
    ),
    FigureName(
        "peaking",
        "span",
        ("reading",),
        _NORMAL,
        "",
        "largest |gain| over its reference, less one",
        decibels=True,
    ),
    FigureName(
        "impedance",
        "point",
        ("contact",),
        (),
        "Ω",
        "magnitude of the chain's impedance seen at a contact",
        driven=False,
    ),
    FigureName(
        "resistance",
        "point",
        ("contact",),
        (),
        "Ω",
        "parallel equivalent resistance of the chain at a contact",
        driven=False,
    ),
    FigureName(
        "capacitance",
        "point",
        ("contact",),
        (),
        "F",
        "parallel equivalent capacitance of the chain at a contact",
        signed=True,
        driven=False,
    ),
    FigureName(
        "disturbance",
        "point",
        ("contact",),
        (),
        "",
        "|loaded / undisturbed| - 1 at a contact",
        signed=True,
        decibels=True,
    ),
    FigureName(
        "error",
        "point",
        ("reading",),
        ("contact",),
        "",
        "|reading| / |undisturbed| - 1",
        signed=True,
        decibels=True,
    ),
    FigureName(
        "rejection",
        "point",
        ("reading", "drive", "drive"),
        (),
        "",
        "|gain| under the first drive over |gain| under the second",
        decibels=True,
        driven=False,
    ),
    FigureName(
        "noise", "span", ("reading",), (), "reading", "rms noise of a reading over the span", driven=False
    ),
    FigureName(
        "noise_density",
        "point",
        ("reading",),
        (),
        "reading/√Hz",
        "one-sided noise density of a reading",
        driven=False,
    ),
    FigureName(
        "rise", "edge", ("reading",), ("contact",), "s", "10 % to 90 % transition duration of a rising edge"
    ),
    FigureName(
        "fall", "edge", ("reading",), ("contact",), "s", "90 % to 10 % transition duration of a falling edge"
    ),
    FigureName(
        "overshoot",
        "edge",
        ("reading",),
        ("contact",),
        "",
        "largest excursion beyond the 100 % level after the 50 % instant",
    ),
    FigureName(
        "preshoot",
        "edge",
        ("reading",),
        ("contact",),
        "",
        "largest excursion beyond the 0 % level before the 50 % instant",
    ),
    FigureName(
        "settling",
        "edge",
        ("reading", "band"),
        ("contact",),
        "s",
        "time from the 50 % instant until the response stays within the band",
    ),
    FigureName(
        "droop",
        "edge",
        ("reading",),
        ("contact",),
        "",
        "fall from the top, read where `top at` says, to the end of the window",
        signed=True,
    ),
    FigureName(
        "propagation_delay",
        "edge",
        ("reading",),
        ("contact",),
        "s",
        "50 % to 50 % from the source's edge to the reading",
        signed=True,
    ),
    FigureName(
        "response_time",
        "edge",
        ("reading",),
        _RECORD,
        "s",
        "integral of one minus the response over the record, from the origin",
        signed=True,
    ),
    FigureName(
        "partial_response_time",
        "edge",
        ("reading",),
        _RECORD,
        "s",
        "largest value of that integral on its way",
        signed=True,
    ),
    FigureName(
        "response_settling_time",
        "edge",
        ("reading",),
        _RECORD,
        "s",
        "time until what is left of that integral stays below 2 % of the time",
    ),
)

BY_NAME: dict[str, FigureName] = {row.name: row for row in TABLE}


def ratio_unit(over: str, under: str) -> str:
    """The unit of a quotient as it is printed: V over V is "", A over V is "A/V"."""
    if over == under:
        return ""
    return f"{over or '1'}/{under}" if under else over


def unit_of(row: FigureName, reading_unit: str = "", drive_unit: str = "", *, relative: bool = False) -> str:
    """The unit of a figure's value; `relative`: a reference frequency is given, so that a gain is a ratio.

    A gain normalised by a contact's voltage has `drive_unit` "V".
    """
    if row.unit == "gain":
        return "" if relative else ratio_unit(reading_unit, drive_unit)
    if row.unit.startswith("reading"):
        return row.unit.replace("reading", reading_unit, 1)
    return row.unit
