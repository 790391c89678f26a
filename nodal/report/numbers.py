"""How numbers look in text: SI prefixes, ratios, decibels, percentages. The one place that decides it."""

from __future__ import annotations

import math

from quantiphy import Quantity

INFINITE = "∞"
NOTHING = "-"


class _Measured(Quantity):
    """Quantities with preferences of their own, so that nobody else's are changed."""


_Measured.set_prefs(map_sf=Quantity.map_sf_to_greek, output_sf="TGMkmµunpfa")

_PREFIXED = ("Ω", "F", "H", "Hz", "s", "V", "A", "W", "S", "m", "K")
_UNDEFINED = "?"


def quantity(value: float, unit: str, digits: int = 4, *, trim: bool = False) -> str:
    """`value` in `unit` with an SI prefix and `digits` significant digits; `trim` drops trailing zeros.

    "9.100 kΩ", "4.1 nV/√Hz"; plain numbers and degrees take no prefix.
    """
    special = _special(value)
    if special is not None:
        return f"{special} {unit}".strip()
    if unit.partition("/")[0] not in _PREFIXED:
        number = ratio(value, digits)
        return f"{number} {unit}".strip() if unit != "°" else f"{value:.2f}°"
    if value == 0.0:
        return f"0 {unit}"
    text = str(_Measured(value, unit).render(prec=digits - 1, strip_zeros=trim))
    return text.replace("\u03bc", "µ")  # one of the two code points of micro throughout


def frequency(value: float) -> str:
    """Hertz as short as six digits allow: "10 MHz", "217.384 MHz", "0 Hz"."""
    return quantity(value, "Hz", 6, trim=True)


def ratio(value: float, digits: int = 5) -> str:
    """A plain number with `digits` significant digits, zeros kept: "0.099870", "1.0000", "1.2346e-7"."""
    special = _special(value)
    if special is not None:
        return special
    if value == 0.0:
        return "0"
    text = f"{value:#.{digits}g}".rstrip(".")
    mantissa, e, exponent = text.partition("e")
    return f"{mantissa}e{int(exponent)}" if e else text


def decibels(value: float) -> str:
    """A number of dB without its unit, finer near 0: "-20.01", "0.0043"; -∞ for nothing."""
    special = _special(value)
    if special is not None:
        return special
    places = 2 if abs(value) >= 1.0 else 4
    text = f"{value:.{places}f}"
    return text.lstrip("-") if float(text) == 0.0 else text


def degrees(value: float) -> str:
    """A phase without its unit, two decimals."""
    special = _special(value)
    if special is not None:
        return special
    text = f"{value:.2f}"
    return "0.00" if float(text) == 0.0 else text


def part_of_one(value: float) -> str:
    """A relative change in the unit that suits it: "-1.23 %", "12 ppm", "2.0e-11"; 0 is "0 %"."""
    special = _special(value)
    if special is not None:
        return special
    size = abs(value)
    if size == 0.0:
        return "0 %"
    if size < 1e-8 or size >= 1e3:
        return ratio(value, 3)
    if size >= 1.0:
        return f"{value * 1e2:.0f} %"
    if size < 1e-4:
        return f"{ratio(value * 1e6, 3)} ppm"
    return f"{ratio(value * 1e2, 3)} %"


def _special(value: float) -> str | None:
    if math.isnan(value):
        return _UNDEFINED
    if math.isinf(value):
        return INFINITE if value > 0 else f"-{INFINITE}"
    return None
