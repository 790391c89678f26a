"""A design as scripts use it: load a text, get the network of a case, sweep it.

>>> import nodal
>>> design = nodal.loads("nodal 1; source s: a to ground = 1 V; reading m: a to ground times 10")
>>> float(abs(design.network().sweep([1e3]).reading("m")[0]))
10.0
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from nodal.language import syntax
from nodal.language.diagnostics import Collector, DesignError, Diagnostic
from nodal.language.expand import Expanded, Override, expand
from nodal.language.files import Disk, Files
from nodal.language.parse import parse, read
from nodal.language.program import NOMINAL, Program, gather
from nodal.language.scope import names_in_statements, nearest
from nodal.language.syntax import Span
from nodal.network import Network, of_any_section
from nodal.place import Place

if TYPE_CHECKING:
    from nodal.edge import EdgeResponse
    from nodal.language.quantity import Quantity
    from nodal.poles import PolesAndZeros
    from nodal.response import Response
    from nodal.topology import Finding

__all__ = ["Design", "DesignError", "Model", "Sweep", "load", "loads"]


def load(path: str) -> Design:
    """The design in a file, "-" for standard input. Raises DesignError with everything that is wrong with
    it."""
    collector = Collector()
    text = read(path, collector)
    if text is None:
        raise DesignError(collector.found, collector.sources)
    return loads(text, "<standard input>" if path == "-" else path)


def loads(text: str, path: str = "<text>", *, files: Files | None = None) -> Design:
    """The design in a text; `path` stands in messages, and includes are looked for beside it.

    `files` is where they come from if not from the disk. Raises DesignError with all errors: of the text, of
    the meaning and connections of every case.
    """
    collector = Collector(sources={path: text})
    file = parse(text, path, collector)
    program = gather(file, collector, parse, files or Disk(path))
    design = Design(path, program, collector.sources)
    design.check(collector)
    return design


@dataclass(slots=True)
class Design:
    """A design without errors. `diagnostics` holds its warnings and notes."""

    path: str
    program: Program = field(repr=False)
    sources: dict[str, str] = field(repr=False)
    """Text of every file read, by path."""
    diagnostics: list[Diagnostic] = field(default_factory=list)
    _networks: dict[str, Network] = field(default_factory=dict, repr=False)
    _lets: dict[str, dict[str, Quantity]] = field(default_factory=dict, repr=False)

    @property
    def title(self) -> str:
        return self.program.title()

    @property
    def cases(self) -> tuple[str, ...]:
        """Names of the cases, "nominal" (the file without any) first."""
        return self.program.case_names

    def network(self, case: str | None = None, **lets: float | str) -> Model:
        """The network of a case (None: nominal), ready to be evaluated.

        `lets` set values in place of what the file or the case says: a number in SI units, or text
        ("12 mm ± 1 mm"). Arguments of places have dotted names: `design.network(**{"n.skew": 0.01})`. Raises
        DesignError where that gives no network, KeyError for a case that does not exist.
        """
        case = case or NOMINAL
        if case not in self.cases:
            raise KeyError(f"no case {case!r}; {nearest(case, self.cases)}")
        if not lets:
            return Model(self._networks[case], case)
        collector = Collector(sources=dict(self.sources))
        overrides = parse_overrides(lets, collector)
        network = None
        if not collector.failed:
            expanded = self._expand(case, collector, overrides)
            network = expanded.network
            if network is not None:
                topology(network, collector, expanded.uses)
        if network is None or collector.failed:
            raise DesignError(distinct(collector.found), collector.sources)
        self.sources.update(collector.sources)
        known = set(map(_key, self.diagnostics))
        fresh = [finding for finding in distinct(collector.found) if _key(finding) not in known]
        return Model(network, case, tuple(f for f in fresh if not self._allows(f, network)))

    def lets(self, case: str = NOMINAL) -> Mapping[str, Quantity]:
        """What each `let` comes to in a case, by name."""
        return self._lets[case]

    def check(self, collector: Collector) -> None:
        """Expands and checks every case; raises DesignError with all errors, else keeps networks and
        warnings."""
        used: set[str] = set()
        readable = not collector.failed
        for case in self.cases:
            expanded = self._expand(case, collector, {})
            used |= expanded.used
            if expanded.network is not None:
                self._networks[case] = expanded.network
                self._lets[case] = expanded.lets
                if readable:
                    topology(expanded.network, collector, expanded.uses)
        self._unused(used, collector)
        found = distinct(collector.found)
        if collector.failed:
            raise DesignError(found, self.sources)
        self.diagnostics = [finding for finding in found if not self._allows(finding)]

    def _allows(self, finding: Diagnostic, *networks: Network) -> bool:
        """Whether an `allow` of any case silences it."""
        return any(n.allows(finding.code, finding.name) for n in (*self._networks.values(), *networks))

    def _expand(self, case: str, collector: Collector, overrides: Mapping[str, Override]) -> Expanded:
        return expand(self.program, case, collector, overrides)

    def _unused(self, used: set[str], collector: Collector) -> None:
        """Warns of values and stocks of the main file that no case uses; included files may hold more than
        that."""
        if collector.failed:
            return
        statements = [item.statement for item in self.program.items]
        statements += [statement for case in self.program.cases.values() for statement in case.body]
        idle = [s for s in statements if isinstance(s, syntax.Assembly) and s.name.text not in used]
        used = used | names_in_statements(idle)
        for statement in statements:
            if not isinstance(statement, syntax.Let | syntax.Stock) or statement.span.path != self.path:
                continue
            name = statement.name.text
            if name not in used and "." not in name:
                code = "unused-let" if isinstance(statement, syntax.Let) else "unused-stock"
                collector.add(code, statement.name.span, name=name, unused=name)


def parse_overrides(lets: Mapping[str, float | str], collector: Collector) -> dict[str, Override]:
    """Values given from outside: numbers as they are, text as the language reads it."""
    overrides: dict[str, Override] = {}
    for name, value in lets.items():
        path = f"--let {name}"
        if not isinstance(value, str):
            overrides[name] = float(value)
            if not math.isfinite(value):
                collector.add("override-form", None, name_=name)
            continue
        plain = name if name.isascii() and name.isidentifier() else "x"
        file = parse(f"nodal 1\nlet {plain} = {value}", path, collector)
        found = [statement for statement in file.statements if isinstance(statement, syntax.Let)]
        if len(found) == 1 and len(file.statements) == 2:
            overrides[name] = found[0].value
        elif not collector.failed:
            collector.add("override-form", Span(path, 0, 0), name_=name)
    return overrides


def topology(network: Network, collector: Collector, uses: Mapping[str, Span]) -> None:
    """Adds what is wrong or odd about the connections, once for all sections of a chain. `uses` says where
    places and chains were written."""
    from nodal.topology import check

    alike: dict[tuple[Any, ...], list[Finding]] = {}
    for finding in check(network):
        names = tuple(of_any_section(name) for name in finding.names)
        alike.setdefault((finding.code, finding.place, names), []).append(finding)
    for findings in alike.values():
        _add_finding(findings[0], len(findings), collector, uses)


def _add_finding(finding: Finding, count: int, collector: Collector, uses: Mapping[str, Span]) -> None:
    span = span_of(finding.place, collector.sources) if finding.place is not None else None
    name = finding.names[0] if finding.names else ""
    steps = of_any_section(name).split(".")
    around = (".".join(steps[:depth]) for depth in range(len(steps) - 1, 0, -1))
    related = [(uses[use], f"used here as {use}") for use in around if use in uses]
    if count > 1 and related:
        related[-1] = (related[-1][0], f"{related[-1][1]}; the same in {count} sections")
    collector.add(finding.code, span, name=name, related=related, **finding.arguments)


def span_of(place: Place, sources: Mapping[str, str]) -> Span | None:
    """The characters of a place; None where its text is not at hand."""
    from nodal.language.builder import line_starts

    text = sources.get(place.path)
    if text is None:
        return None
    starts = line_starts(text)
    return Span(
        place.path,
        starts[place.line - 1] + place.column - 1,
        starts[place.end_line - 1] + place.end_column - 1,
    )


def distinct(found: Iterable[Diagnostic]) -> list[Diagnostic]:
    """Each finding once: cases share most of their statements, and so most of their mistakes."""
    kept: dict[tuple[Any, ...], Diagnostic] = {}
    for finding in found:
        kept.setdefault(_key(finding), finding)
    return list(kept.values())


def _key(finding: Diagnostic) -> tuple[Any, ...]:
    span = finding.span
    return finding.code, (span.path, span.start, span.end) if span is not None else None, finding.message


@dataclass(frozen=True)
class Model:
    """The network of one case with its curves."""

    network: Network
    case: str = NOMINAL
    diagnostics: tuple[Diagnostic, ...] = field(default=(), compare=False)
    """Warnings and notes that the design has not, because of values given in a call."""

    def __repr__(self) -> str:
        return f"<Model {self.network.title!r}, case {self.case}, {len(self.network.parts)} parts>"

    @cached_property
    def response(self) -> Response:
        """Curves at any frequency, planned once."""
        from nodal.response import Response

        return Response(self.network)

    def sweep(self, frequencies: ArrayLike, *, drive: str | None = None) -> Sweep:
        """Readings, contacts and nodes at `frequencies` (Hz, any shape, 0 included), per unit of the drive.

        Raises KeyError for a drive that does not exist, ValueError where a drive has to be chosen or a
        frequency is negative or not finite.
        """
        f = np.asarray(frequencies, dtype=np.float64)
        if not (np.isfinite(f) & (f >= 0)).all():
            raise ValueError("frequencies have to be finite numbers of hertz, zero or more")
        return Sweep(self, f, self.drive(drive))

    def edge(
        self, *, drive: str | None = None, ramp: float | None = None, window: float | None = None
    ) -> EdgeResponse:
        """Readings and contacts after an edge, in volts: the file's, or one of duration `ramp` (s, 0 for an
        ideal step) watched for `window` seconds.

        Raises `nodal.response.Unavailable` where there is none, and as `sweep` does.
        """
        from nodal.edge import edge_response
        from nodal.figures import edge as figures
        from nodal.network import Stimulus
        from nodal.response import Unavailable

        chosen, own = self.drive(drive), self.network.stimulus
        if ramp is None and window is None:
            found = edge_response(self.network, drive=chosen)
            figures.keep(self.response, found)
            return found
        if own is None and window is None:
            raise Unavailable("the file has no edge, so that `window` has to be given")
        stimulus = Stimulus(
            ramp if ramp is not None else own.ramp if own else 0.0, window or (own.window if own else 0.0)
        )
        return edge_response(self.network, drive=chosen, stimulus=stimulus)

    def poles(self, *, drive: str | None = None, lumped: bool = False) -> PolesAndZeros:
        """Poles of the network and zeros of its readings. See `nodal.poles.poles_and_zeros`."""
        from nodal.poles import poles_and_zeros

        return poles_and_zeros(self.network, self.drive(drive), lumped=lumped)

    def drive(self, name: str | None = None) -> str:
        """The drive of that name, or the default one; ValueError where there is none."""
        known = [drive.name for drive in self.network.drives]
        chosen = name or self.network.default_drive
        if chosen is None:
            raise ValueError("several sources and no drive: choose one of " + ", ".join(known))
        if chosen not in known:
            raise KeyError(f"no drive {chosen!r}; {nearest(chosen, known)}")
        return chosen


@dataclass(frozen=True)
class Sweep:
    """Curves at the given frequencies; complex arrays of their shape, per unit of the drive.

    A name that does not exist is a KeyError that says which is nearest.
    """

    model: Model
    frequencies: NDArray[np.float64]
    """Hz."""
    drive: str

    def __repr__(self) -> str:
        return f"<Sweep of {self.model!r}, {self.frequencies.size} frequencies, drive {self.drive}>"

    def reading(self, name: str) -> NDArray[np.complex128]:
        """What a reading displays, `times` included."""
        _known("reading", name, [reading.name for reading in self.model.network.readings])
        return self.model.response.reading(self.frequencies, name, self.drive).values

    def voltage(self, node: str) -> NDArray[np.complex128]:
        """V: a node against ground."""
        _known("node", node, self.model.network.nodes)
        return self.model.response.node(self.frequencies, node, self.drive).values

    def impedance(self, contact: str) -> NDArray[np.complex128]:
        """Ω: the chain alone seen at a contact."""
        self._contact(contact)
        return self.model.response.impedance(self.frequencies, contact).values

    def loaded(self, contact: str) -> NDArray[np.complex128]:
        """V: at a contact with the chain connected."""
        self._contact(contact)
        return self.model.response.loaded(self.frequencies, contact, self.drive).values

    def undisturbed(self, contact: str) -> NDArray[np.complex128]:
        """V: at a contact of the circuit alone. Raises `nodal.response.Unavailable` where there is none."""
        self._contact(contact)
        return self.model.response.undisturbed(self.frequencies, contact, self.drive).values

    def _contact(self, name: str) -> None:
        _known("contact", name, [contact.name for contact in self.model.network.contacts])


def _known(kind: str, name: str, names: Sequence[str]) -> None:
    if name not in names:
        raise KeyError(f"no {kind} {name!r}; {nearest(name, names)}")
