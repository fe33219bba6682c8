"""Amplitudes, site energies, disorder, units and the assembled matrix.

Constants: CODATA as carried by ``scipy.constants``. Matrices against ``brute.py`` and against
numerical derivatives; random numbers against the distribution they are drawn from.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import brute
import numpy as np
import pytest
import scipy.constants as si
from brute import Case
from scipy import stats

from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble, draw_vacancies, effective_mass
from ribbon.hopping.units import UNITS, boltzmann, check_unit, current_factor, hbar2_over_2m
from ribbon.lattice import Network, close_strip, double_cover, lay_strip, remove_sites

Build = Callable[..., Any]
ENTRY = 1e-12
MOEBIUS = Case("square", 3, 6, 1)


def square(rows: int = 3, length: int = 6, half_twists: int = 1, **options: Any) -> Any:
    strip = lay_strip("square", rows=rows, length=length)
    return close_strip(strip, half_twists=half_twists, orbital="s", **options)


# --- what is refused -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("given", "sentence"),
    [
        ({"shells": ()}, r"hopping.shells = \[\] must be one to three numbers"),
        ({"shells": (1.0, 1.0, 1.0, 1.0)}, "must be one to three numbers"),
        ({"shells": (math.nan,)}, "must be finite numbers"),
        ({"shells": (1e13,)}, "must be finite numbers"),
        ({"disorder": -1.0}, "disorder.strength = -1.0 must be zero or a positive number"),
        ({"disorder": math.inf}, "disorder.strength = inf must be zero or a positive number"),
        ({"seed": -1}, "disorder.seed = -1 must be zero or a positive whole number"),
        ({"unit": "Ry"}, 'hopping.unit = "Ry" is not one of eV, meV, t, beta'),
    ],
)
def test_amplitudes_that_make_no_sense(given: dict[str, Any], sentence: str) -> None:
    """Refused when the hopping is made."""
    with pytest.raises(BadInput, match=sentence):
        Hopping(**given)


@pytest.mark.parametrize(
    ("term", "sentence"),
    [
        (np.zeros(5), r"have the shape \(5,\); expected one for each of the 18 sites"),
        (np.full(18, math.nan), "holds a value that is not a finite number"),
        (math.inf, "holds a value that is not a finite number"),
        ({"Q": 1.0}, "names the sublattice 'Q'; this lattice has A"),
        (lambda x, y: y, "does not fit the seam"),
        (lambda x, y: np.sin(x), "does not fit the seam"),
        (lambda x, y: np.zeros(4), r"returned the shape \(4,\); expected \(18,\)"),
    ],
)
def test_site_energies_that_make_no_sense(term: Any, sentence: str) -> None:
    """Refused when they are put on a ring (18 sites)."""
    with pytest.raises(BadInput, match=sentence):
        assemble(square(), Hopping(site_energy=term))


@pytest.mark.parametrize("mass", [0.0, -0.1, math.nan, math.inf])
def test_a_mass_that_makes_no_sense(mass: float) -> None:
    """Positive and finite."""
    with pytest.raises(BadInput, match="must be a positive number of electron masses"):
        effective_mass(mass, 2.0)


def test_shells_must_be_those_the_network_was_closed_with() -> None:
    """Neither fewer nor more amplitudes than shells of bonds."""
    with pytest.raises(BadInput, match=r"names 1 amplitudes, but .* shells = 2"):
        assemble(square(shells=2), Hopping(shells=(1.0,)))
    with pytest.raises(BadInput, match=r"names 2 amplitudes, but .* shells = 1"):
        assemble(square(), Hopping(shells=(1.0, 0.1)))
    with pytest.raises(BadInput, match=r"names 3 amplitudes, but .* shells = 1"):
        assemble(Network.from_pairs([(0, 1)]), Hopping(shells=(1.0, 0.1, 0.1)))


def test_labels_need_a_lattice() -> None:
    """A molecule has no sublattices of its own."""
    with pytest.raises(BadInput, match="by sublattice need a ring laid from a lattice"):
        assemble(Network.from_pairs([(0, 1)]), Hopping(site_energy={"A": 1.0}))


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        ({"flux": math.nan}, "field.flux = nan must be a finite number"),
        ({"flux": math.inf}, "field.flux = inf must be a finite number"),
        ({"gauge": "landau"}, 'field.gauge = .landau. must be "uniform" or "seam"'),
        ({"gauge": np.zeros(4)}, r"the gauge has the shape \(4,\); .* each of the 18 sites"),
    ],
)
def test_a_field_that_makes_no_sense(options: dict[str, Any], sentence: str) -> None:
    """Refused when a matrix is asked for."""
    with pytest.raises(BadInput, match=sentence):
        assemble(square(), Hopping()).matrix(**options)


def test_a_molecule_takes_no_threading_flux() -> None:
    """It has no seam; flux 0 is fine."""
    hamiltonian = assemble(Network.from_pairs([(0, 1), (1, 2)]), Hopping())
    assert hamiltonian.matrix(0.0).nnz == 4
    with pytest.raises(BadInput, match="a threading flux needs a ring"):
        hamiltonian.matrix(0.5)


# --- units ---------------------------------------------------------------------------------------


def test_effective_mass_against_the_constants() -> None:
    """t = hbar^2/(2 m* a^2): GaAs (0.067 m_e), a = 2 nm, 142.16 meV; site energy 4t."""
    found = effective_mass(0.067, 2.0)
    joule = si.hbar**2 / (2 * 0.067 * si.m_e * (2e-9) ** 2)
    assert math.isclose(found.shells[0], joule / si.e * 1e3, rel_tol=1e-12)
    assert math.isclose(found.shells[0], 142.16, abs_tol=0.01)
    assert found.site_energy == 4 * found.shells[0]
    assert (found.unit, effective_mass(0.067, 2.0, unit="eV").unit) == ("meV", "eV")
    assert math.isclose(effective_mass(0.067, 2.0, unit="eV").shells[0] * 1e3, found.shells[0])


def test_the_band_of_an_effective_mass_starts_at_zero() -> None:
    """One row: E = 4t - 2t cos k - 0, lowest 2t at k = 0; the plane's own bottom is 0."""
    strip = lay_strip("square", rows=30, length=30, spacing=1.0)
    hopping = effective_mass(1.0, 1.0)
    matrix = assemble(close_strip(strip, half_twists=0), hopping).matrix().toarray()
    lowest = np.linalg.eigvalsh(matrix)[0]
    exact = 2 * hopping.shells[0] * (1 - math.cos(math.pi / 31))
    assert math.isclose(lowest, exact, rel_tol=1e-9)


