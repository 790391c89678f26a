"""Order by dependence, without recursion."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator


def groups(names: Iterable[str], needed: Callable[[str], Iterable[str]]) -> list[list[str]]:
    """Names in groups, each after what it needs: one name, or all the names of a circle (Tarjan 1972)."""
    index: dict[str, int] = {}
    low: dict[str, int] = {}
    held: list[str] = []
    on_hold: set[str] = set()
    walk: list[tuple[str, Iterator[str]]] = []
    found: list[list[str]] = []

    def enter(name: str) -> None:
        index[name] = low[name] = len(index)
        held.append(name)
        on_hold.add(name)
        walk.append((name, iter(list(needed(name)))))

    for start in names:
        if start in index:
            continue
        enter(start)
        while walk:
            name, rest = walk[-1]
            following = next(rest, None)
            if following is None:
                walk.pop()
                if walk:
                    above = walk[-1][0]
                    low[above] = min(low[above], low[name])
                if low[name] == index[name]:
                    group = [held.pop()]
                    while group[-1] != name:
                        group.append(held.pop())
                    on_hold.difference_update(group)
                    found.append(group[::-1])
            elif following not in index:
                enter(following)
            elif following in on_hold:
                low[name] = min(low[name], index[following])
    return found
