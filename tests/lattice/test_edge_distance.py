"""Distances to edges against every image in plain loops; edges of bare networks.

Places are those of ``brute.py`` in units of the spacing, images those of the map (x, y) ->
(x + L, (-1)^h y).
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from brute import Case

from ribbon.errors import BadInput
from ribbon.lattice import (
    EdgeLoop,
    Network,
    close_strip,
    distance_to_edges,
    lay_strip,
    open_strip,
    remove_sites,
    walk_edges,
)

LENGTH = 1e-12
"""nm; places are sums of a few hundred steps of 0.1 nm."""


def ring_of_case(case: Case, **options: Any) -> Any:
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    return close_strip(strip, half_twists=case.half_twists, orbital="s", **options)


# --- distances -----------------------------------------------------------------------------------


def brute_distance(network: Any, loops: tuple[EdgeLoop, ...]) -> np.ndarray:
    """Nearest image of any loop's site, seven times round either way, in plain loops."""
    rim = {int(site) for loop in loops for site in loop.sites}
    out = np.full(network.n, math.inf)
    for i, (x, y) in enumerate(network.positions):
        for j in rim:
            for turn in range(-7, 8):
                flip = -1 if network.flips and turn % 2 else 1
                there_x = network.positions[j, 0] + turn * network.circumference
                there_y = flip * network.positions[j, 1]
                out[i] = min(out[i], math.hypot(there_x - x, there_y - y))
    return out


@pytest.mark.parametrize(
    ("case", "seam", "gone"),
    [
        (Case("square", 7, 3, 1), 0, []),
        (Case("square", 7, 3, 0), 1, []),
        (Case("honeycomb-zigzag", 5, 2.5, 1), 2, []),
        (Case("honeycomb-armchair", 6, 1.5, 3), 0, [7]),
        (Case("triangular", 6, 4.5, 1), 3, [3, 11, 12]),
        (Case("kagome", 5, 2.5, 1), 0, [5]),
    ],
)
def test_distances_against_all_images(case: Case, seam: int, gone: list[int]) -> None:
    """Across the seam too, flipped where it flips: every image in plain loops.

    Single loops as well as all of them, so that places far from the seam's other side count.
    """
    ring = remove_sites(ring_of_case(case, seam=seam), gone)
    loops = walk_edges(ring)
    for chosen in (loops, loops[:1], loops[-1:]):
        found = distance_to_edges(ring, chosen)
        np.testing.assert_allclose(found, brute_distance(ring, chosen), rtol=0, atol=LENGTH)
    one = next(loop for loop in loops if loop.is_edge)
    few = EdgeLoop(
        **{**vars(one), "sites": one.sites[:1].copy(), "along": one.along[:1].copy()}
    )  # one site alone: its nearest image is often across the seam
    found = distance_to_edges(ring, (few,))
    np.testing.assert_allclose(found, brute_distance(ring, (few,)), rtol=0, atol=LENGTH)
    plain = np.hypot(*(ring.positions - ring.positions[few.sites[0]]).T)
    assert np.any(found < plain - ring.strip.spacing / 10)


def test_no_loops_are_infinitely_far() -> None:
    """The distance to nothing."""
    ring = ring_of_case(Case("square", 3, 5, 1))
    assert np.isinf(distance_to_edges(ring, ())).all()


def test_distances_in_a_bare_network() -> None:
    """The middle of a 5 by 5 square of sites lies two bonds from its rim; no seam, no images."""
    network = open_strip(lay_strip("square", rows=5, length=5, spacing=1.0))
    found = distance_to_edges(network, walk_edges(network))
    wanted = [min(i, j, 4 - i, 4 - j) for i in range(5) for j in range(5)]
    np.testing.assert_allclose(found, wanted, rtol=0, atol=LENGTH)


# --- bare networks -------------------------------------------------------------------------------


def test_a_chain_is_walked_there_and_back() -> None:
    """A tree has one face outside: every bond twice, inner sites once from either side."""
    places = [(0.0, 0.0), (1.0, 0.2), (2.0, 0.0)]
    (loop,) = walk_edges(Network.from_pairs([(0, 1), (1, 2)], positions=places))
    assert loop.sites.tolist() == [0, 1, 2, 1]
    np.testing.assert_allclose(loop.along, [0, 1, 2, 1], rtol=0, atol=LENGTH)
    np.testing.assert_allclose(loop.perimeter, 4 * math.hypot(1, 0.2), rtol=0, atol=LENGTH)
    assert (loop.winding, loop.length, loop.is_edge) == (0, 0.0, False)


def test_an_open_strip_has_one_edge() -> None:
    """The rim of a rectangle of 4 by 6 sites; arrays of a loop cannot be written to."""
    network = open_strip(lay_strip("square", rows=4, length=6))
    (loop,) = walk_edges(network)
    assert sorted(loop.sites.tolist()) == [
        i for i in range(24) if i % 4 in {0, 3} or not 4 <= i < 20
    ]
    for array in (loop.sites, loop.along, loop.crossings):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0


# --- refusals ------------------------------------------------------------------------------------


def test_no_plane_no_edges() -> None:
    """Bonds without places, or in space, cannot be put in order round a site."""
    square = [(0, 1), (1, 2), (2, 3), (3, 0)]
    with pytest.raises(BadInput, match="bonds in a plane"):
        walk_edges(Network.from_pairs(square))
    places = [(0.0, 0.0, 0.0), (1.0, 0.0, 0.0), (1.0, 1.0, 0.3), (0.0, 1.0, 0.0)]
    with pytest.raises(BadInput, match="bonds in a plane"):
        walk_edges(Network.from_pairs(square, positions=places))
