"""Recorded figures: a file beside each design that says what it showed when somebody last looked.

`bench_probe.figures.toml` stands beside `bench_probe.nodal`. It is TOML, one figure a line:

    format = 1

    [tolerance]
    "noise(*)" = "0.1 %"

    [case.nominal]
    "bandwidth(screen)" = "167.265713 MHz"
    "gain(screen) at 0 Hz" = "0.999969299 ± 50 ppm"  # as the calibration certificate has it

A figure is compared with the tolerance of its own line, else with what `[tolerance]` says under its name,
else under the last pattern (`*`, `?`, `[…]`) that fits both name and unit, else to a part in 10⁶. Lines that
hold are never rewritten.
"""

from __future__ import annotations

import json
import math
import os
import re
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fnmatch import fnmatchcase
from typing import TYPE_CHECKING, Any, Literal, NoReturn

from nodal.language import units
from nodal.language.diagnostics import Collector, DesignError
from nodal.language.parse import read
from nodal.language.syntax import Span
from nodal.language.units import show

if TYPE_CHECKING:
    from nodal.measured import Measured

__all__ = [
    "Change", "Record", "Tolerance", "compare", "empty", "load", "parse", "record_path", "update",
    "value_text",
]  # fmt: skip

FORMAT = 1
SUFFIX = ".figures.toml"
DIGITS = 9
DEFAULT = 1e-6
"""Relative, where a record says nothing."""
_ROUNDED = 0.5 * 10.0 ** (1 - DIGITS)
"""What writing `DIGITS` digits may take away."""

Kind = Literal["moved", "new", "stale", "unreached"]


@dataclass(frozen=True, slots=True)
class Tolerance:
    """A half-width as written, "1 %", "50 ppm" or "2 kHz": of the recorded value, or in the figure's unit."""

    number: float
    unit: str

    def half_width(self, value: float, unit: str) -> float | None:
        """Around `value`, in `unit`; None where the tolerance is in a unit of another kind."""
        if self.unit in _PARTS:
            return self.number * _PARTS[self.unit] * abs(value)
        factor = _factor(self.unit, unit)
        return None if factor is None else self.number * factor

    @property
    def relative(self) -> bool:
        return self.unit in _PARTS


_PARTS = {"%": 1e-2, "ppm": 1e-6}


@dataclass(frozen=True, slots=True)
class Entry:
    """One figure of a record: `text` is what its line says without the tolerance."""

    case: str
    label: str
    text: str
    tolerance: Tolerance | None
    line: int
    """Counted from 1."""
    start: int
    """Where in the line the value begins and ends, characters."""
    end: int


@dataclass(frozen=True, slots=True)
class Record:
    """A record file, read."""

    path: str
    text: str = field(repr=False)
    entries: dict[str, dict[str, Entry]]
    """By case and label."""
    tolerances: tuple[tuple[str, Tolerance], ...]
    """Names or patterns of figures, in the order of the file."""

    def tolerance(self, label: str, unit: str) -> Tolerance | None:
        """What `[tolerance]` says of a figure: under its own name, else under the last pattern that fits."""
        fitting = [(pattern == label, tolerance) for pattern, tolerance in self.tolerances
                   if (pattern == label or fnmatchcase(label, pattern))
                   and tolerance.half_width(1.0, unit) is not None]  # fmt: skip
        fitting.sort(key=lambda found: found[0])
        return fitting[-1][1] if fitting else None


@dataclass(frozen=True, slots=True)
class Change:
    """One figure that is not as recorded.

    "moved" beyond its tolerance; "unreached": the sweep does not reach it any more; "new": not in the record;
    "stale": in the record only (the figure has no value any more, or the design has no such figure or case).
    `before` and `after` are as a record writes them, `change` is relative to the recorded value where both
    are numbers and that is not zero. `line` is that of the record, 0 for what is new.
    """

    kind: Kind
    case: str
    figure: str
    before: str | None
    after: str | None
    change: float | None
    path: str
    line: int


def record_path(design_path: str) -> str:
    """Where the record of a design stands: beside it."""
    return design_path.removesuffix(".nodal") + SUFFIX


# Reading


def load(path: str) -> Record | None:
    """The record in a file, None where there is no such file. DesignError for what cannot be read or is no
    record."""
    if not os.path.lexists(path):
        return None
    collector = Collector()
    text = read(path, collector)
    if text is None:
        raise DesignError(collector.found, collector.sources)
    return parse(text, path)


def empty(path: str) -> Record:
    """The record that says nothing, for a file that does not exist yet."""
    return Record(path, "", {}, ())


def parse(text: str, path: str) -> Record:
    """The record in a text. DesignError with the line of what is wrong."""
    return _Reading(text, path).record()


