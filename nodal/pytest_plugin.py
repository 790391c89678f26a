"""The pytest plugin: `pytest circuits/` holds designs to their requirements and to their recorded figures.

Each `.nodal` file gives an item for each requirement of each case (`spring_tip-flat`) and, where a record
stands beside it, one for the recorded figures of each case (`spring_tip-recorded-figures`). A file that is
only included by others gives none. Collecting reads files and checks their connections; whatever has to be
solved is solved by the first item that needs it, and kept for the others of its file.

Nothing of the package but this module is imported before such a file is met.
"""

from __future__ import annotations

import os
import warnings
from collections.abc import Generator, Iterable, Sequence
from dataclasses import replace
from fnmatch import fnmatchcase
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from nodal.checking import RecordAnswer
    from nodal.checks import Checks, RequirementItem
    from nodal.design import Design
    from nodal.language.diagnostics import Diagnostic
    from nodal.records import Record

__all__ = ["NodalWarning"]

SUFFIX = ".nodal"
RECORDED = "recorded-figures"
"""Names in designs hold no hyphen, so that no requirement can be called the same."""
_WRITTEN = "nodal_record"
"""The property that carries what was recorded from a worker to the process that reports."""


class NodalWarning(UserWarning):
    """A warning about a design, as `nodal check` gives it; filter it as any other warning of Python."""


class Unmet(Exception):
    """A requirement or a recorded figure that does not hold: `text` says it all, `brief` in half a line."""

    def __init__(self, text: str, brief: str, path: str, line: int) -> None:
        super().__init__(text)
        self.brief, self.path, self.line = brief, path, line


# Hooks


def pytest_addoption(parser: pytest.Parser) -> None:
    """Options of the command line and of the configuration file."""
    group = parser.getgroup("nodal", "designs of measuring chains (.nodal)")
    group.addoption(
        "--nodal-record", action="store_true",
        help="bring the recorded figures of the collected designs up to date instead of comparing with them",
    )  # fmt: skip
    parser.addini(
        "nodal_paths", type="args", default=[],
        help="folders, files, patterns, seen from the folder of this file: collect designs only from there",
    )  # fmt: skip
    parser.addini("nodal_cases", type="args", default=[], help="cases to check; all unless given")


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> DesignFile | None:
    """A collector for what ends in `.nodal` and is wanted."""
    if file_path.suffix != SUFFIX or not _wanted(file_path, parent):
        return None
    return DesignFile.from_parent(parent, path=file_path)


def _wanted(path: Path, parent: pytest.Collector) -> bool:
    """Whether the configuration names the file, or the call does, which overrules it."""
    config = parent.config
    patterns: Sequence[str] = config.getini("nodal_paths")
    if not patterns or parent.session.isinitpath(path):
        return True
    origin = config.inipath.parent if config.inipath is not None else config.rootpath
    relative = Path(os.path.relpath(path, origin)).as_posix()
    return any(_matches(relative, Path(pattern).as_posix()) for pattern in patterns)


def _matches(path: str, pattern: str) -> bool:
    return pattern == "." or f"{path}/".startswith(f"{pattern}/") or fnmatchcase(path, pattern)


@pytest.hookimpl(wrapper=True, optionalhook=True)
def pytest_xdist_make_scheduler(config: pytest.Config, log: Any) -> Generator[None, Any, Any]:
    """Keep what stands in one file on one worker where xdist would deal out items singly."""
    scheduler = yield
    from nodal.pytest_xdist import by_design

    return by_design(scheduler, config, log)


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """Names the records that were written."""
    reports = (report for reports in terminalreporter.stats.values() for report in reports)
    written = {
        text: None for report in reports
        for key, text in getattr(report, "user_properties", ()) if key == _WRITTEN
    }  # fmt: skip
    if written:
        terminalreporter.section("recorded figures")
        for text in written:
            terminalreporter.write_line(text)


# What is collected


