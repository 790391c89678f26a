"""Cables against independent formulas, with 60 digits (mpmath): the chain matrix with cosh and sinh, and the
exponential of the telegraph equations of core and shield.
"""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
import pytest
from mpmath import mp, mpf

from nodal.network import Contact, Drive, Network, Reading
from nodal.parts import Cable, CurrentSource, Resistor, VoltageSource
from nodal.response import Response
from nodal.values import Value

SOURCE, LOAD = 30.0, 75.0

LINES = {
    "lossless": {"inductance": 250e-9, "capacitance": 100e-12},
    "series loss": {"inductance": 270e-9, "capacitance": 48e-12, "resistance": 235.0},
    "all four": {"inductance": 250e-9, "capacitance": 100e-12, "resistance": 0.2, "conductance": 1e-6},
    "resistance and capacitance": {"capacitance": 100e-12, "resistance": 5e3},
    "resistance and leak": {"resistance": 5e3, "conductance": 1e-5},
    "inductance alone": {"inductance": 250e-9},
    "capacitance alone": {"capacitance": 100e-12, "conductance": 1e-9},
    "skin": {"inductance": 250e-9, "capacitance": 100e-12, "resistance": 0.05, "skin": (1.2, 100e6)},
    "lossy dielectric": {"inductance": 250e-9, "capacitance": 100e-12, "loss": 2e-3},
}


def cable(length: float, **fields: Any) -> Cable:
    values = {k: v if k in ("loss", "skin") else Value(v) for k, v in fields.items()}
    return Cable("line", 2, 0, 3, 0, Value(length), **values)


def between(part: Cable, nodes: int = 4) -> Network:
    """source - SOURCE - cable - LOAD, all on ground."""
    return Network(
        ("ground", "drive", "near", "far", *(f"n{k}" for k in range(4, nodes))),
        (
            VoltageSource("s", 1, 0, Value(1.0), side="test"),
            Resistor("inside", 1, 2, Value(SOURCE), side="test"),
            Resistor("load", 3, 0, Value(LOAD)),
            part,
        ),
        contacts=(Contact("touch", 2, 0),),
        readings=(Reading("far", 3, 0), Reading("near", 2, 0)),
        drives=(Drive("s", (("s", 1.0),)),),
        default_drive="s",
    )


def line_constants(s: Any, fields: dict[str, Any]) -> tuple[Any, Any]:
    """Z', Y' as the language's reference defines them, written out once more."""
    get = {k: mpf(v) for k, v in fields.items() if k != "skin"}
    series = get.get("resistance", mpf(0))
    if "skin" in fields:
        at, f = map(mpf, fields["skin"])
        series = mp.sqrt(series**2 + 2 * at**2 * s / (2 * mp.pi * f))
    capacitance = get.get("capacitance", mpf(0))
    if "loss" in fields:
        low, middle, high = (2 * mp.pi * mpf(10) ** k for k in (-6, 6, 15))
        n = mp.atan(get["loss"]) / (mp.atan(middle / low) - mp.atan(middle / high))
        shape = lambda x: ((x + high) / (x + low)) ** n  # noqa: E731
        capacitance *= shape(s) / shape(1j * middle).real
    return series + s * get.get("inductance", 0), get.get("conductance", mpf(0)) + s * capacitance


def chain_matrix(s: Any, length: float, fields: dict[str, Any]) -> tuple[Any, Any]:
    """(far, near) voltage per volt from V1 = A V2 + B I2, I1 = C V2 + A I2 (Pozar, table 4.1)."""
    z, y = line_constants(s, fields)
    gamma = mp.sqrt(z * y) * length
    a, sinhc = mp.cosh(gamma), mp.sinh(gamma) / gamma if gamma else mpf(1)
    b, c = z * length * sinhc, y * length * sinhc
    far = 1 / (a + b / LOAD + SOURCE * (c + a / LOAD))
    return far, far * (a + b / LOAD)


@pytest.mark.parametrize("name", LINES)
@pytest.mark.parametrize("length", [1e-6, 0.3, 7.0])
def test_voltages_at_both_ends(name: str, length: float) -> None:
    fields = LINES[name]
    f = np.concatenate([np.geomspace(1e-3, 1e10, 20), half_waves(length, fields)])
    response = Response(between(cable(length, **fields)))
    far, near = response.reading(f, "far").values, response.reading(f, "near").values
    with mp.workdps(60):
        for k, frequency in enumerate(f):
            s = 2j * mp.pi * mpf(float(frequency))
            expected = chain_matrix(s, length, fields)
            # A phase of many turns is known to the rounding of its own frequency.
            turns = abs(complex(mp.sqrt(mp.fprod(line_constants(s, fields))) * length))
            tolerance = 1e-10 + 1000 * np.finfo(float).eps * turns
            assert abs(far[k] - complex(expected[0])) <= tolerance * abs(complex(expected[0])), frequency
            assert abs(near[k] - complex(expected[1])) <= tolerance * abs(complex(expected[1])), frequency


