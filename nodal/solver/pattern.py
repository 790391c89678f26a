"""Terms of a System as arrays: the matrix entries they make, and the sums that residuals are made of."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from functools import cached_property
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

_ALL = 0b1111111
_STRIDES = (3, 2)

_EPSILON = float(np.finfo(float).eps)


class Pattern:
    """Index arrays of one System, made once.

    `rows`, `cols`: position of every matrix entry (entries that cancel in the sum are kept).
    """

    def __init__(self, system: System) -> None:
        self.system = system
        size = self.size = system.size
        self.term_rows: list[Weights] = [_merged(term.rows, size) for term in system.terms]
        self.term_cols: list[Weights] = [_merged(term.cols, size) for term in system.terms]
        index: dict[int, int] = {}
        entries: list[int] = []
        terms: list[int] = []
        weights: list[float] = []
        for number, (rows, cols) in enumerate(zip(self.term_rows, self.term_cols, strict=True)):
            for i, row_weight in rows:
                for j, col_weight in cols:
                    entries.append(index.setdefault(i * size + j, len(index)))
                    terms.append(number)
                    weights.append(row_weight * col_weight)
        positions = np.array(list(index), dtype=np.intp)
        self.rows: Ints = positions // max(size, 1)
        self.cols: Ints = positions - self.rows * size
        self.g: Floats = np.array([t.g for t in system.terms], dtype=float)
        self.c: Floats = np.array([t.c for t in system.terms], dtype=float)
        if not (np.isfinite(self.g).all() and np.isfinite(self.c).all()):
            raise ValueError("a coefficient of a term is not finite")
        self.functions = {k: t.f for k, t in enumerate(system.terms) if t.f is not None}
        """Output of the system's functions by the term that has one."""
        self.entry_of, self.term_of = entries, terms
        """Entry and term of every product of a row's and a column's weight, in the order of the terms."""
        entry_of, term_of = np.array(entries, dtype=np.intp), np.array(terms, dtype=np.intp)
        weight_of = np.array(weights, dtype=float)
        self.entry_g = np.bincount(entry_of, weight_of * self.g[term_of], minlength=len(index))
        self.entry_c = np.bincount(entry_of, weight_of * self.c[term_of], minlength=len(index))
        self.function_shares: Shares = (
            [share for share in zip(entries, terms, weights, strict=True) if share[1] in self.functions]
            if self.functions
            else []
        )

    @cached_property
    def taking(self) -> Any:
        """(n_terms x size), forms cols·x of every term: a branch's current comes from the difference of its
        node voltages.
        """
        taken = [(t, k, w) for t, weights in enumerate(self.term_cols) for k, w in weights]
        return compressed(*_columns(taken), (len(self.g), self.size))

    @cached_property
    def differences(self) -> tuple[list[Weights], list[int]]:
        """What terms take that is no single unknown, each once; and by term, where what it takes stands in
        the unknowns followed by those."""
        places: dict[Weights, int] = {}
        at = [
            weights[0][0]
            if len(weights) == 1 and weights[0][1] == 1.0
            else places.setdefault(weights, self.size + len(places))
            for weights in self.term_cols
        ]
        return list(places), at

    @cached_property
    def given(self) -> tuple[Ints, Ints, Floats]:
        """(equation, term, weight) of everything that terms give to equations, in the order of the terms."""
        triples = [(k, t, w) for t, weights in enumerate(self.term_rows) for k, w in weights]
        equations, terms, weights = zip(*triples, strict=True) if triples else ((), (), ())
        return np.array(equations, np.intp), np.array(terms, np.intp), np.array(weights, float)

    @cached_property
    def spoils(self) -> Ints:
        """A number from 0 to 6 for everything in `given`, see `Giving`.

        No two of one equation are alike (while there are seven at most): alike, they would only scale it. Nor
        are the two of one term: alike, they would only change the value of its part, and what it carries
        through a floating piece of network would still balance.
        """
        equations, terms, _ = self.given
        taken = [0] * self.size
        result: list[int] = []
        last, met = -1, 0
        for equation, term in zip(equations.tolist(), terms.tolist(), strict=True):
            if term != last:
                last, met = term, 0
            avoided = taken[equation] | met
            if avoided == _ALL:
                avoided = met if met != _ALL else 0
            number = (term * 0x9E3779B1 >> 12) % 7  # without rhyme: multiplicative hashing, Knuth 1973
            while avoided >> number & 1:
                number = (number + 3) % 7
            taken[equation] |= 1 << number
            met |= 1 << number
            result.append(number)
        return np.array(result, dtype=np.intp)

    @cached_property
    def constants(self) -> dict[int, float]:
        """Entries that do not depend on s."""
        varying = {entry for entry, _, _ in self.function_shares}
        numbers = self.entry_g.tolist()
        return {k: numbers[k] for k in np.flatnonzero(self.entry_c == 0).tolist() if k not in varying}

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
        self._linear(np.stack((self.entry_g, self.entry_c), axis=1), s, entries)
        for entry, term, weight in self.function_shares:
            entries[entry] += values[term] * weight
        return entries

    def varying(self, s: Complexes, values: dict[int, Any], out: Complexes) -> None:
        """`matrix` without the rows of `constants`, in the order of `varying_entries`."""
        entries, coefficients, shares = self._varying
        self._linear(coefficients, s, out[: len(entries)])
        for row, term, weight in shares:
            out[row] += values[term] * weight

    @property
    def varying_entries(self) -> list[int]:
        return self._varying[0]

    @cached_property
    def _varying(self) -> tuple[list[int], Floats, Shares]:
        entries = [k for k in range(len(self.rows)) if k not in self.constants]
        row_of = {entry: row for row, entry in enumerate(entries)}
        shares = [(row_of[entry], term, weight) for entry, term, weight in self.function_shares]
        return entries, np.stack((self.entry_g[entries], self.entry_c[entries]), axis=1), shares

    @staticmethod
    def _linear(coefficients: Floats, s: Complexes, out: Complexes) -> None:
        """g + s c for every row (g, c)."""
        basis = np.ones((2, len(s)), dtype=complex)
        basis[1] = s
        np.matmul(coefficients, basis.view(float), out=out.view(float))

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
        # One weight at a time: their product in doubles is rounded.
        for entry, term, (row_weight, col_weight) in zip(self.entry_of, self.term_of, products, strict=True):
            result[entry] = result[entry] + coefficients[term] * row_weight * col_weight
        return result


