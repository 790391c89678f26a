"""Curves of one network: what its readings, nodes and contacts do at any frequencies.

A `Response` turns a `Network` into systems once (the whole network; the circuit under test alone; the chain alone),
plans each once, and evaluates at any array of frequencies in Hz; 0 is the limit as the frequency goes to zero.
Everything is per unit of the drive (design §2.4: amplitudes are the drive's weights).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.network import Network


class Unavailable(Exception):
    """A quantity that this network does not have (an undisturbed voltage behind an ideal current source …): says why."""


@dataclass(frozen=True, slots=True)
class Curve:
    """Complex `values` (infinite where the quantity is), estimated relative `error`, same shape as the frequencies."""

    values: NDArray[np.complex128]
    error: NDArray[np.float64]


@dataclass(slots=True)
class Quality:
    """The worst error estimate among all that was evaluated so far, and how many points needed more than one step."""

    worst_estimated_error: float = 0.0
    points_refined: int = 0


class Response:
    """Evaluates curves of `network`. Raises `SingularNetwork` where it has no solution, naming nodes."""

    def __init__(self, network: Network) -> None:
        self.network = network
        self.quality = Quality()

    def sweep(
        self, frequencies: ArrayLike, *, drive: str | None = None, readings: Sequence[str] | None = None,
        nodes: Sequence[str] = (), contacts: Sequence[str] | None = None,
    ) -> Any:
        """All of the curves below at once, from one pass: what `nodal sweep` prints."""
        raise NotImplementedError

    def reading(self, frequencies: ArrayLike, name: str, drive: str | None = None) -> Curve:
        """What is displayed, `times` included, per unit of the drive."""
        raise NotImplementedError

    def node(self, frequencies: ArrayLike, name: str, drive: str | None = None) -> Curve:
        """Voltage of a node against ground, per unit of the drive."""
        raise NotImplementedError

    def loaded(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """Voltage at a contact, the chain connected."""
        raise NotImplementedError

    def undisturbed(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """Voltage at a contact of the circuit under test alone."""
        raise NotImplementedError

    def change(self, frequencies: ArrayLike, contact: str, drive: str | None = None) -> Curve:
        """(loaded - undisturbed) / undisturbed, computed as such (design §2.6), never as a difference."""
        raise NotImplementedError

    def impedance(self, frequencies: ArrayLike, contact: str) -> Curve:
        """Ω, of the chain alone seen at a contact, other contacts open."""
        raise NotImplementedError

    def derivative(self, frequencies: ArrayLike, reading: str, drive: str | None = None) -> tuple[Curve, Curve]:
        """(H, dH/ds) of a reading; s in rad/s."""
        raise NotImplementedError

    def loaded_derivative(
        self, frequencies: ArrayLike, contact: str, drive: str | None = None
    ) -> tuple[Curve, Curve]:
        """(V, dV/ds) of the loaded voltage at a contact: the group delay from there to a reading needs it."""
        raise NotImplementedError

    def capacitance_at_rest(self, contact: str) -> float:
        """F: the limit of Im(1/Z)/ω of the chain at a contact as ω goes to 0, that is dY/ds at s = 0."""
        raise NotImplementedError

    def noise_density(self, frequencies: ArrayLike, reading: str) -> NDArray[np.float64]:
        """One-sided amplitude density at the displayed reading, reading's unit per √Hz."""
        raise NotImplementedError

    def lightly_damped(self) -> NDArray[np.float64]:
        """Frequencies (Hz) of poles with damping ratio below 0.5, for search grids; [] where none or not found."""
        raise NotImplementedError
