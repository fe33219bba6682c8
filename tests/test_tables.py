"""Hückel tables: frames from their own bond lists against printed values.

Values to four decimals, in units of beta (E = alpha + beta x): A. Streitwieser, Molecular Orbital
Theory for Organic Chemists (1961); C. A. Coulson & A. Streitwieser, Dictionary of pi-Electron
Calculations (1965); E. Heilbronner & H. Bock, The HMO Model (1976) - recalled from memory unless a
test says otherwise. Every frame is also solved by an independent route: the characteristic
polynomial of its adjacency matrix in exact integers (sympy), rooted with 30 digits (mpmath).
"""

from __future__ import annotations

import itertools
import math
from typing import Any

import closed_forms as known
import mpmath
import networkx as nx
import numpy as np
import pytest
import sympy
from brute import Case

from ribbon.analysis import all_levels, find_gap
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network

Pairs = list[tuple[int, int]]
PRINTED = 6e-5
EXACT = 1e-9


def ring_pairs(sites: int) -> Pairs:
    return [(i, (i + 1) % sites) for i in range(sites)]


def fused_hexagons(*cells: tuple[int, int]) -> Pairs:
    """Bond list of a benzenoid from the axial places of its hexagons.

    Corners are named by integers twice their true place, so that shared ones coincide.
    """
    corners: dict[tuple[int, int], int] = {}
    bonds: set[tuple[int, int]] = set()
    around = [(0, 2), (1, 1), (1, -1), (0, -2), (-1, -1), (-1, 1)]
    for q, r in cells:
        walk = [(2 * q + r + x, 3 * r + y) for x, y in around]
        names = [corners.setdefault(corner, len(corners)) for corner in walk]
        ends = zip(names, names[1:] + names[:1], strict=True)
        bonds |= {(min(a, b), max(a, b)) for a, b in ends}
    return sorted(bonds)


def acene(rings: int) -> Pairs:
    return fused_hexagons(*[(q, 0) for q in range(rings)])


FRAMES: dict[str, Pairs] = {
    "ethylene": [(0, 1)],
    "butadiene": [(0, 1), (1, 2), (2, 3)],
    "hexatriene": [(i, i + 1) for i in range(5)],
    "benzene": ring_pairs(6),
    "naphthalene": acene(2),
    "anthracene": acene(3),
    "phenanthrene": fused_hexagons((0, 0), (1, 0), (1, 1)),
    "tetracene": acene(4),
    "pentacene": acene(5),
    "hexacene": acene(6),
    "biphenyl": [*ring_pairs(6), *[(6 + a, 6 + b) for a, b in ring_pairs(6)], (0, 6)],
    "pyrene": fused_hexagons((0, 0), (1, 0), (0, 1), (1, -1)),
    "triphenylene": fused_hexagons((0, 0), (1, 0), (-1, 1), (0, -1)),
    "coronene": fused_hexagons((0, 0), (1, 0), (0, 1), (-1, 1), (-1, 0), (0, -1), (1, -1)),
    "trimethylenemethane": [(0, 1), (0, 2), (0, 3)],
    "methylenecyclopropene": [(0, 1), (1, 2), (2, 0), (0, 3)],
    "fulvene": [*ring_pairs(5), (0, 5)],
    "heptafulvene": [*ring_pairs(7), (0, 7)],
    "pentalene": [*ring_pairs(8), (0, 4)],
    "azulene": [*ring_pairs(10), (0, 4)],
    "heptalene": [*ring_pairs(12), (0, 6)],
}
SIZES = {"naphthalene": (10, 11), "pyrene": (16, 19), "triphenylene": (18, 21)}
SIZES |= {"coronene": (24, 30), "phenanthrene": (14, 16), "tetracene": (18, 21)}


def levels_of(pairs: Pairs, **options: Any) -> Any:
    return all_levels(assemble(Network.from_pairs(pairs), Hopping(shells=(1.0,))), **options)


def x_values(pairs: Pairs) -> np.ndarray:
    """x = (E - alpha)/beta, largest (lowest in energy) first; here E = -t x."""
    return -levels_of(pairs).energies