_STRING = r'"((?:[^"\\]|\\.)*)"'
_PAIR = re.compile(rf"[ \t]*{_STRING}[ \t]*=[ \t]*{_STRING}[ \t]*(?:#.*)?\r?\n?")
_NAME = r"tolerance|case[ \t]*\.[ \t]*([A-Za-z0-9_]+)"
_TABLE = re.compile(rf"[ \t]*\[[ \t]*({_NAME})[ \t]*\][ \t]*(?:#.*)?\r?\n?")
_OTHER = re.compile(r"\s*(?:#.*|format[ \t]*=.*)?\s*")
_PLACE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)$")
_NUMBER = r"[0-9]+(?:\.[0-9]+)?(?:[eE][-+]?[0-9]+)?"
_WIDTH = re.compile(rf"({_NUMBER})\s*([^\s0-9±][^±]*?)?\s*")
_VALUE = re.compile(rf"((?:[<>]=\s*)?[-+]?(?:∞|{_NUMBER})(?:\s*[^\s0-9±][^±]*?)?)(?:\s*(?:±|\+-)(.*))?\s*")


class _Reading:
    def __init__(self, text: str, path: str) -> None:
        self.text, self.path = text, path
        self.lines = _lines(text)

    def record(self) -> Record:
        document = self.document()
        if document.get("format") != FORMAT:
            self.fail(0, f"`format = {FORMAT}` is missing, or the record is of another format")
        entries: dict[str, dict[str, Entry]] = {}
        tolerances: list[tuple[str, Tolerance]] = []
        seen: dict[str, Any] = {"format": FORMAT}
        table: str | None = None
        strange = 0
        for number, line in enumerate(self.lines, start=1):
            header, pair = _TABLE.fullmatch(line), _PAIR.fullmatch(line)
            if header is not None:
                table = header[2] or ""
                if table:
                    seen.setdefault("case", {}).setdefault(table, {})
                    entries.setdefault(table, {})
                else:
                    seen.setdefault("tolerance", {})
            elif pair is not None and table is not None:
                label, value = self.unescaped(pair[1], number), self.unescaped(pair[2], number)
                if table:
                    seen["case"][table][label] = value
                    entries[table][label] = self.entry(table, label, pair[2], number, pair.start(2))
                else:
                    seen["tolerance"][label] = value
                    tolerances.append((label, self.tolerance(value, number)))
            elif not strange and not _OTHER.fullmatch(line):
                strange = number
        if document != seen:
            self.fail(strange, 'not a line of a record; those are: "FIGURE" = "VALUE UNIT" under [case.NAME]')
        return Record(self.path, self.text, entries, tuple(tolerances))

    def document(self) -> dict[str, Any]:
        try:
            return tomllib.loads(self.text)
        except tomllib.TOMLDecodeError as error:
            message = str(error)
            found = _PLACE.search(message)
            reason = message[: found.start()] if found else message
            at_line = int(found[1]) if found and found[1] else len(self.lines)
            column = int(found[2]) if found and found[2] else 1
            self.fail(at_line, reason[:1].lower() + reason[1:], column, code="record-syntax")

    def entry(self, case: str, label: str, text: str, number: int, start: int) -> Entry:
        found = _VALUE.fullmatch(text)
        if found is None:
            self.fail(number, f'"{text}" is not a value with a unit')
        width = None if found[2] is None else self.tolerance(found[2].strip(), number)
        return Entry(case, label, found[1], width, number, start + found.start(1), start + found.end(1))

    def tolerance(self, text: str, number: int) -> Tolerance:
        found = _WIDTH.fullmatch(text.removeprefix("±").removeprefix("+-").strip())
        if found is None:
            self.fail(number, f'"{text}" is not a tolerance')
        return Tolerance(float(found[1]), units.scan_unit(found[2] or "") or found[2] or "")

    def unescaped(self, text: str, number: int) -> str:
        try:
            return str(json.loads(f'"{text}"'))
        except ValueError:
            self.fail(number, "an escape in a string that is not one of JSON's too")

    def fail(self, line: int, reason: str, column: int = 1, *, code: str = "record-form") -> NoReturn:
        _fail(self.path, self.text, line, reason, column, code)


def _fail(
    path: str, text: str, line: int, reason: str, column: int = 1, code: str = "record-form"
) -> NoReturn:
    """DesignError at a line (counted from 1; 0 for the whole file)."""
    lines = _lines(text)
    start = end = 0
    if line > 0:
        start = sum(len(earlier) for earlier in lines[: line - 1])
        end = start + len(lines[line - 1].rstrip()) if line <= len(lines) else start
    collector = Collector(sources={path: text})
    collector.add(code, Span(path, min(start + column - 1, end), end), path=path, reason=reason)
    raise DesignError(collector.found, collector.sources)


