"""Hopping between orbitals along normals in space, and in a uniform field, against closed forms.

Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache
from typing import Any

import networkx as nx
import numpy as np
import pytest

from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.hopping.field import UniformField, peierls_turns, report_flux
from ribbon.hopping.space import SpaceRule, space_hopping
from ribbon.lattice import Network, close_strip, lay_strip, open_strip, remove_sites, reseam
from ribbon.lattice.relax import relax
from ribbon.lattice.space import RingInSpace, find_midline, place_in_space

EXACT = 1e-10
SIGNS = SpaceRule(tilt=False, lengths=False)
QUANTUM = 4.135667696923859e-15
"""h/e in Wb, exact in the SI."""
ROUND = [
    ("honeycomb-zigzag", 2, 12, 1),
    ("honeycomb-zigzag", 3, 12.5, 3),
    ("honeycomb-armchair", 4, 9.5, 1),
    ("honeycomb-armchair", 5, 10, 2),
    ("square", 1, 14, 1),
    ("square", 4, 16, 3),
    ("kagome", 3, 8, 1),
    ("triangular", 4, 16.5, 1),
]


@lru_cache
def space_of(shape: Any, hand: Any = "left", shells: int = 1, orbital: Any = "pz") -> Any:
    strip = lay_strip(shape[0], rows=shape[1], length=shape[2])
    ring = close_strip(strip, half_twists=shape[3], orbital=orbital, shells=shells)
    return place_in_space(ring, handedness=hand)


def levels(hamiltonian: Any, flux: float = 0.0, **options: Any) -> np.ndarray:
    dense = hamiltonian.matrix(flux, **options).toarray()
    np.testing.assert_allclose(dense, dense.conj().T, rtol=0, atol=1e-14)
    return np.linalg.eigvalsh(dense)


def same(one: np.ndarray, other: np.ndarray, atol: float = EXACT) -> None:
    np.testing.assert_allclose(one, other, rtol=0, atol=atol)


def slater_koster(space: Any, t: float, decay: float, v_sigma: float) -> np.ndarray:
    """The matrix written out bond by bond from the formula, as an outside judge."""
    ring, places, normals = space.ring, space.positions, space.normals
    spacing = ring.strip.spacing
    matrix = np.zeros((ring.n, ring.n))
    for i, j in zip(ring.bonds.tail, ring.bonds.head, strict=True):
        step = places[j] - places[i]
        long = np.linalg.norm(step)
        ni, nj = normals[i] @ step / long, normals[j] @ step / long
        fall = np.exp(-decay * (long / spacing - 1))
        value = (-t * (normals[i] @ normals[j] - ni * nj) + v_sigma * ni * nj) * fall
        matrix[i, j] += value
        matrix[j, i] += value
    return matrix


# --- signs, tilt, lengths ------------------------------------------------------------------------


@pytest.mark.parametrize("hand", ["left", "right"])
@pytest.mark.parametrize("shape", ROUND)
def test_signs_of_the_normals_alone_give_the_flat_pz_levels(shape: Any, hand: Any) -> None:
    """The reversal of the normal is the p_z sign of the seam (Heilbronner, Tetrahedron Lett. 5,
    1923 (1964) [M]), also at a flux, whatever the orbital of the ring; it is not applied twice."""
    for orbital in ("s", "pz"):
        space = space_of(shape, hand, orbital=orbital)
        found = space_hopping(space, Hopping(), rule=SIGNS)
        flat = assemble(replace(space.ring, closure=space_of(shape).ring.closure), Hopping())
        for flux in (0.0, 0.137):
            same(levels(found, flux), levels(flat, flux))
            same(levels(found, flux, gauge="seam"), levels(flat, flux))


@pytest.mark.parametrize("shape", ROUND)
def test_random_signs_of_normals_change_no_level(shape: Any) -> None:
    """A sign of one orbital is a gauge: D H D with D diagonal of +-1 has the same levels."""
    space = space_of(shape)
    signs = np.random.default_rng(4).choice([-1.0, 1.0], size=space.n)
    hopping = Hopping(shells=(2.7,), unit="eV")
    rule = SpaceRule(v_sigma=5.0)
    one = space_hopping(space, hopping, rule=rule)
    other = space_hopping(space, hopping, rule=rule, normals=3 * space.normals * signs[:, None])
    same(levels(other, 0.137), levels(one, 0.137))
    turned = signs[:, None] * one.matrix().toarray() * signs
    same(other.matrix().toarray(), turned)


@pytest.mark.parametrize("length", [5, 8, 9])
@pytest.mark.parametrize("flux", [0.0, 0.31])
def test_twisted_cyclacene_belts(length: int, flux: float) -> None:
    """[n]cyclacene closed with a half twist, p_z: x = (s +- sqrt(9 + 8 cos k))/2, k = 2 pi (j +
    flux)/n for mirror-odd (s = -1) and a half more in the bracket for mirror-even ones (s = +1),
    found from Coulson's acenes (Proc. Phys. Soc. 60, 257 (1948) [M]) by the closure; H = -x."""
    space = space_of(("honeycomb-zigzag", 2, length, 1))
    j = np.arange(length)
    expected = []
    for s in (1, -1):
        k = 2 * np.pi * (j + flux + (0.5 if s == 1 else 0.0)) / length
        root = np.sqrt(9 + 8 * np.cos(k))
        expected += [-(s + root) / 2, -(s - root) / 2]
    found = levels(space_hopping(space, Hopping(), rule=SIGNS), flux)
    same(found, np.sort(np.concatenate(expected)))


