"""Levels in a window of a large Hamiltonian: shift and invert, certified by counts.

The counts at the edges say how many levels the window holds; the iteration goes on, with what
it has found projected out, until it has that many. Partners of degenerate levels that a Krylov
space cannot see from one start vector come up in the next round.

The inverse comes from the compiled elimination along a band where there is one, else from
SuperLU: with pivots near the diagonal, which keeps the factor small, and where its solution does
not stand the test, with full pivoting.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_array, csr_array, eye_array
from scipy.sparse.linalg import splu

from ribbon.analysis.front import Band, factor_along
from ribbon.analysis.lanczos import largest, turn_rows
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.errors import NotCertified

__all__ = ["Found", "levels_of_window", "nearest_levels"]

ROUNDS = 8
SPARE = 3
CONVERGED = 1e-9
POLISHED = 5e-12
ACCURATE = 1e-10
CALM = 1e8
"""Growth in units of the scale up to which a factor gives states that need no polish."""
SMALL = 64
OFFSETS = (1.618034e-7, -2.718282e-7, 3.141593e-6)
"""Shifts in units of the scale, at numbers on which no level stands by design."""
ASIDE = (0.01618034, -0.02718282, 0.05772157, -0.1414214, 0.3141593)
"""Shifts in units of the scale over the number of levels: less than their distance."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Found:
    """Energies in ascending order with orthonormal states and the norms of H psi - E psi."""

    energies: FloatArray
    states: AnyArray
    residuals: FloatArray


@dataclass(frozen=True, kw_only=True, eq=False)
class _Inverse:
    """Solves with the matrix less ``shift``; entries of vectors stand in the order ``sites``."""

    shift: float
    solve: Callable[[AnyArray], AnyArray]
    sites: IntArray | None

    def ordered(self, vector: AnyArray) -> AnyArray:
        """A vector in the order of the solves."""
        return vector if self.sites is None else vector[self.sites]

    def restored(self, vector: AnyArray) -> AnyArray:
        """A vector in the order of the matrix."""
        if self.sites is None:
            return vector
        out = np.empty_like(vector)
        out[self.sites] = vector
        return out


def nearest_levels(
    matrix: csr_array, energy: float, count: int, scale: float, *, band: Band | None = None
) -> Found:
    """About ``count`` levels near ``energy``, without a promise that none is missing."""
    none = np.zeros((matrix.shape[0], 0), dtype=matrix.dtype)
    plan = _Plan(count=count, starts=1, scale=scale, band=band)
    return _compact(_search(matrix, energy, none, plan))


def _compact(found: Found) -> Found:
    """The same, not holding on to the larger array that the states were part of."""
    return replace(found, states=found.states.T.copy().T)


