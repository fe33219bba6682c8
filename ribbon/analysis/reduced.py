"""Levels near one energy at every flux from one small matrix per flux.

Every state of H(flux) = H(0) + U C(flux) U^H outside the spectrum of H(0) is (H(0) - E)^-1 U c:
the same n-vectors at every flux. The basis holds the columns of (H(0) - z)^-1 U at a few energies
z spread over the window, which interpolate at the energies between (far better than as many
powers of one inverse), and Krylov vectors of one inverse for levels that do not reach the seam.

Not H but the inverse at one shift is projected, with the seam term exact, so that the levels
sought are the outermost ones: by Cauchy's interlacing a projected level never lies nearer to the
shift than the true one of its rank, hence as many as were counted are all there are. Energies err
by the square of the residual. Slopes are those of A^-1 x, a step of inverse iteration that costs
nothing on the seam; they are the derivatives of the projected levels and also err by the square,
where those of x itself err by the residual (Parlett, The Symmetric Eigenvalue Problem, 1998, for
interlacing and residual bounds; recalled from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, shell_edges
from ribbon.analysis.seam import CountedEdge, Seam
from ribbon.analysis.spectrum import nearest_shells

__all__ = ["Reduced", "ReducedPoint"]

SEGMENTS = 32
FAINT = 1e-12
SEEN = 1e-9
"""States of another flux that differ by less add nothing to those known."""
SLACK = 3.0
"""A level is trusted whose residual is no more than so many times what was aimed at."""


@dataclass(frozen=True, kw_only=True, eq=False)
class ReducedPoint:
    """Levels between the edges of a `Reduced` at one flux, in ascending order.

    ``coordinates`` are the states, columns, in the basis and the seam gauge; ``residuals`` bound
    the norm of H psi - E psi after one step of inverse iteration; ``counted`` is the number of
    levels by inertia, None where one lies too near an edge.
    """

    energies: FloatArray
    slopes: FloatArray
    residuals: FloatArray
    coordinates: AnyArray
    first: int
    counted: int | None

    @property
    def index(self) -> IntArray:
        """Positions in the complete spectrum."""
        return self.first + np.arange(self.energies.size)

    def mirrored(self) -> ReducedPoint:
        """The same point at minus the flux, where H(0) and the basis are real."""
        return ReducedPoint(
            energies=self.energies,
            slopes=-self.slopes,
            residuals=self.residuals,
            coordinates=self.coordinates.conj(),
            first=self.first,
            counted=self.counted,
        )


@dataclass(frozen=True, kw_only=True, eq=False)
class _Frame:
    """A subspace of the basis: orthonormal columns, and what is projected on them."""

    frame: AnyArray
    lifted: AnyArray
    inverse: AnyArray
    columns: AnyArray


@dataclass(frozen=True, kw_only=True, eq=False)
class Reduced:
    """The projected inverse at zero flux, the seam in the basis, and what bounds the error.

    ``known`` holds coordinates of states met at some fluxes; where they suffice, the levels of
    other fluxes are sought among them.
    """

    seam: Seam
    shift: float
    vectors: AnyArray
    inverse: AnyArray
    columns: AnyArray
    inner: AnyArray
    gram: AnyArray
    doubt: FloatArray
    seam_doubt: float
    edges: tuple[CountedEdge, CountedEdge]
    turns: FloatArray
    goal: float
    exact: float
    same: float
    known: AnyArray | None = None

    def trusts(self, point: ReducedPoint) -> bool:
        """True where as many levels were found as were counted, and all are accurate."""
        small = np.max(point.residuals, initial=0.0) <= SLACK * self.goal
        return point.counted == point.energies.size and bool(small)

    def at(self, flux: float) -> ReducedPoint:
        """Levels between the edges at a flux."""
        if self.known is not None:
            point = self._solve(flux, self._short)
            if self.trusts(point):
                return point
        return self._solve(flux, self._whole)

    def learn(self, fluxes: FloatArray) -> Reduced:
        """The same problem with the states of some fluxes known."""
        taught = self
        for flux in fluxes:
            if taught.known is not None and taught.trusts(taught._solve(flux, taught._short)):
                continue
            states = self._solve(flux, self._whole).coordinates
            if not np.iscomplexobj(self.vectors):
                # the basis is real: real and imaginary parts serve this flux and its mirror
                states = np.concatenate([states.real, states.imag], axis=1)
            old = np.zeros((states.shape[0], 0)) if taught.known is None else taught.known
            both, share, _ = np.linalg.svd(
                np.concatenate([old, states], axis=1), full_matrices=False
            )
            taught = replace(self, known=both[:, share > SEEN])
        return taught

    def _solve(self, flux: float, among: _Frame) -> ReducedPoint:
        change = self.seam.change(flux)
        inner = np.eye(self.seam.size) + self.inner @ change
        gain = np.linalg.solve(inner.T, change.T).T
        gain = (gain + gain.conj().T) / 2
        matrix = among.inverse - among.columns @ gain @ among.columns.conj().T
        values, turn = np.linalg.eigh((matrix + matrix.conj().T) / 2)
        energies = self.shift + 1 / np.where(values == 0, np.finfo(np.float64).tiny, values)
        lower, upper = (edge.energy for edge in self.edges)
        inside = np.flatnonzero((energies > lower) & (energies < upper))
        inside = inside[np.argsort(energies[inside], kind="stable")]
        energies, values, turn = energies[inside], values[inside], turn[:, inside]
        seam_part = among.columns.conj().T @ turn
        gained = gain @ seam_part
        states = among.frame @ turn
        left = among.lifted @ turn - self.columns @ gained - states * values
        # U^H A^-1 x by Woodbury, over the norm of A^-1 x
        amplitudes = np.linalg.solve(inner, seam_part) / values
        residuals = self._residuals(states, left, gained, values)
        states, slopes = _resolve(energies, self.same, states, amplitudes, self.seam.slope(flux))
        low, high = (edge.count(change) for edge in self.edges)
        return ReducedPoint(
            energies=energies,
            slopes=slopes,
            residuals=residuals,
            coordinates=states,
            first=-1 if low is None else low,
            counted=None if low is None or high is None else high - low,
        )

    def part(
        self,
        point: ReducedPoint,
        *,
        near: float,
        count: int,
        between: tuple[float, float] | None,
    ) -> slice | None:
        """Positions in ``point`` of the levels of a window, shells whole.

        None where the point is not trusted, the window reaches beyond the edges, or a level of
        it is not exact enough.
        """
        energies = point.energies
        if not self.trusts(point) or (between is None and energies.size < count):
            return None
        lower, upper = (edge.energy for edge in self.edges)
        if between is None:
            first, last, _ = nearest_shells(energies, near, count, self.same)
            # what lies beyond the edges must be farther away than what was chosen
            room = min(near - lower, upper - near)
            room -= float(np.max(np.abs(energies[first:last] - near)))
        else:
            first, last = _shells_between(energies, between, self.same)
            room = min(between[0] - lower, upper - between[1])
            if first < last:
                room = min(room, energies[first] - lower, upper - energies[last - 1])
        exact = np.max(self.errors(point)[first:last], initial=0.0) <= self.exact
        return slice(first, last) if exact and room > self.same else None

    def errors(self, point: ReducedPoint) -> FloatArray:
        """Bounds of the errors of the energies: residual squared over the distance of the rest.

        All levels between the edges are held, so that the rest lies beyond them; for the inverse
        (Temple and Kato, recalled from memory) and carried back to energies.
        """
        away = np.abs(point.energies - self.shift)
        errors = np.zeros(away.size)
        for edge in self.edges:
            reach = np.abs(edge.energy - self.shift) / np.maximum(away, np.finfo(np.float64).tiny)
            gap = np.abs(edge.energy - point.energies)
            errors = np.maximum(errors, reach * point.residuals**2 / gap)
        return errors

    @cached_property
    def _whole(self) -> _Frame:
        return self._among(np.eye(self.inverse.shape[0]))

    @cached_property
    def _short(self) -> _Frame:
        return self._among(self.inverse[:, :0] if self.known is None else self.known)

    def _among(self, frame: AnyArray) -> _Frame:
        lifted = self.inverse @ frame
        inverse, columns = frame.conj().T @ lifted, frame.conj().T @ self.columns
        return _Frame(frame=frame, lifted=lifted, inverse=inverse, columns=columns)

    def _residuals(
        self, states: AnyArray, left: AnyArray, gained: AnyArray, values: FloatArray
    ) -> FloatArray:
        """Norms of H psi - E psi for psi = A^-1 x, with the errors of the solves on top.

        ``left`` is what A^-1 x - x / (E - shift) is inside the basis, ``gram`` what it is outside.
        """
        outside = np.einsum("ij,ij->j", states.conj(), self.gram @ states).real
        norms = np.sqrt(np.maximum(outside, 0.0) + np.linalg.norm(left, axis=0) ** 2)
        doubt = self.doubt @ np.abs(states) + self.seam_doubt * np.linalg.norm(gained, axis=0)
        return np.asarray((norms / np.abs(values) + doubt) / np.abs(values))

    def fingerprint(self, coordinates: AnyArray, flux: float) -> AnyArray:
        """Short vectors with the scalar products of the states in the uniform gauge.

        The phase between two gauges is taken as constant over a segment of the ring, which
        changes overlaps of neighbouring fluxes by less than a thousandth.
        """
        rows, places = self._segments
        phase = np.exp(-2j * np.pi * flux * places)
        return np.asarray(phase[:, None] * (rows @ coordinates))

    def coordinates(self, states: AnyArray, flux: float) -> AnyArray:
        """Coordinates of states, given in the uniform gauge, in the basis and the seam gauge."""
        phase = np.exp(2j * np.pi * flux * self.turns)
        return np.asarray(self.vectors.conj() @ (phase[:, None] * states))

    @cached_property
    def _segments(self) -> tuple[AnyArray, FloatArray]:
        """A square root of the basis' scalar products on every segment, and where it lies."""
        rows, places = [], []
        for part in np.array_split(np.argsort(self.turns, kind="stable"), SEGMENTS):
            piece = self.vectors[:, part]
            weight, turn = np.linalg.eigh(piece.conj() @ piece.T)
            kept = weight > FAINT
            rows.append(np.sqrt(weight[kept])[:, None] * turn[:, kept].conj().T)
            places.append(np.full(np.count_nonzero(kept), self.turns[part].mean()))
        return np.concatenate(rows), np.concatenate(places)


