"""Transfer functions front by front: what pure delays carry, with the delays taken out.

A(s) = A0(s) + sum over k of A_k(s) exp(-s T_k): cables in their travelling waves and amplifiers with a delay
are of this form. x(s) = sum of x_τ(s) exp(-s τ) over all sums τ of delays, with

    A0 x_0 = b,    A0 x_τ = -sum over k of A_k x_(τ - T_k),

and no x_τ has a delay left in it: an edge arrives at each τ in a shape that is smooth after it. For lines
without loss this is the lattice of reflections (Bewley 1933). Within a window the sum is finite; where it
would be long, what comes after some time is kept together: A x_rest = -sum of A_k x_τ exp(-s(τ + T_k)) over
all steps that leave what was summed.
"""

from __future__ import annotations

import heapq
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, cast

import numpy as np

from nodal.solver.arithmetic import MpArithmetic, NumpyArithmetic
from nodal.solver.exact import Exact
from nodal.solver.factored import Factored
from nodal.solver.matrix import Arithmetic, Delayed, Function, System
from nodal.solver.pattern import Complexes, Floats, Pattern
from nodal.solver.plan import Plan
from nodal.solver.sweep import Output, plan_for

_SAME = 1e-12
"""Delays this close, relatively, are one."""

_DECADES = 4
"""Of |s| that one elimination order serves."""

_POINTS = 512

_FAR = (60, 80)
"""s = 10 ** these, rad/s, stand for infinity."""

_DIGITS = 600

Step = tuple[int, int]
"""(index of an arrival, index of the delay that takes it further)."""


@dataclass(frozen=True, slots=True)
class Still:
    """A function with its delayed part left out."""

    function: Delayed

    @property
    def count(self) -> int:
        return self.function.count

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        return self.function.split(s, arithmetic)[0]


@dataclass(frozen=True, slots=True)
class Whole:
    """A function put together from its parts, in the same equations as `Still` has them."""

    function: Delayed

    @property
    def count(self) -> int:
        return self.function.count

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        turned = arithmetic.exp(-s * self.function.delay)
        return [a + b * turned for a, b in zip(*self.function.split(s, arithmetic), strict=True)]


def delay_of(function: Function) -> float:
    """Seconds; 0 for a function without a delay to take out."""
    return float(getattr(function, "delay", 0.0))


