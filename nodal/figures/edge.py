"""Figures of the edge: transition, aberrations, settling, and the response parameters of high-voltage
measurement.

All of them are read off g, the response over its 100 % level. 0 % is the value before the edge; 100 % is the
limit at 0 Hz times the amplitude, or the value at T1 where the edge says `top at T1`. g is known everywhere
in the window, as polynomials that follow the response to a part in 10¹¹, so that instants and extremes are
those of the response and of no grid.

Where a contact is given, the edge stands at the contact itself, as an ideal source in place of the circuit
under test: what comes out is the measuring chain's own.

Pulse terms are those of IEEE Std 181, response parameters those of IEC 60060-2:2010; both from memory.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from nodal.assemble import cross_couplings, shared_nodes
from nodal.edge import EdgeResponse, Trace, edge_response
from nodal.figures.base import Asked, Floats, Result
from nodal.network import GROUND, Drive, Network, Stimulus
from nodal.parts import Resistor, VoltageSource
from nodal.response import Response, Unavailable
from nodal.solver.piecewise import Piecewise, piecewise
from nodal.values import Value

LOW, MIDDLE, HIGH = 0.1, 0.5, 0.9
"""Reference levels of transition durations and instants, parts of the amplitude (IEEE Std 181)."""

REST = 0.02
"""What the settling time of IEC 60060-2 allows to be left of the step response integral, per time."""

_FINE = 1e-11
"""What the polynomials may leave out, as part of the largest value."""

_NOTABLE = 1e-9
"""Jumps and bends below this part of the largest are left to the polynomials to find."""

_ROUNDING = 1e-12
"""Of an instant."""

_MOST_BREAKS = 100
_FIRST_ARRIVALS = 12

_SOURCE = "edge"

_WITH_A_TOP = "write `top at T1` in the edge to read the level there"


@dataclass(frozen=True)
class Record:
    """One reading's response to the edge, over its 100 % level: `g` is 0 before the edge.

    `level` is the 100 % level in the reading's unit, negative where the edge falls.
    """

    trace: Trace
    stimulus: Stimulus
    level: float
    g: Piecewise
    subject: str = "the response"

    @property
    def window(self) -> float:
        return self.stimulus.window

    @property
    def resolved(self) -> float:
        """What of g may be rounding."""
        return self.g.left_out + self.trace.error / abs(self.level)

    def passages(self, level: float) -> list[tuple[float, bool]]:
        """(time, upward) of every passage of g through a level above 0, that of a jump at the start among
        them."""
        at_once = [(0.0, True)] if float(self.g(0.0)) > level else []
        return at_once + self.g.crossings(level)

    def up(self, level: float) -> Floats:
        """The times of the upward ones."""
        return np.array([time for time, upward in self.passages(level) if upward])

    @cached_property
    def middle(self) -> float:
        """The 50 % instant, s: the first passage through 50 %. `Unavailable` where there is none."""
        found = self.up(MIDDLE)
        if not len(found):
            raise Unavailable(f"{self.subject} does not reach 50 % within the window; watch it for longer")
        return float(found[0])

    @cached_property
    def onset(self) -> float:
        """When the response sets in, s: the arrival of the first front that makes anything of it."""
        looks = self.g.edges[:-1, None] + np.diff(self.g.edges)[:, None] * np.linspace(0.0, 1.0, 9)[:-1]
        there = np.flatnonzero(np.abs(self.g(looks.ravel())) > self.resolved)
        first = float(looks.ravel()[there[0]]) if len(there) else 0.0
        arrived = self.trace.arrivals[self.trace.arrivals <= first]
        return float(arrived[-1]) if len(arrived) else 0.0

    @cached_property
    def tangent(self) -> float:
        """Where the tangent at the steepest front crosses 0 %, s; a jump is its own tangent."""
        reached = self.up(1.0)
        end = float(reached[0]) if len(reached) else self.window
        jumps = self._jumps
        inside = jumps[(jumps >= self.onset) & (jumps <= end)]
        if len(inside):
            return float(inside[0])
        front = self.g.cut(self.onset, end) if end > self.onset else self.g
        time, steepest = front.slope().maximum()
        return time - float(self.g(time)) / steepest

    @property
    def _jumps(self) -> Floats:
        if self.stimulus.ramp > 0:
            return np.zeros(0)
        rises = self.trace.jumps / self.level
        return np.asarray(self.trace.arrivals[rises > 0.01 * max(rises.max(), 1e-2)])


def record(response: Response, reading: str, drive: str | None = None, contact: str | None = None) -> Record:
    """The record of a reading after the network's own edge, made once and kept with `response`.

    `Unavailable` where there is no edge or no 100 % level.
    """
    key = ("record", reading, drive or response.network.default_drive, contact)
    if key not in response.kept:
        found = responses(response, drive) if contact is None else _at_contact(response, contact, reading)
        response.kept[key] = _record(found, reading)
    made: Record = response.kept[key]
    return made


def responses(response: Response, drive: str | None = None) -> EdgeResponse:
    """All readings after the network's edge, solved once and kept with `response`."""
    key = ("edge", drive or response.network.default_drive)
    if key not in response.kept:
        response.kept[key] = edge_response(response.network, drive=drive, contacts=())
    made: EdgeResponse = response.kept[key]
    return made


