"""Stocks of cable: their fields, and what a cable cut from one is per metre."""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

from nodal.language import syntax, units
from nodal.language.evaluate import SPREAD, Evaluator
from nodal.language.frame import Frame
from nodal.language.quantity import Quantity, number, operate, randomised
from nodal.language.scope import Rejected, Scope
from nodal.language.units import Dimension
from nodal.parts.cable import Cable
from nodal.parts.dielectric import Dielectric
from nodal.values import Value

LIGHT = 299792458.0
"""m/s, exact."""
NEPER = 20 / math.log(10)
"""Decibels in a neper."""


def _per_metre(dimension: Dimension) -> Dimension:
    return units.divide(dimension, units.METRE)


FIELDS: dict[str, Dimension] = {
    "capacitance": _per_metre(units.FARAD),
    "inductance": _per_metre(units.HENRY),
    "resistance": _per_metre(units.OHM),
    "conductance": _per_metre(units.SIEMENS),
    "impedance": units.OHM,
    "velocity": units.NONE,
    "loss": units.NONE,
    "skin": _per_metre(units.OHM),
    "attenuation": _per_metre(units.DECIBEL),
    "shield_inductance": _per_metre(units.HENRY),
    "shield_resistance": _per_metre(units.OHM),
    "shield_coupling": units.NONE,
}
_AT = ("skin", "attenuation")
_CLASHES = (
    ("impedance", "inductance"),
    ("impedance", "capacitance"),
    ("velocity", "inductance"),
    ("velocity", "capacitance"),
    ("skin", "attenuation"),
)


@dataclass(frozen=True, slots=True)
class StockData:
    """A stock worked out, per metre in SI units; see `nodal.parts.cable.Cable`."""

    resistance: Value
    inductance: Value
    conductance: Value
    capacitance: Value
    loss: float
    skin: tuple[float, float] | None
    shield_inductance: Value | None
    shield_resistance: Value | None
    shield_coupling: Value | None


def work_out_stock(stock: syntax.Stock, evaluator: Evaluator, scope: Scope) -> StockData:
    """What the fields say. A field with a tolerance is one random quantity in every cable cut from the
    stock."""
    fields, at = _fields(stock, evaluator, scope)
    _check(stock, fields, evaluator)

    def value(name: str) -> Value:
        return fields[name].value if name in fields else Value(0.0)

    def given(name: str) -> Value | None:
        return fields[name].value if name in fields else None

    inductance, capacitance = value("inductance"), value("capacitance")
    if "impedance" in fields:
        impedance, speed = fields["impedance"], operate("*", [fields["velocity"], number(LIGHT)], units.NONE)
        inductance = operate("/", [impedance, speed], FIELDS["inductance"]).value
        capacitance = operate("/", [number(1.0), impedance, speed], FIELDS["capacitance"]).value
    data = StockData(
        value("resistance"), inductance, value("conductance"), capacitance,
        fields["loss"].nominal if "loss" in fields else 0.0,
        (fields["skin"].nominal, at["skin"]) if "skin" in fields else None,
        given("shield_inductance"), given("shield_resistance"), given("shield_coupling"),
    )  # fmt: skip
    if "attenuation" not in fields:
        return data
    written = next(field for field in stock.fields if field.name.text == "attenuation")
    skin = _skin_from(fields["attenuation"].nominal / NEPER, at["attenuation"], data)
    if skin is None:
        least = _attenuation(0.0, at["attenuation"], data) * NEPER
        evaluator.reject("attenuation-too-small", written.span, least=f"{least:.4g} dB/m")
    return StockData(
        data.resistance, data.inductance, data.conductance, data.capacitance, data.loss,
        (skin, at["attenuation"]), data.shield_inductance, data.shield_resistance, data.shield_coupling,
    )  # fmt: skip


def _fields(
    stock: syntax.Stock, evaluator: Evaluator, scope: Scope
) -> tuple[dict[str, Quantity], dict[str, float]]:
    fields: dict[str, Quantity] = {}
    at: dict[str, float] = {}
    written: set[str] = set()
    failed = False
    for field in stock.fields:
        name = field.name.text
        try:
            if name not in FIELDS:
                evaluator.unknown("field of a stock", field.name.span, name, FIELDS)
            if name in written:
                evaluator.reject("field-twice", field.name.span, field=name)
            written.add(name)
            _shape(field, evaluator)
            expression = field.values[0][0]
            qualifiers = () if name in (*_AT, "loss") else SPREAD
            quantity = evaluator.positive(
                expression,
                scope,
                FIELDS[name],
                f"the {name} of a stock",
                zero=name not in ("impedance", "velocity"),
                qualifiers=qualifiers,
            )
            if name in ("velocity", "shield_coupling") and quantity.nominal > 1:
                evaluator.reject("beyond-one", expression.span, what=f"the {name} of a stock")
            if name in _AT:
                at[name] = evaluator.positive(field.values[0][1], scope, units.HERTZ, "a frequency").nominal
            evaluator.check_spread(quantity, expression.span, stock.name.text)
            fields[name] = randomised(quantity, f"{scope.prefix}{stock.name.text}.{name}")
        except Rejected:
            failed = True
    if failed:
        raise Rejected
    return fields, at


