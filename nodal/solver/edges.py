"""The response of outputs to a step or a ramp, by whichever method each of them can be trusted with.

Lumped systems go by poles and residues (`realise`), each output accepted only where its transfer function comes out
again; everything else, and what is not accepted, is inverted (`inversion`) front by front (`fronts`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.solver.fronts import MOST, Fronts, delay_of
from nodal.solver.inversion import Inversion, NotInverted, invert
from nodal.solver.matrix import System
from nodal.solver.pattern import Complexes, Floats
from nodal.solver.realise import NotRealised, Realisation, at_infinity, realise
from nodal.solver.sweep import Output

POLES, INVERSION = "poles and residues", "inversion"

_ULPS = 8 * float(np.finfo(float).eps)
"""How far before an arrival, relatively, a time counts as the arrival: sums of delays are rounded."""

_TRUST = 10.0
"""A difference of H everywhere on the axis makes at most about this much in a step's response: ∫dω/(πω) over what
decades there are."""


class Impulse(Exception):
    """Outputs (indices) that an ideal step, or even the ramp, drives to an impulse."""

    def __init__(self, outputs: Sequence[int]) -> None:
        super().__init__(f"outputs {list(outputs)} contain an impulse")
        self.outputs = tuple(outputs)


@dataclass(frozen=True)
class Edges:
    """Responses for 0 <= t <= window (s) to a unit step, or a ramp that takes `ramp` seconds; 0 for t < 0."""

    ramp: float
    window: float
    methods: tuple[str, ...]
    """POLES or INVERSION, of each output."""
    error: Floats
    """(n_outputs,): estimated largest absolute error."""
    arrivals: Floats
    """When fronts set in, s; the first is 0."""
    jumps: Floats
    """(n_outputs, n_arrivals): by how much the response to an ideal step jumps there."""
    realisation: Realisation | None
    _inversion: Inversion | None
    _inverted: NDArray[np.intp]
    _starts: Floats

    def __call__(self, times: ArrayLike, outputs: Sequence[int] | None = None) -> Floats:
        """(n_outputs, n_times); at a jump the value after it. ValueError for times after the window."""
        t = np.atleast_1d(np.asarray(times, dtype=float))
        if t.size and t.max() > self.window * (1 + _ULPS):
            raise ValueError("a time after the window")
        wanted = np.arange(len(self.methods)) if outputs is None else np.asarray(outputs, dtype=np.intp)
        result = np.zeros((len(wanted), len(t)))
        direct = [k for k, o in enumerate(wanted) if self.methods[o] == POLES]
        if direct and self.realisation is not None:
            result[direct] = self.realisation.edge(t, self.ramp, wanted[direct])
        inverted = [k for k, o in enumerate(wanted) if self.methods[o] != POLES]
        if inverted and self._inversion is not None:
            result[inverted] = self._inverse(t, wanted[inverted])
        return result

    def _inverse(self, t: Floats, outputs: NDArray[np.intp]) -> Floats:
        assert self._inversion is not None
        place = np.searchsorted(self._inverted, outputs)
        result = np.zeros((len(outputs), len(t)))
        for number, start in enumerate(self._starts):
            local = t - start
            local = np.where(np.abs(local) <= _ULPS * start, 0.0, local)
            on = local >= 0
            if on.any():
                rows = number * len(self._inverted) + place
                result[:, on] += self._inversion.edge(local[on], self.ramp, rows)
        return result


def respond(
    system: System, source: Mapping[int, float], outputs: Sequence[Output], *, ramp: float, window: float,
    frequencies: ArrayLike = (), most: int = MOST,
) -> Edges:
    """Prepare the responses of outputs of A(s) x = source to an edge.

    `frequencies` (Hz) are where a realisation is checked besides its own grid; `most` fronts are followed one by one.
    Raises Impulse, NotInverted (no response that could be trusted) or Singular.
    """
    count = len(outputs)
    found: Realisation | None = None
    if not system.functions:
        order = at_infinity(system, source, outputs).order
        hopeless = [k for k in range(count) if order[k] > (1 if ramp > 0 else 0)]
        if hopeless:
            raise Impulse(hopeless)
        try:
            found = realise(system, source, outputs, frequencies)
        except NotRealised:
            found = None
    accepted = found.accepted if found is not None else np.zeros(count, dtype=bool)
    error = np.zeros(count)
    jumps = np.zeros((count, 1))
    if found is not None:
        error[accepted] = (_TRUST * found.mismatch + 1e-13 * found.largest)[accepted]
        jumps[accepted, 0] = found.direct[accepted]
    methods = tuple(POLES if ok else INVERSION for ok in accepted)
    rest = np.flatnonzero(~accepted)
    if not len(rest):
        return Edges(ramp, window, methods, error, np.zeros(1), jumps, found, None, rest, np.zeros(1))
    fronts = Fronts(system, source, [outputs[k] for k in rest], window, most)
    inversion = _inverted(fronts, window, rest)
    shape = len(fronts.starts), len(rest)
    error[rest] = inversion.error.reshape(shape).sum(axis=0)
    jumps = np.hstack([jumps, np.zeros((count, len(fronts.starts) - 1))])
    jumps[rest] = inversion.jump.reshape(shape).T
    return Edges(ramp, window, methods, error, fronts.starts, jumps, found, inversion, rest, fronts.starts)


def _inverted(fronts: Fronts, window: float, outputs: NDArray[np.intp]) -> Inversion:
    def transfer(s: Complexes) -> Complexes:
        values = fronts.evaluate(s)
        return values.reshape(-1, values.shape[-1])

    try:
        return invert(transfer, window, len(outputs))
    except NotInverted as trouble:
        if trouble.rows is not None:
            raise Impulse(sorted({int(outputs[row % len(outputs)]) for row in trouble.rows})) from trouble
        raise


def sampled(edges: Edges, points: int, over: float | None = None) -> Floats:
    """Times for a table or a plot of `points` samples up to `over` (the window if left out), chosen by the responses.

    Every jump has a sample just before it and one at it. Intervals are halved where a straight line misses the curve
    most, so that fronts are dense, tails are sparse and decades get their share.
    """
    end = edges.window if over is None else over
    knots = _knots(edges, end)
    t = np.unique(np.concatenate([knots, *(_after(a, b) for a, b in zip(knots[:-1], knots[1:], strict=True))]))
    t = t[t <= end]
    if len(t) >= points:
        return _thinned(t, knots, points)
    values = edges(t)
    swing = np.maximum(np.ptp(values, axis=1, keepdims=True), 1e-300)
    missed = np.full(len(t) - 1, np.inf)
    """Of every interval: how far the straight line is off in its middle; infinite where not looked at."""
    inner: dict[float, Any] = {}
    while len(t) < points:
        middle = t[:-1] + np.diff(t) / 2
        unknown = [k for k in np.flatnonzero(np.isinf(missed)) if middle[k] not in inner]
        if unknown:
            fresh = edges(middle[unknown])
            inner.update(zip(middle[unknown].tolist(), fresh.T, strict=True))
        for k in np.flatnonzero(np.isinf(missed)):
            off = np.abs(inner[float(middle[k])] - (values[:, k] + values[:, k + 1]) / 2)
            missed[k] = float((off / swing[:, 0]).max())
            if not t[k] < middle[k] < t[k + 1] or _touching(t[k], t[k + 1]):
                missed[k] = -1.0
        share = min(points - len(t), max(1, len(t) // 3))
        chosen = np.sort(np.argsort(missed, kind="stable")[::-1][:share])
        chosen = chosen[missed[chosen] > 0] if (missed[chosen] > 0).any() else chosen[missed[chosen] == 0]
        if not len(chosen):
            break
        t = np.insert(t, chosen + 1, middle[chosen])
        values = np.insert(values, chosen + 1, np.array([inner[float(middle[k])] for k in chosen]).T, axis=1)
        missed[chosen] = np.inf
        missed = np.insert(missed, chosen + 1, np.inf)
    return t


def _touching(a: float, b: float) -> bool:
    return b - a <= 4 * np.finfo(float).eps * b


def _knots(edges: Edges, end: float) -> Floats:
    """Where responses jump or bend, both sides of each."""
    bends = edges.arrivals if edges.ramp <= 0 else np.concatenate([edges.arrivals, edges.arrivals + edges.ramp])
    bends = np.unique(bends[(bends > 0) & (bends < end)])
    before = np.nextafter(bends * (1 - 2 * _ULPS), 0) if edges.ramp <= 0 else bends
    return np.unique(np.concatenate([[0.0, end], bends, before]))


def _after(a: float, b: float) -> Floats:
    """First guesses between two knots: a decade in two, counted from the first."""
    if _touching(a, b):
        return np.zeros(0)
    return np.asarray(a + (b - a) * 10.0 ** -np.arange(0.5, 6.5, 0.5))


def _thinned(t: Floats, knots: Floats, points: int) -> Floats:
    """No more than `points`, the knots kept as far as they fit in."""
    others = np.setdiff1d(t, knots)
    room = max(points - len(knots), 0)
    kept = others[np.linspace(0, len(others) - 1, room).astype(int)] if room and len(others) else np.zeros(0)
    chosen = np.unique(np.concatenate([knots, kept]))
    return chosen if len(chosen) <= points else chosen[np.linspace(0, len(chosen) - 1, points).astype(int)]


def has_delay(system: System) -> bool:
    """Whether fronts arrive later than the edge."""
    return any(delay_of(f) for f in system.functions)
