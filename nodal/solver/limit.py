"""Zero frequency as a limit: charge and flux balance come out by themselves, no leak is ever added.

The system is solved with many hundred digits at two tiny real s. How an output changes between them gives the
power of s that it goes with: a positive one is exactly zero, a negative one is infinite, else the value
itself is the limit.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import cache
from typing import Any

import numpy as np

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.exact import Exact
from nodal.solver.matrix import System
from nodal.solver.pattern import Floats, Pattern

_EXPONENTS = (-60, -80)
"""s = 10 ** these, rad/s: far below every corner that parts of any size can make."""

_DIGITS = (600, 1200, 2400)
"""One cancellation between conductances and s times capacitances costs about a hundred digits."""

_AGREEMENT = 1e-25

Evaluate = Callable[[MpArithmetic, Any], tuple[Sequence[Any], Sequence[Any]]]
"""(values, corrections of them) at a real s, all numbers of the arithmetic given."""


def limit(
    system: System, sources: Sequence[Mapping[int, float]], outputs: Sequence[Mapping[int, float]]
) -> tuple[Floats, Floats]:
    """Limits of outputs as s goes to zero through positive real numbers.

    Returns (values, orders), each of shape (n_sources, n_outputs): the value, 0.0 exactly where its order in
    s is positive, infinite with its sign where it is negative; orders are multiples of 1/2, infinite for an
    output that is zero at every s. Raises Singular where the system has no unique solution near s = 0,
    ArithmeticError where 2400 digits do not tell.
    """
    pattern = Pattern(system)

    def evaluate(arithmetic: MpArithmetic, s: Any) -> tuple[list[Any], list[Any]]:
        exact = Exact(pattern, s, arithmetic)
        values, corrections = [], []
        for source in sources:
            x, correction = exact.solve(source)
            values += [exact.output(o, x) for o in outputs]
            corrections += [exact.output(o, correction) for o in outputs]
        return values, corrections

    flat, orders = limit_of(evaluate)
    shape = len(sources), len(outputs)
    return flat.reshape(shape), orders.reshape(shape)


def limit_of(evaluate: Evaluate) -> tuple[Floats, Floats]:
    """(values, orders) of any numbers computed from one or several `Exact` at the s and arithmetic given."""
    before: list[list[Any]] | None = None
    for digits in _DIGITS:
        arithmetic = _arithmetic(digits)
        pairs = [evaluate(arithmetic, arithmetic.context.mpf(10) ** exponent) for exponent in _EXPONENTS]
        values = [list(pair[0]) for pair in pairs]
        settled = True
        for point, (_, corrections) in enumerate(pairs):
            for k, correction in enumerate(corrections):
                if abs(correction) <= _AGREEMENT * abs(values[point][k]):
                    continue
                if values[point][k] == 0:
                    continue  # only the correction is rounding
                if before is not None and abs(values[point][k]) < 1e-100 * abs(before[point][k]):
                    values[point][k] = arithmetic.number(0)  # shrinks with the digits: rounding around zero
                else:
                    settled = False
        if settled:
            return _read_off(values[0], values[1])
        before = values
    raise ArithmeticError("the limit at zero frequency cannot be told apart from rounding")


@cache
def _arithmetic(digits: int) -> MpArithmetic:
    """One for all limits: factors that a caller keeps stay numbers of the same arithmetic."""
    return MpArithmetic(digits)


def _read_off(far: Sequence[Any], near: Sequence[Any]) -> tuple[Floats, Floats]:
    values, orders = np.zeros(len(near)), np.full(len(near), np.inf)
    decades = _EXPONENTS[0] - _EXPONENTS[1]
    for k, (a, b) in enumerate(zip(far, near, strict=True)):
        if a == 0 or b == 0:
            continue
        ratio = abs(a / b)
        orders[k] = round(2 * float(_log10(ratio)) / decades) / 2
        if orders[k] == 0:
            values[k] = float(b)
        elif orders[k] < 0:
            values[k] = np.inf if b > 0 else -np.inf
    return values, orders


def _log10(x: Any) -> Any:
    return x.context.log10(x)
