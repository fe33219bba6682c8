"""Densities of states against plain sums over known levels, matrix functions and bulk formulas.

Levels come from ``brute.py`` (plain loops over coordinates) or closed forms; Gaussians from
``math``. Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import brute
import closed_forms as known
import mpmath
import numpy as np
import pytest
from brute import Case
from scipy.integrate import quad
from scipy.special import ellipk

from ribbon.analysis import (
    all_levels,
    count_below,
    density_of_states,
    levels_between,
    levels_density,
    local_density,
    shell_density,
)
from ribbon.errors import BadInput, TooLarge
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, close_strip, lay_strip

Build = Callable[..., Any]
SUM = 1e-10
"""Sums of some hundred Gaussians, per broadening."""
CUT = 1e-7
"""Levels; what six widths to either side leave out of a Gaussian is 2e-9."""
RINGS = [
    Case("square", 4, 7, 1, -1),
    Case("triangular", 4, 5.5, 1),
    Case("honeycomb-zigzag", 3, 5.5, 1, -1),
    Case("honeycomb-armchair", 5, 4, 2),
    Case("kagome", 5, 3.5, 3),
    Case("lieb", 5, 4, 0),
]


def gaussians(levels: np.ndarray, energy: float, width: float) -> float:
    return sum(math.exp(-(((energy - e) / width) ** 2) / 2) for e in levels.tolist()) / (
        width * math.sqrt(2 * math.pi)
    )


def below(levels: np.ndarray, energy: float, width: float) -> float:
    return sum((1 + math.erf((energy - e) / width / math.sqrt(2))) / 2 for e in levels.tolist())


def chain_of(sites: int, half_twists: int = 0, orbital: str = "s") -> Any:
    strip = lay_strip("square", rows=1, length=sites)
    return assemble(close_strip(strip, half_twists=half_twists, orbital=orbital), Hopping())


# --- the whole spectrum --------------------------------------------------------------------------


@pytest.mark.parametrize("flux", [0.0, 0.13])
@pytest.mark.parametrize("case", RINGS)
def test_density_is_a_sum_of_gaussians(hamiltonian_of: Build, case: Case, flux: float) -> None:
    """Density and number below at any energies are plain sums over brute-force levels."""
    levels, width = case.levels(flux), 0.08
    grid = np.linspace(-5.0, 5.0, 131)
    found = density_of_states(hamiltonian_of(case), broadening=width, flux=flux, energies=grid)
    wanted = [gaussians(levels, e, width) for e in grid.tolist()]
    np.testing.assert_allclose(found.density, wanted, rtol=0, atol=SUM / width)
    wanted = [below(levels, e, width) for e in grid.tolist()]
    np.testing.assert_allclose(found.integrated, wanted, rtol=0, atol=SUM)
    np.testing.assert_array_equal(found.energies, grid)
    assert (found.levels, found.complete, found.unit) == (levels.size, True, "t")
    assert found.broadening == width


@pytest.mark.parametrize("disorder", [False, True])
@pytest.mark.parametrize("flux", [0.0, 0.31])
@pytest.mark.parametrize("case", RINGS)
def test_the_integral_is_the_number_of_sites(
    hamiltonian_of: Build, case: Case, flux: float, disorder: bool
) -> None:
    """Every level counts once: trapezoids over the package's own grid, the histogram, the end.

    Bins of the histogram hold the brute-force levels between their edges.
    """
    energies = np.random.default_rng(5).uniform(-1, 1, case.sites()) if disorder else None
    hamiltonian = hamiltonian_of(case, 0.0 if energies is None else energies)
    found = density_of_states(hamiltonian, broadening=0.05, flux=flux)
    whole = np.trapezoid(found.density, found.energies)
    np.testing.assert_allclose(whole, hamiltonian.n, rtol=0, atol=CUT)
    np.testing.assert_allclose(found.integrated[-1], hamiltonian.n, rtol=0, atol=CUT)
    np.testing.assert_allclose(found.integrated[0], 0.0, rtol=0, atol=CUT)
    assert found.counts.sum() == hamiltonian.n
    levels = case.levels(flux, energies=energies)
    pairs = list(zip(found.edges[:-1].tolist(), found.edges[1:].tolist(), strict=True))
    sharp = [np.count_nonzero((levels > a + 1e-9) & (levels < b - 1e-9)) for a, b in pairs]
    loose = [np.count_nonzero((levels > a - 1e-9) & (levels < b + 1e-9)) for a, b in pairs]
    assert np.all((sharp <= found.counts) & (found.counts <= loose))
    assert len(pairs) > 20
    assert sum(sharp) > 0.5 * hamiltonian.n


@pytest.mark.parametrize("case", RINGS)
def test_integrated_density_counts_the_levels_below(hamiltonian_of: Build, case: Case) -> None:
    """Far from levels (40 widths) it is the count of levels below, from `count_below` and brute
    force alike.
    """
    hamiltonian = hamiltonian_of(case)
    levels = case.levels(0.2)
    gaps = np.flatnonzero(np.diff(levels) > 0.02)
    middles = (levels[gaps] + levels[gaps + 1]) / 2
    assert middles.size > 4
    found = density_of_states(hamiltonian, broadening=2.5e-4, flux=0.2, energies=middles)
    counts = [count_below(hamiltonian, e, flux=0.2) for e in middles.tolist()]
    np.testing.assert_allclose(found.integrated, counts, rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.integrated, gaps + 1, rtol=0, atol=1e-12)


def test_a_broadening_too_fine_for_the_grid_keeps_the_integral() -> None:
    """20,001 points over 4 t cannot resolve 1e-6 t: the mean over each step still sums to n, and
    no level falls between two points.
    """
    hamiltonian = chain_of(10)
    found = density_of_states(hamiltonian, broadening=1e-6)
    step = found.energies[1] - found.energies[0]
    assert found.energies.size == 20_001
    assert step > 1e-4
    np.testing.assert_allclose(found.density.sum() * step, 10, rtol=0, atol=CUT)
    seen = np.add.reduceat(found.density * step, np.searchsorted(found.energies, [-3.0, 0.0, 1.9]))
    np.testing.assert_allclose(seen, [5, 4, 1], rtol=0, atol=CUT)  # -2, -1.6(2), -.6(2) | ... | 2
    assert found.counts.sum() == 10


def test_levels_all_on_one_energy() -> None:
    """Three sites apart: one bin of three levels, a single Gaussian of area three."""
    dots = assemble(Network.from_pairs([], sites=3), Hopping(site_energy=0.5))
    found = density_of_states(dots, broadening=0.1)
    assert found.counts.tolist() == [3]
    assert found.edges[0] < 0.5 < found.edges[1]
    np.testing.assert_allclose(
        found.density.max(), 3 / (0.1 * math.sqrt(2 * math.pi)), rtol=0, atol=1e-3
    )
    np.testing.assert_allclose(np.trapezoid(found.density, found.energies), 3, rtol=0, atol=CUT)


# --- closed forms --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("rows", "columns", "half_twists", "orbital"), [(5, 8, 1, "s"), (4, 9, 3, "pz"), (4, 9, 0, "s")]
)
def test_square_rings_against_mpmath(
    rows: int, columns: int, half_twists: int, orbital: str
) -> None:
    """Closed-form levels (Yakubo, Avishai & Cohen 2003) broadened and summed in 30 digits."""
    strip = lay_strip("square", rows=rows, length=columns)
    ring = close_strip(strip, half_twists=half_twists, orbital=orbital)
    sigma = 1 if orbital == "s" else -1
    levels = known.square(rows, columns, half_twists=half_twists, sigma=sigma, flux=0.17)
    grid, width = [-3.3, -1.0, 0.0, 0.4, 2.2], 0.03
    found = density_of_states(assemble(ring, Hopping()), broadening=width, flux=0.17, energies=grid)
    with mpmath.workdps(30):
        wanted = [mpmath.fsum(mpmath.npdf(e, mu, width) for mu in levels) for e in grid]
        under = [mpmath.fsum(mpmath.ncdf(e, mu, width) for mu in levels) for e in grid]
    np.testing.assert_allclose(found.density, np.array(wanted, float), rtol=0, atol=1e-8)
    np.testing.assert_allclose(found.integrated, np.array(under, float), rtol=0, atol=1e-9)


def test_moebius_annulenes() -> None:
    """-2 cos((2n + 1) pi/N): E. Heilbronner, Tetrahedron Lett. 5, 1923 (1964) [M]."""
    levels = known.moebius_annulene(14)
    found = density_of_states(chain_of(14, 1, "pz"), broadening=0.05)
    wanted = [gaussians(levels, e, 0.05) for e in found.energies.tolist()]
    np.testing.assert_allclose(found.density, wanted, rtol=0, atol=1e-8)


def test_a_long_chain_has_the_bulk_density() -> None:
    """1/(pi sqrt(4 - E^2)) per site of the endless chain (textbook closed form [M])."""
    grid = np.linspace(-1.6, 1.6, 33)
    found = density_of_states(chain_of(4000), broadening=0.01, energies=grid)
    wanted = 1 / (np.pi * np.sqrt(4 - grid**2))
    np.testing.assert_allclose(found.density / 4000, wanted, rtol=0, atol=1e-4)


def honeycomb_bulk(energy: float) -> float:
    """Levels per site and energy: E. W. Hobson & A. Nierenberg, Phys. Rev. 89, 662 (1953) [M].

    (4/pi^2) |E|/sqrt(Z0) K(Z1/Z0) per cell with two spins and two sites, so a quarter of it.
    """
    e = abs(energy)
    if not 0 < e < 3:
        return 0.0
    z0, z1 = (1 + e) ** 2 - (e * e - 1) ** 2 / 4, 4 * e
    if e > 1:
        z0, z1 = z1, z0
    return e / np.pi**2 / math.sqrt(z0) * float(ellipk(z1 / z0))


def square_bulk(energy: float) -> float:
    """K(1 - (E/4)^2)/(2 pi^2) per site (textbook closed form [M])."""
    return float(ellipk(1 - (energy / 4) ** 2)) / (2 * np.pi**2) if abs(energy) < 4 else 0.0


def broadened(bulk: Callable[[float], float], energy: float, width: float) -> float:
    """A bulk density folded with a Gaussian (scipy.integrate.quad)."""

    def folded(e: float) -> float:
        return bulk(e) * math.exp(-(((energy - e) / width) ** 2) / 2)

    value = quad(folded, energy - 7 * width, energy + 7 * width, limit=200)[0]
    return value / (width * math.sqrt(2 * math.pi))


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "bulk", "energies"),
    [
        ("honeycomb-armchair", 80, 60, honeycomb_bulk, [0.45, 0.6, -0.6, 1.4, 1.8, -2.2, 2.5]),
        ("honeycomb-zigzag", 80, 100, honeycomb_bulk, [0.45, 0.6, -0.6, 1.4, 1.8, -2.2, 2.5]),
        ("square", 100, 140, square_bulk, [0.7, 1.2, -1.2, 2.0, -3.0, 3.4]),
    ],
)
def test_large_rings_approach_the_bulk(
    lattice: str, rows: int, length: int, bulk: Callable[[float], float], energies: list[float]
) -> None:
    """Away from |E| = 0, 1 (0 on the square) within 3 %: edges are 1/80 of the sites or less."""
    strip = lay_strip(lattice, rows=rows, length=length)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping())
    found = density_of_states(hamiltonian, broadening=0.07, energies=energies)
    wanted = np.array([broadened(bulk, e, 0.07) for e in energies])
    np.testing.assert_allclose(found.density / strip.n / wanted, 1.0, rtol=0, atol=0.03)


# --- windows -------------------------------------------------------------------------------------


def test_a_window_is_not_complete(hamiltonian_of: Build) -> None:
    """Levels between -1 and 1 only: the numbers below start from the count at the lower edge."""
    case, width = Case("honeycomb-zigzag", 3, 5.5, 1), 0.02
    hamiltonian = hamiltonian_of(case)
    window = levels_between(hamiltonian, -1.02, 1.02, flux=0.2)
    found = levels_density(window, broadening=width, sites=hamiltonian.n)
    levels = case.levels(0.2)
    inside = levels[np.abs(levels) < 1.02]
    assert (found.complete, found.levels) == (False, inside.size)
    assert 0 < np.count_nonzero(levels < -1.02) == hamiltonian.n - np.count_nonzero(levels > -1.02)
    under = np.count_nonzero(levels < -1.02)
    wanted = [under + below(inside, e, width) for e in found.energies.tolist()]
    np.testing.assert_allclose(found.integrated, wanted, rtol=0, atol=SUM)
    np.testing.assert_allclose(
        np.trapezoid(found.density, found.energies), inside.size, rtol=0, atol=CUT
    )
    assert found.counts.sum() == inside.size
    whole = levels_density(all_levels(hamiltonian, flux=0.2), broadening=width, sites=hamiltonian.n)
    assert whole.complete
    same = density_of_states(hamiltonian, broadening=width, flux=0.2)
    np.testing.assert_array_equal(whole.density, same.density)
    np.testing.assert_array_equal(whole.counts, same.counts)


# --- refusals ------------------------------------------------------------------------------------


@pytest.mark.parametrize("width", [0.0, -0.1, math.nan, math.inf])
def test_a_broadening_is_a_positive_energy(width: float) -> None:
    """Each way in refuses it."""
    hamiltonian = chain_of(6)
    levels = all_levels(hamiltonian, states=True)
    ways: list[Callable[[], object]] = [
        lambda: density_of_states(hamiltonian, broadening=width),
        lambda: levels_density(levels, broadening=width, sites=6),
        lambda: local_density(levels, 0.0, broadening=width),
    ]
    for way in ways:
        with pytest.raises(BadInput, match=r"levels\.broadening = .* positive energy"):
            way()


def test_refusals() -> None:
    """No levels, no states, and a spectrum out of reach."""
    hamiltonian = chain_of(6)
    none = levels_between(hamiltonian, 0.1, 0.2)
    with pytest.raises(BadInput, match="this window holds none"):
        levels_density(none, broadening=0.1, sites=6)
    bare = all_levels(hamiltonian)
    with pytest.raises(BadInput, match="these levels hold no states"):
        local_density(bare, 0.0, broadening=0.1)
    with pytest.raises(BadInput, match="these levels hold no states"):
        shell_density(hamiltonian, bare, 0)
    strip = lay_strip("square", rows=10, length=1800)
    large = assemble(close_strip(strip, half_twists=0), Hopping(disorder=1.0))
    with pytest.raises(TooLarge, match="complete spectrum of 18,000 sites"):
        density_of_states(large, broadening=0.1, method="exact")


def test_densities_cannot_be_written_to() -> None:
    """Results are frozen, and a grid that was given stays the caller's own."""
    grid = np.linspace(-3, 3, 7)
    found = density_of_states(chain_of(6), broadening=0.1, energies=grid)
    for array in (found.energies, found.density, found.integrated, found.edges, found.counts):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1
    grid[0] = -4.0
    assert found.energies[0] == -3.0


def test_every_lattice_is_tried() -> None:
    """The table of rings names all lattices that the brute-force builder knows."""
    assert {case.lattice for case in RINGS} == set(brute.LATTICES)
