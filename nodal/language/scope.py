"""Names for values: lets, the arguments of an assembly, and where each is evaluated.

A scope settles its lets in order of dependence before anything uses them, so that a chain of thousands of
lets needs
no deep recursion and a circle is found and named. What failed once is remembered and not reported again.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from nodal.language import syntax
from nodal.language.order import groups
from nodal.language.syntax import Span

if TYPE_CHECKING:
    from nodal.language.quantity import Quantity


class Rejected(Exception):
    """What was being worked out is wrong and has been reported; the statement around it is left out."""


@dataclass(slots=True)
class Binding:
    """A let: what was written, and where its name stands. `value` is None once it has been found wrong."""

    word: syntax.Word
    expression: syntax.Expression
    value: Quantity | None = None


@dataclass(slots=True)
class Scope:
    """Names visible at one place. `prefix` ("column.7.") makes names of random quantities unique."""

    parent: Scope | None = None
    prefix: str = ""
    lets: dict[str, Binding] = field(default_factory=dict)
    values: dict[str, Quantity | None] = field(default_factory=dict)
    """Arguments of an assembly, evaluated where it is used; None where that failed."""
    used: set[str] = field(default_factory=set)

    def find(self, name: str) -> Quantity | None:
        """The value of a name, None if it has failed; KeyError if nothing bears it."""
        scope: Scope | None = self
        while scope is not None:
            if name in scope.values:
                scope.used.add(name)
                return scope.values[name]
            binding = scope.lets.get(name)
            if binding is not None:
                scope.used.add(name)
                return binding.value
            scope = scope.parent
        raise KeyError(name)

    def names(self) -> Iterator[str]:
        """Every name that can be used here."""
        scope: Scope | None = self
        while scope is not None:
            yield from scope.values
            yield from scope.lets
            scope = scope.parent

    def settle(
        self, evaluate: Callable[[Binding, Scope], Quantity], circle: Callable[[list[Binding]], None]
    ) -> None:
        """Work out every let. `evaluate` raises Rejected for a wrong one; `circle` is told of each circle
        once."""
        uses = {name: names_in(binding.expression) for name, binding in self.lets.items()}
        for group in groups(self.lets, lambda name: (used for used in uses[name] if used in self.lets)):
            members = [self.lets[name] for name in group]
            if len(group) > 1 or group[0] in uses[group[0]]:
                circle(members)
                continue
            try:
                members[0].value = evaluate(members[0], self)
            except Rejected:
                members[0].value = None


def names_in(expression: syntax.Expression) -> dict[str, Span]:
    """Names that stand in an expression, with where each stands first."""
    found: dict[str, Span] = {}
    waiting: list[object] = [expression]
    while waiting:
        node = waiting.pop()
        if isinstance(node, syntax.Name):
            found.setdefault(node.text, node.span)
        elif not isinstance(node, syntax.Number):
            waiting.extend(reversed(list(children(node))))
    return found


def names_in_statements(statements: Iterable[syntax.Statement]) -> set[str]:
    """Every name that stands anywhere in statements: values, stocks, assemblies."""
    found: set[str] = set()
    waiting: list[object] = list(statements)
    while waiting:
        node = waiting.pop()
        if isinstance(node, syntax.Name | syntax.Word):
            found.add(node.text)
        elif isinstance(node, tuple):
            waiting.extend(node)
        elif isinstance(node, syntax.Node):
            waiting.extend(getattr(node, name) for name in node.__dataclass_fields__ if name != "span")
    return found


def children(node: object) -> Iterable[object]:
    """The parts of an expression or qualifier that are expressions or qualifiers themselves."""
    match node:
        case syntax.Negative(operand=operand):
            return (operand,)
        case syntax.Sum(terms=parts) | syntax.Product(factors=parts) | syntax.Call(arguments=parts):
            return parts
        case syntax.Parallel(branches=parts) | syntax.Series(members=parts):
            return parts
        case syntax.Qualified(base=base, qualifiers=qualifiers):
            return (base, *qualifiers)
        case syntax.PlusMinus(width=width, coverage=coverage):
            return (width,) if coverage is None else (width, coverage)
        case syntax.TrimRange(low=low, high=high):
            return (low, high)
        case syntax.Rated(limits=limits):
            return tuple(limit for limit, _ in limits)
        case syntax.DriftRates(rates=rates):
            return rates
        case syntax.LossFactor(factor=factor):
            return (factor,)
    return ()


def nearest(name: str, known: Iterable[str]) -> str:
    """What a message adds after an unknown name: the nearest known one, else what there is to choose from."""
    choices = sorted(set(known))
    if not choices:
        return "there are none"
    close = [choice for choice in choices if choice.lower() == name.lower()]
    if not close:
        # Comparing is slow; with many names only those of about the same length are looked at.
        likely = [c for c in choices if abs(len(c) - len(name)) <= 3] if len(choices) > MANY else choices
        close = difflib.get_close_matches(name, likely[:MANY], 1, 0.6)
    if close:
        return f"did you mean {close[0]}?"
    if len(choices) <= 16:
        return "known: " + ", ".join(choices)
    return "check the spelling; names are case-sensitive"


MANY = 1000
"""Names that are compared with an unknown one, at most."""
