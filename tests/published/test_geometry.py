"""Inductance of wires and loops (external: the field inside the metal is left to the skin effect)."""

from __future__ import annotations

import math

import pytest
from numpy.testing import assert_allclose
from support.run import impedance


def henries(expression: str) -> float:
    body = f"source s: in to ground = 1 V\nbranch lead: in to ground = {expression}\n"
    z = impedance(body, [1e6], "s")[0]
    assert z.real == 0
    return float(z.imag) / (2 * math.pi * 1e6)


def test_straight_wire() -> None:
    """100 mm of ⌀1 mm: (µ₀l/2π)[ln(2l/r) - 1] = 99.8292909 nH (Rosa 1908)."""
    assert_allclose(henries("wire(100 mm, 1 mm)"), 99.8292909e-9, rtol=1e-8)


@pytest.mark.parametrize("length", ["25.4 mm", "100 mm", "150 mm"])
def test_rule_of_thumb(length: str) -> None:
    """About 1 nH/mm, 25 nH/inch (common practice, no source)."""
    millimetres = float(length.split()[0])
    assert_allclose(henries(f"wire({length}, 0.8 mm)"), millimetres * 1e-9, rtol=0.3)


def test_round_loop() -> None:
    """⌀100 mm of ⌀1 mm wire: 294.342836 nH (Grover 1946)."""
    assert_allclose(henries("circle(100 mm, 1 mm)"), 294.342836e-9, rtol=1e-8)


def test_rectangular_loop() -> None:
    """150 × 30 mm of ⌀1 mm wire: 278.51 nH (Grover 1946, thin wire)."""
    assert_allclose(henries("rectangle(150 mm, 30 mm, 1 mm)"), 278.51e-9, rtol=1e-4)
    assert_allclose(
        henries("rectangle(30 mm, 150 mm, 1 mm)"), henries("rectangle(150 mm, 30 mm, 1 mm)"), rtol=1e-14
    )


def test_inductance_of_a_wire_scales_with_its_size() -> None:
    """Everything twice as large has twice the inductance (dimensional analysis of the field)."""
    for small, large in (
        ("wire(40 mm, 0.5 mm)", "wire(80 mm, 1 mm)"),
        ("circle(40 mm, 0.5 mm)", "circle(80 mm, 1 mm)"),
        ("rectangle(40 mm, 30 mm, 0.5 mm)", "rectangle(80 mm, 60 mm, 1 mm)"),
    ):
        assert_allclose(henries(large), 2 * henries(small), rtol=1e-14)


def test_very_long_rectangle_is_two_wires() -> None:
    """Per length (µ₀/π) ln(d/r) between two parallel thin wires d apart (textbook); the ends matter as
    1/length."""
    a, b = (henries(f"rectangle({length} m, 100 mm, 1 mm)") for length in (1000, 2000))
    assert_allclose((b - a) / 1000, 4e-7 * math.log(100 / 0.5), rtol=1e-6)
