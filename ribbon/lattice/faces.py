"""Faces of a molecular frame: which of its rings are filled, and the surface they make.

A ring is a face where it is a shortest ring through each of its corners (pairs of neighbouring
bonds at an atom), has 3 to 12 atoms, and the orbital axes of its atoms stand on it rather than
lie in it. The first makes faces independent of how atoms are numbered; the last tells the filled
ring of a tube from a section across it. Shortest rings by breadth-first search from each corner.
"""

from __future__ import annotations

import itertools
from collections import deque
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from ribbon.lattice.network import Bonds
from ribbon.lattice.strip import FloatArray

__all__ = ["Face", "Surface", "find_faces", "join_faces", "ring_normal"]

SMALLEST, LARGEST = 3, 12
STANDS = 0.5
"""Least mean of |axis . ring normal| of a face."""

Face = tuple[int, ...]
Pair = tuple[int, int]
Neighbours = list[list[int]]


@dataclass(frozen=True, kw_only=True)
class Surface:
    """What faces make when they are glued along the bonds they share.

    Parameters
    ----------
    faces
        Atoms round each face, in order.
    beside
        For each bond (lower atom first) of a face the numbers of the faces it belongs to.
    pieces
        Number of pieces of faces that hang together by bonds.
    boundary_loops
        Closed edges, walked on bonds of a single face; None where the faces branch.
    orientable
        False where faces cannot be turned to agree with all their neighbours.
    branches
        True where a bond belongs to three faces or more, so that there is no surface.
    pinched
        True where faces meet in an atom without a bond in common.
    """

    faces: tuple[Face, ...]
    beside: dict[Pair, tuple[int, ...]] = field(default_factory=dict)
    pieces: int
    boundary_loops: int | None
    orientable: bool
    branches: bool
    pinched: bool

    @property
    def sizes(self) -> dict[int, int]:
        """How many faces have so many atoms."""
        size, count = np.unique([len(face) for face in self.faces], return_counts=True)
        return {int(s): int(c) for s, c in zip(size, count, strict=True)}


def ring_normal(positions: FloatArray, ring: Sequence[int]) -> FloatArray:
    """Unit normal of a ring, from its vector area; zeros where that vanishes."""
    corner = positions[list(ring)] - positions[list(ring)].mean(axis=0)
    area = np.cross(corner, np.roll(corner, -1, axis=0)).sum(axis=0)
    size = float(np.linalg.norm(area))
    return np.asarray(area / size if size > 0 else np.zeros(3))


def find_faces(positions: FloatArray, bonds: Bonds, axes: FloatArray) -> tuple[Face, ...]:
    """Faces of a frame, each from its lowest atom on, sorted.

    ``axes`` are unit vectors along the p orbitals, of either sign, shape (n, 3).
    """
    neighbours: Neighbours = [[] for _ in range(len(positions))]
    for tail, head in zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True):
        neighbours[tail].append(head)
        neighbours[head].append(tail)
    met: dict[Face, int] = {}
    for middle, around in enumerate(neighbours):
        for k, one in enumerate(around):
            for other in around[k + 1 :]:
                for path in _shortest(neighbours, (one, middle, other)):
                    ring = _canonical((*path, middle))
                    met[ring] = met.get(ring, 0) + 1
    rings = sorted(ring for ring, corners in met.items() if corners == len(ring))
    return tuple(ring for ring in rings if _axes_stand(positions, axes, ring))


def _axes_stand(positions: FloatArray, axes: FloatArray, ring: Face) -> bool:
    normal = ring_normal(positions, ring)
    return float(np.abs(axes[list(ring)] @ normal).mean()) >= STANDS


def _canonical(ring: Face) -> Face:
    """The same ring from its lowest atom on, towards the lower of the two next to it."""
    start = ring.index(min(ring))
    turned = ring[start:] + ring[:start]
    return turned if turned[1] < turned[-1] else (turned[0], *turned[:0:-1])


def _shortest(neighbours: Neighbours, corner: tuple[int, int, int]) -> Iterator[Face]:
    """All shortest paths between the ends of a corner that do not pass its middle."""
    start, middle, goal = corner
    depth = {start: 0, middle: -1}
    before: dict[int, list[int]] = {}
    layer = [start]
    for steps in range(1, LARGEST - 1):
        following = []
        for atom in layer:
            for far in neighbours[atom]:
                if far not in depth:
                    depth[far] = steps
                    before[far] = [atom]
                    following.append(far)
                elif depth[far] == steps:
                    before[far].append(atom)
        layer = following
        if goal in depth or not layer:
            break
    return _back(before, (goal,), start) if goal in depth else iter(())


