"""The seam as a small change of a large matrix: H(flux) = H(0) + U C(flux) U^H.

In the seam gauge only the bonds that cross the seam carry the flux. U picks the few sites they
touch, C(flux) is small and Hermitian, so one factorisation of H(0) - E serves every flux: solves
by the formula of Sherman, Morrison and Woodbury, counts by the additivity of the inertia
(Sylvester; Haynsworth 1968, recalled from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from scipy.sparse import csc_array, csr_array, eye_array
from scipy.sparse.linalg import splu

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.hopping import Hamiltonian

__all__ = ["Basis", "CountedEdge", "Response", "Seam", "Solve", "find_seam", "respond", "solver"]

ROUNDING = 100 * float(np.finfo(np.float64).eps)
CLEAR = 8.0
"""A pivot says which side of the edge a level lies where it is so many times its error."""

DROP = 1e-12
"""Directions whose share of a new vector is smaller add nothing but rounding."""
FIRM = 1e-2
"""Directions whose share is larger are orthogonal to the basis after two passes."""

Solve = Callable[[AnyArray], AnyArray]


@dataclass(frozen=True, kw_only=True, eq=False)
class Seam:
    """Sites at the ends of bonds that cross the seam, and those bonds between them.

    ``tail`` and ``head`` count within ``sites``; an amplitude is <tail|H|head> at zero flux and
    turns by ``winding`` times the flux.
    """

    sites: IntArray
    tail: IntArray
    head: IntArray
    amplitude: AnyArray
    winding: IntArray

    @property
    def size(self) -> int:
        """Number of sites at the seam."""
        return self.sites.size

    def change(self, flux: float) -> AnyArray:
        """C(flux) = H(flux) - H(0) between the sites of the seam, in the seam gauge."""
        turns = (flux - np.rint(flux)) * self.winding
        return self._between(self.amplitude * np.expm1(2j * np.pi * turns))

    def slope(self, flux: float) -> AnyArray:
        """dC/d(flux), which is dH/d(flux) between the sites of the seam."""
        turns = (flux - np.rint(flux)) * self.winding
        return self._between(
            2j * np.pi * self.winding * self.amplitude * np.exp(2j * np.pi * turns)
        )

    def _between(self, values: AnyArray) -> AnyArray:
        out = np.zeros((self.size, self.size), dtype=np.complex128)
        # a pair joined twice, or a site joined to itself round the ring, adds
        np.add.at(out, (self.tail, self.head), values)
        np.add.at(out, (self.head, self.tail), values.conj())
        return out


def find_seam(hamiltonian: Hamiltonian) -> Seam:
    """The sites and bonds whose matrix elements turn with the flux in the seam gauge."""
    bonds = hamiltonian.network.bonds
    wound = np.flatnonzero(bonds.winding)
    ends = np.concatenate([bonds.tail[wound], bonds.head[wound]])
    sites, place = np.unique(ends, return_inverse=True)
    return Seam(
        sites=sites.astype(np.int64),
        tail=place[: wound.size],
        head=place[wound.size :],
        amplitude=hamiltonian.amplitudes[wound],
        winding=bonds.winding[wound].astype(np.int64),
    )


def solver(matrix: csr_array, energy: float) -> Solve:
    """A function that applies (matrix - energy)^-1 to the rows of an array, factorised once.

    Full partial pivoting. Raises RuntimeError on an exactly singular matrix: never call it at an
    energy on which a level may stand by design.
    """
    identity = eye_array(matrix.shape[0], format="csc", dtype=matrix.dtype)
    factor = splu(csc_array(matrix - energy * identity), permc_spec="COLAMD")

    def solve(rows: AnyArray) -> AnyArray:
        # rows of a C-ordered array are the columns of a Fortran-ordered one: nothing is copied
        return np.asarray(factor.solve(rows.T)).T

    return solve


@dataclass(frozen=True, kw_only=True, eq=False)
class Response:
    """(H(0) - energy)^-1 on the seam.

    ``rows`` holds the columns of (H(0) - energy)^-1 U as rows, ``inner`` is U^H of them and
    ``error`` bounds the error of ``inner``; ``doubt`` holds the residual norm of every row.
    """

    energy: float
    rows: AnyArray
    inner: AnyArray
    error: float
    doubt: FloatArray


def respond(matrix: csr_array, energy: float, seam: Seam, solve: Solve) -> Response:
    """Solve for every site of the seam, and bound what the solves got wrong."""
    unit = np.zeros((seam.size, matrix.shape[0]), dtype=matrix.dtype)
    unit[np.arange(seam.size), seam.sites] = 1.0
    rows = np.ascontiguousarray(solve(unit))
    left = (matrix @ rows.T).T - energy * rows - unit
    doubt = np.linalg.norm(left, axis=1)
    # with F = (H - E) Z - U the exact U^H Z is off by Z^H F to first order
    error = float(np.linalg.norm(rows) * np.linalg.norm(doubt))
    inner = rows[:, seam.sites].T
    return Response(
        energy=energy,
        rows=rows,
        inner=(inner + inner.conj().T) / 2,
        error=error + ROUNDING * float(np.linalg.norm(inner)),
        doubt=doubt,
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class CountedEdge:
    """An energy with a known number of levels below it at zero flux, counted at every other.

    With M = U^H (H(0) - E)^-1 U and C = W s W^H, s = +-1, the matrix [[H(0) - E, U W],
    [W^H U^H, -s]] has two Schur complements, H(flux) - E and -(s + W^H M W). Both give its
    inertia, hence count(flux) = count(0) + positive(s + W^H M W) - positive(s).
    """

    energy: float
    below: int
    inner: AnyArray
    error: float

    def count(self, change: AnyArray) -> int | None:
        """Levels below the edge with C = ``change``; None where one lies too near to tell."""
        size, turn = np.linalg.eigh(change)
        signs = np.where(size < 0, -1.0, 1.0)
        weights = turn * np.sqrt(np.abs(size))
        small = np.diag(signs) + weights.conj().T @ self.inner @ weights
        pivots = np.linalg.eigvalsh((small + small.conj().T) / 2)
        error = self.error * float(np.max(np.abs(size), initial=0.0))
        error += ROUNDING * float(np.max(np.abs(pivots), initial=1.0))
        if np.min(np.abs(pivots), initial=1.0) < CLEAR * error:
            return None
        return self.below + int(np.count_nonzero(pivots > 0) - np.count_nonzero(signs > 0))


class Basis:
    """Orthonormal vectors as rows, and the inverse applied to each, grown block by block."""

    def __init__(self, matrix: csr_array, shift: float, solve: Solve, most: int) -> None:
        """Start empty; at most ``most`` vectors are held."""
        n = matrix.shape[0]
        self.matrix, self.shift, self.solve = matrix, shift, solve
        self._vectors = np.empty((most, n), dtype=matrix.dtype)
        self._images = np.empty((most, n), dtype=matrix.dtype)
        self.doubt: FloatArray = np.zeros(0)
        self.size = 0

    @property
    def vectors(self) -> AnyArray:
        """The basis, one vector a row."""
        return self._vectors[: self.size]

    @property
    def images(self) -> AnyArray:
        """(H(0) - shift)^-1 of every vector."""
        return self._images[: self.size]

    def extend(self, rows: AnyArray) -> AnyArray:
        """Take in what is new in ``rows``, as far as there is room, and return its images."""
        fresh = self._new(rows)[: self._vectors.shape[0] - self.size]
        if not fresh.shape[0]:
            return fresh
        images = np.ascontiguousarray(self.solve(fresh))
        left = (self.matrix @ images.T).T - self.shift * images - fresh
        part = slice(self.size, self.size + fresh.shape[0])
        self._vectors[part], self._images[part] = fresh, images
        self.doubt = np.concatenate([self.doubt, np.linalg.norm(left, axis=1)])
        self.size += fresh.shape[0]
        return images

    def iterate(self, rows: AnyArray, wanted: int) -> AnyArray:
        """Krylov vectors of the inverse, about ``wanted`` of them; returns where it stopped."""
        goal = self.size + wanted
        while self.size < goal and rows.shape[0]:
            rows = self.extend(rows)
        return rows

    def _new(self, rows: AnyArray) -> AnyArray:
        """An orthonormal basis of what the rows add to the span."""
        rows = self._outside(rows / np.linalg.norm(rows, axis=1)[:, None])
        frame, upper = scipy.linalg.qr(
            self._outside(rows).T, mode="economic", check_finite=False, overwrite_a=True
        )
        turn, share, _ = np.linalg.svd(upper)
        fresh = np.ascontiguousarray((frame @ turn[:, share > DROP]).T)
        if np.min(share, initial=1.0) > FIRM:
            return fresh
        # what was nearly inside carries rounding from there, blown up when it was normed
        frame, _ = scipy.linalg.qr(
            self._outside(fresh).T, mode="economic", check_finite=False, overwrite_a=True
        )
        return np.ascontiguousarray(frame.T)

    def _outside(self, rows: AnyArray) -> AnyArray:
        return np.asarray(rows - (rows @ self.vectors.conj().T) @ self.vectors)
