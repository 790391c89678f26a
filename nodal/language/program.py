"""From files to the statements of one case: includes are followed, names checked, cases applied."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

from nodal.language import syntax
from nodal.language.diagnostics import Collector
from nodal.language.files import Files, Outside, Unusable
from nodal.language.scope import nearest
from nodal.language.syntax import Span

NOMINAL = "nominal"
SUFFIX = ".nodal"
"""What the names of files end in. Nothing else is included: an error would show lines of it."""

Parser = Callable[[str, str, Collector], syntax.File]

_NAMED = (
    syntax.Let, syntax.Source, syntax.Branch, syntax.Coupling, syntax.Stock, syntax.Cable, syntax.Amplifier,
    syntax.Contact, syntax.Reading, syntax.Drive, syntax.Assembly, syntax.Place, syntax.Chain, syntax.Case,
    syntax.Require,
)  # fmt: skip
_ONCE: dict[type, str] = {
    syntax.Title: "title", syntax.Sweep: "sweep", syntax.Edge: "edge", syntax.Temperature: "temperature",
}  # fmt: skip
_PIECES = (
    syntax.Branch,
    syntax.Coupling,
    syntax.Cable,
    syntax.Amplifier,
    syntax.Place,
    syntax.Chain,
    syntax.Let,
)
"""What an assembly may hold."""
_CIRCUIT = (*_PIECES, syntax.Source, syntax.Stock, syntax.Assembly)
"""What may stand under test."""


def kind_of(statement: syntax.Statement) -> str:
    """The word a statement begins with."""
    if isinstance(statement, syntax.UnderTest):
        return "under test"
    if isinstance(statement, syntax.Edge) and statement.ramp is None:
        return "step"
    return type(statement).__name__.lower()


def name_of(statement: syntax.Statement) -> syntax.Word | None:
    """The name that a statement declares."""
    return statement.name if isinstance(statement, _NAMED) else None


@dataclass(frozen=True, slots=True)
class Item:
    """A statement of a design, and whether it stands under test."""

    statement: syntax.Statement
    under_test: bool = False


@dataclass(slots=True)
class Program:
    """A design's statements in reading order, includes in place of where they stand, cases apart."""

    path: str
    items: list[Item] = field(default_factory=list)
    cases: dict[str, syntax.Case] = field(default_factory=dict)
    splits: bool = False
    """Whether `under test` stands anywhere."""
    lost: frozenset[str] = frozenset()

    @property
    def case_names(self) -> tuple[str, ...]:
        """The cases, the file without any of them first."""
        return (NOMINAL, *(name for name in self.cases if name != NOMINAL))

    def title(self) -> str:
        """What `title` says; that of the main file."""
        for item in self.items:
            if isinstance(item.statement, syntax.Title):
                return item.statement.text
        return ""


def gather(file: syntax.File, collector: Collector, parse: Parser, files: Files) -> Program:
    """All statements of a design, includes found in `files`."""
    return _Gathering(file, collector, parse, files).program


