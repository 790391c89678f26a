"""Cable: a uniform line of a core and a shield, each with nodes of its own at both ends.

Currents at an end count into the line. With Z' the loop's series impedance and Y' the admittance per metre, l
the length, u = l sqrt(Z'Y')/2, E = exp(-2u), c = (1 + E)/2 and h = (1 - E)/(2u), the plain line equations are

    c (V1 - V2) = (Z' l/2) h (I1 - I2),    c (I1 + I2) = (Y' l/2) h (V1 + V2),

finite from zero frequency through every half wave. Where Re u > 1 they would lose the far end in the
difference of large numbers, so the travelling waves take their place: V1 - Zc I1 = E (V2 + Zc I2) and its
mirror. (Both follow from the telegraph equations, e.g. Pozar, "Microwave Engineering", ch. 2.)

A shield with nodes of its own carries a common-mode current Icm = Ic + Is, constant along the line. With
Zss = Rs + s Ls, Zcs = s k Ls and Zm = Zss - Zcs per metre, J = Ic - (Zm/Z') Icm obeys the plain equations for
the voltage between core and shield, and with Im the mean of the core's current along the line

    Vd1 - Vd2 = Z' l Im - Zm l Icm,    Vs1 - Vs2 = Zss l Icm - Zm l Im,

which keep the shield's small voltage away from the large one between core and shield.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from nodal.parts.base import BOLTZMANN, Build, Element, NoiseSource, Weights, thermal
from nodal.parts.dielectric import Dielectric
from nodal.solver.arithmetic import NumpyArithmetic
from nodal.solver.matrix import Arithmetic
from nodal.values import Value

SERIES_BELOW = 0.1
SERIES_TERMS = 15
"""h - c from its power series where u is small: the last term is then below 1e-58 of the first."""


OUTPUTS = 11
C, Z, Y, H, LAG, ONE, DECAY, IMPEDANCE, ECHO, DRAG, SERIES = range(OUTPUTS)
"""The outputs of `Waves`."""


@dataclass(frozen=True, slots=True)
class Line:
    """What the equations need, as plain numbers; all per metre but `length`."""

    resistance: float
    inductance: float
    conductance: float
    capacitance: float
    loss: float
    skin: tuple[float, float] | None
    shield_resistance: float
    shield_inductance: float
    mutual_inductance: float
    length: float

    def series(self, s: Any, arithmetic: Arithmetic) -> Any:
        """Z' l, Ω."""
        if self.skin is None:
            return (s * self.inductance + (self.resistance + self.shield_resistance)) * self.length
        at, frequency = self.skin
        slope = 2 * at**2 / (2 * math.pi * frequency)
        core = arithmetic.sqrt(s * slope + self.resistance**2)
        return (s * self.inductance + core + self.shield_resistance) * self.length

    def shunt(self, s: Any, arithmetic: Arithmetic) -> Any:
        """Y' l, S."""
        if self.loss:
            charging = s * self.capacitance * Dielectric(self.loss).relative(s, arithmetic)
        else:
            charging = s * self.capacitance
        return (charging + self.conductance) * self.length

    def transfer(self, s: Any) -> Any:
        """Zm l = (Zss - Zcs) l, Ω: what the common-mode current induces between core and shield."""
        return (s * (self.shield_inductance - self.mutual_inductance) + self.shield_resistance) * self.length

    @property
    def delay(self) -> float:
        """Of the very first of a wave, s: from what inductance and capacitance are for s → ∞."""
        stretch = Dielectric(self.loss).scale if self.loss else 1.0
        return self.length * math.sqrt(self.inductance * self.capacitance * stretch)

    def wake(self, s: Any, arithmetic: Arithmetic) -> Any:
        """sT - 2u, T the `delay`, from what losses add to (sT)²: no difference of large numbers."""
        external = s * self.inductance * self.length
        shunt = self.conductance * self.length + 0 * s
        if self.loss:
            dielectric = Dielectric(self.loss)
            charging = s * (self.capacitance * dielectric.scale * self.length)
            shunt = shunt + charging * dielectric.excess(s, arithmetic)
        resistance = (self.resistance + self.shield_resistance) * self.length + 0 * s
        if self.skin is not None:
            at, frequency = self.skin
            slope = 2 * at**2 / (2 * math.pi * frequency)
            core = arithmetic.sqrt(s * slope + self.resistance**2)
            resistance = (core + self.shield_resistance) * self.length
        admittance = self.shunt(s, arithmetic)
        added = external * shunt + resistance * admittance
        return -added / (arithmetic.sqrt(self.series(s, arithmetic) * admittance) + s * self.delay)

    @property
    def has_series(self) -> bool:
        return bool(self.resistance or self.inductance or self.skin or self.shield_resistance)

    @property
    def has_shunt(self) -> bool:
        return bool(self.conductance or self.capacitance)


