"""Amplifiers: their fields, and the ordinary parts that their input and output networks become."""

from __future__ import annotations

from nodal.language import syntax, units
from nodal.language.evaluate import SPREAD
from nodal.language.frame import Frame
from nodal.language.networks import expand_network
from nodal.language.quantity import Quantity
from nodal.language.scope import Rejected
from nodal.parts.amplifier import Amplifier, Root
from nodal.values import Value

_ROOT_HZ = units.root(units.HERTZ)
FIELDS = (
    "gain",
    "transconductance",
    "poles",
    "zeros",
    "delay",
    "input",
    "output",
    "noise",
    "current_noise",
    "common_mode",
)


def expand_amplifier(statement: syntax.Amplifier, frame: Frame) -> None:
    """The amplifier and its networks: `N.input.R`, `N.output.R`; `N.1` is the ideal output behind the
    latter."""
    fields = _fields(statement, frame)
    evaluator, name = frame.evaluator, frame.prefix + statement.name.text
    _check(statement, fields, frame)
    reading = _Reading(frame)
    gain = reading.spread(fields.get("gain"), units.NONE)
    transconductance = reading.spread(fields.get("transconductance"), units.SIEMENS)
    poles, zeros = reading.roots(fields.get("poles")), reading.roots(fields.get("zeros"))
    delay = reading.positive(fields.get("delay"), units.SECOND, "a delay")
    noise = reading.positive(fields.get("noise"), units.divide(units.VOLT, _ROOT_HZ), "a noise voltage")
    current_noise = reading.positive(
        fields.get("current_noise"), units.divide(units.AMPERE, _ROOT_HZ), "a noise current"
    )
    common_mode = reading.common_mode(fields.get("common_mode"))
    if reading.failed:
        raise Rejected
    if _order(zeros) > _order(poles):
        evaluator.reject("too-many-zeros", fields["zeros"].span)
    in_, ref = (frame.node(word) for word in statement.inputs)
    out, ref2 = (frame.node(word) for word in statement.outputs)
    if "input" in fields:
        expand_network(fields["input"].values[0][0], in_, ref, f"{name}.input", frame, noiseless=True)
    ideal = out
    if "output" in fields:
        network = fields["output"].values[0][0]
        if transconductance is None:
            ideal = frame.builder.node(f"{name}.1", statement.span)
            expand_network(network, ideal, out, f"{name}.output", frame, noiseless=True)
        else:
            expand_network(network, out, ref2, f"{name}.output", frame, noiseless=True)
    part = Amplifier(
        name, in_, ref, ideal, ref2, gain, transconductance, poles, zeros, delay, noise, current_noise,
        common_mode, side=frame.side, place=frame.builder.place(statement.span),
    )  # fmt: skip
    frame.builder.add(part, statement.span)


def _order(roots: tuple[Root, ...]) -> int:
    return sum(1 if q is None else 2 for _, q in roots)


def _fields(statement: syntax.Amplifier, frame: Frame) -> dict[str, syntax.Field]:
    evaluator = frame.evaluator
    fields: dict[str, syntax.Field] = {}
    failed = False
    for field in statement.fields:
        name = field.name.text
        try:
            if name not in FIELDS:
                evaluator.unknown("field of an amplifier", field.name.span, name, FIELDS)
            if name in fields:
                evaluator.reject("field-twice", field.name.span, field=name)
            fields[name] = field
            joins = field.joins or ("",) * len(field.values)
            if name in ("poles", "zeros"):
                right, form = set(joins) <= {"", "q"}, f"{name} FREQUENCY, FREQUENCY q Q, …"
            elif name == "common_mode":
                right, form = joins == ("at",), "common_mode REJECTION at FREQUENCY"
            else:
                right, form = joins == ("",), f"{name} VALUE"
            if not right:
                evaluator.reject("field-form", field.span, form=form)
        except Rejected:
            failed = True
    if failed:
        raise Rejected
    return fields


def _check(statement: syntax.Amplifier, fields: dict[str, syntax.Field], frame: Frame) -> None:
    if "gain" in fields and "transconductance" in fields:
        frame.evaluator.reject(
            "field-clash", fields["transconductance"].name.span, first="gain", second="transconductance"
        )
    if "gain" not in fields and "transconductance" not in fields:
        frame.evaluator.reject(
            "missing-field", statement.name.span, given="the amplifier", missing="gain or transconductance"
        )


class _Reading:
    """Works out fields one by one, so that every wrong one is reported."""

    def __init__(self, frame: Frame) -> None:
        self.frame = frame
        self.failed = False

    def spread(self, field: syntax.Field | None, dimension: units.Dimension) -> Value | None:
        if field is None:
            return None
        try:
            return self.frame.evaluator.value(field.values[0][0], self.frame.scope, dimension, SPREAD).value
        except Rejected:
            self.failed = True
            return None

    def positive(self, field: syntax.Field | None, dimension: units.Dimension, what: str) -> float:
        if field is None:
            return 0.0
        quantity = self._one(field.values[0][0], dimension, what, zero=True)
        return quantity.nominal if quantity else 0.0

    def _one(
        self, expression: syntax.Expression, dimension: units.Dimension, what: str, *, zero: bool = False
    ) -> Quantity | None:
        try:
            return self.frame.evaluator.positive(expression, self.frame.scope, dimension, what, zero=zero)
        except Rejected:
            self.failed = True
            return None

    def roots(self, field: syntax.Field | None) -> tuple[Root, ...]:
        roots: list[Root] = []
        for pair in field.values if field is not None else ():
            frequency = self._one(pair[0], units.HERTZ, "the frequency of a pole or zero")
            q = self._one(pair[1], units.NONE, "the q of a pair") if len(pair) > 1 else None
            if frequency is not None:
                roots.append((frequency.nominal, q.nominal if q else None))
        return tuple(roots)

    def common_mode(self, field: syntax.Field | None) -> tuple[float, float] | None:
        if field is None:
            return None
        ratio, corner = field.values[0]
        try:
            rejection = self.frame.evaluator.value(ratio, self.frame.scope, (units.DECIBEL, units.NONE))
            if rejection.dimension == units.NONE:
                self.frame.evaluator.check_positive(rejection, ratio.span, "a rejection")
                number = rejection.nominal
            elif abs(rejection.nominal) > 6000:  # beyond any float as a ratio
                self.frame.evaluator.reject("overflow", ratio.span)
            else:
                number = 10.0 ** (rejection.nominal / 20)
        except Rejected:
            self.failed = True
            return None
        at = self._one(corner, units.HERTZ, "a frequency")
        return (number, at.nominal) if at else None
