"""The reference itself: against the series of the matrix exponential, and networks solved by hand."""

from __future__ import annotations

import mpmath
import pytest
from support import reference

from nodal.network import Drive, Network, Reading
from nodal.parts.base import Part
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import VoltageSource
from nodal.values import Value


def test_chain_matrix_is_the_exponential() -> None:
    """Two coupled conductors with loss, against `mpmath.expm`."""
    with mpmath.workdps(40):
        s = mpmath.mpc("3e5", "2e7")
        z = mpmath.matrix(
            [
                [2 + s * mpmath.mpf("2.1e-6"), s * mpmath.mpf("1.7e-6")],
                [s * mpmath.mpf("1.7e-6"), mpmath.mpf("0.3") + s * mpmath.mpf("1.9e-6")],
            ]
        )
        y = (mpmath.mpf("1e-6") + s * mpmath.mpf("1e-10")) * mpmath.matrix([[1, -1], [-1, 1]])
        system = mpmath.zeros(4)
        for i in range(2):
            for j in range(2):
                system[i, 2 + j], system[2 + i, j] = -7 * z[i, j], -7 * y[i, j]
        difference = reference.chain_matrix(z, y, mpmath.mpf(7)) - mpmath.expm(system, method="taylor")
        assert mpmath.mnorm(difference, 1) < mpmath.mpf("1e-30")


def network(*parts: Part) -> Network:
    return Network(
        nodes=("ground", "in", "out"),
        parts=(VoltageSource("s", 1, 0, Value(1.0)), *parts),
        readings=(Reading("out", 2, 0),),
        drives=(Drive("s", (("s", 1.0),)),),
        default_drive="s",
    )


def test_voltage_divider() -> None:
    """3 Ω over 1 Ω; the sensitivities to the two are -3/4 and 3/4."""
    divider = network(Resistor("a", 1, 2, Value(3.0)), Resistor("b", 2, 0, Value(1.0)))
    assert abs(reference.reading(divider, "out", 50.0) - mpmath.mpf(1) / 4) < 1e-50
    assert reference.sensitivity_sum(divider, "out", 50.0) == pytest.approx(1.5, rel=1e-12)


def test_no_solution_is_said_so() -> None:
    loop = network(
        VoltageSource("t", 1, 0, Value(1.0)),
        Resistor("a", 1, 2, Value(3.0)),
        Inductor("l", 2, 0, Value(1e-6)),
    )
    with pytest.raises(reference.Singular):
        reference.reading(loop, "out", 50.0)
