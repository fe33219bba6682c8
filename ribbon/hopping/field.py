"""A uniform magnetic field in space: phases of straight bonds, and the flux they enclose.

With A = B x r / 2 and electrons of charge -e, <i|H|j> carries exp(i (e/2 hbar) B . (r_i x r_j)),
exact on straight bonds. It is the rule of the threading flux too, so the two add. Phases are
counted in turns, fluxes in quanta h/e.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import constants

from ribbon.errors import BadInput
from ribbon.lattice.network import Bonds
from ribbon.lattice.ring import Ring
from ribbon.lattice.space import RingInSpace, find_midline
from ribbon.lattice.strip import FloatArray, IntArray, frozen
from ribbon.lattice.topology import elementary_faces, walk_bonds

__all__ = ["FieldFlux", "UniformField", "peierls_turns", "report_flux"]

QUANTA = constants.e / constants.h * 1e-18
"""Flux quanta per T nm^2."""


@dataclass(frozen=True, kw_only=True)
class UniformField:
    """A field ``tesla`` (x, y, z), T, with the vector potential zero at ``origin``, nm.

    The origin is a choice of gauge: no level depends on it. Raises `BadInput` for a field or an
    origin that is not three finite numbers.
    """

    tesla: tuple[float, float, float]
    origin: tuple[float, float, float] = (0.0, 0.0, 0.0)

    def __post_init__(self) -> None:
        """Check the numbers."""
        for name in ("tesla", "origin"):
            value = np.asarray(getattr(self, name), dtype=np.float64)
            if value.shape != (3,) or not np.isfinite(value).all():
                raise BadInput(
                    f"field.{name} = {getattr(self, name)} must be three finite numbers, x, y, z"
                )
            object.__setattr__(self, name, tuple(value.tolist()))


@dataclass(frozen=True, kw_only=True, eq=False)
class FieldFlux:
    """Flux of a uniform field through parts of a ring in space, in flux quanta.

    Parameters
    ----------
    face_sizes, face_fluxes
        Number of bonds round each elementary face, and the flux through it along the normal of
        the site from which it was walked (a one-sided band has no normal for all).
    midline
        Flux through the closed midline, followed as x grows.
    row_heights, row_fluxes
        Distance from the midline on the flat strip (nm; above and below are one row where the
        seam flips) and flux through the loop along the row, per turn round the ring.
    """

    face_sizes: IntArray
    face_fluxes: FloatArray
    midline: float
    row_heights: FloatArray
    row_fluxes: FloatArray

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.face_sizes, self.face_fluxes, self.row_heights, self.row_fluxes):
            frozen(array)

    def by_size(self) -> dict[int, tuple[int, float, float, float]]:
        """For each kind of face: how many, and the lowest, mean and highest flux."""
        found = {}
        for size in np.unique(self.face_sizes):
            part = self.face_fluxes[self.face_sizes == size]
            lowest, mean, highest = float(part.min()), float(part.mean()), float(part.max())
            found[int(size)] = (part.size, lowest, mean, highest)
        return found


def peierls_turns(positions: FloatArray, bonds: Bonds, field: UniformField) -> FloatArray:
    """Phase of <tail|H|head> in a field, in turns, shape (m,); ``positions`` (n, 3) in nm.

    >>> from ribbon.lattice import Network
    >>> square = np.array([[0.0, 0, 0], [100, 0, 0], [100, 100, 0], [0, 100, 0]])
    >>> loop = Network.from_pairs([(0, 1), (1, 2), (2, 3), (3, 0)], positions=square)
    >>> field = UniformField(tesla=(0.0, 0.0, 1.0))
    >>> round(float(peierls_turns(square, loop.bonds, field).sum()), 4)  # 1e-14 Wb over h/e
    2.418
    """
    if positions.ndim != 2 or positions.shape[1] != 3:
        raise BadInput(
            f"positions have the shape {positions.shape}; a field in space needs (n, 3), in nm"
        )
    seen = positions - np.array(field.origin)
    area = np.cross(seen[bonds.tail], seen[bonds.head]) / 2
    return np.asarray(area @ np.array(field.tesla) * QUANTA)


def report_flux(space: RingInSpace, field: UniformField) -> FieldFlux:
    """The flux of a field through every face, through the midline and along every row.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.lattice.space import place_in_space
    >>> ring = close_strip(lay_strip("square", rows=2, length=12), half_twists=0)
    >>> flux = report_flux(place_in_space(ring), UniformField(tesla=(0.0, 0.0, 100.0)))
    >>> flux.face_sizes.size, np.round(flux.row_fluxes, 4), np.round(flux.face_fluxes[0], 6)
    (12, array([0.1442, 0.4213]), np.float64(0.02309))
    """
    sizes, fluxes = _faces(space, field)
    heights, rows = _rows(space, field)
    centre = find_midline(space).centre
    return FieldFlux(
        face_sizes=sizes,
        face_fluxes=fluxes,
        midline=float(_loops(centre, np.zeros(len(centre), dtype=np.int64), field)[0]),
        row_heights=heights,
        row_fluxes=rows,
    )


def _faces(space: RingInSpace, field: UniformField) -> tuple[IntArray, FloatArray]:
    """Sizes of the elementary faces and the sums of the bond phases round them."""
    bonds = space.bonds.select(space.bonds.shell == 1)
    m = bonds.m
    walks = walk_bonds(space.n, bonds)
    state = np.arange(4 * m)
    dart, frame = state % (2 * m), state // (2 * m)
    # each face is walked twice, once from either side; the walk of the lower number is taken
    arrives = frame ^ bonds.mirrored[dart // 2]
    twin = np.empty(walks.sizes.size, dtype=np.int64)
    twin[walks.label] = walks.label[(dart ^ 1) + 2 * m * (1 - arrives)]
    chosen = elementary_faces(space.ring, walks) & (np.arange(twin.size) < twin)
    way = 1.0 - 2.0 * (dart % 2)
    phases = way * peierls_turns(space.positions, bonds, field)[dart // 2]
    flux = np.bincount(walks.label, phases, minlength=twin.size)
    start = np.column_stack([bonds.tail, bonds.head]).ravel()[dart]
    first = start[np.unique(walks.label, return_index=True)[1]]
    areas = np.cross(space.positions[bonds.tail], space.positions[bonds.head])
    turned = way[:, None] * areas[dart // 2]
    area = np.stack([np.bincount(walks.label, t, minlength=twin.size) for t in turned.T], axis=1)
    side = np.where(np.einsum("ij,ij->i", area, space.normals[first]) < 0, -1.0, 1.0)
    return walks.sizes[chosen], np.asarray((flux * side)[chosen], dtype=np.float64)


def _rows(space: RingInSpace, field: UniformField) -> tuple[FloatArray, FloatArray]:
    """Heights of the rows of sites, and the flux through the loop along each, per turn."""
    ring = space.ring
    x, y = _unrolled(ring)
    heights = np.abs(y) if ring.flips else y
    # a row off the midline of a one-sided ring comes back to itself after two turns
    x = np.where(ring.flips & (y < 0), x + ring.circumference, x)
    level = np.rint(heights / (1e-6 * ring.strip.spacing))
    values, first, row = np.unique(level, return_index=True, return_inverse=True)
    order = np.lexsort((x, row))
    flux = _loops(space.positions[order], row[order], field)
    turns = np.where(ring.flips & (values > 0), 2.0, 1.0)
    return heights[first], flux / turns


def _unrolled(ring: Ring) -> tuple[FloatArray, FloatArray]:
    """Places of the sites with x from 0 to L, whatever the place of the seam."""
    x, y = ring.positions.T
    beyond = x >= ring.circumference - 1e-6 * ring.strip.spacing
    small = np.abs(y) < 1e-6 * ring.strip.spacing
    flip = np.where(beyond & ring.flips, -1.0, 1.0)
    return np.where(beyond, x - ring.circumference, x), np.where(small, 0.0, flip * y)


def _loops(points: FloatArray, loop: IntArray, field: UniformField) -> FloatArray:
    """Flux through closed polygons; ``loop`` numbers them, each a stretch of ``points``."""
    last = np.flatnonzero(np.concatenate([loop[1:] != loop[:-1], [True]]))
    ahead = np.arange(1, len(points) + 1)
    ahead[last] = np.concatenate([[0], last[:-1] + 1])
    area = np.cross(points, points[ahead]) / 2 @ np.array(field.tesla)
    return np.asarray(np.bincount(loop, area) * QUANTA)
