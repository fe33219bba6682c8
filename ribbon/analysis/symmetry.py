"""Clean rings split into small blocks, one for each momentum and parity.

With Bloch phases on true displacements, exp(i k dx), the flip (or glide) about the midline acts
on the sites of one period as a permutation that commutes with H(k) and squares to one. A ring
allows the wave numbers with exp(i k L) parity^h = sigma^h; a threading flux shifts every k by
2 pi flux / L.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ribbon.analysis.blocks import Blocks, Sector
from ribbon.analysis.levels import FloatArray, IntArray
from ribbon.hopping import Hamiltonian
from ribbon.lattice import Ring, Strip, reseam
from ribbon.lattice.ring import cell_bonds
from ribbon.lattice.seam import cell_map

__all__ = ["find_blocks", "why_no_blocks"]


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


def _moves_half(strip: Strip, flip: IntArray) -> bool:
    """True where the flip moves sites by half a period along (a glide)."""
    cell = strip.cell
    moved = (cell.x[flip] - cell.x) % cell.period
    return bool(np.allclose(moved, cell.period / 2, rtol=0, atol=1e-5))
