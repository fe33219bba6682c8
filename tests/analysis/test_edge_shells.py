"""Degenerate states at edges: numbers of the shell, whatever basis a solver hands over.

Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import scipy.linalg
from brute import Case

from ribbon.analysis import all_levels, edge_states
from ribbon.analysis.edges import EdgeStates
from ribbon.analysis.levels import Levels
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, close_strip, lay_strip, open_strip

Build = Callable[..., Any]
WEIGHT = 1e-10
"""Rounding of eigenvectors of some dozen sites."""
MOMENTUM = 1e-9


def shells_of(matrix: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """Positions of the levels of each shell, and the diagonal of its projector over its size."""
    energies, states = np.linalg.eigh(matrix)
    cuts = np.flatnonzero(np.diff(energies) > 1e-8) + 1
    groups = np.split(np.arange(energies.size), cuts)
    return [(one, (np.abs(states[:, one]) ** 2).mean(axis=1)) for one in groups]


def mixed(levels: Levels, seed: int) -> Levels:
    """The same shells in another basis, without labels."""
    rng = np.random.default_rng(seed)
    states = levels.states.astype(complex)
    for part in np.split(np.arange(levels.m), np.flatnonzero(np.diff(levels.energies) > 1e-8) + 1):
        size = part.size
        turn = rng.standard_normal((size, size)) + 1j * rng.standard_normal((size, size))
        states[:, part] = states[:, part] @ scipy.linalg.qr(turn)[0]
    return replace(levels, states=states, momentum=None, parity=None, slopes=None)


def assert_same_numbers(one: EdgeStates, other: EdgeStates, *names: str) -> None:
    for name in names:
        values = getattr(one, name), getattr(other, name)
        np.testing.assert_allclose(*values, rtol=0, atol=1e-8, err_msg=name)


NUMBERS = ("edge_weight", "hole_weight", "participation")


@pytest.mark.parametrize(
    "case",
    [
        Case("square", 4, 7, 0),
        Case("honeycomb-zigzag", 5, 5, 0),
        Case("honeycomb-armchair", 5, 4, 1),
        Case("kagome", 5, 4, 0),
    ],
)
def test_unlabelled_shells_do_not_depend_on_their_basis(hamiltonian_of: Build, case: Case) -> None:
    """A shell has a space, not states: mixed by a random unitary it gives the same numbers."""
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, states=True)
    one = edge_states(hamiltonian, mixed(levels, 1))
    other = edge_states(hamiltonian, mixed(levels, 2))
    assert_same_numbers(one, other, *NUMBERS)
    sizes = np.diff(np.flatnonzero(np.diff(levels.energies, prepend=-9, append=9) > 1e-8))
    pairs = np.repeat(sizes, sizes) <= 2  # of larger shells two momenta may be equally strong
    assert np.count_nonzero(pairs & (np.repeat(sizes, sizes) == 2)) >= 4
    np.testing.assert_allclose(
        one.edge_momentum[pairs], other.edge_momentum[pairs], rtol=0, atol=MOMENTUM
    )
    for members, density in shells_of(case.matrix()):
        wanted = 1 / (density**2).sum()
        np.testing.assert_allclose(one.participation[members], wanted, rtol=0, atol=1e-7)


@pytest.mark.parametrize("case", [Case("square", 3, 8, 0), Case("kagome", 5, 4, 0)])
def test_shares_of_shells_do_not_depend_on_their_basis(hamiltonian_of: Build, case: Case) -> None:
    """Power along the edge is averaged over a shell before it is normed, not after.

    Members of shells of more than two differ in their weight at the edge; the trace of the
    projector, sum over the shell of |Fourier sum|^2, knows nothing of the basis.
    """
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, states=True)
    one = edge_states(hamiltonian, mixed(levels, 1))
    other = edge_states(hamiltonian, mixed(levels, 2))
    sizes = np.diff(np.flatnonzero(np.diff(levels.energies, prepend=-9, append=9) > 1e-8))
    assert sizes.max() > 2
    assert_same_numbers(one, other, "edge_share", "decay_length")


def test_unlabelled_pairs_show_their_forward_member(hamiltonian_of: Build) -> None:
    """+k and -k of a shell without labels stand half each; the forward one is told."""
    case = Case("square", 4, 7, 0)
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, states=True)
    found = edge_states(hamiltonian, mixed(levels, 4))
    shells = dict(zip(levels.energies.round(8), range(levels.m), strict=True))
    sizes = {e: np.count_nonzero(np.abs(levels.energies - e) < 1e-7) for e in shells}
    for i, energy in enumerate(levels.energies.round(8)):
        if sizes[energy] == 2:
            momentum = np.abs(levels.momentum[i])
            np.testing.assert_allclose(found.edge_momentum[i], momentum, rtol=0, atol=MOMENTUM)
            np.testing.assert_allclose(found.edge_share[i], 0.5, rtol=0, atol=1e-8)


def test_a_molecule_has_edges_and_no_momentum() -> None:
    """Benzene from pairs: all six sites are rim, every shell spreads over all of them (Hückel)."""
    angle = np.pi / 3 * np.arange(6)
    places = np.column_stack([np.cos(angle), np.sin(angle)])
    pairs = [(i, (i + 1) % 6) for i in range(6)]
    benzene = assemble(Network.from_pairs(pairs, positions=places), Hopping())
    levels = all_levels(benzene, states=True)
    for seed in range(3):
        found = edge_states(benzene, mixed(levels, seed))
        np.testing.assert_allclose(found.edge_weight, 1.0, rtol=0, atol=WEIGHT)
        np.testing.assert_allclose(found.participation, 6.0, rtol=0, atol=1e-9)
        assert np.isnan(found.edge_momentum).all()
        assert np.isnan(found.edge_share).all()
        assert np.isnan(found.decay_length).all()


def test_the_rim_of_an_open_strip() -> None:
    """A particle in a box of 4 by 6: 1 - sum of sin^2 over the inner sites (closed form)."""
    network = open_strip(lay_strip("square", rows=4, length=6))
    hamiltonian = assemble(network, Hopping())
    levels = all_levels(hamiltonian, states=True)
    found = edge_states(hamiltonian, levels, within=1e-3)
    i, j = np.arange(1, 7)[:, None], np.arange(1, 5)[None, :]
    ground = (np.sin(np.pi * i / 7) * np.sin(np.pi * j / 5)) ** 2 * 4 / (7 * 5)
    np.testing.assert_allclose(
        found.edge_weight[0], 1 - ground[1:-1, 1:-1].sum(), rtol=0, atol=WEIGHT
    )
    assert not any(loop.is_edge for loop in found.loops)


@pytest.mark.parametrize("rows", [5, 8, 11, 17])
@pytest.mark.parametrize("columns", [5, 6])
def test_a_node_is_no_decay(rows: int, columns: int) -> None:
    """sin(pi q j/(N + 1)) never decays, not even where q = (N + 1)/3 gives 3/4, 3/4, 0 from the
    edge inward with the zero in the innermost row (closed form).
    """
    strip = lay_strip("square", rows=rows, length=columns)
    for orbital in ("s", "pz"):
        ring = close_strip(strip, half_twists=1, orbital=orbital)
        for seed in range(4):
            hamiltonian = assemble(ring, Hopping())
            levels = all_levels(hamiltonian, states=True)
            found = edge_states(hamiltonian, mixed(levels, seed) if seed else levels)
            assert np.isnan(found.decay_length).all()
