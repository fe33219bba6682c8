"""How many levels lie below an energy, without computing any: Sylvester's law of inertia.

The matrix is brought to a narrow band (reverse Cuthill-McKee), cut into blocks that couple to
the next block only, and eliminated block by block. Every front is diagonalised; directions with
a small pivot are not eliminated but carried on into the next front (delayed pivoting), so that
an energy that sits on a level, or on a level of a piece, breaks nothing. The signs of the pivots
are counted (Haynsworth 1968, recalled from memory; Parlett, The Symmetric Eigenvalue Problem,
1998).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.linalg
from scipy.sparse import csr_array
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.analysis.levels import AnyArray, IntArray

__all__ = ["Count", "Order", "count_negative", "find_order"]

SMALL_PIVOT = 1e-3
NO_PIVOT = 1e-12
ROUNDING = 8.0 * float(np.finfo(np.float64).eps)


@dataclass(frozen=True, kw_only=True)
class Count:
    """Number of levels below an energy, exact unless a level lies within ``radius`` of it."""

    below: int
    radius: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Order:
    """A permutation of the sites and where its blocks begin; the last entry is n."""

    sites: IntArray
    starts: IntArray


def find_order(matrix: csr_array) -> Order:
    """Order of elimination for every matrix of this structure."""
    sites = reverse_cuthill_mckee(matrix, symmetric_mode=True).astype(np.int64)
    moved = matrix[sites][:, sites].tocoo()
    n = matrix.shape[0]
    reach = np.arange(n)
    np.maximum.at(reach, moved.coords[0], moved.coords[1])
    reach = np.maximum.accumulate(reach)
    starts = [0, 1]
    while starts[-1] < n:
        starts.append(max(int(reach[starts[-1] - 1]) + 1, starts[-1] + 1))
    return Order(sites=sites, starts=np.array(starts))


def count_negative(matrix: csr_array, energy: float, order: Order) -> Count:
    """Levels of a Hermitian ``matrix`` below ``energy``."""
    moved = matrix[order.sites][:, order.sites]
    scale = float(abs(moved).sum(axis=1).max()) + abs(energy) or 1.0
    starts = order.starts
    front = _block(moved, starts, 0, 0) - energy * np.eye(starts[1])
    below, radius = 0, 0.0
    for k in range(starts.size - 2):
        onward = _block(moved, starts, k, k + 1)
        next_block = _block(moved, starts, k + 1, k + 1) - energy * np.eye(onward.shape[1])
        pivots, turn = scipy.linalg.eigh(front, check_finite=False, overwrite_a=True, driver="evd")
        # directions carried on from earlier fronts stand first and couple to this block only
        coupling = turn[turn.shape[0] - onward.shape[0] :].conj().T @ onward
        size, reach = np.abs(pivots), np.linalg.norm(coupling, axis=1)
        # a small pivot is no danger where its coupling is as small: flat bands have many such
        harmless = (size > NO_PIVOT * scale) & (reach <= size / SMALL_PIVOT)
        good = (size > SMALL_PIVOT * scale) | harmless
        below += int(np.count_nonzero(pivots[good] < 0))
        scaled = coupling[good] / pivots[good, None]
        schur = next_block - coupling[good].conj().T @ scaled
        growth = float(np.linalg.norm(scaled) * np.linalg.norm(onward))
        radius = max(radius, ROUNDING * float(scale * np.sqrt(turn.shape[0]) + growth))
        front = _join(pivots[~good], coupling[~good], schur)
    last = scipy.linalg.eigvalsh(front, check_finite=False)
    below += int(np.count_nonzero(last < 0))
    return Count(below=below, radius=max(radius, ROUNDING * scale * np.sqrt(front.shape[0])))


def _block(matrix: csr_array, starts: IntArray, row: int, column: int) -> AnyArray:
    rows = slice(int(starts[row]), int(starts[row + 1]))
    columns = slice(int(starts[column]), int(starts[column + 1]))
    dense: AnyArray = matrix[rows, columns].toarray()
    return dense


def _join(pivots: AnyArray, coupling: AnyArray, schur: AnyArray) -> AnyArray:
    """The next front: directions carried on, then the next block."""
    carried = pivots.size
    if not carried:
        return (schur + schur.conj().T) / 2
    front = np.zeros((carried + schur.shape[0],) * 2, dtype=schur.dtype)
    front[np.arange(carried), np.arange(carried)] = pivots
    front[:carried, carried:] = coupling
    front[carried:, :carried] = coupling.conj().T
    front[carried:, carried:] = (schur + schur.conj().T) / 2
    return front
