"""Requirements against closed forms: a low-pass of R and C, dividers, a capacitive input."""

from __future__ import annotations

import math

import pytest

import nodal
from nodal import checks
from nodal.response import Response

R, C = 1e3, 1e-9
CORNER = 1 / (2 * math.pi * R * C)
LOW_PASS = f"""nodal 1
source s: a to ground = 1 V
branch r: a to b = 1 kΩ
branch c: b to ground = 1 nF
reading m: b to ground
sweep 1 kHz to 1 MHz, 40 per decade
let corner = {CORNER!r} Hz
"""


def gain(f: float) -> float:
    return 1 / math.hypot(1, f / CORNER)


def results(requirements: str, base: str = LOW_PASS) -> dict[str, checks.RequirementResult]:
    design = nodal.loads(base + requirements)
    return {result.name: result for result in checks.evaluate(design)}


def one(requirement: str, base: str = LOW_PASS) -> checks.RequirementResult:
    (result,) = results(f"require it: {requirement}", base).values()
    return result


# Margins


@pytest.mark.parametrize(
    ("requirement", "found", "margin", "unit"),
    [
        ("gain(m) at corner <= 0.8", math.sqrt(0.5), (0.8 - math.sqrt(0.5)) / 0.8, ""),
        ("gain(m) at corner <= 0.5", math.sqrt(0.5), (0.5 - math.sqrt(0.5)) / 0.5, ""),
        ("gain(m) at corner >= 0.5", math.sqrt(0.5), (math.sqrt(0.5) - 0.5) / 0.5, ""),
        ("gain(m) at corner = 0.7 ± 0.01", math.sqrt(0.5), (0.01 - (math.sqrt(0.5) - 0.7)) / 0.01, ""),
        ("gain(m) at corner = 0.7 ± 1 %", math.sqrt(0.5), (0.007 - (math.sqrt(0.5) - 0.7)) / 0.007, ""),
        ("gain(m) at corner = 0.7 ± 0.1 %", math.sqrt(0.5), (0.0007 - (math.sqrt(0.5) - 0.7)) / 0.0007, ""),
        ("gain(m) at corner >= -4 dB", -10 * math.log10(2), 4 - 10 * math.log10(2), "dB"),
        ("gain(m) at corner = -3 dB ± 0.1 dB", -10 * math.log10(2), 0.1 - (10 * math.log10(2) - 3), "dB"),
        ("gain(m) at corner = -3 dB ± 0.01 dB", -10 * math.log10(2), 0.01 - (10 * math.log10(2) - 3), "dB"),
        ("phase(m) at corner <= 50 °", 45.0, 0.1, ""),
        ("phase(m) at corner <= 40 °", 45.0, -0.125, ""),
        ("phase(m) at corner >= -50 °", -45.0, 0.1, ""),
        ("bandwidth(m) >= 0.1 MHz", CORNER, CORNER / 1e5 - 1, ""),
    ],
)
def test_margins(requirement: str, found: float, margin: float, unit: str) -> None:
    """|H| = 1/√2 and -45° at the corner of a low-pass. The margin: of the limit, of the tolerance, in dB."""
    result = one(requirement)
    # The bandwidth's reference is the gain at 1 kHz, 2e-5 below that at 0 Hz.
    near = 5e-5 if "bandwidth" in requirement else 1e-9
    assert result.found == pytest.approx(found, rel=near)
    assert result.margin == pytest.approx(margin, rel=10 * near, abs=10 * near)
    assert result.margin_unit == unit
    assert result.status == ("pass" if margin >= 0 else "fail")


def test_what_is_asked_and_where_it_stands() -> None:
    result = one("gain(m)  with s at 10kHz   <=  80 %   # not too much")
    assert result.figure == "gain(m) with s at 10 kHz"
    assert result.asked == "<= 80 %"
    assert (result.relation, result.limit, result.unit) == ("<=", 0.8, "")
    assert (result.path, result.line) == ("<text>", LOW_PASS.count("\n") + 1)


# Ranges


