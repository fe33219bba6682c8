"""Certified counts and windows against dense spectra of brute-force matrices and closed forms.

Convention under test: a level within ``tolerance`` (1e-10 of the bonds at a site) of an energy
is not below it; windows include both of their edges and whole shells. Sylvester's law of inertia:
B. N. Parlett, The Symmetric Eigenvalue Problem (1998) [M].
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import brute
import closed_forms as known
import numpy as np
import pytest
from brute import Case, cases
from hypothesis import given
from hypothesis import strategies as st

from ribbon.analysis import all_levels, count_below, find_gap, levels_between, levels_near
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble, draw_vacancies
from ribbon.lattice import Network, certify_topology, close_strip, lay_strip, remove_sites

Build = Callable[..., Any]
LEVEL = 1e-9
RINGS_A_LATTICE = 90
SHELL = 1e-7  # dense levels closer than this belong together


def levels_below(levels: np.ndarray, energy: float, scale: float) -> int | None:
    """Dense count under the convention; None where a level stands in the doubtful margin."""
    distance = np.abs(levels - energy)
    if np.any((distance > 1e-11 * scale) & (distance < 1e-9 * scale)):
        return None
    return int(np.count_nonzero(levels < energy - 1e-10 * scale))


def random_ring(lattice: str, number: int) -> tuple[Any, np.ndarray, float, np.random.Generator]:
    """Hamiltonian, brute-force dense matrix and flux of a random ring: a third of them clean,
    a third with vacancies, half of them complex."""
    rng = np.random.default_rng([brute.LATTICES.index(lattice), number])
    sizes = cases((lattice,), rows=(1, 2, 3, 4, 5), lengths=(1, 1.5, 3, 4, 5, 5.5, 7))
    case = sizes[rng.integers(len(sizes))]
    shells = rng.integers(1, 4) if number % 2 else 1
    case = case._replace(hoppings=(1.0, *rng.uniform(-0.5, 0.5, shells - 1).tolist()))
    energies = [0.0, 1.0, 4.0][number % 3] * rng.uniform(-0.5, 0.5, case.sites())
    flux = [0.0, 0.5, float(rng.uniform(-1, 1)), 0.25][number % 4]
    strip = lay_strip(lattice, rows=case.rows, length=case.length)
    orbital = "s" if case.sigma == 1 else "pz"
    ring = close_strip(
        strip, half_twists=case.half_twists, orbital=orbital, shells=len(case.hoppings)
    )
    kept = np.arange(case.sites())
    if number % 9 >= 6 and ring.n > 4:
        removed = draw_vacancies(ring.n, 0.15, seed=number)
        kept = np.setdiff1d(kept, removed)
        ring = remove_sites(ring, removed)
    hopping = Hopping(shells=case.hoppings, site_energy=energies[kept], unit="t")
    matrix = case.matrix(flux, energies=energies)[np.ix_(kept, kept)]
    return assemble(ring, hopping), matrix, flux, rng


def energies_to_try(levels: np.ndarray, rng: np.random.Generator) -> list[float]:
    """Special energies, levels themselves, gaps, random ones, and outside the spectrum."""
    middle = len(levels) // 2
    return [
        *(0.0, 1.0, -1.0, 2.0),
        *rng.choice(levels, 3).tolist(),
        *rng.uniform(levels[0], levels[-1], 3).tolist(),
        float(levels[middle - 1 : middle + 1].mean()),
        *(float(levels[0]) - 1e-3, float(levels[-1]) + 1e-3),
    ]


@pytest.mark.parametrize("lattice", brute.LATTICES)
def test_counts_equal_dense_counts(lattice: str) -> None:
    """90 random rings of each of six lattices, a dozen energies each, exact levels included."""
    compared = 0
    for number in range(RINGS_A_LATTICE):
        hamiltonian, matrix, flux, rng = random_ring(lattice, number)
        levels = np.linalg.eigvalsh(matrix)
        for energy in energies_to_try(levels, rng):
            expected = levels_below(levels, energy, hamiltonian.bond_scale)
            if expected is not None:
                found = count_below(hamiltonian, energy, flux=flux)
                assert found == expected, (lattice, number, flux, energy)
                compared += 1
    assert compared > 12 * RINGS_A_LATTICE


@pytest.mark.parametrize("lattice", brute.LATTICES)
def test_counts_of_clean_networks_equal_dense_counts(lattice: str, ring_of: Build) -> None:
    """Clean rings handed over as bare bonds: no symmetry to lean on, E = 0 and +-t included."""
    tried = cases((lattice,), rows=(2, 3, 4), lengths=(4, 5, 6, 6.5))
    rng = np.random.default_rng(5)
    for case in [case for case in tried if case.sigma == 1]:
        bonds = ring_of(case).bonds
        pairs = list(zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True))
        hamiltonian = assemble(Network.from_pairs(pairs), Hopping(shells=(1.0,)))
        levels = case.levels()
        for energy in energies_to_try(levels, rng):
            expected = levels_below(levels, energy, hamiltonian.bond_scale)
            if expected is not None:
                assert count_below(hamiltonian, energy) == expected, (case, energy)


@pytest.mark.parametrize(
    ("case", "energy"),
    [
        (Case("square", 7, 61, 0), 0.0),
        (Case("square", 8, 60, 0), 1 + 1e-12),
        (Case("square", 7, 61, 1), 0.0),
        (Case("square", 10, 1000, 1, -1), -1.0),
        (Case("honeycomb-zigzag", 4, 300, 1), 1e-14),
        (Case("honeycomb-zigzag", 4, 300, 1, -1), 0.0),
        (Case("honeycomb-zigzag", 10, 500, 1, -1), 1.0),
        (Case("honeycomb-armchair", 11, 400, 1), 1.0),
        (Case("honeycomb-armchair", 5, 300, 1, -1), 0.0),
    ],
)
def test_counts_of_large_clean_rings(case: Case, energy: float, ring_of: Build) -> None:
    """Up to 10,000 sites at the energies that break elimination without pivots; closed forms."""
    form = {
        "square": known.square,
        "honeycomb-zigzag": known.zigzag_by_blocks,
        "honeycomb-armchair": known.armchair,
    }[case.lattice]
    length = round(case.length)
    levels = form(case.rows, length, half_twists=case.half_twists, sigma=case.sigma, flux=0.0)
    ring = ring_of(case)
    barely = np.zeros(ring.n)
    barely[0] = 1e-300  # not clean in the eyes of the library, and the same matrix to it
    for site_energy in (0.0, barely):
        hamiltonian = assemble(ring, Hopping(shells=(1.0,), site_energy=site_energy))
        below = levels_below(levels, energy, hamiltonian.bond_scale)
        assert below is not None
        assert count_below(hamiltonian, energy) == below


# --- windows -----------------------------------------------------------------------------------

METHODS = ["auto", "dense", "sparse"]
WINDOWED = [
    Case("square", 4, 30, 1),
    Case("square", 3, 40, 0),
    Case("honeycomb-zigzag", 4, 18, 1, -1),
    Case("honeycomb-armchair", 5, 12, 1),
    Case("triangular", 3, 36, 2),
    Case("kagome", 5, 10.5, 1),
    Case("lieb", 5, 10, 1, -1),
]


def whole_shells(levels: np.ndarray, first: int, last: int) -> tuple[int, int]:
    """The range first..last (last excluded) widened until it cuts no degenerate shell."""
    while 0 < first < last and levels[first] - levels[first - 1] < SHELL:
        first -= 1
    while first < last < len(levels) and levels[last] - levels[last - 1] < SHELL:
        last += 1
    return first, last


def assert_window(found: Any, levels: np.ndarray, first: int, last: int) -> None:
    """Energies, positions, and a certificate that says the same."""
    np.testing.assert_array_equal(found.index, np.arange(first, last))
    np.testing.assert_allclose(found.energies, levels[first:last], rtol=0, atol=LEVEL)
    certificate = found.certificate
    assert certificate.complete
    assert certificate.found == last - first
    assert certificate.count_upper - certificate.count_lower == last - first
    assert certificate.count_lower == first


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("width", [0.0, 0.8])
@pytest.mark.parametrize("case", WINDOWED)
def test_windows_between_energies(
    case: Case, width: float, method: Any, hamiltonian_of: Build
) -> None:
    """Clean (full of degenerate pairs) and disordered, against brute force; ends on levels too."""
    rng = np.random.default_rng(11)
    energies = width * rng.uniform(-0.5, 0.5, case.sites())
    hamiltonian = hamiltonian_of(case, energies)
    for flux in (0.0, 0.2):
        levels = case.levels(flux, energies=energies)
        n = len(levels)
        ends = [(0.31, 0.52), (-0.7, -0.65), (levels[n // 3], levels[n // 3 + 6])]
        for lower, upper in [*ends, (levels[0] - 1, levels[4]), (levels[-3], levels[-1] + 1)]:
            first = int(np.count_nonzero(levels < lower - SHELL))
            last = int(np.count_nonzero(levels < upper + SHELL))
            found = levels_between(hamiltonian, lower, upper, flux=flux, method=method)
            assert_window(found, levels, first, last)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("case", WINDOWED)
def test_empty_windows(case: Case, method: Any, hamiltonian_of: Build) -> None:
    """Nothing there is an answer too, and it is certified."""
    hamiltonian = hamiltonian_of(case, 0.3 * np.sin(np.arange(case.sites())))
    levels = case.levels(energies=0.3 * np.sin(np.arange(case.sites())))
    widest = int(np.argmax(np.diff(levels)))
    gap = levels[widest + 1] - levels[widest]
    windows = [(levels[widest] + gap / 3, levels[widest] + 2 * gap / 3), (50.0, 60.0)]
    for lower, upper in [*windows, (-60.0, -50.0)]:
        position = int(np.count_nonzero(levels < lower))
        found = levels_between(hamiltonian, lower, upper, method=method)
        assert_window(found, levels, position, position)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("width", [0.0, 0.8])
@pytest.mark.parametrize("case", WINDOWED)
def test_levels_near_an_energy(
    case: Case, width: float, method: Any, hamiltonian_of: Build
) -> None:
    """The nearest ones by distance, whole shells: every asked-for level and no shell in pieces."""
    rng = np.random.default_rng(12)
    energies = width * rng.uniform(-0.5, 0.5, case.sites())
    hamiltonian = hamiltonian_of(case, energies)
    levels = case.levels(0.1, energies=energies)
    for energy, count in [(0.0, 1), (0.0, 7), (levels[20], 5), (1.0, 12), (-9.0, 4), (9.0, 3)]:
        found = levels_near(hamiltonian, energy, count=count, flux=0.1, method=method)
        assert len(found.energies) >= count
        first, last = int(found.index[0]), int(found.index[-1]) + 1
        assert (first, last) == whole_shells(levels, first, last)
        assert_window(found, levels, first, last)
        reach = np.sort(np.abs(levels - energy))[count - 1]
        inside = np.flatnonzero(np.abs(levels - energy) < reach - SHELL)
        assert set(inside) <= set(found.index)
        farthest = np.abs(found.energies - energy).max()
        assert farthest < reach + SHELL


@pytest.mark.parametrize("method", METHODS)
def test_asking_for_more_levels_than_there_are(method: Any, hamiltonian_of: Build) -> None:
    """All of them come back."""
    case = Case("square", 2, 6, 1)
    found = levels_near(hamiltonian_of(case), 0.0, count=1000, method=method)
    assert_window(found, case.levels(), 0, 12)


@pytest.mark.parametrize("energy", [0.0, 0.5, 1.0, -2.0])
def test_windows_that_cut_a_multiplet_are_completed(energy: float, hamiltonian_of: Build) -> None:
    """A flat band: the Lieb ribbon has one zero level per link more than corners, at any flux."""
    case = Case("lieb", 7, 9, 1, -1)
    levels = known.lieb(4, 9, half_twists=1, sigma=-1, flux=0.3)
    flat = np.count_nonzero(np.abs(levels) < LEVEL)
    assert flat == (2 * 4 - 1) * 9 - 4 * 9
    found = levels_near(hamiltonian_of(case), energy, count=1, flux=0.3)
    assert len(found.energies) == (flat if energy == 0 else 1)


@pytest.mark.parametrize("method", ["dense", "sparse"])
def test_flat_bands_by_every_method(method: Any, hamiltonian_of: Build) -> None:
    """27 zero levels of the Lieb ribbon asked for by one; kagome's levels at 2t likewise."""
    lieb = Case("lieb", 7, 9, 1, -1)
    found = levels_near(hamiltonian_of(lieb), 0.0, count=1, method=method)
    levels = lieb.levels()
    flat = np.flatnonzero(np.abs(levels) < LEVEL)
    assert_window(found, levels, flat[0], flat[-1] + 1)
    kagome = Case("kagome", 7, 8, 1)
    levels = kagome.levels()
    flat = np.flatnonzero(np.abs(levels - 2) < LEVEL)
    assert len(flat) > 8
    found = levels_between(hamiltonian_of(kagome), 1.9999, 2.0, method=method)
    assert_window(found, levels, flat[0], flat[-1] + 1)


