"""Lattice files: what is on the shelf, what is found from the sites, and what is refused.

Distances and numbers of neighbours are those of the plane tilings (J. H. Conway & N. J. A.
Sloane, Sphere Packings, Lattices and Groups, for square and triangular; the others follow from
taking sites out of these).
"""

from __future__ import annotations

import dataclasses
import math
import tomllib
from pathlib import Path
from typing import Any

import brute
import numpy as np
import pytest

from ribbon.errors import BadInput
from ribbon.lattice import Lattice, Line, close_strip, lay_strip, read_lattice, shelf

ROOT3 = math.sqrt(3.0)
NEIGHBOURS = {
    "square": {"A": (4, 4, 4)},
    "triangular": {"A": (6, 6, 6)},
    "honeycomb-zigzag": {"A": (3, 6, 3), "B": (3, 6, 3)},
    "honeycomb-armchair": {"A": (3, 6, 3), "B": (3, 6, 3)},
    "kagome": {"A": (4, 4, 6), "B": (4, 4, 6), "C": (4, 4, 6)},
    "lieb": {"A": (4, 0, 4), "B": (2, 4, 4), "C": (2, 4, 4)},
}


def line(y: float, *x: float, species: str = "C", sublattice: str = "A") -> Line:
    return Line(y=y, x=x, species=(species,) * len(x), sublattice=(sublattice,) * len(x))


def lattice(**changes: Any) -> Lattice:
    """A square lattice of one's own, with changes."""
    given = {
        **{"name": "own", "spacing": 0.2, "period": 1.0, "repeat": (0.0, 1.0)},
        **{"lines": (line(0.0, 0.0),), **changes},
    }
    return Lattice(**given)


def test_the_shelf_holds_the_lattices_that_are_promised() -> None:
    """Square, honeycomb with both edges, triangular, kagome, Lieb."""
    assert set(shelf()) == set(brute.LATTICES) == set(NEIGHBOURS)


@pytest.mark.parametrize("name", brute.LATTICES)
def test_a_shelf_file_says_what_is_read(name: str) -> None:
    """Every key of the TOML is a field; names agree with the file; sources are given."""
    with shelf()[name].open("rb") as stream:
        table = tomllib.load(stream)
    found = read_lattice(name)
    assert found.name == table["name"] == name
    assert found.source == table["source"] != ""
    assert found.about
    assert (found.spacing, found.period) == (table["spacing"], table["period"])
    assert found.repeat == tuple(table["repeat"])
    assert [entry.y for entry in found.lines] == [entry["y"] for entry in table["lines"]]
    assert found.shells == tuple(table["shells"])


@pytest.mark.parametrize("name", brute.LATTICES)
def test_shells_left_out_are_found_from_the_sites(name: str) -> None:
    """Distances of first to third neighbours."""
    found = dataclasses.replace(read_lattice(name), shells=())
    np.testing.assert_allclose(found.shells, brute.SHELLS[name], rtol=0, atol=1e-12)


@pytest.mark.parametrize("name", brute.LATTICES)
@pytest.mark.parametrize("shell", [1, 2, 3])
def test_numbers_of_neighbours(name: str, shell: int) -> None:
    """Sites of the middle line or two of a wide plain ring have those of the plane."""
    ring = close_strip(lay_strip(name, rows=13, length=7), half_twists=0, shells=3)
    chosen = ring.bonds.shell == shell
    ends = np.concatenate([ring.bonds.tail[chosen], ring.bonds.head[chosen]])
    degree = np.bincount(ends, minlength=ring.n)
    middle = np.abs(ring.positions[:, 1]) <= 2.1 * ring.strip.spacing
    for label, counts in NEIGHBOURS[name].items():
        here = middle & (ring.sublattice == label)
        assert here.any()
        assert set(degree[here].tolist()) == {counts[shell - 1]}


@pytest.mark.parametrize("name", brute.LATTICES)
def test_every_shell_has_its_length(name: str) -> None:
    """Displacements of the bonds, in nm."""
    strip = lay_strip(name, rows=4, length=3, spacing=0.3)
    bonds = close_strip(strip, half_twists=0, shells=3).bonds
    length = np.hypot(*bonds.displacement.T) / 0.3
    np.testing.assert_allclose(
        length, np.array(brute.SHELLS[name])[bonds.shell - 1], rtol=0, atol=1e-9
    )
    assert set(bonds.shell.tolist()) == {1, 2, 3}


