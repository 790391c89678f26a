"""A part's value: the number the solver uses, and what the text says about its spread, trim, limits and
drift.

Everything is in SI base units. Nothing here knows how values are written.
"""

from __future__ import annotations

import operator
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from nodal import geometry


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
    """One random quantity: a toleranced `let`, argument or literal. Values that name the same one move
    together."""

    name: str
    nominal: float
    tolerance: Tolerance


@dataclass(frozen=True, slots=True)
class Formula:
    """How a value follows from numbers and random quantities; evaluates on numbers and arrays alike.

    `operator` is "number" (operand: a float), "random" (operand: a Random), or takes formulas: "negate" and
    "sqrt"
    one, "+", "*", "min" and "max" any number, "-" and "/" any number from left to right, or the name of a
    geometry
    function with its arguments.
    """

    operator: str
    operands: tuple[Any, ...]

    def evaluate(self, drawn: Mapping[str, Any]) -> Any:
        """The value with `drawn[name]` (number or array, SI) in place of each random quantity.

        What is not drawn stands at its nominal value. Each part of a formula is worked out once however
        often it
        stands there, and nesting needs no deep recursion.
        """
        done: dict[int, Any] = {}
        waiting: list[Formula] = [self]
        while waiting:
            formula = waiting[-1]
            if formula.operator == "number":
                done[id(formula)] = formula.operands[0]
            elif formula.operator == "random":
                random = formula.operands[0]
                done[id(formula)] = drawn.get(random.name, random.nominal)
            else:
                missing = [operand for operand in formula.operands if id(operand) not in done]
                if missing:
                    waiting.extend(missing)
                    continue
                done[id(formula)] = apply(
                    formula.operator, [done[id(operand)] for operand in formula.operands]
                )
            waiting.pop()
        return done[id(self)]

    def randoms(self) -> dict[str, Random]:
        """The random quantities that take part, by name."""
        seen: set[int] = set()
        waiting: list[Formula] = [self]
        found: dict[str, Random] = {}
        while waiting:
            formula = waiting.pop()
            if id(formula) in seen:
                continue
            seen.add(id(formula))
            if formula.operator == "random":
                found[formula.operands[0].name] = formula.operands[0]
            elif formula.operator != "number":
                waiting.extend(formula.operands)
        return found


def apply(operator: str, operands: Sequence[Any]) -> Any:
    """One operation of a `Formula` on numbers or arrays."""
    function = _FUNCTIONS.get(operator)
    if function is not None:
        return function(*operands)
    combine = _CHAINS[operator]
    result = operands[0]
    for operand in operands[1:]:
        result = combine(result, operand)
    return result


_CHAINS: dict[str, Callable[[Any, Any], Any]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
    "min": np.minimum,
    "max": np.maximum,
}
_FUNCTIONS: dict[str, Callable[..., Any]] = {
    "negate": operator.neg,
    "sqrt": np.sqrt,
    **{name: function for name, (function, _) in geometry.SHAPES.items()},
}


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
