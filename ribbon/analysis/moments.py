"""Densities of states without levels: Chebyshev moments, and what is made of them.

The moments Tr T_n((H - middle) / half) of a ring of any size take a few products of the matrix
with vectors each. The trace is either that over all unit vectors, or estimated from random ones:
every vector of random signs (real Hamiltonian) or fourth roots of one (complex) has the trace as
its mean, and the scatter between vectors is the standard error, about 1 / sqrt(vectors * sites).

Two shapes are made of the moments (see `ribbon.analysis.series`). A Gaussian of a given width is
a Chebyshev series whose terms fall as exp(-(n width / half)^2 / 2): `DECAY` half / width moments
give the density of the levels themselves, each a Gaussian, to a millionth of a level's peak.
Jackson's kernel makes the most of the moments there are.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from ribbon.analysis.broadening import broadened, check_broadening, grid
from ribbon.analysis.chebyshev import Start, Stretched, interval, moments_of, stretch
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.analysis.series import nodes, point_weights
from ribbon.errors import BadInput, TooLarge
from ribbon.hopping import Hamiltonian

__all__ = [
    "LocalDensity",
    "Moments",
    "local_density_moments",
    "moments_for",
    "spectral_moments",
    "standard_error",
]

DECAY = 5.0
"""Terms of the series of a Gaussian beyond this many half widths over its width: below 1e-5."""
MOST_MOMENTS = 65_536
ALL_BELOW = 2**23
"""Up to so many numbers (sites squared) the trace is taken over all unit vectors."""
DRAWN = 2**22
FEWEST, MOST = 32, 512
"""Random vectors: as many as draw 2^22 numbers, between these; two blocks keep two cores busy."""
BATCH = 256
"""Unit vectors whose moments are held at a time."""

Vectors = int | Literal["auto", "all"]


@dataclass(frozen=True, kw_only=True, eq=False)
class Moments:
    """Moments of all levels, Tr T_n((H - middle) / half) for n < count.

    ``samples``, shape (r, count), holds one row for each random vector, the mean of which
    estimates the trace; where ``exact``, its one row is the trace. Every level lies inside
    ``middle`` +- ``half``.
    """

    samples: FloatArray
    exact: bool
    middle: float
    half: float
    sites: int
    flux: float
    unit: str

    def __post_init__(self) -> None:
        """Make the array read-only."""
        self.samples.setflags(write=False)

    @property
    def count(self) -> int:
        """Number of moments."""
        return int(self.samples.shape[1])

    @property
    def values(self) -> FloatArray:
        """The moments, shape (count,)."""
        return np.asarray(self.samples.mean(axis=0))

    @property
    def error(self) -> FloatArray | None:
        """Standard error of every moment, from the scatter between vectors; None where exact."""
        return None if self.exact else standard_error(self.samples)

    @property
    def resolution(self) -> float:
        """Width of Jackson's kernel in the middle of the interval, an energy."""
        return float(np.pi * self.half / self.count)

    @property
    def finest(self) -> float:
        """The smallest width of Gaussians that these moments resolve, an energy."""
        return DECAY * self.half / (self.count - 1)


@dataclass(frozen=True, kw_only=True, eq=False)
class LocalDensity:
    """Density of states on single sites: arrays of shape (sites, points) on ``energies``.

    ``density`` is per unit of energy, each level a Gaussian of standard deviation
    ``broadening`` times its probability on the site; ``integrated`` is its integral from below.
    """

    sites: IntArray
    energies: FloatArray
    density: FloatArray
    integrated: FloatArray
    broadening: float
    unit: str

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.sites, self.energies, self.density, self.integrated):
            array.setflags(write=False)


def standard_error(samples: FloatArray) -> FloatArray:
    """Standard error of the mean over rows, shape (columns,)."""
    return np.asarray(samples.std(axis=0, ddof=1) / np.sqrt(samples.shape[0]))


def moments_for(hamiltonian: Hamiltonian, broadening: float, *, flux: float = 0.0) -> int:
    """Number of moments that Gaussians of standard deviation ``broadening`` need.

    Raises `BadInput` for a broadening that is not positive, `TooLarge` for more than 65,536.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> dimer = assemble(Network.from_pairs([(0, 1)]), Hopping())
    >>> moments_for(dimer, 0.01)
    502
    """
    check_broadening(broadening)
    _, half = interval(hamiltonian.matrix(flux, gauge="seam"))
    need = int(np.ceil(DECAY * half / broadening)) + 1
    if need > MOST_MOMENTS:
        finest = DECAY * half / (MOST_MOMENTS - 1)
        raise TooLarge(
            f"levels.broadening = {broadening:g} {hamiltonian.unit} needs {need:,} moments of a "
            f"spectrum {2 * half:g} {hamiltonian.unit} wide; {MOST_MOMENTS:,} are allowed, which "
            f"resolve {finest:.2g} {hamiltonian.unit}"
        )
    return max(need, 2)


