"""The kinds of part, one file each. A new kind is added to `KINDS` and to the laws' cases in the tests."""

from __future__ import annotations

from nodal.parts.amplifier import Amplifier
from nodal.parts.base import Part
from nodal.parts.cable import Cable
from nodal.parts.capacitor import Capacitor
from nodal.parts.coupling import Coupling
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import CurrentSource, VoltageSource

KINDS: tuple[type[Part], ...] = (
    Resistor,
    Capacitor,
    Inductor,
    Coupling,
    VoltageSource,
    CurrentSource,
    Cable,
    Amplifier,
)

__all__ = [
    "KINDS",
    "Amplifier",
    "Cable",
    "Capacitor",
    "Coupling",
    "CurrentSource",
    "Inductor",
    "Part",
    "Resistor",
    "VoltageSource",
]
