"""Executes an elimination order over a block of points held as one array per matrix entry.

The same code runs on double-precision arrays and on object arrays of many-digit numbers. The order is data: a
compiled kernel could execute the same arrays.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np

from nodal.solver.order import Order

Forward = list[tuple[int, int, int]]
"""y[first] -= slot[second] * y[third], in this order."""
Backward = list[tuple[int, int, list[tuple[int, int]]]]
"""(unknown, pivot slot, [(slot, unknown to the right)])."""


class Kernel:
    """Lists ready to run. Right-hand sides and solutions share one array per unknown, see `Order.place`."""

    def __init__(self, order: Order) -> None:
        self.order = order
        pivot, col, place = order.pivot.tolist(), order.col.tolist(), order.place.tolist()
        lower, lower_row = order.lower.tolist(), order.lower_row.tolist()
        upper, upper_col = order.upper.tolist(), order.upper_col.tolist()
        updates = list(zip(order.target.tolist(), order.left.tolist(), order.top.tolist(), strict=True))
        self._steps = []
        self._forward: list[tuple[int, Forward]] = []
        self._backward: Backward = []
        for k in range(order.size):
            a, b = int(order.lower_start[k]), int(order.lower_start[k + 1])
            c, d = int(order.upper_start[k]), int(order.upper_start[k + 1])
            e, f = int(order.update_start[k]), int(order.update_start[k + 1])
            self._steps.append((pivot[k], lower[a:b], updates[e:f]))
            down = [(place[i], slot, col[k]) for slot, i in zip(lower[a:b], lower_row[a:b], strict=True)]
            self._forward.append((col[k], down))
            self._backward.append((col[k], pivot[k], list(zip(upper[c:d], upper_col[c:d], strict=True))))
        self._backward.reverse()
        self._forward_all = [item for _, down in self._forward for item in down]
        self._partial_forward: dict[frozenset[int], Forward] = {}
        self._partial_backward: dict[frozenset[int], Backward] = {}

    def factor(self, w: Sequence[Any], spare: Any) -> None:
        """LU in place; `w`: one array per slot, fill zero at the start. Pivots end as their reciprocals."""
        multiply, subtract, divide = np.multiply, np.subtract, np.divide
        for pivot, lower, updates in self._steps:
            p = w[pivot]
            divide(1, p, p)
            for slot in lower:
                at = w[slot]
                multiply(at, p, at)
            for target, left, top in updates:
                multiply(w[left], w[top], spare)
                at = w[target]
                subtract(at, spare, at)

    def forward_from(self, places: Iterable[int]) -> Forward:
        """The forward pass for a right-hand side that is zero but at `places`."""
        key = frozenset(places)
        if key not in self._partial_forward:
            filled = set(key)
            chosen: Forward = []
            for source, down in self._forward:
                if source in filled:
                    chosen.extend(down)
                    filled.update(item[0] for item in down)
            self._partial_forward[key] = chosen
        return self._partial_forward[key]

    def backward_to(self, unknowns: Iterable[int]) -> Backward:
        """The part of the backward pass that `unknowns` depend on."""
        key = frozenset(unknowns)
        if key not in self._partial_backward:
            wanted = set(key)
            # The pass runs from the last step to the first; what is wanted is found the other way.
            chosen: Backward = []
            for item in reversed(self._backward):
                if item[0] in wanted:
                    chosen.append(item)
                    wanted.update(unknown for _, unknown in item[2])
            chosen.reverse()
            self._partial_backward[key] = chosen
        return self._partial_backward[key]

    def backward_rest(self, unknowns: Iterable[int]) -> Backward:
        """What `backward_to` leaves out; may run after it."""
        done = {item[0] for item in self.backward_to(unknowns)}
        return [item for item in self._backward if item[0] not in done]

    def solve(
        self, w: Sequence[Any], y: Sequence[Any], spare: Any, forward: Forward | None = None,
        backward: Backward | None = None,
    ) -> None:
        """Right-hand side to solution in place, with the factors in `w`."""
        multiply, subtract = np.multiply, np.subtract
        for target, slot, source in self._forward_all if forward is None else forward:
            multiply(w[slot], y[source], spare)
            at = y[target]
            subtract(at, spare, at)
        for unknown, pivot, right in self._backward if backward is None else backward:
            at = y[unknown]
            for slot, other in right:
                multiply(w[slot], y[other], spare)
                subtract(at, spare, at)
            multiply(at, w[pivot], at)
