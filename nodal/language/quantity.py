"""Quantities: a value with its dimension, and arithmetic on them that keeps track of what is random."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

from nodal.language import syntax, units
from nodal.language.units import Dimension
from nodal.values import Formula, Random, Value, apply

LARGEST_FORMULA = 100_000
"""Operations in one formula of random quantities, written out; lets that double each other grow without
bound."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value (SI), its dimension, and what was said about it that a `Value` does not hold."""

    value: Value
    dimension: Dimension
    points: bool = False
    """Written in % or ppm, or worked out from such: as a tolerance it is relative."""
    loss: float = 0.0
    name: syntax.Word | None = None
    """From `as NAME`."""
    size: int = 1
    """Operations in its formula, written out."""

    @property
    def nominal(self) -> float:
        return self.value.nominal

    @property
    def bare(self) -> bool:
        """Whether arithmetic loses nothing of it: no trim, rating, drift, loss or name."""
        value = self.value
        return not (value.trim or value.ratings or value.drift or self.loss or self.name or value.tolerance)


@lru_cache(maxsize=16384)
def literal(digits: str, unit: str) -> Quantity:
    """A number as written; its nominal may be infinite."""
    dimension = units.dimension_of(unit)
    points = dimension == units.NONE and unit != ""
    return Quantity(Value(units.to_number(digits, unit)), dimension, points)


def number(nominal: float, dimension: Dimension = units.NONE) -> Quantity:
    """A plain value."""
    return Quantity(Value(nominal), dimension)


PI = number(math.pi)


def operate(
    operator: str, operands: Sequence[Quantity], dimension: Dimension, *, points: bool = False
) -> Quantity:
    """One operation of a `Formula`; the caller has checked the dimensions. The nominal may not be finite."""
    if all(operand.value.formula is None for operand in operands):
        return Quantity(Value(_nominal(operator, operands)), dimension, points)
    formula = Formula(operator, tuple(formula_of(operand) for operand in operands))
    size = 1 + sum(operand.size for operand in operands)
    return Quantity(Value(_nominal(operator, operands), formula=formula), dimension, points, size=size)


def _nominal(operator: str, operands: Sequence[Quantity]) -> float:
    try:
        return float(apply(operator, [operand.nominal for operand in operands]))
    except OverflowError:
        return math.inf


def formula_of(quantity: Quantity) -> Formula:
    """The formula of a value, a number where nothing random takes part."""
    return quantity.value.formula or Formula("number", (quantity.nominal,))


def randomised(quantity: Quantity, name: str) -> Quantity:
    """The quantity with its own tolerance made a random quantity of that name, so that every use moves
    together."""
    value = quantity.value
    if value.tolerance is None:
        return quantity
    if value.formula is None:
        formula = Formula("random", (Random(name, value.nominal, value.tolerance),))
    else:
        own = Formula("random", (Random(name, 0.0, value.tolerance),))
        formula = Formula("+", (value.formula, own))
    return replace(quantity, value=replace(value, tolerance=None, formula=formula), size=quantity.size + 1)