def _resolve(
    energies: FloatArray, same: float, states: AnyArray, amplitudes: AnyArray, slope: AnyArray
) -> tuple[AnyArray, FloatArray]:
    """Slopes by Hellmann and Feynman on the seam; inside a shell the states are turned so that
    the slope is diagonal there."""
    turned = slope @ amplitudes
    slopes = np.einsum("ij,ij->j", amplitudes.conj(), turned).real.copy()
    edges = shell_edges(energies, same)
    states = states.astype(np.complex128)
    for shell in np.flatnonzero(np.diff(edges) > 1):
        part = slice(int(edges[shell]), int(edges[shell + 1]))
        inside = amplitudes[:, part].conj().T @ turned[:, part]
        slopes[part], turn = np.linalg.eigh((inside + inside.conj().T) / 2)
        states[:, part] = states[:, part] @ turn
    return states, slopes


def _shells_between(
    energies: FloatArray, between: tuple[float, float], same: float
) -> tuple[int, int]:
    """First and last position between two energies, a shell that an edge cuts completed."""
    first = int(np.searchsorted(energies, between[0] - same))
    last = int(np.searchsorted(energies, between[1] + same, side="right"))
    if first >= last:
        return first, first
    edges = shell_edges(energies, same)
    start = int(edges[np.searchsorted(edges, first, side="right") - 1])
    return start, int(edges[np.searchsorted(edges, last - 1, side="right")])
