"""Exact identities of twisted rings, tried by hypothesis over lattices, sizes, shells and disorder.

Sources: double cover - P. W. Fowler, Phys. Chem. Chem. Phys. 4, 2878 (2002) and W. Beugeling et
al., Phys. Rev. B 89, 235112 (2014); period one in flux - N. Byers & C. N. Yang, Phys. Rev. Lett.
7, 46 (1961); the rest follows from the definitions and is proved in each docstring.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import Any

import brute
import networkx as nx
import numpy as np
import pytest
from brute import Case, cases
from hypothesis import assume, given
from hypothesis import strategies as st

from ribbon.analysis import all_levels
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, double_cover, remove_sites

Build = Callable[..., Any]
LEVEL = 1e-9
ENTRY = 1e-12
APART = 1e-3  # where an identity must fail, it fails by more than this

amplitudes = st.floats(-1.5, 1.5, allow_nan=False).filter(lambda t: abs(t) > 1e-3)
fluxes = st.floats(-1.5, 1.5, allow_nan=False)
seeds = st.integers(0, 2**32 - 1)
widths = st.sampled_from([0.0, 0.5, 3.0])


@lru_cache(maxsize=64)
def pool(lattice: str, twists: tuple[int, ...], largest: int) -> tuple[Case, ...]:
    """Small rings of one lattice that close."""
    return tuple(
        case for case in cases((lattice,)) if case.half_twists in twists and case.sites() <= largest
    )


@st.composite
def rings(
    draw: st.DrawFn,
    lattices: tuple[str, ...] = brute.LATTICES,
    twists: tuple[int, ...] = (0, 1, 2, 3),
    largest: int = 40,
) -> Case:
    """A ring of any lattice, with amplitudes for one to three shells."""
    case = draw(st.sampled_from(pool(draw(st.sampled_from(lattices)), twists, largest)))
    further = draw(st.lists(amplitudes, max_size=2))
    return case._replace(hoppings=(1.0, *further))


def disorder(size: int, width: float, seed: int) -> np.ndarray:
    return width * np.random.default_rng(seed).uniform(-0.5, 0.5, size)


def levels(hamiltonian: Any, flux: float = 0.0) -> np.ndarray:
    return np.asarray(all_levels(hamiltonian, flux=flux).energies)


def assert_same(found: np.ndarray, expected: np.ndarray, *, atol: float = LEVEL) -> None:
    np.testing.assert_allclose(found, expected, rtol=0, atol=atol)


def union(*parts: np.ndarray) -> np.ndarray:
    return np.sort(np.concatenate(parts))


def sites_under_the_cover(case: Case) -> list[int]:
    """For each site of the plain strip of twice the length, the ring site it stands for."""
    around = case.length * brute.PERIOD[case.lattice]
    home = [(round(x, 4), round(y, 4) + 0.0) for x, y in brute.ring_sites(*case[:3])]
    flip = -1 if case.half_twists % 2 else 1
    under = []
    for x, y in brute.ring_sites(case.lattice, case.rows, 2 * case.length):
        beyond = x > around - 1e-6
        place = (x - around, flip * y) if beyond else (x, y)
        under.append(home.index((round(place[0], 4) + 0.0, round(place[1], 4) + 0.0)))
    return under


# --- double cover, sign and half a quantum --------------------------------------------------


@given(case=rings(), flux=fluxes, width=widths, seed=seeds)
def test_double_cover(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """spec(flux) U spec(flux + 1/2) = spec of the plain ring of twice the length at twice the flux.

    The cover carries V(n, m) first, then V(n, flipped m). With odd h the second spectrum is that
    of the other orbital sign.
    """
    energies = disorder(case.sites(), width, seed)
    ring = hamiltonian_of(case, energies)
    cover, lift = double_cover(ring.network)
    assert cover.half_twists % 2 == 0
    above = assemble(cover, Hopping(shells=case.hoppings, site_energy=energies[lift], unit="t"))
    twice = levels(above, 2 * flux)
    assert_same(union(levels(ring, flux), levels(ring, flux + 0.5)), twice)
    if case.half_twists % 2:
        other = hamiltonian_of(case._replace(sigma=-case.sigma), energies)
        assert_same(union(levels(ring, flux), levels(other, flux)), twice)
    plain = Case(case.lattice, case.rows, 2 * case.length, 0, 1, case.hoppings)
    lifted = energies[sites_under_the_cover(case)]
    assert_same(plain.levels(2 * flux, energies=lifted), twice)


@pytest.mark.parametrize("lattice", brute.LATTICES)
@pytest.mark.parametrize("half_twists", [0, 1, 3])
def test_lift_of_the_double_cover(lattice: str, half_twists: int, ring_of: Build) -> None:
    """The lift equals one worked out from coordinates, and so does the cover's matrix."""
    for case in pool(lattice, (half_twists,), 30):
        cover, lift = double_cover(ring_of(case))
        np.testing.assert_array_equal(lift, sites_under_the_cover(case))
        plain = Case(case.lattice, case.rows, 2 * case.length, 0)
        found = assemble(cover, Hopping(shells=(1.0,))).matrix(0.3).toarray()
        assert_same(found, plain.matrix(0.3), atol=ENTRY)


