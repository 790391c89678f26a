"""Coupled inductors against the impedance matrix s M, and the traps of tight coupling."""

from __future__ import annotations

import numpy as np
import pytest

from nodal.network import Contact, Drive, Network, Reading
from nodal.parts import Coupling, Inductor, Resistor, VoltageSource
from nodal.parts.coupling import groups
from nodal.response import Response
from nodal.values import Value


@pytest.mark.parametrize(
    "k", [[0.5, 0.2, 0.2], [0.9, 0.8, 0.95], [1.0, 1.0, 1.0], [-1.0, 1.0, -1.0], [0.0, 0.3, 0.0]]
)
def test_squares_add_up_to_the_inductance_matrix(k: list[float]) -> None:
    sizes = {"x": 1e-6, "y": 4e-6, "z": 9e-6}
    pairs = [("x", "y"), ("y", "z"), ("x", "z")]
    couplings = [
        Coupling(a + b, a, b, Value(v), coefficient=True) for (a, b), v in zip(pairs, k, strict=True)
    ]
    total = dict.fromkeys(((a, b) for a in sizes for b in sizes), 0.0)
    covered = set()
    for group in groups(sizes, couplings):
        covered |= set(group.names)
        for weights, factor in group.squares():
            for a, u in weights:
                for b, v in weights:
                    total[a, b] += factor * u * v
    for (a, b), v in zip(pairs, k, strict=True):
        assert total[a, b] == pytest.approx(v * np.sqrt(sizes[a] * sizes[b]), rel=1e-13, abs=1e-24)
    for name in covered:
        assert total[name, name] == pytest.approx(sizes[name], rel=1e-13)


def test_a_perfect_coupling_is_one_square() -> None:
    (group,) = groups({"x": 1e-6, "y": 3e-6}, [Coupling("k", "x", "y", Value(1.0), coefficient=True)])
    assert len(list(group.squares())) == 1


def test_the_rounded_root_of_a_product_is_a_perfect_coupling() -> None:
    mutual = np.sqrt(1.1e-6 * 3.7e-6) * (1 + 2e-16)
    (group,) = groups({"x": 1.1e-6, "y": 3.7e-6}, [Coupling("k", "x", "y", Value(mutual))])
    assert group.coefficients[0, 1] == 1.0
    assert group.passive()


def test_couplings_that_yield_energy_are_told() -> None:
    sizes = dict.fromkeys("xyz", 1e-6)
    couplings = [
        Coupling(a + b, a, b, Value(v), coefficient=True)
        for a, b, v in (("x", "y", 0.9), ("y", "z", 0.9), ("x", "z", -0.9))
    ]
    (group,) = groups(sizes, couplings)
    assert not group.passive()


def transformer(k: float, load: float) -> Network:
    return Network(
        ("ground", "drive", "first", "second"),
        (
            VoltageSource("s", 1, 0, Value(1.0), side="test"),
            Resistor("inside", 1, 2, Value(50.0), side="test"),
            Inductor("x", 2, 0, Value(100e-6)),
            Inductor("y", 3, 0, Value(400e-6)),
            Coupling("k", "x", "y", Value(k), coefficient=True),
            Resistor("load", 3, 0, Value(load)),
        ),
        contacts=(Contact("touch", 2, 0),),
        readings=(Reading("out", 3, 0),),
        drives=(Drive("s", (("s", 1.0),)),),
        default_drive="s",
    )


@pytest.mark.parametrize("k", [1.0, -1.0, 0.999999, 0.3])
@pytest.mark.parametrize("load", [1e-6, 1e-3, 200.0, 1e9])
def test_input_impedance_of_a_loaded_transformer(k: float, load: float) -> None:
    """s L1 + (s M)²/-(s L2 + R), textbook; at k = 1 the same as s L1 ∥ R L1/L2."""
    f = np.geomspace(1e-2, 1e8, 41)
    s = 2j * np.pi * f
    l1, l2 = 100e-6, 400e-6
    # (s L1 R + s² L1 L2 (1 - k²))/(s L2 + R), without cancellation.
    expected = (s * l1 * load + s**2 * l1 * l2 * (1 - k) * (1 + k)) / (s * l2 + load)
    assert np.allclose(
        Response(transformer(k, load)).impedance(f, "touch").values, expected, rtol=1e-10, atol=0
    )


def test_a_perfect_transformer_with_a_shorted_winding_is_a_short() -> None:
    network = transformer(1.0, 0.0)
    f = np.array([1.0, 1e3, 1e9])
    assert np.all(Response(network).impedance(f, "touch").values == 0)


def test_a_transformer_passes_nothing_at_zero_frequency() -> None:
    assert Response(transformer(1.0, 200.0)).reading(0.0, "out").values == 0
