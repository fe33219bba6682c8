"""Slopes, totals, harmonics and branches against independent spectra and published formulas.

Slopes are dE/d(flux) with flux in quanta h/e; a current is minus the slope times e/h. Sources:
H.-F. Cheung et al., Phys. Rev. B 37, 6050 (1988); K. Yakubo, Y. Avishai & D. Cohen, Phys. Rev. B
67, 125319 (2003); the formulas stand in ``closed_forms.py``.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import brute
import closed_forms as known
import numpy as np
import pytest
import scipy.constants as si
from brute import Case, cases
from scipy.optimize import brentq

from ribbon.analysis import (
    Filling,
    Window,
    all_levels,
    half_quantum,
    harmonics,
    levels_near,
    sweep_flux,
)
from ribbon.hopping import Hopping, assemble
from ribbon.hopping.units import boltzmann, current_factor
from ribbon.lattice import close_strip, lay_strip

Build = Callable[..., Any]
LEVEL = 1e-9
SLOPE = 1e-8
BY_DIFFERENCES = 1e-6
SHELL = 1e-7

RINGS = [
    Case("square", 3, 7, 1),
    Case("square", 1, 9, 1, -1),
    Case("square", 2, 6, 2),
    Case("honeycomb-zigzag", 3, 3.5, 1, -1),
    Case("honeycomb-zigzag", 2, 4, 1, 1, (1.0, 0.2)),
    Case("honeycomb-armchair", 4, 3.5, 3, -1),
    Case("honeycomb-armchair", 3, 4, 0),
    Case("triangular", 3, 5, 1),
    Case("kagome", 5, 4.5, 1, 1),
    Case("lieb", 3, 4, 1, -1, (1.0, 0.3, -0.1)),
]


def derivative(function: Callable[[float], Any], at: float, step: float = 5e-4) -> Any:
    """Central differences, Richardson-extrapolated once (error of fourth order)."""
    near = function(at + step) - function(at - step)
    far = function(at + 2 * step) - function(at - 2 * step)
    return (8 * near - far) / (12 * step)


def shells_of(levels: np.ndarray) -> list[slice]:
    edges = [0, *(np.flatnonzero(np.diff(levels) > SHELL) + 1).tolist(), len(levels)]
    return [slice(a, b) for a, b in itertools.pairwise(edges)]


def brute_slopes(case: Case, flux: float, energies: np.ndarray | None) -> np.ndarray:
    """Slopes from brute-force matrices only: dH/d(flux) by differences, resolved in each shell."""

    def matrix(at: float) -> np.ndarray:
        return case.matrix(at, energies=energies)

    levels, states = np.linalg.eigh(matrix(flux))
    change = derivative(matrix, flux)
    slopes = []
    for shell in shells_of(levels):
        inside = states[:, shell].conj().T @ change @ states[:, shell]
        slopes.append(np.linalg.eigvalsh(inside))
    return np.concatenate(slopes)


def sorted_in_shells(levels: np.ndarray, slopes: np.ndarray) -> np.ndarray:
    return np.concatenate([np.sort(slopes[shell]) for shell in shells_of(levels)])


def disorder(case: Case, width: float) -> np.ndarray:
    return width * np.random.default_rng(3).uniform(-0.5, 0.5, case.sites())


# --- slopes of single levels -------------------------------------------------------------------


@pytest.mark.parametrize("width", [0.0, 1.0])
@pytest.mark.parametrize("case", RINGS)
def test_slopes_are_derivatives_of_independent_levels(
    case: Case, width: float, hamiltonian_of: Build
) -> None:
    """Levels of brute-force matrices at shifted fluxes; only levels well apart from the next."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    compared = 0
    for flux in (0.13, 0.37, -0.81):
        numerical = derivative(lambda at: case.levels(at, energies=energies), flux)
        levels = case.levels(flux, energies=energies)
        spacing = np.diff(levels, prepend=-np.inf, append=np.inf)
        alone = np.minimum(spacing[:-1], spacing[1:]) > 0.1
        found = sweep_flux(hamiltonian, np.array([flux]))
        np.testing.assert_array_equal(found.level[0], np.arange(len(levels)))
        np.testing.assert_allclose(found.energy[0], levels, rtol=0, atol=LEVEL)
        np.testing.assert_allclose(
            found.slope[0][alone], numerical[alone], rtol=0, atol=BY_DIFFERENCES
        )
        compared += np.count_nonzero(alone)
    assert compared > 12


