"""A ring in space: the midline a circle, the strip turned evenly about it.

With R = L / 2 pi, theta = x / R and alpha = h theta / 2 a place (x, y) of the endless strip goes to

    r = ((R + y cos alpha) cos theta, (R + y cos alpha) sin theta, y sin alpha),

which is left-handed (linking -h half turns); its mirror image in z is right-handed. Going on by L
comes back to the place of (x, (-1)^h y), with the normal reversed where h is odd. Bonds are
stretched by up to about (outermost row) / R, more for larger h; `ribbon.lattice.relax` lets go.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from ribbon.errors import BadInput
from ribbon.lattice.network import Bonds
from ribbon.lattice.normals import normals_from_geometry, orient_normals
from ribbon.lattice.ring import Ring
from ribbon.lattice.strip import FloatArray, IntArray, frozen
from ribbon.lattice.twist import Twisting, twisting

__all__ = [
    "Form",
    "Handedness",
    "Midline",
    "RingInSpace",
    "find_midline",
    "normals_from_geometry",
    "orient_normals",
    "place_in_space",
    "ring_twisting",
]

Handedness = Literal["left", "right"]
Form = Literal["twisted", "annulus", "cylinder"]

REACH = 0.6
"""Sites within so many periods of a station on either side say where the midline passes."""

SLOPE = 1e-3
"""Weight of slopes against places in the fit of a patch to few sites."""


@dataclass(frozen=True, kw_only=True, eq=False)
class RingInSpace:
    """A ring with a place (nm) and a unit normal for every site, both of shape (n, 3).

    ``form`` says what it was laid as: "twisted" (one half twist or more), "annulus" (flat) or
    "cylinder". Bonds are the ring's own; what crosses the seam is as near in space as the rest.
    Normals are carried along x from x = 0, so that they come back reversed for an odd number of
    half twists. Of a plain ring ``handedness`` says nothing.
    """

    ring: Ring
    positions: FloatArray
    normals: FloatArray
    handedness: Handedness
    form: Form

    def __post_init__(self) -> None:
        """Check shapes and numbers; make the arrays read-only."""
        for name in ("positions", "normals"):
            array = getattr(self, name)
            if array.shape != (self.ring.n, 3):
                raise BadInput(
                    f"{name} have the shape {array.shape}; expected ({self.ring.n}, 3), one row "
                    "for each site of the ring"
                )
            if not np.isfinite(array).all():
                raise BadInput(f"{name} hold a value that is not a finite number")
            frozen(array)
        if np.abs(np.linalg.norm(self.normals, axis=1) - 1).max(initial=0.0) > 1e-9:
            raise BadInput("normals must be unit vectors; divide them by their length")
        _check_words(self.ring, self.handedness, self.form)

    @property
    def n(self) -> int:
        """Number of sites."""
        return self.ring.n

    @property
    def bonds(self) -> Bonds:
        """The ring's bonds."""
        return self.ring.bonds

    @property
    def steps(self) -> FloatArray:
        """From tail to head of every bond in space, nm, shape (m, 3)."""
        bonds = self.ring.bonds
        return np.asarray(self.positions[bonds.head] - self.positions[bonds.tail])

    @property
    def flat_lengths(self) -> FloatArray:
        """Length of every bond on the flat strip, nm, shape (m,)."""
        return np.asarray(np.linalg.norm(self.ring.bonds.displacement, axis=1))


@dataclass(frozen=True, kw_only=True, eq=False)
class Midline:
    """The middle of a band in space at stations half a period apart.

    ``along`` (k,) x of the stations on the flat strip, nm; ``centre`` (k, 3) places, nm;
    ``across`` (k, 3) vectors across the band at each (along its normal for a single row).
    """

    along: FloatArray
    centre: FloatArray
    across: FloatArray

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.along, self.centre, self.across):
            frozen(array)


def place_in_space(
    ring: Ring, *, handedness: Handedness = "left", form: Form | None = None
) -> RingInSpace:
    """Lay a ring into space: a circle turned evenly, or for no twist an annulus or a cylinder.

    ``form`` is "twisted" for a twisted ring and "annulus" for a plain one where it is not given.
    Raises `BadInput` for a half-width that is not below the radius (but of a cylinder), for a
    ring so short that a bond has no place of its own in space, and for words that do not fit.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> strip = lay_strip("square", rows=3, length=24)
    >>> space = place_in_space(close_strip(strip, half_twists=1, orbital="pz"))
    >>> space.form, np.round(space.normals[[1, -2]], 2)  # the middle row, either side of the seam
    ('twisted', array([[ 0.  ,  0.  ,  1.  ],
           [-0.13,  0.03, -0.99]]))
    """
    chosen: Form = form or ("twisted" if ring.half_twists else "annulus")
    _check_words(ring, handedness, chosen)
    radius = ring.circumference / (2 * np.pi)
    half = float(np.abs(ring.positions[:, 1]).max())
    if chosen != "cylinder" and half >= radius:
        raise BadInput(
            f"the outermost site stands {half:.6g} nm from the midline, whose circle has the "
            f"radius {radius:.6g} nm; a band that wide would meet itself: take a longer ring"
            + ("" if ring.half_twists else ' or form = "cylinder"')
        )
    _check_places(ring)
    points, normals = _surface(ring, ring.positions, chosen)
    if handedness == "right":
        points[:, 2] *= -1
        normals[:, 2] *= -1
    return RingInSpace(
        ring=ring, positions=points, normals=normals, handedness=handedness, form=chosen
    )


