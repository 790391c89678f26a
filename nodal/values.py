"""A part's value: the number the solver uses, and what the text says about its spread, trim, limits and drift.

Everything is in SI base units. Nothing here knows how values are written.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True, slots=True)
class Tolerance:
    """Half-width of an interval, in the unit of the value (absolute, already multiplied out).

    `coverage` is None for limits (rectangular) and the factor k for an expanded uncertainty (normal,
    standard uncertainty = half_width / k), see JCGM 100:2008, 4.3.
    """

    half_width: float
    coverage: float | None = None


@dataclass(frozen=True, slots=True)
class Trim:
    """The range over which a part can be set, in the unit of the value."""

    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Rating:
    """A part maker's limit: `unit` is "V", "A" or "W"; peak unless `rms`."""

    limit: float
    unit: str
    rms: bool = False


@dataclass(frozen=True, slots=True)
class Drift:
    """Relative change per kelvin from 23 °C, and per volt."""

    per_kelvin: float = 0.0
    per_volt: float = 0.0


@dataclass(frozen=True, slots=True)
class Random:
    """One random quantity: a toleranced `let`, argument or literal. Values that name the same one move together."""

    name: str
    nominal: float
    tolerance: Tolerance


@dataclass(frozen=True, slots=True)
class Formula:
    """How a value follows from numbers and random quantities; evaluates on numbers and arrays alike.

    `operator` is one of "number", "random", "+", "-", "*", "/", "negate", "sqrt", "min", "max" or the name of a
    geometry function; `operands` are formulas, or the number, or the Random.
    """

    operator: str
    operands: tuple[Any, ...]

    def evaluate(self, drawn: Mapping[str, Any]) -> Any:
        """The value with `drawn[name]` (number or array, SI) in place of each random quantity."""
        raise NotImplementedError


@dataclass(frozen=True, slots=True)
class Value:
    """A number in SI units with what the text says about it."""

    nominal: float
    tolerance: Tolerance | None = None
    trim: Trim | None = None
    ratings: tuple[Rating, ...] = ()
    drift: Drift | None = None
    formula: Formula | None = None
    """None where no random quantity takes part: the value is `nominal`, spread by `tolerance` alone."""

    def __float__(self) -> float:
        return self.nominal
