"""The topology certificate: faces and boundary loops walked on the bonds.

Every first-neighbour bond has two darts. Around each site the darts are ordered by the angle of
their displacement in the site's own frame; walking on, one takes the next dart and keeps the
face on the left. A bond that crosses a flipped seam reverses the orientation of the frame.
Walks that turn once to the left enclose a face; all others are boundary loops. (Rotation
systems with signatures: Mohar & Thomassen, Graphs on Surfaces, 2001, recalled from memory.)
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array
from scipy.sparse.csgraph import connected_components, maximum_flow

from ribbon.lattice.network import Bonds, Network
from ribbon.lattice.ring import Ring, reseam
from ribbon.lattice.strip import FloatArray, IntArray

__all__ = [
    "Topology",
    "Walks",
    "certify_topology",
    "coordination_numbers",
    "elementary_faces",
    "laid_out",
    "walk_bonds",
]


@dataclass(frozen=True, kw_only=True)
class Topology:
    """What the first-neighbour bonds of a network say about its shape.

    ``face_sizes`` maps the number of bonds round an elementary face to how many there are;
    ``coordination`` maps a number of bonds to the number of sites that have it (a site bonded
    to itself counts 2). ``sublattice_balance`` holds the sizes of the two colour classes, and
    ``guaranteed_zero_levels`` how many zero levels a bipartite network cannot avoid (sites left
    over by a maximum matching); both are None where the network is not bipartite. Faces, loops
    and the Euler characteristic are None where the bonds lie in no plane: for a network in
    space, or one without positions.
    """

    sites: int
    bonds: int
    components: int
    coordination: dict[int, int]
    faces: int | None
    face_sizes: dict[int, int] | None
    boundary_loops: int | None
    euler_characteristic: int | None
    orientable: bool
    bipartite: bool
    sublattice_balance: tuple[int, int] | None
    guaranteed_zero_levels: int | None


@dataclass(frozen=True, eq=False)
class Walks:
    """Closed walks of darts: for each its number of bonds and its turning in whole turns.

    ``following`` gives the state after each state, ``label`` the walk that a state belongs to;
    states are numbered as in `walk_bonds`.
    """

    sizes: IntArray
    turns: IntArray
    following: IntArray
    label: IntArray


def certify_topology(network: Network) -> Topology:
    """Walk the first-neighbour bonds and report what is there.

    For a ring the elementary faces are those of the complete ring; larger holes left by
    vacancies or missing bonds are boundary loops.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> ring = close_strip(lay_strip("square", rows=3, length=8), half_twists=1, orbital="s")
    >>> certify_topology(ring).boundary_loops
    1
    """
    first = network.bonds.select(network.bonds.shell == 1)
    degree = coordination_numbers(network.n, first)
    components, orientable = _orientation(network.n, first)
    colours = _two_colours(network.n, first)
    faces = None
    loops = None
    if network.positions.shape[1] == 2 and laid_out(first):
        faces, loops = _faces_and_loops(network, first)
    count = None if faces is None else int(sum(faces.values()))
    return Topology(
        sites=network.n,
        bonds=first.m,
        components=components,
        coordination={
            int(d): int(c) for d, c in zip(*np.unique(degree, return_counts=True), strict=True)
        },
        faces=count,
        face_sizes=faces,
        boundary_loops=loops,
        euler_characteristic=None if count is None else network.n - first.m + count,
        orientable=orientable,
        bipartite=colours is not None,
        sublattice_balance=_balance(colours),
        guaranteed_zero_levels=_unmatched(network.n, first, colours),
    )


def coordination_numbers(n: int, bonds: Bonds) -> IntArray:
    """Number of bonds at every site, shape (n,); a site bonded to itself counts 2."""
    ends = np.concatenate([bonds.tail, bonds.head])
    return np.bincount(ends, minlength=n)


def laid_out(bonds: Bonds) -> bool:
    """True where every bond leads somewhere, so that bonds at a site have an order."""
    return bool(np.all(np.any(bonds.displacement, axis=1)))


def _orientation(n: int, bonds: Bonds) -> tuple[int, bool]:
    """Number of pieces, and whether no closed path reverses the orientation.

    On the graph of (site, frame) a path round a one-sided band joins both frames of a site.
    """
    pieces, _ = connected_components(_graph(n, bonds.tail, bonds.head), directed=False)
    swap = bonds.mirrored * n
    tail = np.concatenate([bonds.tail, bonds.tail + n])
    head = np.concatenate([bonds.head + swap, bonds.head + (n - swap)])
    doubled, _ = connected_components(_graph(2 * n, tail, head), directed=False)
    return int(pieces), bool(doubled == 2 * pieces)


def _two_colours(n: int, bonds: Bonds) -> NDArray[np.bool_] | None:
    """A two-colouring of the sites, or None where there is an odd cycle."""
    tail = np.concatenate([bonds.tail, bonds.tail + n])
    head = np.concatenate([bonds.head + n, bonds.head])
    _, label = connected_components(_graph(2 * n, tail, head), directed=False)
    if np.any(label[:n] == label[n:]):
        return None
    return np.asarray(label[:n] < label[n:])


def _balance(colours: NDArray[np.bool_] | None) -> tuple[int, int] | None:
    if colours is None:
        return None
    one = int(np.count_nonzero(colours))
    return max(one, colours.size - one), min(one, colours.size - one)


def _unmatched(n: int, bonds: Bonds, colours: NDArray[np.bool_] | None) -> int | None:
    if colours is None:
        return None
    # a maximum matching is a maximum flow of units from a source through one colour class to
    # the other and on to a sink
    source, sink = n, n + 1
    forward = colours[bonds.tail]
    one, other = np.flatnonzero(colours), np.flatnonzero(~colours)
    tail = [np.where(forward, bonds.tail, bonds.head), np.full(one.size, source), other]
    head = [np.where(forward, bonds.head, bonds.tail), one, np.full(other.size, sink)]
    ends = (np.concatenate(tail), np.concatenate(head))
    capacity = coo_array((np.ones(ends[0].size, dtype=np.int32), ends), shape=(n + 2, n + 2))
    capacity = capacity.tocsr()
    capacity.data[:] = 1  # a bond that stands twice still carries one unit
    matched = maximum_flow(capacity, source, sink, method="dinic").flow_value
    return int(n - 2 * matched)


def _graph(n: int, tail: IntArray, head: IntArray) -> csr_array:
    return coo_array((np.ones(tail.size, dtype=np.int8), (tail, head)), shape=(n, n)).tocsr()


def _faces_and_loops(network: Network, first: Bonds) -> tuple[dict[int, int], int]:
    walks = walk_bonds(network.n, first)
    is_face = elementary_faces(network, walks)
    # every walk is met twice, once from either side
    sizes, counts = np.unique(walks.sizes[is_face], return_counts=True)
    loops = np.count_nonzero(~is_face) // 2
    # a site without bonds has a boundary of its own, though no dart to walk on
    lonely = np.count_nonzero(coordination_numbers(network.n, first) == 0)
    faces = {int(s): int(c) // 2 for s, c in zip(sizes, counts, strict=True)}
    return faces, int(loops + lonely)


def elementary_faces(network: Network, walks: Walks) -> NDArray[np.bool_]:
    """Mask of the walks round elementary faces: left turns of a size the complete ring has.

    Of a bare network every left turn is a face.
    """
    left = walks.turns == 1
    if not isinstance(network, Ring):
        return np.asarray(left)
    whole = reseam(network, complete=True)
    complete = walk_bonds(whole.n, whole.bonds.select(whole.bonds.shell == 1))
    return np.asarray(left & np.isin(walks.sizes, complete.sizes[complete.turns == 1]))


def walk_bonds(n: int, bonds: Bonds) -> Walks:
    """Follow the rotation system on all (dart, frame) states and collect its closed walks.

    Dart 2b runs along bond b, dart 2b + 1 against it. State ``dart`` has the frame of its
    start as it is, state ``dart + 2m`` has it mirrored.
    """
    m = bonds.m
    if m == 0:
        none = np.zeros(0, dtype=np.int64)
        return Walks(none, none, none, none)
    start, angle = _darts(bonds)
    order = np.lexsort((angle, start))
    degree = np.bincount(start, minlength=n)
    first = np.concatenate([[0], np.cumsum(degree)[:-1]])
    rank = np.empty(2 * m, dtype=np.int64)
    rank[order] = np.arange(2 * m) - first[start[order]]
    reverse = np.arange(2 * m) ^ 1
    site = start[reverse]
    mirrored = np.repeat(bonds.mirrored, 2)

    following = np.empty(4 * m, dtype=np.int64)
    turning = np.empty(4 * m)
    for frame in (0, 1):
        arrives_mirrored = mirrored ^ bool(frame)
        # with the face on the left the next dart is the one clockwise of the way back; seen in
        # a mirrored frame clockwise is anticlockwise
        step = np.where(arrives_mirrored, 1, -1)
        place = first[site] + (rank[reverse] + step) % degree[site]
        onward = order[place]
        inner = (angle[reverse] - angle[onward]) * np.where(arrives_mirrored, -1, 1)
        inner = inner % (2 * np.pi)
        inner[inner < 1e-9] = 2 * np.pi
        here = slice(frame * 2 * m, (frame + 1) * 2 * m)
        following[here] = onward + 2 * m * arrives_mirrored
        turning[here] = np.pi - inner
    count, label = connected_components(_graph(4 * m, np.arange(4 * m), following), directed=False)
    return Walks(
        following=following,
        label=label.astype(np.int64),
        sizes=np.bincount(label, minlength=count),
        turns=np.rint(np.bincount(label, weights=turning, minlength=count) / (2 * np.pi)).astype(
            np.int64
        ),
    )


def _darts(bonds: Bonds) -> tuple[IntArray, FloatArray]:
    """Start site and angle (in the start site's frame) of all darts."""
    start = np.column_stack([bonds.tail, bonds.head]).ravel()
    back = -bonds.displacement
    back[bonds.mirrored, 1] *= -1
    both = np.stack([bonds.displacement, back], axis=1).reshape(-1, 2)
    return start, np.arctan2(both[:, 1], both[:, 0])
