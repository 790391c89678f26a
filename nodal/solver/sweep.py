"""Solve A(s) x = b at many points, for chosen outputs, with an error estimate for each.

After every block the residual is formed term by term and the correction solved with the same factors: the
relative correction of an output is its error estimate. A point that stays above TOLERANCE is refined further,
planned again at its own frequency, solved with many digits; what is still above is reported with its
estimate.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.exact import Exact
from nodal.solver.matrix import System
from nodal.solver.pattern import Complexes, Floats, product, take_differences
from nodal.solver.plan import Plan, Singular, exact_order, generic, make_plan

Source = Mapping[int, Any]
"""Right-hand side: {equation: number, or array over the points}."""
Output = Mapping[int, float]
"""Linear functional of the solution: {unknown: weight}."""

TOLERANCE = 1e-11
"""Largest relative correction of an output that is taken as settled."""

_EPSILON = float(np.finfo(float).eps)

_ROUNDING = 16 * _EPSILON
"""A correction below this is noise."""

# Once an allocation of this size was freed, the C library serves blocks from a heap that it keeps, not from
# pages that must be cleared anew each time; the pages of this one are never touched.
np.empty(1 << 24, dtype=np.uint8)

_STEPS = 8
_BLOCK_BYTES = 1 << 27
_BLOCK_POINTS = (64, 1024)
_DIGITS = (50, 100, 200)
_MARGIN = 256.0
"""How much more than the end of its digits a pair is trusted with."""


@dataclass(frozen=True, slots=True)
class Solution:
    """`values` and `error`: (n_sources, n_outputs, n_points), complex and the estimated relative error.

    `error` is 0 for an output that is exactly zero and infinite where there is no value. `refined`:
    (n_points,), true where one correction step was not enough; `replanned`, `extended`: how many points were
    planned again, and how many were solved with many digits.
    """

    values: Complexes
    error: Floats
    refined: NDArray[np.bool_]
    replanned: int = 0
    extended: int = 0


def solve(
    system: System,
    s: ArrayLike,
    sources: Sequence[Source],
    outputs: Sequence[Output],
    plan: Plan | None = None,
) -> Solution:
    """Outputs of A(s) x = b for every source at the points s (rad/s, complex, nonzero, shape (n_points,)).

    Memory is bounded whatever the number of points: only the outputs are kept. `plan` may come from other
    frequencies or other values of the same structure (ValueError if not). Raises Singular where the system
    has no unique solution at any frequency; where only one point is without, its values and errors are
    infinite.
    """
    return _Run(system, _points(s), sources, outputs, plan, slopes=False).solution(0)


def derivative(
    system: System,
    s: ArrayLike,
    sources: Sequence[Source],
    outputs: Sequence[Output],
    plan: Plan | None = None,
) -> tuple[Solution, Solution]:
    """(values, d/ds of the values) as `solve`, from dx/ds = -A⁻¹ (dA/ds) x; sources do not depend on s.

    The error of a slope is relative to the larger of the slope and of |value/s|.
    """
    run = _Run(system, _points(s), sources, outputs, plan, slopes=True)
    return run.solution(0), run.solution(1)


def plan_for(system: System, s: ArrayLike) -> Plan:
    """A plan from samples spread over the points s."""
    points = _points(s)
    levels = np.log(np.abs(points))
    ends = int(levels.argmin()), int(levels.argmax())
    middle = int(np.abs(levels - levels[list(ends)].mean()).argmin())
    return make_plan(system, points[sorted({*ends, middle})])


def _points(s: ArrayLike) -> Complexes:
    points = np.atleast_1d(np.asarray(s, dtype=complex))
    if points.ndim != 1:
        raise ValueError("s must have shape (n_points,)")
    if not np.isfinite(points).all() or (points == 0).any():
        raise ValueError("s must be finite and not zero: zero frequency is a limit")
    return points


class _Run:
    """One call of `solve` or `derivative`: its results, and the ladder of means that fills them."""

    def __init__(
        self,
        system: System,
        s: Complexes,
        sources: Sequence[Source],
        outputs: Sequence[Output],
        plan: Plan | None,
        slopes: bool,
    ) -> None:
        # A difference times ten is taken times ten at the very end: ten times each voltage would round before
        # they cancel, and no correction would ever show it.
        self.scale: Floats = np.array([max(map(abs, o.values()), default=1.0) or 1.0 for o in outputs])
        outputs = [{k: w / size for k, w in o.items()} for o, size in zip(outputs, self.scale, strict=True)]
        self.s, self.sources, self.outputs, self.slopes = s, sources, outputs, slopes
        shape = (2 if slopes else 1, len(sources), len(outputs), len(s))
        self.values: Complexes = np.zeros(shape, dtype=complex)
        self.error: Floats = np.full(shape, np.inf)
        self.refined: NDArray[np.bool_] = np.zeros(len(s), dtype=bool)
        self.replanned = self.extended = 0
        if self.values.size == 0:
            return
        plan = plan_for(system, s) if plan is None else plan.fitted(system)
        self._pass(plan, np.arange(len(s)), careful=slopes)
        unsettled = self._unsettled()
        self.refined[unsettled] = True
        if len(unsettled) and not slopes:
            self._pass(plan, unsettled, careful=True)
            unsettled = self._unsettled()
        self.replanned = len(unsettled)
        for group in self._by_frequency(unsettled):
            self._pass(plan_for(system, s[group]), group, careful=True)
        unsettled = self._unsettled()
        self.extended = len(unsettled)
        for point in unsettled:
            if (self.error[..., point] > TOLERANCE).any():
                self._extend(plan, int(point))
                self._settle_zeros(plan, int(point))

    def solution(self, which: int) -> Solution:
        values = self.values[which].copy()
        values.real *= self.scale[:, None]  # part by part: infinite times complex one is not a number
        values.imag *= self.scale[:, None]
        return Solution(values, self.error[which], self.refined, self.replanned, self.extended)

    def _unsettled(self) -> NDArray[np.intp]:
        return np.nonzero((self.error > TOLERANCE).any(axis=(0, 1, 2)))[0]

    def _by_frequency(self, points: NDArray[np.intp]) -> list[NDArray[np.intp]]:
        """Groups that a plan of their own may serve, none wider than two decades."""
        decade = np.floor(np.log10(np.abs(self.s[points])) / 2)
        return [points[decade == d] for d in np.unique(decade)]

    def _source(self, source: Source, points: Any) -> dict[int, Any]:
        return {k: v if np.ndim(v) == 0 else np.asarray(v)[points] for k, v in source.items()}

    def _pass(self, plan: Plan, points: NDArray[np.intp], careful: bool) -> None:
        order, pattern = plan.order, plan.pattern
        rows = len(plan.array_slots) + len(pattern.differences[0]) + 4 * order.size
        per_block = int(np.clip(_BLOCK_BYTES // (16 * rows), *_BLOCK_POINTS))
        blocks = -(-len(points) // per_block)
        scratch = _Scratch()
        # Divisions by zero and overflow end as infinite estimates, which send the point down the ladder.
        with np.errstate(all="ignore"):
            for chosen in np.array_split(points, blocks):
                block = _Block(plan, self.s[chosen], scratch)
                for k, source in enumerate(self.sources):
                    at = self._source(source, chosen)
                    if careful:
                        results = block.careful(block.right_side(at), self.outputs, self.slopes)
                    else:
                        values, error, first = block.quick(at, self.outputs)
                        self.refined[chosen] |= (first > TOLERANCE).any(axis=0)
                        results = [(values, error)]
                    for which, (values, error) in enumerate(results):
                        self._keep(which, k, chosen, values, error)

    def _keep(
        self, which: int, source: int, points: NDArray[np.intp], values: Complexes, error: Floats
    ) -> None:
        error = np.where(np.isfinite(values) & np.isfinite(error), error, np.inf)
        old = self.error[which, source][:, points]
        better = (error < old) | np.isinf(old)
        kept = self.values[which, source]
        kept[:, points] = np.where(better, values, kept[:, points])
        self.error[which, source][:, points] = np.where(better, error, old)

    def _extend(self, plan: Plan, point: int) -> None:
        before: list[list[list[complex]]] | None = None  # by source, then values or slopes
        for attempt, digits in enumerate(_DIGITS):
            try:
                order = None if attempt else plan.order
                exact = Exact(plan.pattern, complex(self.s[point]), MpArithmetic(digits), order)
            except Singular:
                exact_order(plan.pattern, generic(self.s[point]))  # raises where no frequency has a solution
                self.values[:, :, :, point] = np.inf
                self.error[:, :, :, point] = np.inf
                return
            found: list[list[list[complex]]] = []
            for k, source in enumerate(self.sources):
                results = self._exact_results(exact, self._source(source, point))
                found.append([values for values, _ in results])
                for which, (values, error) in enumerate(results):
                    if before is not None:
                        _settle_vanished(values, error, before[k][which])
                    self.values[which, k, :, point] = values
                    self.error[which, k, :, point] = error
            if (self.error[..., point] <= TOLERANCE).all():
                return
            before = found

    def _settle_zeros(self, plan: Plan, point: int) -> None:
        """An output that is exactly zero at `point` and at a frequency with nothing special about it is zero
        at every one: no other point needs many digits to tell."""
        for k, source in enumerate(self.sources):
            for j, output in enumerate(self.outputs):
                waiting = (self.error[:, k, j] > TOLERANCE).any(axis=0)
                if (self.values[:, k, j, point] != 0).any() or not waiting.any():
                    continue
                if any(np.ndim(value) for value in source.values()):
                    continue
                elsewhere = _Run(
                    plan.pattern.system, np.array([generic(self.s[point])]), [source], [output], plan, False
                )
                if elsewhere.values[0, 0, 0, 0] == 0 and elsewhere.error[0, 0, 0, 0] == 0:
                    self.values[:, k, j], self.error[:, k, j] = 0.0, 0.0

    def _exact_results(self, exact: Exact, source: Source) -> list[tuple[list[complex], list[float]]]:
        """(values, errors) of all outputs for one source, and those of the slopes where asked for."""
        x, correction = exact.solve(source)
        values = [exact.output(o, x) for o in self.outputs]
        errors = [
            _relative(exact.output(o, correction), v, v) for o, v in zip(self.outputs, values, strict=True)
        ]
        results = [([complex(v) for v in values], errors)]
        if self.slopes:
            slopes = exact.pattern.exact_slopes(exact.s, exact.arithmetic)
            b = exact.spread([-k * d for k, d in zip(slopes, exact.drops(x), strict=True)])
            x, correction = exact.solve_all(b)
            slope_values = [exact.output(o, x) for o in self.outputs]
            errors = [
                _relative(exact.output(o, correction), d, v / exact.s)
                for o, d, v in zip(self.outputs, slope_values, values, strict=True)
            ]
            results.append(([complex(v) for v in slope_values], errors))
        return results


def _relative(change: Any, value: Any, other: Any) -> float:
    if change == 0:
        return 0.0
    scale = max(abs(value), abs(other))
    return float(abs(change) / scale) if scale else float("inf")


def _settle_vanished(values: list[complex], errors: list[float], before: list[complex]) -> None:
    """What shrank with the digits it is computed with is rounding around an exact zero.

    `before`: with fifty digits fewer at least. Compared with doubles it might be small, and no zero.
    """
    for k, error in enumerate(errors):
        if error > TOLERANCE and abs(values[k]) <= 1e-30 * abs(before[k]):
            values[k], errors[k] = 0j, 0.0


class _Scratch:
    """Arrays used again from block to block: fresh memory costs more than the arithmetic in it."""

    def __init__(self) -> None:
        self._kept: dict[str, Complexes] = {}

    def take(self, name: str, rows: int, points: int) -> Complexes:
        kept = self._kept.get(name)
        if kept is None or kept.size < rows * points:
            kept = self._kept[name] = np.empty(rows * points, dtype=complex)
        return kept[: rows * points].reshape(rows, points)


class _Block:
    """A(s) factored at a block of points."""

    def __init__(self, plan: Plan, s: Complexes, scratch: _Scratch) -> None:
        self.plan, self.s = plan, s
        self.functions = plan.pattern.function_values(s)
        self.scratch = scratch
        slots = scratch.take("slots", len(plan.array_slots), len(s))
        plan.pattern.varying(s, self.functions, slots)
        self.w: list[Any] = [None] * plan.order.slots
        for slot, array in zip(plan.array_slots, slots, strict=True):
            self.w[slot] = array
        self.spare = scratch.take("spare", 1, len(s))[0]
        plan.folded.factor(self.w, self.spare)

    def quick(self, source: Source, outputs: Sequence[Output]) -> tuple[Complexes, Floats, Floats]:
        """One solution and one correction, the latter for the outputs only, one more where that does not
        settle them.

        Returns (values, error, error of the first step).
        """
        kernel, order = self.plan.folded, self.plan.order
        places = {int(order.place[k]): v for k, v in source.items()}
        wanted = frozenset(k for o in outputs for k in o)
        differences = self.plan.pattern.differences[0]
        drops = self.scratch.take("x", order.size + len(differences), len(self.s))
        x = drops[: order.size]
        x[:] = 0
        for place, value in places.items():
            x[place] = value
        kernel.solve(self.w, list(x), self.spare, kernel.passes(frozenset(places)))
        take_differences(differences, list(drops))
        first = self.plan.giving.remainder(drops, self.s, self.functions)
        for place, value in places.items():
            first[place] += value
        kernel.solve(self.w, list(first), self.spare, kernel.passes(unknowns=wanted))
        change = self._outputs(outputs, first)
        values = self._outputs(outputs, x)
        error = _ratio(change, values + change, self._blur(outputs, first))
        # What `Giving` puts off by a few roundings says how far a value may be off, not by how much it is.
        values += np.where(error > _ROUNDING, change, 0)
        unsettled = (error > TOLERANCE).any(axis=0)
        if not unsettled.any():
            return values, error, error
        # What lies between the first and the last unsettled point is corrected along: views, no copies.
        among = np.flatnonzero(unsettled)
        part = slice(int(among[0]), int(among[-1]) + 1)
        w, spare = [None if a is None else a[part] for a in self.w], self.spare[part]
        functions = {k: v if np.ndim(v) == 0 else v[part] for k, v in self.functions.items()}
        more = self.scratch.take("more", len(drops), len(spare))
        more[: order.size] = first[:, part]
        kernel.solve(w, list(more[: order.size]), spare, kernel.passes(unknowns=wanted, rest=True))
        take_differences(differences, list(more))
        more += drops[:, part]
        second = self.plan.giving.remainder(more, self.s[part], functions, again=True)
        for place, value in places.items():
            second[place] += value if np.ndim(value) == 0 else value[part]
        kernel.solve(w, list(second), spare, kernel.passes(unknowns=wanted))
        change = self._outputs(outputs, second)
        values[:, part] += change
        last = error.copy()
        last[:, part] = _ratio(change, values[:, part], self._blur(outputs, second))
        return values, last, error

    def right_side(self, source: Source) -> Complexes:
        """Ordered as the kernel wants it."""
        order = self.plan.order
        b = np.zeros((order.size, len(self.s)), dtype=complex)
        for k, value in source.items():
            b[order.place[k]] = value
        return b

    def careful(
        self, b: Complexes, outputs: Sequence[Output], slopes: bool
    ) -> list[tuple[Complexes, Floats]]:
        """Corrections for as long as they help; (values, errors), and those of the slopes."""
        x, small, values, error = self._refine(b, outputs, None)
        results = [(values, error)]
        if slopes:
            pattern = self.plan.pattern
            slopes_of_terms = np.repeat(pattern.c[:, None], len(self.s), axis=1).astype(complex)
            for term, value in pattern.function_slopes(self.s).items():
                slopes_of_terms[term] += value
            b = self.plan.balance.remainder(np.zeros_like(b), slopes_of_terms * self._drops(x, small))
            floor = np.abs(values / self.s)
            _, _, slope, error = self._refine(b, outputs, floor)
            results.append((slope, error))
        return results

    def _refine(
        self, b: Complexes, outputs: Sequence[Output], floor: Floats | None
    ) -> tuple[Complexes, Complexes, Complexes, Floats]:
        """(x, small, outputs, their errors); x and small are kept apart for small differences.

        Where the first correction was not enough, two in a row must be: where even sums of twice the
        precision are rounding, some correction comes out small by chance.
        """
        kernel = self.plan.folded
        coefficients = self.plan.pattern.coefficients(self.s, self.functions)
        x = b.copy()
        kernel.solve(self.w, list(x), self.spare)
        small = np.zeros_like(x)
        change: Floats | None = None
        for _ in range(_STEPS):
            correction = self.plan.balance.remainder(b, coefficients * self._drops(x, small))
            kernel.solve(self.w, list(correction), self.spare)
            small += correction
            total = x + small
            small -= total - x
            x = total
            values = self._outputs(outputs, x) + self._outputs(outputs, small)
            scale = values if floor is None else np.maximum(np.abs(values), floor)
            # A difference far below both of its unknowns ends where the digits of their pairs do, and before:
            # the drops that make it end there too, and what they lose goes through the network.
            blur = self._blur(outputs, correction) + _MARGIN * self._blur(outputs, small)
            last, change = change, _ratio(self._outputs(outputs, correction), scale, blur)
            error = change if last is None else np.maximum(change, last)
            waiting = error > TOLERANCE
            if not waiting.any() or (last is not None and not (change[waiting] < 0.25 * last[waiting]).any()):
                break
        return x, small, values, error

    def _drops(self, x: Complexes, small: Complexes) -> Complexes:
        return product(self.plan.pattern.taking, x) + product(self.plan.pattern.taking, small)

    def _blur(self, outputs: Sequence[Output], correction: Complexes) -> Floats:
        """How far the change of an output may be off for the rounding of the corrections it is made of."""
        result = np.zeros((len(outputs), correction.shape[1]))
        for k, output in enumerate(outputs):
            for unknown, weight in output.items():
                result[k] += np.abs(correction[unknown]) * abs(_EPSILON * weight)
        return result

    def _outputs(self, outputs: Sequence[Output], x: Complexes) -> Complexes:
        result = np.zeros((len(outputs), x.shape[1]), dtype=complex)
        for k, output in enumerate(outputs):
            for unknown, weight in output.items():
                result[k] += x[unknown] * weight
        return result


def _ratio(change: Complexes, values: Any, blur: Floats) -> Floats:
    """(|change| + blur)/|values|, 0 where all is zero, infinite where it is not a number.

    A difference that stayed zero is not all: what it is made of may hide it in its rounding.
    """
    size = np.abs(change)
    size += blur
    result: Floats = np.divide(size, np.abs(values), out=np.zeros(size.shape), where=size != 0)
    result[np.isnan(result)] = np.inf
    return result
