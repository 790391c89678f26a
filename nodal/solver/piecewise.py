"""Functions of time as polynomials on panels, fine enough to stand for them: crossings, extremes and
integrals.

Panels are split until the Chebyshev coefficients of each have died out (Boyd 2001; Battles and Trefethen
2004), toward the places given as breaks, where the function may jump or bend, by quarters. Crossings and
extremes are then roots of polynomials (eigenvalues of the companion matrix), integrals are exact.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Curve = Callable[[Floats], Floats]
"""Values at times, same shape (n,); at a jump the value after it."""

NODES = 20
"""Points a panel."""

MOST_PANELS = 4000

_EPS = float(np.finfo(float).eps)


def _nodes(count: int) -> Floats:
    """Chebyshev points of the first kind: none of them at an end, where the function may jump."""
    return np.asarray(np.cos(np.pi * (np.arange(count) + 0.5) / count)[::-1], dtype=np.float64)


def _fit(count: int) -> Floats:
    """Coefficients from values at `_nodes`."""
    weights = np.where(np.arange(count) == 0, 1.0, 2.0) / count
    return np.asarray(chebyshev.chebvander(_nodes(count), count - 1).T * weights[:, None], dtype=np.float64)


_X, _FIT = _nodes(NODES), _fit(NODES)

_FIRST: Floats = np.array([0.0, 1 / 64, 1 / 16, 1 / 4, 1.0])
"""Panels that each piece between breaks starts with."""

_FEW = 25
"""Breaks that are so many are close enough to begin with one panel between each two."""

_CLOSE: Floats = np.asarray(0.25 ** np.arange(3, 24), dtype=np.float64)
"""Where in a panel behind a break it is looked for what is too quick for the panel's points."""
_CLOSE_TERMS: Floats = np.asarray(chebyshev.chebvander(2 * _CLOSE - 1, NODES - 1), dtype=np.float64)

_LOOK: Floats = np.asarray(-np.cos(np.pi * np.arange(4 * NODES + 1) / (4 * NODES)), dtype=np.float64)


