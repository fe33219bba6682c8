"""Flux response: levels, slopes, branches and totals along a sweep of the threading flux."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.linalg
from numpy.typing import ArrayLike, NDArray

from ribbon.analysis.blocks import Blocks, Spectrum
from ribbon.analysis.exact import blocks_of, fits_dense, resolve_slopes, to_uniform
from ribbon.analysis.filling import Filled, Filling, fill
from ribbon.analysis.joining import Follower, follow_bands
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, Levels, finest, tolerance
from ribbon.analysis.reduction import sweep_reduced
from ribbon.analysis.spectrum import Method, all_levels, levels_between, levels_near, nearest_shells
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian

__all__ = ["FluxResponse", "Totals", "Window", "sweep_flux"]

Progress = Callable[[int, int], None]


@dataclass(frozen=True, kw_only=True)
class Window:
    """Which levels are wanted: all, between two energies, or ``count`` nearest to ``near``.

    ``method`` overrides the choice of how they are found.
    """

    near: float = 0.0
    count: int = 40
    between: tuple[float, float] | None = None
    all: bool = False
    method: Method = "auto"

    def choose(self, energies: FloatArray, same: float) -> tuple[int, int, tuple[float, float]]:
        """First and last position in a complete spectrum, and the edges of the window."""
        if self.all:
            return 0, energies.size, (float(energies[0]), float(energies[-1]))
        if self.between is not None:
            lower, upper = self.between
            first = int(np.searchsorted(energies, lower - same))
            last = int(np.searchsorted(energies, upper + same, side="right"))
            return first, max(first, last), self.between
        return nearest_shells(energies, self.near, self.count, same)

    def find(self, hamiltonian: Hamiltonian, *, flux: float, states: bool = False) -> Levels:
        """The levels of this window, certified."""
        options: Any = {"flux": flux, "states": states, "method": self.method}
        if self.all:
            return all_levels(hamiltonian, **options)
        if self.between is not None:
            lower, upper = self.between
            return levels_between(hamiltonian, lower, upper, **options)
        return levels_near(hamiltonian, self.near, count=self.count, **options)


@dataclass(frozen=True, kw_only=True, eq=False)
class Totals:
    """Totals of all electrons at every flux of a sweep, shape (p,), spin factor included.

    ``slope`` is the derivative of ``energy`` by the flux in flux quanta, in the unit of the
    Hamiltonian; the current is `ribbon.hopping.units.current_factor` times it. Where ``shared``
    is true the filling cuts a shell at zero temperature: ``slope`` shares it equally, ``left``
    and ``right`` are the one-sided values. ``energy`` is the energy or free energy at fixed
    number and the grand potential at fixed chemical potential.
    """

    flux: FloatArray
    slope: FloatArray
    left: FloatArray
    right: FloatArray
    shared: NDArray[np.bool_]
    electrons: FloatArray
    chemical_potential: FloatArray
    energy: FloatArray


@dataclass(frozen=True, kw_only=True, eq=False)
class FluxResponse:
    """Levels along a sweep, shape (p, m); rows with fewer levels end in NaN and -1.

    ``level`` is the index in the complete spectrum, ``slope`` is dE/d(flux) of one electron,
    ``branch`` joins a level through crossings. ``totals`` is None where the complete spectrum
    was out of reach; ``method`` says how the levels were found: "symmetry", "dense", "sparse"
    (certified flux by flux) or "reduced" (one small certified problem for all fluxes).
    """

    flux: FloatArray
    level: IntArray
    energy: FloatArray
    slope: FloatArray
    branch: IntArray
    totals: Totals | None
    unit: str
    method: str

    @property
    def complete(self) -> bool:
        """True where totals of the complete spectrum are known."""
        return self.totals is not None


@dataclass(frozen=True, eq=False)
class _Point:
    """One flux: the window's rows, and the totals where the complete spectrum is known."""

    level: IntArray
    energy: FloatArray
    slope: FloatArray
    branch: IntArray
    filled: Filled | None


