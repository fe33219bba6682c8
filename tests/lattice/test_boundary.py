"""Edges walked on the bonds, against geometry from coordinates and faces found by networkx.

A band has one boundary curve where it is one-sided and two where it is not (A. F. Möbius 1865; B.
Mohar & C. Thomassen, Graphs on Surfaces, 2001 [M]). Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

from collections import Counter
from typing import Any

import brute
import networkx as nx
import numpy as np
import pytest
from brute import Case, cases
from hypothesis import given
from hypothesis import strategies as st

from ribbon.hopping import draw_vacancies
from ribbon.lattice import (
    EdgeLoop,
    Network,
    certify_topology,
    close_strip,
    lay_strip,
    remove_sites,
    reseam,
    walk_edges,
)

LENGTH = 1e-12
"""nm; places are sums of a few hundred steps of 0.1 nm."""
EVERY_RING = [case for case in cases() if case.sigma == 1]
LARGE = [
    Case("square", 4, 7, 1),
    Case("square", 3, 8, 0),
    Case("square", 5, 7, 2),
    Case("triangular", 4, 7.5, 3),
    Case("triangular", 3, 7, 0),
    Case("honeycomb-zigzag", 3, 6.5, 1),
    Case("honeycomb-zigzag", 3, 6, 2),
    Case("honeycomb-zigzag", 4, 6, 3),
    Case("honeycomb-armchair", 4, 4.5, 1),
    Case("honeycomb-armchair", 5, 5, 3),
    Case("honeycomb-armchair", 4, 4, 0),
    Case("kagome", 5, 5.5, 1),
    Case("kagome", 3, 5, 0),
    Case("lieb", 5, 5, 3),
    Case("lieb", 3, 5, 0),
]
"""Long enough that every shortest cycle of the graph is a face of the tiling."""
FACES = {
    **{"square": {4}, "triangular": {3}, "honeycomb-zigzag": {6}},
    **{"honeycomb-armchair": {6}, "kagome": {3, 6}, "lieb": {8}},
}


def ring_of_case(case: Case, **options: Any) -> Any:
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    return close_strip(strip, half_twists=case.half_twists, orbital="s", **options)


def bond_steps(network: Network) -> dict[tuple[int, int], list[tuple[float, int]]]:
    """Steps along x and crossings of the seam between bonded sites, both ways."""
    found: dict[tuple[int, int], list[tuple[float, int]]] = {}
    bonds = network.bonds
    for b in np.flatnonzero(bonds.shell == 1):
        tail, head = int(bonds.tail[b]), int(bonds.head[b])
        dx, w = float(bonds.displacement[b, 0]), int(bonds.winding[b])
        found.setdefault((tail, head), []).append((dx, w))
        found.setdefault((head, tail), []).append((-dx, -w))
    return found


def brute_steps(case: Case, spacing: float) -> dict[tuple[int, int], list[tuple[float, int]]]:
    """The same from coordinates alone."""
    found: dict[tuple[int, int], list[tuple[float, int]]] = {}
    for step in brute.steps(*case[:4]):
        key = step.tail, step.head
        found.setdefault(key, []).append((step.along * spacing, step.winding))
    return found


def assert_walks_on(loop: EdgeLoop, steps: dict[tuple[int, int], list[tuple[float, int]]]) -> None:
    """Site after site is bonded, with the step and crossing told, the last to the first too."""
    onward = np.append(loop.along, loop.along[0] + loop.length)
    crossed = np.append(loop.crossings, loop.winding)
    ahead = np.roll(loop.sites, -1)
    for i, pair in enumerate(zip(loop.sites.tolist(), ahead.tolist(), strict=True)):
        step = onward[i + 1] - onward[i], crossed[i + 1] - crossed[i]
        known = steps.get(pair, [])
        assert any(abs(step[0] - dx) < LENGTH and step[1] == w for dx, w in known), (pair, step)


# --- complete rings ------------------------------------------------------------------------------


@pytest.mark.parametrize("lattice", brute.LATTICES)
@pytest.mark.parametrize("half_twists", [0, 1, 2, 3])
def test_every_small_ring(lattice: str, half_twists: int) -> None:
    """One edge of length 2 L that runs twice round, or two that run once; each a walk on bonds.

    Rows 1 to 5, lengths 1/2 to 4. Steps and crossings are those that plain loops over the
    coordinates find. Armchair rings of one row are dimers apart: no edge runs round them.
    """
    tried = 0
    for case in EVERY_RING:
        if (case.lattice, case.half_twists) != (lattice, half_twists):
            continue
        ring = ring_of_case(case)
        loops = walk_edges(ring)
        spacing = ring.strip.spacing
        steps = brute_steps(case, spacing)
        for loop in loops:
            assert_walks_on(loop, steps)
            assert loop.sites[0] == loop.sites.min()
            assert loop.along[0] == ring.positions[loop.sites[0], 0]
            assert abs(loop.perimeter - loop.sites.size * spacing) < LENGTH
        tried += 1
        dimers = lattice == "honeycomb-armchair" and case.rows == 1
        assert len(loops) == certify_topology(ring).boundary_loops
        windings = [loop.winding for loop in loops]
        if dimers:
            assert set(windings) == {0}
            continue
        assert windings == ([2] if half_twists % 2 else [1, 1])
        around = brute.PERIOD[lattice] * case.length * spacing
        np.testing.assert_allclose(sum(loop.length for loop in loops), 2 * around, atol=LENGTH)
        assert all(loop.is_edge for loop in loops)
    assert tried > 5


@pytest.mark.parametrize("half_twists", [0, 1, 2, 3])
def test_a_ring_of_one_row_is_all_edge(half_twists: int) -> None:
    """A cycle of 7 sites has both its sides for an edge: twice the cycle, or two cycles."""
    loops = walk_edges(ring_of_case(Case("square", 1, 7, half_twists)))
    once = list(range(7))
    sites = [loop.sites.tolist() for loop in loops]
    assert sites == ([once + once] if half_twists % 2 else [once, once])


@pytest.mark.parametrize("case", LARGE)
def test_the_outer_lines_are_met(case: Case) -> None:
    """Each site of the outermost line above and below stands on an edge (coordinates)."""
    ring = ring_of_case(case)
    y = np.array([site[1] for site in brute.ring_sites(*case[:3])])
    outer = np.flatnonzero(np.abs(y) > np.abs(y).max() - 1e-6)
    met = np.unique(np.concatenate([loop.sites for loop in walk_edges(ring)]))
    assert np.isin(outer, met).all()
    assert met.size < ring.n or case.rows <= 2 or case.lattice in {"honeycomb-armchair", "lieb"}


@pytest.mark.parametrize("case", LARGE)
@pytest.mark.parametrize("seam", [1, 3, 6])
def test_the_place_of_the_seam_does_not_matter(case: Case, seam: int) -> None:
    """The same closed walks wherever the ring was cut; crossings are counted at the new seam."""
    ring = ring_of_case(case)
    moved = ring_of_case(case, seam=seam)
    before, after = walk_edges(ring), walk_edges(moved)
    assert [loop.winding for loop in before] == [loop.winding for loop in after]
    assert sorted(map(closed_walk, before)) == sorted(map(closed_walk, after))
    steps = bond_steps(moved)
    for loop in after:
        assert_walks_on(loop, steps)
        assert loop.along[0] == moved.positions[loop.sites[0], 0]
    assert any(
        not np.array_equal(a.crossings, b.crossings) for a, b in zip(before, after, strict=True)
    )


def closed_walk(loop: EdgeLoop) -> tuple[int, ...]:
    """The least of all ways to write a closed walk, from any start, either way round."""
    sites = loop.sites.tolist()
    both = sites, sites[::-1]
    return min(tuple(one[i:] + one[:i]) for one in both for i in range(len(one)))


def test_further_neighbours_do_not_count() -> None:
    """Edges are those of the first shell, whatever else is hopped to."""
    case = Case("square", 4, 9, 1)
    near, far = (walk_edges(ring_of_case(case, shells=shells)) for shells in (1, 3))
    assert [loop.sites.tolist() for loop in near] == [loop.sites.tolist() for loop in far]


# --- every bond has two sides --------------------------------------------------------------------


def bond_counts(network: Network, pairs: list[tuple[int, int]]) -> Counter[frozenset[int]]:
    counted = Counter({frozenset(pair): 0 for pair in bond_steps(network)})
    counted.update(frozenset(pair) for pair in pairs)
    return counted


@given(
    case=st.sampled_from(LARGE), seed=st.integers(0, 2**32 - 1), fraction=st.sampled_from([0, 0.1])
)
def test_a_side_of_a_bond_is_a_face_or_an_edge(case: Case, seed: int, fraction: float) -> None:
    """Faces that a bond borders and walks that pass along it make two, vacancies or not.

    Faces are the shortest cycles of the complete graph (networkx) of which no site is gone.
    """
    whole = ring_of_case(case)
    gone = draw_vacancies(whole.n, fraction, seed=seed) if fraction else np.zeros(0, dtype=int)
    ring = remove_sites(whole, gone)
    assert ring.kept is not None
    number = {int(site): i for i, site in enumerate(ring.kept)}
    sizes = FACES[case.lattice]
    graph = nx.Graph(list(bond_steps(whole)))
    cycles = nx.simple_cycles(graph, length_bound=max(sizes))
    faces = [
        [number[site] for site in cycle]
        for cycle in cycles
        if len(cycle) in sizes and all(site in number for site in cycle)
    ]
    loops = walk_edges(ring)
    assert len(loops) == certify_topology(ring).boundary_loops
    walked = [loop.sites.tolist() for loop in loops if loop.sites.size > 1]
    round_all = [
        pair for one in (*faces, *walked) for pair in zip(one, one[1:] + one[:1], strict=True)
    ]
    assert set(bond_counts(ring, round_all).values()) <= {2}
    steps = bond_steps(ring)
    for loop in loops:
        if loop.sites.size > 1:
            assert_walks_on(loop, steps)
    windings = sum(loop.winding for loop in loops)
    assert windings in {0, 2}
    order = [(-loop.winding, -loop.perimeter) for loop in loops]
    assert order == sorted(order)


# --- vacancies -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("case", "around"),
    [
        (Case("square", 5, 9, 1), 8),
        (Case("square", 5, 9, 2), 8),
        (Case("triangular", 5, 9, 1), 6),
        (Case("honeycomb-zigzag", 6, 8, 1), 12),
        (Case("honeycomb-armchair", 9, 5, 3), 12),
    ],
)
def test_a_vacancy_inside_leaves_a_hole(case: Case, around: int) -> None:
    """The sites of the faces that met at the vacancy, walked once: winding 0, length 0.

    Four squares, six triangles or three hexagons at a site leave 8, 6 or 12 sites round it. Also
    where the hole lies across the seam.
    """
    whole = ring_of_case(case)
    positions = whole.positions
    middle = np.argsort(np.abs(positions[:, 1]), kind="stable")
    for gone in (int(middle[0]), int(middle[len(middle) // (2 * case.rows)])):
        ring = remove_sites(whole, [gone])
        loops = walk_edges(ring)
        (hole,) = [loop for loop in loops if not loop.is_edge]
        assert (hole.winding, hole.length, hole.sites.size) == (0, 0.0, around)
        assert loops[-1] is hole
        assert sum(loop.winding for loop in loops) == 2
        assert len(loops) == (2 if case.half_twists % 2 else 3)
        assert_walks_on(hole, bond_steps(ring))
        assert ring.kept is not None
        there = positions[ring.kept[hole.sites]]
        along = np.abs(there[:, 0] - positions[gone, 0])
        along = np.minimum(along, ring.circumference - along)
        assert along.max() < 2.01 * ring.strip.spacing


def test_a_ring_cut_through_has_no_edge_round_it() -> None:
    """Without one column a band is a disc: one closed edge of winding 0, one-sided or not."""
    for half_twists in (0, 1):
        ring = remove_sites(ring_of_case(Case("square", 3, 8, half_twists)), [9, 10, 11])
        (loop,) = walk_edges(ring)
        assert (loop.winding, loop.length, loop.is_edge) == (0, 0.0, False)
        assert loop.sites.size == 2 * (3 + 7) - 4  # circumference of a rectangle of sites


def test_a_bite_out_of_the_edge_keeps_it_one() -> None:
    """A missing edge site is gone round: still one edge of length 2 L, two steps longer."""
    whole = ring_of_case(Case("square", 4, 9, 1))
    (before,) = walk_edges(whole)
    (after,) = walk_edges(remove_sites(whole, [4]))
    assert (after.winding, after.length) == (2, before.length)
    assert after.sites.size == before.sites.size + 2


def test_isolated_sites_stand_alone() -> None:
    """A site without bonds is a loop of its own: one site, no perimeter; reseamed rings too."""
    whole = ring_of_case(Case("square", 5, 9, 1))
    centre = 22
    ring = remove_sites(whole, [centre - 5, centre - 1, centre + 1, centre + 5])
    for network in (ring, reseam(ring, seam=2)):
        loops = walk_edges(network)
        (lone,) = [loop for loop in loops if loop.sites.size == 1]
        assert network.kept[lone.sites[0]] == centre
        assert (lone.winding, lone.length, lone.perimeter) == (0, 0.0, 0.0)
        assert lone.along.tolist() == [network.positions[lone.sites[0], 0]]
        assert len(loops) == certify_topology(network).boundary_loops
    dots = walk_edges(Network.from_pairs([], positions=[(0.0, 0.0), (1.0, 0.0)]))
    assert [loop.sites.tolist() for loop in dots] == [[0], [1]]