@pytest.mark.parametrize("v_sigma", [0.0, 4.0])
@pytest.mark.parametrize("shape", ROUND)
def test_all_effects_on_is_the_formula_written_out(shape: Any, v_sigma: float) -> None:
    """Slater & Koster, Phys. Rev. 94, 1498 (1954) [M], with the exponential law of Pereira,
    Castro Neto & Peres, Phys. Rev. B 80, 045401 (2009), evaluated bond by bond in the test."""
    space = space_of(shape)
    rule = SpaceRule(v_sigma=v_sigma)
    found = space_hopping(space, Hopping(shells=(2.7,), unit="eV"), rule=rule)
    same(found.matrix().toarray(), slater_koster(space, 2.7, 3.37, v_sigma))
    off = space_hopping(space, Hopping(shells=(2.7,), unit="eV"), rule=replace(rule, sigma=False))
    same(off.matrix().toarray(), slater_koster(space, 2.7, 3.37, 0.0))
    kept = replace(rule, lengths=False, sigma=False, decay=9.0)
    same(
        space_hopping(space, Hopping(shells=(2.7,), unit="eV"), rule=kept).matrix().toarray(),
        slater_koster(space, 2.7, 0.0, 0.0),
    )


def test_a_flat_network_in_space_has_the_flat_levels() -> None:
    """Normals up, true distances: n.n = 1 and n.u = 0, so V_pi is all that is left; with normals
    found from the neighbours, and with the sigma part, which a plane does not feel."""
    strip = open_strip(lay_strip("honeycomb-armchair", rows=5, length=4))
    places = np.column_stack([strip.positions, np.zeros(strip.n)])
    flat = Network(positions=places, bonds=strip.bonds)
    hopping = Hopping(shells=(2.7,), site_energy=0.3, unit="eV")
    expected = levels(assemble(strip, hopping))
    same(levels(space_hopping(flat, hopping, rule=SpaceRule(v_sigma=7.0))), expected)
    up = np.tile([0, 0, 1.0], (strip.n, 1))
    same(levels(space_hopping(flat, hopping, normals=up)), expected)
    same(levels(space_hopping(flat, hopping, rule=SpaceRule(rule="cosine"))), expected)
    turn = np.linalg.qr(np.random.default_rng(1).normal(size=(3, 3)))[0]
    same(levels(space_hopping(replace(flat, positions=places @ turn), hopping)), expected)


@pytest.mark.parametrize("shells", [1, 3])
def test_a_flat_ring_has_the_flat_levels(shells: int) -> None:
    """Annulus, normals up: with flat lengths the ring as assembled, further shells included; with
    true ones each bond is scaled by exp(-beta (d - d_flat)/d_ref) alone."""
    space = space_of(("honeycomb-zigzag", 3, 14, 0), shells=shells)
    hopping = Hopping(shells=(2.7, 0.2, 0.1)[:shells], unit="eV")
    flat = assemble(space.ring, hopping)
    kept = space_hopping(space, hopping, rule=SpaceRule(lengths=False))
    for flux in (0.0, 0.5, 0.137):
        same(kept.matrix(flux).toarray(), flat.matrix(flux).toarray())
    true = space_hopping(space, hopping)
    long = np.linalg.norm(space.steps, axis=1)
    stretch = (long - space.flat_lengths) / space.ring.strip.spacing
    same(true.amplitudes, flat.amplitudes * np.exp(-3.37 * stretch))


