"""One point with many digits: where double precision does not do, and for limits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.kernel import Kernel
from nodal.solver.matrix import System
from nodal.solver.order import Order
from nodal.solver.pattern import Pattern
from nodal.solver.plan import exact_elimination

Column = list[Any]
"""One number per unknown or equation, each an object array of one element, as the kernel wants it."""


class Exact:
    """A(s) factored at one s with many digits. Singular where there is no unique solution at this s.

    Numbers of the result are mpmath's, real where s and the sources are.
    """

    def __init__(
        self, system: System | Pattern, s: Any, arithmetic: MpArithmetic, order: Order | None = None
    ) -> None:
        self.pattern = system if isinstance(system, Pattern) else Pattern(system)
        self.arithmetic = arithmetic
        self.s = arithmetic.number(s)
        self.coefficients = self.pattern.exact_coefficients(self.s, arithmetic)
        entries = self.pattern.exact_entries(self.coefficients, arithmetic)
        if order is not None:
            try:
                self._factor(order, entries)
                return
            except ZeroDivisionError:
                pass  # a pivot that is zero at this very point: choose others
        self._factor(exact_elimination(self.pattern, entries, arithmetic), entries)

    def _factor(self, order: Order, entries: Sequence[Any]) -> None:
        self.order = order
        self._kernel = Kernel(order)
        zero = self.arithmetic.number(0)
        self._w = [_cell(e) for e in entries] + [_cell(zero) for _ in range(order.slots - len(entries))]
        self._spare = _cell(zero)
        self._kernel.factor(self._w, self._spare)

    def reciprocal_pivot(self, slot: int) -> Any:
        """1/pivot of the elimination at one of `order.pivot`: their product is 1/det A but for the sign."""
        return self._w[slot][0]

    def solve(self, source: Mapping[int, Any]) -> tuple[list[Any], list[Any]]:
        """(x, correction): the solution for {equation: number}, and what its last step changed."""
        zero = self.arithmetic.number(0)
        b = [zero] * self.pattern.size
        for equation, value in source.items():
            b[equation] = self.arithmetic.number(value)
        return self.solve_all(b)

    def solve_all(self, b: Sequence[Any]) -> tuple[list[Any], list[Any]]:
        """`solve` for a right-hand side with every equation given."""
        x = self._solve(b)
        correction = self._solve(self._residual(b, x))
        return [v + d for v, d in zip(x, correction, strict=True)], correction

    def drops(self, x: Sequence[Any]) -> list[Any]:
        """cols·x of every term."""
        return [self._dot(cols, x) for cols in self.pattern.term_cols]

    def spread(self, amounts: Sequence[Any]) -> list[Any]:
        """Sum over the terms of rows * amount, one number per equation."""
        result = [self.arithmetic.number(0)] * self.pattern.size
        for rows, amount in zip(self.pattern.term_rows, amounts, strict=True):
            for i, weight in rows:
                result[i] = result[i] + amount * weight
        return result

    def output(self, weights: Mapping[int, float], x: Sequence[Any]) -> Any:
        return self._dot(tuple(weights.items()), x)

    def _dot(self, weights: Sequence[tuple[int, float]], x: Sequence[Any]) -> Any:
        total = self.arithmetic.number(0)
        for k, weight in weights:
            total = total + x[k] * float(weight)
        return total

    def _residual(self, b: Sequence[Any], x: Sequence[Any]) -> list[Any]:
        amounts = [k * d for k, d in zip(self.coefficients, self.drops(x), strict=True)]
        return [v - a for v, a in zip(b, self.spread(amounts), strict=True)]

    def _solve(self, b: Sequence[Any]) -> list[Any]:
        y: list[Any] = [None] * self.pattern.size
        for place, value in zip(self.order.place.tolist(), b, strict=True):
            y[place] = _cell(value)
        self._kernel.solve(self._w, y, self._spare)
        return [cell[0] for cell in y]


def _cell(value: Any) -> Any:
    cell = np.empty(1, dtype=object)
    cell[0] = value
    return cell
