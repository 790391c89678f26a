"""Pairs in fixtures/: NAME.nodal, and NAME.expected with what is said about it, to the letter."""

from __future__ import annotations

from pathlib import Path

import pytest

from nodal.language import syntax
from nodal.language.diagnostics import Collector, render
from nodal.language.parse import parse, read

FOLDER = Path(__file__).parent / "fixtures"
SOURCES = sorted(FOLDER.glob("*.nodal"))


def test_there_are_pairs() -> None:
    assert SOURCES
    assert {path.stem for path in SOURCES} == {path.stem for path in FOLDER.glob("*.expected")}


@pytest.mark.parametrize("path", SOURCES, ids=lambda path: path.stem)
def test_what_is_said(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(FOLDER)
    collector = Collector()
    text = read(path.name, collector)
    assert text is not None
    file = parse(text, path.name, collector)
    expected = path.with_suffix(".expected").read_bytes().decode()
    assert render(collector.found, collector.sources) == expected
    if not expected:
        assert isinstance(file.statements[0], syntax.Version)
