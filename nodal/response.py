"""Curves of one network: what its readings, nodes and contacts do at any frequencies.

A `Response` turns a `Network` into systems once (the whole network; the circuit under test alone; the chain
alone), plans each once, and evaluates at any array of frequencies in Hz; 0 is the limit as the frequency
goes to zero. Everything is per unit of the drive: amplitudes are the drive's weights.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.assemble import (
    Assembly,
    Functional,
    assemble,
    combined,
    cross_couplings,
    described,
    excitation,
    forced,
    held_together,
    joined,
    references,
    shared_nodes,
    side_parts,
)
from nodal.network import GROUND, Contact, Drive, Network
from nodal.parts import Amplifier, Cable, Capacitor, CurrentSource, Inductor, Part, VoltageSource
from nodal.parts.coupling import coefficient
from nodal.solver.arithmetic import MpArithmetic
from nodal.solver.exact import Exact
from nodal.solver.limit import limit_of
from nodal.solver.matrix import System
from nodal.solver.modes import poles, poles_near
from nodal.solver.plan import Plan, Singular
from nodal.solver.sweep import derivative, plan_for, solve

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

REACH = 100.0
"""A plan serves frequencies this far outside the range that it was made for."""

POLES_SOUGHT = 400
"""Unknowns up to which all poles are found for search grids: the time goes with the third power."""

SHIFTS_PER_DECADE = 5

NOISE_VALUES = 1 << 20
"""How many values a block of the noise calculation keeps at once."""

NEARLY_REST = 2j * np.pi * 1e-30
"""rad/s: where the noise of parts is taken for the limit at 0 Hz."""


class Unavailable(Exception):
    """A quantity this network does not have (the undisturbed voltage of an ideal current source …)."""


class SingularNetwork(Unavailable):
    """The network, or one side of it, has no unique solution: the message names what moves."""


@dataclass(frozen=True, slots=True)
class Curve:
    """Complex `values` (infinite where the quantity is) and estimated relative `error`, of one shape."""

    values: Complexes
    error: Floats


@dataclass(slots=True)
class Quality:
    """The worst error estimate so far, and how many points needed more than one correction step."""

    worst_estimated_error: float = 0.0
    points_refined: int = 0


@dataclass(frozen=True, slots=True)
class ContactCurves:
    """Curves at one contact, per unit of the drive; `missing` says why one that is None is not there."""

    impedance: Curve
    loaded: Curve
    undisturbed: Curve | None
    missing: str = ""


@dataclass(frozen=True, slots=True)
class SweepResult:
    """What `Response.sweep` gives: curves by name, all over `frequency` (Hz)."""

    frequency: Floats
    drive: str
    readings: dict[str, Curve]
    nodes: dict[str, Curve]
    contacts: dict[str, ContactCurves]
    quality: Quality


@dataclass(frozen=True, slots=True)
class Estimated:
    """A value with its estimated absolute error; an array over points, or one number of many digits."""

    value: Any
    error: Any

    def __add__(self, other: Estimated) -> Estimated:
        return Estimated(self.value + other.value, self.error + other.error)

    def __sub__(self, other: Estimated) -> Estimated:
        return Estimated(self.value - other.value, self.error + other.error)

    def __truediv__(self, other: Estimated) -> Estimated:
        value = self.value / other.value
        return Estimated(value, (self.error + abs(value) * other.error) / abs(other.value))

    def times(self, factor: Any) -> Estimated:
        """By an exact number."""
        return Estimated(self.value * factor, self.error * abs(factor))


Source = Mapping[int, Any]
"""{equation: number or Estimated}."""


class Run(Protocol):
    """Solves systems at given s: an array of points, or one number of many digits next to zero."""

    s: Any

    def solve(
        self, assembly: Assembly, sources: Sequence[Source], outputs: Sequence[Functional]
    ) -> list[list[Estimated]]:
        """Outputs for every source: result[source][output]."""
        ...


Compute = Callable[[Run], list[Estimated]]


class _Moving:
    """At frequencies other than zero."""

    def __init__(self, response: Response, s: Complexes) -> None:
        self.response = response
        self.s = s

    def solve(
        self, assembly: Assembly, sources: Sequence[Source], outputs: Sequence[Functional]
    ) -> list[list[Estimated]]:
        if not outputs or not assembly.system.size:
            nothing = Estimated(np.zeros(len(self.s), dtype=np.complex128), np.zeros(len(self.s)))
            return [[nothing] * len(outputs) for _ in sources]
        numbers = [{k: _value(v) for k, v in source.items()} for source in sources]
        try:
            plan = self.response._plan(assembly.system, self.s)
            solution = solve(assembly.system, self.s, numbers, outputs, plan)
        except Singular as error:
            raise _singular(assembly, error) from error
        self.response.quality.points_refined += int(np.count_nonzero(solution.refined))
        result = []
        for source, values, errors in zip(sources, solution.values, solution.error, strict=True):
            passed_on = _worst(source.values())
            with np.errstate(invalid="ignore"):
                pairs = zip(values, errors, strict=True)
                result.append([Estimated(v, abs(v) * (e + passed_on)) for v, e in pairs])
        return result


class _Resting:
    """At one tiny real s, with many digits."""

    def __init__(self, arithmetic: MpArithmetic, s: Any) -> None:
        self.arithmetic = arithmetic
        self.s = s
        self._solved: dict[int, Exact] = {}

    def solve(
        self, assembly: Assembly, sources: Sequence[Source], outputs: Sequence[Functional]
    ) -> list[list[Estimated]]:
        if not outputs or not assembly.system.size:
            nothing = self.arithmetic.number(0)
            return [[Estimated(nothing, nothing)] * len(outputs) for _ in sources]
        exact = self._solved.get(id(assembly))
        if exact is None:
            try:
                exact = self._solved[id(assembly)] = Exact(assembly.system, self.s, self.arithmetic)
            except Singular as error:
                raise _singular(assembly, error) from error
        result = []
        for source in sources:
            x, correction = exact.solve({k: _value(v) for k, v in source.items()})
            row = [Estimated(exact.output(o, x), abs(exact.output(o, correction))) for o in outputs]
            uncertain = {k: v.error for k, v in source.items() if isinstance(v, Estimated) and v.error}
            if uncertain:
                x, _ = exact.solve(uncertain)
                passed_on = [abs(exact.output(o, x)) for o in outputs]
                row = [Estimated(y.value, y.error + e) for y, e in zip(row, passed_on, strict=True)]
            result.append(row)
        return result


def _value(x: Any) -> Any:
    return x.value if isinstance(x, Estimated) else x


def _worst(sources: Iterable[Any]) -> Any:
    """The largest relative error among right-hand sides that are results themselves."""
    worst: Any = 0.0
    for source in sources:
        if isinstance(source, Estimated):
            worst = np.maximum(worst, _relative(source))
    return worst


def _relative(estimate: Estimated) -> Floats:
    size = np.abs(estimate.value)
    error = np.asarray(estimate.error, dtype=np.float64)
    relative: Floats = np.divide(error, size, out=np.full(error.shape, np.inf), where=size != 0)
    relative[error == 0] = 0.0
    return relative


class Response:
    """Evaluates curves of `network`. Raises `SingularNetwork` where it has no solution, naming nodes.

    Frequencies are Hz, any shape; curves take that shape. A name that does not exist raises KeyError.
    """

    def __init__(self, network: Network) -> None:
        self.network = network
        self.quality = Quality()
        self._plans: dict[int, tuple[System, Plan, float, float]] = {}
        self._rests: dict[tuple[int, Any], _Resting] = {}
        self.kept: dict[Hashable, Any] = {}
        """What others worked out from this network and want to have at hand again, by keys of their own."""

    # The systems, each made when first needed.

    @cached_property
    def _full(self) -> Assembly:
        return assemble(self.network)

    @cached_property
    def _test(self) -> Assembly:
        return self._alone("test")

    @cached_property
    def _chain(self) -> Assembly:
        return self._alone("chain")

    @cached_property
    def _forced_chain(self) -> Assembly:
        return assemble(self.network, self._sides["chain"], force=self._shared)

    @cached_property
    def _sides(self) -> dict[str, list[Part]]:
        return {side: side_parts(self.network, side) for side in ("test", "chain")}

    @cached_property
    def _held(self) -> dict[str, list[int]]:
        return {side: held_together(self.network, parts) for side, parts in self._sides.items()}

    @cached_property
    def _shared(self) -> list[int]:
        return shared_nodes(self.network)

    def _alone(self, side: str) -> Assembly:
        parts = self._sides[side]
        return assemble(self.network, parts, merge=references(self.network, parts, self._held[side]))

    @cached_property
    def _adjoint(self) -> Assembly:
        turned = Assembly(names=self._full.names)
        turned._system = self._full.system.transposed()
        return turned

    def _plan(self, system: System, s: Complexes) -> Plan:
        """A plan that serves s: from the default sweep and s together, kept for the calls that follow."""
        low, high = float(np.abs(s).min()), float(np.abs(s).max())
        kept = self._plans.get(id(system))
        if kept is not None and kept[2] <= low and high <= kept[3]:
            return kept[1]
        grid = self.network.grid
        reach = [low, high] + ([2 * np.pi * grid.low, 2 * np.pi * grid.high] if grid and grid.low > 0 else [])
        plan = plan_for(system, 1j * np.geomspace(min(reach), max(reach), 7))
        self._plans[id(system)] = (system, plan, min(reach) / REACH, max(reach) * REACH)
        return plan

    # Evaluation, at zero and elsewhere.

    def _curves(self, frequencies: ArrayLike, compute: Compute) -> list[Curve]:
        """What `compute` gives, at the frequencies; its limits where they are 0."""
        f = np.asarray(frequencies, dtype=np.float64)
        if not np.isfinite(f).all():
            raise ValueError("frequencies must be finite numbers of hertz")
        flat = f.ravel()
        moving = flat != 0
        pieces: list[tuple[NDArray[np.bool_], list[Curve]]] = []
        if moving.any():
            with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
                found = compute(_Moving(self, 2j * np.pi * flat[moving]))
                pieces.append((moving, [Curve(e.value, _relative(e)) for e in found]))
        if not moving.all() or not pieces:
            pieces.append((~moving, self._at_rest(compute)))
        curves = []
        for k in range(len(pieces[0][1])):
            values, error = np.empty(flat.shape, dtype=np.complex128), np.empty(flat.shape)
            for mask, piece in pieces:
                values[mask], error[mask] = piece[k].values, piece[k].error
            worst = float(error.max(initial=0.0))
            self.quality.worst_estimated_error = max(self.quality.worst_estimated_error, worst)
            curves.append(Curve(values.reshape(f.shape), error.reshape(f.shape)))
        return curves

    def _at_rest(self, compute: Compute) -> list[Curve]:
        """Limits as the frequency goes to zero; not a number where there is none to tell."""
        count = 1

        def evaluate(arithmetic: MpArithmetic, s: Any) -> tuple[list[Any], list[Any]]:
            nonlocal count
            found = compute(self._resting(arithmetic, s))
            count = len(found)
            return [arithmetic.number(e.value) for e in found], [arithmetic.number(e.error) for e in found]

        try:
            values, _ = limit_of(evaluate)
        except ZeroDivisionError:
            values = np.full(count, np.nan)
        except ArithmeticError as error:
            raise SingularNetwork(f"at 0 Hz {error}") from error
        return [Curve(np.array([v], dtype=np.complex128), np.zeros(1)) for v in values]

    def _resting(self, arithmetic: MpArithmetic, s: Any) -> _Resting:
        """Kept with its factors: most figures ask for some limit, of few systems."""
        key = arithmetic.digits, s
        if key not in self._rests:
            self._rests[key] = _Resting(arithmetic, s)
        return self._rests[key]

    def _drive(self, name: str | None) -> Drive:
        chosen = name if name is not None else self.network.default_drive
        if chosen is None:
            names = ", ".join(drive.name for drive in self.network.drives)
            raise Unavailable(f"several sources stand here and no drive is chosen; there are: {names}")
        return self.network.drive(chosen)

    def _excited(self, assembly: Assembly, drive: str | None) -> Functional:
        return excitation(assembly, self._drive(drive).weights)

    # Curves.

    def sweep(
        self,
        frequencies: ArrayLike,
        *,
        drive: str | None = None,
        readings: Sequence[str] | None = None,
        nodes: Sequence[str] = (),
        contacts: Sequence[str] | None = None,
    ) -> SweepResult:
        """All of the curves below from one pass: what `nodal sweep` prints. None means all there are."""
        network = self.network
        shown = network.readings if readings is None else [network.reading(name) for name in readings]
        touched = network.contacts if contacts is None else [network.contact(name) for name in contacts]
        missing = {c.name: self._no_undisturbed(c) for c in touched}
        before = [c for c in touched if not missing[c.name]]
        closed = [c for c in touched if not self._open(c)]
        full = self._full
        outputs = [
            *(_scaled(full.across(r.a, r.b), r.times.nominal) for r in shown),
            *(full.across(network.node(name), GROUND) for name in nodes),
            *(full.across(c.a, c.b) for c in touched),
        ]

        def compute(run: Run) -> list[Estimated]:
            (everything,) = run.solve(full, [self._excited(full, drive)], outputs)
            return [*everything, *self._undisturbed(run, before, drive), *self._impedances(run, closed)]

        curves = iter(self._curves(frequencies, compute))
        f = np.asarray(frequencies, dtype=np.float64)
        by_reading = {r.name: next(curves) for r in shown}
        by_node = {name: next(curves) for name in nodes}
        loaded = {c.name: next(curves) for c in touched}
        undisturbed = {c.name: next(curves) for c in before}
        impedance = {c.name: next(curves) for c in closed}
        at_contacts = {
            c: ContactCurves(impedance.get(c) or _infinite(f), loaded[c], undisturbed.get(c), reason)
            for c, reason in missing.items()
        }
        return SweepResult(f, self._drive(drive).name, by_reading, by_node, at_contacts, self.quality)

    def reading(self, frequencies: ArrayLike, name: str, drive: str | None = None) -> Curve:
        """What is displayed, `times` included, per unit of the drive."""
        return self._voltage(frequencies, self._shown(name), drive)

    def node(self, frequencies: ArrayLike, name: str, drive: str | None = None) -> Curve:
        """Voltage of a node against ground, per unit of the drive."""
        return self._voltage(frequencies, self._full.across(self.network.node(name), GROUND), drive)

    def loaded(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """Voltage at a contact, the chain connected."""
        return self._voltage(frequencies, self._at(contact), drive)

    def _shown(self, reading: str) -> Functional:
        found = self.network.reading(reading)
        return _scaled(self._full.across(found.a, found.b), found.times.nominal)

    def _at(self, contact: str) -> Functional:
        found = self.network.contact(contact)
        return self._full.across(found.a, found.b)

    def _voltage(self, frequencies: ArrayLike, output: Functional, drive: str | None) -> Curve:
        source = self._excited(self._full, drive)
        return self._curves(frequencies, lambda run: run.solve(self._full, [source], [output])[0])[0]

    def undisturbed(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """Voltage at a contact of the circuit under test alone. Raises `Unavailable` where it has none."""
        found = self._with_undisturbed(contact)
        return self._curves(frequencies, lambda run: self._undisturbed(run, [found], drive))[0]

    def _undisturbed(self, run: Run, contacts: Sequence[Contact], drive: str | None) -> list[Estimated]:
        outputs = [self._test.across(c.a, c.b) for c in contacts]
        return run.solve(self._test, [self._excited(self._test, drive)], outputs)[0]

    def change(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """(loaded - undisturbed) / undisturbed, computed as such, never as a difference.

        Where the chain joins nodes of the circuit without any impedance the change is no small one, and the
        difference serves. Raises `Unavailable` where there is no undisturbed voltage.
        """
        found = self._with_undisturbed(contact)
        self._drive(drive)
        if self._unmoved(found):
            shape = np.shape(frequencies)
            return Curve(np.zeros(shape, dtype=np.complex128), np.zeros(shape))
        if self._separable:
            try:
                return self._curves(frequencies, lambda run: [self._change(run, found, drive)])[0]
            except SingularNetwork:
                pass  # the chain alone does not take any voltage forced on it
        output = self._full.across(found.a, found.b)

        def difference(run: Run) -> list[Estimated]:
            ((loaded,),) = run.solve(self._full, [self._excited(self._full, drive)], [output])
            (before,) = self._undisturbed(run, [found], drive)
            return [(loaded - before) / before]

        return self._curves(frequencies, difference)[0]

    def _change(self, run: Run, contact: Contact, drive: str | None) -> Estimated:
        """The whole network, sources at rest, driven by what the chain draws from the undisturbed circuit."""
        test, chain, full = self._test, self._forced_chain, self._full
        crossing = cross_couplings(self.network)
        inner = {name for coupling in crossing for name in (coupling.first, coupling.second)}
        sides = {p.name: p for p in self.network.parts if p.name in inner and isinstance(p, Inductor)}
        near = [name for name, p in sides.items() if p.side == "test" and p.value.nominal]
        far = [name for name, p in sides.items() if p.side == "chain" and p.value.nominal]
        outputs = [test.across(node, GROUND) for node in self._shared]
        outputs += [test.across(contact.a, contact.b)] + [{test.find_extra(name): 1.0} for name in near]
        (found,) = run.solve(test, [self._excited(test, drive)], outputs)
        before = found[len(self._shared)]
        currents = dict(zip(near, found[len(self._shared) + 1 :], strict=True))
        holders = [forced(self.network, chain, node) for node in self._shared]
        forcing = dict(zip(holders, found, strict=False))
        outputs = [{holder: 1.0} for holder in holders] + [{chain.find_extra(name): 1.0} for name in far]
        (drawn,) = run.solve(chain, [forcing], outputs)
        currents.update(zip(far, drawn[len(holders) :], strict=True))
        injected: dict[int, Estimated] = {}
        for node, current in zip(self._shared, drawn, strict=False):
            _add(injected, full.node(node), current)
        inductances = {name: p.value.nominal for name, p in sides.items()}
        for coupling in crossing:
            pair = (coupling.first, coupling.second)
            if all(name in currents for name in pair):
                scale = float(np.prod(np.sqrt([inductances[name] for name in pair])))
                mutual = coefficient(coupling, inductances) * scale
                for own, other in (pair, pair[::-1]):
                    _add(injected, full.find_extra(own), currents[other].times(run.s * mutual))
        ((moved,),) = run.solve(full, [injected], [full.across(contact.a, contact.b)])
        return moved / before

    @cached_property
    def _separable(self) -> bool:
        """Whether each side has a solution of its own with the shared nodes at any voltages."""
        nodes = [*self._shared, GROUND]
        roots = {self._forced_chain.merged[node] for node in nodes}
        held = self._held["test"]
        led = all(held[p.a] == held[p.b] for p in self._sides["test"] if isinstance(p, CurrentSource))
        return len(roots) == len(nodes) and led

    def _unmoved(self, contact: Contact) -> bool:
        """Whether ideal sources alone set the voltage at the contact, or no chain is there."""
        pairs: list[tuple[int, int]] = []
        for part in self._sides["test"]:
            pairs += part.forces() if isinstance(part, VoltageSource) else part.shorts()
        fixed = joined(self.network, pairs)
        return fixed[contact.a] == fixed[contact.b] or not self._sides["chain"]

    def _no_undisturbed(self, contact: Contact) -> str:
        """Why a contact has no undisturbed voltage; empty where it has."""
        held = self._held["test"]
        start = f'contact "{contact.name}" has no undisturbed voltage'
        touched = {node for part in self._sides["test"] for node in part.nodes} | {GROUND}
        for node in (contact.a, contact.b):
            if node not in touched:
                return f'{start}: "{self.network.nodes[node]}" is no node of the circuit under test'
        if held[contact.a] == held[contact.b]:
            return ""
        for part in self._sides["test"]:
            if isinstance(part, CurrentSource) and held[part.a] != held[part.b]:
                return f'{start}: nothing but the chain carries the current of "{part.name}"'
        a, b = (self.network.nodes[node] for node in (contact.a, contact.b))
        return f'{start}: nothing joins "{a}" and "{b}" in the circuit under test'

    def _with_undisturbed(self, name: str) -> Contact:
        contact = self.network.contact(name)
        reason = self._no_undisturbed(contact)
        if reason:
            raise Unavailable(reason)
        return contact

    def impedance(self, frequencies: ArrayLike, contact: str) -> Curve:
        """Ω, of the chain alone at a contact, other contacts open; infinite where it takes no current."""
        found = self.network.contact(contact)
        if self._open(found):
            return _infinite(np.asarray(frequencies, dtype=np.float64))
        return self._curves(frequencies, lambda run: self._impedances(run, [found]))[0]

    def _open(self, contact: Contact) -> bool:
        """Whether no part of the chain could carry a current from one node of the contact to the other."""
        held = self._held["chain"]
        return held[contact.a] != held[contact.b]

    def _impedances(self, run: Run, contacts: Sequence[Contact]) -> list[Estimated]:
        ports = [self._chain.across(c.a, c.b) for c in contacts]
        return [run.solve(self._chain, [port], [port])[0][0] for port in ports]

    def capacitance_at_rest(self, contact: str) -> float:
        """F: the limit of Im(1/Z)/ω at zero frequency; infinite where there is none that is finite.

        On the real axis that is the limit of (Y(2 s) - Y(s))/s, since Y is real there.
        """
        found = self.network.contact(contact)
        if self._open(found):
            return 0.0

        def admittance(run: Run) -> Estimated:
            (impedance,) = self._impedances(run, [found])
            return Estimated(1, 0) / impedance

        return float(self._slope_at_rest(admittance))

    def _slope_at_rest(self, compute: Callable[[Run], Estimated]) -> float:
        def evaluate(arithmetic: MpArithmetic, s: Any) -> tuple[list[Any], list[Any]]:
            near, far = compute(self._resting(arithmetic, s)), compute(self._resting(arithmetic, 2 * s))
            slope = (far - near).times(1 / s)
            return [slope.value], [slope.error]

        try:
            values, _ = limit_of(evaluate)
        except ZeroDivisionError:
            return float("nan")
        except ArithmeticError as error:
            raise SingularNetwork(f"at 0 Hz {error}") from error
        return float(values[0])

    def derivative(
        self, frequencies: ArrayLike, reading: str, drive: str | None = None
    ) -> tuple[Curve, Curve]:
        """(H, dH/ds) of a reading; s in rad/s."""
        return self._with_slope(frequencies, self._shown(reading), drive)

    def loaded_derivative(
        self, frequencies: ArrayLike, contact: str, drive: str | None = None
    ) -> tuple[Curve, Curve]:
        """(H, dH/ds) of the loaded voltage at a contact; s in rad/s."""
        return self._with_slope(frequencies, self._at(contact), drive)

    def _with_slope(
        self, frequencies: ArrayLike, output: Functional, drive: str | None
    ) -> tuple[Curve, Curve]:
        full, source = self._full, self._excited(self._full, drive)

        def moving(run: Run) -> list[Estimated]:
            if isinstance(run, _Resting):
                return run.solve(full, [source], [output])[0]
            try:
                plan = self._plan(full.system, run.s)
                both = derivative(full.system, run.s, [source], [output], plan)
            except Singular as error:
                raise _singular(full, error) from error
            self.quality.points_refined += int(np.count_nonzero(both[0].refined))
            return [Estimated(x.values[0, 0], abs(x.values[0, 0]) * x.error[0, 0]) for x in both]

        f = np.asarray(frequencies, dtype=np.float64)
        value, slope = np.empty((2, f.size), dtype=np.complex128)
        value_error, slope_error = np.zeros((2, f.size))
        rest = f.ravel() == 0
        if not rest.all():
            found = self._curves(f.ravel()[~rest], moving)
            value[~rest], slope[~rest] = (curve.values for curve in found)
            value_error[~rest], slope_error[~rest] = (curve.error for curve in found)
        if rest.any():
            value[rest] = self._curves([0.0], moving)[0].values[0]
            slope[rest] = self._slope_at_rest(lambda run: run.solve(full, [source], [output])[0][0])
        return (
            Curve(value.reshape(f.shape), value_error.reshape(f.shape)),
            Curve(slope.reshape(f.shape), slope_error.reshape(f.shape)),
        )

    def noise_density(self, frequencies: ArrayLike, reading: str) -> Floats:
        """One-sided amplitude density at the displayed reading, reading's unit per √Hz.

        One adjoint solve gives the transfer from every part's equations to the reading (Rohrer, Nagel, Meyer
        and Weber 1971); the densities of independent parts add.
        """
        f = np.asarray(frequencies, dtype=np.float64)
        flat = f.ravel()
        if not np.isfinite(flat).all():
            raise ValueError("frequencies must be finite numbers of hertz")
        noisy = [
            (part, [[combined(row) for row in source.rows] for source in sources])
            for part in self.network.parts
            if (sources := part.noise(self._full, np.array([1j]), self.network.temperature))
        ]
        equations = sorted({e for _, sources in noisy for rows in sources for row in rows for e in row})
        outputs: list[Functional] = [{equation: 1.0} for equation in equations]
        shown = self._shown(reading)
        density = np.zeros(flat.shape)
        if outputs and shown:
            block = max(1, NOISE_VALUES // len(outputs))
            for start in range(0, len(flat), block):
                at = flat[start : start + block]
                curves = self._curves(at, lambda run: run.solve(self._adjoint, [shown], outputs)[0])
                gain = dict(zip(equations, (curve.values for curve in curves), strict=True))
                density[start : start + block] = self._gathered(noisy, gain, at)
        return np.sqrt(density).reshape(f.shape)

    def _gathered(
        self, noisy: Sequence[tuple[Part, list[list[Functional]]]], gain: Mapping[int, Complexes], f: Floats
    ) -> Floats:
        s = np.where(f == 0, NEARLY_REST, 2j * np.pi * f)
        total = np.zeros(f.shape)
        with np.errstate(invalid="ignore", over="ignore"):
            for part, sources in noisy:
                made = part.noise(self._full, s, self.network.temperature)
                for source, rows in zip(made, sources, strict=True):
                    reach = np.zeros((len(rows), *f.shape), dtype=np.complex128)
                    for k, row in enumerate(rows):
                        for equation, weight in row.items():
                            reach[k] += weight * gain[equation]
                    total += np.einsum("in,ijn,jn->n", reach, source.density, reach.conj()).real
        if np.isnan(total).any():
            raise Unavailable("the noise density has no limit at 0 Hz that could be told")
        return np.maximum(total, 0.0)

    @cached_property
    def _resonances(self) -> Floats:
        kinds = {type(part) for part in self.network.parts}
        if not kinds & {Cable, Amplifier} and not {Inductor, Capacitor} <= kinds:
            return np.zeros(0)  # networks of resistors with one kind of store have real poles (Cauer 1926)
        system = assemble(self.network, lumped=True).system
        grid = self.network.grid
        if system.size <= POLES_SOUGHT:
            found = poles(system)
        elif grid is None:
            return np.zeros(0)
        else:
            count = max(2, int(SHIFTS_PER_DECADE * np.log10(grid.high / grid.low)))
            shifts = 2j * np.pi * np.geomspace(grid.low, grid.high, count)
            found = poles_near(system, np.asarray(shifts, dtype=np.complex128))
        light = found[(np.abs(found.real) < 0.5 * np.abs(found)) & (found.imag > 0)]
        return np.unique(light.imag / (2 * np.pi))

    def lightly_damped(self) -> Floats:
        """Frequencies (Hz) of poles with a damping ratio below 0.5, for search grids; may be empty.

        In networks of more than 400 unknowns only the few poles nearest to each of some frequencies over
        the sweep are sought. Cables count as one section of inductance and capacitance here, dielectrics as
        without loss.
        """
        return self._resonances


def _singular(assembly: Assembly, error: Singular) -> SingularNetwork:
    return SingularNetwork(f"no unique solution: nothing settles {described(assembly, error.unknowns)}")


def _scaled(output: Functional, factor: float) -> Functional:
    return {unknown: weight * factor for unknown, weight in output.items()}


def _add(sources: dict[int, Estimated], equation: int, value: Estimated) -> None:
    if equation >= 0:
        sources[equation] = sources[equation] + value if equation in sources else value


def _infinite(frequencies: Floats) -> Curve:
    return Curve(np.full(frequencies.shape, np.inf, dtype=np.complex128), np.zeros(frequencies.shape))
