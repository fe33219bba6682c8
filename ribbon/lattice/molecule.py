"""Atoms in space become a network: bonds from distances, doubtful ones listed.

Two atoms are bonded where their distance is at most `LIMIT` times the sum of their covalent
radii, and no third atom stands between them. Radii: Cordero et al., Dalton Trans. 2832 (2008),
recalled from memory (carbon as sp2). A contact is no bond where a path over a third atom has two
clearly shorter steps (the relative neighbourhood graph: Toussaint, Pattern Recognition 12, 261
(1980), recalled from memory): this tells second neighbours in a tight ring from bonds.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.spatial import cKDTree

from ribbon.errors import BadInput
from ribbon.lattice.network import Bonds, BoolArray, Network
from ribbon.lattice.normals import normals_from_geometry
from ribbon.lattice.strip import FloatArray, IntArray, TextArray, frozen

__all__ = ["RADII", "DoubtfulBond", "Molecule", "bond_atoms"]

RADII = {"H": 0.031, "B": 0.084, "C": 0.073, "N": 0.071, "O": 0.066, "S": 0.105}
"""Covalent radii in nm."""

LIMIT = 1.45
"""Longest bond, in the sum of the radii: 0.212 nm for two carbons, which only strained or crude
geometries reach. Second neighbours are told by the atom between them, not by this."""

NEAREST = 0.5
"""Shortest bond, in the sum of the radii: 0.073 nm for two carbons."""

USUAL = (0.75, 1.2)
"""Bonds outside are doubtful: 0.110 and 0.175 nm for two carbons."""

FAR = 1.1 * LIMIT
"""Contacts up to here that were not taken as bonds are doubtful, unless an atom is between."""

BETWEEN = 1.1
"""A contact this much longer than both steps over a third atom is no bond."""

UNSURE = (1.03, 1.2)
"""Where that factor lies in here, the decision is doubtful."""

HYDROGEN = 1.3
"""Longest bond to a hydrogen, in the sum of the radii: 0.135 nm from carbon."""

FULL = {"O": 3}
"""Neighbours (hydrogens included) from which on an atom has no p orbital left; 4 for others."""

Namer = Callable[[int], str]


@dataclass(frozen=True, kw_only=True)
class DoubtfulBond:
    """A pair of atoms whose distance decides little; ``bonded`` says how it was taken.

    ``length`` and ``limit`` in nm; ``first`` and ``second`` number the atoms as they were given.
    """

    first: int
    second: int
    length: float
    limit: float
    bonded: bool
    why: str


@dataclass(frozen=True, kw_only=True, eq=False)
class Molecule:
    """The atoms that carry a p orbital, and the bonds between them.

    Parameters
    ----------
    elements
        Symbols, shape (n,).
    network
        Positions (nm, in space) and bonds; ``bonds.mirrored`` is false everywhere until the
        orbital axes are known (`ribbon.lattice.framework`).
    given
        Number of each atom among those that were given, shape (n,).
    neighbours
        Bonded neighbours of each atom, hydrogens and saturated atoms included, shape (n,).
    axes
        Unit vectors along the p orbitals, of either sign, shape (n, 3): normal to where the
        neighbours stand, hydrogens and saturated atoms included.
    doubtful
        Distances near the limit.
    saturated
        Given atoms that have no p orbital left (four neighbours) and were dropped.
    """

    elements: TextArray
    network: Network
    given: IntArray
    neighbours: IntArray
    axes: FloatArray
    doubtful: tuple[DoubtfulBond, ...] = ()
    saturated: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.elements, self.given, self.neighbours, self.axes):
            frozen(array)

    @property
    def n(self) -> int:
        """Number of atoms with a p orbital."""
        return self.network.n


def bond_atoms(
    elements: Sequence[str] | TextArray,
    positions: ArrayLike,
    *,
    hydrogens: ArrayLike | None = None,
    name: Namer | None = None,
) -> Molecule:
    """Find the bonds of atoms at ``positions`` (nm, shape (n, 3)).

    ``hydrogens`` (nm) only count as neighbours: an atom with four has no p orbital and is left
    out. ``name`` names an atom in sentences. Raises `BadInput` for an element without a radius,
    atoms nearer than any bond, or atoms none of which are bonded.

    >>> square = [[0, 0, 0], [0.14, 0, 0], [0.14, 0.14, 0], [0, 0.14, 0]]
    >>> bond_atoms(["C"] * 4, square).network.bonds.m
    4
    """
    symbols, places = np.array(elements), np.array(positions, dtype=np.float64)
    called = name or (lambda atom: f"atom {atom}")
    if places.shape != (symbols.size, 3) or not np.isfinite(places).all():
        raise BadInput(
            f"positions have the shape {places.shape}; expected ({symbols.size}, 3), all finite"
        )
    for symbol in dict.fromkeys(symbols.tolist()):
        if symbol not in RADII or symbol == "H":
            raise BadInput(f"the element {symbol!r} has no covalent radius here; known: {_known()}")
    contacts = _contacts(symbols, places, called)
    bonded, doubtful = _decide(contacts)
    pairs = contacts.pairs[bonded]
    if not pairs.size and symbols.size > 1:
        raise BadInput(_no_bonds(contacts, places))
    held, holder = _held_hydrogens(symbols, places, hydrogens)
    count = np.bincount(np.concatenate([pairs.ravel(), holder]), minlength=symbols.size)
    has_orbital = count < np.array([FULL.get(symbol, 4) for symbol in symbols.tolist()])
    if not has_orbital.any():
        raise BadInput("every atom has all its neighbours single-bonded: no p orbital is left")
    extra = np.stack([holder, symbols.size + np.arange(holder.size)], axis=1)
    axes = _axes(np.concatenate([places, held]), np.concatenate([pairs, extra]))
    kept = _Kept(chosen=has_orbital, count=count, axes=axes[: symbols.size])
    return _keep(symbols, places, pairs, kept=kept, doubtful=doubtful)


def _known() -> str:
    return ", ".join(symbol for symbol in RADII if symbol != "H")


@dataclass(frozen=True, eq=False)
class _Contacts:
    """Pairs near enough to think about; ``ratio`` is the distance in the sum of the radii."""

    pairs: IntArray
    length: FloatArray
    ratio: FloatArray


def _contacts(symbols: TextArray, places: FloatArray, called: Namer) -> _Contacts:
    radius = np.array([RADII[symbol] for symbol in symbols.tolist()])
    reach = 2 * radius.max() * FAR
    pairs = cKDTree(places).query_pairs(reach, output_type="ndarray").astype(np.int64)
    pairs = np.sort(pairs.reshape(-1, 2), axis=1)
    pairs = pairs[np.lexsort(pairs.T[::-1])]
    length = np.linalg.norm(places[pairs[:, 1]] - places[pairs[:, 0]], axis=1)
    ratio = length / radius[pairs].sum(axis=1)
    near = ratio <= FAR
    found = _Contacts(pairs[near], length[near], ratio[near])
    if found.ratio.size and found.ratio.min() < NEAREST:
        worst = int(np.argmin(found.ratio))
        one, other = (called(int(atom)) for atom in found.pairs[worst])
        raise BadInput(
            f"{one} and {other} are {10 * found.length[worst]:.3g} angstrom apart, nearer than "
            f"any bond between them ({NEAREST} of the sum of their radii); check the positions"
        )
    return found


def _decide(contacts: _Contacts) -> tuple[BoolArray, tuple[DoubtfulBond, ...]]:
    """Mask of the bonds among the contacts, and the pairs that were hard to decide."""
    beside: dict[int, dict[int, float]] = {}
    listed = [*zip(contacts.pairs.tolist(), contacts.ratio.tolist(), strict=True)]
    for (a, b), ratio in listed:
        beside.setdefault(a, {})[b] = ratio
        beside.setdefault(b, {})[a] = ratio
    detour = np.array([_detour(beside, pair) for pair, _ in listed], dtype=np.float64)
    factor = contacts.ratio / detour
    bonded = (contacts.ratio <= LIMIT) & (factor <= BETWEEN)
    return bonded, tuple(_doubts(contacts, factor, bonded))


def _detour(beside: dict[int, dict[int, float]], pair: list[int]) -> float:
    """Longer step of the shortest way over a third atom; infinite where there is none."""
    one, other = beside[pair[0]], beside[pair[1]]
    common = one.keys() & other.keys()
    return min((max(one[third], other[third]) for third in common), default=np.inf)


def _doubts(contacts: _Contacts, factor: FloatArray, bonded: BoolArray) -> Iterator[DoubtfulBond]:
    usual = (contacts.ratio >= USUAL[0]) & (contacts.ratio <= USUAL[1])
    unsure = (factor > UNSURE[0]) & (factor < UNSURE[1])
    alone = ~bonded & (factor <= BETWEEN)
    near = ~bonded & (contacts.ratio <= USUAL[1])
    for k in np.flatnonzero(np.where(bonded, ~usual | unsure, alone | near | unsure)).tolist():
        length = float(contacts.length[k])
        if unsure[k] or factor[k] > BETWEEN:
            why = "a third atom is " + ("as near" if bonded[k] else "nearer") + " to both"
        else:
            why = f"{'longer' if contacts.ratio[k] > 1 else 'shorter'} than bonds usually are"
        yield DoubtfulBond(
            first=int(contacts.pairs[k, 0]),
            second=int(contacts.pairs[k, 1]),
            length=length,
            limit=LIMIT * length / float(contacts.ratio[k]),
            bonded=bool(bonded[k]),
            why=why,
        )


def _no_bonds(contacts: _Contacts, places: FloatArray) -> str:
    distance, _ = cKDTree(places).query(places, k=2)
    nearest = 10 * float(distance[:, 1].min())
    return (
        f"no two of the {len(places)} atoms are bonded: the nearest are {nearest:.4g} angstrom "
        f"apart, and a bond is at most {LIMIT} times the sum of the covalent radii (2.12 "
        "angstrom for two carbons); check the unit of the positions"
    )


def _held_hydrogens(
    symbols: TextArray, places: FloatArray, hydrogens: ArrayLike | None
) -> tuple[FloatArray, IntArray]:
    """Hydrogens near enough to be bonded, and the atom that holds each: the nearest."""
    where = np.array(() if hydrogens is None else hydrogens, dtype=np.float64).reshape(-1, 3)
    if not where.size:
        return where, np.zeros(0, dtype=np.int64)
    distance, nearest = cKDTree(places).query(where)
    radius = np.array([RADII[symbol] for symbol in symbols.tolist()])
    bonded = distance <= HYDROGEN * (radius[nearest] + RADII["H"])
    return where[bonded], nearest[bonded].astype(np.int64)


def _axes(places: FloatArray, pairs: IntArray) -> FloatArray:
    """Normals of all atoms; a lone one gets one along z, which meets no other."""
    axes = np.tile([0.0, 0.0, 1.0], (len(places), 1))
    joined = np.unique(pairs)
    if joined.size:
        number = np.full(len(places), -1)
        number[joined] = np.arange(joined.size)
        bonds = _bonds(places[joined], number[pairs])
        axes[joined] = normals_from_geometry(places[joined], bonds)
    return axes


def _bonds(places: FloatArray, pairs: IntArray) -> Bonds:
    m = len(pairs)
    return Bonds(
        tail=pairs[:, 0].copy(),
        head=pairs[:, 1].copy(),
        displacement=places[pairs[:, 1]] - places[pairs[:, 0]],
        winding=np.zeros(m, dtype=np.int64),
        shell=np.ones(m, dtype=np.int64),
        mirrored=np.zeros(m, dtype=bool),
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class _Kept:
    """Which atoms keep a p orbital, the neighbours of all, and the axes of all."""

    chosen: BoolArray
    count: IntArray
    axes: FloatArray


def _keep(
    symbols: TextArray,
    places: FloatArray,
    pairs: IntArray,
    *,
    kept: _Kept,
    doubtful: tuple[DoubtfulBond, ...],
) -> Molecule:
    given = np.flatnonzero(kept.chosen)
    number = np.full(symbols.size, -1)
    number[given] = np.arange(given.size)
    inside = number[pairs]
    inside = inside[(inside >= 0).all(axis=1)]
    return Molecule(
        elements=symbols[given],
        network=Network(positions=places[given], bonds=_bonds(places[given], inside)),
        given=given,
        neighbours=kept.count[given],
        axes=kept.axes[given],
        doubtful=doubtful,
        saturated=tuple(np.flatnonzero(~kept.chosen).tolist()),
    )
