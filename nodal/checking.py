"""`nodal check` and `nodal record` for files: each is read, solved and answered for on its own.

A file that neither declares a source or a reading nor includes one that does is a shared file, there to be
included by others: only its text is checked.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Future, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field, replace
from typing import Literal, TypeVar

from nodal import records
from nodal.checks import Checks, RequirementResult
from nodal.design import Design, distinct, load
from nodal.files import replace_file
from nodal.language import syntax
from nodal.language.diagnostics import Collector, DesignError, Diagnostic
from nodal.language.files import Disk
from nodal.language.parse import parse, read
from nodal.language.program import Program, gather
from nodal.paths import STANDARD_INPUT

Kind = Literal["design", "shared", "broken"]

_FEWEST = 3
"""Files that are worth starting processes for."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """What a call asks of every file."""

    cases: tuple[str, ...] = ()
    """Empty: all. Those that a file does not have are passed over."""
    lets: Mapping[str, str] = field(default_factory=dict)
    """With values other than the file's, records are not looked at."""
    solve: bool = True


@dataclass(frozen=True, slots=True)
class CheckAnswer:
    """What came of one file. `diagnostics` hold its errors and warnings, with texts in `sources`."""

    path: str
    kind: Kind
    diagnostics: tuple[Diagnostic, ...]
    sources: dict[str, str] = field(repr=False)
    cases: tuple[str, ...] = ()
    """All that the design has."""
    checked: tuple[str, ...] = ()
    """Those that were checked."""
    requirements: tuple[RequirementResult, ...] = ()
    unsolved: int = 0
    """How many requirements were not evaluated, because nothing was to be solved."""
    record: str | None = None
    """The file of recorded figures that was compared."""
    changes: tuple[records.Change, ...] = ()
    estimates: dict[str, float] = field(default_factory=dict)
    """Worst estimated relative error of the curves behind the figures, by case."""

    @property
    def status(self) -> int:
        """0 all well, 1 a requirement or a recorded figure failed, 2 an error."""
        broken = any(d.severity == "error" for d in self.diagnostics)
        if broken or any(result.status == "error" for result in self.requirements):
            return 2
        failed = any(result.status == "fail" for result in self.requirements)
        return 1 if failed or self.changes else 0


@dataclass(frozen=True, slots=True)
class RecordAnswer:
    """What `nodal record` did for one file; `changes` are what the record did not say before."""

    path: str
    kind: Kind
    diagnostics: tuple[Diagnostic, ...]
    sources: dict[str, str] = field(repr=False)
    record: str = ""
    figures: int = 0
    """How many the record holds."""
    changes: tuple[records.Change, ...] = ()
    written: bool = False

    @property
    def status(self) -> int:
        return 2 if any(d.severity == "error" for d in self.diagnostics) else 0


# One file


def check_file(path: str, wanted: Wanted) -> CheckAnswer:
    """Check one design; what is wrong with it is part of the answer."""
    design, kind, diagnostics, sources = _loaded(path)
    if design is None:
        return CheckAnswer(path, kind, diagnostics, sources)
    cases = tuple(case for case in design.cases if not wanted.cases or case in wanted.cases)
    checks = Checks(design, wanted.lets)
    answer = CheckAnswer(path, "design", diagnostics, sources, design.cases, cases)
    try:
        items = checks.items(cases)
        if not wanted.solve:
            return replace(answer, unsolved=len(items))
        answer = replace(answer, requirements=tuple(checks.result(item) for item in items))
        record = None
        if path != STANDARD_INPUT and not wanted.lets:
            record = records.load(records.record_path(path))
        if record is not None:
            from nodal.measured import measure

            changes = records.compare(record, measure(checks, cases), design.cases)
            answer = replace(answer, record=record.path, changes=tuple(changes))
        estimates = {case: checks.response(case).quality.worst_estimated_error for case in cases}
        answer = replace(answer, estimates=estimates)
    except DesignError as error:
        answer = replace(
            answer,
            kind="broken",
            diagnostics=(*diagnostics, *error.diagnostics),
            sources={**sources, **error.sources},
        )
    return answer


def record_file(path: str) -> RecordAnswer:
    """Bring the record beside one design up to date, or make it; a file that already holds is not touched."""
    design, kind, diagnostics, sources = _loaded(path)
    if design is None:
        return RecordAnswer(path, kind, diagnostics, sources)
    target = records.record_path(path)
    try:
        return record_design(Checks(design), target)
    except DesignError as error:
        return RecordAnswer(
            path, "broken", (*diagnostics, *error.diagnostics), {**sources, **error.sources}, target
        )


def record_design(checks: Checks, target: str) -> RecordAnswer:
    """Bring the record in the file `target` up to date with a design. DesignError where it cannot be read or
    written."""
    from nodal.measured import measure

    design = checks.design
    record = records.load(target)
    measured = measure(checks)
    count = sum(len(figures) for figures in measured.values())
    changes = records.compare(record or records.empty(target), measured)
    text = records.update(record, measured, os.path.basename(design.path))
    written = text != record.text if record is not None else count > 0
    if written:
        _write(target, text)
    found = tuple(design.diagnostics)
    return RecordAnswer(design.path, "design", found, design.sources, target, count, tuple(changes), written)


