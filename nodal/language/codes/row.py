"""One row of the table of diagnostics."""

from __future__ import annotations

from dataclasses import dataclass

from nodal.language.diagnostics import Severity


@dataclass(frozen=True, slots=True)
class Code:
    """A code with its texts. `message` and `help` are `str.format` templates over the arguments of a finding.

    A help may be empty; a message is a sentence without a final stop.
    """

    code: str
    severity: Severity
    message: str
    help: str
    explanation: str
    """What `nodal explain CODE` prints, one or more sentences."""
    examples: tuple[str, ...] = ()
    """Whole files (text) that raise this code."""
