"""Systems made by hand from terms, and their solution by an independent dense method with many digits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import mpmath
import numpy as np

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.matrix import System, Term


class Sketch:
    """Nodes are numbered from 1, 0 is ground; unknown k - 1 is the voltage of node k, currents come after."""

    def __init__(self, nodes: int) -> None:
        self.nodes = nodes
        self.size = nodes
        self.terms: list[Term] = []
        self.functions: list[Any] = []

    @staticmethod
    def ends(a: int, b: int) -> tuple[tuple[int, float], ...]:
        return tuple((node - 1, sign) for node, sign in ((a, 1.0), (b, -1.0)) if node)

    def resistor(self, a: int, b: int, ohms: float) -> None:
        self.terms.append(Term(self.ends(a, b), self.ends(a, b), g=1 / ohms))

    def capacitor(self, a: int, b: int, farads: float) -> None:
        self.terms.append(Term(self.ends(a, b), self.ends(a, b), c=farads))

    def current(self, a: int, b: int) -> int:
        """A new unknown, the current from a to b, with an equation that begins with v(a) - v(b)."""
        index, self.size = self.size, self.size + 1
        own = ((index, 1.0),)
        self.terms += [Term(self.ends(a, b), own, g=1.0), Term(own, self.ends(a, b), g=1.0)]
        return index

    def inductor(self, a: int, b: int, henries: float) -> int:
        index = self.current(a, b)
        self.terms.append(Term(((index, 1.0),), ((index, 1.0),), c=-henries))
        return index

    def coupling(self, first: int, second: int, henries: float) -> None:
        self.terms.append(Term(((first, 1.0),), ((second, 1.0),), c=-henries))
        self.terms.append(Term(((second, 1.0),), ((first, 1.0),), c=-henries))

    def source(self, a: int, b: int) -> int:
        """An ideal voltage source; excite the equation returned."""
        return self.current(a, b)

    def line(self, a: int, b: int, series: Any, shunt: Any) -> None:
        """A two-conductor line over ground: series impedance and shunt admittance of the whole line,
        functions of
        (s, arithmetic); the design's two sets of line equations."""
        first, second = self.current_only(a), self.current_only(b)
        base = sum(f.count for f in self.functions)
        self.functions.append(LineFunction(series, shunt))
        va, vb = self.ends(a, 0), self.ends(b, 0)
        one, two = ((first, 1.0),), ((second, 1.0),)
        minus = [(k, -w) for k, w in vb]
        difference, total = (*va, *minus), (*va, *vb)
        currents, sum_of_currents = ((first, 1.0), (second, -1.0)), ((first, 1.0), (second, 1.0))
        self.terms += [
            Term(one, difference, f=base),
            Term(one, currents, f=base + 1),
            Term(two, sum_of_currents, f=base),
            Term(two, total, f=base + 2),
            Term(one, va, f=base + 3),
            Term(one, one, f=base + 4),
            Term(one, vb, f=base + 5),
            Term(one, two, f=base + 6),
            Term(two, vb, f=base + 3),
            Term(two, two, f=base + 4),
            Term(two, va, f=base + 5),
            Term(two, one, f=base + 6),
        ]

    def current_only(self, node: int) -> int:
        index, self.size = self.size, self.size + 1
        self.terms.append(Term(self.ends(node, 0), ((index, 1.0),), g=1.0))
        return index

    def system(self) -> System:
        return System(self.size, tuple(self.terms), tuple(self.functions))


class LineFunction:
    """Coefficients of the line equations of the design, section 4; both sets, one of them zero."""

    count = 7

    def __init__(self, series: Any, shunt: Any) -> None:
        self.series, self.shunt = series, shunt

    def evaluate(self, s: Any, arithmetic: Any) -> Sequence[Any]:
        z, y = self.series(s, arithmetic), self.shunt(s, arithmetic)
        u = arithmetic.sqrt(z * y) / 2
        decay = arithmetic.exp(-2 * u)
        c = (1 + decay) / 2
        h = -arithmetic.expm1(-2 * u) / (2 * u)
        wave = arithmetic.sqrt(z / y)
        long = arithmetic.real(u) > 1
        zero = 0 * s

        def near(x: Any) -> Any:
            return arithmetic.select(long, zero, x)

        def far(x: Any) -> Any:
            return arithmetic.select(long, x, zero)

        return (
            near(c),
            near(-z / 2 * h),
            near(-y / 2 * h),
            far(1 + 0 * s),
            far(-wave),
            far(-decay),
            far(-decay * wave),
        )


def reference(
    system: System,
    s: complex | Any,
    source: Mapping[int, float],
    outputs: Sequence[Mapping[int, float]],
    digits: int = 200,
) -> list[Any]:
    """Outputs by mpmath's dense LU with partial pivoting; nothing shared with the solver but the terms.

    Zero is what three quarters of the digits do not tell from it.
    """
    arithmetic = MpArithmetic(digits)
    context = arithmetic.context
    point = arithmetic.number(s)
    values = [v for f in system.functions for v in f.evaluate(point, arithmetic)]
    matrix = context.matrix(system.size, system.size)
    for term in system.terms:
        factor = context.mpf(term.g) + point * context.mpf(term.c)
        if term.f is not None:
            factor += values[term.f]
        for i, row_weight in term.rows:
            for j, col_weight in term.cols:
                matrix[i, j] += row_weight * col_weight * factor
    b = context.matrix(system.size, 1)
    for k, value in source.items():
        b[k] = arithmetic.number(value)
    x = context.lu_solve(matrix, b)
    results = [sum((x[k] * w for k, w in output.items()), context.mpf(0)) for output in outputs]
    floors = [max(abs(x[k] * w) for k, w in output.items()) for output in outputs]
    largest = max(abs(v) for v in x)
    cut = context.mpf(10) ** (-0.75 * digits)
    return [
        r if abs(r) > cut * max(f, cut * largest) else context.mpf(0)
        for r, f in zip(results, floors, strict=True)
    ]


def worst_error(values: np.ndarray[Any, Any], expected: Sequence[Any]) -> float:
    """Largest relative error of one-point outputs."""
    return max(
        float(abs(mpmath.mpmathify(complex(v)) - e) / abs(e)) if e else float(abs(v) != 0)
        for v, e in zip(values, expected, strict=True)
    )
