"""Bonds, faces and kinds of frames, found from coordinates alone.

Counts are Euler's, levels are not asked here. Linking on the twisted ring r(x, y) is -h half turns
(left-handed, physics of the ring in space), +h for its mirror image, and Lk = Tw + Wr
(Călugăreanu; White, Am. J. Math. 91, 693 (1969)).
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import molecule_shapes as shapes
import numpy as np
import pytest

from ribbon.errors import BadInput
from ribbon.lattice import Network
from ribbon.lattice.centre_line import find_way_round, lift
from ribbon.lattice.faces import find_faces, join_faces
from ribbon.lattice.framework import find_framework
from ribbon.lattice.molecule import Molecule, bond_atoms
from ribbon.lattice.topology import coordination_numbers

KEKULENE = [
    (q, r) for q in range(-2, 3) for r in range(-2, 3) if max(abs(q), abs(r), abs(q + r)) == 2
]
EIGHT = sorted({*KEKULENE, *[(q + 4, r - 2) for q, r in KEKULENE]})
CORONENE = [(0, 0), (1, 0), (0, 1), (-1, 1), (-1, 0), (0, -1), (1, -1)]


def molecule_of(places: np.ndarray, element: str = "C", **options: Any) -> Any:
    return bond_atoms([element] * len(places), places / 10, **options)


def frame_of(places: np.ndarray) -> Any:
    return find_framework(molecule_of(places))


def turns_of(frame: Any) -> tuple[int, float, float]:
    twist = frame.twisting
    assert twist is not None, frame.remark
    assert math.isclose(
        twist.linking_half_turns, twist.twist_half_turns + twist.writhe_half_turns, abs_tol=1e-6
    )
    return round(twist.linking_half_turns), twist.twist_half_turns, twist.writhe_half_turns


SHAPES = {  # places: kind, atoms, bonds, rings by size, loops, V - E + F
    "benzene": (shapes.polygon(6), "ring", 6, 6, {}, 2, 0),
    "naphthalene": (shapes.acene(2), "sheet", 10, 11, {6: 2}, 1, 1),
    "anthracene": (shapes.acene(3), "sheet", 14, 16, {6: 3}, 1, 1),
    "coronene": (shapes.fused_hexagons(*CORONENE), "sheet", 24, 30, {6: 7}, 1, 1),
    "kekulene": (shapes.fused_hexagons(*KEKULENE), "belt", 48, 60, {6: 12}, 2, 0),
    "figure eight": (shapes.fused_hexagons(*EIGHT), "loops", 82, 104, {6: 21}, 3, -1),
    "biphenyl": (shapes.biphenyl(0.7), "rings", 12, 13, {6: 2}, 1, 1),
    "hoop of 8": (shapes.paraphenylene_hoop(8), "hoop", 48, 56, {6: 8}, 2, 0),
    "cage of 20": (shapes.dodecahedron(), "cage", 20, 30, {5: 12}, 0, 2),
    "cage of 60": (shapes.buckminsterfullerene(), "cage", 60, 90, {5: 12, 6: 20}, 0, 2),
    "short tube": (shapes.cyclacene(9, rows=4), "belt", 72, 99, {6: 27}, 2, 0),
    "cyclacene of 3": (shapes.cyclacene(3), "belt", 12, 15, {6: 3}, 2, 0),
    "cyclacene of 6": (shapes.cyclacene(6), "belt", 24, 30, {6: 6}, 2, 0),
    "ethylene": (np.array([[0, 0, 0], [1.34, 0, 0]]), "chain", 2, 1, {}, 1, 1),
}


@pytest.mark.parametrize("name", SHAPES)
def test_kinds_of_frames(name: str) -> None:
    """Bonds, filled rings, V - E + F and loops as counted by hand; all two-sided."""
    places, kind, atoms, bonds, sizes, loops, euler = SHAPES[name]
    frame = frame_of(places)
    assert (frame.kind, frame.network.n, frame.network.bonds.m) == (kind, atoms, bonds)
    assert frame.surface.sizes == sizes
    assert (frame.boundary_loops, frame.euler_characteristic) == (loops, euler)
    assert frame.orientable
    closes = kind in {"ring", "belt", "hoop"}
    assert (frame.twisting is not None) == closes == (frame.remark == "")
    if closes:
        assert turns_of(frame) == pytest.approx((0, 0.0, 0.0), abs=1e-9)
    else:
        assert "no linking and twist: the frame is " in frame.remark
        assert frame.meaning in frame.remark


@pytest.mark.parametrize("rings", [4, 5, 6, 7, 9, 12, 20])
@pytest.mark.parametrize("hand", ["left", "right"])
def test_half_twisted_belts(rings: int, hand: str) -> None:
    """r(x, y) with h = 1: one loop, one-sided, Lk = -1 and, on a plane circle, Tw = -1, Wr = 0.

    With 4 to 6 hexagons second neighbours come nearer than bonds elsewhere are long.
    """
    places = shapes.twisted_belt(rings, 1)
    sign = -1 if hand == "left" else 1
    frame = frame_of(places * [1, 1, -sign])
    assert (frame.kind, frame.surface.sizes, frame.network.bonds.m) == (
        "belt",
        {6: rings},
        5 * rings,
    )
    assert (frame.boundary_loops, frame.orientable, frame.euler_characteristic) == (1, False, 0)
    assert turns_of(frame) == pytest.approx((sign, sign, 0.0), abs=1e-9)


@pytest.mark.parametrize("rings", [4, 5, 6, 7, 12])
def test_bonds_of_half_twisted_belts(rings: int) -> None:
    """Exactly those of the flat strip with its seam flipped, however crowded the inner side."""
    x, y, length = shapes.belt_strip(rings)
    expected = set()
    for turn in (-1, 0, 1):
        across = y * (-1) ** turn
        apart = np.hypot(x[None, :] + turn * length - x[:, None], across[None, :] - y[:, None])
        expected |= {
            frozenset(pair) for pair in np.argwhere(np.abs(apart - shapes.BOND) < 1e-6).tolist()
        }
    bonds = molecule_of(shapes.twisted_belt(rings, 1)).network.bonds
    ends = zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True)
    assert set(map(frozenset, ends)) == expected


@pytest.mark.parametrize(("half_twists", "loops"), [(0, 2), (1, 1), (2, 2), (3, 1), (4, 2)])
@pytest.mark.parametrize("rows", [2, 4])
def test_more_half_twists(half_twists: int, loops: int, rows: int) -> None:
    """Lk = -h, loops 1 for odd h; four rows have no single row of faces and are averaged."""
    frame = frame_of(shapes.twisted_belt(40, half_twists, rows))
    assert (frame.kind, frame.boundary_loops, frame.orientable) == ("belt", loops, loops == 2)
    linking, twist, writhe = turns_of(frame)
    assert (linking, twist) == pytest.approx((-half_twists, -half_twists), abs=1e-3)
    assert abs(writhe) < 1e-3


@pytest.mark.parametrize(
    ("sites", "half_twists"),
    [(8, 0), (10, 1), (12, 1), (16, 1), (20, 1), (16, 2), (20, 2), (20, 3)],
)
def test_annulenes_by_their_axes(sites: int, half_twists: int) -> None:
    """A zigzag chain on r(x, y): the planes of three neighbours turn by h half turns."""
    frame = frame_of(shapes.annulene(sites, half_twists))
    assert (frame.kind, frame.surface.faces) == ("ring", ())
    assert frame.orientable == (half_twists % 2 == 0)
    assert frame.boundary_loops == 2 - half_twists % 2
    linking, twist, writhe = turns_of(frame)
    assert linking == -half_twists
    # the zigzag line coils a little itself; its mirror image does so the other way
    other = turns_of(frame_of(shapes.annulene(sites, half_twists) * [1, 1, -1]))
    assert other == pytest.approx((half_twists, -twist, -writhe), abs=1e-9)


@pytest.mark.parametrize(("sites", "half_twists"), [(8, 1), (9, 1), (9, 2), (12, 2), (12, 3)])
def test_hydrogens_make_the_axes_of_tight_rings_clear(sites: int, half_twists: int) -> None:
    """Without them the planes of three carbons turn too far to follow, and this is said."""
    places = shapes.annulene(sites, half_twists)
    bare = frame_of(places)
    assert bare.twisting is None
    assert "too far to follow it" in bare.remark
    held = molecule_of(places, hydrogens=shapes.annulene_hydrogens(sites, half_twists) / 10)
    assert set(held.neighbours.tolist()) == {3}
    frame = find_framework(held)
    assert turns_of(frame)[0] == -half_twists
    assert frame.orientable == (half_twists % 2 == 0)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("shape", ["belt", "wide belt", "annulene", "cage", "hoop", "eight"])
def test_numbering_and_place_do_not_matter(shape: str, seed: int) -> None:
    """Atoms shuffled, turned and moved: the same frame."""
    places = {
        "belt": shapes.twisted_belt(12, 1),
        "wide belt": shapes.twisted_belt(30, 3, rows=4),
        "annulene": shapes.annulene(16, 1),
        "cage": shapes.buckminsterfullerene(),
        "hoop": shapes.paraphenylene_hoop(7),
        "eight": shapes.fused_hexagons(*EIGHT),
    }[shape]
    one, other = frame_of(places), frame_of(shapes.turned(places, seed)[0])
    assert (one.kind, one.surface.sizes, one.orientable) == (
        other.kind,
        other.surface.sizes,
        other.orientable,
    )
    assert (one.boundary_loops, one.network.bonds.m) == (
        other.boundary_loops,
        other.network.bonds.m,
    )
    assert one.weakest == pytest.approx(other.weakest, abs=1e-9)
    if one.twisting is not None:
        assert turns_of(one) == pytest.approx(turns_of(other), abs=1e-6)


def test_signs_round_every_face_and_the_core() -> None:
    """+1 round every hexagon; -1 round the core of a one-sided belt: no seam was marked."""
    for rings, half_twists in ((4, 1), (15, 1), (15, 2)):
        frame = frame_of(shapes.twisted_belt(rings, half_twists))
        bonds = frame.network.bonds
        number = {
            frozenset(pair): k
            for k, pair in enumerate(zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True))
        }

        def product(ring: Any, frame: Any = frame, number: Any = number) -> float:
            ends = zip(ring, [*ring[1:], ring[0]], strict=True)
            return float(np.prod([frame.signs[number[frozenset(pair)]] for pair in ends]))

        assert all(product(face) == 1 for face in frame.surface.faces)
        assert product(frame.way_round.core.tolist()) == (-1) ** half_twists


def test_way_round_is_a_closed_form() -> None:
    """Passes sum to 0 round every face and to 1 round the core; evened, to 0 at every atom."""
    frame = frame_of(shapes.twisted_belt(20, 1, rows=4))
    bonds, way = frame.network.bonds, frame.way_round
    step = {}
    for a, b, passes in zip(
        bonds.tail.tolist(), bonds.head.tolist(), way.passes.tolist(), strict=True
    ):
        step[a, b], step[b, a] = passes, -passes
    for face in frame.surface.faces:
        assert sum(step[pair] for pair in zip(face, (*face[1:], face[0]), strict=True)) == 0
    core = way.core.tolist()
    assert sum(step[pair] for pair in zip(core, [*core[1:], core[0]], strict=True)) == 1
    unrolled = lift(frame.network.n, bonds, way.passes)
    advance = unrolled.turn[bonds.head] - unrolled.turn[bonds.tail]
    # along the tree that was followed the advance is less than a turn; elsewhere a turn is off
    advance -= np.rint(advance)
    flow = np.bincount(bonds.tail, advance, minlength=frame.network.n)
    flow -= np.bincount(bonds.head, advance, minlength=frame.network.n)
    np.testing.assert_allclose(flow, 0, rtol=0, atol=1e-9)
    assert unrolled.longest < 0.5


def test_no_single_way_round() -> None:
    """A sheet has none, a figure eight two."""
    for places in (shapes.acene(3), shapes.fused_hexagons(*EIGHT)):
        frame = frame_of(places)
        assert find_way_round(frame.network.n, frame.network.bonds, frame.surface) is None


def test_faces_are_no_sections_of_a_tube() -> None:
    """The rim of a cyclacene of three hexagons is a ring of six too, but its axes lie in it."""
    molecule = molecule_of(shapes.cyclacene(3))
    bonds = molecule.network.bonds
    places = molecule.network.positions
    assert len(find_faces(places, bonds, molecule.axes)) == 3
    upright = np.tile([0.0, 0.0, 1.0], (12, 1))
    assert len(find_faces(places, bonds, upright)) == 2


def test_surfaces_glued_by_hand() -> None:
    """Three squares on one bond branch; a closed tetrahedron and a projective plane have no rim."""
    branched = join_faces(((0, 1, 2, 3), (0, 1, 4, 5), (0, 1, 6, 7)))
    assert branched.branches
    assert branched.boundary_loops is None
    tetrahedron = join_faces(((0, 1, 2), (0, 1, 3), (0, 2, 3), (1, 2, 3)))
    assert (tetrahedron.boundary_loops, tetrahedron.orientable) == (0, True)
    # six vertices of the projective plane (half an icosahedron): V - E + F = 6 - 15 + 10 = 1
    plane = join_faces(
        (
            *((0, 1, 2), (0, 2, 3), (0, 3, 4), (0, 4, 5), (0, 1, 5)),
            *((1, 2, 4), (2, 3, 5), (1, 3, 4), (2, 4, 5), (1, 3, 5)),
        )
    )
    assert (plane.boundary_loops, plane.orientable, plane.pieces) == (0, False, 1)
    spiro = join_faces(((0, 1, 2, 3), (0, 4, 5, 6)))
    assert (spiro.pieces, spiro.pinched, spiro.boundary_loops) == (2, True, 2)


def test_several_molecules() -> None:
    """Two benzenes 4 angstrom apart: said, not guessed at."""
    ring = shapes.polygon(6)
    frame = frame_of(np.concatenate([ring, ring + np.array([0, 0, 4.0])]))
    assert (frame.kind, frame.boundary_loops, frame.twisting) == ("pieces", None, None)
    assert "several molecules" in frame.remark


def test_rings_that_branch() -> None:
    """Three hexagons on one bond like the pages of a book make no surface.

    Carbon would be saturated there, so the molecule is put together by hand.
    """
    hexagon = shapes.polygon(6)
    spine = (hexagon[0] + hexagon[1]) / 2
    along = (hexagon[1] - hexagon[0]) / shapes.BOND
    across = -spine / np.linalg.norm(spine)
    up = np.array([0.0, 0.0, 1.0])
    places, axes, pairs = [*(hexagon - spine)[:2]], [up, up], [(0, 1)]
    flat = (hexagon - spine)[2:]
    for angle in 2 * np.pi * np.arange(3) / 3:
        out = np.cos(angle) * across + np.sin(angle) * up
        first = len(places)
        pairs += [(1, first), (first, first + 1), (first + 1, first + 2), (first + 2, first + 3)]
        pairs.append((first + 3, 0))
        places += [*(np.outer(flat @ across, out) + np.outer(flat @ along, along))]
        axes += [np.cross(along, out)] * 4
    network = Network.from_pairs(pairs, positions=np.array(places) / 10)
    molecule = Molecule(
        elements=np.array(["C"] * 14),
        network=network,
        given=np.arange(14),
        neighbours=coordination_numbers(14, network.bonds),
        axes=np.array(axes),
    )
    frame = find_framework(molecule)
    assert (frame.kind, frame.surface.sizes) == ("branched", {6: 3})
    assert (frame.boundary_loops, frame.orientable, frame.twisting) == (None, None, None)
    assert "share a bond three by three" in frame.remark


# --- bonds -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("length", "bonded", "doubtful"),
    [
        *((1.00, True, True), (1.20, True, False), (1.40, True, False), (1.54, True, False)),
        *((1.80, True, True), (2.05, True, True), (2.20, False, True), (2.40, False, False)),
    ],
)
def test_bonds_between_two_carbons(length: float, bonded: bool, doubtful: bool) -> None:
    """Against 1.45 times twice 0.73 angstrom (Cordero et al. 2008 [M]); doubt from 1.75 on."""
    places = np.array([[0, 0, 0], [1.4, 0, 0], [1.4 + 0.9 * length, 0, math.sqrt(0.19) * length]])
    molecule = molecule_of(places)
    assert molecule.network.bonds.m == 1 + bonded
    assert len(molecule.doubtful) == doubtful
    if doubtful:
        pair = molecule.doubtful[0]
        assert (pair.first, pair.second, pair.bonded) == (1, 2, bonded)
        assert math.isclose(pair.length, length / 10)
        assert math.isclose(pair.limit, 0.2117, abs_tol=1e-9)
        assert pair.why.endswith("than bonds usually are")


def test_bonds_to_other_elements() -> None:
    """C-S 1.71, C-N 1.34, C-O 1.23, C-B 1.55: each within, the next neighbours outside."""
    for element, length in (("S", 1.71), ("N", 1.34), ("O", 1.23), ("B", 1.55)):
        places = np.array([[0, 0, 0], [length, 0, 0], [length + 0.7, 1.2, 0]]) / 10
        molecule = bond_atoms(["C", element, "C"], places)
        ends = zip(molecule.network.bonds.tail, molecule.network.bonds.head, strict=True)
        assert {tuple(map(int, pair)) for pair in ends} == {(0, 1), (1, 2)}
        assert molecule.doubtful == ()


def test_rings_of_three_and_four() -> None:
    """Their own sides are bonds, the diagonals of a square are not, and neither is in doubt."""
    for sites in (3, 4, 5):
        molecule = molecule_of(shapes.polygon(sites))
        assert (molecule.network.bonds.m, molecule.doubtful) == (sites, ())


def test_atom_between_leaves_doubt() -> None:
    """A flat triangle whose long side is 1.15 times its short ones: no bond, but listed."""
    half = 1.4 * 1.15 / 2
    places = np.array([[-half, 0, 0], [half, 0, 0], [0, math.sqrt(1.4**2 - half**2), 0]])
    molecule = molecule_of(places)
    assert molecule.network.bonds.m == 2
    assert [(pair.bonded, pair.why) for pair in molecule.doubtful] == [
        (False, "a third atom is nearer to both")
    ]


def test_saturated_atoms_are_left_out() -> None:
    """Toluene: the methyl carbon has four neighbours; without hydrogens it would stay."""
    ring = shapes.polygon(6)
    out = ring[0] / np.linalg.norm(ring[0])
    methyl = ring[0] + 1.5 * out
    tripod = [
        methyl + 0.36 * out + 1.03 * np.array([0, math.cos(a), math.sin(a)])
        for a in 2 * np.pi * np.arange(3) / 3
    ]
    hydrogens = np.array([*(ring[1:] * (1 + 1.09 / 1.4)), *tripod])
    places = np.concatenate([ring, [methyl]])
    molecule = molecule_of(places, hydrogens=hydrogens / 10)
    assert (molecule.n, molecule.saturated) == (6, (6,))
    assert molecule.given.tolist() == list(range(6))
    assert set(molecule.neighbours.tolist()) == {3}
    assert find_framework(molecule).kind == "ring"
    assert molecule_of(places).n == 7


REFUSED = {
    "unknown element": (
        lambda: bond_atoms(["C", "Si"], [[0, 0, 0], [0.1, 0, 0]]),
        "the element 'Si' has no covalent radius here; known: B, C, N, O, S",
    ),
    "shape": (
        lambda: bond_atoms(["C"], [[0, 0]]),
        r"positions have the shape \(1, 2\); expected \(1, 3\)",
    ),
    "not finite": (lambda: bond_atoms(["C"], [[0, 0, math.nan]]), "all finite"),
    "on top": (
        lambda: bond_atoms(["C", "C"], [[0, 0, 0], [0.07, 0, 0]]),
        "atom 0 and atom 1 are 0.7 angstrom apart, nearer than any bond",
    ),
    "apart": (
        lambda: bond_atoms(["C", "C"], [[0, 0, 0], [0.3, 0, 0]]),
        "no two of the 2 atoms are bonded: the nearest are 3 angstrom apart",
    ),
    "saturated": (
        lambda: bond_atoms(
            ["C"],
            [[0, 0, 0]],
            hydrogens=0.063 * np.array([[1, 1, 1], [-1, -1, 1], [-1, 1, -1], [1, -1, -1]]),
        ),
        "no p orbital is left",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refusals(name: str) -> None:
    """One sentence each."""
    make, sentence = REFUSED[name]
    with pytest.raises(BadInput, match=sentence):
        make()


def test_axes_along_the_line_give_no_twist() -> None:
    """Said with the reason; kind and loops are still told."""
    molecule = molecule_of(shapes.polygon(8))
    out = molecule.network.positions / np.linalg.norm(molecule.network.positions[0])
    along = np.cross([0.0, 0.0, 1.0], out)
    frame = find_framework(replace(molecule, axes=along))
    assert (frame.kind, frame.twisting) == ("ring", None)
    assert "zero or along the centre line" in frame.remark


def test_a_lone_atom() -> None:
    """An open chain of one; no bond is missed."""
    frame = frame_of(np.zeros((1, 3)))
    assert (frame.kind, frame.network.n, frame.boundary_loops) == ("chain", 1, 1)
    assert frame.weakest == 1.0