@given(
    number=st.integers(0, 10_000),
    lattice=st.sampled_from(brute.LATTICES),
    method=st.sampled_from(METHODS),
    wanted=st.integers(1, 8),
)
def test_windows_of_random_rings(lattice: str, number: int, method: Any, wanted: int) -> None:
    """Random rings, with states: residuals, orthonormality, and the dense levels."""
    hamiltonian, matrix, flux, rng = random_ring(lattice, number)
    levels = np.linalg.eigvalsh(matrix)
    energy = float(rng.choice(levels)) if number % 2 else float(rng.uniform(-2, 2))
    found = levels_near(hamiltonian, energy, count=wanted, flux=flux, states=True, method=method)
    first, last = int(found.index[0]), int(found.index[-1]) + 1
    assert len(found.energies) >= min(wanted, hamiltonian.n)
    assert (first, last) == whole_shells(levels, first, last)
    assert_window(found, levels, first, last)
    states = found.states
    np.testing.assert_allclose(states.conj().T @ states, np.eye(last - first), rtol=0, atol=1e-8)
    residual = matrix @ states - states * found.energies
    assert np.linalg.norm(residual, axis=0).max() < 1e-8
    assert found.residual < 1e-8


def test_windows_in_the_wrong_order_are_refused(hamiltonian_of: Build) -> None:
    """One sentence, not an empty answer."""
    with pytest.raises(BadInput, match="ascending"):
        levels_between(hamiltonian_of(Case("square", 2, 5, 0)), 1.0, -1.0)


