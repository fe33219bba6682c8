"""Strips, seams and rings: sizes, order, folding, sizes that close, sites taken out.

The outside judge is ``brute.py``, which knows the lattices by their geometry alone.
"""

from __future__ import annotations

import dataclasses
import itertools
import math
import re
from pathlib import Path
from typing import Any

import brute
import numpy as np
import pytest
from brute import PERIOD, Case, closes
from hypothesis import given, settings
from hypothesis import strategies as st

from ribbon.errors import BadInput
from ribbon.lattice import (
    Network,
    Ring,
    close_strip,
    closing_sizes,
    double_cover,
    fit_strip,
    lay_strip,
    open_strip,
    read_lattice,
    remove_sites,
    reseam,
)
from ribbon.lattice.seam import fold, make_seam

RINGS = [
    Case("square", 3, 5, 1),
    Case("square", 2, 1, 3),
    Case("honeycomb-zigzag", 3, 2.5, 1),
    Case("honeycomb-zigzag", 2, 3, 2),
    Case("honeycomb-armchair", 4, 1.5, 1),
    Case("triangular", 4, 3.5, 1),
    Case("kagome", 5, 2.5, 3),
    Case("lieb", 3, 2, 1),
]


def ring_of_case(case: Case, **options: Any) -> Ring:
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length, spacing=1.0)
    return close_strip(strip, half_twists=case.half_twists, orbital="s", **options)


# --- strips --------------------------------------------------------------------------------------


@pytest.mark.parametrize("lattice", brute.LATTICES)
@pytest.mark.parametrize("length", [0.5, 1, 2.5, 4])
def test_sites_of_a_strip(lattice: str, length: float) -> None:
    """Places in their written order: by x, then y, from x = 0 up to the circumference."""
    for rows in (1, 2, 3, 5):
        expected = brute.ring_sites(lattice, rows, length)
        if not expected:
            continue
        strip = lay_strip(lattice, rows=rows, length=length, spacing=1.0)
        np.testing.assert_allclose(strip.positions, expected, rtol=0, atol=1e-9)
        assert strip.n == len(expected) == len(strip.species) == len(strip.sublattice)
        assert math.isclose(strip.circumference, length * PERIOD[lattice])


def test_arrays_of_a_strip_are_read_only() -> None:
    """Held arrays cannot be changed from outside."""
    strip = lay_strip("kagome", rows=3, length=2)
    for array in (strip.positions, strip.species, strip.sublattice, strip.cell.x):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = array[1]


@pytest.mark.parametrize(
    ("sizes", "sentence"),
    [
        ({"rows": 0}, "ribbon.rows = 0 must be a whole number"),
        ({"rows": 2.5}, "ribbon.rows = 2.5 must be a whole number"),
        ({"length": 0}, "ribbon.length = 0 must be a positive number"),
        ({"length": math.nan}, "ribbon.length = nan must be a positive number"),
        ({"length": math.inf}, "ribbon.length = inf must be a positive number"),
        ({"spacing": 0.0}, "ribbon.spacing = 0.0 must be a positive length"),
        ({"spacing": math.nan}, "ribbon.spacing = nan must be a positive length"),
        ({"rows": 100_000, "length": 10_000}, "more than 200,000,000 sites"),
    ],
)
def test_impossible_sizes_are_refused(sizes: dict[str, Any], sentence: str) -> None:
    """Before any memory is asked for."""
    with pytest.raises(BadInput, match=sentence):
        lay_strip("square", **{"rows": 3, "length": 4, **sizes})


def test_a_strip_shorter_than_its_first_site_is_refused(tmp_path: Path) -> None:
    """Half a period that holds no site."""
    file = tmp_path / "own.toml"
    file.write_text(
        'name = "own"\nspacing = 1.0\nperiod = 1.0\nrepeat = [0.0, 1.0]\n'
        "lines = [{ y = 0.0, x = [0.6] }]\n",
        encoding="utf-8",
    )
    with pytest.raises(BadInput, match="shorter than the distance between two sites of own"):
        lay_strip(file, rows=1, length=0.5)


