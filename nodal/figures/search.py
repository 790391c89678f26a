"""Extremes, crossings and integrals of curves over frequency, found on the network itself.

A search starts from a grid that no feature of the network can hide from (`grid`), and refines by
bracketing: every round evaluates a few points in all open brackets at once, so that the solver is called
with long arrays.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from nodal.network import Network, SweepGrid
from nodal.parts.amplifier import Amplifier
from nodal.parts.cable import Cable
from nodal.response import Response, Unavailable

Floats = NDArray[np.float64]
Curve = Callable[[Floats], Floats]
"""A real quantity at frequencies in Hz, same shape; may be infinite, never undefined."""

Span = tuple[float, float]
"""Hz, low and high; low may be 0."""

MOST_POINTS = 2_000_000
_STEPS_PER_WAVE = 16
_LOWEST = 1e-300
"""Hz, above the smallest number whose reciprocal is finite."""
_LEAST_PER_DECADE = 20.0


@dataclass(frozen=True, slots=True)
class Crossing:
    """Where a curve passes through a level, Hz, and which way as the frequency rises."""

    frequency: float
    direction: Literal["up", "down"]


def default_span(network: Network) -> Span:
    """The span of the file's `sweep`; `Unavailable` where it has none."""
    if network.grid is None:
        raise Unavailable("the file has no sweep statement, so a span of frequencies is needed")
    return network.grid.low, network.grid.high


def sweep_points(grid: SweepGrid) -> Floats:
    """The frequencies (Hz) of a sweep: `per_decade` a decade up from `low`, whole decades exact, `high` last.

    ValueError where there would be more than `MOST_POINTS` or the span is empty.
    """
    if not 0.0 < grid.low <= grid.high or grid.per_decade <= 0.0:
        raise ValueError("an empty sweep")
    steps = math.log10(grid.high / grid.low) * grid.per_decade
    if steps > MOST_POINTS:
        raise ValueError("too many points")
    whole = np.arange(int(steps * (1.0 - 1e-12)) + 1) / grid.per_decade
    points: Floats = grid.low * 10.0**whole
    return np.append(points[points < grid.high * (1.0 - 1e-12)], grid.high)


def travel_time(network: Network) -> float:
    """Seconds along the longest cable or amplifier delay, 0 where there is none: it sets the finest
    ripple.
    """
    return max((part.delay for part in network.parts if isinstance(part, Cable | Amplifier)), default=0.0)


def grid(response: Response, span: Span) -> Floats:
    """Ascending frequencies (Hz) to start a search from, both ends of `span` included.

    The points of the sweep (20 a decade at least), the frequencies of lightly damped poles, and steps of
    at most a sixteenth wave of the longest cable. A span from 0 Hz reaches six decades below the sweep,
    or below its own upper end.
    """
    low, high = span
    network = response.network
    per_decade = max(network.grid.per_decade if network.grid else 0.0, _LEAST_PER_DECADE)
    bottom = low
    if low == 0.0:
        bottom = max(1e-6 * min(network.grid.low if network.grid else high, high), _LOWEST)
    decades = np.log10(high) - np.log10(bottom) if high > bottom else 0.0
    step = 1.0 / (_STEPS_PER_WAVE * travel_time(network)) if travel_time(network) > 0.0 else np.inf
    count = int(np.ceil(decades * per_decade)) + 1
    if count + (high - low) / step > MOST_POINTS:
        raise Unavailable(
            f"a search from {low:g} Hz to {high:g} Hz would need more than {MOST_POINTS:,} points; "
            "narrow the span"
        )
    points = [np.array([low, high]), np.geomspace(bottom, high, max(count, 2))]
    fine = min(max(step / (10.0 ** (1.0 / per_decade) - 1.0), low), high)
    if fine < high:
        points.append(np.linspace(fine, high, int(np.ceil((high - fine) / step)) + 1))
    poles = response.lightly_damped()
    points.append(poles[(poles > low) & (poles < high)])
    merged: Floats = np.unique(np.concatenate(points))
    return merged[(merged >= low) & (merged <= high)]


def maximum(curve: Curve, x: Floats) -> tuple[float, float]:
    """(frequency, value) of the largest value of `curve` over the span of the ascending grid `x`.

    The value of a smooth maximum is exact to rounding; its place is, by nature, to half as many digits.
    """
    peaks, values = _refined_maxima(curve, x, curve(x), lambda y, spread: y + 4.0 * spread >= np.max(y))
    best = int(np.argmax(values))
    return float(peaks[best]), float(values[best])