def is_shared(path: str) -> bool:
    """Whether a file is there to be included by others: no source and no reading stands in it or in what it
    includes. False for a file whose text has errors."""
    collector = Collector()
    program = _program(path, collector)
    return program is not None and not collector.failed and not _judgeable(program)


def _loaded(path: str) -> tuple[Design | None, Kind, tuple[Diagnostic, ...], dict[str, str]]:
    try:
        design = load(path)
    except DesignError as error:
        if path != STANDARD_INPUT and is_shared(path):
            return None, "shared", (), {}
        return None, "broken", tuple(error.diagnostics), error.sources
    return design, "design", tuple(design.diagnostics), design.sources


def _program(path: str, collector: Collector) -> Program | None:
    text = read(path, collector)
    if text is None:
        return None
    collector.sources[path] = text
    return gather(parse(text, path, collector), collector, parse, Disk(path))


def _judgeable(program: Program) -> bool:
    """Whether there is anything to be measured: a source or a reading."""
    statements = [item.statement for item in program.items]
    waiting = [statement for case in program.cases.values() for statement in case.body]
    while waiting:
        statement = waiting.pop()
        statements.append(statement)
        if isinstance(statement, syntax.UnderTest):
            waiting.extend(statement.body)
    return any(isinstance(statement, syntax.Source | syntax.Reading) for statement in statements)


def _write(path: str, text: str) -> None:
    try:
        replace_file(path, text)
    except OSError as error:
        reason = error.strerror or str(error)
        collector = Collector()
        collector.add("cannot-write", None, path=path, reason=reason[:1].lower() + reason[1:], hint="")
        raise DesignError(collector.found, {}) from error


# Several files

_Answer = TypeVar("_Answer")


def check_files(paths: Sequence[str], wanted: Wanted, jobs: int | None = None) -> Iterator[CheckAnswer]:
    """Answers in the order of `paths`, from up to `jobs` processes (None: one for each processor)."""
    return _each(_CheckWith(wanted), paths, jobs if wanted.solve else 1)


def record_files(paths: Sequence[str], jobs: int | None = None) -> Iterator[RecordAnswer]:
    """See `check_files`."""
    return _each(record_file, paths, jobs)


@dataclass(frozen=True, slots=True)
class _CheckWith:
    """`check_file` with its second argument, in a form that can be sent to a process."""

    wanted: Wanted

    def __call__(self, path: str) -> CheckAnswer:
        return check_file(path, self.wanted)


def _each(work: Callable[[str], _Answer], paths: Sequence[str], jobs: int | None) -> Iterator[_Answer]:
    workers = min(jobs or _processors(), len(paths))
    if workers < 2 or len(paths) < _FEWEST:
        yield from map(work, paths)
        return
    methods = multiprocessing.get_all_start_methods()
    context = multiprocessing.get_context("forkserver" if "forkserver" in methods else "spawn")
    others = set(multiprocessing.active_children())
    pool = ProcessPoolExecutor(workers, context, initializer=_start)
    try:
        with _uninterrupted():
            # Standard input belongs to this process.
            started: list[Future[_Answer] | None] = [
                None if path == STANDARD_INPUT else pool.submit(work, path) for path in paths
            ]
        for path, future in zip(paths, started, strict=True):
            yield work(path) if future is None else future.result()
    except BrokenProcessPool as error:
        collector = Collector()
        collector.add("process-died", None)
        raise DesignError(collector.found, {}) from error
    except BaseException:
        for child in set(multiprocessing.active_children()) - others:
            child.terminate()
        raise
    finally:
        pool.shutdown(wait=False, cancel_futures=True)


@contextlib.contextmanager
def _uninterrupted() -> Iterator[None]:
    """Processes that are started in here are not interrupted from the terminal before they are set up."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    handler = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, handler)


def _start() -> None:
    """An interrupt ends a worker without a word; the process that started it says what there is to say."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)


def _processors() -> int:
    """How many this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def found(
    answers: Sequence[CheckAnswer | RecordAnswer], collector: Collector, *, warnings: bool
) -> tuple[list[Diagnostic], dict[str, str]]:
    """The diagnostics of all files and of `collector`, each once (files share what they include), with the
    texts they point into."""
    sources = dict(collector.sources)
    for answer in answers:
        sources |= answer.sources
    every = [*collector.found, *(d for answer in answers for d in answer.diagnostics)]
    return distinct(d for d in every if warnings or d.severity == "error"), sources


def worst(answers: Iterable[CheckAnswer | RecordAnswer]) -> int:
    """The status of several files together: that of the worst."""
    return max((answer.status for answer in answers), default=0)
