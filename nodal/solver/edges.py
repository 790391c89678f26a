"""The response of outputs to a step or a ramp, by whichever method each of them can be trusted with.

Lumped systems go by poles and residues (`realise`), each output accepted only where its transfer function
comes out again; everything else, and what is not accepted, is inverted (`inversion`) front by front
(`fronts`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.exact import Exact
from nodal.solver.fronts import Fronts
from nodal.solver.inversion import Inversion, NotInverted, invert, passed, usable_probes
from nodal.solver.matrix import System
from nodal.solver.pattern import Complexes, Floats, Pattern
from nodal.solver.piecewise import Panels, panels
from nodal.solver.plan import generic
from nodal.solver.realise import AGREEMENT, NotRealised, Realisation, at_infinity, realise
from nodal.solver.sweep import Output, solve

POLES, INVERSION, NOTHING = "poles and residues", "inversion", "zero at every frequency"

_ZERO = 1e-15
"""An output below this much of what it is the difference of is zero."""

_ULPS = 8 * float(np.finfo(float).eps)
"""How far before an arrival, relatively, a time counts as the arrival: sums of delays are rounded."""

_TRUST = 10.0
"""A difference of H everywhere on the axis makes at most about this much in a step's response: ∫dω/(πω)
over what decades there are."""


_FOLLOWED = (16, 32, 64, 128, 256, 512, 1024)
"""Fronts that are followed one by one, more where the rest is still sharp."""

_BLUNT = 1e-13
"""Of the largest |H|: what of the rest does not matter."""

_ROUNDING = 1e-13

INTERPOLATED = 3e-13
"""What the polynomials that stand for what a front brings may leave out, as part of the largest |H|."""

_FEW = 100
"""Times times fronts that are worked out one by one."""

_RESOLVED = 2000.0
"""Radians that the longest delay may turn through over what is left of the rest."""


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
    """POLES, INVERSION or NOTHING, of each output."""
    error: Floats
    """(n_outputs,): estimated largest absolute error."""
    arrivals: Floats
    """When fronts set in, s; the first is 0."""
    jumps: Floats
    """(n_outputs, n_arrivals): by how much the response to an ideal step jumps there."""
    realisation: Realisation | None
    _realised: NDArray[np.intp]
    _inversion: Inversion | None
    _inverted: NDArray[np.intp]

    def __call__(self, times: ArrayLike, outputs: Sequence[int] | None = None) -> Floats:
        """(n_outputs, n_times); at a jump the value after it. ValueError for times after the window."""
        t = np.atleast_1d(np.asarray(times, dtype=float))
        if t.size and t.max() > self.window * (1 + _ULPS):
            raise ValueError("a time after the window")
        wanted = np.arange(len(self.methods)) if outputs is None else np.asarray(outputs, dtype=np.intp)
        result = np.zeros((len(wanted), len(t)))
        direct = [k for k, o in enumerate(wanted) if self.methods[o] == POLES]
        if direct and self.realisation is not None:
            place = np.searchsorted(self._realised, wanted[direct])
            result[direct] = self.realisation.edge(t, self.ramp, place)
        inverted = [k for k, o in enumerate(wanted) if self.methods[o] == INVERSION]
        if inverted and self._inversion is not None:
            result[inverted] = self._inverse(t, wanted[inverted])
        return result

    def _inverse(self, t: Floats, outputs: NDArray[np.intp]) -> Floats:
        assert self._inversion is not None
        place = np.searchsorted(self._inverted, outputs)
        result = np.zeros((len(outputs), len(t)))
        few = len(t) * len(self.arrivals) < _FEW and "_shapes" not in self.__dict__
        shapes = self._inversion.edge if few else self._shapes
        for number, start in enumerate(self.arrivals):
            local = t - start
            local = np.where(np.abs(local) <= _ULPS * start, 0.0, local)
            on = local >= 0
            if on.any():
                rows = number * len(self._inverted) + place
                result[:, on] += shapes(local[on], rows)
        return result

    @cached_property
    def _shapes(self) -> Panels:
        """What each front brings, from its arrival on: the integrals once, for all times and fronts."""
        assert self._inversion is not None
        measure, ramp = self._inversion.largest, self.ramp
        bends = [ramp] if 0 < ramp < self.window else []
        return panels(self._inversion.edge, [0.0, *bends, self.window], lambda _: INTERPOLATED * measure)


def respond(
    system: System,
    source: Mapping[int, float],
    outputs: Sequence[Output],
    *,
    ramp: float,
    window: float,
    frequencies: ArrayLike = (),
) -> Edges:
    """Prepare the responses of outputs of A(s) x = source to an edge.

    `frequencies` (Hz) are where a realisation is checked besides its own grid. Raises Impulse, NotInverted
    (no response that could be trusted) or Singular.
    """
    count = len(outputs)
    methods = np.full(count, NOTHING, dtype=object)
    error = np.zeros(count)
    jumps = np.zeros((count, 1))
    arrivals = np.zeros(1)
    alive = _alive(system, source, outputs, window)
    found = _realised(system, source, outputs, alive, ramp, 1 / window, frequencies)
    if found is not None:
        methods[alive[found.accepted]] = POLES
        error[alive] = _TRUST * found.mismatch + 1e-13 * found.largest
        jumps[alive, 0] = found.direct
    inverted = np.array([k for k in alive if methods[k] != POLES], dtype=np.intp)
    inversion = None
    if len(inverted):
        methods[inverted] = INVERSION
        fronts = _followed(system, source, [outputs[k] for k in inverted.tolist()], window, ramp)
        inversion = _inverted(fronts, window, ramp, inverted)
        arrivals = fronts.starts
        shape = len(arrivals), len(inverted)
        error[inverted] = (inversion.error + INTERPOLATED * inversion.largest).reshape(shape).sum(axis=0)
        jumps = np.hstack([jumps, np.zeros((count, len(arrivals) - 1))])
        jumps[inverted] = inversion.jump.reshape(shape).T
    return Edges(ramp, window, tuple(methods), error, arrivals, jumps, found, alive, inversion, inverted)


def _alive(
    system: System, source: Mapping[int, float], outputs: Sequence[Output], window: float
) -> NDArray[np.intp]:
    """Outputs that are not zero at every s, as a balanced bridge is: rounding would be all there is of
    them."""
    pattern = Pattern(system)
    arithmetic = MpArithmetic(50)
    alive = np.zeros(len(outputs), dtype=bool)
    for level in (1.0, 1e3, 1e6):
        exact = Exact(pattern, generic(level / window), arithmetic)
        x, _ = exact.solve(source)
        for k, output in enumerate(outputs):
            parts = sum(abs(x[i] * weight) for i, weight in output.items())
            alive[k] |= bool(abs(exact.output(output, x)) > _ZERO * parts)
    return np.flatnonzero(alive)


def _realised(
    system: System,
    source: Mapping[int, float],
    outputs: Sequence[Output],
    alive: NDArray[np.intp],
    ramp: float,
    pace: float,
    frequencies: ArrayLike,
) -> Realisation | None:
    """Poles and residues of the outputs that are `alive`; None where there are none or they are not known."""
    if system.functions or not len(alive):
        return None
    wanted = [outputs[k] for k in alive.tolist()]
    order = at_infinity(system, source, wanted).order
    hopeless = alive[order > (1 if ramp > 0 else 0)]
    if len(hopeless):
        raise Impulse(hopeless.tolist())
    try:
        return realise(system, source, wanted, frequencies, pace)
    except NotRealised:
        return None


def _followed(
    system: System, source: Mapping[int, float], outputs: Sequence[Output], window: float, ramp: float
) -> Fronts:
    """As many fronts one by one as it takes for the others to be too blunt to matter."""
    probes = np.asarray(1 / window + 1j * 10.0 ** np.arange(-1.0, 30.0, 0.25) / window)
    for most in _FOLLOWED:
        fronts = Fronts(system, source, outputs, window, most)
        if fronts.rest is None:
            break
        values, noise, parts = _flat(fronts.evaluate(probes))
        usable, measure = usable_probes(values, noise, parts, np.zeros(len(values)), len(outputs))
        rest = np.abs(values[-len(outputs) :, :usable]) * passed(probes[:usable].imag, ramp)
        sharp = np.flatnonzero((rest > _BLUNT * measure[-len(outputs) :, None]).any(axis=0))
        if not len(sharp) or probes[sharp[-1]].imag * fronts.longest < _RESOLVED:
            break
    _check(fronts, window)
    return fronts


def _flat(found: tuple[Complexes, Floats, Floats]) -> tuple[Complexes, Floats, Floats]:
    """Fronts and outputs as rows."""
    values, noise, parts = found
    shape = -1, values.shape[-1]
    return values.reshape(shape), noise.reshape(shape), parts.reshape(shape)


def _check(fronts: Fronts, window: float) -> None:
    """The fronts together are the transfer function, where what comes after the window has died out."""
    s = np.asarray(40 / window * (1 + 1j * 10.0 ** np.arange(-1.0, 3.0, 0.1)))
    values, noise, _ = fronts.evaluate(s)
    together = (values * np.exp(-s * fronts.starts[:, None, None])).sum(axis=0)
    expected = solve(fronts.system, s, [fronts.source], fronts.outputs).values[0]
    allowed = AGREEMENT * np.abs(expected).max(axis=1) + _ROUNDING * np.abs(values).max(axis=(0, 2))
    allowed += 10 * noise.max(axis=(0, 2))
    if not (np.abs(together - expected) <= allowed[:, None]).all():
        raise NotInverted("the fronts do not add up to the transfer function")


def _inverted(fronts: Fronts, window: float, ramp: float, outputs: NDArray[np.intp]) -> Inversion:
    def transfer(s: Complexes) -> tuple[Complexes, Floats, Floats]:
        return _flat(fronts.evaluate(s))

    jumps, orders = fronts.at_infinity()
    hopeless = np.flatnonzero((orders > 0).any(axis=0))
    if len(hopeless):
        raise Impulse([int(outputs[k]) for k in hopeless])
    return invert(transfer, jumps.ravel(), window, ramp, len(outputs))


def sampled(edges: Edges, points: int, over: float | None = None) -> Floats:
    """Times, at most `points`, for a table or a plot up to `over` (the window if left out), by the
    responses.

    The larger jumps have a sample just before them and one at them. Intervals are halved where a straight
    line misses a curve most, so that fronts are dense, tails are sparse and decades get their share.
    """
    end = edges.window if over is None else over
    knots = _knots(edges, end, points // 6)
    t = np.unique(np.concatenate([knots, *_first_guesses(knots, points // 2)]))
    if len(t) > points:
        return np.asarray(t[np.linspace(0, len(t) - 1, max(points, 0)).astype(int)], dtype=float)
    values = edges(t)
    missed = np.full(len(t) - 1, np.inf)  # of every interval: what a straight line leaves out, where known
    inner = np.zeros((len(values), len(t) - 1))
    while len(t) < points:
        swing = np.maximum(np.ptp(values, axis=1, keepdims=True), 1e-300)
        middle = t[:-1] + np.diff(t) / 2
        unknown = np.isinf(missed)
        inner[:, unknown] = edges(middle[unknown])
        off = np.abs(inner - (values[:, :-1] + values[:, 1:]) / 2) / swing
        missed = np.where(np.diff(t) > _TOUCHING * t[1:], off.max(axis=0), -1.0)
        share = min(points - len(t), max(1, len(t) // 3))
        chosen = np.sort(np.argsort(missed, kind="stable")[::-1][:share])
        chosen = chosen[missed[chosen] >= 0]
        if not len(chosen):
            break
        t = np.insert(t, chosen + 1, middle[chosen])
        values = np.insert(values, chosen + 1, inner[:, chosen], axis=1)
        missed[chosen] = np.inf
        missed, inner = np.insert(missed, chosen + 1, np.inf), np.insert(inner, chosen + 1, 0.0, axis=1)
    return t


_TOUCHING = 64 * float(np.finfo(float).eps)


def _knots(edges: Edges, end: float, most: int) -> Floats:
    """Beginning and end, and where responses jump or bend: both sides of the largest jumps."""
    size = np.abs(edges.jumps).max(axis=0)
    notable = np.flatnonzero(size > 1e-6 * size.max()) if size.max() else np.zeros(0, dtype=np.intp)
    largest = edges.arrivals[notable[np.argsort(size[notable], kind="stable")[::-1][:most]]]
    first = edges.arrivals[:4]
    if edges.ramp > 0:
        bends = np.concatenate([first, largest, first + edges.ramp, largest + edges.ramp])
        sides = np.zeros(0)
    else:
        bends, sides = np.concatenate([first, largest]), largest * (1 - 2 * _ULPS)
    inside = np.concatenate([bends, sides])
    return np.unique(np.concatenate([[0.0, end], inside[(inside > 0) & (inside < end)]]))


def _first_guesses(knots: Floats, most: int) -> list[Floats]:
    """Between knots, two a decade counted from the first of the two; `most` in all."""
    gaps = [(a, b) for a, b in pairwise(knots) if b - a > _TOUCHING * b]
    per_gap = max(1, min(14, most // max(len(gaps), 1)))
    steps = np.power(10.0, -np.arange(0.5, 0.5 * per_gap + 0.5, 0.5))
    guesses: list[Floats] = [a + (b - a) * steps for a, b in gaps]
    return guesses