def test_boltzmann_constant() -> None:
    """8.617333262e-5 eV/K; units without a temperature scale say so."""
    assert math.isclose(boltzmann("eV"), 8.617333262e-5, rel_tol=1e-9)
    assert math.isclose(boltzmann("meV"), 1e3 * boltzmann("eV"), rel_tol=1e-12)
    for unit in set(UNITS) - {"eV", "meV"}:
        with pytest.raises(BadInput, match=rf'unit is "{unit}", so set temperature = 0'):
            boltzmann(unit)
        with pytest.raises(BadInput, match=f'needs the unit eV or meV, not "{unit}"'):
            hbar2_over_2m(0.067, unit)


@pytest.mark.parametrize("function", [check_unit, current_factor, boltzmann])
def test_unknown_units(function: Callable[[str], Any]) -> None:
    """The sentence lists those that are known."""
    with pytest.raises(BadInput, match='"Hartree" is not one of eV, meV'):
        function("Hartree")


# --- site energies -------------------------------------------------------------------------------


def test_energies_by_sublattice() -> None:
    """Armchair Möbius: A and B where the strip has them; labels left out are 0."""
    strip = lay_strip("honeycomb-armchair", rows=5, length=4)
    ring = close_strip(strip, half_twists=1, orbital="pz")
    found = assemble(ring, Hopping(site_energy={"A": 0.3, "B": -0.1})).site_energies
    np.testing.assert_array_equal(found, np.where(ring.sublattice == "A", 0.3, -0.1))
    half = assemble(ring, Hopping(site_energy={"B": 2.0})).site_energies
    np.testing.assert_array_equal(half, np.where(ring.sublattice == "A", 0.0, 2.0))
    smaller = remove_sites(ring, [0, 7])
    found = assemble(smaller, Hopping(site_energy={"A": 0.3, "B": -0.1})).site_energies
    np.testing.assert_array_equal(found, np.where(smaller.sublattice == "A", 0.3, -0.1))


