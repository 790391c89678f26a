"""Answers of `nodal check` and `nodal record`: as text, JSON, annotations of a hosted build, JUnit's XML."""

from __future__ import annotations

import math
import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any
from xml.etree import ElementTree

from nodal import __version__
from nodal.checking import CheckAnswer, RecordAnswer
from nodal.checks import RequirementResult
from nodal.language.diagnostics import Diagnostic, as_json, span_position, visible
from nodal.records import Change
from nodal.report import numbers
from nodal.report.data import FORMAT, dumps, number

Paint = Callable[[str, str], str]
"""(text, color) to the text in that color, or as it is."""

_COLORS = {"pass": "green", "fail": "red", "error": "red", "moved": "red", "new": "yellow", "stale": "yellow",
           "unreached": "red"}  # fmt: skip


NOTEWORTHY = 1e-10
"""An estimated relative error that is said."""


def found_text(result: RequirementResult) -> str:
    """What was found, and where: "7.56 % at 35.2 MHz", ">= 1 GHz, not reached"; "" where nothing was."""
    if result.found is None:
        return ""
    text = _value(result, result.found)
    if result.bound is not None:
        text = f"{result.bound} {numbers.quantity(result.found, result.unit, 5, trim=True)}, not reached"
    return f"{text} at {numbers.frequency(result.at)}" if result.at is not None else text


def _value(result: RequirementResult, value: float) -> str:
    if result.unit == "dB":
        return f"{numbers.decibels(value)} dB"
    if result.unit == "" and "%" in result.asked and result.relation != "=":
        return numbers.part_of_one(value)
    return numbers.quantity(value, result.unit, 5)


def margin_text(result: RequirementResult) -> str:
    """The margin with its sign: "+25.3 %" of the limit or the tolerance, "+6.00 dB"; "" for none."""
    if result.margin is None:
        return ""
    sign = "+" if result.margin >= 0.0 else "-"
    size = abs(result.margin)
    if result.margin_unit == "dB":
        return f"{sign}{numbers.decibels(size)} dB"
    if result.margin_unit:
        return f"{sign}{numbers.quantity(size, result.margin_unit, 3)}"
    percent = 100.0 * size
    if math.isinf(percent):
        return f"{sign}{numbers.INFINITE}"
    return f"{sign}{percent:.0f} %" if percent >= 100.0 else f"{sign}{numbers.ratio(percent, 3)} %"


def change_text(change: Change) -> str:
    """How a recorded figure differs: "167 MHz -> 165 MHz"."""
    if change.before is None or change.after is None:
        return change.after or f"{change.before}, in the record only"
    return f"{change.before} -> {change.after}"


def change_size(change: Change) -> str:
    """By how much of the recorded value: "-1.23 %"; "" where that says nothing."""
    if change.change is None:
        return ""
    text = numbers.part_of_one(change.change)
    return text if text.startswith("-") else f"+{text}"


# Text


def text(answers: Sequence[CheckAnswer], paint: Paint) -> str:
    """One line a requirement and a changed figure, grouped by file and case, then a line that sums up."""
    lines: list[str] = []
    for answer in answers:
        lines += [*_file_text(answer, paint), ""]
    return "\n".join([*lines, summary(answers), ""])


def _file_text(answer: CheckAnswer, paint: Paint) -> Iterable[str]:
    name = visible(answer.path)
    if answer.kind == "shared":
        yield f"{name}: shared file without source or reading, checked where it is included"
        return
    if answer.kind == "broken":
        yield f"{name}: {paint('has errors', 'red')}"
        return
    yield name
    if answer.unsolved:
        yield f"  {_count(answer.unsolved, 'requirement')}, not evaluated"
        return
    if not answer.requirements:
        yield "  no requirements"
    rows = {case: _case_rows(answer, case) for case in _cases(answer)}
    widths = _widths([row for case in rows.values() for row in case])
    for case, found in rows.items():
        if found:
            yield f"  {case}"
        for cells in found:
            padded = [cell.ljust(width) for cell, width in zip(cells, widths, strict=True)]
            padded[0] = padded[0].replace(cells[0], paint(cells[0], _COLORS[cells[0]]))
            yield f"    {'  '.join(padded)}".rstrip()
        worst = answer.estimates.get(case, 0.0)
        if worst > NOTEWORTHY:
            yield paint(f"    worst estimated relative error of these: {worst:.1e}", "yellow")
    if answer.record is not None and not answer.changes:
        yield "  figures as recorded"


