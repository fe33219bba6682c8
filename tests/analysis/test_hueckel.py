"""Hückel sheets from coordinates against printed tables, closed forms and identities.

Tables to four decimals (Streitwieser 1961; Coulson & Streitwieser 1965; Heilbronner & Bock 1976),
recalled from memory, E = alpha + x beta. Closed forms stand in `closed_forms`.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import closed_forms as known
import molecule_shapes as shapes
import numpy as np
import pytest

from ribbon.analysis.aromaticity import judge_stability, perfect_matching
from ribbon.analysis.heteroatoms import PARAMETERS, pi_atoms
from ribbon.analysis.hueckel import hueckel_matrix, hueckel_sheet
from ribbon.errors import BadInput, NotCertified
from ribbon.lattice import Network
from ribbon.lattice.framework import find_framework
from ribbon.lattice.molecule import bond_atoms

PRINTED = 6e-5
EXACT = 1e-9
BUTADIENE = np.array([[0, 0, 0], [1.34, 0, 0], [2.0, 1.2, 0], [3.34, 1.2, 0]])
HEXATRIENE = np.array([[1.2 * k, 0.35 * (-1) ** k, 0] for k in range(6)])
TRIMETHYLENEMETHANE = 1.4 * np.array(
    [[0, 0, 0], [1, 0, 0], [-0.5, math.sqrt(0.75), 0], [-0.5, -math.sqrt(0.75), 0]]
)
PYRENE = [(0, 0), (1, 0), (0, 1), (1, -1)]
TRIPHENYLENE = [(0, 0), (1, 0), (-1, 1), (0, -1)]
CORONENE = [(0, 0), (1, 0), (0, 1), (-1, 1), (-1, 0), (0, -1), (1, -1)]


class Solved:
    """A frame with its sheet and stability, made from places in angstrom."""

    def __init__(
        self,
        places: np.ndarray,
        elements: str = "",
        *,
        charge: int = 0,
        neighbours: list[int] | None = None,
        parameters: str = "van-catledge",
        **options: Any,
    ) -> None:
        symbols = list(elements) or ["C"] * len(places)
        self.molecule = bond_atoms(symbols, places / 10)
        self.frame = find_framework(self.molecule)
        count = self.molecule.neighbours if neighbours is None else neighbours
        self.atoms = pi_atoms(self.molecule.elements, count)
        options["parameters"] = PARAMETERS[parameters]
        self.matrix = hueckel_matrix(self.frame, self.atoms, **options)
        self.sheet = hueckel_sheet(self.matrix, self.frame, self.atoms, charge=charge)
        self.stability = judge_stability(
            self.frame,
            self.atoms,
            self.sheet,
            parameters=options["parameters"],
            rule=options.get("rule", "plain"),
        )

    def orders(self) -> np.ndarray:
        assert self.sheet.bond_orders is not None
        return np.sort(self.sheet.bond_orders)


TABLE = {  # x of the filled levels (some), total, highest filled
    "butadiene": (BUTADIENE, [1.6180, 0.6180], 4.4721, 0.6180),
    "hexatriene": (HEXATRIENE, [1.8019, 1.2470, 0.4450], 6.9879, 0.4450),
    "benzene": (shapes.polygon(6), [2, 1, 1], 8.0, 1.0),
    "naphthalene": (shapes.acene(2), [2.3028, 1.6180, 1.3028, 1.0, 0.6180], 13.6832, 0.6180),
    "anthracene": (
        shapes.acene(3),
        [2.4142, 2, 1.4142, 1.4142, 1, 1, 0.4142],
        19.3137,
        0.4142,
    ),
    "biphenyl": (shapes.biphenyl(), [], 16.3834, 0.7046),
    "pyrene": (shapes.fused_hexagons(*PYRENE), [], 22.5055, 0.4450),
    "triphenylene": (shapes.fused_hexagons(*TRIPHENYLENE), [], 25.2745, 0.6840),
    "coronene": (shapes.fused_hexagons(*CORONENE), [], 34.5718, 0.5392),
    "tetracene": (shapes.acene(4), [], 24.9308, 0.2950),
    "pentacene": (shapes.acene(5), [], 30.5440, 0.2197),
    "hexacene": (shapes.acene(6), [], 36.1560, 0.1694),
}


@pytest.mark.parametrize("name", TABLE)
def test_textbook_hydrocarbons(name: str) -> None:
    """Levels, total and delocalisation energy, frontier levels paired (Coulson & Rushbrooke)."""
    places, levels, total, frontier = TABLE[name]
    solved = Solved(places)
    sheet = solved.sheet
    if levels:
        np.testing.assert_allclose(sheet.x[: len(levels)], levels, rtol=0, atol=PRINTED)
    np.testing.assert_allclose(sheet.x, -sheet.x[::-1], rtol=0, atol=EXACT)
    assert math.isclose(sheet.pi_energy, total, abs_tol=PRINTED)
    assert math.isclose(sheet.homo, frontier, abs_tol=PRINTED)
    assert math.isclose(sheet.lumo, -frontier, abs_tol=PRINTED)
    assert math.isclose(sheet.gap, 2 * sheet.homo, abs_tol=EXACT)
    assert math.isclose(sheet.gap_ev, 5.4 * sheet.homo, abs_tol=EXACT)
    assert not sheet.open_shell
    delocalised = solved.stability.delocalisation_energy
    assert math.isclose(delocalised, total - len(places), abs_tol=2 * PRINTED)
    np.testing.assert_allclose(sheet.charges, 0, rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("places", "orders"),
    [
        (shapes.polygon(6), [2 / 3] * 6),
        (BUTADIENE, [0.8944, 0.4472, 0.8944]),
        (shapes.acene(2), [0.7246] * 4 + [0.6032] * 2 + [0.5547] * 4 + [0.5182]),
        (
            shapes.acene(3),
            [0.7374] * 4 + [0.5859] * 2 + [0.5354] * 4 + [0.6061] * 4 + [0.4849] * 2,
        ),
        (shapes.annulene(8, 1), [0.65328] * 8),
        (shapes.annulene(16, 1), [0.64073] * 16),
    ],
    ids=["benzene", "butadiene", "naphthalene", "anthracene", "Möbius 8", "Möbius 16"],
)
def test_bond_orders(places: np.ndarray, orders: list[float]) -> None:
    """Coulson 1939; on a Möbius ring times the sign of the bond, wherever that stands."""
    np.testing.assert_allclose(Solved(places).orders(), np.sort(orders), rtol=0, atol=PRINTED)


ANNULENES = {  # N: closed with an even and an odd number of half turns (Heilbronner 1964)
    8: (9.6569, 10.4525),
    10: (12.9443, 12.3107),
    12: (14.9282, 15.4548),
    14: (17.9758, 17.5251),
    16: (20.1094, 20.5033),
    18: (23.0351, 22.6851),
    20: (25.2550, 25.5698),
}


@pytest.mark.parametrize("sites", ANNULENES)
@pytest.mark.parametrize("half_twists", [0, 1])
def test_annulenes(sites: int, half_twists: int) -> None:
    """x = 2 cos(2 pi j/N) or 2 cos((2j + 1) pi/N); each is the other closure of the other."""
    solved = Solved(shapes.annulene(sites, half_twists))
    expected = known.moebius_annulene(sites) if half_twists else known.cycle(sites)
    np.testing.assert_allclose(-solved.sheet.x, expected, rtol=0, atol=EXACT)
    own, other = ANNULENES[sites][half_twists], ANNULENES[sites][1 - half_twists]
    assert math.isclose(solved.sheet.pi_energy, own, abs_tol=PRINTED)
    assert math.isclose(solved.stability.other_closure_energy, other, abs_tol=PRINTED)
    assert math.isclose(solved.stability.closure_energy, own - other, abs_tol=2 * PRINTED)
    good = (sites % 4 == 2) == (half_twists == 0)
    assert solved.sheet.open_shell == (not good)
    gap = 4 * math.sin(math.pi / sites)
    gaps = (solved.sheet.gap, solved.stability.other_closure_gap)
    np.testing.assert_allclose(gaps, (gap, 0) if good else (0, gap), rtol=0, atol=EXACT)
    assert ("antiaromatic" not in solved.stability.verdict) == good
    assert ("Möbius" if half_twists else "Hückel") in solved.stability.verdict
    assert "which holds for single rings" in solved.stability.verdict


@pytest.mark.parametrize(
    ("charge", "cyclic", "twisted"), [(1, 10.8229, 11.5175), (-1, 11.5175, 10.8229)]
)
def test_nine_ring_ions(charge: int, cyclic: float, twisted: float) -> None:
    """C9H9+ has 8 electrons, C9H9- ten; neither has double bonds alone."""
    for half_twists, total in ((0, cyclic), (1, twisted)):
        solved = Solved(shapes.annulene(9, half_twists), charge=charge)
        assert solved.sheet.electrons == 9 - charge
        assert math.isclose(solved.sheet.pi_energy, total, abs_tol=PRINTED)
        assert solved.stability.delocalisation_energy is None
        assert "an ion" in solved.stability.why_no_delocalisation
        assert math.isclose(solved.sheet.charges.sum(), charge, abs_tol=EXACT)


@pytest.mark.parametrize("rings", [4, 5, 6, 7, 8, 9, 12])
@pytest.mark.parametrize("half_twists", [0, 1])
def test_belts_of_hexagons(rings: int, half_twists: int) -> None:
    """x = (s +- sqrt(9 + 8 cos k))/2; half twisted: exactly one non-bonding level.

    The gap of the twisted belt is half that of the acene with one ring less.
    """
    places = shapes.twisted_belt(rings, 1) if half_twists else shapes.cyclacene(rings)
    sheet = Solved(places).sheet
    expected = known.cyclacene_adjacency(rings, half_twists=half_twists, sigma=-1)
    np.testing.assert_allclose(sheet.x, expected[::-1], rtol=0, atol=EXACT)
    zero = np.count_nonzero(np.abs(sheet.x) < EXACT)
    if half_twists:
        assert zero == 1
        assert math.isclose(sheet.gap, known.moebius_cyclacene_gap(rings), abs_tol=EXACT)
        # with p_z orbitals the non-bonding level is full for an even number of rings
        frontier = (sheet.homo, sheet.lumo) if rings % 2 == 0 else (sheet.lumo, sheet.homo)
        assert math.isclose(frontier[0], 0, abs_tol=EXACT)
        assert math.isclose(abs(frontier[1]), sheet.gap, abs_tol=EXACT)
    else:
        assert zero == (2 if rings % 2 == 0 else 0)
        gap = 0.0 if rings % 2 == 0 else math.sqrt(9 - 8 * math.cos(math.pi / rings)) - 1
        assert math.isclose(sheet.gap, gap, abs_tol=EXACT)
        assert sheet.open_shell == (rings % 2 == 0)


@pytest.mark.parametrize("rings", [4, 5, 8, 9])
@pytest.mark.parametrize("half_twists", [0, 1])
def test_the_other_closure_of_a_belt(rings: int, half_twists: int) -> None:
    """Cut and joined the other way up: the cyclacene of the twisted belt and the reverse."""
    places = shapes.twisted_belt(rings, 1) if half_twists else shapes.cyclacene(rings)
    stability = Solved(places).stability
    other = known.cyclacene_adjacency(rings, half_twists=1 - half_twists, sigma=-1)[::-1]
    assert math.isclose(stability.other_closure_energy, 2 * other[: 2 * rings].sum(), abs_tol=EXACT)
    gap = other[2 * rings - 1] - other[2 * rings]
    assert math.isclose(stability.other_closure_gap, gap, abs_tol=EXACT)
    assert Solved(places, rule="cosine").stability.other_closure_energy is None
    # a plain belt with the sign turned over is half a flux quantum away
    turned = known.cyclacene_adjacency(rings, half_twists=0, sigma=1, flux=0.5)[::-1]
    if not half_twists:
        assert math.isclose(
            stability.other_sign_energy, 2 * turned[: 2 * rings].sum(), abs_tol=EXACT
        )


def test_other_closures_that_are_not_made() -> None:
    """Wider belts and hoops have the other sign only; sheets neither."""
    tube = Solved(shapes.cyclacene(8, rows=4)).stability
    assert tube.other_closure_energy is None
    assert tube.other_sign_energy is not None
    hoop = Solved(shapes.paraphenylene_hoop(6)).stability
    assert (hoop.other_closure_energy, hoop.other_sign_energy is None) == (None, False)
    sheet = Solved(shapes.acene(3)).stability
    assert (sheet.other_closure_energy, sheet.other_sign_energy) == (None, None)


def test_mirror_images_have_the_same_sheet() -> None:
    """Handedness is a matter of space: levels, orders and charges stay."""
    places = shapes.twisted_belt(10, 3)
    one, other = Solved(places), Solved(places * [1, 1, -1])
    assert one.frame.twisting.linking_half_turns == pytest.approx(
        -other.frame.twisting.linking_half_turns
    )
    for rule in ("plain", "torsion", "cosine", "slater-koster"):
        one, other = Solved(places, rule=rule), Solved(places * [1, 1, -1], rule=rule)
        np.testing.assert_allclose(one.sheet.x, other.sheet.x, rtol=0, atol=EXACT)
        np.testing.assert_allclose(
            one.sheet.bond_orders, other.sheet.bond_orders, rtol=0, atol=1e-7
        )


@pytest.mark.parametrize("shape", ["belt", "annulene", "cage", "anthracene", "pyridine"])
@pytest.mark.parametrize("seed", [1, 2])
def test_numbering_and_place_do_not_matter(shape: str, seed: int) -> None:
    """Levels stay, orders and charges move with their atoms."""
    places = {
        "belt": shapes.twisted_belt(9, 1),
        "annulene": shapes.annulene(12, 1),
        "cage": shapes.buckminsterfullerene(),
        "anthracene": shapes.acene(3),
        "pyridine": shapes.polygon(6),
    }[shape]
    elements = "N" * (shape == "pyridine") + "C" * (len(places) - (shape == "pyridine"))
    moved, order = shapes.turned(places, seed)
    one, other = Solved(places, elements), Solved(moved, "".join(elements[k] for k in order))
    np.testing.assert_allclose(one.sheet.x, other.sheet.x, rtol=0, atol=EXACT)
    np.testing.assert_allclose(one.sheet.charges[order], other.sheet.charges, rtol=0, atol=1e-8)

    def by_ends(solved: Solved, names: np.ndarray) -> dict[frozenset[int], float]:
        bonds = solved.frame.network.bonds
        ends = zip(names[bonds.tail].tolist(), names[bonds.head].tolist(), strict=True)
        return dict(zip(map(frozenset, ends), solved.sheet.bond_orders.tolist(), strict=True))

    assert by_ends(one, np.arange(len(places))) == pytest.approx(by_ends(other, order), abs=1e-8)


@pytest.mark.parametrize(
    ("places", "elements", "charge"),
    [
        (shapes.acene(3), "", 0),
        (shapes.twisted_belt(7, 1), "", 1),
        (shapes.buckminsterfullerene(), "", -3),
        (shapes.polygon(6), "NCNCCC", 0),
        (shapes.polygon(5), "OCCCC", 0),
        (TRIMETHYLENEMETHANE, "", 0),
    ],
)
@pytest.mark.parametrize("rule", ["plain", "torsion", "cosine", "slater-koster"])
def test_energy_is_made_of_charges_and_orders(
    places: np.ndarray, elements: str, charge: int, rule: str
) -> None:
    """sum n x = sum q h + 2 sum p k (Coulson 1939), whatever the sign and the filling."""
    solved = Solved(places, elements, charge=charge, rule=rule)
    sheet = solved.sheet
    assert math.isclose(sheet.pi_energy, sheet.signed_orders_energy, abs_tol=EXACT)
    h = PARAMETERS["van-catledge"].sites(solved.atoms.kinds)
    strength = -solved.matrix.amplitudes * solved.frame.signs
    total = sheet.populations @ h + 2 * sheet.bond_orders @ strength
    assert math.isclose(sheet.pi_energy, total, abs_tol=EXACT)
    assert math.isclose(sheet.populations.sum(), sheet.electrons, abs_tol=EXACT)
    assert math.isclose(sheet.occupation.sum(), sheet.electrons, abs_tol=EXACT)


def five_ring(h: float, k: float) -> np.ndarray:
    """Levels of X(CH)4: the mirror splits them into 2 x 2 (free of X) and 3 x 3."""
    odd = [(-1 + math.sqrt(5)) / 2, (-1 - math.sqrt(5)) / 2]
    even = np.linalg.eigvalsh([[h, math.sqrt(2) * k, 0], [math.sqrt(2) * k, 0, 1], [0, 1, 1]])
    return np.sort([*odd, *even])[::-1]


def six_ring(h: float, k: float) -> np.ndarray:
    """Levels of X(CH)5: the mirror splits them into +-1 (free of X) and 4 x 4."""
    root = math.sqrt(2)
    even = (
        np.diag([h, 0, 0, 0]) + np.diag([root * k, 1, root], 1) + np.diag([root * k, 1, root], -1)
    )
    return np.sort([1.0, -1.0, *np.linalg.eigvalsh(even)])[::-1]


@pytest.mark.parametrize("name", ["van-catledge", "streitwieser"])
@pytest.mark.parametrize("atom", ["N", "O", "S", "NH"])
def test_rings_with_one_other_atom(name: str, atom: str) -> None:
    """Pyridine, pyrrole, furan and thiophene against blocks split by hand."""
    parameters = PARAMETERS[name]
    six, element = atom == "N", atom[0]
    kind = atom if six else f"{element}:"
    if name == "streitwieser" and element == "S":
        with pytest.raises(BadInput, match="have no value for a bond between C and S:; take"):
            Solved(shapes.polygon(5), "SCCCC", parameters=name)
        return
    sites = 6 if six else 5
    neighbours = [3 if atom == "NH" else 2] + [3] * (sites - 1)
    elements = element + "C" * (sites - 1)
    solved = Solved(shapes.polygon(sites), elements, neighbours=neighbours, parameters=name)
    assert (solved.atoms.kinds[0], solved.sheet.electrons) == (kind, 6)
    h, k = parameters.site(kind), parameters.bond("C", kind)
    expected = six_ring(h, k) if six else five_ring(h, k)
    np.testing.assert_allclose(solved.sheet.x, expected, rtol=0, atol=EXACT)
    assert (solved.sheet.charges[0] < 0) == six  # takes electrons from the ring, or gives its pair
    assert "Hückel aromatic" in solved.stability.verdict
    assert "has other atoms" in solved.stability.why_no_delocalisation


def test_pyridine_as_printed() -> None:
    """h = 0.5, k = 1: levels and populations of Streitwieser's set, recalled from memory."""
    sheet = Solved(shapes.polygon(6), "NCCCCC", parameters="streitwieser").sheet
    levels = [2.1074, 1.1672, 1.0, -0.8410, -1.0, -1.9337]
    np.testing.assert_allclose(sheet.x, levels, rtol=0, atol=1e-4)
    np.testing.assert_allclose(
        sheet.populations, [1.195, 0.923, 1.004, 0.950, 1.004, 0.923], rtol=0, atol=6e-4
    )


