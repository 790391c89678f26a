"""A plan: the elimination order of one topology with the scaling that it was chosen under."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.kernel import Kernel
from nodal.solver.matrix import System
from nodal.solver.order import NoPivot, Order, eliminate
from nodal.solver.pattern import Balance, Floats, Giving, Pattern


class Singular(Exception):
    """The system has no unique solution. `unknowns`: indices of unknowns that can move without any source."""

    def __init__(self, unknowns: Sequence[int]) -> None:
        super().__init__(f"no unique solution for unknowns {list(unknowns)}")
        self.unknowns = tuple(unknowns)


@dataclass(frozen=True)
class Plan:
    """An elimination order for one System, for use at other frequencies and for other values of the parts."""

    pattern: Pattern
    order: Order

    @property
    def system(self) -> System:
        return self.pattern.system

    @property
    def multiply_adds(self) -> int:
        """Per point, of one factorisation."""
        return self.order.multiply_adds

    def fitted(self, system: System) -> Plan:
        """This plan for a system of the same structure with other values; ValueError where it differs."""
        if system is self.system:
            return self
        pattern = Pattern(system)
        if pattern.term_rows != self.pattern.term_rows or pattern.term_cols != self.pattern.term_cols:
            raise ValueError("the plan is of a system of another structure")
        return replace(self, pattern=pattern)

    @cached_property
    def kernel(self) -> Kernel:
        """For any arithmetic: every slot has an array."""
        return Kernel(self.order)

    @cached_property
    def folded(self) -> Kernel:
        """For blocks of doubles: what does not depend on s is worked out beforehand."""
        fill = dict.fromkeys(range(len(self.pattern.rows), self.order.slots), 0.0)
        return Kernel(self.order, self.pattern.constants | fill)

    @cached_property
    def array_slots(self) -> list[int]:
        """Slots that `folded` needs arrays for, those of `Pattern.varying` first."""
        varying, constant = self.pattern.varying_entries, self.folded.constant
        known = {*varying, *constant}
        return varying + [slot for slot in range(self.order.slots) if slot not in known]

    @cached_property
    def giving(self) -> Giving:
        """Sums for quick corrections, equations where the kernel keeps right-hand sides."""
        return Giving(self.pattern, self.order.place)

    @cached_property
    def balance(self) -> Balance:
        """Sums of twice the precision, equations where the kernel keeps right-hand sides."""
        return Balance(self.pattern.shares_by(self.order.place))


def make_plan(system: System, s_samples: ArrayLike, pattern: Pattern | None = None) -> Plan:
    """Plan the elimination of `system` from its numbers at a few complex frequencies (rad/s, nonzero).

    Raises Singular where the system has no unique solution at any frequency.
    """
    if pattern is None:
        pattern = Pattern(system)
    s = np.atleast_1d(np.asarray(s_samples, dtype=complex))
    entries = pattern.matrix(s, pattern.function_values(s))
    # Pivots are judged on the scaled matrix. The run needs no scaling: powers of two change no rounding.
    entries *= _equilibration(pattern, np.abs(entries))[:, None]
    try:
        order = eliminate(pattern.size, pattern.rows.tolist(), pattern.cols.tolist(), entries.tolist())
    except NoPivot:
        # Cancellation in double precision proves nothing: many digits decide, and may find an order.
        order = exact_order(pattern, generic(s[0]))
    return Plan(pattern, order)


def generic(s: Any) -> complex:
    """A frequency near s with nothing special about it: what is singular there is singular everywhere."""
    return complex(abs(s)) * (0.6180339887 + 0.4142135624j)


def exact_order(pattern: Pattern, s: Any, digits: int = 100) -> Order:
    """The elimination order from numbers of many digits at one frequency; raises Singular."""
    arithmetic = MpArithmetic(digits)
    s = arithmetic.number(s)
    entries = pattern.exact_entries(pattern.exact_coefficients(s, arithmetic), arithmetic)
    return exact_elimination(pattern, entries, arithmetic)


def exact_elimination(pattern: Pattern, entries: Sequence[Any], arithmetic: MpArithmetic) -> Order:
    """The order for `exact_entries`; raises Singular with the unknowns that a null vector moves."""
    try:
        rows, cols = pattern.rows.tolist(), pattern.cols.tolist()
        # What cancels to below three fifths of the digits is zero and has left rounding behind.
        floor = arithmetic.context.mpf(10) ** (-3 * arithmetic.digits // 5)
        return eliminate(pattern.size, rows, cols, [[e] for e in entries], floor)
    except NoPivot as stopped:
        raise Singular(_null_support(stopped, pattern, entries)) from None


def _null_support(stopped: NoPivot, pattern: Pattern, entries: Sequence[Any]) -> list[int]:
    """Unknowns that move when the first one without a pivot does, all sources at rest."""
    order = stopped.order
    work = list(entries) + [entries[0] * 0] * (order.slots - len(entries)) if entries else []
    for k in range(len(order.pivot)):
        for at in range(order.lower_start[k], order.lower_start[k + 1]):
            work[order.lower[at]] = work[order.lower[at]] / work[order.pivot[k]]
        for at in range(order.update_start[k], order.update_start[k + 1]):
            work[order.target[at]] = work[order.target[at]] - work[order.left[at]] * work[order.top[at]]
    x: list[Any] = [0] * pattern.size
    x[stopped.cols[0]] = 1
    for k in reversed(range(len(order.pivot))):
        span = range(order.upper_start[k], order.upper_start[k + 1])
        total = sum((work[order.upper[at]] * x[order.upper_col[at]] for at in span), 0)
        x[order.col[k]] = -total / work[order.pivot[k]]
    largest = max(abs(v) for v in x)
    return [k for k, v in enumerate(x) if abs(v) > 1e-25 * largest]


def _equilibration(pattern: Pattern, magnitudes: Floats) -> Floats:
    """Powers of two, one per entry, row factor times column factor, that bring the entries near 1.

    In the mean of their logarithms over the samples, after Curtis and Reid 1972.
    """
    known = np.isfinite(magnitudes) & (magnitudes > 0)
    logs = np.log2(magnitudes, out=np.zeros_like(magnitudes), where=known)
    used = known.any(axis=1)
    level = (logs.sum(axis=1) / np.maximum(known.sum(axis=1), 1))[used]
    rows, cols, size = pattern.rows[used], pattern.cols[used], pattern.size
    row_count = np.maximum(np.bincount(rows, minlength=size), 1)
    col_count = np.maximum(np.bincount(cols, minlength=size), 1)
    c = np.zeros(size)
    for _ in range(6):
        r = -np.bincount(rows, level + c[cols], minlength=size) / row_count
        c = -np.bincount(cols, level + r[rows], minlength=size) / col_count
    exponents = np.clip(np.rint(r)[pattern.rows] + np.rint(c)[pattern.cols], -900, 900)
    factors: Floats = np.ldexp(np.ones(len(exponents)), exponents.astype(np.int64))
    return factors