@dataclass(frozen=True, slots=True)
class Shunt:
    """Y' l of a line without series impedance."""

    line: Line
    count: int = 1

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        return (self.line.shunt(s, arithmetic),)


@dataclass(frozen=True, slots=True)
class Waves:
    """The line equations as functions of s.

    Outputs: c, -Z' l h/2, -Y' l h/2, -h/2, (h - c) Zm/Z', all zero where Re u > 1; then 1, -E, -Zc, -E Zc,
    (1 - E) Zc Zm/Z', all zero elsewhere; last -Z' l, which is always there.
    """

    line: Line
    count: int = OUTPUTS

    @property
    def delay(self) -> float:
        return self.line.delay

    def split(self, s: Any, arithmetic: Arithmetic) -> tuple[Sequence[Any], Sequence[Any]]:
        """The travelling waves, with the delay taken out of E; see `nodal.solver.matrix.Delayed`."""
        line = self.line
        zl = line.series(s, arithmetic)
        impedance = arithmetic.sqrt(zl / line.shunt(s, arithmetic))
        decay = arithmetic.exp(line.wake(s, arithmetic))
        drag = impedance * line.transfer(s) / zl
        zero = 0 * s
        unused = (zero,) * ONE
        return (
            (*unused, zero + 1, zero, -impedance, zero, drag, -zl),
            (*unused, zero, -decay, zero, -decay * impedance, -decay * drag, zero),
        )

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        line = self.line
        zl = line.series(s, arithmetic)
        yl = line.shunt(s, arithmetic)
        square = zl * yl / 4
        zero = 0 * s
        ratio = line.transfer(s) / zl if line.has_series else zero
        if not (line.has_series and line.has_shunt):
            one = zero + 1
            short = (one, -zl / 2, -yl / 2, -one / 2, zero)
            return (*short, zero, zero, zero, zero, zero, -zl)
        u = arithmetic.sqrt(square)
        far = arithmetic.real(u) > 1
        decay = arithmetic.exp(-2 * u)
        h = -arithmetic.expm1(-2 * u) / (2 * u)
        c = (1 + decay) / 2
        small = (arithmetic.real(u) < SERIES_BELOW) & (abs(arithmetic.real(1j * u)) < SERIES_BELOW)
        lag = arithmetic.select(small, arithmetic.exp(-u) * _sinhc_less_cosh(square), h - c)
        near = (c, -zl * h / 2, -yl * h / 2, -h / 2, lag * ratio)
        impedance = zl / (2 * u)
        waves = (zero + 1, -decay, -impedance, -decay * impedance, (1 - decay) * impedance * ratio)
        return (
            *(arithmetic.select(far, zero, value) for value in near),
            *(arithmetic.select(far, value, zero) for value in waves),
            -zl,
        )


def _sinhc_less_cosh(square: Any) -> Any:
    """sinh(u)/u - cosh(u) for small u, from u²: the sum over n of -2n u^(2n)/(2n + 1)!."""
    total: Any = 0.0
    for n in range(SERIES_TERMS, 0, -1):
        total = (total - 2 * n / math.factorial(2 * n + 1)) * square
    return total


