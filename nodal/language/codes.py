"""The one table of diagnostics: code, severity, message, help, a longer explanation, and inputs that raise it.

It is used in production (`make`, `nodal explain`) and is itself the test: every example must raise its code.
Messages and helps are `str.format` templates over the arguments given to `Collector.add`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from nodal.language.diagnostics import Diagnostic, Severity
from nodal.language.syntax import Span


@dataclass(frozen=True, slots=True)
class Code:
    """One row of the table."""

    code: str
    severity: Severity
    message: str
    help: str
    explanation: str
    """What `nodal explain CODE` prints, one or more sentences."""
    examples: tuple[str, ...] = ()
    """Whole files (text) that raise this code."""


TABLE: tuple[Code, ...] = ()

BY_CODE: dict[str, Code] = {row.code: row for row in TABLE}


def make(code: str, span: Span | None, *, name: str = "", arguments: Mapping[str, Any]) -> Diagnostic:
    """A diagnostic of the table with its texts filled in; KeyError for a code that is not in it."""
    row = BY_CODE[code]
    return Diagnostic(code, row.severity, row.message.format(**arguments), span, row.help.format(**arguments), name=name)
