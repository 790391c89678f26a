"""How pytest-xdist deals out items of designs: those of one file to one worker, so that it is solved once."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from xdist import scheduler as xdist

SUFFIX = ".nodal"


def by_design(scheduler: Any, config: Any, log: Any) -> Any:
    """In place of one of xdist's schedulers that deal out single items, one that knows designs; any other is
    left as it is."""
    if type(scheduler) is xdist.LoadScheduling:
        return LoadScheduling(scheduler, config, log)
    if type(scheduler) is xdist.LoadGroupScheduling:
        return LoadGroupScheduling(config, log)
    return scheduler


class LoadScheduling:
    """xdist's scheduler of that name until all items are known, and for good if none belongs to a design;
    otherwise one that keeps the items of each design together.

    It bears the name of the other because xdist prints that before a choice can be made.
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
                self._scheduler = self._grouped()
        self._scheduler.schedule()

    def _grouped(self) -> LoadGroupScheduling:
        scheduler = LoadGroupScheduling(self._config, self._log)
        for node in self._scheduler.nodes:
            scheduler.add_node(node)
            scheduler.add_node_collection(node, self._collections[node])
        return scheduler


class LoadGroupScheduling(xdist.LoadGroupScheduling):  # type: ignore[misc]
    """xdist's scheduler of that name, to which the items of a design are a group whether or not their names
    say so (they do not with every pair of versions of pytest and xdist)."""

    def _split_scope(self, nodeid: str) -> Any:
        file = _file(nodeid)
        return file if file.endswith(SUFFIX) else super()._split_scope(nodeid)


def _file(nodeid: str) -> str:
    return nodeid.partition("::")[0]
