"""The tree of a file, as written: frozen dataclasses whose span takes no part in equality. No meaning yet.

Chains of one operator are flat (`Sum`, `Product`, `Parallel`, `Series` hold all their members), so that a
long line needs no deep recursion; only parentheses nest, to the limit of 100 levels.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal


@dataclass(frozen=True, slots=True)
class Span:
    """Character offsets into the text of `path`, end exclusive."""

    path: str
    start: int
    end: int


NOWHERE = Span("", 0, 0)


@dataclass(frozen=True, slots=True)
class Node:
    """Anything with a place in the text."""

    span: Span = field(default=NOWHERE, compare=False, kw_only=True)


@dataclass(frozen=True, slots=True)
class Word(Node):
    """A name as written. Dotted where the grammar allows it: `tip.L`, `n.skew`."""

    text: str


# Expressions: one ladder for arithmetic and networks; what may not mix is rejected when meaning is given.


@dataclass(frozen=True, slots=True)
class Number(Node):
    """`9 MΩ`: digits as written and the unit in canonical spelling (`Ω`, `µ`), "" where none is written."""

    digits: str
    unit: str


@dataclass(frozen=True, slots=True)
class Name(Node):
    """A `let`, an argument or `pi`."""

    text: str


@dataclass(frozen=True, slots=True)
class Negative(Node):
    operand: Expression


@dataclass(frozen=True, slots=True)
class Sum(Node):
    """first ± term ± term …; `operators[i]` stands before `terms[i + 1]`."""

    terms: tuple[Expression, ...]
    operators: tuple[Literal["+", "-"], ...]


@dataclass(frozen=True, slots=True)
class Product(Node):
    factors: tuple[Expression, ...]
    operators: tuple[Literal["*", "/"], ...]


@dataclass(frozen=True, slots=True)
class Call(Node):
    """`sqrt(…)`, `wire(…, …)`."""

    function: Word
    arguments: tuple[Expression, ...]


@dataclass(frozen=True, slots=True)
class PlusMinus(Node):
    """`± 1 %`, `± 0.3 pF`, `± 1 % with k = 2`."""

    width: Expression
    coverage: Expression | None = None


@dataclass(frozen=True, slots=True)
class TrimRange(Node):
    low: Expression
    high: Expression


@dataclass(frozen=True, slots=True)
class Rated(Node):
    """`rated 500 V and 250 mW`, each with `rms` or not."""

    limits: tuple[tuple[Expression, bool], ...]


@dataclass(frozen=True, slots=True)
class DriftRates(Node):
    rates: tuple[Expression, ...]


@dataclass(frozen=True, slots=True)
class LossFactor(Node):
    factor: Expression


@dataclass(frozen=True, slots=True)
class Called(Node):
    """`as NAME`."""

    name: Word


Qualifier = PlusMinus | TrimRange | Rated | DriftRates | LossFactor | Called


@dataclass(frozen=True, slots=True)
class Qualified(Node):
    base: Expression
    qualifiers: tuple[Qualifier, ...]


@dataclass(frozen=True, slots=True)
class Parallel(Node):
    branches: tuple[Expression, ...]


@dataclass(frozen=True, slots=True)
class Series(Node):
    members: tuple[Expression, ...]


Expression = Number | Name | Negative | Sum | Product | Call | Qualified | Parallel | Series


# Statements


@dataclass(frozen=True, slots=True)
class Version(Node):
    number: str


@dataclass(frozen=True, slots=True)
class Title(Node):
    text: str


@dataclass(frozen=True, slots=True)
class Include(Node):
    target: str


@dataclass(frozen=True, slots=True)
class Let(Node):
    """`let N = VALUE`; in a case the name may be dotted (`let n.skew = 1 %`)."""

    name: Word
    value: Expression


@dataclass(frozen=True, slots=True)
class UnderTest(Node):
    body: tuple[Statement, ...]


@dataclass(frozen=True, slots=True)
class Source(Node):
    """`relation` is "behind", "shunted by" or None."""

    name: Word
    nodes: tuple[Word, ...]
    value: Expression
    relation: Literal["behind", "shunted by"] | None
    network: Expression | None


@dataclass(frozen=True, slots=True)
class Branch(Node):
    name: Word
    nodes: tuple[Word, ...]
    network: Expression


@dataclass(frozen=True, slots=True)
class Coupling(Node):
    name: Word
    first: Word
    second: Word
    value: Expression


@dataclass(frozen=True, slots=True)
class Field(Node):
    """One field of a `stock` or `amplifier`: its word(s) and what follows.

    `values` hold the expressions in the order written. Stock: `skin 1.1 Ω/m at 100 MHz` is two values.
    Amplifier: `poles 120 MHz, 300 MHz q 0.8` is ((120 MHz,), (300 MHz, 0.8)), every other field one tuple of
    its values.
    """

    name: Word
    values: tuple[tuple[Expression, ...], ...]
    joins: tuple[str, ...] = ()
    """The word between the two values of each tuple, "at" or "q"; "" where there is one value."""


@dataclass(frozen=True, slots=True)
class Stock(Node):
    name: Word
    fields: tuple[Field, ...]


@dataclass(frozen=True, slots=True)
class Cable(Node):
    """`cable N: core, shield to core2, shield2 = LENGTH of STOCK`."""

    name: Word
    near: tuple[Word, ...]
    far: tuple[Word, ...]
    length: Expression
    stock: Word


@dataclass(frozen=True, slots=True)
class Amplifier(Node):
    name: Word
    inputs: tuple[Word, ...]
    outputs: tuple[Word, ...]
    fields: tuple[Field, ...]


@dataclass(frozen=True, slots=True)
class Contact(Node):
    name: Word
    nodes: tuple[Word, ...]


@dataclass(frozen=True, slots=True)
class Reading(Node):
    name: Word
    nodes: tuple[Word, ...]
    times: Expression | None


@dataclass(frozen=True, slots=True)
class Drive(Node):
    """`drive N: source by weight, …`; a weight left out is 1."""

    name: Word
    weights: tuple[tuple[Word, Expression | None], ...]


@dataclass(frozen=True, slots=True)
class Parameter(Node):
    """A parameter of an assembly (`default` None: must be given) or an argument of a place."""

    name: Word
    value: Expression | None


@dataclass(frozen=True, slots=True)
class Assembly(Node):
    """`assembly N(left to right with shared; parameters) { … }`."""

    name: Word
    left: tuple[Word, ...]
    right: tuple[Word, ...]
    shared: tuple[Word, ...]
    parameters: tuple[Parameter, ...]
    body: tuple[Statement, ...]


@dataclass(frozen=True, slots=True)
class Use(Node):
    """`A(nodes to nodes with nodes; arguments)`."""

    assembly: Word
    left: tuple[Word, ...]
    right: tuple[Word, ...]
    shared: tuple[Word, ...]
    arguments: tuple[Parameter, ...]


@dataclass(frozen=True, slots=True)
class Place(Node):
    name: Word
    use: Use


@dataclass(frozen=True, slots=True)
class Chain(Node):
    name: Word
    count: Expression
    use: Use


@dataclass(frozen=True, slots=True)
class Omit(Node):
    name: Word


@dataclass(frozen=True, slots=True)
class Case(Node):
    name: Word
    body: tuple[Statement, ...]


@dataclass(frozen=True, slots=True)
class Sweep(Node):
    low: Expression
    high: Expression
    per_decade: Expression


@dataclass(frozen=True, slots=True)
class Edge(Node):
    """`edge T over W [, top at T1]`; `step over W` has ramp None."""

    ramp: Expression | None
    window: Expression
    top_at: Expression | None


@dataclass(frozen=True, slots=True)
class Temperature(Node):
    value: Expression


@dataclass(frozen=True, slots=True)
class Figure(Node):
    """`bandwidth(screen)`, `settling(screen, 2 %)`; a bare name argument is a `Name`."""

    name: Word
    arguments: tuple[Expression, ...]


@dataclass(frozen=True, slots=True)
class Require(Node):
    name: Word
    figure: Figure
    drive: Word | None
    at: Expression | None
    span_from: Expression | None
    span_to: Expression | None
    relation: Literal["<=", ">=", "="]
    value: Expression


@dataclass(frozen=True, slots=True)
class Allow(Node):
    code: Word
    name: Word


Statement = (
    Version
    | Title
    | Include
    | Let
    | UnderTest
    | Source
    | Branch
    | Coupling
    | Stock
    | Cable
    | Amplifier
    | Contact
    | Reading
    | Drive
    | Assembly
    | Place
    | Chain
    | Omit
    | Case
    | Sweep
    | Edge
    | Temperature
    | Require
    | Allow
)


@dataclass(frozen=True, slots=True)
class File(Node):
    """A whole file: its statements in order, the version first."""

    path: str
    text: str = field(compare=False, repr=False)
    statements: tuple[Statement, ...] = ()
    lost: frozenset[str] = field(default=frozenset(), compare=False)
    """Every word of the statements that could not be read: names that may be declared there. Nothing should
    be said against an unknown name among them."""