def sweep_flux(
    hamiltonian: Hamiltonian,
    fluxes: ArrayLike,
    *,
    window: Window | None = None,
    filling: Filling | None = None,
    progress: Progress | None = None,
) -> FluxResponse:
    """Follow the levels of ``window`` along ``fluxes`` (flux quanta), with totals if possible.

    Currents are Hellmann-Feynman slopes; degenerate levels are resolved inside their shell.
    Totals need complete spectra: momentum blocks of a clean ring or a dense matrix that fits.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.hopping import Hopping, assemble
    >>> ring = close_strip(lay_strip("square", rows=1, length=6), half_twists=0)
    >>> response = sweep_flux(assemble(ring, Hopping()), [0.0, 0.25, 0.5])
    >>> [round(float(value), 6) + 0.0 for value in response.totals.slope]
    [0.0, 2.168277, 0.0]
    """
    points = np.array(fluxes, dtype=np.float64).ravel()
    points.setflags(write=False)
    if points.size == 0 or not np.isfinite(points).all():
        raise BadInput("sweep.flux must be a list of finite fluxes, at least one")
    if hamiltonian.ring is None:
        raise BadInput("a threading flux needs a ring; this network is not closed round one")
    wanted = window or Window()
    used = filling or Filling()
    blocks = blocks_of(hamiltonian)
    if blocks is not None:
        method, found = "symmetry", _sweep_blocks(blocks, points, wanted, used, progress)
    elif fits_dense(hamiltonian, 0.25, states=True):
        method, found = "dense", _sweep_dense(hamiltonian, points, wanted, used, progress)
    else:
        method, found = _sweep_window(hamiltonian, points, wanted, progress)
    return _collect(hamiltonian, points, found, method)


def _sweep_blocks(
    blocks: Blocks, fluxes: FloatArray, window: Window, filling: Filling, progress: Progress | None
) -> list[_Point]:
    hamiltonian = blocks.hamiltonian
    same = tolerance(hamiltonian)
    branches = _first_branches(blocks)
    old: Spectrum | None = None
    out = []
    for done, flux in enumerate(fluxes):
        new = blocks.spectrum(float(flux))
        if old is not None:
            branches = follow_bands(branches, old, new)
        first, last, _ = window.choose(new.energies, same)
        part = slice(first, last)
        branch = np.empty(last - first, dtype=np.int64)
        for i, numbers in enumerate(branches):
            here = np.flatnonzero(new.sector[part] == i)
            branch[here] = numbers[new.block[part][here], new.band[part][here]]
        filled = fill(
            new.energies, new.slopes, filling, same=finest(hamiltonian), unit=hamiltonian.unit
        )
        level = np.arange(first, last)
        out.append(_Point(level, new.energies[part], new.slopes[part], branch, filled))
        old = new
        if progress:
            progress(done + 1, fluxes.size)
    return out


def _first_branches(blocks: Blocks) -> tuple[IntArray, ...]:
    """A number for every band of every block, unique over the ring."""
    out = []
    start = 0
    for sector in blocks.sectors:
        count = sector.momenta.size * sector.size
        out.append(start + np.arange(count).reshape(sector.momenta.size, sector.size))
        start += count
    return tuple(out)


