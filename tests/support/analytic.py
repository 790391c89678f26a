"""A stand-in for `nodal.response.Response` made of closed-form functions of s, so that figures are tested
alone.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from nodal.network import Contact, Drive, FigureCall, Network, Reading, SweepGrid
from nodal.response import Curve, Response

Transfer = Callable[[Any], Any]
GRID = SweepGrid(1.0, 1e6, 40.0)


class Analytic(Response):
    """Readings, contacts and drives as functions of s = jω; `slopes` are the derivatives dH/ds."""

    def __init__(
        self,
        readings: dict[str, Transfer | dict[str, Transfer]] | None = None,
        *,
        slopes: dict[str, Transfer] | None = None,
        loaded: dict[str, Transfer] | None = None,
        undisturbed: dict[str, Transfer] | None = None,
        change: dict[str, Transfer] | None = None,
        impedance: dict[str, Transfer] | None = None,
        density: Callable[[Any], Any] | None = None,
        poles: tuple[float, ...] = (),
        grid: SweepGrid | None = GRID,
        drives: tuple[str, ...] = ("source",),
        default_drive: str | None = "source",
        unit: str = "V",
    ) -> None:
        self.curves = readings or {}
        self.slopes = slopes or {}
        self.contact_curves = {
            "loaded": loaded or {},
            "undisturbed": undisturbed or {},
            "change": change or {},
            "impedance": impedance or {},
        }
        self.density = density
        self.poles = poles
        names = dict.fromkeys(name for curves in self.contact_curves.values() for name in curves)
        self.network = Network(
            nodes=("ground", "node"),
            parts=(),
            contacts=tuple(Contact(name, 1, 0) for name in names),
            readings=tuple(Reading(name, 1, 0, unit=unit) for name in self.curves),
            drives=tuple(Drive(name, ((name, 1.0),)) for name in drives),
            default_drive=default_drive,
            grid=grid,
        )

    def reading(self, frequencies: Any, name: str, drive: str | None = None) -> Curve:
        curve = self.curves[name]
        return _curve(curve[drive or ""] if isinstance(curve, dict) else curve, frequencies)

    def loaded(self, frequencies: Any, contact: str, drive: str | None = None) -> Curve:
        return _curve(self.contact_curves["loaded"][contact], frequencies)

    def undisturbed(self, frequencies: Any, contact: str, drive: str | None = None) -> Curve:
        return _curve(self.contact_curves["undisturbed"][contact], frequencies)

    def change(self, frequencies: Any, contact: str, drive: str | None = None) -> Curve:
        return _curve(self.contact_curves["change"][contact], frequencies)

    def impedance(self, frequencies: Any, contact: str) -> Curve:
        return _curve(self.contact_curves["impedance"][contact], frequencies)

    def derivative(self, frequencies: Any, reading: str, drive: str | None = None) -> tuple[Curve, Curve]:
        return self.reading(frequencies, reading, drive), _curve(self.slopes[reading], frequencies)

    def noise_density(self, frequencies: Any, reading: str) -> Any:
        assert self.density is not None
        return np.asarray(self.density(np.asarray(frequencies)), dtype=float)

    def lightly_damped(self) -> Any:
        return np.array(self.poles)


def _curve(function: Transfer, frequencies: Any) -> Curve:
    s = 2j * np.pi * np.asarray(frequencies, dtype=float)
    with np.errstate(divide="ignore", invalid="ignore"):
        values = np.broadcast_to(np.asarray(function(s), dtype=complex), s.shape).copy()
    return Curve(values, np.zeros(values.shape))


def close(expected: Any, rel: float = 1e-12) -> Any:
    """Equal to a relative tolerance alone: pytest's own absolute one would wave farads and volts through."""
    return pytest.approx(expected, rel=rel, abs=0.0)


def call(name: str, *arguments: str | float) -> FigureCall:
    return FigureCall(name, arguments, f"{name}({', '.join(str(a) for a in arguments)})")
