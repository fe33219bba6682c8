"""Filling: gaps, occupations and totals against energies that are summed independently.

Totals are derivatives of the energy (fixed number, T = 0), the free energy (fixed number), or
the grand potential (fixed chemical potential); here these are summed from brute-force levels
and differentiated numerically (see N. Byers & C. N. Yang, Phys. Rev. Lett. 7, 46 (1961)).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import closed_forms as known
import numpy as np
import pytest
from brute import Case
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.special import logsumexp

from ribbon.analysis import (
    Filling,
    Window,
    all_levels,
    find_gap,
    levels_near,
    occupations,
    sweep_flux,
)
from ribbon.analysis.filling import fill
from ribbon.analysis.levels import finest
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.hopping.units import boltzmann
from ribbon.lattice import lay_strip, open_strip

Build = Callable[..., Any]
LEVEL = 1e-9
BY_DIFFERENCES = 2e-6

RINGS = [
    Case("square", 3, 7, 1),
    Case("square", 2, 6, 0),
    Case("honeycomb-zigzag", 3, 2.5, 1, -1),
    Case("honeycomb-zigzag", 2, 3, 1, 1, (1.0, 0.2)),
    Case("honeycomb-armchair", 4, 1.5, 1, -1),
    Case("kagome", 3, 3, 1),
]


def disorder(case: Case, width: float) -> np.ndarray:
    return width * np.random.default_rng(5).uniform(-0.5, 0.5, case.sites())


def energy_of(levels: np.ndarray, electrons: float, spin: int) -> float:
    """The lowest energy: levels filled from below, the last one partly."""
    room = np.clip(electrons - spin * np.arange(levels.size), 0.0, spin)
    return float(room @ levels)


def derivative(function: Callable[[float], float], at: float, step: float = 2e-4) -> float:
    near = function(at + step) - function(at - step)
    far = function(at + 2 * step) - function(at - 2 * step)
    return (8 * near - far) / (12 * step)


def one_sided(function: Callable[[float], float], at: float, side: int) -> float:
    """Derivative from the left (-1) or right (+1), three points, error of second order."""
    step = side * 1e-4
    return (4 * function(at + step) - 3 * function(at) - function(at + 2 * step)) / (2 * step)


# --- totals at zero temperature ------------------------------------------------------------------


@pytest.mark.parametrize("width", [0.0, 0.8])
@pytest.mark.parametrize("case", RINGS)
def test_totals_at_fixed_number(case: Case, width: float, hamiltonian_of: Build) -> None:
    """d(sum of the lowest levels)/d(flux), whole and half-filled levels, fractions of electrons."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    size = case.sites()
    for spin in (1, 2):
        for electrons in (1, size // 2, 0.7 * size, spin * size - 1):
            filling = Filling(electrons=electrons, spin=spin)
            found = sweep_flux(hamiltonian, [0.13, 0.37], filling=filling).totals
            assert found is not None

            def total(at: float, n: float = electrons, s: int = spin) -> float:
                return energy_of(case.levels(at, energies=energies), n, s)

            for number, flux in enumerate((0.13, 0.37)):
                assert math.isclose(found.energy[number], total(flux), abs_tol=LEVEL)
                expected = derivative(total, flux)
                assert math.isclose(found.slope[number], expected, abs_tol=BY_DIFFERENCES)
                assert math.isclose(found.left[number], expected, abs_tol=BY_DIFFERENCES)
                assert math.isclose(found.right[number], expected, abs_tol=BY_DIFFERENCES)
            np.testing.assert_allclose(found.electrons, electrons, rtol=0, atol=1e-10)


@pytest.mark.parametrize("width", [0.0, 0.8])
@pytest.mark.parametrize("case", RINGS)
def test_totals_at_fixed_chemical_potential(
    case: Case, width: float, hamiltonian_of: Build
) -> None:
    """d(sum of (E - mu) over levels below mu)/d(flux); the number of electrons may change."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    for spin, mu in ((1, -0.63), (2, 0.217)):
        filling = Filling(electrons=None, chemical_potential=mu, spin=spin)
        found = sweep_flux(hamiltonian, [0.13, 0.37], filling=filling).totals
        assert found is not None

        def omega(at: float, m: float = mu, s: int = spin) -> float:
            return float(s * np.minimum(case.levels(at, energies=energies) - m, 0.0).sum())

        for number, flux in enumerate((0.13, 0.37)):
            below = np.count_nonzero(case.levels(flux, energies=energies) < mu)
            assert found.electrons[number] == spin * below
            assert math.isclose(found.energy[number], omega(flux), abs_tol=LEVEL)
            expected = derivative(omega, flux)
            assert math.isclose(found.slope[number], expected, abs_tol=BY_DIFFERENCES)
        np.testing.assert_array_equal(found.chemical_potential, mu)
        assert not found.shared.any()


@pytest.mark.parametrize("flux", [0.0, 0.5])
@pytest.mark.parametrize("case", RINGS)
def test_one_sided_totals_where_a_shell_is_cut(
    case: Case, flux: float, hamiltonian_of: Build
) -> None:
    """At flux 0 and 1/2 +-k pairs meet: left and right are the one-sided derivatives, the shared
    value lies halfway for a pair that is cut in the middle."""
    hamiltonian = hamiltonian_of(case)
    levels = case.levels(flux)
    cut = np.flatnonzero(np.diff(levels) < 1e-9) + 1  # fill up to the inside of a shell
    assert cut.size
    for spin in (1, 2):
        for filled in (int(cut[0]), int(cut[-1])):
            electrons = float(spin * filled)
            found = sweep_flux(
                hamiltonian, [flux], filling=Filling(electrons=electrons, spin=spin)
            ).totals
            assert found is not None

            def total(at: float, n: float = electrons, s: int = spin) -> float:
                return energy_of(case.levels(at), n, s)

            assert found.shared[0]
            assert math.isclose(found.left[0], one_sided(total, flux, -1), abs_tol=1e-5)
            assert math.isclose(found.right[0], one_sided(total, flux, 1), abs_tol=1e-5)
            assert found.right[0] <= found.slope[0] + 1e-9 <= found.left[0] + 2e-9
            shell = np.abs(levels - levels[filled]) < 1e-9
            if np.count_nonzero(shell) == 2:
                middle = (found.left[0] + found.right[0]) / 2
                assert math.isclose(found.slope[0], middle, abs_tol=1e-9)
            assert math.isclose(found.chemical_potential[0], levels[filled], abs_tol=1e-9)


@pytest.mark.parametrize("flux", [0.0, 0.5, 0.2])
@pytest.mark.parametrize("case", RINGS[:3])
def test_one_sided_totals_where_levels_stand_on_the_chemical_potential(
    case: Case, flux: float, hamiltonian_of: Build
) -> None:
    """A level at mu is half filled and flagged: on either side it is empty or full."""
    hamiltonian = hamiltonian_of(case)
    for level in (1, case.sites() // 2, case.sites() - 2):
        mu = float(case.levels(flux)[level])
        filling = Filling(electrons=None, chemical_potential=mu, spin=2)
        found = sweep_flux(hamiltonian, [flux], filling=filling).totals
        assert found is not None

        def omega(at: float, m: float = mu) -> float:
            return float(2 * np.minimum(case.levels(at) - m, 0.0).sum())

        assert found.shared[0]
        assert math.isclose(found.left[0], one_sided(omega, flux, -1), abs_tol=1e-5)
        assert math.isclose(found.right[0], one_sided(omega, flux, 1), abs_tol=1e-5)
        middle = (found.left[0] + found.right[0]) / 2
        assert math.isclose(found.slope[0], middle, abs_tol=1e-9)
        same = np.count_nonzero(np.abs(case.levels(flux) - mu) < 1e-9)
        below = np.count_nonzero(case.levels(flux) < mu - 1e-9)
        assert math.isclose(found.electrons[0], 2 * below + same, abs_tol=1e-12)


def test_one_sided_totals_at_a_crossing_of_modes(hamiltonian_of: Build) -> None:
    """Two transverse modes of the square ribbon cross at a generic flux known in closed form.

    Mode 1 (k = 2 pi (n + flux)/N) and mode 2 (half a quantum off): cos k1 - cos k2 = cos(pi q2/4)
    - cos(pi q1/4); solved by brentq, then the kink is that of the closed form.
    """
    case = Case("square", 3, 12, 1)

    def mode(q: int, n: float, flux: float) -> float:
        k = 2 * math.pi * (n + flux) / 12
        return -2 * math.cos(k) - 2 * math.cos(math.pi * q / 4)

    def apart(flux: float) -> float:
        return mode(1, 3, flux) - mode(2, -2.5, flux)

    flux = float(brentq(apart, 0.01, 0.99, xtol=1e-15))
    level = mode(1, 3, flux)
    levels = known.square(3, 12, half_twists=1, sigma=1, flux=flux)
    place = int(np.searchsorted(levels, level - 1e-7))
    assert np.count_nonzero(np.abs(levels - level) < 1e-7) == 2
    filling = Filling(electrons=place + 1, spin=1)
    found = sweep_flux(hamiltonian_of(case), [flux], filling=filling).totals
    assert found is not None
    slopes = [2 * math.sin(2 * math.pi * (n + flux) / 12) * 2 * math.pi / 12 for n in (3, -2.5)]
    assert found.shared[0]
    assert math.isclose(found.left[0] - found.right[0], abs(slopes[0] - slopes[1]), abs_tol=1e-8)


# --- totals above zero temperature ---------------------------------------------------------------


@pytest.mark.parametrize("spin", [1, 2])
@pytest.mark.parametrize("kelvin", [40.0, 900.0])
def test_totals_where_a_shell_is_cut_are_smooth_at_a_temperature(
    kelvin: float, spin: int, ring_of: Build
) -> None:
    """No sharing above 0 K: all three slopes are the derivative of F or Omega, 0 by symmetry at
    flux 0, and the electrons are those asked for."""
    case = Case("square", 2, 6, 0)
    hamiltonian = assemble(ring_of(case), Hopping(unit="eV"))
    thermal = kelvin * boltzmann("eV")
    number = float(spin * 5)

    def solved(levels: np.ndarray) -> float:
        def excess(mu: float) -> float:
            return float((0.5 - 0.5 * np.tanh((levels - mu) / (2 * thermal))).sum()) - number / spin

        return float(brentq(excess, -6, 6, xtol=1e-14))

    def free_energy(at: float) -> float:
        levels = case.levels(at)
        mu = solved(levels)
        omega = -spin * thermal * np.logaddexp(0.0, (mu - levels) / thermal).sum()
        return float(omega + mu * number)

    filling = Filling(electrons=number, spin=spin, temperature=kelvin)
    found = sweep_flux(hamiltonian, [0.0, 0.11, 0.5], filling=filling).totals
    assert found is not None
    assert not found.shared.any()
    np.testing.assert_array_equal(found.left, found.slope)
    np.testing.assert_array_equal(found.right, found.slope)
    np.testing.assert_allclose(found.electrons, number, rtol=0, atol=1e-9)
    np.testing.assert_allclose(found.slope[[0, 2]], 0.0, rtol=0, atol=1e-9)
    expected = [free_energy(flux) for flux in (0.0, 0.11, 0.5)]
    np.testing.assert_allclose(found.energy, expected, rtol=0, atol=1e-9)
    assert math.isclose(found.slope[1], derivative(free_energy, 0.11), abs_tol=BY_DIFFERENCES)


@pytest.mark.parametrize("kelvin", [1e-3, 1.0])
def test_low_temperatures_meet_zero_temperature(kelvin: float, ring_of: Build) -> None:
    """Energies, slopes and numbers of a gapped ring tend to those at 0 K."""
    case = Case("honeycomb-armchair", 3, 4, 0)
    hamiltonian = assemble(ring_of(case), Hopping(unit="eV"))
    fluxes = [0.1, 0.3]
    cold = sweep_flux(hamiltonian, fluxes, filling=Filling(temperature=kelvin)).totals
    frozen = sweep_flux(hamiltonian, fluxes, filling=Filling()).totals
    assert cold is not None
    assert frozen is not None
    for name in ("slope", "energy", "electrons"):
        np.testing.assert_allclose(getattr(cold, name), getattr(frozen, name), rtol=0, atol=1e-9)


@pytest.mark.parametrize("kelvin", [1.0, 5.0])
def test_the_chemical_potential_of_a_cold_gapped_ring(kelvin: float, ring_of: Build) -> None:
    """Electrons above the gap = holes below it; mu -> middle + (kT/2) ln(g_below/g_above).

    Solved here with logarithms of Fermi tails, which do not round to zero.
    """
    case = Case("honeycomb-zigzag", 4, 6, 1, 1)
    hamiltonian = assemble(ring_of(case), Hopping(unit="eV"))
    thermal = kelvin * boltzmann("eV")
    fluxes = np.array([0.0, 0.2])
    found = sweep_flux(hamiltonian, fluxes, filling=Filling(temperature=kelvin)).totals
    assert found is not None
    for number, flux in enumerate(fluxes):
        levels = case.levels(float(flux))
        below, above = np.split(levels, [case.sites() // 2])

        def excess(mu: float, low: Any = below, high: Any = above) -> float:
            electrons = logsumexp(-np.logaddexp(0.0, (high - mu) / thermal))
            holes = logsumexp(-np.logaddexp(0.0, (mu - low) / thermal))
            return float(electrons - holes)

        expected = brentq(excess, below[-1], above[0], xtol=1e-15)
        assert math.isclose(found.chemical_potential[number], expected, abs_tol=1e-3 * thermal)


def test_full_and_empty_bands(ring_of: Build) -> None:
    """Energy 0 or Tr H and no current, at 0 K and above: nothing can move."""
    case = Case("square", 3, 5, 1)
    hamiltonian = assemble(ring_of(case), Hopping(unit="eV", site_energy=0.25))
    for spin in (1, 2):
        for electrons, energy in ((0.0, 0.0), (15.0 * spin, 15 * 0.25 * spin)):
            filling = Filling(electrons=electrons, spin=spin)
            found = sweep_flux(hamiltonian, [0.0, 0.2], filling=filling).totals
            assert found is not None
            np.testing.assert_allclose(found.energy, energy, rtol=0, atol=1e-10)
            np.testing.assert_allclose(found.slope, 0.0, rtol=0, atol=1e-10)
            assert not found.shared.any()
            warm = Filling(electrons=electrons, spin=spin, temperature=10.0)
            heated = sweep_flux(hamiltonian, [0.2], filling=warm).totals
            assert heated is not None
            np.testing.assert_allclose(heated.energy, energy, rtol=0, atol=1e-10)
            np.testing.assert_allclose(heated.slope, 0.0, rtol=0, atol=1e-10)
            assert np.isnan(heated.chemical_potential).all()


# --- gaps and occupations ------------------------------------------------------------------------


@pytest.mark.parametrize("width", [0.0, 0.8])
@pytest.mark.parametrize("case", RINGS)
def test_gaps_at_every_filling(case: Case, width: float, hamiltonian_of: Build) -> None:
    """Highest level with an electron, lowest with room, from sorted brute-force levels."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    size = case.sites()
    for flux in (0.0, 0.21):
        levels = case.levels(flux, energies=energies)
        for spin, electrons in ((1, 3.0), (2, 5.0), (2, 6.0), (2, 6.5), (1, size - 1.0)):
            found = find_gap(hamiltonian, electrons=electrons, spin=spin, flux=flux)
            room = np.clip(electrons - spin * np.arange(size), 0.0, spin)
            highest = int(np.flatnonzero(room > 0)[-1])
            lowest = int(np.flatnonzero(room < spin)[0])
            assert (found.lower_index, found.upper_index) == (highest, lowest)
            assert math.isclose(found.lower, levels[highest], abs_tol=LEVEL)
            assert math.isclose(found.upper, levels[lowest], abs_tol=LEVEL)
            gap = levels[lowest] - levels[highest]
            assert math.isclose(found.gap, max(gap, 0.0), abs_tol=LEVEL)
            assert found.open_shell == (gap < LEVEL)
            assert found.gap == 0.0 or not found.open_shell


def test_no_gap_where_all_levels_are_full_or_empty(hamiltonian_of: Build) -> None:
    """One frontier is there, the other is not."""
    hamiltonian = hamiltonian_of(Case("square", 2, 5, 1))
    levels = known.square(2, 5, half_twists=1, sigma=1, flux=0.0)
    full = find_gap(hamiltonian, electrons=20, spin=2)
    assert math.isclose(full.lower, levels[-1], abs_tol=LEVEL)
    assert (full.lower_index, full.upper_index, full.open_shell) == (9, 10, False)
    assert math.isnan(full.upper)
    assert math.isnan(full.gap)
    empty = find_gap(hamiltonian, electrons=0, spin=1)
    assert math.isclose(empty.upper, levels[0], abs_tol=LEVEL)
    assert (empty.lower_index, empty.upper_index) == (-1, 0)
    assert math.isnan(empty.lower)


@pytest.mark.parametrize("case", [Case("honeycomb-armchair", 10, 80.5, 1, -1)])
@pytest.mark.parametrize("flux", [0.0, 0.2])
def test_gaps_of_large_rings_by_counts(case: Case, flux: float, ring_of: Build) -> None:
    """1,610 sites with a trace of disorder, too many to be solved dense: the gap of the clean ring.

    Closed form of armchair ribbons (K. Wakabayashi et al., Sci. Technol. Adv. Mater. 11, 054504
    (2010)), as tested in ``test_closed_forms.py``.
    """
    ring = ring_of(case)
    barely = np.zeros(ring.n)
    barely[0] = 1e-300
    rough = assemble(ring, Hopping(site_energy=barely))
    clean = find_gap(assemble(ring, Hopping()), flux=flux)
    found = find_gap(rough, flux=flux)
    levels = known.armchair(10, 80.5, half_twists=1, sigma=-1, flux=flux)
    assert math.isclose(found.gap, levels[805] - levels[804], abs_tol=1e-8)
    assert math.isclose(clean.gap, found.gap, abs_tol=1e-8)
    assert (found.lower_index, found.upper_index) == (804, 805)


@given(
    electrons=st.floats(0, 24),
    spin=st.sampled_from([1, 2]),
    levels=st.lists(st.integers(-4, 4), min_size=12, max_size=12),
)
def test_occupations_from_below(electrons: float, spin: int, levels: list[int]) -> None:
    """Sum, bounds, order; equal levels share; nothing above a level with room."""
    electrons = min(electrons, 12.0 * spin)
    energies = np.sort(np.array(levels, dtype=float))
    filled = fill(
        energies, np.zeros(12), Filling(electrons=electrons, spin=spin), same=5e-12, unit="t"
    )
    assert math.isclose(filled.electrons, electrons, abs_tol=1e-8)
    assert math.isclose(filled.energy, energy_of(energies, electrons, spin), abs_tol=1e-7)


def test_occupations_of_levels(hamiltonian_of: Build) -> None:
    """From complete spectra alone; a window cannot know them. Shared shell: 1 1/2 electrons each.

    Ring of six sites with 7 spinful electrons of 12: 2 + 4, then one in a pair.
    """
    hamiltonian = hamiltonian_of(Case("square", 1, 6, 0))
    options = {"sites": 6, "same": finest(hamiltonian)}
    whole = all_levels(hamiltonian)
    found = occupations(whole, Filling(electrons=7), **options)
    assert found is not None
    assert found.tolist() == [2, 2, 2, 0.5, 0.5, 0]
    below = occupations(whole, Filling(electrons=None, chemical_potential=1.0), **options)
    assert below is not None
    assert below.tolist() == [2, 2, 2, 1, 1, 0]
    window = levels_near(hamiltonian, 0.0, count=4)
    assert occupations(window, Filling(electrons=7), **options) is None


def test_thermal_occupations_are_fermi_functions(ring_of: Build) -> None:
    """1/(exp((E - mu)/kT) + 1) times the spin, at a given chemical potential."""
    hamiltonian = assemble(ring_of(Case("square", 2, 5, 1)), Hopping(unit="meV"))
    whole = all_levels(hamiltonian)
    filling = Filling(electrons=None, chemical_potential=0.4, spin=2, temperature=7.0)
    found = occupations(whole, filling, sites=10, same=finest(hamiltonian))
    expected = 2 / (np.exp((whole.energies - 0.4) / (7.0 * boltzmann("meV"))) + 1)
    assert found is not None
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-14)


