"""Which designs a change of files concerns: those that include them, and those whose record they are."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from nodal import records
from nodal.language.diagnostics import Collector, DesignError
from nodal.language.files import REPOSITORY, root_of
from nodal.language.parse import MAX_BYTES
from nodal.paths import STANDARD_INPUT, SUFFIX, find

_INCLUDE = re.compile(rb'\binclude(?:\s|\xc2\xa0)*"([^"\r\n\0]*)"|#[^\r\n]*|"[^"\r\n]*"')
"""An include with its path, a comment or another text: also files with errors tell what they include."""


def designs_of(paths: Iterable[str], collector: Collector) -> list[str]:
    """`paths` with each record replaced by the design it stands beside.

    A record without one goes to `collector`.
    """
    designs = []
    for path in paths:
        if path.endswith(records.SUFFIX) and not os.path.isdir(path):
            record, path = path, path.removesuffix(records.SUFFIX) + SUFFIX
            if not os.path.lexists(path):
                collector.add("record-without-design", None, path=record, design=path)
                continue
        designs.append(path)
    return designs


def with_dependents(files: Sequence[str]) -> list[str]:
    """`files`, then the designs that include any of them, directly or by way of others, sorted by path.

    Looked for in the repository around each file, among what git does not ignore; outside one in the working
    folder, or in the file's own folder if that is elsewhere. In a repository, files that are gone since the
    last commit count with `files`, for want of a way to name what was renamed or removed.
    """
    changed = {os.path.realpath(file) for file in files if file != STANDARD_INPUT}
    places = sorted({_around(path) for path in changed})
    candidates: dict[str, str] = {}
    for place in places:
        candidates |= {os.path.realpath(path): os.path.relpath(path) for path in place.designs()}
    seek = changed.union(*(place.removed() for place in places))
    included = cache(_included)
    concerned = sorted(
        shown for path, shown in candidates.items()
        if path not in changed and not seek.isdisjoint(_closure(path, included))
    )  # fmt: skip
    return [*files, *concerned]


@dataclass(frozen=True, order=True, slots=True)
class _Place:
    """A folder in which designs may stand, all links in its path followed."""

    folder: str
    repository: bool

    def designs(self) -> list[str]:
        """The designs in the folder and below, those that git ignores left out."""
        listed = self._git("ls-files", "-z", "--cached", "--others", "--exclude-standard", "--", f"*{SUFFIX}")
        if listed is None:
            return find([self.folder], Collector())
        return [path for path in listed if os.path.isfile(path)]

    def removed(self) -> list[str]:
        """What the last commit of a repository holds and the folder does not."""
        return self._git("diff", "-z", "--name-only", "--no-renames", "--diff-filter=D", "HEAD") or []

    def _git(self, *arguments: str) -> list[str] | None:
        """The paths that git lists; None outside a repository and where git cannot tell."""
        from nodal.revisions import git

        if not self.repository:
            return None
        try:
            answer = git("-C", self.folder, *arguments)
        except DesignError:  # no git to run
            return None
        if answer.returncode:
            return None
        names = os.fsdecode(answer.stdout).split("\0")
        return [os.path.join(self.folder, name) for name in names if name]


def _around(path: str) -> _Place:
    """Where designs that include a file may stand."""
    root, words = root_of(path)
    here = Path.cwd()
    if words == REPOSITORY:
        return _Place(str(root), True)
    return _Place(str(here if root.is_relative_to(here) else root), False)


def _closure(path: str, included: Callable[[str], frozenset[str]]) -> set[str]:
    """Every file that a file includes, directly or not."""
    found: set[str] = set()
    waiting = [path]
    while waiting:
        new = included(waiting.pop()) - found
        found |= new
        waiting += new
    return found


def _included(path: str) -> frozenset[str]:
    """The files that a file names in includes, links followed; none for one that cannot be read."""
    try:
        with open(path, "rb") as file:
            text = file.read(MAX_BYTES)
    except OSError:
        return frozenset()
    folder = os.path.dirname(path)
    targets = (os.fsdecode(target) for target in _INCLUDE.findall(text) if target)
    return frozenset(os.path.realpath(os.path.join(folder, target)) for target in targets)
