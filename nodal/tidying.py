"""`nodal tidy` for files: reads each, holds it against its canonical text, says how the two differ."""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass

from nodal.language.diagnostics import Collector, DesignError
from nodal.language.parse import read
from nodal.language.tidy import tidy
from nodal.paths import STANDARD_INPUT


@dataclass(frozen=True, slots=True)
class Tidied:
    """A file as it is and as it should be; `label` is what messages call it."""

    path: str
    label: str
    before: str
    after: str

    @property
    def changes(self) -> bool:
        return self.before != self.after

    def difference(self) -> str:
        """A unified diff from the one to the other, "" where they are equal."""
        lines = difflib.unified_diff(_lines(self.before), _lines(self.after), self.label, self.label)
        return "".join(
            line if line.endswith("\n") else f"{line}\n\\ No newline at end of file\n" for line in lines
        )


def tidied(path: str) -> Tidied:
    """Read a file ("-" is standard input) and tidy its text. DesignError where it cannot be read or has
    errors."""
    label = "<standard input>" if path == STANDARD_INPUT else path
    collector = Collector()
    before = read(path, collector)
    if before is None:
        raise DesignError(collector.found, collector.sources)
    return Tidied(path, label, before, tidy(before, label))


def _lines(text: str) -> list[str]:
    """Lines with what ends them; newlines alone end lines, whatever else a comment may hold."""
    return re.findall(r"[^\n]*\n|[^\n]+", text)