def test_line_heights_run_on_beyond_the_cycle() -> None:
    """Zigzag chains: 0, 1/2, 3/2, 2 ...; below them -1, -3/2."""
    heights = [read_lattice("honeycomb-zigzag").line_height(number) for number in range(-2, 4)]
    assert heights == [-1.5, -1.0, 0.0, 0.5, 1.5, 2.0]


@pytest.mark.parametrize(
    ("name", "width"),
    [
        ("square", lambda rows: rows + 1),
        ("honeycomb-armchair", lambda rows: (rows + 1) * ROOT3 / 2),
        ("honeycomb-zigzag", lambda rows: (3 * rows + 2) / 2),
        ("triangular", lambda rows: (rows + 1) * ROOT3 / 2),
    ],
)
def test_width_between_hard_walls(name: str, width: Any) -> None:
    """The wave functions vanish on the first missing rows: Brey & Fertig, Phys. Rev. B 73,
    235411 (2006), for graphene; (rows + 1) a for the square lattice."""
    for rows in (1, 2, 5, 8):
        found = lay_strip(name, rows=rows, length=4, spacing=0.25).width
        assert math.isclose(found, 0.25 * width(rows), rel_tol=1e-12)


def test_spacing_scales_and_defaults_to_the_file() -> None:
    """0.142 nm for graphene; another spacing scales everything."""
    graphene = lay_strip("honeycomb-zigzag", rows=2, length=3)
    assert math.isclose(graphene.spacing, 0.142)
    assert math.isclose(graphene.period, 0.142 * ROOT3)
    double = lay_strip("honeycomb-zigzag", rows=2, length=3, spacing=0.284)
    np.testing.assert_allclose(double.positions, 2 * graphene.positions, rtol=0, atol=1e-15)
    assert math.isclose(double.circumference, 2 * graphene.circumference)


def test_a_lattice_is_read_by_name_text_or_path(tmp_path: Path) -> None:
    """A text with a slash or .toml is a path; anything else a name; a Path always a path."""
    file = tmp_path / "honey.toml"
    file.write_text(shelf()["kagome"].read_text(encoding="utf-8"), encoding="utf-8")
    for given in (file, str(file), "kagome"):
        assert read_lattice(given) == read_lattice("kagome")


def test_labels_may_stand_for_a_line_or_for_each_site(tmp_path: Path) -> None:
    """One text for all sites of a line, or a list; left out, "site" and "A"."""
    file = tmp_path / "own.toml"
    file.write_text(
        'name = "own"\nspacing = 0.5\nperiod = 2.0\nrepeat = [0.0, 1.0]\n'
        'lines = [{ y = 0, x = [0, 1], sublattice = ["A", "B"] }]\n',
        encoding="utf-8",
    )
    found = read_lattice(file)
    assert found.lines[0].species == ("site", "site")
    assert found.lines[0].sublattice == ("A", "B")
    assert (found.lines_per_row, found.about, found.shells[0]) == (1, "", 1.0)


def test_a_lattice_is_frozen() -> None:
    """Changes go through dataclasses.replace, which checks again."""
    own = lattice()
    with pytest.raises(dataclasses.FrozenInstanceError):
        own.spacing = 1.0  # type: ignore[misc]
    with pytest.raises(BadInput, match="spacing"):
        dataclasses.replace(own, spacing=-1.0)


def test_a_lattice_without_a_mirror_still_makes_plain_rings() -> None:
    """An oblique lattice: rows of its own, found at the distances of its own sites."""
    oblique = lattice(repeat=(0.3, 1.0))
    np.testing.assert_allclose(
        oblique.shells, [1.0, math.hypot(0.3, 1.0), math.hypot(0.7, 1.0)], rtol=0, atol=1e-12
    )
    ring = close_strip(lay_strip(oblique, rows=3, length=5), half_twists=0, shells=2)
    assert ring.bonds.m == 3 * 5 + 2 * 5
    with pytest.raises(BadInput, match="does not close with half_twists = 1"):
        close_strip(lay_strip(oblique, rows=3, length=5), half_twists=1, orbital="s")


