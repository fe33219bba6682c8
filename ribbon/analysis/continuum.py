"""How far each level is from the continuum formula, and how fast the difference goes.

Levels are paired with modes by momentum, parity and rank inside both, never by their place in
the spectrum. Finer meshes of the same ring keep width, circumference, closure and the offset of
the valleys; the level is followed through them and extrapolated to zero spacing.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ribbon.analysis.dispersion import (
    Kind,
    Mesh,
    Modes,
    all_modes,
    continuum_energy,
    finer,
    lattice_energy,
    mesh_of,
    size_of_wave,
)
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, Levels
from ribbon.analysis.spectrum import all_levels
from ribbon.errors import BadInput, NotCertified
from ribbon.hopping import Hamiltonian

__all__ = [
    "MEANT_FOR",
    "ContinuumComparison",
    "ContinuumShift",
    "compare_continuum",
    "continuum_shift",
    "continuum_zero",
]

MEANT_FOR = 0.5
"""The continuum is meant for phases |k| a up to this from site to site."""
AGREE = 1e-9
"""Closed forms and levels of the matrix agree to this part of a bound of the spectrum."""
DEFAULT_COUNT = 20


@dataclass(frozen=True, kw_only=True, eq=False)
class ContinuumComparison:
    """m levels of a ring beside the continuum; energies on the Hamiltonian's own zero.

    Parameters
    ----------
    kind
        "square" (Schroedinger), "zigzag" or "armchair" (Dirac).
    level
        Index in the complete spectrum, shape (m,).
    modes
        Their quantum numbers.
    spacings
        Nearest-neighbour distances of the meshes in nm, coarsest (that of the ring) first, (r,).
    meshes
        The level on every mesh, shape (r, m); the first row holds levels of the matrix itself.
    continuum, extrapolated
        The continuum formula, and the meshes carried to zero spacing (NaN with one mesh), (m,).
    zero
        Band bottom or Dirac point.
    phase
        Largest |k| a from site to site; the formula is meant for at most `MEANT_FOR`.
    """

    kind: Kind
    level: IntArray
    modes: Modes
    spacings: FloatArray
    meshes: FloatArray
    continuum: FloatArray
    extrapolated: FloatArray
    zero: float
    phase: FloatArray
    flux: float
    scale: float
    unit: str

    @property
    def energy(self) -> FloatArray:
        """The levels of the assembled matrix, shape (m,)."""
        return np.asarray(self.meshes[0])

    @property
    def errors(self) -> FloatArray:
        """Relative error on every mesh, (r, m), over the continuum value counted from ``zero``.

        NaN where that is nothing but rounding.
        """
        size = self.continuum - self.zero
        size = np.where(np.abs(size) > 1e-13 * self.scale, size, np.nan)
        return np.asarray((self.meshes - self.continuum) / size)

    @property
    def relative_error(self) -> FloatArray:
        """Relative error of the ring's own levels, shape (m,)."""
        return np.asarray(self.errors[0])

    @property
    def holds(self) -> AnyArray:
        """True where the formula is meant to hold, shape (m,)."""
        return np.asarray(self.phase <= MEANT_FOR)

    @property
    def order(self) -> FloatArray:
        """Measured order of the error in the spacing, from the two finest meshes, (m,)."""
        if self.spacings.size < 2:
            return np.full(self.level.size, np.nan)
        return np.asarray(self._orders()[-1])

    def spacing_for(self, accuracy: float) -> FloatArray:
        """Spacing (nm) at which the error of each level is ``accuracy`` (0.01 for 1 %), (m,).

        Along the power law measured between the two meshes next to it; NaN where the error
        does not shrink. Raises `BadInput` for an accuracy that is not positive.
        """
        if not (np.isfinite(accuracy) and accuracy > 0):
            raise BadInput(f"accuracy = {accuracy} must be a positive number, 0.01 for 1 %")
        if self.spacings.size < 2:
            return np.full(self.level.size, np.nan)
        orders, errors = self._orders(), np.abs(self.errors)
        column = np.arange(self.level.size)
        with np.errstate(divide="ignore", invalid="ignore"):
            distance = np.abs(np.log(errors / accuracy))
            nearest = np.argmin(np.where(np.isnan(distance), np.inf, distance), axis=0)
            order = orders[np.minimum(nearest, orders.shape[0] - 1), column]
            spacing = self.spacings[nearest] * (accuracy / errors[nearest, column]) ** (1 / order)
        return np.where((order > 0.1) & np.isfinite(spacing), spacing, np.nan)

    def _orders(self) -> FloatArray:
        errors = np.abs(self.errors)
        with np.errstate(divide="ignore", invalid="ignore"):
            shrunk = np.log(errors[:-1] / errors[1:])
        steps = np.log(self.spacings[:-1] / self.spacings[1:])
        return np.where(np.isfinite(shrunk), shrunk, np.nan) / steps[:, None]


