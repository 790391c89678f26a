"""Where the files of a design come from: the disk here, a revision of a repository in `nodal.revisions`."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Protocol

from nodal.language.diagnostics import Collector
from nodal.language.parse import read as read_from_disk

REPOSITORY = "the repository"

Reader = Callable[[str, Collector], "str | None"]


class Outside(Exception):
    """An included file would be outside what includes may not leave."""


class Unusable(Exception):
    """An included file has no usable path; the message says why."""


class Files(Protocol):
    """A tree of files. Labels are what messages call a file and what `Span.path` holds."""

    @property
    def root(self) -> str:
        """What includes may not leave, in words."""
        ...

    def beside(self, label: str, target: str) -> str:
        """The label of the file that `include "target"` in the file `label` means.

        Raises Outside, and Unusable for what is no path; the file need not exist.
        """
        ...

    def key(self, label: str) -> str:
        """The same for every spelling of one file, links followed. Raises Outside and Unusable."""
        ...

    def read(self, label: str, collector: Collector) -> str | None:
        """The text; None where it cannot be had, with the reason in `collector`."""
        ...


class Disk:
    """Files on disk. Includes stay in the repository of the first file, or in its folder outside one."""

    def __init__(self, first: str, read: Reader = read_from_disk) -> None:
        self.read = read
        self._root, self.root = root_of(first)

    def beside(self, label: str, target: str) -> str:
        if os.path.isabs(target):
            raise Outside
        return os.path.normpath(os.path.join(os.path.dirname(label), target))

    def key(self, label: str) -> str:
        try:
            path = Path(label).resolve()
        except (OSError, RuntimeError, ValueError):  # a circle of links, a character no path may hold
            raise Unusable("it is no usable path") from None
        if not path.is_relative_to(self._root):
            raise Outside
        return str(path)


def root_of(path: str) -> tuple[Path, str]:
    """The folder that includes may not leave where `path` is the first file, links followed; what it is."""
    folder = Path(path).resolve().parent
    for above in (folder, *folder.parents):
        if (above / ".git").exists():
            return above, REPOSITORY
    return folder, "the folder of the first file"