def find_midline(space: RingInSpace) -> Midline:
    """The midline of a ring in space from its sites, whatever its shape.

    At each station a plane patch c + (x - x0) t + y b is fitted to the sites near it; c is on the
    midline and b points across. A station is left out where sites were removed and none stand near
    it, or on one side only.
    """
    ring = space.ring
    count = max(3, round(2 * ring.strip.length))
    along = np.arange(count) * ring.circumference / count
    station, site, offset = _windows(ring, along)
    near = np.bincount(station, minlength=count)
    lean = np.bincount(station, offset[:, 0], minlength=count)
    holds = (near > 0) & (np.abs(lean) <= 0.25 * ring.strip.period * near)
    rank, sees = np.cumsum(holds) - 1, holds[station]
    along, count = along[holds], int(holds.sum())
    station, site, offset = rank[station[sees]], site[sees], offset[sees]
    # places count for more than slopes: what a station with few sites leaves open is a slope,
    # and that is taken as none
    features = np.column_stack([np.ones(site.size), SLOPE / ring.strip.spacing * offset])
    matrix = _summed(station, np.einsum("pi,pj->pij", features, features).reshape(-1, 9), count)
    seen = np.einsum("pi,pj->pij", features, space.positions[site]).reshape(-1, 9)
    right = _summed(station, seen, count).reshape(-1, 3, 3)
    patch = np.linalg.pinv(matrix.reshape(-1, 3, 3), rcond=1e-9, hermitian=True) @ right
    across = patch[:, 2]
    if np.abs(ring.positions[:, 1]).max() < 1e-6 * ring.strip.spacing:
        nearest = np.lexsort((np.abs(offset[:, 0]), station))
        first = np.unique(station[nearest], return_index=True)[1]
        across = space.normals[site[nearest[first]]]
    return Midline(along=along, centre=patch[:, 0].copy(), across=across.copy())


def ring_twisting(space: RingInSpace) -> Twisting:
    """Linking, twist and writhe of a ring in space, in half turns, right-handed positive.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> strip = lay_strip("square", rows=3, length=24)
    >>> space = place_in_space(close_strip(strip, half_twists=3, orbital="pz"))
    >>> round(ring_twisting(space).linking_half_turns, 6)
    -3.0
    """
    midline = find_midline(space)
    return twisting(midline.centre, midline.across)


def _check_words(ring: Ring, handedness: str, form: str) -> None:
    if handedness not in get_args(Handedness):
        raise BadInput(f'handedness = {handedness!r} must be "left" or "right"')
    fits = ("twisted",) if ring.half_twists else ("annulus", "cylinder")
    if form not in fits:
        raise BadInput(
            f"form = {form!r} does not fit half_twists = {ring.half_twists}; expected "
            + " or ".join(f'"{word}"' for word in fits)
        )


def _check_places(ring: Ring) -> None:
    """Refuse rings so short that two bonds lie on each other or a bond has no length."""
    bonds = ring.bonds
    low, high = np.minimum(bonds.tail, bonds.head), np.maximum(bonds.tail, bonds.head)
    key = np.sort(low * ring.n + high)
    twice = key[1:][np.diff(key) == 0]
    own = low[low == high]
    if own.size or twice.size:
        pair = (own[0], own[0]) if own.size else divmod(int(twice[0]), ring.n)
        raise BadInput(
            f"ribbon.length = {ring.strip.length:g} is so short that "
            f"sites {pair[0]} and {pair[1]} are joined round the ring more than once or a site "
            "to itself; such bonds have no place in space: take a longer ring"
        )


def _surface(ring: Ring, places: FloatArray, form: Form) -> tuple[FloatArray, FloatArray]:
    """Points and unit normals (left-handed) of places (x, y) of the endless strip.

    The normal is dr/dy x dr/dx; it points up on the annulus and to the axis on the cylinder.
    """
    radius = ring.circumference / (2 * np.pi)
    theta, y = places[:, 0] / radius, places[:, 1]
    lean = ring.half_twists * theta / 2
    if form == "cylinder":
        lean = np.full(theta.shape, np.pi / 2)
    outward = np.stack([np.cos(theta), np.sin(theta), np.zeros(theta.shape)], axis=1)
    onward = np.stack([-np.sin(theta), np.cos(theta), np.zeros(theta.shape)], axis=1)
    up = np.array([0.0, 0.0, 1.0])
    cosine, sine = np.cos(lean)[:, None], np.sin(lean)[:, None]
    points = radius * outward + y[:, None] * (cosine * outward + sine * up)
    long = 1 + y[:, None] * cosine / radius
    turn = (y * ring.half_twists / (2 * radius))[:, None]
    normals = long * (cosine * up - sine * outward) - turn * onward
    return points, normals / np.linalg.norm(normals, axis=1)[:, None]


def _windows(ring: Ring, along: FloatArray) -> tuple[IntArray, IntArray, FloatArray]:
    """Sites near each station: station, site, and its place (x - x0, y) seen from there, nm.

    Sites beyond the ends are seen as the seam has them.
    """
    x, y = ring.positions.T
    turns = np.arange(-2, 3)
    images = (x + ring.circumference * turns[:, None]).ravel()
    flip = np.where(ring.flips & (turns % 2 == 1), -1.0, 1.0)
    heights = (y * flip[:, None]).ravel()
    order = np.argsort(images, kind="stable")
    reach = REACH * ring.strip.period
    low = np.searchsorted(images[order], along - reach)
    count = np.searchsorted(images[order], along + reach) - low
    station = np.repeat(np.arange(along.size), count)
    place = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count - low, count)
    image = order[place]
    offset = np.column_stack([images[image] - along[station], heights[image]])
    return station, image % ring.n, offset


def _summed(owner: IntArray, values: FloatArray, n: int) -> FloatArray:
    return np.stack([np.bincount(owner, column, minlength=n) for column in values.T], axis=1)
