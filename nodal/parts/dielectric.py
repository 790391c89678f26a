"""Dielectric loss: a dissipation factor that is flat over many decades, passive and causal."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

from nodal.solver.matrix import Arithmetic

LOW = 2 * math.pi * 1e-6
MIDDLE = 2 * math.pi * 1e6
HIGH = 2 * math.pi * 1e15
"""rad/s: the ends of the flat range, and where the capacitance is what was written."""

_BINOMIAL = 14
"""Terms of (1 + x)^n for x below 1/20: the next is below 1e-18."""


@dataclass(frozen=True, slots=True)
class Dielectric:
    """C(s)/C = K ((s + w2)/(s + w1))^n with a loss angle of atan D at 1 MHz and Re C = C there.

    The power law is a constant phase element bounded at both ends, so that it stays finite. (The combination
    is this project's; the constant phase element is textbook matter, e.g. Jonscher, "Dielectric relaxation
    in solids".)
    """

    loss: float
    exponent: float = field(init=False)
    scale: float = field(init=False)

    def __post_init__(self) -> None:
        angle = math.atan(MIDDLE / LOW) - math.atan(MIDDLE / HIGH)
        n = math.atan(self.loss) / angle
        ratio = (1j * MIDDLE + HIGH) / (1j * MIDDLE + LOW)
        object.__setattr__(self, "exponent", n)
        object.__setattr__(self, "scale", 1 / cmath.exp(n * cmath.log(ratio)).real)

    def relative(self, s: Any, arithmetic: Arithmetic) -> Any:
        """C(s)/C."""
        return self.scale * arithmetic.power((s + HIGH) / (s + LOW), self.exponent)

    def excess(self, s: Any, arithmetic: Arithmetic) -> Any:
        """C(s)/C(∞) - 1, small for large s and right in its own digits there."""
        x = (HIGH - LOW) / (s + LOW)
        series: Any = 0.0
        for k in range(_BINOMIAL, 0, -1):
            series = (series + 1) * x * ((self.exponent - (k - 1)) / k)
        far = arithmetic.real(s) + abs(arithmetic.real(1j * s)) > 20 * HIGH
        return arithmetic.select(far, series, arithmetic.expm1(self.exponent * arithmetic.log(1 + x)))


@dataclass(frozen=True, slots=True)
class LossyCapacitance:
    """The admittance s C(s) as a function for the matrix."""

    farads: float
    loss: float
    count: int = 1

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        return (s * self.farads * Dielectric(self.loss).relative(s, arithmetic),)