def spectral_moments(
    hamiltonian: Hamiltonian,
    count: int,
    *,
    flux: float = 0.0,
    vectors: Vectors = "auto",
    seed: int = 1,
) -> Moments:
    """Chebyshev moments of all levels at a flux, ``count`` of them from n = 0.

    ``vectors`` is the number of random vectors, two or more, or "all" for the trace over all unit
    vectors, exact; "auto" takes all of them for up to 2,896 sites, and from 512 random ones down
    to 32 for more sites. Vector number r is a function of (``seed``, r) alone, and its moments
    depend neither on the others nor on the number of threads. Raises `BadInput` for numbers out
    of range, `TooLarge` for more than 65,536 moments.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> benzene = assemble(Network.from_pairs([(i, (i + 1) % 6) for i in range(6)]), Hopping())
    >>> (spectral_moments(benzene, 8).values.round(3) + 0.0).tolist()
    [6.0, 0.0, 0.0, 0.0, 0.0, 0.0, 6.0, 0.0]
    """
    if count != int(count) or count < 2:
        raise BadInput(f"{count} moments are asked for; it must be a whole number, 2 or more")
    if count > MOST_MOMENTS:
        raise TooLarge(f"{count:,} moments are more than {MOST_MOMENTS:,}; ask for fewer")
    if seed != int(seed) or seed < 0:
        raise BadInput(f"the seed {seed} must be zero or a positive whole number")
    number = _number(vectors, hamiltonian.n)
    stretched = stretch(hamiltonian, flux)
    if number is None:
        rows = _unit_moments(stretched, np.arange(stretched.n), int(count))
        samples = np.sum([part.sum(axis=0) for part in rows], axis=0, keepdims=True)
    else:
        start = _random_start(stretched, int(seed))
        samples = moments_of(stretched, start, int(count), vectors=number)
    return Moments(
        samples=samples,
        exact=number is None,
        middle=stretched.middle,
        half=stretched.half,
        sites=hamiltonian.n,
        flux=flux,
        unit=hamiltonian.unit,
    )


def _number(vectors: Vectors, n: int) -> int | None:
    """Number of random vectors; None for the trace over all unit vectors."""
    if vectors == "all" or (vectors == "auto" and n * n <= ALL_BELOW):
        return None
    if vectors == "auto":
        return int(np.clip(-(-DRAWN // n // FEWEST) * FEWEST, FEWEST, MOST))
    if isinstance(vectors, str) or vectors != int(vectors) or vectors < 2:
        raise BadInput(f'vectors = {vectors!r} must be a whole number, 2 or more, "auto" or "all"')
    return int(vectors)


def _random_start(stretched: Stretched, seed: int) -> Start:
    """Random signs, or fourth roots of one: the square of a root must be zero on the average.

    Streams 0 and 1 of a seed draw the disorder; the vectors are streams (2, r).
    """
    values = np.array([1, 1j, -1, -1j]) if stretched.complex else np.array([1.0, -1.0])

    def start(r: int) -> AnyArray:
        rng = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(2, r)))
        return np.asarray(values[rng.integers(0, values.size, stretched.n, dtype=np.int8)])

    return start


def _unit_moments(stretched: Stretched, sites: IntArray, count: int) -> Iterator[FloatArray]:
    """Moments on single sites, shape (b, count), a batch of sites at a time."""
    for first in range(0, sites.size, BATCH):
        part = sites[first : first + BATCH]

        def start(r: int, part: IntArray = part) -> AnyArray:
            vector = np.zeros(stretched.n)
            vector[part[r]] = 1
            return vector

        yield moments_of(stretched, start, count, vectors=part.size)


def local_density_moments(
    hamiltonian: Hamiltonian,
    sites: ArrayLike,
    *,
    broadening: float,
    flux: float = 0.0,
    energies: ArrayLike | None = None,
) -> LocalDensity:
    """Density of states on chosen sites of a ring of any size, without a level or a state.

    Every level is a Gaussian of standard deviation ``broadening``, times its probability on the
    site, to a millionth of its peak; summed over all sites it is `density_of_states`. Raises
    `BadInput` for sites that are not there and for a broadening that is not positive, `TooLarge`
    for one too fine.
    """
    chosen = np.atleast_1d(np.array(sites))
    if chosen.ndim != 1 or not chosen.size or not np.array_equal(chosen, np.rint(chosen)):
        raise BadInput("the sites of a local density must be a list of one or more site numbers")
    if chosen.min() < 0 or chosen.max() >= hamiltonian.n:
        raise BadInput(
            f"the sites of a local density run from {chosen.min()} to {chosen.max()}; there are "
            f"{hamiltonian.n}, counted from 0"
        )
    chosen = chosen.astype(np.int64)
    count = moments_for(hamiltonian, broadening, flux=flux)
    stretched = stretch(hamiltonian, flux)
    middle, half = stretched.middle, stretched.half
    points = (
        grid(middle - half, middle + half, broadening)
        if energies is None
        else np.array(energies, float)
    )
    places = nodes(count, middle, half)
    density, below = np.empty((2, chosen.size, points.size))
    first = 0
    for samples in _unit_moments(stretched, chosen, count):
        rows = slice(first, first + samples.shape[0])
        density[rows], below[rows] = broadened(places, points, broadening, point_weights(samples))
        first = rows.stop
    return LocalDensity(
        sites=chosen,
        energies=points,
        density=density,
        integrated=below,
        broadening=float(broadening),
        unit=hamiltonian.unit,
    )