def _sweep_dense(
    hamiltonian: Hamiltonian,
    fluxes: FloatArray,
    window: Window,
    filling: Filling,
    progress: Progress | None,
) -> list[_Point]:
    """Complete spectra, each flux once up to period and time reversal; states of the window."""
    reversible = not np.iscomplexobj(hamiltonian.amplitudes)
    known: dict[float, tuple[FloatArray, FloatArray, AnyArray, int, int]] = {}
    follower = Follower()
    out = []
    for done, flux in enumerate(fluxes):
        reduced = float(flux - np.rint(flux))
        key = round(abs(reduced) if reversible else reduced, 12)
        if key not in known:
            known[key] = _dense_point(hamiltonian, key, window)
        energies, slopes, states, first, last = known[key]
        if reversible and reduced < 0:
            slopes, states = -slopes, states.conj()
        filled = fill(energies, slopes, filling, same=finest(hamiltonian), unit=hamiltonian.unit)
        part = slice(first, last)
        branch = follower.join(
            to_uniform(hamiltonian, float(flux), states), energies[part], slopes[part], float(flux)
        )
        out.append(_Point(np.arange(first, last), energies[part], slopes[part], branch, filled))
        if progress:
            progress(done + 1, fluxes.size)
    return out


def _dense_point(
    hamiltonian: Hamiltonian, flux: float, window: Window
) -> tuple[FloatArray, FloatArray, AnyArray, int, int]:
    """Energies and slopes of all levels, and the window's states in the seam gauge."""
    matrix = hamiltonian.matrix(flux, gauge="seam").toarray()
    energies, states = scipy.linalg.eigh(matrix, overwrite_a=True, check_finite=False, driver="evd")
    states, slopes = resolve_slopes(hamiltonian, flux, energies, states)
    first, last, _ = window.choose(energies, tolerance(hamiltonian))
    return energies, slopes, states[:, first:last].copy(), first, last


def _sweep_window(
    hamiltonian: Hamiltonian, fluxes: FloatArray, window: Window, progress: Progress | None
) -> tuple[str, list[_Point]]:
    """Windows of large spectra: from one reduced problem where that pays, else flux by flux."""
    if not window.all and window.method == "auto":
        rows = sweep_reduced(hamiltonian, fluxes, window, progress)
        if rows is not None:
            return "reduced", [_Point(*row, None) for row in rows]
    return "sparse", _sweep_sparse(hamiltonian, fluxes, window, progress)


def _sweep_sparse(
    hamiltonian: Hamiltonian, fluxes: FloatArray, window: Window, progress: Progress | None
) -> list[_Point]:
    follower = Follower()
    out = []
    for done, flux in enumerate(fluxes):
        found = window.find(hamiltonian, flux=float(flux), states=True)
        assert found.states is not None
        assert found.slopes is not None
        branch = follower.join(found.states, found.energies, found.slopes, float(flux))
        out.append(_Point(found.index, found.energies, found.slopes, branch, None))
        if progress:
            progress(done + 1, fluxes.size)
    return out


def _collect(
    hamiltonian: Hamiltonian, fluxes: FloatArray, found: list[_Point], method: str
) -> FluxResponse:
    width = max(point.energy.size for point in found)

    def padded(name: str, empty: float) -> AnyArray:
        kind = np.float64 if np.isnan(empty) else np.int64
        out = np.full((fluxes.size, width), empty, dtype=kind)
        for row, point in enumerate(found):
            values = getattr(point, name)
            out[row, : values.size] = values
        out.setflags(write=False)
        return out

    return FluxResponse(
        flux=fluxes,
        level=padded("level", -1),
        energy=padded("energy", np.nan),
        slope=padded("slope", np.nan),
        branch=padded("branch", -1),
        totals=_totals(fluxes, found),
        unit=hamiltonian.unit,
        method=method,
    )


def _totals(fluxes: FloatArray, found: list[_Point]) -> Totals | None:
    filled = [point.filled for point in found if point.filled is not None]
    if len(filled) < len(found):
        return None

    def column(name: str) -> AnyArray:
        out = np.array([getattr(point, name) for point in filled])
        out.setflags(write=False)
        return out

    return Totals(
        flux=fluxes,
        slope=column("slope"),
        left=column("left"),
        right=column("right"),
        shared=column("shared"),
        electrons=column("electrons"),
        chemical_potential=column("chemical_potential"),
        energy=column("energy"),
    )
