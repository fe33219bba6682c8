"""A ring as a band in space: places, faces, and painting from the back to the front.

The midline is a circle and the band turns evenly about it (left-handed); the plain ring stands
as a cylinder. The band is projected straight onto the page and painted from the back to the
front, so that what lies behind is hidden. Its two faces have two tints.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import PathCollection
from matplotlib.path import Path
from numpy.typing import NDArray

from ribbon.study.figures.look import FACES, INK, LOOKS, PAPER, QUIET

if TYPE_CHECKING:
    from ribbon.lattice import EdgeLoop, Ring

__all__ = [
    "EDGE_COLOURS",
    "MOST_BONDS",
    "Band",
    "band_of",
    "draw_band",
    "face_seen",
    "gathered",
    "project",
    "space_points",
]

FloatArray = NDArray[np.float64]

AZIMUTH, ELEVATION = np.radians(-62.0), np.radians(38.0)
"""Where the eye stands: round the axis of the ring, and above its plane."""

WIDEST = 0.6
"""Greatest half-width that is drawn, in radii of the ring: a wider band would cover itself."""

SLENDER = 1 / 12
"""A band less wide than this part of the radius is drawn enlarged to twice this part."""

ALONG, ACROSS = 180, 6
"""Facets of the band along the ring and across it."""

LAYERS = 110
"""Steps of depth; what lies in one step is painted together."""

MOST_BONDS = 20_000
MOST_SITES = 400
"""Up to so many sites are drawn as dots."""

MOST_DISCS = 600
"""More discs than this are gathered: each stands for the sites of a small cell."""

EDGE_COLOURS = (LOOKS["shorter"].colour, LOOKS["open"].colour)


@dataclass(frozen=True, eq=False)
class Band:
    """A ring as it is drawn: ``half`` its half-width as drawn and ``enlarged`` its factor, nm."""

    ring: Ring
    half: float
    enlarged: float

    @property
    def radius(self) -> float:
        """Radius of the midline, nm."""
        return self.ring.circumference / (2 * np.pi)

    @property
    def seam(self) -> float:
        """Where the cut stands: halfway between the last slice and the image of the first, nm."""
        places = self.ring.strip.positions[:, 0]
        return float(places.min() - (self.ring.circumference - np.ptp(places)) / 2)

    def points(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """Points in space of places on the flat strip, with the width as drawn."""
        return space_points(self.ring, x, y * self.enlarged)


@dataclass(frozen=True, eq=False)
class _Shapes:
    """Shapes of one style: polygons where ``face`` is a colour, else lines.

    ``points`` (k, v, 2) on the page; ``depth`` (k,), larger for what is nearer to the eye.
    """

    points: FloatArray
    depth: FloatArray
    face: str
    line: str
    width: float


def space_points(ring: Ring, x: FloatArray, y: FloatArray) -> FloatArray:
    """Points in space, shape (..., 3), of places (x, y) on the endless strip; all in nm.

    A circle of circumference L turned evenly by the half twists, left-handed; without any, a
    cylinder. Going on by L along x comes back to the same point, with y turned where the seam
    flips.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> ring = close_strip(lay_strip("square", rows=3, length=12), half_twists=1, orbital="s")
    >>> here = space_points(ring, np.array([0.0]), np.array([1.0]))
    >>> there = space_points(ring, np.array([ring.circumference]), np.array([-1.0]))
    >>> bool(np.allclose(here, there))
    True
    """
    radius = ring.circumference / (2 * np.pi)
    around = np.asarray(x) / radius
    # a plain ring stands upright: without a turn to show, a flat annulus would say less
    lean = ring.half_twists * around / 2 if ring.half_twists else np.full_like(around, np.pi / 2)
    out = radius + y * np.cos(lean)
    return np.stack([out * np.cos(around), out * np.sin(around), y * np.sin(lean)], axis=-1)


def project(points: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Points in space on the page, shape (..., 2), and how near they are to the eye, (...)."""
    right, up, toward = _eye()
    return points @ np.stack([right, up], axis=1), points @ toward


def _eye() -> tuple[FloatArray, FloatArray, FloatArray]:
    """Unit vectors to the right and up on the page, and toward the eye."""
    turn, rise = AZIMUTH, ELEVATION
    toward = np.array([np.cos(rise) * np.cos(turn), np.cos(rise) * np.sin(turn), np.sin(rise)])
    right = np.array([-np.sin(turn), np.cos(turn), 0.0])
    return right, np.cross(toward, right), toward


def band_of(ring: Ring) -> Band:
    """The band of a ring, its width changed where it would cover itself or hardly be seen.

    It spans the outermost sites; a single row has no width of its own and spans its walls.
    """
    half = float(np.abs(ring.positions[:, 1]).max())
    if half < 1e-6 * ring.strip.spacing:
        half = ring.strip.width / 2
    radius = ring.circumference / (2 * np.pi)
    drawn = min(half, WIDEST * radius)
    if 2 * half < SLENDER * radius:
        drawn = SLENDER * radius
    return Band(ring, drawn, drawn / half)


