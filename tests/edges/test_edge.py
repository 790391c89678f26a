"""The edge of whole networks, from their text, against closed forms and against a plain quadrature of the
sweep."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import integrate, optimize, special
from support.run import load

import nodal
from nodal.edge import EdgeResponse, edge_response
from nodal.network import Stimulus
from nodal.response import Unavailable
from nodal.solver.edges import INVERSION, POLES

CIRCUITS = Path(__file__).parents[2] / "circuits"


def edge(body: str, window: float, ramp: float = 0.0, case: str | None = None, **what: Any) -> EdgeResponse:
    return edge_response(load(body).network(case=case).network, stimulus=Stimulus(ramp, window), **what)


def crossing(trace: Any, level: float, low: float, high: float) -> float:
    return float(optimize.brentq(lambda t: float(trace(t)) - level, low, high, xtol=1e-30, rtol=1e-14))


BOUNCE = """
stock l { impedance 50 Ω; velocity 1 }
source s: in to ground = 1 V behind 25 Ω
cable w: in, ground to out, ground = LENGTH m of l
branch load: out to ground = 100 Ω
reading out: out to ground
""".replace("LENGTH", repr(299792458e-9))


def test_bounce() -> None:
    """25 Ω, 50 Ω, 100 Ω: 8/9 at T, 64/81 at 3T, 584/729 at 5T, finally 4/5 (textbook); nothing before, no
    ringing."""
    out = edge(BOUNCE, 12e-9).readings["out"]
    t = 1e-9
    assert_allclose(out([t, 3 * t, 5 * t]), [8 / 9, 64 / 81, 584 / 729], rtol=1e-15)
    assert_allclose(out([0, 0.5 * t, t * (1 - 1e-12)]), 0, atol=1e-16)
    assert_allclose(out([2.5 * t, 3 * t * (1 - 1e-12), 4.9 * t]), [8 / 9, 8 / 9, 64 / 81], rtol=1e-15)
    assert out.final == pytest.approx(0.8, rel=1e-15)
    steps = [2 / 3 * 4 / 3 * (-1 / 9) ** k for k in range(6)]
    assert_allclose(out.jumps[1::2][:6], steps, rtol=1e-14)


def test_bounce_of_a_ramp() -> None:
    """Half way up the ramp after each arrival is half of the step there (superposition)."""
    out = edge(BOUNCE, 12e-9, ramp=0.2e-9).readings["out"]
    expected = [4 / 9, 8 / 9, (8 / 9 + 64 / 81) / 2, 64 / 81]
    assert_allclose(out([1.1e-9, 1.2e-9, 3.1e-9, 3.2e-9]), expected, rtol=1e-12)


def test_grid_has_both_sides_of_a_jump() -> None:
    """A sample just before each jump and one at it; no more than asked for, in order."""
    response = edge(BOUNCE, 12e-9)
    grid = response.grid(200)
    assert len(grid) <= 200
    assert (np.diff(grid) > 0).all()
    assert grid[0] == 0
    assert grid[-1] == 12e-9
    for arrival in (1e-9, 3e-9, 5e-9):
        at = grid[np.argmin(np.abs(grid - arrival))]
        assert at == pytest.approx(arrival, rel=1e-14)
        before = grid[grid < arrival * (1 - 1e-15)].max()
        assert arrival - before < 1e-13 * arrival


def test_grid_follows_decades() -> None:
    """A pole of 1 µs watched for 1 s: straight lines between 200 samples miss the curve by less than 0.1
    %."""
    response = edge(
        """
    source s: in to ground = 1 V behind 1 kΩ
    branch c: in to ground = 1 nF
    reading out: in to ground
    """,
        1.0,
    )
    grid = response.grid(200)
    t = np.geomspace(1e-9, 1, 5000)
    out = response.readings["out"]
    assert_allclose(np.interp(t, grid, out(grid)), -np.expm1(-t / 1e-6), atol=1e-3)


def test_matched_square_root_line() -> None:
    """An RC line followed by one 1000 times longer: erfc(α/(2√t)), t50 = 1.09905466916 α², t90/t50 =
    28.8102673389 (Wigington and Nahman 1957): the long tail does not wrap round."""
    out = edge(
        """
    stock rc { resistance 1 kΩ/m; capacitance 1 nF/m }
    source s: in to ground = 1 V
    cable near: in, ground to out, ground = 1 m of rc
    cable far: out, ground to end, ground = 1000 m of rc
    reading out: out to ground
    """,
        100e-6,
    ).readings["out"]
    t = np.geomspace(1e-9, 100e-6, 300)
    assert_allclose(out(t), special.erfc(np.sqrt(1e-6) / (2 * np.sqrt(t))), atol=1e-12)
    t50, t90 = crossing(out, 0.5, 1e-7, 1e-4), crossing(out, 0.9, 1e-7, 1e-4)
    assert_allclose(t50, 1.09905466916e-6, rtol=1e-11)
    assert_allclose(t90 / t50, 28.8102673389, rtol=1e-11)


def test_front_of_a_lossy_line() -> None:
    """A long line of L, C and R from an ideal source: a jump of exp(-RT/2L) at T and, after it, the
    integral of the modified Bessel function I1 (Carson, Electric Circuit Theory and the Operational
    Calculus, 1926)."""
    r, inductance, c = 20.0, 250e-9, 100e-12
    t_line = 2 * math.sqrt(inductance * c)
    a = r / (2 * inductance)
    out = edge(
        """
    stock lossy { resistance 20 Ω/m; inductance 250 nH/m; capacitance 100 pF/m }
    source s: in to ground = 1 V
    cable near: in, ground to out, ground = 2 m of lossy
    cable far: out, ground to end, ground = 40 m of lossy
    reading out: out to ground
    """,
        20 * t_line,
    ).readings["out"]

    def expected(t: float) -> float:
        if t < t_line:
            return 0.0

        def wake(x: float) -> float:
            root = math.sqrt(max(x * x - t_line**2, 0.0))
            return math.exp(-a * x) * (special.iv(1, a * root) / root if root else a / 2)

        area = integrate.quad(wake, t_line, t, epsabs=1e-14, epsrel=1e-13, limit=200)[0]
        return math.exp(-a * t_line) + a * t_line * area

    assert_allclose(out([0.0, 0.99 * t_line]), 0, atol=1e-13)
    times = t_line * np.array([1, 1.0001, 1.01, 1.2, 2, 5, 20])
    assert_allclose(out(times), [expected(t) for t in times], rtol=1e-11)


def test_skin_effect_of_a_long_matched_line() -> None:
    """Lossless inductance and capacitance with a √s resistance far above its corner: erfc(k/(2√(t - T))),
    k = R_k l √(2/ω_k)/(2 Z0) to first order in the loss (Wigington and Nahman 1957)."""
    response = edge(
        """
    stock skin { impedance 50 Ω; velocity 0.66; skin 0.1 Ω/m at 1 GHz }
    source s: in to ground = 1 V behind 50 Ω
    cable w: in, ground to out, ground = 1 m of skin
    branch load: out to ground = 50 Ω
    reading out: out to ground times 2
    """,
        20e-9,
    )
    out = response.readings["out"]
    arrival = float(out.arrivals[1])
    k = 0.1 * math.sqrt(2 / (2 * math.pi * 1e9)) / (2 * 50)
    later = np.array([1e-15, 1e-14, 1e-13, 1e-12, 1e-11])
    assert_allclose(out(arrival + later), special.erfc(k / (2 * np.sqrt(later))), atol=5e-5)
    assert out.method == INVERSION


@pytest.mark.parametrize("gain", [0.5, -0.5, -0.9])
def test_delayed_feedback(gain: float) -> None:
    """An amplifier with nothing but a delay that feeds itself: 1 + g + g² + …, one term each delay."""
    out = edge(
        f"""
    source s: in to ground = 1 V
    branch a: in to sum = 1 kΩ
    branch b: sum to back = 1 kΩ
    amplifier loop: sum, ground to back, ground {{ gain {2 * gain!r}; delay 10 ns }}
    reading out: sum to ground times 2
    """,
        210e-9,
    ).readings["out"]
    terms = np.cumsum([gain**n for n in range(21)])  # sum = (1 + 2 gain · the sum, delayed)/2
    assert_allclose(out(10e-9 * np.arange(21)), terms, rtol=1e-12)
    assert_allclose(out(10e-9 * np.arange(21) + 9e-9), terms, rtol=1e-12)


def test_front_at_the_end_of_the_window() -> None:
    """A front that arrives with the last instant is there, though sums of delays are rounded."""
    out = edge(
        """
    source s: in to ground = 1 V
    branch a: in to sum = 1 kΩ
    branch b: sum to back = 1 kΩ
    amplifier loop: sum, ground to back, ground { gain 1; delay 10 ns }
    reading out: sum to ground times 2
    """,
        200e-9,
    ).readings["out"]
    assert sum([10e-9] * 20) > 200e-9
    assert out(200e-9) == pytest.approx(2 - 0.5**20, rel=1e-14)


SERIES = """
source s: in to ground = 1 V
branch path: in to out = 25 Ω -- 278.5116 nH
branch load: out to ground = 9.5 pF
reading out: out to ground
"""


def test_overshoot_of_a_series_circuit() -> None:
    """25 Ω, 278.5116 nH, 9.5 pF: 79.45619 % at 5.123818 ns for an ideal step (closed form)."""
    out = edge(SERIES, 100e-9).readings["out"]
    top = optimize.minimize_scalar(
        lambda t: -float(out(t)), bounds=(4e-9, 6e-9), method="bounded", options={"xatol": 1e-16}
    )
    zeta = 12.5 * math.sqrt(9.5e-12 / 278.5116e-9)
    assert -top.fun - 1 == pytest.approx(math.exp(-math.pi * zeta / math.sqrt(1 - zeta**2)), rel=1e-13)
    assert -top.fun - 1 == pytest.approx(0.7945619, abs=1e-7)
    assert top.x == pytest.approx(5.123818e-9, abs=5e-15)


@pytest.mark.parametrize("ramp", [0.0, 1e-9])
@pytest.mark.parametrize(
    "body",
    [
        SERIES,
        """
    source s: tip to ground = 1 V
    branch upper: tip to out = 9 MΩ ∥ 10 pF
    branch lower: out to ground = 1 MΩ ∥ 100 pF
    reading out: out to ground
    """,
    ],
)
def test_both_methods_agree(monkeypatch: pytest.MonkeyPatch, body: str, ramp: float) -> None:
    """Poles and inversion within 1e-7 of each reading's own step, and within the sum of their estimates."""
    from nodal.solver import edges

    direct = edge(body, 100e-9, ramp).readings["out"]
    assert direct.method == POLES
    monkeypatch.setattr(edges, "_realised", lambda *_: None)
    other = edge(body, 100e-9, ramp).readings["out"]
    assert other.method == INVERSION
    t = np.concatenate([[0.0], np.geomspace(1e-13, 100e-9, 300)])
    difference = float(np.abs(direct(t) - other(t)).max())
    assert difference < 1e-12
    assert difference <= direct.error + other.error


