"""What kind of frame a molecule has, and how it is linked and twisted.

The frame is its bonds with its rings filled (`ribbon.lattice.faces`). Orbital axes are lines
normal to the frame at each atom; across a bond they either keep to one side of the frame or turn
over, and the product of these signs round a closed path says whether it is one-sided. No seam is
marked anywhere: how often the axes turn over comes from the geometry alone.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from ribbon.errors import BadInput
from ribbon.lattice.centre_line import (
    WayRound,
    averaged_line,
    find_way_round,
    lift,
    row_of_faces,
    thinned,
)
from ribbon.lattice.faces import Surface, find_faces, join_faces, ring_normal
from ribbon.lattice.molecule import Molecule
from ribbon.lattice.network import Bonds, BoolArray, Network
from ribbon.lattice.strip import FloatArray, frozen
from ribbon.lattice.twist import Twisting, twist_along, twisting

__all__ = ["Framework", "Kind", "find_framework"]

STEEPEST = 0.45
"""A turn (in half turns) beyond this between neighbouring points could go either way."""

Kind = Literal[
    "chain",
    "sheet",
    "rings",
    "ring",
    "belt",
    "hoop",
    "cage",
    "closed",
    "loops",
    "branched",
    "pieces",
]

MEANING: dict[Kind, str] = {
    "chain": "an open chain without rings",
    "sheet": "one sheet of rings, open at its rim",
    "rings": "several rings or sheets joined by bonds, closing no larger ring",
    "ring": "a single ring of atoms (an annulene), its band made by the orbital axes",
    "belt": "rings fused into one closed band",
    "hoop": "rings joined by bonds into one closed band",
    "cage": "a closed cage",
    "closed": "a closed surface that is no sphere",
    "loops": "more than one way round (as in a figure eight, or a sheet with large holes)",
    "branched": "rings that share a bond three by three, which make no surface",
    "pieces": "several molecules that no bond joins",
}
"""Every kind in words."""

FLAT = 0.2
"""An overlap of axes below this says little about the side."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Framework:
    """The shape of a molecule.

    Parameters
    ----------
    kind
        What it is; `meaning` says it in words.
    network
        Positions and bonds, ``bonds.mirrored`` true where the axes of its ends turn over.
    axes
        Unit vectors along the p orbitals, shape (n, 3), in the signs ``mirrored`` refers to.
    surface
        The filled rings.
    euler_characteristic
        V - E + F of the frame.
    boundary_loops
        Closed edges; None where that has no clear meaning.
    orientable
        Whether no closed path turns the axes over; None where faces branch.
    way_round
        The one way round a ring, belt or hoop.
    twisting
        Linking, twist and writhe of a ring, belt or hoop, in half turns.
    centre_line, across
        The line (nm) and the directions across it that ``twisting`` was found from.
    weakest
        Smallest |overlap| by which the side of an axis was decided.
    remark
        Why something above is None, or empty.
    """

    kind: Kind
    network: Network
    axes: FloatArray
    surface: Surface
    euler_characteristic: int
    boundary_loops: int | None
    orientable: bool | None
    way_round: WayRound | None = None
    twisting: Twisting | None = None
    centre_line: FloatArray | None = None
    across: FloatArray | None = None
    weakest: float = 1.0
    remark: str = ""

    def __post_init__(self) -> None:
        """Make every array read-only."""
        frozen(self.axes)
        for array in (self.centre_line, self.across):
            if array is not None:
                frozen(array)

    @property
    def meaning(self) -> str:
        """The kind in words."""
        return MEANING[self.kind]

    @property
    def signs(self) -> FloatArray:
        """+1 for every bond across which the axes keep to one side, else -1, shape (m,)."""
        return np.where(self.network.bonds.mirrored, -1.0, 1.0)


