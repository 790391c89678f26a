"""The table of diagnostics as text and data, for `nodal explain`."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

from rich import box
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from nodal.language.codes import Code
from nodal.report.terminal import Page

_STYLES = {"error": "red", "warning": "yellow", "note": "cyan"}


def overview(page: Page, rows: Sequence[Code]) -> None:
    """One line a code: severity, code, what it says."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, show_edge=False, header_style="bold")
    table.add_column("code", no_wrap=True)
    table.add_column("kind", no_wrap=True)
    table.add_column("message")
    for row in sorted(rows, key=lambda r: r.code):
        table.add_row(row.code, Text(row.severity, style=_STYLES[row.severity]), _shown(row.message))
    page.add(table)


def explanation(page: Page, row: Code) -> None:
    """All that the table says about one code, with an input that raises it."""
    page.add(Text.assemble((row.severity, _STYLES[row.severity]), f"[{row.code}]: {_shown(row.message)}"), "")
    page.add(row.explanation)
    if _shown(row.help).strip("… "):  # nothing is known of a help that is all argument
        page.add("", f"help: {_shown(row.help)}")
    if row.examples:
        page.add("", "A file that raises it:", "", Padding(row.examples[0].rstrip("\n"), (0, 0, 0, 2)))


def as_data(rows: Sequence[Code]) -> list[dict[str, Any]]:
    """[{"code", "severity", "message", "help", "explanation", "examples"}] in the order of the codes."""
    return [
        {
            "code": r.code,
            "severity": r.severity,
            "message": _shown(r.message),
            "help": _shown(r.help),
            "explanation": r.explanation,
            "examples": list(r.examples),
        }
        for r in sorted(rows, key=lambda r: r.code)
    ]


def _shown(template: str) -> str:
    """A message template as a reader sees it: {name} becomes …"""
    return re.sub(r"\{[^{}]*\}", "…", template).replace("{{", "{").replace("}}", "}")