class _Gathering:
    def __init__(self, file: syntax.File, collector: Collector, parse: Parser, files: Files) -> None:
        self.collector, self.parse, self.files = collector, parse, files
        self.program = Program(file.path, lost=file.lost)
        self.open: list[str] = [files.key(file.path)]
        """Keys of the files around what is being read."""
        self.seen: set[str] = set(self.open)
        self.declared: dict[str, syntax.Word] = {}
        self.once: dict[type, syntax.Statement] = {}
        self.file(file, main=True)

    def file(self, file: syntax.File, *, main: bool) -> None:
        for statement in file.statements:
            if isinstance(statement, syntax.Version):
                continue
            if isinstance(statement, syntax.Title) and not main:
                continue
            self.statement(statement, under_test=False, main=main)

    def statement(self, statement: syntax.Statement, *, under_test: bool, main: bool) -> None:
        match statement:
            case syntax.UnderTest(body=body):
                if under_test:
                    self.misplaced(statement, "inside under test")
                    return
                self.program.splits = True
                for inner in body:
                    if isinstance(inner, _CIRCUIT):
                        self.statement(inner, under_test=True, main=main)
                    else:
                        self.misplaced(inner, "inside under test")
            case syntax.Include():
                self.include(statement)
            case syntax.Omit():
                self.misplaced(statement, "outside a case")
            case syntax.Let(name=name) if "." in name.text:
                self.collector.add("dotted-let", name.span, name_=name.text)
            case _:
                if self.unique(statement):
                    if isinstance(statement, syntax.Case):
                        self.case(statement)
                    else:
                        if isinstance(statement, syntax.Assembly):
                            self.assembly(statement)
                        self.program.items.append(Item(statement, under_test))

    def misplaced(self, statement: syntax.Statement, where: str) -> None:
        word = kind_of(statement).partition(" ")[0]
        span = Span(statement.span.path, statement.span.start, statement.span.start + len(word))
        fix = "it belongs in a case" if isinstance(statement, syntax.Omit) else "move it out of the braces"
        self.collector.add("misplaced", span, kind=f"`{kind_of(statement)}`", where=where, fix=fix)

    def unique(self, statement: syntax.Statement) -> bool:
        word = name_of(statement)
        if word is not None:
            return _declare(word, self.declared, self.collector)
        if type(statement) in _ONCE:
            if type(statement) in self.once:
                related = [(_head(self.once[type(statement)]), "first here")]
                self.collector.add(
                    "given-twice", _head(statement), kind=_ONCE[type(statement)], related=related
                )
                return False
            self.once[type(statement)] = statement
        return True

    def case(self, case: syntax.Case) -> None:
        """Checks what holds for a case wherever it is used."""
        declared: dict[str, syntax.Word] = {}
        once: set[type] = set()
        for statement, under_test in _flat(case.body):
            wrong: tuple[type, ...] = (
                syntax.Version,
                syntax.Include,
                syntax.Case,
                syntax.Title,
                syntax.UnderTest,
            )
            if case.name.text == NOMINAL and not isinstance(statement, syntax.Require | syntax.Allow):
                self.misplaced(statement, "inside case nominal")
            elif isinstance(statement, wrong):
                self.misplaced(statement, "inside a case")
            elif under_test and not isinstance(statement, _CIRCUIT):
                self.misplaced(statement, "inside under test")
            elif type(statement) in once:
                self.collector.add("given-twice", _head(statement), kind=_ONCE[type(statement)], related=())
            else:
                named = statement.name if isinstance(statement, syntax.Omit) else name_of(statement)
                if named is not None and not _declare(named, declared, self.collector):
                    continue
                if type(statement) in _ONCE:
                    once.add(type(statement))
                if isinstance(statement, syntax.Assembly):
                    self.assembly(statement)
        self.program.cases[case.name.text] = case

    def assembly(self, assembly: syntax.Assembly) -> None:
        """Checks an assembly as written, whether or not it is used."""
        nodes: dict[str, syntax.Word] = {}
        for word in (*assembly.left, *assembly.right, *assembly.shared):
            if "." in word.text or word.text == "ground":
                self.collector.add("not-a-formal-node", word.span, node=word.text)
            else:
                _declare(word, nodes, self.collector)
        names: dict[str, syntax.Word] = {}
        for parameter in assembly.parameters:
            _declare(parameter.name, names, self.collector)
        for statement in assembly.body:
            if not isinstance(statement, _PIECES):
                self.misplaced(statement, "inside an assembly")
            elif isinstance(statement, syntax.Let) and "." in statement.name.text:
                self.collector.add("dotted-let", statement.name.span, name_=statement.name.text)
            else:
                declared = name_of(statement)
                if declared is not None:
                    _declare(declared, names, self.collector)

    def include(self, include: syntax.Include) -> None:
        target = include.target
        try:
            shown = self.files.beside(include.span.path, target)
            key = self.files.key(shown)
        except Outside:
            self.collector.add("include-outside", include.span, target=target, root=self.files.root)
            return
        except Unusable as why:
            self.collector.add("include-unreadable", include.span, target=target, reason=str(why))
            return
        if not key.endswith(SUFFIX):  # of the file that a link leads to
            reason = f"its name does not end in {SUFFIX}"
            self.collector.add("include-unreadable", include.span, target=target, reason=reason)
        elif key in self.open:
            circle = [*self.open[self.open.index(key) :], key]
            names = " -> ".join(os.path.basename(step) for step in circle)
            self.collector.add("include-loop", include.span, names=names)
        elif len(self.open) > 100:
            self.collector.add("include-too-deep", include.span)
        elif key not in self.seen:
            self.seen.add(key)
            problems = Collector()
            text = self.files.read(shown, problems)
            if text is None:
                reason = problems.found[0].message if problems.found else "it cannot be read"
                self.collector.add("include-unreadable", include.span, target=target, reason=reason)
                return
            self.collector.sources[shown] = text
            file = self.parse(text, shown, self.collector)
            self.program.lost |= file.lost
            self.open.append(key)
            self.file(file, main=False)
            self.open.pop()


def _flat(
    body: tuple[syntax.Statement, ...], under_test: bool = False
) -> Iterator[tuple[syntax.Statement, bool]]:
    """The statements of a case, those under test among them."""
    for statement in body:
        if isinstance(statement, syntax.UnderTest) and not under_test:
            yield from _flat(statement.body, True)
        else:
            yield statement, under_test


def _declare(word: syntax.Word, declared: dict[str, syntax.Word], collector: Collector) -> bool:
    first = declared.setdefault(word.text, word)
    if first is word:
        return True
    collector.add("duplicate-name", word.span, duplicate=word.text, related=[(first.span, "first here")])
    return False


def _head(statement: syntax.Statement) -> Span:
    """Where a statement begins: its first word, or up to its name."""
    span, word = statement.span, name_of(statement)
    end = word.span.end if word is not None else span.start + len(kind_of(statement))
    return Span(span.path, span.start, max(span.start, min(end, span.end)))


def case_items(program: Program, case: str, collector: Collector) -> list[Item]:
    """The statements of one case: what bears an existing name replaces it where that stands, the rest is
    added."""
    written = program.cases.get(case)
    if written is None:
        return program.items
    items = list(program.items)
    by_name: dict[str, int] = {}
    by_type: dict[type, int] = {}
    for position, item in enumerate(items):
        word = name_of(item.statement)
        if word is not None:
            by_name[word.text] = position
        elif type(item.statement) in _ONCE:
            by_type[type(item.statement)] = position
    gone: set[int] = set()
    added: list[Item] = []
    for statement, under_test in _flat(written.body):
        if isinstance(statement, syntax.Omit):
            position = by_name.get(statement.name.text, -1)
            if position < 0:
                if statement.name.text not in program.lost:
                    collector.add(
                        "unknown-name",
                        statement.name.span,
                        what="statement",
                        unknown=statement.name.text,
                        hint=nearest(statement.name.text, by_name),
                    )
            else:
                gone.add(position)
            continue
        word = name_of(statement)
        existing = by_name.get(word.text) if word is not None else by_type.get(type(statement))
        if existing is None:
            added.append(Item(statement, under_test))
        else:
            items[existing] = replace(
                items[existing], statement=statement, under_test=under_test or items[existing].under_test
            )
    return [item for position, item in enumerate(items) if position not in gone] + added
