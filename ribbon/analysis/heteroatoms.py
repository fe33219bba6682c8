"""Hückel parameters of carbon, nitrogen, oxygen, sulphur and boron, and the electrons they give.

An atom X has the site energy alpha + h beta, a bond the matrix element k beta (beta < 0). A colon
marks an atom that gives two electrons: "N:" as in pyrrole, "N" as in pyridine; "O:" as in furan,
"O" as in a carbonyl group. Both sets of numbers are recalled from memory:

- "van-catledge": F. A. Van-Catledge, J. Org. Chem. 45, 4801 (1980), complete;
- "streitwieser": A. Streitwieser, Molecular Orbital Theory for Organic Chemists (Wiley, 1961),
  for carbon, nitrogen and oxygen; none for sulphur and boron, nor between two heteroatoms.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from ribbon.errors import BadInput
from ribbon.lattice import Bonds

__all__ = ["PARAMETERS", "ParameterSet", "Parameters", "PiAtoms", "pi_atoms"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
TextArray = NDArray[np.str_]
ParameterSet = Literal["van-catledge", "streitwieser"]


@dataclass(frozen=True, kw_only=True)
class Parameters:
    """One published set: ``h`` by kind of atom, ``k`` by the two kinds of a bond, sorted."""

    name: str
    source: str
    h: Mapping[str, float]
    k: Mapping[tuple[str, str], float] = field(default_factory=dict)

    def site(self, kind: str) -> float:
        """h of one kind of atom; `BadInput` where the set has none."""
        if kind not in self.h:
            raise BadInput(
                f"the parameters {self.name!r} have no value for {kind} ({_words(kind)}); "
                f'take heteroatoms = "van-catledge"'
            )
        return self.h[kind]

    def bond(self, one: str, other: str) -> float:
        """k of a bond; `BadInput` where the set has none."""
        low, high = sorted((one, other))
        if (low, high) not in self.k:
            raise BadInput(
                f"the parameters {self.name!r} have no value for a bond between {low} and {high}; "
                f'take heteroatoms = "van-catledge"'
            )
        return self.k[low, high]

    def sites(self, kinds: TextArray) -> FloatArray:
        """h of every atom, shape (n,)."""
        return np.array([self.site(kind) for kind in kinds.tolist()], dtype=np.float64)

    def bonds(self, kinds: TextArray, bonds: Bonds) -> FloatArray:
        """k of every bond, shape (m,)."""
        ends = zip(kinds[bonds.tail].tolist(), kinds[bonds.head].tolist(), strict=True)
        return np.array([self.bond(a, b) for a, b in ends], dtype=np.float64)


def _words(kind: str) -> str:
    return "giving two electrons" if kind.endswith(":") else "giving one electron or none"


def _triangle(rows: Mapping[str, Sequence[float]]) -> dict[tuple[str, str], float]:
    """Bond values from the lower half of a square table whose columns follow its rows."""
    names = list(rows)
    table = {}
    for row, values in rows.items():
        for column, value in zip(names, values, strict=False):
            low, high = sorted((row, column))
            table[low, high] = value
    return table


PARAMETERS: dict[str, Parameters] = {
    "van-catledge": Parameters(
        name="van-catledge",
        source="F. A. Van-Catledge, J. Org. Chem. 45, 4801 (1980), recalled from memory",
        h={
            "C": 0.0,
            "B": -0.45,
            "N": 0.51,
            "N:": 1.37,
            "O": 0.97,
            "O:": 2.09,
            "S": 0.46,
            "S:": 1.11,
        },
        k=_triangle(
            {
                "C": [1.00],
                "B": [0.73, 0.87],
                "N": [1.02, 0.66, 1.09],
                "N:": [0.89, 0.53, 0.99, 0.98],
                "O": [1.06, 0.60, 1.14, 1.13, 1.26],
                "O:": [0.66, 0.35, 0.80, 0.89, 1.02, 0.95],
                "S": [0.81, 0.51, 0.83, 0.68, 0.84, 0.43, 0.68],
                "S:": [0.69, 0.44, 0.78, 0.73, 0.85, 0.54, 0.58, 0.63],
            }
        ),
    ),
    "streitwieser": Parameters(
        name="streitwieser",
        source=(
            "A. Streitwieser, Molecular Orbital Theory for Organic Chemists (1961), recalled from "
            "memory"
        ),
        h={"C": 0.0, "N": 0.5, "N:": 1.5, "O": 1.0, "O:": 2.0},
        k={
            ("C", "C"): 1.0,
            ("C", "N"): 1.0,
            ("C", "N:"): 0.8,
            ("C", "O"): 1.0,
            ("C", "O:"): 0.8,
        },
    ),
}
"""The published sets by name."""

assert set(PARAMETERS) == set(get_args(ParameterSet))

ELECTRONS = {"B": 0, "C": 1, "N": 1, "N:": 2, "O": 1, "O:": 2, "S": 1, "S:": 2}
"""Electrons that each kind gives to the pi system."""

GIVES_PAIR = {"N": 3, "O": 2, "S": 2}
"""From so many neighbours on an atom has both electrons of its p orbital left."""


@dataclass(frozen=True, kw_only=True, eq=False)
class PiAtoms:
    """What each atom is to the pi system.

    ``kinds`` (n,) as the parameters name them, ``electrons`` (n,) given by each, and ``notes`` on
    what the neighbours left open.
    """

    kinds: TextArray
    electrons: IntArray
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        self.kinds.setflags(write=False)
        self.electrons.setflags(write=False)


def pi_atoms(
    elements: Sequence[str] | TextArray,
    neighbours: Sequence[int] | IntArray,
    *,
    hydrogens_known: bool = True,
    charge: int = 0,
    in_five_ring: Sequence[int] = (),
) -> PiAtoms:
    """Kinds and electrons of atoms from their number of neighbours, hydrogens included.

    Nitrogen with three neighbours, oxygen and sulphur with two, give two electrons; else one.
    Without hydrogens (``hydrogens_known`` false) a nitrogen with two neighbours may hide one: a
    single such atom ``in_five_ring`` is taken as pyrrole's where the electrons (less ``charge``)
    are odd otherwise. Whatever was left open is noted.

    >>> pi_atoms(["C", "N", "N", "O"], [3, 2, 3, 1]).kinds.tolist()
    ['C', 'N', 'N:', 'O']
    """
    symbols, count = np.array(elements), np.array(neighbours, dtype=np.int64)
    pair = np.array(
        [number >= GIVES_PAIR.get(s, 99) for s, number in zip(symbols.tolist(), count, strict=True)]
    )
    notes = []
    open_ones = np.flatnonzero(
        ((symbols == "N") & (count == 2)) | (np.isin(symbols, ["O", "S"]) & (count == 1))
    )
    if not hydrogens_known and open_ones.size:
        given = np.where(pair, 2, np.where(symbols == "B", 0, 1)).sum() - charge
        hidden = [a for a in open_ones.tolist() if a in set(in_five_ring) and symbols[a] == "N"]
        if given % 2 and len(hidden) == 1:
            pair[hidden[0]] = True
            notes.append(
                "the file has no hydrogens: the nitrogen in the ring of five is taken to carry "
                "one (as in pyrrole), which makes the electrons even"
            )
            open_ones = open_ones[open_ones != hidden[0]]
        if open_ones.size:
            notes.append(
                f"the file has no hydrogens: {open_ones.size} atom(s) N, O or S are taken to carry "
                "none (as in pyridine and carbonyl groups); write the hydrogens to change it"
            )
    kinds = np.array([f"{s}:" if two else s for s, two in zip(symbols.tolist(), pair, strict=True)])
    electrons = np.array([ELECTRONS[kind] for kind in kinds.tolist()], dtype=np.int64)
    return PiAtoms(kinds=kinds, electrons=electrons, notes=tuple(notes))
