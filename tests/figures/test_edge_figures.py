"""Edge figures against closed forms, with where each comes from."""

from __future__ import annotations

import math
from typing import Any

import mpmath
import numpy as np
import pytest
from support.run import load

import nodal
from nodal import checks, figures
from nodal.network import FigureCall
from nodal.solver.piecewise import piecewise

ONE_POLE = """
source s: a to ground = 2 V behind 1 kΩ
branch c: a to ground = 1 nF
reading out: a to ground times 3
"""
TAU = 1e-6

SECOND = """
source s: a to ground = 1 V behind 1 Ω -- 1 H
branch c: a to ground = 1 F
reading out: a to ground
"""
"""ζ = 0.5, one radian a second."""


def result(body: str, name: str, *arguments: str | float, drive: str | None = None) -> Any:
    """A figure of the reading `out`."""
    call = FigureCall(name, ("out", *arguments), f"{name}(out)")
    return figures.evaluate(call, load(body).network().response, drive=drive)


def value(body: str, name: str, *arguments: str | float) -> float:
    found = result(body, name, *arguments)
    assert found.value is not None, found
    return float(found.value)


# One pole


@pytest.mark.parametrize(
    ("name", "arguments", "expected"),
    [
        ("rise", (), 2.19722457734),  # ln 9; Valley and Wallman 1948
        ("settling", (0.02,), math.log(50) - math.log(2)),
        ("propagation_delay", (), math.log(2)),
        # IEC 60060-2:2010, definitions from memory; the record of 40 τ leaves e^-40.
        ("response_time", (), 1.0),
        ("response_time", ("tangent",), 1.0),
        ("partial_response_time", (), 1.0),
        ("response_settling_time", (), 2.86089017798),
    ],
)
def test_one_pole(name: str, arguments: tuple[str | float, ...], expected: float) -> None:
    assert value(ONE_POLE + "step over 40 µs", name, *arguments) == pytest.approx(expected * TAU, rel=1e-10)


def test_one_pole_goes_beyond_nothing() -> None:
    assert value(ONE_POLE + "step over 40 µs", "overshoot") == 0.0
    assert value(ONE_POLE + "step over 40 µs", "preshoot") == 0.0


def test_one_pole_after_a_ramp() -> None:
    """g = 1 - (τ/T)(e^(T/τ) - 1) e^(-t/τ) for t > T; T adds T/2 to the integral of 1 - g."""
    body = ONE_POLE + "edge 2 µs over 40 µs"
    assert value(body, "response_time") == pytest.approx(2e-6, rel=1e-10)
    after = TAU * math.log(TAU / 2e-6 * math.expm1(2.0) / 0.1)
    rising = mpmath.findroot(lambda t: (t - (1 - mpmath.exp(-t))) / 2 - 0.1, 0.5)
    assert value(body, "rise") == pytest.approx(after - float(rising) * 1e-6, rel=1e-10)


def test_a_falling_edge_has_a_fall() -> None:
    turned = ONE_POLE.replace("reading out: a to ground", "reading out: ground to a") + "step over 40 µs"
    assert value(turned, "fall") == pytest.approx(2.19722457734e-6, rel=1e-10)
    assert result(turned, "rise").message == 'reading "out" falls: ask for fall'
    assert result(ONE_POLE + "step over 40 µs", "fall").message == 'reading "out" rises: ask for rise'


def test_two_equal_poles() -> None:
    """10 % to 90 % in 3.35790856148 τ (Valley and Wallman 1948)."""
    body = """
    source s: a to ground = 1 V behind 1 kΩ
    branch first: a to ground = 1 nF
    amplifier buffer: a, ground to b, ground { gain 1; output 1 kΩ }
    branch second: b to ground = 1 nF
    reading out: b to ground
    step over 60 µs
    """
    assert value(body, "rise") == pytest.approx(3.35790856148e-6, rel=1e-10)


