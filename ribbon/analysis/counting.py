"""How many levels lie below an energy, without computing any: Sylvester's law of inertia.

Two ways. The quick one eliminates along a narrow band by compiled code (see `front`); it bounds
its own rounding, and its count is taken where this bound is as small as was asked for. The other
one stands every energy: the matrix is brought to a narrow band (reverse Cuthill-McKee), cut into
blocks that couple to the next block only, and eliminated block by block. Every front is
diagonalised; directions with a small pivot are not eliminated but carried on into the next front
(delayed pivoting), so that an energy that sits on a level, or on a level of a piece, breaks
nothing. The signs of the pivots are counted (Haynsworth 1968, recalled from memory; Parlett, The
Symmetric Eigenvalue Problem, 1998).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg
from scipy.sparse import csr_array
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.analysis.front import Band, count_along, find_band
from ribbon.analysis.levels import AnyArray, IntArray

__all__ = ["Count", "Order", "count_negative", "find_order"]

SMALL_PIVOT = 1e-3
NO_PIVOT = 1e-12
ROUNDING = 8.0 * float(np.finfo(np.float64).eps)
CLOSE = 2e-11
"""A count is taken from the quick way if its radius is below this part of the row sums."""


@dataclass(frozen=True, kw_only=True)
class Count:
    """Number of levels below an energy, exact unless a level lies within ``radius`` of it."""

    below: int
    radius: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Order:
    """Orders of elimination for every matrix with the entries of ``structure``."""

    structure: csr_array

    @cached_property
    def band(self) -> Band | None:
        """The narrow band of the quick way, or None."""
        return find_band(self.structure)

    @cached_property
    def sites(self) -> IntArray:
        """The permutation that brings the sites to a band."""
        found: IntArray = reverse_cuthill_mckee(self.structure, symmetric_mode=True)
        return found.astype(np.int64)

    @cached_property
    def starts(self) -> IntArray:
        """Where the blocks of the permuted sites begin; the last entry is n."""
        n = self.structure.shape[0]
        place = np.empty(n, np.int64)
        place[self.sites] = np.arange(n)
        rows = np.repeat(place, np.diff(self.structure.indptr))
        reach = np.arange(n)
        np.maximum.at(reach, rows, place[self.structure.indices])
        reach = np.maximum.accumulate(reach)
        starts = [0, 1]
        while starts[-1] < n:
            starts.append(max(int(reach[starts[-1] - 1]) + 1, starts[-1] + 1))
        return np.array(starts)


def find_order(matrix: csr_array) -> Order:
    """Order of elimination for every matrix of this structure."""
    ones = np.ones(matrix.indices.size, dtype=np.int8)
    return Order(structure=csr_array((ones, matrix.indices, matrix.indptr), shape=matrix.shape))


def count_negative(
    matrix: csr_array, energy: float, order: Order, *, within: float | None = None
) -> Count:
    """Levels of a Hermitian ``matrix`` below ``energy``.

    ``within`` is the radius that is good enough, by default a small part of the row sums.
    """
    if order.band is not None:
        found = count_along(matrix, energy, order.band)
        if found is not None and found.radius < (CLOSE * found.scale if within is None else within):
            return Count(below=found.below, radius=found.radius)
    return _count_by_blocks(matrix, energy, order)


def _count_by_blocks(matrix: csr_array, energy: float, order: Order) -> Count:
    """The way that stands every energy."""
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
