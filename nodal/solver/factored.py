"""A(s) factored at a block of points, and all unknowns of a solution: for those that need more than outputs."""

from __future__ import annotations

import numpy as np

from nodal.solver.pattern import Complexes, Floats, product
from nodal.solver.plan import Plan

_CORRECTIONS = 2


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

    def solve(self, right: Complexes) -> tuple[Complexes, Complexes]:
        """x as an unevaluated sum of two, which holds differences of nearly equal unknowns.

        `right` is (size, n_points), by equation; with one point it may have any number of columns. Corrected with
        residuals formed term by term in twice the precision.
        """
        kernel = self.plan.kernel
        spare = np.empty(right.shape[1], dtype=complex)
        b = np.empty(right.shape, dtype=complex)
        b[self.plan.order.place] = right
        with np.errstate(all="ignore"):
            x = b.copy()
            kernel.solve(self._w, list(x), spare)
            small = np.zeros_like(x)
            for _ in range(_CORRECTIONS):
                correction = self.plan.balance.remainder(b, self._coefficients * self.drops(x, small))
                kernel.solve(self._w, list(correction), spare)
                small += correction
                total = x + small
                small -= total - x
                x = total
        return x, small

    def drops(self, x: Complexes, small: Complexes) -> Complexes:
        """cols·x of every term."""
        return product(self.pattern.taking, x) + product(self.pattern.taking, small)

    def log_det(self) -> Floats:
        """log10 |det A| at every point."""
        with np.errstate(all="ignore"):
            logs = [-np.log10(np.abs(self._w[slot])) for slot in self.plan.order.pivot.tolist()]
        total: Floats = np.nan_to_num(np.sum(logs, axis=0), posinf=0.0, neginf=0.0)
        return total
