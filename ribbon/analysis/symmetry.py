"""Clean rings split into small blocks, one for each momentum and parity.

With Bloch phases on true displacements, exp(i k dx), the flip (or glide) about the midline acts
on the sites of one period as a permutation that commutes with H(k) and squares to one. A ring
allows the wave numbers with exp(i k L) parity^h = sigma^h; a threading flux shifts every k by
2 pi flux / L.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, tolerance
from ribbon.hopping import Hamiltonian
from ribbon.lattice import Ring, Strip, reseam
from ribbon.lattice.ring import CellBonds, cell_bonds
from ribbon.lattice.seam import cell_map

__all__ = ["Blocks", "Sector", "Spectrum", "find_blocks", "why_no_blocks"]


@dataclass(frozen=True, kw_only=True, eq=False)
class Sector:
    """One parity: the cell sites as ``row`` and ``weight`` in its basis, and its momenta.

    ``glide`` says that the flip moves sites by half a period along.

    ``momenta`` holds n + delta for every wave number k = 2 pi (n + delta + flux) / L.
    """

    parity: int
    row: IntArray
    weight: FloatArray
    size: int
    momenta: FloatArray
    glide: bool


@dataclass(frozen=True, kw_only=True, eq=False)
class Spectrum:
    """The complete spectrum at one flux in ascending order, each level with its labels.

    ``sector``, ``block`` and ``band`` say where a level comes from; ``vectors`` holds for every
    sector the eigenvectors of its blocks, shape (blocks, size, size), columns by band.
    """

    energies: FloatArray
    slopes: FloatArray
    momentum: FloatArray
    parity: IntArray
    sector: IntArray
    block: IntArray
    band: IntArray
    vectors: tuple[AnyArray, ...]


@dataclass(frozen=True, kw_only=True, eq=False)
class Blocks:
    """A clean ring as blocks; see the module text."""

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

    def _wave_numbers(self, sector: Sector, flux: float) -> FloatArray:
        """k times the spacing for every block of a sector."""
        length = self.ring.strip.length * self.ring.strip.lattice.period
        return 2 * np.pi * (sector.momenta + flux) / length

    def matrices(self, which: int, flux: float, *, slope: bool = False) -> AnyArray:
        """Blocks of a sector, shape (blocks, size, size), or their derivative by the flux."""
        sector = self.sectors[which]
        step = self.bonds.displacement[:, 0]
        phase = np.exp(1j * step[:, None] * self._wave_numbers(sector, flux))
        if slope:
            length = self.ring.strip.length * self.ring.strip.lattice.period
            phase *= (2j * np.pi / length) * step[:, None]
        half = (self._templates[which] @ phase).T.reshape(-1, sector.size, sector.size)
        out = half + half.conj().swapaxes(1, 2)
        if not slope:
            diagonal = np.bincount(
                sector.row, weights=self.site_energies * sector.weight**2, minlength=sector.size
            )
            out[:, np.arange(sector.size), np.arange(sector.size)] += diagonal
        return _real_if_close(out)

    def energies(self, flux: float) -> FloatArray:
        """The complete spectrum at a flux, ascending, values only."""
        parts = [np.linalg.eigvalsh(self.matrices(i, flux)).ravel() for i in range(self.parts)]
        return np.sort(np.concatenate(parts))

    @property
    def parts(self) -> int:
        """Number of sectors."""
        return len(self.sectors)

    def spectrum(self, flux: float) -> Spectrum:
        """The complete spectrum at a flux with slopes and labels."""
        parts = [self._solve(i, flux) for i in range(self.parts)]
        energies = np.concatenate([energy.ravel() for energy, _, _ in parts])
        labels = np.concatenate([self._labels(i) for i in range(self.parts)], axis=1)
        momentum = np.concatenate([np.repeat(s.momenta + flux, s.size) for s in self.sectors])
        parity = np.array([s.parity for s in self.sectors])[labels[0]]
        # a reciprocal vector turns the sign of Bloch waves by half a period along: folding the
        # momentum of a ring whose flip is a glide turns its parity too
        folds = _folds(momentum, self.ring.strip.length)
        glide = np.array([s.glide for s in self.sectors])[labels[0]]
        parity = np.where(glide & (folds % 2 == 1), -parity, parity)
        order = np.lexsort((labels[1], labels[0], _rounded(energies, tolerance(self.hamiltonian))))
        # a rounded key keeps the order of exactly equal levels steady; energies stay ascending
        order = order[np.argsort(energies[order], kind="stable")]
        return Spectrum(
            energies=energies[order],
            slopes=np.concatenate([slope.ravel() for _, slope, _ in parts])[order],
            momentum=momentum[order] - self.ring.strip.length * folds[order],
            parity=parity[order],
            sector=labels[0][order],
            block=labels[1][order],
            band=labels[2][order],
            vectors=tuple(vectors for _, _, vectors in parts),
        )

    def _labels(self, which: int) -> IntArray:
        sector = self.sectors[which]
        block, band = np.divmod(np.arange(sector.momenta.size * sector.size), sector.size)
        return np.stack([np.full(block.size, which), block, band])

    def _solve(self, which: int, flux: float) -> tuple[FloatArray, FloatArray, AnyArray]:
        energy, vectors = np.linalg.eigh(self.matrices(which, flux))
        change = self.matrices(which, flux, slope=True)
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
        return energy, slopes, vectors

    def states(self, spectrum: Spectrum, chosen: IntArray) -> AnyArray:
        """Ring states of the chosen levels in the uniform gauge, shape (n, chosen)."""
        strip = self.ring.strip
        periods = -(-strip.n // strip.cell.n)
        x = strip.positions[:, 0] / strip.spacing
        out = np.empty((strip.n, chosen.size), dtype=np.complex128)
        for i, sector in enumerate(self.sectors):
            here = np.flatnonzero(spectrum.sector[chosen] == i)
            block, band = spectrum.block[chosen[here]], spectrum.band[chosen[here]]
            vectors = spectrum.vectors[i][block, :, band].T
            cell = sector.weight[:, None] * vectors[sector.row]
            wave = self._wave_numbers(sector, 0.0)[block]
            out[:, here] = np.tile(cell, (periods, 1))[: strip.n] * np.exp(1j * np.outer(x, wave))
        return np.asarray(out / np.sqrt(strip.length))


def _resolve(
    energy: FloatArray, vectors: AnyArray, change: AnyArray, same: float
) -> tuple[AnyArray, FloatArray]:
    """Turn degenerate vectors so that the slope is diagonal inside every shell."""
    vectors = vectors.copy()
    projected = vectors.conj().T @ change @ vectors
    slopes = np.diagonal(projected).real.copy()
    breaks = np.flatnonzero(np.diff(energy) > same) + 1
    for first, last in zip([0, *breaks], [*breaks, energy.size], strict=True):
        if last - first > 1:
            slopes[first:last], turn = np.linalg.eigh(projected[first:last, first:last])
            vectors[:, first:last] = vectors[:, first:last] @ turn
    return vectors, slopes


def find_blocks(hamiltonian: Hamiltonian) -> Blocks | None:
    """Blocks of a clean ring, or None where the symmetry is broken (see `why_no_blocks`)."""
    if why_no_blocks(hamiltonian) is not None:
        return None
    ring = hamiltonian.ring
    assert ring is not None
    strip = ring.strip
    bonds = cell_bonds(strip, ring.shells)
    energies = _cell_energies(ring, hamiltonian.site_energies)
    assert energies is not None
    sectors = _sectors(ring, energies)
    if sum(s.size * s.momenta.size for s in sectors) != hamiltonian.n:
        return None
    return Blocks(
        hamiltonian=hamiltonian,
        ring=ring,
        bonds=bonds,
        amplitudes=-np.array(hamiltonian.hopping.shells)[bonds.shell - 1],
        site_energies=energies,
        sectors=sectors,
    )


def why_no_blocks(hamiltonian: Hamiltonian) -> str | None:
    """Why momentum is no quantum number of this Hamiltonian, or None where it is."""
    ring = hamiltonian.ring
    if ring is None:
        return "the network is not a ring laid from a lattice"
    if ring.kept is not None and ring.kept.size < ring.strip.n:
        return "sites were removed"
    if ring.seam:
        return "the seam was moved"
    if _cell_energies(ring, hamiltonian.site_energies) is None:
        return "site energies differ from period to period"
    if not _is_regular(hamiltonian, ring):
        return "bonds or amplitudes differ from those of the closed strip"
    if ring.closure.back_site[ring.closure.back_site].tolist() != list(range(ring.strip.cell.n)):
        return "the lattice file's period is a multiple of the true period"
    doubled = 2 * ring.strip.length
    if abs(doubled - round(doubled)) > 1e-9:
        return "the length is no multiple of half the lattice file's period"
    return None


def _is_regular(hamiltonian: Hamiltonian, ring: Ring) -> bool:
    """True where bonds and amplitudes are those of the strip closed anew."""
    if hamiltonian.is_regular:
        return True
    fresh, given = reseam(ring).bonds, ring.bonds
    if fresh.m != given.m:
        return False
    same = all(
        np.array_equal(getattr(fresh, name), getattr(given, name))
        for name in ("tail", "head", "winding", "shell", "displacement")
    )
    expected = -np.array(hamiltonian.hopping.shells)[fresh.shell - 1]
    expected = expected * ring.closure.factor(fresh.winding)
    return same and np.array_equal(expected, hamiltonian.amplitudes)


def _cell_energies(ring: Ring, energies: FloatArray) -> FloatArray | None:
    """Site energies of one period, or None where they do not repeat and close."""
    cell = energies[: ring.strip.cell.n]
    if cell.size < ring.strip.cell.n:
        # less than one period: the glide supplies the other half
        whole = np.full(ring.strip.cell.n, np.nan)
        whole[: cell.size] = cell
        whole = np.where(np.isnan(whole), whole[ring.closure.back_site], whole)
        cell = whole
    repeated = np.resize(cell, energies.size)
    if not np.array_equal(repeated, energies):
        return None
    return cell if np.array_equal(cell, cell[ring.closure.back_site]) else None


def _sectors(ring: Ring, energies: FloatArray) -> tuple[Sector, ...]:
    strip = ring.strip
    sign = float(ring.closure.factor(np.array([1]))[0])
    closing = ring.closure.back_site
    trivial = np.array_equal(closing, np.arange(closing.size))
    mirror = _mirror(strip, energies) if trivial and not ring.flips else closing
    known = ring.flips or (trivial and mirror is not None)
    flip = closing if mirror is None else mirror
    found = []
    for parity in (1, -1):
        # the closing map itself acts as the parity, unless it moves whole periods only
        carried = sign if trivial else sign * parity
        momenta = _momenta(strip.length, 0.0 if carried > 0 else 0.5)
        sector = _sector(flip, parity, momenta, label=parity if known else 0)
        sector = replace(sector, glide=known and _moves_half(strip, flip))
        if sector.size and momenta.size:
            found.append(sector)
    return tuple(found)


def _mirror(strip: Strip, energies: FloatArray) -> IntArray | None:
    """Cell permutation of a mirror or glide across the strip, or None where there is none."""
    for shift in (0.0, strip.cell.period / 2):
        images = cell_map(strip.cell, shift, flip=True)
        if images is None:
            continue
        twice = images[0][images[0]]
        if np.array_equal(twice, np.arange(twice.size)) and np.array_equal(
            energies, energies[images[0]]
        ):
            return images[0]
    return None


def _sector(flip: IntArray, parity: int, momenta: FloatArray, *, label: int) -> Sector:
    """Basis (|a> + parity |flip a>)/sqrt(2), and |a> itself where the flip keeps it."""
    site = np.arange(flip.size)
    first = np.minimum(site, flip)
    alone = flip == site
    weight = np.where(site == first, 1.0, float(parity)) / np.sqrt(2)
    weight[alone] = 1.0 if parity == 1 else 0.0
    leaders = np.unique(first[weight != 0])
    row = np.searchsorted(leaders, first)
    row[weight == 0] = 0
    return Sector(
        parity=label, row=row, weight=weight, size=leaders.size, momenta=momenta, glide=False
    )


def _momenta(length: float, offset: float) -> FloatArray:
    """n + offset in [0, length): one for each wave number of the zone 0 <= k < 2 pi / period."""
    count = int(np.ceil(length - offset - 1e-9))
    return np.arange(max(count, 0), dtype=np.float64) + offset


def _folds(momentum: FloatArray, length: float) -> IntArray:
    """How many reciprocal vectors fold k L / 2 pi into (-length/2, length/2]."""
    return np.ceil(momentum / length - 0.5 - 1e-12).astype(np.int64)


def _moves_half(strip: Strip, flip: IntArray) -> bool:
    """True where the flip moves sites by half a period along (a glide)."""
    cell = strip.cell
    moved = (cell.x[flip] - cell.x) % cell.period
    return bool(np.allclose(moved, cell.period / 2, rtol=0, atol=1e-5))


def _rounded(energies: FloatArray, same: float) -> NDArray[np.float64]:
    return np.asarray(np.rint(energies / (10 * same)))


def _real_if_close(matrices: NDArray[np.complex128]) -> AnyArray:
    size = np.abs(matrices).max(initial=0.0)
    if np.abs(matrices.imag).max(initial=0.0) <= 1e-14 * size:
        return np.ascontiguousarray(matrices.real)
    return matrices
