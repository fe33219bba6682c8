"""Where states live, against densities and Fourier sums of matrices built from coordinates.

Brute-force states are those of ``brute.py`` (plain loops) and ``numpy.linalg.eigh``; degenerate
ones enter through projectors only. Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import brute
import numpy as np
import pytest
from brute import Case

from ribbon.analysis import all_levels, edge_content, edge_states, levels_near, row_profile
from ribbon.analysis.levels import Levels
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, close_strip, lay_strip, remove_sites, walk_edges

Build = Callable[..., Any]
WEIGHT = 1e-10
"""Rounding of eigenvectors of some dozen to hundred sites."""
MOMENTUM = 1e-9
EDGE_LINES = {
    **{"square": 1, "triangular": 1, "honeycomb-zigzag": 2},
    **{"honeycomb-armchair": 2, "kagome": 1, "lieb": 1},
}
"""Lines of sites from the outermost on that the rim of a strip passes through."""
RINGS = [
    Case("square", 5, 7, 1),
    Case("square", 4, 6, 0),
    Case("triangular", 5, 5, 1, -1),
    Case("honeycomb-zigzag", 4, 5, 1),
    Case("honeycomb-zigzag", 5, 4.5, 1, -1),
    Case("honeycomb-zigzag", 5, 4, 2),
    Case("honeycomb-armchair", 7, 3, 1),
    Case("honeycomb-armchair", 8, 2.5, 3, -1),
    Case("kagome", 5, 3.5, 1),
    Case("lieb", 7, 3, 0),
]


def folded_distance(case: Case, i: int, j: int) -> float:
    """Distance from site i to the nearest image of site j, from coordinates."""
    sites = brute.ring_sites(*case[:3])
    around = case.length * brute.PERIOD[case.lattice]
    (x, y), (u, v) = sites[i], sites[j]
    flips = case.half_twists % 2 == 1
    images = [(u + n * around, -v if flips and n % 2 else v) for n in range(-3, 4)]
    return min(math.hypot(x - p, y - q) for p, q in images)


def edge_mask(case: Case, within: float) -> np.ndarray:
    """Sites within a distance (in bonds) of the lines that the rim passes through."""
    sites = brute.ring_sites(*case[:3])
    heights = sorted({round(y, 6) for _, y in sites})
    lines = EDGE_LINES[case.lattice]
    rim = set(heights[:lines] + heights[-lines:])
    edge = [j for j, (_, y) in enumerate(sites) if round(y, 6) in rim]
    near = [min(folded_distance(case, i, j) for j in edge) for i in range(len(sites))]
    return np.array(near) <= within + 1e-6


def shells_of(matrix: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """Positions of the levels of each shell, and the diagonal of its projector over its size."""
    energies, states = np.linalg.eigh(matrix)
    cuts = np.flatnonzero(np.diff(energies) > 1e-8) + 1
    groups = np.split(np.arange(energies.size), cuts)
    return [(one, (np.abs(states[:, one]) ** 2).mean(axis=1)) for one in groups]


def noise(case: Case, seed: int = 3) -> np.ndarray:
    return np.random.default_rng(seed).uniform(-0.6, 0.6, case.sites())


def zigzag(
    rows: int, length: float, half_twists: int, orbital: str = "s", flux: float = 0.0
) -> Any:
    """States of a wide zigzag ring: the Hamiltonian, its levels nearest to zero, their edges."""
    strip = lay_strip("honeycomb-zigzag", rows=rows, length=length)
    ring = close_strip(strip, half_twists=half_twists, orbital=orbital)
    hamiltonian = assemble(ring, Hopping())
    levels = levels_near(hamiltonian, 0.0, count=24, flux=flux, states=True)
    return hamiltonian, levels, edge_states(hamiltonian, levels)


# --- weight and participation --------------------------------------------------------------------


@pytest.mark.parametrize("case", RINGS)
@pytest.mark.parametrize("within", [None, 0.1, 1.0, 1.75])
def test_edge_weight_of_disordered_rings(
    hamiltonian_of: Build, case: Case, within: float | None
) -> None:
    """Probability on the sites near the outer lines, and 1/sum p^2 (R. J. Bell & P. Dean 1970 [M]).

    By default two bonds from the edge; with random site energies no level is degenerate.
    """
    energies = noise(case)
    hamiltonian = hamiltonian_of(case, energies)
    spacing = hamiltonian.ring.strip.spacing
    levels = all_levels(hamiltonian, flux=0.13, states=True)
    reach = None if within is None else within * spacing
    found = edge_states(hamiltonian, levels, within=reach)
    density = np.abs(np.linalg.eigh(case.matrix(0.13, energies=energies))[1]) ** 2
    mask = edge_mask(case, 2.0 if within is None else within)
    assert 0 < np.count_nonzero(mask) <= mask.size
    np.testing.assert_allclose(found.edge_weight, mask @ density, rtol=0, atol=WEIGHT)
    wanted = 1 / (density**2).sum(axis=0)
    np.testing.assert_allclose(found.participation, wanted, rtol=0, atol=1e-8)
    np.testing.assert_array_equal(found.hole_weight, np.zeros(levels.m))
    np.testing.assert_allclose(found.within, (within or 2.0) * spacing, rtol=0, atol=1e-12)


@pytest.mark.parametrize("case", RINGS)
def test_edge_weight_of_clean_rings(hamiltonian_of: Build, case: Case) -> None:
    """Momentum states share the weight of a shell in some way; the mean is the projector's."""
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, states=True)
    spacing = hamiltonian.ring.strip.spacing
    found = edge_states(hamiltonian, levels, within=spacing)
    mask = edge_mask(case, 1.0)
    several = 0
    for members, density in shells_of(case.matrix()):
        several += members.size > 1
        weight = found.edge_weight[members].mean()
        np.testing.assert_allclose(weight, mask @ density, rtol=0, atol=WEIGHT)
    assert several
    assert found.energy.tolist() == levels.energies.tolist()


