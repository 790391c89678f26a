"""What the tests of the language share: parsing with and without mistakes, trees without the version."""

from __future__ import annotations

from pathlib import Path

from nodal.language import syntax
from nodal.language.diagnostics import Collector, Diagnostic
from nodal.language.parse import parse

ROOT = Path(__file__).parents[2]


def read_all(text: str) -> tuple[syntax.File, list[Diagnostic]]:
    """The tree, and everything that was found wrong."""
    collector = Collector()
    return parse(text, "test.nodal", collector), collector.found


def statements(body: str) -> tuple[syntax.Statement, ...]:
    """The statements of a text without mistakes, the version (which this adds) left out."""
    file, found = read_all("nodal 1\n" + body)
    assert found == []
    return file.statements[1:]


def statement(body: str) -> syntax.Statement:
    (only,) = statements(body)
    return only


def value(text: str) -> syntax.Expression:
    """What a `let` of this value holds."""
    let = statement(f"let x = {text}\n")
    assert isinstance(let, syntax.Let)
    return let.value


def codes(text: str) -> list[str]:
    """Codes of what is wrong, in the order of the text."""
    found = read_all(text)[1]
    return [d.code for d in sorted(found, key=lambda d: d.span.start if d.span else -1)]


def found_text(text: str, diagnostic: Diagnostic) -> str:
    """The stretch of text that a diagnostic points at."""
    assert diagnostic.span is not None
    return text[diagnostic.span.start : diagnostic.span.end]
