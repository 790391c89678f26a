"""Resistor: an ideal resistance or conductance between two nodes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from nodal.parts.base import Build, Element, NoiseSource, thermal
from nodal.values import Value


@dataclass(frozen=True, slots=True)
class Resistor(Element):
    """`value` in Ω, or in S where `conductance` is true. 0 Ω is a short, 0 S is open."""

    kind: ClassVar[str] = "resistor"

    name: str
    a: int
    b: int
    value: Value
    conductance: bool = False

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.a, self.b)

    @property
    def siemens(self) -> float:
        """The conductance; 0 for a short, which contributes nothing of its own."""
        if self.conductance:
            return self.value.nominal
        return 1 / self.value.nominal if self.value.nominal else 0.0

    def shorts(self) -> Sequence[tuple[int, int]]:
        return () if self.conductance or self.value.nominal else ((self.a, self.b),)

    def holds(self) -> Sequence[tuple[int, int]]:
        return () if self.conductance and not self.value.nominal else ((self.a, self.b),)

    conducts = holds

    def contribute(self, build: Build) -> None:
        if self.siemens:
            build.admittance(self.a, self.b, g=self.siemens)

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        if self.noiseless or not self.siemens:
            return ()
        rows = ((build.node(self.a), 1.0), (build.node(self.b), -1.0))
        return (thermal(rows, self.siemens, temperature, len(s)),)

    def describe(self) -> Any:
        return (("conductance", self.value, "S") if self.conductance else ("resistance", self.value, "Ω"),)
