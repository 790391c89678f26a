"""Names for values: lets, the arguments of an assembly, and where each is evaluated.

A scope settles its lets in order of dependence before anything uses them, so that a chain of thousands of lets needs
no deep recursion and a circle is found and named. What failed once is remembered and not reported again.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from nodal.language import syntax
from nodal.language.syntax import Span

if TYPE_CHECKING:
    from nodal.language.evaluate import Quantity


class Rejected(Exception):
    """What was being worked out is wrong and has been reported; the statement around it is left out."""


@dataclass(slots=True)
class Binding:
    """A let: what was written, and where its name stands. `value` is None once it has been found wrong."""

    word: syntax.Word
    expression: syntax.Expression
    settled: bool = False
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

    def settle(self, evaluate: Callable[[Binding, Scope], Quantity], circle: Callable[[list[Binding]], None]) -> None:
        """Work out every let. `evaluate` raises Rejected for a wrong one; `circle` is told of each circle once."""
        for members in _in_order(self.lets):
            if len(members) > 1 or members[0].word.text in names_in(members[0].expression):
                circle(members)
                for binding in members:
                    binding.settled = True
                continue
            binding = members[0]
            if not binding.settled:
                binding.settled = True
                try:
                    binding.value = evaluate(binding, self)
                except Rejected:
                    binding.value = None


def _in_order(lets: Mapping[str, Binding]) -> list[list[Binding]]:
    """Lets grouped into circles (mostly of one), each after what it depends on: Tarjan 1972, without recursion."""
    index: dict[str, int] = {}
    low: dict[str, int] = {}
    held: list[str] = []
    on_hold: set[str] = set()
    groups: list[list[Binding]] = []
    for start in lets:
        if start in index:
            continue
        walk: list[tuple[str, Iterator[str]]] = []
        _enter(start, lets, index, low, held, on_hold, walk)
        while walk:
            name, successors = walk[-1]
            following = next(successors, None)
            if following is None:
                walk.pop()
                if walk:
                    low[walk[-1][0]] = min(low[walk[-1][0]], low[name])
                if low[name] == index[name]:
                    position = held.index(name)
                    group = held[position:]
                    del held[position:]
                    on_hold.difference_update(group)
                    groups.append([lets[member] for member in group])
            elif following not in index:
                _enter(following, lets, index, low, held, on_hold, walk)
            elif following in on_hold:
                low[name] = min(low[name], index[following])
    return groups


def _enter(
    name: str, lets: Mapping[str, Binding], index: dict[str, int], low: dict[str, int], held: list[str],
    on_hold: set[str], walk: list[tuple[str, Iterator[str]]],
) -> None:  # fmt: skip
    index[name] = low[name] = len(index)
    held.append(name)
    on_hold.add(name)
    walk.append((name, iter([used for used in names_in(lets[name].expression) if used in lets])))


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
    close = difflib.get_close_matches(name, choices, 1, 0.6)
    if not close:
        close = [choice for choice in choices if choice.lower() == name.lower()]
    if close:
        return f"did you mean {close[0]}?"
    if not choices:
        return "there are none"
    if len(choices) <= 8:
        return "known: " + ", ".join(choices)
    return "check the spelling; names are case-sensitive"
