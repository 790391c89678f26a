"""The user's mistakes as collected values, and the one place that renders them.

A mistake is a `Diagnostic`: a stable code from the table in `nodal.language.codes`, the arguments of its
message and a span. A bug is an exception. Nothing here decides what is wrong.
"""

from __future__ import annotations

import re
import unicodedata
from bisect import bisect_right
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from nodal.language.syntax import Span

Severity = Literal["error", "warning", "note"]


@dataclass(frozen=True, slots=True)
class Diagnostic:
    """One finding. `message` and `help` are finished sentences without a final stop."""

    code: str
    severity: Severity
    message: str
    span: Span | None = None
    help: str = ""
    related: tuple[tuple[Span, str], ...] = ()
    """Further places: ("first declared here"), the place of use of an assembly …"""
    name: str = ""
    """What the finding is about, for `allow CODE: NAME`."""


class DesignError(Exception):
    """A file cannot be used; `diagnostics` say why (at least one error), `sources` hold the texts they
    point into."""

    def __init__(self, diagnostics: Iterable[Diagnostic], sources: Mapping[str, str]) -> None:
        self.diagnostics = list(diagnostics)
        self.sources = dict(sources)
        super().__init__(self.diagnostics[0].message if self.diagnostics else "")


@dataclass(slots=True)
class Collector:
    """Gathers diagnostics while a file is read; `sources` maps each path to its text."""

    found: list[Diagnostic] = field(default_factory=list)
    sources: dict[str, str] = field(default_factory=dict)

    def add(
        self,
        code: str,
        span: Span | None,
        /,
        *,
        name: str = "",
        related: Iterable[tuple[Span, str]] = (),
        **arguments: Any,
    ) -> None:
        """Record a finding of the table: its severity, message and help are filled in with `arguments`."""
        from nodal.language.codes import make

        self.found.append(make(code, span, name=name, arguments=arguments, related=tuple(related)))

    @property
    def failed(self) -> bool:
        return any(d.severity == "error" for d in self.found)


# Places in a text


class Lines:
    """Offsets of a text to lines and columns, both counted from 1 in characters (code points)."""

    def __init__(self, text: str) -> None:
        self.text = text
        self._starts = [0, *(found.end() for found in _LINE_END.finditer(text))]

    def position(self, offset: int) -> tuple[int, int]:
        """(line, column) of a character; offsets beyond the text are taken to be at its end."""
        offset = min(max(offset, 0), len(self.text))
        line = bisect_right(self._starts, offset)
        return line, offset - self._starts[line - 1] + 1

    def line(self, number: int) -> str:
        """A line without what ends it."""
        start = self._starts[number - 1]
        end = self._starts[number] if number < len(self._starts) else len(self.text)
        return self.text[start:end].rstrip("\r\n")


def span_position(span: Span, sources: Mapping[str, str]) -> tuple[tuple[int, int], tuple[int, int]]:
    """((line, column), (end line, end column)) of a span, 1-based, end exclusive."""
    lines = Lines(sources.get(span.path, ""))
    return lines.position(span.start), lines.position(span.end)


_LINE_END = re.compile(r"\r\n|\n|\r")


# Rendering

_WIDTH = 100
"""Characters of a line that an excerpt shows; longer lines are trimmed around the place."""
_COLORS = {"error": "31", "warning": "33", "note": "36"}


def render(diagnostics: Iterable[Diagnostic], sources: Mapping[str, str], *, color: bool = False) -> str:
    """Diagnostics sorted by path and place, each with its excerpt, caret and help; "" for none.

    What a terminal would act on (control and direction characters) is shown as �. With `color`, ANSI colors.
    """
    texts = _Texts(sources)
    return "".join(_rendered(diagnostic, texts, color) for diagnostic in _ordered(diagnostics))


def as_json(diagnostics: Iterable[Diagnostic], sources: Mapping[str, str]) -> list[dict[str, Any]]:
    """[{"code", "severity", "path", "start", "end", "message", "help"}], sorted as `render` sorts them.

    "start" and "end" are [line, column], 1-based, end exclusive; these and "path" are None for what has no
    place in a text.
    """
    texts = _Texts(sources)
    result = []
    for found in _ordered(diagnostics):
        span = found.span
        lines = texts[span.path] if span else None
        result.append(
            {
                "code": found.code,
                "severity": found.severity,
                "path": span.path if span else None,
                "start": list(lines.position(span.start)) if span and lines else None,
                "end": list(lines.position(span.end)) if span and lines else None,
                "message": found.message,
                "help": found.help,
            }
        )
    return result