def test_double_cover_without_lifted_disorder_fails(hamiltonian_of: Build) -> None:
    """The flip in the lift matters: V(n, m) twice over is another ring."""
    case = Case("square", 3, 5, 1)
    energies = disorder(case.sites(), 2.0, 7)
    ring = hamiltonian_of(case, energies)
    both = union(levels(ring), levels(ring, 0.5))
    plain = Case("square", 3, 10, 0)
    wrong = plain.levels(energies=np.concatenate([energies, energies]))
    assert np.abs(both - wrong).max() > APART
    right = plain.levels(energies=energies[sites_under_the_cover(case)])
    assert_same(both, right)


@given(case=rings(twists=(1, 3)), flux=fluxes, width=widths, seed=seeds)
def test_orbital_sign_is_half_a_quantum(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """Odd h: "pz" at flux is "s" at flux + 1/2; entry by entry with all phase on the seam.

    A step with winding w picks (-1)^w = exp(i pi w) either way.
    """
    energies = disorder(case.sites(), width, seed)
    even = hamiltonian_of(case._replace(sigma=1), energies)
    odd = hamiltonian_of(case._replace(sigma=-1), energies)
    assert_same(levels(odd, flux), levels(even, flux + 0.5))
    assert_same(
        odd.matrix(flux, gauge="seam").toarray(),
        even.matrix(flux + 0.5, gauge="seam").toarray(),
        atol=ENTRY,
    )


@given(case=rings(twists=(0, 2)), flux=fluxes)
def test_orbital_sign_does_not_matter_for_even_twists(
    hamiltonian_of: Build, case: Case, flux: float
) -> None:
    """sigma^(h w) = 1 for even h; and h = 2 has the bonds of h = 0."""
    first = hamiltonian_of(case._replace(sigma=1, half_twists=0)).matrix(flux).toarray()
    for half_twists in (case.half_twists, 2):
        other = hamiltonian_of(case._replace(sigma=-1, half_twists=half_twists))
        assert_same(other.matrix(flux).toarray(), first, atol=ENTRY)


# --- symmetric and antisymmetric spectra -----------------------------------------------------


@given(case=rings(("honeycomb-zigzag",), (1, 3), 60), flux=fluxes)
def test_zigzag_antisymmetry(hamiltonian_of: Build, case: Case, flux: float) -> None:
    """First neighbours only, h odd: E(flux) = -E(flux + 1/2), "pz" the negative of "s".

    The sublattice sign changes every bond but is itself reversed by the flip, so that it also
    changes the seam. K. Wakabayashi & K. Harigaya, J. Phys. Soc. Jpn. 72, 998 (2003).
    """
    case = case._replace(hoppings=(1.0,))
    ring = hamiltonian_of(case)
    assert_same(levels(ring, flux), -levels(ring, flux + 0.5)[::-1])
    other = hamiltonian_of(case._replace(sigma=-case.sigma))
    assert_same(levels(other, flux), -levels(ring, flux)[::-1])
    for quarter in (0.25, -0.25):
        symmetric = levels(ring, quarter)
        assert_same(symmetric, -symmetric[::-1])


@pytest.mark.parametrize("sigma", [1, -1])
@pytest.mark.parametrize(("rows", "length"), [(2, 4), (3, 3.5), (4, 5)])
def test_zigzag_antisymmetry_fails_where_it_must(
    rows: int, length: float, sigma: int, hamiltonian_of: Build
) -> None:
    """Not symmetric at flux 0; and broken by second neighbours, by disorder and by h even."""

    def failure(hamiltonian: Any, flux: float, shift: float) -> float:
        return float(
            np.abs(levels(hamiltonian, flux) + levels(hamiltonian, flux + shift)[::-1]).max()
        )

    case = Case("honeycomb-zigzag", rows, length, 1, sigma)
    assert failure(hamiltonian_of(case), 0.1, 0.5) < LEVEL
    assert failure(hamiltonian_of(case), 0.0, 0.0) > APART
    assert failure(hamiltonian_of(case._replace(hoppings=(1.0, 0.2))), 0.1, 0.5) > APART
    assert failure(hamiltonian_of(case, disorder(case.sites(), 1.0, 3)), 0.1, 0.5) > APART
    assert failure(hamiltonian_of(case._replace(hoppings=(1.0, 0.0, 0.2))), 0.1, 0.5) < LEVEL
    plain = hamiltonian_of(case._replace(half_twists=0, length=2 * length))
    assert failure(plain, 0.1, 0.0) < LEVEL
    assert failure(plain, 0.1, 0.5) > APART


@given(case=rings(("honeycomb-armchair",), (0, 1, 2, 3), 60), flux=fluxes)
def test_armchair_rings_are_always_symmetric(
    hamiltonian_of: Build, case: Case, flux: float
) -> None:
    """The armchair flip keeps the sublattices: E and -E at every flux, any h and orbital."""
    energies = levels(hamiltonian_of(case._replace(hoppings=(1.0,))), flux)
    assert_same(energies, -energies[::-1])


@pytest.mark.parametrize("sigma", [1, -1])
@pytest.mark.parametrize("rows", [1, 2, 3, 4, 5])
def test_square_moebius_is_bipartite_when_rows_and_columns_differ_in_parity(
    rows: int, sigma: int, hamiltonian_of: Build
) -> None:
    """N + M - 1 even: symmetric levels; else not (columns 3 to 8)."""
    for columns in range(3, 9):
        energies = levels(hamiltonian_of(Case("square", rows, columns, 1, sigma)), 0.1)
        distance = np.abs(energies + energies[::-1]).max()
        if (rows + columns) % 2:
            assert distance < LEVEL
        else:
            assert distance > APART


def test_staggered_energy_on_one_sided_rings(ring_of: Build) -> None:
    """+-0.1 on A and B: refused where the flip exchanges A and B, allowed where it keeps them."""
    staggered = Hopping(shells=(1.0,), site_energy={"A": 0.1, "B": -0.1})
    for allowed in (Case("honeycomb-armchair", 5, 4, 1), Case("honeycomb-zigzag", 4, 4, 2)):
        assert abs(assemble(ring_of(allowed), staggered).matrix().diagonal().sum()) < ENTRY
    for refused in (Case("honeycomb-zigzag", 4, 4, 1), Case("honeycomb-zigzag", 3, 3.5, 3)):
        with pytest.raises(BadInput, match="domain wall"):
            assemble(ring_of(refused), staggered)


# --- covariance of the seam, gauge, flux -----------------------------------------------------


@given(case=rings(), flux=fluxes, width=widths, seed=seeds, moved=st.integers(1, 3))
def test_covariance_of_the_seam(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int, moved: int
) -> None:
    """Relabelling slices by the flip equals building with the seam further on, entry by entry.

    Checked against the library's own seam position and against brute force started further on,
    where the sites of the first slices are represented by their images beyond the far end.
    """
    energies = disorder(case.sites(), width, seed)
    slices = sorted({round(x, 6) for x, _ in brute.ring_sites(*case[:3])})
    assume(moved < len(slices))
    here = hamiltonian_of(case, energies)
    there = hamiltonian_of(case, energies, seam=moved)
    first = np.array([x < slices[moved] - 1e-6 for x, _ in brute.ring_sites(*case[:3])])
    sign = np.where(first, case.sigma**case.half_twists, 1.0)
    expected = sign[:, None] * here.matrix(flux).toarray() * sign
    assert_same(there.matrix(flux).toarray(), expected, atol=ENTRY)
    order = images_beyond(case, slices[moved])
    restarted = case.matrix(flux, energies=energies[order], start=slices[moved])
    assert_same(restarted, expected[np.ix_(order, order)], atol=ENTRY)


def images_beyond(case: Case, start: float) -> list[int]:
    """Sites of the ring in the order of a strip that begins at ``start``."""
    around = case.length * brute.PERIOD[case.lattice]
    home = [(round(x, 4), round(y, 4) + 0.0) for x, y in brute.ring_sites(*case[:3])]
    flip = -1 if case.half_twists % 2 else 1
    order = []
    for x, y in brute.ring_sites(*case[:3], start=start):
        place = (x - around, flip * y) if x > around - 1e-6 else (x, y)
        order.append(home.index((round(place[0], 4) + 0.0, round(place[1], 4) + 0.0)))
    return order


def test_a_transverse_potential_fails_covariance() -> None:
    """Why spectra alone do not test a seam: V(y) has the same levels wherever the seam stands.

    Brute force only: on a one-sided ring, energies given by height are not carried onto
    themselves when a slice is relabelled by the flip.
    """
    case = Case("square", 3, 6, 1)
    home = brute.ring_sites(*case[:3])
    here = case.matrix(energies=np.array([0.3 * y for _, y in home]))
    moved = brute.ring_sites(*case[:3], start=1.0)
    there = case.matrix(start=1.0, energies=np.array([0.3 * y for _, y in moved]))
    assert_same(np.linalg.eigvalsh(there), np.linalg.eigvalsh(here))
    order = images_beyond(case, 1.0)
    assert np.abs(there - here[np.ix_(order, order)]).max() > APART


@given(case=rings(), flux=fluxes, width=widths, seed=seeds)
def test_gauges_agree(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """Uniform, seam and random site phases: the same levels, and unitary images of each other."""
    hamiltonian = hamiltonian_of(case, disorder(case.sites(), width, seed))
    uniform = hamiltonian.matrix(flux).toarray()
    expected = np.linalg.eigvalsh(uniform)
    seam = hamiltonian.matrix(flux, gauge="seam").toarray()
    assert_same(np.linalg.eigvalsh(seam), expected)
    turns = np.array([x for x, _ in brute.ring_sites(*case[:3])])
    turns = flux * turns / (case.length * brute.PERIOD[case.lattice])
    phase = np.exp(2j * math.pi * turns)
    assert_same(phase.conj()[:, None] * seam * phase, uniform, atol=1e-11)
    chi = np.random.default_rng(seed).uniform(0, 2 * math.pi, case.sites())
    given_phases = hamiltonian.matrix(flux, gauge=chi).toarray()
    phase = np.exp(1j * chi)
    assert_same(phase.conj()[:, None] * uniform * phase, given_phases, atol=1e-11)
    assert_same(levels(hamiltonian, flux), expected)


@given(case=rings(), flux=fluxes, width=widths, seed=seeds)
def test_period_one_and_even_in_flux(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """Period h/e whatever the twist, and E(-flux) = E(flux) for real amplitudes."""
    hamiltonian = hamiltonian_of(case, disorder(case.sites(), width, seed))
    here = levels(hamiltonian, flux)
    assert_same(levels(hamiltonian, flux + 1), here)
    assert_same(levels(hamiltonian, -flux), here)


@given(case=rings(), flux=fluxes, width=widths, seed=seeds)
def test_hermitian_entry_by_entry(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """Both triangles, in every gauge; real where flux is a multiple of one half, on the seam."""
    hamiltonian = hamiltonian_of(case, disorder(case.sites(), width, seed))
    chi = np.linspace(0, 5, case.sites())
    for gauge in ("uniform", "seam", chi):
        matrix = hamiltonian.matrix(flux, gauge=gauge).toarray()
        assert_same(matrix, matrix.conj().T, atol=1e-14 * hamiltonian.scale)
    for half in (0.0, 0.5, -1.0):
        assert hamiltonian.matrix(half, gauge="seam").dtype == np.float64


@given(case=rings(), flux=fluxes, width=widths, seed=seeds)
def test_disordered_matrix_equals_brute_force(
    hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int
) -> None:
    """Any amplitudes of up to three shells and any site energies, entry by entry."""
    energies = disorder(case.sites(), width, seed)
    found = hamiltonian_of(case, energies).matrix(flux).toarray()
    assert_same(found, case.matrix(flux, energies=energies), atol=ENTRY)


@given(case=rings(largest=60), seed=seeds, fraction=st.floats(0.05, 0.4))
def test_vacancies_strike_rows_and_columns(
    ring_of: Build, hamiltonian_of: Build, case: Case, seed: int, fraction: float
) -> None:
    """Removing sites leaves the other entries of the matrix as they were."""
    count = max(1, round(fraction * case.sites()))
    assume(count < case.sites())
    removed = np.random.default_rng(seed).choice(case.sites(), count, replace=False)
    kept = np.setdiff1d(np.arange(case.sites()), removed)
    ring = remove_sites(ring_of(case), removed)
    found = assemble(ring, Hopping(shells=case.hoppings, unit="t")).matrix(0.2).toarray()
    assert_same(found, case.matrix(0.2)[np.ix_(kept, kept)], atol=ENTRY)


# --- traces ------------------------------------------------------------------------------------


@given(case=rings(largest=60), flux=fluxes, width=widths, seed=seeds)
def test_traces(hamiltonian_of: Build, case: Case, flux: float, width: float, seed: int) -> None:
    """Sum of levels, of squares and of cubes against brute-force entries: Tr H, Tr H^2, Tr H^3."""
    energies = disorder(case.sites(), width, seed)
    found = levels(hamiltonian_of(case, energies), flux)
    matrix = case.matrix(flux, energies=energies)
    scale = max(1.0, float(np.abs(matrix).sum(axis=1).max()))
    assert math.isclose(found.sum(), np.trace(matrix).real, abs_tol=LEVEL * scale)
    square = (np.abs(matrix) ** 2).sum()
    assert math.isclose((found**2).sum(), square, abs_tol=LEVEL * scale**2)
    cube = np.trace(matrix @ matrix @ matrix).real
    assert math.isclose((found**3).sum(), cube, abs_tol=LEVEL * scale**3)


@pytest.mark.parametrize(
    ("case", "bonds", "triangles"),
    [
        (Case("square", 4, 9, 1), 9 * (2 * 4 - 1), 0),
        (Case("honeycomb-zigzag", 4, 6, 1), 6 * (3 * 4 - 1), 0),
        (Case("honeycomb-armchair", 5, 6, 1), 6 * (3 * 5 - 2), 0),
        (Case("triangular", 3, 7, 1), 7 * (3 * 3 - 2), 7 * 2 * 2),
        (Case("triangular", 4, 7.5, 1), 15 * (3 * 4 - 2) // 2, 15 * 3),
        (Case("kagome", 5, 6.5, 1), 13 * (3 + 4), 13 * 2),
        (Case("lieb", 5, 6, 1), 6 * (2 * 3 + 2 * 2), 0),
    ],
)
def test_bonds_and_triangles_counted_by_traces(
    case: Case, bonds: int, triangles: int, hamiltonian_of: Build
) -> None:
    """Tr H^2 = 2 bonds and Tr H^3 = -6 triangles, each counted by hand per period; networkx too."""
    hamiltonian = hamiltonian_of(case)
    energies = levels(hamiltonian)
    graph = nx.from_scipy_sparse_array(hamiltonian.matrix())
    assert math.isclose((energies**2).sum(), 2 * bonds, abs_tol=1e-8)
    assert math.isclose((energies**3).sum(), -6 * triangles, abs_tol=1e-8)
    assert graph.number_of_edges() == bonds == len(hamiltonian.network.bonds.tail)
    assert sum(nx.triangles(graph).values()) == 3 * triangles


@given(
    pairs=st.sets(st.tuples(st.integers(0, 8), st.integers(0, 8)), min_size=1, max_size=25),
    seed=seeds,
)
def test_plain_networks(pairs: set[tuple[int, int]], seed: int) -> None:
    """Any simple graph with any site energies, free sites included, against its dense matrix."""
    listed = sorted((a, b) for a, b in pairs if a < b)
    assume(listed)
    energies = disorder(9, 2.0, seed)
    matrix = np.diag(energies)
    for a, b in listed:
        matrix[a, b] = matrix[b, a] = -0.7
    network = Network.from_pairs(listed, sites=9)
    hamiltonian = assemble(network, Hopping(shells=(0.7,), site_energy=energies))
    assert_same(hamiltonian.matrix().toarray(), matrix, atol=ENTRY)
    assert_same(levels(hamiltonian), np.linalg.eigvalsh(matrix))


@pytest.mark.parametrize("pairs", [[(0, 1), (1, 0)], [(0, 1), (0, 1)], [(0, 1), (1, 1)]])
def test_plain_networks_refuse_doubled_pairs_and_loops(pairs: list[tuple[int, int]]) -> None:
    """Never silently overwritten: a pair given twice, or a site bonded to itself, is refused."""
    with pytest.raises(BadInput, match=r"twice|itself"):
        Network.from_pairs(pairs)
