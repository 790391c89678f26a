"""Edges and poles as answers: what `nodal edge` and `nodal poles` print, as text, JSON and CSV."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from rich.text import Text

from nodal.edge import EdgeResponse, Trace
from nodal.figures import edge as edge_figures
from nodal.network import Stimulus
from nodal.poles import PolesAndZeros, Root
from nodal.report import data, numbers
from nodal.report.answers import Point
from nodal.report.terminal import Group, Page, _heading, _packed, figure_table
from nodal.response import Response, Unavailable

Floats = NDArray[np.float64]

ROWS = 16
"""Times in a text table besides those of interest."""

_MOST_POINTS = 14
_SETTLED = 0.02
_SAME = 1e-6
"""Times this close, relatively, need one row."""


@dataclass(frozen=True, slots=True)
class EdgeAnswer:
    """One case: curves over `times` (s), in volts or the reading's unit."""

    response: Response
    found: EdgeResponse
    times: Floats
    units: dict[str, str]
    """Of the readings."""

    def columns(self) -> dict[str, Floats]:
        """All curves under the names that CSV gives them."""
        table = {
            f"reading.{name}_{_word(self.units[name])}": trace(self.times)
            for name, trace in self.found.readings.items()
        }
        for name, pair in self.found.contacts.items():
            table[f"contact.{name}.loaded_v"] = pair.loaded(self.times)
            if pair.undisturbed is not None:
                table[f"contact.{name}.undisturbed_v"] = pair.undisturbed(self.times)
        return table


def answer(response: Response, drive: str, points: int | None, *, text: bool = False) -> EdgeAnswer:
    """The edge of a network, `points` samples at most; few and those of interest for a table of `text`.

    Raises Unavailable where there is none. Figures asked of `response` afterwards use what was solved here.
    """
    from nodal.edge import POINTS, edge_response

    found = edge_response(response.network, drive=drive)
    edge_figures.keep(response, found)
    count = points or (ROWS if text else POINTS)
    units = {reading.name: reading.unit for reading in response.network.readings}
    return EdgeAnswer(response, found, found.grid(max(count, 2)), units)


def edge_case(answer: EdgeAnswer) -> dict[str, Any]:
    """A case of `nodal edge --json`."""
    found, times = answer.found, answer.times

    def curve(trace: Trace | None) -> list[float] | None:
        return None if trace is None else [float(value) for value in trace(times)]

    return {
        "drive": found.drive,
        "time_s": [float(t) for t in times],
        "readings": {name: curve(trace) for name, trace in found.readings.items()},
        "contacts": {
            name: {"loaded": curve(pair.loaded), "undisturbed": curve(pair.undisturbed)}
            for name, pair in found.contacts.items()
        },
        "estimated_error": data.number(found.estimated_error),
    }


def edge_csv(cases: Mapping[str, EdgeAnswer]) -> str:
    """One row a case and time, one column a curve, empty where a case has no such curve."""
    tables = {case: answer.columns() for case, answer in cases.items()}
    header = list(dict.fromkeys(name for table in tables.values() for name in table))
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["case", "time_s", *header])
    for case, answer in cases.items():
        columns = [tables[case].get(name) for name in header]
        for row, time in enumerate(answer.times):
            cells = ("" if column is None else repr(float(column[row])) for column in columns)
            writer.writerow([case, repr(float(time)), *cells])
    return out.getvalue()


def _word(unit: str) -> str:
    return unit.replace("/", "_per_").replace("Ω", "ohm").replace("·", "_").lower() or "ratio"


def stimulus_text(stimulus: Stimulus) -> str:
    """As the file writes it: "edge 1 ns over 100 ns"."""
    window = numbers.quantity(stimulus.window, "s", 6, trim=True)
    ramp = numbers.quantity(stimulus.ramp, "s", 6, trim=True)
    text = f"edge {ramp} over {window}" if stimulus.ramp else f"step over {window}"
    if stimulus.top_at is not None:
        text += f", top at {numbers.quantity(stimulus.top_at, 's', 6, trim=True)}"
    return text


