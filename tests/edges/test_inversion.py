"""The Bromwich integral on panels: values and error estimates against closed forms."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import special
from scipy.optimize import brentq

from nodal.solver import inversion
from nodal.solver.inversion import NODES, Inversion, NotInverted, invert, spherical_bessel

T = np.concatenate([[0.0], np.geomspace(1e-12, 1, 800)])

Curve = Callable[[Any], Any]


def inverted(h: Curve, window: float = 1.0, ramp: float = 0.0, jump: float = 0.0) -> Inversion:
    def transfer(s: Any) -> Any:
        values = h(s)[None]
        return values, np.zeros(values.shape), np.abs(values)

    return invert(transfer, np.array([jump]), window, ramp)


def erfc(alpha: float) -> Curve:
    return lambda t: special.erfc(alpha / 2 / np.sqrt(np.maximum(t, 1e-300)))


def second_order(zeta: float, w: float) -> Curve:
    root = np.sqrt(1 - zeta**2) * w
    return lambda t: 1 - np.exp(-zeta * w * t) * (np.cos(root * t) + zeta * w / root * np.sin(root * t))


def column(t: Any) -> Any:
    """Of √s/sinh √s: 1 + 2 Σ (-1)ⁿ exp(-n²π²t), and for short t from the images 2/√(πt) Σ
    exp(-(2k+1)²/4t)."""
    t = np.asarray(t, dtype=float)[:, None]
    n = np.arange(1, 40)
    late = 1 + 2 * ((-1.0) ** n * np.exp(-((n * np.pi) ** 2) * np.maximum(t, 0.05))).sum(axis=1)
    short = np.clip(t, 1e-4, None)
    early = (2 / np.sqrt(np.pi * short) * np.exp(-((2 * np.arange(12) + 1) ** 2) / (4 * short))).sum(axis=1)
    return np.where(t[:, 0] < 0.05, np.where(t[:, 0] < 1e-4, 0.0, early), late)


def open_line(t: Any) -> Any:
    """Of 1/cosh √s: 1 - 2 Σ (-1)ᵏ exp(-m²t)/m, m = (k + 1/2)π; for short t 2 Σ (-1)ᵏ erfc((2k+1)/(2√t))."""
    t = np.asarray(t, dtype=float)[:, None]
    k = np.arange(40)
    m = (k + 0.5) * np.pi
    late = 1 - 2 * ((-1.0) ** k / m * np.exp(-(m**2) * np.maximum(t, 0.05))).sum(axis=1)
    early = 2 * ((-1.0) ** k * special.erfc((2 * k + 1) / (2 * np.sqrt(np.maximum(t, 1e-300))))).sum(axis=1)
    return np.where(t[:, 0] < 0.05, early, late)


def sech(s: Any) -> Any:
    q = np.sqrt(s)
    return 2 * np.exp(-q) / (1 + np.exp(-2 * q))


def over_sinh(s: Any) -> Any:
    q = np.sqrt(s)
    return -2 * q * np.exp(-q) / np.expm1(-2 * q)


CASES: dict[str, tuple[Curve, Curve, float]] = {
    # H, the response to a step, H(∞)
    "one pole": (lambda s: 1 / (1 + 1e-3 * s), lambda t: -np.expm1(-t / 1e-3), 0.0),
    "fast pole": (lambda s: 1 / (1 + 1e-9 * s), lambda t: -np.expm1(-t / 1e-9), 0.0),
    "slow pole": (lambda s: 1 / (1 + 1e3 * s), lambda t: -np.expm1(-t / 1e3), 0.0),
    "two equal poles": (lambda s: 1 / (1 + 0.1 * s) ** 2, lambda t: special.gammainc(2, t / 0.1), 0.0),
    "half a second order": (lambda s: 1e6 / (s * s + 1e3 * s + 1e6), second_order(0.5, 1e3), 0.0),
    "ringing": (lambda s: 1e6 / (s * s + 0.2 * s + 1e6), second_order(1e-4, 1e3), 0.0),
    "jump": (
        lambda s: 1 / 11 + (1 / 10 - 1 / 11) / (1 + 99e-6 * s),
        lambda t: 0.1 - (0.1 - 1 / 11) * np.exp(-t / 99e-6),
        1 / 11,
    ),
    "matched √s line": (lambda s: np.exp(-0.1 * np.sqrt(s)), erfc(0.1), 0.0),
    "very short √s line": (lambda s: np.exp(-1e-7 * np.sqrt(s)), erfc(1e-7), 0.0),
    "very long √s line": (lambda s: np.exp(-3 * np.sqrt(s)), erfc(3), 0.0),
    "open RC line": (sech, open_line, 0.0),
    "column with earth capacitance": (over_sinh, column, 0.0),
}


@pytest.mark.parametrize("name", CASES)
def test_estimate_is_true(name: str) -> None:
    """actual error <= estimate <= 1000 max(actual, 1e-12), over twelve decades of time (erfc: Wigington
    and Nahman 1957; the RC line: exact series; the column: Kuffel, Zaengl and Kuffel, ch. 3, and theta
    functions)."""
    h, expected, jump = CASES[name]
    found = inverted(h, jump=jump)
    actual = float(np.abs(found.edge(T)[0] - expected(T)).max())
    assert actual <= found.error[0] <= 1000 * max(actual, 1e-12)
    assert actual < 1e-12


@pytest.mark.parametrize("most", [60, 70, 80])
def test_estimate_is_true_where_panels_run_out(monkeypatch: pytest.MonkeyPatch, most: int) -> None:
    """A delay that is left in H asks for more panels than there may be: the estimate says so, and not too
    much."""
    monkeypatch.setattr(inversion, "MOST_PANELS", most)
    late, tau = 0.3, 5e-3
    found = inverted(lambda s: np.exp(-late * s) / (1 + tau * s) ** 4)
    actual = float(np.abs(found.edge(T)[0] - special.gammainc(4, np.maximum(T - late, 0) / tau)).max())
    assert actual > 1e-11
    assert actual <= found.error[0] <= 1000 * actual


def test_times_of_the_open_rc_line() -> None:
    """t10, t50, t90 over RC from the exact series (Sakurai 1983 gives fits to these)."""
    found = inverted(sech, 3.0)
    for level, expected in ((0.1, 0.130158890478), (0.5, 0.378747838271), (0.9, 1.03110498228)):
        time = brentq(lambda t, y=level: float(found.edge(np.array([t]))[0, 0]) - y, 1e-3, 3.0, xtol=1e-14)
        assert_allclose(time, expected, rtol=1e-11)


def test_times_of_the_column() -> None:
    """t50 and t90 over τ of √(sτ)/sinh √(sτ) (Kuffel, Zaengl and Kuffel, ch. 3)."""
    found = inverted(over_sinh, 3.0)
    for level, expected in ((0.5, 0.138785297043), (0.9, 0.303518469143)):
        time = brentq(lambda t, y=level: float(found.edge(np.array([t]))[0, 0]) - y, 1e-3, 3.0, xtol=1e-14)
        assert_allclose(time, expected, rtol=1e-11)


@pytest.mark.parametrize("ramp", [1e-12, 1e-7, 1e-3, 0.3])
def test_ramp(ramp: float) -> None:
    """A ramp through one pole: (t - τ(1 - e^(-t/τ)))/d up to d, then a decay (elementary)."""
    tau = 1e-3
    found = inverted(lambda s: 1 / (1 + tau * s), ramp=ramp)
    t = np.concatenate([T, ramp * np.array([0.5, 1.0, 1.5, 10.0])])
    t = t[t <= 1]
    x = np.minimum(t, ramp) / tau
    series = x / 2 - x**2 / 6 + x**3 / 24 - x**4 / 120
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(x < 1e-3, series, 1 + np.expm1(-x) / x)
    early = mean * np.minimum(t, ramp) / ramp
    expected = np.where(t <= ramp, early, 1 - (1 - early) * np.exp(-(t - ramp) / tau))
    actual = float(np.abs(found.edge(t)[0] - expected).max())
    assert actual <= found.error[0] <= 1000 * max(actual, 1e-12)


def test_noisy_transfer_function_ends_in_closed_form() -> None:
    """Where rounding takes over, what is left of H goes on as a power of s: one pole and a √s line."""
    for h, expected in (
        (lambda s: 1 / (1 + 0.1 * s), lambda t: -np.expm1(-t / 0.1)),
        (lambda s: 1 / np.sqrt(1 + s), lambda t: special.erf(np.sqrt(t))),
    ):

        def transfer(s: Any, h: Curve = h) -> Any:
            values = h(s)[None]
            return values, np.where(np.abs(s) > 1e9, 1.0, 0.0)[None], np.abs(values)

        found = invert(transfer, np.zeros(1), 1.0)
        actual = np.abs(found.edge(T)[0] - expected(T)).max()
        assert actual <= found.error[0]
        assert actual < 1e-12


def test_growing_response_is_refused() -> None:
    """A pole at +100/s grows by e^100 within the window."""
    with pytest.raises(NotInverted, match="grows"):
        inverted(lambda s: 1 / (s - 100))


def test_spherical_bessel_functions() -> None:
    """Against scipy, small and large, both signs."""
    x = np.concatenate([np.geomspace(1e-12, 1e6, 3000), -np.geomspace(1e-3, 1e3, 300)])
    expected = np.array([special.spherical_jn(k, x) for k in range(NODES)])
    assert_allclose(spherical_bessel(x[None])[0], expected, rtol=0, atol=3e-15)
