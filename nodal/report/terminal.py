"""Answers as text for people: aligned tables of at most 100 columns."""

from __future__ import annotations

import io
import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from rich import box
from rich.console import Console, RenderableType
from rich.measure import Measurement
from rich.table import Table
from rich.text import Text

from nodal.figures import Result
from nodal.network import Network
from nodal.report import numbers
from nodal.report.answers import ContactCurves, FigureRow, FiguresAnswer, Point, SweepAnswer

WIDEST = 100
HAZARDOUS = 60.0
"""V; above it the caution is shown (the dc limit of hazardous live voltage, IEC 61010-1; value from
memory)."""

_MOST_CROSSINGS = 8
_ROUNDING = 1e-13
"""What is left of a difference of equal numbers: shown as 0."""

CAUTION = "Model results are no insulation, clearance or safety verification."


class Page:
    """Collects what is printed, then gives it as one string. `width` is cut to 100 columns."""

    def __init__(self, width: int = WIDEST, *, color: bool = False) -> None:
        self._out = io.StringIO()
        self.console = Console(
            file=self._out,
            width=max(min(width, WIDEST), 40),
            force_terminal=color,
            no_color=not color,
            color_system="standard" if color else None,
            highlight=False,
            markup=False,
            emoji=False,
            legacy_windows=False,
            soft_wrap=False,
        )

    def add(self, *things: RenderableType) -> None:
        for thing in things:
            self.console.print(thing)

    def fits(self, table: Table) -> bool:
        options = self.console.options.update(max_width=10_000)
        return Measurement.get(self.console, options, table).maximum <= self.console.width

    def text(self) -> str:
        return "\n".join(line.rstrip() for line in self._out.getvalue().splitlines()).rstrip("\n") + "\n"


@dataclass(frozen=True, slots=True)
class Group:
    """Columns that stay together: a heading over each, and its cells."""

    headings: tuple[str, ...]
    cells: tuple[tuple[str, ...], ...]
    """One tuple a column."""
    subject: str = ""


