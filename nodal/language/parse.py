"""Text -> tree: the grammar's LALR(1) tables, fed lexeme by lexeme, with one error a statement.

A word becomes a keyword only where the parser can take that keyword next. On an error the statement is
reported and given up: the parser goes back to where it began and resumes behind it, at the same depth of
braces.
"""

from __future__ import annotations

import difflib
import importlib.resources
import os
import sys
from collections.abc import Iterable, Iterator
from dataclasses import replace
from functools import lru_cache
from typing import Any, Protocol, cast

from lark import Lark, Token, UnexpectedToken
from lark.lexer import Lexer as LarkLexer

from nodal.language import lexing
from nodal.language import syntax as s
from nodal.language.building import Builder
from nodal.language.diagnostics import Collector
from nodal.language.forms import FIELD_FORMS, FORMS, NODE_COUNTS
from nodal.language.lexing import Lexeme
from nodal.language.syntax import Span

MAX_BYTES = 2 * 1024 * 1024
VERSION = "1"


def parse(text: str, path: str, collector: Collector) -> s.File:
    """The tree of `text`; what is wrong with it goes to `collector`, and the statements concerned are left
    out.

    Offsets in spans count characters (code points) of `text` as given. The tree holds whatever could be read,
    so that the meaning of the rest can be checked too; `File.lost` says which names may be missing for that
    reason.
    """
    return parse_with_lexemes(text, path, collector)[0]


def parse_with_lexemes(text: str, path: str, collector: Collector) -> tuple[s.File, list[Lexeme]]:
    """The tree of `parse` and the lexemes it was built from, words told apart: `type` is the terminal of the
    grammar that each was read as. Empty where nothing could be read."""
    collector.sources[path] = text
    whole = Span(path, 0, len(text))
    nothing = s.File(path, text, span=whole)
    if len(text) > MAX_BYTES or len(text.encode(errors="surrogatepass")) > MAX_BYTES:
        collector.add("too-long", Span(path, 0, 0), path=path)
        return nothing, []
    version = _version_ahead(text)
    if version is not None:
        collector.add("newer-version", Span(path, *version[1]), version=version[0], known=VERSION)
        return nothing, []
    lexer = lexing.Lexer(text, path, collector)
    lexemes = lexer.run()
    if lexer.too_deep:
        return nothing, []
    if not lexemes:
        if not lexer.faults:
            collector.add("empty-file", Span(path, 0, 0), path=path)
        return nothing, []
    run = _Run(lexer, collector)
    statements = run.statements()
    file = replace(nothing, statements=statements, lost=frozenset(run.lost))
    _check_version(file, lexemes[0], collector)
    return file, lexemes


def read(path: str, collector: Collector) -> str | None:
    """The text of a file, `-` for standard input; None where it cannot be had, with the reason in
    `collector`."""
    try:
        if path == "-":
            data = sys.stdin.buffer.read(MAX_BYTES + 1)
        else:
            with open(path, "rb") as file:
                data = file.read(MAX_BYTES + 1)
    except IsADirectoryError:
        collector.add("is-directory", None, path=path)
        return None
    except FileNotFoundError:
        collector.add("no-file", None, path=path)
        return None
    except (OSError, ValueError) as error:  # ValueError: a path with a null character
        reason = os.strerror(error.errno) if isinstance(error, OSError) and error.errno else str(error)
        collector.add("unreadable", None, path=path, reason=reason)
        return None
    return decode(data, path, collector)


def decode(data: bytes, path: str, collector: Collector) -> str | None:
    """The text of a file's bytes; None where they are none, with the reason in `collector`."""
    if len(data) > MAX_BYTES:
        collector.add("too-long", None, path=path)
        return None
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        guess = _guess_encoding(data)
        collector.add("not-utf-8", None, path=path, line=line, byte=f"0x{data[error.start]:02X}", guess=guess)
        return None


def _guess_encoding(data: bytes) -> str:
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return "UTF-16"
    return "another encoding"


def _version_ahead(text: str) -> tuple[str, tuple[int, int]] | None:
    """The version in the first statement and its place, where it is later than this one."""
    found = lexing.FIRST_VERSION.match(text)
    if found is None or int(found.group(1)[:9]) <= int(VERSION):
        return None
    return found.group(1), found.span(1)


# The parser's tables


class _State(Protocol):
    state_stack: list[Any]
    value_stack: list[Any]


class _Parser(Protocol):
    """What is used of the library's parser that is fed token by token."""

    parser_state: _State

    def feed_token(self, token: Lexeme) -> Any: ...

    def choices(self) -> dict[str, Any]: ...

    def accepts(self) -> set[str]: ...