def _lines(text: str) -> list[str]:
    """Lines with what ends them."""
    return re.findall(r"[^\n]*\n|[^\n]+", text)


# Values


def value_text(measured: Measured) -> str:
    """A value as a record writes it: nine digits, fewer where rounding would be among them."""
    value, unit = measured.value, measured.unit
    if measured.bound is not None:
        return f"{measured.bound} {show(value, unit, DIGITS)}"
    if math.isinf(value):
        return f"{'∞' if value > 0 else '-∞'} {unit}".rstrip()
    if abs(value) <= measured.floor:
        value = 0.0
    digits = DIGITS
    if value != 0.0 and measured.floor > 0.0:
        digits = min(DIGITS, 1 + math.floor(math.log10(abs(value)) - math.log10(measured.floor)))
    return show(value + 0.0, unit, max(digits, 1))


def _number(text: str, unit: str) -> tuple[float, str] | None:
    """(number in `unit`, bound or "") of a value's text; None where it is in a unit of another kind."""
    found = re.fullmatch(rf"([<>]=)?\s*([-+]?)(∞|{_NUMBER})\s*(.*)", text)
    if found is None:
        return None
    factor = _factor(found[4].strip(), unit)
    if factor is None:
        return None
    size = math.inf if found[3] == "∞" else float(found[3]) * factor
    return (-size if found[2] == "-" else size), found[1] or ""


def _factor(written: str, unit: str) -> float | None:
    """How many of `unit` one of the unit `written` is."""
    written = units.scan_unit(written) or written
    if written == unit:
        return 1.0
    if unit == "":
        return _PARTS.get(written)
    prefix = written.removesuffix(unit)
    if prefix == written or prefix not in units.PREFIXES:
        return None
    return float(f"1e{units.PREFIXES[prefix]}")


def _holds(record: Record, entry: Entry, now: Measured) -> bool:
    """Whether a figure is as its entry says, within tolerance."""
    if entry.text == value_text(now):
        return True
    recorded = _number(entry.text, now.unit)
    if recorded is None or recorded[1] != (now.bound or ""):
        return False
    value = recorded[0]
    if math.isinf(value) or math.isinf(now.value):
        return value == now.value
    set_by_hand = entry.tolerance or record.tolerance(entry.label, now.unit)
    width = DEFAULT * abs(value) if set_by_hand is None else set_by_hand.half_width(value, now.unit)
    if width is None:
        reason = f'the tolerance of "{entry.label}" is not in {now.unit or "plain numbers"}, % or ppm'
        _fail(record.path, record.text, entry.line, reason)
    if set_by_hand is None or set_by_hand.relative:
        width = max(width, now.floor)
    return abs(now.value - value) <= max(width, _ROUNDED * abs(value)) * (1.0 + 1e-12)


# Comparing


def compare(
    record: Record, measured: Mapping[str, Mapping[str, Measured]], cases: Iterable[str] | None = None
) -> list[Change]:
    """What is not as recorded, by case (in the order of `measured`, stale cases last) and figure.

    `measured` is what `nodal.measured.measure` gives, perhaps for some cases only; `cases` are then the names
    of all the design has, so that the others are not taken for stale.
    """
    known = set(measured) | set(cases or ())
    changes: list[Change] = []
    for case, figures in measured.items():
        entries = record.entries.get(case, {})
        for label in sorted({*entries, *figures}, key=_order):
            change = _change(record, case, label, entries.get(label), figures.get(label))
            if change is not None:
                changes.append(change)
    for case in sorted(set(record.entries) - known):
        stale = record.entries[case]
        found = (_change(record, case, label, stale[label], None) for label in sorted(stale, key=_order))
        changes += (change for change in found if change is not None)
    return changes


def _change(
    record: Record, case: str, label: str, entry: Entry | None, now: Measured | None
) -> Change | None:
    if entry is None:
        after = value_text(now) if now is not None else None
        return Change("new", case, label, None, after, None, record.path, 0)
    if now is None:
        return Change("stale", case, label, entry.text, None, None, record.path, entry.line)
    if _holds(record, entry, now):
        return None
    before = _number(entry.text, now.unit)
    relative = None
    if before is not None and not before[1] and now.bound is None and 0.0 < abs(before[0]) < math.inf:
        relative = (now.value - before[0]) / abs(before[0])
    reached = not entry.text.startswith((">=", "<="))
    kind: Kind = "unreached" if reached and now.bound is not None else "moved"
    return Change(kind, case, label, entry.text, value_text(now), relative, record.path, entry.line)


