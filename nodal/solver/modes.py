"""Natural frequencies: finite eigenvalues of the pencil G + s C of a lumped system."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import linalg, sparse
from scipy.sparse.linalg import ArpackNoConvergence, LinearOperator, eigs, splu

from nodal.solver.matrix import System
from nodal.solver.pattern import Complexes, Floats, Pattern

LARGEST = 1200
"""Unknowns that a dense eigenvalue problem is tried with."""

_RANK = 1e-11
_POLISHING = 3
_NEIGHBOURS = 6


class NotLumped(Exception):
    """The system holds functions of s (cables, skin effect, loss): it has no finite set of poles."""


def poles(system: System, ignoring_functions: bool = False) -> Complexes:
    """Finite s (rad/s, shape (n_poles,), complex) at which G + s C is singular, in order of magnitude.

    The scaled pencil is reduced by orthogonal transformations until its C is regular (the algebraic
    equations, with their infinite eigenvalues, drop out), then solved by QR; each simple pole is polished by
    Newton steps on the pencil itself. Poles many decades below the fastest one keep few digits: for search
    grids, and to start from.

    Raises NotLumped for a system with functions of s unless `ignoring_functions`, which leaves those terms
    out; ValueError above LARGEST unknowns.
    """
    if system.size > LARGEST:
        raise ValueError(f"{system.size} unknowns; poles are found for at most {LARGEST}")
    pattern = Pattern(system)
    if pattern.functions and not ignoring_functions:
        raise NotLumped("the system holds functions of s")
    g, c, scale = _scaled(pattern)
    if not c.any() or not (np.isfinite(g).all() and np.isfinite(c).all()):
        return np.zeros(0, dtype=complex)  # none, or values beyond what scaling can bring together
    reduced = _reduce(g, c)
    if reduced is None:
        return np.zeros(0, dtype=complex)
    try:
        found: Any = linalg.eigvals(*reduced)
    except linalg.LinAlgError:
        return np.zeros(0, dtype=complex)
    found = _polished(g, c, -found[np.isfinite(found)]) * scale
    return np.asarray(found[np.lexsort((found.imag, np.abs(found)))], dtype=complex)


def poles_near(system: System, shifts: Complexes) -> Complexes:
    """Some finite poles (rad/s) of a large lumped system: the few nearest to each shift.

    Arnoldi's method on (G + σC)⁻¹C, whose eigenvalues are 1/(σ - s) (Ericsson and Ruhe 1980); only poles
    closer to a shift than half its size are kept. What stands off the shifts is not found: for search grids.
    Functions of s are left out.
    """
    pattern = Pattern(system)
    size = pattern.size
    at = pattern.rows, pattern.cols
    g = sparse.csc_matrix((pattern.entry_g.astype(complex), at), shape=(size, size))
    c = sparse.csc_matrix((pattern.entry_c.astype(complex), at), shape=(size, size))
    start = np.random.default_rng(1).standard_normal(size).astype(complex)
    found = []
    for shift in shifts:
        try:
            factors = splu(g + shift * c)
        except RuntimeError:
            continue  # a pole, or nothing that double precision can tell from one
        inverse = LinearOperator((size, size), matvec=lambda x, f=factors: f.solve(c @ x), dtype=complex)
        try:
            values: Any = eigs(inverse, _NEIGHBOURS, v0=start, tol=1e-6, return_eigenvectors=False)
        except ArpackNoConvergence as partial:
            values = partial.eigenvalues
        near = shift - 1 / values[values != 0]
        found.append(near[np.abs(near - shift) < 0.5 * np.abs(shift)])
    return np.concatenate(found) if found else np.zeros(0, dtype=complex)


def _scaled(pattern: Pattern) -> tuple[Floats, Floats, float]:
    """(G, C, scale): rows and columns brought near 1, s = scale * s of the scaled pencil.

    Powers of two that bring the logarithms of all entries of both near 0 in the mean (after Curtis and Reid
    1972).
    """
    size = pattern.size
    g, c = np.zeros((size, size)), np.zeros((size, size))
    g[pattern.rows, pattern.cols] = pattern.entry_g
    c[pattern.rows, pattern.cols] = pattern.entry_c
    masks = np.array([g != 0, c != 0])
    logs = np.log2(np.abs([g, c]), out=np.zeros(masks.shape), where=masks)
    row, col, shift = np.zeros((1, size, 1)), np.zeros((1, 1, size)), np.zeros((2, 1, 1))
    for _ in range(10):
        for part, axes in ((row, (0, 2)), (col, (0, 1)), (shift, (1, 2))):
            level = np.where(masks, logs + row + col + shift, 0.0)
            part -= level.sum(axis=axes, keepdims=True) / np.maximum(masks.sum(axis=axes, keepdims=True), 1)
    factors = np.exp2(np.rint(row[0])) * np.exp2(np.rint(col[0]))
    scale = float(np.exp2(np.rint(shift[1] - shift[0]).item()))
    return g * factors, c * factors * scale, scale


def _reduce(g: Floats, c: Floats) -> tuple[Floats, Floats] | None:
    """A smaller pencil with the same finite eigenvalues and a regular C; None where none is left."""
    while True:
        u, sizes, _ = linalg.svd(c)
        rank = int((sizes > _RANK * sizes[0]).sum()) if sizes[0] > 0 else 0
        if rank == len(g):
            return g, c
        if rank == 0:
            return None
        g, c = u.T @ g, u.T @ c
        # Rows below the rank say G2 x = 0: x stays in the null space of G2.
        algebraic = g[rank:]
        q, upper, _ = linalg.qr(algebraic.T, pivoting=True)
        diagonal = np.abs(np.diag(upper))
        if diagonal[-1] <= _RANK * diagonal[0]:
            return None  # singular at every s
        free = q[:, len(algebraic) :]
        g, c = g[:rank] @ free, c[:rank] @ free


def _polished(g: Floats, c: Floats, found: Complexes) -> Complexes:
    """Newton steps on 1 / (row (G + s C)⁻¹ column), where small against the gap to others."""
    if len(found) == 0 or len(g) > 200:
        return found
    random = np.random.default_rng(2)
    column, row = random.standard_normal((len(g), 1)), random.standard_normal(len(g))
    result = found.copy()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", linalg.LinAlgWarning)  # the matrix is singular at a pole
        _polish(g, c, found, result, column, row)
    return result


def _polish(g: Floats, c: Floats, found: Complexes, result: Complexes, column: Floats, row: Floats) -> None:
    for k, start in enumerate(found):
        if start.imag < 0:
            continue
        gap = np.abs(np.delete(found, k) - start).min() if len(found) > 1 else np.inf
        s = start
        for _ in range(_POLISHING):
            try:
                factors: Any = linalg.lu_factor(g + s * c, check_finite=False)
                x = linalg.lu_solve(factors, column + 0j, check_finite=False)
                slope = -linalg.lu_solve(factors, c @ x, check_finite=False)
            except (linalg.LinAlgError, ValueError):
                break
            change = complex((row @ x).item()) / complex((row @ slope).item() or 1)
            if not np.isfinite(change) or abs(s + change - start) > 0.01 * gap:
                break
            s += change
        result[k] = s
        if start.imag > 0:
            result[np.argmin(np.abs(found - start.conjugate()))] = s.conjugate()


def lightly_damped(found: NDArray[np.complex128], ratio: float = 0.5) -> Floats:
    """|p| (rad/s) of the conjugate pairs whose damping ratio -Re p/|p| is below `ratio`."""
    upper = found[found.imag > 0]
    return np.unique(np.abs(upper[-upper.real < ratio * np.abs(upper)]))