def levels_of_window(
    matrix: csr_array,
    edges: tuple[float, float],
    wanted: int,
    *,
    scale: float,
    guess: Found | None = None,
    band: Band | None = None,
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
    empty = Found(energies=np.zeros(0), states=none, residuals=np.zeros(0))
    inside = empty if guess is None else inside_window(guess)
    centre = (lower + upper) / 2
    for attempt in range(ROUNDS):
        missing = wanted - inside.energies.size
        if missing <= 0:
            return inside
        ahead = min(missing + SPARE * (attempt + 1), matrix.shape[0] - inside.energies.size - 1)
        place = centre + (upper - lower) * 0.1 * attempt * (-1) ** attempt / ROUNDS
        # a level of multiplicity g shows itself g times only to g start vectors
        plan = _Plan(count=max(ahead, 1), starts=min(missing, 4**attempt), scale=scale, band=band)
        found = _compact(_search(matrix, place, inside.states, plan))
        inside = inside_window(found)
    if inside.energies.size == wanted:
        return inside
    raise NotCertified(
        f"the window from {lower:.9g} to {upper:.9g} holds {wanted} levels, but the iteration "
        f"found {inside.energies.size}; ask for the complete spectrum or a narrower window",
        partial=inside,
    )


def _only(found: Found, chosen: NDArray[np.bool_]) -> Found:
    if np.all(chosen):
        return found
    return Found(
        energies=found.energies[chosen],
        states=found.states[:, chosen],
        residuals=found.residuals[chosen],
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class _Plan:
    """How many levels to look for, from how many start vectors, and what helps."""

    count: int
    starts: int
    scale: float
    band: Band | None


def _search(matrix: csr_array, energy: float, known: AnyArray, plan: _Plan) -> Found:
    """The ``known`` states and about ``count`` more near ``energy``, refined together."""
    n, old, scale = matrix.shape[0], known.shape[1], plan.scale
    if n <= max(SMALL, 3 * (plan.count + plan.starts) + old):
        energies, states = np.linalg.eigh(matrix.toarray())
        near = np.argsort(np.abs(energies - energy))[: plan.count + old]
        return _refine(matrix, np.concatenate([known.T, states[:, near].T]))
    inverse, start = _inverse(matrix, energy, scale, plan.band)
    shield = np.array([inverse.ordered(column) for column in known.T]).reshape(old, n)

    def apart(vector: AnyArray) -> AnyArray:
        return vector - (shield @ vector.conj()).conj() @ shield if old else vector

    starts = np.random.default_rng(old).standard_normal((plan.starts, n)).astype(matrix.dtype)
    starts[0] = start
    starts = np.array([apart(vector) for vector in starts])
    ritz = largest(lambda vector: apart(inverse.solve(apart(vector))), starts, plan.count)
    for row in ritz.vectors:
        row[:] = inverse.restored(row)
    rows = np.concatenate([known.T, ritz.vectors]) if old else ritz.vectors
    found = _refine(matrix, rows)
    if np.any(found.residuals > POLISHED * scale):
        found = _polish(matrix, found, inverse, POLISHED * scale)
    return found


def _polish(matrix: csr_array, found: Found, inverse: _Inverse, limit: float) -> Found:
    """One step of correction for states whose residual an inexact factor left too large."""
    rows = found.states.T
    for place in np.flatnonzero(found.residuals > limit):
        state = rows[place]
        rest = matrix @ state - found.energies[place] * state
        state -= inverse.restored(inverse.solve(inverse.ordered(rest)))
    return _refine(matrix, rows)


def _inverse(
    matrix: csr_array, energy: float, scale: float, band: Band | None
) -> tuple[_Inverse, AnyArray]:
    """The inverse of matrix - energy, and a vector that it was tried on.

    The shift is moved a little so that it hits no level exactly: levels of clean lattices sit on
    round energies, and an exactly singular matrix not only has no factor: SuperLU can take the
    whole process down on one.
    """
    given = np.random.default_rng(0).standard_normal(matrix.shape[0]).astype(matrix.dtype)
    for inverse in _inverses(matrix, energy, scale, band):
        found = inverse.solve(inverse.ordered(given))
        size = float(np.linalg.norm(found))
        if np.isfinite(size):
            natural = inverse.restored(found)
            rest = matrix @ natural - inverse.shift * natural - given
            if np.linalg.norm(rest) <= ACCURATE * (scale * size + np.linalg.norm(given)):
                return inverse, found
    raise NotCertified(f"the matrix minus {energy:.9g} cannot be factorised at or near this energy")


def _inverses(
    matrix: csr_array, energy: float, scale: float, band: Band | None
) -> Iterator[_Inverse]:
    """Factors to try, the quickest first."""
    if band is not None:
        yield from _along_band(matrix, energy, scale, band)
    identity = eye_array(matrix.shape[0], format="csc", dtype=matrix.dtype)
    symmetric = {"permc_spec": "MMD_AT_PLUS_A", "options": {"SymmetricMode": True}}
    for options in ({**symmetric, "diag_pivot_thresh": 1e-3}, {"permc_spec": "COLAMD"}):
        for step in OFFSETS:
            shift = energy + step * scale
            try:
                factors = splu(csc_array(matrix - shift * identity), **options)
            except RuntimeError:
                continue
            yield _Inverse(shift=shift, solve=factors.solve, sites=None)


def _along_band(matrix: csr_array, energy: float, scale: float, band: Band) -> Iterator[_Inverse]:
    """The compiled factor at the first shift where it grows little, else where it grows least."""
    best, place = np.inf, energy
    for step in ASIDE:
        shift = energy + step * scale / matrix.shape[0]
        factor = factor_along(matrix, shift, band)
        if factor is not None and factor.grown < best:
            best, place = factor.grown, shift
        if factor is not None and best < CALM * scale:
            break
        del factor  # before the next one is made: two would double the memory
        factor = None
    if np.isfinite(best):
        factor = factor_along(matrix, place, band) if factor is None else factor
    if factor is not None:
        yield _Inverse(shift=place, solve=factor.solve, sites=band.sites)


def _refine(matrix: csr_array, rows: AnyArray) -> Found:
    """Rayleigh-Ritz in the span of the rows, which it overwrites: orthonormal states, energies.

    One vector at a time, so that a large window takes no second copy.
    """
    count = rows.shape[0]
    overlaps = np.empty((count, count), dtype=rows.dtype)
    elements = np.empty((count, count), dtype=rows.dtype)
    for place, row in enumerate(rows):
        overlaps[:, place] = (rows @ row.conj()).conj()
        elements[:, place] = (rows @ (matrix @ row).conj()).conj()
    weights, turn = np.linalg.eigh((overlaps + overlaps.conj().T) / 2)
    firm = weights > 1e-8 * np.max(weights, initial=0.0)
    whiten = turn[:, firm] / np.sqrt(weights[firm])
    inner = whiten.conj().T @ elements @ whiten
    energies, turn = np.linalg.eigh((inner + inner.conj().T) / 2)
    turn_rows(rows, whiten @ turn)
    rows = rows[: energies.size]
    residuals = np.empty(energies.size)
    for place, row in enumerate(rows):
        residuals[place] = np.linalg.norm(matrix @ row - energies[place] * row)
    return Found(energies=energies, states=rows.T, residuals=residuals)
