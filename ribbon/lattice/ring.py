"""Closing a strip into a ring: bonds found in the endless strip and folded back.

Neighbours are searched for the sites of one period only and replicated along the ring; every
image within the cutoff is kept, so that rings of half, one or two periods, where a site meets
itself or the same partner more than once, are multigraphs and come out right.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, TypeVar

import numpy as np
from numpy.typing import ArrayLike
from scipy.spatial import cKDTree

from ribbon.errors import BadInput
from ribbon.lattice.definition import TOLERANCE
from ribbon.lattice.network import Bonds, BoolArray, Network
from ribbon.lattice.seam import Orbital, Seam, fold, make_seam
from ribbon.lattice.strip import FloatArray, IntArray, Strip, TextArray, frozen, lay_strip

__all__ = [
    "CellBonds",
    "Ring",
    "cell_bonds",
    "close_strip",
    "double_cover",
    "open_strip",
    "remove_sites",
    "reseam",
]


AnyNetwork = TypeVar("AnyNetwork", bound=Network)


@dataclass(frozen=True, kw_only=True, eq=False)
class CellBonds:
    """Bonds of one period of the endless strip, each once, with the head to the right or above.

    ``head`` counts sites of the endless strip: ``head // n`` periods on, place ``head % n``.
    ``displacement`` is in units of the spacing.
    """

    tail: IntArray
    head: IntArray
    displacement: FloatArray
    shell: IntArray


@dataclass(frozen=True, kw_only=True, eq=False)
class Ring(Network):
    """A strip closed into a ring; it remembers its strip, half twists, orbital and seam.

    Sites keep the order of the strip whatever the place of the ``seam``: a seam moved on by s
    slices represents the sites of those slices by their images beyond the far end.
    ``kept`` gives each site's number in the complete ring where sites were removed.

    A ring made by `close_strip` computes its positions and bonds when they are first asked for:
    a matrix of 10 million sites is assembled from one period, without either.
    """

    strip: Strip
    shells: int
    closure: Seam
    seam: int = 0
    kept: IntArray | None = None

    def __getattr__(self, name: str) -> Any:
        """Positions and bonds of a laid ring, when they are first asked for."""
        if name not in {"positions", "bonds"} or "strip" not in self.__dict__:
            raise AttributeError(f"{type(self).__name__!r} object has no attribute {name!r}")
        moved = _moved(self.strip, self.seam)
        late = _positions if name == "positions" else _bonds
        value = late(self, moved)
        object.__setattr__(self, name, value)
        return value

    @property
    def n(self) -> int:
        """Number of sites."""
        return self.strip.n if self.kept is None else self.kept.size

    @property
    def is_laid(self) -> bool:
        """True where every bond is the one that the strip and its seam give, none edited."""
        return "_laid" in self.__dict__

    @property
    def half_twists(self) -> int:
        """Number of half twists, 0 for the plain ring."""
        return self.closure.half_twists

    @property
    def orbital(self) -> Orbital:
        """Behaviour of the orbital under the flip: "s" (even) or "pz" (odd)."""
        return self.closure.orbital

    @property
    def flips(self) -> bool:
        """True where the seam exchanges the two edges (an odd number of half twists)."""
        return self.closure.flips

    @property
    def circumference(self) -> float:
        """Length of the midline once round, nm."""
        return self.strip.circumference

    @property
    def sublattice(self) -> TextArray:
        """Sublattice label of every site as the strip has it (before any image is taken)."""
        labels = self.strip.sublattice
        return labels if self.kept is None else labels[self.kept]


def close_strip(
    strip: Strip,
    *,
    half_twists: int,
    orbital: Orbital | None = None,
    shells: int = 1,
    seam: int = 0,
) -> Ring:
    """Close a strip with ``half_twists`` and bonds to ``shells`` shells of neighbours.

    ``orbital`` has no default for an odd number of half twists. ``seam`` moves the seam on by
    so many slices (sites of one x). Raises `BadInput` when the strip does not close; the
    sentence names the nearest sizes that do.

    >>> ring = close_strip(lay_strip("square", rows=2, length=5), half_twists=1, orbital="s")
    >>> ring.n, ring.bonds.m
    (10, 15)
    """
    closure = make_seam(strip, half_twists, orbital)
    if seam:
        _moved(strip, seam)
    cell_bonds(strip, shells)  # refuses shells that the lattice does not name
    ring = object.__new__(Ring)
    for name, value in {
        **{"strip": strip, "shells": shells, "closure": closure, "seam": seam},
        **{"kept": None, "_laid": True},
    }.items():
        object.__setattr__(ring, name, value)
    return ring


def _bonds(ring: Ring, moved: BoolArray) -> Bonds:
    """Every bond of a laid ring."""
    strip, closure = ring.strip, ring.closure
    cell = cell_bonds(strip, ring.shells)
    tail, head_number, kind = _replicate(strip, cell)
    head, winding = fold(strip, closure, head_number)
    displacement = cell.displacement[kind] * strip.spacing
    if moved.any():
        # a site of a moved slice is represented by its image beyond the far end: one crossing
        # more on the way from it, one less on the way to it, and its own frame is flipped
        winding = winding + moved[tail].astype(np.int64) - moved[head]
        if closure.flips:
            displacement[moved[tail], 1] *= -1
    return Bonds(
        tail=tail,
        head=head,
        displacement=displacement,
        winding=winding,
        shell=cell.shell[kind],
        mirrored=(winding % 2 == 1) if closure.flips else np.zeros(tail.size, dtype=bool),
    )


def open_strip(strip: Strip, *, shells: int = 1) -> Network:
    """The strip before closing: the same sites, and only bonds that need no seam."""
    cell = cell_bonds(strip, shells)
    tail, head, kind = _replicate(strip, cell)
    inside = head < strip.n
    kind = kind[inside]
    count = kind.size
    return Network(
        positions=strip.positions,
        bonds=Bonds(
            tail=tail[inside],
            head=head[inside],
            displacement=cell.displacement[kind] * strip.spacing,
            winding=np.zeros(count, dtype=np.int64),
            shell=cell.shell[kind],
            mirrored=np.zeros(count, dtype=bool),
        ),
    )


def double_cover(ring: Ring) -> tuple[Ring, IntArray]:
    """The untwisted ring of twice the length that covers ``ring``, and the lift.

    ``lift[i]`` is the site of ``ring`` under site i of the cover, so that ``values[lift]``
    carries site energies up: V(n, m) first, then V(n, flipped m). Removed sites are removed
    from the cover too.
    """
    strip = ring.strip
    long = lay_strip(strip.lattice, rows=strip.rows, length=2 * strip.length, spacing=strip.spacing)
    cover = close_strip(long, half_twists=0, shells=ring.shells)
    lift, _ = fold(strip, ring.closure, np.arange(long.n))
    if ring.kept is None:
        return cover, frozen(lift)
    place = np.full(strip.n, -1)
    place[ring.kept] = np.arange(ring.n)
    below = place[lift]
    return remove_sites(cover, np.flatnonzero(below < 0)), frozen(below[below >= 0])


def remove_sites(network: AnyNetwork, sites: ArrayLike) -> AnyNetwork:
    """The network without some of its sites (vacancies), numbered anew in the same order.

    Raises `BadInput` for a site that does not exist or when none would be left.
    """
    gone = np.unique(np.asarray(sites, dtype=np.int64))
    if gone.size and (gone[0] < 0 or gone[-1] >= network.n):
        raise BadInput(f"cannot remove site {gone[-1]}: sites are numbered 0 to {network.n - 1}")
    if gone.size == network.n:
        raise BadInput("removing every site leaves nothing to compute")
    stays = np.ones(network.n, dtype=bool)
    stays[gone] = False
    number = np.cumsum(stays) - 1
    bonds = network.bonds.select(stays[network.bonds.tail] & stays[network.bonds.head])
    smaller = replace(
        network,
        positions=network.positions[stays],
        bonds=replace(bonds, tail=number[bonds.tail], head=number[bonds.head]),
    )
    if isinstance(smaller, Ring):
        kept = np.flatnonzero(stays) if smaller.kept is None else smaller.kept[stays]
        return replace(smaller, kept=frozen(kept))
    return smaller


def reseam(
    ring: Ring,
    *,
    seam: int | None = None,
    half_twists: int | None = None,
    orbital: Orbital | None = None,
    complete: bool = False,
) -> Ring:
    """The same sites closed anew, with another seam position, orbital or number of twists.

    ``complete`` puts removed sites back.
    """
    again = close_strip(
        ring.strip,
        half_twists=ring.half_twists if half_twists is None else half_twists,
        orbital=orbital or ring.orbital,
        shells=ring.shells,
        seam=ring.seam if seam is None else seam,
    )
    if ring.kept is None or complete:
        return again
    return remove_sites(again, np.setdiff1d(np.arange(ring.strip.n), ring.kept))


def cell_bonds(strip: Strip, shells: int) -> CellBonds:
    """Bonds from the sites of one period to neighbours in the endless strip, each once.

    Raises `BadInput` when more shells are asked for than the lattice names.
    """
    known = strip.lattice.shells
    if not 1 <= shells <= len(known):
        raise BadInput(
            f"{shells} shells of neighbours are asked for, but lattice {strip.lattice.name} "
            f"names {len(known)}"
        )
    cell = strip.cell
    reach = known[shells - 1] + 2e3 * TOLERANCE
    ahead = int(np.ceil(reach / cell.period)) + 1
    home = np.column_stack([cell.x, cell.y])
    along = np.arange(-1, ahead + 1)
    images = np.column_stack(
        [(cell.x + along[:, None] * cell.period).ravel(), np.tile(cell.y, along.size)]
    )
    pairs = cKDTree(home).sparse_distance_matrix(cKDTree(images), reach, output_type="coo_matrix")
    tail, image = pairs.row.astype(np.int64), pairs.col.astype(np.int64)
    step = images[image] - home[tail]
    right = step[:, 0] > TOLERANCE
    above = (np.abs(step[:, 0]) <= TOLERANCE) & (step[:, 1] > TOLERANCE)
    off = np.abs(pairs.data[:, None] - np.array(known[:shells])[None, :])
    nearest = np.argmin(off, axis=1)
    chosen = (right | above) & (off[np.arange(off.shape[0]), nearest] < 2e3 * TOLERANCE)
    head = image - cell.n  # the images start one period back
    order = np.lexsort((head[chosen], tail[chosen]))
    return CellBonds(
        tail=tail[chosen][order],
        head=head[chosen][order],
        displacement=step[chosen][order],
        shell=nearest[chosen][order].astype(np.int64) + 1,
    )


def _replicate(strip: Strip, cell: CellBonds) -> tuple[IntArray, IntArray, IntArray]:
    """Tails, heads (numbered along the endless strip) and kinds of all bonds of the strip."""
    size = strip.cell.n
    periods = np.arange(-(-strip.n // size))[:, None]
    tail = (cell.tail + size * periods).ravel()
    head = (cell.head + size * periods).ravel()
    kind = np.tile(np.arange(cell.tail.size), periods.size)
    inside = tail < strip.n
    if inside.all():
        return tail, head, kind
    return tail[inside], head[inside], kind[inside]


def _moved(strip: Strip, seam: int) -> BoolArray:
    """Mask of the sites that lie in the first ``seam`` slices."""
    if seam == 0:
        return np.zeros(strip.n, dtype=bool)
    starts = np.concatenate([[True], np.diff(strip.positions[:, 0]) > TOLERANCE * strip.spacing])
    slices = np.cumsum(starts) - 1
    if not 0 <= seam <= slices[-1] + 1:
        raise BadInput(f"seam = {seam} must be from 0 to {slices[-1] + 1}, the number of slices")
    return slices < seam


def _positions(ring: Ring, moved: BoolArray) -> FloatArray:
    """Places of the sites of a laid ring; those of moved slices by their images."""
    strip, closure = ring.strip, ring.closure
    if not moved.any():
        return strip.positions
    positions = strip.positions.copy()
    positions[moved, 0] += strip.circumference
    if closure.flips:
        positions[moved, 1] *= -1
    return frozen(positions)
