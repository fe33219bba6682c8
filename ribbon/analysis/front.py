"""Elimination along a narrow band: counts with an error radius, and a factor for solves.

A ring is cut in two halves and each half is folded: its sites are taken from its middle outward,
left and right in turn, so that the matrix of each half is banded and the couplings of its two
ends come last. What is left is a small dense matrix of the sites at the two cuts. The halves do
not meet before and are worked on by two threads. A matrix whose rows are in no such order is
brought to a band by reverse Cuthill-McKee.

The elimination is L D L^H with pivots on the diagonal. A pivot so small that its row would grow
beyond a limit is put off until later ones have changed it. The signs of the pivots are those of
the levels of a matrix L D L^H = H - E + R (Sylvester's law of inertia). R is bounded along the
way by the sizes of the terms whose rounding it holds (the usual running bound, N. J. Higham,
Accuracy and Stability of Numerical Algorithms, 2002, recalled from memory), row by row: a term
touches the rows of one window only. A count is then exact unless a level lies within |R| of E.
"""

from __future__ import annotations

import importlib
import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache, partial
from typing import Any, TypeVar

import numpy as np
import scipy.linalg
from scipy.sparse import csr_array
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray

__all__ = ["Band", "BandCount", "Factor", "compiled", "count_along", "factor_along", "find_band"]

Result = TypeVar("Result")

EPS = float(np.finfo(np.float64).eps)
GROWTH = 100.0
"""Largest growth of a row that a pivot may cause, in units of the scale of the matrix."""
NO_PIVOT = 1e-12
NARROW = 80
WIDEST = 400
FEWEST = 2_000
"""Smaller matrices are not worth the loading of compiled code."""
THREADED = 20_000


@dataclass(frozen=True, kw_only=True, eq=False)
class Piece:
    """Sites in the order of elimination; the first ``count`` go, the others are at the cuts."""

    sites: IntArray
    count: int


@dataclass(frozen=True, kw_only=True, eq=False)
class Band:
    """How a matrix is eliminated along a band.

    ``place`` holds the place of every site in its piece, ``sites`` the sites of all pieces one
    after another, ``ends`` those that are left, in the same order.
    """

    pieces: tuple[Piece, ...]
    width: int
    place: IntArray

    @property
    def sites(self) -> IntArray:
        """Sites of all pieces."""
        return np.concatenate([piece.sites for piece in self.pieces])

    @property
    def ends(self) -> IntArray:
        """Sites that are left to the dense matrix."""
        return np.concatenate([piece.sites[piece.count :] for piece in self.pieces])


@cache
def compiled() -> Any:
    """The compiled code, or None where numba is not there or cannot compile it."""
    code = importlib.import_module("ribbon.analysis.front_code")
    return code if code.works() else None


def find_band(matrix: csr_array) -> Band | None:
    """A band of the matrix for every matrix of its structure; None where there is no narrow one."""
    n = matrix.shape[0]
    if n < FEWEST or compiled() is None:
        return None
    natural = _ring_band(matrix)
    if natural is not None and natural.width <= NARROW:
        return natural
    sites = reverse_cuthill_mckee(matrix, symmetric_mode=True).astype(np.int64)
    place = np.empty(n, np.int64)
    place[sites] = np.arange(n)
    rows = np.repeat(place, np.diff(matrix.indptr))
    reach = int(np.max(np.abs(rows - place[matrix.indices]), initial=1))
    other = _band([sites], reach, reach)
    found = [band for band in (natural, other) if band is not None and band.width <= WIDEST]
    return min(found, key=lambda band: band.width, default=None)