def test_estimate_of_poles_counts_the_mismatch(monkeypatch: pytest.MonkeyPatch) -> None:
    """Residues off by 3e-10 still pass; the estimate is then no less than what it does to the edge."""
    from nodal.solver import edges, realise

    exact = edge(SERIES, 100e-9).readings["out"]

    def spoilt(system: Any, source: Any, outputs: Any, frequencies: Any, pace: float) -> Any:
        found = realise.realise(system, source, outputs, frequencies, pace)
        found = replace(found, residues=found.residues * (1 + 3e-10))
        return realise._checked(found, system, source, outputs, np.zeros(0))

    monkeypatch.setattr(edges, "realise", spoilt)
    out = edge(SERIES, 100e-9).readings["out"]
    assert out.method == POLES
    t = np.linspace(0, 100e-9, 500)
    actual = float(np.abs(out(t) - exact(t)).max())
    assert actual > 1e-10
    assert actual <= out.error <= 1000 * actual


def test_slow_filter_behind_a_source() -> None:
    """1 kΩ into 2 nF with 50 Ω: from 1/21 to 1 with 2.1 µs (elementary), though far above its pole
    rounding spoils the determinant that tells where poles are."""
    out = edge(
        """
    source s: in to ground = 1 V behind 1 kΩ
    branch filter: in to ground = 2 nF -- 50 Ω
    reading out: in to ground
    """,
        1e-3,
    ).readings["out"]
    assert out.method == POLES
    t = np.concatenate([[0.0], np.geomspace(1e-9, 1e-3, 50)])
    assert_allclose(out(t), 1 - 20 / 21 * np.exp(-t / 2.1e-6), rtol=1e-13)


