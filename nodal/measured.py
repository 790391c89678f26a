"""Figures as records keep them: the set that `nodal figures` shows, for every case, each with what of it is
rounding.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from nodal.checks import Checks
from nodal.figure_names import BY_NAME
from nodal.figure_set import FigureRow, choose, required
from nodal.figures import Result
from nodal.response import Response

Label = str
"""As `nodal figures` names a figure: "gain(screen) at 0 Hz"."""


@dataclass(frozen=True, slots=True)
class Measured:
    """A figure's value in `unit` (SI), infinite perhaps; or what the sweep proves of it where `bound` is ">="
    or "<=".

    A difference up to `floor`, in the same unit, is rounding and no change.
    """

    value: float
    unit: str
    bound: Literal["<=", ">="] | None = None
    floor: float = 0.0


def measure(checks: Checks, cases: Sequence[str] | None = None) -> dict[str, dict[Label, Measured]]:
    """Every figure of the set that has a value, by case (None: all) and label; each case is solved once.

    The rows are the same whatever `cases` are asked for. Where no drive is the default one, every drive gets
    its own rows; where a file has no sweep, only the figures of its requirements are there.
    """
    responses = {case: checks.response(case) for case in checks.design.cases}
    rows = _rows(responses)
    found: dict[str, dict[Label, Measured]] = {}
    for case in checks.design.cases if cases is None else cases:
        response = responses[case]
        drives = {drive.name for drive in response.network.drives}
        found[case] = {}
        for row in rows:
            if row.drive is None or row.drive in drives:
                measured = _measured(row, row.evaluate(response, None), response)
                if measured is not None:
                    found[case][row.label] = measured
    return found


def _rows(responses: Mapping[str, Response]) -> list[FigureRow]:
    swept = {case: response for case, response in responses.items() if response.network.grid is not None}
    spans = {
        case: (grid.low, grid.high)
        for case, response in swept.items()
        if (grid := response.network.grid) is not None
    }
    rows: list[FigureRow] = []
    networks = [response.network for response in responses.values()]
    if all(network.default_drive is not None or not network.drives for network in networks):
        rows += choose(swept, None, spans, None)
    else:
        names = dict.fromkeys(drive.name for network in networks for drive in network.drives)
        for name in names:
            known = {
                case: response
                for case, response in swept.items()
                if name in {drive.name for drive in response.network.drives}
            }
            rows += (_driven(row, name) for row in choose(known, name, spans, None))
    return list(dict.fromkeys([*rows, *required(networks)]))


def _driven(row: FigureRow, drive: str) -> FigureRow:
    """The row under a drive of its own, unless no drive matters to it or it has one."""
    return replace(row, drive=drive) if BY_NAME[row.call.name].driven and row.drive is None else row


def _measured(row: FigureRow, result: Result, response: Response) -> Measured | None:
    if result.reason == "not-reached" and result.bound is not None:
        return Measured(result.bound[1], result.unit, result.bound[0])
    if result.value is None or math.isnan(result.value):
        return None
    floor = _floor(row, result, response)
    return Measured(math.inf if floor >= abs(result.value) > 0.0 and row.call.name in _RECIPROCAL
                    else result.value, result.unit, floor=floor)  # fmt: skip


# What of a figure is rounding. The solver holds 1e-10 of each curve or says so; common practice, no source.

_OF_A_CURVE = 1e-10
_OF_A_DIFFERENCE = 1e-9
"""Of a ratio less one."""
_EXACT_DIFFERENCE = 1e-15
"""Of a disturbance, which is worked out without taking a difference."""
_OF_A_NULL = 1e-13
"""Of what is left where large contributions cancel."""
_OF_AN_EDGE = 1e-8

_RECIPROCAL = ("resistance", "rejection")
"""Figures that grow beyond all bounds as something else vanishes: what is rounding there is infinite here."""


def _floor(row: FigureRow, result: Result, response: Response) -> float:
    value = abs(result.value or 0.0)
    figure = BY_NAME[row.call.name]
    if figure.domain == "edge":
        stimulus = response.network.stimulus
        return _OF_AN_EDGE * (stimulus.window if figure.unit == "s" and stimulus is not None else 1.0)
    frequency = row.at if row.at is not None else result.frequency
    match figure.name:
        case "flatness" | "peaking" | "error":
            return _OF_A_DIFFERENCE
        case "disturbance":
            return _EXACT_DIFFERENCE
        case "phase":
            return math.degrees(_OF_A_DIFFERENCE)
        case "group_delay":
            return _OF_A_DIFFERENCE / (2.0 * math.pi * frequency) if frequency else 0.0
        case "gain":
            times = response.network.reading(row.subject).times
            return 1e-15 * abs(float(times))
        case "rejection":
            return _OF_A_NULL * value**2 if math.isfinite(value) else 0.0
        case "resistance" | "capacitance" if frequency:
            size = float(np.abs(response.impedance(np.array([frequency]), row.subject).values[0]))
            if not 0.0 < size < math.inf or not math.isfinite(value):
                return 0.0
            if figure.name == "capacitance":
                return _OF_A_CURVE / (size * 2.0 * math.pi * frequency)
            return _OF_A_CURVE * value * (value / size)
    return 0.0