def _ring_band(matrix: csr_array) -> Band | None:
    """The two folded halves of a matrix whose rows go round a ring."""
    n = matrix.shape[0]
    rows = np.repeat(np.arange(n, dtype=matrix.indices.dtype), np.diff(matrix.indptr))
    apart = np.abs(rows - matrix.indices)
    through = apart > n // 2
    reach = int(np.max(apart[~through], initial=1))
    low = np.minimum(rows[through], matrix.indices[through])
    high = np.maximum(rows[through], matrix.indices[through])
    depth = max(reach, int(np.max(low, initial=0)) + 1, n - int(np.min(high, initial=n)))
    halves = [(0, n // 2), (n // 2, n)] if n >= 16 * depth else [(0, n)]
    return _band([_folded(*half) for half in halves], 2 * reach, 2 * depth)


def _folded(first: int, last: int) -> IntArray:
    """Sites of a stretch from its middle outward, right and left in turn."""
    middle = (first + last) // 2
    sites = np.empty(last - first, np.int64)
    right, left = np.arange(middle, last), np.arange(middle - 1, first - 1, -1)
    both = min(right.size, left.size)
    sites[0 : 2 * both : 2], sites[1 : 2 * both : 2] = right[:both], left[:both]
    sites[2 * both :] = right[both:] if right.size > both else left[both:]
    return sites


def _band(orders: Sequence[IntArray], reach: int, spared: int) -> Band | None:
    """Pieces of which the last ``spared`` sites at least are left; None where that is most."""
    panel = compiled().PANEL
    wide = -(-reach // panel) * panel
    counts = [(sites.size - max(wide, spared)) // panel * panel for sites in orders]
    if min(counts) < sum(sites.size for sites in orders) // 8:
        return None
    place = np.empty(sum(sites.size for sites in orders), np.int64)
    for sites in orders:
        place[sites] = np.arange(sites.size)
    pieces = [Piece(sites=sites, count=count) for sites, count in zip(orders, counts, strict=True)]
    return Band(pieces=tuple(pieces), width=wide + panel, place=place)


@dataclass(frozen=True, kw_only=True, eq=False)
class _Eliminated:
    """One piece after its elimination: what is added to the dense matrix, and the factor."""

    below: int
    carried: int
    grown: float
    front: FloatArray
    rows: FloatArray
    pivots: FloatArray


@dataclass(frozen=True, kw_only=True, eq=False)
class _Problem:
    """A matrix less an energy, real but for the sites at the cuts."""

    arrays: tuple[Any, Any, FloatArray]
    energy: float
    scale: float
    deepest: float


def _pose(matrix: csr_array, energy: float, band: Band) -> _Problem | None:
    """The arrays that the compiled code takes; None for a matrix that is complex all along."""
    data = matrix.data
    if np.iscomplexobj(data):
        complex_ = np.flatnonzero(data.imag)
        rows = np.searchsorted(matrix.indptr, complex_, side="right") - 1
        if not np.all(np.isin(np.unique(rows), band.ends)):
            return None
        data = data.real
    arrays = (matrix.indptr, matrix.indices, np.ascontiguousarray(data, dtype=np.float64))
    scale, deepest = compiled().bound((*arrays[:2], matrix.data), energy)
    return _Problem(arrays=arrays, energy=energy, scale=scale or 1.0, deepest=deepest)


def _eliminate(problem: _Problem, band: Band, piece: Piece, *, keep: bool) -> _Eliminated:
    code = compiled()
    width, stride = band.width, band.width + code.EXTRA
    front, panel = np.zeros((stride, stride)), np.zeros((code.PANEL, stride))
    held = piece.count if keep else 0
    rows, pivots = np.empty(held * width), np.empty(held)
    allowed = np.array([0.0 if keep else GROWTH * problem.scale, NO_PIVOT * problem.scale])
    work = (front.ravel(), panel.ravel(), stride, width, allowed, problem.scale)
    below, carried, grown = code.eliminate(
        problem.arrays,
        (piece.sites, band.place),
        problem.energy,
        piece.count,
        work,
        (rows, pivots),
    )
    return _Eliminated(
        below=int(below),
        carried=int(carried),
        grown=float(grown),
        front=front,
        rows=rows,
        pivots=pivots,
    )


def _dense_rest(
    matrix: csr_array, energy: float, band: Band, done: Sequence[_Eliminated]
) -> AnyArray:
    """The matrix of the sites at the cuts and the rows put off, after the elimination."""
    ends = band.ends
    size = ends.size + sum(one.carried for one in done)
    dense = np.zeros((size, size), dtype=matrix.dtype)
    order = np.argsort(ends)
    for row, site in enumerate(ends):
        part = slice(int(matrix.indptr[site]), int(matrix.indptr[site + 1]))
        found = np.minimum(np.searchsorted(ends[order], matrix.indices[part]), ends.size - 1)
        columns = order[found]
        inside = ends[columns] == matrix.indices[part]
        np.add.at(dense[row], columns[inside], matrix.data[part][inside])
    dense[np.arange(ends.size), np.arange(ends.size)] -= energy
    start, slot = 0, ends.size
    for piece, one in zip(band.pieces, done, strict=True):
        left = piece.sites.size - piece.count
        near = min(left, band.width)
        where = np.concatenate([np.arange(near), band.width + np.arange(one.carried)])
        there = np.concatenate([start + np.arange(near), slot + np.arange(one.carried)])
        upper = np.triu(one.front[np.ix_(where, where)])
        dense[np.ix_(there, there)] += upper + np.triu(upper, 1).T
        start, slot = start + left, slot + one.carried
    return dense


def _work_all(problem: _Problem, band: Band, *, keep: bool) -> list[_Eliminated]:
    jobs = [partial(_eliminate, problem, band, piece, keep=keep) for piece in band.pieces]
    return in_threads(jobs, size=band.place.size)


@cache
def _threads() -> ThreadPoolExecutor:
    if hasattr(os, "register_at_fork"):  # a child of this process has no such thread
        os.register_at_fork(after_in_child=_threads.cache_clear)
    return ThreadPoolExecutor(1, thread_name_prefix="ribbon-front")


def in_threads(jobs: Sequence[Callable[[], Result]], *, size: int) -> list[Result]:
    """Results of the jobs, of two side by side where the size is worth a thread."""
    if len(jobs) == 1 or size < THREADED or (os.cpu_count() or 1) == 1:
        return [job() for job in jobs]
    others = [_threads().submit(job) for job in jobs[1:]]
    return [jobs[0](), *(other.result() for other in others)]


@dataclass(frozen=True, kw_only=True)
class BandCount:
    """Levels below an energy, right unless one lies within ``radius`` of it.

    ``scale`` is the largest row sum of the matrix less the energy.
    """

    below: int
    radius: float
    scale: float


def count_along(matrix: csr_array, energy: float, band: Band) -> BandCount | None:
    """Levels below ``energy``.

    None where the code is not compiled, the matrix complex all along, or too many pivots small.
    """
    problem = None if compiled() is None else _pose(matrix, energy, band)
    if problem is None:
        return None
    done = _work_all(problem, band, keep=False)
    if any(one.carried < 0 for one in done):
        return None
    rest = _dense_rest(matrix, energy, band, done)
    signs = scipy.linalg.eigvalsh(rest, check_finite=False)
    size = float(np.max(np.abs(signs), initial=0.0))
    terms = sum(one.grown for one in done) + problem.deepest
    radius = EPS * (terms + 8 * np.sqrt(signs.size) * size)
    below = sum(one.below for one in done) + int(np.count_nonzero(signs < 0))
    if not np.isfinite(radius):
        return None
    return BandCount(below=below, radius=float(radius), scale=problem.scale)


@dataclass(frozen=True, kw_only=True, eq=False)
class Factor:
    """L D L^H of a matrix less an energy, for vectors in the order ``sites``."""

    band: Band
    done: tuple[_Eliminated, ...]
    rest: tuple[AnyArray, IntArray]
    grown: float

    def solve(self, vector: AnyArray) -> AnyArray:
        """Solve for one real or complex vector, whose entries stand in the order of the band."""
        code, parts = compiled(), [np.array(vector.real)]
        if np.iscomplexobj(vector) or np.iscomplexobj(self.rest[0]):
            parts.append(np.array(vector.imag))
        starts = np.cumsum([0, *(piece.sites.size for piece in self.band.pieces)])
        views = [
            tuple(part[starts[number] : starts[number + 1]] for part in parts)
            for number in range(len(self.done))
        ]

        def run(solver: Any) -> None:
            jobs = [
                partial(solver, one.rows, one.pivots, self.band.width, view)
                for one, view in zip(self.done, views, strict=True)
            ]
            in_threads(jobs, size=int(starts[-1]))

        run(code.forward)
        cuts = zip(views, self.band.pieces, strict=True)
        ends = [tuple(part[piece.count :] for part in view) for view, piece in cuts]
        given = np.concatenate([_together(end) for end in ends])
        found = scipy.linalg.lu_solve(self.rest, given, check_finite=False)
        first = 0
        for end in ends:
            here = found[first : first + end[0].size]
            end[0][:] = here.real
            if len(end) > 1:
                end[1][:] = here.imag
            first += here.size
        run(code.backward)
        return _together(tuple(parts))


def _together(parts: tuple[FloatArray, ...]) -> AnyArray:
    return parts[0] if len(parts) == 1 else parts[0] + 1j * parts[1]


def factor_along(matrix: csr_array, energy: float, band: Band) -> Factor | None:
    """The factor of ``matrix`` less ``energy``; None where `count_along` would give none."""
    problem = None if compiled() is None else _pose(matrix, energy, band)
    if problem is None:
        return None
    done = _work_all(problem, band, keep=True)
    rest = _dense_rest(matrix, energy, band, done)
    grown = sum(one.grown for one in done)
    if not (np.isfinite(grown) and np.all(np.isfinite(rest))):
        return None
    return Factor(
        band=band, done=tuple(done), rest=scipy.linalg.lu_factor(rest), grown=float(grown)
    )
