"""How long the edge of a 200-section lumped ladder takes, against a sweep of it by dense stacked solving.

Run: env -u OPENBLAS_CORETYPE -u OPENBLAS_L2_SIZE python tests/bench/edges.py Prints the seconds of both, in
the same process, and their ratio: below 1 the edge at 2,000 points is the faster one.
"""

from __future__ import annotations

import time

import numpy as np
import threadpoolctl
from numpy.typing import NDArray

from nodal.solver.edges import respond
from nodal.solver.matrix import System, Term

SECTIONS, POINTS, FREQUENCIES, STACK = 200, 2000, 1000, 20


def ladder(sections: int) -> System:
    """1 Ω and 1 nH in series, 1 pF to ground, in every section; 50 Ω at both ends."""
    terms = [Term(((k, 1.0),), ((k, 1.0),), 1 / 50) for k in (0, sections)]
    for k in range(sections):
        current, along = sections + 1 + k, ((k, 1.0), (k + 1, -1.0))
        terms.append(Term(along, ((current, 1.0),), 1.0))
        terms.append(Term(((current, 1.0),), along, 1.0))
        terms.append(Term(((current, 1.0),), ((current, 1.0),), -1.0, -1e-9))
        terms.append(Term(((k + 1, 1.0),), ((k + 1, 1.0),), 0.0, 1e-12))
    return System(2 * sections + 1, tuple(terms))


def matrices(system: System) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    g, c = np.zeros((2, system.size, system.size))
    for term in system.terms:
        for i, row in term.rows:
            for j, col in term.cols:
                g[i, j] += row * col * term.g
                c[i, j] += row * col * term.c
    return g, c


def main() -> None:
    system = ladder(SECTIONS)
    source, output = {0: 1 / 50}, {SECTIONS: 1.0}
    window = 40e-9
    print("threads:", {info["internal_api"]: info["num_threads"] for info in threadpoolctl.threadpool_info()})
    start = time.perf_counter()
    edges = respond(system, source, [output], ramp=0.0, window=window)
    prepared = time.perf_counter()
    edges(np.linspace(0, window, POINTS))
    done = time.perf_counter()
    print(f"edge, {POINTS} points: {done - start:.2f} s ({prepared - start:.2f} s to prepare)")
    print(f"by {edges.methods[0]}, estimated error {edges.error[0]:.1e}")
    g, c = matrices(system)
    b = np.zeros((system.size, 1))
    b[0] = 1 / 50
    start_dense = time.perf_counter()
    for s in np.split(2j * np.pi * np.geomspace(1e6, 1e12, FREQUENCIES), FREQUENCIES // STACK):
        np.linalg.solve(g + s[:, None, None] * c, np.broadcast_to(b, (len(s), *b.shape)))
    dense = time.perf_counter() - start_dense
    print(f"dense stacked sweep, {FREQUENCIES} points: {dense:.2f} s")
    print(f"ratio edge / sweep: {(done - start) / dense:.2f}")


if __name__ == "__main__":
    main()