PUBLISHED = [  # kind, h, k to carbon, k to its own kind: Van-Catledge 1980 [M]
    ("B", -0.45, 0.73, 0.87),
    ("N", 0.51, 1.02, 1.09),
    ("N:", 1.37, 0.89, 0.98),
    ("O", 0.97, 1.06, 1.26),
    ("O:", 2.09, 0.66, 0.95),
    ("S", 0.46, 0.81, 0.68),
    ("S:", 1.11, 0.69, 0.63),
]


@pytest.mark.parametrize(("kind", "h", "carbon", "own"), PUBLISHED)
def test_published_parameters(kind: str, h: float, carbon: float, own: float) -> None:
    """The diagonal and the first column of the table; every pair has a value."""
    table = PARAMETERS["van-catledge"]
    assert (table.site(kind), table.bond(kind, "C"), table.bond(kind, kind)) == (h, carbon, own)
    assert all(table.bond(kind, other) > 0 for other in table.h)
    assert "recalled from memory" in table.source


def test_parameters_that_are_missing() -> None:
    """Streitwieser's set stops at single heteroatoms."""
    table = PARAMETERS["streitwieser"]
    with pytest.raises(BadInput, match=r"no value for B \(giving one electron or none\); take"):
        table.site("B")
    with pytest.raises(BadInput, match="no value for a bond between N and N:"):
        table.bond("N:", "N")


