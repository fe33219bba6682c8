"""The edges of a network as they are walked: sites in order, unrolled along their full length."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree

from ribbon.errors import BadInput
from ribbon.lattice.network import Network
from ribbon.lattice.ring import Ring
from ribbon.lattice.strip import FloatArray, IntArray, frozen
from ribbon.lattice.topology import coordination_numbers, elementary_faces, laid_out, walk_bonds

__all__ = ["EdgeLoop", "distance_to_edges", "walk_edges"]


@dataclass(frozen=True, kw_only=True, eq=False)
class EdgeLoop:
    """One closed edge, its sites in the order they are met; arrays have the shape (k,).

    Parameters
    ----------
    sites
        Site numbers; a site met twice (a dangling end, a narrow neck) stands twice.
    along
        Place along the ring unrolled, nm: it grows on by L with every time round.
    crossings
        How often the seam was crossed forward since the start of the walk.
    winding
        Times round the ring: 2 for the one edge of a one-sided ribbon, 1 for each edge of a
        two-sided one, 0 for a hole or a detached piece.
    length
        ``winding`` times the circumference, nm.
    perimeter
        Length along the bonds, nm.
    """

    sites: IntArray
    along: FloatArray
    crossings: IntArray
    winding: int
    length: float
    perimeter: float

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.sites, self.along, self.crossings):
            frozen(array)

    @property
    def is_edge(self) -> bool:
        """True where the loop runs round the ring; false for holes."""
        return self.winding > 0


def walk_edges(network: Network) -> tuple[EdgeLoop, ...]:
    """The closed edges of a network, those that run round the ring first, then the longest.

    Walked on the first-neighbour bonds as in `ribbon.lattice.certify_topology`. Raises
    `BadInput` for a network whose bonds lie in no plane.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> ring = close_strip(lay_strip("square", rows=3, length=8), half_twists=1, orbital="s")
    >>> [(loop.winding, loop.sites.size) for loop in walk_edges(ring)]
    [(2, 16)]
    """
    first = network.bonds.select(network.bonds.shell == 1)
    if network.positions.shape[1] != 2 or not laid_out(first):
        raise BadInput("edges are walked on bonds in a plane; this network has no such places")
    walks = walk_bonds(network.n, first)
    m = first.m
    state = np.arange(4 * m)
    dart, frame = state % (2 * m), state // (2 * m)
    forward = 1 - 2 * (dart % 2)
    step = forward * first.displacement[dart // 2, 0]
    advance = np.zeros(walks.sizes.size)
    np.add.at(advance, walks.label, step)
    # the same walk the other way round, seen from the other side of the sheet
    arrives = frame ^ first.mirrored[dart // 2]
    twin = np.empty(walks.sizes.size, dtype=np.int64)
    twin[walks.label] = walks.label[(dart ^ 1) + 2 * m * (1 - arrives)]
    small = 1e-6 * np.abs(step).max(initial=1.0)
    number = np.arange(twin.size)
    ahead = (advance > small) | ((np.abs(advance) <= small) & (number < twin))
    wanted = ~elementary_faces(network, walks) & ahead
    site = np.column_stack([first.tail, first.head]).ravel()[dart]
    chosen = np.flatnonzero(wanted[walks.label]) if m else state
    chosen = chosen[_in_order(walks.following, walks.label[chosen], chosen, site)]
    cuts = np.flatnonzero(np.diff(walks.label[chosen])) + 1
    crossed = forward * first.winding[dart // 2]
    long = np.hypot(*first.displacement[dart // 2].T)
    loops = [
        _loop(network, site[part], step[part], crossed[part], float(long[part].sum()))
        for part in (np.split(chosen, cuts) if chosen.size else [])
    ]
    alone = np.flatnonzero(coordination_numbers(network.n, first) == 0)
    nothing = np.zeros(1)
    loops += [
        _loop(network, np.array([lone]), nothing, nothing.astype(np.int64), 0.0) for lone in alone
    ]
    return tuple(sorted(loops, key=lambda loop: (-loop.winding, -loop.perimeter)))


def _in_order(following: IntArray, label: IntArray, chosen: IntArray, site: IntArray) -> IntArray:
    """Order the chosen states walk by walk, each from its lowest site on (pointer doubling)."""
    if not chosen.size:
        return chosen
    place = np.full(following.size, -1)
    place[chosen] = np.arange(chosen.size)
    onward = place[following[chosen]]
    by_site = np.lexsort((site[chosen], label))
    heads = by_site[np.concatenate([[True], np.diff(label[by_site]) > 0])]
    is_head = np.zeros(chosen.size, dtype=bool)
    is_head[heads] = True
    here = np.arange(chosen.size)
    last = is_head[onward]
    pointer = np.where(last, here, onward)
    left = np.where(last, 0, 1)
    while np.any(pointer[pointer] != pointer):
        left = left + left[pointer]
        pointer = pointer[pointer]
    return np.asarray(np.lexsort((-left, label)))


def _loop(
    network: Network, sites: IntArray, step: FloatArray, crossed: IntArray, perimeter: float
) -> EdgeLoop:
    """A loop from the sites it meets, and the steps and crossings that lead on from each."""
    gone = np.concatenate([[0.0], np.cumsum(step)])
    passed = np.concatenate([[0], np.cumsum(crossed)])
    winding, length = 0, 0.0
    if isinstance(network, Ring):
        winding = round(float(gone[-1]) / network.circumference)
        length = winding * network.circumference
    return EdgeLoop(
        sites=sites.copy(),
        along=network.positions[sites[0], 0] + gone[:-1],
        crossings=passed[:-1],
        winding=winding,
        length=length,
        perimeter=perimeter,
    )


def distance_to_edges(network: Network, loops: tuple[EdgeLoop, ...]) -> FloatArray:
    """Distance of every site to the nearest site of any of the loops, nm, shape (n,).

    Across the seam too; infinite where there are no loops.
    """
    if not loops:
        return np.full(network.n, np.inf)
    rim = network.positions[np.unique(np.concatenate([loop.sites for loop in loops]))]
    if isinstance(network, Ring):
        beyond, before = rim.copy(), rim.copy()
        beyond[:, 0] += network.circumference
        before[:, 0] -= network.circumference
        if network.flips:
            beyond[:, 1] *= -1
            before[:, 1] *= -1
        rim = np.concatenate([rim, beyond, before])
    distance, _ = cKDTree(rim).query(network.positions)
    return np.asarray(distance, dtype=np.float64)
