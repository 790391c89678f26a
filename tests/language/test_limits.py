"""What a text may be at most: said plainly, found early, without running out of stack."""

from __future__ import annotations

import pytest
from support.texts import codes, read_all, value

from nodal.language import syntax as s
from nodal.language.diagnostics import Collector
from nodal.language.parse import parse

TWO_MEBIBYTES = 2_097_152


@pytest.mark.parametrize("operator", ["+", "-", "*", "/", "∥", "--"])
def test_long_chains_are_flat(operator: str) -> None:
    tree = value(f" {operator} ".join(["1 pF"] * 10_000))
    members = {s.Sum: "terms", s.Product: "factors", s.Parallel: "branches", s.Series: "members"}
    assert len(getattr(tree, members[type(tree)])) == 10_000


def test_a_hundred_levels_of_parentheses() -> None:
    tree = value("-(" * 100 + "x" + ")" * 100)
    for _ in range(100):
        assert isinstance(tree, s.Negative)
        tree = tree.operand
    assert tree == s.Name("x")


@pytest.mark.parametrize("depth", [101, 100_000])
@pytest.mark.parametrize("bracket", ["()", "{}"])
def test_more_levels_are_told_about(depth: int, bracket: str) -> None:
    text = f"nodal 1\nlet x = {bracket[0] * depth}1{bracket[1] * depth}\n"
    assert codes(text) == ["too-deep"]
    assert codes(text.replace(bracket[1], "")) == ["too-deep"]


def test_a_long_file() -> None:
    lines = "\n".join(f"branch b{i}: n{i} to n{i + 1} = {i} Ω ± 1 % ∥ 2.2 pF -- 3 nH" for i in range(20_000))
    file, found = read_all(f"nodal 1\n{lines}\n")
    assert found == []
    assert len(file.statements) == 20_001


def test_many_mistakes() -> None:
    assert codes("nodal 1\n" + "let a 1\n" * 2_000) == ["syntax"] * 2_000


def test_two_mebibytes_and_no_more() -> None:
    fill = "nodal 1\n#" + "µ" * ((TWO_MEBIBYTES - 9) // 2)
    fill += "x" * (TWO_MEBIBYTES - len(fill.encode()))
    assert len(fill.encode()) == TWO_MEBIBYTES
    assert codes(fill) == []
    assert codes(fill + "x") == ["too-long"]


def test_a_lone_surrogate_is_a_character_like_another() -> None:
    collector = Collector()
    parse("nodal 1\nlet a = \ud800\n", "x", collector)
    assert [d.code for d in collector.found] == ["unknown-character"]
