"""Checks that every study runs: each compares two independent routes to one number.

A check gets a Hamiltonian as it was assembled and compares it with rings closed afresh, with
other gauges, or with counts of the matrix itself, so that a lost bond, a weak or forgotten seam
factor, a wrong conjugate or a wrong phase shows.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import scipy.linalg
from scipy.spatial import cKDTree

from ribbon.analysis import Levels, all_levels, levels_between, levels_near
from ribbon.analysis.counting import count_negative, find_order
from ribbon.analysis.exact import blocks_of
from ribbon.analysis.levels import AnyArray, FloatArray, tolerance
from ribbon.errors import NotCertified
from ribbon.hopping import Hamiltonian, assemble
from ribbon.lattice import Ring, Topology, certify_topology, double_cover, reseam
from ribbon.lattice.seam import Orbital
from ribbon.lattice.topology import coordination_numbers
from ribbon.study.result import Check

__all__ = ["GENERIC_FLUX", "check_levels", "check_ring", "check_structure"]

GENERIC_FLUX = 0.137
SMALL = 2500
"""Up to this size the assembled matrix is diagonalised dense to check other routes."""
SMALL_COVER = 700
"""The same for the double-cover identity, whose cover is twice as large."""
PROBE_LEVELS = 12


def check_structure(ring: Ring, topology: Topology) -> Iterator[Check]:
    """Coordination as in the endless strip; loops and Euler characteristic of the closed band.

    Of a ring with vacancies the same is asked with its sites put back.
    """
    if ring.kept is not None:
        ring = reseam(ring, complete=True)
        topology = certify_topology(ring)
    degree = coordination_numbers(ring.n, ring.bonds)
    wrong = int(np.count_nonzero(degree != _endless_degree(ring)))
    yield _count("coordination", wrong, note="sites whose number of bonds differs")
    if topology.euler_characteristic is None or topology.components > 1:
        return
    loops = 1 if ring.flips else 2
    off = abs((topology.boundary_loops or 0) - loops)
    yield _count("boundary loops", off, note=f"{topology.boundary_loops} walked, {loops} expected")
    chi = topology.euler_characteristic
    yield _count("Euler characteristic", abs(chi), note=f"sites − bonds + faces = {chi}")
    side = "orientable" if topology.orientable else "one-sided"
    yield _count("orientability", int(topology.orientable == ring.flips), note=side)


def check_ring(hamiltonian: Hamiltonian, flux: float, *, near: float) -> Iterator[Check]:
    """Checks of the assembled matrix at one flux; ``near`` is the energy of the window."""
    ring = hamiltonian.ring
    assert ring is not None
    yield check_hermitian(hamiltonian, flux)
    yield check_covariance(hamiltonian, flux)
    dense = _matrix_levels(hamiltonian, flux) if hamiltonian.n <= SMALL else None
    yield check_gauge(hamiltonian, flux, dense=dense)
    yield check_period(hamiltonian, flux)
    yield from check_spectrum(hamiltonian, flux)
    try:
        yield check_double_cover(hamiltonian, flux, near=near, dense=dense)
    except NotCertified as doubt:
        yield _number("double cover", np.inf, 0.0, flux, note=str(doubt))


def check_hermitian(hamiltonian: Hamiltonian, flux: float) -> Check:
    """Largest entry of H minus its conjugate transpose, entry by entry."""
    matrix = hamiltonian.matrix(flux)
    value = abs(matrix - matrix.conj().T).max() if matrix.nnz else 0.0
    return _number("Hermitian", float(value), 1e-14 * hamiltonian.scale, flux)


def check_covariance(hamiltonian: Hamiltonian, flux: float) -> Check:
    """H against the one built with the seam one slice on, relabelled by the flip, entrywise."""
    ring = hamiltonian.ring
    assert ring is not None
    moved_ring = reseam(ring, seam=ring.seam + 1)
    moved = assemble(moved_ring, hamiltonian.hopping).matrix(flux)
    carried = moved_ring.positions[:, 0] > ring.positions[:, 0] + ring.circumference / 2
    sign = np.where(carried, ring.closure.factor(np.array([1]))[0], 1.0)
    relabelled = moved.multiply(sign[:, None]).multiply(sign[None, :]).tocsr()
    difference = abs(hamiltonian.matrix(flux) - relabelled)
    value = float(difference.max()) if difference.nnz else 0.0
    return _number("covariance of the seam", value, 1e-12 * hamiltonian.scale, flux)


def check_gauge(hamiltonian: Hamiltonian, flux: float, *, dense: FloatArray | None = None) -> Check:
    """Same levels with the whole flux on the seam.

    The gauge transformation entry by entry, and with ``dense``, the levels of the assembled
    seam-gauge matrix, these against the levels reported. Entries see a flux that the seam carries
    backward, whose levels are the same; levels see blocks that are not those of the matrix.
    """
    phase = np.exp(2j * np.pi * flux * hamiltonian.site_turns)
    value = _transformed(hamiltonian, flux, phase)
    if dense is not None:
        value = max(value, float(np.abs(dense - _uniform_levels(hamiltonian, flux)).max()))
    note = "entries and levels" if dense is not None else "entry by entry"
    return _number("flux on the seam", value, 1e-10 * hamiltonian.scale, flux, note=note)


def check_period(hamiltonian: Hamiltonian, flux: float) -> Check:
    """The uniform gauge one flux quantum on, carried back entry by entry."""
    later = hamiltonian.matrix(flux + 1)
    phase = np.exp(2j * np.pi * hamiltonian.site_turns)
    back = later.multiply(phase[:, None]).multiply(phase.conj()[None, :]).tocsr()
    difference = abs(hamiltonian.matrix(flux) - back)
    value = float(difference.max()) if difference.nnz else 0.0
    return _number("period of one flux quantum", value, 1e-11 * hamiltonian.scale, flux)


def check_spectrum(hamiltonian: Hamiltonian, flux: float) -> Iterator[Check]:
    """Traces and the sum of all currents, where the complete spectrum is at hand."""
    blocks = blocks_of(hamiltonian)
    if blocks is None and hamiltonian.n > SMALL_COVER:
        return
    levels = all_levels(hamiltonian, flux=flux, slopes=True)
    matrix = hamiltonian.matrix(flux)
    scale = hamiltonian.scale
    trace = abs(levels.energies.sum() - matrix.diagonal().sum().real)
    yield _number("trace of H", trace, 1e-11 * scale * hamiltonian.n, flux)
    square = abs((levels.energies**2).sum() - float((abs(matrix) ** 2).sum()))
    yield _number("trace of H²", square, 1e-11 * scale**2 * hamiltonian.n, flux)
    assert levels.slopes is not None
    expected = float(hamiltonian.slope_matrix(flux).diagonal().sum().real)
    total = abs(float(levels.slopes.sum()) - expected)
    note = "" if not expected else "a site meets itself round the ring: compared with Tr dH/dΦ"
    yield _number("sum of all currents", total, 1e-10 * scale * hamiltonian.n, flux, note=note)


def check_double_cover(
    hamiltonian: Hamiltonian, flux: float, *, near: float, dense: FloatArray | None = None
) -> Check:
    """Levels with both orbital signs together against the double cover at twice the flux.

    With an even number of half twists the sign is no choice, and flux + 1/2 takes its place.
    Complete spectra where they are cheap (``dense``: those of the assembled matrix, so that a
    clean cover's blocks are compared with it), else the levels near ``near``, certified.
    """
    ring = hamiltonian.ring
    assert ring is not None
    cover_ring, lift = double_cover(ring)
    energies = hamiltonian.site_energies
    cover = _again(hamiltonian, cover_ring, energies[lift])
    if ring.flips:
        other_orbital: Orbital = "s" if ring.orbital == "pz" else "pz"
        partner = _again(hamiltonian, reseam(ring, orbital=other_orbital), energies)
        fluxes = (flux, flux)
    else:
        partner, fluxes = hamiltonian, (flux, flux + 0.5)
    halves = (hamiltonian, partner)
    if blocks_of(cover) is not None or hamiltonian.n <= SMALL_COVER:
        one = all_levels(hamiltonian, flux=flux).energies if dense is None else dense
        two = all_levels(partner, flux=fluxes[1]).energies
        whole = all_levels(cover, flux=2 * flux).energies
        note = "complete spectra"
    else:
        whole = levels_near(cover, near, count=2 * PROBE_LEVELS, flux=2 * flux).energies
        edge = 1e3 * tolerance(hamiltonian)
        lower, upper = float(whole[0]) - edge, float(whole[-1]) + edge
        one, two = (
            levels_between(h, lower, upper, flux=f).energies
            for h, f in zip(halves, fluxes, strict=True)
        )
        note = f"{whole.size} levels near {near:g}"
    both = np.sort(np.concatenate([one, two]))
    same = both.size == whole.size
    value = float(np.abs(both - whole).max()) if same else float("inf")
    return _number("double cover", value, 1e-9 * hamiltonian.scale, flux, note=note)


def check_levels(hamiltonian: Hamiltonian, levels: Levels) -> Iterator[Check]:
    """Certificate of a window against counts of the matrix itself, and the largest residual."""
    certificate = levels.certificate
    yield _count(
        "count certificate",
        _miscounted(hamiltonian, levels),
        flux=levels.flux,
        note=f"{levels.m} levels from {certificate.lower:.6g} to {certificate.upper:.6g}",
    )
    if levels.states is None and levels.residual is not None:
        limit = 1e-9 * hamiltonian.scale
        yield _number("largest residual", levels.residual, limit, levels.flux, note="as found")
    if levels.states is not None:
        turned = hamiltonian.matrix(levels.flux) @ levels.states
        residual = np.linalg.norm(turned - levels.states * levels.energies, axis=0)
        value = max(float(np.max(residual, initial=0.0)), levels.residual or 0.0)
        yield _number("largest residual", value, 1e-9 * hamiltonian.scale, levels.flux)


def _miscounted(hamiltonian: Hamiltonian, levels: Levels) -> int:
    """How far inertia counts at the edges of the window are from the levels held."""
    certificate = levels.certificate
    matrix = hamiltonian.matrix(levels.flux, gauge="seam")
    order = find_order(matrix)
    # the edge itself belongs to the window, and the next level is a whole tolerance away
    step = tolerance(hamiltonian) / 2
    lower = min(certificate.lower, *levels.energies[:1].tolist(), np.inf)
    upper = max(certificate.upper, *levels.energies[-1:].tolist(), -np.inf)
    below = count_negative(matrix, lower - step, order).below
    upto = count_negative(matrix, upper + step, order).below
    off = abs(levels.m - (upto - below)) + abs(certificate.found - levels.m)
    if levels.m:
        off += abs(below - int(levels.index[0])) + abs(upto - int(levels.index[-1]) - 1)
    return off


def _matrix_levels(hamiltonian: Hamiltonian, flux: float) -> FloatArray:
    """Levels of the assembled matrix in the seam gauge, dense."""
    dense = hamiltonian.matrix(flux, gauge="seam").toarray()
    return np.asarray(scipy.linalg.eigvalsh(dense, check_finite=False))


def _uniform_levels(hamiltonian: Hamiltonian, flux: float) -> FloatArray:
    """Levels as they are reported: blocks where there are, else the uniform gauge, dense."""
    if blocks_of(hamiltonian) is not None:
        return all_levels(hamiltonian, flux=flux).energies
    dense = hamiltonian.matrix(flux).toarray()
    return np.asarray(scipy.linalg.eigvalsh(dense, check_finite=False))


def _transformed(hamiltonian: Hamiltonian, flux: float, phase: AnyArray) -> float:
    """Largest entry of the uniform gauge minus the seam gauge carried over by site phases."""
    seam = hamiltonian.matrix(flux, gauge="seam")
    carried = seam.multiply(phase.conj()[:, None]).multiply(phase[None, :]).tocsr()
    difference = abs(hamiltonian.matrix(flux) - carried)
    return float(difference.max()) if difference.nnz else 0.0


def _again(hamiltonian: Hamiltonian, ring: Ring, energies: FloatArray) -> Hamiltonian:
    hopping = replace(hamiltonian.hopping, site_energy=energies, disorder=0.0)
    return assemble(ring, hopping)


def _endless_degree(ring: Ring) -> FloatArray:
    """Neighbours of every site counted in a stretch of the endless strip, by distance alone."""
    cell = ring.strip.cell
    reach = ring.strip.lattice.shells[: ring.shells]
    stretch = int(np.ceil(reach[-1] / cell.period)) + 1
    along = np.arange(-stretch, stretch + 1)
    x = (cell.x + cell.period * along[:, None]).ravel()
    everything = cKDTree(np.column_stack([x, np.tile(cell.y, along.size)]))
    home = cKDTree(np.column_stack([cell.x, cell.y]))
    pairs = home.sparse_distance_matrix(everything, reach[-1] * 1.001, output_type="coo_matrix")
    close = np.abs(pairs.data[:, None] - np.array(reach)[None, :]).min(axis=1) < 2e-3
    degree = np.bincount(pairs.row[close & (pairs.data > 1e-3)], minlength=cell.n)
    return np.resize(degree, ring.n)


def _number(name: str, value: float, limit: float, flux: float | None, *, note: str = "") -> Check:
    value = float(value)
    passed = bool(value <= limit)
    return Check(name=name, passed=passed, value=value, limit=limit, flux=flux, note=note)


def _count(name: str, off: int, *, flux: float | None = None, note: str = "") -> Check:
    return Check(name=name, passed=off == 0, value=float(off), limit=0.0, flux=flux, note=note)