def _case_rows(answer: CheckAnswer, case: str) -> list[tuple[str, ...]]:
    """(status, name, asked, found, margin, place, reason) a line."""
    rows: list[tuple[str, ...]] = []
    for r in answer.requirements:
        if r.case == case:
            reason = r.reason if r.status == "error" else ""
            rows.append((r.status, r.name, f"{r.figure} {r.asked}", found_text(r), margin_text(r),
                         f"{visible(r.path)}:{r.line}", reason))  # fmt: skip
    for change in answer.changes:
        if change.case == case:
            place = f"{visible(change.path)}:{change.line}" if change.line else visible(change.path)
            rows.append((change.kind, "recorded", change.figure, change_text(change), change_size(change),
                         place, ""))  # fmt: skip
    return rows


def _widths(rows: Sequence[tuple[str, ...]]) -> list[int]:
    return [max(len(row[column]) for row in rows) for column in range(len(rows[0]))] if rows else []


def _cases(answer: CheckAnswer) -> list[str]:
    """Those checked, then those that only the record knows."""
    return list(dict.fromkeys([*answer.checked, *(change.case for change in answer.changes)]))


def summary(answers: Sequence[CheckAnswer]) -> str:
    """What came of all files in one sentence."""
    counts = {"pass": 0, "fail": 0, "error": 0}
    for answer in answers:
        for result in answer.requirements:
            counts[result.status] += 1
    designs = [answer for answer in answers if answer.kind == "design"]
    words = {"pass": "pass", "fail": "fail", "error": "cannot be computed"}
    parts = [f"{count} {words[status]}" for status, count in counts.items() if count or status == "pass"]
    unsolved = sum(answer.unsolved for answer in answers)
    if unsolved:
        parts = ["not evaluated"]
    total = sum(counts.values()) + unsolved
    sentences = [f"{_count(total, 'requirement')} in {_count(len(designs), 'design')}: {', '.join(parts)}"]
    if not total:
        sentences = [f"no requirements in {_count(len(designs), 'design')}"] if designs else []
    recorded = [answer for answer in designs if answer.record is not None]
    changed = sum(len(answer.changes) for answer in recorded)
    if recorded:
        said = f"{_count(changed, 'figure')} not as recorded" if changed else "figures as recorded"
        sentences.append(f"{said} in {_count(len(recorded), 'record')}")
    broken = sum(answer.kind == "broken" for answer in answers)
    if broken:
        sentences.append(f"{_count(broken, 'file')} with errors")
    return "; ".join(sentences or ["no designs"])


