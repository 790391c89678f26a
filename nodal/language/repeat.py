"""Sections of a chain that differ in nothing but their names and nodes: worked out once, then repeated."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from functools import cache
from itertools import islice
from typing import Any

from nodal.language import syntax
from nodal.language.builder import NetworkBuilder
from nodal.parts.base import Part
from nodal.parts.coupling import Coupling
from nodal.parts.source import CurrentSource, VoltageSource
from nodal.values import Formula, Random, Value


def repeatable(assembly: syntax.Assembly, assemblies: Mapping[str, syntax.Assembly]) -> bool:
    """Whether a section's parts say all about it. A coupling is worked out later, from where it stands."""
    waiting, seen = [assembly], {assembly.name.text}
    while waiting:
        for statement in waiting.pop().body:
            if isinstance(statement, syntax.Coupling):
                return False
            if isinstance(statement, syntax.Place | syntax.Chain):
                inner = assemblies.get(statement.use.assembly.text)
                if inner is not None and inner.name.text not in seen:
                    seen.add(inner.name.text)
                    waiting.append(inner)
    return True


@dataclass(frozen=True, slots=True)
class Mark:
    """How far a network had come before a section."""

    parts: int
    nodes: int
    aliases: int

    @classmethod
    def of(cls, builder: NetworkBuilder) -> Mark:
        return cls(len(builder.parts), len(builder.nodes), len(builder.aliases))


class Section:
    """What one section added to a network. The nodes at its ends must be distinct from each other and from
    the shared ones, so that an index tells which is meant."""

    def __init__(self, builder: NetworkBuilder, since: Mark, prefix: str) -> None:
        self.builder = builder
        self.prefix = prefix
        self.parts = [(part, builder.spans[part.name], _random_values(part, prefix))
                      for part in builder.parts[since.parts:]]  # fmt: skip
        self.nodes = list(islice(builder.nodes.items(), since.nodes, None))
        self.aliases = list(islice(builder.aliases.items(), since.aliases, None))

    def repeat(self, prefix: str, ends: Mapping[int, int]) -> None:
        """The section once more under another prefix; `ends` says where its left and right nodes are now.

        Raises what `NetworkBuilder.add` raises.
        """
        builder, old = self.builder, len(self.prefix)
        where = dict(ends)
        for name, index in self.nodes:
            where[index] = builder.node_at(prefix + name[old:], builder.node_places.get(index))
        for name, index in self.aliases:
            builder.aliases[prefix + name[old:]] = where.get(index, index)
        done: dict[int, Formula] = {}
        for part, span, random in self.parts:
            changes: dict[str, Any] = {
                field: replace(value, formula=_renamed(value.formula, self.prefix, prefix, done))
                for field, value in random
                if value.formula is not None
            }
            for field in _node_fields(type(part)):
                index = getattr(part, field)
                changes[field] = where.get(index, index)
            builder.add(replace(part, name=prefix + part.name[old:], **changes), span)  # type: ignore[type-var]


@cache
def _node_fields(kind: type[Any]) -> tuple[str, ...]:
    """An `int` is a node in every kind that an assembly may hold."""
    assert not issubclass(kind, VoltageSource | CurrentSource | Coupling)
    return tuple(field.name for field in fields(kind) if field.type == "int")


def _random_values(part: Part, prefix: str) -> tuple[tuple[str, Value], ...]:
    """The values of a part in which random quantities of this section take part."""
    values = ((field.name, getattr(part, field.name)) for field in fields(part))  # type: ignore[arg-type]
    return tuple(
        (name, value)
        for name, value in values
        if isinstance(value, Value) and value.formula is not None
        and any(random.startswith(prefix) for random in value.formula.randoms())
    )  # fmt: skip


def _renamed(formula: Formula, old: str, new: str, done: dict[int, Formula]) -> Formula:
    """The formula with another section's random quantities; what formulas share stays shared."""
    waiting = [formula]
    while waiting:
        at = waiting[-1]
        if id(at) not in done:
            if at.operator == "random":
                random: Random = at.operands[0]
                own = random.name.startswith(old)
                done[id(at)] = (
                    Formula("random", (replace(random, name=new + random.name[len(old) :]),)) if own else at
                )
            elif at.operator == "number":
                done[id(at)] = at
            else:
                missing = [operand for operand in at.operands if id(operand) not in done]
                if missing:
                    waiting.extend(missing)
                    continue
                done[id(at)] = Formula(at.operator, tuple(done[id(operand)] for operand in at.operands))
        waiting.pop()
    return done[id(formula)]