def test_values_at_both_ends() -> None:
    """v(0+) = H(∞), v(∞) = H(0); 9 MΩ ∥ 10 pF over 1 MΩ ∥ 100 pF with 99 µs between (common practice)."""
    response = edge(
        """
    under test { source s: tip to ground = 2 V }
    contact tip: tip to ground
    branch upper: tip to out = 9 MΩ ∥ 10 pF
    branch lower: out to ground = 1 MΩ ∥ 100 pF
    reading out: out to ground times 10
    """,
        1e-3,
    )
    out = response.readings["out"]
    assert_allclose(out([0, 99e-6]), [20 / 11, 2 - (2 - 20 / 11) / math.e], rtol=1e-13)
    assert out.final == 2
    assert out.before == 0
    contact = response.contacts["tip"]
    assert contact.undisturbed is not None
    assert_allclose(contact.undisturbed([0.0, 1e-6]), 2, rtol=1e-15)
    assert_allclose(contact.loaded([0.0, 1e-6]), 2, rtol=1e-15)


def test_balanced_output_is_zero() -> None:
    """A bridge in balance shows nothing but exact zeros."""
    out = edge(
        """
    source s: in to ground = 1 V behind 50 Ω
    branch a: in to p = 1 kΩ ∥ 1 pF
    branch b: in to n = 1 kΩ ∥ 1 pF
    branch c: p to ground = 3 kΩ ∥ 7 pF
    branch d: n to ground = 3 kΩ ∥ 7 pF
    reading out: p to n
    """,
        1e-6,
    ).readings["out"]
    assert (out(np.linspace(0, 1e-6, 20)) == 0).all()
    assert out.error == 0