@pytest.mark.parametrize(
    ("elements", "neighbours", "kinds", "electrons"),
    [
        ("CBNNN", [3, 3, 1, 2, 3], ["C", "B", "N", "N", "N:"], [1, 0, 1, 1, 2]),
        ("OOSS", [1, 2, 1, 2], ["O", "O:", "S", "S:"], [1, 2, 1, 2]),
    ],
)
def test_kinds_of_atoms(
    elements: str, neighbours: list[int], kinds: list[str], electrons: list[int]
) -> None:
    """By the number of neighbours."""
    found = pi_atoms(list(elements), neighbours)
    assert found.kinds.tolist() == kinds
    assert found.electrons.tolist() == electrons
    assert found.notes == ()


def test_hydrogens_that_are_not_told() -> None:
    """One nitrogen in a ring of five hides one where the electrons are odd; else it is noted."""
    elements = ["N", "C", "C", "C", "C"]
    guess = pi_atoms(elements, [2] * 5, hydrogens_known=False, in_five_ring=range(5))
    assert guess.kinds[0] == "N:"
    assert "as in pyrrole" in guess.notes[0]
    even = pi_atoms(elements, [2] * 5, hydrogens_known=False, in_five_ring=range(5), charge=1)
    assert even.kinds[0] == "N"
    assert "1 atom(s) N, O or S are taken to carry none" in even.notes[0]
    assert pi_atoms(["C"] * 5, [2] * 5, hydrogens_known=False).notes == ()