# --- the seam ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("given_seam", "sentence"),
    [
        ({"half_twists": -1}, "half_twists = -1 must be a whole number"),
        ({"half_twists": 1.5}, "half_twists = 1.5 must be a whole number"),
        ({"half_twists": 1001}, "half_twists = 1001 must be a whole number from 0 to 1000"),
        ({"half_twists": 1}, "orbital must be stated for half_twists = 1"),
        ({"half_twists": 0, "orbital": "d"}, r"ribbon.orbital = 'd' must be \"s\" or \"pz\""),
        ({"half_twists": 0, "seam": -1}, "seam = -1 must be from 0 to 4"),
        ({"half_twists": 0, "seam": 5}, "seam = 5 must be from 0 to 4"),
        ({"half_twists": 0, "shells": 4}, "4 shells of neighbours are asked for, but .* names 3"),
        ({"half_twists": 0, "shells": 0}, "0 shells of neighbours are asked for"),
    ],
)
def test_a_seam_that_makes_no_sense_is_refused(given_seam: dict[str, Any], sentence: str) -> None:
    """What was given, and what is possible."""
    with pytest.raises(BadInput, match=sentence):
        close_strip(lay_strip("square", rows=2, length=4), **given_seam)


def test_orbital_factors() -> None:
    """sigma^(h w): only "pz" with odd h and odd winding is negative; backward is the inverse."""
    strip = lay_strip("square", rows=2, length=4)
    winding = np.array([-2, -1, 0, 1, 2, 3])
    odd = [1.0, -1.0, 1.0, -1.0, 1.0, -1.0]
    for half_twists, orbital in itertools.product((1, 2, 3), ("s", "pz")):
        expected = odd if orbital == "pz" and half_twists % 2 else [1.0] * 6
        found = make_seam(strip, half_twists, orbital).factor(winding)  # type: ignore[arg-type]
        assert found.tolist() == expected


@pytest.mark.parametrize("case", RINGS)
def test_folding_carries_sites_to_the_place_the_seam_says(case: Case) -> None:
    """(x, y) is the site at (x - w L, (-1)^(h w) y), for five turns either way."""
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length, spacing=1.0)
    seam = make_seam(strip, case.half_twists, "s")
    reach = 5 * strip.n
    number = np.arange(-reach, reach)
    site, winding = fold(strip, seam, number)
    assert site.min() >= 0
    assert site.max() < strip.n
    period, place = np.divmod(number, strip.cell.n)
    x = strip.cell.x[place] + period * strip.cell.period
    flip = np.where(case.half_twists * winding % 2, -1.0, 1.0)
    folded = np.column_stack([x - winding * strip.circumference, flip * strip.cell.y[place]])
    np.testing.assert_allclose(strip.positions[site], folded, rtol=0, atol=1e-9)
    inside = (number >= 0) & (number < strip.n)
    np.testing.assert_array_equal(site[inside], number[inside])
    assert not winding[inside].any()


def test_species_decide_whether_a_ring_closes_and_sublattices_do_not() -> None:
    """Zigzag: with two species the flip exchanges unlike atoms (boron nitride does not close)."""
    honeycomb = read_lattice("honeycomb-zigzag")
    lines = tuple(
        dataclasses.replace(line, species=(kind,))
        for line, kind in zip(honeycomb.lines, ("B", "N"), strict=True)
    )
    nitride = dataclasses.replace(honeycomb, name="nitride", lines=lines)
    strip = lay_strip(nitride, rows=4, length=6)
    assert close_strip(strip, half_twists=2).n == strip.n
    with pytest.raises(BadInput, match="this lattice has no mirror across the strip"):
        close_strip(strip, half_twists=1, orbital="s")
    carbon = lay_strip(honeycomb, rows=4, length=6)
    assert set(carbon.sublattice.tolist()) == {"A", "B"}
    assert close_strip(carbon, half_twists=1, orbital="s").flips


