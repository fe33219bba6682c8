"""A commented ribbon file to start from; it reads back valid and its ribbon closes."""

from __future__ import annotations

import os
from pathlib import Path

from ribbon.lattice import Lattice, closing_sizes, read_lattice
from ribbon.study.toml_text import toml_value

__all__ = ["starter"]

USUAL_SIZE = (5, 24)
USUAL_SIZES = {
    "honeycomb-zigzag": (8, 40),
    "honeycomb-armchair": (7, 24),
    "square": (5, 30),
}

TEXT = """\
# A ribbon file: what to build and what to ask. Check it with `ribbon describe {name}`,
# run it with `ribbon study {name}`. Keys that are commented out show other choices;
# every key but lattice, rows, length and (where half_twists is odd) orbital has a default.
title = {title}

[ribbon]
lattice = {lattice}  # a name from `ribbon lattices`, or a path to a lattice file (.toml)
rows = {rows}  # across; what one row is, `ribbon lattices` says
length = {length:g}  # lattice periods along; x.5 where the closure needs it
# width_nm = 3.0  # instead of rows: the nearest width that closes is taken
# length_nm = 10.0  # instead of length
half_twists = {half_twists}  # 0 plain ring, 1 Möbius, 2 full twist ...
orbital = {orbital}  # "s": even under the flip; "pz": changes sign with each half twist
# spacing = {spacing!r}  # nm between nearest neighbours; this is what the lattice file says

[hopping]
unit = {unit}  # eV, meV, t, beta, THz, GHz, MHz
shells = [{hopping}]  # t of first, second and third neighbours; H = -t on a bond
# mass = 0.067  # instead of shells, square lattice only: effective mass, t = hbar^2/(2 m* a^2)
site_energy = 0.0  # a number, or {{ A = 0.1, B = -0.1 }} by sublattice
# site_table = "sites.csv"  # instead of site_energy: a CSV table with the columns site,energy

[field]
flux = 0.0  # flux quanta h/e through the ring
gauge = "uniform"  # or "seam": where the phases stand; the levels are the same

[disorder]
strength = 0.0  # full width of the uniform distribution of site energies, in the unit
vacancies = 0.0  # fraction of sites taken out
seed = 1  # the same seed draws the same sites and energies

[levels]
count = 40  # that many levels, nearest to `near`
near = {near}
# all = true  # instead of count: the whole spectrum
# between = [-0.5, 0.5]  # instead of count: every level between two energies
# method = "auto"  # or "symmetry", "dense", "sparse": how they are found
broadening = 0.02  # width of each level in the density of states, in the unit

[sweep]
flux = {{ from = 0.0, to = 1.0, points = 101 }}
electrons = "neutral"  # one electron a site, or a number
# chemical_potential = 0.0  # instead of electrons
spin = 2  # electrons that a level holds: 1 or 2
temperature = 0.0  # K; needs eV or meV

[edges]
# within_nm = {within:.4g}  # reach of an edge in nm; left out, two nearest-neighbour bonds

[continuum]
refinements = 3  # meshes finer than this one, for the comparison with the continuum

[control]
compare = ["plain", "double"]  # also "open"; plain: untwisted, double: twice as long
"""

FLAT_AVOIDED = {"lieb": 1.0}
"""Where a window shows something: the middle of the Lieb band is one flat shell."""


def starter(lattice: str | Path = "honeycomb-zigzag", *, path: str | Path = "ribbon.toml") -> str:
    """Text of a ribbon file for a lattice from the shelf or a lattice file.

    ``path`` is where the text will stand: a lattice file is named relative to that folder.
    Raises `BadInput` when the lattice cannot be read.

    >>> print(starter("square").splitlines()[6])
    lattice = "square"  # a name from `ribbon lattices`, or a path to a lattice file (.toml)
    """
    definition = read_lattice(lattice)
    half_twists, (rows, length) = _size(definition)
    carbon = {name for line in definition.lines for name in line.species} == {"C"}
    twists = "with a half twist" if half_twists else "without a twist"
    return TEXT.format(
        name=Path(path).name,
        title=toml_value(f"Ribbon of {definition.name} {twists}"),
        lattice=toml_value(_reference(lattice, Path(path).parent)),
        rows=rows,
        length=length,
        half_twists=half_twists,
        orbital=toml_value("pz" if carbon else "s"),
        spacing=definition.spacing,
        within=2 * definition.spacing,
        unit=toml_value("eV" if carbon else "t"),
        hopping=2.7 if carbon else 1.0,
        near=FLAT_AVOIDED.get(definition.name, 0.0),
    )


def _size(lattice: Lattice) -> tuple[int, tuple[int, float]]:
    """Half twists and a size that closes with them: one half twist wherever that is possible.

    A single row closes anywhere but is a chain, not a ribbon; a plain ring of whole periods
    always closes.
    """
    rows, length = USUAL_SIZES.get(lattice.name, USUAL_SIZE)
    sizes = closing_sizes(lattice, rows=rows, length=length, half_twists=1)
    ribbons = [size for size in sizes if size[0] > 1]
    return (1, ribbons[0]) if ribbons else (0, (rows, length))


def _reference(lattice: str | Path, folder: Path) -> str:
    """How a file in ``folder`` names the lattice: by name, or by the path from there."""
    text = str(lattice)
    if isinstance(lattice, str) and not text.endswith(".toml") and "/" not in text:
        return text
    path = Path(os.path.relpath(text, folder)).as_posix()
    return path if "/" in path or path.endswith(".toml") else f"./{path}"
