"""Requirements held against what a design does: asked, found, margin, pass, fail or error.

>>> import nodal
>>> from nodal import checks
>>> design = nodal.loads('''nodal 1; source s: a to ground = 1 V; reading m: a to ground times 10
... require ten: gain(m) at 1 kHz = 10 ± 1 %''')
>>> [(result.name, result.status) for result in checks.evaluate(design)]
[('ten', 'pass')]
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

from nodal.figure_names import BY_NAME
from nodal.language.units import show
from nodal.network import Requirement

if TYPE_CHECKING:
    from nodal.design import Design, Model
    from nodal.figures import Result
    from nodal.response import Response

__all__ = ["Checks", "RequirementItem", "RequirementResult", "evaluate", "requirement_items"]

Status = Literal["pass", "fail", "error"]

ROUNDING = 1e-12
"""A limit is met where the figure misses it by no more than this part of it (of one, where it is zero)."""

_RELATION = re.compile(r"<=|>=|=")
_QUANTITY = re.compile(r"[0-9][0-9.]*(?:[eE][-+]?[0-9]+)?\s*[^\s0-9()*+-]*")


@dataclass(frozen=True, slots=True)
class RequirementItem:
    """One requirement of one case, before anything is solved."""

    case: str
    requirement: Requirement

    @property
    def name(self) -> str:
        return self.requirement.name

    @property
    def figure(self) -> str:
        """As `nodal figures` calls it: "flatness(screen) from 0 Hz to 50 MHz"."""
        r = self.requirement
        text = r.figure.text
        if r.drive is not None:
            text += f" with {r.drive}"
        if r.at is not None:
            text += f" at {show(r.at, 'Hz', 12)}"
        if r.span is not None:
            text += f" from {show(r.span[0], 'Hz', 12)} to {show(r.span[1], 'Hz', 12)}"
        return text

    @property
    def asked(self) -> str:
        """Relation and limit as written, worked out where it is no number: "<= 3 %", "<= 2 * most (6 Ω)"."""
        r = self.requirement
        value = show(r.limit, r.unit, 12)
        if r.relation == "=":
            value += f" ± {show(r.tolerance, r.unit, 12)}"
        found = _RELATION.search(r.text)
        if found is None:
            return f"{r.relation} {value}"
        written = r.text[found.start() :]
        plain = not _QUANTITY.sub("", written).strip("<>=± +-")
        return written if plain else f"{written} ({value})"

    @property
    def path(self) -> str:
        """The file that the requirement stands in, an included one perhaps; "" where it is not known."""
        return self.requirement.place.path if self.requirement.place else ""

    @property
    def line(self) -> int:
        """Counted from 1; 0 where it is not known."""
        return self.requirement.place.line if self.requirement.place else 0


@dataclass(frozen=True, slots=True)
class RequirementResult:
    """What came of one requirement in one case.

    `found`, `limit` and `tolerance` are in `unit` (SI; "" for ratios, "dB" where the limit is in dB); `found`
    is None where the figure cannot be had, and may be infinite. It is the bound that the sweep proves where
    `bound` is ">=" or "<=". Over a range it is the extreme that comes nearest to the limit, or goes furthest
    beyond it, and stands at the frequency `at` (Hz).

    `margin` is positive where the requirement holds with something to spare: a fraction of the limit for
    `<=` and `>=`, of the tolerance for `=` (`margin_unit` ""); for a limit in dB, of zero or of no width the
    difference itself (`margin_unit` "dB" or `unit`). None where there is no `found`.
    `reason` is a sentence, for errors and for bounds.
    """

    case: str
    name: str
    figure: str
    asked: str
    relation: Literal["<=", ">=", "="]
    limit: float
    tolerance: float
    unit: str
    status: Status
    found: float | None = None
    bound: Literal["<=", ">="] | None = None
    margin: float | None = None
    margin_unit: str = ""
    at: float | None = None
    reason: str = ""
    path: str = ""
    line: int = 0


def requirement_items(design: Design, cases: Sequence[str] | None = None) -> list[RequirementItem]:
    """The requirements of the cases (None: of all), in the order of cases and lines; solves nothing.

    KeyError for a case that does not exist.
    """
    return Checks(design).items(cases)


def evaluate(design: Design, cases: Sequence[str] | None = None) -> list[RequirementResult]:
    """Every requirement of the cases (None: of all) against what the design does; each case is solved once.

    Nothing is raised for a figure that cannot be had: its result has the status "error" and says why.
    """
    checks = Checks(design)
    return [checks.result(item) for item in checks.items(cases)]


@dataclass(slots=True)
class Checks:
    """A design whose cases are prepared once each, for whoever wants results one by one.

    `lets` give values other than the file's, as `Design.network` takes them; what is wrong with them raises
    DesignError where a case is first asked for.
    """

    design: Design
    lets: Mapping[str, float | str] = field(default_factory=dict)
    _models: dict[str, Model] = field(default_factory=dict, repr=False)

    def items(self, cases: Sequence[str] | None = None) -> list[RequirementItem]:
        """See `requirement_items`."""
        return [
            RequirementItem(case, requirement)
            for case in (self.design.cases if cases is None else cases)
            for requirement in self._model(case).network.requirements
        ]

    def response(self, case: str) -> Response:
        """The curves of a case; KeyError where there is no such case."""
        return self._model(case).response

    def result(self, item: RequirementItem) -> RequirementResult:
        """What comes of one requirement."""
        return judge(item, self.response(item.case))

    def _model(self, case: str) -> Model:
        if case not in self._models:
            self._models[case] = self.design.network(case, **self.lets)
        return self._models[case]


def judge(item: RequirementItem, response: Response) -> RequirementResult:
    """One requirement against the curves of its case."""
    asked = item.requirement
    results = _extremes(asked, response)
    lacking = next((result for result in results if result.value is None), None)
    if lacking is not None:
        return _without_value(item, lacking)
    values = [_in_unit(asked, result) for result in results]
    if any(math.isnan(value) for value in values):
        return _result(item, "error", reason=f"{asked.figure.text} has no value in dB")
    if asked.relation == "<=" and BY_NAME[asked.figure.name].signed:
        values = [abs(value) for value in values]
    margins = [_margin(asked, value) for value in values]
    worst = min(range(len(values)), key=lambda index: margins[index][0])
    margin, unit = margins[worst]
    return _result(
        item, "pass" if margin >= 0.0 else "fail", values[worst], margin, unit, at=results[worst].frequency
    )


def _extremes(asked: Requirement, response: Response) -> list[Result]:
    """The figure's value, or over a range the extremes that the relation asks about."""
    from nodal import figures

    row = BY_NAME[asked.figure.name]
    if row.domain == "point" and asked.at is None:
        # In dB a signed figure is not symmetric: both of its ends have to be looked at.
        both = asked.relation == "=" or (asked.relation == "<=" and row.signed)
        ends: tuple[Literal["max", "min"], ...] = ("max", "min")
        wanted = ends if both else ends[:1] if asked.relation == "<=" else ends[1:]
        return [
            figures.extreme(asked.figure, response, which=which, drive=asked.drive, span=asked.span)
            for which in wanted
        ]
    return [figures.evaluate(asked.figure, response, drive=asked.drive, at=asked.at, span=asked.span)]