def test_open_shells() -> None:
    """Trimethylenemethane: two electrons share two equal levels; a radical fills one by half."""
    sheet = Solved(TRIMETHYLENEMETHANE).sheet
    assert sheet.open_shell
    np.testing.assert_allclose(sheet.x, [math.sqrt(3), 0, 0, -math.sqrt(3)], rtol=0, atol=EXACT)
    np.testing.assert_allclose(sheet.occupation, [2, 1, 1, 0], rtol=0, atol=EXACT)
    assert (sheet.homo, sheet.lumo) == pytest.approx((0, 0), abs=EXACT)
    allyl = Solved(BUTADIENE[:3])
    assert allyl.sheet.open_shell
    np.testing.assert_allclose(allyl.sheet.occupation, [2, 1, 0], rtol=0, atol=EXACT)
    assert "a radical" in allyl.stability.why_no_delocalisation
    assert math.isclose(allyl.sheet.pi_energy, 2 * math.sqrt(2), abs_tol=EXACT)


def test_why_there_is_no_delocalisation_energy() -> None:
    """Ions, radicals and other atoms above; here a frame without Kekulé structure."""
    stability = Solved(TRIMETHYLENEMETHANE).stability
    assert stability.delocalisation_energy is None
    assert stability.why_no_delocalisation == "the frame has no Kekulé structure"
    long = Solved(shapes.twisted_belt(101, 1)).stability
    assert "with odd rings are searched up to 400 atoms" in long.why_no_delocalisation
    square = Solved(shapes.polygon(4))
    assert math.isclose(square.stability.delocalisation_energy, 0, abs_tol=EXACT)
    assert square.sheet.open_shell