@pytest.mark.parametrize("lattice", brute.LATTICES)
@pytest.mark.parametrize("half_twists", [0, 1])
def test_sizes_that_close(lattice: str, half_twists: int) -> None:
    """Every size named closes, nearest first, and none nearer is left out.

    Armchair strips of one row close but fall into dimers: they are not offered.
    """
    for rows, length in itertools.product((2, 3, 4), (4, 4.5)):
        found = closing_sizes(lattice, rows=rows, length=length, half_twists=half_twists, count=5)
        assert len(found) == len(set(found)) == 5
        assert all(closes(lattice, *size, half_twists) for size in found)

        def away(size: tuple[int, float], here: tuple[int, float] = (rows, length)) -> float:
            return 2 * abs(size[0] - here[0]) + abs(size[1] - here[1])

        assert [away(size) for size in found] == sorted(away(size) for size in found)
        lowest = 2 if lattice == "honeycomb-armchair" else 1
        near = itertools.product(range(lowest, 9), (3.5, 4.0, 4.5, 5.0))
        left_out = {size for size in near if closes(lattice, *size, half_twists)} - set(found)
        assert min(map(away, left_out)) >= away(found[-1])
        assert (found[0] == (rows, length)) == closes(lattice, rows, length, half_twists)


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "half_twists"),
    [
        ("square", 3, 4.5, 1),
        ("honeycomb-zigzag", 3, 4, 1),
        ("honeycomb-zigzag", 4, 4.5, 0),
        ("honeycomb-armchair", 4, 4, 1),
        ("kagome", 4, 4, 1),
        ("lieb", 4, 4, 3),
    ],
)
def test_a_refusal_names_sizes_that_do_close(
    lattice: str, rows: int, length: float, half_twists: int
) -> None:
    """The sentence is read back and each size in it is tried."""
    with pytest.raises(BadInput, match="does not close") as refusal:
        close_strip(
            lay_strip(lattice, rows=rows, length=length), half_twists=half_twists, orbital="s"
        )
    sentence = str(refusal.value)
    assert f"ribbon.rows = {rows} and ribbon.length = {length:g}" in sentence
    named = re.findall(r"rows = (\d+) with length = ([\d.]+)", sentence)
    assert len(named) == 4
    for row, long in named:
        assert closes(lattice, int(row), float(long), half_twists)


@settings(max_examples=10)
@given(
    lattice=st.sampled_from(brute.LATTICES),
    half_twists=st.sampled_from([0, 1, 2]),
    width=st.floats(0.5, 6.0),
    around=st.floats(2.0, 12.0),
)
def test_the_nearest_size_that_closes(
    lattice: str, half_twists: int, width: float, around: float
) -> None:
    """From nm: it closes, and no other size near is better by more than one line of sites.

    What counts is the error in width plus that in length; armchair rings have 2 rows or more.
    """
    size = fit_strip(lattice, half_twists=half_twists, spacing=0.5, width=width, length_nm=around)
    assert closes(lattice, *size, half_twists)

    def error(rows: int, length: float) -> float:
        strip = lay_strip(lattice, rows=rows, length=length, spacing=0.5)
        return abs(strip.width - width) + abs(strip.circumference - around)

    lowest = 2 if lattice == "honeycomb-armchair" else 1
    near = itertools.product(
        range(max(lowest, size[0] - 3), size[0] + 4),
        (size[1] + step / 2 for step in range(-3, 4) if size[1] + step / 2 > 0),
    )
    best = min(error(*other) for other in near if closes(lattice, *other, half_twists))
    assert error(*size) <= best + 0.5 + 1e-9