def _count(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def record_text(answers: Sequence[RecordAnswer]) -> str:
    """One line a file: what the record now holds, and what changed in it."""
    return "".join(f"{line}\n" for answer in answers for line in [_record_line(answer)] if line)


def _record_line(answer: RecordAnswer) -> str:
    if answer.kind == "shared":
        return f"{visible(answer.path)}: shared file without source or reading, nothing to record"
    if answer.kind == "broken":
        return ""
    if not answer.figures and not answer.written:
        return f"{visible(answer.path)}: nothing to record, neither a sweep nor requirements"
    name = visible(answer.record)
    if not answer.written:
        return f"{name}: unchanged, {_count(answer.figures, 'figure')}"
    kinds = {"new": "new", "moved": "moved", "unreached": "no longer reached", "stale": "gone"}
    counts = {kind: sum(change.kind == kind for change in answer.changes) for kind in kinds}
    parts = [f"{count} {kinds[kind]}" for kind, count in counts.items() if count]
    return f"{name}: {', '.join([_count(answer.figures, 'figure'), *parts])}"


# JSON


def json_text(
    answers: Sequence[CheckAnswer],
    diagnostics: Sequence[Diagnostic],
    sources: Mapping[str, str],
    *,
    single: bool,
) -> str:
    """The answer as JSON, with the diagnostics of all files.

    A call for one file has its "file" and "cases"; one for several paths or a folder has "files", a list of
    such.
    """
    head: dict[str, Any] = {"format": FORMAT, "tool": f"nodal {__version__}"}
    files = [_file_json(answer) for answer in answers]
    found = as_json(diagnostics, sources)
    if single and len(files) == 1:
        return dumps({**head, **files[0], "diagnostics": found})
    return dumps({**head, "files": files, "diagnostics": found})


def _file_json(answer: CheckAnswer) -> dict[str, Any]:
    return {
        "file": answer.path,
        "kind": answer.kind,
        "record": answer.record,
        "cases": {case: _case_json(answer, case) for case in _cases(answer)},
    }


def _case_json(answer: CheckAnswer, case: str) -> dict[str, Any]:
    return {
        "requirements": [requirement_json(r) for r in answer.requirements if r.case == case],
        "records": [
            {"figure": c.figure, "kind": c.kind, "before": c.before, "after": c.after,
             "change": number(c.change), "path": c.path, "line": c.line or None}
            for c in answer.changes if c.case == case
        ],
        "quality": {"worst_estimated_error": number(answer.estimates.get(case))},
    }  # fmt: skip


def requirement_json(result: RequirementResult) -> dict[str, Any]:
    """One requirement of one case. Numbers are in "unit"; what is not finite is null, "reason" says so."""
    infinite = result.found is not None and math.isinf(result.found)
    return {
        "name": result.name, "figure": result.figure, "asked": result.asked, "relation": result.relation,
        "limit": number(result.limit), "tolerance": number(result.tolerance),
        "found": number(result.found), "bound": result.bound, "unit": result.unit,
        "margin": number(result.margin), "margin_unit": result.margin_unit, "at_hz": number(result.at),
        "status": result.status, "reason": result.reason or ("infinite" if infinite else ""),
        "path": result.path, "line": result.line,
    }  # fmt: skip


# Annotations


def github_text(
    answers: Sequence[CheckAnswer], diagnostics: Sequence[Diagnostic], sources: Mapping[str, str]
) -> str:
    """Annotations as a hosted build reads them from its log, one a line; then the line that sums up."""
    lines: list[str] = []
    for d in diagnostics:
        kind = {"error": "error", "warning": "warning", "note": "notice"}[d.severity]
        place: dict[str, Any] = {}
        if d.span is not None:
            (line, column), _ = span_position(d.span, sources)
            place = {"file": d.span.path, "line": line, "col": column}
        lines.append(_annotation(kind, {**place, "title": d.code}, _said(d)))
    for answer in answers:
        for r in answer.requirements:
            if r.status != "pass":
                place = {"file": r.path, "line": r.line, "title": f"{r.case}: {r.name}"}
                lines.append(_annotation("error", place, sentence(r)))
        for c in answer.changes:
            place = {"file": c.path, **({"line": c.line} if c.line else {}), "title": f"{c.case}: {c.kind}"}
            lines.append(_annotation("error", place, change_sentence(c)))
    return "\n".join([*lines, summary(answers), ""])


def _said(diagnostic: Diagnostic) -> str:
    return f"{diagnostic.message}\nhelp: {diagnostic.help}" if diagnostic.help else diagnostic.message


def sentence(result: RequirementResult) -> str:
    """Asked, found and margin in one line."""
    if result.found is None:
        return f"{result.figure} {result.asked}: {result.reason}"
    found = f"found {found_text(result)}, margin {margin_text(result)}"
    return f"{result.figure} {result.asked}: {found}"


def change_sentence(change: Change) -> str:
    """A changed figure in one line."""
    size = change_size(change)
    return f"{change.figure}: {change_text(change)}" + (f" ({size})" if size else "")


def _annotation(kind: str, properties: Mapping[str, Any], message: str) -> str:
    shown = ",".join(f"{key}={_escaped(str(value), ',:')}" for key, value in properties.items())
    return f"::{kind} {shown}::{_escaped(message, '')}"


def _escaped(text: str, more: str) -> str:
    for character in f"%\r\n{more}":
        text = text.replace(character, f"%{ord(character):02X}")
    return text


# JUnit


def junit_text(answers: Sequence[CheckAnswer]) -> str:
    """A test suite for each file: a test for each requirement of each case and each recorded case."""
    root = ElementTree.Element("testsuites", name="nodal")
    for answer in answers:
        suite = ElementTree.SubElement(root, "testsuite", name=visible(answer.path))
        kind = os.path.splitext(visible(answer.path))[0].replace(os.sep, ".")
        errors = [d for d in answer.diagnostics if d.severity == "error"]
        if errors:
            test = ElementTree.SubElement(suite, "testcase", classname=kind, name="design")
            for d in errors:
                line = span_position(d.span, answer.sources)[0][0] if d.span is not None else None
                where = f"{visible(d.span.path)}:{line}: " if d.span is not None else ""
                message = visible(f"{where}{d.message}")
                ElementTree.SubElement(test, "error", type=d.code, message=message)
        for r in answer.requirements:
            name, place = f"{r.case}-{r.name}", {"file": visible(r.path), "line": str(r.line)}
            test = ElementTree.SubElement(suite, "testcase", {"classname": kind, "name": name, **place})
            if r.status != "pass":
                tag = "failure" if r.status == "fail" else "error"
                problem = ElementTree.SubElement(test, tag, type=r.status, message=visible(sentence(r)))
                problem.text = f"{visible(r.path)}:{r.line}"
        if answer.record is not None:
            for case in _cases(answer):
                test = ElementTree.SubElement(suite, "testcase", classname=kind, name=f"{case}-figures")
                changed = [c for c in answer.changes if c.case == case]
                if changed:
                    message = f"{_count(len(changed), 'figure')} not as recorded"
                    problem = ElementTree.SubElement(test, "failure", type="recorded", message=message)
                    problem.text = "\n".join(f"{c.kind} {change_sentence(c)}" for c in changed)
        for key, tags in (("tests", "testcase"), ("failures", "failure"), ("errors", "error")):
            suite.set(key, str(len(suite.findall(f".//{tags}"))))
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="unicode", xml_declaration=False) + "\n"