def test_second_order() -> None:
    """ζ = 0.5: overshoot, its instant and the rise time over 1/ω (textbook)."""
    body = SECOND + "step over 60 s"
    found = result(body, "overshoot")
    assert found.value == pytest.approx(0.163033534822, abs=1e-11)
    assert found.instant == pytest.approx(3.62759872847, rel=1e-7)  # a maximum is known to half the digits
    assert value(body, "rise") == pytest.approx(1.63757294733, rel=1e-10)
    # T is largest where g first reaches 1, ω_d t = π - arccos ζ, and comes to 2ζ/ω in the end.
    reached = (math.pi - math.acos(0.5)) / math.sqrt(0.75)
    largest = mpmath.quad(
        lambda t: mpmath.exp(-t / 2) * (mpmath.cos(t * mpmath.sqrt(0.75)) + mpmath.sin(t * mpmath.sqrt(0.75))
                                        / mpmath.sqrt(3)), [0, reached])  # fmt: skip
    assert value(body, "partial_response_time") == pytest.approx(float(largest), rel=1e-10)
    assert value(body, "response_time") == pytest.approx(1.0, rel=1e-9)


def test_ground_lead_of_a_probe() -> None:
    """exp(-πζ/√(1-ζ²)) at π/ω_d, of 25 Ω, 278.5116 nH and 9.5 pF in series."""
    body = """
    source s: a to ground = 1 V behind 25 Ω -- 278.5116 nH
    branch c: a to ground = 9.5 pF
    reading out: a to ground
    step over 200 ns
    """
    found = result(body, "overshoot")
    assert found.value == pytest.approx(0.7945619, abs=1e-7)
    assert found.instant == pytest.approx(5.123818e-9, rel=1e-6)


# Jumps


def test_a_divider_that_is_undercompensated() -> None:
    """9 MΩ ∥ 10 pF over 1 MΩ ∥ 100 pF: from 1/11 to 1/10 with 99 µs (common practice)."""
    body = """
    source s: a to ground = 1 V
    branch upper: a to b = 9 MΩ ∥ 10 pF
    branch lower: b to ground = 1 MΩ ∥ 100 pF
    reading out: b to ground
    step over 10 ms
    """
    assert value(body, "rise") == 0.0  # 10/11 at once
    assert value(body, "settling", 0.01) == pytest.approx(99e-6 * math.log(1 / 11 / 0.01), rel=1e-10)
    assert value(body, "response_time") == pytest.approx(99e-6 / 11, rel=1e-9)
    assert value(body, "overshoot") == 0.0


BOUNCE = """
stock wire { impedance 50 Ω; velocity 0.5 }
source s: a to ground = 1 V behind 25 Ω
cable line: a, ground to b, ground = 1 m of wire
branch load: b to ground = 100 Ω
reading out: b to ground
step over 1 µs
"""


def test_bounce() -> None:
    """25 Ω, 50 Ω, 100 Ω: 10/9, 80/81, 730/729 … of the final 4/5 at T, 3T, 5T (textbook)."""
    delay = 1 / (0.5 * 299792458)
    found = result(BOUNCE, "overshoot")
    assert found.value == pytest.approx(1 / 9, abs=1e-11)
    assert found.instant == pytest.approx(delay, rel=1e-9)
    assert value(BOUNCE, "rise") == 0.0
    assert value(BOUNCE, "propagation_delay") == pytest.approx(delay, rel=1e-9)
    assert value(BOUNCE, "settling", 0.05) == pytest.approx(2 * delay, rel=1e-9)
    assert value(BOUNCE, "settling", 0.005) == pytest.approx(4 * delay, rel=1e-9)
    # From where the wave arrives: -(1/9) 2T + (1/81) 2T - … = -T/5.
    assert value(BOUNCE, "response_time") == pytest.approx(-delay / 5, rel=1e-9)


