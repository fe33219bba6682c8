"""Largest eigenvalues of an inverse: Lanczos with full reorthogonalisation and thick restarts.

One basis vector costs one solve; of a Hermitian operator three terms suffice, which the general
Arnoldi iteration of complex `eigsh` does not use. Every new vector is made orthogonal to all
earlier ones, so that no level is found twice. When the basis is full the best Ritz vectors are
kept (K. Wu and H. Simon, SIAM J. Matrix Anal. Appl. 22, 602 (2000), recalled from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.linalg

from ribbon.analysis.levels import AnyArray, FloatArray

__all__ = ["Ritz", "largest", "turn_rows"]

CHUNK = 8192
EVERY = 2
RESTARTS = 60
RELATIVE = 1e-9
"""Residual of a converged Ritz vector in parts of its eigenvalue."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Ritz:
    """Ritz values by falling size and orthonormal vectors, one a row; ``solves`` were made."""

    values: FloatArray
    vectors: AnyArray
    solves: int


def largest(solve: Callable[[AnyArray], AnyArray], starts: AnyArray, count: int) -> Ritz:
    """About the ``count`` eigenvalues largest in size of the Hermitian operator ``solve``.

    ``starts`` holds one start vector a row; a level of multiplicity g needs g of them to be
    found g times. What has not converged after many restarts is handed over as it is.
    """
    block, n = starts.shape
    most = max(min(max(2 * count + 8, 20) + block, n - block), 1)
    count = min(count, most)
    basis = np.empty((most + block, n), dtype=starts.dtype)
    small = np.zeros((most + block, most), dtype=starts.dtype)
    for place, start in enumerate(starts):
        _append(basis, place, start.copy())
    kept, solves, before = 0, 0, np.inf
    for _ in range(RESTARTS):
        for place in range(kept, most):
            _extend(solve, basis, small, (place, block))
            solves += 1
            held = place + 1
            if held < most and (held < count + 2 or held % EVERY):
                continue
            values, turn = np.linalg.eigh(small[:held, :held])
            order = np.argsort(-np.abs(values))
            values, turn = values[order], turn[:, order]
            coupling = small[held : held + block, :held] @ turn
            errors = np.linalg.norm(coupling[:, :count], axis=0)
            if np.all(errors <= RELATIVE * np.abs(values[:count])):
                turn_rows(basis[:held], turn[:, :count])
                return Ritz(values=values[:count], vectors=basis[:count], solves=solves)
        worst = float(np.max(errors / np.abs(values[:count])))
        if solves > 4 * most and worst > before / 2:
            break  # no better than the solves are
        before = worst
        kept = min(count + (most - count) // 2, most - 1)
        turn_rows(basis[:most], turn[:, :kept])
        basis[kept : kept + block] = basis[most:].copy()
        small[:] = 0.0
        small[np.arange(kept), np.arange(kept)] = values[:kept]
        small[kept : kept + block, :kept] = coupling[:, :kept]
        small[:kept, kept : kept + block] = coupling[:, :kept].conj().T[:, : most - kept]
    else:
        return Ritz(values=values[:kept][:count], vectors=basis[:kept][:count], solves=solves)
    turn_rows(basis[:most], turn[:, :count])
    return Ritz(values=values[:count], vectors=basis[:count], solves=solves)


def _extend(
    solve: Callable[[AnyArray], AnyArray], basis: AnyArray, small: AnyArray, at: tuple[int, int]
) -> None:
    """One vector more: fills column ``place`` of the small matrix."""
    place, block = at
    end = place + block
    vector = solve(basis[place])
    done = basis[:end]
    # what it shares with earlier vectors is known; taken off first, the rest is accurate
    known = np.zeros(end, dtype=basis.dtype)
    known[:place] = small[place, :place].conj()
    known[place:] = [np.vdot(row, vector) for row in done[place:]]
    first = int(np.argmax(known != 0))  # most often all but two are zero
    vector = _subtract(done[first:], known[first:], vector)
    slips = (done @ vector.conj()).conj()
    vector = _subtract(done, slips, vector)
    known += slips
    known[place] = known[place].real
    small[:end, place] = known
    width = min(end, small.shape[1])
    small[place, :width] = known[:width].conj()
    rest = float(np.linalg.norm(vector))
    if rest <= 1e-14 * np.abs(known).max():
        # the space is exhausted: go on from anywhere else
        vector = np.random.default_rng(end).standard_normal(vector.size).astype(basis.dtype)
        rest = 0.0
    else:
        vector /= rest
    _append(basis, end, vector, times=1 if rest else 2)
    if end < small.shape[0]:
        small[end, place] = rest
        if end < small.shape[1]:
            small[place, end] = rest


def _append(basis: AnyArray, end: int, vector: AnyArray, *, times: int = 2) -> None:
    """Put a vector at place ``end`` of the basis, orthogonal to those before it, of length 1."""
    if times == 2:
        for _ in range(times):
            vector = _subtract(basis[:end], (basis[:end] @ vector.conj()).conj(), vector)
        vector /= np.linalg.norm(vector) or 1.0
    basis[end] = vector


def _subtract(rows: AnyArray, factors: AnyArray, vector: AnyArray) -> AnyArray:
    """``vector`` less the sum of the rows times their factors, in one pass."""
    if not rows.size:
        return vector
    multiply = scipy.linalg.get_blas_funcs("gemv", (rows, vector))
    found: AnyArray = multiply(-1.0, rows.T, factors, beta=1.0, y=vector, overwrite_y=True)
    return found


def turn_rows(rows: AnyArray, turn: AnyArray) -> None:
    """Put ``turn``^T @ rows into the first rows, a stretch of columns at a time."""
    turned = np.ascontiguousarray(turn.T)
    for first in range(0, rows.shape[1], CHUNK):
        part = slice(first, first + CHUNK)
        rows[: turn.shape[1], part] = turned @ rows[:, part]