class DesignFile(pytest.File):
    """A file with a design. The curves of its cases are shared by its items."""

    @cached_property
    def label(self) -> str:
        """What messages call the file: its path from where pytest was called, if that is still here."""
        start = self.config.invocation_params.dir
        if start != Path.cwd():
            return str(self.path)
        try:
            return os.path.relpath(self.path, start)
        except ValueError:  # on another drive
            return str(self.path)

    @cached_property
    def checks(self) -> Checks:
        """The design's requirements, cases and curves."""
        from nodal.checks import Checks

        return Checks(self._design)

    @cached_property
    def record_path(self) -> Path:
        """Where recorded figures are written."""
        from nodal.records import record_path

        return Path(record_path(str(self.path)))

    def collect(self) -> Iterable[pytest.Item]:
        """Items in the order of cases and lines, recorded figures last. DesignError for what is no design."""
        from nodal import records
        from nodal.checking import is_shared
        from nodal.design import DesignError, load

        try:
            self._design: Design = load(self.label)
            self._doubtful: set[str] = set()
        except DesignError:
            if is_shared(self.label):
                return
            raise
        self._warn()
        chosen: Sequence[str] = self.config.getini("nodal_cases")
        cases = [case for case in self._design.cases if not chosen or case in chosen]
        for asked in self.checks.items(cases):
            yield self._item(RequirementTest, f"{asked.case}-{asked.name}", asked=asked)
        record = records.load(records.record_path(self.label))
        if record is None and self.config.getoption("nodal_record"):
            record = records.empty(records.record_path(self.label))
        if record is not None:
            gone = [case for case in record.entries if case not in self._design.cases]
            cases += [case for case in gone if not chosen or case in chosen]
            for case in cases:
                yield self._item(RecordTest, f"{case}-{RECORDED}", case=case, record=record)

    def _item(self, kind: type[_Test], name: str, **given: Any) -> pytest.Item:
        item = kind.from_parent(self, name=name, **given)
        if self.config.pluginmanager.hasplugin("xdist"):
            item.add_marker(pytest.mark.xdist_group(self.nodeid))
        return item

    def _warn(self) -> None:
        from nodal.language.diagnostics import span_position

        for found in self._design.diagnostics:
            if found.severity == "warning":
                path, line = self.label, 1
                if found.span is not None:
                    path, line = found.span.path, span_position(found.span, self._design.sources)[0][0]
                warnings.warn_explicit(_said(found), NodalWarning, path, line)

    def warn_of_error(self, case: str) -> None:
        """Warns, once a case, where the curves behind its figures are less exact than they should be."""
        from nodal.report.checks import NOTEWORTHY

        worst = self.checks.response(case).quality.worst_estimated_error
        if worst > NOTEWORTHY and case not in self._doubtful:
            self._doubtful.add(case)
            said = f"{case}: worst estimated relative error of the curves behind its figures: {worst:.1e}"
            warnings.warn_explicit(said, NodalWarning, self.label, 1)

    def source_line(self, path: str, line: int) -> str:
        """Where a line stands, and its text as an excerpt shows it if that is known."""
        from nodal.language.diagnostics import Lines, visible

        text = self._design.sources.get(path)
        excerpt = f"\n{line:>5} | {visible(Lines(text).line(line))}" if text is not None and line else ""
        return f"{visible(path)}:{line}{excerpt}" if line else visible(path)

    def rewrite_record(self) -> RecordAnswer | None:
        """Bring the record up to date; None where that was done before."""
        from nodal.checking import record_design

        if self._rewritten:
            return None
        self._rewritten = True
        return record_design(self.checks, str(self.record_path))

    _rewritten = False

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """The diagnostics of a file with errors, without traceback."""
        told = _without_traceback(excinfo)
        return super().repr_failure(excinfo) if told is None else told


class _Test(pytest.Item):
    """What the items of a design share."""

    @property
    def file(self) -> DesignFile:
        assert isinstance(self.parent, DesignFile)
        return self.parent

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """What was asked and found, without traceback; the traceback for anything unforeseen."""
        error = excinfo.value
        if isinstance(error, Unmet):
            return _shown(excinfo.getrepr(style="value"), error)
        told = _without_traceback(excinfo)
        return super().repr_failure(excinfo, style) if told is None else told

    def _place(self, path: str, line: int) -> tuple[Path, int | None, str]:
        """What `reportinfo` gives: a path, a line counted from 0 (None: the whole file), a heading."""
        where = self.config.invocation_params.dir / path
        return where, line - 1 if line else None, f"{self.path.stem}: {self.name}"