class Giving:
    """What equations lack, b - A x, from every term's drop (cols·x), one product by s an equation, each
    summand off by up to three roundings.

    They are off on purpose, each by its own number. Currents that cancel in an equation leave a remainder
    that is rounded, and sums like to come out as zero just where the remainder decides about the solution: a
    correction computed from them would say that all is well. With these the correction shows what roundings
    can do. A second correction needs other numbers: with the same it would settle on the spoilt system.
    """

    def __init__(self, pattern: Pattern, place: Ints) -> None:
        equations, terms, weights = pattern.given
        rows = place[equations]
        differences, at = pattern.differences
        columns = np.array(at, dtype=np.intp)[terms]
        constant, linear = pattern.g[terms], pattern.c[terms]
        # Rows of the product: what is constant by equation, then what goes with s where there is any.
        self._size = size = pattern.size
        follows = np.zeros(size, dtype=bool)
        follows[rows[linear != 0]] = True
        self._followed = np.flatnonzero(follows).tolist()
        behind = size - 1 + np.cumsum(follows)
        self._summands = (
            np.concatenate((rows, behind[rows])),
            np.concatenate((columns, columns)),
            np.concatenate((-weights * constant, -weights * linear)),
            (size + len(self._followed), size + len(differences)),
        )
        self._spoils = np.concatenate((pattern.spoils, pattern.spoils))
        # (row, column, term, weight, number that spoils it)
        self._function = (
            [
                share
                for share in zip(
                    rows.tolist(),
                    columns.tolist(),
                    terms.tolist(),
                    weights.tolist(),
                    pattern.spoils.tolist(),
                    strict=True,
                )
                if share[2] in pattern.functions
            ]
            if pattern.functions
            else []
        )

    @cached_property
    def _first(self) -> Any:
        return self._matrix(_STRIDES[0])

    @cached_property
    def _second(self) -> Any:
        return self._matrix(_STRIDES[1])

    def _matrix(self, stride: int) -> Any:
        rows, columns, values, shape = self._summands
        return compressed(rows, columns, values * _spoilt(self._spoils, stride), shape)

    def remainder(
        self, drops: Complexes, s: Complexes, values: dict[int, Any], again: bool = False
    ) -> Complexes:
        """-A x, (size, n_points), from the unknowns followed by `Pattern.differences` of them.

        `again`: for the second correction.
        """
        total = product(self._second if again else self._first, drops)
        for row, followed in enumerate(self._followed, self._size):
            at, with_s = total[followed], total[row]
            np.multiply(with_s, s, with_s)
            np.add(at, with_s, at)
        stride = _STRIDES[again]
        for row, column, term, weight, spoil in self._function:
            total[row] -= drops[column] * values[term] * (weight * _spoilt(spoil, stride))
        return total[: self._size]


def take_differences(differences: list[Weights], drops: Sequence[Complexes]) -> None:
    """Fill what stands behind the unknowns in `drops`, see `Pattern.differences`."""
    behind = len(drops) - len(differences)
    for at, weights in zip(drops[behind:], differences, strict=True):
        if len(weights) == 2 and weights[0][1] == -weights[1][1] == 1.0:
            np.subtract(drops[weights[0][0]], drops[weights[1][0]], at)
        elif len(weights) == 2 and weights[1][1] == -weights[0][1] == 1.0:
            np.subtract(drops[weights[1][0]], drops[weights[0][0]], at)
        else:
            at[:] = 0
            for unknown, weight in weights:
                at += drops[unknown] * weight


def _spoilt(numbers: Any, stride: int) -> Any:
    """Factors off by up to three roundings. Numbers that differ give factors that do, apart by something else
    for another stride (modulo 7)."""
    return 1 + (stride * numbers % 7 - 3) * _EPSILON


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
            (
                np.array([k for k, _, _ in level]),
                np.array([t for _, t, _ in level]),
                np.array([[w] for _, _, w in level], dtype=float),
            )
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
    if len(pairs) == 1 or (len(pairs) == 2 and pairs[0][0] != pairs[1][0]):
        (first, weight), (last, other) = pairs[0], pairs[-1]
        if weight and other and 0 <= first < size and 0 <= last < size:
            return pairs
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
