"""Ideal sources. What stands behind or beside a source are ordinary parts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from nodal.parts.base import Build, Element
from nodal.values import Value


@dataclass(frozen=True, slots=True)
class VoltageSource(Element):
    """v(a) - v(b) = excitation. `value` is the amplitude as written, V: sweeps are per volt without it.

    `terminals` are the nodes the source was written between, where a network behind it moves `a` or `b`.
    """

    kind: ClassVar[str] = "voltage source"

    name: str
    a: int
    b: int
    value: Value
    terminals: tuple[int, int] | None = None

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.a, self.b)

    def holds(self) -> Sequence[tuple[int, int]]:
        return ((self.a, self.b),)

    conducts = holds
    forces = holds

    def contribute(self, build: Build) -> None:
        current = build.extra(self)
        across = ((build.node(self.a), 1.0), (build.node(self.b), -1.0))
        build.term(across, ((current, 1.0),), g=1.0)
        build.term(((current, 1.0),), across, g=1.0)
        build.excite(self.name, current)

    def describe(self) -> Any:
        return (("amplitude", self.value, "V"),)


@dataclass(frozen=True, slots=True)
class CurrentSource(Element):
    """A current that enters the network at `a` and leaves it at `b`. `value` is the amplitude, A."""

    kind: ClassVar[str] = "current source"

    name: str
    a: int
    b: int
    value: Value
    terminals: tuple[int, int] | None = None

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.a, self.b)

    def contribute(self, build: Build) -> None:
        build.excite(self.name, build.node(self.a))
        build.excite(self.name, build.node(self.b), -1.0)

    def describe(self) -> Any:
        return (("amplitude", self.value, "A"),)
