"""Figures of a contact: what the chain presents to the circuit, and how much it changes what was there."""

from __future__ import annotations

import numpy as np

from nodal.figures.base import Asked, Complexes, Floats
from nodal.response import Unavailable


def impedance(asked: Asked, frequencies: Floats) -> Floats:
    """|Z| in ohms of the chain alone at the contact, other contacts open; infinite where no current can
    flow.
    """
    return np.abs(_impedance(asked, frequencies))


def resistance(asked: Asked, frequencies: Floats) -> Floats:
    """Parallel equivalent resistance 1/Re(1/Z) in ohms: with `capacitance`, the same admittance as the
    chain's.
    """
    z = _impedance(asked, frequencies)
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        # |Z|²/Re Z keeps the digits of a small real part, which 1/Z would round away.
        value = np.abs(z) * (np.abs(z) / z.real)
    return np.where(np.isinf(z) | (z.real == 0.0) & (z != 0.0), np.inf, np.where(z == 0.0, 0.0, value))


def capacitance(asked: Asked, frequencies: Floats) -> Floats:
    """Parallel equivalent capacitance Im(1/Z)/ω in farads, negative where the chain is inductive; 0 Hz:
    the limit.
    """
    z = _impedance(asked, frequencies)
    with np.errstate(divide="ignore", invalid="ignore"):
        value = -z.imag / np.abs(z) / np.abs(z) / (2.0 * np.pi * frequencies)
    value = np.where(np.isinf(z), 0.0, value)
    resting = frequencies == 0.0
    if resting.any():
        value = np.where(resting, asked.response.capacitance_at_rest(asked.contact or ""), value)
    return value


def disturbance(asked: Asked, frequencies: Floats) -> Floats:
    """|loaded/undisturbed| - 1 at the contact, without cancellation: with z the relative change, computed
    as such, |1 + z| - 1 = (2 Re z + |z|²)/(|1 + z| + 1). No value where there is no undisturbed voltage.
    """
    z = asked.response.change(frequencies, asked.contact or "", asked.drive).values
    return np.asarray((2.0 * z.real + np.abs(z) ** 2) / (np.abs(1.0 + z) + 1.0), dtype=np.float64)


def error(asked: Asked, frequencies: Floats) -> Floats:
    """|reading|/|undisturbed| - 1: what is displayed against what was there before the chain touched it.

    The reading includes `times` and must be in volts; the contact may be left out where there is but one.
    """
    network = asked.response.network
    contact = asked.contact
    if contact is None:
        if len(network.contacts) != 1:
            names = ", ".join(c.name for c in network.contacts) or "none"
            raise Unavailable(f"error({asked.reading}) needs a contact after the reading; there are: {names}")
        contact = network.contacts[0].name
    unit = network.reading(asked.reading).unit
    if unit != "V":
        shown_unit = unit or "a plain number"
        raise Unavailable(f'"{asked.reading}" shows {shown_unit}, which has no error against volts')
    shown = asked.response.reading(frequencies, asked.reading, asked.drive).values
    before = asked.response.undisturbed(frequencies, contact, asked.drive).values
    with np.errstate(divide="ignore", invalid="ignore"):
        value: Floats = np.abs(shown) / np.abs(before) - 1.0
    return np.where(np.isinf(value), np.nan, value)


def _impedance(asked: Asked, frequencies: Floats) -> Complexes:
    return asked.response.impedance(frequencies, asked.contact or "").values
