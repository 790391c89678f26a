"""Requirements and the figures they name, checked against the table of figures."""

from __future__ import annotations

import re

from nodal.figure_names import BY_NAME, ORIGINS, ArgumentKind, FigureName, unit_of
from nodal.language import syntax, units
from nodal.language.evaluate import SPREAD, Evaluator
from nodal.language.frame import Frame
from nodal.language.units import Dimension
from nodal.network import FigureCall, Network, Requirement

_DRIVELESS = ("impedance", "resistance", "capacitance", "noise", "noise_density", "rejection")
"""Figures that no drive is chosen for: of the chain alone, of noise, or with drives of their own."""
_ARTICLES: dict[ArgumentKind, str] = {
    "reading": "a reading", "contact": "a contact", "drive": "a drive", "frequency": "a frequency",
    "band": "a band", "origin": f"an origin ({' or '.join(ORIGINS)})", "epoch": "an epoch",
}  # fmt: skip


def resolve_requirement(statement: syntax.Require, network: Network, frame: Frame) -> Requirement:
    """The requirement in numbers; every name in it exists and every unit fits, or Rejected is raised."""
    evaluator = frame.evaluator
    row = BY_NAME.get(statement.figure.name.text)
    if row is None:
        evaluator.unknown("figure", statement.figure.name.span, statement.figure.name.text, BY_NAME)
    figure = _figure(statement.figure, row, network, frame)
    drive = _drive(statement, row, network, evaluator)
    at, span = _range(statement, row, frame)
    unit = _unit(figure, row, network, drive)
    dimension = dimension_of_unit(unit)
    allowed: tuple[Dimension, ...] | None = None if dimension is None else (dimension,)
    if allowed is not None and row.decibels and unit == "":
        allowed = (*allowed, units.DECIBEL)
    qualifiers = SPREAD if statement.relation == "=" else ()
    limit = evaluator.value(statement.value, frame.scope, allowed, qualifiers)
    tolerance = limit.value.tolerance
    if statement.relation == "=" and tolerance is None:
        evaluator.reject("require-without-tolerance", statement.value.span)
    if limit.dimension == units.DECIBEL:
        unit = "dB"
    return Requirement(
        statement.name.text, figure, drive, at, span, statement.relation, limit.nominal,
        tolerance.half_width if tolerance else 0.0, unit, _text(statement, evaluator),
        frame.builder.place(statement.span),
    )  # fmt: skip


def dimension_of_unit(unit: str) -> Dimension | None:
    """The dimension of a unit as figures name it ("V/A" among them), None where it is no plain quotient."""
    if unit in units.UNITS or unit == "":
        return units.dimension_of(unit)
    over, _, under = unit.partition("/")
    parts = [units.NONE if part == "1" else units.UNITS[part].dimension
             for part in (over, under) if part == "1" or part in units.UNITS]  # fmt: skip
    return units.divide(*parts) if len(parts) == 2 else None


def _figure(figure: syntax.Figure, row: FigureName, network: Network, frame: Frame) -> FigureCall:
    evaluator = frame.evaluator
    least, most = len(row.required), len(row.required) + len(row.optional)
    if not least <= len(figure.arguments) <= most:
        evaluator.reject("figure-arguments", figure.span, figure=row.name, form=form_of(row))
    arguments: list[str | float] = []
    texts: list[str] = []
    open_kinds = list(row.optional)
    for position, expression in enumerate(figure.arguments):
        if position < least:
            kind = row.required[position]
        else:
            kind = _kind(expression, open_kinds, network, frame)
            if kind not in open_kinds:
                evaluator.reject("figure-arguments", expression.span, figure=row.name, form=form_of(row))
            open_kinds.remove(kind)
        argument, text = _argument(expression, kind, network, frame)
        arguments.append(argument)
        texts.append(text)
    return FigureCall(row.name, tuple(arguments), f"{row.name}({', '.join(texts)})")


def form_of(row: FigureName) -> str:
    """How a figure is written: "bandwidth(reading[, contact][, frequency])"."""
    return f"{row.name}({', '.join(row.required)}{''.join(f'[, {kind}]' for kind in row.optional)})"


def _kind(
    expression: syntax.Expression, kinds: list[ArgumentKind], network: Network, frame: Frame
) -> ArgumentKind:
    """A contact or an origin is told from a frequency or an epoch by being a name that no value bears."""
    quantity: ArgumentKind = "epoch" if "epoch" in kinds else "frequency"
    if not isinstance(expression, syntax.Name):
        return quantity
    if any(contact.name == expression.text for contact in network.contacts):
        return "contact"
    if "origin" in kinds and expression.text in ORIGINS:
        return "origin"
    return quantity if quantity in kinds and expression.text in set(frame.scope.names()) else "contact"


