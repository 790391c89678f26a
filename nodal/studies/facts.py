"""What a text says about each thing of a network, as facts that can be told apart and read."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import partial
from typing import Any

from nodal.language import units
from nodal.language.quantity import Quantity
from nodal.language.units import show
from nodal.network import Contact, Drive, Network, Reading, Stimulus, SweepGrid
from nodal.parts.base import Part
from nodal.parts.coupling import Coupling
from nodal.values import Drift, Random, Rating, Tolerance, Trim, Value

ROUNDING = 1e-12
"""Values that differ by no more than this part of themselves are the same, worked out another way."""


Read = Callable[[int], str]
"""How something reads with so many significant digits."""
_DIGITS = 6


@dataclass(frozen=True, slots=True)
class Fact:
    """Something said: `key` makes it another, `read` is how a file would say it."""

    key: Hashable
    read: Read = field(compare=False, repr=False)

    @property
    def text(self) -> str:
        return self.read(_DIGITS)

    def same(self, other: Fact) -> bool:
        return self.key == other.key

    def beside(self, other: Fact) -> tuple[str, str]:
        """How this and another one read side by side."""
        return distinct(self.read, other.read)


@dataclass(frozen=True, slots=True)
class Number(Fact):
    """A number in SI units."""

    value: float
    unit: str

    def same(self, other: Fact) -> bool:
        return isinstance(other, Number) and self.unit == other.unit and _near(self.value, other.value)


@dataclass(frozen=True, slots=True)
class Width(Fact):
    """Half the width of a tolerance. It stays the same where it is so in units or in parts of the value."""

    half: float
    value: float
    unit: str
    coverage: float | None

    @property
    def part(self) -> float:
        return self.half / (abs(self.value) or 1.0)

    def same(self, other: Fact) -> bool:
        return (
            isinstance(other, Width)
            and self.coverage == other.coverage
            and (_near(self.half, other.half) or _near(self.part, other.part))
        )

    def beside(self, other: Fact) -> tuple[str, str]:
        if not isinstance(other, Width):
            return self.text, other.text
        shown = _relative if _round(self.part) and _round(other.part) else _absolute
        return distinct(shown(self), shown(other))


Facts = Mapping[str, Fact]
NameOf = Callable[[int], str]
"""The name of a node by its index."""


def _near(a: float, b: float) -> bool:
    return a == b or abs(a - b) <= ROUNDING * max(abs(a), abs(b))


def distinct(old: Read, new: Read, least: int = _DIGITS) -> tuple[str, str]:
    """How both read with as few digits (from `least` on) as tell them apart."""
    for digits in range(least, 18):
        before, after = old(digits), new(digits)
        if before != after:
            break
    return before, after


def words(text: str) -> Fact:
    return Fact(text, lambda digits: text)


def number(value: float, unit: str) -> Number:
    return Number((value, unit), lambda digits: show(value, unit, digits), value, unit)


def _width(tolerance: Tolerance, value: float, unit: str) -> Width:
    def read(digits: int) -> str:
        return (_relative if value and _round(found.part) else _absolute)(found)(digits)

    found = Width((tolerance, value, unit), read, tolerance.half_width, value, unit, tolerance.coverage)
    return found


def _round(part: float) -> bool:
    """Whether a tolerance reads well in percent, and so was rather written like that."""
    percent = f"{part * 100:.12g}"
    return "e" not in percent and len(percent.strip("0.")) <= 5


def _relative(width: Width) -> Read:
    return lambda digits: f"± {width.part * 100:.{digits}g} %{_covering(width.coverage)}"


def _absolute(width: Width) -> Read:
    return lambda digits: f"± {show(width.half, width.unit, digits)}{_covering(width.coverage)}"


def _covering(coverage: float | None) -> str:
    return "" if coverage is None else f" with k = {coverage:.6g}"


# Values


def of_value(label: str, value: Value, unit: str, *, main: bool = True) -> dict[str, Fact]:
    """A value and what is said about it; `main` is the only or first value of its part."""
    before = "" if main else f"{label} "
    facts: dict[str, Fact] = {label: number(value.nominal, unit)}
    tolerance, formula = value.tolerance, value.formula
    if formula is not None and formula.operator == "random":  # a `let` as it stands
        tolerance = formula.operands[0].tolerance
        facts[f"{before}varies with"] = words(formula.operands[0].name)
    elif formula is not None:
        facts[f"{before}varies with"] = words(", ".join(map(_spread, formula.randoms().values())))
    if tolerance is not None:
        facts[f"{before}tolerance"] = _width(tolerance, value.nominal, unit)
    if value.trim is not None:
        facts[f"{before}trim"] = Fact(value.trim, _trim(value.trim, unit))
    if value.ratings:
        facts[f"{before}rated"] = Fact(value.ratings, _ratings(value.ratings))
    if value.drift is not None:
        facts[f"{before}drift"] = Fact(value.drift, _drift(value.drift))
    return facts


def _spread(random: Random) -> str:
    percent = random.tolerance.half_width / (abs(random.nominal) or 1.0) * 100
    return f"{random.name} ± {percent:.6g} %{_covering(random.tolerance.coverage)}"


def _trim(trim: Trim, unit: str) -> Read:
    return lambda digits: f"{show(trim.low, unit, digits)} to {show(trim.high, unit, digits)}"


def _ratings(ratings: Sequence[Rating]) -> Read:
    def read(digits: int) -> str:
        limits = (show(r.limit, r.unit, digits) + (" rms" if r.rms else "") for r in ratings)
        return " and ".join(limits)

    return read


def _drift(drift: Drift) -> Read:
    def read(digits: int) -> str:
        rates = ((drift.per_kelvin, "K"), (drift.per_volt, "V"))
        return " and ".join(f"{rate * 1e6:.{digits}g} ppm/{per}" for rate, per in rates if rate) or "0 ppm/K"

    return read


def of_let(name: str, quantity: Quantity) -> dict[str, Fact]:
    """A named value. One with a tolerance is itself what others vary with."""
    found = of_value("value", quantity.value, units.unit_name(quantity.dimension))
    if "varies with" in found and found["varies with"].same(words(name)):
        del found["varies with"]
    return found


# Parts

_STRUCTURE = frozenset(
    ("name", "side", "noiseless", "place", "terminals", "a", "b", "in_", "ref", "out", "ref2",
     "core1", "shield1", "core2", "shield2", "first", "second", "coefficient", "conductance")
)  # fmt: skip
"""Fields that say where a part stands or follow from what else is told of it."""

_LABELS = {"noise_voltage": "noise", "common_mode": "common mode"}


_Show = Callable[[Any, int], str]


def _roots(roots: Sequence[tuple[float, float | None]], digits: int) -> str:
    return ", ".join(show(f, "Hz", digits) + ("" if q is None else f" q {q:.{digits}g}") for f, q in roots)


def _pair(unit: str, between: str) -> _Show:
    """A number in `unit` and a frequency."""
    return lambda pair, digits: f"{show(pair[0], unit, digits)} {between} {show(pair[1], 'Hz', digits)}"


def _in(unit: str) -> _Show:
    return lambda value, digits: show(value, unit, digits)


_READERS: dict[str, _Show] = {
    "poles": _roots,
    "zeros": _roots,
    "skin": _pair("Ω/m", "at"),
    "common_mode": _pair("", "below"),
    "loss": _in(""),
    "delay": _in("s"),
    "noise_voltage": _in("V/√Hz"),
    "current_noise": _in("A/√Hz"),
}
"""How those fields read that are no `Value`."""


def of_part(part: Part, name_of: NameOf) -> dict[str, Fact]:
    """All that the text says about a part: its kind, values, nodes and side."""
    facts: dict[str, Fact] = {"kind": words(part.kind)}
    described = tuple(part.describe())
    for position, (label, value, unit) in enumerate(described):
        facts |= of_value(label, value, unit, main=position == 0)
    told = [id(value) for _, value, _ in described]
    for name in (own.name for own in dataclasses.fields(part)):  # type: ignore[arg-type]
        value = getattr(part, name)
        label = _LABELS.get(name, name.replace("_", " "))
        if isinstance(value, Value):
            if id(value) not in told and label not in facts and value != Value(0.0):
                facts |= of_value(label, value, "", main=False)
        elif name in _READERS and value:
            facts[label] = Fact(value, partial(_READERS[name], value))
    facts["between"] = _between(part, name_of)
    facts["side"] = words("under test" if part.side == "test" else "")
    return facts


def _between(part: Part, name_of: NameOf) -> Fact:
    if isinstance(part, Coupling):
        return words(f"{part.first} and {part.second}")
    return words(to([name_of(node) for node in part.nodes]))


def to(names: Sequence[str]) -> str:
    """Nodes as statements write them: the first half, "to", the second."""
    half = len(names) // 2
    return f"{', '.join(names[:half])} to {', '.join(names[half:])}"


# What is looked at, and how


def of_contact(contact: Contact, name_of: NameOf) -> dict[str, Fact]:
    return {"between": words(to([name_of(contact.a), name_of(contact.b)]))}


def of_reading(reading: Reading, name_of: NameOf) -> dict[str, Fact]:
    unit = {"V": "", "A": "A/V"}.get(reading.unit, f"{reading.unit}/V")
    return {
        "between": words(to([name_of(reading.a), name_of(reading.b)])),
        **of_value("times", reading.times, unit),
    }


def of_drive(drive: Drive) -> dict[str, Fact]:
    """The sources of a drive, each with its weight."""

    def read(digits: int) -> str:
        return ", ".join(f"{source} by {weight:.{digits}g}" for source, weight in drive.weights)

    return {"sources": Fact(drive.weights, read)}


def of_settings(network: Network) -> dict[str, Fact]:
    """What is said once in a file."""
    facts: dict[str, Fact] = {"temperature": number(network.temperature, "K")}
    if network.title:
        facts["title"] = words(network.title)
    if network.grid is not None:
        facts["sweep"] = Fact(network.grid, partial(_sweep, network.grid))
    if network.stimulus is not None:
        facts["edge"] = Fact(network.stimulus, partial(_edge, network.stimulus))
    if network.default_drive is not None:
        facts["default drive"] = words(network.default_drive)
    if network.allowed:
        facts["allowed"] = words(", ".join(f"{code}: {name}" for code, name in sorted(network.allowed)))
    return facts


def _sweep(grid: SweepGrid, digits: int) -> str:
    low, high = show(grid.low, "Hz", digits), show(grid.high, "Hz", digits)
    return f"{low} to {high}, {grid.per_decade:.{digits}g} per decade"


def _edge(edge: Stimulus, digits: int) -> str:
    text = f"edge {show(edge.ramp, 's', digits)}" if edge.ramp else "step"
    text += f" over {show(edge.window, 's', digits)}"
    return text + ("" if edge.top_at is None else f", top at {show(edge.top_at, 's', digits)}")


def summary(facts: Iterable[Fact]) -> str:
    """A whole thing in one line."""
    return ", ".join(fact.text for fact in facts if fact.text)