@pytest.mark.parametrize("rule", [SpaceRule(), SpaceRule(lengths=False)])
def test_a_wide_ring_tends_to_the_flat_one(rule: SpaceRule) -> None:
    """The band of one half twist flattens as its radius grows. Tilts cost (w/R)^2; lengths change
    by w/R, but oppositely above and below the midline, which no level feels in first order
    (perturbation theory: it couples modes of opposite parity only). So the order is 2."""
    gaps = []
    for length in (40, 80):
        space = space_of(("honeycomb-zigzag", 2, length, 1))
        found = levels(space_hopping(space, Hopping(), rule=rule))
        gaps.append(np.abs(found - levels(assemble(space.ring, Hopping()))).max())
    assert np.log2(gaps[0] / gaps[1]) == pytest.approx(2, abs=0.15)


@pytest.mark.parametrize("sites", [8, 12, 16])
def test_cosine_rule_on_a_moebius_annulene(sites: int) -> None:
    """One row turned evenly by pi over N bonds on a straight axis: beta cos(pi/N), so that
    E = -2 cos(pi/N) cos((2j + 1) pi/N) (Heilbronner 1964 [M]; his "no loss" 4 cot(pi/N) for
    4n electrons). On the bent circle the rule gives cos within the square of the bend."""
    turn = np.pi * np.arange(sites) / sites
    straight = np.stack([0 * turn, np.cos(turn), np.sin(turn)], axis=1)
    space = space_of(("square", 1, sites, 1))
    rule = SpaceRule(rule="cosine", lengths=False)
    found = levels(space_hopping(space, Hopping(), rule=rule, normals=straight))
    j = np.arange(sites)
    expected = -2 * np.cos(np.pi / sites) * np.cos((2 * j + 1) * np.pi / sites)
    same(found, np.sort(expected))
    assert -2 * found[: sites // 2].sum() == pytest.approx(4 / np.tan(np.pi / sites), abs=EXACT)


def test_slater_koster_on_the_bent_moebius_annulene_of_eight() -> None:
    """On the circle of eight sites the bonds lie between 0.79 and 0.92 of the flat one, which the
    cosine rule puts at 0.92 = cos(pi/8) on all (two independent evaluations)."""
    space = space_of(("square", 1, 8, 1))
    found = -space_hopping(space, Hopping(), rule=SpaceRule(lengths=False)).amplitudes
    sizes = np.sort(np.abs(found))
    assert sizes[0] == pytest.approx(0.79, abs=0.005)
    assert sizes[-1] == pytest.approx(np.cos(np.pi / 8), abs=0.005)
    assert np.prod(np.sign(found)) == -1


@pytest.mark.parametrize("rule", [SpaceRule(), SpaceRule(v_sigma=3.0), SpaceRule(rule="cosine")])
def test_mirror_images_have_the_same_levels(rule: SpaceRule) -> None:
    """Parity: without a field left and right cannot be told apart by energy."""
    shape = ("honeycomb-zigzag", 3, 12.5, 1)
    one, other = (space_hopping(space_of(shape, hand), Hopping(), rule=rule) for hand in
                  ("left", "right"))  # fmt: skip
    same(levels(one, 0.2), levels(other, 0.2))


@pytest.mark.parametrize("half_twists", [1, 2])
def test_moving_the_seam_changes_no_level(half_twists: int) -> None:
    """The seam is a choice of description, in space as on the strip."""
    space = space_of(("honeycomb-zigzag", 2, 12, half_twists))
    moved = place_in_space(reseam(space.ring, seam=7))
    field = UniformField(tesla=(300.0, -200.0, 500.0))
    one, other = (space_hopping(s, Hopping(), field=field) for s in (space, moved))
    same(levels(one, 0.2), levels(other, 0.2))


def test_site_energies_disorder_and_removed_sites_are_those_of_the_ring() -> None:
    """All that is not a bond is as in `assemble` (trace of H)."""
    space = space_of(("honeycomb-zigzag", 2, 12, 1))
    hopping = Hopping(site_energy=0.2, disorder=0.5, seed=3)
    found, flat = space_hopping(space, hopping, rule=SIGNS), assemble(space.ring, hopping)
    np.testing.assert_array_equal(found.site_energies, flat.site_energies)
    same(levels(found, 0.1), levels(flat, 0.1))
    holed = remove_sites(space.ring, [5, 20])
    found = space_hopping(place_in_space(holed), hopping, rule=SIGNS)
    same(levels(found, 0.1), levels(assemble(holed, hopping), 0.1))


def test_relaxed_ring_keeps_the_pz_sign() -> None:
    """The sign is topological: relaxing changes overlaps, not the parity of reversals."""
    space = space_of(("honeycomb-zigzag", 2, 20, 1))
    moved = relax(space).space
    same(
        levels(space_hopping(moved, Hopping(), rule=SIGNS), 0.137),
        levels(assemble(space.ring, Hopping()), 0.137),
    )
    flat = levels(assemble(space.ring, Hopping()))
    laid, eased = (np.abs(levels(space_hopping(s, Hopping())) - flat) for s in (space, moved))
    assert eased.max() < 0.5 * laid.max()  # what is left is tilt; stretched bonds are let go


# --- field ---------------------------------------------------------------------------------------

FIELD = UniformField(tesla=(900.0, -400.0, 1500.0))


@pytest.mark.parametrize("shape", ROUND)
def test_levels_do_not_depend_on_the_origin_or_the_gauge(shape: Any) -> None:
    """Gauge invariance: another origin adds a gradient to A, and so does the Landau gauge
    A = (By z, Bz x, Bx y), integrated along each straight bond in the test."""
    space = space_of(shape)
    hopping = Hopping(shells=(2.7,), unit="eV")
    one = levels(space_hopping(space, hopping, field=FIELD), 0.137)
    assert np.abs(one - levels(space_hopping(space, hopping), 0.137)).max() > 1e-3
    far = replace(FIELD, origin=(3.0, -2.0, 1.0))
    same(levels(space_hopping(space, hopping, field=far), 0.137), one)
    bonds = space.bonds
    start, end = space.positions[bonds.tail], space.positions[bonds.head]
    bx, by, bz = FIELD.tesla
    middle = (start + end) / 2
    landau = np.stack([by * middle[:, 2], bz * middle[:, 0], bx * middle[:, 1]], axis=1)
    turns = np.einsum("ij,ij->i", landau, end - start) * 1e-18 / QUANTUM
    plain = space_hopping(space, hopping)
    other = replace(plain, amplitudes=plain.amplitudes * np.exp(2j * np.pi * turns))
    same(levels(other, 0.137), one)
    chi = np.random.default_rng(0).normal(size=space.n)
    with_field = space_hopping(space, hopping, field=FIELD)
    same(levels(with_field, 0.137, gauge=chi), one)


@pytest.mark.parametrize("shape", [*ROUND, ("honeycomb-armchair", 5, 10, 0), ("square", 3, 14, 0)])
def test_phases_round_a_face_are_the_flux_through_its_area(shape: Any) -> None:
    """Sum of the bond phases round a polygon = (e/h) B . (vector area), Stokes; faces found anew
    as shortest cycles by networkx."""
    space = space_of(shape)
    turns = peierls_turns(space.positions, space.bonds, FIELD)
    phase = {}
    for b, (i, j) in enumerate(zip(space.bonds.tail, space.bonds.head, strict=True)):
        phase[i, j], phase[j, i] = turns[b], -turns[b]
    largest = {"honeycomb": 6, "square": 4, "triangular": 3, "kagome": 6}[shape[0].split("-")[0]]
    graph = nx.Graph(list(phase))
    cycles = list(nx.simple_cycles(graph, length_bound=largest))
    sizes, fluxes = [], []
    for cycle in cycles:
        if shape[0] == "kagome" and len(cycle) not in {3, 6}:
            continue
        points = space.positions[cycle]
        area = np.cross(points, np.roll(points, -1, axis=0)).sum(axis=0) / 2 * 1e-18
        total = sum(phase[i, j] for i, j in zip(cycle, np.roll(cycle, -1), strict=True))
        assert total == pytest.approx(area @ FIELD.tesla / QUANTUM, abs=EXACT)
        sizes.append(len(cycle))
        fluxes.append(abs(total))
    found = report_flux(space, FIELD)
    np.testing.assert_array_equal(np.sort(found.face_sizes), np.sort(sizes))
    same(np.sort(np.abs(found.face_fluxes)), np.sort(fluxes))
    assert sum(part[0] for part in found.by_size().values()) == len(sizes)


@pytest.mark.parametrize("form", ["annulus", "cylinder"])
def test_faces_of_a_two_sided_ring_add_up_to_its_edges(form: Any) -> None:
    """Stokes on the whole band: the faces sum to the outer minus the inner row (annulus), or to
    nothing in any field (cylinder: equal loops), the flux of what lies between."""
    strip = lay_strip("square", rows=4, length=20)
    space = place_in_space(close_strip(strip, half_twists=0), form=form)
    found = report_flux(space, FIELD)
    total = found.face_fluxes.sum()
    edges = found.row_fluxes[-1] - found.row_fluxes[0]
    assert total == pytest.approx(edges, abs=EXACT)
    if form == "cylinder":
        assert total == pytest.approx(0, abs=EXACT)
    else:
        radius = space.ring.circumference / (2 * np.pi) + found.row_heights
        area = 10 * radius**2 * np.sin(2 * np.pi / 20)
        same(found.row_fluxes, area * 1e-18 * FIELD.tesla[2] / QUANTUM)
        assert np.all(np.diff(found.row_fluxes) > 0)


def test_flux_of_a_twisted_ring_row_by_row() -> None:
    """Vector area of the row at +-y of the half-twisted circle, per turn: (0, -pi y^2/4, pi (R^2 +
    y^2/2)), half the integral of r x dr over two turns; inscribed polygons come near as 1/N^2."""
    field, errors = UniformField(tesla=(30.0, 700.0, 50.0)), []
    for length in (40, 80):
        space = space_of(("square", 3, length, 1))
        found = report_flux(space, field)
        radius, y = space.ring.circumference / (2 * np.pi), found.row_heights
        np.testing.assert_allclose(y, [0, 1], rtol=0, atol=EXACT)
        area = np.pi * (50 * (radius**2 + y**2 / 2) - 700 * y**2 / 4) * 1e-18
        errors.append(np.abs(found.row_fluxes * QUANTUM / area - 1))
    assert np.max(errors[0]) < 0.01
    np.testing.assert_allclose(errors[0] / errors[1], 4, rtol=0, atol=0.3)


def test_flux_through_the_midline_and_after_moving_the_seam() -> None:
    """The midline of the laid ring is the circle; where the seam stands changes nothing."""
    space = space_of(("honeycomb-zigzag", 2, 40, 1))
    moved = place_in_space(reseam(space.ring, seam=9))
    field = UniformField(tesla=(0.0, 0.0, 50.0))
    one, other = report_flux(space, field), report_flux(moved, field)
    circle = np.pi * (space.ring.circumference / (2 * np.pi)) ** 2 * 1e-18 * 50 / QUANTUM
    assert one.midline == pytest.approx(circle, rel=0.01)
    assert other.midline == pytest.approx(one.midline, abs=EXACT)
    same(other.row_fluxes, one.row_fluxes)
    same(np.sort(np.abs(other.face_fluxes)), np.sort(np.abs(one.face_fluxes)))
    assert find_midline(space).along.size == 80


@pytest.mark.parametrize("sites", [6, 13])
def test_planar_ring_in_a_perpendicular_field_is_the_ring_at_a_flux(sites: int) -> None:
    """One row, flat: only the flux through the polygon counts, N r^2 sin(2 pi/N)/2, with the
    sign of the threading flux; the two add (Byers & Yang, Phys. Rev. Lett. 7, 46 (1961) [M])."""
    space = space_of(("square", 1, sites, 0))
    radius = space.ring.circumference / (2 * np.pi)
    area = sites / 2 * radius**2 * np.sin(2 * np.pi / sites) * 1e-18
    tesla = 0.2 * QUANTUM / area
    hopping = Hopping()
    kept = SpaceRule(lengths=False)
    found = space_hopping(space, hopping, rule=kept, field=UniformField(tesla=(0.0, 70.0, tesla)))
    flat = assemble(space.ring, hopping)
    same(levels(found), levels(flat, 0.2))
    same(levels(found, 0.15), levels(flat, 0.35))
    slope = found.slope_matrix(0.0).toarray()
    states = np.linalg.eigh(found.matrix().toarray())[1]
    expected = np.linalg.eigh(flat.matrix(0.2).toarray())[1]
    per_level = np.einsum("ik,ij,jk->k", states.conj(), slope, states).real
    flat_slope = flat.slope_matrix(0.2).toarray()
    same(per_level, np.einsum("ik,ij,jk->k", expected.conj(), flat_slope, expected).real, 1e-8)


def test_reversing_the_field_reverses_the_flux() -> None:
    """Time reversal: E(B, flux) = E(-B, -flux) for a ring that is real without them."""
    space = space_of(("honeycomb-zigzag", 3, 12.5, 1))
    back = UniformField(tesla=tuple(-b for b in FIELD.tesla))
    one = space_hopping(space, Hopping(), field=FIELD)
    other = space_hopping(space, Hopping(), field=back)
    same(levels(one, 0.137), levels(other, -0.137))
    assert np.abs(levels(one, 0.137) - levels(other, 0.137)).max() > 1e-4


# --- refusals ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("options", "match"),
    [
        ({"rule": "sine"}, "rule = 'sine' must be"),
        ({"decay": -1.0}, "decay = -1.0 must be"),
        ({"sigma_decay": np.inf}, "sigma_decay = inf"),
        ({"v_sigma": np.nan}, "v_sigma = nan"),
        ({"reference": 0.0}, "reference = 0.0 must be a positive length"),
        ({"sigma_reference": -0.1}, "sigma_reference = -0.1"),
    ],
)
def test_rules_that_mean_nothing(options: Any, match: str) -> None:
    """Each sentence names what was given (a rule of the house)."""
    with pytest.raises(BadInput, match=match):
        SpaceRule(**options)