class _Texts(dict[str, Lines]):
    """Texts by path, split into lines when first asked for."""

    def __init__(self, sources: Mapping[str, str]) -> None:
        super().__init__()
        self._sources = sources

    def __missing__(self, path: str) -> Lines:
        self[path] = Lines(self._sources.get(path, ""))
        return self[path]


def _ordered(diagnostics: Iterable[Diagnostic]) -> list[Diagnostic]:
    """By path and place, what has no place first, else as they were found; each told once."""

    def key(found: Diagnostic) -> tuple[str, int, int]:
        return (found.span.path, found.span.start, found.span.end) if found.span else ("", -1, -1)

    return sorted(dict.fromkeys(diagnostics), key=key)


def _rendered(found: Diagnostic, texts: _Texts, color: bool) -> str:
    paint = _painter(color, _COLORS[found.severity])
    label = paint(f"{found.severity}[{found.code}]:")
    message = visible(found.message)
    parts = []
    if found.span is None:
        parts.append(f"{label} {message}")
    else:
        line, column = texts[found.span.path].position(found.span.start)
        parts.append(f"{visible(found.span.path)}:{line}:{column}: {label} {message}")
        parts += _excerpt(found.span, texts, paint)
    for span, why in found.related:
        line, column = texts[span.path].position(span.start)
        parts.append(f"   {visible(why)}: {visible(span.path)}:{line}:{column}")
        parts += _excerpt(span, texts, lambda text: text)
    if found.help:
        parts.append(f"   help: {visible(found.help)}")
    return "\n".join(parts) + "\n"


def _painter(color: bool, code: str) -> Callable[[str], str]:
    return (lambda text: f"\x1b[1;{code}m{text}\x1b[0m") if color else (lambda text: text)


def _excerpt(span: Span, texts: _Texts, paint: Callable[[str], str]) -> list[str]:
    """The line where a span begins, and carets under its part of it; nothing where the text is not known."""
    lines = texts[span.path]
    if not lines.text:
        return []
    number, column = lines.position(span.start)
    end_number, end_column = lines.position(span.end)
    line = lines.line(number)
    begin = min(column - 1, len(line))
    end = end_column - 1 if end_number == number else len(line)
    end = min(max(end, begin + 1), max(len(line), begin + 1))
    cells = [_cells(char, at) for at, char in _columns(line)]
    low, high = _window(len(line), begin, end)
    before, after = "…" if low > 0 else "", "…" if high < len(line) else ""
    shown = before + "".join(text for text, _ in cells[low:high]) + after
    indent = len(before) + sum(width for _, width in cells[low:begin])
    carets = max(1, sum(width for _, width in cells[begin : min(end, high)]))
    return [f"{number:>5} | {shown}".rstrip(), f"      | {' ' * indent}{paint('^' * carets)}"]


def _window(length: int, begin: int, end: int) -> tuple[int, int]:
    """The stretch of a line to show: all of it, or `_WIDTH` characters around the place."""
    if length <= _WIDTH:
        return 0, length
    low = max(0, min(begin - _WIDTH // 4, end - _WIDTH // 2, length - _WIDTH))
    low = min(low, begin)
    return low, min(length, low + _WIDTH)


def _columns(line: str) -> Iterator[tuple[int, str]]:
    """Each character with the cell where it begins, for tabs."""
    at = 0
    for char in line:
        yield at, char
        at += _cells(char, at)[1]


def _cells(char: str, at: int) -> tuple[str, int]:
    """How a character is shown at cell `at`, and how many cells that takes."""
    if char == "\t":
        width = 4 - at % 4
        return " " * width, width
    if unicodedata.category(char) in ("Mn", "Me"):
        return char, 0
    char = visible(char)
    return char, 2 if unicodedata.east_asian_width(char) in "WF" else 1


def visible(text: str) -> str:
    """`text` with what a terminal may act on (control, format, lone surrogate characters) replaced by �."""
    if text.isascii() and text.isprintable():
        return text
    return "".join(
        "�" if unicodedata.category(char) in ("Cc", "Cf", "Cs", "Zl", "Zp") else char for char in text
    )
