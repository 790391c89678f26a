"""The editor grammar, run by a tokeniser of such grammars, against the tool's own lexer.

Scopes are compared by their beginnings, which is what color themes go by. What each kind of word is called
follows the naming conventions that editors publish for such grammars (from memory).
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any

import pytest

from nodal import figure_names
from nodal.language import amplifiers, cables, evaluate
from nodal.language.diagnostics import Collector, Lines
from nodal.language.lexing import KEYWORDS, Lexeme
from nodal.language.parse import keyword_types, parse_with_lexemes
from nodal.language.units import UNITS

ROOT = Path(__file__).parents[2]
GRAMMAR = ROOT / "grammar" / "editor" / "nodal.tmLanguage.json"
SAMPLE = Path(__file__).parent / "every_statement.nodal"
FILES = [*sorted((ROOT / "circuits").rglob("*.nodal")), SAMPLE]

Scopes = dict[int, tuple[str, ...]]
"""Offset of each character that the tokeniser returned -> its scopes, that of the file left out."""

STATEMENT, WORD, FIELD = "keyword.control.statement", "keyword.other", "support.type.property-name"
DECLARED = ("entity.name", "variable.other.definition")
TWO_SIDED = {"source", "branch", "contact", "reading", "cable", "amplifier"}
"""Statements that name nodes before anything else."""
SYMBOLS = {
    **dict.fromkeys(("PARALLEL", "SERIES"), "keyword.operator.network"),
    "PLUS_MINUS": "keyword.operator.tolerance",
    **dict.fromkeys(("AT_MOST", "AT_LEAST"), "keyword.operator.comparison"),
    "EQUAL": "keyword.operator.assignment",
    **dict.fromkeys(("PLUS", "MINUS", "STAR", "SLASH"), "keyword.operator.arithmetic"),
    **dict.fromkeys(("LPAR", "RPAR"), "punctuation.section.parens"),
    **dict.fromkeys(("LBRACE", "RBRACE"), "punctuation.section.block"),
    **dict.fromkeys(("COMMA", "COLON"), "punctuation.separator"),
    "SEMICOLON": "punctuation.terminator",
}
DECLARING = {
    "let", "source", "branch", "coupling", "stock", "cable", "amplifier", "contact", "reading", "drive",
    "assembly", "place", "chain", "case", "require",
}  # fmt: skip


@pytest.fixture(scope="module")
def scopes(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], Scopes]:
    """Tokenises a text with the grammar."""
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(
            tmp_path_factory.mktemp("tokeniser")
        )  # it makes a folder for a cache where it is imported
        from textmate_grammar.parsers.base import LanguageParser
    parser: Any = LanguageParser(json.loads(GRAMMAR.read_text(encoding="utf-8")))

    def tokenise(text: str) -> Scopes:
        starts = [0]
        for line in text.split("\n"):
            starts.append(starts[-1] + len(line) + 1)
        found: Scopes = {}
        for (line, column), part, names in parser.parse_string(text).flatten():
            assert names[0] == "source.nodal"
            for at in range(starts[line] + column, starts[line] + column + len(part)):
                found[at] = tuple(names[1:])
        return found

    return tokenise


def read(text: str) -> list[Lexeme]:
    collector = Collector()
    lexemes = parse_with_lexemes(text, "test.nodal", collector)[1]
    assert not collector.failed, collector.found
    return lexemes


def expected(text: str, lexemes: list[Lexeme]) -> Iterator[tuple[int, int, tuple[str, ...]]]:
    """(start, end, scopes of which it must have one) for every stretch of text that means something."""
    keywords = set(keyword_types().values())
    fresh, statement, nodes = True, "", False
    for before, lexeme, after in zip([None, *lexemes], lexemes, [*lexemes[1:], None], strict=False):
        start, end, kind = lexeme.span.start, lexeme.span.end, lexeme.type
        if fresh:
            statement, nodes = lexeme.text, lexeme.text in TWO_SIDED
        nodes = nodes and kind not in ("EQUAL", "LBRACE", "TIMES")
        if kind == "NUMBER":
            digits = start + len(lexeme.text)
            yield start, digits, ("constant.numeric",)
            if lexeme.unit:
                yield end - len(text[digits:end].lstrip()), end, ("keyword.other.unit",)
        elif kind == "TEXT":
            yield start, end, ("string.quoted.double",)
        elif kind == "END":
            if lexeme.text == ";":
                yield start, end, (SYMBOLS["SEMICOLON"],)
        elif kind in SYMBOLS:
            code = statement == "allow" and kind == "MINUS"
            yield start, end, ("constant.other.code",) if code else (SYMBOLS[kind],)
        elif kind in keywords:
            first = fresh or (kind == "TEST" and statement == "under")
            yield start, end, (STATEMENT,) if first else (WORD,)
        elif fresh:
            yield start, end, (FIELD,)
        else:
            yield start, end, _name_scopes(statement, before, lexeme, after, nodes)
        fresh = kind in ("END", "LBRACE", "RBRACE")


def _name_scopes(
    statement: str, before: Lexeme | None, name: Lexeme, after: Lexeme | None, nodes: bool
) -> tuple[str, ...]:
    """Scopes that a name may have, by what it is."""
    assert before is not None
    if before.type == "AS" or (statement in DECLARING and before.text == statement):
        return DECLARED
    if statement == "allow" and before.type in ("ALLOW", "MINUS"):
        return ("constant.other.code",)
    if nodes:
        return ("variable.other.node",)
    if before.type == "OF" or (statement == "place" and after is not None and after.type == "LPAR"):
        return ("entity.name.type",)
    if after is not None and after.type == "LPAR":
        return ("support.function",)
    return ("constant.language",) if name.text == "pi" else ("variable.other.reference",)


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_every_lexeme_has_its_scope(path: Path, scopes: Callable[[str], Scopes]) -> None:
    text = path.read_text(encoding="utf-8")
    lexemes = read(text)
    found, lines = scopes(text), Lines(text)
    wrong = []
    covered: set[int] = set()
    for start, end, names in expected(text, lexemes):
        covered.update(range(start, end))
        for at in range(start, end):
            if text[at] != " " and not any(has.startswith(names) for has in found.get(at, ())):
                wrong.append((lines.position(start), text[start:end], names, found.get(at)))
                break
    assert wrong == []
    for at, has in found.items():
        line, column = lines.position(at)
        comment = any(name.startswith("comment.line") for name in has)
        begins = lines.line(line).find("#") + 1 if '"' not in lines.line(line) else 0
        if begins:
            assert comment == (column >= begins), (line, column, has)
        elif at not in covered and not comment:
            assert has == (), (line, column, has)
        assert not any(name.startswith("invalid") for name in has), (line, column, has)


def test_the_sample_holds_every_keyword() -> None:
    lexemes = read(SAMPLE.read_text(encoding="utf-8"))
    assert {word for word, kind in keyword_types().items() if kind in {x.type for x in lexemes}} == KEYWORDS


def test_every_unit_is_one(scopes: Callable[[str], Scopes]) -> None:
    spellings = [unit if unit.partition("/")[0] != "as" else None for unit in UNITS]
    text = "nodal 1\n" + "".join(f"let x{i} = 1 {unit}\n" for i, unit in enumerate(spellings) if unit)
    text += "".join(f"let y{i} = 1{unit}\n" for i, unit in enumerate(UNITS))
    found = scopes(text)
    for lexeme in read(text):
        if lexeme.type == "NUMBER" and lexeme.unit:
            for at in range(lexeme.span.end - len(lexeme.unit), lexeme.span.end):
                assert found[at] == ("keyword.other.unit.nodal",), (lexeme, found[at])


@pytest.mark.parametrize(
    ("scope", "text", "names"),
    [
        ("support.function.figure", "require x: @(a) <= 1", [row.name for row in figure_names.TABLE]),
        ("support.function.value", "let x = @(1 m, 2 m)", evaluate.FUNCTIONS),
        ("support.type.property-name", "stock x { @ 1 }", cables.FIELDS),
        ("support.type.property-name", "stock x {\n  @ 1\n}", amplifiers.FIELDS),
        ("entity.name.type", "place x: @(a)", ["leg", "wire", "gain"]),
        ("variable.other", "place x: a(b; @ = 1 m)", ["gain", "step", "of_it"]),
    ],
    ids=["figures", "functions", "stock", "amplifier", "assemblies", "arguments"],
)
def test_every_known_name(
    scope: str, text: str, names: Iterable[str], scopes: Callable[[str], Scopes]
) -> None:
    at = text.index("@")
    for name in names:
        found = scopes(text.replace("@", name))
        assert all(found[i][0].startswith(scope) for i in range(at, at + len(name))), name


@pytest.mark.parametrize("text", ["9 MΩ ‖ 1 pF", "9 MΩ – 5 Ω", "9 MΩ | 1 pF", "45 º", "≤ 1"])
def test_look_alikes_are_marked(text: str, scopes: Callable[[str], Scopes]) -> None:
    wrong = next(i for i, char in enumerate(text) if char in "‖–|º≤")
    assert scopes(text)[wrong] == ("invalid.illegal.look-alike.nodal",)
