"""From parts to the solver's systems: nodes merged by shorts, unknowns numbered, terms collected.

An `Assembly` is one system with what is needed to speak to it in the network's terms: which unknown is a
node's voltage, where a source enters, what an unknown is called. `split` makes the three that loading is
computed from: everything, the circuit under test alone, the measuring chain alone.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from nodal.network import GROUND, Network
from nodal.parts import Coupling, Inductor, Part
from nodal.parts.base import Weights
from nodal.parts.coupling import flux, groups
from nodal.solver.matrix import Function, System, Term

DROPPED = -1
"""The handle of ground and of all that is merged with it."""

Functional = dict[int, float]
"""{unknown or equation: weight}."""


@dataclass(slots=True)
class Assembly:
    """A system and the names of what is in it. Implements `Build` for the parts while it is made."""

    lumped: bool = False
    names: list[str] = field(default_factory=list)
    """Of every unknown, for messages: `node core`, `current of lead.L`."""
    excitations: dict[str, Functional] = field(default_factory=dict)
    """Right-hand side of each source's unit excitation."""
    merged: list[int] = field(default_factory=list)
    """A number for every node, the same for nodes that shorts make one."""
    _handles: dict[int, int] = field(default_factory=dict)
    _extras: dict[tuple[str, str], int] = field(default_factory=dict)
    _coupled: frozenset[str] = frozenset()
    _terms: list[Term] = field(default_factory=list)
    _functions: list[Function] = field(default_factory=list)
    _outputs: int = 0
    _system: System | None = None

    @property
    def system(self) -> System:
        if self._system is None:
            self._system = System(len(self.names), tuple(self._terms), tuple(self._functions))
        return self._system

    def same(self, a: int, b: int) -> bool:
        """Whether shorts make two nodes one."""
        return self.merged[a] == self.merged[b]

    def has(self, node: int) -> bool:
        """Whether the node takes part: touched by a part, or one with ground."""
        return self.merged[node] in self._handles

    def across(self, a: int, b: int) -> Functional:
        """v(a) - v(b), or a current in at `a` and out at `b`; empty for two nodes that are one."""
        return combined(((self.node(a), 1.0), (self.node(b), -1.0)))

    # What parts use (see `nodal.parts.base.Build`).

    def node(self, index: int) -> int:
        return self._handles[self.merged[index]]

    def extra(self, part: Part, label: str = "current") -> int:
        return self.unknown(part.name, label)

    def unknown(self, part_name: str, label: str) -> int:
        """One more unknown with its equation."""
        handle = len(self.names)
        self._extras[part_name, label] = handle
        self.names.append(f"{label} of {part_name}")
        return handle

    def find_extra(self, part_name: str, label: str = "current") -> int:
        return self._extras[part_name, label]

    def coupled(self, part_name: str) -> bool:
        return part_name in self._coupled

    def term(
        self, rows: Weights, cols: Weights, *, g: float = 0.0, c: float = 0.0, f: int | None = None
    ) -> None:
        live_rows, live_cols = combined(rows), combined(cols)
        if live_rows and live_cols:
            self._terms.append(Term(tuple(live_rows.items()), tuple(live_cols.items()), g, c, f))

    def admittance(self, a: int, b: int, *, g: float = 0.0, c: float = 0.0, f: int | None = None) -> None:
        across = ((self.node(a), 1.0), (self.node(b), -1.0))
        self.term(across, across, g=g, c=c, f=f)

    def function(self, function: Function) -> int:
        first = self._outputs
        self._functions.append(function)
        self._outputs += function.count
        return first

    def excite(self, source_name: str, equation: int, weight: float = 1.0) -> None:
        if equation != DROPPED:
            entry = self.excitations.setdefault(source_name, {})
            entry[equation] = entry.get(equation, 0.0) + weight


def combined(weights: Iterable[tuple[int, float]]) -> Functional:
    """Weights summed by handle, without ground and without what cancels."""
    total: Functional = {}
    for handle, weight in weights:
        if handle != DROPPED:
            total[handle] = total.get(handle, 0.0) + weight
    return {handle: weight for handle, weight in total.items() if weight}


