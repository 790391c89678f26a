"""Two designs, or two states of one, held against each other.

What their texts say is compared by meaning: part by part, value by value, case by case; then the figures that
moved and the requirements whose answer changed. Solved is only what can have moved.
"""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

from nodal.checks import RequirementResult, judge, requirement_items
from nodal.design import Design
from nodal.figure_set import FigureRow, choose, required
from nodal.figures import Result
from nodal.figures.search import Span
from nodal.network import Network
from nodal.parts.base import Part
from nodal.response import Response
from nodal.studies import facts
from nodal.studies.facts import Fact, Facts, NameOf, Number

MOVED = 1e-9
"""A figure has moved where it differs by more than this part of itself."""

Section = Literal["settings", "lets", "parts", "contacts", "readings", "drives"]
SECTIONS: tuple[Section, ...] = ("settings", "lets", "parts", "contacts", "readings", "drives")


@dataclass(frozen=True, slots=True)
class Change:
    """What the texts say differently about one thing. `old` and `new` are as a file would say it, "" where
    there is nothing.

    `old_value` and `new_value` are numbers in SI `unit`, where the change is one of numbers. A `name` with
    `*` stands for `count` things whose names differ in that number alone.
    """

    section: Section
    name: str
    what: str
    """The value that changed; "added", "gone" or "renamed" for the whole thing."""
    old: str
    new: str
    old_value: float | None = None
    new_value: float | None = None
    unit: str = ""
    cases: tuple[str, ...] = ()
    count: int = 1

    @property
    def relative(self) -> float | None:
        """(new - old) / |old|, None where that says nothing."""
        return relative(self.old_value, self.new_value)


@dataclass(frozen=True, slots=True)
class Moved:
    """A figure that is not what it was, in one case."""

    case: str
    row: FigureRow
    old: Result
    new: Result

    @property
    def relative(self) -> float | None:
        """(new - old) / |old|, None where that says nothing."""
        return relative(self.old.value, self.new.value)


@dataclass(frozen=True, slots=True)
class Judged:
    """A requirement that is new, gone, asks for something else or has another answer, in one case."""

    case: str
    name: str
    old: RequirementResult | None
    new: RequirementResult | None

    @property
    def what(self) -> str:
        """One of "added", "gone", "changed" (it asks for something else), "flipped" or "same"."""
        if self.old is None or self.new is None:
            return "added" if self.old is None else "gone"
        if _asks(self.old) != _asks(self.new):
            return "changed"
        return "flipped" if self.old.status != self.new.status else "same"


@dataclass(frozen=True, slots=True)
class Comparison:
    """How `new` differs from `old`."""

    old: Design
    new: Design
    cases: tuple[str, ...]
    """Those that both have and that were compared."""
    cases_added: tuple[str, ...]
    cases_gone: tuple[str, ...]
    changes: tuple[Change, ...]
    moved: tuple[Moved, ...]
    requirements: tuple[Judged, ...]
    figures: int
    """How many were held against each other, all cases together; 0 where no circuit changed."""
    notes: tuple[str, ...] = ()

    @property
    def differs(self) -> bool:
        return any((self.cases_added, self.cases_gone, self.changes, self.moved, self.requirements))


def compare(
    old: Design, new: Design, *, cases: Sequence[str] | None = None, drive: str | None = None
) -> Comparison:
    """Everything in which `new` differs from `old`, in the cases named (None: all).

    `drive` stands in for each design's default drive; figures that need one and have none cannot be compared,
    which a note says. A case that one of the two lacks is told as such and not compared.
    """
    chosen = [c for c in dict.fromkeys((*old.cases, *new.cases)) if cases is None or c in cases]
    common = tuple(c for c in chosen if c in old.cases and c in new.cases)
    before = {case: old.network(case).network for case in common}
    after = {case: new.network(case).network for case in common}
    solving = [case for case in common if _circuit(before[case]) != _circuit(after[case])]
    judging = [c for c in common if c in solving or before[c].requirements != after[c].requirements]
    was = {case: Response(before[case]) for case in judging}
    now = {case: Response(after[case]) for case in judging}
    notes: list[str] = []
    moved, count = _moved({c: was[c] for c in solving}, {c: now[c] for c in solving}, drive, notes)
    return Comparison(
        old, new, common,
        tuple(c for c in chosen if c not in old.cases), tuple(c for c in chosen if c not in new.cases),
        changes_of_text(old, new, common), tuple(moved),
        tuple(found for case in judging for found in _judged(case, old, new, was[case], now[case])),
        count, tuple(notes),
    )  # fmt: skip


def changes_of_text(old: Design, new: Design, cases: Sequence[str]) -> tuple[Change, ...]:
    """What the texts say differently in cases that both have; solves nothing."""
    found = {
        case: differences(
            old.network(case).network, new.network(case).network, _lets(old, case), _lets(new, case)
        )
        for case in cases
    }
    return tuple(gathered(found))


def _circuit(network: Network) -> Network:
    """A network without what no figure depends on."""
    return replace(network, requirements=(), allowed=frozenset(), title="")