@dataclass(frozen=True)
class Piecewise:
    """A function for `edges[0]` <= t <= `edges[-1]`; on panel k the Chebyshev series `coefficients[k]`.

    `edges` (m + 1,), `coefficients` (m, n). `left_out` is about the largest absolute error.
    """

    edges: Floats
    coefficients: Floats
    left_out: float = 0.0

    def __call__(self, times: Floats | float) -> Floats:
        """At an edge the value after it, at the last one the value before it."""
        t = np.asarray(times, dtype=np.float64)
        panel = self._panel(t.ravel())
        x = np.clip((t.ravel() - self._centre[panel]) / self._half[panel], -1.0, 1.0)
        values = chebyshev.chebval(x, self.coefficients[panel].T, tensor=False)
        return np.asarray(values, dtype=np.float64).reshape(t.shape)

    def _panel(self, t: Floats) -> NDArray[np.intp]:
        return np.clip(np.searchsorted(self.edges, t, side="right") - 1, 0, len(self.coefficients) - 1)

    @cached_property
    def _centre(self) -> Floats:
        return np.asarray((self.edges[1:] + self.edges[:-1]) / 2)

    @cached_property
    def _half(self) -> Floats:
        return np.asarray(np.diff(self.edges) / 2)

    @cached_property
    def _looks(self) -> Floats:
        """(m, some) values on every panel, its ends included."""
        return np.asarray(chebyshev.chebval(_LOOK, self.coefficients.T), dtype=np.float64)

    @cached_property
    def _slack(self) -> Floats:
        """(m,) how far a panel may go beyond its `_looks`."""
        looks = self._looks
        return np.asarray(0.01 * np.ptp(looks, axis=1) + 4 * _EPS * np.abs(looks).max(axis=1))

    def cut(self, start: float, end: float) -> Piecewise:
        """The part from `start` to `end`; ends that are no edges become edges."""
        inner = self.edges[(self.edges > start) & (self.edges < end)]
        edges = np.concatenate([[start], inner, [end]])
        centre = (edges[1:] + edges[:-1]) / 2
        panel = self._panel(centre)
        coefficients = self.coefficients[panel].copy()
        for k in {0, len(coefficients) - 1}:
            low, high = ((edges[k + j] - self._centre[panel[k]]) / self._half[panel[k]] for j in (0, 1))
            if low > -1.0 or high < 1.0:
                degree = self.coefficients.shape[1] - 1
                middle, half = (low + high) / 2, (high - low) / 2
                whole = self.coefficients[panel[k]]
                values = chebyshev.chebval(middle + half * _nodes(degree + 1), whole)
                coefficients[k] = values @ _fit(degree + 1).T
        return Piecewise(edges, coefficients, self.left_out)

    def plus(self, constant: float, slope: float = 0.0, factor: float = 1.0) -> Piecewise:
        """factor f(t) + constant + slope t."""
        coefficients = self.coefficients * factor
        coefficients[:, 0] += constant + slope * self._centre
        coefficients[:, 1] += slope * self._half
        return Piecewise(self.edges, coefficients, abs(factor) * self.left_out)

    def integral(self) -> Piecewise:
        """From the first edge on."""
        coefficients = chebyshev.chebint(self.coefficients.T, lbnd=-1).T * self._half[:, None]
        pieces = chebyshev.chebval(1.0, coefficients.T)
        coefficients[:, 0] += np.concatenate([[0.0], np.cumsum(pieces)[:-1]])
        return Piecewise(self.edges, coefficients, self.left_out * float(np.ptp(self.edges)))

    def slope(self) -> Piecewise:
        """The derivative, panel by panel."""
        return Piecewise(self.edges, chebyshev.chebder(self.coefficients.T).T / self._half[:, None])

    def maximum(self) -> tuple[float, float]:
        """(time, value) of the largest value, values just before a jump included; the earliest of equals."""
        looks, slack = self._looks, self._slack
        top = looks.max()
        candidates: list[tuple[float, float]] = []
        for k in np.flatnonzero(looks.max(axis=1) + slack >= top):
            x = np.sort(np.concatenate([_LOOK, _real_roots(chebyshev.chebder(self.coefficients[k]))]))
            values = chebyshev.chebval(x, self.coefficients[k])
            best = int(np.argmax(values >= values.max() - 64 * _EPS * np.abs(values).max()))
            candidates.append((float(self._centre[k] + self._half[k] * x[best]), float(values[best])))
        highest = max(value for _, value in candidates)
        return next(c for c in candidates if c[1] >= highest - 64 * _EPS * abs(highest))

    def minimum(self) -> tuple[float, float]:
        """(time, value) of the smallest value; see `maximum`."""
        time, value = self.plus(0.0, factor=-1.0).maximum()
        return time, -value

    def crossings(self, level: float) -> list[tuple[float, bool]]:
        """(time, upward) of every passage through `level`, ascending; at a jump the time of it."""
        looks, slack = self._looks, self._slack
        near = (looks.min(axis=1) - slack <= level) & (looks.max(axis=1) + slack >= level)
        jumps = (looks[:-1, -1] > level) != (looks[1:, 0] > level)
        stops = [self.edges[[0, -1]], self.edges[1:-1][jumps]]
        for k in np.flatnonzero(near):
            series = self.coefficients[k].copy()
            series[0] -= level
            stops += [self._centre[k] + self._half[k] * _real_roots(series), self.edges[k : k + 2]]
        places = np.unique(np.clip(np.concatenate(stops), self.edges[0], self.edges[-1]))
        above = self((places[1:] + places[:-1]) / 2) > level
        changes = np.flatnonzero(above[1:] != above[:-1])
        return [(float(places[k + 1]), bool(above[k + 1])) for k in changes]


def _real_roots(series: Floats) -> Floats:
    """Roots of a Chebyshev series in -1 <= x <= 1."""
    size = np.abs(series).max()
    last = np.flatnonzero(np.abs(series) > 4 * _EPS * size)
    if size == 0 or not len(last) or last[-1] == 0:
        return np.zeros(0)
    roots = chebyshev.chebroots(series[: last[-1] + 1])
    close = roots[(np.abs(roots.imag) < 1e-6) & (np.abs(roots.real) <= 1 + 1e-9)]
    return np.clip(close.real.astype(np.float64), -1.0, 1.0)