def find_framework(molecule: Molecule) -> Framework:
    """Say what kind of frame a molecule has, and its topology and twist where it has one.

    Never fails for a shape it does not know: the kind says which it is, and ``remark`` why there
    is no twist.

    >>> import numpy as np
    >>> from ribbon.lattice.molecule import bond_atoms
    >>> turn = np.arange(6) * np.pi / 3
    >>> ring = 0.14 * np.stack([np.cos(turn), np.sin(turn), 0 * turn], axis=1)
    >>> benzene = find_framework(bond_atoms(["C"] * 6, ring))
    >>> benzene.kind, benzene.boundary_loops, round(benzene.twisting.linking_half_turns, 9)
    ('ring', 2, 0.0)
    """
    network = molecule.network
    axes = molecule.axes
    loops = _independent_loops(network)
    faces = () if loops < 2 else find_faces(network.positions, network.bonds, axes)
    surface = join_faces(faces)
    mirrored, weakest = _turned_over(network, axes, surface)
    bonds = replace(network.bonds, mirrored=mirrored)
    network = Network(positions=network.positions.copy(), bonds=bonds)
    euler = network.n - bonds.m + len(faces)
    kind = _kind(network, surface, euler)
    framework = Framework(
        kind=kind,
        network=network,
        axes=axes.copy(),
        surface=surface,
        euler_characteristic=euler,
        boundary_loops=None,
        orientable=None if kind == "branched" else _two_sided(network.n, bonds),
        weakest=weakest,
    )
    return _with_band(framework)


def _pieces(network: Network) -> int:
    bonds = network.bonds
    ends = (bonds.tail, bonds.head)
    graph = coo_array((np.ones(bonds.m), ends), shape=(network.n, network.n))
    return int(connected_components(graph, directed=False)[0])


def _independent_loops(network: Network) -> int:
    return network.bonds.m - network.n + _pieces(network)


def _turned_over(network: Network, axes: FloatArray, surface: Surface) -> tuple[BoolArray, float]:
    """Mask of the bonds whose ends have axes to opposite sides, and the least overlap.

    Ends of a bond of a face are compared by that face: each axis stands on the side of the face
    that `_sides_at` says, whichever of the two faces is taken. Other bonds by their own axes.
    """
    side, sure = _sides_at(network.positions, axes, surface)
    tail, head = network.bonds.tail, network.bonds.head
    overlap = np.einsum("ij,ij->i", axes[tail], axes[head])
    for bond, (a, b) in enumerate(zip(tail.tolist(), head.tolist(), strict=True)):
        owners = surface.beside.get((min(a, b), max(a, b)))
        if owners is not None:
            face = owners[0]
            overlap[bond] = side[a, face] * side[b, face] * min(sure[a, face], sure[b, face])
    return np.asarray(overlap < 0), float(np.abs(overlap).min(initial=1.0))


def _sides_at(
    positions: FloatArray, axes: FloatArray, surface: Surface
) -> tuple[dict[tuple[int, int], float], dict[tuple[int, int], float]]:
    """Side (+1 or -1) of each face on which the axis of each of its atoms stands, and how surely.

    At each atom the axis is held against the face it stands on best; over shared bonds the side
    is carried on to the other faces of the fan, so that faces decide, however bent the frame.
    """
    around: dict[int, list[int]] = {}
    for number, face in enumerate(surface.faces):
        for atom in face:
            around.setdefault(atom, []).append(number)
    normals = [ring_normal(positions, face) for face in surface.faces]
    side: dict[tuple[int, int], float] = {}
    sure: dict[tuple[int, int], float] = {}
    for atom, faces in around.items():
        stands = {face: float(axes[atom] @ normals[face]) for face in faces}
        for best in sorted(faces, key=lambda face: -abs(stands[face])):
            if (atom, best) in side:
                continue
            side[atom, best] = float(np.copysign(1.0, stands[best]))
            fan = [best]
            for here in fan:
                sure[atom, here] = abs(stands[best])
                for there, alike in _next_in_fan(surface, atom, here):
                    if (atom, there) not in side:
                        side[atom, there] = alike * side[atom, here]
                        fan.append(there)
    return side, sure


def _next_in_fan(surface: Surface, atom: int, face: int) -> Iterator[tuple[int, int]]:
    """Faces next to a face over its two bonds at an atom; +1 where both are turned alike."""
    ring = surface.faces[face]
    place = ring.index(atom)
    for far in (ring[place - 1], ring[(place + 1) % len(ring)]):
        for other in surface.beside[min(atom, far), max(atom, far)]:
            if other != face:
                # faces turned alike run along their common bond in opposite ways
                same_way = _follows(ring, atom, far) == _follows(surface.faces[other], atom, far)
                yield other, -1 if same_way else 1


