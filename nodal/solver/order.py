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
    values = list(values)
    sizes: dict[int, list[Any]] = {}  # magnitudes of slots that were looked at
    by_row: list[dict[int, int]] = [{} for _ in range(size)]
    by_col: list[dict[int, int]] = [{} for _ in range(size)]
    for slot, (i, j) in enumerate(zip(rows, cols, strict=True)):
        by_row[i][j] = slot
        by_col[j][i] = slot
    lines = (by_row, by_col)
    open_lines = ([True] * size, [True] * size)
    heap = [(len(line), kind, k) for kind in (0, 1) for k, line in enumerate(lines[kind]) if line]
    heapq.heapify(heap)
    flat: tuple[list[int], ...] = tuple([] for _ in range(10))
    pivot, row, col, lower, lower_row, upper, upper_col, target, left, top = flat
    starts: tuple[list[int], list[int], list[int]] = ([0], [0], [0])

    def order() -> Order:
        arrays = [np.array(a, dtype=np.int32) for a in (
            pivot, row, col, starts[0], lower, lower_row, starts[1], upper, upper_col, starts[2],
            target, left, top,
        )]
        return Order(size, len(values), *arrays)

    for _ in range(size):
        found = _choose(heap, lines, open_lines, values, sizes)
        if found is None:
            raise NoPivot(order(), *([k for k in range(size) if open_lines[kind][k]] for kind in (0, 1)))
        p, q = found
        slot = by_row[p].pop(q)
        del by_col[q][p]
        pivot.append(slot)
        row.append(p)
        col.append(q)
        below, right = by_col[q], by_row[p]
        divisors = values[slot]
        for j, top_slot in right.items():
            upper.append(top_slot)
            upper_col.append(j)
            del by_col[j][p]
        for i, left_slot in below.items():
            lower.append(left_slot)
            lower_row.append(i)
            line = by_row[i]
            del line[q]
            # A sample at which the pivot is zero drops out: the run there finds out and plans again.
            factors = [v / d if d else v * 0 for v, d in zip(values[left_slot], divisors, strict=True)]
            for j, top_slot in right.items():
                at = line.get(j)
                if at is None:
                    line[j] = by_col[j][i] = at = len(values)
                    values.append([-f * u for f, u in zip(factors, values[top_slot], strict=True)])
                else:
                    old = values[at]
                    new = [v - f * u for v, f, u in zip(old, factors, values[top_slot], strict=True)]
                    if flush:
                        new = [n if abs(n) > flush * abs(v) else n * 0 for n, v in zip(new, old, strict=True)]
                    values[at] = new
                    sizes.pop(at, None)
                target.append(at)
                left.append(left_slot)
                top.append(top_slot)
        open_lines[0][p] = open_lines[1][q] = False
        for i in below:
            heapq.heappush(heap, (len(by_row[i]), 0, i))
        for j in right:
            heapq.heappush(heap, (len(by_col[j]), 1, j))
        for start, array in zip(starts, (lower, upper, target), strict=True):
            start.append(len(array))
    return order()


def _choose(
    heap: list[tuple[int, int, int]], lines: tuple[list[dict[int, int]], list[dict[int, int]]],
    open_lines: tuple[list[bool], list[bool]], values: Sequence[list[Any]], sizes: dict[int, list[Any]],
) -> tuple[int, int] | None:
    """The next pivot (row, col): the cheapest acceptable, else the largest; None where all is zero."""
    best: tuple[int, float, int, int] | None = None
    fallback: tuple[float, int, int] | None = None
    looked_at: list[tuple[int, int, int]] = []
    while heap:
        count, kind, k = item = heapq.heappop(heap)
        if not open_lines[kind][k] or len(lines[kind][k]) != count or (looked_at and item == looked_at[-1]):
            continue
        enough = len(looked_at) >= _SEARCHED_IN_NEED and fallback is not None and fallback[0] > 0
        if enough or (best is not None and (best[0] <= (count - 1) ** 2 or len(looked_at) >= _SEARCHED)):
            heapq.heappush(heap, item)
            break
        looked_at.append(item)
        line = lines[kind][k]
        magnitudes = []
        for slot in line.values():
            if slot not in sizes:
                sizes[slot] = [abs(v) for v in values[slot]]
            magnitudes.append(sizes[slot])
        peaks = [max(at_sample) for at_sample in zip(*magnitudes, strict=True)]
        for other, at_samples in zip(line, magnitudes, strict=True):
            share = min([m / p if p else 0.0 for m, p in zip(at_samples, peaks, strict=True)])
            i, j = (k, other) if kind == 0 else (other, k)
            if share >= THRESHOLD:
                cost = (len(lines[0][i]) - 1) * (len(lines[1][j]) - 1)
                if best is None or (cost, -share) < best[:2]:
                    best = (cost, -share, i, j)
            elif any(at_samples) and (fallback is None or share > fallback[0]):
                fallback = (share, i, j)
    for item in looked_at:
        heapq.heappush(heap, item)
    if best is not None:
        return best[2], best[3]
    return fallback[1:] if fallback is not None else None
