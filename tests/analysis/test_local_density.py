"""Densities on the sites, against matrix functions and projectors of brute-force matrices."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import scipy.linalg
from brute import Case

from ribbon.analysis import (
    all_levels,
    density_of_states,
    levels_between,
    local_density,
    shell_density,
)
from ribbon.analysis.density import shell_groups, shell_means
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip

Build = Callable[..., Any]
SUM = 1e-10
"""Sums over eigenvectors of some dozen sites."""
RINGS = [
    Case("square", 4, 7, 1, -1),
    Case("triangular", 4, 5.5, 1),
    Case("honeycomb-zigzag", 3, 5.5, 1, -1),
    Case("honeycomb-armchair", 5, 4, 2),
    Case("kagome", 5, 3.5, 3),
    Case("lieb", 5, 4, 0),
]


def chain_of(sites: int) -> Any:
    strip = lay_strip("square", rows=1, length=sites)
    return assemble(close_strip(strip, half_twists=0), Hopping())


@pytest.mark.parametrize("case", RINGS)
@pytest.mark.parametrize("energy", [-1.1, 0.0, 0.6])
def test_local_density_is_a_function_of_the_matrix(
    hamiltonian_of: Build, case: Case, energy: float
) -> None:
    """Diagonal of exp(-(E - H)^2/2 s^2)/(s sqrt(2 pi)), a matrix function (scipy.linalg.expm).

    Its sum over the sites is the density of states at that energy.
    """
    width, flux = 0.25, 0.11
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, flux=flux, states=True)
    found = local_density(levels, energy, broadening=width)
    off = (energy * np.eye(hamiltonian.n) - case.matrix(flux)) / width
    wanted = scipy.linalg.expm(-off @ off / 2).diagonal().real / (width * math.sqrt(2 * math.pi))
    np.testing.assert_allclose(found, wanted, rtol=0, atol=1e-9)
    total = density_of_states(hamiltonian, broadening=width, flux=flux, energies=[energy])
    np.testing.assert_allclose(found.sum(), total.density[0], rtol=0, atol=1e-9)
    assert np.ptp(found) > 1e-3


def mixed(levels: Any, seed: int) -> Any:
    """The same shells in another basis, without labels."""
    rng = np.random.default_rng(seed)
    states = levels.states.astype(complex)
    for part in np.split(np.arange(levels.m), np.flatnonzero(np.diff(levels.energies) > 1e-8) + 1):
        turn = rng.standard_normal((2, part.size, part.size))
        states[:, part] = states[:, part] @ scipy.linalg.qr(turn[0] + 1j * turn[1])[0]
    return replace(levels, states=states, momentum=None, parity=None, slopes=None)


@pytest.mark.parametrize("case", RINGS)
def test_shell_density_is_that_of_the_projector(hamiltonian_of: Build, case: Case) -> None:
    """Diagonal of the projector on a shell over its size (numpy.linalg.eigh), in any basis."""
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, states=True)
    energies, states = np.linalg.eigh(case.matrix())
    turned = [mixed(levels, seed) for seed in (1, 2)]
    several = 0
    for level in range(0, hamiltonian.n, 3):
        shell = np.abs(energies - energies[level]) < 1e-8
        several += np.count_nonzero(shell) > 1
        wanted = (np.abs(states[:, shell]) ** 2).sum(axis=1) / np.count_nonzero(shell)
        for one in turned:
            found = shell_density(hamiltonian, one, level)
            np.testing.assert_allclose(found, wanted, rtol=0, atol=SUM)
    assert several > 2


def test_shell_density_finds_levels_of_a_window_by_their_index(hamiltonian_of: Build) -> None:
    """``level`` counts from the bottom of the complete spectrum, not of the window."""
    case = Case("square", 4, 7, 1)
    energies = np.random.default_rng(2).uniform(-1, 1, case.sites())
    hamiltonian = hamiltonian_of(case, energies)
    window = levels_between(hamiltonian, -1.0, 1.0, states=True)
    values, states = np.linalg.eigh(case.matrix(energies=energies))
    level = int(np.flatnonzero(values > 0)[0])
    assert level > window.m / 2
    found = shell_density(hamiltonian, window, level)
    np.testing.assert_allclose(found, np.abs(states[:, level]) ** 2, rtol=0, atol=SUM)
    with pytest.raises(BadInput, match=f"level 0 is not among the {window.m} levels"):
        shell_density(hamiltonian, window, 0)


def test_labels_split_a_shell() -> None:
    """+k and -k of a chain are two shells where momentum tells them apart, else one (Hückel)."""
    hamiltonian = chain_of(6)
    levels = all_levels(hamiltonian)
    assert np.bincount(shell_groups(hamiltonian, levels)).tolist() == [1] * 6
    bare = replace(levels, momentum=None, parity=None)
    groups = shell_groups(hamiltonian, bare)
    assert groups.tolist() == [0, 1, 1, 2, 2, 3]
    values = np.array([[1.0, 2.0, 4.0, 5.0, 7.0, 9.0]])
    assert shell_means(values, groups).tolist() == [[1.0, 3.0, 3.0, 6.0, 6.0, 9.0]]
