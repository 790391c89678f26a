"""Puts a `Network` together: node indices, part names, places in the text, and the limit on size."""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass, field

from nodal.language.diagnostics import Collector
from nodal.language.scope import Rejected
from nodal.language.syntax import Span
from nodal.network import GROUND
from nodal.parts.base import Part
from nodal.place import Place

MOST_PARTS = 200_000


@dataclass(slots=True)
class NetworkBuilder:
    """Nodes and parts so far. Node 0 is ground."""

    collector: Collector
    nodes: dict[str, int] = field(default_factory=lambda: {"ground": GROUND})
    aliases: dict[str, int] = field(default_factory=dict)
    """Names by which a node can be read besides its own: the nodes of an assembly as the assembly calls
    them."""
    parts: list[Part] = field(default_factory=list)
    by_name: dict[str, Part] = field(default_factory=dict)
    spans: dict[str, Span] = field(default_factory=dict)
    """Where each part was written."""
    node_places: dict[int, Place] = field(default_factory=dict)
    _lines: dict[str, list[int]] = field(default_factory=dict)

    def node(self, name: str, span: Span) -> int:
        """Index of a node, new where nothing has named it yet."""
        index = self.nodes.get(name)
        return self.node_at(name, self.place(span)) if index is None else index

    def node_at(self, name: str, place: Place | None) -> int:
        """Index of a node first named at a place, of the existing one if there is one."""
        index = self.nodes.setdefault(name, len(self.nodes))
        if place is not None:
            self.node_places.setdefault(index, place)
        return index

    def find_node(self, name: str) -> int | None:
        """Index of an existing node, by its own name or by what an assembly calls it."""
        index = self.nodes.get(name)
        return self.aliases.get(name) if index is None else index

    def add(self, part: Part, span: Span) -> None:
        """One more part; Rejected where its name is taken or the network becomes too large."""
        if len(self.parts) >= MOST_PARTS:
            self.collector.add("too-many-parts", span, limit=f"{MOST_PARTS:,}")
            raise TooLarge
        if part.name in self.by_name:
            related = [(self.spans[part.name], "first here")]
            self.collector.add("duplicate-name", span, duplicate=part.name, related=related)
            raise Rejected
        self.by_name[part.name] = part
        self.spans[part.name] = span
        self.parts.append(part)

    def place(self, span: Span) -> Place | None:
        """Lines and columns of a span, None where its text is not known."""
        starts = self._lines.get(span.path)
        if starts is None:
            text = self.collector.sources.get(span.path)
            if text is None:
                return None
            starts = self._lines[span.path] = line_starts(text)
        first, last = bisect_right(starts, span.start) - 1, bisect_right(starts, span.end) - 1
        return Place(
            span.path, first + 1, span.start - starts[first] + 1, last + 1, span.end - starts[last] + 1
        )


class TooLarge(Exception):
    """The network is larger than allowed; reported already, nothing more is to be expanded."""


def line_starts(text: str) -> list[int]:
    """Offsets at which the lines of a text begin."""
    starts = [0]
    position = text.find("\n")
    while position >= 0:
        starts.append(position + 1)
        position = text.find("\n", position + 1)
    return starts