def _follows(ring: tuple[int, ...], one: int, other: int) -> bool:
    """Whether a face runs from one atom to the other next."""
    return ring[(ring.index(one) + 1) % len(ring)] == other


def _two_sided(n: int, bonds: Bonds) -> bool:
    """True where no closed path turns an axis over (sites doubled by their two sides)."""
    swap = bonds.mirrored * n
    tail = np.concatenate([bonds.tail, bonds.tail + n])
    head = np.concatenate([bonds.head + swap, bonds.head + (n - swap)])
    single = coo_array((np.ones(bonds.m), (bonds.tail, bonds.head)), shape=(n, n))
    double = coo_array((np.ones(tail.size), (tail, head)), shape=(2 * n, 2 * n))
    pieces, sides = (connected_components(graph, directed=False)[0] for graph in (single, double))
    return bool(sides == 2 * pieces)


def _kind(network: Network, surface: Surface, euler: int) -> Kind:
    if _pieces(network) > 1:
        return "pieces"
    if surface.branches:
        return "branched"
    if surface.boundary_loops == 0 and surface.faces:
        return "cage" if euler == 2 and surface.orientable else "closed"
    if euler == 1:
        if not surface.faces:
            return "chain"
        return "sheet" if surface.pieces == 1 and not surface.pinched else "rings"
    if euler == 0:
        if not surface.faces:
            return "ring"
        own = len({atom for face in surface.faces for atom in face}) - len(surface.beside)
        band = surface.pieces == 1 and not surface.pinched
        return "belt" if band and own + len(surface.faces) == 0 else "hoop"
    return "loops"


def _with_band(framework: Framework) -> Framework:
    """Add boundary loops, and the way round and twist of a band."""
    kind, surface = framework.kind, framework.surface
    if kind in {"ring", "belt", "hoop"}:
        return _twisted(framework)
    loops: int | None = None
    remark = f"no linking and twist: the frame is {MEANING[kind]}"
    if kind in {"chain", "rings", "sheet"}:
        loops = 1
    elif kind in {"cage", "closed"}:
        loops = 0
    elif kind == "loops":
        whole = len(surface.beside) == framework.network.bonds.m and surface.pieces == 1
        loops = surface.boundary_loops if whole and not surface.pinched else None
    if loops is None:
        remark += "; its edges are not counted"
    return replace(framework, boundary_loops=loops, remark=remark)


def _twisted(framework: Framework) -> Framework:
    network, surface = framework.network, framework.surface
    one_sided = not framework.orientable
    way = find_way_round(network.n, network.bonds, surface)
    assert way is not None, "a connected frame of Euler characteristic 0 goes round one way"
    loops = surface.boundary_loops if framework.kind == "belt" else 1 + (not one_sided)
    known = replace(framework, way_round=way, boundary_loops=loops)
    try:
        centre, across = _line(known, way, one_sided=one_sided)
        turns = twisting(centre, across)
        steepest = float(np.abs(twist_along(centre, across)).max())
    except BadInput as problem:
        return replace(known, remark=f"no linking and twist: {problem}")
    if steepest > STEEPEST or turns.one_sided != one_sided:
        why = f"the band turns by {180 * steepest:.0f} degrees from point to point of its centre"
        return replace(known, remark=f"no linking and twist: {why} line, too far to follow it")
    return replace(known, twisting=turns, centre_line=centre, across=across)


def _line(framework: Framework, way: WayRound, *, one_sided: bool) -> tuple[FloatArray, FloatArray]:
    """Centre line (nm) and directions across the band.

    Of a ring: its atoms and their axes. Of a belt of a single row: the middles of the bonds that
    neighbouring faces share, and these bonds. Of others: averages across the band, and axes.
    """
    network, axes = framework.network, framework.axes
    if framework.kind == "ring":
        centre, across = network.positions[way.core], axes[way.core]
    elif (row := row_of_faces(framework.surface)) is not None and framework.kind == "belt":
        ends = network.positions[np.array(row)]
        centre, across = ends.mean(axis=1), ends[:, 1] - ends[:, 0]
    else:
        unrolled = lift(network.n, network.bonds, way.passes)
        return averaged_line(network.positions, axes, unrolled, one_sided=one_sided)
    centre, across = thinned([centre, across])
    return centre.copy(), across.copy()