def test_a_large_window_has_every_partner(ring_of: Build) -> None:
    """20,000 sites, clean to within rounding and treated as disordered: all pairs are found.

    Closed form of the square Möbius ribbon; 60 levels about 0.3 in exact pairs at flux 0.
    """
    case = Case("square", 10, 2000, 1)
    levels = known.square(10, 2000, half_twists=1, sigma=1, flux=0.0)
    ring = ring_of(case)
    barely = np.zeros(ring.n)
    barely[0] = 1e-300
    hamiltonian = assemble(ring, Hopping(shells=(1.0,), site_energy=barely))
    found = levels_near(hamiltonian, 0.3, count=60)
    first, last = int(found.index[0]), int(found.index[-1]) + 1
    assert (first, last) == whole_shells(levels, first, last)
    assert found.certificate.method == "sparse"
    assert_window(found, levels, first, last)


@pytest.mark.parametrize("lattice", brute.LATTICES)
def test_complete_spectra_are_certified(lattice: str, hamiltonian_of: Build) -> None:
    """The certificate of a complete spectrum counts 0 and n."""
    case = cases((lattice,), rows=(3,), lengths=(4, 4.5))[0]
    found = all_levels(hamiltonian_of(case), flux=0.1)
    assert_window(found, case.levels(0.1), 0, case.sites())