def minimum(curve: Curve, x: Floats) -> tuple[float, float]:
    """(frequency, value) of the smallest value; see `maximum`."""
    frequency, value = maximum(lambda f: -curve(f), x)
    return frequency, -value


def crossings(curve: Curve, x: Floats, level: float) -> tuple[Crossing, ...]:
    """Every place where `curve` passes through `level` over the grid `x`, ascending, to 1e-12 relative.

    Humps and dips that reach the level only between two points of the grid are found first.
    """
    y = curve(x)

    def may_reach(values: Floats, spread: Floats) -> NDArray[np.bool_]:
        return (values < 0.0) & (values + 4.0 * spread >= 0.0)

    humps, heights = _refined_maxima(lambda f: curve(f) - level, x, y - level, may_reach)
    dips, depths = _refined_maxima(lambda f: level - curve(f), x, level - y, may_reach)
    every = np.concatenate([x, humps, dips])
    above = np.concatenate([y >= level, heights >= 0.0, depths <= 0.0])
    order = np.argsort(every, kind="stable")
    every, above = every[order], above[order]
    changes = np.flatnonzero(above[1:] != above[:-1])
    if changes.size == 0:
        return ()
    found = _bisected(curve, level, every[changes], every[changes + 1], above[changes + 1])
    return tuple(
        Crossing(float(f), "up" if up else "down") for f, up in zip(found, above[changes + 1], strict=True)
    )


def _between(low: Floats, high: Floats, fractions: Floats) -> Floats:
    """Points inside brackets, one row a bracket: evenly spaced on a logarithmic scale, linearly from
    zero.
    """
    low, high = low[:, None], high[:, None]
    ratio = np.where(low > 0.0, high / np.where(low > 0.0, low, 1.0), 1.0)
    return np.where(low > 0.0, low * ratio**fractions, low + (high - low) * fractions)


def _evaluate(curve: Curve, points: Floats) -> Floats:
    return curve(points.ravel()).reshape(points.shape)


def _refined_maxima(
    curve: Curve, x: Floats, y: Floats, worth: Callable[[Floats, Floats], NDArray[np.bool_]]
) -> tuple[Floats, Floats]:
    """Places and values of the local maxima of `curve`, the refinement given up where `worth` says so.

    `worth(values, spread)` is asked each round but the first two; `spread` is how far the ends of a
    bracket lie below its middle, so that a smooth curve rises less than that above the middle.
    """
    padded = np.concatenate([[-np.inf], y, [-np.inf]])
    tops = np.flatnonzero((y >= padded[:-2]) & (y >= padded[2:]))
    low, mid, high = x[np.maximum(tops - 1, 0)], x[tops].copy(), x[np.minimum(tops + 1, x.size - 1)]
    ends = np.minimum(y[np.maximum(tops - 1, 0)], y[np.minimum(tops + 1, x.size - 1)])
    value = y[tops].copy()
    fractions = np.arange(1, 5) / 5.0
    for turn in range(40):
        with np.errstate(invalid="ignore"):
            spread = np.where(np.isposinf(value), 0.0, value - ends)
        active = (spread > 1e-13 * np.abs(value)) & (high - low > 1e-9 * high)
        if turn >= 2:
            active &= worth(value, spread)
        i = np.flatnonzero(active)
        if i.size == 0:
            break
        points = np.concatenate(
            [
                low[i, None],
                _between(low[i], mid[i], fractions),
                mid[i, None],
                _between(mid[i], high[i], fractions),
                high[i, None],
            ],
            axis=1,
        )
        values = _evaluate(curve, points)
        rows = np.arange(i.size)
        best = np.argmax(values, axis=1)
        # A middle that ties stays: on a plateau of rounding errors the bracket would wander off otherwise.
        best = np.where(values[:, 5] >= values[rows, best], 5, best)
        mid[i], value[i] = points[rows, best], values[rows, best]
        below = np.maximum((points < mid[i, None]).sum(axis=1) - 1, 0)
        above = np.minimum((points <= mid[i, None]).sum(axis=1), points.shape[1] - 1)
        low[i], high[i] = points[rows, below], points[rows, above]
        ends[i] = np.minimum(values[rows, below], values[rows, above])
    return mid, value