def keep(response: Response, found: EdgeResponse) -> None:
    """Let figures use an edge response that has been worked out already."""
    response.kept["edge", found.drive] = found


def _record(found: EdgeResponse, reading: str) -> Record:
    trace, stimulus = found.readings[reading], found.stimulus
    subject = f'reading "{reading}"'
    if found.grows:
        raise Unavailable(f"{subject} has no 100 % level: the network is not stable, see `nodal poles`")
    g = follow(trace, stimulus)
    if stimulus.top_at is not None:
        level = float(trace(stimulus.top_at))
        where = f"at the time of the top, {stimulus.top_at:g} s"
    else:
        level, where = trace.final, "at 0 Hz"
    if not np.isfinite(level):
        raise Unavailable(f"{subject} has no 100 % level: it does not come to rest; {_WITH_A_TOP}")
    if abs(level) <= g.left_out + trace.error:
        more = "" if stimulus.top_at is not None else f"; {_WITH_A_TOP}"
        raise Unavailable(f"{subject} has no 100 % level: it is zero {where}{more}")
    return Record(trace, stimulus, level, g.plus(0.0, factor=1.0 / level), subject)


def follow(trace: Trace, stimulus: Stimulus) -> Piecewise:
    """The response as polynomials, broken where it may jump or bend."""
    size = np.abs(trace.jumps)
    order = np.argsort(size, kind="stable")[::-1]
    largest = order[size[order] > _NOTABLE * max(float(size.max(initial=0.0)), 1e-300)][:_MOST_BREAKS]
    arrivals = np.unique(np.concatenate([trace.arrivals[:_FIRST_ARRIVALS], trace.arrivals[largest]]))
    breaks = np.concatenate([[0.0, stimulus.window], arrivals, arrivals + stimulus.ramp])
    inside = np.unique(breaks[(breaks >= 0) & (breaks <= stimulus.window)])
    # Sums of delays are rounded: what is no more than rounding apart is one break.
    apart = np.append(True, np.diff(inside) > 1e-12 * inside[1:])
    apart[-1] = True
    return piecewise(trace, inside[apart], lambda size: max(_FINE * size, trace.error))


def _at_contact(response: Response, contact: str, reading: str) -> EdgeResponse:
    network = driven(response.network, contact)
    shown = network.reading(reading)
    present = {GROUND}.union(*(part.nodes for part in network.parts))
    for node in (shown.a, shown.b):
        if node not in present:
            raise Unavailable(
                f'reading "{reading}" is taken at "{network.nodes[node]}" in the circuit under test, which '
                f'an edge at contact "{contact}" replaces; leave the contact out'
            )
    return edge_response(network, readings=[reading], contacts=())


