"""A basis for a `Reduced` problem, grown until its levels are as accurate as wanted.

One factorisation at every energy at which the seam's columns are sampled, the two counted edges
among them, and one Krylov run; no factorisation for a flux.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol

import numpy as np

from ribbon.analysis.certified import Edge, counted_edge
from ribbon.analysis.joining import Follower
from ribbon.analysis.levels import FloatArray, IntArray, Levels, tolerance
from ribbon.analysis.reduced import Reduced, ReducedPoint
from ribbon.analysis.seam import Basis, CountedEdge, Response, Seam, find_seam, respond, solver
from ribbon.analysis.window import OFFSETS
from ribbon.hopping import Hamiltonian

__all__ = ["find_reduced", "sweep_reduced"]

CHUNK = 1 << 15
PAIR = 2
"""Krylov vectors come in pairs, so that degenerate levels away from the seam are both seen."""
INNER = (-0.7071, 0.7071)
"""Where the window is sampled first besides its middle and its edges: Chebyshev's points."""
SPARE = 12
"""Levels by which the window is wider than asked for, so that it holds enough at every flux."""
PAD, SPACINGS = 0.0123, 3.0
"""Part of a window between two energies by which it is widened, and mean spacings added."""
OFF = 0.1372871
"""Mean spacings between a badly known level and the energy sampled to improve it."""
HELD = 0.9
"""A state with so large a part in the basis of a sweep can be followed there."""
CLOSE = 1e-3
"""Part of the window within which no level at zero flux should stand from the shift."""
ROUNDS = 8
PROBES = 5
LESSONS, EVERY = 33, 4
"""Most fluxes, and the part of the sweep, at which states are learnt where those of earlier ones
do not suffice."""
FEWEST, SMALL = 8, 20_000
"""Different fluxes from which on a sweep is done sooner this way, more on rings of few sites."""
MOST_VECTORS = 1_200
MOST_BYTES = 4 * 1024**3
SHARE = 16
"""The basis holds no more than one vector for so many sites."""
EXACT = 1e-10
"""Error of a level allowed, in parts of the bonds at a site."""
FINE, LEAST, COARSE = 1e-4, 1e-12, 1e-8
"""Residual wanted, in mean spacings of the window; never below or above a part of the scale."""


class Wanted(Protocol):
    """What a sweep needs to know of its window."""

    @property
    def near(self) -> float:
        """The energy whose nearest levels are wanted."""

    @property
    def count(self) -> int:
        """How many of them."""

    @property
    def between(self) -> tuple[float, float] | None:
        """Two energies instead."""

    def find(self, hamiltonian: Hamiltonian, *, flux: float, states: bool = False) -> Levels:
        """The levels of one flux, certified."""


Row = tuple[IntArray, FloatArray, FloatArray, IntArray]
"""Indices, energies, slopes and branches at one flux."""


def sweep_reduced(
    hamiltonian: Hamiltonian,
    fluxes: FloatArray,
    window: Wanted,
    progress: Callable[[int, int], None] | None = None,
) -> list[Row] | None:
    """The window at every flux from one reduced problem; what it cannot vouch for, on its own.

    None where there is no such problem, or where a state found on its own is none of its basis,
    so that branches could not be followed.
    """
    near, count, between = window.near, window.count, window.between
    reduced = find_reduced(hamiltonian, fluxes, near=near, count=count, between=between)
    if reduced is None:
        return None
    reversible = not np.iscomplexobj(hamiltonian.amplitudes)
    known: dict[float, ReducedPoint] = {}
    follower = Follower()
    out = []
    for done, flux in enumerate(fluxes):
        folded = float(flux - np.rint(flux))
        key = round(abs(folded) if reversible else folded, 12)
        if key not in known:
            known[key] = reduced.at(key)
        point = known[key].mirrored() if reversible and folded < 0 else known[key]
        part = reduced.part(point, near=near, count=count, between=between)
        if part is not None:
            row = point.index[part], point.energies[part], point.slopes[part]
            states = point.coordinates[:, part]
        else:
            found = window.find(hamiltonian, flux=float(flux), states=True)
            assert found.states is not None
            assert found.slopes is not None
            row = found.index, found.energies, found.slopes
            states = reduced.coordinates(found.states, float(flux))
            if np.min(np.linalg.norm(states, axis=0), initial=1.0) < HELD:
                return None
        marks = reduced.fingerprint(states, float(flux))
        out.append((*row, follower.join(marks, row[1], row[2], float(flux))))
        if progress:
            progress(done + 1, fluxes.size)
    return out


