"""External inductance of straight wires and loops, from their shape; numbers and numpy arrays alike.

External: the field inside the conductor is left out, as it is where skin effect confines the current to the
surface.
All formulas are for thin round wire (radius r small against every other length) in free space.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

MU_0 = 4e-7 * math.pi
"""H/m; the value before 2019, 5.5e-10 below the present recommended one."""

SHORTEST = 5.0
"""A wire, a side or a loop of fewer wire diameters than this is not thin; the formulas below do not hold."""


def wire(length: Any, diameter: Any) -> Any:
    """H: partial inductance of a straight wire, (µ0 l / 2π) (ln(2l/r) - 1), lengths in m (Rosa 1908)."""
    return MU_0 * length / (2 * math.pi) * (np.log(4 * length / diameter) - 1)


def rectangle(length: Any, width: Any, diameter: Any) -> Any:
    """H: a rectangular loop of round wire, sides `length` and `width` between wire centres in m (Grover
    1946, ch. 8).

    (µ0/π) [a ln(2a/r) + b ln(2b/r) + 2 √(a² + b²) - a asinh(a/b) - b asinh(b/a) - 2 (a + b)].
    """
    a, b, r = length, width, diameter / 2
    sides = a * np.log(2 * a / r) + b * np.log(2 * b / r)
    mutual = 2 * np.hypot(a, b) - a * np.arcsinh(a / b) - b * np.arcsinh(b / a) - 2 * (a + b)
    return MU_0 / math.pi * (sides + mutual)


def circle(loop_diameter: Any, wire_diameter: Any) -> Any:
    """H: a circular loop of mean radius a, µ0 a (ln(8a/r) - 2), diameters in m (Grover 1946, ch. 16)."""
    return MU_0 * loop_diameter / 2 * (np.log(8 * loop_diameter / wire_diameter) - 2)


SHAPES: dict[str, tuple[Callable[..., Any], tuple[str, ...]]] = {
    "wire": (wire, ("length", "diameter")),
    "rectangle": (rectangle, ("length", "width", "diameter")),
    "circle": (circle, ("loop diameter", "wire diameter")),
}
"""Geometry functions of the language by name, with what their arguments are called; the last is the wire's
diameter."""