def test_impulse_names_the_reading() -> None:
    """An ideal source of current on an inductor: the voltage is an impulse."""
    body = """
    source s: in to ground = 1 A
    branch coil: in to ground = 1 µH
    reading out: in to ground
    """
    with pytest.raises(Unavailable, match=r'drives reading "out".* to an impulse'):
        edge(body, 1e-6)
    assert_allclose(edge(body, 1e-6, ramp=1e-7).readings["out"]([0, 0.5e-7, 1.5e-7]), [10, 10, 0], atol=1e-12)


def test_growing_network_follows_its_poles() -> None:
    """A negative resistance: exp growth, poles in the right half plane (elementary)."""
    out = edge(
        """
    source s: in to ground = 1 V behind 1 kΩ
    branch c: in to ground = 1 nF
    amplifier a: in, ground to in, ground { transconductance 2 mS }
    reading out: in to ground
    """,
        5e-6,
    ).readings["out"]
    t = np.linspace(0, 5e-6, 50)
    assert_allclose(out(t), np.expm1(t / 1e-6), rtol=1e-12)


def plain_quadrature(network: Any, drive: str, reading: str, stimulus: Stimulus, times: Any) -> Any:
    """The trapezoidal rule for the Bromwich integral with the solver's H, a far to the right (aliases
    below e^-14)."""
    from nodal.assemble import assemble, excitation
    from nodal.solver.sweep import solve

    written = {p.name: p.value.nominal for p in network.parts if p.kind.endswith("source")}
    built = assemble(network)
    source = excitation(built, [(name, w * written[name]) for name, w in network.drive(drive).weights])
    shown = network.reading(reading)
    output = {k: w * shown.times.nominal for k, w in built.across(shown.a, shown.b).items()}
    a, step = 7 / stimulus.window, math.pi / (2 * stimulus.window)
    s = a + 1j * step * (np.arange(int(300 / (stimulus.ramp * step))) + 0.5)
    y = solve(built.system, s, [source], [output]).values[0, 0]
    y *= -np.expm1(-s * stimulus.ramp) / (s * stimulus.ramp) / s
    turned = np.exp(1j * np.multiply.outer(times, s.imag))
    return np.exp(a * times) / np.pi * step * (turned * y).real.sum(axis=1)


@pytest.mark.parametrize("name", ["bench_probe", "resistive_probe", "active_probe", "current_shunt"])
def test_shipped_circuits(name: str) -> None:
    """Real chains with cables, skin effect and amplifiers, against the plain quadrature (which stops
    early: 1e-4)."""
    path = CIRCUITS / f"{name}.nodal"
    network = nodal.load(str(path)).network().network
    assert network.stimulus is not None
    drive = network.drives[-1].name
    response = edge_response(network, drive=drive)
    reading = next(iter(response.readings))
    times = network.stimulus.window * np.array([0.02, 0.1, 0.3, 0.6, 0.9])
    expected = plain_quadrature(network, drive, reading, network.stimulus, times)
    swing = max(abs(response.readings[reading].final), np.abs(expected).max())
    assert_allclose(response.readings[reading](times), expected, atol=1e-4 * swing)
    assert response.readings[reading].error < 1e-9 * swing


def test_many_passages() -> None:
    """A window of 100,000 passages of a lossy line: it ends at the divider of its resistances."""
    out = edge(
        """
    stock lossy { resistance 10 Ω/m; inductance 250 nH/m; capacitance 100 pF/m }
    source s: in to ground = 1 V behind 25 Ω
    cable w: in, ground to out, ground = 2 m of lossy
    branch load: out to ground = 100 Ω
    reading out: out to ground
    """,
        1e-3,
    ).readings["out"]
    assert_allclose(out([1e-5, 1e-4, 1e-3]), 100 / 145, rtol=1e-11)
    assert out([1e-8])[0] == pytest.approx(math.exp(-10 / 50 * 2 / 2) * 8 / 9, rel=0.03)


def test_times_after_the_window_are_refused() -> None:
    out = edge(SERIES, 1e-7).readings["out"]
    assert out(-1.0) == 0
    with pytest.raises(ValueError, match="after the window"):
        out(2e-7)


def test_missing_stimulus() -> None:
    with pytest.raises(Unavailable, match="no edge"):
        edge_response(load(SERIES).network().network)
