"""Where levels lie in energy, and where states live on the ribbon.

Densities count levels: the integral over all energies is the number of sites, whatever the spin.
A degenerate shell has no states of its own, only a space; its density is the mean over it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import erf

from ribbon.analysis.exact import blocks_of
from ribbon.analysis.levels import FloatArray, IntArray, Levels, shell_edges, tolerance
from ribbon.analysis.spectrum import all_levels
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian

__all__ = [
    "Density",
    "density_of_states",
    "levels_density",
    "local_density",
    "shell_density",
    "shell_groups",
    "shell_means",
]

POINTS = 801
REACH = 6.0
"""A level broadened by a Gaussian is followed so many widths to either side."""
MOST_POINTS = 20_001


@dataclass(frozen=True, kw_only=True, eq=False)
class Density:
    """Density of states on a grid of energies, shape (p,), and as a histogram.

    ``density`` is in levels per unit of energy, each level a Gaussian of standard deviation
    ``broadening``; ``integrated`` is the number of levels below, exact for that shape. Where a
    grid of 20,001 points cannot resolve the broadening, ``density`` is the mean over each step.
    ``counts`` (shape (b,)) are the levels between neighbouring ``edges`` (shape (b + 1,)).
    ``complete`` is False where only a window of levels was known: then both hold inside it only.
    """

    energies: FloatArray
    density: FloatArray
    integrated: FloatArray
    edges: FloatArray
    counts: IntArray
    broadening: float
    levels: int
    complete: bool
    unit: str

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.energies, self.density, self.integrated, self.edges, self.counts):
            array.setflags(write=False)


def density_of_states(
    hamiltonian: Hamiltonian,
    *,
    broadening: float,
    flux: float = 0.0,
    energies: ArrayLike | None = None,
) -> Density:
    """Density of states from the complete spectrum at a flux, broadened and as a histogram.

    ``energies`` is the grid; left out, an even one over all levels that resolves the
    broadening. Raises `BadInput` for a broadening that is not positive, and `TooLarge` where
    the complete spectrum is out of reach.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> dimer = assemble(Network.from_pairs([(0, 1)]), Hopping())
    >>> round(float(density_of_states(dimer, broadening=0.1).integrated[-1]), 6)
    2.0
    """
    blocks = blocks_of(hamiltonian)
    found = all_levels(hamiltonian, flux=flux).energies if blocks is None else blocks.energies(flux)
    return _of_levels(found, broadening, energies, unit=hamiltonian.unit, complete=True)


def levels_density(
    levels: Levels, *, broadening: float, sites: int, energies: ArrayLike | None = None
) -> Density:
    """Density of the levels given, all of ``sites`` or a window of them (see `Density`).

    Raises `BadInput` for a broadening that is not positive, or no levels.
    """
    return _of_levels(
        levels.energies,
        broadening,
        energies,
        unit=levels.unit,
        below=levels.certificate.count_lower,
        complete=levels.m == sites,
    )


def _of_levels(
    levels: FloatArray,
    broadening: float,
    energies: ArrayLike | None,
    *,
    unit: str,
    complete: bool,
    below: int = 0,
) -> Density:
    if not (np.isfinite(broadening) and broadening > 0):
        raise BadInput(f"levels.broadening = {broadening} must be a positive energy")
    if not levels.size:
        raise BadInput("a density of states needs levels; this window holds none")
    grid = _grid(levels, broadening) if energies is None else np.array(energies, float)
    density, under = _broadened(levels, grid, broadening)
    step = float(grid[1] - grid[0]) if energies is None else 0.0
    if step > broadening / 2:  # too coarse to sample: the mean over each step keeps the integral
        _, ends = _broadened(levels, np.append(grid - step / 2, grid[-1] + step / 2), broadening)
        density = np.diff(ends) / step
    low, high = float(levels[0]), float(levels[-1])
    bins = int(np.clip(np.ceil((high - low) / broadening) + 1, 1, MOST_POINTS))
    middle, half = (low + high) / 2, max(bins * broadening, 1.001 * (high - low)) / 2
    edges = np.linspace(middle - half, middle + half, bins + 1)
    counts, _ = np.histogram(levels, edges)
    return Density(
        energies=grid,
        density=density,
        integrated=below + under,
        edges=edges,
        counts=counts.astype(np.int64),
        broadening=float(broadening),
        levels=levels.size,
        complete=complete,
        unit=unit,
    )


def _grid(energies: FloatArray, broadening: float) -> FloatArray:
    low, high = energies[0] - REACH * broadening, energies[-1] + REACH * broadening
    points = int(np.clip(np.ceil((high - low) / broadening * 4), POINTS, MOST_POINTS))
    return np.linspace(low, high, points)


def _broadened(
    energies: FloatArray, grid: FloatArray, broadening: float
) -> tuple[FloatArray, FloatArray]:
    """Sum of Gaussians and of their integrals, a piece of the grid at a time."""
    density, below = np.empty(grid.size), np.empty(grid.size)
    reach = 9 * broadening
    for first in range(0, grid.size, 64):
        part = grid[first : first + 64]
        low = int(np.searchsorted(energies, part.min() - reach))
        high = int(np.searchsorted(energies, part.max() + reach))
        off = (part[:, None] - energies[low:high]) / broadening
        density[first : first + 64] = np.exp(-(off**2) / 2).sum(axis=1)
        below[first : first + 64] = low + (1 + erf(off / np.sqrt(2))).sum(axis=1) / 2
    return density / (broadening * np.sqrt(2 * np.pi)), below


def local_density(levels: Levels, energy: float, *, broadening: float) -> FloatArray:
    """Density of states at an energy on every site, shape (n,), per unit of energy.

    Its sum over the sites is `density_of_states` at that energy. Needs the states of every
    level within about six widths; raises `BadInput` where ``levels`` holds no states.
    """
    states = _states(levels)
    if not (np.isfinite(broadening) and broadening > 0):
        raise BadInput(f"levels.broadening = {broadening} must be a positive energy")
    off = (energy - levels.energies) / broadening
    weight = np.exp(-(off**2) / 2) / (broadening * np.sqrt(2 * np.pi))
    return np.asarray(np.abs(states) ** 2 @ weight)


def shell_density(hamiltonian: Hamiltonian, levels: Levels, level: int) -> FloatArray:
    """Probability on every site, shape (n,), averaged over the shell of one level.

    ``level`` is the index in the complete spectrum. Raises `BadInput` where the levels do not
    hold it or hold no states.
    """
    states = _states(levels)
    found = np.flatnonzero(levels.index == level)
    if not found.size:
        raise BadInput(f"level {level} is not among the {levels.m} levels found")
    groups = shell_groups(hamiltonian, levels)
    members = states[:, groups == groups[found[0]]]
    return np.asarray((np.abs(members) ** 2).mean(axis=1))


def shell_groups(hamiltonian: Hamiltonian, levels: Levels) -> IntArray:
    """Number of the shell that each level belongs to, shape (m,), from 0.

    Levels that carry quantum numbers share a shell only where these agree too: momentum and
    parity single out states that degeneracy alone does not.
    """
    edges = shell_edges(levels.energies, tolerance(hamiltonian))
    keys = [np.repeat(np.arange(edges.size - 1), np.diff(edges)).astype(np.float64)]
    if levels.momentum is not None and levels.parity is not None:
        keys += [np.rint(levels.momentum * 1e6), levels.parity.astype(np.float64)]
    _, group = np.unique(np.stack(keys), axis=1, return_inverse=True)
    return np.asarray(group, dtype=np.int64).ravel()


def shell_means(values: FloatArray, groups: IntArray) -> FloatArray:
    """Columns of ``values``, shape (k, m), each replaced by the mean over its shell."""
    count = np.bincount(groups)
    sums = np.zeros((values.shape[0], count.size))
    np.add.at(sums.T, groups, values.T)
    return np.asarray((sums / count)[:, groups])


def _states(levels: Levels) -> FloatArray:
    if levels.states is None:
        raise BadInput("these levels hold no states; ask for them with states=True")
    return levels.states
