"""Chebyshev polynomials of a Hamiltonian applied to vectors, many at a time.

With X = (H - middle) / half, all levels of X lie inside [-1, 1], and v_k = T_k(X) v follows from
v_{k+1} = 2 X v_k - v_{k-1}. Two moments come from each step, since T_m T_n = (T_{m+n} +
T_{|m-n|}) / 2: <v|T_{2k}|v> = 2 <v_k|v_k> - <v|v> and <v|T_{2k+1}|v> = 2 <v_{k+1}|v_k> - <v|X|v>
(A. Weisse, G. Wellein, A. Alvermann & H. Fehske, Rev. Mod. Phys. 78, 275 (2006)).

The interval is that of Gershgorin's discs: every level lies within the sum of the bonds of some
site around its energy. It is a proof, and on a clean lattice nearly tight; a Lanczos estimate
would be tighter with disorder, but an interval that is too small ruins every moment.

Everything is real arithmetic on blocks of `WIDTH` columns: that many real vectors, or half as
many complex ones with the real parts first. The gauge is that of the seam, where only the bonds
across it are complex.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache, cached_property
from typing import Any

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.hopping import Hamiltonian
from ribbon.hopping.cores import workers

__all__ = ["WIDTH", "Start", "Stretched", "interval", "moments_of", "stretch"]

WIDTH = 16
MARGIN = 1e-14
"""The interval is wider than Gershgorin's by this part: rounding. A level may stand at its end."""
CACHE_BYTES = 2 * 1024**2
"""Rows that several steps work on in turn: what a core keeps near, give or take."""
FEWEST_ROWS = 64
MOST_STEPS = 16
SLAB = 4096
"""Rows that the way without numba takes at a time."""
BLOCK_BYTES = 2 * 1024**3
"""Blocks of vectors in memory at once."""