def test_what_is_given_as_a_number_is_kept() -> None:
    """Rows or length in periods stay; only the other gives way."""
    size = fit_strip("honeycomb-zigzag", half_twists=1, rows=3, length_nm=20 * 0.142 * math.sqrt(3))
    assert size in {(3, 19.5), (3, 20.5)}
    rows, length = fit_strip("honeycomb-zigzag", half_twists=1, width=1.0, length=20.5)
    assert length == 20.5
    assert rows % 2 == 1
    assert fit_strip("square", half_twists=1, rows=3, length=7) == (3, 7.0)


@pytest.mark.parametrize(
    ("wanted", "sentence"),
    [
        ({"width": -1.0, "length": 5}, "ribbon.width_nm = -1.0 must be a positive length"),
        ({"width": math.nan, "length": 5}, "ribbon.width_nm = nan must be a positive length"),
        ({"width": 1e7, "length": 5}, "rows wide"),
        ({"rows": 3, "length_nm": 1e12}, "no machine holds it"),
        ({"rows": 3, "length": 4.25}, "no square ribbon near rows = 3 and length = 4.25 closes"),
    ],
)
def test_sizes_that_nothing_fits(wanted: dict[str, Any], sentence: str) -> None:
    """One sentence with what was wanted."""
    with pytest.raises(BadInput, match=sentence):
        fit_strip("square", half_twists=1, **wanted)


# --- rings ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("case", RINGS)
def test_bonds_lead_from_tail_to_head(case: Case) -> None:
    """Displacement = image of head - tail, w turns on; half as many bonds as brute-force steps."""
    ring = ring_of_case(case, shells=3)
    bonds = ring.bonds
    image = ring.positions[bonds.head].copy()
    image[case.half_twists * bonds.winding % 2 == 1, 1] *= -1
    image[:, 0] += bonds.winding * ring.circumference
    np.testing.assert_allclose(
        image - ring.positions[bonds.tail], bonds.displacement, rtol=0, atol=1e-9
    )
    assert 2 * bonds.m == len(brute.steps(*case[:4], shells=3))
    np.testing.assert_array_equal(bonds.mirrored, case.half_twists * bonds.winding % 2 == 1)


@pytest.mark.parametrize("case", RINGS)
@pytest.mark.parametrize("seam", [1, 2])
def test_bonds_with_the_seam_further_on(case: Case, seam: int) -> None:
    """Moved sites stand at their image beyond the far end, and displacements follow."""
    slices = len({round(x, 6) for x, _ in brute.ring_sites(*case[:3])})
    ring = ring_of_case(case, seam=min(seam, slices))
    bonds = ring.bonds
    image = ring.positions[bonds.head].copy()
    image[case.half_twists * bonds.winding % 2 == 1, 1] *= -1
    image[:, 0] += bonds.winding * ring.circumference
    np.testing.assert_allclose(
        image - ring.positions[bonds.tail], bonds.displacement, rtol=0, atol=1e-9
    )
    assert np.ptp(ring.positions[:, 0]) < ring.circumference


@pytest.mark.parametrize("case", RINGS)
def test_the_open_strip_has_the_bonds_that_need_no_seam(case: Case) -> None:
    """Same sites, the bonds of winding 0."""
    ring = ring_of_case(case, shells=2)
    flat = open_strip(ring.strip, shells=2)
    inner = ring.bonds.winding == 0
    np.testing.assert_array_equal(flat.positions, ring.positions)
    np.testing.assert_array_equal(flat.bonds.tail, ring.bonds.tail[inner])
    np.testing.assert_array_equal(flat.bonds.head, ring.bonds.head[inner])
    np.testing.assert_array_equal(flat.bonds.shell, ring.bonds.shell[inner])
    assert not flat.bonds.winding.any()


