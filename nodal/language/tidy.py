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
from dataclasses import dataclass, field

from nodal.language.diagnostics import Collector, DesignError
from nodal.language.lexing import KEYWORDS, NUMBER, Lexeme
from nodal.language.parse import parse, parse_with_lexemes
from nodal.language.units import scan_unit

WIDTH = 120
"""Columns that a block on one line may take, its comment not counted."""

_PASSES = 100
"""Two or three do; a text made to need more is not aligned to the end."""
_INDENT = "  "
_HANGING = "    "
_BETWEEN = re.compile(r"(?P<comment>#[^\r\n]*)|(?P<newline>\r\n|\n|\r)")
_COMMENT_SPACE = " \t\u00a0\u202f"
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
    result = _written(_lines(text, lexemes))
    again = parse(result, path, Collector())
    if again != file:
        raise AssertionError(f"tidying {path} would change what it says; the file was left alone")
    first_end = re.search(r"\r\n|\n|\r", text)
    return result.replace("\n", "\r\n") if first_end and first_end.group() == "\r\n" else result


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
            unit = self._unit(written[len(digits) :].strip(_COMMENT_SPACE), lexeme.unit)
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


@dataclass(slots=True)
class _Line:
    """One line of the result on its way."""

    indent: str
    code: str = ""
    comment: str = ""
    column: int = 0
    """Where the comment stood in the text, then where it goes, from 0."""
    after_blank: bool = False

    @property
    def width(self) -> int:
        return len(self.indent) + len(self.code)


@dataclass(slots=True)
class _Layout:
    """The state of the walk over the lexemes."""

    lines: list[_Line] = field(default_factory=list)
    before: Lexeme | None = None
    """The lexeme written last."""
    fresh: bool = True
    """A statement or a brace has ended: the next lexeme begins a line."""
    field_name: bool = False
    """The lexeme written last is the name of a field: what follows is its value."""
    code: bool = False
    """Inside the code of an `allow`."""
    breaks: int = 0
    """Newlines since the lexeme or comment before."""
    line_start: int = 0
    """Where the current line of the text begins."""
    braces: int = 0
    open: int = 0
    """Parentheses that stand open."""
    inline: int = 0
    """Depth of braces within a block on one line."""
    sign: bool = False
    """The lexeme written last is a sign."""


def _lines(text: str, lexemes: Sequence[Lexeme]) -> list[_Line]:
    signs = _Signs.of(text, lexemes)
    spelled = {id(lexeme): signs.spelled(lexeme, text) for lexeme in lexemes}
    layout, position = _Layout(), 0
    for at, lexeme in enumerate(lexemes):
        _between(layout, text, position, lexeme.span.start)
        position = lexeme.span.end
        if lexeme.type == "END":
            layout.fresh = True
            if lexeme.text != ";":
                layout.breaks += 1
                layout.line_start = lexeme.span.end
        else:
            _place(layout, lexeme, spelled)
            if lexeme.type == "LBRACE" and not layout.inline and _fits(layout, text, lexemes, at, spelled):
                layout.inline = layout.braces
    _between(layout, text, position, len(text))
    return layout.lines


def _between(layout: _Layout, text: str, start: int, end: int) -> None:
    """Take up the comments and newlines in a stretch of text without lexemes."""
    for found in _BETWEEN.finditer(text, start, end):
        if found.lastgroup == "newline":
            layout.breaks += 1
            layout.line_start = found.end()
            continue
        comment = found.group().rstrip(_COMMENT_SPACE)
        column = len(text[layout.line_start : found.start()].lstrip("\ufeff").expandtabs(8))
        if layout.breaks or not layout.lines:
            _new_line(
                layout, _block_indent(layout) if layout.fresh else _hanging_indent(layout, closing=False)
            )
        layout.lines[-1].comment, layout.lines[-1].column = comment, column
        layout.breaks = 0


