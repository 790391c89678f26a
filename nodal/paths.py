"""The files that a call means: those it names, and the designs in the folders it names."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator

from nodal.language.diagnostics import Collector

SUFFIX = ".nodal"
STANDARD_INPUT = "-"


def find(paths: Iterable[str], collector: Collector) -> list[str]:
    """Every file of `paths`, each once, in the order given; of a folder, the files in it and below that end
    in `.nodal`, sorted, without those in folders whose names begin with a point.

    A path that is no folder is taken as it is, whatever its name: whoever reads it finds out whether it can
    be read. What is wrong with a folder (none of its files is a design, or it cannot be listed) goes to
    `collector`.
    """
    found: dict[str, str] = {}
    for path in paths:
        inside = [path]
        if path != STANDARD_INPUT and os.path.isdir(path):
            inside = list(_walk(path, collector))
            if not inside:
                collector.add("no-designs", None, path=path)
        for file in inside:
            found.setdefault(os.path.normpath(file), file)
    return list(found.values())


def _walk(folder: str, collector: Collector) -> Iterator[str]:
    def unreadable(error: OSError) -> None:
        reason = error.strerror or str(error)
        collector.add("unreadable", None, path=error.filename, reason=reason)

    for where, folders, files in os.walk(folder, onerror=unreadable):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        for name in sorted(files):
            if name.endswith(SUFFIX):
                yield os.path.join(where, name).removeprefix(f".{os.sep}")
