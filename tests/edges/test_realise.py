"""Poles and residues against closed forms."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import special

from nodal.solver.matrix import System, Term
from nodal.solver.realise import NotRealised, Realisation, at_infinity, realise

SECONDS = np.concatenate([[0.0], np.geomspace(1e-6, 200, 700)])


def own(row: int, g: float = 0.0, c: float = 0.0) -> Term:
    return Term(((row, 1.0),), ((row, 1.0),), g, c)


def passed_on(to: int, origin: int, gain: float = 1.0) -> Term:
    return Term(((to, 1.0),), ((origin, 1.0),), -gain)


def buffered(time_constants: list[float]) -> tuple[System, dict[int, float], list[dict[int, float]]]:
    """One pole after another, each ahead of an ideal buffer: H = 1/Π(1 + s τ)."""
    terms = [own(k, 1.0, tau) for k, tau in enumerate(time_constants)]
    terms += [passed_on(k + 1, k) for k in range(len(time_constants) - 1)]
    return System(len(time_constants), tuple(terms)), {0: 1.0}, [{len(time_constants) - 1: 1.0}]


def partial_fractions(taus: list[float], times: Any) -> list[float]:
    """Step response of 1/Π(1 + s τ), all τ different, with 200 digits."""
    with mpmath.workdps(200):
        exact = [mpmath.mpf(tau) for tau in taus]
        factors = [mpmath.fprod(a / (a - b) for b in exact if b != a) for a in exact]

        def left(t: float) -> Any:
            parts = zip(factors, exact, strict=True)
            return mpmath.fsum(f * mpmath.exp(-mpmath.mpf(t) / a) for f, a in parts)

        return [float(1 - left(t)) for t in times]


def ladder(sections: int, r: float, henry: float, c: float, load: float) -> tuple[System, Any, Any]:
    """R and L in series, C to ground, `sections` times; 50 Ω source."""
    terms = [own(0, 1 / 50), own(sections, 1 / load)]
    for k in range(sections):
        current = sections + 1 + k
        along = ((k, 1.0), (k + 1, -1.0))
        terms += [
            Term(along, ((current, 1.0),), 1.0),
            Term(((current, 1.0),), along, 1.0),
            own(current, -r, -henry),
            own(k + 1, 0.0, c),
        ]
    return System(2 * sections + 1, tuple(terms)), {0: 1 / 50}, [{sections: 1.0}]


def test_one_pole() -> None:
    """1 - exp(-t/τ); 10 % to 90 % takes ln 9 τ (Valley and Wallman 1948)."""
    found = realise(*buffered([2.0]))
    assert found.accepted.all()
    assert_allclose(found.edge(SECONDS)[0], -np.expm1(-SECONDS / 2), rtol=0, atol=1e-15)
    assert_allclose(found.poles, [-0.5], rtol=1e-15)
    t10, t90 = (-2 * math.log(1 - level) for level in (0.1, 0.9))
    assert_allclose(t90 - t10, 2 * 2.19722457734, rtol=1e-11)
    assert_allclose(found.edge([t10, t90])[0], [0.1, 0.9], rtol=1e-14)


@pytest.mark.parametrize("count", [2, 3, 8, 30])
def test_equal_poles(count: int) -> None:
    """n buffered poles of 1 s: the regularised incomplete gamma function P(n, t) (e.g. Abramowitz and Stegun
    6.5.13).

    Two take 3.35790856148 s from 10 % to 90 % (Valley and Wallman 1948).
    """
    found = realise(*buffered([1.0] * count))
    assert found.accepted.all()
    assert_allclose(found.edge(SECONDS)[0], special.gammainc(count, SECONDS), rtol=0, atol=3e-14)
    if count == 2:
        t10, t90 = (float(special.gammaincinv(2, level)) for level in (0.1, 0.9))
        assert_allclose(t90 - t10, 3.35790856148, rtol=1e-11)


@pytest.mark.parametrize("spread", [1e-15, 1e-12, 1e-9, 1e-6, 1e-3])
def test_nearly_equal_poles(spread: float) -> None:
    """Four poles closer and closer: partial fractions with 200 digits."""
    taus = [1 + k * spread for k in range(4)]
    found = realise(*buffered(taus))
    expected = partial_fractions(taus, SECONDS[::10])
    assert_allclose(found.edge(SECONDS[::10])[0], expected, rtol=0, atol=2e-14)


def test_picoseconds_to_seconds() -> None:
    """Poles of 1 ps, 1 ns, 1 µs, 1 ms, 1 s in one network: partial fractions with 60 digits."""
    taus = [1e-12, 1e-9, 1e-6, 1e-3, 1.0]
    system, source, _ = buffered(taus)
    found = realise(system, source, [{k: 1.0} for k in range(5)])
    assert found.accepted.all()
    assert_allclose(np.sort(-1 / found.poles.real), taus, rtol=1e-13)
    times = np.geomspace(1e-14, 10, 60)
    for k in range(5):
        expected = partial_fractions(taus[: k + 1], times)
        assert_allclose(found.edge(times, outputs=[k])[0], expected, rtol=0, atol=1e-13)


def test_second_order() -> None:
    """ζ = 0.5: overshoot exp(-πζ/√(1 - ζ²)) = 0.163033534822 at ω t = 3.62759872847 (textbook)."""
    # x'' + x' + x = u with y = x, z = y'
    terms = (own(0, 0.0, 1.0), passed_on(0, 1), own(1, 1.0, 1.0), passed_on(1, 0, -1.0))
    found = realise(System(2, terms), {1: 1.0}, [{0: 1.0}])
    assert_allclose(found.edge([3.62759872847])[0, 0], 1.163033534822, rtol=1e-12)
    root = math.sqrt(0.75)
    expected = 1 - np.exp(-SECONDS / 2) * (np.cos(root * SECONDS) + 0.5 / root * np.sin(root * SECONDS))
    assert_allclose(found.edge(SECONDS)[0], expected, rtol=0, atol=1e-14)


def test_ringing_without_loss() -> None:
    """An ideal resonance rings for ever: 1 - cos t, also after thirty periods."""
    terms = (own(0, 0.0, 1.0), passed_on(0, 1), own(1, 0.0, 1.0), passed_on(1, 0, -1.0))
    found = realise(System(2, terms), {1: 1.0}, [{0: 1.0}])
    assert_allclose(found.edge(SECONDS)[0], 1 - np.cos(SECONDS), rtol=0, atol=1e-13)


def test_poles_at_the_origin() -> None:
    """One, two and three integrators: t, t²/2, t³/6."""
    terms = (own(0, 0.0, 1.0), own(1, 0.0, 1.0), own(2, 0.0, 1.0), passed_on(1, 0), passed_on(2, 1))
    found = realise(System(3, terms), {0: 1.0}, [{k: 1.0} for k in range(3)])
    assert_allclose(found.poles, 0, atol=0)
    for k in range(3):
        expected = SECONDS ** (k + 1) / math.factorial(k + 1)
        assert_allclose(found.edge(SECONDS)[k], expected, rtol=1e-11, atol=1e-17)


def test_pole_at_the_origin_that_is_not_excited() -> None:
    """Two capacitors in series divide for ever: no drift from the charge between them (charge is
    conserved)."""
    terms = (own(0, 1.0), Term(((1, 1.0),), ((1, 1.0), (0, -1.0)), 0.0, 2.0), own(1, c=3.0), own(2, 1.0, 1.0))
    found = realise(System(3, (*terms, passed_on(2, 1))), {0: 1.0}, [{1: 1.0}, {2: 1.0}])
    assert_allclose(found.edge([0.0, 1.0, 1e6, 1e12])[0], 0.4, rtol=1e-14)
    assert_allclose(found.edge([1.0, 1e6, 1e12])[1], [0.4 * (1 - math.exp(-1)), 0.4, 0.4], rtol=1e-14)


def test_direct_feed_through() -> None:
    """9 MΩ ∥ 10 pF over 1 MΩ ∥ 100 pF: from 1/11 to 1/10 with 99 µs (common practice)."""
    # Row 0 alone decides v0: an ideal source.
    terms = (own(0, 1.0), Term(((1, 1.0),), ((1, 1.0), (0, -1.0)), 1 / 9e6, 10e-12), own(1, 1e-6, 100e-12))
    found = realise(System(2, terms), {0: 1.0}, [{1: 1.0}])
    t = np.concatenate([[0.0], np.geomspace(1e-9, 1e-2, 100)])
    assert_allclose(found.edge(t)[0], 0.1 - (0.1 - 1 / 11) * np.exp(-t / 99e-6), rtol=1e-14)
    assert found.direct[0] == pytest.approx(1 / 11, rel=1e-15)


@pytest.mark.parametrize("ramp", [1e-15, 1e-9, 1e-3, 1.0, 50.0])
def test_ramp(ramp: float) -> None:
    """A ramp through one pole, from the difference of two integrals with 60 digits, where it loses
    nothing."""
    found = realise(*buffered([1.0, 3.0]))
    with mpmath.workdps(60):

        def area(t: Any) -> Any:
            if t <= 0:
                return mpmath.mpf(0)
            return t - 4 + (9 * mpmath.exp(-t / 3) - mpmath.exp(-t)) / 2

        expected = [
            float((area(mpmath.mpf(t)) - area(mpmath.mpf(t) - mpmath.mpf(ramp))) / mpmath.mpf(ramp))
            for t in SECONDS[::7]
        ]
    assert_allclose(found.edge(SECONDS[::7], ramp)[0], expected, rtol=1e-11, atol=1e-16)


def test_impulse_is_told() -> None:
    """The current into a capacitor across an ideal source: H = s C, which grows without bound."""
    terms = (own(0, 1.0), own(1, 1.0), Term(((1, 1.0),), ((0, 1.0),), 0.0, -2e-9))
    at = at_infinity(System(2, terms), {0: 1.0}, [{0: 1.0}, {1: 1.0}])
    assert at.order.tolist() == [0, 1]
    assert_allclose(at.slope, [0, 2e-9], rtol=1e-15)
    found = realise(System(2, terms), {0: 1.0}, [{1: 1.0}])
    assert_allclose(found.edge([0.0, 1e-9, 2e-9, 3e-9], 2e-9)[0], [1.0, 1.0, 0.0, 0.0], atol=1e-14)


@pytest.mark.parametrize(("r", "henry", "load"), [(1.0, 1e-9, 50.0), (50.0, 1e-9, 1e6), (0.01, 30e-9, 1e6)])
def test_long_ladder(r: float, henry: float, load: float) -> None:
    """Sixty sections: it begins at H(∞) = 0, ends at H(0), and is what the trapezoidal rule of the
    Bromwich integral gives (with a line far to the right, where aliases are below e^-30)."""
    system, source, outputs = ladder(60, r, henry, 1e-12, load)
    found = realise(system, source, outputs)
    assert found.accepted.all()
    assert len(found.poles) == 120
    assert found.edge([0.0])[0, 0] == 0
    final = load / (load + 50 + 60 * r)
    slowest = -1 / found.poles.real.max()
    assert_allclose(found.edge([60 * slowest])[0], final, rtol=1e-10)
    window = 20e-9
    a, step = 15 / window, math.pi / (2 * window)
    omega = step * (np.arange(40000) + 0.5)
    times = np.linspace(0.1, 1, 7) * window
    values = found.transfer(a + 1j * omega)[0]
    from nodal.solver.sweep import solve

    solved = solve(system, a + 1j * omega[:400], [source], outputs).values[0, 0]
    assert_allclose(values[:400], solved, atol=1e-10 * np.abs(solved).max())
    y = values / (a + 1j * omega)
    turned = np.exp(1j * np.multiply.outer(times, omega))
    expected = np.exp(a * times) / np.pi * step * (y * turned).real.sum(axis=1)
    assert_allclose(found.edge(times)[0], expected, atol=1e-5)


def test_gate_refuses_what_does_not_come_out_again() -> None:
    """A residue that is off by 1e-8 is not accepted."""
    found = realise(*buffered([1.0, 2.0]))
    assert found.accepted.all()
    spoilt: Realisation = replace(found, mismatch=found.largest * 1e-8)
    assert not spoilt.accepted.any()


def test_system_with_functions_is_refused() -> None:
    class Root:
        count = 1

        def evaluate(self, s: Any, arithmetic: Any) -> Any:
            return (arithmetic.sqrt(s),)

    system = System(1, (own(0, 1.0), Term(((0, 1.0),), ((0, 1.0),), f=0)), (Root(),))
    with pytest.raises(ValueError, match="functions"):
        realise(system, {0: 1.0}, [{0: 1.0}])
    assert issubclass(NotRealised, Exception)
