"""Inductor: an ideal inductance between two nodes; couplings add the flux of others."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from nodal.parts.base import Build, Element
from nodal.values import Value


@dataclass(frozen=True, slots=True)
class Inductor(Element):
    """`value` in H; its dot is at `a`. 0 H is a short. Its current, from a to b, is an unknown."""

    kind: ClassVar[str] = "inductor"

    name: str
    a: int
    b: int
    value: Value

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.a, self.b)

    def shorts(self) -> Sequence[tuple[int, int]]:
        return () if self.value.nominal else ((self.a, self.b),)

    def holds(self) -> Sequence[tuple[int, int]]:
        return ((self.a, self.b),)

    conducts = holds

    def contribute(self, build: Build) -> None:
        if not self.value.nominal:
            return
        current = build.extra(self)
        across = ((build.node(self.a), 1.0), (build.node(self.b), -1.0))
        build.term(across, ((current, 1.0),), g=1.0)
        build.term(((current, 1.0),), across, g=1.0)
        if not build.coupled(self.name):
            build.term(((current, 1.0),), ((current, 1.0),), c=-self.value.nominal)

    def describe(self) -> Any:
        return (("inductance", self.value, "H"),)
