"""A plan: the elimination order of one topology with the scaling that it was chosen under."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.kernel import Kernel
from nodal.solver.matrix import System
from nodal.solver.order import NoPivot, Order, eliminate
from nodal.solver.pattern import Complexes, Floats, Pattern


class Singular(Exception):
    """The system has no unique solution. `unknowns`: indices of unknowns that can move without any source."""

    def __init__(self, unknowns: Sequence[int]) -> None:
        super().__init__(f"no unique solution for unknowns {list(unknowns)}")
        self.unknowns = tuple(unknowns)


@dataclass(frozen=True)
class Plan:
    """An order for one System with its scaling. Reusable at other frequencies and for other values of the parts."""

    pattern: Pattern
    order: Order
    row_scale: Floats
    """Powers of two: the scaled matrix is row_scale[i] A_ij col_scale[j]."""
    col_scale: Floats

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
        return Kernel(self.order)

    @cached_property
    def scaled_entries(self) -> Any:
        """`Pattern.entries` with the scaling in its weights (exact)."""
        factors = self.row_scale[self.pattern.rows] * self.col_scale[self.pattern.cols]
        return _rows_times(self.pattern.entries, factors)

    @cached_property
    def scaled_taking(self) -> Any:
        scaled = self.pattern.taking.copy()
        scaled.data = scaled.data * self.col_scale[scaled.indices]
        return scaled

    @cached_property
    def scaled_giving(self) -> Any:
        """`Pattern.giving` scaled, its rows where right-hand sides keep them (`Order.place`)."""
        source = np.empty(self.order.size, dtype=np.intp)
        source[self.order.place] = np.arange(self.order.size)
        return _rows_times(self.pattern.giving, self.row_scale)[source]


def _rows_times(matrix: Any, factors: Floats) -> Any:
    scaled = matrix.copy()
    scaled.data = scaled.data * np.repeat(factors, np.diff(scaled.indptr))
    return scaled


def make_plan(system: System, s_samples: ArrayLike, pattern: Pattern | None = None) -> Plan:
    """Plan the elimination of `system` from its numbers at a few complex frequencies (rad/s, nonzero).

    Raises Singular where the system has no unique solution at any frequency.
    """
    if pattern is None:
        pattern = Pattern(system)
    s = np.atleast_1d(np.asarray(s_samples, dtype=complex))
    entries: Complexes = pattern.entries @ pattern.coefficients(s)
    row_exponent, col_exponent = _equilibrate(pattern, np.abs(entries))
    row_scale, col_scale = np.ldexp(1.0, row_exponent), np.ldexp(1.0, col_exponent)
    entries *= (row_scale[pattern.rows] * col_scale[pattern.cols])[:, None]
    try:
        order = eliminate(pattern.size, pattern.rows.tolist(), pattern.cols.tolist(), entries.tolist())
    except NoPivot:
        # Cancellation in double precision proves nothing: many digits decide, and give the order if there is one.
        order = exact_order(pattern, generic(s[0]))
    return Plan(pattern, order, row_scale, col_scale)


def generic(s: Any) -> complex:
    """A complex frequency near s with nothing special about it: a system singular there is singular everywhere."""
    return complex(abs(s)) * (0.6180339887 + 0.4142135624j)


def exact_order(pattern: Pattern, s: Any, digits: int = 100) -> Order:
    """The elimination order from numbers of many digits at one frequency; raises Singular."""
    arithmetic = MpArithmetic(digits)
    s = arithmetic.number(s)
    entries = pattern.exact_entries(pattern.exact_coefficients(s, arithmetic), arithmetic)
    return exact_elimination(pattern, entries, digits)


def exact_elimination(pattern: Pattern, entries: Sequence[Any], digits: int) -> Order:
    """The order for `exact_entries`; raises Singular with the unknowns that a null vector moves."""
    try:
        return eliminate(
            pattern.size, pattern.rows.tolist(), pattern.cols.tolist(), [[e] for e in entries], 10.0 ** (-digits * 0.6)
        )
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


def _equilibrate(pattern: Pattern, magnitudes: Floats) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Exponents of two that bring the entries near 1 in the mean of their logarithms (after Curtis and Reid 1972)."""
    known = magnitudes > 0
    logs = np.log2(magnitudes, out=np.zeros_like(magnitudes), where=known & np.isfinite(magnitudes))
    level = logs.sum(axis=1) / np.maximum(known.sum(axis=1), 1)
    used = known.any(axis=1)
    rows, cols, level = pattern.rows[used], pattern.cols[used], level[used]
    row_count = np.maximum(np.bincount(rows, minlength=pattern.size), 1)
    col_count = np.maximum(np.bincount(cols, minlength=pattern.size), 1)
    r, c = np.zeros(pattern.size), np.zeros(pattern.size)
    for _ in range(8):
        r = -np.bincount(rows, level + c[cols], minlength=pattern.size) / row_count
        c = -np.bincount(cols, level + r[rows], minlength=pattern.size) / col_count
    limit = 400
    return np.rint(np.clip(r, -limit, limit)).astype(np.int64), np.rint(np.clip(c, -limit, limit)).astype(np.int64)
