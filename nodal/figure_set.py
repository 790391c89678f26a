"""The set of figures that a design is judged by: a sensible choice for every reading and contact, and
whatever its requirements ask about. `nodal figures` shows it, records keep it.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from nodal.figure_names import BY_NAME
from nodal.figures import Result, evaluate, extreme
from nodal.figures.search import Span, default_span
from nodal.language.units import show
from nodal.network import FigureCall, Network, Requirement
from nodal.response import Response


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
            text += f" at {_hertz(self.at)}"
        if self.span is not None:
            text += f" from {_hertz(self.span[0])} to {_hertz(self.span[1])}"
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
    rows = list(dict.fromkeys(choose(responses, drive, spans, explicit=span)))
    cases = {
        name: {row.label: row.evaluate(response, drive) for row in rows}
        for name, response in responses.items()
    }
    kept = tuple(
        row
        for row in rows
        if row.required
        or row.call.name == "bandwidth"
        or any(results[row.label].reason != "unavailable" for results in cases.values())
    )
    shown = {name: {row.label: results[row.label] for row in kept} for name, results in cases.items()}
    return FiguresAnswer(kept, shown, spans)


def edge_figures(responses: Mapping[str, Response], drive: str | None) -> FiguresAnswer:
    """What is asked about the edges of the cases: the same for every reading, and whatever requirements ask.

    Rows that no case can fill are left out, unless required.
    """
    networks = [response.network for response in responses.values()]
    wanted = [row for row in required(networks) if BY_NAME[row.call.name].domain == "edge"]
    rows: list[FigureRow] = []
    for name in dict.fromkeys(reading.name for network in networks for reading in network.readings):
        rows += (FigureRow(name, call) for call in _edge_calls(name))
        rows += (row for row in wanted if row.subject == name)
    rows = list(dict.fromkeys(rows))
    cases = {
        case: {row.label: row.evaluate(response, drive) for row in rows}
        for case, response in responses.items()
    }
    kept = tuple(
        row
        for row in rows
        if row.required or any(results[row.label].reason != "unavailable" for results in cases.values())
    )
    shown = {case: {row.label: results[row.label] for row in kept} for case, results in cases.items()}
    return FiguresAnswer(kept, shown, {})


def _edge_calls(name: str) -> Iterable[FigureCall]:
    for figure in ("rise", "fall", "overshoot", "preshoot"):
        yield FigureCall(figure, (name,), f"{figure}({name})")
    yield FigureCall("settling", (name, 0.02), f"settling({name}, 2 %)")
    for figure in ("droop", "propagation_delay", "response_time"):
        yield FigureCall(figure, (name,), f"{figure}({name})")


def choose(
    responses: Mapping[str, Response], drive: str | None, spans: Mapping[str, Span], explicit: Span | None
) -> Iterable[FigureRow]:
    """The rows of `figures` before anything is left out, some perhaps twice. `spans` holds each case's sweep,
    `explicit` what stands in for all of them.
    """
    networks = [(name, response.network) for name, response in responses.items()]
    wanted = required(network for _, network in networks)
    seen: set[str] = set()
    for name, network in networks:
        for reading in network.readings:
            if reading.name not in seen:
                seen.add(reading.name)
                rows = list(_reading_rows(responses[name], reading.name, drive, spans[name], explicit))
                yield from _gathered([*rows, *(row for row in wanted if row.subject == reading.name)])
    seen.clear()
    for name, network in networks:
        for contact in network.contacts:
            if contact.name not in seen:
                seen.add(contact.name)
                rows = list(_contact_rows(contact.name, spans[name]))
                yield from _gathered([*rows, *(row for row in wanted if row.subject == contact.name)])


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


def required(networks: Iterable[Network]) -> list[FigureRow]:
    """The figures that requirements ask about, each once."""
    wanted = (requirement for network in networks for requirement in network.requirements)
    return list(dict.fromkeys(row for requirement in wanted for row in _asked_by(requirement)))


def _asked_by(requirement: Requirement) -> Iterable[FigureRow]:
    figure = requirement.figure
    row = BY_NAME[figure.name]
    subject = str(figure.arguments[0])

    def asked(which: str | None) -> FigureRow:
        return FigureRow(
            subject, figure, requirement.at, requirement.span, which, requirement.drive, required=True
        )

    if row.domain != "point" or requirement.at is not None:
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
    """The largest of 1, 2, 5 times a power of ten that is not above `value`, or only by rounding."""
    value *= 1.0 + 1e-9
    power = math.floor(math.log10(value))
    steps = [float(f"{step}e{n}") for n in (power - 1, power) for step in (1, 2, 5)]
    return max(step for step in steps if step <= value)


def _hertz(value: float) -> str:
    return show(value, "Hz", 12)
