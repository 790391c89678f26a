"""Executes an elimination order over a block of points held as one array per matrix entry.

Order and constants become flat programs of array operations, made once. Slots that do not depend on s are
worked out with the program, in plain numbers: they need no arrays, and those that come out as one need no
multiplication. Without constants the same programs run on object arrays of many-digit numbers. A compiled
kernel could execute them too.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from nodal.solver.order import Order

Forward = list[tuple[int, int, int]]
"""y[first] -= slot[second] * y[third], in this order."""
Backward = list[tuple[int, int, list[tuple[int, int]]]]
"""(unknown, pivot slot, [(slot, unknown to the right)])."""


class Program:
    """Operations on registers: arrays handed over at the start, real views of some of them, numbers.

    `constants` of the registers are numbers and not arrays; None: no real views, for other than complex
    doubles.
    """

    def __init__(self, registers: int, spare: int, constants: Mapping[int, float] | None) -> None:
        self._spare = spare
        self._real = constants is not None
        self.constants: dict[int, float] = dict(constants or {})
        self._registers = registers
        self._operations: list[tuple[Any, int, int, int]] = []
        # What stands behind the registers: a view of the register (int), or a number (float).
        self._extras: list[int | float] = []
        self._views: dict[int, int] = {}
        self._numbers: dict[float, int] = {}

    def run(self, registers: list[Any]) -> None:
        """Takes the list over: views and numbers are appended."""
        registers.extend([registers[k].view(float) if type(k) is int else k for k in self._extras])
        for operation, first, second, out in self._operations:
            operation(registers[first], registers[second], registers[out])

    def _view(self, register: int) -> int:
        """The real view of an array: sums and products with numbers are quicker there."""
        if not self._real:
            return register
        place = self._views.get(register)
        if place is None:
            place = self._views[register] = self._registers + len(self._extras)
            self._extras.append(register)
        return place

    def _number(self, value: float) -> int:
        place = self._numbers.get(value)
        if place is None:
            place = self._numbers[value] = self._registers + len(self._extras)
            self._extras.append(value)
        return place

    def invert(self, at: int) -> None:
        """at = 1 / at"""
        known = self.constants.get(at)
        if known is None:
            self._operations.append((np.divide, self._number(1.0), at, at))
        else:
            self.constants[at] = 1 / known if known else float("inf")

    def scale(self, at: int, by: int) -> None:
        """at *= by"""
        known, factor = self.constants.get(at), self.constants.get(by)
        if known is not None and factor is not None:
            self.constants[at] = known * factor
        elif known is not None:
            del self.constants[at]
            self._operations.append((np.multiply, self._view(by), self._number(known), self._view(at)))
        elif factor is None:
            self._operations.append((np.multiply, at, by, at))
        elif factor != 1:
            self._operations.append((np.multiply, self._view(at), self._number(factor), self._view(at)))

    def subtract_product(self, at: int, left: int, right: int) -> None:
        """at -= left * right"""
        known = self.constants.get(at)
        one, other = self.constants.get(left), self.constants.get(right)
        if one is not None and other is not None:
            if known is not None:
                self.constants[at] = known - one * other
            elif one * other:
                self._operations.append((np.subtract, at, self._number(one * other), at))
            return
        if one is None and other is None:
            if known is None:
                self._operations.append((np.multiply, left, right, self._spare))
                self._subtract_spare(at)
                return
            self._operations.append((np.multiply, left, right, at))
            del self.constants[at]
            if known:
                self._operations.append((np.subtract, self._number(known), at, at))
            else:
                self._operations.append((np.multiply, self._view(at), self._number(-1.0), self._view(at)))
            return
        factor, source = (one, right) if one is not None else (other, left)
        assert factor is not None
        if not factor:
            return
        if known is not None:
            del self.constants[at]
            self._operations.append((np.multiply, self._view(source), self._number(-factor), self._view(at)))
            if known:
                self._operations.append((np.add, at, self._number(known), at))
        elif abs(factor) == 1:
            change = np.subtract if factor == 1 else np.add
            self._operations.append((change, self._view(at), self._view(source), self._view(at)))
        else:
            self._operations.append(
                (np.multiply, self._view(source), self._number(factor), self._view(self._spare))
            )
            self._subtract_spare(at)

    def _subtract_spare(self, at: int) -> None:
        out = self._view(at)
        self._operations.append((np.subtract, out, self._view(self._spare), out))


class Kernel:
    """Programs of one order. Right-hand sides and solutions share one array per unknown, see `Order.place`.

    `constants`: slots that are the same real number at every point, fill (zero before it is filled) included.
    `factor` and `solve` do not touch what stands for those that stay so, `constant` after the elimination.
    """

    def __init__(self, order: Order, constants: Mapping[int, float] | None = None) -> None:
        self.order = order
        program = Program(order.slots + 1, order.slots, constants)
        pivot, col, place = order.pivot.tolist(), order.col.tolist(), order.place.tolist()
        lower, lower_row = order.lower.tolist(), [place[i] for i in order.lower_row.tolist()]
        upper, upper_col = order.upper.tolist(), order.upper_col.tolist()
        target, left, top = order.target.tolist(), order.left.tolist(), order.top.tolist()
        lower_start, upper_start = order.lower_start.tolist(), order.upper_start.tolist()
        update_start = order.update_start.tolist()
        self._forward: list[tuple[int, Forward]] = []
        self._backward: Backward = []
        for k in range(order.size):
            a, b = lower_start[k], lower_start[k + 1]
            c, d = upper_start[k], upper_start[k + 1]
            program.invert(pivot[k])
            for slot in lower[a:b]:
                program.scale(slot, pivot[k])
            for at in range(update_start[k], update_start[k + 1]):
                program.subtract_product(target[at], left[at], top[at])
            down = [(i, slot, col[k]) for slot, i in zip(lower[a:b], lower_row[a:b], strict=True)]
            self._forward.append((col[k], down))
            self._backward.append((col[k], pivot[k], list(zip(upper[c:d], upper_col[c:d], strict=True))))
        self._backward.reverse()
        self._factor = program
        self._plain = constants is None
        self.constant = program.constants
        self._programs: dict[Any, Program] = {}

    def factor(self, w: Sequence[Any], spare: Any) -> None:
        """LU in place; `w`: one array per slot, fill zero at the start unless it is among the constants.

        Pivots end as their reciprocals.
        """
        self._factor.run([*w, spare])

    def solve(self, w: Sequence[Any], y: Sequence[Any], spare: Any, program: Program | None = None) -> None:
        """Right-hand side to solution in place, with the factors in `w`."""
        (self.passes() if program is None else program).run([*w, spare, *y])

    def passes(
        self, places: frozenset[int] | None = None, unknowns: frozenset[int] | None = None, rest: bool = False
    ) -> Program:
        """A program for `solve`: for right-hand sides that are zero but at `places`, to solutions of which
        only `unknowns` count. With `rest`, what the latter left out, to be run after it.
        """
        key = places, unknowns, rest
        if key not in self._programs:
            backward = self._backward if unknowns is None else self._backward_to(unknowns)
            if rest:
                done = {item[0] for item in backward}
                backward = [item for item in self._backward if item[0] not in done]
            self._programs[key] = self._solving([] if rest else self._forward_from(places), backward)
        return self._programs[key]

    def _forward_from(self, places: Iterable[int] | None) -> Forward:
        if places is None:
            return [item for _, down in self._forward for item in down]
        filled = set(places)
        chosen: Forward = []
        for source, down in self._forward:
            if source in filled:
                chosen.extend(down)
                filled.update(item[0] for item in down)
        return chosen

    def _backward_to(self, unknowns: Iterable[int]) -> Backward:
        wanted = set(unknowns)
        # The pass runs from the last step to the first; what is wanted is found the other way.
        chosen: Backward = []
        for item in reversed(self._backward):
            if item[0] in wanted:
                chosen.append(item)
                wanted.update(unknown for _, unknown in item[2])
        chosen.reverse()
        return chosen

    def _solving(self, forward: Forward, backward: Backward) -> Program:
        spare = self.order.slots
        program = Program(spare + 1 + self.order.size, spare, None if self._plain else self.constant)
        y = spare + 1
        for target, slot, source in forward:
            program.subtract_product(y + target, slot, y + source)
        for unknown, pivot, right in backward:
            for slot, other in right:
                program.subtract_product(y + unknown, slot, y + other)
            program.scale(y + unknown, pivot)
        return program
