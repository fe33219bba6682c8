"""Complete spectra: momentum and parity blocks of clean rings, dense diagonalisation otherwise."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from weakref import WeakKeyDictionary

import numpy as np
import scipy.linalg

from ribbon.analysis.blocks import Blocks, Spectrum
from ribbon.analysis.levels import (
    AnyArray,
    Certificate,
    FloatArray,
    IntArray,
    Levels,
    shell_edges,
    tolerance,
)
from ribbon.analysis.symmetry import find_blocks
from ribbon.errors import TooLarge
from ribbon.hopping import Hamiltonian

__all__ = [
    "DENSE_BYTES",
    "blocks_of",
    "by_dense",
    "by_symmetry",
    "dense_bytes",
    "finish",
    "fits_dense",
    "part_by_dense",
    "part_by_symmetry",
    "resolve_slopes",
    "to_uniform",
]

Choose = Callable[[FloatArray], tuple[int, int, tuple[float, float]]]

DENSE_BYTES = 2 * 1024**3

_blocks: WeakKeyDictionary[Hamiltonian, Blocks | None] = WeakKeyDictionary()


def blocks_of(hamiltonian: Hamiltonian) -> Blocks | None:
    """Blocks of a clean ring, found once for every Hamiltonian; None where there are none."""
    if hamiltonian not in _blocks:
        _blocks[hamiltonian] = find_blocks(hamiltonian)
    return _blocks[hamiltonian]


def dense_bytes(n: int, *, complex_: bool, states: bool) -> int:
    """Memory that a complete dense diagonalisation of size n takes, forecast in bytes."""
    item = 16 if complex_ else 8
    return n * n * item * (3 if states else 1)


def fits_dense(hamiltonian: Hamiltonian, flux: float, *, states: bool) -> bool:
    """True where a complete dense diagonalisation stays within `DENSE_BYTES`."""
    complex_ = not float(2 * flux).is_integer()
    return dense_bytes(hamiltonian.n, complex_=complex_, states=states) <= DENSE_BYTES


def by_symmetry(hamiltonian: Hamiltonian, flux: float, *, slopes: bool = False) -> Levels:
    """The complete spectrum of a clean ring from its blocks."""
    blocks = blocks_of(hamiltonian)
    assert blocks is not None
    found = blocks.spectrum(flux) if slopes else blocks.labelled(flux)
    return Levels(
        energies=found.energies,
        index=np.arange(hamiltonian.n),
        certificate=_whole(hamiltonian, "symmetry", found.energies),
        flux=flux,
        unit=hamiltonian.unit,
        momentum=found.momentum,
        parity=found.parity,
        slopes=found.slopes if isinstance(found, Spectrum) else None,
    )


def part_by_symmetry(
    hamiltonian: Hamiltonian, flux: float, choose: Choose, *, states: bool
) -> Levels:
    """A window of the complete spectrum of a clean ring; its states from the blocks they need.

    ``choose`` gives the first and last position in the spectrum, and the edges of the window.
    """
    blocks = blocks_of(hamiltonian)
    assert blocks is not None
    found = blocks.labelled(flux)
    first, last, edges = choose(found.energies)
    here = slice(first, last)
    levels = Levels(
        energies=found.energies[here],
        index=np.arange(first, last),
        certificate=replace(
            _whole(hamiltonian, "symmetry", found.energies),
            lower=edges[0],
            upper=edges[1],
            count_lower=first,
            count_upper=last,
            found=last - first,
        ),
        flux=flux,
        unit=hamiltonian.unit,
        momentum=found.momentum[here],
        parity=found.parity[here],
    )
    if not states:
        return levels
    vectors, slopes = blocks.states(found, flux, np.arange(first, last))
    matrix = hamiltonian.matrix(flux)
    residual = np.linalg.norm(matrix @ vectors - vectors * levels.energies, axis=0)
    return replace(
        levels, states=vectors, slopes=slopes, residual=float(np.max(residual, initial=0.0))
    )


def by_dense(hamiltonian: Hamiltonian, flux: float, *, states: bool) -> Levels:
    """The complete spectrum from the dense matrix; raises `TooLarge` where it does not fit."""
    if not fits_dense(hamiltonian, flux, states=states):
        need = dense_bytes(hamiltonian.n, complex_=not float(2 * flux).is_integer(), states=states)
        raise TooLarge(
            f"the complete spectrum of {hamiltonian.n:,} sites without symmetry needs about "
            f"{need / 1024**3:.1f} GiB ({DENSE_BYTES / 1024**3:.0f} GiB are allowed); ask for a "
            "window instead: levels.count with levels.near, or levels.between"
        )
    matrix = hamiltonian.matrix(flux, gauge="seam").toarray()
    if not states:
        energies = scipy.linalg.eigvalsh(matrix, overwrite_a=True, check_finite=False)
        found = None
    else:
        energies, found = scipy.linalg.eigh(
            matrix, overwrite_a=True, check_finite=False, driver="evd"
        )
    certificate = _whole(hamiltonian, "dense", energies)
    index = np.arange(hamiltonian.n)
    return finish(hamiltonian, flux, energies, index, certificate, found)


def finish(
    hamiltonian: Hamiltonian,
    flux: float,
    energies: FloatArray,
    index: IntArray,
    certificate: Certificate,
    found: AnyArray | None,
) -> Levels:
    """Slopes resolved inside shells, and states carried from the seam gauge to the uniform."""
    slopes, residual = None, None
    if found is not None:
        matrix = hamiltonian.matrix(flux, gauge="seam")
        residual = float(
            np.max(np.linalg.norm(matrix @ found - found * energies, axis=0), initial=0.0)
        )
        found, slopes = resolve_slopes(hamiltonian, flux, energies, found)
        found = to_uniform(hamiltonian, flux, found)
    return Levels(
        energies=energies,
        index=index,
        certificate=certificate,
        flux=flux,
        unit=hamiltonian.unit,
        states=found,
        slopes=slopes,
        residual=residual,
    )


def resolve_slopes(
    hamiltonian: Hamiltonian, flux: float, energies: FloatArray, states: AnyArray
) -> tuple[AnyArray, FloatArray]:
    """Slopes dE/d(flux) by Hellmann and Feynman, for states in the seam gauge.

    Inside a degenerate shell the states are turned so that the slope is diagonal there.
    """
    if hamiltonian.ring is None:
        return states, np.zeros(energies.size)
    turned = hamiltonian.slope_matrix(flux, gauge="seam") @ states
    slopes = np.einsum("ij,ij->j", states.conj(), turned).real.copy()
    edges = shell_edges(energies, tolerance(hamiltonian))
    many = np.flatnonzero(np.diff(edges) > 1)
    if many.size:
        states = states.astype(np.complex128)
    for shell in many:
        part = slice(int(edges[shell]), int(edges[shell + 1]))
        slopes[part], turn = np.linalg.eigh(states[:, part].conj().T @ turned[:, part])
        states[:, part] = states[:, part] @ turn
    return states, slopes


def to_uniform(hamiltonian: Hamiltonian, flux: float, states: AnyArray) -> AnyArray:
    """Carry states from the seam gauge to the uniform gauge."""
    if not flux:
        return states
    phase = np.exp(-2j * np.pi * flux * hamiltonian.site_turns)
    return np.asarray(phase[:, None] * states)


def _whole(hamiltonian: Hamiltonian, method: str, energies: FloatArray) -> Certificate:
    return Certificate(
        method=method,
        lower=float(energies[0]),
        upper=float(energies[-1]),
        count_lower=0,
        count_upper=hamiltonian.n,
        found=energies.size,
    )


def part_by_dense(hamiltonian: Hamiltonian, flux: float, choose: Choose, *, states: bool) -> Levels:
    """A window of a complete dense spectrum, with states where they are asked for."""
    whole = by_dense(hamiltonian, flux, states=states)
    first, last, edges = choose(whole.energies)
    return whole.part(first, last, lower=edges[0], upper=edges[1])