def test_ranges_are_judged_by_their_extremes() -> None:
    """|H| falls all the way, so its extremes are its ends."""
    low, high = gain(CORNER), gain(1e3)
    found = results("""
require most: gain(m) from 1 kHz to corner <= 2
require least: gain(m) from 1 kHz to corner >= 0.5
require both: gain(m) from 1 kHz to corner = 0.9 ± 0.2
require too_low: gain(m) from 1 kHz to corner = 0.9 ± 0.15
require too_high: gain(m) from 1 kHz to corner = 0.75 ± 0.1
""")
    assert found["most"].found == pytest.approx(high, rel=1e-9)
    assert found["most"].at == pytest.approx(1e3)
    assert found["least"].found == pytest.approx(low, rel=1e-9)
    assert found["least"].at == pytest.approx(CORNER)
    assert [found[name].found for name in ("both", "too_low")] == pytest.approx([low, low], rel=1e-9)
    assert found["too_high"].found == pytest.approx(high, rel=1e-9)
    assert {name: r.status for name, r in found.items()} == {
        "most": "pass", "least": "pass", "both": "pass", "too_low": "fail", "too_high": "fail",
    }  # fmt: skip


def test_signed_figures_are_bounded_in_size() -> None:
    """The phase goes from nearly 0 to -45°, so that its largest value is not its largest size."""
    result = one("phase(m) from 1 kHz to corner <= 44 °")
    assert result.found == pytest.approx(45.0, rel=1e-9)
    assert result.status == "fail"
    assert one("phase(m) from 1 kHz to corner >= -46 °").status == "pass"


def test_signed_figures_in_decibels() -> None:
    """1 kΩ on 1 kΩ halves the voltage: -6.02 dB, of size 6.02 dB."""
    base = """nodal 1
under test { source s: a to ground = 1 V behind 1 kΩ }
contact t: a to ground
branch load: a to ground = 1 kΩ
reading m: a to ground
"""
    for where in ("at 1 kHz", "from 1 Hz to 1 kHz"):
        result = one(f"disturbance(t) {where} <= 6 dB", base)
        assert result.found == pytest.approx(20 * math.log10(2), rel=1e-9)
        assert (result.status, result.margin_unit) == ("fail", "dB")
        assert result.margin == pytest.approx(6 - 20 * math.log10(2), rel=1e-6)
        assert one(f"disturbance(t) {where} <= 6.1 dB", base).status == "pass"


# What cannot be had


def test_what_the_sweep_does_not_reach_passes_only_where_that_proves_it() -> None:
    base = LOW_PASS.replace("1 MHz", "100 kHz")
    proved = one("bandwidth(m) >= 50 kHz", base)
    assert (proved.status, proved.found, proved.bound) == ("pass", 1e5, ">=")
    assert proved.margin == pytest.approx(1.0)
    for unproved in ("bandwidth(m) >= 120 kHz", "bandwidth(m) <= 1 MHz", "bandwidth(m) <= 50 kHz",
                     "bandwidth(m) = 100 kHz ± 1 %"):  # fmt: skip
        result = one(unproved, base)
        assert (result.status, result.found, result.margin) == ("error", None, None)
        assert "at least 100 kHz" in result.reason


def test_a_figure_without_value_is_an_error_that_says_why() -> None:
    """No undisturbed voltage at an ideal current source; no reference where the gain at 0 Hz is zero."""
    base = "nodal 1\nsource s: a to ground = 1 A\nbranch r: a to ground = 1 kΩ\nreading m: a to ground\n"
    result = one("disturbance(s) at 1 kHz <= 1 %", base)
    assert (result.status, result.found) == ("error", None)
    assert result.reason
    high_pass = LOW_PASS.replace("1 kΩ", "1 nF", 1).replace("branch c: b to ground = 1 nF",
                                                            "branch c: b to ground = 1 kΩ")  # fmt: skip
    result = one("flatness(m) from 0 Hz to 1 MHz <= 1 %", high_pass)
    assert result.status == "error"
    assert "reference" in result.reason


