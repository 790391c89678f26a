"""The grammar itself: free of conflicts, nothing reserved, in step with the lexer and the builder."""

from __future__ import annotations

import importlib.resources

import pytest
from lark import Lark
from lark.exceptions import GrammarError

from nodal.language import forms, lexing
from nodal.language.building import Builder
from nodal.language.parse import _NoLexer, grammar, keyword_types

TEXT = importlib.resources.files("nodal.grammar").joinpath("network.lark").read_text(encoding="utf-8")
OPTIONS = {"parser": "lalr", "lexer": _NoLexer, "start": "file", "strict": True, "keep_all_tokens": True}


def states(parser: Lark) -> list[set[str]]:
    """What each state of the parser takes next."""
    return [set(state) for state in parser.parser.parser._parse_table.states.values()]


def test_the_tables_are_free_of_conflicts() -> None:
    Lark(TEXT, **OPTIONS)  # strict: any conflict raises


def test_a_conflict_would_be_noticed() -> None:
    ambiguous = TEXT.replace('?sum: product (("+" | "-") product)*', '?sum: product | sum "+" sum')
    assert ambiguous != TEXT
    with pytest.raises(GrammarError, match="Shift/Reduce conflict"):
        Lark(ambiguous, **OPTIONS)


def test_no_word_is_reserved() -> None:
    keywords = set(keyword_types().values())
    assert keywords
    assert any("NAME" in state for state in states(grammar()))
    assert [state & keywords for state in states(grammar()) if "NAME" in state and state & keywords] == []


def test_the_lexer_knows_every_keyword() -> None:
    assert set(keyword_types()) == lexing.KEYWORDS


def test_the_lexer_makes_every_terminal() -> None:
    made = {lexing.NUMBER, lexing.TEXT, lexing.END, lexing.DOTTED, "NAME", *lexing.SYMBOLS.values()}
    assert {t.name for t in grammar().terminals if t.pattern} <= made | set(keyword_types().values())
    spelled = {str(t.pattern.value): t.name for t in grammar().terminals if t.pattern}
    assert {
        text: name for text, name in spelled.items() if not text.isalpha()
    }.items() <= lexing.SYMBOLS.items()


def test_the_builder_has_a_method_for_every_rule() -> None:
    rules = {(rule.alias or rule.origin.name) for rule in grammar().rules}
    rules = {rule for rule in rules if not rule.startswith("_")} - {
        "atom",
        "factor",
        "path",
    }  # these collapse
    assert {rule for rule in rules if not hasattr(Builder, rule)} == set()


def test_every_statement_has_its_form() -> None:
    first = next(state for state in states(grammar()) if "NODAL" in state and "$END" in state)
    words = {word for word, name in keyword_types().items() if name in first}
    assert set(forms.FORMS) == words
