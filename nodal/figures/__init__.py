"""Figures of merit: one number out of the curves of a network.

`evaluate` gives a figure at a frequency, over a span or of the edge, `extreme` the largest or smallest value
of a figure over a range. Names, arguments and units stand in `nodal.figure_names`; each figure is one
function of the files here, entered in `POINT_FIGURES` (a value at any frequency), `SPAN_FIGURES` (one value
of a whole span) or `EDGE_FIGURES` (of the response to the network's edge).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Literal

import numpy as np

from nodal.figure_names import BY_NAME
from nodal.figures import contact, edge, noise, transfer
from nodal.figures.base import Asked, EdgeFigure, Floats, PointFigure, Result, SpanFigure, ask, decibels
from nodal.figures.search import Crossing, Span, default_span, grid, maximum, minimum
from nodal.network import FigureCall
from nodal.response import Response, Unavailable

__all__ = ["Crossing", "Result", "evaluate", "extreme"]

POINT_FIGURES: dict[str, PointFigure] = {
    "gain": transfer.gain,
    "phase": transfer.phase,
    "group_delay": transfer.group_delay,
    "rejection": transfer.rejection,
    "impedance": contact.impedance,
    "resistance": contact.resistance,
    "capacitance": contact.capacitance,
    "disturbance": contact.disturbance,
    "error": contact.error,
    "noise_density": noise.noise_density,
}
SPAN_FIGURES: dict[str, SpanFigure] = {
    "flatness": transfer.flatness,
    "bandwidth": transfer.bandwidth,
    "peaking": transfer.peaking,
    "noise": noise.noise,
}
EDGE_FIGURES: dict[str, EdgeFigure] = {
    "rise": edge.rise,
    "fall": edge.fall,
    "overshoot": edge.overshoot,
    "preshoot": edge.preshoot,
    "settling": edge.settling,
    "droop": edge.droop,
    "propagation_delay": edge.propagation_delay,
    "response_time": edge.response_time,
    "partial_response_time": edge.partial_response_time,
    "response_settling_time": edge.response_settling_time,
}

Which = Literal["max", "min", "magnitude"]

_EXCESSES = ("disturbance", "error")
"""Point figures that are a ratio less one; in dB the ratio counts."""


def evaluate(
    figure: FigureCall,
    response: Response,
    *,
    drive: str | None = None,
    at: float | None = None,
    span: Span | None = None,
) -> Result:
    """The figure at the frequency `at`, or over `span` (Hz; the file's sweep where left out).

    A figure of one frequency needs `at`; one of a span does not take it. What cannot be had comes back as
    a Result without a value that says why; nothing is raised for it.
    """
    return _guarded(figure, response, drive, lambda asked: _evaluate(asked, at, span))


def extreme(
    figure: FigureCall,
    response: Response,
    *,
    which: Which = "max",
    drive: str | None = None,
    span: Span | None = None,
) -> Result:
    """The largest ("max"), smallest ("min") or largest absolute ("magnitude") value over `span`, and
    where it is.

    A figure that is itself of a span is evaluated over it.
    """
    return _guarded(figure, response, drive, lambda asked: _extreme(asked, which, span))


def _guarded(
    figure: FigureCall, response: Response, drive: str | None, compute: Callable[[Asked], Result]
) -> Result:
    row = BY_NAME.get(figure.name)
    if row is None:
        return Result(None, "", "unavailable", f'there is no figure "{figure.name}"')
    try:
        asked = ask(figure, row, response, drive)
        if drive is None and response.network.default_drive is None and row.driven:
            names = ", ".join(d.name for d in response.network.drives) or "none"
            raise Unavailable(f"{figure.name} needs a drive; there are: {names}")
        result = compute(asked)
    except Unavailable as why:
        return Result(None, row.unit if row.unit not in ("gain", "reading") else "", "unavailable", str(why))
    return replace(result, unit=asked.unit)


def _evaluate(asked: Asked, at: float | None, span: Span | None) -> Result:
    name = asked.row.name
    if name in EDGE_FIGURES:
        return _of_the_edge(asked, at, span)
    if name in SPAN_FIGURES:
        if at is not None:
            raise Unavailable(f"{name} is of a span of frequencies, not of one: say from where to where")
        return SPAN_FIGURES[name](asked, span or default_span(asked.response.network))
    if at is None:
        raise Unavailable(f"{name} is of one frequency: say at which")
    value = float(POINT_FIGURES[name](asked, np.array([at]))[0])
    if np.isnan(value):
        raise Unavailable(f"{asked.text or name} has no value at {at:g} Hz")
    return Result(value, decibels=_in_decibels(asked, value))


def _extreme(asked: Asked, which: Which, span: Span | None) -> Result:
    name = asked.row.name
    if name in EDGE_FIGURES:
        return _of_the_edge(asked, None, span)
    span = span or default_span(asked.response.network)
    if name in SPAN_FIGURES:
        return SPAN_FIGURES[name](asked, span)

    def curve(frequencies: Floats) -> Floats:
        values = POINT_FIGURES[name](asked, frequencies)
        if which == "magnitude":
            values = np.abs(values)
        return np.where(np.isnan(values), np.inf if which == "min" else -np.inf, values)

    find = minimum if which == "min" else maximum
    where, value = find(curve, grid(asked.response, span))
    undefined = np.inf if which == "min" else -np.inf
    if value == undefined and np.isnan(POINT_FIGURES[name](asked, np.array([where]))[0]):
        raise Unavailable(f"{asked.text or name} has no value from {span[0]:g} Hz to {span[1]:g} Hz")
    return Result(value, frequency=where, decibels=_in_decibels(asked, value))


def _of_the_edge(asked: Asked, at: float | None, span: Span | None) -> Result:
    name = asked.row.name
    if at is not None or span is not None:
        raise Unavailable(f"{name} belongs to the edge, not to frequencies")
    return EDGE_FIGURES[name](asked)


def _in_decibels(asked: Asked, value: float) -> float | None:
    if not asked.row.decibels or asked.unit:
        return None
    ratio = 1.0 + value if asked.row.name in _EXCESSES else value
    return float(decibels(ratio))
