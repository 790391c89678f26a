"""From a transfer function at complex s to the response in time: the Bromwich integral on a line of s.

y(t) = (e^(at)/π) ∫ Re[F(a + jω) e^(jωt)] dω over ω > 0. Away from ω = 0 F bends no faster than in proportion
to ω unless the network rings, so the line is cut into panels that double in length, halved where a resonance
asks for it. On each F is a sum of Legendre polynomials, whose integrals against e^(jωt) are spherical Bessel
functions (Bakhvalov and Vasil'eva 1968): exact for every t, so that one set of panels serves from the first
instant to the end of the window, and the error of a value is that of the polynomials alone. Nothing wraps
round, as it would with equidistant frequencies, and slowly decaying F costs a few panels a decade.

Steps come in as F = (H - H(∞))/s, the jump being put back in closed form. A ramp of duration d multiplies it
by (1 - e^(-sd))/(sd): as it stands on the panels where that is smooth (|s|d < 1), as two terms, the second
delayed by d, on the others. Neither subtracts what nearly cancels.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from nodal.solver.pattern import Complexes, Floats

NODES = 20
"""Gauss points a panel."""

SHIFT = 2.0
"""a times the window: errors grow by e² toward its end."""

FINE = 1e-14
"""What the polynomials of one panel may leave out of the response, as part of the largest |H|."""

NOISY = 1e-13
"""Rounding of H, over the largest |H|, that ends the line …"""

INEVITABLE = 4e-16
"""… unless it is below this part of what H is the sum or difference of."""

BEYOND = 2e-15
"""|H - H(∞)| over the largest |H| where the line may end."""

MOST_PANELS = 3000

_REACH = 40.0
"""Decades above 1/window that are looked at."""

_PROBES = 6
"""Per decade, for finding where the line may end."""

ROUNDING = 2e-14
"""What rounding does to a response, as part of the largest |H|: some hundred panels of a few units each,
times e²."""

Transfer = Callable[[Complexes], tuple[Complexes, Floats, Floats]]
"""(H, how far it may be off, size of what H is a sum of) at complex s, each (n, n_points), for any number
n at once."""

_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(NODES)
_TO_LEGENDRE: Floats = (
    np.polynomial.legendre.legvander(_POINTS, NODES - 1).T * _WEIGHTS * (np.arange(NODES) + 0.5)[:, None]
)
"""Coefficients from values at the Gauss points."""
_TURNS: Complexes = np.asarray(1j ** np.arange(NODES), dtype=np.complex128)


class NotInverted(Exception):
    """No response that could be trusted: says why."""


class _Lost(Exception):
    """Rounding between the probes was larger than at them."""


@dataclass(frozen=True)
class Inversion:
    """Responses of n transfer functions for 0 <= t <= window, after a unit step or ramp at t = 0.

    `jump` (n,): H(∞), `slope` (n,): what grows with s. `error` (n,): estimate of the largest absolute error.
    """

    window: float
    ramp: float
    jump: Floats
    largest: Floats
    error: Floats
    shift: float
    centre: Floats
    half: Floats
    values: Complexes
    """(n, n_panels, NODES): (H - H(∞) - tail)/s at the Gauss points."""
    tail: Tail

    def edge(self, times: Floats, which: slice | NDArray[np.intp] = slice(None)) -> Floats:
        """(n, n_times); 0 before t = 0, at a jump the value after it."""
        t = np.asarray(times, dtype=float)
        result = np.zeros((len(self.jump[which]), len(t)))
        on = t >= 0
        if on.any():
            level = np.minimum(t[on] / self.ramp, 1.0) if self.ramp > 0 else np.ones(int(on.sum()))
            result[:, on] = np.multiply.outer(self.jump[which], level)
            result[:, on] += self.tail.edge(t[on], self.ramp, which)
            if not self._quiet[which].all():
                result[:, on] += self.smooth(t[on], which)
        return result

    @cached_property
    def _quiet(self) -> NDArray[np.bool_]:
        """(n,): those that are nothing but their jump."""
        most = (np.abs(self.values).max(axis=-1) * self.half).sum(axis=-1)
        result: NDArray[np.bool_] = most < 1e-15 * self.largest
        return result

    def smooth(self, t: Floats, which: slice | NDArray[np.intp] = slice(None)) -> Floats:
        """Without the jump and the tail; at negative t what should be zero."""
        values, ramp = self.values[which], self.ramp
        if ramp <= 0:
            return self._integral(values, slice(None), t)
        s = self.shift + 1j * (self.centre[:, None] + self.half[:, None] * _POINTS)
        slow = (self.centre + self.half) * ramp < 1
        turned = s[slow] * ramp
        result = self._integral(values[:, slow] * (-np.expm1(-turned) / turned), slow, t)
        if not slow.all():
            fast = values[:, ~slow] / (s[~slow] * ramp)
            result += self._integral(fast, ~slow, t)
            result -= self._integral(fast, ~slow, t - ramp)
        return result

    def _integral(self, values: Complexes, panels: Any, t: Floats) -> Floats:
        coefficients = np.moveaxis(values @ _TO_LEGENDRE.T * _TURNS, 1, 0)
        stacked = np.concatenate([coefficients.real, coefficients.imag], axis=1)
        centre, half = self.centre[panels], self.half[panels]
        result = np.zeros((len(values), len(t)))
        step = max(1, int(2e5 // max(len(centre), 1)))
        for first in range(0, len(t), step):
            part = t[first : first + step]
            bessel = spherical_bessel(np.multiply.outer(half, part))
            angle, length = np.multiply.outer(centre, part), 2 * half[:, None]
            turned = np.stack([np.cos(angle) * length, -np.sin(angle) * length])
            sums = np.matmul(stacked, bessel).reshape(len(centre), 2, len(values), -1)
            result[:, first : first + step] = np.einsum("pcnt,cpt->nt", sums, turned)
        growth: Floats = np.exp(self.shift * t) / np.pi
        return result * growth


def invert(transfer: Transfer, jump: Floats, window: float, ramp: float = 0.0, outputs: int = 1) -> Inversion:
    """Prepare the responses of stable transfer functions for the times up to `window` (s).

    `jump` (n,) is H(∞). The rows of `transfer` belong to `outputs` readings in turn (row k to reading k mod
    outputs), whose largest |H| is the measure of all errors. Raises NotInverted for responses that grow by
    more than the window can take, and where the transfer function cannot be had.
    """
    shift = SHIFT / window
    omega = 10.0 ** np.arange(-1.0, _REACH, 1 / _PROBES) / window
    s = np.asarray(shift + 1j * omega, dtype=np.complex128)
    probed, noise, parts = transfer(s)
    usable, measure = usable_probes(probed, noise, parts, jump, outputs)
    while True:
        tail, last = _tail(s, (probed - jump[:, None])[:, :usable], measure, ramp, usable < len(s))
        count = math.ceil(math.log2(max(omega[last] / shift, 1)))
        edges = np.append(shift * 2.0 ** np.arange(-1, count), max(omega[last], shift))
        edges[0] = 0.0
        try:
            centre, half, values, left_out = _panels(transfer, jump, tail, measure, shift, edges, ramp)
            break
        except _Lost:
            usable = min(usable, last) - _PROBES // 2
            if usable < 4 * _PROBES:
                raise NotInverted("the transfer function is lost in rounding") from None
    beyond = np.abs(values[:, -1, -1]) * (edges[-1] / np.pi * passed(edges[-1], ramp))
    error = math.exp(SHIFT) * (left_out + beyond) + ROUNDING * measure
    made = Inversion(window, ramp, jump, measure, error, shift, centre, half, values, tail)
    before = np.abs(made.smooth(-window * 10.0 ** -np.arange(0.0, 12.0, 0.25))).max(axis=1)
    if not (before <= 1e-3 * measure).all():
        raise NotInverted("the response grows without bound, or too much of it could not be resolved")
    return replace(made, error=error + 2 * before)


def passed(omega: Any, ramp: float) -> Any:
    """About what a ramp lets through of a step's spectrum, 1 at most."""
    return 1 / np.maximum(omega * ramp, 1.0)


