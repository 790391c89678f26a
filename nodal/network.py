"""Network: the flat numeric description (nodes, parts, values) that everything below the language works on.

Nodes are indices into `Network.nodes`; index 0 is always `ground`. Parts (see `nodal.parts`) hold node
indices and
values in SI units. Nothing here knows how a network is written or how it is solved.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal, Protocol, TypeVar

from nodal.parts.base import Part
from nodal.place import Place as Place
from nodal.values import Value

GROUND = 0

_SECTION = re.compile(r"\.[0-9]+(?=\.)")


def of_any_section(name: str) -> str:
    """A name inside a chain without the numbers of sections: "column.7.body.R" is "column.body.R"."""
    return _SECTION.sub("", name)


Side = Literal["test", "chain"]


@dataclass(frozen=True, slots=True)
class Contact:
    """Where the measuring chain touches the circuit under test: the voltage from `a` to `b`."""

    name: str
    a: int
    b: int
    place: Place | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class Reading:
    """A displayed quantity: (v(a) - v(b)) * times. `unit` is what it shows: "V", "A" (times 200 A/V), "" …"""

    name: str
    a: int
    b: int
    times: Value = Value(1.0)
    unit: str = "V"
    place: Place | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class Drive:
    """Sources that move together: (source name, weight). `unit` is "V" or "A", that of the sources."""

    name: str
    weights: tuple[tuple[str, float], ...]
    unit: str = "V"
    place: Place | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class SweepGrid:
    """Default frequency grid, Hz."""

    low: float
    high: float
    per_decade: float


@dataclass(frozen=True, slots=True)
class Stimulus:
    """Default edge: a linear ramp of whole duration `ramp` (0 for an ideal step), watched for `window`
    seconds."""

    ramp: float
    window: float
    top_at: float | None = None


@dataclass(frozen=True, slots=True)
class FigureCall:
    """A figure of merit as asked for: bandwidth(screen), settling(screen, 2 %), rejection(screen, high, low).

    `arguments` are names (str) and numbers (float, SI; Hz for a reference frequency, a fraction for a band);
    `text`
    is the canonical spelling, for output and records.
    """

    name: str
    arguments: tuple[str | float, ...]
    text: str


@dataclass(frozen=True, slots=True)
class Requirement:
    """`require NAME: FIGURE [with DRIVE] [at F | from F to F] (<= | >= | =) VALUE`, resolved.

    `limit` is in SI units of `unit` ("" for ratios, "dB" kept as decibels with `limit` in dB). For `=`,
    `tolerance` is
    the half-width in the same unit.
    """

    name: str
    figure: FigureCall
    drive: str | None
    at: float | None
    span: tuple[float, float] | None
    relation: Literal["<=", ">=", "="]
    limit: float
    tolerance: float
    unit: str
    text: str
    place: Place | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class Network:
    """One case of a design, flat: what the parts are and between which nodes they stand."""

    nodes: tuple[str, ...]
    parts: tuple[Part, ...]
    contacts: tuple[Contact, ...] = ()
    readings: tuple[Reading, ...] = ()
    drives: tuple[Drive, ...] = ()
    """Every usable drive: each source alone under its own name, then the declared ones."""
    default_drive: str | None = None
    """None where several sources stand and no `drive` is declared: the caller must choose."""
    grid: SweepGrid | None = None
    stimulus: Stimulus | None = None
    temperature: float = 296.15
    """K"""
    requirements: tuple[Requirement, ...] = ()
    allowed: frozenset[tuple[str, str]] = frozenset()
    """(warning code, name) pairs silenced by `allow`, names as `of_any_section` gives them."""
    title: str = ""
    node_places: dict[int, Place] = field(default_factory=dict, compare=False)
    """Where each node was first mentioned."""

    def allows(self, code: str, name: str) -> bool:
        """Whether a warning about a name is silenced; what is said of one section holds for all."""
        return (code, of_any_section(name)) in self.allowed

    def node(self, name: str) -> int:
        """Index of a node; KeyError with the name if there is none."""
        try:
            return self.nodes.index(name)
        except ValueError:
            raise KeyError(name) from None

    def contact(self, name: str) -> Contact:
        return _named(self.contacts, name)

    def reading(self, name: str) -> Reading:
        return _named(self.readings, name)

    def drive(self, name: str) -> Drive:
        return _named(self.drives, name)

    def part(self, name: str) -> Part:
        return _named(self.parts, name)


class _Named(Protocol):
    @property
    def name(self) -> str: ...


_T = TypeVar("_T", bound=_Named)


def _named(things: Sequence[_T], name: str) -> _T:
    for thing in things:
        if thing.name == name:
            return thing
    raise KeyError(name)