def assemble(
    network: Network,
    parts: Sequence[Part] | None = None,
    *,
    merge: Iterable[tuple[int, int]] = (),
    force: Sequence[int] = (),
    lumped: bool = False,
) -> Assembly:
    """The system of `parts` (all of the network's if left out).

    `merge`: pairs of nodes to make one besides the shorts (a reference for what floats). `force`: nodes that
    are held at given voltages against ground: `forced(assembly, node)` is the equation that takes the
    voltage and the unknown that is the current from the node into what holds it.
    """
    parts = network.parts if parts is None else parts
    build = Assembly(lumped)
    build.merged = joined(network, (*(pair for part in parts for pair in part.shorts()), *merge))
    build._handles[build.merged[GROUND]] = DROPPED
    for node in (*(node for part in parts for node in part.nodes), *force):
        root = build.merged[node]
        if root not in build._handles:
            build._handles[root] = len(build.names)
            build.names.append(f"voltage of {network.nodes[node]}")
    inductors = {part.name: part.value.nominal for part in parts if isinstance(part, Inductor)}
    coupled = groups(inductors, [part for part in parts if isinstance(part, Coupling)])
    build._coupled = frozenset(name for group in coupled for name in group.names)
    for part in parts:
        part.contribute(build)
    for group in coupled:
        flux(build, group)
    for node in force:
        handle = build.unknown(f"contact at {network.nodes[node]}", "current")
        across = ((build.node(node), 1.0),)
        build.term(across, ((handle, 1.0),), g=1.0)
        build.term(((handle, 1.0),), across, g=1.0)
    return build


def forced(network: Network, assembly: Assembly, node: int) -> int:
    """See `assemble`."""
    return assembly.find_extra(f"contact at {network.nodes[node]}")


def side_parts(network: Network, side: str) -> list[Part]:
    """The parts of one side of the split; couplings where both inductors are on it."""
    inside = {part.name for part in network.parts if part.side == side}
    return [
        part
        for part in network.parts
        if (
            part.first in inside and part.second in inside
            if isinstance(part, Coupling)
            else part.side == side
        )
    ]


def cross_couplings(network: Network) -> list[Coupling]:
    """Couplings between an inductor under test and one of the chain."""
    sides = {part.name: part.side for part in network.parts if isinstance(part, Inductor)}
    return [
        part
        for part in network.parts
        if isinstance(part, Coupling) and sides.get(part.first, "") != sides.get(part.second, "")
    ]


def joined(network: Network, pairs: Iterable[tuple[int, int]]) -> list[int]:
    """A number for every node, the same for nodes that `pairs` join, directly or through others."""
    count = len(network.nodes)
    ends = np.array([*pairs], dtype=np.intp).reshape(-1, 2)
    graph = coo_array((np.ones(len(ends), dtype=bool), (ends[:, 0], ends[:, 1])), shape=(count, count))
    labels: list[int] = connected_components(graph, directed=False)[1].tolist()
    return labels


def held_together(network: Network, parts: Iterable[Part]) -> list[int]:
    """Numbers as of `joined`, the same for nodes that parts hold together above zero frequency."""
    return joined(network, (pair for part in parts for pair in part.holds()))


def references(network: Network, parts: Sequence[Part], held: Sequence[int]) -> list[tuple[int, int]]:
    """Pairs to merge so that every floating piece of one side has a reference.

    That is the second node of a contact where it has one, which counts as ground; a piece that a contact
    touches with its first node alone stands at the voltage of the second.
    """
    present = {node for part in parts for node in part.nodes}
    grounded = {held[GROUND]}
    pairs = []
    for second in (True, False):
        for contact in network.contacts:
            node = contact.b if second else contact.a
            if node in present and held[node] not in grounded:
                grounded.add(held[node])
                pairs.append((node, GROUND if second or contact.b not in present else contact.b))
    return pairs


def shared_nodes(network: Network) -> list[int]:
    """Nodes other than ground where the two sides meet, in order."""
    touched: dict[str, set[int]] = {"test": set(), "chain": set()}
    for part in network.parts:
        touched.get(part.side, set()).update(part.nodes)
    return sorted((touched["test"] & touched["chain"]) - {GROUND})


def excitation(assembly: Assembly, weights: Iterable[tuple[str, float]]) -> Functional:
    """Right-hand side of sources that move together, per unit of the drive."""
    total: Functional = {}
    for source, weight in weights:
        for equation, value in assembly.excitations.get(source, {}).items():
            total[equation] = total.get(equation, 0.0) + weight * value
    return total


def described(assembly: Assembly, unknowns: Iterable[int], most: int = 6) -> str:
    """Names of unknowns in a sentence, at most so many."""
    names = [assembly.names[k] for k in unknowns]
    more = f" and {len(names) - most} more" if len(names) > most else ""
    return ", ".join(names[:most]) + more