Start = Callable[[int], AnyArray]
"""Vector number r, shape (n,), in the order of the sites."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Stretched:
    """2 (H - middle) / half, its rows in an order that keeps neighbours near.

    ``straight`` and ``turned`` hold the real and the imaginary parts off the diagonal; row i is
    site ``order[i]``, and no row meets one more than ``reach`` rows away.
    """

    diagonal: FloatArray
    straight: csr_array
    turned: csr_array
    order: IntArray
    reach: int
    middle: float
    half: float

    @property
    def n(self) -> int:
        """Number of sites."""
        return self.diagonal.size

    @property
    def complex(self) -> bool:
        """True where vectors have imaginary parts."""
        return bool(self.turned.nnz)

    @cached_property
    def uneven(self) -> bool:
        """True where site energies differ from the middle."""
        return bool(np.any(self.diagonal))

    @property
    def together(self) -> int:
        """Vectors in a block."""
        return WIDTH // 2 if self.complex else WIDTH

    @cached_property
    def bonds(self) -> tuple[AnyArray, ...]:
        """The arrays, as the compiled step takes them."""
        parts = (self.straight, self.turned)
        return (self.diagonal, *(a for p in parts for a in (p.indptr, p.indices, p.data)))

    @cached_property
    def slabs(self) -> list[tuple[slice, csr_array, csr_array | None]]:
        """Slabs of rows that share the memory of the whole; few slabs meet the seam."""
        ends = range(0, self.n, SLAB)
        rows = [slice(first, min(self.n, first + SLAB)) for first in ends]
        return [
            (r, _rows_of(self.straight, r), turned if turned.nnz else None)
            for r in rows
            for turned in [_rows_of(self.turned, r)]
        ]


def interval(matrix: csr_array) -> tuple[float, float]:
    """Middle and half width of an interval that holds every level (Gershgorin's discs)."""
    diagonal = matrix.diagonal().real
    bonds = abs(matrix).sum(axis=1) - np.abs(diagonal)
    low, high = float(np.min(diagonal - bonds)), float(np.max(diagonal + bonds))
    return (low + high) / 2, (high - low) / 2 * (1 + MARGIN) or 1.0


def stretch(hamiltonian: Hamiltonian, flux: float) -> Stretched:
    """The Hamiltonian at a flux, ready for the recursion."""
    matrix = hamiltonian.matrix(flux, gauge="seam")
    middle, half = interval(matrix)
    order = reverse_cuthill_mckee(matrix, symmetric_mode=True).astype(np.int64)
    matrix = matrix[order][:, order]
    matrix.sort_indices()
    rows = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
    off = rows != matrix.indices
    distance = np.abs(rows - matrix.indices)
    values = matrix.data * (2 / half)
    diagonal = (matrix.diagonal().real - middle) * (2 / half)
    order.setflags(write=False)
    diagonal.setflags(write=False)
    return Stretched(
        diagonal=diagonal,
        straight=_entries(matrix, values.real, off),
        turned=_entries(matrix, values.imag, off & (values.imag != 0)),
        order=order,
        reach=int(np.max(distance, initial=0)),
        middle=middle,
        half=half,
    )


def _entries(matrix: csr_array, values: FloatArray, chosen: AnyArray) -> csr_array:
    """The chosen entries of a matrix with other values."""
    ends = np.concatenate([[0], np.cumsum(chosen)])[matrix.indptr]
    kind = matrix.indices.dtype
    parts = (np.ascontiguousarray(values[chosen]), matrix.indices[chosen], ends.astype(kind))
    return csr_array(parts, shape=matrix.shape)


def _rows_of(matrix: csr_array, rows: slice) -> csr_array:
    first, last = matrix.indptr[rows.start], matrix.indptr[rows.stop]
    parts = (
        matrix.data[first:last],
        matrix.indices[first:last],
        matrix.indptr[rows.start : rows.stop + 1] - first,
    )
    return csr_array(parts, shape=(rows.stop - rows.start, matrix.shape[1]))


def moments_of(
    stretched: Stretched, start: Start, count: int, *, vectors: int, compiled: bool = True
) -> FloatArray:
    """<v_r|T_n(X)|v_r> for every vector r and n < ``count``, shape (vectors, count).

    A vector's numbers depend on nothing but the vector: neither on the others of its block nor
    on the number of threads. ``compiled`` False takes scipy even where numba is there.
    """
    firsts = range(0, vectors, stretched.together)
    block_bytes = 2 * 8 * WIDTH * stretched.n
    threads = max(1, min(workers(), len(firsts), BLOCK_BYTES // block_bytes))
    sweep = _compiled_sweep() if compiled else None

    def block(first: int) -> FloatArray:
        numbers = range(first, min(vectors, first + stretched.together))
        return _block_moments(stretched, map(start, numbers), count, sweep)

    if threads == 1:
        return _stacked(map(block, firsts), count)
    with ThreadPoolExecutor(threads) as pool:
        return _stacked(pool.map(block, firsts), count)


def _stacked(blocks: Iterable[FloatArray], count: int) -> FloatArray:
    return np.concatenate([np.empty((0, count)), *blocks])


@cache
def _compiled_sweep() -> Any:
    """The compiled steps, or None without numba; imported on first use, for it is slow."""
    return importlib.import_module("ribbon.analysis.chebyshev_compiled").sweep


def _block_moments(
    stretched: Stretched, vectors: Iterable[AnyArray], count: int, sweep: Any
) -> FloatArray:
    """Moments of the vectors of one block, shape (vectors, count)."""
    current, before = _aligned(stretched.n), _aligned(stretched.n)
    held = 0
    for column, vector in enumerate(vectors):
        held = column + 1
        moved = vector[stretched.order]
        current[:, column] = moved.real
        if stretched.complex:
            current[:, column + WIDTH // 2] = moved.imag
    piece, most = _plan(stretched)
    dots = _steps(stretched, (before, current), 1, piece, sweep)  # before = 2 X v
    before *= 0.5
    zeroth, first = dots[0, 0], dots[0, 1] / 2
    found = [zeroth, first]
    pair = (current, before)
    for left in range((count - 1) // 2, 0, -most):
        steps = min(most, left)
        dots = _steps(stretched, pair, steps, piece, sweep)
        found += [row for two in dots for row in (2 * two[0] - zeroth, 2 * two[1] - first)]
        pair = pair if steps % 2 == 0 else (pair[1], pair[0])
    moments = np.array(found[:count])
    if stretched.complex:
        moments = moments[:, : WIDTH // 2] + moments[:, WIDTH // 2 :]
    return moments[:, :held].T


def _plan(stretched: Stretched) -> tuple[int, int]:
    """Rows of a piece, and how many steps follow each other while pieces stay in the cache."""
    piece = max(stretched.reach, FEWEST_ROWS)
    pieces = CACHE_BYTES // (2 * 8 * WIDTH * piece)
    return piece, int(np.clip(pieces - 2, 1, MOST_STEPS))


def _steps(
    stretched: Stretched, pair: tuple[FloatArray, FloatArray], steps: int, piece: int, sweep: Any
) -> FloatArray:
    """new = 2 X current - new, ``steps`` times, the two arrays taking turns.

    Returns <current|current> and <new|current> of every step and column, shape (steps, 2, WIDTH).
    """
    sums = _aligned(2 * steps).reshape(steps, 2, WIDTH)
    if sweep is not None:
        sweep(stretched.bonds, pair[0], pair[1], sums, piece)
        return sums
    for step in range(steps):
        new, current = pair if step % 2 == 0 else (pair[1], pair[0])
        for rows, straight, turned in stretched.slabs:
            here = current[rows]
            found = straight @ current
            if turned is not None:
                found += _times_i(turned @ current)
            if stretched.uneven:
                found += stretched.diagonal[rows, None] * here
            np.subtract(found, new[rows], out=new[rows])
            sums[step, 0] += np.einsum("ij,ij->j", here, here)
            sums[step, 1] += np.einsum("ij,ij->j", new[rows], here)
    return sums


def _times_i(block: FloatArray) -> FloatArray:
    half = WIDTH // 2
    return np.concatenate([-block[:, half:], block[:, :half]], axis=1)


def _aligned(rows: int) -> FloatArray:
    """Zeros of shape (rows, WIDTH) that begin on a cache line: no row lies across two more."""
    line = 8
    held = np.zeros(rows * WIDTH + line)
    offset = -(held.ctypes.data // 8) % line
    return held[offset : offset + rows * WIDTH].reshape(rows, WIDTH)
