"""Uses of assemblies: how nodes and arguments reach the inside, and how large a design becomes."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from nodal.language import syntax, units
from nodal.language.builder import MOST_PARTS, TooLarge
from nodal.language.diagnostics import Collector
from nodal.language.evaluate import SPREAD, Evaluator
from nodal.language.frame import Frame
from nodal.language.order import groups
from nodal.language.quantity import Quantity, number
from nodal.language.scope import Binding, Rejected, Scope, names_in
from nodal.language.syntax import Span
from nodal.language.units import Dimension

DEEPEST = 50
"""Assemblies within assemblies."""


def check_assemblies(assemblies: Mapping[str, syntax.Assembly], collector: Collector) -> set[str]:
    """Names of assemblies that use themselves, through others or not, or nest too deep; reported."""
    uses = {name: [use for _, use in _uses(assembly)] for name, assembly in assemblies.items()}
    wrong: set[str] = set()
    depth: dict[str, int] = {}
    for group in groups(assemblies, lambda name: (use for use in uses[name] if use in assemblies)):
        first = assemblies[group[0]]
        if len(group) > 1 or group[0] in uses[group[0]]:
            collector.add("assembly-recursion", first.name.span, names=" -> ".join([*group, group[0]]))
            wrong.update(group)
        name = group[0]
        depth.update(
            (member, 1 + max((depth.get(use, 0) for use in uses[member]), default=0)) for member in group
        )
        if depth[name] == DEEPEST + 1 and name not in wrong:
            collector.add("assembly-too-deep", first.name.span, limit=DEEPEST)
        if depth[name] > DEEPEST:
            wrong.update(group)
    return wrong


def check_size(
    assemblies: Mapping[str, syntax.Assembly], statements: Iterable[syntax.Statement], collector: Collector
) -> None:
    """TooLarge, reported, if the parts and uses that can be counted without evaluating anything are too
    many."""
    uses = {name: _uses(assembly) for name, assembly in assemblies.items()}
    size: dict[str, int] = {}
    for (name,) in groups(assemblies, lambda name: (use for _, use in uses[name] if use in assemblies)):
        size[name] = 1 + sum(count * size.get(use, 1) for count, use in uses[name])
    for statement in statements:
        if isinstance(statement, syntax.Place | syntax.Chain):
            count = _count(statement)
            if count * size.get(statement.use.assembly.text, 1) > MOST_PARTS:
                collector.add("too-many-parts", statement.span, limit=f"{MOST_PARTS:,}")
                raise TooLarge


def _uses(assembly: syntax.Assembly) -> list[tuple[int, str]]:
    return [
        (_count(statement), statement.use.assembly.text)
        for statement in assembly.body
        if isinstance(statement, syntax.Place | syntax.Chain)
    ]


def _count(statement: syntax.Place | syntax.Chain) -> int:
    """Sections, where they stand as a plain number; otherwise at least one."""
    if isinstance(statement, syntax.Chain) and isinstance(statement.count, syntax.Number):
        digits = statement.count.digits
        if digits.isdigit():
            return min(int(digits[:12]), 10**9)
    return 1


def evaluate_arguments(
    use: syntax.Use, assembly: syntax.Assembly, frame: Frame, overrides: Mapping[str, Quantity | float | None]
) -> Mapping[str, Quantity | None]:
    """The arguments of a use, None for one that failed, `overrides` in place of those written; every mistake
    is reported."""
    evaluator = frame.evaluator
    parameters = {parameter.name.text: parameter for parameter in assembly.parameters}
    values: dict[str, Quantity | None] = {}
    failed = False
    written: dict[str, Span] = {}
    for argument in use.arguments:
        name = argument.name
        try:
            if name.text not in parameters:
                evaluator.unknown(f"parameter of {assembly.name.text}", name.span, name.text, parameters)
            if name.text in written:
                evaluator.reject("argument-twice", name.span, argument=name.text)
            written[name.text] = name.span
            if argument.value is not None:
                values[name.text] = evaluator.value(argument.value, frame.scope, None, SPREAD)
        except Rejected:
            failed = True
    for name_, override in overrides.items():
        if isinstance(override, float):
            values[name_] = number(override, _dimension(name_, values.get(name_), parameters[name_], frame))
        else:
            values[name_] = override
    for name_, parameter in parameters.items():
        if name_ not in values and parameter.value is None and name_ not in written:
            evaluator.report("argument-missing", use.span, argument=name_, assembly=assembly.name.text)
            failed = True
    if failed:
        raise Rejected
    return values


def _dimension(name: str, written: Quantity | None, parameter: syntax.Parameter, frame: Frame) -> Dimension:
    """What a number from outside is a number of: the dimension of the argument or default it stands for."""
    if written is not None:
        return written.dimension
    if parameter.value is None:
        return units.NONE
    known = set(frame.scope.names()) | {"pi"}
    if not names_in(parameter.value).keys() <= known:
        frame.evaluator.reject("override-form", parameter.name.span, name_=name)
    return frame.evaluator.value(parameter.value, frame.scope, None, SPREAD).dimension


def bind_nodes(
    use: syntax.Use, assembly: syntax.Assembly, frame: Frame
) -> tuple[list[int], list[int], list[int]]:
    """The nodes of a use: left of `to`, right of it, after `with`."""
    for where, given, wanted in (
        ("left", use.left, assembly.left),
        ("right", use.right, assembly.right),
        ("shared", use.shared, assembly.shared),
    ):
        if len(given) != len(wanted):
            names = ", ".join(word.text for word in wanted) or "none"
            frame.evaluator.reject(
                "wrong-nodes-of-use",
                use.span,
                assembly=assembly.name.text,
                where=_WHERE[where],
                wanted=names,
                found=len(given),
            )
    left, right, shared = (
        [frame.node(word) for word in words] for words in (use.left, use.right, use.shared)
    )
    return left, right, shared


_WHERE = {"left": "before `to`", "right": "after `to`", "shared": "after `with`"}


def inner_scope(assembly: syntax.Assembly, outer: Scope, prefix: str) -> Scope:
    """The scope of one section, its arguments still to be filled in: an assembly sees the file, not its
    user."""
    scope = Scope(parent=outer, prefix=prefix)
    for parameter in assembly.parameters:
        if parameter.value is not None:
            scope.lets[parameter.name.text] = Binding(parameter.name, parameter.value)
    for statement in assembly.body:
        if isinstance(statement, syntax.Let):
            scope.lets[statement.name.text] = Binding(statement.name, statement.value)
    return scope


def section_count(chain: syntax.Chain, evaluator: Evaluator, scope: Scope) -> int:
    """How many sections a chain has."""
    count = evaluator.value(chain.count, scope, units.NONE).nominal
    if count != int(count) or count < 1:
        evaluator.reject("section-count", chain.count.span, count=f"{count:g}")
    if count > MOST_PARTS:
        evaluator.report("too-many-parts", chain.count.span, limit=f"{MOST_PARTS:,}")
        raise TooLarge
    return int(count)
