"""External inductance of wires and loops against published formulas, evaluated elsewhere or to 30 digits."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from nodal import geometry

MU_0 = 4 * mpmath.pi * mpmath.mpf("1e-7")


def test_straight_wire() -> None:
    # Rosa 1908, (µ0 l / 2π)(ln(2l/r) - 1), 100 mm of ⌀1 mm.
    assert geometry.wire(0.1, 1e-3) == pytest.approx(99.8292909e-9, rel=1e-9)


def test_rule_of_thumb() -> None:
    # About 1 nH per millimetre; common practice, no source.
    assert geometry.wire(0.1, 1e-3) / 0.1 == pytest.approx(1e-6, rel=0.1)


def test_loop() -> None:
    # Grover 1946, µ0 a (ln(8a/r) - 2), ⌀100 mm of ⌀1 mm wire.
    assert geometry.circle(0.1, 1e-3) == pytest.approx(294.342836e-9, rel=1e-9)


def test_rectangle() -> None:
    # Grover 1946, 150 mm by 30 mm of ⌀1 mm wire.
    assert geometry.rectangle(0.15, 0.03, 1e-3) == pytest.approx(278.51e-9, rel=1e-5)


def test_rectangle_from_neumann_integrals() -> None:
    # Four partial self inductances (Rosa 1908) less the mutual inductances of opposite sides, Neumann's
    # double
    # integral in 30 digits; adjacent sides stand at right angles and do not couple.
    a, b, r = mpmath.mpf("0.15"), mpmath.mpf("0.03"), mpmath.mpf("0.0005")
    with mpmath.workdps(30):

        def own(length: mpmath.mpf) -> mpmath.mpf:
            # Filament on the axis, its field on the surface: ∫∫ 1/√((x-y)² + r²).
            return MU_0 / (4 * mpmath.pi) * neumann(length, r)

        def neumann(length: mpmath.mpf, distance: mpmath.mpf) -> mpmath.mpf:
            # ∫∫ over two parallel filaments reduces to 2 ∫ (l - u)/√(u² + d²) du from 0 to l.
            steps = [0, distance, 10 * distance, length] if length > 10 * distance else [0, length]
            return 2 * mpmath.quad(lambda u: (length - u) / mpmath.sqrt(u * u + distance * distance), steps)

        def between(length: mpmath.mpf, distance: mpmath.mpf) -> mpmath.mpf:
            return MU_0 / (4 * mpmath.pi) * neumann(length, distance)

        whole = 2 * (own(a) - between(a, b)) + 2 * (own(b) - between(b, a))
    # The formula drops terms of the order of r/l, here 2 r/l of each side's 1.
    assert geometry.rectangle(0.15, 0.03, 1e-3) == pytest.approx(float(whole), rel=5e-3)


def test_square_is_symmetric_and_arrays_work() -> None:
    sides = np.array([0.03, 0.15])
    assert geometry.rectangle(sides, sides[::-1], 1e-3) == pytest.approx([278.51e-9] * 2, rel=1e-5)
