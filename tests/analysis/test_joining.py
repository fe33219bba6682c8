"""Branches of a flux sweep: who follows whom through crossings.

Known lines: momentum states of clean rings, -2 cos(2 pi (n + delta + flux)/N) + const (see
``closed_forms.py``), and rings side by side that do not see each other.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import closed_forms as known
import numpy as np
import pytest
import scipy.linalg
from brute import Case
from hypothesis import given
from hypothesis import strategies as st

from ribbon.analysis import Window, all_levels, sweep_flux
from ribbon.analysis.exact import blocks_of
from ribbon.analysis.joining import Follower, follow_bands, follow_states

Build = Callable[..., Any]
LEVEL = 1e-9
KINK = 1e-5


def unitary(size: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    matrix = rng.standard_normal((size, size)) + 1j * rng.standard_normal((size, size))
    return np.asarray(scipy.linalg.qr(matrix)[0])


# --- states --------------------------------------------------------------------------------------


@given(size=st.integers(1, 12), seed=st.integers(0, 2**32 - 1), turn=st.floats(0, 0.2))
def test_shuffled_states_are_found_again(size: int, seed: int, turn: float) -> None:
    """In any order, with any phases, turned a little: every branch keeps its number."""
    rng = np.random.default_rng(seed)
    old = unitary(size, seed)
    small = scipy.linalg.expm(turn / size * (unitary(size, seed + 1) - unitary(size, seed + 1).T))
    small = scipy.linalg.polar(small)[0]
    order = rng.permutation(size)
    new = (small @ old)[:, order] * np.exp(2j * np.pi * rng.random(size))
    branch = rng.permutation(100)[:size]
    energies = np.sort(rng.random(size))
    found = follow_states(branch, old, new, (energies, energies[order]), 100)
    np.testing.assert_array_equal(found, branch[order])


def test_a_state_like_none_of_the_old_starts_a_branch() -> None:
    """Levels that enter a window get new numbers, those that leave lose theirs."""
    space = unitary(6, 3)
    branch = np.array([4, 2, 9])
    energies = np.array([0.0, 0.1, 0.2])
    new = space[:, [1, 4, 2, 5]]
    found = follow_states(branch, space[:, :3], new, (energies, np.arange(4) / 10), 10)
    assert found.tolist() == [2, 10, 9, 11]
    nothing = follow_states(branch, space[:, :3], space[:, :0], (energies, np.zeros(0)), 10)
    assert nothing.size == 0
    begin = follow_states(
        np.zeros(0, dtype=np.int64), space[:, :0], space[:, :2], (np.zeros(0), energies[:2]), 7
    )
    assert begin.tolist() == [7, 8]


def test_energies_settle_between_partners_that_turned() -> None:
    """Two states turned by 45 degrees overlap equally with both: the expected energies decide."""
    old = unitary(5, 8)[:, :2]
    half = old @ np.array([[1.0, 1.0], [1.0, -1.0]]) / math.sqrt(2)
    expected = np.array([0.3, 0.5])
    for order in ([0, 1], [1, 0]):
        found = follow_states(np.array([6, 7]), old, half, (expected, expected[order]), 9)
        assert found.tolist() == [6 + order[0], 6 + order[1]]


@given(seed=st.integers(0, 2**32 - 1))
def test_no_branch_is_given_twice(seed: int) -> None:
    """Whatever the states: numbers are unique, old or new."""
    rng = np.random.default_rng(seed)
    before, after = rng.integers(1, 9, 2)
    old, new = unitary(9, seed)[:, :before], unitary(9, seed + 1)[:, :after]
    energies = (rng.random(before), rng.random(after))
    found = follow_states(np.arange(before) + 3, old, new, energies, 50)
    assert np.unique(found).size == after
    assert ((found >= 50) | ((found >= 3) & (found < 3 + before))).all()


# --- bands of clean rings ------------------------------------------------------------------------


def lines_of(sweep: Any, values: str = "energy") -> dict[int, np.ndarray]:
    """Energy (or slope) along each branch, NaN where it was not seen."""
    rows: dict[int, np.ndarray] = {}
    for point in range(len(sweep.flux)):
        here = getattr(sweep, values)[point]
        for branch, value in zip(sweep.branch[point], here, strict=True):
            if branch >= 0:
                line = rows.setdefault(int(branch), np.full(len(sweep.flux), np.nan))
                assert np.isnan(line[point])
                line[point] = value
    return rows


@pytest.mark.parametrize("points", [80, 81])
@pytest.mark.parametrize(
    "case",
    [
        Case("honeycomb-zigzag", 4, 5, 1, -1),
        Case("honeycomb-armchair", 5, 4, 1),
        Case("kagome", 3, 4, 1),
        Case("lieb", 3, 4, 1, -1),
        Case("square", 4, 6, 2),
    ],
)
def test_branches_of_clean_rings_have_no_kinks(
    case: Case, points: int, hamiltonian_of: Build
) -> None:
    """Along a branch the energy is the integral of its slope (trapezoidal rule, error of third
    order), also where it meets others exactly: a wrong partner would be off by step x slopes."""
    sweep = sweep_flux(hamiltonian_of(case), np.linspace(0, 1, points))
    assert sweep.method == "symmetry"
    energies, slopes = lines_of(sweep), lines_of(sweep, "slope")
    assert len(energies) == case.sites()
    for branch, energy in energies.items():
        slope = slopes[branch]
        step = np.diff(sweep.flux)
        predicted = energy[:-1] + step * (slope[1:] + slope[:-1]) / 2
        np.testing.assert_allclose(energy[1:], predicted, rtol=0, atol=KINK)


@pytest.mark.parametrize("case", [Case("honeycomb-zigzag", 4, 5, 1, -1), Case("square", 3, 6, 2)])
def test_bands_of_equal_spectra_keep_their_numbers(case: Case, hamiltonian_of: Build) -> None:
    """Nothing moved, nothing renamed; in two halves as in one step."""
    blocks = blocks_of(hamiltonian_of(case))
    assert blocks is not None
    numbers = tuple(
        np.arange(s.momenta.size * s.size).reshape(s.momenta.size, s.size) for s in blocks.sectors
    )
    here, half, there = (blocks.spectrum(flux) for flux in (0.11, 0.115, 0.12))
    for one, two in zip(follow_bands(numbers, here, here), numbers, strict=True):
        np.testing.assert_array_equal(one, two)
    twice = follow_bands(follow_bands(numbers, here, half), half, there)
    for one, two in zip(follow_bands(numbers, here, there), twice, strict=True):
        np.testing.assert_array_equal(one, two)


def momentum_states(case: Case, fluxes: np.ndarray) -> np.ndarray:
    """All states of a square ribbon along a sweep, shape (states, points)."""
    states = []
    for q in range(1, case.rows + 1):
        delta = known.mode_offset((-1) ** (q + 1), case.half_twists, case.sigma)
        across = -2 * math.cos(math.pi * q / (case.rows + 1))
        for n in range(round(case.length)):
            k = 2 * math.pi * (n + delta + fluxes) / case.length
            states.append(across - 2 * np.cos(k))
    return np.array(states)


@pytest.mark.parametrize("route", ["dense", "sparse"])
@pytest.mark.parametrize(
    "case", [Case("square", 1, 12, 0), Case("square", 1, 12, 1, -1), Case("square", 3, 9, 1)]
)
def test_branches_of_weakly_disordered_rings_follow_the_clean_states(
    case: Case, route: str, hamiltonian_of: Build, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Disorder of 1e-5 spoils momentum as a label and hardly moves a level. The sweep steps over
    the crossings, where gaps of 1e-5 would have to be resolved: each branch is one clean state.
    """
    if route == "sparse":
        monkeypatch.setattr("ribbon.analysis.flux.fits_dense", lambda *_, **__: False)
        monkeypatch.setattr("ribbon.analysis.spectrum.DENSE_WINDOW", 0)
    fluxes = np.linspace(-0.0213, 1.0131, 50)
    rough = 1e-5 * np.random.default_rng(2).uniform(-0.5, 0.5, case.sites())
    window = Window(near=-0.4, count=7)
    sweep = sweep_flux(hamiltonian_of(case, rough), fluxes, window=window)
    assert sweep.method == route
    states = momentum_states(case, fluxes)
    crossed = 0
    for line in lines_of(sweep).values():
        seen = ~np.isnan(line)
        distance = np.abs(states[:, seen] - line[seen]).max(axis=1)
        assert distance.min() < 1e-4
        crossed += np.count_nonzero(seen) > 10
    assert crossed > 3


