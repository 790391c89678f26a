"""Terms of a System as arrays: the matrix entries they make, and the sums that residuals are made of."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from nodal.solver.arithmetic import Jet, JetArithmetic, MpArithmetic, NumpyArithmetic
from nodal.solver.matrix import Arithmetic, System

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Ints = NDArray[np.intp]

Weights = tuple[tuple[int, float], ...]
Shares = list[tuple[int, int, float]]
"""(row or entry, term, weight)"""

_EPSILON = float(np.finfo(float).eps)


class Pattern:
    """Index arrays of one System, made once.

    `rows`, `cols`: position of every matrix entry (entries that cancel in the sum are kept). `taking`
    (n_terms x size) forms cols·x of every term: a branch's current comes from the difference of its node
    voltages.
    """

    def __init__(self, system: System) -> None:
        self.system = system
        self.size = system.size
        self.term_rows: list[Weights] = [_merged(term.rows, system.size) for term in system.terms]
        self.term_cols: list[Weights] = [_merged(term.cols, system.size) for term in system.terms]
        index: dict[tuple[int, int], int] = {}
        self.shares: Shares = []
        """(entry, term, weight): entry = sum of weight * coefficient of term."""
        for number, (rows, cols) in enumerate(zip(self.term_rows, self.term_cols, strict=True)):
            for i, row_weight in rows:
                for j, col_weight in cols:
                    entry = index.setdefault((i, j), len(index))
                    self.shares.append((entry, number, row_weight * col_weight))
        positions = np.array(list(index), dtype=np.intp).reshape(-1, 2)
        self.rows: Ints = positions[:, 0].copy()
        self.cols: Ints = positions[:, 1].copy()
        self.g: Floats = np.array([t.g for t in system.terms], dtype=float)
        self.c: Floats = np.array([t.c for t in system.terms], dtype=float)
        if not (np.isfinite(self.g).all() and np.isfinite(self.c).all()):
            raise ValueError("a coefficient of a term is not finite")
        self.functions = {k: t.f for k, t in enumerate(system.terms) if t.f is not None}
        """Output of the system's functions by the term that has one."""
        entry_of, term_of, weight_of = _columns(self.shares)
        self.entry_g = np.bincount(entry_of, weight_of * self.g[term_of], minlength=len(index))
        self.entry_c = np.bincount(entry_of, weight_of * self.c[term_of], minlength=len(index))
        self.function_shares = [x for x in self.shares if x[1] in self.functions] if self.functions else []
        taken = [(t, k, w) for t, weights in enumerate(self.term_cols) for k, w in weights]
        self.taking = compressed(*_columns(taken), (len(self.g), self.size))

    def shares_by(self, place: Ints) -> Shares:
        """(place[equation], term, weight) for everything that terms give to equations."""
        at = place.tolist()
        return [(at[k], t, w) for t, weights in enumerate(self.term_rows) for k, w in weights]

    def coefficients(self, s: Complexes, values: dict[int, Any]) -> Complexes:
        """g + s c + F_f(s), (n_terms, n_points)."""
        result: Complexes = np.multiply.outer(self.c, s)
        result += self.g[:, None]
        for term, value in values.items():
            result[term] += value
        return result

    def function_values(self, s: Complexes) -> dict[int, Any]:
        """F_f(s) of every term that has one."""
        if not self.functions:
            return {}
        outputs = _evaluate(self.system, s, NumpyArithmetic())
        return {term: outputs[f] for term, f in self.functions.items()}

    def matrix(self, s: Complexes, values: dict[int, Any], out: Complexes | None = None) -> Complexes:
        """Matrix entries, (n_entries, n_points), from s and the `function_values` there."""
        entries: Complexes = np.empty((len(self.rows), len(s)), dtype=complex) if out is None else out
        entries.real = self.entry_g[:, None]
        if s.real.any():
            entries.real += np.multiply.outer(self.entry_c, s.real)
        np.multiply.outer(self.entry_c, s.imag, out=entries.imag)
        for entry, term, weight in self.function_shares:
            entries[entry] += values[term] * weight
        return entries

    def function_slopes(self, s: Complexes) -> dict[int, Any]:
        """d/ds of `function_values`."""
        if not self.functions:
            return {}
        outputs = _evaluate(self.system, Jet(s, np.ones_like(s)), JetArithmetic(NumpyArithmetic()))
        slopes = [output.slope if isinstance(output, Jet) else 0.0 for output in outputs]
        return {term: slopes[f] for term, f in self.functions.items()}

    def exact_coefficients(self, s: Any, arithmetic: MpArithmetic) -> list[Any]:
        """`coefficients` at one point, as numbers of many digits."""
        number = arithmetic.number
        result = [number(t.g) + s * number(t.c) if t.c else number(t.g) for t in self.system.terms]
        if self.functions:
            outputs = _evaluate(self.system, s, arithmetic)
            for term, f in self.functions.items():
                result[term] = result[term] + outputs[f]
        return result

    def exact_slopes(self, s: Any, arithmetic: MpArithmetic) -> list[Any]:
        """`slopes` at one point, as numbers of many digits."""
        result = [arithmetic.number(t.c) for t in self.system.terms]
        if self.functions:
            outputs = _evaluate(self.system, Jet(s, arithmetic.number(1)), JetArithmetic(arithmetic))
            for term, f in self.functions.items():
                output = outputs[f]
                if isinstance(output, Jet):
                    result[term] = result[term] + output.slope
        return result

    def exact_entries(self, coefficients: Sequence[Any], arithmetic: MpArithmetic) -> list[Any]:
        """Matrix entries, in the order of `rows` and `cols`, from `exact_coefficients`."""
        result = [arithmetic.number(0)] * len(self.rows)
        products = (
            (row_weight, col_weight)
            for rows, cols in zip(self.term_rows, self.term_cols, strict=True)
            for _, row_weight in rows
            for _, col_weight in cols
        )
        # One weight at a time: the product in `shares` is rounded.
        for (entry, term, _), (row_weight, col_weight) in zip(self.shares, products, strict=True):
            result[entry] = result[entry] + coefficients[term] * row_weight * col_weight
        return result