def test_perfect_matchings() -> None:
    """Odd rings too; above the limit they are not searched."""
    two_triangles = [(0, 1), (1, 2), (2, 0), (2, 3), (3, 4), (4, 5), (5, 3)]
    assert perfect_matching(Network.from_pairs(two_triangles))
    star = [(0, 1), (1, 2), (2, 0), (0, 3), (3, 4), (3, 5)]
    assert not perfect_matching(Network.from_pairs(star))
    assert perfect_matching(Solved(shapes.buckminsterfullerene()).frame.network)
    long = [(i, (i + 1) % 501) for i in range(501)]
    assert perfect_matching(Network.from_pairs(long)) is None
    assert perfect_matching(Network.from_pairs([(i, i + 1) for i in range(499)]))


def test_the_rule_of_4n_is_for_single_rings() -> None:
    """Said where it does not apply: fused, with atoms off the ring, an odd number."""
    assert "is for single rings" in Solved(shapes.acene(2)).stability.verdict
    assert "one closed band" in Solved(shapes.cyclacene(5)).stability.verdict
    ring = shapes.polygon(5)
    fulvene = np.concatenate([ring, ring[:1] * (1 + 1.35 / np.linalg.norm(ring[0]))])
    assert "atoms off its ring" in Solved(fulvene).stability.verdict
    assert "an odd number" in Solved(shapes.polygon(5)).stability.verdict
    assert "Hückel aromatic" in Solved(shapes.polygon(5), charge=-1).stability.verdict
    assert "Hückel antiaromatic" in Solved(shapes.polygon(5), charge=1).stability.verdict