@pytest.mark.parametrize(
    ("given_filling", "sentence"),
    [
        ({"spin": 3}, "sweep.spin = 3 must be 1 or 2"),
        ({"temperature": -1.0}, "sweep.temperature = -1.0 must be 0 K or more"),
        ({"temperature": math.nan}, "sweep.temperature = nan must be 0 K or more"),
        ({"chemical_potential": math.inf}, "sweep.chemical_potential must be a finite energy"),
    ],
)
def test_fillings_that_make_no_sense(given_filling: dict[str, Any], sentence: str) -> None:
    """Refused when they are made."""
    with pytest.raises(BadInput, match=sentence):
        Filling(**given_filling)


@pytest.mark.parametrize(("electrons", "spin"), [(-1.0, 2), (21.0, 2), (11.0, 1), (math.nan, 1)])
def test_more_electrons_than_levels_hold(
    electrons: float, spin: int, hamiltonian_of: Build
) -> None:
    """Ten levels; the sentence says how many they hold."""
    hamiltonian = hamiltonian_of(Case("square", 2, 5, 1))
    sentence = f"must be from 0 to {10 * spin}, what 10 levels hold with spin = {spin}"
    with pytest.raises(BadInput, match=sentence):
        find_gap(hamiltonian, electrons=electrons, spin=spin)
    with pytest.raises(BadInput, match=sentence):
        sweep_flux(hamiltonian, [0.1], filling=Filling(electrons=electrons, spin=spin))


