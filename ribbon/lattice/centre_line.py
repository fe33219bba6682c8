"""The way round a frame that closes into one band, and its centre line, found without a seam.

A frame that closes round exactly one way shrinks to a single cycle: faces are taken off from
their free bonds inwards, then dangling atoms. Going back, every bond learns how often it passes
round (a closed one-form, zero round every face); making it as even as possible (harmonic) gives
each atom a place along the band in turns, whatever the numbering and wherever the band starts.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.linalg import spsolve

from ribbon.lattice.faces import Surface
from ribbon.lattice.network import Bonds
from ribbon.lattice.strip import FloatArray, IntArray, frozen

__all__ = ["Lift", "WayRound", "averaged_line", "find_way_round", "lift", "row_of_faces", "thinned"]

MOST_POINTS = 600
"""A centre line with more points is thinned; linking does not notice."""

FEWEST_POINTS = 24

Pair = tuple[int, int]


@dataclass(frozen=True, kw_only=True, eq=False)
class WayRound:
    """The one way round a frame.

    ``core`` holds the atoms of a cycle that goes round once, in order; ``passes`` (m,) how often
    each bond, from tail to head, passes a cut across the band forward: it sums to 1 round the
    core and to 0 round every face.
    """

    core: IntArray
    passes: IntArray

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        frozen(self.core)
        frozen(self.passes)


def find_way_round(n: int, bonds: Bonds, surface: Surface) -> WayRound | None:
    """The way round a connected frame of n atoms, or None where there is not exactly one."""
    number = {
        (min(a, b), max(a, b)): k
        for k, (a, b) in enumerate(zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True))
    }
    sides = [_sides_of(face, number) for face in surface.faces]
    taken, left = _collapse(bonds.m, sides)
    core = _core(n, bonds, left)
    if core is None or len(taken) < len(sides):
        return None
    tail, head = bonds.tail.tolist(), bonds.head.tolist()
    passes = np.zeros(bonds.m, dtype=np.int64)
    first = number[min(core[0], core[1]), max(core[0], core[1])]
    passes[first] = 1 if (tail[first], head[first]) == (core[0], core[1]) else -1
    for face, free in reversed(taken):
        ring = surface.faces[face]
        total = 0
        for here, ahead, bond in zip(ring, (*ring[1:], ring[0]), sides[face], strict=True):
            way = 1 if (tail[bond], head[bond]) == (here, ahead) else -1
            if bond == free:
                free_way = way
            else:
                total += way * int(passes[bond])
        passes[free] = -free_way * total
    return WayRound(core=np.array(core, dtype=np.int64), passes=passes)


def _sides_of(face: tuple[int, ...], number: dict[Pair, int]) -> list[int]:
    ends = zip(face, (*face[1:], face[0]), strict=True)
    return [number[min(a, b), max(a, b)] for a, b in ends]


def _collapse(m: int, sides: list[list[int]]) -> tuple[list[tuple[int, int]], set[int]]:
    """Faces taken off with the free bond of each, in order, and the bonds that are left."""
    owners: list[set[int]] = [set() for _ in range(m)]
    for face, around in enumerate(sides):
        for bond in around:
            owners[bond].add(face)
    queue = deque(bond for bond in range(m) if len(owners[bond]) == 1)
    taken = []
    left = set(range(m))
    while queue:
        free = queue.popleft()
        if len(owners[free]) != 1:
            continue
        face = owners[free].pop()
        taken.append((face, free))
        left.discard(free)
        for bond in sides[face]:
            owners[bond].discard(face)
            if len(owners[bond]) == 1:
                queue.append(bond)
    return taken, left


def _core(n: int, bonds: Bonds, left: set[int]) -> list[int] | None:
    """Atoms of the one cycle that the bonds left over make, or None."""
    beside: list[set[int]] = [set() for _ in range(n)]
    for bond in left:
        a, b = int(bonds.tail[bond]), int(bonds.head[bond])
        beside[a].add(b)
        beside[b].add(a)
    ends = [atom for atom in range(n) if len(beside[atom]) == 1]
    while ends:
        atom = ends.pop()
        for far in beside[atom]:
            beside[far].discard(atom)
            if len(beside[far]) == 1:
                ends.append(far)
        beside[atom] = set()
    alive = [atom for atom in range(n) if beside[atom]]
    if not alive or any(len(beside[atom]) != 2 for atom in alive):
        return None
    walk = [alive[0], min(beside[alive[0]])]
    while walk[-1] != walk[0]:
        walk.append(next(iter(beside[walk[-1]] - {walk[-2]})))
    return walk[:-1] if len(walk) - 1 == len(alive) else None


@dataclass(frozen=True, kw_only=True, eq=False)
class Lift:
    """Atoms unrolled along the way round, cut open along a spanning tree.

    ``turn`` (n,) is the place of each atom in turns; ``sign`` (n,) is +1 or -1 so that
    ``sign * axis`` follow one another inside the unrolled frame. One turn on, signs change where
    the band is one-sided. ``longest`` is the largest advance of a bond, in turns.
    """

    turn: FloatArray
    sign: FloatArray
    longest: float

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        frozen(self.turn)
        frozen(self.sign)


def lift(n: int, bonds: Bonds, passes: IntArray) -> Lift:
    """Unroll a connected frame; ``bonds.mirrored`` says where axes turn over."""
    advance = passes + _evened(n, bonds, passes)
    around: list[list[tuple[int, float, float]]] = [[] for _ in range(n)]
    flips = np.where(bonds.mirrored, -1.0, 1.0).tolist()
    ends = zip(bonds.tail.tolist(), bonds.head.tolist(), advance.tolist(), flips, strict=True)
    for a, b, step, flip in ends:
        around[a].append((b, step, flip))
        around[b].append((a, -step, flip))
    turn, sign = np.full(n, np.nan), np.ones(n)
    turn[0] = 0.0
    queue = deque([0])
    while queue:
        here = queue.popleft()
        for there, step, flip in around[here]:
            if np.isnan(turn[there]):
                turn[there] = turn[here] + step
                sign[there] = sign[here] * flip
                queue.append(there)
    return Lift(turn=turn, sign=sign, longest=float(np.abs(advance).max()))


def _evened(n: int, bonds: Bonds, passes: IntArray) -> FloatArray:
    """What to add to ``passes`` of each bond so that steps at every atom sum to zero."""
    tail, head = bonds.tail, bonds.head
    one = np.ones(bonds.m)
    rows = np.concatenate([tail, head, tail, head])
    columns = np.concatenate([tail, head, head, tail])
    values = np.concatenate([one, one, -one, -one])
    laplacian = coo_array((values, (rows, columns)), shape=(n, n)).tocsc()
    source = np.bincount(tail, passes, minlength=n) - np.bincount(head, passes, minlength=n)
    place = np.zeros(n)
    # the place of the first atom is free: it is taken as zero
    place[1:] = spsolve(laplacian[1:, 1:], source[1:])
    return np.asarray(place[head] - place[tail])


def row_of_faces(surface: Surface) -> list[Pair] | None:
    """Bonds shared by neighbouring faces in order round a single row; None for wider bands."""
    shared: list[list[Pair]] = [[] for _ in surface.faces]
    for bond, owners in surface.beside.items():
        for face in owners if len(owners) == 2 else ():
            shared[face].append(bond)
    if len(shared) < 3 or any(len(bonds) != 2 for bonds in shared):
        return None
    face, bond = 0, min(shared[0])
    row: list[Pair] = []
    while not row or bond != row[0]:
        row.append(bond)
        one, other = shared[face]
        bond = other if bond == one else one
        face = next(owner for owner in surface.beside[bond] if owner != face)
    return row if len(row) == len(shared) else None


def averaged_line(
    positions: FloatArray, axes: FloatArray, unrolled: Lift, *, one_sided: bool
) -> tuple[FloatArray, FloatArray]:
    """Centre line (nm) and axes along it from averages over the atoms near each place.

    Weights fall linearly to zero two samples away, so that the line bends smoothly.
    """
    around = np.floor(unrolled.turn)
    place = unrolled.turn - around
    over = np.where(one_sided & (around % 2 == 1), -1.0, 1.0)
    carried = axes * (unrolled.sign * over)[:, None]
    count = int(np.clip(0.5 / unrolled.longest, FEWEST_POINTS, MOST_POINTS))
    reach = max(2.0 / count, 2.0 * unrolled.longest)  # no station is without atoms
    stations = np.arange(count) / count
    centre, across = np.zeros((count, 3)), np.zeros((count, 3))
    for k, station in enumerate(stations):
        # the same atom seen one turn earlier or later carries the other axis if one-sided
        weight = np.zeros(place.size)
        flipped = np.zeros(place.size)
        for turn in (-1, 0, 1):
            near = np.clip(1 - np.abs(place + turn - station) / reach, 0, None)
            weight += near
            flipped += near * (-1.0 if one_sided and turn else 1.0)
        centre[k] = weight @ positions / weight.sum()
        across[k] = flipped @ carried
    return centre, across


def thinned(points: Sequence[FloatArray]) -> list[FloatArray]:
    """Every so manieth row of each array, so that at most `MOST_POINTS` are left."""
    stride = -(-len(points[0]) // MOST_POINTS)
    return [array[::stride] for array in points]
