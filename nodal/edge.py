"""The edge of a network: readings and contacts after a step or a ramp, in volts, and when they were measured
at all.

The stimulus is the drive's sources with the amplitudes that the text gives them, all moving together from 0
at t = 0. Curves are functions that can be asked for any time up to the end of the window; the samples of a
table or a plot come from them and are placed by them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.assemble import (
    Assembly,
    Functional,
    assemble,
    described,
    excitation,
    held_together,
    references,
    side_parts,
)
from nodal.network import Contact, Drive, Network, Stimulus
from nodal.parts import CurrentSource, VoltageSource
from nodal.response import Response, SingularNetwork, Unavailable
from nodal.solver.edges import Edges, Impulse, respond, sampled
from nodal.solver.inversion import NotInverted
from nodal.solver.limit import limit
from nodal.solver.plan import Singular

Floats = NDArray[np.float64]

POINTS = 500
"""Samples where the caller asks for no number."""


_ON_THE_AXIS = 1e-9
"""A pole whose real part is below this much of it is without damping, but for rounding."""


@dataclass(frozen=True)
class Trace:
    """One quantity after the edge. Call it with times (s, any shape) for volts, 0 before t = 0.

    `before` is its value before the edge, `final` the limit for t → ∞ (infinite where it grows, not a number
    where there is none), `error` the estimated largest absolute error, `method` how it was found.
    """

    name: str
    final: float
    error: float
    method: str
    _edges: Edges
    _output: int
    before: float = 0.0

    def __call__(self, times: ArrayLike) -> Floats:
        t = np.asarray(times, dtype=np.float64)
        values: Floats = self._edges(t.ravel(), [self._output])[0]
        return values.reshape(t.shape)

    @property
    def arrivals(self) -> Floats:
        """When fronts set in, s: where the curve may jump or bend."""
        return self._edges.arrivals

    @property
    def jumps(self) -> Floats:
        """By how much it jumps at each arrival if the edge is an ideal step."""
        jumps: Floats = self._edges.jumps[self._output]
        return jumps


@dataclass(frozen=True, slots=True)
class ContactTraces:
    """At one contact; `missing` says why an undisturbed voltage that is None is not there."""

    loaded: Trace
    undisturbed: Trace | None
    missing: str = ""


@dataclass(frozen=True)
class EdgeResponse:
    """What `edge_response` gives. `stimulus` is what was applied: duration of the ramp and window, s."""

    drive: str
    stimulus: Stimulus
    readings: dict[str, Trace]
    contacts: dict[str, ContactTraces]
    _edges: tuple[Edges, ...]

    @property
    def estimated_error(self) -> float:
        """The largest among all traces, V (or the reading's unit)."""
        return max((trace.error for trace in self.traces), default=0.0)

    @property
    def grows(self) -> bool:
        """Whether a pole right of the axis was found, so that nothing settles."""
        found = [edges.realisation.poles for edges in self._edges if edges.realisation is not None]
        return any(bool((poles.real > _ON_THE_AXIS * np.abs(poles)).any()) for poles in found)

    @property
    def traces(self) -> list[Trace]:
        """All of them, undisturbed, loaded, displayed."""
        at_contacts = [(c.undisturbed, c.loaded) for c in self.contacts.values()]
        return [t for pair in at_contacts for t in pair if t is not None] + list(self.readings.values())

    def grid(self, points: int = POINTS, over: float | None = None) -> Floats:
        """Times for a table or a plot, at most `points`, up to `over` s (the window if left out).

        Dense where the traces move and next to their jumps, sparse where they do not; decades get their
        share.
        """
        end = self.stimulus.window if over is None else over
        if not 0 < end <= self.stimulus.window:
            raise ValueError("`over` must lie within the window")
        if points < 2:
            raise ValueError("at least two points")
        share = points // max(len(self._edges), 1)
        parts = [sampled(edges, share, end) for edges in self._edges]
        return np.unique(np.concatenate([np.array([0.0, end]), *parts]))


def edge_response(
    network: Network,
    *,
    drive: str | None = None,
    stimulus: Stimulus | None = None,
    readings: Sequence[str] | None = None,
    contacts: Sequence[str] | None = None,
) -> EdgeResponse:
    """Readings and contacts (all of them where left out) after the network's edge or another `stimulus`.

    Raises Unavailable where there is no stimulus, no drive to choose, where a step makes an impulse or where
    no response can be trusted; SingularNetwork where there is no solution; KeyError for names that do not
    exist.
    """
    stimulus = stimulus if stimulus is not None else network.stimulus
    if stimulus is None:
        raise Unavailable("no edge: write `edge 1 ns over 100 ns` or `step over 100 ns`")
    if not (stimulus.window > 0 and 0 <= stimulus.ramp < np.inf and np.isfinite(stimulus.window)):
        raise ValueError("the window of an edge must be finite and above zero, its duration not negative")
    chosen = _drive(network, drive)
    weights = _amplitudes(network, chosen)
    shown = network.readings if readings is None else [network.reading(name) for name in readings]
    touched = network.contacts if contacts is None else [network.contact(name) for name in contacts]
    whole = assemble(network)
    outputs = [_scaled(whole.across(r.a, r.b), r.times.nominal) for r in shown]
    outputs += [whole.across(c.a, c.b) for c in touched]
    names = [f'reading "{r.name}"' for r in shown] + [f'contact "{c.name}"' for c in touched]
    edges, traces = _traces(network, whole, weights, outputs, names, stimulus)
    made = [edges]
    missing = {c.name: _no_undisturbed(network, c, chosen.name) for c in touched}
    before = [c for c in touched if not missing[c.name]]
    undisturbed: dict[str, Trace] = {}
    if before:
        parts = side_parts(network, "test")
        alone = assemble(network, parts, merge=references(network, parts, held_together(network, parts)))
        outputs = [alone.across(c.a, c.b) for c in before]
        names = [f'the undisturbed voltage at contact "{c.name}"' for c in before]
        edges, found = _traces(network, alone, weights, outputs, names, stimulus)
        made.append(edges)
        undisturbed = dict(zip((c.name for c in before), found, strict=True))
    return EdgeResponse(
        chosen.name,
        stimulus,
        {r.name: trace for r, trace in zip(shown, traces, strict=False)},
        {
            c.name: ContactTraces(trace, undisturbed.get(c.name), missing[c.name])
            for c, trace in zip(touched, traces[len(shown) :], strict=True)
        },
        tuple(made),
    )


def _drive(network: Network, name: str | None) -> Drive:
    chosen = name if name is not None else network.default_drive
    if chosen is None:
        names = ", ".join(drive.name for drive in network.drives)
        raise Unavailable(f"several sources stand here and no drive is chosen; there are: {names}")
    return network.drive(chosen)


def _amplitudes(network: Network, drive: Drive) -> list[tuple[str, float]]:
    """(source, volts or amperes): the drive's weights times the amplitudes as written."""
    written = {
        part.name: part.value.nominal
        for part in network.parts
        if isinstance(part, VoltageSource | CurrentSource)
    }
    return [(source, weight * written[source]) for source, weight in drive.weights]


def _no_undisturbed(network: Network, contact: Contact, drive: str) -> str:
    """Why a contact has no undisturbed voltage; empty where it has."""
    try:
        Response(network).undisturbed([1.0], contact.name, drive)
    except Unavailable as reason:
        return str(reason)
    return ""


def _traces(
    network: Network,
    assembly: Assembly,
    weights: Sequence[tuple[str, float]],
    outputs: Sequence[Functional],
    names: Sequence[str],
    stimulus: Stimulus,
) -> tuple[Edges, list[Trace]]:
    source = excitation(assembly, weights)
    grid = network.grid
    frequencies = np.geomspace(grid.low, grid.high, 101) if grid and 0 < grid.low < grid.high else np.zeros(0)
    try:
        edges = respond(
            assembly.system,
            source,
            outputs,
            ramp=stimulus.ramp,
            window=stimulus.window,
            frequencies=frequencies,
        )
        final = _final(assembly, source, outputs)
    except Impulse as impulse:
        which = ", ".join(names[k] for k in impulse.outputs)
        kind = "ramp" if stimulus.ramp > 0 else "ideal step"
        raise Unavailable(
            f"the {kind} drives {which} to an impulse, which has no height: nothing in its way limits the "
            "current; add the resistance or inductance that is there, or use a ramp"
        ) from impulse
    except NotInverted as trouble:
        raise Unavailable(f"no edge response that could be trusted: {trouble}") from trouble
    except Singular as singular:
        reason = f"no unique solution: nothing settles {described(assembly, singular.unknowns)}"
        raise SingularNetwork(reason) from singular
    return edges, [
        Trace(name, float(final[k]), float(edges.error[k]), edges.methods[k], edges, k)
        for k, name in enumerate(names)
    ]


def _final(assembly: Assembly, source: Functional, outputs: Sequence[Functional]) -> Floats:
    try:
        values: Floats = limit(assembly.system, [source], outputs)[0][0]
        return values
    except (Singular, ArithmeticError):
        return np.full(len(outputs), np.nan)


def _scaled(output: Functional, factor: float) -> Functional:
    return {unknown: weight * factor for unknown, weight in output.items()}
