"""The user's mistakes as collected values, and the one place that renders them.

A mistake is a `Diagnostic`: a stable code from the table in `nodal.language.codes`, the arguments of its message and a
span. A bug is an exception. Nothing here decides what is wrong.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from nodal.language.syntax import Span

Severity = Literal["error", "warning", "note"]


@dataclass(frozen=True, slots=True)
class Diagnostic:
    """One finding. `message` and `help` are finished sentences without a final stop."""

    code: str
    severity: Severity
    message: str
    span: Span | None = None
    help: str = ""
    related: tuple[tuple[Span, str], ...] = ()
    """Further places: ("first declared here"), the place of use of an assembly …"""
    name: str = ""
    """What the finding is about, for `allow CODE: NAME`."""


class DesignError(Exception):
    """A file cannot be used; `diagnostics` say why (at least one error), `sources` hold the texts they point into."""

    def __init__(self, diagnostics: Iterable[Diagnostic], sources: Mapping[str, str]) -> None:
        self.diagnostics = list(diagnostics)
        self.sources = dict(sources)
        super().__init__(self.diagnostics[0].message if self.diagnostics else "")


@dataclass(slots=True)
class Collector:
    """Gathers diagnostics while a file is read; `sources` maps each path to its text."""

    found: list[Diagnostic] = field(default_factory=list)
    sources: dict[str, str] = field(default_factory=dict)

    def add(
        self,
        code: str,
        span: Span | None,
        /,
        *,
        name: str = "",
        related: Iterable[tuple[Span, str]] = (),
        **arguments: Any,
    ) -> None:
        """Record a finding of the table: its severity, message and help are filled in with `arguments`."""
        from nodal.language.codes import make

        self.found.append(make(code, span, name=name, arguments=arguments, related=tuple(related)))

    @property
    def failed(self) -> bool:
        return any(d.severity == "error" for d in self.found)


def render(diagnostics: Iterable[Diagnostic], sources: Mapping[str, str], *, color: bool = False) -> str:
    """Diagnostics sorted by path and place, each with its excerpt, caret and help (design §5)."""
    raise NotImplementedError


def as_json(diagnostics: Iterable[Diagnostic], sources: Mapping[str, str]) -> list[dict[str, Any]]:
    """[{"code", "severity", "path", "start", "end", "message", "help"}]; start and end are [line, column], 1-based."""
    raise NotImplementedError