def driven(network: Network, name: str) -> Network:
    """The measuring chain with an ideal source at a contact in place of the circuit under test.

    `Unavailable` where the two meet elsewhere too, so that the contact alone does not say what the chain
    gets.
    """
    contact = network.contact(name)
    chain = tuple(part for part in network.parts if part.side == "chain")
    test = [part for part in network.parts if part.side == "test"]
    grounded = [any(GROUND in part.nodes for part in side) for side in (chain, test)]
    meeting = [network.nodes[node] for node in shared_nodes(network) if node not in (contact.a, contact.b)]
    meeting += ["ground"] if all(grounded) and GROUND not in (contact.a, contact.b) else []
    nodes = " and ".join(f'"{node}"' for node in meeting)
    more = f"it meets the circuit under test at {nodes} too" if meeting else ""
    if cross_couplings(network):
        more = "it is coupled to the circuit under test"
    if more:
        raise Unavailable(
            f'an edge at contact "{name}" is not all that the chain gets: {more}; leave the contact out'
        )
    source = VoltageSource(_SOURCE, contact.a, contact.b, Value(1.0), side="test")
    held = (
        ()
        if grounded[0] or GROUND in (contact.a, contact.b)
        else (Resistor(f"{_SOURCE} reference", contact.b, GROUND, Value(0.0), side="test"),)
    )
    drive = Drive(_SOURCE, ((_SOURCE, 1.0),), "V")
    return replace(
        network, parts=(*chain, source, *held), drives=(drive,), default_drive=_SOURCE, contacts=(contact,)
    )


def _of(asked: Asked) -> Record:
    return record(asked.response, asked.reading, asked.drive, asked.contact)


def rise(asked: Asked) -> Result:
    """Transition duration of a rising edge, s: from 10 % to 90 % of the amplitude (IEEE Std 181).

    The 50 % instant is the first passage through 50 %; the others are those next to it, the last through 10 %
    before and the first through 90 % after it.
    """
    return _transition(_of(asked), rising=True)


def fall(asked: Asked) -> Result:
    """Transition duration of a falling edge, s: as `rise`, from 90 % of the fall left to 10 % of it."""
    return _transition(_of(asked), rising=False)


def _transition(found: Record, rising: bool) -> Result:
    if (found.level > 0) != rising:
        goes, name = ("rises", "rise") if found.level > 0 else ("falls", "fall")
        raise Unavailable(f"{found.subject} {goes}: ask for {name}")
    middle = found.middle
    low, high = found.up(LOW), found.up(HIGH)
    start = float(low[low <= middle][-1])
    ends = high[high >= middle]
    if not len(ends):
        return Result(None, "s", "not-reached", bound=(">=", found.window - start))
    return Result(float(ends[0]) - start)


def overshoot(asked: Asked) -> Result:
    """Largest excursion beyond the 100 % level after the 50 % instant, part of the amplitude; 0 where there
    is none.

    IEEE Std 181: overshoot, a post-transition aberration; the overshoot β of IEC 60060-2. `instant` is when.
    """
    found = _of(asked)
    if found.middle >= found.window:
        return Result(0.0)
    when, top = found.g.cut(found.middle, found.window).maximum()
    return _excursion(found, top - 1.0, when)


def preshoot(asked: Asked) -> Result:
    """Largest excursion beyond the 0 % level, away from 100 %, before the 50 % instant, part of the
    amplitude.

    IEEE Std 181: preshoot (there before the transition; the response before its front reaches halfway here,
    since nothing comes before the edge). 0 where there is none.
    """
    found = _of(asked)
    if found.middle <= 0.0:
        return Result(0.0)
    when, bottom = found.g.cut(0.0, found.middle).minimum()
    return _excursion(found, -bottom, when)


def _excursion(found: Record, size: float, when: float) -> Result:
    if size <= found.resolved:
        return Result(0.0)
    return Result(size, instant=when)


def settling(asked: Asked) -> Result:
    """Transition settling duration, s: from the 50 % instant until g stays within 1 ± band to the end of the
    window.

    IEEE Std 181. Not reached where g is outside at the end of the window.
    """
    found = _of(asked)
    if asked.band is None:
        raise Unavailable("settling needs a band: settling(reading, 2 %)")
    middle = found.middle
    edges = [time for side in (1 + asked.band, 1 - asked.band) for time, _ in found.passages(side)]
    end = float(found.g(found.window))
    if abs(end - 1.0) > asked.band + found.resolved:
        return Result(None, "s", "not-reached", bound=(">=", found.window - middle))
    return Result(max(max(edges, default=middle) - middle, 0.0))