def half_waves(length: float, fields: dict[str, Any]) -> np.ndarray:
    time = length * np.sqrt(fields.get("inductance", 0) * fields.get("capacitance", 0))
    return np.arange(1, 9) / (4 * time) if time else np.array([1.0])


@pytest.mark.parametrize("nepers", [0.5, 1.9, 2.0, 2.1, 10.0, 50.0, 200.0])
def test_many_nepers(nepers: float) -> None:
    """R' and G' with sqrt(R' G') l nepers, on both sides of the change of equations."""
    fields = {"resistance": nepers * 50.0, "conductance": nepers / 50.0}
    response = Response(between(cable(1.0, **fields)))
    with mp.workdps(400):
        expected, _ = chain_matrix(mpf(0), 1.0, fields)
        for f in (0.0, 1.0, 1e9):
            assert abs(response.reading(f, "far").values / complex(expected) - 1) < 1e-10


def test_at_zero_frequency_a_lossless_line_is_a_short_and_an_open_one_ends_at_the_source_voltage() -> None:
    response = Response(between(cable(3.0, **LINES["lossless"])))
    assert response.reading(0.0, "far").values == pytest.approx(LOAD / (LOAD + SOURCE), rel=1e-15)
    z = Response(between(cable(3.0, **LINES["resistance and capacitance"]))).impedance(0.0, "touch").values
    assert z == pytest.approx(LOAD + 3 * 5e3, rel=1e-15)


def test_no_length_is_a_short() -> None:
    response = Response(between(cable(0.0, **LINES["all four"])))
    f = np.array([0.0, 1.0, 1e9])
    assert np.allclose(response.reading(f, "far").values, LOAD / (LOAD + SOURCE), rtol=1e-15)


SHIELDED = {
    "cored": {
        "resistance": 0.09,
        "inductance": 253e-9,
        "capacitance": 101e-12,
        "shield_resistance": 0.015,
        "shield_inductance": 6e-6,
        "shield_coupling": 0.9995,
    },
    "leaky coupling": {
        "inductance": 400e-9,
        "capacitance": 80e-12,
        "conductance": 1e-7,
        "shield_resistance": 0.05,
        "shield_inductance": 1e-6,
        "shield_coupling": 0.5,
    },
    "inductive": {"inductance": 250e-9, "capacitance": 100e-12, "shield_inductance": 1e-6},
    "resistive": {"inductance": 250e-9, "capacitance": 100e-12, "resistance": 3.0, "shield_resistance": 1.0},
    "no loop impedance": {"capacitance": 100e-12, "shield_inductance": 1e-6},
    "no dielectric": {"inductance": 250e-9, "resistance": 3.0, "shield_resistance": 1.0},
    "many nepers": {
        "resistance": 400.0,
        "inductance": 250e-9,
        "conductance": 0.1,
        "capacitance": 100e-12,
        "shield_resistance": 5.0,
        "shield_inductance": 1e-6,
        "shield_coupling": 0.9,
    },
    "skin and loss": {
        "inductance": 250e-9,
        "capacitance": 100e-12,
        "skin": (1.2, 100e6),
        "loss": 1e-3,
        "shield_resistance": 0.02,
        "shield_inductance": 2e-6,
    },
}
BOND = 1.5


def shielded(length: float, fields: dict[str, Any]) -> Network:
    """Driven between core and near shield, which stands on a second source; the far shield is bonded."""
    values = {k: v if k in ("loss", "skin") else Value(v) for k, v in fields.items()}
    return Network(
        ("ground", "drive", "core", "plug", "sink", "panel", "earth"),
        (
            VoltageSource("signal", 1, 4, Value(1.0), side="test"),
            Resistor("inside", 1, 2, Value(SOURCE), side="test"),
            VoltageSource("moving", 6, 0, Value(1.0), side="test"),
            Resistor("moved", 6, 4, Value(2.0), side="test"),
            Cable("line", 2, 4, 3, 5, Value(length), **values),
            Resistor("load", 3, 5, Value(LOAD)),
            Resistor("bond", 5, 0, Value(BOND)),
        ),
        contacts=(Contact("touch", 2, 4),),
        readings=(Reading("shown", 3, 5), Reading("panel", 5, 0), Reading("sink", 4, 0)),
        drives=(Drive("signal", (("signal", 1.0),)), Drive("moving", (("moving", 1.0),))),
    )