@dataclass(frozen=True, kw_only=True, eq=False)
class ContinuumShift:
    """Levels of a ring and of a control paired by mode: what moved, and what the lattice adds.

    ``shift`` is ring minus control on the lattice, ``continuum`` the same between the formulas;
    ``lattice_part`` is the difference of the two. Shapes (m,).
    """

    level: IntArray
    control_level: IntArray
    energy: FloatArray
    control_energy: FloatArray
    shift: FloatArray
    continuum: FloatArray
    holds: AnyArray
    unit: str

    @property
    def lattice_part(self) -> FloatArray:
        """The part of the shift that is an artefact of the lattice."""
        return np.asarray(self.shift - self.continuum)


def continuum_zero(hamiltonian: Hamiltonian) -> float:
    """Band bottom (square) or Dirac point (honeycomb) on the Hamiltonian's zero of energy."""
    return mesh_of(hamiltonian, 0.0).zero


def compare_continuum(
    hamiltonian: Hamiltonian,
    *,
    levels: Levels | None = None,
    flux: float = 0.0,
    refinements: int = 3,
) -> ContinuumComparison:
    """Compare levels of a clean ring with the continuum formula.

    ``levels`` may be any window at its own flux; left out, the 20 levels nearest to the band
    bottom or Dirac point at ``flux``. Raises `BadInput` where there is no formula, and
    `NotCertified` if a lattice value is not a level of the assembled matrix.

    >>> from ribbon.hopping import assemble, effective_mass
    >>> from ribbon.lattice import close_strip, lay_strip
    >>> strip = lay_strip("square", rows=19, length=120, spacing=2.0)
    >>> ring = close_strip(strip, half_twists=1, orbital="s")
    >>> found = compare_continuum(assemble(ring, effective_mass(0.067, 2.0)))
    >>> round(100 * float(found.relative_error[0]), 3), round(float(found.order[0]), 2)
    (-0.205, 2.0)
    """
    if refinements != int(refinements) or not 0 <= refinements <= 8:
        raise BadInput(f"continuum.refinements = {refinements} must be a whole number from 0 to 8")
    mesh = mesh_of(hamiltonian, flux if levels is None else levels.flux)
    modes, energies = _paired(hamiltonian, mesh)
    if levels is None:
        near = np.argsort(np.abs(energies - mesh.zero), kind="stable")[:DEFAULT_COUNT]
        index = np.sort(near)
    else:
        index = levels.index
    chosen = modes.select(index)
    spacings, rows = [mesh.spacing], [energies[index]]
    fine, same = mesh, chosen
    for _ in range(int(refinements)):
        fine, same = finer(fine, same)
        spacings.append(fine.spacing)
        rows.append(mesh.zero + lattice_energy(fine, same))
    meshes = np.stack(rows)
    return ContinuumComparison(
        kind=mesh.kind,
        level=index.copy(),
        modes=chosen,
        spacings=np.array(spacings),
        meshes=meshes,
        continuum=mesh.zero + continuum_energy(mesh, chosen),
        extrapolated=_extrapolate(mesh.kind, np.array(spacings), meshes),
        zero=mesh.zero,
        phase=size_of_wave(mesh, chosen),
        flux=mesh.flux,
        scale=hamiltonian.scale,
        unit=hamiltonian.unit,
    )


