"""How pytest-xdist deals out items of designs: those of one file to one worker, so that it is solved once."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from xdist.scheduler import LoadScopeScheduling

SUFFIX = ".nodal"


class LoadScheduling:
    """xdist's scheduler of that name until all items are known, and for good if none belongs to a design;
    otherwise one that keeps the items of each design together.

    It bears the name of the other because xdist prints it.
    """

    def __init__(self, scheduler: Any, config: Any, log: Any) -> None:
        self._scheduler = scheduler
        self._config, self._log = config, log
        self._collections: dict[Any, list[str]] = {}
        self._settled = False

    def __getattr__(self, name: str) -> Any:
        return getattr(self._scheduler, name)

    def add_node_collection(self, node: Any, collection: Sequence[str]) -> None:
        """Take note of what a worker collected."""
        self._collections[node] = list(collection)
        self._scheduler.add_node_collection(node, collection)

    def schedule(self) -> None:
        """Deal out items; at the first time, decide how."""
        if not self._settled:
            self._settled = True
            if any(_file(item).endswith(SUFFIX) for items in self._collections.values() for item in items):
                self._scheduler = self._by_file()
        self._scheduler.schedule()

    def _by_file(self) -> ByDesign:
        scheduler = ByDesign(self._config, self._log)
        for node in self._scheduler.nodes:
            scheduler.add_node(node)
            scheduler.add_node_collection(node, self._collections[node])
        return scheduler


class ByDesign(LoadScopeScheduling):  # type: ignore[misc]
    """The items of a design are one piece of work; every other item is one by itself."""

    def _split_scope(self, nodeid: str) -> str:
        file = _file(nodeid)
        return file if file.endswith(SUFFIX) else nodeid


def _file(nodeid: str) -> str:
    return nodeid.partition("::")[0]
