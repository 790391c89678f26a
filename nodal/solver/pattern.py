"""Terms of a System as arrays: the matrix entries they make, and what a residual is formed from, term by term."""

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


class Pattern:
    """Index arrays of one System, made once.

    `rows`, `cols`: position of every matrix entry (entries that cancel in the sum are kept). `entries` (n_entries x
    n_terms) sums term coefficients into entries, `taking` (n_terms x size) forms cols·x of every term, `giving`
    (size x n_terms) adds a term's result to its rows. Weights are kept apart from coefficients, so that a branch's
    current comes from the difference of its node voltages.
    """

    def __init__(self, system: System) -> None:
        self.system = system
        self.size = system.size
        self.term_rows: list[Weights] = []
        self.term_cols: list[Weights] = []
        index: dict[tuple[int, int], int] = {}
        entry_at: list[int] = []
        entry_term: list[int] = []
        entry_weight: list[float] = []
        for number, term in enumerate(system.terms):
            rows, cols = _merged(term.rows, system.size), _merged(term.cols, system.size)
            self.term_rows.append(rows)
            self.term_cols.append(cols)
            for i, row_weight in rows:
                for j, col_weight in cols:
                    entry_at.append(index.setdefault((i, j), len(index)))
                    entry_term.append(number)
                    entry_weight.append(row_weight * col_weight)
        positions = np.array(list(index), dtype=np.intp).reshape(-1, 2)
        self.rows: Ints = positions[:, 0].copy()
        self.cols: Ints = positions[:, 1].copy()
        count = len(system.terms)
        self.g: Floats = np.array([t.g for t in system.terms], dtype=float)
        self.c: Floats = np.array([t.c for t in system.terms], dtype=float)
        if not (np.isfinite(self.g).all() and np.isfinite(self.c).all()):
            raise ValueError("a coefficient of a term is not finite")
        self.with_function: Ints = np.array([k for k, t in enumerate(system.terms) if t.f is not None], dtype=np.intp)
        self.function_output = [t.f for t in system.terms if t.f is not None]
        self.entries = _matrix(entry_weight, entry_at, entry_term, (len(index), count))
        self.taking = _incidence(self.term_cols, system.size)
        self.giving = _incidence(self.term_rows, system.size).T.tocsr()

    def coefficients(self, s: Complexes) -> Complexes:
        """g + s c + F_f(s) of every term at every point, (n_terms, n_points)."""
        result: Complexes = np.multiply.outer(self.c, s)
        result += self.g[:, None]
        if self.function_output:
            outputs = _evaluate(self.system, s, NumpyArithmetic())
            for term, f in zip(self.with_function, self.function_output, strict=True):
                result[term] += outputs[f]
        return result

    def slopes(self, s: Complexes) -> Complexes:
        """d/ds of `coefficients`, (n_terms, n_points)."""
        result: Complexes = np.empty((len(self.c), len(s)), dtype=complex)
        result[:] = self.c[:, None]
        if self.function_output:
            outputs = _evaluate(self.system, Jet(s, np.ones_like(s)), JetArithmetic(NumpyArithmetic()))
            for term, f in zip(self.with_function, self.function_output, strict=True):
                output = outputs[f]
                if isinstance(output, Jet):
                    result[term] += output.slope
        return result

    def exact_coefficients(self, s: Any, arithmetic: MpArithmetic) -> list[Any]:
        """`coefficients` at one point, as numbers of many digits."""
        number = arithmetic.number
        result = [number(t.g) + s * number(t.c) if t.c else number(t.g) for t in self.system.terms]
        if self.function_output:
            outputs = _evaluate(self.system, s, arithmetic)
            for term, f in zip(self.with_function, self.function_output, strict=True):
                result[term] = result[term] + outputs[f]
        return result

    def exact_slopes(self, s: Any, arithmetic: MpArithmetic) -> list[Any]:
        """`slopes` at one point, as numbers of many digits."""
        result = [arithmetic.number(t.c) for t in self.system.terms]
        if self.function_output:
            outputs = _evaluate(self.system, Jet(s, arithmetic.number(1)), JetArithmetic(arithmetic))
            for term, f in zip(self.with_function, self.function_output, strict=True):
                output = outputs[f]
                if isinstance(output, Jet):
                    result[term] = result[term] + output.slope
        return result

    def exact_entries(self, coefficients: Sequence[Any], arithmetic: MpArithmetic) -> list[Any]:
        """Matrix entries, in the order of `rows` and `cols`, from `exact_coefficients`."""
        result = [arithmetic.number(0)] * len(self.rows)
        matrix = self.entries
        for entry in range(len(result)):
            for k in range(matrix.indptr[entry], matrix.indptr[entry + 1]):
                result[entry] += coefficients[matrix.indices[k]] * float(matrix.data[k])
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
    total: dict[int, float] = {}
    for index, weight in weights:
        if not 0 <= index < size:
            raise IndexError(f"index {index} in a system of size {size}")
        total[index] = total.get(index, 0.0) + weight
    return tuple((index, weight) for index, weight in total.items() if weight != 0.0)


def _matrix(data: list[float], rows: list[int], cols: list[int], shape: tuple[int, int]) -> Any:
    return sparse.csr_matrix((np.array(data, dtype=float), (rows, cols)), shape=shape)


def _incidence(weights: list[Weights], size: int) -> Any:
    data = [w for term in weights for _, w in term]
    cols = [k for term in weights for k, _ in term]
    rows = [number for number, term in enumerate(weights) for _ in term]
    return _matrix(data, rows, cols, (len(weights), size))
