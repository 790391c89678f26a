"""Which designs a change of files concerns: those that include them, and those whose record they are."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterable, Sequence
from functools import cache
from pathlib import Path

from nodal import records
from nodal.language.diagnostics import Collector, DesignError
from nodal.language.files import REPOSITORY, root_of
from nodal.language.parse import MAX_BYTES
from nodal.paths import STANDARD_INPUT, SUFFIX, find

_INCLUDE = re.compile(rb'\binclude(?:\s|\xc2\xa0)*"([^"\r\n\0]*)"')
"""An include, or a comment that looks like one: better a design too many than one too few."""


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
    folder, or in the file's own folder if that is elsewhere.
    """
    changed = [os.path.realpath(file) for file in files if file != STANDARD_INPUT]
    around = dict.fromkeys(_around(path) for path in changed)
    candidates = {
        os.path.realpath(path): os.path.relpath(path) for folder in around for path in _designs(folder)
    }
    included = cache(_included)
    concerned = sorted(
        shown for path, shown in candidates.items()
        if path not in changed and not set(changed).isdisjoint(_closure(path, included))
    )  # fmt: skip
    return [*files, *concerned]


def _around(path: str) -> str:
    """The folder in which designs that include a file may stand, all links in its path followed."""
    root, words = root_of(path)
    here = Path.cwd()
    return str(here if words != REPOSITORY and root.is_relative_to(here) else root)


def _designs(folder: str) -> list[str]:
    """The designs in a folder and below, those that git ignores left out."""
    from nodal.revisions import git

    if not os.path.exists(os.path.join(folder, ".git")):
        return find([folder], Collector())
    try:
        listing = git("-C", folder, "ls-files", "-z", "--cached", "--others", "--exclude-standard",
                      "--", f"*{SUFFIX}")  # fmt: skip
    except DesignError:  # no git to run
        return find([folder], Collector())
    if listing.returncode:
        return find([folder], Collector())
    names = os.fsdecode(listing.stdout).split("\0")
    paths = (os.path.join(folder, name) for name in names if name)
    return [path for path in paths if os.path.isfile(path)]


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
    targets = (os.fsdecode(target) for target in _INCLUDE.findall(text))
    return frozenset(os.path.realpath(os.path.join(folder, target)) for target in targets)
