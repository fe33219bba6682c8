"""The seam: the map that closes a strip, whether it fits, and what an amplitude picks up.

The seam identifies (x, y) with (x + L, (-1)^h y). A ring exists only if that map carries the
endless strip onto itself, species included; this is tested on the sites, never looked up.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from ribbon.errors import BadInput
from ribbon.lattice.definition import TOLERANCE, Lattice
from ribbon.lattice.strip import Cell, IntArray, Strip, frozen, lay_strip

__all__ = [
    "Orbital",
    "Seam",
    "cell_map",
    "closing_sizes",
    "fit_strip",
    "fold",
    "holds_together",
    "make_seam",
]

Orbital = Literal["s", "pz"]

SEARCH_REACH = 12
LARGEST_FIT = 20_000


@dataclass(frozen=True, kw_only=True, eq=False)
class Seam:
    """How the strip is closed.

    ``back_site`` and ``back_shift`` describe the inverse of the seam map on the cell: site b of
    period p is carried to site ``back_site[b]`` of period ``p + back_shift[b]``.
    """

    half_twists: int
    orbital: Orbital
    back_site: IntArray
    back_shift: IntArray

    @property
    def flips(self) -> bool:
        """True where the seam exchanges the two edges."""
        return self.half_twists % 2 == 1

    def factor(self, winding: IntArray) -> NDArray[np.float64]:
        """What an amplitude picks up that crosses the seam forward ``winding`` times.

        This is the unitary of the seam on the orbitals: sigma^(h w), sigma = +1 for "s" and -1
        for "pz" (the half turn of the strip about its midline reverses a p_z orbital).
        """
        if self.orbital == "s":
            return np.ones(winding.shape)
        return np.asarray(1.0 - 2.0 * ((self.half_twists * winding) % 2), dtype=np.float64)


def cell_map(cell: Cell, shift: float, *, flip: bool) -> tuple[IntArray, IntArray] | None:
    """Where (x, y) -> (x + shift, y or -y) carries the sites of one period.

    ``shift`` is in units of the spacing. Returns for each cell site the image's cell site and
    the number of periods it moved, or None when some site has no image of its own species.
    """
    target_x = cell.x + shift
    target_y = -cell.y if flip else cell.y
    period = np.floor((target_x + TOLERANCE) / cell.period)
    wrapped = np.maximum(target_x - period * cell.period, 0.0)
    tree = cKDTree(np.column_stack([cell.x, cell.y]))
    found, nearest = tree.query(np.column_stack([wrapped, target_y]))
    distance, image = np.atleast_1d(found), np.atleast_1d(nearest).astype(np.int64)
    if distance.max() > 3 * TOLERANCE * max(1.0, abs(shift) * 1e-6):
        return None
    if np.any(cell.species[image] != cell.species):
        return None
    return frozen(image), frozen(period.astype(np.int64))


def make_seam(strip: Strip, half_twists: int, orbital: Orbital | None) -> Seam:
    """Check that the strip closes with ``half_twists`` and return its seam.

    Raises `BadInput` when half twists are not a whole number from 0 up, when the orbital is
    missing for an odd number of them, or when the strip does not close; the sentence then names
    the nearest sizes that do.
    """
    if half_twists != int(half_twists) or not 0 <= half_twists <= 1000:
        raise BadInput(
            f"ribbon.half_twists = {half_twists} must be a whole number from 0 to 1000 "
            "(handedness is a matter of space, so it is never negative)"
        )
    if orbital not in {None, "s", "pz"}:
        raise BadInput(f'ribbon.orbital = {orbital!r} must be "s" or "pz"')
    if orbital is None and half_twists % 2:
        raise BadInput(
            f"ribbon.orbital must be stated for half_twists = {half_twists}: "
            '"s" (even under the flip) or "pz" (changes sign with each half twist)'
        )
    shift = strip.length * strip.lattice.period
    images = cell_map(strip.cell, -shift, flip=half_twists % 2 == 1)
    if images is None:
        raise BadInput(_refusal(strip, half_twists))
    return Seam(
        half_twists=int(half_twists),
        orbital=orbital or "s",
        back_site=images[0],
        back_shift=images[1],
    )


def fold(strip: Strip, seam: Seam, number: IntArray) -> tuple[IntArray, IntArray]:
    """Carry sites of the endless strip into the ring.

    ``number`` counts sites of the endless strip in its own order, from the strip's first site
    on (n and beyond lie past the end, negative ones before the start). Returns the site of the
    ring and the winding: how often the seam was crossed forward.
    """
    size = strip.cell.n
    site = number.copy()
    winding = np.zeros_like(site)
    while (beyond := site >= strip.n).any():
        period, place = np.divmod(site[beyond], size)
        site[beyond] = (period + seam.back_shift[place]) * size + seam.back_site[place]
        winding[beyond] += 1
    if site.size and site.min() < 0:
        forward_site, forward_shift = _inverse(seam)
        while (before := site < 0).any():
            period, place = np.divmod(site[before], size)
            site[before] = (period + forward_shift[place]) * size + forward_site[place]
            winding[before] -= 1
    return site, winding


def _inverse(seam: Seam) -> tuple[IntArray, IntArray]:
    forward = np.empty_like(seam.back_site)
    shift = np.empty_like(seam.back_shift)
    forward[seam.back_site] = np.arange(forward.size)
    shift[seam.back_site] = -seam.back_shift
    return forward, shift


def closing_sizes(
    lattice: str | Lattice, *, rows: int, length: float, half_twists: int, count: int = 6
) -> list[tuple[int, float]]:
    """Sizes (rows, length) near the wanted one that close, nearest first; maybe none.

    Lengths are tried in steps of half a period.

    >>> closing_sizes("honeycomb-zigzag", rows=3, length=10, half_twists=1, count=3)
    [(3, 9.5), (3, 10.5), (2, 10.0)]
    """
    found: list[tuple[int, float]] = []
    flip = half_twists % 2 == 1
    for tried_rows, tried_length in _near(rows, length):
        try:
            strip = lay_strip(lattice, rows=tried_rows, length=tried_length)
        except BadInput:
            continue
        shift = tried_length * strip.lattice.period
        closes = cell_map(strip.cell, -shift, flip=flip) is not None
        if closes and holds_together(strip):
            found.append((tried_rows, tried_length))
            if len(found) == count:
                break
    return found


def holds_together(strip: Strip, shells: int = 1) -> bool:
    """False where neighbours join nothing along the strip (armchair, one row, first shell)."""
    cell, periods = strip.cell, 3
    x = (cell.x + cell.period * np.arange(periods)[:, None]).ravel()
    points = np.column_stack([x, np.tile(cell.y - cell.y.min(), periods)])
    # a box that repeats along the strip and is empty beside it
    box = (periods * cell.period, 10.0 + 2 * float(points[:, 1].max()))
    pairs = cKDTree(points, boxsize=box).query_pairs(
        strip.lattice.shells[shells - 1] + 2e3 * TOLERANCE, output_type="ndarray"
    )
    joined = coo_array((np.ones(len(pairs)), tuple(pairs.T)), shape=(len(points),) * 2)
    return int(connected_components(joined, directed=False)[0]) == 1


def _near(rows: int, length: float) -> Iterator[tuple[int, float]]:
    """Sizes ordered by how far they are from the wanted one; the same rows come first."""
    base = round(2 * length)
    sizes = [
        (abs(r - rows) * 2 + abs(doubled / 2 - length), abs(r - rows), r, doubled)
        for r in range(max(1, rows - SEARCH_REACH), rows + SEARCH_REACH + 1)
        for doubled in range(max(1, base - 2), base + 3)
    ]
    for _, _, r, doubled in sorted(sizes):
        yield r, doubled / 2


def _refusal(strip: Strip, half_twists: int) -> str:
    lattice = strip.lattice
    near = closing_sizes(
        lattice, rows=strip.rows, length=strip.length, half_twists=half_twists, count=4
    )
    what = (
        f"a {lattice.name} strip of ribbon.rows = {strip.rows} and ribbon.length = "
        f"{strip.length:g} does not close with half_twists = {half_twists}"
    )
    return f"{what}; {_sizes(near)}"


def _sizes(near: list[tuple[int, float]]) -> str:
    if not near:
        return "nor does any size near it: this lattice has no mirror across the strip"
    sizes = ", ".join(f"rows = {r} with length = {n:g}" for r, n in near)
    return f"the nearest sizes that close are {sizes}"


def fit_strip(
    lattice: str | Lattice,
    *,
    half_twists: int,
    spacing: float | None = None,
    rows: int | None = None,
    width: float | None = None,
    length: float | None = None,
    length_nm: float | None = None,
) -> tuple[int, float]:
    """The size (rows, length in periods) nearest to a wanted width and length that closes.

    Give ``rows`` or ``width`` (nm), and ``length`` (periods) or ``length_nm``. What is given as
    a number of rows or periods is kept. Raises `BadInput` when nothing near it closes.
    """
    unit = lay_strip(lattice, rows=1, length=1, spacing=spacing)
    wanted_rows = rows if rows is not None else _rows_for(unit, width)
    wanted_length = length if length is not None else (length_nm or 0.0) / unit.period
    if wanted_length * unit.cell.n * wanted_rows > 1e9:
        raise BadInput("the wanted ribbon holds more than 10^9 sites; no machine holds it")
    keep_length = length is not None
    candidates = [
        (r, n)
        for r, n in closing_sizes(
            unit.lattice,
            rows=wanted_rows,
            length=max(wanted_length, 0.5),
            half_twists=half_twists,
            count=200,
        )
        if (rows is None or r == rows) and (not keep_length or n == length)
    ]
    if not candidates:
        near = closing_sizes(
            unit.lattice, rows=wanted_rows, length=max(wanted_length, 0.5), half_twists=half_twists
        )
        raise BadInput(
            f"no {unit.lattice.name} ribbon near rows = {wanted_rows} and length = "
            f"{wanted_length:g} closes with half_twists = {half_twists}; {_sizes(near)}"
        )
    step = unit.lattice.repeat[1] / len(unit.lattice.lines) * unit.lattice.lines_per_row
    return min(
        candidates,
        key=lambda size: (
            abs(size[0] - wanted_rows) * step + abs(size[1] - wanted_length) * unit.lattice.period,
            size,
        ),
    )


def _rows_for(unit: Strip, width: float | None) -> int:
    if width is None or not width > 0:
        raise BadInput(f"ribbon.width_nm = {width} must be a positive length")
    lattice = unit.lattice
    step = lattice.repeat[1] / len(lattice.lines) * lattice.lines_per_row * unit.spacing
    guess = max(1, round((width - unit.width) / step) + 1)
    if guess > LARGEST_FIT:
        raise BadInput(f"ribbon.width_nm = {width:g} is more than {LARGEST_FIT:,} rows wide")
    near = range(max(1, guess - 3), guess + 4)

    def error(rows: int) -> float:
        return abs(lay_strip(lattice, rows=rows, length=1, spacing=unit.spacing).width - width)

    return min(near, key=error)
