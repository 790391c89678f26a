"""Poles and residues of lumped systems: A(s) = G + s C without functions of s.

With C = U V^T taken from the terms themselves and a real shift w, z = V^T x obeys (1 + (s - w) M) z = V^T
A(w)⁻¹ b, M = V^T A(w)⁻¹ U: a pole p is an eigenvalue 1/(w - p) of M, and what has no dynamics (loops of
capacitors, algebraic constraints) is an eigenvalue 0 that is never asked for. Poles within about two decades
of the shift come out to full relative precision, so that picoseconds and seconds in one network take several
shifts, each with a band of its own. How many poles there are, and how many at the origin, is known exactly
beforehand from the degree and the order of det A(s). A band's invariant subspace comes from an ordered Schur
form; it is then split into clusters of close eigenvalues as far as that keeps the transformation harmless
(Bavely and Stewart 1979), and each cluster answers with its matrix exponential.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any

import numpy as np
import scipy.linalg
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import lapack

from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.exact import Exact
from nodal.solver.factored import Factored
from nodal.solver.matrix import System
from nodal.solver.pattern import Complexes, Floats, Pattern
from nodal.solver.plan import make_plan
from nodal.solver.sweep import solve

AGREEMENT = 1e-9
"""Largest difference between a reading rebuilt from its poles and the solver, over its largest |H|."""

_BAND = 4.0
"""Decades of poles that one shift serves."""

_SPLIT = 1e3
"""Largest entry of a transformation that splits a cluster off; larger ones keep it whole."""

_FAR = (60, 80)
"""s = 10 ** these, rad/s: beyond every corner that parts of any size can make."""

_DIGITS = 600


class NotRealised(Exception):
    """The poles could not be found reliably: says why. The caller inverts numerically instead."""


@dataclass(frozen=True, slots=True)
class AtInfinity:
    """H(s) of each output for large s: `direct` + `slope` s, and the power of s that it goes with.

    Shapes (n_outputs,); an order above 1 is a reading that no edge can be put through.
    """

    direct: Floats
    slope: Floats
    order: NDArray[np.int64]
    degree: int
    """Of det A(s): the number of finite poles."""


@dataclass(frozen=True, slots=True)
class Cluster:
    """strictly proper part C (s - T)⁻¹ B, T upper triangular (p, p), C (n_outputs, p), B (p,)."""

    t: Complexes
    c: Complexes
    b: Complexes


@dataclass(frozen=True)
class Realisation:
    """H(s) = direct + slope s + sum over modes of residue/(s - pole) + sum over clusters.

    `poles` (n,) rad/s are all finite ones, n = degree of det A, those of clusters included; exact zeros are
    those at the origin. `mode_poles` (m,) and `residues` (n_outputs, m) are the single ones. `mismatch`
    (n_outputs,): largest difference from the solver at the frequencies looked at; `largest`: largest |H|
    there.
    """

    direct: Floats
    slope: Floats
    poles: Complexes
    mode_poles: Complexes
    residues: Complexes
    clusters: tuple[Cluster, ...]
    mismatch: Floats
    largest: Floats

    @property
    def accepted(self) -> NDArray[np.bool_]:
        """(n_outputs,): the readings that may be trusted."""
        result: NDArray[np.bool_] = self.mismatch <= AGREEMENT * self.largest
        return result

    def transfer(self, s: ArrayLike) -> Complexes:
        """H at complex s, (n_outputs, n_points)."""
        points = np.atleast_1d(np.asarray(s, dtype=complex))
        values: Complexes = np.multiply.outer(self.slope, points) + self.direct[:, None]
        with np.errstate(divide="ignore", invalid="ignore"):
            values += self.residues @ (1 / (points - self.mode_poles[:, None]))
        for cluster in self.clusters:
            matrices = points[:, None, None] * np.eye(len(cluster.b)) - cluster.t
            values += cluster.c @ np.linalg.solve(matrices, cluster.b[None, :, None])[:, :, 0].T
        return values

    def edge(
        self, times: ArrayLike, ramp: float = 0.0, outputs: Sequence[int] | NDArray[np.intp] | None = None
    ) -> Floats:
        """Response to a unit step at t = 0, or to a linear ramp from 0 to 1 of duration `ramp`; (n_outputs,
        n_times).

        At a jump the value is the one after it. Nothing is subtracted that nearly cancels, however short the
        ramp.
        """
        t = np.atleast_1d(np.asarray(times, dtype=float))
        which = np.arange(len(self.direct)) if outputs is None else np.asarray(outputs, dtype=np.intp)
        values = np.zeros((len(which), len(t)))
        on = t >= 0
        if not on.any():
            return values
        t = t[on]
        if ramp > 0:
            found = np.multiply.outer(self.direct[which], np.minimum(t / ramp, 1.0))
            found += np.multiply.outer(self.slope[which] / ramp, (t < ramp).astype(float))
        else:
            found = np.repeat(self.direct[which, None], len(t), axis=1)
        for first in range(0, len(t), 512):
            part = slice(first, first + 512)
            found[:, part] += (self.residues[which] @ _mode_edge(self.mode_poles, t[part], ramp)).real
        for cluster in self.clusters:
            found += (cluster.c[which] @ _cluster_edge(cluster, t, ramp)).real
        values[:, on] = found
        return values


def realise(
    system: System,
    source: Mapping[int, float],
    outputs: Sequence[Mapping[int, float]],
    frequencies: ArrayLike = (),
    pace: float = 1.0,
) -> Realisation:
    """Realise every output of A(s) x = source; checked against the solver, also at `frequencies` (Hz).

    `pace` (rad/s) is what is slow or fast where all poles are at the origin. Raises NotRealised where the
    poles cannot be told reliably, ValueError for a system with functions of s.
    """
    if system.functions:
        raise ValueError("a system with functions of s has no finite set of poles")
    pattern = Pattern(system)
    infinity = at_infinity(pattern, source, outputs)
    origin, resting = _at_origin(pattern, source, outputs)
    poles: list[Complexes] = []
    modes: list[Complexes] = []
    residues: list[Complexes] = []
    clusters: list[Cluster] = []
    for band in _bands(pattern, infinity.degree, origin, pace, source, outputs):
        poles.append(band.poles)
        for cluster in _split(band.t, band.c, band.b):
            if len(cluster.b) > 1:
                clusters.append(cluster)
                continue
            modes.append(cluster.t[0])
            residue = cluster.c * cluster.b
            if cluster.t[0, 0] == 0:
                residue[resting] = 0  # such an output has a limit, which rounding would let drift
            residues.append(residue)
    count = len(outputs)
    found = Realisation(
        infinity.direct,
        infinity.slope,
        np.concatenate([*poles, np.zeros(0, dtype=complex)]),
        np.concatenate([*modes, np.zeros(0, dtype=complex)]),
        np.concatenate([*residues, np.zeros((count, 0), dtype=complex)], axis=1),
        tuple(clusters),
        np.zeros(count),
        np.zeros(count),
    )
    return _checked(found, system, source, outputs, np.atleast_1d(np.asarray(frequencies, dtype=float)))


def at_infinity(
    system: System | Pattern, source: Mapping[int, float], outputs: Sequence[Mapping[int, float]]
) -> AtInfinity:
    """What outputs of a lumped system do for s → ∞, from two s with many digits; raises Singular."""
    pattern = system if isinstance(system, Pattern) else Pattern(system)
    arithmetic = MpArithmetic(_DIGITS)
    order = None
    points, values, dets = [], [], []
    for exponent in _FAR:
        s = arithmetic.context.mpf(10) ** exponent
        exact = Exact(pattern, s, arithmetic, order)
        order = exact.order
        x, _ = exact.solve(source)
        points.append(s)
        values.append([exact.output(o, x) for o in outputs])
        dets.append(_log_det(exact))
    decades = _FAR[1] - _FAR[0]
    direct, slope = np.zeros(len(outputs)), np.zeros(len(outputs))
    orders = np.zeros(len(outputs), dtype=np.int64)
    near, far = points
    for k, (a, b) in enumerate(zip(*values, strict=True)):
        if a == 0 or b == 0:
            orders[k] = -1
            continue
        orders[k] = round(float(arithmetic.context.log10(abs(b / a))) / decades)
        if orders[k] >= 1:
            slope[k] = float((b - a) / (far - near))
        if orders[k] >= 0:
            direct[k] = float((a * far - b * near) / (far - near)) if orders[k] == 1 else float(b)
    return AtInfinity(direct, slope, orders, round((dets[1] - dets[0]) / decades))


def _at_origin(
    pattern: Pattern, source: Mapping[int, float], outputs: Sequence[Mapping[int, float]]
) -> tuple[int, NDArray[np.bool_]]:
    """(number of poles at s = 0, the outputs that have a finite limit there)."""
    arithmetic = MpArithmetic(_DIGITS)
    exacts = [Exact(pattern, arithmetic.context.mpf(10) ** -e, arithmetic) for e in _FAR]
    origin = round((_log_det(exacts[0]) - _log_det(exacts[1])) / (_FAR[1] - _FAR[0]))
    far, near = (
        [exact.output(o, x) for o in outputs]
        for exact, x in ((exact, exact.solve(source)[0]) for exact in exacts)
    )
    growth = 10 ** ((_FAR[1] - _FAR[0]) // 2)
    resting = [b == 0 or abs(b) < growth * abs(a) for a, b in zip(far, near, strict=True)]
    return origin, np.array(resting, dtype=bool)


def _log_det(exact: Exact) -> float:
    """log10 |det A|."""
    reciprocal = exact.arithmetic.number(1)
    for slot in exact.order.pivot.tolist():
        reciprocal = reciprocal * exact.reciprocal_pivot(slot)
    return float(-exact.arithmetic.context.log10(abs(reciprocal)))


@dataclass(frozen=True, slots=True)
class _Band:
    """Poles of one band with the invariant subspace that carries them."""

    poles: Complexes
    t: Complexes
    c: Complexes
    b: Complexes


@dataclass(frozen=True, slots=True)
class _Shifted:
    """M and what goes with it at one shift."""

    shift: float
    t: Complexes
    c: Complexes
    b: Complexes

    @property
    def poles(self) -> Complexes:
        """Of every eigenvalue; infinite for those that are zero."""
        with np.errstate(divide="ignore", invalid="ignore"):
            poles: Complexes = self.shift - 1 / np.diagonal(self.t)
        poles[~np.isfinite(poles)] = np.inf
        return poles


def _bands(
    pattern: Pattern,
    degree: int,
    origin: int,
    pace: float,
    source: Mapping[int, float],
    outputs: Sequence[Mapping[int, float]],
) -> list[_Band]:
    if degree == 0:
        return []
    edges = _band_edges(pattern, degree, origin, pace)
    shifts = [math.sqrt(a * b) for a, b in pairwise(edges)]
    forms = [_off_poles(pattern, shift, source, outputs) for shift in shifts]
    limits = [0.0]
    for form, edge in zip(forms[:-1], edges[1:-1], strict=True):
        limits.append(_gap(np.abs(form.poles), edge))
    limits.append(edges[-1] * 1e2)
    bands = []
    for form, low, high in zip(forms, limits[:-1], limits[1:], strict=True):
        size = np.abs(form.poles)
        chosen = (size >= low) & (size < high)
        if chosen.any():
            bands.append(_band(form, chosen))
    found = sum(len(band.poles) for band in bands)
    if found != degree:
        raise NotRealised(f"{found} poles were found where there are {degree}")
    if origin:
        bands[0] = _at_rest(bands[0], origin)
    return bands


def _band_edges(pattern: Pattern, degree: int, origin: int, pace: float) -> list[float]:
    """Limits of bands of |pole| (rad/s), none wide, set where few poles are.

    d log |det A|/d log |s| is about the number of poles below s, along a ray on which poles are not likely
    to lie.
    """
    exponents = np.arange(-16.0, 26.0, 0.25)
    points = 10.0**exponents * np.exp(0.7j)
    plan = make_plan(pattern.system, points[[40, 80, 110, 140]], pattern)
    log_det = Factored(plan, points).log_det()
    below = np.gradient(log_det, exponents)
    if degree == origin:
        return [pace / 10, pace * 10]
    # Where four samples in a row count only those at the origin, or all: rounding spoils what lies beyond.
    none, all_of_them = (_runs(np.abs(below - count) <= 0.02) for count in (origin, degree))
    last = int(all_of_them[0]) if len(all_of_them) else len(exponents) - 1
    none = none[none < last]
    low, high = float(exponents[none[-1] + 3 if len(none) else 0]), float(exponents[last])
    count = max(1, math.ceil((high - low) / _BAND))
    edges = [low]
    density = np.gradient(below, exponents)
    for k in range(1, count):
        wanted = low + (high - low) * k / count
        near = np.flatnonzero(np.abs(exponents - wanted) <= 0.75)
        edges.append(float(exponents[near[np.argmin(density[near])]]))
    return [10.0**e for e in [*edges, high]]


def _runs(good: NDArray[np.bool_]) -> NDArray[np.intp]:
    """Indices from which four in a row are good."""
    return np.flatnonzero(good[:-3] & good[1:-2] & good[2:-1] & good[3:])


def _gap(sizes: Floats, edge: float) -> float:
    """The middle of the widest gap between poles within a factor of ten of `edge`."""
    near = np.sort(np.concatenate([[edge / 10, edge * 10], sizes[(sizes > edge / 10) & (sizes < edge * 10)]]))
    widest = int(np.argmax(near[1:] / near[:-1]))
    return float(math.sqrt(near[widest] * near[widest + 1]))


def _off_poles(
    pattern: Pattern, shift: float, source: Mapping[int, float], outputs: Sequence[Mapping[int, float]]
) -> _Shifted:
    """`_shifted`, a little further on where a growing network has a pole at the very shift."""
    for factor in (1.0, 1.37):
        try:
            return _shifted(pattern, shift * factor, source, outputs)
        except NotRealised:
            continue
    raise NotRealised("the equations have no solution at the shift")


def _shifted(
    pattern: Pattern, shift: float, source: Mapping[int, float], outputs: Sequence[Mapping[int, float]]
) -> _Shifted:
    """Schur form of M at a shift, with V^T A⁻¹ b and w^T A⁻¹ U in its basis, states scaled to energies."""
    dynamic = np.flatnonzero(pattern.c)
    scale = np.sqrt(np.abs(pattern.c[dynamic]))
    right = np.zeros((pattern.size, len(dynamic) + 1))
    for k, term in enumerate(dynamic.tolist()):
        for equation, weight in pattern.term_rows[term]:
            right[equation, k] = weight * scale[k] * np.sign(pattern.c[term])
    for equation, value in source.items():
        right[equation, -1] += value
    factored = Factored(make_plan(pattern.system, [shift], pattern), np.array([shift], dtype=complex))
    solved = factored.solve(right.astype(complex))
    states = factored.drops(solved)[dynamic].real * scale[:, None]
    read = solved.outputs(outputs).real
    m, b, c = states[:, :-1], states[:, -1], read[:, :-1]
    if not (np.isfinite(states).all() and np.isfinite(read).all()):
        raise NotRealised("the equations have no solution at the shift")
    balanced, (scaling, _) = scipy.linalg.matrix_balance(m, permute=False, separate=True)
    t, q = scipy.linalg.rsf2csf(*scipy.linalg.schur(balanced))
    return _Shifted(shift, t, (c * scaling) @ q, q.conj().T @ (b / scaling))


def _band(form: _Shifted, chosen: NDArray[np.bool_]) -> _Band:
    """The part of a Schur form that belongs to the chosen eigenvalues, as C (s - T)⁻¹ B."""
    count = int(chosen.sum())
    t, q = form.t, np.eye(len(form.t), dtype=complex)
    if not chosen[:count].all():
        t, q, *_, info = lapack.ztrsen(chosen.astype(np.int32), t, q, job="N")
        if info:
            raise NotRealised("the Schur form could not be ordered")
    c, b = form.c @ q, q.conj().T @ form.b
    if count < len(t):
        x, scale, info = lapack.ztrsyl(t[:count, :count], t[count:, count:], -t[:count, count:], isgn=-1)
        if info < 0 or not np.isfinite(x).all():
            raise NotRealised("two bands of poles could not be told apart")
        b = b[:count] - (x / scale) @ b[count:]
    inverse = scipy.linalg.solve_triangular(t[:count, :count], np.eye(count))
    return _Band(
        form.shift - 1 / np.diagonal(t)[:count],
        form.shift * np.eye(count) - inverse,
        c[:, :count] @ inverse,
        inverse @ b[:count],
    )


def _at_rest(band: _Band, origin: int) -> _Band:
    """The slowest `origin` poles are known to be exactly zero.

    Several stand in the Schur form as a cluster around zero, whose mean is right and whose members are not:
    to change them one by one would change their sum by more than rounding did.
    """
    slowest = np.argsort(np.abs(band.poles))[:origin]
    poles, t = band.poles.copy(), band.t.copy()
    poles[slowest] = 0
    t[slowest, slowest] -= t[slowest, slowest].mean()
    return _Band(poles, t, band.c, band.b)


def _split(t: Complexes, c: Complexes, b: Complexes) -> list[Cluster]:
    """Clusters of close eigenvalues, each as small as a harmless transformation allows."""
    found = []
    while len(b):
        size = 1
        while size < len(b):
            x, scale, info = lapack.ztrsyl(t[:size, :size], t[size:, size:], -t[:size, size:], isgn=-1)
            with np.errstate(over="ignore"):
                x = x / scale
            if info == 0 and np.isfinite(x).all() and np.abs(x).max() <= _SPLIT:
                found.append(Cluster(t[:size, :size], c[:, :size], b[:size] - x @ b[size:]))
                t, c, b = t[size:, size:], c[:, :size] @ x + c[:, size:], b[size:]
                break
            mean = np.diagonal(t)[:size].mean()
            nearest = size + int(np.argmin(np.abs(np.diagonal(t)[size:] - mean)))
            t, q, info = lapack.ztrexc(t, np.eye(len(b), dtype=complex), nearest + 1, size + 1)
            c, b = c @ q, q.conj().T @ b
            size += 1
        else:
            found.append(Cluster(t, c, b))
            break
    return found


def _checked(
    found: Realisation,
    system: System,
    source: Mapping[int, float],
    outputs: Sequence[Mapping[int, float]],
    frequencies: Floats,
) -> Realisation:
    """With `mismatch` and `largest` filled in."""
    sizes = np.abs(found.poles[found.poles != 0])
    low, high = (sizes.min() / 10, sizes.max() * 10) if len(sizes) else (1e-3, 1e3)
    decades = max(1.0, math.log10(high / low))
    grid = np.geomspace(low, high, int(12 * decades) + 1)
    ringing = found.poles[found.poles.imag > np.abs(found.poles.real)]
    most = np.linspace(0, len(ringing) - 1, min(len(ringing), 200)).astype(int)
    omega = np.concatenate([grid, ringing[most].imag, 2 * np.pi * frequencies[frequencies > 0]])
    s = 1j * np.unique(omega)
    expected = solve(system, s, [source], outputs).values[0]
    rebuilt = found.transfer(s)
    usable = np.isfinite(expected)
    difference = np.where(usable, np.abs(np.where(usable, rebuilt - expected, 0)), 0.0)
    difference[~np.isfinite(difference)] = np.inf
    largest = np.where(usable, np.abs(np.where(usable, expected, 0)), 0.0).max(axis=1)
    return replace(found, mismatch=difference.max(axis=1), largest=largest)


def _mode_edge(poles: Complexes, t: Floats, ramp: float) -> Complexes:
    """Response of 1/(s - pole) to the edge, (n_modes, n_times); t not negative."""
    p = poles[:, None]
    with np.errstate(over="ignore", invalid="ignore"):
        if ramp <= 0:
            return phi1(p * t) * t
        early = np.minimum(t, ramp)
        late = t - early
        state = phi2(p * early) * (early * early / ramp)
        rest: Complexes = np.exp(p * late) * state + phi1(p * late) * late
        return rest


def _cluster_edge(cluster: Cluster, t: Floats, ramp: float) -> Complexes:
    """Response of (s - T)⁻¹ B, (p, n_times)."""
    zero, rest = np.zeros(len(t)), np.zeros((len(cluster.b), len(t)))
    if ramp <= 0:
        return _advance(cluster, rest, zero + 1, zero, t)
    early = np.minimum(t, ramp)
    x = _advance(cluster, rest, zero, zero + 1 / ramp, early)
    return _advance(cluster, x, early / ramp, zero, t - early)


def phi1(z: Complexes) -> Complexes:
    """(e^z - 1)/z."""
    safe = np.where(z == 0, 1, z)
    result: Complexes = np.where(z == 0, 1, np.expm1(safe) / safe)
    return result


def phi2(z: Complexes) -> Complexes:
    """(e^z - 1 - z)/z²."""
    small = np.abs(z) < 0.7
    safe = np.where(small, 1, z)
    result: Complexes = np.asarray((phi1(safe) - 1) / safe)
    near = z[small]
    total = np.zeros_like(near)
    for k in range(18, -1, -1):
        total = total * near + 1 / math.factorial(k + 2)
    result[small] = total
    return result


def _advance(cluster: Cluster, x: Any, u: Floats, slope: Floats, elapsed: Floats) -> Complexes:
    """x after `elapsed` seconds of x' = T x + B u, u' = slope; one column a time."""
    n = len(cluster.b)
    size = float(np.linalg.norm(cluster.b)) or 1.0
    rate = float(np.linalg.norm(cluster.t, 1)) or 1.0
    matrix = np.zeros((n + 2, n + 2), dtype=complex)
    matrix[:n, :n] = cluster.t
    matrix[:n, n] = cluster.b / size
    matrix[n, n + 1] = rate
    state: Complexes = np.vstack([x, u * size, slope * (size / rate)]).astype(complex)
    return _doubled(matrix, state, elapsed)[:n]


def _doubled(matrix: Complexes, state: Complexes, elapsed: Floats) -> Complexes:
    """exp(matrix elapsed) state, one column a time: binary digits of each time choose exponentials."""
    longest = float(elapsed.max())
    norm = float(np.linalg.norm(matrix, 1))
    levels = max(0, math.ceil(math.log2(longest * norm) + 1)) if longest * norm > 0 else 0
    unit = math.ldexp(longest, -levels)
    whole = np.floor(elapsed / unit) if unit else np.zeros_like(elapsed)
    left = elapsed - whole * unit
    term = state
    for k in range(1, 20):  # what is left is half a time constant of the fastest at most
        term = matrix @ term * (left / k)
        state = state + term
    power = scipy.linalg.expm(matrix * unit)
    while whole.any():
        odd = whole % 2 == 1
        state[:, odd] = power @ state[:, odd]
        whole = np.floor(whole / 2)
        power = power @ power
    return state
