"""What git shows in place of a design's plain text: the text, then a line for each figure and requirement.

Made to be compared line by line: nothing in it depends on where or when it was made, and what rounding leaves
of nothing is 0.
"""

from __future__ import annotations

import difflib
import os
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING

from nodal import blobs
from nodal.blobs import Old
from nodal.design import Design
from nodal.language.diagnostics import render, visible
from nodal.language.units import show

if TYPE_CHECKING:
    from nodal.checks import RequirementResult
    from nodal.figure_set import FigureRow
    from nodal.figures import Result
    from nodal.report.terminal import Page
    from nodal.response import Response

NOTHING = "/dev/null"
_RULE = "# ---- "


def for_diff(file: str) -> str:
    """The text of a file as git handed it over, with its figures, or with what is wrong with it."""
    old = blobs.load(file)
    text = old.text if not old.text or old.text.endswith("\n") else old.text + "\n"
    return text + "".join(f"{line}\n" for line in _below(old))


def _below(old: Old) -> Iterable[str]:
    if old.home is not None:
        included = [] if old.design is None else [p for p in old.design.sources if p != old.design.path]
        names = ", ".join(sorted(path.rpartition(":")[2] for path in included)) or "other files"
        yield f"{_RULE}includes {names} from {old.home.words}"
    if old.shared:
        yield f"{_RULE}no figures: a file for others to include"
    elif old.error is not None:
        yield f"{_RULE}no figures"
        yield from render(old.error.diagnostics, old.error.sources).splitlines()
    elif old.design is not None:
        yield from _judged(old.design)


def _judged(design: Design) -> Iterable[str]:
    """What a design does; the solver is not needed, and not loaded, for files without figures."""
    from nodal.checks import judge, requirement_items

    responses = {case: design.network(case).response for case in design.cases}
    yield f"{_RULE}figures"
    yield from _figures(responses)
    items = requirement_items(design)
    if items:
        yield f"{_RULE}requirements"
    for item in items:
        yield _requirement(judge(item, responses[item.case]), several=len(responses) > 1)


def _figures(responses: dict[str, Response]) -> Iterable[str]:
    from nodal.figure_set import figures
    from nodal.response import Unavailable

    try:
        answer = figures(responses, None, None)
    except Unavailable as why:
        yield str(why)
        return
    for row in answer.rows:
        for case, results in answer.cases.items():
            text = _figure(row, results[row.label])
            if text:
                yield f"{row.label}{f' [{case}]' if len(responses) > 1 else ''}: {text}"


def _figure(row: FigureRow, result: Result) -> str:
    from nodal.report.comparison import FRACTIONS
    from nodal.studies.compare import settled

    result = settled(row, result)
    if result.value is None:
        bound = "" if result.bound is None else f", {result.bound[0]} {show(result.bound[1], result.unit)}"
        return f"not reached{bound}" if result.reason == "not-reached" else ""
    if row.call.name in FRACTIONS:
        return show(result.value * 100.0, "%")
    return show(result.value, result.unit)


def _requirement(result: RequirementResult, *, several: bool) -> str:
    from nodal.report import comparison

    found = result.reason if result.found is None else f"found {comparison.found(result)}"
    case = f" [{result.case}]" if several else ""
    return f"{result.name}{case}: {result.status}, {found} ({result.figure} {result.asked})"


def driver(arguments: tuple[str, ...], make_page: Callable[[], Page]) -> str:
    """What git shows for a changed file whose external diff driver this is.

    `arguments` are those that git gives: path, old file, object and mode, new file, object and mode, and
    perhaps a new path with a note; the path alone for a file that is not merged yet. `make_page` gives the
    page to write on.
    """
    if len(arguments) < 7:
        return f"{visible(arguments[0])}: not merged yet\n"
    path, old_file, old_name, _, new_file, new_name, _ = arguments[:7]
    new_path = arguments[7] if len(arguments) > 7 else path
    head = f"diff {visible(path)}" + (f" {visible(new_path)}" if new_path != path else "") + "\n"
    if NOTHING in (old_file, new_file):
        word, there = ("added", new_file) if old_file == NOTHING else ("deleted", old_file)
        return f"{head}{word}\n" + _unified(old_file, new_file, blobs.load(there).text, word == "added")
    old = blobs.load(old_file, path=path, name=_known(old_name), newest=True)
    new = blobs.load(new_file, path=new_path, name=_known(new_name))
    if old.design is None or new.design is None:
        errors = [side.error for side in (old, new) if side.error is not None and not side.shared]
        said = "".join(render(error.diagnostics, error.sources) for error in errors)
        return head + said + _difference(old.text, new.text, path, new_path)
    from nodal.report import comparison
    from nodal.studies.compare import compare

    page = make_page()
    comparison.text(page, compare(old.design, new.design))
    homes = {side.home.words: None for side in (old, new) if side.home is not None}
    note = f"includes are those of {' and '.join(homes)}\n" if homes else ""
    return f"{head}{note}{page.text()}"


def _known(name: str) -> str | None:
    return name if name.strip("0.") else None


def _unified(old_file: str, new_file: str, text: str, added: bool) -> str:
    return _difference("" if added else text, text if added else "", old_file, new_file)


def _difference(old: str, new: str, old_path: str, new_path: str) -> str:
    lines = difflib.unified_diff(
        old.splitlines(),
        new.splitlines(),
        os.path.basename(old_path),
        os.path.basename(new_path),
        lineterm="",
    )
    return "".join(f"{visible(line)}\n" for line in lines)