@pytest.mark.parametrize(("rows", "columns"), [(4, 7), (5, 6)])
def test_participation_of_standing_waves(rows: int, columns: int) -> None:
    """sum_j sin^4(pi q j/(N + 1)) = 3 (N + 1)/8, (N + 1)/2 at q = (N + 1)/2: closed form.

    So 2 (N + 1) columns/3 sites, at that q (N + 1) columns/2; edge weight of one line
    4/(N + 1) sin^2(pi q/(N + 1)).
    """
    strip = lay_strip("square", rows=rows, length=columns)
    hamiltonian = assemble(close_strip(strip, half_twists=1, orbital="s"), Hopping())
    levels = all_levels(hamiltonian, states=True)
    found = edge_states(hamiltonian, levels, within=0.1 * strip.spacing)
    momentum = levels.momentum
    across = -(levels.energies + 2 * np.cos(2 * np.pi * momentum / columns)) / 2
    q = np.arccos(np.clip(across, -1, 1)) * (rows + 1) / np.pi
    np.testing.assert_allclose(q, np.rint(q), rtol=0, atol=1e-6)
    middle = np.rint(q) * 2 == rows + 1
    wanted = (rows + 1) * columns * np.where(middle, 1 / 2, 2 / 3)
    np.testing.assert_allclose(found.participation, wanted, rtol=0, atol=1e-8)
    weight = 4 / (rows + 1) * np.sin(np.pi * np.rint(q) / (rows + 1)) ** 2
    np.testing.assert_allclose(found.edge_weight, weight, rtol=0, atol=1e-9)
    assert np.isnan(found.decay_length).all()


# --- decay ---------------------------------------------------------------------------------------


def phase_per_period(levels: Levels, length: float) -> np.ndarray:
    return 2 * np.pi * np.abs(levels.momentum) / length


