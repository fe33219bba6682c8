"""Levels in a window of a large Hamiltonian: shift and invert, certified by counts.

The counts at the edges say how many levels the window holds; the iteration goes on, with what
it has found projected out, until it has that many. Partners of degenerate levels that a Krylov
space cannot see from one start vector come up in the next round.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray
from scipy.sparse import csc_array, csr_array, eye_array
from scipy.sparse.linalg import ArpackNoConvergence, LinearOperator, SuperLU, eigsh, splu

from ribbon.analysis.levels import AnyArray, FloatArray
from ribbon.errors import NotCertified

__all__ = ["Found", "levels_of_window", "nearest_levels"]

ROUNDS = 8
SPARE = 6
CONVERGED = 1e-9
OFFSETS = (1.618034e-7, -2.718282e-7, 3.141593e-6)
"""Shifts in units of the scale, at numbers on which no level stands by design."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Found:
    """Energies in ascending order with orthonormal states and the norms of H psi - E psi."""

    energies: FloatArray
    states: AnyArray
    residuals: FloatArray


def nearest_levels(matrix: csr_array, energy: float, count: int, scale: float) -> Found:
    """About ``count`` levels near ``energy``, without a promise that none is missing."""
    none = np.zeros((matrix.shape[0], 0), dtype=matrix.dtype)
    return _refine(matrix, _invert(matrix, energy, count, none, scale))


def levels_of_window(
    matrix: csr_array,
    edges: tuple[float, float],
    wanted: int,
    *,
    scale: float,
    guess: Found | None = None,
) -> Found:
    """The ``wanted`` levels between two energies, all of them.

    Raises `NotCertified` with the levels found so far as ``partial`` when the iteration cannot
    find as many as were counted.
    """
    lower, upper = edges

    def inside_window(found: Found) -> Found:
        # what has not converged is no level, wherever its value lies
        firm = found.residuals < CONVERGED * scale
        return _only(found, firm & (found.energies >= lower) & (found.energies <= upper))

    none = np.zeros((matrix.shape[0], 0), dtype=matrix.dtype)
    inside = _refine(matrix, none) if guess is None else inside_window(guess)
    centre = (lower + upper) / 2
    for attempt in range(ROUNDS):
        missing = wanted - inside.energies.size
        if missing <= 0:
            return inside
        ahead = min(missing + SPARE, matrix.shape[0] - inside.energies.size - 1)
        place = centre + (upper - lower) * 0.1 * attempt * (-1) ** attempt / ROUNDS
        fresh = _invert(matrix, place, max(ahead, 1), inside.states, scale)
        found = _refine(matrix, np.concatenate([inside.states, fresh], axis=1))
        inside = inside_window(found)
    if inside.energies.size == wanted:
        return inside
    raise NotCertified(
        f"the window from {lower:.9g} to {upper:.9g} holds {wanted} levels, but the iteration "
        f"found {inside.energies.size}; ask for the complete spectrum or a narrower window",
        partial=inside,
    )


def _only(found: Found, chosen: NDArray[np.bool_]) -> Found:
    return Found(
        energies=found.energies[chosen],
        states=found.states[:, chosen],
        residuals=found.residuals[chosen],
    )


def _invert(
    matrix: csr_array, energy: float, count: int, known: AnyArray, scale: float
) -> AnyArray:
    """Approximate states near ``energy`` orthogonal to the ``known`` ones."""
    factor = _factorise(matrix, energy, scale)
    n = matrix.shape[0]

    def apply(vector: AnyArray) -> AnyArray:
        flat = vector.ravel()
        flat = flat - known @ (known.conj().T @ flat)
        flat = factor.solve(flat.astype(matrix.dtype))
        return np.asarray(flat - known @ (known.conj().T @ flat))

    operator = LinearOperator((n, n), matvec=apply, dtype=matrix.dtype)
    start = np.random.default_rng(known.shape[1]).standard_normal(n)
    space = min(n, max(2 * count + 1, 20))
    try:
        _, states = eigsh(
            operator, k=min(count, n - 2), which="LM", v0=apply(start), tol=0.0, ncv=space
        )
    except ArpackNoConvergence as problem:
        states = problem.eigenvectors
    return np.asarray(states)


def _factorise(matrix: csr_array, energy: float, scale: float) -> SuperLU:
    """LU of matrix - energy, the shift moved a little so that it hits no level exactly.

    Levels of clean lattices sit on round energies, and an exactly singular matrix not only has
    no LU: SuperLU can take the whole process down on one. Full partial pivoting: special
    energies break weaker kinds.
    """
    identity = eye_array(matrix.shape[0], format="csc", dtype=matrix.dtype)
    for step in OFFSETS:
        shifted = csc_array(matrix - (energy + step * scale) * identity)
        try:
            return splu(shifted, permc_spec="COLAMD")
        except RuntimeError:
            continue
    raise NotCertified(f"the matrix minus {energy:.9g} cannot be factorised at or near this energy")


def _refine(matrix: csr_array, states: AnyArray) -> Found:
    """Rayleigh-Ritz in the span of the states: orthonormal states and their energies."""
    if states.shape[1] == 0:
        return Found(energies=np.zeros(0), states=states, residuals=np.zeros(0))
    basis, upper = scipy.linalg.qr(states, mode="economic", check_finite=False)
    firm = np.abs(np.diagonal(upper)) > 1e-8 * np.abs(upper).max()
    basis = basis[:, firm]
    energies, turn = scipy.linalg.eigh(basis.conj().T @ (matrix @ basis), check_finite=False)
    refined = basis @ turn
    residuals = np.linalg.norm(matrix @ refined - refined * energies, axis=0)
    return Found(energies=energies, states=refined, residuals=residuals)