@pytest.mark.parametrize("route", ["dense", "sparse"])
def test_slopes_and_levels_along_both_routes(
    route: str, hamiltonian_of: Build, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The same ring with and without the complete spectrum: equal levels, indices and slopes."""
    case = Case("honeycomb-zigzag", 3, 8.5, 1, -1)
    rough = np.random.default_rng(4).uniform(-0.5, 0.5, case.sites())
    hamiltonian = hamiltonian_of(case, rough)
    window = Window(between=(-0.6, 0.5))
    fluxes = [0.0, 0.13, 0.5, 0.87]
    if route == "sparse":
        monkeypatch.setattr("ribbon.analysis.flux.fits_dense", lambda *_, **__: False)
        monkeypatch.setattr("ribbon.analysis.spectrum.DENSE_WINDOW", 0)
    sweep = sweep_flux(hamiltonian, fluxes, window=window)
    assert sweep.method == route
    for point, flux in enumerate(fluxes):
        levels = case.levels(flux, energies=rough)
        inside = np.flatnonzero((levels > -0.6) & (levels < 0.5))
        seen = sweep.level[point] >= 0
        np.testing.assert_array_equal(sweep.level[point][seen], inside)
        np.testing.assert_allclose(sweep.energy[point][seen], levels[inside], rtol=0, atol=LEVEL)
        exact = all_levels(hamiltonian, flux=flux, states=True).slopes
        assert exact is not None
        np.testing.assert_allclose(sweep.slope[point][seen], exact[inside], rtol=0, atol=1e-7)


def test_a_window_that_empties_and_fills_again(hamiltonian_of: Build) -> None:
    """Clean and disordered: rows of nothing are padded, and new branches begin afterwards."""
    case = Case("square", 1, 6, 0)
    window = Window(between=(-1.9, -1.2))
    fluxes = np.linspace(0.0, 1.0, 41)
    clean = sweep_flux(hamiltonian_of(case), fluxes, window=window)
    rough = 1e-6 * np.random.default_rng(2).uniform(-0.5, 0.5, 6)
    dense = sweep_flux(hamiltonian_of(case, rough), fluxes, window=window)
    states = momentum_states(case, fluxes)
    inside = np.count_nonzero((states > -1.9) & (states < -1.2), axis=0)
    assert 0 in inside
    for sweep in (clean, dense):
        found = np.count_nonzero(sweep.level >= 0, axis=1)
        np.testing.assert_array_equal(found, inside)
        np.testing.assert_array_equal(sweep.branch >= 0, sweep.level >= 0)
        np.testing.assert_array_equal(np.isnan(sweep.energy), sweep.level < 0)
        np.testing.assert_array_equal(np.isnan(sweep.slope), sweep.level < 0)


def test_a_window_that_holds_nothing(hamiltonian_of: Build) -> None:
    """No level at any flux: arrays of width 0, totals all the same."""
    window = Window(between=(7.0, 8.0))
    sweep = sweep_flux(hamiltonian_of(Case("square", 2, 6, 1)), [0.0, 0.2], window=window)
    assert sweep.energy.shape == sweep.branch.shape == (2, 0)
    assert sweep.totals is not None


@pytest.mark.parametrize("case", [Case("square", 3, 6, 1), Case("honeycomb-zigzag", 3, 2.5, 1)])
@pytest.mark.parametrize("width", [0.0, 0.5])
def test_a_sweep_repeats_after_a_quantum(case: Case, width: float, hamiltonian_of: Build) -> None:
    """Levels and slopes at flux, flux + 1 and, with the sign turned, -flux (N. Byers & C. N. Yang,
    Phys. Rev. Lett. 7, 46 (1961))."""
    rough = width * np.random.default_rng(1).uniform(-0.5, 0.5, case.sites())
    sweep = sweep_flux(hamiltonian_of(case, rough), [0.21, 1.21, -0.21, -2.21])
    for other in (1, 2, 3):
        np.testing.assert_allclose(sweep.energy[other], sweep.energy[0], rtol=0, atol=LEVEL)
    np.testing.assert_allclose(sweep.slope[1], sweep.slope[0], rtol=0, atol=1e-8)
    np.testing.assert_allclose(sweep.slope[2], -sweep.slope[0], rtol=0, atol=1e-8)
    np.testing.assert_allclose(sweep.slope[3], -sweep.slope[0], rtol=0, atol=1e-8)


def test_progress_is_told(hamiltonian_of: Build) -> None:
    """After each flux, on every route."""
    told: list[tuple[int, int]] = []
    for width in (0.0, 0.3):
        hamiltonian = hamiltonian_of(Case("square", 2, 6, 1), width * np.linspace(-1, 1, 12))
        sweep_flux(hamiltonian, [0.0, 0.1, 0.2], progress=lambda *step: told.append(step))
    assert told == 2 * [(1, 3), (2, 3), (3, 3)]


def test_real_states_follow_complex_ones() -> None:
    """At flux 0 states may be real: a follower that holds complex ones takes them without a word.

    (numpy warns, and the tests turn warnings into errors.)
    """
    follower = Follower()
    turned = np.diag([1.0j, 1.0])
    energies, slopes = np.array([0.0, 1.0]), np.zeros(2)
    first = follower.join(turned, energies, slopes, 0.1)
    second = follower.join(np.eye(2), energies, slopes, 0.0)
    assert second.tolist() == first.tolist() == [0, 1]