@pytest.mark.parametrize(
    ("rows", "length", "half_twists", "orbital", "flux"),
    [
        (44, 30, 1, "s", 0.0),
        (44, 30, 0, "s", 0.0),
        (44, 30, 1, "pz", 0.21),
        (43, 29.5, 1, "pz", 0.0),
        (43, 29.5, 1, "s", 0.37),
        (43, 30, 0, "s", 0.0),
    ],
)
def test_edge_states_fall_by_the_bloch_factor(
    rows: int, length: float, half_twists: int, orbital: str, flux: float
) -> None:
    """Amplitude |2 cos(ks/2)| a row, 1.5 a deep, for 2 pi/3 < ks < 4 pi/3 (M. Fujita et al., J.
    Phys. Soc. Jpn. 65, 1920 (1996) [M]); at ks = pi all of it stands on the outer row.
    """
    hamiltonian, levels, found = zigzag(rows, length, half_twists, orbital, flux)
    ks = phase_per_period(levels, length)
    g = np.abs(2 * np.cos(ks / 2))
    well = (g < 0.75) & (np.abs(levels.energies) < 1e-3)
    assert np.count_nonzero(well) >= 10
    spacing = hamiltonian.ring.strip.spacing
    with np.errstate(divide="ignore"):
        wanted = 1.5 * spacing / -np.log(np.where(g < 1e-9, 0, g))
    np.testing.assert_allclose(found.decay_length[well], wanted[well], rtol=0, atol=1e-4 * spacing)
    assert np.all(found.edge_weight[well] > 1 - 0.75**4 - 1e-6)  # two rows of the edge


def test_extended_states_do_not_decay(hamiltonian_of: Build) -> None:
    """A confined level of a wide zigzag ring and the band bottom have no decay length."""
    hamiltonian, _, _ = zigzag(40, 12, 1)
    levels = all_levels(hamiltonian, states=True)
    found = edge_states(hamiltonian, levels)
    extended = np.abs(levels.energies) > 1.05  # the edge band ends at t
    assert np.count_nonzero(extended) > levels.m / 2
    assert np.isnan(found.decay_length[extended]).all()
    assert found.edge_weight[0] < 0.05


def test_a_state_on_the_outer_row_alone_has_no_depth(hamiltonian_of: Build) -> None:
    """At ks = pi the bonds between the chains of a zigzag ribbon see a zero: decay length 0."""
    _, levels, found = zigzag(12, 6, 1)
    boundary = (np.abs(np.abs(levels.momentum) - 3) < 1e-9) & (np.abs(levels.energies) < 1e-9)
    assert np.count_nonzero(boundary) >= 1
    np.testing.assert_array_equal(found.decay_length[boundary], 0.0)
    np.testing.assert_allclose(found.edge_weight[boundary], 1.0, rtol=0, atol=WEIGHT)


@pytest.mark.parametrize("case", [Case("square", 5, 7, 1), Case("honeycomb-zigzag", 4, 5, 1)])
def test_row_profile_is_the_mean_of_each_row(hamiltonian_of: Build, case: Case) -> None:
    """Rows counted by height from either edge, from coordinates; depth grows by one row's pitch."""
    energies = noise(case)
    hamiltonian = hamiltonian_of(case, energies)
    ring = hamiltonian.ring
    density = np.abs(np.linalg.eigh(case.matrix(energies=energies))[1]) ** 2
    profile = row_profile(ring, density)
    pitch = {"square": 1.0, "honeycomb-zigzag": 1.5}[case.lattice]
    heights = np.abs([y for _, y in brute.ring_sites(*case[:3])])
    row = np.floor((heights.max() - heights) / pitch + 1e-6)
    wanted = [density[row == r].mean(axis=0) for r in np.unique(row)]
    np.testing.assert_allclose(profile.density, wanted, rtol=0, atol=WEIGHT)
    depth = pitch * np.unique(row) * ring.strip.spacing
    np.testing.assert_allclose(profile.depth, depth, rtol=0, atol=1e-12)