def _back(before: dict[int, list[int]], path: Face, start: int) -> Iterator[Face]:
    if path[0] == start:
        yield path
        return
    for atom in before[path[0]]:
        yield from _back(before, (atom, *path), start)


def _sides(face: Face) -> Iterator[tuple[Pair, int]]:
    """Bonds round a face, lower atom first, and +1 where the face runs that way."""
    for one, other in zip(face, (*face[1:], face[0]), strict=True):
        yield ((one, other), 1) if one < other else ((other, one), -1)


def join_faces(faces: tuple[Face, ...]) -> Surface:
    """Glue faces along the bonds they share."""
    beside: dict[Pair, list[int]] = {}
    way: dict[tuple[int, Pair], int] = {}
    for number, face in enumerate(faces):
        for bond, forward in _sides(face):
            beside.setdefault(bond, []).append(number)
            way[number, bond] = forward
    branches = any(len(owners) > 2 for owners in beside.values())
    pieces, orientable = _orient(len(faces), beside, way)
    loops, pinched = (None, False) if branches else _walk(faces, beside)
    return Surface(
        faces=faces,
        beside={bond: tuple(owners) for bond, owners in beside.items()},
        pieces=pieces,
        boundary_loops=loops,
        orientable=orientable,
        branches=branches,
        pinched=pinched,
    )


def _orient(
    count: int, beside: dict[Pair, list[int]], way: dict[tuple[int, Pair], int]
) -> tuple[int, bool]:
    """Number of pieces, and whether all faces can be turned to agree across shared bonds."""
    next_to: list[list[tuple[int, int]]] = [[] for _ in range(count)]
    for bond, owners in beside.items():
        for one, other in itertools.pairwise(owners):
            # faces that are turned alike run along their common bond in opposite ways
            alike = -way[one, bond] * way[other, bond]
            next_to[one].append((other, alike))
            next_to[other].append((one, alike))
    turned = [0] * count
    pieces, orientable = 0, True
    for first in range(count):
        if turned[first]:
            continue
        pieces += 1
        turned[first] = 1
        queue = deque([first])
        while queue:
            here = queue.popleft()
            for there, alike in next_to[here]:
                if not turned[there]:
                    turned[there] = alike * turned[here]
                    queue.append(there)
                elif turned[there] != alike * turned[here]:
                    orientable = False
    return pieces, orientable


def _walk(faces: tuple[Face, ...], beside: dict[Pair, list[int]]) -> tuple[int, bool]:
    """Boundary loops, and whether an atom has more than one fan of faces around it.

    At each atom one goes from a boundary bond through face after face to the next boundary bond.
    """
    onward: dict[tuple[int, int], list[Pair]] = {}
    for number, face in enumerate(faces):
        for place, atom in enumerate(face):
            after = face[(place + 1) % len(face)]
            onward[number, atom] = [_pair(face[place - 1], atom), _pair(atom, after)]
    boundary = [bond for bond, owners in beside.items() if len(owners) == 1]
    next_bond: dict[tuple[int, Pair], Pair] = {}
    for bond in boundary:
        for atom in bond:
            owner, here = beside[bond][0], bond
            while True:
                first, second = onward[owner, atom]
                here = second if here == first else first
                if len(beside[here]) == 1:
                    break
                owner = beside[here][0] if beside[here][1] == owner else beside[here][1]
            next_bond[atom, bond] = here
    ends = np.array(boundary, dtype=np.int64).ravel()
    return _loops(boundary, next_bond), bool(np.bincount(ends, minlength=1).max() > 2)


def _loops(boundary: list[Pair], next_bond: dict[tuple[int, Pair], Pair]) -> int:
    seen: set[Pair] = set()
    loops = 0
    for first in boundary:
        if first in seen:
            continue
        loops += 1
        bond, atom = first, first[1]
        while bond not in seen:
            seen.add(bond)
            bond = next_bond[atom, bond]
            atom = bond[1] if bond[0] == atom else bond[0]
    return loops


def _pair(one: int, other: int) -> Pair:
    return (one, other) if one < other else (other, one)
