"""From statements to the flat network of one case. The order of lines does not matter."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import NoReturn

from nodal.language import syntax, units
from nodal.language.amplifiers import expand_amplifier
from nodal.language.assemblies import (
    bind_nodes,
    check_assemblies,
    check_size,
    evaluate_arguments,
    inner_scope,
    section_count,
)
from nodal.language.builder import MOST_PARTS, NetworkBuilder, TooLarge
from nodal.language.cables import StockData, expand_cable, work_out_stock
from nodal.language.diagnostics import Collector
from nodal.language.evaluate import SPREAD, Evaluator
from nodal.language.frame import Frame
from nodal.language.networks import expand_network
from nodal.language.program import Item, Program, case_items, name_of
from nodal.language.quantity import Quantity, number, randomised
from nodal.language.repeat import Mark, Section, repeatable
from nodal.language.requirements import resolve_requirement
from nodal.language.scope import Binding, Rejected, Scope, nearest
from nodal.network import Contact, Drive, Network, Reading, Stimulus, SweepGrid, of_any_section
from nodal.parts.base import Part
from nodal.parts.coupling import Coupling
from nodal.parts.inductor import Inductor
from nodal.parts.source import CurrentSource, VoltageSource

MOST_POINTS = 2_000_000
MOST_TEXT = 16_777_216
"""Characters of assemblies worked out, each as often as it is used; equal sections of a chain count once."""
MOST_JOINED = 2_000_000
"""Nodes that uses of assemblies are connected by."""
FREEZING = 273.15
"""0 °C in K."""
ROOM = 296.15
"""K: 23 °C, where nothing else is said."""

Override = float | syntax.Expression
"""A let's or an argument's value from outside: a number in SI units, or an expression."""


@dataclass(slots=True)
class Expanded:
    """A case's network, None where it has errors; which names it made use of, what its lets come to, and
    where each place and chain was written (by its whole name without numbers of sections)."""

    network: Network | None
    used: set[str] = field(default_factory=set)
    lets: dict[str, Quantity] = field(default_factory=dict)
    uses: dict[str, syntax.Span] = field(default_factory=dict)


def expand(
    program: Program, case: str, collector: Collector, overrides: Mapping[str, Override] | None = None
) -> Expanded:
    """The network of one case; mistakes go to the collector. `overrides` win over every `let` and
    argument."""
    return _Expansion(program, case, collector, overrides or {}).run()


class _Expansion:
    def __init__(
        self, program: Program, case: str, collector: Collector, overrides: Mapping[str, Override]
    ) -> None:
        self.program = program
        self.case = case
        self.collector = collector
        self.before = len(collector.found)
        self.evaluator = Evaluator(collector, program.lost)
        self.builder = NetworkBuilder(collector)
        self.overrides = overrides
        self.items = case_items(program, case, collector)
        self.splits = program.splits or any(item.under_test for item in self.items)
        self.scope = Scope()
        self.top = Frame(self.builder, self.evaluator, self.scope)
        self.stocks: dict[str, syntax.Stock] = {}
        self.stock_data: dict[str, StockData | None] = {}
        self.assemblies: dict[str, syntax.Assembly] = {}
        self.arguments: dict[str, tuple[syntax.Word | None, Quantity | float | None]] = {}
        """Values for the arguments of places, by their dotted name, and where each was written."""
        self.uses: dict[str, syntax.Span] = {}
        """Where each place and chain was written, by its whole name without numbers of sections."""
        self.known_arguments: set[str] = set()
        self.singled_out: set[str] = set()
        """Places and sections for whose inside a value is given."""
        self.couplings: list[tuple[syntax.Coupling, Frame, tuple[tuple[syntax.Span, str], ...]]] = []
        """Each with its frame and the uses around it; worked out when all inductors are there."""
        self.inside: dict[str, list[Part]] = {}
        """Parts of each branch, once couplings ask."""
        self.pending = 1
        """How many times what is being expanded will be repeated by the chains around it."""
        self.pending_text = 1
        """How many times it will be worked out anew."""
        self.written = 0
        self.joined = 0
        """Characters and nodes of the assemblies used so far; see `check_effort`."""
        self.contacts: dict[str, Contact] = {}
        self.readings: dict[str, Reading] = {}
        self.sources: dict[str, str] = {}
        """Unit of each source by name."""
        self.drives: dict[str, Drive] = {}
        self.first_drive: str | None = None
        self.used_names: set[str] = set()

    def run(self) -> Expanded:
        try:
            self.definitions()
            self.parts()
            self.all_couplings()
            self.check_arguments()
            self.observers()
            network = self.network()
            self.idle_stocks()
        except TooLarge:
            network = None
        failed = self.failed_since(self.before)
        lets = {name: let.value for name, let in self.scope.lets.items() if let.value is not None}
        return Expanded(None if failed else network, self.used_names | self.scope.used, lets, self.uses)

    def each(self, *kinds: type) -> Iterable[Item]:
        return [item for item in self.items if isinstance(item.statement, kinds)]

    @staticmethod
    def guarded(action: Callable[..., object], *arguments: object) -> None:
        """What is wrong with one statement does not keep the next from being looked at."""
        try:
            action(*arguments)
        except Rejected:
            return

    # Values, stocks and assemblies

    def definitions(self) -> None:
        dotted: list[syntax.Let] = []
        for item in self.each(syntax.Let, syntax.Stock, syntax.Assembly):
            statement = item.statement
            if isinstance(statement, syntax.Stock):
                self.stocks[statement.name.text] = statement
            elif isinstance(statement, syntax.Assembly):
                self.assemblies[statement.name.text] = statement
            elif isinstance(statement, syntax.Let):
                if "." in statement.name.text:
                    dotted.append(statement)
                else:
                    self.scope.lets[statement.name.text] = Binding(statement.name, statement.value)
        self.scope.settle(self.let, self.evaluator.circle)
        for statement in dotted:
            try:
                value = self.evaluator.value(statement.value, self.scope, None, SPREAD)
            except Rejected:
                self.arguments[statement.name.text] = (statement.name, None)
            else:
                self.arguments[statement.name.text] = (statement.name, value)
        for name, override in self.overrides.items():
            if "." in name:
                self.arguments[name] = (None, self.argument(override))
        for name in self.arguments:
            steps = name.split(".")
            self.singled_out.update(".".join(steps[:depth]) for depth in range(1, len(steps)))
        for name in check_assemblies(self.assemblies, self.collector):
            del self.assemblies[name]
        check_size(self.assemblies, (item.statement for item in self.items), self.collector)

    def let(self, binding: Binding, scope: Scope) -> Quantity:
        name = binding.word.text
        quantity = self.evaluator.let(binding, scope)
        if scope is self.scope and name in self.overrides:
            quantity = self.overriding(self.overrides[name], quantity)
        return randomised(quantity, scope.prefix + name)

    def overriding(self, override: Override, written: Quantity) -> Quantity:
        """A value from outside, in the dimension of what was written."""
        if isinstance(override, int | float):
            return number(float(override), written.dimension)
        return self.evaluator.value(override, self.scope, written.dimension, SPREAD)

    def argument(self, override: Override) -> Quantity | float | None:
        """A place's argument from outside; a number takes its dimension from the place."""
        if isinstance(override, int | float):
            return float(override)
        try:
            return self.evaluator.value(override, self.scope, None, SPREAD)
        except Rejected:
            return None

    # Parts

    def parts(self) -> None:
        for item in self.items:
            statement, before = item.statement, len(self.collector.found)
            self.top.side = "test" if item.under_test else "chain"
            if isinstance(statement, syntax.Source):
                self.guarded(self.source, statement, item)
            else:
                self.guarded(self.piece, statement, self.top)
            name = name_of(statement)
            if name is not None and self.failed_since(before):
                self.evaluator.lost |= {name.text}  # what should be inside is missing, and that has been said
        self.top.side = "chain"

    def failed_since(self, before: int) -> bool:
        """Whether an error is among the findings from this one on."""
        return any(finding.severity == "error" for finding in self.collector.found[before:])

    def name_nodes(self, use: syntax.Use, frame: Frame) -> None:
        """The nodes of a use exist, whatever may be wrong with it."""
        for word in (*use.left, *use.right, *use.shared):
            if "." not in word.text:
                frame.node(word)

    def piece(self, statement: syntax.Statement, frame: Frame) -> None:
        """Statements that may stand in an assembly too."""
        match statement:
            case syntax.Branch(name=name, nodes=(first, second), network=network):
                a, b = frame.node(first), frame.node(second)
                expand_network(network, a, b, frame.prefix + name.text, frame)
            case syntax.Cable():
                expand_cable(statement, self.stock(statement.stock), frame)
            case syntax.Amplifier():
                expand_amplifier(statement, frame)
            case syntax.Coupling():
                self.couplings.append((statement, replace(frame), tuple(self.evaluator.uses)))
            case syntax.Place():
                self.place(statement, frame)
            case syntax.Chain():
                self.chain(statement, frame)

    def stock(self, word: syntax.Word) -> StockData:
        name = word.text
        if name not in self.stocks:
            self.evaluator.unknown("stock", word.span, name, self.stocks)
        self.used_names.add(name)
        if name not in self.stock_data:
            self.stock_data[name] = None
            self.stock_data[name] = work_out_stock(self.stocks[name], self.evaluator, self.scope)
        data = self.stock_data[name]
        if data is None:
            raise Rejected
        return data

    def idle_stocks(self) -> None:
        """Reports what is wrong with stocks that no cable is cut from; what they name counts as unused."""
        used = set(self.scope.used)
        for name, stock in self.stocks.items():
            if name not in self.stock_data:
                self.guarded(work_out_stock, stock, self.evaluator, self.scope)
        self.scope.used = used

    def source(self, source: syntax.Source, item: Item) -> None:
        name = source.name.text
        evaluator, builder, frame = self.evaluator, self.builder, self.top
        if self.splits and not item.under_test:
            evaluator.report("source-outside", source.name.span, source=name)
        frame.side = "test"
        a, b = (frame.node(word) for word in source.nodes)
        value = evaluator.value(source.value, self.scope, (units.VOLT, units.AMPERE), SPREAD)
        unit = units.unit_name(value.dimension)
        self.sources[name] = unit
        right = "behind" if unit == "V" else "shunted by"
        if source.relation is not None and source.relation != right:
            assert source.network is not None
            evaluator.reject(
                "source-network", source.network.span, unit=unit, right=right, wrong=source.relation
            )
        place = builder.place(source.span)
        if unit == "A":
            part = CurrentSource(name, a, b, value.value, (a, b), side="test", place=place)
            builder.add(part, source.span)
            if source.network is not None:
                expand_network(source.network, a, b, name, frame)
            return
        inner = a
        if source.network is not None:
            inner = builder.node(f"{name}.emf", source.span)
            expand_network(source.network, a, inner, name, frame)
        builder.add(VoltageSource(name, inner, b, value.value, (a, b), side="test", place=place), source.span)

    # Assemblies

    def assembly(self, use: syntax.Use) -> syntax.Assembly:
        name = use.assembly.text
        if name not in self.assemblies:
            if any(
                isinstance(i.statement, syntax.Assembly) and i.statement.name.text == name for i in self.items
            ):
                raise Rejected  # it uses itself, which has been reported
            self.evaluator.unknown("assembly", use.assembly.span, name, self.assemblies)
        self.used_names.add(name)
        return self.assemblies[name]

    def overridden(self, place: str, assembly: syntax.Assembly) -> dict[str, Quantity | float | None]:
        """Arguments of a place that a case or the caller sets."""
        found = {}
        for parameter in assembly.parameters:
            name = f"{place}.{parameter.name.text}"
            self.known_arguments.add(name)
            if name in self.arguments:
                found[parameter.name.text] = self.arguments[name][1]
        return found

    def place(self, place: syntax.Place, frame: Frame) -> None:
        name = frame.prefix + place.name.text
        self.name_nodes(place.use, frame)
        assembly = self.assembly(place.use)
        arguments = evaluate_arguments(place.use, assembly, frame, self.overridden(name, assembly))
        left, right, shared = bind_nodes(place.use, assembly, frame)
        self.check_effort(assembly, 1, place.use.span)
        self.evaluator.uses.append((place.use.span, f"used here as {name}"))
        self.uses[of_any_section(name)] = place.use.span
        try:
            self.section(assembly, f"{name}.", frame, left, right, shared, arguments)
        finally:
            self.evaluator.uses.pop()

    def chain(self, chain: syntax.Chain, frame: Frame) -> None:
        name = frame.prefix + chain.name.text
        self.name_nodes(chain.use, frame)
        assembly = self.assembly(chain.use)
        count = section_count(chain, self.evaluator, frame.scope)
        if len(assembly.left) != len(assembly.right):
            self.evaluator.reject(
                "chain-ends",
                chain.use.span,
                assembly=assembly.name.text,
                left=len(assembly.left),
                right=len(assembly.right),
            )
        own_overrides = self.overridden(name, assembly)
        arguments = evaluate_arguments(chain.use, assembly, frame, own_overrides)
        ends = bind_nodes(chain.use, assembly, frame)
        self.check_effort(assembly, count, chain.count.span)
        self.evaluator.uses.append((chain.use.span, f"used here as {name}"))
        self.uses[of_any_section(name)] = chain.use.span
        try:
            self.sections(chain, assembly, count, frame, ends, arguments, own_overrides)
        finally:
            self.evaluator.uses.pop()

    def sections(
        self,
        chain: syntax.Chain,
        assembly: syntax.Assembly,
        count: int,
        frame: Frame,
        ends_of_chain: tuple[list[int], list[int], list[int]],
        arguments: Mapping[str, Quantity | None],
        own_overrides: Mapping[str, Quantity | float | None],
    ) -> None:
        """All sections of a chain. The second is the pattern of those behind it but the last.

        Not of those for which a value comes from outside. The first and the last have outer nodes, which may
        be shared ones too, so that an index would not tell what a node is to them.
        """
        left, right, shared = ends_of_chain
        name = frame.prefix + chain.name.text
        errors, parts = len(self.collector.found), len(self.builder.parts)
        pattern: Section | None = None
        pattern_ends: list[int] = []
        alike = repeatable(assembly, self.assemblies)
        anew = 1 if alike else count
        self.pending *= count
        self.pending_text *= anew
        for position in range(1, count + 1):
            inner = f"{name}.{position}."
            ends = right
            if position < count:
                ends = [self.builder.node(inner + word.text, chain.use.span) for word in assembly.right]
            special = inner[:-1] in self.singled_out
            if pattern is not None and position < count and not special:
                pattern.repeat(inner, dict(zip(pattern_ends, (*left, *ends), strict=True)))
            else:
                own = arguments
                if special:
                    here = {**own_overrides, **self.overridden(inner[:-1], assembly)}
                    own = evaluate_arguments(chain.use, assembly, frame, here)
                before = Mark.of(self.builder)
                self.section(assembly, inner, frame, left, ends, shared, own)
                if alike and 1 < position < count and not special:
                    pattern, pattern_ends = Section(self.builder, before, inner), [*left, *ends]
            left = ends
            if position == 1:
                self.pending //= count
                self.pending_text //= anew
                added = max(1, len(self.builder.parts) - parts)
                if parts + added * count * self.pending > MOST_PARTS:
                    self.evaluator.report("too-many-parts", chain.count.span, limit=f"{MOST_PARTS:,}")
                    raise TooLarge
            if self.failed_since(errors):
                break  # the other sections would say the same

    def check_effort(self, assembly: syntax.Assembly, count: int, span: syntax.Span) -> None:
        """TooLarge, reported, where assemblies are used more than a design of the largest size needs."""
        nodes = len(assembly.left) + len(assembly.right) + len(assembly.shared)
        text = assembly.span.end - assembly.span.start
        if count * self.pending > MOST_PARTS:
            self.evaluator.report("too-many-parts", span, limit=f"{MOST_PARTS:,}")
            raise TooLarge
        if not repeatable(assembly, self.assemblies):
            text *= count
        self.written += text
        self.joined += nodes * count
        if self.written + text * (self.pending_text - 1) > MOST_TEXT:
            self.evaluator.report("too-much-text", span, limit=f"{MOST_TEXT:,}")
            raise TooLarge
        if self.joined + nodes * count * (self.pending - 1) > MOST_JOINED:
            self.evaluator.report("too-many-nodes", span, limit=f"{MOST_JOINED:,}")
            raise TooLarge

    def section(
        self,
        assembly: syntax.Assembly,
        prefix: str,
        frame: Frame,
        left: list[int],
        right: list[int],
        shared: list[int],
        arguments: Mapping[str, Quantity | None],
    ) -> None:
        words = (*assembly.left, *assembly.right, *assembly.shared)
        nodes = {word.text: index for word, index in zip(words, (*left, *right, *shared), strict=True)}
        scope = inner_scope(assembly, self.scope, prefix)
        for name, value in arguments.items():
            scope.lets.pop(name, None)
            scope.values[name] = None if value is None else randomised(value, prefix + name)
        if scope.lets:
            scope.settle(self.let, self.evaluator.circle)
        for name, index in nodes.items():
            self.builder.aliases[prefix + name] = index
        inner = Frame(self.builder, self.evaluator, scope, prefix, nodes, frame.side)
        for statement in assembly.body:
            self.guarded(self.piece, statement, inner)

    def check_arguments(self) -> None:
        """Reports values set for arguments that no place has."""
        for name, (word, _) in self.arguments.items():
            if name in self.known_arguments:
                continue
            if word is not None:
                self.guarded(
                    self.evaluator.unknown, "argument of a place", word.span, name, self.known_arguments
                )
            else:
                self.unknown_override(name)
        for name in self.overrides:
            if "." not in name and name not in self.scope.lets:
                self.unknown_override(name)

    def unknown_override(self, name: str) -> None:
        known = [*self.scope.lets, *self.known_arguments]
        self.collector.add("unknown-let", None, unknown=name, hint=nearest(name, known))

    # Couplings

    def all_couplings(self) -> None:
        for part in self.builder.parts if self.couplings else ():
            self.inside.setdefault(part.name.rpartition(".")[0], []).append(part)
        pairs: dict[frozenset[str], syntax.Coupling] = {}
        for coupling, frame, uses in self.couplings:
            self.evaluator.uses = list(uses)
            self.guarded(self.coupling, coupling, frame, pairs)
        self.evaluator.uses = []

    def coupling(
        self, coupling: syntax.Coupling, frame: Frame, pairs: dict[frozenset[str], syntax.Coupling]
    ) -> None:
        evaluator = self.evaluator
        first, second = self.inductor(coupling.first, frame), self.inductor(coupling.second, frame)
        if first.name == second.name:
            evaluator.reject("coupling-itself", coupling.second.span, inductor=first.name)
        pair = frozenset((first.name, second.name))
        if pair in pairs:
            evaluator.reject("coupling-twice", coupling.span, first=first.name, second=second.name)
        pairs[pair] = coupling
        value = evaluator.value(coupling.value, frame.scope, (units.HENRY, units.NONE), SPREAD)
        coefficient = value.dimension == units.NONE
        geometric = math.sqrt(first.value.nominal) * math.sqrt(second.value.nominal)
        limit = 1.0 if coefficient else geometric
        if abs(value.nominal) > limit * (1 + 1e-12):  # 1 written as a mutual inductance may round upward
            shown = "1" if coefficient else units.show(limit, "H")
            evaluator.reject(
                "coupling-beyond-one",
                coupling.value.span,
                limit=shown,
                found=units.show(value.nominal, units.unit_name(value.dimension)),
            )
        part = Coupling(
            frame.prefix + coupling.name.text, first.name, second.name, value.value, coefficient,
            side=first.side, place=self.builder.place(coupling.span),
        )  # fmt: skip
        self.builder.add(part, coupling.span)

    def inductor(self, word: syntax.Word, frame: Frame) -> Inductor:
        """The inductor meant: a part, or a branch that has just one."""
        name = frame.prefix + word.text
        part = self.builder.by_name.get(name)
        if isinstance(part, Inductor):
            return part
        if part is not None:
            self.evaluator.reject("coupling-without-inductor", word.span, word=word.text)
        inductors = [p for p in self.inside.get(name, ()) if isinstance(p, Inductor)]
        if len(inductors) != 1:
            self.no_inductor(word, frame, inductors)
        return inductors[0]

    def no_inductor(self, word: syntax.Word, frame: Frame, inductors: list[Inductor]) -> NoReturn:
        """Says why a word of a coupling means no single inductor."""
        if inductors:
            names = ", ".join(p.name[len(frame.prefix) :] for p in inductors[:8])
            self.evaluator.reject("coupling-ambiguous", word.span, word=word.text, names=names)
        declared = (name_of(item.statement) for item in self.items)
        branches = {name.text for name in declared if name is not None}
        if frame.prefix + word.text in self.inside or (not frame.prefix and word.text in branches):
            self.evaluator.reject("coupling-without-inductor", word.span, word=word.text)
        own = (p for p in self.builder.parts if isinstance(p, Inductor) and p.name.startswith(frame.prefix))
        self.evaluator.unknown("inductor", word.span, word.text, [p.name[len(frame.prefix) :] for p in own])

    # What is looked at

    def observers(self) -> None:
        for item in self.each(syntax.Contact):
            self.guarded(self.contact, item.statement)
        for item in self.each(syntax.Reading):
            self.guarded(self.reading, item.statement)
        if not self.contacts and len(self.sources) == 1 and not self.each(syntax.Contact):
            (name,) = self.sources
            part = self.builder.by_name.get(name)
            if isinstance(part, VoltageSource | CurrentSource) and part.terminals is not None:
                self.contacts[name] = Contact(name, *part.terminals, place=part.place)
        for name, unit in self.sources.items():
            part_place = self.builder.by_name[name].place if name in self.builder.by_name else None
            self.drives[name] = Drive(name, ((name, 1.0),), unit, part_place)
        for item in self.each(syntax.Drive):
            self.guarded(self.drive, item.statement)

    def contact(self, contact: syntax.Contact) -> None:
        for word in contact.nodes:
            if "." in word.text:
                self.evaluator.reject("inner-node", word.span, node=word.text)
        a, b = (self.top.read(word) for word in contact.nodes)
        name = contact.name.text
        self.contacts[name] = Contact(name, a, b, self.builder.place(contact.span))

    def reading(self, reading: syntax.Reading) -> None:
        a, b = (self.top.read(word) for word in reading.nodes)
        times, unit = number(1.0), "V"
        if reading.times is not None:
            times = self.evaluator.value(reading.times, self.scope, None, SPREAD)
            self.displayable(times, reading.times)
            unit = units.unit_name(units.multiply(units.VOLT, times.dimension))
        name = reading.name.text
        self.readings[name] = Reading(name, a, b, times.value, unit, self.builder.place(reading.span))

    def displayable(self, times: Quantity, expression: syntax.Expression) -> None:
        if any(times.dimension[5:]):
            self.evaluator.reject(
                "wrong-dimension",
                expression.span,
                expected="a number or a quantity such as 200 A/V",
                found=units.quantity_name(times.dimension),
            )
        if times.nominal == 0:
            self.evaluator.reject(
                "negative-value",
                expression.span,
                what="what a reading is multiplied by",
                value="0",
                bound="other than zero",
            )

    def drive(self, drive: syntax.Drive) -> None:
        name = drive.name.text
        weights: dict[str, float] = {}
        unit = ""
        for word, expression in drive.weights:
            if word.text not in self.sources:
                self.evaluator.unknown("source", word.span, word.text, self.sources)
            if word.text in weights:
                self.evaluator.reject("source-twice", word.span, source=word.text)
            own = self.sources[word.text]
            if unit and own != unit:
                self.evaluator.reject("mixed-drive", word.span, source=word.text, unit=own, other=unit)
            unit = own
            weights[word.text] = 1.0 if expression is None else self.top.plain(expression, units.NONE).nominal
        self.drives[name] = Drive(name, tuple(weights.items()), unit, self.builder.place(drive.span))
        if self.first_drive is None:
            self.first_drive = name

    # The whole

    def network(self) -> Network:
        grid: SweepGrid | None = None
        stimulus: Stimulus | None = None
        temperature = ROOM
        for item in self.each(syntax.Sweep, syntax.Edge, syntax.Temperature):
            try:
                match item.statement:
                    case syntax.Sweep():
                        grid = self.sweep(item.statement)
                    case syntax.Edge():
                        stimulus = self.edge(item.statement)
                    case syntax.Temperature():
                        temperature = self.temperature(item.statement)
            except Rejected:
                continue
        default = next(iter(self.sources)) if len(self.sources) == 1 else self.first_drive
        network = Network(
            tuple(self.builder.nodes), tuple(self.builder.parts), tuple(self.contacts.values()),
            tuple(self.readings.values()), tuple(self.drives.values()), default, grid, stimulus, temperature,
            allowed=self.allowed(), title=self.program.title(), node_places=self.builder.node_places,
        )  # fmt: skip
        return self.with_requirements(network)

    def with_requirements(self, network: Network) -> Network:
        found = []
        for item in self.each(syntax.Require):
            assert isinstance(item.statement, syntax.Require)
            try:
                found.append(resolve_requirement(item.statement, network, self.top))
            except Rejected:
                continue
        return replace(network, requirements=tuple(found))

    def sweep(self, sweep: syntax.Sweep) -> SweepGrid:
        low = self.evaluator.positive(sweep.low, self.scope, units.HERTZ, "the low end of a sweep").nominal
        high = self.evaluator.positive(sweep.high, self.scope, units.HERTZ, "the high end of a sweep").nominal
        per_decade = self.evaluator.positive(
            sweep.per_decade, self.scope, units.NONE, "points per decade"
        ).nominal
        if high <= low:
            self.evaluator.reject(
                "range-reversed", sweep.high.span, low=units.show(low, "Hz"), high=units.show(high, "Hz")
            )
        if per_decade * (math.log10(high) - math.log10(low)) + 2 > MOST_POINTS:
            self.evaluator.reject("sweep-too-long", sweep.per_decade.span, limit=f"{MOST_POINTS:,}")
        return SweepGrid(low, high, per_decade)

    def edge(self, edge: syntax.Edge) -> Stimulus:
        ramp = 0.0
        if edge.ramp is not None:
            ramp = self.evaluator.positive(edge.ramp, self.scope, units.SECOND, "an edge", zero=True).nominal
        window = self.evaluator.positive(edge.window, self.scope, units.SECOND, "the time watched").nominal
        top_at = None
        if edge.top_at is not None:
            top_at = self.evaluator.positive(
                edge.top_at, self.scope, units.SECOND, "the time of the top"
            ).nominal
        for time, expression in ((ramp, edge.ramp), (top_at, edge.top_at)):
            if time is not None and expression is not None and time > window:
                self.evaluator.reject(
                    "outside-window",
                    expression.span,
                    time=units.show(time, "s"),
                    window=units.show(window, "s"),
                )
        return Stimulus(ramp, window, top_at)

    def temperature(self, statement: syntax.Temperature) -> float:
        value = self.evaluator.value(statement.value, self.scope, (units.CELSIUS, units.KELVIN))
        kelvin = value.nominal + (FREEZING if value.dimension == units.CELSIUS else 0.0)
        if kelvin < 0:
            self.evaluator.reject(
                "negative-value",
                statement.value.span,
                what="an absolute temperature",
                value=units.show(kelvin, "K"),
                bound="zero or more",
            )
        return kelvin

    def allowed(self) -> frozenset[tuple[str, str]]:
        from nodal.language.codes import BY_CODE

        allowed = set()
        warnings = [row.code for row in BY_CODE.values() if row.severity == "warning"]
        for item in self.each(syntax.Allow):
            assert isinstance(item.statement, syntax.Allow)
            code = item.statement.code
            if code.text in warnings:
                allowed.add((code.text, of_any_section(item.statement.name.text)))
            else:
                self.guarded(self.evaluator.unknown, "warning", code.span, code.text, warnings)
        return frozenset(allowed)