def _shape(field: syntax.Field, evaluator: Evaluator) -> None:
    """Whether a field has one value, or one and a frequency where it needs that."""
    name = field.name.text
    wanted = ("at",) if name in _AT else ("",)
    joins = field.joins or ("",) * len(field.values)
    if joins != wanted:
        form = f"{name} VALUE at FREQUENCY" if name in _AT else f"{name} VALUE"
        evaluator.reject("field-form", field.span, form=form)


def _check(stock: syntax.Stock, fields: dict[str, Quantity], evaluator: Evaluator) -> None:
    places = {field.name.text: field.name.span for field in stock.fields}
    for first, second in _CLASHES:
        if first in fields and second in fields:
            evaluator.reject("field-clash", places[second], first=first, second=second)
    for first, second in (("impedance", "velocity"), ("velocity", "impedance")):
        if first in fields and second not in fields:
            evaluator.reject("missing-field", places[first], given=first, missing=second)


def _attenuation(skin: float, frequency: float, data: StockData) -> float:
    """Re γ in Np/m at a frequency, the skin resistance there being `skin`; γ² = Z' Y' (telegraph
    equations)."""
    s = 2j * math.pi * frequency
    core = cmath.sqrt(data.resistance.nominal**2 + 2j * skin**2)
    shield = data.shield_resistance.nominal if data.shield_resistance else 0.0
    relative: complex = _relative(data.loss, s)
    series = s * data.inductance.nominal + core + shield
    shunt = s * data.capacitance.nominal * relative + data.conductance.nominal
    return (cmath.sqrt(series) * cmath.sqrt(shunt)).real


class _Numbers:
    """The arithmetic of `Dielectric.relative` on one complex number."""

    def power(self, x: complex, exponent: float) -> complex:
        return cmath.exp(exponent * cmath.log(x))


def _relative(loss: float, s: complex) -> complex:
    return complex(Dielectric(loss).relative(s, _Numbers())) if loss else 1.0 + 0j  # type: ignore[arg-type]


def _skin_from(wanted: float, frequency: float, data: StockData) -> float | None:
    """The skin resistance (Ω/m at `frequency`) with which the attenuation there is `wanted` Np/m; None: too
    small.

    The attenuation grows with it, so bisection to neighbouring floats finds it.
    """
    if not wanted > _attenuation(0.0, frequency, data):
        return None
    low, high = 0.0, 1e-9
    while _attenuation(high, frequency, data) < wanted:
        low, high = high, 4 * high
        if not math.isfinite(high):
            return None
    while True:
        middle = (low + high) / 2
        if not low < middle < high:
            return high
        if _attenuation(middle, frequency, data) < wanted:
            low = middle
        else:
            high = middle


def expand_cable(cable: syntax.Cable, data: StockData, frame: Frame) -> None:
    """One cable part between its four nodes."""
    evaluator = frame.evaluator
    length = evaluator.positive(
        cable.length, frame.scope, units.METRE, "the length of a cable", zero=True, qualifiers=SPREAD
    )
    evaluator.check_spread(length, cable.length.span, frame.prefix + cable.name.text)
    core1, shield1 = (frame.node(word) for word in cable.near)
    core2, shield2 = (frame.node(word) for word in cable.far)
    shielded = any(
        value is not None and value.nominal for value in (data.shield_inductance, data.shield_resistance)
    )
    if shield1 != shield2 and not shielded:
        span = syntax.Span(cable.near[1].span.path, cable.near[1].span.start, cable.far[1].span.end)
        evaluator.reject(
            "shield-without-fields",
            span,
            near=cable.near[1].text,
            far=cable.far[1].text,
            stock=cable.stock.text,
        )
    part = Cable(
        frame.prefix + cable.name.text, core1, shield1, core2, shield2, length.value, data.resistance,
        data.inductance, data.conductance, data.capacitance, data.loss, data.skin, data.shield_inductance,
        data.shield_resistance, data.shield_coupling, side=frame.side, place=frame.builder.place(cable.span),
    )  # fmt: skip
    frame.builder.add(part, cable.span)