def usable_probes(
    probed: Complexes, noise: Floats, parts: Floats, jump: Floats, outputs: int
) -> tuple[int, Floats]:
    """(how many of the probes, in rising order, are not lost in rounding, the measure of each row's
    errors)."""
    count = len(probed) // outputs

    def by_output(x: Any) -> Floats:
        largest: Floats = np.where(np.isfinite(x), x, 0.0).reshape(count, outputs, -1).max(axis=0)
        return largest

    peak = np.maximum.accumulate(by_output(np.abs(probed)), axis=1)
    peak = np.maximum(peak, by_output(np.abs(jump))[:, -1:])
    before = np.maximum.accumulate(by_output(parts), axis=1)
    before[:, 1:] = before[:, :-1]
    with np.errstate(invalid="ignore"):
        off = noise.reshape(count, outputs, -1).max(axis=0)
        lost = ~(off <= np.maximum(NOISY * peak, INEVITABLE * before)).all(axis=0)
    usable = int(np.flatnonzero(lost)[0]) if lost.any() else len(lost)
    if usable < 4 * _PROBES:
        raise NotInverted("the transfer function is lost in rounding")
    largest = np.maximum(peak[:, usable - 1], off[:, :usable].max(axis=1) / FINE)
    return usable, np.tile(np.where(largest == 0, 1.0, largest), count)


