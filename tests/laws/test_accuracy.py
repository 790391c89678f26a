"""The whole pipeline against 60-digit arithmetic: right to max(1e-10, 1000 ε Σ|∂ ln H/∂ ln p|), or flagged.

The reference (`support.reference`) is a dense modified nodal analysis of its own. A result is flagged where
its estimated error is above 1e-11, the limit beyond which the solver promises to have tried everything.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st
from support import reference

import nodal
from nodal.network import Network
from nodal.response import Curve, Response
from nodal.strategies import EVERY, LUMPED, frequencies, networks

CIRCUITS = sorted((Path(__file__).parents[2] / "circuits").glob("*.nodal"))
EPSILON = float(np.finfo(float).eps)
FLAG = 1e-11


def check(network: Network, name: str, frequency: float, curve: Curve, drive: str | None = None) -> None:
    """One point against the reference. The sensitivities are worked out only where 1e-10 does not hold."""
    try:
        exact = reference.reading(network, name, frequency, drive)
    except reference.TooLong:
        reject()
    found = complex(curve.values[0])
    if reference.vanishes(network, name, frequency, exact, drive):
        assert found == 0 or curve.error[0] > FLAG
        return
    if abs(exact) < 1e-290:  # below what a double can hold
        assert abs(found) < 1e-280
        return
    error = float(abs(found - exact) / abs(exact))
    if error <= 1e-10 or curve.error[0] > FLAG:
        return
    sharpness = reference.sensitivity_sum(network, name, frequency, drive)
    assert error <= 1000 * EPSILON * sharpness, (
        f"off by {error:.2g}, estimated {curve.error[0]:.2g}, {sharpness=:.3g}"
    )


@given(networks(EVERY, decades=12), frequencies(12))
def test_any_network_over_twelve_decades(network: Network, frequency: float) -> None:
    check(network, "out", frequency, Response(network).reading([frequency], "out"))


@settings(max_examples=60)
@given(networks(LUMPED, decades=12, max_nodes=10, max_extra=12), frequencies(12))
def test_lumped_networks_over_twelve_decades(network: Network, frequency: float) -> None:
    check(network, "out", frequency, Response(network).reading([frequency], "out"))


@given(
    networks(EVERY, source="current", decades=12, ports=2),
    frequencies(12),
    st.sampled_from(["port1", "port2"]),
)
def test_current_drives_over_twelve_decades(network: Network, frequency: float, drive: str) -> None:
    check(network, "out", frequency, Response(network).reading([frequency], "out", drive), drive)


@settings(max_examples=30)
@given(networks(LUMPED, decades=8), st.just(0.0))
def test_limit_at_zero_frequency(network: Network, frequency: float) -> None:
    """Against the same network at 1e-120 rad/s, real."""
    curve = Response(network).reading([frequency], "out")
    exact = float(reference.reading(network, "out", 0.0).real)
    assert curve.values[0].imag == 0
    if abs(exact) < 1e-60:
        assert curve.values[0] == 0
    else:
        np.testing.assert_allclose(curve.values[0].real, exact, rtol=1e-10)


def test_there_are_circuits() -> None:
    assert len(CIRCUITS) >= 7


@pytest.mark.parametrize("path", CIRCUITS, ids=lambda path: path.stem)
def test_shipped_circuit(path: Path) -> None:
    """Every case, drive and reading at five frequencies of its sweep."""
    design = nodal.load(str(path))
    for case in design.cases:
        network = design.network(case=case).network
        assert network.grid is not None
        response = Response(network)
        for frequency in np.geomspace(network.grid.low, network.grid.high, 5):
            for name in (reading.name for reading in network.readings):
                for drive in (drive.name for drive in network.drives):
                    curve = response.reading([float(frequency)], name, drive)
                    check(network, name, float(frequency), curve, drive)