def continuum_shift(
    own: ContinuumComparison, ring: Hamiltonian, control: Hamiltonian
) -> ContinuumShift:
    """Pair the levels compared on ``ring`` with those of a ``control`` of the same size.

    A mode keeps its transverse number, its half of the spectrum and n of k L = 2 pi (n + delta
    + flux); what a twist changes is delta. Raises `BadInput` for a control of another size.
    """
    mesh, other = mesh_of(ring, own.flux), mesh_of(control, own.flux)
    if (mesh.rows, mesh.length, mesh.spacing) != (other.rows, other.length, other.spacing):
        raise BadInput("modes are paired between rings of the same rows, length and spacing")
    modes, energies = _paired(control, other)
    key = _key(other, modes)
    order = np.argsort(key)
    place = np.searchsorted(key[order], _key(mesh, own.modes))
    place = order[np.minimum(place, order.size - 1)]
    there = key[place] == _key(mesh, own.modes)
    level, chosen = place[there], own.modes.select(there)
    same = modes.select(level)
    here = own.energy[there]
    formula = continuum_energy(mesh, chosen) + mesh.zero
    formula -= continuum_energy(other, same) + other.zero
    return ContinuumShift(
        level=own.level[there],
        control_level=level,
        energy=here,
        control_energy=energies[level],
        shift=here - energies[level],
        continuum=formula,
        holds=own.holds[there] & (size_of_wave(other, same) <= MEANT_FOR),
        unit=own.unit,
    )


def _key(mesh: Mesh, modes: Modes) -> IntArray:
    """One number for n, band and sign of every mode."""
    number = np.floor(modes.wave - mesh.flux - mesh.offset(modes.parity) + 0.5).astype(np.int64)
    number += int(np.ceil(mesh.length)) + 2
    return np.asarray((number * (mesh.rows + 1) + modes.band) * 2 + (modes.sign > 0))


def _paired(hamiltonian: Hamiltonian, mesh: Mesh) -> tuple[Modes, FloatArray]:
    """The mode of every level of the assembled matrix, in the order of its spectrum."""
    whole = all_levels(hamiltonian, flux=mesh.flux)
    modes = all_modes(mesh)
    closed = mesh.zero + lattice_energy(mesh, modes)
    if whole.momentum is None or whole.parity is None or closed.size != whole.m:
        raise BadInput("the continuum formulas need levels with momentum and parity: a clean ring")
    own = _sorted(whole.momentum, whole.parity, whole.energies, mesh)
    other = _sorted(modes.wave, modes.parity, closed, mesh)
    paired = np.empty(whole.m, dtype=np.int64)
    paired[own] = other
    same = modes.select(paired)
    off = np.abs(closed[paired] - whole.energies).max()
    fold = np.abs(same.wave - whole.momentum).max()
    if off > AGREE * hamiltonian.scale or fold > 1e-6 or np.any(same.parity != whole.parity):
        raise NotCertified(
            f"the closed form of a {mesh.kind} ring and the levels of the matrix differ by up to "
            f"{off:.3g} {hamiltonian.unit}: these levels cannot be compared"
        )
    return same, whole.energies


def _sorted(wave: FloatArray, parity: IntArray, energies: FloatArray, mesh: Mesh) -> IntArray:
    """Order by momentum, parity, then energy."""
    number = np.rint((wave - mesh.flux) * 1e6)
    return np.asarray(np.lexsort((energies, parity, number)))


def _extrapolate(kind: Kind, spacings: FloatArray, meshes: FloatArray) -> FloatArray:
    """Carry the meshes to zero spacing with the polynomial through all of them.

    The error is a series in the square of the spacing on the square lattice; in the spacing on
    honeycomb, where each halving with armchair edges turns the sign of the odd terms. (Neville's
    scheme; Richardson 1911.)
    """
    count = spacings.size
    if count < 2:
        return np.full(meshes.shape[1], np.nan)
    nodes = spacings**2 if kind == "square" else spacings.copy()
    if kind == "armchair":
        nodes = nodes * (-1.0) ** np.arange(count)
    table = meshes.copy()
    for step in range(1, count):
        left, right = nodes[:-step], nodes[step:]
        table = (left[:, None] * table[1:] - right[:, None] * table[:-1]) / (left - right)[:, None]
    return np.asarray(table[0])
