"""Poles of a network and zeros of its readings: natural frequencies, damping ratios, time constants."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from nodal.assemble import Assembly, Functional, assemble, described, excitation
from nodal.network import Network
from nodal.parts import Amplifier, Cable
from nodal.response import SingularNetwork, Unavailable
from nodal.solver.matrix import System, Term
from nodal.solver.modes import LARGEST, poles
from nodal.solver.pattern import Complexes
from nodal.solver.plan import Singular
from nodal.solver.realise import NotRealised, realise

_ON_THE_AXIS = 1e-9
"""A root whose real part is below this much of it has none but for rounding."""

_ONE = 1e-7
"""A zero this near a pole, relatively, takes it out of the reading."""

_REAL = 1e-12


@dataclass(frozen=True, slots=True)
class Root:
    """A pole or zero at s, rad/s; of a conjugate pair the one with a positive imaginary part stands for
    both."""

    s: complex

    @property
    def pair(self) -> bool:
        return self.s.imag > 0

    @property
    def frequency(self) -> float:
        """|s|/2π, Hz: the natural frequency."""
        return abs(self.s) / (2 * math.pi)

    @property
    def damping(self) -> float:
        """-Re s/|s|: 1 on the negative axis, 0 on the imaginary one; not a number at the origin."""
        if self.s == 0:
            return math.nan
        ratio = -self.s.real / abs(self.s)
        return 0.0 if abs(ratio) < _ON_THE_AXIS else ratio

    @property
    def time_constant(self) -> float:
        """-1/Re s, s: after it a mode has come down to 1/e; negative where it grows, infinite on the axis."""
        return -1 / self.s.real if self.s.real and self.damping else math.inf

    @property
    def unstable(self) -> bool:
        """Right of the imaginary axis: as a pole, a mode that grows."""
        return self.damping < 0


@dataclass(frozen=True, slots=True)
class PolesAndZeros:
    """In order of natural frequency. `zeros`: {reading: roots, or None where the reading is zero at every s}.

    `cancelled`: {reading: poles that one of its zeros takes out}. `replaced` names the parts that stand in
    here as lumped ones.
    """

    drive: str
    poles: tuple[Root, ...]
    zeros: dict[str, tuple[Root, ...] | None]
    cancelled: dict[str, tuple[Root, ...]]
    replaced: tuple[str, ...] = ()

    @property
    def stable(self) -> bool:
        return not any(pole.unstable for pole in self.poles)


def unlumped(network: Network) -> list[str]:
    """Names of the parts that give a network infinitely many poles: cables, dielectric loss, delays."""
    return [
        part.name
        for part in network.parts
        if isinstance(part, Cable)
        or (isinstance(part, Amplifier) and part.delay)
        or bool(getattr(part, "loss", 0.0))
    ]


def poles_and_zeros(network: Network, drive: str | None = None, *, lumped: bool = False) -> PolesAndZeros:
    """All finite poles of the whole network, and the zeros of every reading under a drive.

    With `lumped` a cable counts as one section of inductance and capacitance, dielectrics as without loss,
    amplifiers as without delay; else such parts raise Unavailable. A zero is a pole of the network whose
    drive is adjusted so that the reading stays at zero. Raises SingularNetwork where there is no solution,
    KeyError for an unknown drive.
    """
    chosen = network.drive(drive or network.default_drive or "")
    others = unlumped(network)
    if others and not lumped:
        names = ", ".join(others[:6]) + (f" and {len(others) - 6} more" if len(others) > 6 else "")
        raise Unavailable(
            f"a network with cables, dielectric loss or delays has no finite set of poles; here: {names}"
        )
    whole = assemble(network, lumped=True)
    source = excitation(whole, chosen.weights)
    found = _roots(whole, whole.system)
    zeros: dict[str, tuple[Root, ...] | None] = {}
    cancelled: dict[str, tuple[Root, ...]] = {}
    for reading in network.readings:
        output = whole.across(reading.a, reading.b)
        try:
            held = held_at_zero(whole.system, source, output)
            zeros[reading.name] = _roots(whole, held) if output else None
        except SingularNetwork:
            zeros[reading.name] = None
        cancelled[reading.name] = _cancelled(found, zeros[reading.name] or ())
    return PolesAndZeros(chosen.name, found, zeros, cancelled, tuple(others))


def held_at_zero(system: System, source: Functional, output: Functional) -> System:
    """The system with one unknown more, how much of `source` there is, and one equation more: no `output`.

    Its poles are the zeros of the transfer from source to output (Rosenbrock's system matrix).
    """
    drive = ((system.size, 1.0),)
    enters = Term(tuple(source.items()), drive, -1.0, 0.0, None)
    held = Term(drive, tuple(output.items()), 1.0, 0.0, None)
    return System(system.size + 1, (*system.terms, enters, held), system.functions)


def _roots(assembly: Assembly, system: System) -> tuple[Root, ...]:
    try:
        found = realise(system, {}, []).poles
    except NotRealised as reason:
        if system.size > LARGEST:
            raise Unavailable(f"the poles cannot be told reliably: {reason}") from reason
        found = poles(system)
    except Singular as singular:
        names = [k for k in singular.unknowns if k < len(assembly.names)]
        raise SingularNetwork(
            f"no unique solution: nothing settles {described(assembly, names)}"
        ) from singular
    return _gathered(found)


def _gathered(found: Complexes) -> tuple[Root, ...]:
    real = np.abs(found.imag) <= _REAL * np.abs(found)
    upper = found[real | (found.imag > 0)]
    kept = np.where(np.abs(upper.imag) <= _REAL * np.abs(upper), upper.real, upper)
    return tuple(Root(complex(s)) for s in kept[np.argsort(np.abs(kept), kind="stable")])


def _cancelled(found: tuple[Root, ...], zeros: tuple[Root, ...]) -> tuple[Root, ...]:
    left = list(zeros)
    gone = []
    for pole in found:
        near = next((z for z in left if abs(z.s - pole.s) <= _ONE * abs(pole.s)), None)
        if near is not None:
            left.remove(near)
            gone.append(pole)
    return tuple(gone)