def _in_unit(asked: Requirement, result: Result) -> float:
    value = result.decibels if asked.unit == "dB" else result.value
    return math.nan if value is None else value


def _margin(asked: Requirement, found: float) -> tuple[float, str]:
    """(margin, its unit); never negative where rounding alone stands between figure and limit."""
    limit = asked.limit
    if asked.relation == "=":
        spare, whole = asked.tolerance - abs(found - limit), asked.tolerance
    else:
        spare, whole = (limit - found if asked.relation == "<=" else found - limit), abs(limit)
    if math.isnan(spare):  # infinite, as asked
        spare = 0.0
    slack = ROUNDING * (abs(limit) or float(asked.unit in ("", "dB", "°")))
    if -slack <= spare < 0.0:
        spare = 0.0
    if asked.unit == "dB" or whole == 0.0:
        return spare, asked.unit
    return spare / whole, ""


def _without_value(item: RequirementItem, result: Result) -> RequirementResult:
    """What the sweep does not reach passes where that proves the requirement; all else is an error."""
    asked = item.requirement
    if result.reason != "not-reached" or result.bound is None:
        return _result(item, "error", reason=result.message or "there is no value")
    side, value = result.bound
    shown = show(value, asked.unit)
    margin, unit = _margin(asked, value)
    if side == asked.relation and margin >= 0.0:
        reason = f"not reached, so {_BEYOND[side]} {shown}"
        return _result(item, "pass", value, margin, unit, bound=side, reason=reason)
    where = "window" if BY_NAME[asked.figure.name].domain == "edge" else "sweep"
    reason = f"not reached within the {where}, so {_BEYOND[side]} {shown}, which proves nothing here"
    return _result(item, "error", bound=side, reason=reason)


_BEYOND = {">=": "at least", "<=": "at most"}


def _result(
    item: RequirementItem,
    status: Status,
    found: float | None = None,
    margin: float | None = None,
    margin_unit: str = "",
    *,
    at: float | None = None,
    bound: Literal["<=", ">="] | None = None,
    reason: str = "",
) -> RequirementResult:
    asked = item.requirement
    return RequirementResult(
        item.case,
        item.name,
        item.figure,
        item.asked,
        asked.relation,
        asked.limit,
        asked.tolerance,
        asked.unit,
        status,
        found,
        bound,
        margin,
        margin_unit,
        at,
        reason,
        item.path,
        item.line,
    )


def statuses(results: Iterable[RequirementResult]) -> dict[Status, int]:
    """How many results pass, fail and are errors."""
    counts: dict[Status, int] = {"pass": 0, "fail": 0, "error": 0}
    for result in results:
        counts[result.status] += 1
    return counts