class RequirementTest(_Test):
    """One requirement in one case."""

    def __init__(self, *, asked: RequirementItem, **given: Any) -> None:
        super().__init__(**given)
        self.asked = asked

    def runtest(self) -> None:
        """Raises Unmet where the requirement fails or its figure cannot be had."""
        from nodal.report.checks import found_text, margin_text

        result = self.file.checks.result(self.asked)
        self.file.warn_of_error(self.asked.case)
        if result.status == "pass":
            return
        found, margin = found_text(result), margin_text(result)
        rows = {"asked": f"{result.figure} {result.asked}"}
        if result.status == "fail":
            rows |= {"found": found, "margin": margin}
            brief = f"found {found}, margin {margin}"
        else:
            rows |= {"error": result.reason}
            brief = f"cannot be computed: {result.reason}"
        lines = [f"{result.case}: {result.name}", *(f"  {key:<8}{text}" for key, text in rows.items())]
        text = "\n".join([*lines, self.file.source_line(result.path, result.line)])
        raise Unmet(text, brief, result.path, result.line)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """The requirement's own line, in an included file perhaps."""
        return self._place(self.asked.path or self.file.label, self.asked.line)


class RecordTest(_Test):
    """The recorded figures of one case."""

    def __init__(self, *, case: str, record: Record, **given: Any) -> None:
        super().__init__(**given)
        self.case, self.record = case, record

    def runtest(self) -> None:
        """Raises Unmet where figures are not as recorded; records them instead where that is asked for."""
        if self.config.getoption("nodal_record"):
            self._rewrite()
            return
        from nodal import records
        from nodal.measured import measure
        from nodal.report.checks import change_sentence

        checks = self.file.checks
        known = checks.design.cases
        measured = measure(checks, [self.case]) if self.case in known else {}
        if measured:
            self.file.warn_of_error(self.case)
        changes = [c for c in records.compare(self.record, measured, known) if c.case == self.case]
        if not changes:
            return
        count = f"{len(changes)} figure{'' if len(changes) == 1 else 's'} not as recorded"
        lines = [f"{self.case}: {count}"]
        for change in changes:
            where = f"{self.record.path}:{change.line}" if change.line else self.record.path
            lines.append(f"  {where}: {change.kind}  {change_sentence(change)}")
        lines.append("pytest --nodal-record and nodal record write them down as they are now")
        first = next((change.line for change in changes if change.line), 1)
        raise Unmet("\n".join(lines), f"{count}: {changes[0].figure}", self.record.path, first)

    def _rewrite(self) -> None:
        answer = self.file.rewrite_record()
        if answer is not None and answer.written:
            from nodal.report.checks import record_text

            text = record_text([replace(answer, record=self.record.path)])
            self.user_properties.append((_WRITTEN, text.rstrip()))

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """The first line of the case in the record."""
        line = min((entry.line for entry in self.record.entries.get(self.case, {}).values()), default=0)
        return self._place(self.record.path, line)


def _shown(shown: Any, error: Unmet) -> Any:
    """The representation with the place and the short form that summaries print, also where it is sent to
    another process, which takes them from the chain."""
    crash = shown.reprcrash
    if crash is not None:
        crash = replace(crash, path=error.path, lineno=error.line, message=error.brief)
        shown.reprcrash = crash
        if getattr(shown, "chain", None):
            shown.chain = [(shown.reprtraceback, crash, None)]
    return shown


def _said(found: Diagnostic) -> str:
    from nodal.language.diagnostics import visible

    return visible(f"{found.code}: {found.message}") + (f" ({visible(found.help)})" if found.help else "")


def _without_traceback(excinfo: pytest.ExceptionInfo[BaseException]) -> str | None:
    """What went wrong, if that is in the files; None where it is a mistake of the program."""
    from nodal.language.diagnostics import DesignError, render

    error = excinfo.value
    if isinstance(error, DesignError):
        return render((d for d in error.diagnostics if d.severity == "error"), error.sources).rstrip()
    if isinstance(error, NodalWarning):
        return f"warning as error: {error}"
    return None