def _bisected(curve: Curve, level: float, low: Floats, high: Floats, rising: NDArray[np.bool_]) -> Floats:
    """Where `curve` passes `level` inside each bracket; `rising`: it is above at the upper end."""
    low, high = low.copy(), high.copy()
    fractions = np.arange(1, 9) / 9.0
    for _ in range(60):
        i = np.flatnonzero(high - low > 1e-14 * high)
        if i.size == 0:
            break
        inner = _between(low[i], high[i], fractions)
        beyond = (_evaluate(curve, inner) >= level) == rising[i, None]
        points = np.concatenate([low[i, None], inner, high[i, None]], axis=1)
        first = np.where(beyond.any(axis=1), beyond.argmax(axis=1), beyond.shape[1])
        rows = np.arange(i.size)
        narrowed = points[rows, first + 1] - points[rows, first] < high[i] - low[i]
        low[i], high[i] = points[rows, first], points[rows, first + 1]
        if not narrowed.any():
            break
    return 0.5 * (low + high)


# Gauss-Kronrod 7-15 nodes and weights on [-1, 1] (Kronrod 1965; digits as tabulated in numerical handbooks).
_NODES = np.array(
    [
        0.991455371120812639206854697526329,
        0.949107912342758524526189684047851,
        0.864864423359769072789712788640926,
        0.741531185599394439863864773280788,
        0.586087235467691130294144691693013,
        0.405845151377397166906606412076961,
        0.207784955007898467600689403773245,
        0.0,
    ]
)
_KRONROD = np.array(
    [
        0.022935322010529224963732008058970,
        0.063092092629978553290700663189204,
        0.104790010322250183839876322541518,
        0.140653259715525918745189590510238,
        0.169004726639267902826583426598550,
        0.190350578064785409913256402421014,
        0.204432940075298892414161999234649,
        0.209482141084727828012999174891714,
    ]
)
_GAUSS = np.array(
    [
        0.129484966168869693270611432679082,
        0.279705391489276667901467771423780,
        0.381830050505118944950369775488975,
        0.417959183673469387755102040816327,
    ]
)
_ABSCISSAE = np.concatenate([-_NODES, _NODES[-2::-1]])
_FULL_WEIGHTS = np.concatenate([_KRONROD, _KRONROD[-2::-1]])
_COARSE_WEIGHTS = np.zeros(15)
_COARSE_WEIGHTS[1::2] = np.concatenate([_GAUSS, _GAUSS[-2::-1]])


def integral(curve: Curve, breaks: Floats, tolerance: float = 1e-9) -> tuple[float, float]:
    """(∫ curve df from the first to the last of the ascending `breaks`, estimated absolute error).

    Adaptive Gauss-Kronrod quadrature on ln f (on f in a first interval that starts at 0 Hz); intervals
    whose estimate exceeds their share of `tolerance` times the whole are halved. `Unavailable` where it
    does not settle.
    """
    low, high = breaks[:-1], breaks[1:]
    from_zero = low == 0.0
    settled = error_settled = 0.0
    for _ in range(60):
        start = np.where(from_zero, 0.0, np.log(np.where(from_zero, 1.0, low)))
        stop = np.where(from_zero, high, np.log(high))
        half = 0.5 * (stop - start)
        at = 0.5 * (start + stop)[:, None] + half[:, None] * _ABSCISSAE
        f = np.where(from_zero[:, None], at, np.exp(np.where(from_zero[:, None], 0.0, at)))
        density = _evaluate(curve, f) * np.where(from_zero[:, None], 1.0, f)
        if not np.all(np.isfinite(density)):
            raise Unavailable("the density is infinite inside the span")
        fine, coarse = half * (density @ _FULL_WEIGHTS), half * (density @ _COARSE_WEIGHTS)
        error = np.abs(fine - coarse)
        total = settled + float(fine.sum())
        share = tolerance * abs(total) / max(breaks.size - 1, 1)
        rest = error > np.maximum(share, 1e-15 * np.abs(fine))
        settled += float(fine[~rest].sum())
        error_settled += float(error[~rest].sum())
        if not rest.any():
            return settled, error_settled
        if rest.sum() > MOST_POINTS // 15:
            break
        low, high, from_zero = low[rest], high[rest], from_zero[rest]
        middle = np.where(from_zero, 0.5 * high, np.sqrt(low * high))
        # Only the part that touches 0 Hz goes on linearly.
        low, high = np.concatenate([low, middle]), np.concatenate([middle, high])
        from_zero = low == 0.0
    raise Unavailable("the integral over the span does not settle")