def _argument(
    expression: syntax.Expression, kind: ArgumentKind, network: Network, frame: Frame
) -> tuple[str | float, str]:
    evaluator = frame.evaluator
    if kind == "frequency":
        hertz = evaluator.positive(
            expression, frame.scope, units.HERTZ, "a reference frequency", zero=True
        ).nominal
        return hertz, units.show(hertz, "Hz", 12)
    if kind == "band":
        band = evaluator.positive(expression, frame.scope, units.NONE, "a band").nominal
        return band, f"{100 * band:.12g} %"
    if kind == "epoch":
        seconds = evaluator.positive(expression, frame.scope, units.SECOND, "an epoch").nominal
        return seconds, units.show(seconds, "s", 12)
    known = {
        "origin": list(ORIGINS),
        "reading": [reading.name for reading in network.readings],
        "contact": [contact.name for contact in network.contacts],
        "drive": [drive.name for drive in network.drives],
    }[kind]
    if not isinstance(expression, syntax.Name):
        evaluator.reject("figure-argument-kind", expression.span, wanted=_ARTICLES[kind])
    if expression.text not in known:
        evaluator.unknown(kind, expression.span, expression.text, known)
    return expression.text, expression.text


def _drive(statement: syntax.Require, row: FigureName, network: Network, evaluator: Evaluator) -> str | None:
    word = statement.drive
    if word is not None:
        known = [drive.name for drive in network.drives]
        if row.name in _DRIVELESS:
            evaluator.reject("figure-without-drive", word.span, figure=row.name)
        if word.text not in known:
            evaluator.unknown("drive", word.span, word.text, known)
        return word.text
    if row.name not in _DRIVELESS and network.default_drive is None and network.drives:
        names = ", ".join(drive.name for drive in network.drives)
        evaluator.reject("which-drive", statement.figure.span, names=names)
    return None


def _range(
    statement: syntax.Require, row: FigureName, frame: Frame
) -> tuple[float | None, tuple[float, float] | None]:
    evaluator = frame.evaluator
    at = span = None
    if statement.at is not None:
        if row.domain != "point":
            evaluator.reject("figure-range", statement.at.span, figure=row.name, form=_RANGES[row.domain])
        at = evaluator.positive(statement.at, frame.scope, units.HERTZ, "a frequency", zero=True).nominal
    if statement.span_from is not None and statement.span_to is not None:
        if row.domain == "edge":
            evaluator.reject(
                "figure-range", statement.span_from.span, figure=row.name, form=_RANGES[row.domain]
            )
        low = evaluator.positive(
            statement.span_from, frame.scope, units.HERTZ, "a frequency", zero=True
        ).nominal
        high = evaluator.positive(statement.span_to, frame.scope, units.HERTZ, "a frequency").nominal
        if high <= low:
            evaluator.reject(
                "range-reversed",
                statement.span_to.span,
                low=units.show(low, "Hz"),
                high=units.show(high, "Hz"),
            )
        span = (low, high)
    if row.domain == "point" and at is None and span is None:
        evaluator.reject("figure-range", statement.figure.span, figure=row.name, form=_RANGES["point"])
    return at, span


_RANGES = {
    "point": "`at FREQUENCY` or `from FREQUENCY to FREQUENCY`",
    "span": "`from FREQUENCY to FREQUENCY`, or nothing for the whole sweep",
    "edge": "neither `at` nor `from`: it belongs to the edge",
}


def _unit(figure: FigureCall, row: FigureName, network: Network, drive: str | None) -> str:
    reading = next(
        (r for r in network.readings if row.required[0] == "reading" and r.name == figure.arguments[0]), None
    )
    name = drive or network.default_drive
    drive_unit = next((d.unit for d in network.drives if d.name == name), "V")
    contacts = {contact.name for contact in network.contacts}
    if any(argument in contacts for argument in figure.arguments[1:]):
        drive_unit = "V"
    relative = any(isinstance(argument, float) for argument in figure.arguments)
    return unit_of(row, reading.unit if reading else "", drive_unit, relative=relative)


def _text(statement: syntax.Require, evaluator: Evaluator) -> str:
    """The requirement as written, on one line."""
    text = evaluator.collector.sources.get(statement.span.path, "")[
        statement.figure.span.start : statement.span.end
    ]
    return " ".join(re.sub(r"#[^\n]*", "", text).split())
