"""Blocks of a clean ring, one for each momentum and parity, solved in batches.

Blocks are solved a few thousand at a time, so that memory stays small, on all cores; the result
does not depend on their number. Where the basis of a block falls into two halves that couple only
to each other, singular values of a matrix of half the size give the levels.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array
from scipy.sparse.csgraph import connected_components

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, shell_edges, tolerance
from ribbon.hopping import Hamiltonian
from ribbon.hopping.cores import share_out
from ribbon.lattice import Ring
from ribbon.lattice.ring import CellBonds

__all__ = ["Blocks", "Labelled", "Sector", "Solved", "Spectrum"]

T = TypeVar("T")

BATCH = 1 << 20
"""Matrix elements solved at a time."""
WORTH_THREADS = 1 << 18
"""Fewer elements in all than this are solved on one core."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Sector:
    """One parity: the cell sites as ``row`` and ``weight`` in its basis, and its momenta.

    ``glide`` says that the flip moves sites by half a period along. ``momenta`` holds n + delta
    for every wave number k = 2 pi (n + delta + flux) / L.
    """

    parity: int
    row: IntArray
    weight: FloatArray
    size: int
    momenta: FloatArray
    glide: bool


@dataclass(frozen=True, kw_only=True, eq=False)
class Labelled:
    """A complete spectrum in ascending order with labels: ``sector``, ``block`` and ``band`` say
    where a level comes from."""

    energies: FloatArray
    momentum: FloatArray
    parity: IntArray
    sector: IntArray
    block: IntArray
    band: IntArray


@dataclass(frozen=True, kw_only=True, eq=False)
class Spectrum(Labelled):
    """The same with slopes dE/d(flux) and, for every sector, the eigenvectors of its blocks,
    shape (blocks, size, size), columns by band."""

    slopes: FloatArray
    vectors: tuple[AnyArray, ...]


@dataclass(frozen=True, kw_only=True, eq=False)
class Solved:
    """Some blocks of a sector: energies and slopes (blocks, size), vectors (blocks, size, size)."""

    energies: FloatArray
    slopes: FloatArray
    vectors: AnyArray