def of_interest(answer: EdgeAnswer) -> list[Point]:
    """When each reading passes 10 %, 50 % and 90 %, where its peak is, when it is settled to 2 %;
    ascending."""
    found: list[Point] = []
    for name in answer.found.readings:
        try:
            record = edge_figures.record(answer.response, name, answer.found.drive)
        except Unavailable:
            continue
        for level, word in ((0.1, "10 %"), (0.5, "50 %"), (0.9, "90 %")):
            found += [Point(float(t), word, name) for t in record.up(level)[:1]]
        for asked in ("overshoot", "settling"):
            found += _marked(answer, name, asked)
    return sorted(found[:_MOST_POINTS], key=lambda point: point.frequency)


def _marked(answer: EdgeAnswer, name: str, asked: str) -> list[Point]:
    from nodal.figures import evaluate
    from nodal.network import FigureCall

    arguments: tuple[str | float, ...] = (name, _SETTLED) if asked == "settling" else (name,)
    result = evaluate(FigureCall(asked, arguments, asked), answer.response, drive=answer.found.drive)
    if asked == "overshoot" and result.instant is not None:
        return [Point(result.instant, "peak", name)]
    if asked == "settling" and result.value:
        record = edge_figures.record(answer.response, name, answer.found.drive)
        return [Point(record.middle + result.value, "settled to 2 %", name)]
    return []


def edge_text(page: Page, case: str, title: str, answer: EdgeAnswer) -> None:
    """A table of a case: times as they come, with the reason of those that are of interest."""
    found = answer.found
    _heading(page, title, [f"case {case}", f"drive {found.drive}", stimulus_text(found.stimulus)])
    interest = of_interest(answer)
    told = np.array([point.frequency for point in interest])
    rows: list[tuple[float, Point | None]] = [
        (float(t), None) for t in answer.times if not (np.abs(told - t) <= _SAME * t).any()
    ]
    rows += [(point.frequency, point) for point in interest]
    rows.sort(key=lambda row: row[0])
    times = np.array([t for t, _ in rows])
    digits = _digits(times)
    first = Group(("time",), (tuple(numbers.quantity(t, "s", digits) for t in times),))
    groups = [
        Group((f"{name}\n{answer.units[name] or 'ratio'}",), (_cells(trace, times),), name)
        for name, trace in found.readings.items()
    ]
    for name, pair in found.contacts.items():
        columns = [("undisturbed V", pair.undisturbed), ("loaded V", pair.loaded)]
        there = [(heading, trace) for heading, trace in columns if trace is not None]
        headings = tuple(f"{name if k == 0 else ''}\n{heading}" for k, (heading, _) in enumerate(there))
        groups.append(Group(headings, tuple(_cells(trace, times) for _, trace in there), name))

    def notes(held: Sequence[Group]) -> Group | None:
        several = len(found.readings) > 1

        def note(point: Point | None) -> str:
            if point is None:
                return ""
            return f"{point.kind} {point.subject}" if several else point.kind

        cells = tuple(note(point) for _, point in rows)
        return Group(("",), (cells,)) if any(cells) else None

    for table in _packed(page, first, groups, notes, {}):
        page.add(table, "")
    for name, pair in found.contacts.items():
        if pair.missing:
            page.add(Text(f"{name}: {pair.missing}", style="dim"))
    largest = max((abs(trace.final) for trace in found.traces if math.isfinite(trace.final)), default=0.0)
    if found.estimated_error > 1e-6 * largest:
        page.add(Text(f"estimated error: {numbers.ratio(found.estimated_error, 2)}", style="yellow"))


def _digits(times: Floats) -> int:
    """As few significant digits as tell neighbours apart, from 4 to 7."""
    gaps = np.diff(times) / np.where(times[1:] > 0, times[1:], 1.0)
    smallest = float(gaps[gaps > 1e-7].min(initial=1.0))
    return min(7, max(4, math.ceil(-math.log10(smallest)) + 1))


def _cells(trace: Trace, times: Floats) -> tuple[str, ...]:
    """Values with the decimals that the largest of them shows with five digits: a column is of one size."""
    values = trace(times)
    largest = float(np.abs(values).max())
    places = 5 - math.ceil(math.log10(largest)) if largest > 0 else 0
    if not 0 <= places <= 8:
        return tuple(numbers.ratio(float(value)) for value in values)
    rounded = [f"{value:.{places}f}" for value in values]
    return tuple(text.lstrip("-") if float(text) == 0 else text for text in rounded)