def face_seen(band: Band, x: FloatArray, y: FloatArray) -> FloatArray:
    """Cosine between the upper side of the flat strip, carried into space, and the view.

    Positive where one looks at the upper side, negative where at the lower one.
    """
    step = 1e-4 * band.radius
    along = band.points(x + step, y) - band.points(x - step, y)
    across = band.points(x, y + step / band.enlarged) - band.points(x, y - step / band.enlarged)
    normal = np.cross(along, across)
    return np.asarray(normal @ _eye()[2] / np.linalg.norm(normal, axis=-1))


def draw_band(
    axes: Axes,
    band: Band,
    loops: Sequence[EdgeLoop],
    *,
    bonds: bool = True,
    density: FloatArray | None = None,
) -> None:
    """Draw a band with its edges onto axes; ``density`` adds a disc a site, its area in scale."""
    shapes = _facets(band)
    pitch = band.ring.circumference / ALONG
    if bonds and band.ring.bonds.m <= MOST_BONDS:
        shapes += _bond_lines(band)
    for place, loop in enumerate(loops):
        shapes += _edge_lines(band, loop, place, light=density is not None)
    if density is not None:
        shapes += _discs(band, density)
    elif bonds and band.ring.n <= MOST_SITES:
        shapes += _dots(band)
    _paint(axes, shapes)
    axes.set_aspect("equal")
    axes.set_axis_off()
    axes.set_anchor("W")
    room = 0.02 * band.radius + pitch
    seen, _ = project(band.points(*_grid(band)))
    low, high = seen.min(axis=(0, 1)) - room, seen.max(axis=(0, 1)) + room
    axes.set_xlim(low[0], high[0])
    axes.set_ylim(low[1], high[1])


def _grid(band: Band) -> tuple[FloatArray, FloatArray]:
    """Corners of the facets on the flat strip, from one side of the seam to the other."""
    edge = band.half / band.enlarged
    x = band.seam + np.linspace(0, band.ring.circumference, ALONG + 1)
    x, y = np.meshgrid(x, np.linspace(-edge, edge, ACROSS + 1), indexing="ij")
    return x, y


def _facets(band: Band) -> list[_Shapes]:
    """The band in facets, sorted by the face one sees and how squarely."""
    x, y = _grid(band)
    seen, depth = project(band.points(x, y))
    corners = [np.s_[:-1, :-1], np.s_[1:, :-1], np.s_[1:, 1:], np.s_[:-1, 1:]]
    quads = np.stack([seen[c] for c in corners], axis=2).reshape(-1, 4, 2)
    near = np.mean([depth[c] for c in corners], axis=0).ravel()
    middle = [np.mean([grid[c] for c in corners], axis=0) for grid in (x, y)]
    facing = face_seen(band, middle[0], middle[1]).ravel()
    found = []
    for upper, tints in zip((True, False), FACES, strict=True):
        shade = np.minimum((np.abs(facing) * len(tints)).astype(np.int64), len(tints) - 1)
        for step, colour in enumerate(tints):
            chosen = ((facing > 0) == upper) & (shade == step)
            # a hair of the same colour closes the joints between facets
            found.append(_Shapes(quads[chosen], near[chosen], colour, colour, 0.35))
    return found


