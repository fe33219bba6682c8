"""The relaxed shape of a ring in space: least elastic energy from where it was laid.

Bending is so much softer than stretching that plain descent takes for ever on a long ring. The
places are therefore moved in coordinates in which the stiffness of the start is the unit matrix
(its Cholesky factor in banded form), and begun again with a new factor where that goes slowly.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from scipy.linalg import cholesky_banded
from scipy.linalg.lapack import dtbtrs
from scipy.optimize import minimize
from scipy.sparse import csr_array
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.errors import BadInput, NotCertified
from ribbon.lattice.elastic import Elastic, Stiffness
from ribbon.lattice.normals import normals_from_geometry, orient_normals
from ribbon.lattice.space import RingInSpace, find_midline, ring_twisting
from ribbon.lattice.strip import FloatArray, IntArray, frozen
from ribbon.lattice.twist import Twisting, twist_along

__all__ = ["Shape", "Stiffness", "measure_shape", "relax"]

FLOOR = 1e-7
"""Added to the stiffness, in its mean diagonal: rigid motions have none of their own."""

ROUND = 80
"""Steps before the stiffness is factored anew."""


NUDGE, SAME = 1e-2, 1e-6
"""Energy of a nudge, and what counts as no lower, both in the energy found."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Shape:
    """A ring in space with what its shape costs and where it is twisted.

    Parameters
    ----------
    space
        Places and normals.
    lengths, flat_lengths
        Length of every first-neighbour bond in space and on the flat strip, nm.
    energies
        eV by kind of strain: stretch, angle, bending, torsion.
    twisting
        Linking, twist and writhe, half turns.
    along, twist
        Stations half a period apart (x, nm), and the half turns of twist from each to the next.
    largest_force
        Largest component of the gradient, eV/nm.
    steps, converged
        Evaluations of the energy, and whether the energy left to gain fell below the tolerance
        (0 and False for a shape that was only measured).
    """

    space: RingInSpace
    lengths: FloatArray
    flat_lengths: FloatArray
    energies: Mapping[str, float]
    twisting: Twisting
    along: FloatArray
    twist: FloatArray
    largest_force: float
    steps: int = 0
    converged: bool = False

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.lengths, self.flat_lengths, self.along, self.twist):
            frozen(array)

    @property
    def strains(self) -> FloatArray:
        """Length over flat length minus one, of every first-neighbour bond."""
        return np.asarray(self.lengths / self.flat_lengths - 1)

    @property
    def largest_strain(self) -> float:
        """The strain of the bond that is strained most, with its sign."""
        return float(self.strains[np.argmax(np.abs(self.strains))])

    @property
    def length_spread(self) -> float:
        """Standard deviation of the strains."""
        return float(np.std(self.strains))

    @property
    def energy(self) -> float:
        """Total elastic energy, eV."""
        return float(sum(self.energies.values()))


def measure_shape(space: RingInSpace, stiffness: Stiffness | None = None) -> Shape:
    """What a shape costs as it stands, and where it is twisted.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.lattice.space import place_in_space
    >>> ring = close_strip(lay_strip("square", rows=3, length=24), half_twists=2)
    >>> shape = measure_shape(place_in_space(ring))
    >>> round(shape.largest_strain, 3), round(float(shape.twist.sum()), 6)
    (0.281, -2.0)
    """
    return _measured(space, Elastic(space.ring, stiffness or Stiffness()))


def relax(
    space: RingInSpace,
    *,
    stiffness: Stiffness | None = None,
    tolerance: float = 1e-8,
    most_steps: int = 4000,
) -> Shape:
    """The shape of least elastic energy that is reached from ``space`` downhill.

    It ends when the energy still to gain, as the stiffness of the last factor sees it, is below
    ``tolerance`` times the energy, and a nudge leads no lower; or unconverged (see
    ``Shape.converged``) after ``most_steps``. Sites do not repel each other. Normals of the
    result are those of the sites' neighbours.
    Raises `BadInput` for a tolerance or number of steps that is not positive and for a twisted
    single row in one line, which nothing keeps twisted; and `NotCertified`, with the shape as
    ``partial``, when the band passed through itself (its linking changed).
    """
    if not 0 < tolerance < 1:
        raise BadInput(f"tolerance = {tolerance} must be above 0 and below 1")
    if most_steps < 1:
        raise BadInput(f"most_steps = {most_steps} must be a whole number, 1 or more")
    ring = space.ring
    if ring.half_twists and not np.ptp(ring.strip.cell.y):
        raise BadInput(
            "a single row in one line has no width that could keep it twisted; relax a ring of "
            "ribbon.rows = 2 or more, or none"
        )
    elastic = Elastic(ring, stiffness or Stiffness())
    # mirror images take mirrored paths, nudges included
    mirror = np.array([1.0, 1.0, -1.0 if space.handedness == "right" else 1.0])
    places, steps, converged = _lowest(elastic, space.positions * mirror, tolerance, most_steps)
    places = places * mirror
    moved = replace(space, positions=places, normals=_relaxed_normals(space, places))
    shape = _measured(moved, elastic)
    before = round(ring_twisting(space).linking_half_turns)
    after = round(shape.twisting.linking_half_turns)
    if after != before:
        raise NotCertified(
            f"the band was laid with linking {before} half turns and relaxed to {after}: it "
            "passed through itself; take a longer or narrower ring, or more torsion",
            partial=shape,
        )
    return replace(shape, steps=steps, converged=converged)