def test_at_a_contact_the_source_is_ideal() -> None:
    """The line from an ideal source: 4/3, then reflected between -1 and 1/3: 4/3, 8/9, 28/27 … of the final
    1."""
    assert result(BOUNCE, "overshoot", "s").value == pytest.approx(1 / 3, abs=1e-11)


# Distributed networks


def test_open_rc_line() -> None:
    """t10, t50, t90 over RC: 0.130158890478, 0.378747838271, 1.03110498228 (exact series; Sakurai 1983 fits
    them)."""
    body = """
    stock strip { resistance 1 kΩ/m; capacitance 1 nF/m }
    source s: a to ground = 1 V
    cable line: a, ground to b, ground = 1 m of strip
    reading out: b to ground
    step over 20 µs
    """
    assert value(body, "rise") == pytest.approx((1.03110498228 - 0.130158890478) * 1e-6, rel=1e-9)
    assert value(body, "propagation_delay") == pytest.approx(0.378747838271e-6, rel=1e-9)
    # 1/cosh √(sRC) = 1 - sRC/2 + …
    assert value(body, "response_time") == pytest.approx(0.5e-6, rel=1e-8)


def test_column_with_uniform_earth_capacitance() -> None:
    """√(sτ)/sinh √(sτ), the current at the foot: τ/6, t50, t90 (Kuffel, Zaengl, Kuffel ch. 3)."""
    body = """
    stock column { resistance 1 kΩ/m; capacitance 1 nF/m }
    source s: a to ground = 1 V
    cable line: a, ground to b, ground = 1 m of column
    branch arm: b to ground = 1e-9 Ω
    reading out: b to ground times 1e12
    step over 20 µs
    """
    assert value(body, "response_time") == pytest.approx(1e-6 / 6, rel=1e-7)
    assert value(body, "propagation_delay") == pytest.approx(0.138785297043e-6, rel=1e-8)


def test_matched_line_with_a_long_tail() -> None:
    """exp(-α√s): erfc(α/(2√t)), t50 = 1.09905466916 α², t90/t50 = 28.8102673389 (Wigington and Nahman
    1957)."""
    body = """
    stock strip { resistance 1 kΩ/m; capacitance 1 nF/m }
    source s: a to ground = 1 V
    cable near: a, ground to b, ground = 1 m of strip
    cable far: b, ground to c, ground = 1000 m of strip
    reading out: b to ground
    step over 200 µs, top at 200 µs
    """
    top = float(mpmath.erfc(0.5 / mpmath.sqrt(200)))

    def instant(part: float) -> float:
        return float((0.5 / mpmath.erfinv(1 - part * top)) ** 2) * 1e-6

    assert instant(0.5 / top) * 1e6 == pytest.approx(1.09905466916, rel=1e-10)
    assert value(body, "propagation_delay") == pytest.approx(instant(0.5), rel=1e-8)
    assert value(body, "rise") == pytest.approx(instant(0.9) - instant(0.1), rel=1e-8)


# Tops and levels


def test_droop_is_counted_from_the_top() -> None:
    """A capacitor into a resistor has its limit at zero; e^(-t/RC) from T1 to the end."""
    body = """
    source s: a to ground = 1 V
    branch c: a to b = 1 µF
    branch r: b to ground = 1 kΩ
    reading out: b to ground
    """
    with_top = body + "step over 100 µs, top at 10 µs"
    assert value(with_top, "droop") == pytest.approx(-math.expm1(-90e-3), rel=1e-9)
    assert value(with_top, "overshoot") == pytest.approx(math.expm1(10e-3), rel=1e-9)
    lacking = result(body + "step over 100 µs", "overshoot").message
    assert lacking.endswith("zero at 0 Hz; write `top at T1` in the edge to read the level there")
    assert "write `top at T1`" in result(ONE_POLE + "step over 1 µs", "droop").message