_FREQUENCY = re.compile(r" (?:at|from) ([0-9.e+-]+) ([a-zA-Zµ]*Hz)")


def _order(label: str) -> tuple[str, float, str]:
    """Figures by name, the same figure by frequency."""
    found = _FREQUENCY.search(label)
    if found is None:
        return label, -1.0, label
    return label[: found.start()], float(found[1]) * (_factor(found[2], "Hz") or 1.0), label


# Writing


def update(record: Record | None, measured: Mapping[str, Mapping[str, Measured]], title: str) -> str:
    """The text of the record brought up to date; `title` is the design's file name, for a new one's head.

    `measured` must hold every case. Lines that hold stay byte for byte; one that moved gets its new value,
    and keeps its tolerance and comment; a new figure is put in its place in the order; a stale line goes,
    comment lines stay.
    """
    text = record.text if record is not None else _HEAD.format(title=title)
    lines = _lines(text)
    ending = "\r\n" if lines and lines[0].endswith("\r\n") else "\n"
    if lines and not lines[-1].endswith("\n"):
        lines[-1] += ending
    sections = _sections(lines)
    for section in sections:
        if section.case is not None:
            figures = measured.get(section.case, {})
            section.lines = _updated(record, section, figures, ending)
    present = {section.case for section in sections}
    for case in sorted(measured.keys() - present, key=_case_order):
        if measured[case]:
            _insert(sections, case, measured[case], ending)
    kept = [s for s in sections if s.case is None or measured.get(s.case) or s.commented]
    written = [line for section in kept for line in section.lines]
    while written and not written[-1].strip():
        written.pop()
    return "".join(written)


_HEAD = """\
# Figures of {title}: `nodal record` writes them, `nodal check` compares with them.
# A line may carry a tolerance of its own, "1.5 MHz ± 2 %"; [tolerance] has some for many: "noise(*)" = "1 %".
format = 1

[tolerance]

"""


@dataclass(slots=True)
class _Section:
    """A table of the file with its lines, the first one its header; what stands before any has no case."""

    case: str | None
    lines: list[str]

    @property
    def commented(self) -> bool:
        return any(line.lstrip().startswith("#") for line in self.lines[1:])


def _sections(lines: Sequence[str]) -> list[_Section]:
    sections = [_Section(None, [])]
    for line in lines:
        header = _TABLE.fullmatch(line)
        if header is not None:
            sections.append(_Section(header[2], [line]))
        else:
            sections[-1].lines.append(line)
    return sections


def _insert(sections: list[_Section], case: str, figures: Mapping[str, Measured], ending: str) -> None:
    """Put a table of all `figures` where the case belongs: nominal first, the others by name."""
    order = _case_order(case)
    place = max(i for i, s in enumerate(sections) if s.case is None or _case_order(s.case) < order) + 1
    before = sections[place - 1].lines
    if before and before[-1].strip():
        before.append(ending)
    body = [_line(label, figures[label], ending) for label in sorted(figures, key=_order)]
    tail = [] if place == len(sections) else [ending]
    sections.insert(place, _Section(case, [f"[case.{case}]{ending}", *body, *tail]))


def _case_order(case: str) -> tuple[bool, str]:
    return case != "nominal", case


def _updated(
    record: Record | None, section: _Section, figures: Mapping[str, Measured], ending: str
) -> list[str]:
    entries = record.entries.get(section.case or "", {}) if record is not None else {}
    kept: list[str] = []
    labels: list[str | None] = []
    for line in section.lines:
        pair = _PAIR.fullmatch(line)
        label = str(json.loads(f'"{pair[1]}"')) if pair is not None else None
        if record is None or label is None or label not in entries:
            kept.append(line)
            labels.append(None)
        elif label in figures:
            entry, now = entries[label], figures[label]
            if not _holds(record, entry, now):
                line = line[: entry.start] + value_text(now) + line[entry.end :]
            kept.append(line)
            labels.append(label)
    for label in sorted(set(figures) - set(entries), key=_order):
        place = _insertion(labels, kept, label)
        kept.insert(place, _line(label, figures[label], ending))
        labels.insert(place, label)
    return kept


def _insertion(labels: Sequence[str | None], lines: Sequence[str], label: str) -> int:
    """Before the first figure that comes later, and before the comments that stand right above that."""
    for place, other in enumerate(labels):
        if other is not None and _order(other) > _order(label):
            while labels[place - 1] is None and lines[place - 1].lstrip().startswith("#"):
                place -= 1
            return place
    last = max((place for place, other in enumerate(labels) if other is not None), default=0)
    return last + 1


def _line(label: str, now: Measured, ending: str) -> str:
    return f"{_quoted(label)} = {_quoted(value_text(now))}{ending}"


def _quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)
