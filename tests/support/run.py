"""A text through the whole pipeline: what tests of outside facts ask for."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

import nodal
from nodal.network import FigureCall


def load(body: str) -> Any:
    """The design of a text without its first line."""
    return nodal.loads("nodal 1\n" + body)


def curve(body: str, frequencies: ArrayLike, reading: str = "out", drive: str | None = None) -> NDArray[Any]:
    """A reading at `frequencies` (Hz), per unit of the drive."""
    return np.asarray(load(body).network().sweep(frequencies, drive=drive).reading(reading))


def impedance(body: str, frequencies: ArrayLike, contact: str) -> NDArray[Any]:
    """Ω, of the chain alone at a contact."""
    return np.asarray(load(body).network().sweep(frequencies).impedance(contact))


def figure(
    body: str,
    name: str,
    *arguments: str | float,
    drive: str | None = None,
    at: float | None = None,
    span: tuple[float, float] | None = None,
) -> Any:
    """A figure of merit: the `Result` that `nodal.figures.evaluate` gives, which is required to have a
    value."""
    from nodal import figures

    call = FigureCall(name, arguments, f"{name}({', '.join(map(str, arguments))})")
    return figures.evaluate(call, load(body).network().response, drive=drive, at=at, span=span)


def resistors(edges: Iterable[tuple[Any, Any, float]], ground: Any) -> str:
    """Branches of resistance `ohms` on the edges (a, b, ohms) of a graph; the vertex `ground` is the
    reference node."""

    def node(vertex: Any) -> str:
        return "ground" if vertex == ground else f"n{vertex}"

    return "".join(
        f"branch r{i}: {node(a)} to {node(b)} = {ohms!r} Ω\n" for i, (a, b, ohms) in enumerate(edges)
    )


def ladder(series: Sequence[str], shunt: Sequence[str], last: str = "out") -> str:
    """A ladder from node `in` on: series[i], then shunt[i] to ground (an empty string for none); ends at
    node `last`."""
    lines = []
    here = "in"
    for i, (along, across) in enumerate(zip(series, shunt, strict=True)):
        there = last if i == len(series) - 1 else f"n{i + 1}"
        lines.append(f"branch along{i}: {here} to {there} = {along}\n")
        if across:
            lines.append(f"branch across{i}: {there} to ground = {across}\n")
        here = there
    return "".join(lines)
