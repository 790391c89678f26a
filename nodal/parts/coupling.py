"""Coupling: magnetic coupling between two inductors, and the joint flux of inductors that are coupled.

The flux of a group of coupled inductors is M i with M = D K D, D = diag(sqrt L) and K the matrix of coupling
coefficients. M enters the matrix as a sum of squares, D v (D v)ᵀ, so that a perfect coupling stays perfect:
its leakage is absent, not the difference of two large numbers.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from nodal.parts.base import Build, Element
from nodal.values import Value

ROUNDING = 8 * float(np.finfo(float).eps)
"""A coefficient this close to ±1 is taken for it: a mutual inductance written as sqrt(L1 L2) is rounded."""


@dataclass(frozen=True, slots=True)
class Coupling(Element):
    """Between inductors `first` and `second` (names): a coefficient, or a mutual inductance in H."""

    kind: ClassVar[str] = "coupling"

    name: str
    first: str
    second: str
    value: Value
    coefficient: bool = False

    @property
    def nodes(self) -> tuple[int, ...]:
        return ()

    def contribute(self, build: Build) -> None:
        """Nothing alone: the assembly puts whole groups in (`flux`)."""

    def describe(self) -> Any:
        return (("coupling", self.value, "" if self.coefficient else "H"),)


@dataclass(frozen=True, slots=True)
class Group:
    """Inductors that couplings join: names, inductances (H) and the matrix of coupling coefficients."""

    names: tuple[str, ...]
    inductances: NDArray[np.float64]
    coefficients: NDArray[np.float64]

    def passive(self) -> bool:
        """Whether the coefficients are positive semi-definite up to rounding: no currents yield energy."""
        return bool(np.linalg.eigvalsh(self.coefficients)[0] >= -ROUNDING * len(self.names))

    def squares(self) -> Iterator[tuple[tuple[tuple[str, float], ...], float]]:
        """(weights, factor): flux = sum of factor * outer(weights, weights) times the currents."""
        roots = np.sqrt(self.inductances)
        # Summed without the 1 of the diagonal, which would round off what is left beside a tight coupling.
        outside = np.abs(self.coefficients - np.eye(len(self.names))).sum(axis=1)
        if (outside <= 1).all():
            yield from self._pairwise(roots, outside)
        else:
            for column in _cholesky(self.coefficients):
                used = np.flatnonzero(column)
                yield tuple((self.names[i], float(column[i] * roots[i])) for i in used), 1.0

    def _pairwise(
        self, roots: NDArray[np.float64], outside: NDArray[np.float64]
    ) -> Iterator[tuple[tuple[tuple[str, float], ...], float]]:
        """Each pair shares |k|; what is left of an inductor is its own. The matrix stays sparse."""
        for i, name in enumerate(self.names):
            if outside[i] < 1:
                yield ((name, 1.0),), float((1 - outside[i]) * self.inductances[i])
            for j in np.flatnonzero(self.coefficients[i, :i]):
                k = float(self.coefficients[i, j])
                yield ((name, float(roots[i])), (self.names[j], math.copysign(float(roots[j]), k))), abs(k)


def _cholesky(matrix: NDArray[np.float64]) -> Iterator[NDArray[np.float64]]:
    """Columns v with sum of v vᵀ = matrix, by diagonal pivoting; what is left of rounding is dropped."""
    left = matrix.copy()
    for _ in range(len(matrix)):
        pivot = int(np.argmax(left.diagonal()))
        if left[pivot, pivot] <= ROUNDING * len(matrix):
            return
        column = left[:, pivot] / math.sqrt(left[pivot, pivot])
        yield column
        left -= np.outer(column, column)
        left[pivot, :] = left[:, pivot] = 0


def groups(inductances: Mapping[str, float], couplings: Sequence[Coupling]) -> list[Group]:
    """The groups that couplings make among inductors given by name; absent ones are passed over."""
    graph = nx.Graph()
    for coupling in couplings:
        present = all(inductances.get(name, 0) > 0 for name in (coupling.first, coupling.second))
        if present and coupling.value.nominal:
            graph.add_edge(coupling.first, coupling.second)
            edge = graph[coupling.first][coupling.second]
            edge["k"] = edge.get("k", 0.0) + coefficient(coupling, inductances)
    found = []
    for members in nx.connected_components(graph):
        names = tuple(name for name in inductances if name in members)
        index = {name: i for i, name in enumerate(names)}
        matrix = np.eye(len(names))
        for first, second, k in graph.edges(members, data="k"):
            snapped = math.copysign(1.0, k) if abs(abs(k) - 1) < ROUNDING else k
            matrix[index[first], index[second]] = matrix[index[second], index[first]] = snapped
        found.append(Group(names, np.array([inductances[name] for name in names]), matrix))
    return found


def coefficient(coupling: Coupling, inductances: Mapping[str, float]) -> float:
    """k of a coupling between inductors of nonzero inductance."""
    if coupling.coefficient:
        return coupling.value.nominal
    first, second = math.sqrt(inductances[coupling.first]), math.sqrt(inductances[coupling.second])
    return coupling.value.nominal / first / second


def flux(build: Build, group: Group) -> None:
    """Put the flux of a group into the voltage equations of its inductors."""
    for weights, factor in group.squares():
        handles = tuple((build.find_extra(name), weight) for name, weight in weights)
        build.term(handles, handles, c=-factor)
