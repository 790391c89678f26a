"""Networks of ∥ and -- to resistors, capacitors and inductors between nodes."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

from nodal.language import syntax, units
from nodal.language.evaluate import EVERY
from nodal.language.frame import Frame
from nodal.language.quantity import Quantity
from nodal.language.scope import Rejected
from nodal.language.syntax import Span
from nodal.parts.capacitor import Capacitor
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor

_LETTERS = {units.OHM: "R", units.SIEMENS: "R", units.FARAD: "C", units.HENRY: "L"}
_DIMENSIONS = tuple(_LETTERS)
_WHAT = {"R": "a resistor", "C": "a capacitor", "L": "an inductor"}


@dataclass(eq=False, slots=True)
class _Joint:
    """A node between two members of a series; numbered in reading order once all are known."""

    index: int = -1


@dataclass(slots=True)
class _Leaf:
    quantity: Quantity
    a: _Joint
    b: _Joint
    span: Span

    @property
    def letter(self) -> str:
        return _LETTERS[self.quantity.dimension]


def expand_network(
    expression: syntax.Expression, a: int, b: int, name: str, frame: Frame, *, noiseless: bool = False
) -> None:
    """Parts `name`.R … and nodes `name`.1 … between nodes a and b, drawn left to right from a.

    `name` carries the frame's prefix. Every wrong member is reported before Rejected is raised.
    """
    leaves, joints = _flatten(expression, _Joint(a), _Joint(b), frame)
    for number, (joint, span) in enumerate(joints, 1):
        joint.index = frame.builder.node(f"{name}.{number}", span)
    for part_name, leaf in zip(_names(leaves, name), leaves, strict=True):
        _add(leaf, part_name, frame, noiseless)


def _flatten(
    expression: syntax.Expression, a: _Joint, b: _Joint, frame: Frame
) -> tuple[list[_Leaf], list[tuple[_Joint, Span]]]:
    leaves: list[_Leaf] = []
    joints: list[tuple[_Joint, Span]] = []
    failed = False
    waiting: list[tuple[syntax.Expression, _Joint, _Joint] | tuple[_Joint, Span]] = [(expression, a, b)]
    while waiting:
        item = waiting.pop()
        if len(item) == 2:
            joints.append(item)
            continue
        node, left, right = item
        if isinstance(node, syntax.Parallel):
            waiting.extend((branch, left, right) for branch in reversed(node.branches))
        elif isinstance(node, syntax.Series):
            inner = [_Joint() for _ in node.members[1:]]
            ends = [left, *inner, right]
            for position in range(len(node.members) - 1, -1, -1):
                member = node.members[position]
                waiting.append((member, ends[position], ends[position + 1]))
                if position:
                    waiting.append((ends[position], member.span))
        else:
            try:
                leaves.append(_Leaf(_part_value(node, frame), left, right, node.span))
            except Rejected:
                failed = True
    if failed:
        raise Rejected
    return leaves, joints


def _part_value(expression: syntax.Expression, frame: Frame) -> Quantity:
    quantity = frame.evaluator.value(expression, frame.scope, _DIMENSIONS, EVERY)
    letter = _LETTERS[quantity.dimension]
    frame.evaluator.check_positive(quantity, expression.span, f"the value of {_WHAT[letter]}", zero=True)
    if quantity.loss and letter != "C":
        frame.evaluator.reject("qualifier-misplaced", expression.span, word="loss")
    return quantity


def _names(leaves: list[_Leaf], name: str) -> list[str]:
    """Stable names: `as NAME`, else the letter of the kind, numbered where several of a kind are unnamed."""
    unnamed = Counter(leaf.letter for leaf in leaves if leaf.quantity.name is None)
    seen: Counter[str] = Counter()
    names = []
    for leaf in leaves:
        if leaf.quantity.name is not None:
            names.append(f"{name}.{leaf.quantity.name.text}")
            continue
        seen[leaf.letter] += 1
        names.append(f"{name}.{leaf.letter}{seen[leaf.letter] if unnamed[leaf.letter] > 1 else ''}")
    return names


def _add(leaf: _Leaf, name: str, frame: Frame, noiseless: bool) -> None:
    value, side, place = leaf.quantity.value, frame.side, frame.builder.place(leaf.span)
    frame.evaluator.check_spread(leaf.quantity, leaf.span, name)
    a, b = leaf.a.index, leaf.b.index
    part: Resistor | Capacitor | Inductor
    if leaf.letter == "C":
        part = Capacitor(name, a, b, value, leaf.quantity.loss, side=side, noiseless=noiseless, place=place)
    elif leaf.letter == "L":
        part = Inductor(name, a, b, value, side=side, noiseless=noiseless, place=place)
    else:
        conductance = leaf.quantity.dimension == units.SIEMENS
        part = Resistor(name, a, b, value, conductance, side=side, noiseless=noiseless, place=place)
    frame.builder.add(part, leaf.span)