WRONG = [
    ({"spacing": 0.0}, "spacing = 0.0 must be a positive number"),
    ({"spacing": math.inf}, "spacing = inf must be a positive number"),
    ({"period": -1.0}, "period = -1.0 must be a positive number"),
    ({"repeat": (0.0, -1.0)}, "step across"),
    ({"lines_per_row": 0}, "lines_per_row = 0 must be from 1 to 1000"),
    ({"lines": (line(0.5, 0.0), line(0.0, 0.0))}, "bottom to top"),
    ({"lines": (line(0.0, 0.0), line(1.0, 0.0))}, "lower than its step"),
    ({"lines": (line(0.0, 0.0, 1.0),)}, "stand on the same place"),
    ({"period": 1e-4, "repeat": (0.0, 1e-4), "lines": (line(0.0, 0.0),)}, "of spacing 1"),
    ({"shells": (1.0, 1.0)}, "one to three growing distances"),
    ({"shells": (1.0, 1.41421356, 2.0, 2.2360679)}, "one to three growing distances"),
    ({"shells": (1.2,)}, "names the distance 1.2, which no two sites have; the nearest"),
]


@pytest.mark.parametrize(("changes", "sentence"), WRONG)
def test_an_impossible_lattice_is_refused(changes: dict[str, Any], sentence: str) -> None:
    """Each with what was given."""
    with pytest.raises(BadInput, match=sentence):
        lattice(**changes)


HEAD = 'name = "own"\nspacing = 1.0\nperiod = 1.0\nrepeat = [0.0, 1.0]\n'
LINES = "lines = [{ y = 0.0, x = [0.0] }]\n"
WRONG_FILES = [
    (LINES, "the key 'name' is missing"),
    (HEAD.replace("period = 1.0\n", "") + LINES, "the key 'period' is missing"),
    (HEAD.replace('"own"', "7") + LINES, "name = 7 must be a text"),
    (HEAD + LINES + "about = 1\n", "about = 1 must be a text"),
    (HEAD + LINES + "lines_per_row = 1.5\n", "lines_per_row = 1.5 must be a whole number"),
    (HEAD + LINES + "lines_per_row = true\n", "lines_per_row = True must be a whole number"),
    (HEAD.replace("spacing = 1.0", "spacing = true") + LINES, "spacing = True must be a number"),
    (HEAD.replace("1.0]", "1e7]") + LINES, "must be finite and at most"),
    (HEAD.replace("[0.0, 1.0]", "[1.0]") + LINES, "two numbers"),
    (HEAD.replace("[0.0, 1.0]", "1.0") + LINES, "must be a list of numbers"),
    (HEAD + "lines = [{ y = 0.0, x = [] }]\n", r"lines\[0\].x is empty"),
    (HEAD + "lines = [3]\n", r"lines\[0\] must be a table"),
    (HEAD + 'lines = [{ y = 0, x = [0], sublattice = ["A", "B"] }]\n', "a list of 1 texts"),
    (HEAD + LINES + "shells = 1.0\n", "shells = 1.0 must be a list of numbers"),
]


@pytest.mark.parametrize(("text", "sentence"), WRONG_FILES)
def test_a_wrong_file_is_named_in_the_sentence(text: str, sentence: str, tmp_path: Path) -> None:
    """The path of the file first, then the key."""
    file = tmp_path / "own.toml"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(BadInput, match=rf"lattice file .*own\.toml: .*{sentence}"):
        read_lattice(file)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    """Unknown name, missing file, folder, huge file."""
    with pytest.raises(BadInput, match=r'"hexagons" is not on the shelf; there are .*kagome'):
        read_lattice("hexagons")
    with pytest.raises(BadInput, match="No such file"):
        read_lattice(tmp_path / "none.toml")
    with pytest.raises(BadInput, match="this is a folder"):
        read_lattice(tmp_path)
    huge = tmp_path / "huge.toml"
    huge.write_text("#" * 1_000_001, encoding="utf-8")
    with pytest.raises(BadInput, match="larger than 1 MB"):
        read_lattice(huge)


def test_large_cells_are_read_with_a_short_search() -> None:
    """A super-cell of 30 x 30 square sites: the same shells, by the sites near each other only."""
    lines = tuple(
        Line(
            y=float(row),
            x=tuple(float(i) for i in range(30)),
            species=("site",) * 30,
            sublattice=("A",) * 30,
        )
        for row in range(30)
    )
    found = Lattice(name="super", spacing=1.0, period=30.0, repeat=(0.0, 30.0), lines=lines)
    np.testing.assert_allclose(found.shells, [1.0, np.sqrt(2), 2.0], rtol=0, atol=1e-9)