@pytest.mark.parametrize("flux", [0.0, 0.2])
@pytest.mark.parametrize("fraction", [0.05, 0.2])
def test_zero_levels_of_a_ribbon_with_vacancies(
    fraction: float, flux: float, ring_of: Build
) -> None:
    """Graphene with missing sites: many levels exactly at the energy asked for.

    The shifted matrix is singular many times over, which elimination must survive; the zero
    levels number at least what the bipartite ring owes to its sublattices (Lieb 1989 [M]).
    """
    ring = ring_of(Case("honeycomb-armchair", 9, 60, 1, -1))
    ring = remove_sites(ring, draw_vacancies(ring.n, fraction, seed=1))
    hamiltonian = assemble(ring, Hopping(shells=(1.0,), unit="t"))
    levels = np.linalg.eigvalsh(hamiltonian.matrix(flux).toarray())
    found = levels_near(hamiltonian, 0.0, count=40, flux=flux, method="sparse")
    first, last = int(found.index[0]), int(found.index[-1]) + 1
    assert_window(found, levels, first, last)
    owed = certify_topology(ring).guaranteed_zero_levels
    assert owed
    assert np.count_nonzero(np.abs(levels) < LEVEL) >= owed


@pytest.mark.parametrize("offset", [0.0, 1e6, -3e7])
def test_a_common_offset_does_not_join_levels(offset: float) -> None:
    """A dimer with t = 1e-3 far from the zero of energy still has two levels and a gap of 2 t."""
    pair = Network.from_pairs([(0, 1)])
    hamiltonian = assemble(pair, Hopping(shells=(1e-3,), site_energy=offset))
    assert find_gap(hamiltonian).gap == pytest.approx(2e-3, abs=1e-7)
    assert levels_near(hamiltonian, offset - 1e-3, count=1).m == 1
