"""The topology certificate against graph theory (networkx) and the geometry of plane tilings.

Faces are found again as the shortest cycles of the graph, boundary loops as the pieces of the
bonds that border one face only; the Euler characteristic of a band is 0 (L. Euler; B. Mohar &
C. Thomassen, Graphs on Surfaces, 2001 [recalled from memory]).
"""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from typing import Any

import brute
import networkx as nx
import numpy as np
import pytest
from brute import Case, cases
from hypothesis import assume, given
from hypothesis import strategies as st

from ribbon.hopping import draw_vacancies
from ribbon.lattice import (
    Network,
    Topology,
    certify_topology,
    close_strip,
    double_cover,
    lay_strip,
    open_strip,
    remove_sites,
    reseam,
)

EVERY_RING = [case for case in cases() if case.sigma == 1]
LARGE = [
    Case("square", 2, 8, 1),
    Case("square", 4, 7, 1),
    Case("square", 3, 8, 0),
    Case("square", 5, 7, 2),
    Case("triangular", 3, 7, 1),
    Case("triangular", 4, 7.5, 3),
    Case("triangular", 3, 7, 0),
    Case("honeycomb-zigzag", 2, 6, 1),
    Case("honeycomb-zigzag", 3, 6.5, 1),
    Case("honeycomb-zigzag", 3, 6, 2),
    Case("honeycomb-armchair", 4, 4.5, 1),
    Case("honeycomb-armchair", 5, 5, 3),
    Case("honeycomb-armchair", 4, 4, 0),
    Case("kagome", 3, 6, 1),
    Case("kagome", 5, 5.5, 1),
    Case("kagome", 3, 5, 0),
    Case("lieb", 3, 6, 1),
    Case("lieb", 5, 5, 3),
    Case("lieb", 3, 5, 0),
]
"""Long enough that every shortest cycle of the graph is a face of the tiling."""
FACES = {
    **{"square": (4,), "triangular": (3,), "honeycomb-zigzag": (6,)},
    **{"honeycomb-armchair": (6,), "kagome": (3, 6), "lieb": (8,)},
}


def ring_of_case(case: Case, **options: Any) -> Any:
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    return close_strip(strip, half_twists=case.half_twists, orbital="s", **options)


def graph_of(network: Network) -> nx.MultiGraph:
    graph = nx.MultiGraph()
    graph.add_nodes_from(range(network.n))
    first = network.bonds.shell == 1
    ends = zip(network.bonds.tail[first].tolist(), network.bonds.head[first].tolist(), strict=True)
    graph.add_edges_from(ends)
    return graph