def test_what_the_window_does_not_reach() -> None:
    short = ONE_POLE + "step over 1 µs"
    found = result(short, "rise")  # 63 % at the end
    assert (found.reason, found.bound[0]) == ("not-reached", ">=")
    assert found.bound[1] == pytest.approx(1e-6 + 1e-6 * math.log(0.9), rel=1e-10)
    assert result(short, "settling", 0.02).reason == "not-reached"
    assert result(ONE_POLE + "step over 100 ns", "overshoot").reason == "unavailable"
    assert result(ONE_POLE + "step over 4 µs", "response_settling_time").reason == "not-reached"


def test_no_edge_is_said() -> None:
    assert "write `edge 1 ns over 100 ns`" in result(ONE_POLE, "rise").message


def test_a_network_that_is_not_stable_has_no_level() -> None:
    body = """
    source s: a to ground = 1 V behind 1 kΩ
    branch c: a to ground = 1 nF
    amplifier grows: a, ground to b, ground { gain 3 }
    branch back: b to a = 1 kΩ
    reading out: b to ground
    step over 1 µs
    """
    assert "not stable" in result(body, "overshoot").message


def test_an_epoch_ends_the_record() -> None:
    """T_N = T(2 t_max) = τ (1 - e^(-2 t_max/τ))."""
    body = ONE_POLE + "step over 40 µs"
    assert value(body, "response_time", 1e-6) == pytest.approx(1e-6 * -math.expm1(-2.0), rel=1e-10)
    assert "twice the epoch" in result(body, "response_time", 30e-6).message


def test_a_contact_that_is_not_all() -> None:
    body = """
    under test {
      source s: p to ground = 1 V behind 50 Ω
      branch c: q to ground = 50 Ω
      branch d: p to q = 50 Ω
    }
    contact touch: p to q
    branch upper: p to m = 1 kΩ
    branch lower: m to q = 1 kΩ
    branch stray: m to ground = 1 pF
    reading out: m to ground
    step over 1 µs
    """
    assert 'meets the circuit under test at "ground" too' in result(body, "rise", "touch").message


# In the language


def test_in_requirements() -> None:
    text = (
        "nodal 1\n"
        + ONE_POLE
        + """
    step over 40 µs
    require ra: rise(out) = 2.2 µs ± 1 %
    require rb: settling(out, 2 %) <= 4 µs
    require rc: response_time(out, tangent) <= 1.1 µs
    require rd: response_settling_time(out, 15 µs, true) <= 2.9 µs
    require re: overshoot(out, s) <= 1 %
    require rf: rise(out) <= 2 µs
    """
    )
    found = checks.evaluate(nodal.loads(text))
    assert [r.status for r in found] == ["pass"] * 5 + ["fail"]
    assert found[3].figure == "response_settling_time(out, 15 µs, true)"


@pytest.mark.parametrize("figure", ["response_time(out, 3 Hz)", "rise(out, tangent)", "rise(out, 1 ns)"])
def test_arguments_that_do_not_fit(figure: str) -> None:
    with pytest.raises(nodal.DesignError):
        nodal.loads(f"nodal 1\n{ONE_POLE}\nstep over 1 µs\nrequire a: {figure} <= 1 µs")


# The polynomials


def test_integral_and_crossings_of_a_root() -> None:
    """√t: not smooth at its break, ∫ = 2/3 t^1.5."""
    found = piecewise(np.sqrt, [0.0, 4.0], lambda size: 1e-11 * size)
    assert found.integral()(4.0) == pytest.approx(16 / 3, rel=1e-10)
    assert found.crossings(0.5) == [(pytest.approx(0.25, rel=1e-9), True)]


def test_a_spike_next_to_a_break_is_not_missed() -> None:
    found = piecewise(lambda t: 1 + np.exp(-t / 1e-9), [0.0, 1.0], lambda size: 1e-11 * size)
    assert found.maximum()[1] == pytest.approx(2.0, rel=1e-9)