def test_an_infinite_figure_is_a_value() -> None:
    base = "nodal 1\nsource s: a to ground = 1 V\nbranch c: a to ground = 1 pF\nreading m: a to ground\n"
    above, below = one("resistance(s) at 0 Hz >= 1 GΩ", base), one("resistance(s) at 0 Hz <= 1 GΩ", base)
    assert (above.status, above.found, above.margin) == ("pass", math.inf, math.inf)
    assert (below.status, below.found, below.margin) == ("fail", math.inf, -math.inf)


# Rounding


def test_rounding_alone_fails_nothing() -> None:
    """A compensated divider is flat: what is found of it is rounding."""
    base = """nodal 1
source s: a to ground = 1 V
branch upper: a to b = 9 MΩ ∥ 11 pF
branch lower: b to ground = 1 MΩ ∥ 99 pF
reading m: b to ground times 10
sweep 1 Hz to 1 GHz, 10 per decade
"""
    flat = one("flatness(m) <= 0", base)
    assert 0.0 < flat.found < 1e-12
    assert (flat.status, flat.margin) == ("pass", 0.0)
    assert one("flatness(m) <= 0", base.replace("99 pF", "99.0001 pF")).status == "fail"
    assert one("gain(m) at 1 kHz = 1.0000001 ± 1e-8", base).status == "fail"


# Cases, files


def test_cases_in_order_each_prepared_once_and_none_to_list_them(monkeypatch: pytest.MonkeyPatch) -> None:
    built: list[str] = []
    begin = Response.__init__

    def counted(self: Response, *arguments: object, **more: object) -> None:
        built.append(self.__class__.__name__)
        begin(self, *arguments, **more)

    monkeypatch.setattr(Response, "__init__", counted)
    design = nodal.loads(LOW_PASS + """
require first: gain(m) at 1 kHz <= 2
require second: phase(m) at 1 kHz <= 90 °
case loaded {
  branch more: b to ground = 1 nF
  require own: gain(m) at corner <= 0.5
}
case nominal { require bare: gain(m) at corner >= 0.7 }
""")  # fmt: skip
    items = checks.requirement_items(design)
    assert [(item.case, item.name) for item in items] == [
        ("nominal", "first"), ("nominal", "second"), ("nominal", "bare"),
        ("loaded", "first"), ("loaded", "second"), ("loaded", "own"),
    ]  # fmt: skip
    assert built == []
    found = checks.evaluate(design)
    assert [(r.case, r.name) for r in found] == [(item.case, item.name) for item in items]
    assert {r.status for r in found} == {"pass"}
    assert len(built) == 2
    assert [r.name for r in checks.evaluate(design, ["loaded"])] == ["first", "second", "own"]
    with pytest.raises(KeyError):
        checks.evaluate(design, ["nowhere"])


def test_a_requirement_of_an_included_file_stands_there(tmp_path) -> None:
    (tmp_path / "rules.nodal").write_text("nodal 1\n\nrequire calm: gain(m) at 1 kHz <= 0.5\n")
    (tmp_path / "probe.nodal").write_text(LOW_PASS + 'include "rules.nodal"\n')
    (result,) = checks.evaluate(nodal.load(str(tmp_path / "probe.nodal")))
    assert (result.status, result.path, result.line) == ("fail", str(tmp_path / "rules.nodal"), 3)


def test_values_from_outside() -> None:
    """Four times the resistance, so twice the attenuation far above the corner."""
    design = nodal.loads(LOW_PASS.replace("= 1 kΩ", "= ohms") + """let ohms = 1 kΩ
require far: gain(m) at 10 MHz <= 2 * least
let least = 1 %
""")  # fmt: skip
    plain, far, strict = (
        checks.Checks(design, lets) for lets in ({}, {"ohms": "4 kΩ"}, {"ohms": "4 kΩ", "least": "0.1 %"})
    )
    (item,) = plain.items()
    assert item.asked == "<= 2 * least (0.02)"
    assert plain.result(item).found == pytest.approx(gain(1e7), rel=1e-9)
    assert far.result(item).found == pytest.approx(1 / math.hypot(1, 4e7 / CORNER), rel=1e-9)
    (item,) = strict.items()
    assert strict.result(item).limit == pytest.approx(0.002)
    assert strict.result(item).status == "fail"
