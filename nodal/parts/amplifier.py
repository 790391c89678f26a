"""Amplifier: an ideal controlled source with poles, zeros, a delay, noise and a finite common-mode rejection.

Its input draws no current; input and output networks are ordinary parts beside it. The quantity amplified is
x = v(in) - v(ref) + ((v(in) + v(ref))/2 - v(ref2))/CMRR, 1/CMRR = (1/CMRR0)(1 + s/w_c), so that the ratio of
the gains for opposite and for equal inputs is CMRR at every frequency. Each pole and zero is an unknown of
its own, which keeps the matrix polynomial in s.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import NDArray

from nodal.parts.base import Build, Element, NoiseSource, Weights
from nodal.solver.matrix import Arithmetic
from nodal.values import Value

Root = tuple[float, float | None]
"""(natural frequency in Hz, Q of a pair or None for a single real one)."""


@dataclass(frozen=True, slots=True)
class Delay:
    """-exp(-s T)."""

    seconds: float
    count: int = 1

    @property
    def delay(self) -> float:
        return self.seconds

    def evaluate(self, s: Any, arithmetic: Arithmetic) -> Sequence[Any]:
        return (-arithmetic.exp(-s * self.seconds),)

    def split(self, s: Any, arithmetic: Arithmetic) -> tuple[Sequence[Any], Sequence[Any]]:
        """See `nodal.solver.matrix.Delayed`."""
        return (0 * s,), (0 * s - 1,)


@dataclass(frozen=True, slots=True)
class Amplifier(Element):
    """Voltage `gain` (v(out) - v(ref2) = gain x) or `transconductance` (A/V; gm x enters at `out`).

    `noise_voltage` is in V/√Hz in series with the input, `current_noise` in A/√Hz between `in_` and `ref`;
    `common_mode` is (rejection ratio, corner in Hz); `delay` in s.
    """

    kind: ClassVar[str] = "amplifier"

    name: str
    in_: int
    ref: int
    out: int
    ref2: int
    gain: Value | None = None
    transconductance: Value | None = None
    poles: tuple[Root, ...] = ()
    zeros: tuple[Root, ...] = ()
    delay: float = 0.0
    noise_voltage: float = 0.0
    current_noise: float = 0.0
    common_mode: tuple[float, float] | None = None

    @property
    def nodes(self) -> tuple[int, ...]:
        return (self.in_, self.ref, self.out, self.ref2)

    def holds(self) -> Sequence[tuple[int, int]]:
        return ((self.out, self.ref2),)

    conducts = holds

    def forces(self) -> Sequence[tuple[int, int]]:
        return ((self.out, self.ref2),) if self.transconductance is None else ()

    def contribute(self, build: Build) -> None:
        first = build.extra(self, "input")
        equal = [(build.node(self.in_), -0.5), (build.node(self.ref), -0.5), (build.node(self.ref2), 1.0)]
        build.term(((first, 1.0),), ((first, 1.0),), g=1.0)
        build.term(((first, 1.0),), ((build.node(self.in_), -1.0), (build.node(self.ref), 1.0)), g=1.0)
        if self.common_mode:
            ratio, corner = self.common_mode
            build.term(((first, 1.0),), equal, g=1 / ratio, c=1 / (ratio * 2 * math.pi * corner))
        signal: Weights = ((first, 1.0),)
        for number, root in enumerate(self.poles, 1):
            signal = self._pole(build, signal, root, number)
        for number, root in enumerate(self.zeros, 1):
            signal = self._zero(build, signal, root, number)
        if self.delay and not build.lumped:
            late = build.extra(self, "delay")
            build.term(((late, 1.0),), ((late, 1.0),), g=1.0)
            build.term(((late, 1.0),), signal, f=build.function(Delay(self.delay)))
            signal = ((late, 1.0),)
        across = ((build.node(self.out), 1.0), (build.node(self.ref2), -1.0))
        if self.transconductance is not None:
            build.term(across, signal, g=-self.transconductance.nominal)
            return
        current = build.extra(self, "output current")
        build.term(across, ((current, 1.0),), g=1.0)
        build.term(((current, 1.0),), across, g=1.0)
        build.term(((current, 1.0),), signal, g=-self.gain.nominal if self.gain else 0.0)

    def _pole(self, build: Build, signal: Weights, root: Root, number: int) -> Weights:
        """y with (1 + s/w) y = x, or (1 + s/(Q w) + s²/w²) y = x."""
        frequency, quality = root
        slope = 1 / (2 * math.pi * frequency)
        result = build.extra(self, f"pole {number}")
        row = ((result, 1.0),)
        build.term(row, ((result, 1.0),), g=1.0, c=0.0 if quality else slope)
        build.term(row, signal, g=-1.0)
        if quality:
            scaled = self._slope(build, row, slope, f"pole {number} slope")
            build.term(row, scaled, g=1 / quality, c=slope)
        return row

    def _zero(self, build: Build, signal: Weights, root: Root, number: int) -> Weights:
        """y = (1 + s/w) x, or (1 + s/(Q w) + s²/w²) x."""
        frequency, quality = root
        slope = 1 / (2 * math.pi * frequency)
        result = build.extra(self, f"zero {number}")
        row = ((result, 1.0),)
        build.term(row, ((result, 1.0),), g=1.0)
        build.term(row, signal, g=-1.0, c=0.0 if quality else -slope)
        if quality:
            scaled = self._slope(build, signal, slope, f"zero {number} slope")
            build.term(row, scaled, g=-1 / quality, c=-slope)
        return row

    def _slope(self, build: Build, signal: Weights, slope: float, label: str) -> Weights:
        """z = (s/w) x."""
        result = build.extra(self, label)
        build.term(((result, 1.0),), ((result, 1.0),), g=1.0)
        build.term(((result, 1.0),), signal, c=-slope)
        return ((result, 1.0),)

    def noise(self, build: Build, s: NDArray[np.complex128], temperature: float) -> Sequence[NoiseSource]:
        sources: list[tuple[Weights, float]] = []
        if self.noise_voltage:
            sources.append((((build.find_extra(self.name, "input"), 1.0),), self.noise_voltage))
        if self.current_noise:
            rows = ((build.node(self.in_), 1.0), (build.node(self.ref), -1.0))
            sources.append((rows, self.current_noise))
        shape = (1, 1, len(s))
        return [NoiseSource((rows,), np.full(shape, level**2, np.complex128)) for rows, level in sources]

    def describe(self) -> Any:
        if self.transconductance is not None:
            return (("transconductance", self.transconductance, "S"),)
        return (("gain", self.gain or Value(0.0), ""),)
