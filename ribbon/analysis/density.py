"""Where levels lie in energy, and where states live on the ribbon.

Densities count levels: the integral over all energies is the number of sites, whatever the spin.
A degenerate shell has no states of its own, only a space; its density is the mean over it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from ribbon.analysis.broadening import REACH, bins, broadened, check_broadening, grid
from ribbon.analysis.exact import blocks_of, fits_dense
from ribbon.analysis.levels import FloatArray, IntArray, Levels, shell_edges, tolerance
from ribbon.analysis.moments import Moments, moments_for, spectral_moments, standard_error
from ribbon.analysis.series import jackson_series, nodes, point_weights
from ribbon.analysis.spectrum import all_levels
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian

__all__ = [
    "Density",
    "density_of_states",
    "levels_density",
    "local_density",
    "moments_density",
    "shell_density",
    "shell_groups",
    "shell_means",
]

LARGEST_DENSE = 2500
"""Sites up to which a complete dense spectrum is cheaper than moments."""

Spread = Callable[[FloatArray], tuple[FloatArray, FloatArray]]
"""Density and its integral on a grid, both of shape (r, p)."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Density:
    """Density of states on a grid of energies, shape (p,), and as a histogram.

    ``density`` is in levels per unit of energy, each level a Gaussian of standard deviation
    ``broadening``; ``integrated`` is the number of levels below, exact for that shape. Where a
    grid of 20,001 points cannot resolve the broadening, ``density`` is the mean over each step.
    ``counts`` (shape (b,)) are the levels between neighbouring ``edges`` (shape (b + 1,)).
    ``complete`` is False where only a window of levels was known: then both hold inside it only.

    ``method`` is "levels", or "moments" where no level was computed: then ``error`` is the
    standard error of ``density`` (None where the moments are exact), and ``counts`` are expected
    numbers of broadened levels, not whole.
    """

    energies: FloatArray
    density: FloatArray
    integrated: FloatArray
    edges: FloatArray
    counts: IntArray | FloatArray
    broadening: float
    levels: int
    complete: bool
    unit: str
    error: FloatArray | None = None
    method: Literal["levels", "moments"] = "levels"

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.energies, self.density, self.integrated, self.edges, self.counts):
            array.setflags(write=False)
        if self.error is not None:
            self.error.setflags(write=False)


def density_of_states(
    hamiltonian: Hamiltonian,
    *,
    broadening: float,
    flux: float = 0.0,
    energies: ArrayLike | None = None,
    method: Literal["auto", "exact", "moments"] = "auto",
    seed: int = 1,
) -> Density:
    """Density of states of all levels at a flux, broadened and as a histogram.

    ``energies`` is the grid; left out, an even one over all levels that resolves the
    broadening. ``method`` "exact" takes the complete spectrum, "moments" Chebyshev moments, which
    give the same shape for rings of any size (random vectors of ``seed`` where all unit vectors
    would be too many: see `spectral_moments`), and "auto" the complete spectrum where the ring
    is clean or has at most 2,500 sites, else moments. Raises `BadInput` for a broadening that is
    not positive, and `TooLarge` where the complete spectrum is out of reach or the moments
    cannot resolve the broadening.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> dimer = assemble(Network.from_pairs([(0, 1)]), Hopping())
    >>> round(float(density_of_states(dimer, broadening=0.1).integrated[-1]), 6)
    2.0
    """
    if method not in {"auto", "exact", "moments"}:
        raise BadInput(f'method = {method!r} must be "auto", "exact" or "moments"')
    check_broadening(broadening)
    blocks = None if method == "moments" else blocks_of(hamiltonian)
    cheap = hamiltonian.n <= LARGEST_DENSE and fits_dense(hamiltonian, flux, states=False)
    if method == "moments" or (method == "auto" and blocks is None and not cheap):
        count = moments_for(hamiltonian, broadening, flux=flux)
        moments = spectral_moments(hamiltonian, count, flux=flux, seed=seed)
        return moments_density(moments, broadening=broadening, energies=energies)
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