class Giving:
    """A x from every term's drop (cols·x), one product by s an equation, each summand off by up to three
    roundings.

    They are off on purpose, each by its own number. Currents that cancel in an equation leave a remainder
    that is rounded, and sums like to come out as zero just where the remainder decides about the solution: a
    correction computed from them would say that all is well. With these the correction shows what roundings
    can do. A second correction needs numbers of another `stride` (2 or 3): with the same it would settle on
    the spoilt system.
    """

    def __init__(self, pattern: Pattern, shares: Shares, stride: int) -> None:
        shape = pattern.size, len(pattern.g)
        rows, terms, weights = _columns(shares)
        start = np.random.default_rng(stride).integers(0, 7, len(pattern.g))
        offset = (start[terms] + stride * _occurrence(terms)) % 7 - 3
        weights = weights * (1 + offset * _EPSILON)
        self._constant = compressed(rows, terms, weights * pattern.g[terms], shape)
        self._linear = compressed(rows, terms, weights * pattern.c[terms], shape)
        self._function = [
            (row, term, weight)
            for row, term, weight in zip(rows.tolist(), terms.tolist(), weights.tolist(), strict=True)
            if term in pattern.functions
        ] if pattern.functions else []

    def current(self, drops: Complexes, s: Complexes, values: dict[int, Any]) -> Complexes:
        """A x, (size, n_points)."""
        result = product(self._linear, drops)
        result *= s
        result += product(self._constant, drops)
        for row, term, weight in self._function:
            result[row] += drops[term] * values[term] * weight
        return result


class Balance:
    """Sums of what terms carry, to twice the working precision (two-sum, Knuth 1969)."""

    def __init__(self, shares: Shares) -> None:
        met: dict[int, int] = {}
        levels: list[Shares] = []
        for share in shares:
            level = met.get(share[0], 0)
            met[share[0]] = level + 1
            if level == len(levels):
                levels.append([])
            levels[level].append(share)
        self._levels = [
            (np.array([k for k, _, _ in level]), np.array([t for _, t, _ in level]),
             np.array([[w] for _, _, w in level], dtype=float))
            for level in levels
        ]

    def remainder(self, b: Complexes, carried: Complexes) -> Complexes:
        """b - sum of rows * carried, (size, n_points)."""
        total, lost = b.copy().view(float), np.zeros_like(b).view(float)
        flat = carried.view(float)
        for rows, terms, weights in self._levels:
            old, summand = total[rows], flat[terms] * -weights
            new = old + summand
            part = new - old
            lost[rows] += (old - (new - part)) + (summand - part)
            total[rows] = new
        total += lost
        result: Complexes = total.view(complex)
        return result


def product(matrix: Any, x: Complexes) -> Complexes:
    """Real sparse times complex dense, without making the sparse one complex."""
    result: Complexes = (matrix @ x.view(float)).view(complex)
    return result


def _evaluate(system: System, s: Any, arithmetic: Arithmetic) -> list[Any]:
    outputs: list[Any] = []
    # Of the two forms of a formula that `select` chooses between, the one not in use may overflow.
    with np.errstate(all="ignore"):
        for function in system.functions:
            outputs.extend(function.evaluate(s, arithmetic))
    return outputs


def _merged(weights: Iterable[tuple[int, float]], size: int) -> Weights:
    """One weight per index, those that cancel left out."""
    pairs = tuple(weights)
    total: dict[int, float] = {}
    for index, weight in pairs:
        if not 0 <= index < size:
            raise IndexError(f"index {index} in a system of size {size}")
        total[index] = total.get(index, 0.0) + weight
    if len(total) == len(pairs) and all(total.values()):
        return pairs
    return tuple((index, weight) for index, weight in total.items() if weight != 0.0)


def compressed(rows: Ints, cols: Ints, values: Floats, shape: tuple[int, int]) -> Any:
    """A sparse real matrix from parallel arrays, no position twice; zeros are left out."""
    kept = np.nonzero(values)[0]
    order = kept[np.argsort(rows[kept], kind="stable")]
    starts = np.zeros(shape[0] + 1, dtype=np.int32)
    np.cumsum(np.bincount(rows[kept], minlength=shape[0]), out=starts[1:])
    return sparse.csr_matrix((values[order], cols[order].astype(np.int32), starts), shape=shape)


def _columns(shares: Shares) -> tuple[Ints, Ints, Floats]:
    table = np.array(shares, dtype=float).reshape(-1, 3)
    return table[:, 0].astype(np.intp), table[:, 1].astype(np.intp), table[:, 2]


def _occurrence(terms: Ints) -> Ints:
    """How often each term came before, for terms in ascending order."""
    first = np.searchsorted(terms, terms)
    result: Ints = np.arange(len(terms)) - first
    return result
