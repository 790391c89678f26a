"""An independent solution of a flat `Network`: dense modified nodal analysis in many-digit arithmetic.

It shares nothing with the package but the description of the parts: every two-terminal part but a capacitor
is an impedance with a current of its own, a cable is the exponential of its telegraph equations
(written for core and shield as two conductors above ground), functions of frequency are written out from the
definitions in the language's reference, and the matrix is solved by plain Gaussian elimination. Slow on
purpose.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import mpmath
from mpmath import mp, mpc, mpf

from nodal.network import Network
from nodal.parts.amplifier import Amplifier
from nodal.parts.cable import Cable
from nodal.parts.capacitor import Capacitor
from nodal.parts.coupling import Coupling
from nodal.parts.inductor import Inductor
from nodal.parts.resistor import Resistor
from nodal.parts.source import CurrentSource, VoltageSource
from nodal.values import Value

DIGITS = 60


MOST_NEPERS = 600


class Singular(ArithmeticError):
    """The network has no unique solution."""


class TooLong(ArithmeticError):
    """A cable attenuates by more than MOST_NEPERS: its exponential would need too many digits."""


class _Equations:
    """Rows as dictionaries column -> coefficient; columns are ("v", node) and (part name, label)."""

    def __init__(self, nodes: int) -> None:
        self.currents: dict[int, dict[Any, Any]] = {node: {} for node in range(nodes)}
        self.injected: dict[int, Any] = {}
        self.rows: list[tuple[dict[Any, Any], Any]] = []

    def leaves(self, node: int, column: Any, factor: Any = 1) -> None:
        """The current factor · column leaves `node` into a part."""
        row = self.currents[node]
        row[column] = row.get(column, 0) + factor

    def inject(self, node: int, amperes: Any) -> None:
        self.injected[node] = self.injected.get(node, 0) + amperes

    def row(self, *entries: tuple[Any, Any], right: Any = 0) -> None:
        row: dict[Any, Any] = {}
        for column, factor in entries:
            row[column] = row.get(column, 0) + factor
        self.rows.append((row, right))

    def solve(self) -> dict[Any, Any]:
        rows = [
            (dict(row), mpmath.mpmathify(self.injected.get(node, 0)))
            for node, row in self.currents.items()
            if node
        ]
        rows += [(dict(row), mpmath.mpmathify(right)) for row, right in self.rows]
        for row, _ in rows:
            row.pop(("v", 0), None)
        columns = sorted({column for row, _ in rows for column in row}, key=repr)
        if len(columns) != len(rows):
            raise Singular(f"{len(rows)} equations for {len(columns)} unknowns")
        scale = [max((abs(x) for x in row.values()), default=mpf(0)) for row, _ in rows]
        if not all(scale):
            raise Singular("an empty equation")
        work = [
            ({k: x / size for k, x in row.items()}, right / size)
            for (row, right), size in zip(rows, scale, strict=True)
        ]
        done: list[tuple[Any, dict[Any, Any], Any]] = []
        for column in columns:
            pivot = max(range(len(work)), key=lambda i: abs(work[i][0].get(column, 0)))
            row, right = work.pop(pivot)
            if abs(row.get(column, 0)) < mpf(10) ** (10 - mp.dps):
                raise Singular(f"no equation for {column}")
            for i, (other, other_right) in enumerate(work):
                if column in other:
                    factor = other.pop(column) / row[column]
                    for k, x in row.items():
                        if k != column:
                            other[k] = other.get(k, 0) - factor * x
                    work[i] = (other, other_right - factor * right)
            done.append((column, row, right))
        found: dict[Any, Any] = {("v", 0): mpf(0)}
        for column, row, right in reversed(done):
            rest = sum((x * found[k] for k, x in row.items() if k != column), mpf(0))
            found[column] = (right - rest) / row[column]
        return found


def _lossy(s: Any, farads: Any, loss: float) -> Any:
    """C(s) = K ((s + ω₂)/(s + ω₁))ⁿ: 1 µHz and 1 PHz, the loss angle of the factor at 1 MHz and Re C = C
    there."""
    if not loss:
        return farads
    low, middle, high = (2 * mp.pi * mpf(x) for x in ("1e-6", "1e6", "1e15"))
    exponent = mp.atan(mpf(loss)) / (mp.atan(middle / low) - mp.atan(middle / high))
    return (
        farads
        * ((s + high) / (s + low)) ** exponent
        / mp.re(((mpc(0, middle) + high) / (mpc(0, middle) + low)) ** exponent)
    )


def _number(value: Value | None, otherwise: float = 0.0) -> Any:
    return mpf(otherwise if value is None else value.nominal)


def _line(part: Cable, s: Any) -> tuple[Any, Any, Any]:
    """(series impedance of the core without inductance, external inductance, shunt admittance) per metre."""
    core = _number(part.resistance)
    if part.skin:
        at, frequency = part.skin
        core = mp.sqrt(core**2 + 2 * mpf(at) ** 2 * s / (2 * mp.pi * mpf(frequency)))
    y = s * _lossy(s, _number(part.capacitance), part.loss) + _number(part.conductance)
    return core, _number(part.inductance), y


def _nepers(part: Cable, s: Any) -> float:
    core, inductance, y = _line(part, s)
    return float(
        mp.re(_number(part.length) * mp.sqrt((core + _number(part.shield_resistance) + s * inductance) * y))
    )


def chain_matrix(z: Any, y: Any, length: Any) -> Any:
    """exp of -[[0, z], [y, 0]] length: (V, I) at the near end to (V, I) at the far end, I toward it.

    z and y are symmetric and y has rank one, so that (zy)² = γ² zy with γ² its trace: the even and odd power
    series of √(zy) sum to a cosh and a sinh of γ.
    """
    n = z.rows
    product = z * y
    square = sum((product[i, i] for i in range(n)), mpf(0))
    even, odd = mpmath.eye(n), length * mpmath.eye(n)
    if square:
        gamma = mp.sqrt(square)
        even += (mp.cosh(gamma * length) - 1) / square * product
        odd += (mp.sinh(gamma * length) / gamma - length) / square * product
    upper, lower = -odd * z, -y * odd
    chain = mpmath.zeros(2 * n)
    for i in range(n):
        for j in range(n):
            chain[i, j], chain[i, n + j] = even[i, j], upper[i, j]
            chain[n + i, j], chain[n + i, n + j] = lower[i, j], even[j, i]
    return chain


def _cable(equations: _Equations, part: Cable, s: Any) -> None:
    length = _number(part.length)
    core, inductance, y = _line(part, s)
    rs, ls, k = (
        _number(x, y)
        for x, y in ((part.shield_resistance, 0), (part.shield_inductance, 0), (part.shield_coupling, 1))
    )
    ends = ((part.core1, part.shield1), (part.core2, part.shield2))
    own_shield = part.shield1 != part.shield2 and (rs or ls)
    if own_shield:
        impedances = mpmath.matrix(
            [[core + s * (inductance + (2 * k - 1) * ls), s * k * ls], [s * k * ls, rs + s * ls]]
        )
        admittances = y * mpmath.matrix([[1, -1], [-1, 1]])
        voltages = (
            [[(("v", core_node), 1)] for core_node, _ in ends],
            [[(("v", shield), 1)] for _, shield in ends],
        )
        nodes = [(part.core1, part.core2), (part.shield1, part.shield2)]
    else:
        impedances, admittances = mpmath.matrix([[core + rs + s * inductance]]), mpmath.matrix([[y]])
        voltages = ([[(("v", a), 1), (("v", b), -1)] for a, b in ends],)
        nodes = [(part.core1, part.core2)]
    chain = chain_matrix(impedances, admittances, length)
    n = len(nodes)
    currents = [[(part.name, f"{end}{i}") for i in range(n)] for end in ("near", "far")]
    for i in range(2 * n):
        entries: list[tuple[Any, Any]] = []
        for j in range(n):
            entries += [(column, sign * chain[i, j]) for column, sign in voltages[j][0]]
            entries.append((currents[0][j], chain[i, n + j]))
        entries += [(c, -sign) for c, sign in voltages[i][1]] if i < n else [(currents[1][i - n], mpf(-1))]
        equations.row(*entries)
    for i, (near, far) in enumerate(nodes):
        equations.leaves(near, currents[0][i])
        equations.leaves(far, currents[1][i], -1)
    if not own_shield:
        equations.leaves(part.shield1, currents[0][0], -1)
        equations.leaves(part.shield2, currents[1][0])
        if part.shield1 != part.shield2:
            raise NotImplementedError("a cable whose shields are one by a short")


def _amplifier(equations: _Equations, part: Amplifier, s: Any) -> None:
    def factor(root: tuple[float, float | None]) -> Any:
        w = 2 * mp.pi * mpf(root[0])
        return 1 + s / w if root[1] is None else 1 + s / (mpf(root[1]) * w) + (s / w) ** 2

    shape = mp.exp(-s * mpf(part.delay))
    for zero in part.zeros:
        shape *= factor(zero)
    for pole in part.poles:
        shape /= factor(pole)
    control = {("v", part.in_): mpf(1)}
    control[("v", part.ref)] = control.get(("v", part.ref), 0) - 1
    if part.common_mode:
        ratio, corner = part.common_mode
        share = (1 + s / (2 * mp.pi * mpf(corner))) / mpf(ratio)
        for node, weight in ((part.in_, mpf("0.5")), (part.ref, mpf("0.5")), (part.ref2, mpf(-1))):
            control[("v", node)] = control.get(("v", node), 0) + share * weight
    if part.transconductance is not None:
        for column, weight in control.items():
            current = weight * shape * _number(part.transconductance)
            equations.leaves(part.out, column, -current)
            equations.leaves(part.ref2, column, current)
        return
    current_name = (part.name, "out")
    equations.leaves(part.out, current_name)
    equations.leaves(part.ref2, current_name, -1)
    gain = shape * _number(part.gain)
    equations.row((("v", part.out), 1), (("v", part.ref2), -1), *((c, -w * gain) for c, w in control.items()))


def solve(network: Network, s: Any, drive: str | None = None) -> dict[Any, Any]:
    """Every voltage ("v", node) and the currents of parts, per unit of the drive, at one complex s (rad/s).

    Call inside `mpmath.workdps`. Raises `Singular` where the elimination meets no pivot, `TooLong`.
    """
    s = mpmath.mpmathify(s)
    nepers = max((_nepers(part, s) for part in network.parts if isinstance(part, Cable)), default=0.0)
    if nepers > MOST_NEPERS:
        raise TooLong(f"{nepers:.3g} nepers")
    # Both waves of a line are in each row: the smaller one must keep all its digits.
    with mp.workdps(mp.dps + int(nepers)):
        return _solve(network, s, drive)


def _solve(network: Network, s: Any, drive: str | None) -> dict[Any, Any]:
    equations = _Equations(len(network.nodes))
    name = drive or network.default_drive
    weights = dict(network.drive(name).weights) if name else {}
    couplings = [part for part in network.parts if isinstance(part, Coupling)]
    coils = {part.name: part for part in network.parts if isinstance(part, Inductor)}
    for part in network.parts:
        if isinstance(part, Resistor | Inductor):
            current = (part.name, "current")
            equations.leaves(part.a, current)
            equations.leaves(part.b, current, -1)
            across = ((("v", part.a), mpf(1)), (("v", part.b), mpf(-1)))
            if isinstance(part, Inductor):
                entries = [(current, -s * _number(part.value))]
                for coupling in couplings:
                    if part.name in (coupling.first, coupling.second):
                        other = coupling.second if part.name == coupling.first else coupling.first
                        mutual = _number(coupling.value)
                        if coupling.coefficient:
                            mutual *= mp.sqrt(_number(part.value) * _number(coils[other].value))
                        entries.append(((other, "current"), -s * mutual))
                equations.row(*across, *entries)
            elif part.conductance:
                equations.row((current, mpf(1)), *((c, -x * _number(part.value)) for c, x in across))
            else:
                equations.row(*across, (current, -_number(part.value)))
        elif isinstance(part, Capacitor):
            admittance = s * _lossy(s, _number(part.value), part.loss)
            for node, other in ((part.a, part.b), (part.b, part.a)):
                equations.leaves(node, ("v", node), admittance)
                equations.leaves(node, ("v", other), -admittance)
        elif isinstance(part, VoltageSource):
            current = (part.name, "current")
            equations.leaves(part.a, current)
            equations.leaves(part.b, current, -1)
            equations.row(
                (("v", part.a), mpf(1)), (("v", part.b), mpf(-1)), right=mpf(weights.get(part.name, 0))
            )
        elif isinstance(part, CurrentSource):
            equations.inject(part.a, mpf(weights.get(part.name, 0)))
            equations.inject(part.b, -mpf(weights.get(part.name, 0)))
        elif isinstance(part, Cable):
            _cable(equations, part, s)
        elif isinstance(part, Amplifier):
            _amplifier(equations, part, s)
        elif not isinstance(part, Coupling):
            raise NotImplementedError(part.kind)
    return equations.solve()


def reading(network: Network, name: str, frequency: float, drive: str | None = None) -> Any:
    """A reading at one frequency in Hz (0 is approached along the real axis), with `DIGITS` digits."""
    asked = network.reading(name)
    # A limit along the real axis needs digits for every power of s that cancels.
    with mp.workdps(max(mp.dps, DIGITS if frequency else 8 * DIGITS)):
        s = mpc(0, 2 * mp.pi * mpf(frequency)) if frequency else mpf(10) ** (-2 * DIGITS)
        found = solve(network, s, drive)
        return (found[("v", asked.a)] - found[("v", asked.b)]) * _number(asked.times)


def vanishes(network: Network, name: str, frequency: float, found: Any, drive: str | None = None) -> bool:
    """Whether what `reading` found is rounding around an exact zero: it shrinks as digits are added."""
    if abs(found) > mpf(10) ** (-DIGITS // 2):
        return False
    with mp.workdps(2 * DIGITS):
        return abs(reading(network, name, frequency, drive)) <= abs(found) * mpf(10) ** (-DIGITS // 2)


def _varied(network: Network, step: Any) -> Iterator[Network]:
    """The network with each value in turn made larger by the factor 1 + step."""
    for i, part in enumerate(network.parts):
        for field in part.__dataclass_fields__:
            value = getattr(part, field)
            if (
                isinstance(value, Value)
                and value.nominal
                and not isinstance(part, VoltageSource | CurrentSource)
            ):
                larger = replace(value, nominal=mpf(value.nominal) * (1 + step))
                changed = replace(part, **{field: larger})
                yield replace(network, parts=(*network.parts[:i], changed, *network.parts[i + 1 :]))


def sensitivity_sum(network: Network, name: str, frequency: float, drive: str | None = None) -> float:
    """Σ |∂ ln H/∂ ln p| over every value of every part, by differences in many-digit arithmetic."""
    step = mpf(10) ** (-DIGITS // 3)
    h = reading(network, name, frequency, drive)
    total = mpf(0)
    with mp.workdps(DIGITS):
        for changed in _varied(network, step):
            total += abs(reading(changed, name, frequency, drive) / h - 1) / step
    return float(total)
