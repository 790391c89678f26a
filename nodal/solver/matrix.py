"""A(s) = G + s C + F(s) as a list of terms, and the functions of s that F is made of.

A term is outer(rows, cols) * (g + s c + F_f(s)): it keeps together what belongs to one part's one equation,
so that a residual can be formed part by part (a branch's current from the difference of its node voltages)
and never through a summed diagonal. The solver knows unknowns and equations by index only.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Protocol


class Arithmetic(Protocol):
    """The mathematics a Function may use, so that one formula serves arrays, 40-digit numbers and
    derivatives.

    Operands support + - * / and unary minus among themselves and with Python numbers.
    """

    def sqrt(self, x: Any) -> Any: ...

    def exp(self, x: Any) -> Any: ...

    def expm1(self, x: Any) -> Any: ...

    def log(self, x: Any) -> Any:
        """Principal branch."""
        ...

    def power(self, x: Any, exponent: float) -> Any:
        """Principal branch of x ** exponent, exponent real."""
        ...

    def select(self, condition: Any, then: Any, otherwise: Any) -> Any:
        """Point by point: `then` where the condition holds, else `otherwise`. Both are evaluated."""
        ...

    def real(self, x: Any) -> Any:
        """Real part of the value itself, for conditions (compare with < and >)."""
        ...


class Function(Protocol):
    """Values of s that are no polynomial in s.

    Analytic for Re s > 0 and on the imaginary axis but at 0; real for real s.
    """

    @property
    def count(self) -> int:
        """How many outputs `evaluate` returns."""
        ...

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]: ...


class Delayed(Function, Protocol):
    """A Function with a pure delay in it: outputs = still + front * exp(-s delay), neither with a delay left
    in it.

    Both parts stay bounded for Re s > 0 where the outputs do, so that edges can be followed front by front.
    """

    @property
    def delay(self) -> float:
        """Seconds; 0 where there is no delay to take out, `split` is then not asked for."""
        ...

    def split(self, s: Any, arithmetic: Arithmetic) -> tuple[Sequence[Any], Sequence[Any]]:
        """(still, front), as many numbers as `evaluate` gives."""
        ...


@dataclass(frozen=True, slots=True)
class Term:
    """One summand of A(s): outer(rows, cols) * (g + s c + F_f(s)). Indices are of equations and unknowns."""

    rows: tuple[tuple[int, float], ...]
    cols: tuple[tuple[int, float], ...]
    g: float = 0.0
    c: float = 0.0
    f: int | None = None
    """Index into the outputs of `System.functions`, counted on through all of them."""


@dataclass(frozen=True, slots=True)
class System:
    """A square system of `size` equations; every index is below `size`."""

    size: int
    terms: tuple[Term, ...]
    functions: tuple[Function, ...] = ()

    def transposed(self) -> System:
        """Aᵀ(s): adjoint solves, noise and sensitivities use it."""
        terms = tuple(Term(t.cols, t.rows, t.g, t.c, t.f) for t in self.terms)
        return System(self.size, terms, self.functions)