def test_a_lone_atom() -> None:
    """One orbital with one electron at x = 0."""
    sheet = Solved(np.zeros((1, 3))).sheet
    assert (sheet.x.tolist(), sheet.occupation.tolist(), sheet.open_shell) == ([0.0], [1.0], True)


def test_empty_and_full() -> None:
    """No electrons, and two for every orbital: one frontier level is missing, and no gap."""
    empty, full = Solved(BUTADIENE, charge=4).sheet, Solved(BUTADIENE, charge=-4).sheet
    assert (empty.homo, empty.gap, empty.gap_ev, empty.open_shell) == (None, None, None, False)
    assert (full.lumo, full.gap) == (None, None)
    assert math.isclose(full.pi_energy, 0, abs_tol=EXACT)
    with pytest.raises(BadInput, match="charge = 5 leaves -1 pi electrons for 4 orbitals"):
        Solved(BUTADIENE, charge=5)
    with pytest.raises(BadInput, match="charge = -5 leaves 9 pi electrons"):
        Solved(BUTADIENE, charge=-5)


def test_beta_and_rules_that_mean_nothing() -> None:
    """One sentence each."""
    solved = Solved(BUTADIENE)
    with pytest.raises(BadInput, match=r"beta = 2\.7 must be a negative energy in eV"):
        hueckel_sheet(solved.matrix, solved.frame, solved.atoms, beta=2.7)
    with pytest.raises(BadInput, match="rule = 'overlap' must be one of plain, torsion, cosine"):
        Solved(BUTADIENE, rule="overlap")
    sheet = hueckel_sheet(solved.matrix, solved.frame, solved.atoms, beta=-2.5)
    np.testing.assert_allclose(sheet.energies, -2.5 * sheet.x, rtol=0, atol=EXACT)