def droop(asked: Asked) -> Result:
    """Fall from the top to the end of the window, part of the amplitude; negative where the response rises.

    Common usage of the trade (tilt of the top). The top is read where the edge says `top at T1`, which is
    needed.
    """
    found = _of(asked)
    if found.stimulus.top_at is None:
        raise Unavailable("droop is counted from a top: write `top at T1` in the edge")
    fallen = 1.0 - float(found.g(found.window))
    return Result(fallen if abs(fallen) > found.resolved else 0.0)


def propagation_delay(asked: Asked) -> Result:
    """From the 50 % instant of the source's edge to that of the reading, s (common usage; instants of IEEE
    Std 181)."""
    found = _of(asked)
    if not len(found.up(MIDDLE)):
        return Result(None, "s", "not-reached", bound=(">=", found.window - found.stimulus.ramp / 2))
    delay = found.middle - found.stimulus.ramp / 2
    return Result(delay if abs(delay) > _ROUNDING * found.middle else 0.0)


@dataclass(frozen=True)
class Parameters:
    """What response parameters are read from: T(t), the integral of 1 - g from the origin to the end of the
    record."""

    origin: float
    longest: float
    """t_max, s after the origin; the record ends at twice that."""
    integral: Piecewise

    @property
    def end(self) -> float:
        return float(self.integral.edges[-1])

    @property
    def whole(self) -> float:
        """T_N = T(2 t_max), s."""
        return float(self.integral(self.end))


def parameters(found: Record, origin: str = "true", epoch: float | None = None) -> Parameters:
    """T(t) of a record; `epoch` is t_max in seconds, half of what the window leaves where it is left out.

    `Unavailable` where the window is too short for the epoch.
    """
    start = max(found.tangent if origin == "tangent" else found.onset, 0.0)
    left = found.window - start
    longest = left / 2 if epoch is None else epoch
    if left <= 0 or 2 * longest > left * (1 + 1e-12):
        raise Unavailable(
            f"the record has to last for twice the epoch, {2 * longest:g} s from the origin; "
            f"the window leaves {left:g} s"
        )
    end = min(start + 2 * longest, found.window)
    return Parameters(start, longest, found.g.cut(start, end).plus(1.0, factor=-1.0).integral())


def _parameters(asked: Asked) -> Parameters:
    return parameters(_of(asked), asked.origin, asked.epoch)


def response_time(asked: Asked) -> Result:
    """T_N, s: ∫ (1 - g) dt from the origin to the end of the record (IEC 60060-2:2010, experimental response
    time).

    The record ends with the window, or twice the epoch t_max after the origin. `true` (where nothing is said)
    puts the origin where the response sets in: at the start of the edge, or when its first front has come
    through cables and delays. `tangent` puts it where the tangent at the steepest front leaves 0 %. The 100 %
    level is the module's, not a mean over an epoch. A ramp of duration T adds T/2 to what a step would show.
    """
    return Result(_parameters(asked).whole)


def partial_response_time(asked: Asked) -> Result:
    """T_α, s: the largest value of T(t) = ∫ (1 - g) dt from the origin over the record (IEC 60060-2:2010).

    As a rule that is where g first reaches 1. Origin and epoch as in `response_time`.
    """
    when, largest = _parameters(asked).integral.maximum()
    return Result(largest, instant=when)


def response_settling_time(asked: Asked) -> Result:
    """t_s, s from the origin: the shortest time from which on |T_N - T(t)| < 0.02 t, up to t_max (IEC
    60060-2:2010).

    T_N - T(t) is the residual response time. Origin and epoch as in `response_time`; not reached where the
    condition fails at t_max.
    """
    found = _parameters(asked)
    whole, origin = found.whole, found.origin
    last = 0.0
    stop = origin + found.longest
    for sign in (1.0, -1.0):
        over = found.integral.plus(sign * whole + REST * origin, -REST, -sign)  # > 0 where too much is left
        over = over.cut(origin, stop)
        if float(over(stop)) > 0.0:
            return Result(None, "s", "not-reached", bound=(">=", found.longest))
        last = max([last, *(time - origin for time, upward in over.crossings(0.0) if not upward)])
    return Result(last)
