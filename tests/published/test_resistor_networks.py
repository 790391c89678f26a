"""Resistor networks whose answers are classical."""

from __future__ import annotations

import itertools
import math
import random
from fractions import Fraction

import networkx as nx
import numpy as np
import pytest
from numpy.testing import assert_allclose
from support.run import curve, ladder, load, resistors

FREQUENCIES = [0.0, 1.0, 1e9]

SOLIDS = {
    "tetrahedron": (nx.tetrahedral_graph(), Fraction(1, 2), None),
    "cube": (nx.cubical_graph(), Fraction(7, 12), Fraction(5, 6)),
    "octahedron": (nx.octahedral_graph(), Fraction(5, 12), Fraction(1, 2)),
    "dodecahedron": (nx.dodecahedral_graph(), Fraction(19, 30), Fraction(7, 6)),
    "icosahedron": (nx.icosahedral_graph(), Fraction(11, 30), Fraction(1, 2)),
}


def resistance(graph: nx.Graph, a: object, b: object) -> np.ndarray:
    """Between two vertices; each edge is 1 Ω or its attribute `ohms`."""
    edges = [(u, v, float(data.get("ohms", 1.0))) for u, v, data in graph.edges(data=True)]
    body = f"source drive: n{a} to ground = 1 A\n" + resistors(edges, b) + f"reading out: n{a} to ground\n"
    return curve(body, FREQUENCIES)


@pytest.mark.parametrize("solid", SOLIDS)
def test_adjacent_corners_of_a_solid(solid: str) -> None:
    """1 Ω on every edge of a Platonic solid (classical; edge over n by Foster: (n - 1) / edges)."""
    graph, adjacent, _ = SOLIDS[solid]
    a, b = next(iter(graph.edges))
    assert_allclose(resistance(graph, a, b), float(adjacent), rtol=1e-13)


@pytest.mark.parametrize("solid", [name for name, row in SOLIDS.items() if row[2]])
def test_opposite_corners_of_a_solid(solid: str) -> None:
    """1 Ω on every edge of a Platonic solid, corners farthest apart (classical)."""
    graph, _, opposite = SOLIDS[solid]
    distances = nx.single_source_shortest_path_length(graph, 0)
    far = max(distances, key=lambda vertex: distances[vertex])
    assert_allclose(resistance(graph, 0, far), float(opposite), rtol=1e-13)


def test_ten_stage_ladder_gives_ratios_of_fibonacci_numbers() -> None:
    """Ten stages of 1 Ω in series and 1 Ω across: input 10946/6765 Ω, ratio 1/10946 (textbook)."""
    body = ladder(["1 Ω"] * 10, ["1 Ω"] * 10)
    volts = curve(f"source drive: in to ground = 1 V\n{body}reading out: out to ground", FREQUENCIES)
    assert_allclose(volts, 1 / 10946, rtol=1e-13)
    ohms = curve(f"source drive: in to ground = 1 A\n{body}reading out: in to ground", FREQUENCIES)
    assert_allclose(ohms, 10946 / 6765, rtol=1e-13)


def test_long_ladder_approaches_the_golden_ratio() -> None:
    """Input resistance of the endless 1 Ω ladder, (1 + √5)/2 (textbook); forty stages are endless in double
    precision."""
    body = ladder(["1 Ω"] * 40, ["1 Ω"] * 40)
    ohms = curve(f"source drive: in to ground = 1 A\n{body}reading out: in to ground", FREQUENCIES)
    assert_allclose(ohms, (1 + math.sqrt(5)) / 2, rtol=1e-13)


@pytest.mark.parametrize("n", [3, 8, 15])
def test_complete_graph(n: int) -> None:
    """Any two of n nodes, all joined by 1 Ω: 2/n (symmetry; textbook)."""
    assert_allclose(resistance(nx.complete_graph(n), 0, n - 1), 2 / n, rtol=1e-13)


@pytest.mark.parametrize("k", [1, 4, 6])
def test_ring(k: int) -> None:
    """Two nodes k apart on a ring of 13 × 1 Ω: k (13 - k) / 13 (two arcs in parallel)."""
    assert_allclose(resistance(nx.cycle_graph(13), 0, k), k * (13 - k) / 13, rtol=1e-13)


def test_foster_sum_rule() -> None:
    """Σ effective/edge resistance over the edges of a connected graph is n - 1 (R. M. Foster 1949)."""
    rng = random.Random(1949)
    graph = nx.petersen_graph()
    for edge in graph.edges:
        graph.edges[edge]["ohms"] = 10 ** rng.uniform(-2, 4)
    edges = [(u, v, graph.edges[u, v]["ohms"]) for u, v in graph.edges]
    body = resistors(edges, 0)
    node = ["ground", *(f"n{v}" for v in range(1, len(graph)))]
    for i, (u, v, _) in enumerate(edges):
        body += f"source s{i}: {node[u]} to {node[v]} = 1 A\nreading m{i}: {node[u]} to {node[v]}\n"
    model = load(body).network()
    effective = [model.sweep([0.0], drive=f"s{i}").reading(f"m{i}")[0].real for i in range(len(edges))]
    total = math.fsum(r / ohms for r, (_, _, ohms) in zip(effective, edges, strict=True))
    assert_allclose(total, len(graph) - 1, rtol=1e-12)