def test_refusals_of_hopping_in_space() -> None:
    """Each sentence names what was given and what would be right (a rule of the house)."""
    space: RingInSpace = space_of(("square", 2, 9, 1))
    with pytest.raises(BadInput, match="lies on its flat strip until it is placed"):
        space_hopping(space.ring, Hopping())
    flat = Network.from_pairs([(0, 1)], positions=np.eye(2))
    with pytest.raises(BadInput, match=r"positions have the shape \(2, 2\)"):
        space_hopping(flat, Hopping())
    with pytest.raises(BadInput, match=r"normals have the shape \(3, 3\); expected \(18, 3\)"):
        space_hopping(space, Hopping(), normals=np.eye(3))
    none = space.normals.copy()
    none[4] = 0
    with pytest.raises(BadInput, match=r"normal of site 4 is \[0.0, 0.0, 0.0\]"):
        space_hopping(space, Hopping(), normals=none)
    none[4] = np.cross(space.normals[5], [0.3, 0.1, 0.9])
    pair = Network.from_pairs([(0, 1)], positions=np.array([[0.0, 0, 0], [0.142, 0, 0]]))
    with pytest.raises(BadInput, match=r"sites 0 and 1 overlap by .* tilt off"):
        space_hopping(pair, Hopping(), rule=SIGNS, normals=[[0, 1, 0], [0, 0, 1]])
    with pytest.raises(BadInput, match="bonded but stand on one place"):
        here = Network.from_pairs([(0, 1)], positions=np.zeros((2, 3)))
        space_hopping(here, Hopping(), normals=np.eye(3)[:2])
    with pytest.raises(BadInput, match="names 2 amplitudes"):
        space_hopping(space, Hopping(shells=(1.0, 0.1)))


def test_refusals_of_fields() -> None:
    """Each sentence names what was given (a rule of the house)."""
    with pytest.raises(BadInput, match=r"field.tesla = \(1.0, 2.0\)"):
        UniformField(tesla=(1.0, 2.0))  # type: ignore[arg-type]
    with pytest.raises(BadInput, match=r"field.origin = .* must be three finite numbers"):
        UniformField(tesla=(1.0, 2.0, 3.0), origin=(0.0, np.nan, 0.0))
    with pytest.raises(BadInput, match=r"a field in space needs \(n, 3\)"):
        peierls_turns(np.eye(2), Network.from_pairs([(0, 1)]).bonds, FIELD)
