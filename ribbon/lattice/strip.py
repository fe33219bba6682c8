"""A lattice laid across a strip: `rows` wide and `length` periods long.

Sites are ordered by x, then by y: slices along the ring, written down here once. The strip is
cut from the endless strip at x = 0, so that sites have 0 <= x < circumference.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from ribbon.errors import BadInput
from ribbon.lattice.definition import TOLERANCE, Lattice, read_lattice

__all__ = ["Cell", "Strip", "frozen", "lay_strip"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
TextArray = NDArray[np.str_]

LARGEST_STRIP = 200_000_000


T = TypeVar("T", bound=np.generic)


def frozen(array: NDArray[T]) -> NDArray[T]:
    """Return the array, read-only from now on."""
    array.setflags(write=False)
    return array


@dataclass(frozen=True, kw_only=True, eq=False)
class Cell:
    """The sites of one period of the endless strip, ordered by x, then y.

    ``x`` lies in [0, period) and ``y`` is centred on the midline, both in units of the spacing.
    """

    x: FloatArray
    y: FloatArray
    species: TextArray
    sublattice: TextArray
    period: float

    @property
    def n(self) -> int:
        """Number of sites in one period."""
        return self.x.size


@dataclass(frozen=True, kw_only=True, eq=False)
class Strip:
    """A lattice laid ``rows`` across and ``length`` periods along (lengths in nm).

    Site ``i`` stands in period ``i // cell.n`` at place ``i % cell.n`` of the cell.

    >>> strip = lay_strip("honeycomb-zigzag", rows=2, length=3)
    >>> strip.n, round(strip.circumference, 4), round(strip.width, 3)
    (12, 0.7379, 0.568)
    """

    lattice: Lattice
    rows: int
    length: float
    spacing: float
    cell: Cell
    n: int

    @property
    def period(self) -> float:
        """Lattice period along the ring, nm."""
        return self.lattice.period * self.spacing

    @property
    def circumference(self) -> float:
        """Length of the midline once round the ring, nm."""
        return self.length * self.period

    @property
    def width(self) -> float:
        """Width between the hard walls of the continuum, nm.

        The walls stand on the first missing line on either side, where amplitudes vanish.
        """
        lines = self.rows * self.lattice.lines_per_row
        return (self.lattice.line_height(lines) - self.lattice.line_height(-1)) * self.spacing

    @cached_property
    def positions(self) -> FloatArray:
        """Places of the sites, shape (n, 2), nm; y is centred on the midline."""
        whole, rest = divmod(self.n, self.cell.n)
        out = np.empty((self.n, 2))
        body = out[: whole * self.cell.n].reshape(whole, self.cell.n, 2)
        body[..., 0] = self.cell.x + self.cell.period * np.arange(whole)[:, None]
        body[..., 1] = self.cell.y
        if rest:
            out[-rest:, 0] = self.cell.x[:rest] + whole * self.cell.period
            out[-rest:, 1] = self.cell.y[:rest]
        out *= self.spacing
        return frozen(out)

    @cached_property
    def species(self) -> TextArray:
        """Species of every site, shape (n,)."""
        return frozen(np.resize(self.cell.species, self.n))

    @cached_property
    def sublattice(self) -> TextArray:
        """Sublattice label of every site, shape (n,)."""
        return frozen(np.resize(self.cell.sublattice, self.n))


def lay_strip(
    lattice: str | Path | Lattice, *, rows: int, length: float, spacing: float | None = None
) -> Strip:
    """Lay ``rows`` rows across and ``length`` lattice periods along.

    ``spacing`` is the nearest-neighbour distance in nm, by default that of the lattice file.
    Raises `BadInput` for sizes that are not positive, or so large that no machine holds them.
    """
    definition = lattice if isinstance(lattice, Lattice) else read_lattice(lattice)
    distance = definition.spacing if spacing is None else spacing
    if rows != int(rows) or rows < 1:
        raise BadInput(f"ribbon.rows = {rows} must be a whole number, 1 or more")
    if not 0 < length < 1e9:
        raise BadInput(f"ribbon.length = {length} must be a positive number of lattice periods")
    if not (np.isfinite(distance) and distance > 0):
        raise BadInput(f"ribbon.spacing = {distance} must be a positive length in nm")
    if abs(2 * length - round(2 * length)) < 2 * TOLERANCE:
        length = round(2 * length) / 2  # a length written with too few or too many digits
    per_line = max(len(line.x) for line in definition.lines)
    if rows * definition.lines_per_row * length * per_line > LARGEST_STRIP:
        raise BadInput(
            f"ribbon.rows = {rows} and ribbon.length = {length:g} make more than "
            f"{LARGEST_STRIP:,} sites; a strip of this size fits no memory"
        )
    cell = _lay_cell(definition, int(rows))
    whole = int(np.floor(length + TOLERANCE))
    rest = (length - whole) * definition.period
    partial = int(np.count_nonzero(cell.x < rest - TOLERANCE))
    count = whole * cell.n + partial
    if count == 0:
        raise BadInput(
            f"ribbon.length = {length:g} is shorter than the distance between two sites of "
            f"{definition.name}; one period is length = 1"
        )
    return Strip(
        lattice=definition,
        rows=int(rows),
        length=float(length),
        spacing=float(distance),
        cell=cell,
        n=count,
    )


def _lay_cell(lattice: Lattice, rows: int) -> Cell:
    """Sites of one period of the endless strip, ordered by x, then y."""
    lines = [lattice.lines[i % len(lattice.lines)] for i in range(rows * lattice.lines_per_row)]
    cycle = np.arange(len(lines)) // len(lattice.lines)
    sizes = np.array([len(line.x) for line in lines])
    x = np.concatenate([line.x for line in lines])
    x += np.repeat(cycle * lattice.repeat[0], sizes)
    y = np.repeat([line.y for line in lines] + cycle * lattice.repeat[1], sizes)
    x %= lattice.period
    # rounding must not put a site at the far end of the period, nor split a slice in two
    x[x > lattice.period - TOLERANCE] = 0.0
    x, slices = _align(x)
    y = y - (y.min() + y.max()) / 2
    order = np.lexsort((y, slices))
    species = np.concatenate([line.species for line in lines])
    sublattice = np.concatenate([line.sublattice for line in lines])
    return Cell(
        x=frozen(x[order]),
        y=frozen(y[order]),
        species=frozen(species[order]),
        sublattice=frozen(sublattice[order]),
        period=lattice.period,
    )


def _align(x: FloatArray) -> tuple[FloatArray, IntArray]:
    """Give sites of one slice the very same x; return also the number of each site's slice."""
    order = np.argsort(x, kind="stable")
    starts = np.concatenate([[True], np.diff(x[order]) > TOLERANCE])
    group = np.cumsum(starts) - 1
    slices = np.empty(x.size, dtype=np.int64)
    slices[order] = group
    return x[order][starts][slices], slices
