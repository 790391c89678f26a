"""Capacitor: ideal, or with a dissipation factor that is flat over the frequencies in use."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from nodal.parts.base import Build, Element, NoiseSource, thermal
from nodal.parts.dielectric import LossyCapacitance
from nodal.solver.arithmetic import NumpyArithmetic
from nodal.values import Value


@dataclass(frozen=True, slots=True)
class Capacitor(Element):
    """`value` in F; `loss` is the dissipation factor D. 0 F is open."""

    kind: ClassVar[str] = "capacitor"

    name: str
    a: int
    b: int
    value: Value
    loss: float = 0.0

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.a, self.b)

    def holds(self) -> Sequence[tuple[int, int]]:
        return ((self.a, self.b),) if self.value.nominal else ()

    def contribute(self, build: Build) -> None:
        farads = self.value.nominal
        if not farads:
            return
        if self.loss and not build.lumped:
            build.admittance(self.a, self.b, f=build.function(LossyCapacitance(farads, self.loss)))
        else:
            build.admittance(self.a, self.b, c=farads)

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        if self.noiseless or not self.loss or not self.value.nominal:
            return ()
        (admittance,) = LossyCapacitance(self.value.nominal, self.loss).evaluate(s, NumpyArithmetic())
        rows = ((build.node(self.a), 1.0), (build.node(self.b), -1.0))
        return (thermal(rows, np.real(admittance), temperature, len(s)),)

    def describe(self) -> Any:
        return (("capacitance", self.value, "F"),)
