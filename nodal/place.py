"""Where in a file something was written."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Place:
    """Where in a file something was written: 1-based line and column, end exclusive."""

    path: str
    line: int
    column: int
    end_line: int
    end_column: int