def straight_twist(sites: int, half_twists: int) -> tuple[np.ndarray, np.ndarray]:
    """A straight chain with axes that turn evenly about it, by h half turns over N bonds."""
    places = np.stack([1.4 * np.arange(sites), np.zeros(sites), np.zeros(sites)], axis=1)
    angle = np.pi * half_twists * np.arange(sites) / sites
    return places, np.stack([0 * angle, np.cos(angle), np.sin(angle)], axis=1)


@pytest.mark.parametrize("rule", ["torsion", "cosine", "slater-koster"])
def test_twist_on_a_straight_axis(rule: str) -> None:
    """Every bond has beta cos(pi h/N) exactly (Heilbronner 1964)."""
    for sites, half_twists in ((8, 1), (12, 3)):
        places, axes = straight_twist(sites, half_twists)
        molecule = replace(bond_atoms(["C"] * sites, places / 10), axes=axes)
        frame = find_framework(molecule)
        atoms = pi_atoms(["C"] * sites, [3] * sites)
        amplitudes = hueckel_matrix(frame, atoms, rule=rule).amplitudes  # type: ignore[arg-type]  # text
        expected = -math.cos(math.pi * half_twists / sites)
        np.testing.assert_allclose(amplitudes, expected, rtol=0, atol=1e-12)


