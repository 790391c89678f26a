"""What every kind of part provides, and what it is given to put itself into the matrix.

A kind of part is one file in this folder: a frozen dataclass of its data plus the methods below.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, ClassVar, Protocol

from nodal.solver.matrix import Function

Weights = Sequence[tuple[int, float]]
"""A linear functional of the unknowns or a combination of equations: (handle, weight) pairs; see `Build`."""


class Build(Protocol):
    """What a part is given to contribute to A(s) x = b.

    Handles are opaque integers for unknowns and equations: `node(i)` is both the voltage of node i and Kirchhoff's
    current law there (sum of currents leaving the node into parts = current injected); `extra(part, label)` makes one
    more unknown together with one more equation of the part's own. Ground and nodes merged with it by shorts may be
    used like any other: what falls on ground is dropped.
    """

    def node(self, index: int) -> int: ...

    def extra(self, part: Part, label: str = "current") -> int: ...

    def find_extra(self, part_name: str, label: str = "current") -> int:
        """The handle of another part's extra unknown (couplings); parts may be contributed in any order."""
        ...

    def term(self, rows: Weights, cols: Weights, *, g: float = 0.0, c: float = 0.0, f: int | None = None) -> None:
        """Add outer(rows, cols) * (g + s c + F_f(s)); rows are equations, cols unknowns."""
        ...

    def admittance(self, a: int, b: int, *, g: float = 0.0, c: float = 0.0, f: int | None = None) -> None:
        """A two-terminal admittance between node indices a and b (not handles)."""
        ...

    def function(self, function: Function) -> int:
        """Register what is no polynomial in s; returns the index of its first output, the others follow."""
        ...

    def excite(self, source_name: str, equation: int, weight: float = 1.0) -> None:
        """The named source's unit excitation adds `weight` on the right-hand side of `equation`."""
        ...


class Part(Protocol):
    """A part of a network. Attributes shared by all kinds; each kind adds its values."""

    kind: ClassVar[str]
    """The word for it in messages and lists: "resistor", "cable" …"""

    @property
    def name(self) -> str: ...

    @property
    def nodes(self) -> tuple[int, ...]:
        """Node indices, in the order written."""
        ...

    @property
    def side(self) -> str:
        """"test" or "chain"."""
        ...

    def shorts(self) -> Sequence[tuple[int, int]]:
        """Pairs of nodes that this part makes one (0 Ω, 0 H, 0 m); such a part contributes nothing else."""
        ...

    def contribute(self, build: Build) -> None:
        """Put the part into the matrix. Not called where `shorts()` is not empty."""
        ...

    def describe(self) -> Any:
        """Values for lists and pages: a sequence of (label, Value, unit)."""
        ...