def test_energies_by_place() -> None:
    """A callable on arrays x and y in nm, wherever the seam may stand; a number is spread."""
    strip = lay_strip("square", rows=4, length=9, spacing=0.5)

    def bump(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return np.cos(2 * np.pi * x / 4.5) + y**2

    for half_twists, seam in itertools.product((0, 1, 2), (0, 3)):
        ring = close_strip(strip, half_twists=half_twists, orbital="s", seam=seam)
        x, y = strip.positions.T
        found = assemble(ring, Hopping(site_energy=bump)).site_energies
        np.testing.assert_allclose(found, bump(x, y), rtol=0, atol=1e-12)
    ring = close_strip(strip, half_twists=1, orbital="s")
    flat = assemble(ring, Hopping(site_energy=lambda x, y: 0.7)).site_energies
    np.testing.assert_array_equal(flat, np.full(36, 0.7))
    odd = assemble(close_strip(strip, half_twists=2), Hopping(site_energy=lambda x, y: y))
    np.testing.assert_allclose(odd.site_energies, strip.positions[:, 1], rtol=0, atol=1e-15)


def test_energies_of_a_molecule_by_place() -> None:
    """No seam to fit: any function."""
    chain = Network.from_pairs([(0, 1), (1, 2)], positions=[[0, 0], [1, 0], [2, 1]])
    found = assemble(chain, Hopping(site_energy=lambda x, y: x + 10 * y)).site_energies
    assert found.tolist() == [0.0, 1.0, 12.0]


def test_an_array_of_energies_is_copied() -> None:
    """Changing it afterwards changes nothing; what is held is read-only."""
    given = np.arange(18.0)
    hamiltonian = assemble(square(), Hopping(site_energy=given))
    given[:] = 7
    np.testing.assert_array_equal(hamiltonian.site_energies, np.arange(18.0))
    with pytest.raises(ValueError, match="read-only"):
        hamiltonian.site_energies[0] = 1.0
    with pytest.raises(ValueError, match="read-only"):
        hamiltonian.amplitudes[0] = 1.0


# --- disorder ------------------------------------------------------------------------------------


def test_disorder_is_uniform_of_the_full_width() -> None:
    """Kolmogorov-Smirnov against U(-w/2, w/2), 20,000 sites; independent of the site energy."""
    ring = square(rows=20, length=1000)
    found = assemble(ring, Hopping(disorder=3.0, seed=5)).site_energies
    assert np.abs(found).max() <= 1.5
    assert stats.kstest(found, stats.uniform(-1.5, 3.0).cdf).pvalue > 0.01
    shifted = assemble(ring, Hopping(disorder=3.0, seed=5, site_energy=10.0)).site_energies
    np.testing.assert_allclose(shifted, found + 10.0, rtol=0, atol=1e-12)
    neighbours = np.corrcoef(found[:-1], found[1:])[0, 1]
    assert abs(neighbours) < 0.03


def test_disorder_is_a_function_of_the_seed_alone() -> None:
    """Same seed, same energies: for any twist, orbital and seam; scaled with the width."""
    first = assemble(square(), Hopping(disorder=1.0, seed=9)).site_energies
    for half_twists, seam in itertools.product((0, 1, 2, 3), (0, 2)):
        ring = square(half_twists=half_twists, seam=seam)
        again = assemble(ring, Hopping(disorder=2.0, seed=9)).site_energies
        np.testing.assert_allclose(again, 2 * first, rtol=0, atol=1e-15)
    other = assemble(square(), Hopping(disorder=1.0, seed=10)).site_energies
    assert np.abs(other - first).min() > 0


def test_disorder_stays_on_its_sites_when_others_are_taken_out() -> None:
    """Site energies belong to sites, so vacancies do not reshuffle them."""
    ring = square()
    whole = assemble(ring, Hopping(disorder=1.0, seed=2)).site_energies
    smaller = remove_sites(ring, [0, 4, 5, 17])
    left = assemble(smaller, Hopping(disorder=1.0, seed=2)).site_energies
    np.testing.assert_array_equal(left, whole[smaller.kept])


def test_vacancies() -> None:
    """So many different sites, from the seed alone, independent of the site energies' stream."""
    for fraction in (0.0, 0.1, 0.26, 0.99):
        found = draw_vacancies(200, fraction, seed=4)
        assert len(set(found.tolist())) == found.size == round(200 * fraction)
        np.testing.assert_array_equal(found, np.sort(found))
        np.testing.assert_array_equal(found, draw_vacancies(200, fraction, seed=4))
    assert draw_vacancies(200, 0.3, seed=4).tolist() != draw_vacancies(200, 0.3, seed=5).tolist()
    drawn = np.random.default_rng(np.random.SeedSequence(4)).choice(200, 60, replace=False)
    assert sorted(drawn.tolist()) != draw_vacancies(200, 0.3, seed=4).tolist()
    counts = np.bincount(np.concatenate([draw_vacancies(50, 0.2, seed=s) for s in range(400)]))
    assert stats.chisquare(counts).pvalue > 0.001


@pytest.mark.parametrize(
    ("fraction", "sentence"),
    [
        (-0.1, "must be from 0 to below 1"),
        (1.0, "must be from 0 to below 1"),
        (math.nan, "must be from 0 to below 1"),
        (0.99, "would remove every site"),
    ],
)
def test_vacancies_that_make_no_sense(fraction: float, sentence: str) -> None:
    """Of ten sites."""
    with pytest.raises(BadInput, match=f"disorder.vacancies = {fraction} {sentence}"):
        draw_vacancies(10, fraction, seed=1)


# --- the matrix ----------------------------------------------------------------------------------

RINGS = [
    MOEBIUS,
    Case("honeycomb-zigzag", 3, 2.5, 1, -1, (1.0, 0.3)),
    Case("honeycomb-armchair", 4, 0.5, 1),
    Case("square", 2, 1, 1, -1),
    Case("square", 2, 2, 0, 1, (1.0, 0.4, -0.2)),
    Case("kagome", 3, 2, 2),
]


@pytest.mark.parametrize("gauge", ["uniform", "seam", "given"])
@pytest.mark.parametrize("case", RINGS)
def test_a_new_flux_changes_the_data_alone(case: Case, gauge: str, hamiltonian_of: Build) -> None:
    """The structure is one object for all fluxes; `data` is what the matrix holds."""
    hamiltonian = hamiltonian_of(case)
    used: Any = np.linspace(0, 3, case.sites()) if gauge == "given" else gauge
    first = hamiltonian.matrix(0.0)
    assert first.dtype == np.float64
    for flux in (0.1, 0.5, -3.2):
        matrix = hamiltonian.matrix(flux, gauge=used)
        assert np.shares_memory(matrix.indices, first.indices)
        assert np.shares_memory(matrix.indptr, first.indptr)
        np.testing.assert_array_equal(matrix.data, hamiltonian.data(flux, gauge=used))
        assert matrix.has_sorted_indices
    assert hamiltonian.matrix(0.1, gauge="seam").dtype == np.complex128


@pytest.mark.parametrize("case", RINGS)
@pytest.mark.parametrize("flux", [0.0, 0.5, 0.23])
def test_the_derivative_of_the_matrix(case: Case, flux: float, hamiltonian_of: Build) -> None:
    """slope_matrix against differences of brute-force matrices (uniform) and of `matrix`."""
    hamiltonian = hamiltonian_of(case, np.linspace(-1, 1, case.sites()))
    step = 1e-5
    numerical = (case.matrix(flux + step) - case.matrix(flux - step)) / (2 * step)
    found = hamiltonian.slope_matrix(flux).toarray()
    np.testing.assert_allclose(found, numerical, rtol=0, atol=1e-7)
    ahead, behind = (hamiltonian.matrix(flux + s, gauge="seam").toarray() for s in (step, -step))
    found = hamiltonian.slope_matrix(flux, gauge="seam").toarray()
    np.testing.assert_allclose(found, (ahead - behind) / (2 * step), rtol=0, atol=1e-7)


@pytest.mark.parametrize("case", RINGS)
def test_the_scale_bounds_the_spectrum(case: Case, hamiltonian_of: Build) -> None:
    """S. Gershgorin (1931): no level lies beyond the largest absolute row sum."""
    rng = np.random.default_rng(3)
    for _ in range(5):
        hamiltonian = hamiltonian_of(case, rng.uniform(-3, 3, case.sites()))
        for flux in (0.0, 0.3, 0.5):
            levels = np.linalg.eigvalsh(hamiltonian.matrix(flux).toarray())
            assert np.abs(levels).max() <= hamiltonian.scale + 1e-12


def test_a_matrix_of_nothing_has_a_scale() -> None:
    """Zero amplitudes: tolerances must not become zero."""
    hamiltonian = assemble(square(), Hopping(shells=(0.0,)))
    assert hamiltonian.scale == 1.0
    assert not hamiltonian.matrix(0.3).toarray().any()
    lonely = assemble(Network.from_pairs([], sites=2), Hopping())
    assert lonely.matrix().shape == (2, 2)
    assert lonely.matrix().nnz == 0


def test_no_stored_zeros_without_site_energies() -> None:
    """A stored zero on the diagonal would become an edge of a graph made from the matrix."""
    hamiltonian = assemble(square(), Hopping())
    assert np.count_nonzero(hamiltonian.matrix().data) == hamiltonian.matrix().nnz
    assert hamiltonian.matrix().nnz == 2 * hamiltonian.network.bonds.m
    with_energies = assemble(square(), Hopping(site_energy=np.eye(1, 18).ravel()))
    assert with_energies.matrix().diagonal().tolist() == [1.0] + [0.0] * 17


@pytest.mark.parametrize("case", RINGS)
def test_signs_of_the_elements(case: Case, hamiltonian_of: Build) -> None:
    """H = -t for a bonding neighbour; a negative t turns every sign of a clean matrix."""
    hamiltonian = hamiltonian_of(case)
    turned = hamiltonian_of(case._replace(hoppings=tuple(-t for t in case.hoppings)))
    np.testing.assert_allclose(
        hamiltonian.matrix(0.2).toarray(), case.matrix(0.2), rtol=0, atol=ENTRY
    )
    np.testing.assert_array_equal(turned.matrix(0.2).toarray(), -hamiltonian.matrix(0.2).toarray())


def test_the_phase_goes_with_the_step() -> None:
    """<i|H|j> = -t exp(2 pi i flux (x_j - x_i)/L): electrons of charge -e, site 0 to site 1."""
    ring = square(rows=1, length=8, half_twists=0)
    element = assemble(ring, Hopping()).matrix(0.3)[0, 1]
    assert np.isclose(element, -np.exp(2j * np.pi * 0.3 / 8), rtol=0, atol=ENTRY)
    seam = assemble(ring, Hopping()).matrix(0.3, gauge="seam")
    assert seam[0, 1] == -1.0
    assert np.isclose(seam[7, 0], -np.exp(2j * np.pi * 0.3), rtol=0, atol=ENTRY)


def test_a_pair_joined_twice_adds_up() -> None:
    """Ring of two sites: both bonds on one element, -t - t; at half a quantum they cancel."""
    ring = square(rows=1, length=2, half_twists=0)
    hamiltonian = assemble(ring, Hopping())
    assert hamiltonian.matrix().toarray().tolist() == [[0.0, -2.0], [-2.0, 0.0]]
    np.testing.assert_allclose(
        hamiltonian.matrix(0.5, gauge="seam").toarray(), np.zeros((2, 2)), rtol=0, atol=ENTRY
    )
    alone = assemble(square(rows=1, length=1, half_twists=0), Hopping())
    for flux in (0.0, 0.2, 0.5):
        expected = -2 * math.cos(2 * math.pi * flux)
        assert math.isclose(alone.matrix(flux).toarray()[0, 0].real, expected, abs_tol=ENTRY)


def test_the_cover_takes_lifted_energies() -> None:
    """V(n, m) first, then V(n, flipped m): by brute force on the long ring."""
    ring = square()
    energies = assemble(ring, Hopping(disorder=1.0)).site_energies
    cover, lift = double_cover(ring)
    found = assemble(cover, Hopping(site_energy=energies[lift])).matrix(0.2).toarray()
    columns = energies.reshape(6, 3)
    lifted = np.concatenate([columns, columns[:, ::-1]]).ravel()
    plain = brute.Case("square", 3, 12, 0)
    np.testing.assert_allclose(found, plain.matrix(0.2, energies=lifted), rtol=0, atol=ENTRY)


def test_a_hamiltonian_cannot_be_changed() -> None:
    """Frozen; replaced parts leave the first as it was."""
    hamiltonian = assemble(square(), Hopping())
    with pytest.raises(AttributeError):
        hamiltonian.hopping = Hopping()  # type: ignore[misc]  # frozen: must fail
    weaker = replace(hamiltonian, amplitudes=0.5 * hamiltonian.amplitudes)
    np.testing.assert_array_equal(2 * weaker.matrix().toarray(), hamiltonian.matrix().toarray())
