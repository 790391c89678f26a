"""A comparison of two designs as tables and as data."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from functools import partial
from typing import Any

from rich import box
from rich.table import Table
from rich.text import Text

from nodal.checks import RequirementResult
from nodal.figure_set import FigureRow
from nodal.figures import Result
from nodal.language.units import show
from nodal.report import data, numbers, terminal
from nodal.report.terminal import Page
from nodal.studies.compare import Change, Comparison, Judged, Moved
from nodal.studies.facts import ROUNDING, distinct

_WHOLE = ("added", "gone", "renamed")
FRACTIONS = ("flatness", "peaking", "error", "disturbance", "overshoot", "preshoot", "droop")
"""Figures that are parts of one, shown in percent: how far they moved is told in percentage points."""
_STYLES = {"pass": "green", "fail": "red", "error": "red"}


# Text


def text(page: Page, comparison: Comparison) -> None:
    """What changed in the text, what moved, what became of requirements and cases."""
    old, new = comparison.old, comparison.new
    if new.title or old.title:
        page.add(Text(new.title or old.title, style="bold"))
    page.add(Text(f"{old.path} → {new.path}", style="dim"), "")
    if not comparison.differs:
        page.add("no difference: the same circuit, figures and requirements")
    several = len(comparison.cases) > 1
    if comparison.changes:
        page.add(_changes(comparison.changes, comparison.cases), "")
    if comparison.figures:
        count = f"{len(comparison.moved)} of {comparison.figures} figures moved"
        if comparison.moved:
            page.add(_moved(comparison.moved, several, count), "")
        else:
            page.add(f"none of {comparison.figures} figures moved", "")
    elif comparison.differs:
        page.add("the circuit is the same, so no figure moved", "")
    if comparison.requirements:
        page.add(_requirements(comparison.requirements, several), "")
    for word, cases in (("added", comparison.cases_added), ("gone", comparison.cases_gone)):
        if cases:
            page.add(f"cases {word}: {', '.join(cases)}")
    for note in comparison.notes:
        page.add(Text(note, style="dim"))


def _table(*columns: tuple[str, str]) -> Table:
    """A table like those of the other commands; `columns` are (heading, "left" or "right")."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, show_edge=False, header_style="bold")
    for heading, side in columns:
        table.add_column(heading, justify="right" if side == "right" else "left", overflow="fold")
    return table


def _changes(changes: Sequence[Change], cases: Sequence[str]) -> Table:
    scoped = any(change.cases != tuple(cases) for change in changes)
    columns = [
        ("changed in the text", "left"),
        ("", "left"),
        ("old", "right"),
        ("new", "right"),
        ("", "right"),
    ]
    table = _table(*columns, *([("case", "left")] if scoped else []))
    section = ""
    for change in changes:
        if change.section != section:
            section = change.section
            table.add_row(Text(section, style="bold"))
        name = change.name or change.what
        what = change.what if change.name else ""
        times = f" ({change.count}×)" if change.count > 1 else ""
        cells: list[str | Text] = [
            f"  {name}{times}", Text(what, style=_style(what)), change.old or numbers.NOTHING,
            change.new or numbers.NOTHING, signed(change.relative),
        ]  # fmt: skip
        table.add_row(*cells, *([_cases(change.cases, cases)] if scoped else []))
    return table


def _style(what: str) -> str:
    return {"added": "green", "gone": "red"}.get(what, "")


def _cases(own: Sequence[str], every: Sequence[str]) -> str:
    return "" if tuple(own) == tuple(every) else ", ".join(own)


def _moved(moved: Sequence[Moved], several: bool, count: str) -> Table:
    columns = [(count, "left"), ("old", "right"), ("new", "right"), ("", "right")]
    if several:
        columns.insert(1, ("case", "left"))
    table = _table(*columns)
    subject = label = ""
    for one in moved:
        if one.row.subject != subject:
            subject = one.row.subject
            table.add_row(Text(subject, style="bold"))
        shown = "" if one.row.label == label else f"  {one.row.label}"
        label = one.row.label
        old, new = figures(one.row, one.old, one.new)
        table.add_row(shown, *([one.case] if several else []), old, new, _moved_by(one))
    return table


def _moved_by(moved: Moved) -> str:
    """The relative change, but percentage points of a figure in percent and degrees of a phase."""
    old, new, name = moved.old.value, moved.new.value, moved.row.call.name
    if name not in FRACTIONS and name != "phase":
        return signed(moved.relative)
    if old is None or new is None or not math.isfinite(new - old):
        return ""
    if name == "phase":
        return f"{new - old:+#.3g}°"
    return signed(new - old) if abs(new - old) < 1e-4 else f"{(new - old) * 100.0:+#.3g} pp"


def signed(change: float | None) -> str:
    """A relative change with its sign: "+5.00 %"; "" for none."""
    if change is None:
        return ""
    return ("+" if change > 0.0 else "") + numbers.part_of_one(change)