def test_a_sweep_beyond_reach_has_no_totals(
    hamiltonian_of: Build, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Where the complete spectrum does not fit, levels come and totals do not."""
    case = Case("square", 3, 9, 1)
    monkeypatch.setattr("ribbon.analysis.flux.fits_dense", lambda *_, **__: False)
    rough = hamiltonian_of(case, disorder(case, 0.5))
    sweep = sweep_flux(rough, [0.1, 0.2], window=Window(near=0.0, count=4))
    assert (sweep.totals, sweep.complete, sweep.method) == (None, False, "sparse")
    clean = sweep_flux(hamiltonian_of(case), [0.1, 0.2], window=Window(near=0.0, count=4))
    assert (clean.complete, clean.method) == (True, "symmetry")


@pytest.mark.parametrize("fluxes", [[], [0.1, math.nan], [math.inf]])
def test_fluxes_that_make_no_sense(fluxes: list[float], hamiltonian_of: Build) -> None:
    """At least one, and finite."""
    with pytest.raises(BadInput, match="must be a list of finite fluxes, at least one"):
        sweep_flux(hamiltonian_of(Case("square", 2, 5, 1)), fluxes)


def test_an_open_strip_has_no_flux_to_sweep() -> None:
    """The sentence says that a ring is needed."""
    strip = open_strip(lay_strip("square", rows=2, length=4))
    with pytest.raises(BadInput, match="a threading flux needs a ring"):
        sweep_flux(assemble(strip, Hopping()), [0.1])