@dataclass(frozen=True, slots=True)
class Cable(Element):
    """`length` m of cable; everything else per metre: Ω/m, H/m, S/m, F/m.

    `resistance` is the core's alone, `inductance` the loop's (with `skin`, the external one); `loss` is the
    dissipation factor of the dielectric; `skin` is (R_k in Ω/m, f_k in Hz). `shield_coupling` is the k of the
    mutual inductance k Ls between core and shield, 1 if left out.
    """

    kind: ClassVar[str] = "cable"

    name: str
    core1: int
    shield1: int
    core2: int
    shield2: int
    length: Value
    resistance: Value = Value(0.0)
    inductance: Value = Value(0.0)
    conductance: Value = Value(0.0)
    capacitance: Value = Value(0.0)
    loss: float = 0.0
    skin: tuple[float, float] | None = None
    shield_inductance: Value | None = None
    shield_resistance: Value | None = None
    shield_coupling: Value | None = None

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.core1, self.shield1, self.core2, self.shield2)

    @property
    def line(self) -> Line:
        """Its data as plain numbers."""
        shield = self.shield_inductance.nominal if self.shield_inductance else 0.0
        coupling = self.shield_coupling.nominal if self.shield_coupling else 1.0
        return Line(
            self.resistance.nominal,
            self.inductance.nominal,
            self.conductance.nominal,
            self.capacitance.nominal,
            self.loss,
            self.skin if self.skin and self.skin[0] else None,
            self.shield_resistance.nominal if self.shield_resistance else 0.0,
            shield,
            coupling * shield,
            self.length.nominal,
        )

    @property
    def delay(self) -> float:
        """Travel time of a wave along it, s, from inductance and capacitance alone."""
        return self.length.nominal * math.sqrt(self.inductance.nominal * self.capacitance.nominal)

    @property
    def separate_shields(self) -> bool:
        """Whether the shield's ends differ and something stands between them."""
        line = self.line
        return self.shield1 != self.shield2 and bool(line.shield_resistance or line.shield_inductance)

    def shorts(self) -> Sequence[tuple[int, int]]:
        shields = (self.shield1, self.shield2)
        if not self.length.nominal:
            return ((self.core1, self.core2), shields)
        if self.separate_shields:
            return ()
        together = (shields,) if self.shield1 != self.shield2 else ()
        return together if self.line.has_series else ((self.core1, self.core2), *together)

    def holds(self) -> Sequence[tuple[int, int]]:
        across = ((self.core1, self.shield1),) if self.line.has_shunt and self.length.nominal else ()
        return (*self._lengthwise(), *across)

    def conducts(self) -> Sequence[tuple[int, int]]:
        across = ((self.core1, self.shield1),) if self.line.conductance and self.length.nominal else ()
        return (*self._lengthwise(), *across)

    def _lengthwise(self) -> Sequence[tuple[int, int]]:
        return ((self.core1, self.core2), (self.shield1, self.shield2))

    def contribute(self, build: Build) -> None:
        line = self.line
        if not self.length.nominal:
            return
        if not line.has_series and not self.separate_shields:
            self._shunt_alone(build, line)
        elif build.lumped:
            self._one_section(build, line)
        elif self.separate_shields:
            self._four_terminals(build, line)
        else:
            self._three_terminals(build, line)

    def _ends(self, build: Build) -> tuple[Weights, Weights]:
        """The voltages between core and shield at both ends."""
        return (
            ((build.node(self.core1), 1.0), (build.node(self.shield1), -1.0)),
            ((build.node(self.core2), 1.0), (build.node(self.shield2), -1.0)),
        )

    def _shunt_alone(self, build: Build, line: Line) -> None:
        if line.loss and not build.lumped:
            build.admittance(self.core1, self.shield1, f=build.function(Shunt(line)))
        else:
            build.admittance(
                self.core1, self.shield1, g=line.conductance * line.length, c=line.capacitance * line.length
            )

    def _three_terminals(self, build: Build, line: Line) -> None:
        v1, v2 = self._ends(build)
        i1, i2 = (build.extra(self, label) for label in ("current in", "current out"))
        build.term(v1, ((i1, 1.0),), g=1.0)
        build.term(v2, ((i2, 1.0),), g=1.0)
        f = build.function(Waves(line))
        build.term(((i1, 1.0),), _difference(v1, v2), f=f + C)
        build.term(((i1, 1.0),), ((i1, 1.0), (i2, -1.0)), f=f + Z)
        build.term(((i2, 1.0),), ((i1, 1.0), (i2, 1.0)), f=f + C)
        build.term(((i2, 1.0),), _sum(v1, v2), f=f + Y)
        _travelling(build, f, (i1, v1, i1), (i2, v2, i2))

    def _four_terminals(self, build: Build, line: Line) -> None:
        v1, v2 = self._ends(build)
        labels = ("current in", "current out", "common-mode current", "mean current")
        i1, i2, common, mean = (build.extra(self, label) for label in labels)
        along = ((build.node(self.shield1), 1.0), (build.node(self.shield2), -1.0))
        build.term(v1, ((i1, 1.0),), g=1.0)
        build.term(v2, ((i2, 1.0),), g=1.0)
        build.term(along, ((common, 1.0),), g=1.0)
        f = build.function(Waves(line))
        transfer_g = line.shield_resistance * line.length
        transfer_c = (line.shield_inductance - line.mutual_inductance) * line.length
        build.term(((mean, 1.0),), _difference(v1, v2), g=1.0)
        build.term(((mean, 1.0),), ((mean, 1.0),), f=f + SERIES)
        build.term(((mean, 1.0),), ((common, 1.0),), g=transfer_g, c=transfer_c)
        build.term(((common, 1.0),), along, g=1.0)
        build.term(((common, 1.0),), ((common, -1.0),), g=transfer_g, c=line.shield_inductance * line.length)
        build.term(((common, 1.0),), ((mean, 1.0),), g=transfer_g, c=transfer_c)
        build.term(((i1, 1.0),), ((mean, 1.0),), f=f + C)
        build.term(((i1, 1.0),), ((i1, 1.0), (i2, -1.0)), f=f + H)
        build.term(((i1, 1.0),), ((common, 1.0),), f=f + LAG)
        build.term(((i2, 1.0),), ((i1, 1.0), (i2, 1.0)), f=f + C)
        build.term(((i2, 1.0),), _sum(v1, v2), f=f + Y)
        _travelling(build, f, (i1, v1, i1), (i2, v2, i2))
        build.term(((i1, 1.0), (i2, -1.0)), ((common, 1.0),), f=f + DRAG)

    def _one_section(self, build: Build, line: Line) -> None:
        v1, v2 = self._ends(build)
        i1, i2 = (build.extra(self, label) for label in ("current in", "current out"))
        build.term(v1, ((i1, 1.0),), g=1.0)
        build.term(v2, ((i2, 1.0),), g=1.0)
        half = line.length / 2
        through = ((i1, 1.0), (i2, -1.0))
        build.term(((i1, 1.0),), _difference(v1, v2), g=1.0)
        loop = line.resistance + line.shield_resistance
        build.term(((i1, 1.0),), through, g=-half * loop, c=-half * line.inductance)
        build.term(((i2, 1.0),), ((i1, 1.0), (i2, 1.0)), g=1.0)
        build.term(((i2, 1.0),), _sum(v1, v2), g=-half * line.conductance, c=-half * line.capacitance)
        if self.separate_shields:
            common = build.extra(self, "common-mode current")
            along = ((build.node(self.shield1), 1.0), (build.node(self.shield2), -1.0))
            resistance = line.shield_resistance * line.length
            own = line.shield_inductance * line.length
            transfer = (line.shield_inductance - line.mutual_inductance) * line.length
            build.term(along, ((common, 1.0),), g=1.0)
            build.term(((i1, 1.0),), ((common, 1.0),), g=resistance, c=transfer)
            build.term(((common, 1.0),), along, g=1.0)
            build.term(((common, 1.0),), ((common, -1.0),), g=resistance, c=own)
            build.term(((common, 0.5),), through, g=resistance, c=transfer)

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        """Thermal noise from P V + Q I = n of the ports: <n n^H> = -2 k T (P Q^H + Q P^H).

        It follows from Nyquist's theorem for several ports, <v v^H> = 2 k T (Z + Z^H) (Twiss 1955), as Z =
        -P⁻¹ Q.
        """
        line = self.line
        losses = (line.resistance, line.conductance, line.loss, line.skin, line.shield_resistance)
        if self.noiseless or not any(losses) or not self.length.nominal:
            return ()
        if not line.has_series and not self.separate_shields:
            (shunt,) = Shunt(line).evaluate(s, NumpyArithmetic())
            rows = ((build.node(self.core1), 1.0), (build.node(self.shield1), -1.0))
            return (thermal(rows, np.real(shunt), temperature, len(s)),)
        out = [
            np.broadcast_to(np.asarray(x, np.complex128), s.shape)
            for x in Waves(line).evaluate(s, NumpyArithmetic())
        ]
        size = 3 if self.separate_shields else 2
        p = np.zeros((size, size, *s.shape), np.complex128)
        q = np.zeros_like(p)
        p[0, 0] = out[C] + out[ONE]
        p[0, 1] = -out[C] + out[DECAY]
        q[0, 0] = out[Z] + out[IMPEDANCE]
        q[0, 1] = -out[Z] + out[ECHO]
        p[1, 0] = out[Y] + out[DECAY]
        p[1, 1] = out[Y] + out[ONE]
        q[1, 0] = out[C] + out[ECHO]
        q[1, 1] = out[C] + out[IMPEDANCE]
        equations = [build.find_extra(self.name, "current in"), build.find_extra(self.name, "current out")]
        if size == 3:
            transfer = line.transfer(s)
            ratio = -transfer / out[SERIES] if line.has_series else 0 * s
            own = (s * line.shield_inductance + line.shield_resistance) * line.length
            q[0, 2] = -2 * out[H] * transfer + out[DRAG]
            q[1, 2] = -out[DRAG]
            p[2, 0], p[2, 1], p[2, 2] = ratio, -ratio, 1.0
            q[2, 2] = ratio * transfer - own
            equations.append(build.find_extra(self.name, "common-mode current"))
        product = np.einsum("ikn,jkn->ijn", p, q.conj())
        density = -2 * BOLTZMANN * temperature * (product + product.conj().swapaxes(0, 1))
        if size == 3:
            # The first equation stands in the matrix divided by Z' l where the mean current takes its part.
            near = out[C] + out[H] != 0
            scale = np.ones_like(p[0])
            scale[0] = np.where(near & line.has_series, -1 / np.where(out[SERIES] == 0, 1, out[SERIES]), 1.0)
            density = density * scale[:, np.newaxis] * scale.conj()[np.newaxis]
        return (NoiseSource(tuple(((row, 1.0),) for row in equations), density),)

    def describe(self) -> Any:
        entries = (
            ("length", self.length, "m"),
            ("resistance", self.resistance, "Ω/m"),
            ("inductance", self.inductance, "H/m"),
            ("conductance", self.conductance, "S/m"),
            ("capacitance", self.capacitance, "F/m"),
            ("shield resistance", self.shield_resistance, "Ω/m"),
            ("shield inductance", self.shield_inductance, "H/m"),
        )
        return tuple(entry for entry in entries if entry[1] is not None and entry[1].nominal)


def _travelling(build: Build, f: int, near: tuple[int, Weights, int], far: tuple[int, Weights, int]) -> None:
    """V1 - Zc I1 = E (V2 + Zc I2) and its mirror; each end is (equation, voltage, current)."""
    for (equation, voltage, current), (_, opposite, returning) in ((near, far), (far, near)):
        row = ((equation, 1.0),)
        build.term(row, voltage, f=f + ONE)
        build.term(row, opposite, f=f + DECAY)
        build.term(row, ((current, 1.0),), f=f + IMPEDANCE)
        build.term(row, ((returning, 1.0),), f=f + ECHO)


def _sum(a: Weights, b: Weights) -> Weights:
    return (*a, *b)


def _difference(a: Weights, b: Weights) -> Weights:
    return (*a, *((handle, -weight) for handle, weight in b))