def _place(layout: _Layout, lexeme: Lexeme, spelled: Mapping[int, str]) -> None:
    """Write one lexeme, on the line or on a new one."""
    kind, before, word = lexeme.type, layout.before, spelled[id(lexeme)]
    layout.braces -= kind == "RBRACE"
    begins = layout.fresh and kind != "RBRACE"
    empty = kind == "RBRACE" and layout.lines[-1].code.endswith("{") and not layout.lines[-1].comment
    closing = kind == "RPAR" and layout.breaks > 0
    layout.open += (kind == "LPAR") - (kind == "RPAR")
    if empty:
        layout.lines[-1].code += word
    elif layout.inline and (begins or kind == "RBRACE"):
        between = " " if kind == "RBRACE" or (before and before.type == "LBRACE") else "; "
        layout.lines[-1].code += between + word
    elif begins or kind == "RBRACE":
        _new_line(layout, _block_indent(layout), at_end=kind == "RBRACE")
        layout.lines[-1].code = word
    elif layout.breaks:
        opened = kind == "LPAR"
        layout.open -= opened
        _new_line(layout, _hanging_indent(layout, closing=closing))
        layout.open += opened
        layout.lines[-1].code = word
        layout.lines[-1].after_blank = False
    else:
        layout.lines[-1].code += word if _joined(layout, lexeme) else " " + word
    layout.sign = kind == "MINUS" and not layout.code and not (
        before is not None and before.type in _OPERANDS and not layout.field_name
    )  # fmt: skip
    layout.code = kind == "ALLOW" if begins else layout.code and kind != "COLON"
    layout.field_name = begins and kind == "NAME"
    layout.braces += kind == "LBRACE"
    if kind == "RBRACE" and layout.braces < layout.inline:
        layout.inline = 0
    layout.fresh = kind in ("LBRACE", "RBRACE")
    layout.before, layout.breaks = lexeme, 0


def _new_line(layout: _Layout, indent: str, at_end: bool = False) -> None:
    lines = layout.lines
    opens = not lines or (lines[-1].code.endswith("{") and layout.fresh)
    lines.append(_Line(indent, after_blank=layout.breaks > 1 and layout.fresh and not opens and not at_end))


def _block_indent(layout: _Layout) -> str:
    return _INDENT * layout.braces


def _hanging_indent(layout: _Layout, *, closing: bool) -> str:
    return _block_indent(layout) + _HANGING * max(layout.open, 0 if closing else 1)


def _joined(layout: _Layout, lexeme: Lexeme) -> bool:
    """Whether no space stands between the lexeme written last and this one."""
    before, kind = layout.before, lexeme.type
    assert before is not None
    if kind in _NO_SPACE_BEFORE or before.type == "LPAR" or layout.sign:
        return True
    if kind == "LPAR":
        return before.type in ("NAME", "DOTTED") and not layout.field_name
    return layout.code and "MINUS" in (kind, before.type)


def _fits(layout: _Layout, text: str, lexemes: Sequence[Lexeme], at: int, spelled: Mapping[int, str]) -> bool:
    """Whether the block that opens at lexeme `at` was written on one line and can stay there."""
    end = _closing(lexemes, at)
    if re.search(r"[\r\n]", text[lexemes[at].span.start : lexemes[end].span.start]):
        return False
    trial = _Layout(
        [_Line(layout.lines[-1].indent, layout.lines[-1].code)],
        lexemes[at],
        braces=layout.braces,
        inline=layout.braces,
    )
    for lexeme in lexemes[at + 1 : end + 1]:
        if lexeme.type == "END":
            trial.fresh = True
        else:
            _place(trial, lexeme, spelled)
    return trial.lines[-1].width <= WIDTH


def _closing(lexemes: Sequence[Lexeme], at: int) -> int:
    depth = 0
    for index in range(at, len(lexemes)):
        depth += (lexemes[index].type == "LBRACE") - (lexemes[index].type == "RBRACE")
        if depth == 0:
            return index
    raise AssertionError("braces match in a text without errors")


# Comments


def _written(lines: list[_Line]) -> str:
    """The lines with their comments in place."""
    _align(lines)
    written = []
    for line in lines:
        if line.after_blank:
            written.append("")
        code = line.indent + line.code if line.code else ""
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