# Poles


def poles_case(found: PolesAndZeros) -> dict[str, Any]:
    """A case of `nodal poles --json`."""
    return {
        "drive": found.drive,
        "stable": found.stable,
        "lumped": list(found.replaced),
        "poles": [_root(root) for root in found.poles],
        "zeros": {
            name: None if roots is None else [_root(root) for root in roots]
            for name, roots in found.zeros.items()
        },
    }


def _root(root: Root) -> dict[str, Any]:
    """Of a conjugate pair the upper one, with "pair" true."""
    return {
        "re_rad_per_s": root.s.real,
        "im_rad_per_s": root.s.imag,
        "pair": root.pair,
        "natural_frequency_hz": root.frequency,
        "damping_ratio": data.number(root.damping),
        "time_constant_s": data.number(root.time_constant),
        "unstable": root.unstable,
    }


def poles_csv(cases: Mapping[str, PolesAndZeros]) -> str:
    """One row a case and pole or zero."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    keys: list[str] = list(_root(Root(-1.0)))
    writer.writerow(["case", "kind", "reading", *keys])
    for case, found in cases.items():
        kinds = [("pole", "", found.poles), *(("zero", n, roots or ()) for n, roots in found.zeros.items())]
        for kind, reading, roots in kinds:
            for root in roots:
                cells = ["" if value is None else value for value in _root(root).values()]
                writer.writerow([case, kind, reading, *cells])
    return out.getvalue()


def poles_text(page: Page, case: str, title: str, found: PolesAndZeros) -> None:
    """Tables of poles and of each reading's zeros."""
    _heading(page, title, [f"case {case}", f"drive {found.drive}"])
    _roots(page, "poles of the network", found.poles, "", poles=True)
    for name, roots in found.zeros.items():
        if roots is None:
            page.add(f"zeros of {name}: it is zero at every frequency", "")
            continue
        _roots(page, f"zeros of {name}", roots, f"{name} has no zeros", poles=False)
        gone = found.cancelled[name]
        if gone:
            listed = ", ".join(numbers.frequency(root.frequency) for root in gone[:6])
            more = f" and {len(gone) - 6} more" if len(gone) > 6 else ""
            page.add(Text(f"zeros of {name} cancel the poles at {listed}{more}", style="dim"), "")
    if not found.stable:
        page.add(Text("unstable: a pole right of the imaginary axis grows without bound", style="red"))
    if found.replaced:
        names = ", ".join(found.replaced)
        caution = (
            f"simplified here: {names}. A cable counts as one section of inductance and capacitance, a "
            "dielectric has no loss and an amplifier no delay, so that these are no more than a guide"
        )
        page.add(Text(caution, style="yellow"))


def _roots(page: Page, heading: str, roots: Sequence[Root], none: str, *, poles: bool) -> None:
    if not roots:
        page.add(none or "the network has no poles: it is resistive", "")
        return
    columns = (
        tuple(numbers.frequency(root.frequency) for root in roots),
        tuple("" if math.isnan(root.damping) else f"{root.damping:.4f}" for root in roots),
        tuple(numbers.quantity(root.time_constant, "s") for root in roots),
        tuple(_s(root) for root in roots),
        tuple("unstable" if poles and root.unstable else "" for root in roots),
    )
    headings = ("natural frequency", "damping ratio", "time constant", "s in 1/s", "")
    shown = len(columns) if any(columns[-1]) else len(columns) - 1
    page.add(Text(heading, style="bold"))
    first = Group(headings[:1], columns[:1])
    group = Group(headings[1:shown], columns[1:shown])
    for table in _packed(page, first, [group], lambda held: None, {}):
        page.add(table, "")


def _s(root: Root) -> str:
    real = numbers.ratio(root.s.real if root.damping else 0.0)
    return f"{real} ± {numbers.ratio(root.s.imag)} j" if root.pair else real


__all__ = [
    "EdgeAnswer", "answer", "edge_case", "edge_csv", "edge_text", "figure_table", "poles_case", "poles_csv",
    "poles_text", "stimulus_text",
]  # fmt: skip