def _tail(s: Complexes, smooth: Complexes, measure: Floats, ramp: float, cut: bool) -> tuple[Tail, int]:
    """(what H - H(∞) = `smooth` goes over to, index of the s where panels may end).

    They end where nothing is left, or, `cut`, where rounding takes over. There H - H(∞) goes with a power of
    s; that much of it is put in in closed form.
    """
    weight = passed(s[: smooth.shape[1]].imag, ramp)
    there = ~(np.abs(smooth) * weight <= BEYOND * measure[:, None]).all(axis=0)
    last = int(np.flatnonzero(there)[-1]) + 2 if there.any() else 0
    none = np.ones(len(measure))
    if last < len(there) or not cut:
        return Tail(none, none, 0 * none), min(last, len(there) - 1)
    last = len(there) - 1
    near, far = np.abs(smooth[:, last - _PROBES]), np.abs(smooth[:, last])
    fits = (far > BEYOND * measure) & (near > far)
    slope = np.log10(np.where(fits, near / np.where(fits, far, 1), 10.0))
    power = np.clip(np.round(2 * slope) / 2, 0.5, 2.0)
    corner = np.where(fits, (far / measure) ** (1 / power), 0) * abs(s[last])
    corner = np.maximum(corner, s[0].real)
    ratio = smooth[:, last] / _falling(s[last : last + 1], corner, power)[:, 0]
    fits = fits & (np.abs(ratio.imag) < 0.1 * np.abs(ratio.real))
    return Tail(power, corner, np.where(fits, ratio.real, 0.0)), last


def _falling(s: Complexes, corner: Floats, power: Floats) -> Complexes:
    """(1 + s/corner)^-power, (n, n_points)."""
    result: Complexes = (1 + s / corner[:, None]) ** -power[:, None]
    return result


@dataclass(frozen=True, slots=True)
class Tail:
    """factor (1 + s/corner)^-power, (n,) each: in time the incomplete gamma function P(power, corner t)."""

    power: Floats
    corner: Floats
    factor: Floats

    def transfer(self, s: Complexes) -> Complexes:
        """(n, n_points)."""
        return self.factor[:, None] * _falling(s, self.corner, self.power)

    def edge(self, t: Floats, ramp: float, which: Any) -> Floats:
        """(n, n_times), t not negative."""
        power, corner, factor = (x[which][:, None] for x in (self.power, self.corner, self.factor))
        if not factor.any():
            return np.zeros((len(factor), len(t)))
        result: Floats
        if ramp <= 0:
            result = factor * special.gammainc(power, corner * t)
            return result

        def area(x: Floats) -> Any:
            up = np.maximum(x, 0) * corner
            return (up * special.gammainc(power, up) - power * special.gammainc(power + 1, up)) / corner

        early = (area(t) - area(t - ramp)) / ramp
        inside = np.maximum(t[None, :] + (_POINTS[:, None] - 1) * (ramp / 2), 0)
        late = sum(w / 2 * special.gammainc(power, corner * x) for w, x in zip(_WEIGHTS, inside, strict=True))
        result = factor * np.where(t > 8 * ramp, late, early)
        return result