@given(case=st.sampled_from(RINGS), seed=st.integers(0, 2**32 - 1))
def test_taking_out_sites_one_after_another(case: Case, seed: int) -> None:
    """In any order and in any portions: the same ring, each site remembering its number."""
    ring = ring_of_case(case)
    rng = np.random.default_rng(seed)
    gone = rng.permutation(ring.n)[: rng.integers(1, ring.n)]
    at_once = remove_sites(ring, gone)
    assert at_once.kept is not None
    kept = at_once.kept
    np.testing.assert_array_equal(kept, np.setdiff1d(np.arange(ring.n), gone))
    np.testing.assert_array_equal(at_once.positions, ring.positions[kept])
    np.testing.assert_array_equal(at_once.sublattice, ring.strip.sublattice[kept])
    step = ring
    left = np.arange(ring.n)
    for site in gone:
        step = remove_sites(step, [int(np.flatnonzero(left == site)[0])])
        left = left[left != site]
    assert step.kept is not None
    np.testing.assert_array_equal(step.kept, kept)
    for name in ("tail", "head", "winding", "displacement"):
        np.testing.assert_array_equal(getattr(step.bonds, name), getattr(at_once.bonds, name))
    assert reseam(at_once, complete=True).n == ring.n
    again = reseam(at_once)
    np.testing.assert_array_equal(again.bonds.head, at_once.bonds.head)
    cover, lift = double_cover(at_once)
    assert cover.n == 2 * at_once.n
    np.testing.assert_array_equal(np.bincount(lift, minlength=at_once.n), 2)


def test_sites_that_cannot_be_taken_out() -> None:
    """None left, or no such site."""
    ring = ring_of_case(RINGS[0])
    with pytest.raises(BadInput, match="cannot remove site 15: sites are numbered 0 to 14"):
        remove_sites(ring, [15])
    with pytest.raises(BadInput, match="removing every site leaves nothing"):
        remove_sites(ring, np.arange(15))
    assert remove_sites(ring, []).n == 15


def test_closing_anew_changes_only_what_is_asked() -> None:
    """Another orbital, number of half twists or seam; shells and strip stay."""
    ring = ring_of_case(Case("honeycomb-zigzag", 4, 3, 1), shells=2)
    assert reseam(ring, orbital="pz").orbital == "pz"
    assert reseam(ring, half_twists=2).half_twists == 2
    assert reseam(ring, seam=2).seam == 2
    for changed in (reseam(ring, orbital="pz"), reseam(ring, half_twists=0), reseam(ring, seam=1)):
        assert (changed.shells, changed.strip) == (2, ring.strip)


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        ({"positions": [[0.0, 0.0], [1.0, np.nan]]}, "a position is not a finite number"),
        ({"positions": [[0.0], [1.0]]}, r"shape \(2, 1\); expected \(n, 2\) or \(n, 3\)"),
        ({"sites": 1}, "names a site outside 0 to 0"),
    ],
)
def test_networks_that_make_no_sense(options: dict[str, Any], sentence: str) -> None:
    """Places and numbers are checked when a network is made."""
    with pytest.raises(BadInput, match=sentence):
        Network.from_pairs([(0, 1)], **options)


def test_a_bond_to_nowhere_is_refused() -> None:
    """Bonds are checked against the sites by every network, rings included."""
    ring = ring_of_case(RINGS[0])
    for site in (99, -2):
        head = np.append(ring.bonds.head[1:], site)
        bonds = dataclasses.replace(ring.bonds, head=head)
        with pytest.raises(BadInput, match=f"a bond names site {site}, but .* numbered 0 to 14"):
            dataclasses.replace(ring, bonds=bonds)


@pytest.mark.parametrize("dimension", [2, 3])
def test_places_of_a_plain_network(dimension: int) -> None:
    """Displacements are differences of the places, in the plane and in space."""
    places = np.arange(3 * dimension, dtype=float).reshape(3, dimension) ** 2
    network = Network.from_pairs([(2, 0), (1, 2)], positions=places)
    np.testing.assert_array_equal(
        network.bonds.displacement, [places[0] - places[2], places[2] - places[1]]
    )
    assert network.n == 3