def faces_of_a_tiling(lattice: str, rows: int, length: float) -> dict[int, int]:
    """Tiles of the plane that fit between the lines of a strip, per period times length."""
    between = {
        "square": {4: rows - 1},
        "triangular": {3: 2 * (rows - 1)},
        "honeycomb-zigzag": {6: rows - 1},
        "honeycomb-armchair": {6: rows - 2},
        "kagome": {3: rows - 1, 6: (rows - 1) // 2},
        "lieb": {8: (rows - 1) // 2},
    }[lattice]
    return {size: round(count * length) for size, count in between.items() if count > 0}


def assert_graph_facts(found: Topology, network: Network) -> None:
    """What networkx says of the same multigraph."""
    graph = graph_of(network)
    assert found.sites == graph.number_of_nodes()
    assert found.bonds == graph.number_of_edges()
    assert found.components == nx.number_connected_components(graph)
    assert found.coordination == dict(Counter(degree for _, degree in graph.degree()))
    assert found.bipartite == nx.is_bipartite(graph)
    if not found.bipartite:
        assert found.sublattice_balance is None
        assert found.guaranteed_zero_levels is None
        return
    matching = nx.max_weight_matching(nx.Graph(graph), maxcardinality=True)
    assert found.guaranteed_zero_levels == network.n - 2 * len(matching)
    assert found.sublattice_balance is not None
    larger, smaller = found.sublattice_balance
    assert larger >= smaller
    assert larger + smaller == network.n
    if found.components == 1:
        one, two = nx.bipartite.sets(nx.Graph(graph))
        assert {larger, smaller} == {len(one), len(two)}


# --- complete rings ------------------------------------------------------------------------------


@pytest.mark.parametrize("lattice", brute.LATTICES)
@pytest.mark.parametrize("half_twists", [0, 1, 2, 3])
def test_every_small_ring(lattice: str, half_twists: int) -> None:
    """Rows 1 to 5, lengths 1/2 to 4: tiles, V - E + F = 0, one edge or two, one-sided or not.

    Armchair rings of one row are dimers apart and no band: left to networkx alone.
    """
    tried = 0
    for case in EVERY_RING:
        if (case.lattice, case.half_twists) != (lattice, half_twists):
            continue
        ring = ring_of_case(case)
        found = certify_topology(ring)
        assert_graph_facts(found, ring)
        tried += 1
        if lattice == "honeycomb-armchair" and case.rows == 1:
            continue
        assert found.components == 1
        assert found.face_sizes == faces_of_a_tiling(*case[:3]), case
        assert found.faces == sum(found.face_sizes.values())
        assert found.euler_characteristic == 0
        assert found.boundary_loops == (1 if half_twists % 2 else 2)
        assert found.orientable == (half_twists % 2 == 0)
    assert tried > 5


def shortest_cycles(network: Network, sizes: tuple[int, ...]) -> list[list[int]]:
    found = nx.simple_cycles(nx.Graph(graph_of(network)), length_bound=max(sizes))
    return [cycle for cycle in found if len(cycle) in sizes]


def bordering_faces(cycles: list[list[int]]) -> Counter[frozenset[int]]:
    """How many of the faces each bond borders."""
    return Counter(
        frozenset(pair)
        for cycle in cycles
        for pair in zip(cycle, cycle[1:] + cycle[:1], strict=True)
    )


def outside_certificate(network: Network, sizes: tuple[int, ...]) -> tuple[dict[int, int], int]:
    """Faces and boundary loops from the shortest cycles of the graph, without any geometry."""
    cycles = shortest_cycles(network, sizes)
    borders = bordering_faces(cycles)
    edge = nx.Graph([tuple(pair) for pair, count in borders.items() if count == 1])
    return dict(Counter(map(len, cycles))), nx.number_connected_components(edge)


@pytest.mark.parametrize("case", LARGE)
def test_faces_and_loops_are_those_of_the_graph(case: Case) -> None:
    """Faces are the shortest cycles; bonds that border one face only form the loops.

    With two rows of the square or three of another lattice no bond hangs on the edge.
    """
    ring = ring_of_case(case)
    found = certify_topology(ring)
    faces, loops = outside_certificate(ring, FACES[case.lattice])
    assert found.face_sizes == faces
    assert found.boundary_loops == loops


@pytest.mark.parametrize("case", LARGE)
def test_orientation_follows_the_faces_around(case: Case) -> None:
    """Adjacent faces can be turned the same way round all over a two-sided band, and only there.

    Each face is walked in the sense in which the graph lists it; crossing a shared bond keeps or
    reverses the sense. The signed graph of faces is balanced (F. Harary, 1953) or not.
    """
    ring = ring_of_case(case)
    cycles = shortest_cycles(ring, FACES[case.lattice])
    seen: dict[frozenset[int], tuple[int, tuple[int, int]]] = {}
    doubled = nx.Graph()
    doubled.add_nodes_from((face, side) for face in range(len(cycles)) for side in (0, 1))
    for face, cycle in enumerate(cycles):
        for pair in zip(cycle, cycle[1:] + cycle[:1], strict=True):
            other, way = seen.setdefault(frozenset(pair), (face, pair))
            if other == face:
                continue
            turned = int(way == pair)  # the same way along a shared bond: opposite senses
            doubled.add_edges_from(((face, s), (other, s ^ turned)) for s in (0, 1))
    assert nx.is_connected(nx.Graph([(a[0], b[0]) for a, b in doubled.edges]))
    two_sided = nx.number_connected_components(doubled) == 2
    assert certify_topology(ring).orientable == two_sided == (case.half_twists % 2 == 0)


@pytest.mark.parametrize("case", [*LARGE, Case("square", 1, 9, 1), Case("kagome", 2, 5, 0)])
def test_the_place_of_the_seam_does_not_matter(case: Case) -> None:
    """The certificate is one of the ring, not of the strip it was cut from."""
    ring = ring_of_case(case)
    expected = certify_topology(ring)
    for seam in (1, 2, 5):
        assert certify_topology(reseam(ring, seam=seam)) == expected


@pytest.mark.parametrize("case", LARGE)
def test_further_neighbours_do_not_count(case: Case) -> None:
    """Topology speaks of the first shell."""
    more = certify_topology(ring_of_case(case, shells=3))
    assert more == certify_topology(ring_of_case(case))


@pytest.mark.parametrize(
    ("lattice", "rows", "length"),
    [("square", 3, 8), ("triangular", 3, 6), ("honeycomb-zigzag", 4, 5), ("kagome", 3, 4)],
)
def test_a_full_twist_has_the_bonds_of_none(lattice: str, rows: int, length: float) -> None:
    """h = 2 and h = 0 are one abstract surface: equal certificates and isomorphic graphs."""
    plain, full = (ring_of_case(Case(lattice, rows, length, h)) for h in (0, 2))
    assert certify_topology(plain) == certify_topology(full)
    half = ring_of_case(Case(lattice, rows, length, 1))
    assert certify_topology(half) != certify_topology(plain)
    graphs = [nx.Graph(graph_of(ring)) for ring in (plain, full, half)]
    assert nx.utils.graphs_equal(graphs[0], graphs[1])
    assert not nx.is_isomorphic(graphs[0], graphs[2])


@pytest.mark.parametrize("case", [case for case in LARGE if case.half_twists % 2])
def test_the_double_cover_is_two_sided(case: Case) -> None:
    """Twice the sites, bonds and faces; two edges instead of one (covering space of degree 2)."""
    below = certify_topology(ring_of_case(case))
    cover, _ = double_cover(ring_of_case(case))
    above = certify_topology(cover)
    assert (above.sites, above.bonds, above.faces) == (
        2 * below.sites,
        2 * below.bonds,
        2 * (below.faces or 0),
    )
    assert (above.boundary_loops, above.orientable, above.components) == (2, True, 1)
    assert above.coordination == {degree: 2 * n for degree, n in below.coordination.items()}


@pytest.mark.parametrize("rows", [3, 5, 7])
@pytest.mark.parametrize("lattice", ["kagome", "lieb"])
def test_patterned_lattices_close_with_a_half_twist(lattice: str, rows: int) -> None:
    """Equal edges and one boundary loop; kagome of (rows + 1)/2 odd dense lines need a glide."""
    shifted = lattice == "kagome" and (rows // 2) % 2 == 0
    length = 4.5 if shifted else 4
    found = certify_topology(ring_of_case(Case(lattice, rows, length, 1)))
    assert (found.boundary_loops, found.orientable, found.euler_characteristic) == (1, False, 0)
    assert found.bipartite == (lattice == "lieb")


# --- zero levels ---------------------------------------------------------------------------------


@pytest.mark.parametrize("half_twists", [0, 1])
def test_guaranteed_zero_levels_are_there(half_twists: int) -> None:
    """Lieb ribbons owe as many zero levels as one sublattice has more sites (E. H. Lieb, Phys.
    Rev. Lett. 62, 1201 (1989) [recalled from memory]); zeros counted on the adjacency matrix."""
    ring = ring_of_case(Case("lieb", 5, 4, half_twists))
    found = certify_topology(ring)
    assert found.sublattice_balance is not None
    imbalance = found.sublattice_balance[0] - found.sublattice_balance[1]
    assert found.guaranteed_zero_levels == imbalance > 0
    matrix = nx.to_numpy_array(graph_of(ring))
    zeros = np.count_nonzero(np.abs(np.linalg.eigvalsh(matrix)) < 1e-9)
    assert zeros >= found.guaranteed_zero_levels


def test_a_matching_says_more_than_the_balance_of_sublattices() -> None:
    """Two stars of three leaves joined at their centres: equal sublattices, yet four zero levels.

    In a tree the levels at zero are the sites that a maximum matching leaves over (D. Cvetković
    & I. Gutman, Mat. Vesnik 9, 141 (1972) [recalled from memory]).
    """
    left = [(0, leaf) for leaf in (1, 2, 3)]
    right = [(4, leaf) for leaf in (5, 6, 7)]
    network = Network.from_pairs([*left, *right, (0, 4)])
    found = certify_topology(network)
    assert found.sublattice_balance == (4, 4)
    assert found.guaranteed_zero_levels == 4
    matrix = nx.to_numpy_array(graph_of(network))
    assert np.count_nonzero(np.abs(np.linalg.eigvalsh(matrix)) < 1e-9) == 4


# --- networks and molecules ----------------------------------------------------------------------


def molecule(bonds: list[tuple[int, int]], places: list[tuple[float, float]]) -> Topology:
    return certify_topology(Network.from_pairs(bonds, positions=places))


def polygon(corners: int) -> list[tuple[float, float]]:
    angle = 2 * np.pi * np.arange(corners) / corners
    return [(float(x), float(y)) for x, y in zip(np.cos(angle), np.sin(angle), strict=True)]


def test_benzene_is_a_disc() -> None:
    """One hexagon: V - E + F = 1, one edge; every left turn of a bare network is a face."""
    found = molecule([(i, (i + 1) % 6) for i in range(6)], polygon(6))
    assert (found.faces, found.face_sizes, found.boundary_loops) == (1, {6: 1}, 1)
    assert (found.euler_characteristic, found.orientable, found.bipartite) == (1, True, True)
    assert found.guaranteed_zero_levels == 0


def test_naphthalene_and_azulene_differ_in_their_faces() -> None:
    """Two hexagons, and a pentagon beside a heptagon; only the first is bipartite."""
    left = [(-y, x) for x, y in polygon(6)]  # corners up, so that the rings share an upright bond
    moved = [(x + np.sqrt(3.0), y) for x, y in left]
    places = left + [p for p in moved if min(np.hypot(*np.subtract(p, q)) for q in left) > 0.1]
    bonds = [
        (i, j)
        for i in range(10)
        for j in range(i)
        if abs(np.hypot(*np.subtract(places[i], places[j])) - 1) < 0.1
    ]
    found = molecule(bonds, places)
    assert (len(places), len(bonds)) == (10, 11)
    assert (found.face_sizes, found.boundary_loops, found.bipartite) == ({6: 2}, 1, True)
    seven = [(np.cos(a), np.sin(a)) for a in 2 * np.pi * (np.arange(7) + 0.5) / 7]
    five = [(2.0, 0.9), (2.8, 0.0), (2.0, -0.9)]
    around = [(i, (i + 1) % 7) for i in range(7)]
    azulene = molecule([*around, (0, 7), (7, 8), (8, 9), (9, 6)], [*seven, *five])
    assert azulene.face_sizes == {5: 1, 7: 1}
    assert (azulene.boundary_loops, azulene.euler_characteristic) == (1, 1)
    assert not azulene.bipartite


def test_a_chain_and_a_lonely_site() -> None:
    """A tree has no face and V - E = 1; a site without bonds is a piece with an edge of its own."""
    places = [(0.0, 0.0), (1.0, 0.0), (2.0, 0.3), (5.0, 5.0)]
    found = certify_topology(Network.from_pairs([(0, 1), (1, 2)], positions=places))
    assert (found.components, found.faces, found.boundary_loops) == (2, 0, 2)
    assert found.euler_characteristic == 2
    assert found.coordination == {0: 1, 1: 2, 2: 1}
    assert found.guaranteed_zero_levels == 2


def test_no_bonds_at_all() -> None:
    """Three sites apart."""
    found = certify_topology(Network.from_pairs([], sites=3))
    assert (found.components, found.bonds, found.faces, found.boundary_loops) == (3, 0, 0, 3)
    assert found.guaranteed_zero_levels == 3


def test_a_network_in_space_has_no_plane() -> None:
    """Cube: facts of the graph are told, faces and loops are not."""
    cube = nx.hypercube_graph(3)
    number = {node: i for i, node in enumerate(cube)}
    pairs = [(number[a], number[b]) for a, b in cube.edges]
    network = Network.from_pairs(pairs, positions=np.array(list(cube), dtype=float))
    found = certify_topology(network)
    assert_graph_facts(found, network)
    assert (found.faces, found.face_sizes, found.boundary_loops) == (None, None, None)
    assert found.euler_characteristic is None


def test_a_site_bonded_to_itself_counts_two() -> None:
    """A column of three sites closed on itself: middle 4, outer 3; loops spoil two colours."""
    found = certify_topology(ring_of_case(Case("square", 3, 1, 0)))
    assert found.coordination == {3: 2, 4: 1}
    assert not found.bipartite
    assert found.face_sizes == {4: 2}


@given(
    pairs=st.sets(st.tuples(st.integers(0, 11), st.integers(0, 11)), max_size=24),
    sites=st.integers(1, 12),
)
def test_any_graph_against_networkx(pairs: set[tuple[int, int]], sites: int) -> None:
    """Components, degrees, two colours, maximum matching of random simple graphs."""
    listed = sorted((a, b) for a, b in pairs if a < b < sites)
    network = Network.from_pairs(listed, sites=sites)
    assert_graph_facts(certify_topology(network), network)


@pytest.mark.parametrize("lattice", brute.LATTICES)
def test_open_strips_are_discs(lattice: str) -> None:
    """Before closing: V - E + F = 1 and one edge."""
    for rows in (2, 3, 4):
        found = certify_topology(open_strip(lay_strip(lattice, rows=rows, length=5)))
        if found.components == 1:
            assert (found.euler_characteristic, found.boundary_loops) == (1, 1)
            assert found.orientable


# --- vacancies and lost bonds --------------------------------------------------------------------


@given(case=st.sampled_from(LARGE), seed=st.integers(0, 2**32 - 1), fraction=st.floats(0.02, 0.5))
def test_rings_with_vacancies_against_networkx(case: Case, seed: int, fraction: float) -> None:
    """Graph facts of any remainder; faces are those cycles of the whole ring that are left."""
    whole = ring_of_case(case)
    gone = draw_vacancies(whole.n, fraction, seed=seed)
    assume(gone.size)
    ring = remove_sites(whole, gone)
    found = certify_topology(ring)
    assert_graph_facts(found, ring)
    left = [
        len(cycle)
        for cycle in shortest_cycles(whole, FACES[case.lattice])
        if not set(cycle) & set(gone.tolist())
    ]
    assert found.face_sizes == dict(Counter(left))
    assert found.euler_characteristic == ring.n - found.bonds + len(left)


@pytest.mark.parametrize(
    "case",
    [
        Case("square", 5, 8, 1),
        Case("square", 4, 9, 0),
        Case("honeycomb-zigzag", 5, 8.5, 1),
        Case("honeycomb-armchair", 9, 6, 1),
        Case("triangular", 5, 9, 1),
    ],
)
def test_holes_are_edges_too(case: Case) -> None:
    """Each vacancy inside the band takes the disc round it: chi - 1 and one more edge; a second
    one far away does the same again (additivity of the Euler characteristic)."""
    ring = ring_of_case(case)
    x, y = ring.positions.T
    near, far = (
        int(np.argmin(np.abs(y) + np.abs(x - part * ring.circumference) / 1e3))
        for part in (0.0, 0.5)
    )
    one = certify_topology(remove_sites(ring, [near]))
    two = certify_topology(remove_sites(ring, [near, far]))
    before = certify_topology(ring).boundary_loops or 0
    assert (one.euler_characteristic, one.boundary_loops) == (-1, before + 1)
    assert (two.euler_characteristic, two.boundary_loops) == (-2, before + 2)
    assert one.orientable == two.orientable == (case.half_twists % 2 == 0)


def test_a_cut_through_the_band_leaves_a_disc() -> None:
    """Taking out a whole column of a Möbius band: one edge, and two sides again."""
    ring = ring_of_case(Case("square", 3, 8, 1))
    found = certify_topology(remove_sites(ring, [9, 10, 11]))
    assert (found.euler_characteristic, found.boundary_loops, found.orientable) == (1, 1, True)


def without_bond(ring: Any, bond: int) -> Any:
    keep = np.arange(ring.bonds.m) != bond
    return replace(ring, bonds=ring.bonds.select(keep))


@pytest.mark.parametrize(
    "case", [Case("square", 3, 6, 1), Case("honeycomb-zigzag", 3, 6.5, 1), Case("kagome", 3, 5, 0)]
)
def test_the_certificate_changes_with_any_bond_removed(case: Case) -> None:
    """Every bond in turn: two faces lost opens a hole, one lost only dents the edge.

    How many faces a bond borders is counted on the shortest cycles of the graph.
    """
    ring = ring_of_case(case)
    whole = certify_topology(ring)
    borders = bordering_faces(shortest_cycles(ring, FACES[case.lattice]))
    for bond in range(ring.bonds.m):
        pair = frozenset((int(ring.bonds.tail[bond]), int(ring.bonds.head[bond])))
        found = certify_topology(without_bond(ring, bond))
        lost = borders[pair]
        assert lost in {1, 2}
        assert (whole.faces or 0) - (found.faces or 0) == lost
        assert found.euler_characteristic == 1 - lost
        assert found.boundary_loops == (whole.boundary_loops or 0) + lost - 1
        assert found.coordination != whole.coordination


def test_taking_out_every_seam_bond_opens_the_ring() -> None:
    """What is left is the open strip: its certificate, whatever the twist was."""
    for half_twists in (0, 1):
        ring = ring_of_case(Case("honeycomb-armchair", 5, 4, half_twists))
        cut = replace(ring, bonds=ring.bonds.select(ring.bonds.winding == 0))
        assert certify_topology(cut) == certify_topology(open_strip(ring.strip))


def test_certificates_count_walks_of_long_rings() -> None:
    """30,000 sites: the sums are right where indices are large."""
    ring = ring_of_case(Case("honeycomb-zigzag", 10, 1500, 1))
    found = certify_topology(ring)
    assert (found.sites, found.faces, found.boundary_loops) == (30_000, 9 * 1500, 1)
    assert found.euler_characteristic == 0
    assert not found.bipartite


def test_bonds_without_places_have_no_order_to_walk_in() -> None:
    """Benzene given as pairs alone: no faces are claimed, the graph is known all the same."""
    found = certify_topology(Network.from_pairs([(i, (i + 1) % 6) for i in range(6)]))
    assert (found.faces, found.boundary_loops, found.euler_characteristic) == (None, None, None)
    assert (found.bipartite, found.components, found.guaranteed_zero_levels) == (True, 1, 0)