def enough_fluxes(hamiltonian: Hamiltonian, fluxes: FloatArray) -> bool:
    """True where a sweep has so many different fluxes that one reduced problem pays."""
    return _folded(fluxes).size >= FEWEST * (1 + SMALL / hamiltonian.n)


def find_reduced(
    hamiltonian: Hamiltonian,
    fluxes: FloatArray,
    *,
    near: float,
    count: int,
    between: tuple[float, float] | None,
) -> Reduced | None:
    """A reduced problem for the ``count`` levels nearest to ``near`` or those ``between``.

    None where it would not pay or cannot be made accurate: few fluxes, a small ring, a seam that
    is long against it, more levels than the memory allowed holds, an energy at which H(0) is
    singular.
    """
    if not enough_fluxes(hamiltonian, fluxes):
        return None
    seam = find_seam(hamiltonian)
    room = _room(hamiltonian)
    if not 0 < _need(count if between is None else 0, seam) <= room:
        return None
    edges = None
    if between is not None:
        near, pad = sum(between) / 2, PAD * (between[1] - between[0])
        pad += SPACINGS * 2 * hamiltonian.bond_scale / hamiltonian.n
        edges = _counted(hamiltonian, between[0] - pad, between[1] + pad)
        count = edges[1].below - edges[0].below
        if _need(count, seam) > room:
            return None
    try:
        search = _Search(hamiltonian, seam, near=near, count=count, edges=edges)
        found = search.run(_probes(fluxes, PROBES))
    except (RuntimeError, np.linalg.LinAlgError):
        return None
    if found is None:
        return None
    return found.learn(_probes(fluxes, max(2, min(LESSONS, fluxes.size // EVERY))))


def _room(hamiltonian: Hamiltonian) -> int:
    """How many vectors may be held twice, the basis and its images."""
    item = 16 if np.iscomplexobj(hamiltonian.amplitudes) else 8
    held = MOST_BYTES // (2 * item * hamiltonian.n)
    return min(MOST_VECTORS, int(hamiltonian.n / SHARE), held)


def _need(count: int, seam: Seam) -> int:
    """Vectors of a first basis for about ``count`` levels; 0 where nothing turns with the flux."""
    return (2 * (count + SPARE) + (3 + len(INNER)) * seam.size) if seam.size else 0


def _folded(fluxes: FloatArray) -> FloatArray:
    """Different fluxes of the sweep up to period and sign."""
    return np.unique(np.abs(fluxes - np.rint(fluxes)).round(12))


def _probes(fluxes: FloatArray, count: int) -> FloatArray:
    """A few fluxes of the sweep, the outermost first, each later one halving a gap."""
    several = _folded(fluxes)
    place = np.unique(np.linspace(0, several.size - 1, count).astype(int))
    halvings = np.gcd(np.arange(place.size), 1 << 16)
    halvings[[0, -1]] = 1 << 17
    return np.asarray(several[place[np.argsort(-halvings, kind="stable")]])


def _counted(hamiltonian: Hamiltonian, lower: float, upper: float) -> tuple[Edge, Edge]:
    low = counted_edge(hamiltonian, lower, 0.0, outward=-1)
    return low, counted_edge(hamiltonian, upper, 0.0, outward=1)


class _Search:
    """A basis that grows until the levels at a few fluxes are as accurate as wanted."""

    def __init__(
        self,
        hamiltonian: Hamiltonian,
        seam: Seam,
        *,
        near: float,
        count: int,
        edges: tuple[Edge, Edge] | None,
    ) -> None:
        """Begin at the middle of the window; sample its edges and between."""
        self.hamiltonian, self.seam, self.near, self.count = hamiltonian, seam, near, count
        self.matrix = hamiltonian.matrix(0.0, gauge="seam")
        self._begin(near + OFFSETS[0] * hamiltonian.scale)
        away = self._levels() - self.basis.shift
        reach = np.sort(np.abs(away))[count]
        if np.min(np.abs(away)) < CLOSE * reach:
            # solves would lose digits to a level that stands almost on the shift
            some = away[np.abs(away) <= reach]
            widest = int(np.argmax(np.diff(some)))
            self._begin(self.basis.shift + float(some[widest] + some[widest + 1]) / 2)
        lower, upper = edges or _counted(hamiltonian, *self._bracket())
        self.places = [self.basis.shift]
        self.edges = (self._edge(lower), self._edge(upper))
        self.wide = (upper.energy - lower.energy) / max(1, upper.below - lower.below)
        middle, half = (lower.energy + upper.energy) / 2, (upper.energy - lower.energy) / 2
        for part in INNER:
            self._sample(middle + part * half)

    def _begin(self, shift: float) -> None:
        """Factorise at the shift; Krylov vectors and the seam's columns there begin the basis."""
        solve = solver(self.matrix, shift)
        wanted = 2 * (self.count + SPARE)
        self.basis = Basis(self.matrix, shift, solve, _room(self.hamiltonian))
        start = np.random.default_rng(0).standard_normal((PAIR, self.hamiltonian.n))
        self.last = self.basis.iterate(solve(start.astype(self.matrix.dtype)), wanted)
        self.centre = respond(self.matrix, shift, self.seam, solve)
        self.basis.extend(self.centre.rows)

    def _levels(self) -> FloatArray:
        """Projected levels at zero flux; those far from the shift mean nothing."""
        inverse = self.basis.vectors.conj() @ self.basis.images.T
        values = np.linalg.eigvalsh((inverse + inverse.conj().T) / 2)
        return np.asarray(np.sort(self.basis.shift + 1 / values[values != 0]))

    def run(self, probes: FloatArray) -> Reduced | None:
        """Sample the window where levels are worst until every probe is trusted."""
        for _ in range(ROUNDS):
            reduced = self._project()
            missing, places = self._doubts(reduced, probes)
            if not missing and not places:
                return reduced
            size = self.basis.size
            # levels that do not reach the seam are found by the Krylov vectors alone
            self.last = self.basis.iterate(self.last, self.count // 2 + 2 * missing + PAIR)
            if missing:
                ordered = np.sort(self.places)
                widest = int(np.argmax(np.diff(ordered)))
                places.append(float(ordered[widest] * 0.41 + ordered[widest + 1] * 0.59))
            for place in places[:2]:
                self._sample(place)
            if self.basis.size == size:
                return None
        return None

    def _doubts(self, reduced: Reduced, probes: FloatArray) -> tuple[int, list[float]]:
        """How many levels are missing at a probe, and the energies that are least accurate."""
        missing, worst = 0, []
        for flux in probes:
            point = reduced.at(float(flux))
            if point.counted is not None:
                missing = max(missing, point.counted - point.energies.size)
            if np.max(point.residuals, initial=0.0) > reduced.goal:
                place = int(np.argmax(point.residuals))
                worst.append((float(point.residuals[place]), float(point.energies[place])))
        # a level at zero flux makes H(0) - E singular: sample beside it
        return missing, [energy + OFF * self.wide for _, energy in sorted(worst, reverse=True)]

    def _bracket(self) -> tuple[float, float]:
        """Edges beyond the ``count`` nearest levels at zero flux, with some to spare, in gaps."""
        away = self._levels() - self.near
        reach = np.sort(np.abs(away))[[self.count + 2, self.count + SPARE]]
        out = []
        for side in (-1, 1):
            some = np.sort(side * away)
            some = np.concatenate(
                [reach[:1], some[(some > reach[0]) & (some < reach[1])], reach[1:]]
            )
            widest = int(np.argmax(np.diff(some)))
            out.append(self.near + side * (some[widest] + some[widest + 1]) / 2)
        return out[0], out[1]

    def _edge(self, edge: Edge) -> CountedEdge:
        response = self._sample(edge.energy)
        return CountedEdge(
            energy=edge.energy, below=edge.below, inner=response.inner, error=response.error
        )

    def _sample(self, energy: float) -> Response:
        """Take the seam's columns of (H(0) - energy)^-1 into the basis."""
        response = respond(self.matrix, energy, self.seam, solver(self.matrix, energy))
        self.basis.extend(response.rows)
        self.places.append(energy)
        return response

    def _project(self) -> Reduced:
        """The small matrices of the basis as it stands."""
        vectors, images = self.basis.vectors, self.basis.images
        inverse = vectors.conj() @ images.T
        inverse = (inverse + inverse.conj().T) / 2
        gram = np.zeros_like(inverse)
        for start in range(0, vectors.shape[1], CHUNK):
            part = slice(start, start + CHUNK)
            left = images[:, part] - inverse.T @ vectors[:, part]
            gram += left.conj() @ left.T
        scale, bonds = self.hamiltonian.scale, self.hamiltonian.bond_scale
        return Reduced(
            seam=self.seam,
            shift=self.basis.shift,
            vectors=vectors,
            inverse=inverse,
            columns=vectors.conj() @ self.centre.rows.T,
            inner=self.centre.inner,
            gram=gram,
            doubt=self.basis.doubt,
            seam_doubt=float(np.linalg.norm(self.centre.doubt)),
            edges=self.edges,
            turns=self.hamiltonian.site_turns,
            goal=float(np.clip(FINE * self.wide, LEAST * scale, COARSE * bonds)),
            exact=EXACT * bonds,
            same=tolerance(self.hamiltonian),
        )
