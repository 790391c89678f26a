"""A(s) factored at a block of points, and all unknowns of a solution: for those that need more than
outputs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from nodal.solver.pattern import Complexes, Floats, product
from nodal.solver.plan import Plan
from nodal.solver.sweep import Output

_STANDS = 1e-14
"""Relative change of an output that is not worth another correction."""

_MORE = 5


@dataclass(frozen=True, slots=True)
class Solved:
    """x + small, unevaluated, holds differences of nearly equal unknowns; `change` is what came last."""

    x: Complexes
    small: Complexes
    change: Complexes

    def outputs(self, outputs: Sequence[Output]) -> Complexes:
        """(n_outputs, n_points)."""
        return _combined(outputs, self.x) + _combined(outputs, self.small)

    def parts(self, outputs: Sequence[Output]) -> Floats:
        """(n_outputs, n_points): the sum of the sizes of what each output is made of."""
        sizes = [{k: abs(weight) for k, weight in output.items()} for output in outputs]
        return _combined(sizes, np.abs(self.x).astype(complex)).real


def _combined(outputs: Sequence[Output], x: Complexes) -> Complexes:
    result: Complexes = np.zeros((len(outputs), x.shape[1]), dtype=complex)
    for k, output in enumerate(outputs):
        summed: Any = sum((x[i] * w for i, w in output.items()), 0.0)
        result[k] = summed
    return result


class Factored:
    """Factors at the points s, (n_points,); points without a solution give what is not finite."""

    def __init__(self, plan: Plan, s: Complexes) -> None:
        self.plan, self.pattern = plan, plan.pattern
        functions = plan.pattern.function_values(s)
        entries = plan.pattern.matrix(s, functions)
        self._w = [*entries, *np.zeros((plan.order.slots - len(entries), len(s)), dtype=complex)]
        self._coefficients = plan.pattern.coefficients(s, functions)
        with np.errstate(all="ignore"):
            plan.kernel.factor(self._w, np.empty(len(s), dtype=complex))

    def solve(self, right: Complexes) -> Solved:
        """The solution for `right`, (size, n_points), by equation; with one point any number of columns.

        Corrected with residuals formed term by term in twice the precision.
        """
        return self._corrected(right, 2)

    def solve_for(self, right: Complexes, outputs: Sequence[Output]) -> tuple[Solved, Complexes, Floats]:
        """(solution, outputs, how far they may be off), corrected until the outputs stand."""
        solved = self._corrected(right, 2)
        values = solved.outputs(outputs)
        noise = np.abs(_combined(outputs, solved.change))
        for _ in range(_MORE):
            if not (noise > _STANDS * np.abs(values)).any():
                break
            solved = self._corrected(right, 1, solved)
            values = solved.outputs(outputs)
            last, noise = noise, np.abs(_combined(outputs, solved.change))
            if not (noise < 0.5 * last)[noise > _STANDS * np.abs(values)].any():
                break
        return solved, values, noise

    def _corrected(self, right: Complexes, steps: int, start: Solved | None = None) -> Solved:
        kernel = self.plan.kernel
        spare = np.empty(right.shape[1], dtype=complex)
        b = np.empty(right.shape, dtype=complex)
        b[self.plan.order.place] = right
        with np.errstate(all="ignore"):
            if start is None:
                x = b.copy()
                kernel.solve(self._w, list(x), spare)
                small = np.zeros_like(x)
            else:
                x, small = start.x, start.small
            for _ in range(steps):
                drops = self.drops(Solved(x, small, small))
                correction = self.plan.balance.remainder(b, self._coefficients * drops)
                kernel.solve(self._w, list(correction), spare)
                small = small + correction
                total = x + small
                small -= total - x
                x = total
        return Solved(x, small, correction)

    def drops(self, solved: Solved) -> Complexes:
        """cols·x of every term."""
        return product(self.pattern.taking, solved.x) + product(self.pattern.taking, solved.small)

    def log_det(self) -> Floats:
        """log10 |det A| at every point."""
        with np.errstate(all="ignore"):
            logs = [-np.log10(np.abs(self._w[slot])) for slot in self.plan.order.pivot.tolist()]
        total: Floats = np.nan_to_num(np.sum(logs, axis=0), posinf=0.0, neginf=0.0)
        return total
