"""Linking, twist and writhe of a closed band in space.

A band is a closed centre line, given as a polygon, and at each corner the direction across it.
All results are counted in half turns (unit pi, so Lk = 1/2 is one half turn), right-handed ones
positive. Then linking = twist + writhe holds for the polygon itself, not only in the limit of
fine sampling (Calugareanu 1959; White, Am. J. Math. 91, 693 (1969); Fuller, PNAS 68, 815 (1971)).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from ribbon.errors import BadInput
from ribbon.lattice.strip import FloatArray

__all__ = ["Twisting", "linking", "twist_along", "twisting", "writhe"]

PAIRS = 1 << 16
"""Pairs of sides treated at once."""

OFFSET = 1e-3
"""How far from the centre line the edges are taken, in its shortest side."""

AGREES = 1e-6
"""How closely linking must be a whole number, and equal twist plus writhe."""


MEETS = 1e-13
"""Two sides are in one plane where their volume is below this, in cubes of their distance."""


@dataclass(frozen=True, kw_only=True)
class Twisting:
    """How often a closed band is linked, twisted and writhed, in half turns.

    Right-handed turns are positive. ``linking_half_turns`` is whole, odd for a one-sided band
    and conserved by every motion that does not tear it; it is ``twist_half_turns`` (turning of
    the band about its centre line) plus ``writhe_half_turns`` (coiling of the line itself).
    """

    linking_half_turns: float
    twist_half_turns: float
    writhe_half_turns: float

    @property
    def one_sided(self) -> bool:
        """True for an odd number of half turns: the direction comes back reversed."""
        return round(self.linking_half_turns) % 2 == 1


def twisting(centre: ArrayLike, directions: ArrayLike) -> Twisting:
    """Linking, twist and writhe of a band; arrays of shape (k, 3), the first point not repeated.

    ``directions`` point across the band (or along its normal, which turns as much) and are
    lines: their signs do not matter, and from one point to the next they turn by the smaller
    angle, so that a turn of a quarter or more between neighbours needs more points. Linking is
    that of the centre line with an edge close to it, run twice round where the band is
    one-sided. Raises `BadInput` for arrays of a wrong shape, points that coincide, a direction
    along the line, a turn that could go either way, and a line that meets itself.

    >>> turn = 2 * np.pi * np.arange(60) / 60
    >>> out = np.stack([np.cos(turn), np.sin(turn), 0 * turn], axis=1)
    >>> across = np.cos(turn / 2)[:, None] * out + np.sin(turn / 2)[:, None] * [0, 0, 1]
    >>> band = twisting(out, across)
    >>> round(band.linking_half_turns, 6), round(band.twist_half_turns, 6), band.one_sided
    (-1.0, -1.0, True)
    """
    line, across = _checked(centre, directions)
    across, turns, comes_back = _carried(line, across)
    sides = np.linalg.norm(np.roll(line, -1, axis=0) - line, axis=1)
    reach = OFFSET * float(sides.min()) * across
    total, coil = float(turns.sum()), 2 * writhe(line)
    edges = [line + reach, line - reach]
    closed = edges if comes_back else [np.concatenate(edges)]
    linked = float(sum(linking(line, edge) for edge in closed))
    if abs(linked - round(linked)) > AGREES or abs(linked - total - coil) > AGREES:
        raise BadInput(
            f"the centre line has linking {linked:.6f} but twist plus writhe {total + coil:.6f} "
            "half turns: it meets itself or folds back; give a line that keeps clear of itself"
        )
    return Twisting(linking_half_turns=linked, twist_half_turns=total, writhe_half_turns=coil)


def twist_along(centre: ArrayLike, directions: ArrayLike) -> FloatArray:
    """Twist from each point to the next (the last to the first), half turns, shape (k,).

    The direction is carried along by parallel transport, from a corner to the side and on to
    the next corner; what the next direction is turned from it counts, right-handed positive.
    """
    return _carried(*_checked(centre, directions))[1]


def writhe(centre: ArrayLike) -> float:
    """Writhe of a closed polygon, shape (k, 3), in whole turns (crossings seen on average).

    The Gauss integral of two straight sides is the solid angle of the parallelogram of their
    differences, so the sum is exact (Klenin & Langowski, Biopolymers 54, 307 (2000), recalled
    from memory; here the angle is taken by the arctangent, which is stable for thin ones).

    >>> abs(writhe([[1, 0, 0], [0, 1, 0], [-1, 0, 0], [0, -1, 0]])) < 1e-12
    True
    """
    line = _points(centre, "centre")
    return _gauss(line, line, own=True)


def linking(one: ArrayLike, other: ArrayLike) -> float:
    """Linking number of two closed polygons that do not meet; whole but for rounding.

    >>> square = np.array([[1.0, 1, 0], [-1, 1, 0], [-1, -1, 0], [1, -1, 0]])
    >>> through = np.array([[0.0, 0, -1], [0, 0, 1], [3, 0, 1], [3, 0, -1]])
    >>> round(linking(square, through), 9)
    1.0
    """
    return _gauss(_points(one, "one"), _points(other, "other"), own=False)


def _points(given: ArrayLike, name: str) -> FloatArray:
    points = np.array(given, dtype=np.float64)
    if points.ndim != 2 or points.shape[1] != 3 or len(points) < 3:
        raise BadInput(
            f"{name} has the shape {points.shape}; expected (k, 3) with 3 points or more"
        )
    if not np.isfinite(points).all():
        raise BadInput(f"{name} holds a value that is not a finite number")
    sides = np.linalg.norm(np.roll(points, -1, axis=0) - points, axis=1)
    if sides.min() <= 1e-12 * np.abs(points).max():
        place = int(np.argmin(sides))
        raise BadInput(
            f"points {place} and {(place + 1) % len(points)} of {name} coincide; give every "
            "point once (the line closes by itself)"
        )
    return points


def _checked(centre: ArrayLike, directions: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """The centre line, and its directions made orthogonal to it and of length one."""
    line = _points(centre, "centre")
    given = np.array(directions, dtype=np.float64)
    if given.shape != line.shape:
        raise BadInput(
            f"directions have the shape {given.shape}; expected {line.shape}, one for each point"
        )
    along = _corner_tangents(line)
    across = given - np.einsum("ij,ij->i", given, along)[:, None] * along
    size = np.linalg.norm(across, axis=1)
    good = size > 1e-6 * np.linalg.norm(given, axis=1)  # false for not-a-number too
    if not good.all():
        place = int(np.flatnonzero(~good)[0])
        raise BadInput(
            f"direction {place} is {given[place].tolist()}, zero or along the centre line; "
            "expected a vector across the band"
        )
    return line, across / size[:, None]


def _sides(line: FloatArray) -> FloatArray:
    """Unit vectors from each point to the next."""
    step = np.roll(line, -1, axis=0) - line
    return np.asarray(step / np.linalg.norm(step, axis=1)[:, None])


def _corner_tangents(line: FloatArray) -> FloatArray:
    """Unit tangents at the corners, halfway between the two sides that meet there."""
    side = _sides(line)
    mean = side + np.roll(side, 1, axis=0)
    size = np.linalg.norm(mean, axis=1)
    if size.min() < 1e-9:
        place = int(np.argmin(size))
        raise BadInput(f"the centre line turns straight back at point {place}; expected a curve")
    return np.asarray(mean / size[:, None])


def _transport(vector: FloatArray, start: FloatArray, end: FloatArray) -> FloatArray:
    """Turn vectors by the least rotation that carries ``start`` to ``end`` (unit vectors)."""
    axis = np.cross(start, end)
    cosine = np.einsum("ij,ij->i", start, end)[:, None]
    share = np.einsum("ij,ij->i", axis, vector)[:, None] / (1 + cosine)
    return np.asarray(cosine * vector + np.cross(axis, vector) + share * axis)


def _moved_on(line: FloatArray, across: FloatArray) -> FloatArray:
    """Directions carried from each corner over its side to the next corner."""
    corner, side = _corner_tangents(line), _sides(line)
    there = _transport(across, corner, side)
    return _transport(there, side, np.roll(corner, -1, axis=0))


def _carried(line: FloatArray, across: FloatArray) -> tuple[FloatArray, FloatArray, bool]:
    """Directions with signs that follow one another, and the half turns of every step.

    Last, whether the direction comes back to the first point as it was, not reversed.
    """
    moved = _moved_on(line, across)
    ahead, tangent = np.roll(across, -1, axis=0), np.roll(_corner_tangents(line), -1, axis=0)
    cosine = np.einsum("ij,ij->i", moved, ahead)
    sine = np.einsum("ij,ij->i", np.cross(moved, ahead), tangent)
    if np.abs(cosine).min() < 1e-6:
        place = int(np.argmin(np.abs(cosine)))
        raise BadInput(
            f"the direction turns by a quarter turn from point {place} to point "
            f"{(place + 1) % len(line)}, which could go either way; give points closer together"
        )
    sign = np.sign(cosine)
    turns = np.arctan2(sine * sign, np.abs(cosine)) / np.pi
    signs = np.concatenate([[1.0], np.cumprod(sign[:-1])])
    return np.asarray(across * signs[:, None]), turns, bool(np.prod(sign) > 0)


def _gauss(one: FloatArray, other: FloatArray, *, own: bool) -> float:
    """Gauss double sum over sides of two closed polygons (or one with itself), whole turns."""
    first = np.concatenate([one, one[:1]])
    second = np.concatenate([other, other[:1]])
    rows = max(1, PAIRS // len(other))
    total = 0.0
    for start in range(0, len(one), rows):
        part = first[start : start + rows + 1]
        angle = _solid_angles(part, second)
        if own:
            # a side and its neighbours lie in one plane: they add nothing, and touch
            row = np.arange(len(angle))
            for near in (-1, 0, 1):
                angle[row, (start + row + near) % len(other)] = 0.0
        if np.isnan(angle).any():
            i, j = np.argwhere(np.isnan(angle))[0]
            raise BadInput(
                f"the side from point {start + i} meets the one from point {j}; give a line that "
                "keeps clear of itself (and of the other)"
            )
        total += float(angle.sum())
    return total / (4 * np.pi)


def _solid_angles(first: FloatArray, second: FloatArray) -> FloatArray:
    """Signed solid angle of every side of one open polygon against every side of the other.

    Differences of points on two sides fill a flat parallelogram a, b, c, d; its solid angle is
    that of two triangles (Van Oosterom & Strackee, IEEE Trans. Biomed. Eng. 30, 125 (1983),
    recalled from memory). Not a number where the two sides meet.
    """
    apart = second.T[:, None, :] - first.T[:, :, None]
    size = np.sqrt(_dot(apart, apart))
    here, ahead = np.s_[:-1], np.s_[1:]
    places = [(here, here), (here, ahead), (ahead, ahead), (ahead, here)]
    a, b, c, d = (apart[:, one, two] for one, two in places)
    la, lb, lc, ld = (size[place] for place in places)
    step, stride = np.diff(second.T)[:, None, :], np.diff(first.T)[:, :, None]
    volume = _dot(a, np.cross(step, stride, axis=0))
    ac = _dot(a, c)
    angle = np.zeros(volume.shape)
    for corner, long in ((b, lb), (d, ld)):
        flat = (la * lc + ac) * long + _dot(corner, c) * la + _dot(corner, a) * lc
        angle += np.arctan2(volume, flat)
        # a flat triangle seen from within or from its rim: the sides meet
        tiny = MEETS * np.maximum(np.maximum(la, lc), long) ** 3
        angle[(np.abs(volume) <= tiny) & (flat <= tiny)] = np.nan
    return 2 * angle


def _dot(one: FloatArray, other: FloatArray) -> FloatArray:
    """Scalar products of vectors whose components stand along the first axis."""
    return np.asarray(one[0] * other[0] + one[1] * other[1] + one[2] * other[2])