def relative(old: float | None, new: float | None) -> float | None:
    """(new - old) / |old|, None where one is missing or not finite, or the old one zero."""
    if old is None or new is None or old == 0.0 or not (math.isfinite(old) and math.isfinite(new)):
        return None
    return (new - old) / abs(old)


# What the texts say

Things = Mapping[str, Facts]


def differences(old: Network, new: Network, old_lets: Things, new_lets: Things) -> list[Change]:
    """What two networks say differently, section by section; lets are named values beside them."""
    renamed = _renamed_nodes(old, new)

    def before(node: int) -> str:
        name = old.nodes[node]
        return renamed.get(name, name)

    def after(node: int) -> str:
        return new.nodes[node]

    return [
        *_thing("settings", "", facts.of_settings(old), facts.of_settings(new)),
        *(Change("settings", f"node {was}", "renamed", was, now) for was, now in renamed.items()),
        *_things("lets", old_lets, new_lets),
        *_parts(_facts_of_parts(old, before), _facts_of_parts(new, after)),
        *_things("contacts", {c.name: facts.of_contact(c, before) for c in old.contacts},
                 {c.name: facts.of_contact(c, after) for c in new.contacts}),
        *_things("readings", {r.name: facts.of_reading(r, before) for r in old.readings},
                 {r.name: facts.of_reading(r, after) for r in new.readings}),
        *_things("drives", _declared_drives(old), _declared_drives(new)),
    ]  # fmt: skip


def _lets(design: Design, case: str) -> Things:
    return {name: facts.of_let(name, quantity) for name, quantity in design.lets(case).items()}


def _facts_of_parts(network: Network, name_of: NameOf) -> Things:
    return {part.name: facts.of_part(part, name_of) for part in network.parts}


def _declared_drives(network: Network) -> Things:
    """Drives that a file declares; each source is one of its own name besides."""
    parts = {part.name for part in network.parts}
    return {drive.name: facts.of_drive(drive) for drive in network.drives if drive.name not in parts}


def _things(section: Section, old: Things, new: Things) -> Iterable[Change]:
    for name in dict.fromkeys((*new, *old)):
        if name not in old:
            yield Change(section, name, "added", "", facts.summary(new[name].values()))
        elif name not in new:
            yield Change(section, name, "gone", facts.summary(old[name].values()), "")
        else:
            yield from _thing(section, name, old[name], new[name])


def _thing(section: Section, name: str, old: Facts, new: Facts) -> Iterable[Change]:
    for what in dict.fromkeys((*old, *new)):
        was, now = old.get(what), new.get(what)
        if was is None or now is None or not was.same(now):
            yield _change(section, name, what, was, now)


def _change(section: Section, name: str, what: str, was: Fact | None, now: Fact | None) -> Change:
    if was is not None and now is not None:
        before, after = was.beside(now)
    else:
        before, after = was.text if was else "", now.text if now else ""
    numbers = [fact for fact in (was, now) if isinstance(fact, Number)]
    if len({fact.unit for fact in numbers}) != 1:  # no number, or two that cannot be compared
        return Change(section, name, what, before, after)
    old_value = was.value if isinstance(was, Number) else None
    new_value = now.value if isinstance(now, Number) else None
    return Change(section, name, what, before, after, old_value, new_value, numbers[0].unit)


def _parts(old: Things, new: Things) -> Iterable[Change]:
    """Changes of parts; one that is gone and one that is new but says the same is told as renamed."""
    renamed = dict(_renamed_parts(old, new))
    for was, now in renamed.items():
        yield Change("parts", now, "renamed", was, now)
    yield from _things(
        "parts",
        {name: said for name, said in old.items() if name not in renamed},
        {name: said for name, said in new.items() if name not in renamed.values()},
    )


def _renamed_parts(old: Things, new: Things) -> Iterable[tuple[str, str]]:
    def spoken(things: Things, others: Things) -> dict[Hashable, list[str]]:
        found: dict[Hashable, list[str]] = {}
        for name, said in things.items():
            if name not in others:
                found.setdefault(tuple(said.items()), []).append(name)
        return found

    gone, added = spoken(old, new), spoken(new, old)
    for said, names in gone.items():
        if len(names) == 1 and len(added.get(said, ())) == 1:
            yield names[0], added[said][0]


def _renamed_nodes(old: Network, new: Network) -> dict[str, str]:
    """Nodes that only bear another name: every part there stands at one and the same new node."""
    was: dict[str, set[str]] = {}
    now: dict[str, set[str]] = {}
    theirs = {part.name: part for part in new.parts}
    for part in old.parts:
        other: Part | None = theirs.get(part.name)
        if other is None or len(other.nodes) != len(part.nodes):
            continue
        for a, b in zip(part.nodes, other.nodes, strict=True):
            was.setdefault(old.nodes[a], set()).add(new.nodes[b])
            now.setdefault(new.nodes[b], set()).add(old.nodes[a])
    unknown, known = set(new.nodes), set(old.nodes)
    return {
        before: after
        for before, targets in was.items() if len(targets) == 1
        for after in targets
        if before not in unknown and after not in known and len(now[after]) == 1
    }  # fmt: skip