def moments_density(
    moments: Moments, *, broadening: float | None = None, energies: ArrayLike | None = None
) -> Density:
    """Density of states from Chebyshev moments (see `Density` and `spectral_moments`).

    With a ``broadening`` every level is a Gaussian of that standard deviation, to a millionth of
    its peak. Left out, it is Jackson's kernel, the best these moments resolve:
    ``Density.broadening`` is then the width in the middle of the interval, `Moments.resolution`,
    and ``energies``, left out, are twice as many points as moments, closer towards the ends.
    Raises `BadInput` for a broadening that is not positive or too fine for the moments.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> dimer = assemble(Network.from_pairs([(0, 1)]), Hopping())
    >>> found = moments_density(spectral_moments(dimer, 200), energies=[0.0])
    >>> round(float(found.integrated[0]), 6), round(found.broadening, 4)
    (1.0, 0.0157)
    """
    low, high = moments.middle - moments.half, moments.middle + moments.half
    places = nodes(moments.count, moments.middle, moments.half)
    if broadening is None:
        width = moments.resolution
        energies = places if energies is None else energies

        def spread(at: FloatArray) -> tuple[FloatArray, FloatArray]:
            found, below = jackson_series(moments.samples, (at - moments.middle) / moments.half)
            return found / moments.half, below
    else:
        check_broadening(broadening)
        width = float(broadening)
        if width < moments.finest * (1 - 1e-9):
            raise BadInput(
                f"levels.broadening = {width:g} is finer than {moments.count} moments resolve; "
                f"ask for {moments.finest:.3g} or more, or for more moments (see moments_for)"
            )
        weights = point_weights(moments.samples)

        def spread(at: FloatArray) -> tuple[FloatArray, FloatArray]:
            return broadened(places, at, width, weights)

    at, density, integrated = _on_grid(spread, (low, high), width, energies)
    reach = 0.0 if broadening is None else REACH * width
    edges = bins(low - reach, high + reach, width)
    return Density(
        energies=at,
        density=density.mean(axis=0),
        integrated=integrated.mean(axis=0),
        edges=edges,
        counts=np.diff(spread(edges)[1].mean(axis=0)),
        broadening=width,
        levels=moments.sites,
        complete=True,
        unit=moments.unit,
        error=None if moments.exact else standard_error(density),
        method="moments",
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
    check_broadening(broadening)
    if not levels.size:
        raise BadInput("a density of states needs levels; this window holds none")

    def spread(at: FloatArray) -> tuple[FloatArray, FloatArray]:
        return broadened(levels, at, broadening, np.ones((1, levels.size)))

    low, high = float(levels[0]), float(levels[-1])
    at, density, under = _on_grid(spread, (low, high), broadening, energies)
    edges = bins(low, high, broadening)
    counts, _ = np.histogram(levels, edges)
    return Density(
        energies=at,
        density=density[0],
        integrated=below + under[0],
        edges=edges,
        counts=counts.astype(np.int64),
        broadening=float(broadening),
        levels=levels.size,
        complete=complete,
        unit=unit,
    )


def _on_grid(
    spread: Spread, ends: tuple[float, float], broadening: float, energies: ArrayLike | None
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """The grid, and the density and its integral on it."""
    at = grid(*ends, broadening) if energies is None else np.array(energies, float)
    density, below = spread(at)
    step = float(at[1] - at[0]) if energies is None else 0.0
    if step > broadening / 2:  # too coarse to sample: the mean over each step keeps the integral
        _, under = spread(np.append(at - step / 2, at[-1] + step / 2))
        density = np.diff(under, axis=1) / step
    return at, density, below


def local_density(levels: Levels, energy: float, *, broadening: float) -> FloatArray:
    """Density of states at an energy on every site, shape (n,), per unit of energy.

    Its sum over the sites is `density_of_states` at that energy. Needs the states of every
    level within about six widths; raises `BadInput` where ``levels`` holds no states.
    """
    states = _states(levels)
    check_broadening(broadening)
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
