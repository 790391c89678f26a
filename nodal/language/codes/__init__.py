"""The one table of diagnostics: code, severity, message, help, a longer explanation, and inputs that
raise it.

It is used in production (`make`, `nodal explain`) and is itself the test: every example must raise its
code. Its rows stand in four files: `text` (characters to statements), `meaning` (names, quantities),
`topology` (connections) and `call` (the command line).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from nodal.language.codes.call import CALL
from nodal.language.codes.meaning import MEANING
from nodal.language.codes.row import Code
from nodal.language.codes.text import TEXT
from nodal.language.codes.topology import TOPOLOGY
from nodal.language.diagnostics import Diagnostic
from nodal.language.syntax import Span

__all__ = ["BY_CODE", "TABLE", "Code", "make"]

TABLE: tuple[Code, ...] = (*TEXT, *MEANING, *TOPOLOGY, *CALL)

BY_CODE: dict[str, Code] = {row.code: row for row in TABLE}


def make(
    code: str,
    span: Span | None,
    *,
    name: str = "",
    arguments: Mapping[str, Any],
    related: tuple[tuple[Span, str], ...] = (),
) -> Diagnostic:
    """A diagnostic of the table with its texts filled in; KeyError for a code that is not in it."""
    row = BY_CODE[code]
    message, help = row.message.format(**arguments), row.help.format(**arguments)
    return Diagnostic(code, row.severity, message, span, help, related=related, name=name)