@pytest.mark.parametrize("seed", range(4))
def test_against_resistance_distance(seed: int) -> None:
    """A random graph with resistances over six decades against `networkx.resistance_distance`
    (pseudo-inverse of the Laplacian, which is why the comparison stops at 1e-8)."""
    rng = random.Random(seed)
    graph = nx.connected_watts_strogatz_graph(14, 4, 0.4, seed=seed)
    for edge in graph.edges:
        graph.edges[edge]["ohms"] = 10 ** rng.uniform(-3, 3)
    expected = nx.resistance_distance(graph, 0, 7, weight="ohms", invert_weight=True)
    assert_allclose(resistance(graph, 0, 7), expected, rtol=1e-8)


def test_balanced_bridge_carries_nothing() -> None:
    """Bridge arms in proportion: no voltage across the diagonal whatever the detector is (Christie 1833)."""
    body = """
    source drive: top to ground = 1 V behind 7 Ω
    branch a: top to left = 120 Ω
    branch b: left to ground = 360 Ω
    branch c: top to right = 1 kΩ
    branch d: right to ground = 3 kΩ
    branch detector: left to right = 50 Ω
    reading out: left to right
    """
    assert np.max(np.abs(curve(body, FREQUENCIES))) < 1e-15


def test_star_and_its_triangle_look_alike() -> None:
    """A star of 10, 20, 30 Ω and its equivalent triangle R_ab = (ab + bc + ca)/c (Kennelly 1899), at all
    three ports."""
    arms = {"a": 10.0, "b": 20.0, "c": 30.0}
    products = sum(x * y for x, y in itertools.combinations(arms.values(), 2))
    star = "".join(f"branch s{k}: {k} to hub = {v!r} Ω\n" for k, v in arms.items())
    triangle = "".join(
        f"branch t{i}{j}: {i} to {j} = {products / arms[k]!r} Ω\n"
        for i, j, k in (("a", "b", "c"), ("b", "c", "a"), ("c", "a", "b"))
    )
    for one, other, _ in (("a", "b", "c"), ("b", "c", "a"), ("c", "a", "b")):
        frame = f"""
        source drive: {one} to {other} = 1 A
        branch tie: {other} to ground = 1 Ω
        reading out: {one} to {other}
        """
        expected = arms[one] + arms[other]
        assert_allclose(curve(frame + star, FREQUENCIES), expected, rtol=1e-13)
        assert_allclose(curve(frame + triangle, FREQUENCIES), expected, rtol=1e-13)


@pytest.mark.parametrize("bit", range(8))
def test_binary_ladder_weights(bit: int) -> None:
    """R-2R ladder of eight bits, each source behind 2R: bit k counts 2^k / 2^8 at the open end (textbook)."""
    body = "branch end: b0 to ground = 2 kΩ\n"
    for k in range(8):
        body += f"source s{k}: b{k} to ground = 1 V behind 2 kΩ\n"
        if k:
            body += f"branch r{k}: b{k - 1} to b{k} = 1 kΩ\n"
    body += "reading out: b7 to ground\n"
    assert_allclose(curve(body, FREQUENCIES, drive=f"s{bit}"), 2.0**bit / 2**8, rtol=1e-13)


@pytest.mark.parametrize("decibels", [3.0, 10.0, 20.0])
def test_matched_pad(decibels: float) -> None:
    """T pad between 50 Ω and 50 Ω: arms 50 (K - 1)/(K + 1), stem 100 K/(K² - 1), K = 10^(dB/20) (textbook):
    input 50 Ω and the loss asked for."""
    ratio = 10 ** (decibels / 20)
    arm, stem = 50 * (ratio - 1) / (ratio + 1), 100 * ratio / (ratio**2 - 1)
    body = (
        f"branch one: in to hub = {arm!r} Ω\nbranch stem: hub to ground = {stem!r} Ω\n"
        f"branch two: hub to out = {arm!r} Ω\nbranch load: out to ground = 50 Ω\n"
    )
    assert_allclose(
        curve(f"source s: in to ground = 1 A\n{body}reading out: in to ground", FREQUENCIES), 50, rtol=1e-13
    )
    volts = curve(f"source s: in to ground = 1 V\n{body}reading out: out to ground", FREQUENCIES)
    assert_allclose(20 * np.log10(np.abs(volts)), -decibels, rtol=1e-12)
