"""What the commands answer with, before any thought of how it looks: curves of a sweep, a set of figures."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from nodal.figure_names import BY_NAME, ratio_unit
from nodal.figures import Result, evaluate, extreme
from nodal.figures.search import Span, crossings, default_span, grid, maximum, minimum
from nodal.network import FigureCall, Network, Requirement
from nodal.report.numbers import frequency as hertz
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


def sweep(
    response: Response, frequencies: Floats, drive: str | None, nodes: Sequence[str]
) -> SweepAnswer:
    """All readings and contacts, and the nodes asked for. `drive` None is the default drive, which must
    exist.

    Raises `Unavailable` where the whole network has no solution; what a contact does not have is None there.
    """
    network = response.network
    chosen = network.drive(drive or network.default_drive or "")
    found = response.sweep(frequencies, drive=chosen.name, nodes=nodes, contacts=())
    return SweepAnswer(
        chosen.name, chosen.unit, frequencies,
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


@dataclass(frozen=True, slots=True)
class FigureRow:
    """One figure to evaluate: at a frequency, over a span, or (`which`) its extreme over a range."""

    subject: str
    """The reading or contact it belongs to, for grouping."""
    call: FigureCall
    at: float | None = None
    span: Span | None = None
    which: str | None = None
    drive: str | None = None
    required: bool = field(default=False, compare=False)

    @property
    def label(self) -> str:
        """As in a `require` statement, a key of the JSON answer: "gain(screen) at 0 Hz"."""
        text = self.call.text
        if self.drive is not None:
            text += f" with {self.drive}"
        if self.at is not None:
            text += f" at {hertz(self.at)}"
        if self.span is not None:
            text += f" from {hertz(self.span[0])} to {hertz(self.span[1])}"
        endings = {"max": ", largest", "min": ", smallest", "magnitude": ", largest size"}
        return text + endings.get(self.which or "", "")

    def evaluate(self, response: Response, drive: str | None) -> Result:
        drive = self.drive or drive
        if self.which == "min":
            return extreme(self.call, response, which="min", drive=drive, span=self.span)
        if self.which == "magnitude":
            return extreme(self.call, response, which="magnitude", drive=drive, span=self.span)
        if self.which == "max":
            return extreme(self.call, response, which="max", drive=drive, span=self.span)
        return evaluate(self.call, response, drive=drive, at=self.at, span=self.span)


@dataclass(frozen=True, slots=True)
class FiguresAnswer:
    """Rows in order and, for each case, their results by label."""

    rows: tuple[FigureRow, ...]
    cases: dict[str, dict[str, Result]]
    spans: dict[str, Span]


def figures(responses: Mapping[str, Response], drive: str | None, span: Span | None) -> FiguresAnswer:
    """A sensible set for every reading and contact of the cases, and whatever their requirements ask
    about.

    `span` (Hz) stands in for the sweep of the files. Frequencies follow the first case, so that rows
    compare alike. Rows that no case can fill are left out, unless required. Raises `Unavailable` where a
    file has no sweep and the call no span.
    """
    spans: dict[str, Span] = {}
    for name, response in responses.items():
        spans[name] = span or default_span(response.network)
    rows = list(dict.fromkeys(_rows(responses, drive, spans, explicit=span)))
    cases = {
        name: {row.label: row.evaluate(response, drive) for row in rows}
        for name, response in responses.items()
    }
    kept = tuple(
        row for row in rows
        if row.required or row.call.name == "bandwidth"
        or any(results[row.label].reason != "unavailable" for results in cases.values())
    )
    shown = {name: {row.label: results[row.label] for row in kept} for name, results in cases.items()}
    return FiguresAnswer(kept, shown, spans)


def _rows(
    responses: Mapping[str, Response], drive: str | None, spans: Mapping[str, Span], explicit: Span | None
) -> Iterable[FigureRow]:
    networks = [(name, response.network) for name, response in responses.items()]
    required = _required(network for _, network in networks)
    seen: set[str] = set()
    for name, network in networks:
        for reading in network.readings:
            if reading.name not in seen:
                seen.add(reading.name)
                rows = list(_reading_rows(responses[name], reading.name, drive, spans[name], explicit))
                yield from _gathered([*rows, *(row for row in required if row.subject == reading.name)])
    seen.clear()
    for name, network in networks:
        for contact in network.contacts:
            if contact.name not in seen:
                seen.add(contact.name)
                rows = list(_contact_rows(contact.name, spans[name]))
                yield from _gathered([*rows, *(row for row in required if row.subject == contact.name)])


def _gathered(rows: Sequence[FigureRow]) -> list[FigureRow]:
    """Rows of one figure together, figures in the order of their first row, frequencies ascending."""
    order = list(dict.fromkeys(row.call.name for row in rows))
    return sorted(rows, key=lambda row: (order.index(row.call.name), -1.0 if row.at is None else row.at))


def _reading_rows(
    response: Response, name: str, drive: str | None, span: Span, explicit: Span | None
) -> Iterable[FigureRow]:
    def call(figure: str) -> FigureCall:
        return FigureCall(figure, (name,), f"{figure}({name})")

    yield FigureRow(name, call("gain"), at=0.0)
    edge = evaluate(call("bandwidth"), response, drive=drive, span=span)
    knee = _round_down((edge.value or span[1]) / 10.0)
    if not span[0] < knee < span[1]:
        knee = span[1]
    if evaluate(call("gain"), response, drive=drive, at=0.0).value == 0.0:
        yield FigureRow(name, call("gain"), at=knee)
    yield FigureRow(name, call("bandwidth"), span=explicit)
    yield FigureRow(name, call("peaking"), span=explicit)
    yield FigureRow(name, call("flatness"), span=(span[0], knee))
    yield FigureRow(name, call("group_delay"), at=knee)
    if len(response.network.contacts) == 1:
        yield FigureRow(name, call("error"), at=0.0)
        yield FigureRow(name, call("error"), at=knee)
    yield FigureRow(name, call("noise"), span=explicit)


def _contact_rows(name: str, span: Span) -> Iterable[FigureRow]:
    def row(figure: str, at: float) -> FigureRow:
        return FigureRow(name, FigureCall(figure, (name,), f"{figure}({name})"), at=at)

    decades = whole_decades(span)[-4:]
    yield row("resistance", 0.0)
    if decades:
        yield row("capacitance", decades[0])
    yield from (row("impedance", at) for at in decades)
    yield from (row("disturbance", at) for at in [0.0, *decades])


def _required(networks: Iterable[Network]) -> list[FigureRow]:
    wanted = (requirement for network in networks for requirement in network.requirements)
    rows = (row for r in wanted if BY_NAME[r.figure.name].available for row in _asked_by(r))
    return list(dict.fromkeys(rows))


def _asked_by(requirement: Requirement) -> Iterable[FigureRow]:
    figure = requirement.figure
    row = BY_NAME[figure.name]
    subject = str(figure.arguments[0])

    def asked(which: str | None) -> FigureRow:
        return FigureRow(
            subject, figure, requirement.at, requirement.span, which, requirement.drive, required=True
        )

    if row.domain == "span" or requirement.at is not None:
        yield asked(None)
        return
    largest = "magnitude" if row.signed else "max"
    if requirement.relation in ("<=", "="):
        yield asked("max" if requirement.relation == "=" else largest)
    if requirement.relation in (">=", "="):
        yield asked("min")


def whole_decades(span: Span) -> list[float]:
    """The powers of ten inside a span, ends included, Hz."""
    low, high = span
    first = math.ceil(math.log10(low) - 1e-9) if low > 0.0 else 0
    return [float(f"1e{n}") for n in range(first, math.floor(math.log10(high) + 1e-9) + 1)]


def _round_down(value: float) -> float:
    """The largest of 1, 2, 5 times a power of ten that is not above `value`."""
    power = math.floor(math.log10(value))
    steps = [float(f"{step}e{n}") for n in (power - 1, power) for step in (1, 2, 5)]
    return max(step for step in steps if step <= value)
