"""What every kind of part provides, and what it is given to put itself into the matrix.

A kind of part is one file in this folder: a frozen dataclass of its data plus the methods below.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, ClassVar, Protocol

import numpy as np
from numpy.typing import NDArray

from nodal.place import Place
from nodal.solver.matrix import Function

BOLTZMANN = 1.380649e-23
"""J/K, exact by definition of the kelvin (SI Brochure, 9th edition)."""

Weights = Sequence[tuple[int, float]]
"""A linear functional of the unknowns or a combination of equations: (handle, weight) pairs; see `Build`."""


@dataclass(frozen=True, slots=True)
class NoiseSource:
    """Random right-hand sides of a part's equations: `rows[i]` takes the i-th of k correlated quantities.

    `density` has shape (k, k, points): the one-sided cross power densities of the k quantities, in the
    product of their equations' units (A or V) per hertz.
    """

    rows: tuple[Weights, ...]
    density: NDArray[np.complex128]


class Build(Protocol):
    """What a part is given to contribute to A(s) x = b.

    Handles are opaque integers for unknowns and equations: `node(i)` is both the voltage of node i and
    Kirchhoff's current law there (sum of currents leaving the node into parts = current injected);
    `extra(part, label)` makes one more unknown together with one more equation of the part's own. Ground and
    nodes merged with it by shorts may be used like any other: what falls on ground is dropped.
    """

    lumped: bool
    """True where a polynomial stand-in is wanted for what is no polynomial in s: cables as one section, ideal
    capacitors, no delay. It serves the search for resonances, never a result."""

    def node(self, index: int) -> int: ...

    def extra(self, part: Part, label: str = "current") -> int: ...

    def find_extra(self, part_name: str, label: str = "current") -> int:
        """The handle of another part's extra unknown (couplings); parts may be contributed in any order."""
        ...

    def coupled(self, part_name: str) -> bool:
        """Whether couplings state the whole flux of this inductor (see `nodal.parts.coupling`)."""
        ...

    def term(
        self, rows: Weights, cols: Weights, *, g: float = 0.0, c: float = 0.0, f: int | None = None
    ) -> None:
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
        """ "test" or "chain"."""
        ...

    @property
    def noiseless(self) -> bool: ...

    @property
    def place(self) -> Place | None: ...

    def shorts(self) -> Sequence[tuple[int, int]]:
        """Pairs of nodes that this part makes one (0 Ω, 0 H, 0 m)."""
        ...

    def holds(self) -> Sequence[tuple[int, int]]:
        """Pairs of nodes whose voltage this part settles at frequencies above zero, shorts included."""
        ...

    def conducts(self) -> Sequence[tuple[int, int]]:
        """Those of `holds()` that it settles at zero frequency too."""
        ...

    def forces(self) -> Sequence[tuple[int, int]]:
        """Pairs of nodes between which this part is an ideal voltage source."""
        ...

    def contribute(self, build: Build) -> None:
        """Put the part into the matrix; its shorts are merged nodes already."""
        ...

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        """Its noise at the angular frequencies s = jω (shape (points,)), temperature in K; [] for none.

        `build` is the one it has contributed to.
        """
        ...

    def describe(self) -> Any:
        """Values for lists and pages: a sequence of (label, Value, unit)."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Element:
    """What all kinds share, and the answers of a part that does nothing special."""

    side: str = "chain"
    noiseless: bool = False
    place: Place | None = field(default=None, compare=False)

    def shorts(self) -> Sequence[tuple[int, int]]:
        return ()

    def holds(self) -> Sequence[tuple[int, int]]:
        return ()

    def conducts(self) -> Sequence[tuple[int, int]]:
        return ()

    def forces(self) -> Sequence[tuple[int, int]]:
        return ()

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        return ()


def thermal(rows: Weights, conductance: Any, temperature: float, points: int) -> NoiseSource:
    """The noise current of a conductance (S, number or array over points): 4 k T G (Nyquist 1928)."""
    density = np.empty((1, 1, points), dtype=np.complex128)
    density[0, 0] = 4 * BOLTZMANN * temperature * np.maximum(conductance, 0.0)
    return NoiseSource((rows,), density)
