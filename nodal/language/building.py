"""The rules of the grammar -> the tree: one method a rule, called by the parser as it reduces.

Every child is a lexeme or something built before, and all lexemes are kept, so a node's span runs from its
first child to its last. Nothing is judged here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from typing import Any, Literal, cast

from lark import Transformer

from nodal.language import syntax as s
from nodal.language.lexing import Lexeme
from nodal.language.syntax import Span

Children = list[Any]


class Group(tuple[Any, ...]):
    """Nodes, parameters or arguments in a row, without a place of their own."""

    __slots__ = ()


def _span(children: Sequence[Any]) -> Span:
    first, last = children[0].span, children[-1].span
    return Span(first.path, first.start, last.end)


def _word(lexeme: Lexeme) -> s.Word:
    return s.Word(lexeme.text, span=lexeme.span)


def _body(children: Children) -> tuple[Any, ...]:
    """The statements or fields among the children of a block."""
    return tuple(child for child in children if not isinstance(child, Lexeme) and child is not None)


def _lists(children: Children) -> dict[str, Group]:
    """The lists in the parentheses of an assembly or a use, by what stands before each."""
    lists: dict[str, Group] = {}
    for before, child in pairwise(children):
        if isinstance(child, Group):
            lists[before.text] = child
    return lists


class Builder(Transformer[Any, Any]):
    """Builds `nodal.language.syntax` nodes. A block whose header was made up by the parser's recovery is
    dropped: its name is empty."""

    def file(self, c: Children) -> tuple[s.Statement, ...]:
        return _body(c)

    # Statements

    def version(self, c: Children) -> s.Version:
        return s.Version(c[1].text + c[1].unit, span=_span(c))

    def title(self, c: Children) -> s.Title:
        return s.Title(c[1].text, span=_span(c))

    def include(self, c: Children) -> s.Include:
        return s.Include(c[1].text, span=_span(c))

    def let(self, c: Children) -> s.Let:
        return s.Let(_word(c[1]), c[3], span=_span(c))

    def under_test(self, c: Children) -> s.UnderTest:
        return s.UnderTest(_body(c), span=_span(c))

    def source(self, c: Children) -> s.Source:
        relation: Literal["behind", "shunted by"] | None = None
        if len(c) > 8:
            relation = "behind" if c[8].text == "behind" else "shunted by"
        network = c[-1] if relation else None
        return s.Source(_word(c[1]), (_word(c[3]), _word(c[5])), c[7], relation, network, span=_span(c))

    def branch(self, c: Children) -> s.Branch:
        return s.Branch(_word(c[1]), (_word(c[3]), _word(c[5])), c[7], span=_span(c))

    def coupling(self, c: Children) -> s.Coupling:
        return s.Coupling(_word(c[1]), _word(c[3]), _word(c[5]), c[7], span=_span(c))

    def stock(self, c: Children) -> s.Stock | None:
        return s.Stock(_word(c[1]), _body(c), span=_span(c)) if c[1].text else None

    def cable(self, c: Children) -> s.Cable:
        near, far = (_word(c[3]), _word(c[5])), (_word(c[7]), _word(c[9]))
        return s.Cable(_word(c[1]), near, far, c[11], _word(c[13]), span=_span(c))

    def amplifier(self, c: Children) -> s.Amplifier | None:
        if not c[3].text:
            return None
        ins, outs = (_word(c[3]), _word(c[5])), (_word(c[7]), _word(c[9]))
        return s.Amplifier(_word(c[1]), ins, outs, _body(c[10:]), span=_span(c))

    def contact(self, c: Children) -> s.Contact:
        return s.Contact(_word(c[1]), (_word(c[3]), _word(c[5])), span=_span(c))

    def reading(self, c: Children) -> s.Reading:
        times = c[7] if len(c) > 6 else None
        return s.Reading(_word(c[1]), (_word(c[3]), _word(c[5])), times, span=_span(c))

    def drive(self, c: Children) -> s.Drive:
        return s.Drive(_word(c[1]), tuple(weight.pair for weight in c[3::2]), span=_span(c))

    def weight(self, c: Children) -> _Weight:
        return _Weight((_word(c[0]), c[2] if len(c) > 1 else None), _span(c))

    def assembly(self, c: Children) -> s.Assembly | None:
        lists = _lists(c)
        left = lists["("]
        if not left[0].text:
            return None
        right, shared, parameters = (tuple(lists.get(word, ())) for word in ("to", "with", ";"))
        body = next(i for i, child in enumerate(c) if isinstance(child, Lexeme) and child.text == "{")
        statements = _body(c[body:])
        return s.Assembly(_word(c[1]), tuple(left), right, shared, parameters, statements, span=_span(c))

    def use(self, c: Children) -> s.Use:
        lists = _lists(c)
        right, shared, arguments = (tuple(lists.get(word, ())) for word in ("to", "with", ";"))
        return s.Use(_word(c[0]), tuple(lists["("]), right, shared, arguments, span=_span(c))

    def nodes(self, c: Children) -> Group:
        return Group(_word(node) for node in c[::2])

    def parameters(self, c: Children) -> Group:
        return Group(c[::2])

    arguments = parameters

    def parameter(self, c: Children) -> s.Parameter:
        return s.Parameter(_word(c[0]), c[2] if len(c) > 1 else None, span=_span(c))

    argument = parameter

    def place(self, c: Children) -> s.Place:
        return s.Place(_word(c[1]), c[3], span=_span(c))

    def chain(self, c: Children) -> s.Chain:
        return s.Chain(_word(c[1]), c[3], c[5], span=_span(c))

    def omit(self, c: Children) -> s.Omit:
        return s.Omit(_word(c[1]), span=_span(c))

    def case(self, c: Children) -> s.Case | None:
        return s.Case(_word(c[1]), _body(c), span=_span(c)) if c[1].text else None

    def sweep(self, c: Children) -> s.Sweep:
        return s.Sweep(c[1], c[3], c[5], span=_span(c))

    def edge(self, c: Children) -> s.Edge:
        return s.Edge(c[1], c[3], c[7] if len(c) > 4 else None, span=_span(c))

    def step(self, c: Children) -> s.Edge:
        return s.Edge(None, c[2], c[6] if len(c) > 3 else None, span=_span(c))

    def temperature(self, c: Children) -> s.Temperature:
        return s.Temperature(c[1], span=_span(c))

    def require(self, c: Children) -> s.Require:
        value, relation = c[-1], cast(Literal["<=", ">=", "="], c[-2].text)
        clauses = {word.text: child for word, child in zip(c[4:-2:2], c[5:-2:2], strict=True)}
        drive = clauses.get("with")
        return s.Require(
            _word(c[1]),
            c[3],
            _word(drive) if drive is not None else None,
            clauses.get("at"),
            clauses.get("from"),
            clauses.get("to"),
            relation,
            value,
            span=_span(c),
        )

    def figure(self, c: Children) -> s.Figure:
        return s.Figure(_word(c[0]), tuple(c[2:-1:2]), span=_span(c))

    def allow(self, c: Children) -> s.Allow:
        return s.Allow(c[1], _word(c[3]), span=_span(c))

    def code(self, c: Children) -> s.Word:
        return s.Word("".join(lexeme.text for lexeme in c), span=_span(c))

    # Fields

    def stock_field(self, c: Children) -> s.Field:
        values, joins = tuple(item.values for item in c[1::2]), tuple(item.join for item in c[1::2])
        return s.Field(_word(c[0]), values, joins, span=_span(c))

    amplifier_field = stock_field

    def stock_item(self, c: Children) -> _Item:
        return _Item(tuple(c[::2]), c[1].text if len(c) > 1 else "", _span(c))

    amplifier_item = stock_item

    # Values

    def number(self, c: Children) -> s.Number:
        return s.Number(c[0].text, c[0].unit, span=c[0].span)

    def reference(self, c: Children) -> s.Name:
        return s.Name(c[0].text, span=c[0].span)

    def call(self, c: Children) -> s.Call:
        return s.Call(_word(c[0]), tuple(c[2:-1:2]), span=_span(c))

    def group(self, c: Children) -> s.Expression:
        return cast(s.Expression, replace(c[1], span=_span(c)))

    def negative(self, c: Children) -> s.Negative:
        return s.Negative(c[1], span=_span(c))

    def product(self, c: Children) -> s.Product:
        return s.Product(tuple(c[::2]), tuple(sign.text for sign in c[1::2]), span=_span(c))

    def sum(self, c: Children) -> s.Sum:
        return s.Sum(tuple(c[::2]), tuple(sign.text for sign in c[1::2]), span=_span(c))

    def qualified(self, c: Children) -> s.Qualified:
        return s.Qualified(c[0], tuple(c[1:]), span=_span(c))

    def parallel(self, c: Children) -> s.Parallel:
        return s.Parallel(tuple(c[::2]), span=_span(c))

    def value(self, c: Children) -> s.Series:
        return s.Series(tuple(c[::2]), span=_span(c))

    # Qualifiers

    def plus_minus(self, c: Children) -> s.PlusMinus:
        return s.PlusMinus(c[1], c[5] if len(c) > 2 else None, span=_span(c))

    def trim(self, c: Children) -> s.TrimRange:
        return s.TrimRange(c[1], c[3], span=_span(c))

    def rated(self, c: Children) -> s.Rated:
        return s.Rated(tuple(limit.pair for limit in c[1::2]), span=_span(c))

    def limit(self, c: Children) -> _Weight:
        return _Weight((c[0], len(c) > 1), _span(c))

    def drift(self, c: Children) -> s.DriftRates:
        return s.DriftRates(tuple(c[1::2]), span=_span(c))

    def loss(self, c: Children) -> s.LossFactor:
        return s.LossFactor(c[1], span=_span(c))

    def called(self, c: Children) -> s.Called:
        return s.Called(_word(c[1]), span=_span(c))


class _Weight:
    """A pair on its way into the tree, with its place."""

    __slots__ = ("pair", "span")

    def __init__(self, pair: tuple[Any, Any], span: Span) -> None:
        self.pair = pair
        self.span = span


class _Item:
    """One item of a field on its way into the tree: `300 MHz q 0.8` is two values joined by "q"."""

    __slots__ = ("join", "span", "values")

    def __init__(self, values: tuple[s.Expression, ...], join: str, span: Span) -> None:
        self.values = values
        self.join = join
        self.span = span
