"""Expressions to quantities: arithmetic with its dimensions, functions, qualifiers. Mistakes go to the
collector."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import Any, NoReturn

import numpy as np

from nodal import geometry
from nodal.language import syntax, units
from nodal.language.diagnostics import Collector
from nodal.language.quantity import LARGEST_FORMULA, PI, Quantity, literal, operate
from nodal.language.scope import Binding, Rejected, Scope, nearest
from nodal.language.syntax import Span
from nodal.language.units import Dimension
from nodal.values import Drift, Rating, Tolerance, Trim

FUNCTIONS = ("sqrt", "min", "max", *geometry.SHAPES)

MOST_TRIED = 100
"""Operations of a formula, and random quantities in it, up to which its spread is looked at."""
MOST_GUESSES = 50
"""Unknown names for which the nearest known one is looked for."""

Kind = type[syntax.Qualifier]

EVERY: frozenset[Kind] = frozenset(
    (syntax.PlusMinus, syntax.TrimRange, syntax.Rated, syntax.DriftRates, syntax.LossFactor, syntax.Called)
)
"""Qualifiers that a part may bear."""
NAMED = EVERY - {syntax.Called}
"""Those of a let."""
SPREAD: frozenset[Kind] = frozenset((syntax.PlusMinus,))

_WORDS: dict[Kind, str] = {
    syntax.PlusMinus: "±", syntax.TrimRange: "trim", syntax.Rated: "rated", syntax.DriftRates: "drift",
    syntax.LossFactor: "loss", syntax.Called: "as",
}  # fmt: skip
_PER_KELVIN = units.divide(units.NONE, units.KELVIN)
_PER_VOLT = units.divide(units.NONE, units.VOLT)
_APART = (units.DECIBEL, units.CELSIUS)


class Evaluator:
    """Works out expressions in a scope; a wrong one is reported once and raises `Rejected`."""

    def __init__(self, collector: Collector, lost: frozenset[str] = frozenset()) -> None:
        self.collector = collector
        self.lost = lost
        """Words of statements that could not be read: what is unknown may have been declared there."""
        self.guesses = 0
        self.uses: list[tuple[Span, str]] = []
        """The places and chains being expanded, outermost first."""

    def report(self, code: str, span: Span, **arguments: Any) -> None:
        """Add a finding, with the places of use that led to it."""
        self.collector.add(code, span, related=tuple(reversed(self.uses)), **arguments)

    def reject(self, code: str, span: Span, **arguments: Any) -> NoReturn:
        """Report a finding and give up on what is being worked out."""
        self.report(code, span, **arguments)
        raise Rejected

    def unknown(self, what: str, span: Span, name: str, known: Iterable[str]) -> NoReturn:
        """Report a name that nothing bears, unless what bears it may be a statement that could not be
        read."""
        if name not in self.lost and name.partition(".")[0] not in self.lost:
            self.guesses += 1
            hint = nearest(name, known) if self.guesses <= MOST_GUESSES else "check the spelling"
            self.report("unknown-name", span, what=what, unknown=name, hint=hint)
        raise Rejected

    def value(
        self,
        expression: syntax.Expression,
        scope: Scope,
        dimensions: Dimension | Sequence[Dimension] | None = None,
        qualifiers: Iterable[Kind] = (),
    ) -> Quantity:
        """A quantity with its qualifiers, of one of `dimensions` (None: any), bearing none but those
        allowed."""
        if isinstance(expression, syntax.Qualified):
            quantity = self._qualified(expression, scope, frozenset(qualifiers))
        else:
            quantity = self._named_or_worked_out(expression, scope)
        self.expect(quantity, expression.span, dimensions)
        return quantity

    def expect(
        self, quantity: Quantity, span: Span, dimensions: Dimension | Sequence[Dimension] | None
    ) -> None:
        """Report a quantity that is of none of the dimensions."""
        if dimensions is None:
            return
        if not dimensions or not isinstance(dimensions[0], tuple):
            dimensions = (dimensions,)  # type: ignore[assignment]
        if quantity.dimension not in dimensions:
            wanted = " or ".join(units.quantity_name(d) for d in dimensions)  # type: ignore[arg-type]
            self.reject(
                "wrong-dimension", span, expected=wanted, found=units.quantity_name(quantity.dimension)
            )

    def positive(
        self,
        expression: syntax.Expression,
        scope: Scope,
        dimensions: Dimension | Sequence[Dimension],
        what: str,
        *,
        zero: bool = False,
        qualifiers: Iterable[Kind] = (),
    ) -> Quantity:
        """A quantity above zero (or zero, where that is allowed)."""
        quantity = self.value(expression, scope, dimensions, qualifiers)
        self.check_positive(quantity, expression.span, what, zero=zero)
        return quantity

    def check_positive(self, quantity: Quantity, span: Span, what: str, *, zero: bool = False) -> None:
        """Report a quantity below zero, or at zero where that is not allowed."""
        if quantity.nominal < 0 or (quantity.nominal == 0 and not zero):
            shown = units.show(quantity.nominal, units.unit_name(quantity.dimension))
            self.reject(
                "negative-value",
                span,
                what=what,
                value=shown,
                bound="zero or more" if zero else "more than zero",
            )

    def check_spread(self, quantity: Quantity, span: Span, name: str) -> None:
        """Warn of a value that its tolerances, one at a time, let fall below zero."""
        lowest = _lowest(quantity)
        if lowest < 0:
            unit = units.unit_name(quantity.dimension)
            self.report("spread-below-zero", span, name=name, lowest=units.show(lowest, unit), allowed=name)

    def let(self, binding: Binding, scope: Scope) -> Quantity:
        """The value of a let, its own tolerance not yet a random quantity."""
        return self.value(binding.expression, scope, None, NAMED)

    def circle(self, bindings: list[Binding]) -> None:
        """Report lets that refer to themselves."""
        names = [binding.word.text for binding in bindings]
        first = min(bindings, key=lambda binding: (binding.word.span.path, binding.word.span.start))
        self.report("let-cycle", first.word.span, names=_circle_text(names))

    # Arithmetic

    def _named_or_worked_out(self, expression: syntax.Expression, scope: Scope) -> Quantity:
        if isinstance(expression, syntax.Name):
            return self._name(expression, scope)  # used whole: what a let is qualified by stays with it
        return self._work_out(expression, scope)

    def _work_out(self, expression: syntax.Expression, scope: Scope) -> Quantity:
        """Recursion goes one frame a node, as deep as parentheses may nest."""
        match expression:
            case syntax.Number():
                quantity = literal(expression.digits, expression.unit)
                if not math.isfinite(quantity.nominal):
                    self.reject("overflow", expression.span)
                if quantity.nominal == 0 and expression.digits.lower().partition("e")[0].strip("0."):
                    self.reject("underflow", expression.span)
                return quantity
            case syntax.Name():
                return self._plain(self._name(expression, scope), expression.span, expression.text)
            case syntax.Negative():
                return self._negative(expression, scope)
            case syntax.Sum(terms=terms):
                return self._sum(expression, [self._work_out(term, scope) for term in terms])
            case syntax.Product(factors=factors):
                return self._product(expression, [self._work_out(factor, scope) for factor in factors])
            case syntax.Call(arguments=arguments):
                return self._call(expression, [self._work_out(argument, scope) for argument in arguments])
            case syntax.Qualified():
                self._no_network_in(expression.base)
                self.reject(
                    "qualifier-in-arithmetic", expression.span, word=_WORDS[type(expression.qualifiers[0])]
                )
            case syntax.Parallel() | syntax.Series():
                sign = "∥" if isinstance(expression, syntax.Parallel) else "--"
                self.reject("network-in-arithmetic", expression.span, sign=sign)
        raise AssertionError(expression)

    def _no_network_in(self, expression: syntax.Expression) -> None:
        if isinstance(expression, syntax.Parallel | syntax.Series):
            self.reject(
                "network-in-arithmetic",
                expression.span,
                sign="∥" if isinstance(expression, syntax.Parallel) else "--",
            )

    def _name(self, name: syntax.Name, scope: Scope) -> Quantity:
        try:
            quantity = scope.find(name.text)
        except KeyError:
            if name.text == "pi":
                return PI
            self.unknown("value", name.span, name.text, [*scope.names(), "pi"])
        if quantity is None:
            raise Rejected
        return quantity

    def _plain(self, quantity: Quantity, span: Span, text: str) -> Quantity:
        if not quantity.bare:
            self.reject("qualified-in-arithmetic", span, text=text)
        return quantity

    def _apart(self, quantity: Quantity, span: Span) -> None:
        for exponent, unit in ((quantity.dimension[6], "dB"), (quantity.dimension[7], "°C")):
            if exponent:
                self.reject("unit-not-for-arithmetic", span, unit=unit)

    def _negative(self, expression: syntax.Negative, scope: Scope) -> Quantity:
        sign, inner = -1, expression.operand
        while isinstance(inner, syntax.Negative):  # any number of signs without recursion
            sign, inner = -sign, inner.operand
        quantity = self._work_out(inner, scope)
        if not isinstance(inner, syntax.Number):  # -3 dB is a way to write a number, -(a) is arithmetic
            self._apart(quantity, expression.span)
        if sign > 0:
            return quantity
        return operate("negate", [quantity], quantity.dimension, points=quantity.points)

    def _sum(self, expression: syntax.Sum, terms: list[Quantity]) -> Quantity:
        first = terms[0]
        for term, node in zip(terms, expression.terms, strict=True):
            self._apart(term, node.span)
            if term.dimension != first.dimension:
                self.reject(
                    "wrong-dimension",
                    node.span,
                    expected=units.quantity_name(first.dimension),
                    found=units.quantity_name(term.dimension),
                )
        points = all(term.points for term in terms)
        return self._fold(expression, terms, expression.operators, [first.dimension] * len(terms), points)

    def _product(self, expression: syntax.Product, factors: list[Quantity]) -> Quantity:
        dimensions = [factors[0].dimension]
        for factor, node in zip(factors, expression.factors, strict=True):
            self._apart(factor, node.span)
        for index, operator in enumerate(expression.operators, 1):
            if operator == "/" and factors[index].nominal == 0:
                self.reject("division-by-zero", expression.factors[index].span)
            combine = units.divide if operator == "/" else units.multiply
            dimensions.append(combine(dimensions[-1], factors[index].dimension))
        points = dimensions[-1] == units.NONE and any(factor.points for factor in factors)
        return self._fold(expression, factors, expression.operators, dimensions, points)

    def _fold(
        self,
        expression: syntax.Expression,
        operands: list[Quantity],
        operators: Sequence[str],
        dimensions: list[Dimension],
        points: bool,
    ) -> Quantity:
        """From left to right, runs of one operator as one operation."""
        result, start = operands[0], 0
        while start < len(operators):
            end = start
            while end < len(operators) and operators[end] == operators[start]:
                end += 1
            run = [result, *operands[start + 1 : end + 1]]
            result = operate(operators[start], run, dimensions[end], points=points)
            start = end
        return self._finite(expression, result)

    def _finite(self, expression: syntax.Expression, quantity: Quantity) -> Quantity:
        if not math.isfinite(quantity.nominal):
            self.reject("overflow", expression.span)
        if quantity.size > LARGEST_FORMULA:
            self.reject("formula-too-long", expression.span, limit=f"{LARGEST_FORMULA:,}")
        return quantity

    def _call(self, call: syntax.Call, arguments: list[Quantity]) -> Quantity:
        name = call.function.text
        if name not in FUNCTIONS:
            self.unknown("function", call.function.span, name, FUNCTIONS)
        for argument, node in zip(arguments, call.arguments, strict=True):
            self._apart(argument, node.span)
        if name in geometry.SHAPES:
            return self._shape(call, arguments)
        if name == "sqrt":
            self._count(call, "one value", len(arguments) == 1)
            if arguments[0].nominal < 0:
                self.reject("negative-root", call.arguments[0].span)
            return operate("sqrt", arguments, units.root(arguments[0].dimension))
        self._count(call, "two values or more", len(arguments) >= 2)
        for argument, node in zip(arguments, call.arguments, strict=True):
            self.expect(argument, node.span, arguments[0].dimension)
        points = all(argument.points for argument in arguments)
        return self._finite(call, operate(name, arguments, arguments[0].dimension, points=points))

    def _shape(self, call: syntax.Call, arguments: list[Quantity]) -> Quantity:
        name = call.function.text
        _, labels = geometry.SHAPES[name]
        self._count(call, "(" + ", ".join(labels) + ")", len(arguments) == len(labels))
        for argument, node, label in zip(arguments, call.arguments, labels, strict=True):
            self.expect(argument, node.span, units.METRE)
            self.check_positive(argument, node.span, f"the {label}")
        thick = arguments[-1].nominal
        for argument, node, label in zip(arguments[:-1], call.arguments, labels, strict=False):
            if argument.nominal < geometry.SHORTEST * thick:
                self.reject(
                    "short-wire",
                    node.span,
                    label=label,
                    length=units.show(argument.nominal, "m"),
                    limit=units.show(geometry.SHORTEST * thick, "m"),
                )
        return self._finite(call, operate(name, arguments, units.HENRY))

    def _count(self, call: syntax.Call, wanted: str, right: bool) -> None:
        if not right:
            self.reject(
                "wrong-arguments",
                call.span,
                function=call.function.text,
                wanted=wanted,
                found=len(call.arguments),
            )

    # Qualifiers

    def _qualified(self, expression: syntax.Qualified, scope: Scope, allowed: frozenset[Kind]) -> Quantity:
        self._no_network_in(expression.base)
        if isinstance(expression.base, syntax.Qualified):
            self.reject(
                "qualifier-in-arithmetic",
                expression.base.span,
                word=_WORDS[type(expression.base.qualifiers[0])],
            )
        quantity = self._named_or_worked_out(expression.base, scope)
        written: set[Kind] = set()
        for qualifier in expression.qualifiers:
            kind = type(qualifier)
            if kind in written or _bears(quantity, kind):
                self.reject("qualifier-twice", qualifier.span, word=_WORDS[kind])
            if kind not in allowed:
                self.reject("qualifier-misplaced", qualifier.span, word=_WORDS[kind])
            written.add(kind)
        points = _is_literal(expression.base) and quantity.points
        for qualifier in expression.qualifiers:
            quantity = self._qualify(quantity, qualifier, scope, points)
        return quantity

    def _qualify(
        self, quantity: Quantity, qualifier: syntax.Qualifier, scope: Scope, points: bool
    ) -> Quantity:
        value = quantity.value
        match qualifier:
            case syntax.PlusMinus():
                return replace(
                    quantity, value=replace(value, tolerance=self._spread(quantity, qualifier, scope, points))
                )
            case syntax.TrimRange():
                return replace(quantity, value=replace(value, trim=self._trim(quantity, qualifier, scope)))
            case syntax.Rated():
                return replace(quantity, value=replace(value, ratings=self._ratings(qualifier, scope)))
            case syntax.DriftRates():
                return replace(quantity, value=replace(value, drift=self._drift(qualifier, scope)))
            case syntax.LossFactor(factor=factor):
                loss = self.positive(factor, scope, units.NONE, "a dissipation factor", zero=True)
                return replace(quantity, loss=loss.nominal)
            case syntax.Called(name=name):
                return replace(quantity, name=name)

    def _spread(self, quantity: Quantity, written: syntax.PlusMinus, scope: Scope, points: bool) -> Tolerance:
        width = self.value(written.width, scope)
        relative = width.points and not points
        if not relative and width.dimension != quantity.dimension:
            found = units.quantity_name(width.dimension)
            name = units.unit_name(quantity.dimension)
            self.reject(
                "wrong-dimension",
                written.width.span,
                found=found,
                expected=f"{name} or %" if name else "a plain number or %",
            )
        if width.nominal < 0:
            self.reject("negative-tolerance", written.width.span)
        if relative and quantity.dimension in _APART:
            self.reject(
                "wrong-dimension",
                written.width.span,
                found="a percentage",
                expected=units.quantity_name(quantity.dimension),
            )
        if relative and quantity.nominal == 0 and width.nominal:
            self.reject("percent-of-zero", written.width.span)
        half = abs(width.nominal * quantity.nominal) if relative else width.nominal
        if not math.isfinite(half):
            self.reject("overflow", written.width.span)
        coverage = None
        if written.coverage is not None:
            coverage = self.positive(written.coverage, scope, units.NONE, "a coverage factor").nominal
        return Tolerance(half, coverage)

    def _trim(self, quantity: Quantity, written: syntax.TrimRange, scope: Scope) -> Trim:
        low = self.positive(written.low, scope, quantity.dimension, "the end of a trim range", zero=True)
        high = self.positive(written.high, scope, quantity.dimension, "the end of a trim range", zero=True)
        unit = units.unit_name(quantity.dimension)
        shown = [units.show(x.nominal, unit) for x in (low, high, quantity)]
        if low.nominal > high.nominal:
            self.reject("trim-reversed", written.span, low=shown[0], high=shown[1])
        if not low.nominal <= quantity.nominal <= high.nominal:
            self.reject("trim-misses-value", written.span, low=shown[0], high=shown[1], value=shown[2])
        return Trim(low.nominal, high.nominal)

    def _ratings(self, written: syntax.Rated, scope: Scope) -> tuple[Rating, ...]:
        ratings: list[Rating] = []
        for expression, rms in written.limits:
            limit = self.positive(expression, scope, (units.VOLT, units.AMPERE, units.WATT), "a rating")
            unit = units.unit_name(limit.dimension)
            if any(rating.unit == unit for rating in ratings):
                self.reject("qualifier-twice", expression.span, word=f"a rating in {unit}")
            ratings.append(Rating(limit.nominal, unit, rms))
        return tuple(ratings)

    def _drift(self, written: syntax.DriftRates, scope: Scope) -> Drift:
        rates: dict[Dimension, float] = {}
        for expression in written.rates:
            rate = self.value(expression, scope, (_PER_KELVIN, _PER_VOLT))
            if rate.dimension in rates:
                self.reject(
                    "qualifier-twice", expression.span, word=f"a drift in {units.unit_name(rate.dimension)}"
                )
            rates[rate.dimension] = rate.nominal
        return Drift(rates.get(_PER_KELVIN, 0.0), rates.get(_PER_VOLT, 0.0))


def _lowest(quantity: Quantity) -> float:
    """The value with each tolerance in turn at either end, the others at their middle; the least of those."""
    value, lowest = quantity.value, quantity.nominal
    if value.tolerance is not None:
        lowest -= value.tolerance.half_width
    if value.formula is None or quantity.size > MOST_TRIED:
        return lowest
    randoms = value.formula.randoms()
    for name, random in list(randoms.items())[:MOST_TRIED]:
        for sign in (-1, 1):
            end = random.nominal + sign * random.tolerance.half_width
            with np.errstate(all="ignore"):
                try:
                    lowest = min(lowest, float(value.formula.evaluate({name: end})))
                except (ArithmeticError, ValueError):
                    continue  # 1/x where x reaches zero: what the value may be has no lower end to show
    return lowest


def _circle_text(names: list[str]) -> str:
    """A circle on one line, its middle left out where it is long."""
    shown = names if len(names) <= 8 else [*names[:6], "…", names[-1]]
    return " -> ".join([*shown, names[0]])


def _bears(quantity: Quantity, kind: Kind) -> bool:
    """Whether a let brought this qualifier along; a tolerance it brought is a random quantity by now."""
    value = quantity.value
    present = {
        syntax.TrimRange: value.trim is not None,
        syntax.Rated: bool(value.ratings),
        syntax.DriftRates: value.drift is not None,
        syntax.LossFactor: bool(quantity.loss),
    }
    return present.get(kind, False)


def _is_literal(expression: syntax.Expression) -> bool:
    while isinstance(expression, syntax.Negative):
        expression = expression.operand
    return isinstance(expression, syntax.Number)