# --- holes ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("case", "around"), [(Case("square", 9, 9, 1), 1.5), (Case("honeycomb-zigzag", 8, 7, 1), 2.0)]
)
def test_weight_near_a_hole(
    hamiltonian_of: Build, ring_of: Build, case: Case, around: float
) -> None:
    """Sites within a bond of the rim of a vacancy and no nearer to the edge (coordinates).

    The rim is made of the sites of the faces that met there: within sqrt 2 (squares) or 2
    (hexagons) bonds of the vacancy.
    """
    ring = ring_of(case)
    heights = np.abs(ring.positions[:, 1])
    gone = int(np.argsort(heights, kind="stable")[-1 - np.count_nonzero(heights > 1e-9) + 4])
    energies = noise(case, seed=5)
    rest = np.delete(np.arange(case.sites()), gone)
    hamiltonian = assemble(remove_sites(ring, [gone]), Hopping(site_energy=energies[rest]))
    levels = all_levels(hamiltonian, states=True)
    spacing = ring.strip.spacing
    found = edge_states(hamiltonian, levels, within=spacing)
    density = np.abs(np.linalg.eigh(case.matrix(energies=energies)[np.ix_(rest, rest)])[1]) ** 2
    rim = [j for j in rest if folded_distance(case, int(j), gone) < around + 1e-6]
    near = np.array([min(folded_distance(case, int(i), int(j)) for j in rim) for i in rest])
    edge = edge_mask(case, 1.0)[rest]
    hole = (near < 1 + 1e-6) & ~edge
    assert np.count_nonzero(hole) > len(rim)
    np.testing.assert_allclose(found.hole_weight, hole @ density, rtol=0, atol=WEIGHT)
    np.testing.assert_allclose(found.edge_weight, edge @ density, rtol=0, atol=WEIGHT)
    assert len(found.loops) == 2


# --- refusals ------------------------------------------------------------------------------------


def test_refusals(hamiltonian_of: Build) -> None:
    """Each raise: no states, a reach that is none, no plane, a loop without momentum."""
    case = Case("square", 3, 5, 1)
    hamiltonian = hamiltonian_of(case)
    bare = all_levels(hamiltonian)
    levels = all_levels(hamiltonian, states=True)
    with pytest.raises(BadInput, match="edge states need states"):
        edge_states(hamiltonian, bare)
    for within in (0.0, -1.0, math.nan, math.inf):
        with pytest.raises(BadInput, match=r"edges\.within_nm = .* positive length"):
            edge_states(hamiltonian, levels, within=within)
    nowhere = assemble(Network.from_pairs([(0, 1), (1, 2)]), Hopping())
    with pytest.raises(BadInput, match="bonds in a plane"):
        edge_states(nowhere, all_levels(nowhere, states=True))
    (loop,) = walk_edges(hamiltonian.ring)
    hole = replace(loop, winding=0)
    for found, one in ((levels, hole), (bare, loop)):
        with pytest.raises(BadInput, match="momentum content needs an edge that runs round"):
            edge_content(hamiltonian, found, one)
    with pytest.raises(BadInput, match="momentum content needs"):
        edge_content(nowhere, all_levels(nowhere, states=True), loop)
    odd = hamiltonian_of(Case("honeycomb-zigzag", 3, 4.5, 1))
    (edge,) = walk_edges(odd.ring)
    with pytest.raises(BadInput, match=r"4\.5 periods long; momentum needs a whole number"):
        edge_content(odd, all_levels(odd, states=True), replace(edge, winding=1))


def test_numbers_cannot_be_written_to(hamiltonian_of: Build) -> None:
    """Results are frozen; an empty window has no numbers."""
    hamiltonian = hamiltonian_of(Case("square", 3, 5, 1))
    levels = all_levels(hamiltonian, states=True)
    found = edge_states(hamiltonian, levels)
    with pytest.raises(ValueError, match="read-only"):
        found.edge_weight[0] = 1
    none = levels.part(3, 3, lower=0.0, upper=0.0)
    assert edge_states(hamiltonian, none).edge_momentum.shape == (0,)