@dataclass(frozen=True, kw_only=True, eq=False)
class Blocks:
    """A clean ring as blocks; see `ribbon.analysis.symmetry`."""

    hamiltonian: Hamiltonian
    ring: Ring
    bonds: CellBonds
    amplitudes: FloatArray
    site_energies: FloatArray
    sectors: tuple[Sector, ...]

    @cached_property
    def _templates(self) -> tuple[csr_array, ...]:
        return tuple(self._template(sector) for sector in self.sectors)

    def _template(self, sector: Sector) -> csr_array:
        """Where each bond of the cell goes in a flattened block, shape (size^2, bonds)."""
        tail, head = self.bonds.tail, self.bonds.head % self.ring.strip.cell.n
        value = self.amplitudes * sector.weight[tail] * sector.weight[head]
        place = sector.row[tail] * sector.size + sector.row[head]
        used = np.flatnonzero(value)
        return csr_array(
            (value[used], (place[used], used)), shape=(sector.size**2, self.amplitudes.size)
        )

    @cached_property
    def _diagonals(self) -> tuple[FloatArray, ...]:
        return tuple(
            np.bincount(s.row, self.site_energies * s.weight**2, s.size).astype(np.float64)
            for s in self.sectors
        )

    @cached_property
    def _halves(self) -> tuple[tuple[IntArray, IntArray] | None, ...]:
        return tuple(self._two_halves(i) for i in range(self.parts))

    def _two_halves(self, which: int) -> tuple[IntArray, IntArray] | None:
        """Basis states in two halves with no element inside either, or None."""
        size = self.sectors[which].size
        place = self._templates[which].tocoo().coords[0]
        one, other = np.divmod(place, size)
        if np.ptp(self._diagonals[which]) > 0:
            return None
        ends = (np.concatenate([one, one + size]), np.concatenate([other + size, other]))
        graph = coo_array((np.ones(ends[0].size), ends), shape=(2 * size, 2 * size))
        _, label = connected_components(graph, directed=False)
        if np.any(label[:size] == label[size:]):
            return None
        first = label[:size] < label[size:]
        return np.flatnonzero(first), np.flatnonzero(~first)

    @property
    def parts(self) -> int:
        """Number of sectors."""
        return len(self.sectors)

    def wave_numbers(self, which: int, flux: float) -> FloatArray:
        """k times the spacing for every block of a sector."""
        length = self.ring.strip.length * self.ring.strip.lattice.period
        return 2 * np.pi * (self.sectors[which].momenta + flux) / length

    def matrices(
        self, which: int, flux: float, *, chosen: slice | IntArray | None = None,
        slope: bool = False,
    ) -> AnyArray:  # fmt: skip
        """Blocks of a sector, shape (blocks, size, size), or their derivative by the flux."""
        size = self.sectors[which].size
        wave = self.wave_numbers(which, flux)
        wave = wave if chosen is None else wave[chosen]
        step = self.bonds.displacement[:, 0]
        phase = np.exp(1j * step[:, None] * wave)
        if slope:
            length = self.ring.strip.length * self.ring.strip.lattice.period
            phase *= (2j * np.pi / length) * step[:, None]
        half = (self._templates[which] @ phase).T.reshape(-1, size, size)
        out = half + half.conj().swapaxes(1, 2)
        if not slope:
            out[:, np.arange(size), np.arange(size)] += self._diagonals[which]
        return _real_if_close(out)

    def energies(self, flux: float) -> FloatArray:
        """The complete spectrum at a flux, ascending, values only."""
        return np.sort(np.concatenate([part.ravel() for part in self._values(flux)]))

    def _values(self, flux: float) -> list[FloatArray]:
        """Energies of every sector, shape (blocks, size), bands ascending."""

        def solve(job: tuple[int, slice]) -> FloatArray:
            which, chosen = job
            matrices = self.matrices(which, flux, chosen=chosen)
            halves = self._halves[which]
            if halves is None:
                return np.asarray(np.linalg.eigvalsh(matrices))
            return _from_halves(matrices, *halves, offset=float(self._diagonals[which][0]))

        jobs = list(self._jobs())
        found = self._each(solve, jobs)
        return [
            np.concatenate([part for part, job in zip(found, jobs, strict=True) if job[0] == i])
            for i in range(self.parts)
        ]

    def _jobs(self) -> Iterator[tuple[int, slice]]:
        """Batches of blocks, each with its sector."""
        for which, sector in enumerate(self.sectors):
            step = max(1, BATCH // sector.size**2)
            for first in range(0, sector.momenta.size, step):
                yield which, slice(first, first + step)

    def _each(
        self, work: Callable[[tuple[int, slice]], T], jobs: list[tuple[int, slice]]
    ) -> list[T]:
        total = sum(sector.momenta.size * sector.size**2 for sector in self.sectors)
        _ = self._templates, self._diagonals, self._halves  # found once, not by every thread
        return share_out(work, jobs, worth=total >= WORTH_THREADS)

    def labelled(self, flux: float) -> Labelled:
        """The complete spectrum at a flux with its labels."""
        energies = np.concatenate([part.ravel() for part in self._values(flux)])
        columns, order = self._labels(energies, flux)
        return Labelled(energies=energies[order], **columns)

    def spectrum(self, flux: float) -> Spectrum:
        """The complete spectrum at a flux with slopes, labels and all eigenvectors."""
        parts = self._all_solved(flux)
        energies = np.concatenate([part.energies.ravel() for part in parts])
        columns, order = self._labels(energies, flux)
        return Spectrum(
            energies=energies[order],
            slopes=np.concatenate([part.slopes.ravel() for part in parts])[order],
            vectors=tuple(part.vectors for part in parts),
            **columns,
        )

    def _all_solved(self, flux: float) -> list[Solved]:
        """Every block of every sector, solved in batches."""
        jobs = list(self._jobs())
        found = self._each(lambda job: self.solve(job[0], flux, job[1]), jobs)
        out = []
        for i in range(self.parts):
            own = [part for part, job in zip(found, jobs, strict=True) if job[0] == i]
            columns = ((p.energies, p.slopes, p.vectors) for p in own)
            energies, slopes, vectors = (np.concatenate(c) for c in zip(*columns, strict=True))
            out.append(Solved(energies=energies, slopes=slopes, vectors=vectors))
        return out

    def _labels(self, energies: FloatArray, flux: float) -> tuple[dict[str, AnyArray], IntArray]:
        """Labels of all levels in ascending order of energy, and that order."""
        sizes = [s.momenta.size * s.size for s in self.sectors]
        sector = np.repeat(np.arange(self.parts), sizes)
        places = [np.divmod(np.arange(n), s.size) for n, s in zip(sizes, self.sectors, strict=True)]
        block, band = (np.concatenate([place[i] for place in places]) for i in (0, 1))
        momentum = np.concatenate([np.repeat(s.momenta + flux, s.size) for s in self.sectors])
        parity = np.array([s.parity for s in self.sectors])[sector]
        # a reciprocal vector turns the sign of Bloch waves by half a period along: folding the
        # momentum of a ring whose flip is a glide turns its parity too
        folds = _folds(momentum, self.ring.strip.length)
        glide = np.array([s.glide for s in self.sectors])[sector]
        parity = np.where(glide & (folds % 2 == 1), -parity, parity)
        # levels stand sector by sector, block by block already: a rounded key keeps the order of
        # exactly equal ones steady, and then energies are made to ascend
        rounded = np.rint(energies / (10 * tolerance(self.hamiltonian)))
        order = np.argsort(rounded, kind="stable")
        order = order[np.argsort(energies[order], kind="stable")]
        momentum = momentum - self.ring.strip.length * folds
        columns = {"momentum": momentum, "parity": parity, "sector": sector}
        columns |= {"block": block, "band": band}
        return {name: values[order] for name, values in columns.items()}, order

    def solve(self, which: int, flux: float, chosen: slice | IntArray | None = None) -> Solved:
        """Energies, slopes and vectors of the blocks of a sector, or of some of them.

        Degenerate vectors of a block are turned so that the slope is diagonal inside a shell.
        """
        energy, vectors = np.linalg.eigh(self.matrices(which, flux, chosen=chosen))
        change = self.matrices(which, flux, chosen=chosen, slope=True)
        turned = change @ vectors
        slopes = np.einsum("kib,kib->kb", vectors.conj(), turned).real
        same = tolerance(self.hamiltonian)
        crowded = np.flatnonzero((np.diff(energy, axis=1) <= same).any(axis=1))
        if crowded.size:
            vectors = vectors.astype(np.result_type(vectors, change))
        for block in crowded:
            vectors[block], slopes[block] = _resolve(
                energy[block], vectors[block], change[block], same
            )
        return Solved(energies=energy, slopes=slopes, vectors=vectors)

    def states(
        self, labels: Labelled, flux: float, chosen: IntArray
    ) -> tuple[AnyArray, FloatArray]:
        """Ring states of the chosen levels in the uniform gauge, (n, chosen), and their slopes.

        Only the blocks that hold them are solved.
        """
        strip = self.ring.strip
        periods = -(-strip.n // strip.cell.n)
        x = strip.positions[:, 0] / strip.spacing
        out = np.empty((strip.n, chosen.size), dtype=np.complex128)
        slopes = np.empty(chosen.size)
        for i, sector in enumerate(self.sectors):
            here = np.flatnonzero(labels.sector[chosen] == i)
            band = labels.band[chosen[here]]
            wanted, place = np.unique(labels.block[chosen[here]], return_inverse=True)
            solved = self.solve(i, flux, wanted)
            slopes[here] = solved.slopes[place, band]
            cell = sector.weight[:, None] * solved.vectors[place, :, band].T[sector.row]
            wave = self.wave_numbers(i, 0.0)[labels.block[chosen[here]]]
            out[:, here] = np.tile(cell, (periods, 1))[: strip.n] * np.exp(1j * np.outer(x, wave))
        out /= np.sqrt(strip.length)
        return out, slopes


def _from_halves(
    matrices: AnyArray, first: IntArray, second: IntArray, *, offset: float
) -> FloatArray:
    """Levels offset +- s from the singular values s of the coupling of two halves."""
    large, small = (first, second) if first.size >= second.size else (second, first)
    size = np.linalg.svd(matrices[:, large[:, None], small[None, :]], compute_uv=False)
    alone = np.zeros((size.shape[0], large.size - small.size))
    return np.asarray(offset + np.concatenate([-size, alone, size[:, ::-1]], axis=1))


def _resolve(
    energy: FloatArray, vectors: AnyArray, change: AnyArray, same: float
) -> tuple[AnyArray, FloatArray]:
    """Turn degenerate vectors so that the slope is diagonal inside every shell."""
    vectors = vectors.copy()
    projected = vectors.conj().T @ change @ vectors
    slopes = np.diagonal(projected).real.copy()
    edges = shell_edges(energy, same)
    for first, last in itertools.pairwise(edges):
        if last - first > 1:
            slopes[first:last], turn = np.linalg.eigh(projected[first:last, first:last])
            vectors[:, first:last] = vectors[:, first:last] @ turn
    return vectors, slopes


def _folds(momentum: FloatArray, length: float) -> IntArray:
    """How many reciprocal vectors fold k L / 2 pi into (-length/2, length/2]."""
    return np.ceil(momentum / length - 0.5 - 1e-12).astype(np.int64)


def _real_if_close(matrices: NDArray[np.complex128]) -> AnyArray:
    size = np.abs(matrices).max(initial=0.0)
    if np.abs(matrices.imag).max(initial=0.0) <= 1e-14 * size:
        return np.ascontiguousarray(matrices.real)
    return matrices
