"""Molecules as XYZ text: reading with care, and writing.

The first line holds the number of atoms, the second a comment, every further line an element
(or its atomic number) and x, y, z in angstrom. More columns may follow; they are kept under the
names that a word ``columns=element,x,y,z,NAME,...`` of the comment gives them, and ignored
without names. Blank lines (but for the comment) and Windows line ends are taken as they come.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree

from ribbon.errors import BadInput
from ribbon.lattice.strip import frozen
from ribbon.study.sentences import one_line, shown
from ribbon.study.toml_text import read_text

__all__ = ["MoleculeFile", "parse_molecule", "read_molecule", "xyz_text"]

FloatArray = NDArray[np.float64]
TextArray = NDArray[np.str_]

LARGEST_FILE = 50_000_000
MOST_ATOMS = 200_000
LARGEST_PLACE = 1e6
KEPT = ("B", "C", "N", "O", "S")
COLUMNS = ["element", "x", "y", "z"]
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")

TOO_NEAR = 0.5
"""Atoms nearer than this (angstrom) stand on top of each other; H2 has 0.74."""

USUAL = (0.85, 1.95)
"""Where the typical distance (angstrom) of an atom to its nearest lies, hydrogens included."""

UNITS = {"nanometre": 10.0, "picometre": 0.01, "bohr": 0.529177}
"""Units that positions are mistaken in, and the factor to angstrom."""

PERIODIC = (
    "H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As Se "
    "Br Kr Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe Cs Ba La Ce Pr Nd Pm Sm Eu Gd Tb "
    "Dy Ho Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn Fr Ra Ac Th Pa U Np Pu Am Cm "
    "Bk Cf Es Fm Md No Lr Rf Db Sg Bh Hs Mt Ds Rg Cn Nh Fl Mc Lv Ts Og"
)
"""Elements by atomic number, from 1."""

SYMBOLS = tuple(re.findall("[A-Za-z]+", PERIODIC))


@dataclass(frozen=True, kw_only=True, eq=False)
class MoleculeFile:
    """The atoms of a file that may carry p orbitals, and where its hydrogens stood.

    Parameters
    ----------
    elements
        Symbols of the kept atoms (B, C, N, O, S), shape (n,).
    positions
        In angstrom, shape (n, 3).
    lines
        Line of the file on which each atom stands, shape (n,).
    hydrogens
        Positions of the hydrogens that were dropped, angstrom, shape (k, 3).
    comment
        The second line, without its ``columns=`` word.
    columns
        Further columns by the name that the comment gives them, each of shape (n,).
    """

    elements: TextArray
    positions: FloatArray
    lines: NDArray[np.int64]
    hydrogens: FloatArray
    comment: str = ""
    columns: Mapping[str, FloatArray] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (self.elements, self.positions, self.lines, self.hydrogens):
            frozen(array)
        for column in self.columns.values():
            frozen(column)

    @property
    def n(self) -> int:
        """Number of kept atoms."""
        return self.elements.size


def read_molecule(path: str | Path) -> MoleculeFile:
    """Read an XYZ file; `BadInput` names the file, and the line where there is one."""
    path = Path(path)
    text = read_text(path, largest=LARGEST_FILE)
    return parse_molecule(text, source=str(path))


def parse_molecule(text: str, *, source: str = "the text") -> MoleculeFile:
    """Parse XYZ text; ``source`` is its name in sentences.

    >>> water = parse_molecule("3\\n\\nO 0 0 0\\nH 0.76 0.59 0\\nH -0.76 0.59 0\\n")
    >>> water.elements.tolist(), len(water.hydrogens)
    (['O'], 2)
    """
    if "\0" in text:
        raise BadInput(f"{source}: is not a text file; expected XYZ, a count and then atoms")
    lines = text.splitlines()
    filled = [number for number, line in enumerate(lines, 1) if line.strip()]
    if not filled:
        raise BadInput(f"{source}: is empty; expected the number of atoms on the first line")
    count = _count(lines[filled[0] - 1].strip(), f"{source}, line {filled[0]}")
    comment = one_line(lines[filled[0]]) if filled[0] < len(lines) else ""
    rows = [number for number in filled if number > filled[0] + 1]
    if len(rows) < count:
        missed = len(rows) == count - 1 and _is_atom(comment.split())
        why = "the second line must be a comment" if missed else "it is cut short"
        raise BadInput(
            f"{source}, line {filled[0]}: {count} atoms are announced, but the file ends after "
            f"{len(rows)}; {why}, or the count is wrong"
        )
    if len(rows) > count:
        raise BadInput(
            f"{source}, line {rows[count]}: {count} atoms are announced on line {filled[0]}, but "
            "more lines follow; correct the count, and keep one structure in the file"
        )
    comment, names = _names(comment, f"{source}, line {filled[0] + 1}")
    atoms = [_atom(lines[row - 1].split(), names, f"{source}, line {row}") for row in rows]
    symbols = np.array([symbol for symbol, _ in atoms])
    values = np.array([numbers for _, numbers in atoms], dtype=np.float64)
    line = np.array(rows, dtype=np.int64)
    kept = symbols != "H"
    if not kept.any():
        raise BadInput(f"{source}: holds hydrogens only; a frame of C, N, O, S or B is wanted")
    _check_places(values[:, :3], symbols, line, source)
    return MoleculeFile(
        elements=symbols[kept],
        positions=values[kept, :3].copy(),
        lines=line[kept],
        hydrogens=values[~kept, :3].copy(),
        comment=comment,
        columns={name: values[kept, 3 + k].copy() for k, name in enumerate(names)},
    )


def _count(text: str, where: str) -> int:
    if not (text.isascii() and text.isdigit() and len(text) <= 12):
        raise BadInput(
            f"{where}: {shown(text)} must be the number of atoms alone; XYZ has the count on the "
            "first line, a comment on the second, and then one atom a line"
        )
    count = int(text)
    if count < 1:
        raise BadInput(f"{where}: the number of atoms is {count}; expected 1 or more")
    if count > MOST_ATOMS:
        raise BadInput(
            f"{where}: {count:,} atoms are more than {MOST_ATOMS:,}, the most a molecule may have "
            "here for its rings to fit the memory; cut a smaller piece"
        )
    return count


def _names(comment: str, where: str) -> tuple[str, list[str]]:
    """The comment without its ``columns=`` word, and the names of further columns in it."""
    words = comment.split()
    given = [word for word in words if word.startswith("columns=")]
    if not given:
        return comment, []
    names = given[0].removeprefix("columns=").split(",")
    more = names[len(COLUMNS) :]
    if len(given) > 1 or names[: len(COLUMNS)] != COLUMNS or not all(more):
        raise BadInput(f"{where}: {shown(given[0])} must begin with columns=element,x,y,z")
    if len(set(names)) < len(names):
        raise BadInput(f"{where}: {shown(given[0])} names a column twice")
    return " ".join(word for word in words if word not in given), more


def _atom(words: Sequence[str], names: Sequence[str], where: str) -> tuple[str, list[float]]:
    """Symbol, and x, y, z with the named columns behind them."""
    if len(words) < len(COLUMNS) + len(names):
        wanted = " ".join([*COLUMNS, *names])
        raise BadInput(f"{where}: {shown(' '.join(words))} is no atom; expected {wanted}")
    symbol = _symbol(words[0], where)
    places = [_number(word, name, where) for name, word in zip("xyz", words[1:4], strict=True)]
    if max(map(abs, places)) > LARGEST_PLACE:
        raise BadInput(f"{where}: a position beyond {LARGEST_PLACE:g} angstrom is no molecule's")
    behind = zip(names, words[4 : 4 + len(names)], strict=True)
    return symbol, places + [_number(word, name, where) for name, word in behind]


def _is_atom(words: Sequence[str]) -> bool:
    return len(words) >= len(COLUMNS) and all(map(NUMBER.fullmatch, words[1:4]))


def _symbol(word: str, where: str) -> str:
    name = word.capitalize()
    if word.isascii() and word.isdigit() and 1 <= int(word[:4]) <= len(SYMBOLS):
        name = SYMBOLS[int(word[:4]) - 1]
    elif name in {"D", "T"}:
        name = "H"  # heavy hydrogens are hydrogens
    if name not in SYMBOLS:
        raise BadInput(f"{where}: {shown(word)} is no element; expected a symbol such as C or N")
    if name != "H" and name not in KEPT:
        raise BadInput(
            f"{where}: the element {name} has no p orbital known here; {', '.join(KEPT[:-1])} "
            f"and {KEPT[-1]} are kept, H is dropped"
        )
    return name


def _number(word: str, name: str, where: str) -> float:
    if not NUMBER.fullmatch(word):
        near = "; write a decimal point" if NUMBER.fullmatch(word.replace(",", ".", 1)) else ""
        raise BadInput(f"{where}: {name} = {shown(word)} must be a finite number{near}")
    value = float(word)
    if not math.isfinite(value):
        raise BadInput(f"{where}: {name} = {shown(word)} is too large a number")
    return value


def _check_places(
    places: FloatArray, symbols: TextArray, line: NDArray[np.int64], source: str
) -> None:
    """Refuse atoms that coincide, and positions in another unit."""
    if len(places) < 2:
        return
    distance, nearest = cKDTree(places).query(places, k=2)
    # where two atoms coincide, either may be named as the nearest to itself
    away, other = distance[:, 1], np.where(nearest[:, 1] == np.arange(len(places)), *nearest.T)
    first = int(np.argmin(away))
    pair = sorted((int(line[first]), int(line[other[first]])))
    names = f"atoms on lines {pair[0]} and {pair[1]}"
    if away[first] == 0:
        raise BadInput(f"{source}, line {pair[1]}: {names} stand at the same place; drop one")
    _check_unit(float(np.median(away)), source)
    if away[first] < TOO_NEAR:
        raise BadInput(
            f"{source}, line {pair[1]}: {names} ({symbols[first]} and {symbols[other[first]]}) are "
            f"{away[first]:.3g} angstrom apart, on top of each other; no bond is below {TOO_NEAR}"
        )


def _check_unit(typical: float, source: str) -> None:
    """Say which other unit would make the typical distance that of a bond."""
    if USUAL[0] <= typical <= USUAL[1]:
        return
    for unit, factor in UNITS.items():
        if USUAL[0] <= typical * factor <= USUAL[1]:
            raise BadInput(
                f"{source}: atoms are typically {typical:.3g} apart, which fits {unit}s; positions "
                f"must be in angstrom, so multiply them by {factor:g}"
            )


def xyz_text(
    elements: Sequence[str] | TextArray,
    positions: ArrayLike,
    *,
    comment: str = "",
    columns: Mapping[str, ArrayLike] | None = None,
) -> str:
    """XYZ text of atoms at ``positions`` (angstrom), in full precision.

    Further columns are named in the comment as the reader understands it.

    >>> print(xyz_text(["C"], [[0, 0, 1.4]], columns={"charge": [0.5]}), end="")
    1
    columns=element,x,y,z,charge
    C 0.0 0.0 1.4 0.5
    """
    places = np.asarray(positions, dtype=np.float64)
    more = {name: np.asarray(values, np.float64) for name, values in (columns or {}).items()}
    for name, values in more.items():
        if not re.fullmatch(r"[^\s,=]+", name) or name in COLUMNS:
            raise BadInput(f"the column name {shown(name)} must be one word without , and =")
        if values.shape != (len(places),):
            raise BadInput(
                f"the column {name} has the shape {values.shape}; expected ({len(places)},)"
            )
    if places.shape != (len(elements), 3):
        raise BadInput(f"positions have the shape {places.shape}; expected ({len(elements)}, 3)")
    heading = one_line(comment)
    if more:
        heading = f"{heading} columns={','.join([*COLUMNS, *more])}".strip()
    table = np.column_stack([places, *more.values()])
    return "\n".join([str(len(places)), heading, *_rows(elements, table)]) + "\n"


def _rows(elements: Sequence[str] | TextArray, table: FloatArray) -> Iterator[str]:
    for symbol, values in zip(elements, table.tolist(), strict=True):
        yield " ".join([str(symbol), *map(repr, values)])
