"""What is wrong or odd about how a network is connected, found on graphs and said in the user's words.

`CHECKS` lists the checks: functions of a network that give findings. Codes, messages and help stand in
`nodal.language.codes`; a finding brings the names and the arguments.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any, Literal

import networkx as nx

from nodal.assemble import assemble, cross_couplings, held_together, joined
from nodal.network import GROUND, Network
from nodal.parts import (
    Amplifier,
    Cable,
    Capacitor,
    Coupling,
    CurrentSource,
    Inductor,
    Part,
    Resistor,
    VoltageSource,
)
from nodal.parts.coupling import groups
from nodal.place import Place
from nodal.solver.matrix import System
from nodal.solver.plan import Singular, make_plan

Severity = Literal["error", "warning", "note"]

MOST_NAMES = 6
"""Names written out in one message."""

SAMPLES = (2j * 3.14e3, 2j * 3.14e6, 2j * 3.14e9)
"""rad/s: where a network with amplifiers is tried for a solution."""


@dataclass(frozen=True, slots=True)
class Finding:
    """One finding: `names` are what it is about (the first one is what `allow` silences)."""

    code: str
    severity: Severity
    names: tuple[str, ...]
    arguments: dict[str, Any] = field(default_factory=dict)
    place: Place | None = None


def check(network: Network) -> list[Finding]:
    """All findings, in the order of `CHECKS`, less those that the design allows."""
    found = [finding for one in CHECKS for finding in one(network)]
    if not any(finding.severity == "error" for finding in found):
        found += amplifier_loops(network)
    return [f for f in found if f.severity == "error" or not network.allows(f.code, f.names[0])]


def no_source(network: Network) -> Iterator[Finding]:
    """Nothing drives the network."""
    if not any(isinstance(part, VoltageSource | CurrentSource) for part in network.parts):
        yield Finding("no-source", "error", ())


def nothing_there(network: Network) -> Iterator[Finding]:
    """A reading, contact, coupling or drive on what does not exist."""
    touched = {node for part in network.parts for node in part.nodes} | {GROUND}
    for what, things in (("reading", network.readings), ("contact", network.contacts)):
        for thing in things:
            for node in sorted({thing.a, thing.b} - touched):
                name = network.nodes[node] if 0 <= node < len(network.nodes) else str(node)
                yield _missing(what, thing.name, f'no part is at "{name}"', thing.place)
    inductors = {part.name for part in network.parts if isinstance(part, Inductor)}
    for part in network.parts:
        if isinstance(part, Coupling):
            for name in (part.first, part.second):
                if name not in inductors:
                    yield _missing("coupling", part.name, f'there is no inductor "{name}"', part.place)
    sources = {part.name for part in network.parts if isinstance(part, VoltageSource | CurrentSource)}
    for drive in network.drives:
        for name, _ in drive.weights:
            if name not in sources:
                yield _missing("drive", drive.name, f'there is no source "{name}"', drive.place)


def _missing(what: str, name: str, reason: str, place: Place | None) -> Finding:
    return Finding("nothing-there", "error", (name,), {"what": what, "name_": name, "reason": reason}, place)


def floating_nodes(network: Network) -> Iterator[Finding]:
    """An island with no path to ground, unless a current source ends there (`open_current_source`)."""
    for island in _islands(network):
        if not _entering(network, island):
            verb = "has" if len(island) == 1 else "have"
            arguments = {
                "nodes": _quoted(network, island),
                "verb": verb,
                "example": network.nodes[island[0]],
            }
            names = _names(network, island)
            yield Finding("floating-nodes", "error", names, arguments, _where(network, island))


def open_current_source(network: Network) -> Iterator[Finding]:
    """An ideal current source into nodes from which its current cannot return."""
    for island in _islands(network):
        for source in _entering(network, island):
            arguments = {"source": source.name, "nodes": _quoted(network, island)}
            yield Finding("open-current-source", "error", (source.name,), arguments, source.place)


def _islands(network: Network) -> list[list[int]]:
    """Nodes that no part holds against ground, by piece, in order."""
    return _pieces(held_together(network, network.parts), network)


def _pieces(labels: Sequence[int], network: Network) -> list[list[int]]:
    pieces: dict[int, list[int]] = defaultdict(list)
    for node in sorted({node for part in network.parts for node in part.nodes}):
        if labels[node] != labels[GROUND]:
            pieces[labels[node]].append(node)
    return list(pieces.values())


def _entering(network: Network, island: Iterable[int]) -> list[CurrentSource]:
    inside = set(island)
    return [p for p in network.parts if isinstance(p, CurrentSource) and (p.a in inside) != (p.b in inside)]


def source_loops(network: Network) -> Iterator[Finding]:
    """A loop of ideal voltage sources, amplifier outputs and shorts: their voltages contradict each other."""
    graph = nx.Graph()
    for part in network.parts:
        for a, b in part.shorts():
            graph.add_edge(a, b, part=part)
    for part in network.parts:
        for a, b in part.forces():
            if a == b or (a in graph and b in graph and nx.has_path(graph, a, b)):
                path = nx.shortest_path(graph, a, b) if a != b else [a]
                others = [graph[u][v]["part"].name for u, v in pairwise(path)]
                names = tuple(dict.fromkeys((part.name, *others)))
                yield Finding("source-loop", "error", names, {"parts": _listed(names)}, part.place)
            else:
                graph.add_edge(a, b, part=part)


def impossible_couplings(network: Network) -> Iterator[Finding]:
    """Mutual inductances that would yield energy: not positive semi-definite together."""
    inductances = {p.name: p.value.nominal for p in network.parts if isinstance(p, Inductor)}
    couplings = [p for p in network.parts if isinstance(p, Coupling)]
    tight: list[tuple[Coupling, tuple[str, ...]]] = []
    for coupling in couplings:
        pair = (coupling.first, coupling.second)
        if 0.0 in map(inductances.get, pair) and coupling.value.nominal and not coupling.coefficient:
            tight.append((coupling, pair))
    for group in groups(inductances, couplings):
        if not group.passive():
            tight.append((next(c for c in couplings if c.first in group.names), group.names))
    for coupling, names in tight:
        arguments = {"parts": _listed(names)}
        yield Finding("impossible-coupling", "error", (coupling.name, *names), arguments, coupling.place)


def impossible_shields(network: Network) -> Iterator[Finding]:
    """A shield inductance that core and loop cannot have together: L < (1 - k)² Ls makes energy."""
    for part in network.parts:
        if isinstance(part, Cable) and part.separate_shields:
            line = part.line
            leakage = line.shield_inductance - line.mutual_inductance
            least = leakage**2 / line.shield_inductance if line.shield_inductance else 0.0
            if line.inductance < least * (1 - 1e-12):
                arguments = {"cable": part.name, "least": f"{least * 1e9:.4g} nH/m"}
                yield Finding("impossible-shield", "error", (part.name,), arguments, part.place)


def meeting_sides(network: Network) -> Iterator[Finding]:
    """Circuit under test and chain joined elsewhere than at contacts and ground."""
    sources = {part.name for part in network.parts if isinstance(part, VoltageSource | CurrentSource)}
    explicit = any(p.side == "test" and p.name.split(".")[0] not in sources for p in network.parts if p.nodes)
    if not network.contacts and not explicit:
        return
    allowed = {GROUND} | {node for contact in network.contacts for node in (contact.a, contact.b)}
    by_side: dict[str, dict[int, Part]] = {"test": {}, "chain": {}}
    for part in network.parts:
        for node in part.nodes:
            by_side[part.side].setdefault(node, part)
    for node in sorted((by_side["test"].keys() & by_side["chain"].keys()) - allowed):
        arguments = {
            "node": network.nodes[node],
            "test": by_side["test"][node].name,
            "chain": by_side["chain"][node].name,
        }
        place = by_side["chain"][node].place
        yield Finding("sides-meet", "error", (network.nodes[node],), arguments, place)


def amplifier_loops(network: Network) -> Iterator[Finding]:
    """Amplifiers in a loop without a solution. Called by `check` where nothing else is wrong."""
    amplifiers = {part.name: part for part in network.parts if isinstance(part, Amplifier)}
    if not amplifiers:
        return
    assembly = assemble(network)
    moving = _free(assembly.system)
    if moving:
        # What the loop drives moves with it, what feeds the loop contradicts it: the loop itself does both.
        loop = moving & _free(assembly.system.transposed())
        inputs = {name: assembly.find_extra(name, "input") for name in amplifiers}
        involved = [name for name, unknown in inputs.items() if unknown in loop] or list(amplifiers)
        arguments = {"parts": _listed(involved), "does": "is" if len(involved) == 1 else "are"}
        yield Finding("amplifier-loop", "error", tuple(involved), arguments, amplifiers[involved[0]].place)


def _free(system: System) -> set[int]:
    """Unknowns that no equation settles, at any frequency."""
    try:
        make_plan(system, list(SAMPLES))
    except Singular as error:
        return set(error.unknowns)
    return set()


def dangling_nodes(network: Network) -> Iterator[Finding]:
    """A node that one part only touches and nothing reads."""
    touching: dict[int, list[Part]] = defaultdict(list)
    for part in network.parts:
        for node in set(part.nodes):
            touching[node].append(part)
    observed = {GROUND}
    observed |= {node for reading in network.readings for node in (reading.a, reading.b)}
    observed |= {node for contact in network.contacts for node in (contact.a, contact.b)}
    for node, parts in sorted(touching.items()):
        if len(parts) == 1 and node not in observed:
            name = network.nodes[node]
            place = network.node_places.get(node) or parts[0].place
            yield Finding("dangling-node", "warning", (name,), {"node": name, "part": parts[0].name}, place)


def shorted_parts(network: Network) -> Iterator[Finding]:
    """A part whose connections short-circuit it."""
    merged = _merged(network)
    coupled = {n for part in network.parts if isinstance(part, Coupling) for n in (part.first, part.second)}
    for part in network.parts:
        if part.shorts() or part.name in coupled:
            continue
        match part:
            case Resistor() | Capacitor() | Inductor():
                ends = (part.a, part.b)
            case Amplifier():
                ends = (part.in_, part.ref)
            case _:
                continue
        if merged[ends[0]] == merged[ends[1]]:
            what = f"the input of {part.name}" if isinstance(part, Amplifier) else part.name
            yield Finding("shorted-part", "warning", (part.name,), {"part": what}, part.place)


def shorted_sources(network: Network) -> Iterator[Finding]:
    """A source whose terminals are one node. (For an ideal voltage source see `source_loops`.)"""
    merged = _merged(network)
    for part in network.parts:
        if isinstance(part, VoltageSource | CurrentSource):
            a, b = part.terminals or (part.a, part.b)
            loop = isinstance(part, VoltageSource) and merged[part.a] == merged[part.b]
            if merged[a] == merged[b] and not loop:
                yield Finding("source-shorted", "warning", (part.name,), {"source": part.name}, part.place)


def _merged(network: Network) -> list[int]:
    return joined(network, (pair for part in network.parts for pair in part.shorts()))


def crossing_couplings(network: Network) -> Iterator[Finding]:
    """Coupling across the split: absent where a side stands alone."""
    tested = {part.name for part in network.parts if part.side == "test"}
    for coupling in cross_couplings(network):
        first, second = sorted((coupling.first, coupling.second), key=lambda name: name not in tested)
        arguments = {"coupling": coupling.name, "first": first, "second": second}
        yield Finding("coupling-across-split", "warning", (coupling.name,), arguments, coupling.place)


def capacitive_nodes(network: Network) -> Iterator[Finding]:
    """Nodes held by capacitors alone: their value at 0 Hz is a capacitive limit."""
    conducting = joined(network, (pair for part in network.parts for pair in part.conducts()))
    held = held_together(network, network.parts)
    for piece in _pieces(conducting, network):
        if held[piece[0]] == held[GROUND]:
            arguments = {"nodes": _quoted(network, piece), "verb": "is" if len(piece) == 1 else "are"}
            names = _names(network, piece)
            yield Finding("capacitive-node", "note", names, arguments, _where(network, piece))


def _names(network: Network, nodes: Iterable[int]) -> tuple[str, ...]:
    return tuple(network.nodes[node] for node in nodes)


def _where(network: Network, nodes: Sequence[int]) -> Place | None:
    return next((network.node_places[node] for node in nodes if node in network.node_places), None)


def _quoted(network: Network, nodes: Iterable[int]) -> str:
    return _listed([f'"{network.nodes[node]}"' for node in nodes])


def _listed(names: Sequence[str]) -> str:
    """a, b and c; at most MOST_NAMES of them."""
    if len(names) > MOST_NAMES:
        return f"{', '.join(names[:MOST_NAMES])} and {len(names) - MOST_NAMES} more"
    return " and ".join(filter(None, (", ".join(names[:-1]), names[-1])))


CHECKS: tuple[Callable[[Network], Iterator[Finding]], ...] = (
    no_source,
    nothing_there,
    floating_nodes,
    open_current_source,
    source_loops,
    impossible_couplings,
    impossible_shields,
    meeting_sides,
    dangling_nodes,
    shorted_parts,
    shorted_sources,
    crossing_couplings,
    capacitive_nodes,
)