def _panels(
    transfer: Transfer,
    jump: Floats,
    tail: Tail,
    measure: Floats,
    shift: float,
    edges: Floats,
    ramp: float,
) -> tuple[Floats, Floats, Complexes, Floats]:
    """(centre, half, values, sum of what the polynomials leave out) of panels that are all fine enough."""
    kept: list[tuple[Floats, Floats, Complexes]] = []
    left_out = np.zeros(len(jump))
    centre, half = (edges[1:] + edges[:-1]) / 2, np.diff(edges) / 2
    count = 0
    while len(centre):
        s = np.asarray(shift + 1j * (centre[:, None] + half[:, None] * _POINTS), dtype=np.complex128)
        h, noise, _ = transfer(s.ravel())
        if not (noise <= 100 * NOISY * measure[:, None]).all():
            raise _Lost
        values = (h - jump[:, None] - tail.transfer(s.ravel())).reshape(len(jump), *s.shape) / s
        high = values @ _TO_LEGENDRE[-2:].T
        weight = half * (2 / np.pi) * passed(np.maximum(centre - half, shift), ramp)
        rough = np.abs(high).sum(axis=-1) * weight
        count += len(centre)
        split = (rough > FINE * measure[:, None]).any(axis=0) & (half > shift / 8)
        if count + 2 * int(split.sum()) > MOST_PANELS:
            # Polynomials that do not follow the curve may be wrong by as much as there is of it.
            rough[:, split] = (np.abs(values).mean(axis=-1) * weight)[:, split]
            split[:] = False
        kept.append((centre[~split], half[~split], values[:, ~split]))
        left_out += rough[:, ~split].sum(axis=1)
        quarter = half[split] / 2
        centre = np.concatenate([centre[split] - quarter, centre[split] + quarter])
        half = np.concatenate([quarter, quarter])
        count -= int(split.sum())
    centre = np.concatenate([c for c, _, _ in kept])
    order = np.argsort(centre)
    half = np.concatenate([h for _, h, _ in kept])
    values = np.concatenate([v for _, _, v in kept], axis=1)
    return centre[order], half[order], values[:, order], left_out


def spherical_bessel(x: Floats) -> Floats:
    """j_k(x) for k = 0 … NODES - 1, put before the last axis of x; absolute accuracy of a few roundings.

    Upward recurrence where |x| > NODES, downward below (Miller's; Abramowitz and Stegun
    10.1.19 and 10.5), the power series next to 0.
    """
    result: Floats = np.empty((*x.shape[:-1], NODES, x.shape[-1]))
    target = np.moveaxis(result, -2, 0)
    size = np.abs(x)
    tiny, large = size < 1, size > NODES
    middle = ~tiny & ~large
    target[:, tiny] = _series(size[tiny])
    target[:, large] = _upward(size[large])
    target[:, middle] = _downward(size[middle])
    target[1::2][:, x < 0] *= -1
    return result


def _series(x: Floats) -> Floats:
    found = np.empty((NODES, len(x)))
    square = -x * x / 2
    front = np.ones_like(x)
    for k in range(NODES):
        total = np.ones_like(x)
        for m in range(9, 0, -1):
            total = 1 + total * square / (m * (2 * k + 2 * m + 1))
        found[k] = front * total
        front = front * x / (2 * k + 3)
    return found


def _upward(x: Floats) -> Floats:
    found = np.empty((NODES, len(x)))
    found[0] = np.sin(x) / x
    found[1] = (found[0] - np.cos(x)) / x
    for k in range(1, NODES - 1):
        found[k + 1] = (2 * k + 1) / x * found[k] - found[k - 1]
    return found


_ABOVE = NODES + 32


def _downward(x: Floats) -> Floats:
    found = np.empty((NODES, len(x)))
    above, here = np.zeros_like(x), np.full_like(x, 1e-250)
    for k in range(_ABOVE, -1, -1):
        if k < NODES:
            found[k] = here
        above, here = here, (2 * k + 1) / x * here - above
    zeroth = np.sin(x) / x
    first = (zeroth - np.cos(x)) / x
    use = np.abs(zeroth) > np.abs(first)
    scale = np.where(use, zeroth, first) / np.where(use, found[0], found[1])
    scaled: Floats = found * scale
    return scaled