class Fronts:
    """Follows the delays of a system for a window of seconds; no more than `most` of them one by one."""

    def __init__(
        self,
        system: System,
        source: Mapping[int, float],
        outputs: Sequence[Output],
        window: float,
        most: int,
    ) -> None:
        self.system, self.source, self.outputs = system, source, outputs
        still = [Still(cast(Delayed, f)) if delay_of(f) else f for f in system.functions]
        whole = [Whole(cast(Delayed, f)) if delay_of(f) else f for f in system.functions]
        self._base = _Planned(System(system.size, system.terms, tuple(still)))
        self._whole = _Planned(System(system.size, system.terms, tuple(whole)))
        self._delays, self._groups = _by_delay(system)
        self._terms = [self._terms_of(group) for group in self._groups]
        self._entries = sorted({self._base.pattern.term_rows[t] for terms in self._terms for t in terms})
        """What delayed terms give to: columns 1, 2, … of `_amounts`."""
        columns = {rows: column for column, rows in enumerate(self._entries, 1)}
        self._entry_of = {t: columns[self._base.pattern.term_rows[t]] for terms in self._terms for t in terms}
        arrivals, self._before, self._leaving = _lattice(self._delays, window, most)
        self.arrivals: Floats = np.array(arrivals)
        """(n,) s, in order: the fronts that are followed."""
        self.rest: float | None = min((time for time, _ in self._leaving), default=None)
        """When what is not followed one by one sets in; None where that is after the window."""

    @property
    def longest(self) -> float:
        """The longest delay, s; 0 where there is none."""
        return max(self._delays, default=0.0)

    @property
    def starts(self) -> Floats:
        """When each of what `evaluate` gives sets in, s."""
        return np.append(self.arrivals, [] if self.rest is None else [self.rest])

    def evaluate(self, s: Complexes) -> tuple[Complexes, Floats, Floats]:
        """(values, noise, parts), each (n, n_outputs, n_points): transfer functions without delays, then the
        rest.

        `noise` is how far rounding may have put them off, absolutely; `parts` the sum of the sizes of what
        an output is made of, which says how far it must.
        """
        shape = len(self.starts), len(self.outputs), len(s)
        values: Complexes = np.empty(shape, dtype=complex)
        noise: Floats = np.empty(shape)
        parts: Floats = np.empty(shape)
        decade = np.floor(np.log10(np.abs(s)) / _DECADES)
        for level in np.unique(decade):
            chosen = np.flatnonzero(decade == level)
            for part in np.array_split(chosen, -(-len(chosen) // _POINTS)):
                with np.errstate(all="ignore"):
                    values[:, :, part], noise[:, :, part], parts[:, :, part] = self._evaluate(s[part])
        return values, noise, parts

    def _evaluate(self, s: Complexes) -> tuple[Complexes, Floats, Floats]:
        base = self._base.at(s)
        shape = len(self.starts), len(self.outputs), len(s)
        values, noise, parts = np.zeros(shape, dtype=complex), np.zeros(shape), np.zeros(shape)
        drops, shown, off, made_of = [], [], [], []
        for rows in (tuple(self.source.items()), *self._entries):
            right = np.zeros((self.system.size, len(s)), dtype=complex)
            for row, weight in rows:
                right[row] = weight
            solved, value, uncertain = base.solve_for(right, self.outputs)
            drops.append(base.drops(solved))
            shown.append(value)
            off.append(uncertain)
            made_of.append(solved.parts(self.outputs))
        amounts = self._amounts(s, NumpyArithmetic(), drops)
        for index, amount in enumerate(amounts[: len(self.arrivals)]):
            for column, factor in amount.items():
                values[index] += factor * shown[column]
                noise[index] += np.abs(factor) * off[column]
                parts[index] += np.abs(factor) * made_of[column]
        if self.rest is not None:
            right = np.zeros((self.system.size, len(s)), dtype=complex)
            for column, factor in amounts[-1].items():
                for row, weight in self._entries[column - 1]:
                    right[row] += factor * weight
            solved, values[-1], noise[-1] = self._whole.at(s).solve_for(right, self.outputs)
            parts[-1] = solved.parts(self.outputs)
        return values, noise, parts

    def _amounts(self, s: Any, arithmetic: Arithmetic, drops: Sequence[Any]) -> list[dict[int, Any]]:
        """x_τ of every arrival as {column: factor} of the solutions for the source (0) and for each entry.

        `drops[column][term]` is what a term takes from those solutions. What delayed terms give to the
        equations has few forms, the entries, so that no arrival needs a solution of its own. The last item
        is the right-hand side of the rest, where there is one.
        """
        functions = self._base.pattern.functions
        fronts = [self._front(group, s, arithmetic) for group in self._groups]
        found: list[dict[int, Any]] = []

        def arrive(amount: dict[int, Any], step: Step, late: Any) -> None:
            index, delay = step
            for term in self._terms[delay]:
                taken: Any = sum(factor * drops[column][term] for column, factor in found[index].items())
                column = self._entry_of[term]
                sent = taken * fronts[delay][functions[term]] * late
                amount[column] = amount[column] - sent if column in amount else -sent

        for index in range(len(self.arrivals)):
            amount: dict[int, Any] = {0: 1} if index == 0 else {}
            for step in self._before[index]:
                arrive(amount, step, 1)
            found.append(amount)
        if self.rest is not None:
            rest: dict[int, Any] = {}
            for time, step in self._leaving:
                arrive(rest, step, arithmetic.exp(-s * (time - self.rest)))
            found.append(rest)
        return found

    def at_infinity(self) -> tuple[Floats, Floats]:
        """(limits, orders) of what `evaluate` gives for s → ∞, each (n, n_outputs): by how much an edge
        jumps.

        Orders are multiples of 1/2; positive ones, impulses, have an infinite limit. From two huge s, with
        many digits.
        """
        arithmetic = MpArithmetic(_DIGITS)
        points = [arithmetic.context.mpf(10) ** exponent for exponent in _FAR]
        near, far = (self._exactly(s, arithmetic) for s in points)
        shape = len(self.starts), len(self.outputs)
        limits, orders = np.zeros(shape), np.full(shape, -np.inf)
        for place in np.ndindex(*shape):
            a, b = near[place[0]][place[1]], far[place[0]][place[1]]
            if a == 0 or b == 0:
                continue
            orders[place] = round(2 * float(arithmetic.context.log10(abs(b / a))) / (_FAR[1] - _FAR[0])) / 2
            if orders[place] >= 0:
                limits[place] = float(b) if orders[place] == 0 else math.copysign(math.inf, b)
        return limits, orders

    def _exactly(self, s: Any, arithmetic: MpArithmetic) -> list[list[Any]]:
        """`evaluate` at one real s with many digits."""
        base = Exact(self._base.pattern, s, arithmetic)
        solutions = [base.solve(dict(rows))[0] for rows in (tuple(self.source.items()), *self._entries)]
        shown = [[base.output(o, x) for o in self.outputs] for x in solutions]
        amounts = self._amounts(s, arithmetic, [base.drops(x) for x in solutions])
        zero = arithmetic.number(0)
        result = [
            [
                sum((f * shown[column][k] for column, f in amount.items()), zero)
                for k in range(len(self.outputs))
            ]
            for amount in amounts[: len(self.arrivals)]
        ]
        if self.rest is not None:
            right: dict[int, Any] = {}
            for column, factor in amounts[-1].items():
                for row, weight in self._entries[column - 1]:
                    right[row] = right.get(row, zero) + factor * weight
            whole = Exact(self._whole.pattern, s, arithmetic)
            x, _ = whole.solve(right)
            result.append([whole.output(o, x) for o in self.outputs])
        return result

    def _terms_of(self, group: Sequence[int]) -> list[int]:
        """The terms that a group of delayed functions sends something through."""
        front = self._front(group, np.array([1e9 + 1e9j, 1e6 + 2e6j]), NumpyArithmetic())
        functions = self._base.pattern.functions
        return [term for term, f in functions.items() if f in front and np.any(front[f] != 0)]

    def _front(self, group: Sequence[int], s: Any, arithmetic: Arithmetic) -> dict[int, Any]:
        """{output of the system's functions: its delayed part}."""
        first = np.cumsum([0, *(f.count for f in self.system.functions)]).tolist()
        found: dict[int, Any] = {}
        with np.errstate(all="ignore"):
            for number in group:
                function = cast(Delayed, self.system.functions[number])
                found.update(enumerate(function.split(s, arithmetic)[1], first[number]))
        return found


class _Planned:
    """A system with an elimination order for every few decades of |s|."""

    def __init__(self, system: System) -> None:
        self.system = system
        self.pattern = Pattern(system)
        self._plans: dict[int, Plan] = {}

    def at(self, s: Complexes) -> Factored:
        level = int(np.floor(np.log10(np.abs(s[0])) / _DECADES))
        if level not in self._plans:
            self._plans[level] = plan_for(self.system, s)
        return Factored(self._plans[level], s)


def _by_delay(system: System) -> tuple[list[float], list[list[int]]]:
    """Delays that differ, in order, and the functions that have each."""
    delays: list[float] = []
    groups: list[list[int]] = []
    for number in sorted(range(len(system.functions)), key=lambda k: delay_of(system.functions[k])):
        delay = delay_of(system.functions[number])
        if not delay:
            continue
        if delays and delay - delays[-1] <= _SAME * delay:
            groups[-1].append(number)
        else:
            delays.append(delay)
            groups.append([number])
    return delays, groups


def _lattice(
    delays: Sequence[float], window: float, most: int
) -> tuple[list[float], list[list[Step]], list[tuple[float, Step]]]:
    """(arrivals, the steps that lead to each, the steps that leave what is followed with the time they end
    at).

    Steps that end after the window are left out altogether unless arrivals had to be cut short.
    """
    arrivals: list[float] = []
    before: list[list[Step]] = []
    waiting: list[tuple[float, int, int]] = [(0.0, -1, -1)]
    window *= 1 + _SAME  # sums of delays are rounded
    while waiting and waiting[0][0] <= window:
        time = waiting[0][0]
        if arrivals and time - arrivals[-1] <= _SAME * time:
            _, index, delay = heapq.heappop(waiting)
            before[-1].append((index, delay))
            continue
        if len(arrivals) == most:
            break
        _, index, delay = heapq.heappop(waiting)
        arrivals.append(time)
        before.append([(index, delay)] if index >= 0 else [])
        for k, further in enumerate(delays):
            heapq.heappush(waiting, (time + further, len(arrivals) - 1, k))
    cut = bool(waiting) and waiting[0][0] <= window
    leaving = [(time, (index, delay)) for time, index, delay in sorted(waiting)] if cut else []
    return arrivals, before, leaving