class _NoLexer(LarkLexer):
    """Lexemes come from `nodal.language.lexing`."""

    def __init__(self, lexer_conf: Any) -> None:
        pass

    def lex(self, lexer_state: Any, parser_state: Any) -> Iterator[Token]:
        return iter(())


@lru_cache(maxsize=1)
def grammar() -> Lark:
    """The grammar with its tables and the builder of the tree; a conflict in it is an exception."""
    text = importlib.resources.files("nodal.grammar").joinpath("network.lark").read_text(encoding="utf-8")
    return Lark(
        text,
        parser="lalr",
        lexer=_NoLexer,
        start="file",
        strict=True,
        keep_all_tokens=True,
        transformer=Builder(),
    )


@lru_cache(maxsize=1)
def keyword_types() -> dict[str, str]:
    """Spelling of each keyword -> its terminal."""
    terminals = grammar().terminals
    return {str(t.pattern.value): t.name for t in terminals if t.pattern and str(t.pattern.value).isalpha()}


@lru_cache(maxsize=1)
def spellings() -> dict[str, str]:
    """Terminal -> its spelling, "" for those that have many."""
    return {t.name: str(t.pattern.value) if t.pattern else "" for t in grammar().terminals}


# Terminals between values: named only where nothing else could stand.
_OPERATORS = frozenset(("PARALLEL", "SERIES", "PLUS", "MINUS", "STAR", "SLASH", "PLUS_MINUS"))
_QUALIFIERS = frozenset(("TRIM", "RATED", "DRIFT", "LOSS", "AS", "RMS", "AND"))
_BLOCKS = {
    "case": ("CASE", "NAME", "LBRACE"),
    "stock": ("STOCK", "NAME", "LBRACE"),
    "under": ("UNDER", "TEST", "LBRACE"),
    "assembly": ("ASSEMBLY", "NAME", "LPAR", "NAME", "RPAR", "LBRACE"),
    "amplifier": (
        "AMPLIFIER", "NAME", "COLON", "NAME", "COMMA", "NAME", "TO", "NAME", "COMMA", "NAME", "LBRACE",
    ),
}  # fmt: skip


