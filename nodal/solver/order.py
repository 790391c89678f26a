"""The elimination order: chosen by numbers at a few frequencies, kept as flat integer arrays.

Pivots are chosen for little fill (Markowitz 1957) among those that pass a threshold test at every sample.
Matrix entries are slots; the slots of L and U are those of the entries they replace, fill takes new ones.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

Indices = NDArray[np.int32]

THRESHOLD = 1e-2
"""A pivot is at least this part of the largest entry of its column or row, at every sample."""

_SEARCHED = 4
"""Rows and columns looked at for a pivot, once an acceptable one is known (Zlatev 1980)."""

_SEARCHED_IN_NEED = 100
"""Where none is acceptable: enough looking, take the numerically best."""


class NoPivot(Exception):
    """Elimination stopped: every entry that is left is zero. Carries what was done so far."""

    def __init__(self, order: Order, rows: list[int], cols: list[int]) -> None:
        super().__init__("every remaining entry is zero")
        self.order = order
        self.rows = rows
        self.cols = cols


@dataclass(frozen=True)
class Order:
    """Flat arrays of one elimination. Step k pivots on slot `pivot[k]`, at equation `row[k]` and unknown
    `col[k]`.

    Step k divides the slots `lower[lower_start[k]:lower_start[k+1]]` (equations `lower_row`) by the pivot,
    has the slots `upper[...]` (unknowns `upper_col`) to its right, and updates
    slot `target` -= slot `left` * slot `top` for `update_start[k]` to `update_start[k+1]`.
    """

    size: int
    slots: int
    pivot: Indices
    row: Indices
    col: Indices
    lower_start: Indices
    lower: Indices
    lower_row: Indices
    upper_start: Indices
    upper: Indices
    upper_col: Indices
    update_start: Indices
    target: Indices
    left: Indices
    top: Indices

    @property
    def multiply_adds(self) -> int:
        """Per point, of one factorisation."""
        return len(self.target) + len(self.lower)

    @cached_property
    def place(self) -> NDArray[np.intp]:
        """Where right-hand sides keep each equation: under the unknown that its pivot gives."""
        result = np.empty(self.size, dtype=np.intp)
        result[self.row] = self.col
        return result


def eliminate(
    size: int, rows: Sequence[int], cols: Sequence[int], values: Sequence[list[Any]], flush: Any = 0.0
) -> Order:
    """Choose the order from `values[entry]`, the entry's numbers at each sample (complex, or of many digits).

    What cancels to below `flush` of itself counts as zero. Raises NoPivot. Work grows with the entries that
    take part, not with `size` squared.
    """
    # Sample by sample: numbers and magnitudes of every slot.
    samples = [list(numbers) for numbers in zip(*values, strict=True)]
    sizes = [[abs(v) for v in numbers] for numbers in samples]
    slots = len(values)
    by_row: list[dict[int, int]] = [{} for _ in range(size)]
    by_col: list[dict[int, int]] = [{} for _ in range(size)]
    for slot, (i, j) in enumerate(zip(rows, cols, strict=True)):
        by_row[i][j] = slot
        by_col[j][i] = slot
    lines = (by_row, by_col)
    open_lines = ([True] * size, [True] * size)
    known: tuple[dict[int, list[Any]], dict[int, list[Any]]] = ({}, {})
    heap = [(len(line), kind, k) for kind in (0, 1) for k, line in enumerate(lines[kind]) if line]
    heapq.heapify(heap)
    flat: tuple[list[int], ...] = tuple([] for _ in range(10))
    pivot, row, col, lower, lower_row, upper, upper_col, target, left, top = flat
    starts: tuple[list[int], list[int], list[int]] = ([0], [0], [0])

    def order() -> Order:
        arrays = [
            np.array(a, dtype=np.int32)
            for a in (
                pivot,
                row,
                col,
                starts[0],
                lower,
                lower_row,
                starts[1],
                upper,
                upper_col,
                starts[2],
                target,
                left,
                top,
            )
        ]
        return Order(size, slots, *arrays)

    for _ in range(size):
        found = _choose(heap, lines, open_lines, sizes, known)
        if found is None:
            raise NoPivot(order(), *([k for k in range(size) if open_lines[kind][k]] for kind in (0, 1)))
        p, q = found
        slot = by_row[p].pop(q)
        del by_col[q][p]
        pivot.append(slot)
        row.append(p)
        col.append(q)
        below, right = by_col[q], by_row[p]
        for j, top_slot in right.items():
            upper.append(top_slot)
            upper_col.append(j)
            del by_col[j][p]
        before = slots
        targets: list[int] = []
        for i, left_slot in below.items():
            lower.append(left_slot)
            lower_row.append(i)
            line = by_row[i]
            del line[q]
            for j, top_slot in right.items():
                at = line.get(j)
                if at is None:
                    line[j] = by_col[j][i] = at = slots
                    slots += 1
                targets.append(at)
                left.append(left_slot)
                top.append(top_slot)
        target += targets
        if targets:
            below_slots, right_slots = list(below.values()), list(right.values())
            fill = [0] * (slots - before)
            for numbers, magnitudes in zip(samples, sizes, strict=True):
                numbers += fill
                magnitudes += fill
                # A sample at which the pivot is zero drops out: the run there finds out and plans again.
                if numbers[slot]:
                    _update(numbers, magnitudes, slot, below_slots, right_slots, targets, flush)
        open_lines[0][p] = open_lines[1][q] = False
        for kind, touched in ((0, below), (1, right)):
            for k in touched:
                known[kind].pop(k, None)
                if lines[kind][k]:
                    heapq.heappush(heap, (len(lines[kind][k]), kind, k))
        for start, array in zip(starts, (lower, upper, target), strict=True):
            start.append(len(array))
    return order()


def _update(
    numbers: list[Any],
    magnitudes: list[Any],
    pivot: int,
    lower: list[int],
    upper: list[int],
    targets: list[int],
    flush: Any,
) -> None:
    """One step at one sample; `targets` row by row."""
    divisor = numbers[pivot]
    factors = [numbers[slot] / divisor for slot in lower]
    tops = [numbers[slot] for slot in upper]
    changes = [factor * top for factor in factors for top in tops]
    for at, change in zip(targets, changes, strict=True):
        numbers[at] = new = numbers[at] - change
        size = abs(new)
        if flush and size <= flush * magnitudes[at]:
            numbers[at], size = new * 0, size * 0
        magnitudes[at] = size


def _choose(
    heap: list[tuple[int, int, int]],
    lines: tuple[list[dict[int, int]], list[dict[int, int]]],
    open_lines: tuple[list[bool], list[bool]],
    sizes: list[list[Any]],
    known: tuple[dict[int, list[Any]], dict[int, list[Any]]],
) -> tuple[int, int] | None:
    """The next pivot (row, col): the cheapest acceptable, else the largest; None where all is zero.

    `known`: shares of lines that have not changed since they were looked at.
    """
    best: tuple[int, int] | None = None
    best_cost, best_share = 0, 0.0
    fallback: tuple[int, int] | None = None
    fallback_share = 0.0
    looked_at: list[tuple[int, int, int]] = []
    while heap:
        item = heapq.heappop(heap)
        count, kind, k = item
        line = lines[kind][k]
        if not open_lines[kind][k] or len(line) != count or (looked_at and item == looked_at[-1]):
            continue
        enough = len(looked_at) >= _SEARCHED_IN_NEED and fallback_share > 0
        if enough or (best is not None and (best_cost <= (count - 1) ** 2 or len(looked_at) >= _SEARCHED)):
            heapq.heappush(heap, item)
            break
        looked_at.append(item)
        shares = known[kind].get(k)
        if shares is None:
            shares = known[kind][k] = _shares(list(line.values()), sizes)
        crossing = lines[1 - kind]
        for other, share in zip(line, shares, strict=True):
            if share >= THRESHOLD:
                cost = (count - 1) * (len(crossing[other]) - 1)
                if best is None or cost < best_cost or (cost == best_cost and share > best_share):
                    best, best_cost, best_share = (k, other), cost, share
                    if kind:
                        best = other, k
            elif (
                best is None
                and (fallback is None or share > fallback_share)
                and any(at_sample[line[other]] for at_sample in sizes)
            ):
                fallback, fallback_share = ((other, k) if kind else (k, other)), share
    for item in looked_at:
        heapq.heappush(heap, item)
    return fallback if best is None else best


def _shares(slots: list[int], sizes: list[list[Any]]) -> list[Any]:
    """Of each slot of a line: its part of the line's largest, at the sample where that is least."""
    if len(slots) == 1:
        return [float(all(at_sample[slots[0]] for at_sample in sizes))]
    result: list[Any] = []
    for at_sample in sizes:
        magnitudes = [at_sample[slot] for slot in slots]
        peak = max(magnitudes)
        parts = [m / peak for m in magnitudes] if peak else [0.0] * len(slots)
        result = list(map(min, result, parts)) if result else parts
    return result