def shielded_exactly(s: Any, length: float, fields: dict[str, Any], drive: str) -> list[complex]:
    """Two conductors over ground: d/dx (Vc, Vs, Ic, Is) = -M (Vc, Vs, Ic, Is), by the matrix exponential."""
    loop, y = line_constants(s, fields)
    own = mpf(fields.get("shield_resistance", 0)) + s * mpf(fields.get("shield_inductance", 0))
    k, ls = mpf(fields.get("shield_coupling", 1)), mpf(fields.get("shield_inductance", 0))
    mutual = s * k * ls
    core = loop + s * (2 * k - 1) * ls
    m = mpmath.matrix([[0, 0, core, mutual], [0, 0, mutual, own], [y, -y, 0, 0], [-y, y, 0, 0]])
    end = mpmath.expm(-m * length, method="taylor")
    # Unknowns: Vc1, Vs1, Ic1, Is1. At the far end Ic = (Vc - Vs)/LOAD, Ic + Is = Vs/BOND.
    signal, moving = (1, 0) if drive == "signal" else (0, 1)
    rows = mpmath.matrix(4, 4)
    right = mpmath.matrix(4, 1)
    rows[0, 0], rows[0, 1], rows[0, 2], right[0] = 1, -1, SOURCE, signal
    rows[1, 1], rows[1, 2], rows[1, 3], right[1] = 1, 2, 2, moving
    for j in range(4):
        vc, vs, ic, is_ = (end[i, j] for i in range(4))
        rows[2, j] = ic - (vc - vs) / LOAD
        rows[3, j] = ic + is_ - vs / BOND
    near = mpmath.lu_solve(rows, right)
    far = end * near
    return [complex(v) for v in (far[0] - far[1], far[1], near[1])]


@pytest.mark.parametrize("name", SHIELDED)
@pytest.mark.parametrize("drive", ["signal", "moving"])
def test_a_shield_with_nodes_of_its_own(name: str, drive: str) -> None:
    length, fields = 2.0, SHIELDED[name]
    f = np.concatenate([np.geomspace(1e-3, 1e9, 9), half_waves(length, fields)])
    response = Response(shielded(length, fields))
    found = [response.reading(f, r, drive).values for r in ("shown", "panel", "sink")]
    with mp.workdps(60):
        for k, frequency in enumerate(f):
            exact = shielded_exactly(2j * mp.pi * mpf(float(frequency)), length, fields, drive)
            for value, expected in zip(found, exact, strict=True):
                # What balances exactly comes out as rounding, here or in the 60 digits.
                assert abs(value[k] - expected) <= 1e-10 * abs(expected) + 1e-30, frequency


def test_a_shield_at_zero_frequency_is_its_resistance() -> None:
    """The core's loop takes its current, the shield's resistance divides what moves it against the bond."""
    fields = SHIELDED["cored"]
    response = Response(shielded(2.0, fields))
    found = [response.reading(0.0, r, "moving").values for r in ("shown", "panel", "sink")]
    with mp.workdps(60):
        exact = shielded_exactly(mpf(10) ** -40, 2.0, fields, "moving")
    for value, expected in zip(found, exact, strict=True):
        assert abs(value - expected) <= 1e-13 * abs(expected)


def test_one_common_shield_node_sees_core_and_shield_resistance_in_series() -> None:
    part = Cable(
        "line",
        2,
        0,
        3,
        0,
        Value(2.0),
        resistance=Value(3.0),
        shield_resistance=Value(1.0),
        shield_inductance=Value(1e-6),
    )
    z = Response(between(part)).impedance([0.0, 1e3], "touch").values
    assert z == pytest.approx(LOAD + 2 * (3.0 + 1.0), rel=1e-14)


def test_shield_fields_of_zero_join_the_shields() -> None:
    part = Cable("line", 2, 0, 3, 4, Value(2.0), inductance=Value(1e-7), shield_inductance=Value(0.0))
    network = between(part, nodes=5)
    assert part.shorts() == ((0, 4),)
    assert Response(network).node(1e3, "n4").values == 0


def test_a_current_down_the_shield_alone_meets_its_own_impedance() -> None:
    fields = {"shield_resistance": 0.5, "shield_inductance": 2e-6, "inductance": 1e-7, "shield_coupling": 1.0}
    values = {k: Value(v) for k, v in fields.items()}
    network = Network(
        ("ground", "near", "far"),
        (
            CurrentSource("s", 1, 0, Value(1.0)),
            Cable("line", 2, 1, 2, 0, Value(3.0), **values),
            Resistor("hold", 2, 0, Value(1e9)),
        ),
        readings=(Reading("v", 1, 0),),
        drives=(Drive("s", (("s", 1.0),)),),
        default_drive="s",
    )
    f = 1e4
    # The core's two ends are one node, so that its loop carries a current of its own (hand calculation).
    s = 2j * np.pi * f
    shield, mutual, core = (0.5 + s * 2e-6) * 3, s * 2e-6 * 3, s * (1e-7 + 2e-6) * 3
    assert Response(network).reading(f, "v").values == pytest.approx(shield - mutual**2 / core, rel=1e-9)