# The same in many places


def gathered(changes: Mapping[str, Sequence[Change]]) -> Iterable[Change]:
    """Changes of all cases, each once with the cases it holds for, section by section; those that many
    sections of a chain share as one with a pattern for their names."""
    cases: dict[Change, list[str]] = {}
    for case, found in changes.items():
        for change in found:
            cases.setdefault(change, []).append(case)
    whole = [replace(change, cases=tuple(names)) for change, names in cases.items()]
    patterns = {change: _pattern(change) for change in whole}
    counts = Counter(patterns.values())
    told: set[Change] = set()
    for change in sorted(whole, key=lambda change: SECTIONS.index(change.section)):
        pattern = patterns[change]
        if pattern.name == change.name or counts[pattern] == 1:
            yield change
        elif pattern not in told:
            told.add(pattern)
            yield replace(pattern, count=counts[pattern])


_SECTION = re.compile(r"(?<=\.)[0-9]+(?=\.)")


def _pattern(change: Change) -> Change:
    """A change with the sections of chains left open in every name."""
    name, old, new = (_SECTION.sub("*", text) for text in (change.name, change.old, change.new))
    return replace(change, name=name, old=old, new=new)


# What the designs do


def _moved(
    was: Mapping[str, Response], now: Mapping[str, Response], drive: str | None, notes: list[str]
) -> tuple[list[Moved], int]:
    """The figures of either side's set that moved, and how many there were."""
    if not was:
        return [], 0
    rows = dict.fromkeys(row for side in _rows(was, now, drive, notes) for row in side)
    moved: list[Moved] = []
    count = 0
    for case in was:
        for row in rows:
            before, after = (side[case] for side in (was, now))
            old, new = (settled(row, row.evaluate(response, drive)) for response in (before, after))
            if old.reason == new.reason == "unavailable":
                continue
            count += 1
            if has_moved(row, old, new):
                moved.append(Moved(case, row, old, new))
    undriven = drive is None and any(
        response.network.default_drive is None and response.network.drives
        for side in (was, now) for response in side.values()
    )  # fmt: skip
    if undriven:
        notes.append("several sources and no drive: figures that need one are left out; choose with --drive")
    order = list(rows)
    return sorted(moved, key=lambda m: order.index(m.row)), count


def _rows(
    was: Mapping[str, Response], now: Mapping[str, Response], drive: str | None, notes: list[str]
) -> Iterable[Iterable[FigureRow]]:
    """The figures to compare, as each side by itself would choose them."""
    spans = [_spans(side) for side in (was, now)]
    stand_in = next((span for side in spans for span in side.values() if span is not None), None)
    if stand_in is None:
        notes.append("no sweep statement: only figures that requirements ask about are compared")
        for side in (was, now):
            yield required(response.network for response in side.values())
        return
    for side, own in zip((was, now), spans, strict=True):
        lacking = any(span is None for span in own.values())
        filled = {case: span or stand_in for case, span in own.items()}
        yield choose(side, drive, filled, stand_in if lacking else None)


def _spans(side: Mapping[str, Response]) -> dict[str, Span | None]:
    grids = {case: response.network.grid for case, response in side.items()}
    return {case: (grid.low, grid.high) if grid else None for case, grid in grids.items()}


def has_moved(row: FigureRow, old: Result, new: Result) -> bool:
    """Whether a figure is another: by more than `MOVED` of itself, and than rounding leaves of nothing."""
    if old.value is None or new.value is None:
        return (old.value, old.reason, old.bound) != (new.value, new.reason, new.bound)
    if old.unit != new.unit:
        return True
    if old.value == new.value or (math.isnan(old.value) and math.isnan(new.value)):
        return False
    largest = max(abs(old.value), abs(new.value))
    if not math.isfinite(largest):
        return True
    return not abs(new.value - old.value) <= max(MOVED * largest, floor(row))


def settled(row: FigureRow, result: Result) -> Result:
    """A figure without what rounding leaves of nothing."""
    if result.value is None or abs(result.value) > floor(row):
        return result
    return replace(result, value=0.0)


def floor(row: FigureRow) -> float:
    """What rounding leaves of a figure that is zero in truth, in its unit."""
    angle = 1e-12
    if row.call.name == "phase":
        return math.degrees(angle)
    if row.call.name == "group_delay":
        lowest = row.at if row.at is not None else row.span[0] if row.span else 0.0
        return angle / (2 * math.pi * lowest) if lowest else 0.0
    return angle if row.call.name in ("flatness", "peaking", "error") else 0.0


def _judged(case: str, old: Design, new: Design, was: Response, now: Response) -> Iterable[Judged]:
    before = {item.name: judge(item, was) for item in requirement_items(old, [case])}
    after = {item.name: judge(item, now) for item in requirement_items(new, [case])}
    for name in dict.fromkeys((*after, *before)):
        told = Judged(case, name, before.get(name), after.get(name))
        if told.what != "same":
            yield told


def _asks(result: RequirementResult) -> tuple[Hashable, ...]:
    return result.figure, result.relation, result.limit, result.tolerance, result.unit