class _ReachedError(Exception):
    """Ends the descent: the energy left to gain is small enough."""


def _lowest(
    elastic: Elastic, start: FloatArray, tolerance: float, most: int
) -> tuple[FloatArray, int, bool]:
    """Descend, then again from a nudged place until that leads no lower; places, steps, whether.

    Symmetric starts lead to symmetric shapes, which may be saddles: a nudge finds the way down.
    """
    draw = np.random.default_rng(0)
    best, steps = start, 0
    lowest, places, nudge = np.inf, start, np.zeros(start.size)
    while steps < most:
        count = min(ROUND, most - steps)
        places, used, converged = _descend(elastic, places, tolerance, most=count, nudge=nudge)
        steps, nudge = steps + used, np.zeros(start.size)
        energy = elastic.energy_and_gradient(places)[0]
        if converged and energy > lowest * (1 - SAME):
            return (places if energy < lowest else best), steps, True
        if converged:
            lowest, best = energy, places
            nudge = draw.normal(size=start.size)
            nudge *= np.sqrt(2 * NUDGE * energy) / np.linalg.norm(nudge)
        elif lowest == np.inf:
            best = places
    return best, steps, False


def _descend(
    elastic: Elastic, places: FloatArray, tolerance: float, *, most: int, nudge: FloatArray
) -> tuple[FloatArray, int, bool]:
    """Minimise in coordinates in which the stiffness at ``places`` is the unit matrix.

    ``nudge`` (3n,) is where it starts in these coordinates.
    """
    frame = _Frame.at(elastic, places)
    best = (np.inf, places)
    used = 0

    def cost(moved: FloatArray) -> tuple[float, FloatArray]:
        nonlocal best, used
        there = places + frame.out(moved)
        energy, gradient = elastic.energy_and_gradient(there)
        slope = frame.back(gradient)
        used += 1
        if energy < best[0]:
            best = (energy, there)
            if float(slope @ slope) / 2 <= tolerance * energy + 1e-14:
                raise _ReachedError
        return energy, slope

    try:
        minimize(
            cost, nudge, jac=True, method="L-BFGS-B",
            options={"maxfun": most, "maxiter": most, "maxcor": 20, "ftol": 1e-15, "gtol": 0.0},
        )  # fmt: skip
    except _ReachedError:
        return best[1], used, True
    return best[1], used, False


@dataclass(frozen=True, eq=False)
class _Frame:
    """Banded Cholesky factor U of the stiffness (U^T U), its rows in the order ``order``."""

    order: IntArray
    banded: FloatArray

    @classmethod
    def at(cls, elastic: Elastic, places: FloatArray) -> _Frame:
        """Factor the stiffness at some places."""
        matrix = elastic.stiffness_matrix(places)
        order = reverse_cuthill_mckee(csr_array(matrix), symmetric_mode=True).astype(np.int64)
        rank = np.empty_like(order)
        rank[order] = np.arange(order.size)
        entries = matrix.tocoo()
        row, column = rank[entries.row], rank[entries.col]
        upper = row <= column
        row, column, value = row[upper], column[upper], entries.data[upper]
        width = int(np.max(column - row))
        banded = np.zeros((width + 1, order.size))
        banded[width + row - column, column] = value
        banded[width] += FLOOR * banded[width].mean()
        return cls(order, cholesky_banded(banded, overwrite_ab=True, check_finite=False))

    def out(self, moved: FloatArray) -> FloatArray:
        """From the new coordinates to shifts of the sites, (n, 3)."""
        shift = np.empty(self.order.size)
        shift[self.order] = dtbtrs(self.banded, moved[:, None])[0][:, 0]
        return shift.reshape(-1, 3)

    def back(self, gradient: FloatArray) -> FloatArray:
        """From a gradient by the places to one by the new coordinates."""
        turned = gradient.ravel()[self.order]
        return np.asarray(dtbtrs(self.banded, turned[:, None], trans="T")[0][:, 0])


def _relaxed_normals(space: RingInSpace, places: FloatArray) -> FloatArray:
    """Normals from the neighbours, carried along x from the first site, whose side is kept."""
    bonds = space.ring.bonds
    normals = normals_from_geometry(places, bonds)
    carried, _ = orient_normals(normals, bonds.select(bonds.winding == 0))
    side = np.einsum("ij,ij->i", carried, space.normals).sum()
    return carried if side >= 0 else -carried


def _measured(space: RingInSpace, elastic: Elastic) -> Shape:
    midline = find_midline(space)
    _, gradient = elastic.energy_and_gradient(space.positions)
    vectors = elastic.incidence @ space.positions
    return Shape(
        space=space,
        lengths=np.linalg.norm(vectors, axis=1),
        flat_lengths=elastic.lengths.copy(),
        energies=MappingProxyType(elastic.energies(space.positions)),
        twisting=ring_twisting(space),
        along=midline.along.copy(),
        twist=twist_along(midline.centre, midline.across),
        largest_force=float(np.abs(gradient).max()),
    )