def figures(row: FigureRow, old: Result, new: Result) -> tuple[str, str]:
    """Both values of a figure as cells, with as many digits as tell them apart."""
    before, after = terminal.figure(row, old), terminal.figure(row, new)
    if before != after:
        return before, after
    if old.bound is not None and new.bound is not None:
        return _bound(old), _bound(new)
    if old.value is None or new.value is None:
        return before, after
    was, now, unit = old.value, new.value, new.unit
    if row.call.name in FRACTIONS:
        was, now, unit = was * 100.0, now * 100.0, "%"
    return distinct(partial(show, was, unit), partial(show, now, unit), least=5)


def _bound(result: Result) -> str:
    assert result.bound is not None
    return f"{result.bound[0]} {numbers.quantity(result.bound[1], result.unit, trim=True)}"


def _requirements(requirements: Sequence[Judged], several: bool) -> Table:
    columns = [("requirements", "left"), ("", "left"), ("old", "right"), ("new", "right")]
    if several:
        columns.insert(1, ("case", "left"))
    table = _table(*columns)
    for one in requirements:
        asks = {(r.figure, r.asked): None for r in (one.old, one.new) if r is not None}
        name = f"  {one.name}"
        if len(asks) == 1:
            name += "".join(f"\n    {figure}\n    {asked}" for figure, asked in asks)
        case = [one.case] if several else []
        what = Text(one.what, style=_style(one.what))
        answers = (_answer(result, with_ask=len(asks) > 1) for result in (one.old, one.new))
        table.add_row(name, *case, what, *answers)
    return table


def _answer(result: RequirementResult | None, *, with_ask: bool) -> Text:
    if result is None:
        return Text(numbers.NOTHING)
    answer = Text(result.status, style=_STYLES[result.status])
    answer.append(f": {found(result) or result.reason}", style="none")
    return answer.append(f"\n{result.figure}\n{result.asked}", style="none") if with_ask else answer


def found(result: RequirementResult) -> str:
    """What came of a requirement's figure: "4.80 %", ">= 1.000 GHz"; "" where nothing did."""
    value, unit = result.found, result.unit
    if value is None:
        return ""
    if unit == "dB":
        text = f"{numbers.decibels(value)} dB"
    elif result.figure.partition("(")[0] in FRACTIONS:
        value = value if abs(value) > ROUNDING else 0.0
        text = numbers.part_of_one(value)
    else:
        text = numbers.quantity(value, unit, 5 if unit == "" else 4)
    return f"{result.bound} {text}" if result.bound else text


# Data


def as_data(comparison: Comparison) -> dict[str, Any]:
    """The answer of `nodal compare --json`.

    {"old", "new", "differs", "cases_added", "cases_gone", "changes": [{"section", "name", "what", "old",
    "new", "old_value", "new_value", "unit", "relative", "cases", "count"}], "figures_compared", "notes",
    "cases": {CASE: {"figures": {FIGURE: {"old", "new", "relative"}}, "requirements": [{"name", "what", "old",
    "new"}]}}} in the envelope of every answer, `file` being the new one.
    """
    cases = {
        case: {
            "figures": {
                moved.row.label: {
                    "old": data.figure(moved.old), "new": data.figure(moved.new),
                    "relative": data.number(moved.relative),
                }
                for moved in comparison.moved if moved.case == case
            },
            "requirements": [
                {"name": one.name, "what": one.what, "old": _result(one.old), "new": _result(one.new)}
                for one in comparison.requirements if one.case == case
            ],
        }
        for case in comparison.cases
    }  # fmt: skip
    answer = data.envelope(comparison.new.path, {})
    del answer["cases"]
    return {
        **answer,
        "old": comparison.old.path,
        "new": comparison.new.path,
        "differs": comparison.differs,
        "cases_added": list(comparison.cases_added),
        "cases_gone": list(comparison.cases_gone),
        "changes": list(_changes_as_data(comparison.changes)),
        "figures_compared": comparison.figures,
        "notes": list(comparison.notes),
        "cases": cases,
    }


def _changes_as_data(changes: Iterable[Change]) -> Iterable[dict[str, Any]]:
    for change in changes:
        yield {
            "section": change.section, "name": change.name, "what": change.what,
            "old": change.old, "new": change.new,
            "old_value": data.number(change.old_value), "new_value": data.number(change.new_value),
            "unit": change.unit, "relative": data.number(change.relative),
            "cases": list(change.cases), "count": change.count,
        }  # fmt: skip


def _result(result: RequirementResult | None) -> dict[str, Any] | None:
    if result is None:
        return None
    return {
        "figure": result.figure, "asked": result.asked, "found": data.number(result.found),
        "unit": result.unit, "margin": data.number(result.margin), "status": result.status,
        "reason": result.reason, "path": result.path, "line": result.line,
    }  # fmt: skip