def _table(first: Group, groups: Sequence[Group], last: Group | None, sections: Mapping[int, str]) -> Table:
    """A table of groups; `sections` names headings that stand before the row of that number."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, show_edge=False, header_style="bold")
    for heading in first.headings:
        side: Literal["left", "right"] = "left" if sections else "right"
        table.add_column(heading, justify=side, no_wrap=not sections, overflow="fold")
    for group in groups:
        for heading in group.headings:
            table.add_column(heading, justify="right", no_wrap=True)
    if last is not None:
        table.add_column(last.headings[0], justify="left", style="dim", overflow="fold")
    columns = [*first.cells, *(column for group in groups for column in group.cells)]
    if last is not None:
        columns += last.cells
    for row in range(len(first.cells[0])):
        if row in sections:
            table.add_row(Text(sections[row], style="bold"))
        table.add_row(*(column[row] for column in columns))
    return table


def _packed(
    page: Page,
    first: Group,
    groups: Sequence[Group],
    last: Callable[[Sequence[Group]], Group | None],
    sections: Mapping[int, str],
) -> list[Table]:
    """As few tables as hold all groups within the page's width, each with the first column and its last
    one."""
    tables: list[Table] = []
    held: list[Group] = []
    for group in groups:
        if held and not page.fits(_table(first, [*held, group], last([*held, group]), sections)):
            tables.append(_table(first, held, last(held), sections))
            held = []
        held.append(group)
    tables.append(_table(first, held, last(held), sections))
    return tables


def _heading(page: Page, title: str, details: Iterable[str]) -> None:
    if title:
        page.add(Text(title, style="bold"))
    page.add(Text(" · ".join(detail for detail in details if detail), style="dim"), "")


def sweep(
    page: Page, case: str, title: str, answer: SweepAnswer, points: Sequence[Point | None], total: int | None
) -> None:
    """Curves of one case as tables. `points` tell the reason of each row (None: a point of the sweep).

    `total` is how many points the whole sweep has where these are only some of them, else None.
    """
    drive = f"per {'volt' if answer.unit == 'V' else 'ampere'} of {answer.drive}"
    _heading(page, title, [f"case {case}", drive])
    first = Group(("frequency",), (tuple(numbers.frequency(f) for f in answer.frequency),))
    per_drive = "" if answer.unit == "V" else f"V/{answer.unit}"
    groups = [
        *(_curve_group(name, name, v, answer.reading_units[name]) for name, v in answer.readings.items()),
        *(_curve_group("", f"node {name}", values, per_drive) for name, values in answer.nodes.items()),
        *(_contact_group(name, curves) for name, curves in answer.contacts.items()),
    ]

    def notes(held: Sequence[Group]) -> Group | None:
        named = {group.subject for group in held} | {""}
        several = len(held) > 1

        def note(point: Point | None) -> str:
            if point is None or point.subject not in named:
                return ""
            return f"{point.kind} {point.subject}" if several else point.kind

        cells = tuple(note(point).strip() for point in points)
        return Group(("",), (cells,)) if any(cells) else None

    for table in _packed(page, first, groups, notes, {}):
        page.add(table, "")
    for name, curves in answer.contacts.items():
        if curves.message:
            page.add(Text(f"{name}: {curves.message}", style="dim"))
    if total is not None:
        shown = sum(p is None for p in points)
        extra = len(points) - shown
        more = f" and {extra} of interest" if extra else ""
        page.add(Text(f"{shown} of {total} points{more} shown; --format csv for all", style="dim"))
    worst = answer.quality.worst_estimated_error
    if worst > 1e-10:
        page.add(Text(f"worst estimated relative error: {worst:.1e}", style="yellow"))


def _curve_group(subject: str, name: str, values: NDArray[np.complex128], unit: str) -> Group:
    size, angle = _polar(values)
    phase = tuple(numbers.degrees(a) if s > 0.0 else "" for a, s in zip(angle, size, strict=True))
    ratios = tuple(numbers.ratio(v) for v in size)
    if unit:
        return Group((f"{name}\n{unit}", "\nphase °"), (ratios, phase), subject)
    with np.errstate(divide="ignore"):
        db = tuple(numbers.decibels(v) for v in 20.0 * np.log10(size))
    return Group((f"{name}\nratio", "\ndB", "\nphase °"), (ratios, db, phase), subject)


def _contact_group(name: str, curves: ContactCurves) -> Group:
    headings: list[str] = []
    columns: list[tuple[str, ...]] = []

    def add(heading: str, cells: Iterable[str]) -> None:
        headings.append(f"{name if not headings else ''}\n{heading}")
        columns.append(tuple(cells))

    if curves.undisturbed is not None:
        add("undisturbed", (numbers.ratio(v) for v in _polar(curves.undisturbed)[0]))
    if curves.loaded is not None:
        add("loaded", (numbers.ratio(v) for v in _polar(curves.loaded)[0]))
    if curves.change is not None:
        z = curves.change
        departure = (2.0 * z.real + np.abs(z) ** 2) / (np.abs(1.0 + z) + 1.0)
        add("change", (numbers.part_of_one(float(v)) for v in departure))
    if curves.impedance is not None:
        size, angle = _polar(curves.impedance)
        add("|Z|", (numbers.quantity(float(v), "Ω") for v in size))
        pairs = zip(angle, size, strict=True)
        add("phase °", (numbers.degrees(a) if 0.0 < v < math.inf else "" for a, v in pairs))
    return Group(tuple(headings), tuple(columns), name)


def _polar(values: NDArray[np.complex128]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    degrees = np.degrees(np.angle(values))
    return np.abs(values), np.where(degrees == -180.0, 180.0, degrees)


def figures(page: Page, file: str, title: str, drive: str | None, answer: FiguresAnswer) -> None:
    """A heading and the table of figures."""
    spans = dict.fromkeys(answer.spans.values())
    sweeps = [f"{numbers.frequency(low)} to {numbers.frequency(high)}" for low, high in spans]
    _heading(page, title, [file, f"drive {drive}" if drive else "", " and ".join(sweeps)])
    figure_table(page, answer)


def figure_table(page: Page, answer: FiguresAnswer) -> None:
    """The cases side by side, then what needs a sentence."""
    sections: dict[int, str] = {}
    for number, row in enumerate(answer.rows):
        if number == 0 or answer.rows[number - 1].subject != row.subject:
            sections[number] = row.subject
    first = Group(("",), (tuple(f"  {row.label}" for row in answer.rows),))
    groups = [
        Group((case,), (tuple(figure(row, results[row.label]) for row in answer.rows),))
        for case, results in answer.cases.items()
    ]
    for table in _packed(page, first, groups, lambda held: None, sections):
        page.add(table, "")
    for note in _notes(answer):
        page.add(Text(note, style="dim"))


def figure(row: FigureRow, result: Result) -> str:
    """A figure's value as a cell: "187.3 MHz", "-1.23 %", "not reached", "-" where there is none."""
    if result.reason == "not-reached":
        return "not reached"
    if result.value is None:
        return numbers.NOTHING
    name = row.call.name
    if name in ("flatness", "peaking", "error", "overshoot", "preshoot", "droop"):
        return numbers.part_of_one(result.value if abs(result.value) > _ROUNDING else 0.0)
    if name == "disturbance":  # computed without a difference, right however small
        return numbers.part_of_one(result.value)
    if name == "rejection" and result.decibels is not None:
        return f"{numbers.decibels(result.decibels)} dB"
    return numbers.quantity(result.value, result.unit, 5 if result.unit == "" else 4)


def _notes(answer: FiguresAnswer) -> list[str]:
    """Sentences below the table, each with the cases it holds for."""
    notes: dict[str, list[str]] = {}
    for case, results in answer.cases.items():
        for label, result in results.items():
            for note in _notes_on(label, result):
                notes.setdefault(note, []).append(case)
    several = len(answer.cases) > 1
    return [f"{note} ({', '.join(cases)})" if several else note for note, cases in notes.items()]


def _notes_on(label: str, result: Result) -> Iterable[str]:
    """What was not reached, all crossings of a bandwidth, why a cell is empty."""
    if result.reason == "not-reached" and result.bound is not None:
        word = "above" if result.bound[0] == ">=" else "below"
        yield f"{label}: not reached, so {word} {numbers.quantity(result.bound[1], result.unit, trim=True)}"
    if result.message:
        yield f"{label}: {result.message}"
    if len(result.crossings) > 1:
        some = result.crossings[:_MOST_CROSSINGS]
        listed = ", ".join(f"{numbers.quantity(c.frequency, 'Hz')} {c.direction}" for c in some)
        rest = len(result.crossings) - len(some)
        yield f"{label} crosses -3 dB at {listed}" + (f" and {rest} more" if rest else "")


def caution(networks: Iterable[Network]) -> str:
    """The caution, where a source's amplitude or a voltage rating says that the voltage is hazardous; else
    ""."""
    for network in networks:
        for part in network.parts:
            if part.kind == "voltage source" and abs(float(getattr(part, "value", 0.0))) > HAZARDOUS:
                return CAUTION
            ratings = getattr(getattr(part, "value", None), "ratings", ())
            if any(rating.unit == "V" and rating.limit > HAZARDOUS for rating in ratings):
                return CAUTION
    return ""