class _Run:
    """One pass of the parser over the lexemes of a text."""

    def __init__(self, lexer: lexing.Lexer, collector: Collector) -> None:
        self.lexer = lexer
        self.lexemes = lexer.lexemes
        self.collector = collector
        self.parser = cast(_Parser, grammar().parse_interactive(""))
        self.keywords = keyword_types()
        self.lost: set[str] = set()
        self.blocks: list[str] = []
        """First word of each block that stands open."""
        self._begin = 0
        """Index of the lexeme that begins the current statement."""
        self._saved: tuple[list[Any], list[Any]] = ([], [])
        """The parser's stacks before that statement."""

    def statements(self) -> tuple[s.Statement, ...]:
        """Feeds everything; the statements that could be read."""
        parser, lexemes, keywords, count = self.parser, self.lexemes, self.keywords, len(self.lexemes)
        feed, choices, state = parser.feed_token, parser.choices, parser.parser_state
        at, fresh = 0, True
        while at < count:
            lexeme = lexemes[at]
            kind = lexeme.type
            if kind == "WORD":
                keyword = keywords.get(lexeme.text)
                kind = lexeme.type = keyword if keyword and keyword in choices() else "NAME"
            elif kind == "END" and fresh and "END" not in choices():  # behind a statement that was given up
                at += 1
                continue
            try:
                feed(lexeme)
            except UnexpectedToken:
                at, fresh = self._recover(at, fresh)
                continue
            if kind == "END":
                fresh = True
            elif kind == "LBRACE":
                self.blocks.append(lexemes[self._begin].text)
                fresh = True
            elif kind == "RBRACE":
                self.blocks.pop()
                fresh = False
            elif fresh:
                # Whatever stood before this statement is reduced by now; below it lies where to go back to.
                self._saved = (state.state_stack[:-1], state.value_stack[:-1])
                self._begin = at
                fresh = False
            at += 1
        return self._end(fresh)

    def _end(self, fresh: bool) -> tuple[s.Statement, ...]:
        end = Lexeme("$END", "", Span(self.lexer.path, len(self.lexer.text), len(self.lexer.text)))
        try:
            statements = self.parser.feed_token(end)
        except UnexpectedToken:
            self.lexemes.append(end)
            self._recover(len(self.lexemes) - 1, fresh)
            statements = self.parser.feed_token(end)
        return cast("tuple[s.Statement, ...]", statements)

    # Errors

    def _recover(self, at: int, fresh: bool) -> tuple[int, bool]:
        """Report the statement that cannot go on at lexeme `at`; returns where to resume, and whether
        afresh."""
        lexemes = self.lexemes
        begin = at if fresh else self._begin
        stop = at
        while stop < len(lexemes) and lexemes[stop].type not in ("END", "LBRACE", "RBRACE", "$END"):
            stop += 1
        expected = self.parser.accepts()
        # At the last line of a block, and before "}", what was fed may have been reduced already: ask the
        # exact set.
        complete = not fresh and "END" in expected
        self._report(at, begin, stop, fresh, expected)
        if not complete:
            self._forget(begin, stop)
            if not fresh:
                state = self.parser.parser_state
                state.state_stack[:], state.value_stack[:] = self._saved
        if stop < len(lexemes) and lexemes[stop].type == "LBRACE":
            if not complete and self._open_block(begin, stop):
                return stop + 1, True
            stop = self._behind_block(stop)
            if not complete:
                self._forget(begin, stop)
        return stop, not complete

    def _forget(self, begin: int, stop: int) -> None:
        self.lost.update(lexeme.text for lexeme in self.lexemes[begin:stop] if lexeme.text[:1].isalpha())

    def _open_block(self, begin: int, stop: int) -> bool:
        """Go on inside a block whose header is broken, as if the header were right; False where it is no
        block."""
        lexemes = self.lexemes
        word = lexemes[begin].text
        word = word if word in _BLOCKS else _nearest(word, FORMS) or ""
        if word not in _BLOCKS or _BLOCKS[word][0] not in self.parser.accepts():
            return False
        name = next((x.text for x in lexemes[begin + 1 : begin + 2] if x.text.isidentifier()), "")
        span = lexemes[begin].span
        for kind in _BLOCKS[word][:-1]:
            self.parser.feed_token(Lexeme(kind, name if kind == "NAME" else spellings()[kind], span))
            name = "" if kind == "NAME" else name
        self.parser.feed_token(lexemes[stop])
        self.blocks.append(word)
        return True

    def _behind_block(self, at: int) -> int:
        """Index of the end of the statement whose brace opens at `at`."""
        lexemes, depth = self.lexemes, 0
        while at < len(lexemes):
            kind = lexemes[at].type
            depth += (kind == "LBRACE") - (kind == "RBRACE")
            if depth < 0 or (depth == 0 and kind == "END"):
                break
            at += 1
        return at

    def _report(self, at: int, begin: int, stop: int, fresh: bool, expected: set[str]) -> None:
        lexemes = self.lexemes
        lexeme = lexemes[at]
        start = lexemes[begin].span.start
        end = lexemes[stop].span.end if stop < len(lexemes) else len(self.lexer.text)
        if lexeme.type == "BAD" or self.lexer.fault_between(start, max(end, start + 1)):
            return  # told already
        add, span = self.collector.add, lexeme.span
        block = self.blocks[-1] if self.blocks else ""
        found = self._found(lexeme)
        if fresh and block in FIELD_FORMS:
            add(
                "syntax",
                span,
                expected=f"a field of the {block}",
                found=found,
                help=f"write {FIELD_FORMS[block]}",
            )
        elif fresh and lexeme.type in ("NAME", "DOTTED"):
            nearest = _nearest(lexeme.text, FORMS)
            fix = f"did you mean {nearest}? It reads: {FORMS[nearest]}" if nearest else (
                f"a statement begins with one of: {', '.join(FORMS)}"
            )  # fmt: skip
            add("unknown-statement", span, found=lexeme.text, fix=fix)
        elif fresh:
            help = "a statement begins with a word such as branch or let"
            if lexeme.type in _OPERATORS or lexeme.type in ("COMMA", "EQUAL"):
                help = f'to go on from the line before, put "{lexeme.text}" at its end'
            add("syntax", span, expected="a statement", found=found, help=help)
        elif (count := self._node_count(begin, at, expected)) is not None:
            word = lexemes[begin].text
            number, form = NODE_COUNTS[word]
            add("node-count", span, what=_article(word), asked=number, given=count, form=form)
        elif lexeme.type == "DOTTED" and "NAME" in expected:
            add("dotted-name", span, found=lexeme.text)
        else:
            add("syntax", span, expected=self._expectation(begin, at, expected), found=found,
                help=self._help(begin, lexeme, expected, block))  # fmt: skip

    def _found(self, lexeme: Lexeme) -> str:
        if lexeme.type == "$END":
            return "the end of the file"
        written = self.lexer.text[lexeme.span.start : lexeme.span.end]
        if lexeme.type == "END":
            return '";"' if written == ";" else "the end of the line"
        return f'"{written}"' if lexeme.type != "TEXT" else written

    def _node_count(self, begin: int, at: int, expected: set[str]) -> int | None:
        """How many nodes the statement names, where that is what is wrong at lexeme `at`; else None."""
        lexemes = self.lexemes
        word = lexemes[begin].text
        between = expected <= {"TO", "COMMA", "EQUAL", "TIMES", "LBRACE", "END", "RBRACE", "$END"}
        if (
            word not in NODE_COUNTS
            or not between
            or any(x.type in ("EQUAL", "TIMES") for x in lexemes[begin:at])
        ):
            return None
        kind = (
            "TO" if lexemes[at].text == "to" else "TIMES" if lexemes[at].text == "times" else lexemes[at].type
        )
        if at < begin + 4 or kind not in ("TO", "TIMES", "COMMA", "EQUAL", "LBRACE", "END", "RBRACE", "$END"):
            return None
        count = 1 + sum(x.type in ("TO", "COMMA") for x in lexemes[begin:at])
        for other in lexemes[at:]:
            if other.type in ("EQUAL", "LBRACE", "END", "RBRACE", "$END", "TIMES"):
                break
            count += other.text in ("to", ",")
        return count if count != NODE_COUNTS[word][0] else None

    def _expectation(self, begin: int, at: int, expected: set[str]) -> str:
        """What could stand here, in words."""
        things = []
        rest = set(expected)
        if "NUMBER" in rest and "LPAR" in rest:
            things.append("a value")
            rest -= {"NUMBER", "NAME", "DOTTED", "LPAR", "MINUS"}
        elif "NAME" in rest:
            things.append(self._name_expected(begin, at))
            rest -= {"NAME", "DOTTED"}
        after_value = bool(rest & _OPERATORS)
        rest -= _OPERATORS | _QUALIFIERS
        if after_value:
            rest -= {"LPAR"}
        ends = bool(rest & {"END", "$END"})
        rest -= {"END", "$END"} | ({"RBRACE"} if ends else set())
        things += sorted(f'"{spellings()[kind]}"' for kind in rest if spellings().get(kind))
        things += ["a number"] * ("NUMBER" in rest) + ['a text in quotes, as in "name"'] * ("TEXT" in rest)
        if ends:
            things.append("the end of the statement")
        elif after_value:
            things.append("an operator")
        if len(things) > 1:
            return f"{', '.join(things[:-1])} or {things[-1]}"
        return things[0] if things else "an operator"

    def _name_expected(self, begin: int, at: int) -> str:
        word = self.lexemes[begin].text
        if at == begin + 1:
            return f"a name for the {word}" if word not in ("omit", "allow") else "a name"
        before = {x.type for x in self.lexemes[begin:at]}
        if (word in NODE_COUNTS and "EQUAL" not in before) or word in ("place", "chain", "assembly"):
            return "a node" if before & {"COLON", "LPAR"} and "SEMICOLON" not in before else "a name"
        return "a name"

    def _help(self, begin: int, lexeme: Lexeme, expected: set[str], block: str) -> str:
        word = self.lexemes[begin].text
        if lexeme.type in ("NUMBER", "NAME", "DOTTED", "LPAR") and expected & _OPERATORS:
            at = self.lexemes.index(lexeme, begin)
            if at >= begin + 2 and self.lexemes[at - 1].text in FORMS:  # a statement taken for a value
                joint, taken = self.lexemes[at - 2 : at]
                if joint.type in _OPERATORS:
                    return f'no value stands between "{joint.text}" and "{taken.text}"; such a line goes on'
            return "between two values stands an operator: ∥ (or ||), --, +, -, * or /"
        if lexeme.type == "NUMBER" and "NAME" in expected:
            return "a name begins with a letter"
        if block in FIELD_FORMS:
            return f"write {FIELD_FORMS[block]}"
        return f"the statement reads: {FORMS[word]}" if word in FORMS else ""


def _article(word: str) -> str:
    word = {"nodal": "version", "under": "circuit under test"}.get(word, word)
    return f"{'an' if word[0] in 'aeio' else 'a'} {word}"


def _nearest(word: str, among: Iterable[str]) -> str | None:
    words = list(among)
    close = difflib.get_close_matches(word, words, 1, 0.7) or difflib.get_close_matches(
        word.lower(), words, 1, 0.7
    )
    return close[0] if close else None


def _check_version(file: s.File, first: Lexeme, collector: Collector) -> None:
    """The version is the first statement, once."""
    if first.text != "nodal":
        collector.add("missing-version", first.span, version=VERSION)
        return
    for statement in file.statements:
        if not isinstance(statement, s.Version):
            continue
        if statement.span.start != first.span.start:
            collector.add("version-again", statement.span)
        elif statement.number != VERSION:
            span = Span(file.path, statement.span.start + len("nodal "), statement.span.end)
            collector.add("bad-version", span, found=statement.number, version=VERSION)
