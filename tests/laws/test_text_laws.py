"""What must not matter in a text: names, order, how a piece is written down."""

from __future__ import annotations

import random
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

import nodal
from nodal.network import Network
from nodal.response import Response
from nodal.strategies import EVERY, PASSIVE, frequencies, networks, text_of, texts

KEYWORDS = re.compile(r"\b(?:ground|n[0-9]+|e[0-9]+\w*|k[0-9]+|port[0-9]+|at[0-9]+|out|stage\w*)\b")


def outputs(text: str, grid: list[float]) -> np.ndarray:
    return np.asarray(nodal.loads(text).network().sweep(grid).reading("out"))


@given(networks(EVERY), frequencies())
def test_written_and_read_back(network: Network, frequency: float) -> None:
    """A network written in the language gives what the flat network gives, exactly the same values
    included."""
    model = nodal.loads(text_of(network)).network()
    read = model.network
    here = {part.name: part for part in network.parts}
    there = {part.name: part for part in read.parts}
    assert here.keys() == there.keys()
    for name, part in here.items():
        again = there[name]
        assert [network.nodes[n] for n in part.nodes] == [read.nodes[n] for n in again.nodes]
        assert [(label, v.nominal, unit) for label, v, unit in part.describe()] == [
            (label, v.nominal, unit) for label, v, unit in again.describe()
        ]
    before = Response(network).reading([frequency], "out").values
    assert_allclose(model.sweep([frequency]).reading("out"), before, rtol=1e-9, atol=1e-13)


@given(texts(PASSIVE), frequencies(), st.randoms(use_true_random=False))
def test_order_of_statements_does_not_matter(text: str, frequency: float, shuffler: random.Random) -> None:
    first, *rest = text.splitlines()
    shuffler.shuffle(rest)
    shuffled = "\n".join([first, *rest]) + "\n"
    assert_allclose(outputs(shuffled, [frequency]), outputs(text, [frequency]), rtol=1e-9, atol=1e-13)


@given(texts(EVERY), frequencies(), st.randoms(use_true_random=False))
def test_names_do_not_matter(text: str, frequency: float, shuffler: random.Random) -> None:
    """Every node, part, stock and source under a new name, among them words of the language."""
    words = sorted(set(KEYWORDS.findall(text)) - {"ground", "out"})
    fresh = [
        "cable",
        "in",
        "source",
        "to",
        "of",
        "branch",
        "with",
        "nodal",
        "times",
        "Q",
        "by",
        "at",
        "ohm",
        "loss",
        "pF",
    ]
    fresh += [f"x{i}_" for i in range(len(words))]
    shuffler.shuffle(words)
    renaming = dict(zip(words, fresh, strict=False))
    renamed = KEYWORDS.sub(lambda m: renaming.get(m[0], m[0]), text)
    assert renamed != text
    assert_allclose(outputs(renamed, [frequency]), outputs(text, [frequency]), rtol=1e-9, atol=1e-13)


SECTION = """
assembly section(top to bottom with shield; r, stray = 1 pF) {
  branch body: top to bottom = r ∥ 2 pF
  branch leak: bottom to shield = stray
}
"""
FRAME = """
source line: tip to ground = 1 V behind 50 Ω
branch arm: low to ground = 100 kΩ ∥ 100 nF
reading out: low to ground
"""
GRID = [0.0, 1.0, 1e3, 1e6, 1e9]


def test_a_place_is_its_statements_written_out() -> None:
    place = f"nodal 1{SECTION}{FRAME}place one: section(tip to low with ground; r = 5 MΩ, stray = 3 pF)\n"
    plain = f"nodal 1{FRAME}branch body: tip to low = 5 MΩ ∥ 2 pF\nbranch leak: low to ground = 3 pF\n"
    assert_allclose(outputs(place, GRID), outputs(plain, GRID), rtol=1e-12)


def test_a_chain_of_one_is_a_place() -> None:
    chain = f"nodal 1{SECTION}{FRAME}chain one: 1 of section(tip to low with ground; r = 5 MΩ)\n"
    place = f"nodal 1{SECTION}{FRAME}place one: section(tip to low with ground; r = 5 MΩ)\n"
    assert_allclose(outputs(chain, GRID), outputs(place, GRID), rtol=1e-12)


@pytest.mark.parametrize("count", [2, 7, 20])
def test_a_chain_is_its_sections_written_out(count: int) -> None:
    chain = f"nodal 1{SECTION}{FRAME}chain column: {count} of section(tip to low with ground; r = 5 MΩ)\n"
    plain = f"nodal 1{FRAME}"
    for i in range(count):
        a = "tip" if i == 0 else f"j{i}"
        b = "low" if i == count - 1 else f"j{i + 1}"
        plain += f"branch body{i}: {a} to {b} = 5 MΩ ∥ 2 pF\nbranch leak{i}: {b} to ground = 1 pF\n"
    assert_allclose(outputs(chain, GRID), outputs(plain, GRID), rtol=1e-11)