def _lines(band: Band, start: FloatArray, step: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Straight lines of the flat strip laid on the band, cut into pieces of a facet's length.

    Returns the pieces (k, 2, 2) and their depths, a facet nearer than they are: a line on the
    band is painted over the facet it lies on.
    """
    facet = band.ring.circumference / ALONG
    count = max(1, int(np.ceil(np.abs(step).max(initial=0.0) * max(1.0, band.enlarged) / facet)))
    share = np.linspace(0, 1, count + 1)
    places = start[:, None] + share[:, None] * step[:, None]
    seen, depth = project(band.points(places[..., 0], places[..., 1]))
    pieces = np.stack([seen[:, :-1], seen[:, 1:]], axis=2).reshape(-1, 2, 2)
    near = (depth[:, :-1] + depth[:, 1:]).ravel() / 2
    return pieces, near + 0.7 * max(facet, 2 * band.half / ACROSS)


def _bond_lines(band: Band) -> list[_Shapes]:
    bonds = band.ring.bonds.select(band.ring.bonds.shell == 1)
    # the step is that of the endless strip, so that a bond runs on across the seam
    pieces, near = _lines(band, band.ring.positions[bonds.tail], bonds.displacement)
    return [_Shapes(pieces, near, "none", QUIET, 0.3 if bonds.m > 1500 else 0.5)]


def _edge_lines(band: Band, loop: EdgeLoop, place: int, *, light: bool) -> list[_Shapes]:
    """One edge as it is walked; the second one broken, holes thin."""
    if loop.sites.size < 2:
        return []
    sites = band.ring.positions[loop.sites]
    # a site met after an odd number of crossings of a flipped seam stands on the other side
    turned = (loop.crossings % 2 == 1) & band.ring.flips
    walk = np.column_stack([loop.along, np.where(turned, -1, 1) * sites[:, 1]])
    back = band.ring.flips and loop.winding % 2 == 1
    last = walk[0] * [1, -1 if back else 1] + [loop.winding * band.ring.circumference, 0]
    step = np.diff(np.vstack([walk, last]), axis=0)
    pieces, near = _lines(band, walk, step)
    if not loop.is_edge:
        return [_Shapes(pieces, near, "none", INK, 0.7)]
    if place % 2:
        # dashes are cut along the edge: pieces are painted one by one and carry no pattern
        dash = np.arange(len(pieces)) * 72 // len(pieces) % 3 < 2
        pieces, near = pieces[dash], near[dash]
    return [_Shapes(pieces, near, "none", EDGE_COLOURS[place % 2], 0.9 if light else 1.7)]


def _dots(band: Band) -> list[_Shapes]:
    size = np.full(band.ring.n, np.clip(0.10 * band.ring.strip.spacing / band.radius, 0.008, 0.022))
    return _circles(band, band.ring.positions, size * band.radius, colour=INK)


def _discs(band: Band, density: FloatArray) -> list[_Shapes]:
    """A disc a site, the largest nearly as wide as a bond is long; cells where sites are many."""
    strong = density > 1e-3 * density.max(initial=0.0)
    places, weight = band.ring.positions[strong], density[strong]
    wide = band.ring.strip.spacing
    if weight.size > MOST_DISCS:
        wide = np.sqrt(2 * band.half / band.enlarged * band.ring.circumference / MOST_DISCS)
        places, weight = gathered(places, weight, wide)
    largest = np.clip(0.42 * wide * min(band.enlarged, 1.0), 0.02 * band.radius, 0.07 * band.radius)
    radius = largest * np.sqrt(weight / max(weight.max(initial=0.0), 1e-300))
    return _circles(band, places, radius, colour=LOOKS["ribbon"].colour)


def gathered(points: FloatArray, weight: FloatArray, cell: float) -> tuple[FloatArray, FloatArray]:
    """Mean of a site in square cells, at the mean place of the sites of each.

    Not the sum: cells hold unlike numbers of sites, which would show as a pattern of its own.
    """
    place = np.floor(points / cell).astype(np.int64)
    _, which = np.unique(place, axis=0, return_inverse=True)
    which = which.ravel()
    size = np.bincount(which)
    mean = np.column_stack([np.bincount(which, weights=axis) / size for axis in points.T])
    return mean, np.bincount(which, weights=weight) / size


def _circles(band: Band, places: FloatArray, radius: FloatArray, *, colour: str) -> list[_Shapes]:
    seen, depth = project(band.points(*places.T))
    turn = np.linspace(0, 2 * np.pi, 13)[:-1]
    circle = np.column_stack([np.cos(turn), np.sin(turn)])
    discs = seen[:, None] + radius[:, None, None] * circle
    near = depth + max(2 * np.pi * band.radius / ALONG, 2 * band.half / ACROSS)
    return [_Shapes(discs, near, colour, PAPER, 0.2)]


def _paint(axes: Axes, shapes: Sequence[_Shapes]) -> None:
    """Paint from the back to the front; what has one style in one layer is a single path."""
    shapes = [group for group in shapes if group.depth.size]
    low = min(float(group.depth.min()) for group in shapes)
    high = max(float(group.depth.max()) for group in shapes)
    paths, faces, lines, widths = [], [], [], []
    thick = max(high - low, 1e-300) / LAYERS
    layers = [np.minimum((group.depth - low) / thick, LAYERS - 1).astype(int) for group in shapes]
    for layer in range(LAYERS):
        for group, there in zip(shapes, layers, strict=True):
            points = group.points[there == layer]
            if not len(points):
                continue
            paths.append(_path(points, closed=group.face != "none"))
            faces.append(group.face)
            lines.append(group.line)
            widths.append(group.width)
    axes.add_collection(
        PathCollection(
            paths, facecolors=faces, edgecolors=lines, linewidths=widths, capstyle="round",
            joinstyle="round",
        ),
        autolim=False,
    )  # fmt: skip


def _path(points: FloatArray, *, closed: bool) -> Path:
    """Shapes (k, v, 2) as one path."""
    count, corners, _ = points.shape
    codes = [Path.MOVETO] + [Path.LINETO] * (corners - 1)
    if closed:
        points = np.concatenate([points, points[:, :1]], axis=1)
        codes = [*codes, Path.CLOSEPOLY]
    return Path(points.reshape(-1, 2), np.tile(codes, count))
