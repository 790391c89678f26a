"""The solver against dense and sparse LU, on the same matrices, for the same outputs, in one run.

    python tests/bench/solver.py

Ours: planning, assembly, elimination and the check at every point, on a fresh plan. Dense:
`numpy.linalg.solve` on stacked matrices that are made beforehand, its time alone. Sparse:
`scipy.sparse.linalg.splu` for every frequency, matrices made beforehand. Neither of them checks its answers.
Best of several runs each, taken in turn.
"""

from __future__ import annotations

import math
import resource
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import threadpoolctl
from scipy import sparse
from scipy.sparse import linalg

sys.path[:0] = [str(Path(__file__).parents[1]), str(Path(__file__).parents[2])]

from support.systems import Sketch  # noqa: E402

from nodal.solver.matrix import System  # noqa: E402
from nodal.solver.sweep import plan_for, solve  # noqa: E402

POINTS = 2000


def probe() -> tuple[System, int, int]:
    """A ten-to-one probe, lumped: source, lead, tip, two lossy cable sections, matching box, input."""
    net = Sketch(9)
    net.resistor(1, 0, 25.0)
    net.capacitor(1, 0, 2e-12)
    net.inductor(2, 0, 110e-9)  # the lead's other end is the shield
    net.resistor(1, 3, 9e6)
    net.capacitor(1, 3, 9.5e-12)
    net.resistor(3, 4, 60.0)
    net.inductor(4, 5, 160e-9)
    net.capacitor(5, 2, 29e-12)
    net.resistor(5, 6, 60.0)
    net.capacitor(6, 2, 29e-12)
    net.resistor(6, 7, 600.0)
    net.inductor(6, 7, 130e-9)
    net.capacitor(7, 2, 14.4e-12)
    net.resistor(7, 8, 1.0)
    net.resistor(8, 2, 1e6)
    net.capacitor(8, 2, 14e-12)
    net.capacitor(8, 9, 1e-12)
    net.resistor(9, 2, 50.0)
    return net.system(), 0, 7


def ladder(sections: int) -> tuple[System, int, int]:
    """Series resistance and inductance, shunt capacitance and leakage: two nodes and a current each."""
    net = Sketch(2 * sections + 1)
    net.resistor(1, 0, 50.0)
    for k in range(sections):
        left, middle, right = 2 * k + 1, 2 * k + 2, 2 * k + 3
        net.resistor(left, middle, 0.1)
        net.inductor(middle, right, 100e-9)
        net.capacitor(right, 0, 40e-12)
        net.resistor(right, 0, 1e9)
    net.resistor(2 * sections + 1, 0, 1e6)
    return net.system(), 0, 2 * sections


def frequencies(points: int = POINTS) -> np.ndarray:
    return 2j * math.pi * np.geomspace(1e3, 1e8, points)


def stacked(system: System, s: np.ndarray) -> np.ndarray:
    g, c = np.zeros((system.size, system.size)), np.zeros((system.size, system.size))
    for term in system.terms:
        for i, row_weight in term.rows:
            for j, col_weight in term.cols:
                g[i, j] += row_weight * col_weight * term.g
                c[i, j] += row_weight * col_weight * term.c
    return g + s[:, None, None] * c


def best(run: Callable[[], object], repeats: int) -> float:
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        run()
        times.append(time.perf_counter() - start)
    return min(times)


def compare(name: str, made: tuple[System, int, int]) -> tuple[int, float, float]:
    """Print one line; returns (unknowns, multiply-adds, seconds)."""
    system, equation, unknown = made
    s = frequencies()
    repeats = 40 if system.size < 100 else 2
    ours = best(lambda: solve(system, s, [{equation: 0.02}], [{unknown: 1.0}]), repeats)
    solution = solve(system, s, [{equation: 0.02}], [{unknown: 1.0}])
    plan = plan_for(system, s)
    planning = best(lambda: plan_for(system, s), repeats)

    # The dense and the sparse solver get as many points as fit in memory and patience; time is scaled up.
    dense_points = max(4, min(POINTS, int(3e8 / (16 * system.size**2))))
    some = s[np.linspace(0, POINTS - 1, dense_points).astype(int)]
    matrices = stacked(system, some)
    b = np.zeros((len(some), system.size, 1), dtype=complex)
    b[:, equation] = 0.02
    dense = best(lambda: np.linalg.solve(matrices, b), max(1, repeats // 4)) * POINTS / len(some)
    answers = np.linalg.solve(matrices, b)[:, unknown, 0]
    mine = solve(system, some, [{equation: 0.02}], [{unknown: 1.0}]).values[0, 0]
    apart = float(np.max(np.abs(answers - mine)) / np.max(np.abs(mine)))

    few = matrices[:: max(1, len(matrices) // 100)]
    columns = [sparse.csc_matrix(matrix) for matrix in few]
    one = b[0, :, 0]
    each = best(lambda: [linalg.splu(matrix).solve(one) for matrix in columns], 2) * POINTS / len(columns)
    print(
        f"{name:18} {system.size:5} unknowns  {ours * 1e3:8.1f} ms ({planning * 1e3:6.1f} planning)"
        f"  dense {dense / ours:8.1f} x  sparse {each / ours:6.1f} x  {plan.multiply_adds:6} multiply-adds"
        f"  difference {apart:.0e} of the largest, estimate {solution.error.max():.0e},"
        f" {solution.refined.sum()} refined"
    )
    return system.size, plan.multiply_adds, ours


def peak_memory() -> None:
    """Peak resident memory of this process after one sweep of a thousand sections, MB."""
    system, equation, unknown = ladder(1000)
    before = resident_peak()
    solve(system, frequencies(), [{equation: 0.02}], [{unknown: 1.0}])
    after = resident_peak()
    print(f"1000 sections, {POINTS} frequencies: peak {after:.0f} MB, {before:.0f} MB before the sweep")


def resident_peak() -> float:
    """MB, of this process alone where the system tells: that of `resource` is handed down from the parent."""
    status = Path("/proc/self/status")
    if status.exists():
        found = [line for line in status.read_text().splitlines() if line.startswith("VmHWM")]
        if found:
            return int(found[0].split()[1]) / 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def main() -> None:
    for pool in threadpoolctl.threadpool_info():
        print(
            f"{pool['internal_api']} {pool.get('version')}, kernel {pool.get('architecture')},"
            f" {pool['num_threads']} threads ({Path(pool['filepath']).name})"
        )
    print(f"{POINTS} frequencies; ratios are their time over ours")
    compare("probe", probe())
    results = {n: compare(f"ladder of {n}", ladder(n)) for n in (10, 13, 50, 200, 1000)}
    (_, few, short), (_, many, long) = results[50], results[1000]
    growth = math.log(1000 / 50)
    print(
        f"50 to 1000 sections: multiply-adds grow with exponent {math.log(many / few) / growth:.3f},"
        f" time with {math.log(long / short) / growth:.3f}"
    )
    subprocess.run([sys.executable, __file__, "memory"], check=True)


if __name__ == "__main__":
    peak_memory() if "memory" in sys.argv[1:] else main()