def piecewise(
    curve: Curve, breaks: Sequence[float] | Floats, tolerance: Callable[[float], float]
) -> Piecewise:
    """`curve` from the first to the last of the ascending `breaks`, smooth between them.

    `tolerance` is the absolute error that may be left, given the largest absolute value. The curve is asked
    about many times at once, never about the last break, where something else may begin.
    """
    found = panels(lambda t: curve(t)[None], breaks, lambda largest: np.array([tolerance(float(largest[0]))]))
    return Piecewise(found.edges, found.coefficients[:, 0], float(found.left_out[0]))


@dataclass(frozen=True)
class Panels:
    """Several functions on panels of their own: `coefficients` (m, n_functions, n), as `Piecewise` has
    them."""

    edges: Floats
    coefficients: Floats
    left_out: Floats
    """(n_functions,) about the largest absolute error."""

    def __call__(self, times: Floats, which: NDArray[np.intp]) -> Floats:
        """(len(which), n_times); at an edge the values after it, at the last one those before it."""
        result = np.empty((len(which), len(times)))
        panel = np.clip(np.searchsorted(self.edges, times, side="right") - 1, 0, len(self.coefficients) - 1)
        low, high = self.edges[panel], self.edges[panel + 1]
        terms = chebyshev.chebvander(np.clip((2 * times - low - high) / (high - low), -1.0, 1.0), NODES - 1)
        for row, function in enumerate(which):
            result[row] = np.einsum("tn,tn->t", terms, self.coefficients[panel, function])
        return result


def panels(
    curves: Callable[[Floats], Floats],
    breaks: Sequence[float] | Floats,
    tolerance: Callable[[Floats], Floats],
) -> Panels:
    """Several functions at once, (n_functions, n_times), as `piecewise` does one; a tolerance each."""
    given = np.unique(np.asarray(breaks, dtype=np.float64))
    low, high, behind = _first_panels(given)
    kept: list[tuple[Floats, Floats]] = []
    left_out = largest = np.zeros(1)
    settled = 0
    while len(low):
        centre, half = (low + high) / 2, (high - low) / 2
        close = low[behind, None] + (high - low)[behind, None] * _CLOSE
        inner = centre[:, None] + half[:, None] * _X
        values = curves(np.concatenate([inner.ravel(), close.ravel()]))
        count = len(values)
        found = values[:, inner.size :].reshape(count, *close.shape)
        values = values[:, : inner.size].reshape(count, *inner.shape)
        largest = np.maximum(largest, np.abs(values).max(axis=(1, 2)))
        coefficients = np.moveaxis(values @ _FIT.T, 0, 1)
        rough = np.abs(coefficients[..., -4:]).max(axis=2)
        if behind.any():
            there = np.einsum("prn,cn->rpc", coefficients[behind], _CLOSE_TERMS)
            rough[behind] = np.maximum(rough[behind], np.abs(there - found).max(axis=2).T)
        split = (rough > tolerance(largest)).any(axis=1) & (high - low > 64 * _EPS * high)
        if settled + 2 * int(split.sum()) > MOST_PANELS:
            split[:] = False
        kept.append((low[~split], coefficients[~split]))
        settled += int((~split).sum())
        left_out = np.maximum(left_out, rough[~split].max(axis=0, initial=0.0))
        middle = low + (high - low) * np.where(behind, 0.25, 0.5)
        low, high, behind = (
            np.concatenate([low[split], middle[split]]),
            np.concatenate([middle[split], high[split]]),
            np.concatenate([behind[split], np.zeros(int(split.sum()), dtype=bool)]),
        )
    low = np.concatenate([start for start, _ in kept])
    order = np.argsort(low)
    return Panels(np.append(low[order], given[-1]), np.concatenate([c for _, c in kept])[order], left_out)


def _first_panels(breaks: Floats) -> tuple[Floats, Floats, NDArray[np.bool_]]:
    """(low, high, whether it begins at a break) of the panels to start from."""
    parts = _FIRST if len(breaks) <= _FEW else _FIRST[[0, -1]]
    edges = breaks[:-1, None] + np.diff(breaks)[:, None] * parts
    edges[:, -1] = breaks[1:]
    low, high = edges[:, :-1], edges[:, 1:]
    behind = np.zeros(low.shape, dtype=bool)
    behind[:, 0] = True
    good = high > low
    return low[good], high[good], behind[good]