def pi_energy(values: np.ndarray) -> float:
    """Two electrons a level, one electron an atom, in units of beta."""
    filled = values[: len(values) // 2].sum() * 2
    return float(filled + (values[len(values) // 2] if len(values) % 2 else 0.0))


@pytest.mark.parametrize("name", SIZES)
def test_frames_have_the_right_number_of_atoms_and_bonds(name: str) -> None:
    """Guards the bond lists made from hexagons."""
    pairs = FRAMES[name]
    assert (len({site for pair in pairs for site in pair}), len(pairs)) == SIZES[name]


@pytest.mark.parametrize("name", FRAMES)
def test_levels_are_the_roots_of_the_characteristic_polynomial(name: str) -> None:
    """Exact integer polynomial by sympy, roots by mpmath with their multiplicities."""
    pairs = FRAMES[name]
    size = 1 + max(max(pair) for pair in pairs)
    matrix = sympy.zeros(size)
    for a, b in pairs:
        matrix[a, b] = matrix[b, a] = 1
    roots: list[float] = []
    _, factors = sympy.factor_list(matrix.charpoly().as_expr())
    for factor, multiplicity in factors:
        with mpmath.workdps(30):
            coefficients = [int(c) for c in sympy.Poly(factor).all_coeffs()]
            found = mpmath.polyroots(coefficients, maxsteps=500, extraprec=200)
        assert max(abs(mpmath.im(root)) for root in found) < 1e-20
        roots += multiplicity * [float(mpmath.re(root)) for root in found]
    np.testing.assert_allclose(x_values(pairs)[::-1], np.sort(roots), rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("name", "upper"),
    [
        ("butadiene", [1.6180, 0.6180]),
        ("hexatriene", [1.8019, 1.2470, 0.4450]),
        ("benzene", [2, 1, 1]),
        ("naphthalene", [2.3028, 1.6180, 1.3028, 1.0000, 0.6180]),
        ("anthracene", [2.4142, 2, 1.4142, 1.4142, 1, 1, 0.4142]),
    ],
)
def test_levels_of_alternant_frames(name: str, upper: list[float]) -> None:
    """Printed bonding levels, and the pairing x, -x (Coulson & Rushbrooke 1940)."""
    values = x_values(FRAMES[name])
    np.testing.assert_allclose(values[: len(upper)], upper, rtol=0, atol=PRINTED)
    np.testing.assert_allclose(values, -values[::-1], rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("methylenecyclopropene", [2.1701, 0.3111, -1.0000, -1.4812]),
        ("fulvene", [2.1149, 1.0000, 0.6180, -0.2541, -1.6180, -1.8608]),
        ("pentalene", [2.3429, 1.4142, 1.0000, 0.4707, 0.0, -1.4142, -1.8136, -2.0000]),
        (
            "azulene",
            [2.3103, 1.6516, 1.3557, 0.887, 0.4773, -0.4004, -0.7376, -1.5792, -1.8692, -2.0953],
        ),
    ],
)
def test_levels_of_non_alternant_frames(name: str, expected: list[float]) -> None:
    """No pairing here: signs of x are tested too."""
    np.testing.assert_allclose(x_values(FRAMES[name]), expected, rtol=0, atol=PRINTED)


@pytest.mark.parametrize(
    ("name", "total"),
    [
        ("ethylene", 2.0),
        ("butadiene", 4.4721),
        ("hexatriene", 6.9879),
        ("benzene", 8.0),
        ("naphthalene", 13.6832),
        ("anthracene", 19.3137),
        ("phenanthrene", 19.4483),
        ("tetracene", 24.9308),
        ("pentacene", 30.5440),
        ("hexacene", 36.1560),
        ("biphenyl", 16.3834),
        ("pyrene", 22.5055),
        ("triphenylene", 25.2745),
        ("coronene", 34.5718),
        ("trimethylenemethane", 3.4641),
        ("methylenecyclopropene", 4.9624),
        ("fulvene", 7.4659),
        ("heptafulvene", 9.9944),
        ("pentalene", 10.4556),
        ("azulene", 13.3635),
        ("heptalene", 15.6182),
    ],
)
def test_pi_energies(name: str, total: float) -> None:
    """Total energies of the neutral frames."""
    assert math.isclose(pi_energy(x_values(FRAMES[name])), total, abs_tol=PRINTED)


@pytest.mark.parametrize(
    ("name", "homo"),
    [
        ("biphenyl", 0.7046),
        ("pyrene", 0.4450),
        ("triphenylene", 0.6840),
        ("coronene", 0.5392),
        ("tetracene", 0.2950),
        ("pentacene", 0.2197),
        ("hexacene", 0.1694),
        ("azulene", 0.4773),
    ],
)
def test_highest_occupied_level(name: str, homo: float) -> None:
    """The frontier level at neutral filling, from the gap as the library finds it."""
    network = Network.from_pairs(FRAMES[name])
    hamiltonian = assemble(network, Hopping(shells=(1.0,)))
    gap = find_gap(hamiltonian, electrons=network.n, spin=2)
    assert math.isclose(-gap.lower, homo, abs_tol=PRINTED)
    assert (gap.lower_index, gap.upper_index) == (network.n // 2 - 1, network.n // 2)
    assert not gap.open_shell
    if name != "azulene":  # alternant: the lowest empty level mirrors it
        assert math.isclose(gap.upper, homo, abs_tol=PRINTED)


def test_trimethylenemethane_is_an_open_shell() -> None:
    """Two non-bonding levels share two electrons."""
    values = x_values(FRAMES["trimethylenemethane"])
    assert np.count_nonzero(np.abs(values) < EXACT) == 2
    hamiltonian = assemble(Network.from_pairs(FRAMES["trimethylenemethane"]), Hopping())
    assert find_gap(hamiltonian, electrons=4, spin=2).open_shell


def bond_orders(pairs: Pairs) -> dict[frozenset[int], float]:
    """p_rs = sum n c_r c_s over the filled levels (Coulson 1939)."""
    states = levels_of(pairs, states=True).states
    filled = states[:, : states.shape[0] // 2]
    density = 2 * np.real(filled @ filled.conj().T)
    return {frozenset(pair): float(density[pair]) for pair in pairs}


@pytest.mark.parametrize(
    ("name", "orders"),
    [
        ("benzene", [2 / 3] * 6),
        ("butadiene", [0.8944, 0.4472, 0.8944]),
        ("naphthalene", [0.7246] * 4 + [0.6032] * 2 + [0.5547] * 4 + [0.5182]),
        (
            "anthracene",
            [0.7374] * 4 + [0.5859] * 2 + [0.5354] * 4 + [0.6061] * 4 + [0.4849] * 2,
        ),
    ],
)
def test_bond_orders(name: str, orders: list[float]) -> None:
    """From the states; degenerate levels filled together leave no arbitrary choice."""
    found = np.sort(list(bond_orders(FRAMES[name]).values()))
    np.testing.assert_allclose(found, np.sort(orders), rtol=0, atol=PRINTED)


def test_pi_energy_is_the_sum_of_bond_orders() -> None:
    """E = 2 beta sum p_rs (Coulson 1939), on a non-alternant frame."""
    pairs = FRAMES["azulene"]
    total = 2 * sum(bond_orders(pairs).values())
    assert math.isclose(total, pi_energy(x_values(pairs)), abs_tol=EXACT)


def perfect_matchings(pairs: Pairs) -> int:
    """Kekulé structures, counted by always matching the lowest free atom."""
    if not pairs:
        return 1
    first = min(min(pair) for pair in pairs)
    total = 0
    for a, b in pairs:
        if first in (a, b):
            rest = [pair for pair in pairs if not {a, b} & set(pair)]
            freed = {site for pair in pairs for site in pair} - {a, b}
            if freed == {site for pair in rest for site in pair}:
                total += perfect_matchings(rest)
    return total


@pytest.mark.parametrize("rings", range(1, 7))
def test_kekule_structures_of_acenes(rings: int) -> None:
    """det A = (-1)^(n/2) K^2 (Dewar & Longuet-Higgins 1952 [M]); K = rings + 1."""
    values = x_values(acene(rings))
    product = math.prod(values.tolist()) * (-1) ** (len(values) // 2)
    assert math.isclose(product, (rings + 1) ** 2, rel_tol=1e-9)
    assert perfect_matchings(acene(rings)) == rings + 1


@pytest.mark.parametrize("name", ["pyrene", "triphenylene", "coronene", "phenanthrene"])
def test_kekule_structures_of_benzenoids(name: str) -> None:
    """The same with K counted from the bond list."""
    values = x_values(FRAMES[name])
    kekule = perfect_matchings(FRAMES[name])
    product = math.prod(values.tolist()) * (-1) ** (len(values) // 2)
    assert math.isclose(product, kekule**2, rel_tol=1e-8)
    assert kekule == {"pyrene": 6, "triphenylene": 9, "coronene": 20, "phenanthrene": 5}[name]


ANNULENES = {  # N: cyclic, Möbius, linear (Heilbronner 1964; recomputed sums of the closed forms)
    4: (4.0000, 5.6569, 4.4721),
    6: (8.0000, 6.9282, 6.9879),
    8: (9.6569, 10.4525, 9.5175),
    10: (12.9443, 12.3107, 12.0533),
    12: (14.9282, 15.4548, 14.5925),
    14: (17.9758, 17.5251, 17.1335),
    16: (20.1094, 20.5033, 19.6759),
    18: (23.0351, 22.6851, 22.2191),
    20: (25.2550, 25.5698, 24.7630),
}


@pytest.mark.parametrize("sites", ANNULENES)
def test_half_filled_totals_of_annulenes(sites: int, hamiltonian_of: Any) -> None:
    """4/sin(pi/N) closed, 4/tan(pi/N) open, 2/sin(pi/(2(N + 1))) - 2 linear."""
    cyclic = -all_levels(hamiltonian_of(Case("square", 1, sites, 0))).energies
    twisted = -all_levels(hamiltonian_of(Case("square", 1, sites, 1, -1))).energies
    linear = x_values([(i, i + 1) for i in range(sites - 1)])
    found = [pi_energy(values) for values in (cyclic, twisted, linear)]
    np.testing.assert_allclose(found, ANNULENES[sites], rtol=0, atol=PRINTED)
    exact = [known.half_filled_total(kind, sites) for kind in ("cycle", "moebius", "linear")]
    np.testing.assert_allclose(found, exact, rtol=0, atol=EXACT)


@pytest.mark.parametrize(
    ("sites", "half_twists", "gap"),
    [(6, 0, 2.0), (8, 1, 1.5307), (12, 1, 1.0353), (16, 1, 0.7804), (8, 0, 0.0), (6, 1, 0.0)],
)
def test_gap_of_annulenes(sites: int, half_twists: int, gap: float, hamiltonian_of: Any) -> None:
    """4 sin(pi/N) for the aromatic parity, an open shell for the other."""
    hamiltonian = hamiltonian_of(Case("square", 1, sites, half_twists, -1 if half_twists else 1))
    found = find_gap(hamiltonian, electrons=sites, spin=2)
    assert math.isclose(found.gap, gap, abs_tol=PRINTED)
    if gap:
        assert math.isclose(found.gap, 4 * math.sin(math.pi / sites), abs_tol=EXACT)
    assert found.open_shell == (gap == 0)


@pytest.mark.parametrize(
    ("electrons", "cyclic", "twisted"), [(8, 10.8229, 11.5175), (10, 11.5175, 10.8229)]
)
def test_nine_ring_ions(electrons: int, cyclic: float, twisted: float, hamiltonian_of: Any) -> None:
    """C9H9+ and C9H9-: the cation is the Möbius one, the anion the Hückel one."""
    for half_twists, total in ((0, cyclic), (1, twisted)):
        case = Case("square", 1, 9, half_twists, -1 if half_twists else 1)
        values = -all_levels(hamiltonian_of(case)).energies
        assert math.isclose(2 * values[: electrons // 2].sum(), total, abs_tol=PRINTED)


@pytest.mark.parametrize("sites", [8, 16, 20])
def test_twist_corrected_moebius_annulene(sites: int) -> None:
    """beta cos(pi/N) on every bond: exactly the planar total 4 cot(pi/N) (Heilbronner 1964)."""
    pairs = ring_pairs(sites)
    hopping = Hopping(shells=(math.cos(math.pi / sites),))
    scaled = all_levels(assemble(Network.from_pairs(pairs), hopping)).energies
    planar = known.half_filled_total("cycle", sites)
    assert math.isclose(planar, 4 / math.tan(math.pi / sites), abs_tol=EXACT)
    plain = x_values(pairs) * math.cos(math.pi / sites)
    np.testing.assert_allclose(-scaled, plain, rtol=0, atol=EXACT)
    twisted = -known.moebius_annulene(sites) * math.cos(math.pi / sites)
    assert math.isclose(pi_energy(twisted), planar, abs_tol=EXACT)


def closed_walks_of_triangles(steps: int) -> int:
    """Constant term of (x + 1/x + y + 1/y + xy + 1/(xy))^n, walked on integer pairs."""
    moves = [(1, 0), (-1, 0), (0, 1), (0, -1), (1, 1), (-1, -1)]
    places = {(0, 0): 1}
    for _ in range(steps):
        after: dict[tuple[int, int], int] = {}
        for ((x, y), ways), (dx, dy) in itertools.product(places.items(), moves):
            after[x + dx, y + dy] = after.get((x + dx, y + dy), 0) + ways
        places = after
    return places.get((0, 0), 0)


HONEYCOMB_WALKS = [3, 15, 93, 639, 4653]


@pytest.mark.parametrize("half_twists", [0, 1])
@pytest.mark.parametrize(
    ("lattice", "rows", "length", "walks", "stride"),
    [
        ("honeycomb-zigzag", 12, 12, HONEYCOMB_WALKS, 2),
        ("honeycomb-armchair", 15, 8, HONEYCOMB_WALKS, 2),
        ("square", 13, 12, [math.comb(2 * n, n) ** 2 for n in range(1, 6)], 2),
        ("triangular", 11, 12, [closed_walks_of_triangles(n) for n in range(1, 6)], 1),
    ],
)
def test_closed_walks_inside_a_ribbon(
    lattice: str,
    rows: int,
    length: int,
    walks: list[int],
    stride: int,
    half_twists: int,
    hamiltonian_of: Any,
) -> None:
    """<i|A^n|i> far from the edges counts the closed walks of the endless lattice.

    Honeycomb 3, 15, 93, 639, 4653 (moments of the density of states of Hobson & Nierenberg 1953);
    square C(2n, n)^2; triangular 0, 6, 12, 90, 360 by counting.
    """
    hamiltonian = hamiltonian_of(Case(lattice, rows, length, half_twists))
    adjacency = -hamiltonian.matrix(0.0).toarray()
    heights = np.abs(hamiltonian.network.positions[:, 1])
    site = int(np.argmin(heights))
    vector = np.eye(hamiltonian.n)[site]
    found = []
    for step in range(1, stride * 5 + 1):
        vector = adjacency @ vector
        if step % stride == 0:
            found.append(vector[site])
    np.testing.assert_allclose(found, walks, rtol=0, atol=1e-8)


@pytest.mark.parametrize(("sites", "half_twists"), [(5, 0), (6, 0), (6, 1), (7, 1)])
def test_chebyshev_moments_of_a_ring(sites: int, half_twists: int, hamiltonian_of: Any) -> None:
    """(1/N) Tr T_n(A/2) = cos(2 pi flux m) if n = mN, else 0; a Möbius annulene has flux + 1/2.

    Follows from x = 2 cos(2 pi (j + flux)/N) and T_n(cos u) = cos(n u).
    """
    case = Case("square", 1, sites, half_twists, -1 if half_twists else 1)
    flux = 0.2
    angles = np.arccos(np.clip(-all_levels(hamiltonian_of(case), flux=flux).energies / 2, -1, 1))
    for n in range(1, 3 * sites + 1):
        turns = (flux + half_twists / 2) * n / sites
        expected = math.cos(2 * math.pi * turns) if n % sites == 0 else 0.0
        assert math.isclose(np.cos(n * angles).mean(), expected, abs_tol=1e-8)


def test_complete_graph_and_wagner_graph() -> None:
    """K4 {3, -1^3}, K33 {3, 0^4, -3}, Wagner graph: n = 2, 3, 4 rungs (Biggs [M])."""
    root2 = math.sqrt(2)
    expected = {
        2: [3, -1, -1, -1],
        3: [3, 0, 0, 0, 0, -3],
        4: [3, 1, 1, root2 - 1, root2 - 1, -1, -root2 - 1, -root2 - 1],
    }
    for rungs, values in expected.items():
        graph = nx.circulant_graph(2 * rungs, [1, rungs])
        np.testing.assert_allclose(x_values(list(graph.edges)), values, rtol=0, atol=EXACT)