@pytest.mark.parametrize("width", [0.0, 1.0])
@pytest.mark.parametrize("case", RINGS)
def test_slopes_inside_degenerate_shells(case: Case, width: float, hamiltonian_of: Build) -> None:
    """At flux 0 and 1/2 every +-k pair is degenerate: slopes come from within the shell."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    for flux in (0.0, 0.5, 0.25, 0.377):
        expected = brute_slopes(case, flux, energies)
        levels = case.levels(flux, energies=energies)
        swept = sweep_flux(hamiltonian, np.array([flux]))
        found = sorted_in_shells(levels, swept.slope[0])
        np.testing.assert_allclose(found, expected, rtol=0, atol=SLOPE)
        complete = all_levels(hamiltonian, flux=flux, states=True)
        if complete.slopes is not None:
            found = sorted_in_shells(levels, complete.slopes)
            np.testing.assert_allclose(found, expected, rtol=0, atol=SLOPE)


@pytest.mark.parametrize("width", [0.0, 1.0])
@pytest.mark.parametrize("case", RINGS)
def test_currents_of_all_levels_cancel(case: Case, width: float, hamiltonian_of: Build) -> None:
    """Sum of slopes = Tr dH/d(flux) = 0 where no site hops to itself round the ring."""
    hamiltonian = hamiltonian_of(case, disorder(case, width))
    for slopes in sweep_flux(hamiltonian, np.array([0.0, 0.21, 0.5])).slope:
        assert abs(slopes.sum()) < SLOPE
    assert np.abs(sweep_flux(hamiltonian, np.array([0.21])).slope).max() > 0.05


@pytest.mark.parametrize("case", cases(("square",), rows=(1, 2, 3), lengths=(1,)))
def test_currents_of_rings_of_one_period_need_not_cancel(case: Case, hamiltonian_of: Build) -> None:
    """A site that hops to itself: the sum of slopes is the derivative of the trace."""
    flux = 0.17
    expected = derivative(lambda at: np.trace(case.matrix(at)).real, flux)
    found = sweep_flux(hamiltonian_of(case), np.array([flux])).slope[0].sum()
    assert math.isclose(found, expected, abs_tol=BY_DIFFERENCES)


@pytest.mark.parametrize("case", RINGS)
def test_the_current_through_every_cut_is_the_same(case: Case, hamiltonian_of: Build) -> None:
    """Put the phase on the bonds that cross one cut: each cut gives the slope, site by site.

    Derivative through a cut: sum over steps that cross it of 2 pi i n H_ij psi_i* psi_j.
    """
    flux = 0.21
    energies = disorder(case, 1.0)
    found = all_levels(hamiltonian_of(case, energies), flux=flux, states=True)
    expected = brute_slopes(case, flux, energies)
    around = case.length * brute.PERIOD[case.lattice]
    home = brute.ring_sites(*case[:3])
    steps = brute.steps(*case[:4], len(case.hoppings))
    for cut in (0.3, around / 2 + 0.01, around - 0.05):
        current = np.zeros_like(found.states)
        for step in steps:
            start = home[step.tail][0]
            crossings = math.floor((start + step.along - cut) / around)
            crossings -= math.floor((start - cut) / around)
            sign = case.sigma ** abs(case.half_twists * step.winding)
            phase = np.exp(2j * math.pi * flux * step.along / around)
            amplitude = -case.hoppings[step.shell] * sign * phase
            current[step.tail] += 2j * math.pi * crossings * amplitude * found.states[step.head]
        through = np.sum(found.states.conj() * current, axis=0).real
        np.testing.assert_allclose(through, expected, rtol=0, atol=SLOPE)


def test_the_factor_of_a_current() -> None:
    """1 eV per flux quantum is 38.74045865 uA (e^2/h in SI), and electrons carry -e."""
    factor, label = current_factor("eV")
    assert label == "A"
    assert math.isclose(factor, -38.74045865e-6, rel_tol=1e-9)
    assert math.isclose(current_factor("meV")[0], factor / 1000, rel_tol=1e-12)
    for unit in ("t", "THz"):  # not energies: per flux quantum, with the sign of the charge
        factor, label = current_factor(unit)
        assert factor == -1
        assert label == f"{unit} per flux quantum"


# --- totals ----------------------------------------------------------------------------------


@pytest.mark.parametrize("sites", [10, 21, 50])
def test_totals_of_a_clean_ring_at_zero_temperature(sites: int, hamiltonian_of: Build) -> None:
    """Spinless electrons, odd and even numbers: closed forms of Cheung et al. to 1e-10."""
    hamiltonian = hamiltonian_of(Case("square", 1, sites, 0))
    fluxes = np.array([-0.41, -0.2, 0.05, 0.13, 0.38, 0.45, 0.61, 0.93])
    for electrons in (1, 2, 3, sites // 2, sites // 2 + 1, sites - 1):
        filling = Filling(electrons=electrons, spin=1)
        totals = sweep_flux(hamiltonian, fluxes, filling=filling).totals
        for number, flux in enumerate(fluxes):
            energy, slope = known.ring_total(sites, electrons, float(flux))
            assert math.isclose(totals.energy[number], energy, abs_tol=1e-10)
            assert math.isclose(totals.slope[number], slope, abs_tol=1e-10)
        np.testing.assert_allclose(totals.electrons, electrons, rtol=0, atol=1e-12)
        assert not totals.shared.any()


def test_a_shell_cut_by_the_filling_is_shared_and_flagged(hamiltonian_of: Build) -> None:
    """3 spinless electrons of 10 sites at flux 1/2: the one-sided slopes are +-, the mean is 0."""
    hamiltonian = hamiltonian_of(Case("square", 1, 10, 0))
    sweep = sweep_flux(hamiltonian, np.array([0.2, 0.5]), filling=Filling(electrons=3, spin=1))
    totals = sweep.totals
    assert totals.shared.tolist() == [False, True]
    jump = known.ring_total(10, 3, 0.5 - 1e-12)[1]
    np.testing.assert_allclose(
        [totals.left[1], totals.slope[1], totals.right[1]], [jump, 0.0, -jump], rtol=0, atol=1e-9
    )
    expected = known.ring_total(10, 3, 0.2)[1]
    found = [totals.left[0], totals.slope[0], totals.right[0]]
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-10)


@pytest.mark.parametrize("ratio", [0.5, 1.0, 2.0])
def test_thermal_harmonics_of_a_long_ring(ratio: float) -> None:
    """2000 sites at fixed chemical potential: I_l/I_0 of Cheung et al. to 1e-5 (l = 1, 2, 3).

    k_F L is a multiple of 2 pi, k_B T* = Delta/(2 pi^2) with Delta the level spacing at the Fermi
    level; e.g. 0.54171 and 0.17553 for l = 1, 2 at T = T*.
    """
    sites = 2000
    fermi = 2 * math.pi * (sites // 4) / sites
    spacing = 2 * math.pi * 2 * math.sin(fermi) / sites
    temperature = ratio * spacing / (2 * math.pi**2) / boltzmann("eV")
    strip = lay_strip("square", rows=1, length=sites)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping(unit="eV"))
    filling = Filling(
        electrons=None, chemical_potential=-2 * math.cos(fermi), spin=1, temperature=temperature
    )
    sweep = sweep_flux(hamiltonian, np.linspace(0, 1, 65), filling=filling)
    found = harmonics(sweep.totals, orders=3)
    unit = 2 * math.pi * 2 * math.sin(fermi) / sites  # I_0 = e v_F/L as a slope
    expected = [known.thermal_harmonic(order, ratio) for order in (1, 2, 3)]
    np.testing.assert_array_equal(found.order, [1, 2, 3])
    np.testing.assert_allclose(np.array(found.sine) / unit, expected, rtol=0, atol=1e-5)
    np.testing.assert_allclose(found.cosine, 0.0, rtol=0, atol=1e-9)


def test_even_harmonics_are_those_of_the_plain_ring() -> None:
    """Fixed chemical potential: even flux harmonics of the twisted and plain ring are identical.

    Grand potential of the 24 x 5 square ring, T = 0.05, mu = -0.8, spinless: complex Fourier
    coefficients -0.015802 (plain) and +0.005187 (twisted) for l = 1, 0.000371 for l = 2 (both),
    from the reference sheet of the project, computed there with two scripts. The sine amplitudes of
    -d(Omega)/d(flux) are 4 pi l times these.
    """
    amplitudes = {}
    temperature = 0.05 / boltzmann("eV")
    filling = Filling(electrons=None, chemical_potential=-0.8, spin=1, temperature=temperature)
    for half_twists in (0, 1):
        strip = lay_strip("square", rows=5, length=24)
        ring = close_strip(strip, half_twists=half_twists, orbital="s")
        sweep = sweep_flux(
            assemble(ring, Hopping(unit="eV")), np.linspace(0, 1, 65), filling=filling
        )
        found = harmonics(sweep.totals, orders=4)
        amplitudes[half_twists] = np.array(found.sine) / (4 * math.pi * np.arange(1, 5))
    np.testing.assert_allclose(amplitudes[0][:2], [-0.015802, 0.000371], rtol=0, atol=6e-7)
    np.testing.assert_allclose(amplitudes[1][:2], [0.005187, 0.000371], rtol=0, atol=6e-7)
    np.testing.assert_allclose(amplitudes[0][1::2], amplitudes[1][1::2], rtol=0, atol=1e-11)
    assert abs(amplitudes[0][2] - amplitudes[1][2]) > 1e-6


def grand_potential(levels: np.ndarray, mu: float, heat: float, spin: int) -> float:
    return float(-spin * heat * np.logaddexp(0.0, (mu - levels) / heat).sum())


def fermi_sum(levels: np.ndarray, mu: float, heat: float, spin: int) -> float:
    return float(spin * (0.5 - 0.5 * np.tanh((levels - mu) / (2 * heat))).sum())


@pytest.mark.parametrize("spin", [1, 2])
@pytest.mark.parametrize("case", RINGS[:6])
def test_totals_at_finite_temperature(case: Case, spin: int, ring_of: Build) -> None:
    """d(Omega)/d(flux) at fixed mu, dF/d(flux) at fixed number, of brute-force levels."""
    energies = disorder(case, 1.0)
    heat, mu, number = 0.17, -0.4, spin * case.sites() / 3
    temperature = heat / boltzmann("eV")
    hopping = Hopping(shells=case.hoppings, site_energy=energies, unit="eV")
    hamiltonian = assemble(ring_of(case), hopping)
    flux = 0.29

    def omega(at: float) -> float:
        return grand_potential(case.levels(at, energies=energies), mu, heat, spin)

    def solved(at: float) -> float:
        levels = case.levels(at, energies=energies)
        return float(brentq(lambda m: fermi_sum(levels, m, heat, spin) - number, -9, 9, xtol=1e-14))

    def free_energy(at: float) -> float:
        levels = case.levels(at, energies=energies)
        return grand_potential(levels, solved(at), heat, spin) + solved(at) * number

    fixed_mu = Filling(electrons=None, chemical_potential=mu, spin=spin, temperature=temperature)
    totals = sweep_flux(hamiltonian, np.array([flux]), filling=fixed_mu).totals
    assert math.isclose(totals.slope[0], derivative(omega, flux), abs_tol=BY_DIFFERENCES)
    levels = case.levels(flux, energies=energies)
    assert math.isclose(totals.electrons[0], fermi_sum(levels, mu, heat, spin), abs_tol=LEVEL)
    assert math.isclose(totals.chemical_potential[0], mu, abs_tol=1e-12)
    fixed_number = Filling(electrons=number, spin=spin, temperature=temperature)
    totals = sweep_flux(hamiltonian, np.array([flux]), filling=fixed_number).totals
    assert math.isclose(totals.slope[0], derivative(free_energy, flux), abs_tol=BY_DIFFERENCES)
    assert math.isclose(totals.chemical_potential[0], solved(flux), abs_tol=1e-8)
    assert math.isclose(totals.electrons[0], number, abs_tol=LEVEL)


@pytest.mark.parametrize("case", RINGS[:6])
def test_totals_at_fixed_chemical_potential_and_zero_temperature(
    case: Case, hamiltonian_of: Build
) -> None:
    """Omega = sum of spin (E - mu) over the levels below mu, and its slope by differences."""
    energies = disorder(case, 1.0)
    mu, flux = -0.413, 0.29

    def omega(at: float) -> float:
        levels = case.levels(at, energies=energies)
        return 2 * float((levels[levels < mu] - mu).sum())

    filling = Filling(electrons=None, chemical_potential=mu, spin=2)
    totals = sweep_flux(hamiltonian_of(case, energies), np.array([flux]), filling=filling).totals
    assert math.isclose(totals.energy[0], omega(flux), abs_tol=LEVEL)
    assert math.isclose(totals.slope[0], derivative(omega, flux), abs_tol=1e-5)
    below = np.count_nonzero(case.levels(flux, energies=energies) < mu)
    assert totals.electrons[0] == 2 * below
    assert not totals.shared[0]


def test_ring_current_of_benzene() -> None:
    """t = 2.7 eV, a = 1.397 A: 11.25 nA/T, diatropic (Hückel-London theory; computed).

    E = -4 t cos(2 pi flux/N)/sin(pi/N), and the current per field is e/h times the slope per
    flux times the flux of the hexagon.
    """
    strip = lay_strip("square", rows=1, length=6)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping(shells=(2.7,), unit="eV"))
    fluxes = np.array([-0.3, 1e-4, 0.2])
    totals = sweep_flux(hamiltonian, fluxes, filling=Filling(electrons=6, spin=2)).totals
    expected = [2.7 * known.annulene_total(6, flux) for flux in fluxes]
    np.testing.assert_allclose(totals.energy, expected, rtol=0, atol=1e-10)
    hexagon = 1.5 * math.sqrt(3) * (1.397e-10) ** 2
    flux_per_tesla = hexagon / (si.h / si.e)
    current = current_factor("eV")[0] * totals.slope[1] * flux_per_tesla / fluxes[1]
    assert abs(abs(current) * 1e9 - 11.25) < 0.006
    assert totals.slope[1] > 0  # the energy rises with flux of either sign: diatropic
    assert totals.slope[0] < 0


@pytest.mark.parametrize("sites", [8, 16])
def test_moebius_annulenes_are_diatropic_too(sites: int, hamiltonian_of: Build) -> None:
    """4n electrons, "pz", one half twist: the identical formula (Heilbronner's closed shell)."""
    hamiltonian = hamiltonian_of(Case("square", 1, sites, 1, -1))
    fluxes = np.array([-0.31, 0.12, 0.4])
    filling = Filling(electrons=sites, spin=2)
    totals = sweep_flux(hamiltonian, fluxes, filling=filling).totals
    expected = [known.annulene_total(sites, flux) for flux in fluxes]
    np.testing.assert_allclose(totals.energy, expected, rtol=0, atol=1e-10)
    slopes = [derivative(lambda at: known.annulene_total(sites, at), flux) for flux in fluxes]
    np.testing.assert_allclose(totals.slope, slopes, rtol=0, atol=1e-8)


# --- half a quantum --------------------------------------------------------------------------


def strands(folder: Path, rows: int) -> Path:
    """A lattice file of one's own: lines of sites, 1 apart along and 1.5 across."""
    path = folder / f"strands-{rows}.toml"
    path.write_text(
        'name = "strands"\nspacing = 1.0\nperiod = 1.0\nrepeat = [0.0, 1.5]\n'
        'lines = [{ y = 0.0, x = [0.0], species = "site", sublattice = "A" }]\n'
        "shells = [1.0, 1.5]\n",
        encoding="utf-8",
    )
    return path


def strand_ring(folder: Path, rows: int, columns: int, across: float, **options: Any) -> Any:
    strip = lay_strip(strands(folder, rows), rows=rows, length=columns)
    ring = close_strip(strip, half_twists=1, orbital="s", shells=2)
    return assemble(ring, Hopping(shells=(1.0, across), unit="t", **options))


@pytest.mark.parametrize("rows", [2, 3, 4])
@pytest.mark.parametrize("across", [0.0, 0.4, 1.0])
def test_lattice_file_with_two_hoppings(rows: int, across: float, tmp_path: Path) -> None:
    """Levels of the closed form with another hopping across (Yakubo et al. 2003)."""
    hamiltonian = strand_ring(tmp_path, rows, 9, across)
    for flux in (0.0, 0.23):
        expected = known.square_two_hoppings(
            rows, 9, half_twists=1, sigma=1, flux=flux, across=across
        )
        found = all_levels(hamiltonian, flux=flux).energies
        np.testing.assert_allclose(found, expected, rtol=0, atol=LEVEL)


@pytest.mark.parametrize(("rows", "pairs"), [(2, True), (4, True), (3, False), (5, False)])
def test_uncoupled_strands_pair_into_rings_of_twice_the_length(
    rows: int, pairs: bool, tmp_path: Path
) -> None:
    """t2 = 0: even numbers of strands have period 1/2, odd ones keep the middle strand's period 1.

    Yakubo, Avishai & Cohen (2003); Mila, Stafford & Capponi, Phys. Rev. B 57, 1457 (1998).
    """
    hamiltonian = strand_ring(tmp_path, rows, 9, 0.0)
    for flux in (0.0, 0.1, 0.33):
        here = all_levels(hamiltonian, flux=flux).energies
        there = all_levels(hamiltonian, flux=flux + 0.5).energies
        assert (np.abs(here - there).max() < LEVEL) == pairs
        middle = known.cycle(9, flux=flux) if rows % 2 else np.zeros(0)
        around_twice = np.repeat(known.cycle(18, flux=2 * flux), rows // 2)
        expected = np.sort(np.concatenate([around_twice, middle]))
        np.testing.assert_allclose(here, expected, rtol=0, atol=LEVEL)


@pytest.mark.parametrize(
    ("rows", "across", "holds"),
    [(2, 0.0, True), (4, 0.0, True), (3, 0.0, False), (2, 0.1, False), (2, 1e-6, False)],
)
def test_half_quantum_period_of_uncoupled_strands(
    rows: int, across: float, holds: bool, tmp_path: Path
) -> None:
    """Reported where it holds, and not once the strands are coupled or odd in number."""
    hamiltonian = strand_ring(tmp_path, rows, 9, across)
    fluxes = np.linspace(0, 1, 41)
    sweep = sweep_flux(hamiltonian, fluxes, filling=Filling(electrons=5, spin=1))
    verdict = half_quantum(hamiltonian, sweep.totals)
    assert verdict.holds == holds
    assert (verdict.difference < LEVEL) == holds
    if holds:
        assert verdict.current_difference < SLOPE


def test_a_large_second_harmonic_is_not_a_half_quantum_period(hamiltonian_of: Build) -> None:
    """One-sided ladder, 30 rungs, 20 spinless electrons: harmonic 2 exceeds 1, and no such period.

    Totals compared with the closed form of the square ribbon at every flux.
    """
    hamiltonian = hamiltonian_of(Case("square", 2, 30, 1))
    fluxes = np.linspace(0, 1, 241)
    sweep = sweep_flux(hamiltonian, fluxes, filling=Filling(electrons=20, spin=1))
    expected = []
    for flux in fluxes:
        levels = known.square(2, 30, half_twists=1, sigma=1, flux=float(flux))
        expected.append(levels[:20].sum())
    np.testing.assert_allclose(sweep.totals.energy, expected, rtol=0, atol=1e-9)
    found = harmonics(sweep.totals, orders=4)
    size = np.hypot(found.sine, found.cosine)
    assert size[1] > size[0]
    verdict = half_quantum(hamiltonian, sweep.totals)
    assert not verdict.holds
    assert verdict.difference > 1e-3
    half = len(fluxes) // 2
    difference = np.abs(np.array(expected[: half + 1]) - np.array(expected[half:])).max()
    assert difference > 1e-3
    slopes = sweep.totals.slope
    assert math.isclose(
        verdict.current_difference, np.abs(slopes[: half + 1] - slopes[half:]).max(), rel_tol=1e-9
    )


# --- branches ----------------------------------------------------------------------------------


def branches_of(sweep: Any) -> dict[int, np.ndarray]:
    """Energy along each branch, NaN where it was not seen."""
    rows: dict[int, np.ndarray] = {}
    for point in range(len(sweep.flux)):
        for branch, energy in zip(sweep.branch[point], sweep.energy[point], strict=True):
            if branch >= 0:
                line = rows.setdefault(int(branch), np.full(len(sweep.flux), np.nan))
                assert np.isnan(line[point]), "a branch stands twice at one flux"
                line[point] = energy
    return rows


@pytest.mark.parametrize(
    "fluxes", [np.linspace(-0.62, 0.71, 58), np.linspace(0, 1, 41)], ids=["between", "through"]
)
@pytest.mark.parametrize(
    "case", [Case("square", 1, 8, 0), Case("square", 1, 9, 1, -1), Case("square", 3, 7, 1)]
)
def test_branches_of_clean_rings_are_single_states(
    case: Case, fluxes: np.ndarray, hamiltonian_of: Build
) -> None:
    """Each branch is -2 cos(2 pi (n + delta + flux)/N) + const through every crossing.

    Crossings at flux 0, 1/2 and between transverse modes, met exactly or stepped over; the closed
    form names each state.
    """
    sweep = sweep_flux(hamiltonian_of(case), fluxes)
    found = branches_of(sweep)
    states = []
    for q in range(1, case.rows + 1):
        delta = known.mode_offset((-1) ** (q + 1), case.half_twists, case.sigma)
        across = -2 * math.cos(math.pi * q / (case.rows + 1))
        for n in range(round(case.length)):
            k = 2 * math.pi * (n + delta + fluxes) / case.length
            states.append(across - 2 * np.cos(k))
    assert_lines(found, states)


@pytest.mark.parametrize("rough", [False, True])
@pytest.mark.parametrize("points", [57, 41, 21])
def test_branches_through_exact_degeneracies(points: int, rough: bool, tmp_path: Path) -> None:
    """A clean strand beside a clean or a disordered one; the disordered one spoils momentum.

    The sweep meets the +-k pairs of a clean strand exactly, at flux 0, 1/2 and 1.
    """
    columns = 6
    energies = np.tile([-0.37, 0.41], (columns, 1))
    if rough:
        energies[:, 1] = np.random.default_rng(8).uniform(-1.5, 1.5, columns)
    strip = lay_strip(strands(tmp_path, 2), rows=2, length=columns)
    ring = close_strip(strip, half_twists=0, shells=2)
    hopping = Hopping(shells=(1.0, 0.0), site_energy=energies.ravel(), unit="t")
    fluxes = np.linspace(0, 1, points)
    sweep = sweep_flux(assemble(ring, hopping), fluxes)
    assert sweep.method == ("dense" if rough else "symmetry")
    waves = [-2 * np.cos(2 * math.pi * (n + fluxes) / columns) for n in range(columns)]
    expected = [wave - 0.37 for wave in waves]
    if rough:
        alone = Case("square", 1, columns, 0)
        expected += list(np.array([alone.levels(f, energies=energies[:, 1]) for f in fluxes]).T)
    else:
        expected += [wave + 0.41 for wave in waves]
    assert_lines(branches_of(sweep), expected)


def assert_lines(found: dict[int, np.ndarray], expected: list[np.ndarray]) -> None:
    """Each branch is one of the expected lines, each line once."""
    left = list(range(len(expected)))
    assert len(found) == len(left)
    for line in found.values():
        distance = [np.abs(expected[number] - line).max() for number in left]
        assert min(distance) < LEVEL
        left.pop(int(np.argmin(distance)))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_branches_of_disordered_strands(seed: int, tmp_path: Path) -> None:
    """Two plain rings with random energies of their own, uncoupled: levels of one cross those of
    the other, and within a ring no two levels cross, so that each branch is known."""
    columns = 8
    energies = np.random.default_rng(seed).uniform(-1.5, 1.5, (columns, 2))
    strip = lay_strip(strands(tmp_path, 2), rows=2, length=columns)
    ring = close_strip(strip, half_twists=0, shells=2)
    hopping = Hopping(shells=(1.0, 0.0), site_energy=energies.ravel(), unit="t")
    fluxes = np.linspace(0.03, 0.97, 95)
    sweep = sweep_flux(assemble(ring, hopping), fluxes)
    expected = []
    for strand in range(2):
        alone = Case("square", 1, columns, 0)
        rows = [alone.levels(flux, energies=energies[:, strand]) for flux in fluxes]
        expected += list(np.array(rows).T)
    crossings = sum(
        np.count_nonzero(np.diff(np.sign(a - b)))
        for a in expected[:columns]
        for b in expected[columns:]
    )
    found = branches_of(sweep)
    assert_lines(found, expected)
    assert crossings > 0


WINDOWS = [Window(near=0.2, count=6), Window(between=(-0.4, 0.5)), Window(all=True)]


@pytest.mark.parametrize("window", WINDOWS)
@pytest.mark.parametrize("width", [0.0, 0.5])
def test_sweep_of_a_window(window: Any, width: float, hamiltonian_of: Build) -> None:
    """Every point carries positions in the complete spectrum, true levels and their slopes."""
    case = Case("honeycomb-zigzag", 4, 8, 1, -1)
    energies = disorder(case, width)
    sweep = sweep_flux(hamiltonian_of(case, energies), np.linspace(0, 1, 7), window=window)
    for point, flux in enumerate(sweep.flux):
        levels = case.levels(float(flux), energies=energies)
        seen = sweep.level[point] >= 0
        found = sweep.level[point][seen]
        assert (sweep.branch[point][~seen] == -1).all()
        assert np.isnan(sweep.energy[point][~seen]).all()
        np.testing.assert_allclose(sweep.energy[point][seen], levels[found], rtol=0, atol=LEVEL)
        expected = brute_slopes(case, float(flux), energies)[found]
        shown = sorted_in_shells(levels[found], sweep.slope[point][seen])
        np.testing.assert_allclose(shown, expected, rtol=0, atol=SLOPE)
        if window.all:
            wanted = np.arange(len(levels))
        elif window.between:
            wanted = np.flatnonzero((levels > -0.4) & (levels < 0.5))
        else:
            wanted = np.argsort(np.abs(levels - 0.2))[:6]
        assert set(wanted.tolist()) <= set(found.tolist())
        assert len(found) <= len(wanted) + 2  # no more than the rest of a cut pair


@pytest.mark.parametrize("seed", [1, 2])
def test_branches_of_a_window(seed: int, tmp_path: Path) -> None:
    """The strands again, eight levels of sixteen: a branch never jumps to the other strand."""
    columns = 8
    energies = np.random.default_rng(seed).uniform(-1.5, 1.5, (columns, 2))
    strip = lay_strip(strands(tmp_path, 2), rows=2, length=columns)
    ring = close_strip(strip, half_twists=0, shells=2)
    hopping = Hopping(shells=(1.0, 0.0), site_energy=energies.ravel(), unit="t")
    fluxes = np.linspace(0.03, 0.97, 95)
    window = Window(between=(-2.0, 1.0))
    sweep = sweep_flux(assemble(ring, hopping), fluxes, window=window)
    alone = Case("square", 1, columns, 0)
    expected = [
        np.array([alone.levels(flux, energies=energies[:, strand]) for flux in fluxes]).T
        for strand in range(2)
    ]
    known_lines = np.concatenate(expected)
    for line in branches_of(sweep).values():
        seen = ~np.isnan(line)
        distance = np.abs(known_lines[:, seen] - line[seen]).max(axis=1)
        assert distance.min() < LEVEL


@pytest.mark.parametrize("method", ["auto", "dense", "sparse"])
@pytest.mark.parametrize("width", [0.0, 1.0])
@pytest.mark.parametrize(
    "case", [Case("square", 3, 20, 1), Case("honeycomb-zigzag", 3, 9.5, 1, -1)]
)
def test_slopes_of_a_window_of_levels(
    case: Case, width: float, method: Any, hamiltonian_of: Build
) -> None:
    """Every way of finding a window gives the slopes of brute force, inside shells too."""
    energies = disorder(case, width)
    hamiltonian = hamiltonian_of(case, energies)
    for flux in (0.0, 0.3):
        found = levels_near(hamiltonian, 0.4, count=9, flux=flux, states=True, method=method)
        expected = brute_slopes(case, flux, energies)[found.index]
        shown = sorted_in_shells(found.energies, found.slopes)
        np.testing.assert_allclose(shown, expected, rtol=0, atol=1e-7)
