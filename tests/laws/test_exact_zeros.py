"""Readings that are zero at every frequency are said to be exactly that."""

from __future__ import annotations

import numpy as np
import pytest

import nodal
from nodal.assemble import assemble, excitation
from nodal.solver.sweep import solve

CHAIN = """nodal 1
source drive: gate to ground = 1 V behind 25 Ω
branch pad: gate to ground = 2 pF
branch lead: sleeve to ground = 90 nH -- 20 mΩ
branch tip: {tip} to core = 9 MΩ ∥ 9.5 pF
branch match: {box} to plug = 600 Ω ∥ 130 nH
branch comp: plug to sleeve = 14.4 pF
branch input: plug to sleeve = 1 MΩ ∥ 14 pF
branch end: core to sleeve = 60 pF
reading screen: plug to sleeve times 10
"""
GRID = np.geomspace(10, 1e9, 200)


@pytest.mark.parametrize(("tip", "box"), [("gate", "bx"), ("gaet", "core")])
def test_a_misspelled_node(tip: str, box: str) -> None:
    """The input hangs on the sleeve alone, or the source reaches nothing: exactly 0, flagged nowhere."""
    network = nodal.loads(CHAIN.format(tip=tip, box=box)).network().network
    whole = assemble(network)
    reading = network.reading("screen")
    source = excitation(whole, network.drive("drive").weights)
    across = {k: 10 * w for k, w in whole.across(reading.a, reading.b).items()}
    solution = solve(whole.system, 2j * np.pi * GRID, [source], [across])
    assert not solution.values.any()
    assert not solution.error.any()
    values = nodal.loads(CHAIN.format(tip=tip, box=box)).network().sweep(GRID).reading("screen")
    assert not np.asarray(values).any()


def test_the_same_chain_joined_up_is_not_zero() -> None:
    values = nodal.loads(CHAIN.format(tip="gate", box="core")).network().sweep(GRID).reading("screen")
    assert np.all(np.abs(values) > 0)
