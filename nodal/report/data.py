"""Answers as JSON and CSV, for other programs: full precision, what is not finite is null, units in the
keys.
"""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from nodal import __version__
from nodal.figures import Result
from nodal.report.answers import ContactCurves, FiguresAnswer, SweepAnswer

FORMAT = 1


def envelope(file: str, cases: Mapping[str, Any]) -> dict[str, Any]:
    """What every answer looks like: {"format", "tool", "file", "cases": {CASE: …}}."""
    return {"format": FORMAT, "tool": f"nodal {__version__}", "file": file, "cases": dict(cases)}


def dumps(answer: Any) -> str:
    """JSON text with a final newline; raises ValueError where something not finite was left in."""
    return json.dumps(answer, ensure_ascii=False, allow_nan=False, indent=1) + "\n"


def number(value: float | None) -> float | None:
    """The float, or None where it is not finite."""
    return float(value) if value is not None and math.isfinite(value) else None


def curve(values: NDArray[np.complex128] | None) -> dict[str, list[float | None]] | None:
    """{"re": […], "im": […]}; a value that is not finite is null in both. None stays None."""
    if values is None:
        return None
    good = np.isfinite(values)
    return {
        "re": [float(v) if ok else None for v, ok in zip(values.real, good, strict=True)],
        "im": [float(v) if ok else None for v, ok in zip(values.imag, good, strict=True)],
    }


def sweep_case(answer: SweepAnswer) -> dict[str, Any]:
    """A case of `nodal sweep --json`."""
    return {
        "drive": answer.drive,
        "frequency_hz": [float(f) for f in answer.frequency],
        "readings": {name: curve(values) for name, values in answer.readings.items()},
        "nodes": {name: curve(values) for name, values in answer.nodes.items()},
        "contacts": {name: _contact(curves) for name, curves in answer.contacts.items()},
        "quality": {
            "worst_estimated_error": number(answer.quality.worst_estimated_error),
            "points_refined": int(answer.quality.points_refined),
        },
    }


def _contact(curves: ContactCurves) -> dict[str, Any]:
    return {
        "impedance_ohm": curve(curves.impedance),
        "loaded": curve(curves.loaded),
        "undisturbed": curve(curves.undisturbed),
    }


def figures_case(results: Mapping[str, Result]) -> dict[str, Any]:
    """A case of `nodal figures --json`."""
    return {"figures": {label: figure(result) for label, result in results.items()}}


def figure(result: Result) -> dict[str, Any]:
    """{"value", "unit"}, with "reason" and "bound" or "message" where there is no value; extras where
    they exist.

    An infinite value is null with the reason "infinite". Extras: "at_hz" or "at_s" (where an
    extreme stands) and "crossings".
    """
    answer: dict[str, Any] = {"value": number(result.value), "unit": result.unit}
    if result.reason is not None:
        answer["reason"] = result.reason
    elif result.value is not None and not math.isfinite(result.value):
        answer["reason"] = "infinite"
    if result.bound is not None:
        answer["bound"] = list(result.bound)
    if result.message:
        answer["message"] = result.message
    if result.frequency is not None:
        answer["at_hz"] = number(result.frequency)
    if result.instant is not None:
        answer["at_s"] = number(result.instant)
    if result.crossings:
        answer["crossings"] = [
            {"frequency_hz": c.frequency, "direction": c.direction} for c in result.crossings
        ]
    return answer


def sweep_csv(cases: Mapping[str, SweepAnswer]) -> str:
    """One row a case and frequency; a column pair `…re_UNIT`, `…im_UNIT` for each curve.

    Empty where a case has no such curve; infinities are written `inf`.
    """
    tables = {name: _columns(answer) for name, answer in cases.items()}
    header = list(dict.fromkeys(column for table in tables.values() for column in table))
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["case", "frequency_hz", *header])
    for name, answer in cases.items():
        columns = [tables[name].get(column) for column in header]
        for row, frequency in enumerate(answer.frequency):
            writer.writerow([name, _cell(frequency), *("" if c is None else _cell(c[row]) for c in columns)])
    return out.getvalue()


def _columns(answer: SweepAnswer) -> dict[str, NDArray[np.float64]]:
    table: dict[str, NDArray[np.float64]] = {}

    def add(name: str, values: NDArray[np.complex128] | None, unit: str) -> None:
        if values is not None:
            table[f"{name}.re_{unit}"] = values.real
            table[f"{name}.im_{unit}"] = values.imag

    per = {"V": "v", "A": "a"}.get(answer.unit, answer.unit)
    for name, values in answer.readings.items():
        unit = answer.reading_units[name]
        shown = unit.replace("/", "_per_").replace("·", "_").replace("Ω", "ohm").lower()
        add(f"reading.{name}", values, shown or "ratio")
    for name, values in answer.nodes.items():
        add(f"node.{name}", values, f"v_per_{per}")
    for name, curves in answer.contacts.items():
        add(f"contact.{name}.impedance", curves.impedance, "ohm")
        add(f"contact.{name}.loaded", curves.loaded, f"v_per_{per}")
        add(f"contact.{name}.undisturbed", curves.undisturbed, f"v_per_{per}")
    return table


def figures_csv(answer: FiguresAnswer) -> str:
    """One row a case and figure: case, figure, value, unit, reason, bound, at_hz."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["case", "figure", "value", "unit", "reason", "bound", "at_hz"])
    for case, results in answer.cases.items():
        for label, result in results.items():
            bound = "" if result.bound is None else f"{result.bound[0]} {_cell(result.bound[1])}"
            value, where = _cell(result.value), _cell(result.frequency)
            writer.writerow([case, label, value, result.unit, result.reason or "", bound, where])
    return out.getvalue()


def _cell(value: float | None) -> str:
    if value is None or math.isnan(value):
        return ""
    return repr(float(value))