def test_rules_on_flat_and_turned_frames() -> None:
    """Flat: all rules agree. Biphenyl turned by 60 degrees: the bond between counts one half."""
    for rule in ("torsion", "cosine", "slater-koster"):
        flat = Solved(shapes.acene(2), rule=rule)
        np.testing.assert_allclose(
            flat.sheet.x, Solved(shapes.acene(2)).sheet.x, rtol=0, atol=EXACT
        )
        turned = Solved(shapes.biphenyl(math.pi / 3), rule=rule)
        strengths = np.sort(np.abs(turned.matrix.amplitudes))
        np.testing.assert_allclose(strengths, [0.5, *[1.0] * 12], rtol=0, atol=1e-9)
    apart = Solved(shapes.biphenyl(math.pi / 2), rule="torsion").sheet
    assert math.isclose(apart.pi_energy, 16.0, abs_tol=1e-9)  # two benzenes


def test_sigma_part_on_a_bent_frame() -> None:
    """(n_i.u)(n_j.u) V_sigma is put back; on a cylinder axes of neighbours lean oppositely."""
    places = shapes.cyclacene(5)
    without = Solved(places, rule="slater-koster")
    with_sigma = Solved(places, rule="slater-koster", v_sigma=0.5)
    bonds, axes = without.frame.network.bonds, without.frame.axes
    unit = bonds.displacement / np.linalg.norm(bonds.displacement, axis=1)[:, None]
    lean = np.einsum("ij,ij->i", axes[bonds.tail], unit) * np.einsum(
        "ij,ij->i", axes[bonds.head], unit
    )
    np.testing.assert_allclose(
        with_sigma.matrix.amplitudes - without.matrix.amplitudes, 0.5 * lean, rtol=0, atol=1e-12
    )
    assert np.abs(lean).max() > 0.03


def not_complete(*_: object) -> None:
    raise NotCertified("the iteration found too few")


@pytest.mark.parametrize("by_bands", [False, True])
def test_large_belts_give_the_frontier(by_bands: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    """Above 2,000 atoms: levels around the gap, counted, equal to the closed form."""
    if by_bands:  # the way that is left where the iteration gives up
        monkeypatch.setattr("ribbon.analysis.hueckel.levels_at", not_complete)
    rings = 505
    solved = Solved(shapes.twisted_belt(rings, 1))
    sheet = solved.sheet
    expected = known.cyclacene_adjacency(rings, half_twists=1, sigma=-1)[::-1]
    assert sheet.certificate.complete
    np.testing.assert_allclose(sheet.x, expected[sheet.index], rtol=0, atol=EXACT)
    assert sheet.index[0] <= 2 * rings - 11
    assert math.isclose(sheet.gap, known.moebius_cyclacene_gap(rings), abs_tol=EXACT)
    assert (sheet.bond_orders, sheet.charges, sheet.pi_energy) == (None, None, None)
    assert math.isclose(sheet.occupation.sum() + 2 * sheet.index[0], 4 * rings, abs_tol=EXACT)
    assert "frames of more than 2,000 atoms" in solved.stability.why_no_delocalisation
    assert solved.stability.other_closure_energy is None
