"""The canonical text of a file: the same statements and comments, spelled and laid out in one way.

Works on the lexemes that the parser read, with the comments and line breaks between them, so that a file
whose includes are missing or whose names mean nothing can be tidied too. What it decides:

- one statement a line, two spaces of indentation a brace; a block that the author wrote on one line stays
  on one where it fits `WIDTH` columns;
- single spaces; none before `,` `:` `;` `)`, after `(` and a sign, and between a name and its parenthesis;
- a line break inside a statement stays, four spaces further in for each parenthesis that stands open;
- at most one empty line in a row, none at either end of a file or block;
- a sign (∥ ± Ω µ ° √) takes the place of its ASCII spelling where the file uses that sign at all;
- a comment stays where it stands: on a line of its own at the depth of its block, or behind the same code,
  two spaces off. Comments on consecutive lines are aligned; a column that several comments share stays.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from copy import copy
from dataclasses import dataclass

from nodal.language.diagnostics import Collector, DesignError
from nodal.language.lexing import KEYWORDS, NUMBER, Lexeme
from nodal.language.parse import MAX_BYTES, parse, parse_with_lexemes
from nodal.language.syntax import Span
from nodal.language.units import scan_unit

WIDTH = 120
"""Columns that a block on one line may take, its comment not counted."""

_PASSES = 100
"""Two or three do; a text made to need more is not aligned to the end."""
_INDENT = "  "
_HANGING = "    "
_NEWLINE = re.compile(r"\r\n|\n|\r")
_BETWEEN = re.compile(r"(?P<comment>#[^\r\n]*)|(?P<newline>\r\n|\n|\r)")
_SPACE = " \t\u00a0\u202f"
_CODE_POINTS = str.maketrans({"\u2126": "Ω", "\u03bc": "µ"})
_OPERANDS = frozenset((NUMBER, "NAME", "DOTTED", "RPAR"))
_NO_SPACE_BEFORE = frozenset(("COMMA", "COLON", "SEMICOLON", "RPAR"))


def tidy(text: str, path: str = "<text>") -> str:
    """The canonical text of `text`; equal to `text` where that is tidy.

    The tree of the result is the tree of `text`. Line ends are those of the first line (LF or CRLF); a byte
    order mark goes. DesignError, with all findings of the parser, where `text` has errors: there is nothing
    to be sure of in it.
    """
    collector = Collector()
    file, lexemes = parse_with_lexemes(text, path, collector)
    if collector.failed:
        raise DesignError(collector.found, collector.sources)
    signs = _Signs.of(text, lexemes)
    lines = _Printer(text, lexemes, [signs.spelled(lexeme, text) for lexeme in lexemes]).run()
    result = _written(lines)
    first_end = _NEWLINE.search(text)
    if first_end and first_end.group() == "\r\n":
        result = result.replace("\n", "\r\n")
    if len(result.encode(errors="surrogatepass")) > MAX_BYTES:  # indentation can add that much
        collector.add("too-long", Span(path, 0, 0), path=f"{path} in its canonical form")
        raise DesignError(collector.found, collector.sources)
    if parse(result, path, Collector()) != file:
        raise AssertionError(f"tidying {path} would change what it says; the file was left alone")
    return result


# Spelling


@dataclass(frozen=True, slots=True)
class _Signs:
    """Which signs a file uses: only these replace their ASCII spellings."""

    parallel: bool
    plus_minus: bool
    ohm: bool
    micro: bool
    degree: bool
    root: bool

    @classmethod
    def of(cls, text: str, lexemes: Sequence[Lexeme]) -> _Signs:
        used: set[str] = set()
        for lexeme in lexemes:
            if lexeme.type in (NUMBER, "PARALLEL", "PLUS_MINUS"):
                used.update(text[lexeme.span.start : lexeme.span.end].translate(_CODE_POINTS))
        return cls("∥" in used, "±" in used, "Ω" in used, "µ" in used, "°" in used, "√" in used)

    def spelled(self, lexeme: Lexeme, text: str) -> str:
        """A lexeme as it is to be written."""
        written = text[lexeme.span.start : lexeme.span.end]
        if lexeme.type == "PARALLEL" and self.parallel:
            return "∥"
        if lexeme.type == "PLUS_MINUS" and self.plus_minus:
            return "±"
        if lexeme.type == NUMBER and lexeme.unit:
            digits = lexeme.text
            unit = self._unit(written[len(digits) :].strip(_SPACE), lexeme.unit)
            # 3 attoseconds: with a space the unit would be the word that names a part.
            return f"{digits}{'' if unit.partition('/')[0] in KEYWORDS else ' '}{unit}"
        return written

    def _unit(self, written: str, canonical: str) -> str:
        unit = written.translate(_CODE_POINTS)
        base, slash, rate = unit.partition("/")
        if self.degree and base in ("deg", "degC"):
            base = base.replace("deg", "°")
        if self.ohm and base.endswith("ohm"):
            base = base[:-3] + "Ω"
        if self.micro and base.startswith("u"):
            base = "µ" + base[1:]
        if self.root and rate == "rtHz":
            rate = "√Hz"
        spelled = base + slash + rate
        return spelled if scan_unit(spelled) == canonical else unit


# Layout


class _Line:
    """One line of the result on its way."""

    __slots__ = ("after_blank", "code", "column", "comment", "indent", "width")

    def __init__(self, indent: str, *, after_blank: bool = False) -> None:
        self.indent = indent
        self.code: list[str] = []
        self.width = len(indent)
        """Columns of indentation and code."""
        self.comment = ""
        self.column = 0
        """Where the comment stood in the text, then where it goes, from 0."""
        self.after_blank = after_blank

    def add(self, *pieces: str) -> None:
        self.code += pieces
        self.width += sum(map(len, pieces))

    @property
    def opens(self) -> bool:
        """Whether a brace opens at its end."""
        return bool(self.code) and self.code[-1] == "{"


class _Printer:
    """Walks over the lexemes and what stands between them, and lays out lines."""

    def __init__(self, text: str, lexemes: Sequence[Lexeme], spelled: Sequence[str]) -> None:
        self.text = text
        self.lexemes = lexemes
        self.spelled = spelled
        self.lines: list[_Line] = []
        self._closing = _closing(lexemes)
        self._before = ""
        """Type of the lexeme written last."""
        self._fresh = True
        """A statement has ended or a brace opened: the next lexeme begins a statement or closes a brace."""
        self._value = False
        """The lexeme written last is the name of a field: what follows is its value."""
        self._sign = False
        """The lexeme written last is a sign."""
        self._code = False
        """Inside the code of an `allow`."""
        self._breaks = 0
        """Newlines since the lexeme or comment before."""
        self._line_start = 0
        """Where the current line of the text begins."""
        self._braces = 0
        self._parentheses = 0
        self._inline = 0
        """Depth of braces within the block on one line; 0 outside of one."""

    def run(self) -> list[_Line]:
        position = 0
        for at, lexeme in enumerate(self.lexemes):
            self._between(position, lexeme.span.start)
            position = lexeme.span.end
            if lexeme.type == "END" and lexeme.text != ";":
                self._breaks += 1
                self._line_start = position
            self._take(at)
            if lexeme.type == "LBRACE" and not self._inline and self._fits(at):
                self._inline = self._braces
        self._between(position, len(self.text))
        return self.lines

    def _between(self, start: int, end: int) -> None:
        """Take up the comments and newlines in a stretch of text without lexemes."""
        for found in _BETWEEN.finditer(self.text, start, end):
            if found.lastgroup == "newline":
                self._breaks += 1
                self._line_start = found.end()
                continue
            if self._breaks or not self.lines:
                self._new_line(self._block_indent() if self._fresh else self._hanging_indent())
            line = self.lines[-1]
            line.comment = found.group().rstrip(_SPACE)
            line.column = len(self.text[self._line_start : found.start()].lstrip("\ufeff").expandtabs(8))
            self._breaks = 0

    def _take(self, at: int) -> None:
        """Write one lexeme, on the line or on a new one."""
        kind = self.lexemes[at].type
        if kind == "END":
            self._fresh = True
            return
        self._braces -= kind == "RBRACE"
        self._parentheses -= kind == "RPAR"
        begins = self._fresh and kind != "RBRACE"
        if kind == "RBRACE" and self.lines[-1].opens and not self.lines[-1].comment:
            self.lines[-1].add("}")
        elif begins or kind == "RBRACE":
            if self._inline:
                self.lines[-1].add("; " if begins and self._before != "LBRACE" else " ")
            else:
                self._new_line(self._block_indent(), at_end=not begins)
            self.lines[-1].add(self.spelled[at])
        elif self._breaks:
            self._new_line(self._hanging_indent(closing=kind == "RPAR"))
            self.lines[-1].add(self.spelled[at])
        else:
            self.lines[-1].add("" if self._joined(kind) else " ", self.spelled[at])
        self._sign = kind == "MINUS" and not self._code and (self._before not in _OPERANDS or self._value)
        self._code = kind == "ALLOW" if begins else self._code and kind != "COLON"
        self._value = begins and kind == "NAME"
        self._braces += kind == "LBRACE"
        self._parentheses += kind == "LPAR"
        if self._braces < self._inline:
            self._inline = 0
        self._fresh = kind in ("LBRACE", "RBRACE")
        self._before, self._breaks = kind, 0

    def _joined(self, kind: str) -> bool:
        """Whether no space stands between the lexeme written last and one of this type."""
        if kind in _NO_SPACE_BEFORE or self._before == "LPAR" or self._sign:
            return True
        if kind == "LPAR":
            return self._before in ("NAME", "DOTTED") and not self._value
        return self._code and "MINUS" in (kind, self._before)

    def _new_line(self, indent: str, *, at_end: bool = False) -> None:
        begins_block = not self.lines or (self._fresh and self.lines[-1].opens)
        blank = self._breaks > 1 and self._fresh and not begins_block and not at_end
        self.lines.append(_Line(indent, after_blank=blank))

    def _block_indent(self) -> str:
        return _INDENT * self._braces

    def _hanging_indent(self, *, closing: bool = False) -> str:
        return self._block_indent() + _HANGING * max(self._parentheses, 0 if closing else 1)

    def _fits(self, at: int) -> bool:
        """Whether the block that opens at lexeme `at` was written on one line and can stay there."""
        end = self._closing[at]
        if _NEWLINE.search(self.text, self.lexemes[at].span.start, self.lexemes[end].span.start):
            return False
        trial = copy(self)
        line = _Line("")
        line.code, line.width = ["{"], self.lines[-1].width
        trial.lines, trial._inline = [line], self._braces
        for index in range(at + 1, end + 1):
            trial._take(index)
            if line.width > WIDTH:
                return False
        return True


def _closing(lexemes: Sequence[Lexeme]) -> dict[int, int]:
    """Index of each opening brace -> that of its closing one."""
    pairs, open = {}, []
    for at, lexeme in enumerate(lexemes):
        if lexeme.type == "LBRACE":
            open.append(at)
        elif lexeme.type == "RBRACE":
            pairs[open.pop()] = at
    return pairs


# Comments


def _written(lines: list[_Line]) -> str:
    """The lines with their comments in place."""
    _align(lines)
    written = []
    for line in lines:
        if line.after_blank:
            written.append("")
        code = "".join((line.indent, *line.code)) if line.code else ""
        written.append(f"{code:<{line.column}}{line.comment}" if line.comment else code)
    return "\n".join(written) + "\n"


def _align(lines: list[_Line]) -> None:
    """Decide the column of every comment: of the runs of comments on consecutive lines, then again, until
    nothing moves. So aligning what is aligned changes nothing."""
    for _ in range(_PASSES):
        before = [line.column for line in lines]
        runs = list(_runs(lines))
        shared = Counter(line.column for run in runs for line in run)
        for run in runs:
            column = _column(run, shared)
            for line in run:
                line.column = column
        if [line.column for line in lines] == before:
            return


def _runs(lines: list[_Line]) -> Iterator[list[_Line]]:
    """Comments behind code on consecutive lines, each going on in comments alone in a line that stand in its
    column; every other comment is put at its indentation."""
    run: list[_Line] = []
    for line in lines:
        goes_on = bool(run) and not line.after_blank and bool(line.comment)
        if goes_on and not line.code:
            goes_on = line.column == run[-1].column
        if run and not goes_on:
            yield run
            run = []
        if line.comment and not line.code and not goes_on:
            line.column = len(line.indent)
        elif line.comment:
            run.append(line)
    if run:
        yield run


def _column(run: Sequence[_Line], shared: Mapping[int, int]) -> int:
    """The column most of a run stand in, if comments share it and the code leaves room; else two spaces off
    the longest code."""
    least = max(line.width for line in run if line.code) + 2
    own = Counter(line.column for line in run)
    candidates = [column for column in own if shared[column] > 1 and column >= least]
    return max(candidates, key=lambda column: (own[column], shared[column], column), default=least)
