"""What a text says about each thing of a network, as facts that can be told apart and read."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from nodal.language import units
from nodal.language.quantity import Quantity
from nodal.language.units import show
from nodal.network import Contact, Drive, Network, Reading
from nodal.parts.base import Part
from nodal.parts.coupling import Coupling
from nodal.values import Drift, Random, Rating, Value

ROUNDING = 1e-12
"""Values that differ by no more than this part of themselves are the same, worked out another way."""


@dataclass(frozen=True, slots=True)
class Fact:
    """A word or a list: `text` is how it reads, `key` what makes it another."""

    text: str
    key: Hashable = None

    def same(self, other: Fact) -> bool:
        return (self.text, self.key) == (other.text, other.key)

    def beside(self, other: Fact) -> tuple[str, str]:
        """How this and another, later one read side by side."""
        return self.text, other.text


@dataclass(frozen=True, slots=True)
class Number(Fact):
    """A number in SI units."""

    text: str = ""
    value: float = 0.0
    unit: str = ""

    def same(self, other: Fact) -> bool:
        return isinstance(other, Number) and self.unit == other.unit and _near(self.value, other.value)

    def beside(self, other: Fact) -> tuple[str, str]:
        if not isinstance(other, Number) or self.unit != other.unit:
            return self.text, other.text
        return distinct(self.value, other.value, lambda value, digits: show(value, self.unit, digits))


@dataclass(frozen=True, slots=True)
class Width(Fact):
    """Half the width of a tolerance. It stays the same where it is so in units or in parts of the value."""

    text: str = ""
    half: float = 0.0
    value: float = 0.0
    unit: str = ""
    coverage: float | None = None

    @property
    def part(self) -> float:
        return self.half / (abs(self.value) or 1.0)

    @property
    def round(self) -> bool:
        """Whether it reads well in percent, and so was rather written like that."""
        percent = f"{self.part * 100:.12g}"
        return bool(self.value) and "e" not in percent and len(percent.strip("0.")) <= 5

    def read(self, relative: bool) -> str:
        text = f"{self.part * 100:.12g} %" if relative else show(self.half, self.unit)
        return f"± {text}" + ("" if self.coverage is None else f" with k = {self.coverage:.6g}")

    def same(self, other: Fact) -> bool:
        return (
            isinstance(other, Width)
            and self.coverage == other.coverage
            and (_near(self.half, other.half) or _near(self.part, other.part))
        )

    def beside(self, other: Fact) -> tuple[str, str]:
        if not isinstance(other, Width):
            return self.text, other.text
        relative = self.round and other.round
        return self.read(relative), other.read(relative)


Facts = Mapping[str, Fact]
NameOf = Callable[[int], str]
"""The name of a node by its index."""


def _near(a: float, b: float) -> bool:
    return a == b or abs(a - b) <= ROUNDING * max(abs(a), abs(b))


def distinct(old: float, new: float, text: Callable[[float, int], str], least: int = 6) -> tuple[str, str]:
    """Both numbers with as few digits (from `least` on) as tell them apart."""
    before, after = text(old, least), text(new, least)
    for digits in range(least + 1, 18):
        if before != after:
            break
        before, after = text(old, digits), text(new, digits)
    return before, after


def number(value: float, unit: str) -> Number:
    return Number(show(value, unit), value=value, unit=unit)


# Values


def of_value(label: str, value: Value, unit: str, *, main: bool = True) -> dict[str, Fact]:
    """A value and what is said about it; `main` is the only or first value of its part."""
    before = "" if main else f"{label} "
    facts: dict[str, Fact] = {label: number(value.nominal, unit)}
    tolerance, formula = value.tolerance, value.formula
    if formula is not None and formula.operator == "random":  # a `let` as it stands
        tolerance = formula.operands[0].tolerance
        facts[f"{before}varies with"] = Fact(formula.operands[0].name)
    elif formula is not None:
        facts[f"{before}varies with"] = Fact(", ".join(map(_spread, formula.randoms().values())))
    if tolerance is not None:
        width = Width("", None, tolerance.half_width, value.nominal, unit, tolerance.coverage)
        facts[f"{before}tolerance"] = dataclasses.replace(width, text=width.read(width.round))
    if value.trim is not None:
        text = f"{show(value.trim.low, unit)} to {show(value.trim.high, unit)}"
        facts[f"{before}trim"] = Fact(text, value.trim)
    if value.ratings:
        facts[f"{before}rated"] = Fact(" and ".join(map(_rating, value.ratings)), value.ratings)
    if value.drift is not None:
        facts[f"{before}drift"] = Fact(_drift(value.drift), value.drift)
    return facts


def _spread(random: Random) -> str:
    percent = random.tolerance.half_width / (abs(random.nominal) or 1.0) * 100
    k = random.tolerance.coverage
    return f"{random.name} ± {percent:.6g} %" + ("" if k is None else f" with k = {k:.6g}")


def _rating(rating: Rating) -> str:
    return show(rating.limit, rating.unit) + (" rms" if rating.rms else "")


def _drift(drift: Drift) -> str:
    rates = ((drift.per_kelvin, "K"), (drift.per_volt, "V"))
    return " and ".join(f"{rate * 1e6:.6g} ppm/{per}" for rate, per in rates if rate) or "0 ppm/K"


def of_let(name: str, quantity: Quantity) -> dict[str, Fact]:
    """A named value. One with a tolerance is itself what others vary with."""
    found = of_value("value", quantity.value, units.unit_name(quantity.dimension))
    if found.get("varies with") == Fact(name):
        del found["varies with"]
    return found


# Parts

_STRUCTURE = frozenset(
    ("name", "side", "noiseless", "place", "terminals", "a", "b", "in_", "ref", "out", "ref2",
     "core1", "shield1", "core2", "shield2", "first", "second", "coefficient", "conductance")
)  # fmt: skip
"""Fields that say where a part stands or follow from what else is told of it."""

_LABELS = {"noise_voltage": "noise", "common_mode": "common mode"}


def _roots(roots: Sequence[tuple[float, float | None]]) -> str:
    return ", ".join(show(f, "Hz") + ("" if q is None else f" q {q:.6g}") for f, q in roots)


_TEXTS: dict[str, Callable[[Any], str]] = {
    "poles": _roots,
    "zeros": _roots,
    "skin": lambda skin: f"{show(skin[0], 'Ω/m')} at {show(skin[1], 'Hz')}",
    "common_mode": lambda mode: f"{show(mode[0])} below {show(mode[1], 'Hz')}",
    "loss": lambda loss: f"{loss:.6g}",
    "delay": lambda delay: show(delay, "s"),
    "noise_voltage": lambda density: show(density, "V/√Hz"),
    "current_noise": lambda density: show(density, "A/√Hz"),
}
"""How those fields read that are no `Value`."""


def of_part(part: Part, name_of: NameOf) -> dict[str, Fact]:
    """All that the text says about a part: its kind, values, nodes and side."""
    facts: dict[str, Fact] = {"kind": Fact(part.kind)}
    described = tuple(part.describe())
    for position, (label, value, unit) in enumerate(described):
        facts |= of_value(label, value, unit, main=position == 0)
    told = [id(value) for _, value, _ in described]
    for name in (field.name for field in dataclasses.fields(part)):  # type: ignore[arg-type]
        value = getattr(part, name)
        label = _LABELS.get(name, name.replace("_", " "))
        if isinstance(value, Value):
            if id(value) not in told and label not in facts and value != Value(0.0):
                facts |= of_value(label, value, "", main=False)
        elif name in _TEXTS and value:
            facts[label] = Fact(_TEXTS[name](value), value)
    facts["between"] = _between(part, name_of)
    facts["side"] = Fact("under test" if part.side == "test" else "")
    return facts


def _between(part: Part, name_of: NameOf) -> Fact:
    if isinstance(part, Coupling):
        return Fact(f"{part.first} and {part.second}")
    return Fact(to([name_of(node) for node in part.nodes]))


def to(names: Sequence[str]) -> str:
    """Nodes as statements write them: the first half, "to", the second."""
    half = len(names) // 2
    return f"{', '.join(names[:half])} to {', '.join(names[half:])}"


# What is looked at, and how


def of_contact(contact: Contact, name_of: NameOf) -> dict[str, Fact]:
    return {"between": Fact(to([name_of(contact.a), name_of(contact.b)]))}


def of_reading(reading: Reading, name_of: NameOf) -> dict[str, Fact]:
    unit = {"V": "", "A": "A/V"}.get(reading.unit, f"{reading.unit}/V")
    return {
        "between": Fact(to([name_of(reading.a), name_of(reading.b)])),
        **of_value("times", reading.times, unit),
    }


def of_drive(drive: Drive) -> dict[str, Fact]:
    """A declared drive; that of a source alone says no more than the source."""
    text = ", ".join(f"{source} by {weight:.6g}" for source, weight in drive.weights)
    return {"sources": Fact(text, drive.weights)}


def of_settings(network: Network) -> dict[str, Fact]:
    """What is said once in a file."""
    facts: dict[str, Fact] = {"temperature": number(network.temperature, "K")}
    if network.title:
        facts["title"] = Fact(network.title)
    if network.grid is not None:
        low, high = show(network.grid.low, "Hz"), show(network.grid.high, "Hz")
        facts["sweep"] = Fact(f"{low} to {high}, {network.grid.per_decade:.6g} per decade", network.grid)
    edge = network.stimulus
    if edge is not None:
        text = f"edge {show(edge.ramp, 's')}" if edge.ramp else "step"
        text += f" over {show(edge.window, 's')}"
        text += "" if edge.top_at is None else f", top at {show(edge.top_at, 's')}"
        facts["edge"] = Fact(text, edge)
    if network.default_drive is not None:
        facts["default drive"] = Fact(network.default_drive)
    if network.allowed:
        facts["allowed"] = Fact(", ".join(f"{code}: {name}" for code, name in sorted(network.allowed)))
    return facts


def summary(facts: Iterable[Fact]) -> str:
    """A whole thing in one line."""
    return ", ".join(fact.text for fact in facts if fact.text)
