"""Chebyshev moments and the densities made of them.

Judges from outside: traces over levels of ``brute.py`` (plain loops over coordinates), closed
forms of the moments of rings, counts of closed walks, and Gaussians from ``math``. Sources marked
[M] are recalled from memory.
"""

from __future__ import annotations

import math
import subprocess
import sys
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
import scipy.linalg
from brute import Case
from hypothesis import given
from hypothesis import strategies as st
from numpy.polynomial import chebyshev as polynomials
from scipy.integrate import quad, trapezoid
from scipy.special import ellipk
from scipy.stats import binom, t

from ribbon.analysis import chebyshev, chebyshev_compiled, count_below, density_of_states
from ribbon.analysis.density import moments_density
from ribbon.analysis.moments import (
    LocalDensity,
    Moments,
    local_density_moments,
    moments_for,
    spectral_moments,
)
from ribbon.analysis.series import jackson, jackson_series, nodes, point_weights
from ribbon.errors import BadInput, TooLarge
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, close_strip, lay_strip, remove_sites

Build = Callable[..., Any]
TRACE = 1e-12
"""Moments, for each site and moment: rounding of the recursion."""
SERIES = 1e-6
"""Part of the peak of a level that the truncated series of a Gaussian leaves out."""
RINGS = [
    Case("square", 4, 9, 1, -1),
    Case("triangular", 4, 7.5, 1),
    Case("honeycomb-zigzag", 4, 8, 2),
    Case("honeycomb-armchair", 5, 4, 1, -1, (1.0, 0.1)),
    Case("kagome", 3, 5, 0),
]
FLUXES = [0.0, 0.5, 0.137]


def names(case: Case) -> str:
    return f"{case.lattice}-{case.half_twists}"


def ring(sites: int, *, half_twists: int = 0, orbital: Any = "s") -> Any:
    strip = lay_strip("square", rows=1, length=sites)
    return assemble(close_strip(strip, half_twists=half_twists, orbital=orbital), Hopping())


def disordered(rows: int, length: int, *, lattice: str = "square", width: float = 1.0) -> Any:
    strip = lay_strip(lattice, rows=rows, length=length)
    closed = close_strip(strip, half_twists=1, orbital="s")
    return assemble(closed, Hopping(disorder=width, seed=5))


def traces(levels: np.ndarray, found: Moments) -> np.ndarray:
    """Tr T_n by the definition, cos(n arccos x) over the levels."""
    angle = np.arccos(np.clip((levels - found.middle) / found.half, -1, 1))
    return np.cos(np.arange(found.count)[:, None] * angle).sum(axis=1)


def gaussians(levels: np.ndarray, energy: float, width: float) -> float:
    return sum(math.exp(-(((energy - e) / width) ** 2) / 2) for e in levels.tolist()) / (
        width * math.sqrt(2 * math.pi)
    )


def unit_vectors(n: int, chosen: list[int]) -> Callable[[int], np.ndarray]:
    return lambda r: np.eye(n)[chosen[r]]


# --- moments -------------------------------------------------------------------------------------


@pytest.mark.parametrize("compiled", [True, False], ids=["numba", "scipy"])
@pytest.mark.parametrize("flux", FLUXES)
@pytest.mark.parametrize("case", RINGS, ids=names)
def test_moments_are_traces_over_the_levels(
    hamiltonian_of: Build, case: Case, flux: float, compiled: bool
) -> None:
    """Levels by brute force; uneven site energies; both ways, real and complex."""
    energies = np.random.default_rng(4).normal(size=case.sites())
    hamiltonian = hamiltonian_of(case, energies)
    levels = np.linalg.eigvalsh(case.matrix(flux) + np.diag(energies))
    stretched = chebyshev.stretch(hamiltonian, flux)
    start = unit_vectors(hamiltonian.n, list(range(hamiltonian.n)))
    rows = chebyshev.moments_of(stretched, start, 61, vectors=hamiltonian.n, compiled=compiled)
    found = spectral_moments(hamiltonian, 61, flux=flux)
    assert (found.exact, found.error, found.samples.shape) == (True, None, (1, 61))
    wanted = traces(levels, found)
    np.testing.assert_allclose(rows.sum(axis=0), wanted, rtol=0, atol=TRACE * rows.size)
    np.testing.assert_allclose(found.values, wanted, rtol=0, atol=TRACE * rows.size)


@pytest.mark.parametrize("sites", [5, 8, 21])
@pytest.mark.parametrize("flux", [0.0, 0.5, 0.137])
def test_moments_of_a_ring_are_its_windings(sites: int, flux: float) -> None:
    """Tr T_n(-A/2) / N = (-1)^n cos(2 pi flux m) for n = m N, else 0.

    T_n of half the ring's matrix hops n sites either way: only whole turns come home (derived;
    agrees with the trace of the closed-form levels of a ring).
    """
    found = spectral_moments(ring(sites), 4 * sites + 1, flux=flux)
    wanted = np.zeros(found.count)
    wanted[::sites] = np.cos(2 * np.pi * flux * np.arange(5)) * (-1.0) ** (sites * np.arange(5))
    np.testing.assert_allclose(found.half, 2, rtol=1e-12)
    np.testing.assert_allclose(found.values / sites, wanted, rtol=0, atol=1e-10)


def test_moments_of_a_moebius_annulene() -> None:
    """(-1)^m at n = m N for H = +A: half a flux quantum (E. Heilbronner 1964 [M])."""
    found = spectral_moments(ring(12, half_twists=1, orbital="pz"), 49)
    np.testing.assert_allclose(found.values[::12] / 12, [1, -1, 1, -1, 1], rtol=0, atol=1e-10)
    assert np.abs(np.delete(found.values, np.arange(0, 49, 12))).max() < 1e-10


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "walks"),
    [
        ("honeycomb-zigzag", 14, 15, [1, 3, 15, 93, 639, 4653]),
        ("honeycomb-armchair", 24, 8, [1, 3, 15, 93, 639, 4653]),
        ("square", 13, 13, [1, 4, 36, 400, 4900]),
    ],
)
def test_powers_count_closed_walks(lattice: str, rows: int, length: int, walks: list[int]) -> None:
    """<i|A^2k|i> in the middle of a ring too wide for the walks to meet an edge.

    Honeycomb 3, 15, 93, 639, 4653; square C(2k, k)^2 (counted by hand for the first, closed form
    for the second: G. Polya 1921 [M]).
    """
    strip = lay_strip(lattice, rows=rows, length=length)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping())
    middle = int(np.argmin(np.abs(hamiltonian.network.positions[:, 1])))
    stretched = chebyshev.stretch(hamiltonian, 0.0)
    start = unit_vectors(hamiltonian.n, [middle])
    moments = chebyshev.moments_of(stretched, start, 11, vectors=1)[0]
    for k, walk in enumerate(walks):
        series = polynomials.poly2cheb([0.0] * (2 * k) + [1.0])
        power = stretched.half ** (2 * k) * (series @ moments[: 2 * k + 1])
        assert power == pytest.approx(walk, rel=1e-11)


def test_moments_with_vacancies_and_disorder() -> None:
    """Traces over the dense levels of what is left (numpy)."""
    whole = close_strip(
        lay_strip("honeycomb-zigzag", rows=6, length=12), half_twists=1, orbital="s"
    )
    left = remove_sites(whole, [3, 17, 18, 55, 90])
    hamiltonian = assemble(left, Hopping(disorder=2.0, seed=8))
    found = spectral_moments(hamiltonian, 40, flux=0.3)
    levels = np.linalg.eigvalsh(hamiltonian.matrix(0.3).toarray())
    np.testing.assert_allclose(found.values, traces(levels, found), rtol=0, atol=1e-9)


@given(seed=st.integers(0, 2**32 - 1), n=st.integers(2, 40))
def test_moments_of_random_networks(seed: int, n: int) -> None:
    """Any graph, loose sites and all: traces over its dense levels (numpy)."""
    rng = np.random.default_rng(seed)
    pairs = np.argwhere(np.triu(rng.random((n, n)) < 2 / n, 1))
    pairs = np.concatenate([pairs, [[0, n - 1]]]) if not pairs.size else pairs
    network = Network.from_pairs(pairs, sites=n)
    hamiltonian = assemble(network, Hopping(site_energy=rng.normal(size=n)))
    found = spectral_moments(hamiltonian, 20)
    levels = np.linalg.eigvalsh(hamiltonian.matrix().toarray())
    assert levels.min() >= found.middle - found.half
    assert levels.max() <= found.middle + found.half
    np.testing.assert_allclose(found.values, traces(levels, found), rtol=0, atol=1e-10)


def test_sites_without_bonds() -> None:
    """Equal levels and no bonds: the interval is a point, and still something comes out."""
    hamiltonian = assemble(ring(4).network, Hopping(shells=(0.0,), site_energy=1.5))
    found = density_of_states(hamiltonian, broadening=0.1, energies=[1.5, 2.5], method="moments")
    np.testing.assert_allclose(
        found.density, [4 / 0.1 / math.sqrt(2 * math.pi), 0], rtol=0, atol=1e-4
    )


# --- random vectors ------------------------------------------------------------------------------


@pytest.mark.parametrize("flux", [0.0, 0.3])
def test_error_bars_cover_the_truth(flux: float) -> None:
    """100 seeds, 24 vectors each, against the dense levels (numpy): Student's t, 23 degrees.

    A bar of 2.07 errors misses with a probability of 5 %: of 100, more than 14 or none at all
    are missed with a probability below 1 % (binomial), were the seeds not fixed.
    """
    hamiltonian = disordered(5, 40)
    energy, width = 0.7, 0.6
    levels = np.linalg.eigvalsh(hamiltonian.matrix(flux).toarray())
    wanted, reach = gaussians(levels, energy, width), float(t.ppf(0.975, 23))
    count = moments_for(hamiltonian, width)
    scores = []
    for seed in range(100):
        moments = spectral_moments(hamiltonian, count, flux=flux, vectors=24, seed=seed)
        found = moments_density(moments, broadening=width, energies=[energy])
        assert found.error is not None
        scores.append(float((found.density[0] - wanted) / found.error[0]))
    missed = int(np.count_nonzero(np.abs(scores) > reach))
    assert binom.sf(14, 100, 0.05) + binom.pmf(0, 100, 0.05) < 0.01
    assert 1 <= missed <= 14
    # the variance of t is 23/21; 0.6 and 0.35 are more than three standard deviations
    assert np.mean(np.square(scores)) == pytest.approx(23 / 21, abs=0.6)
    assert abs(np.mean(scores)) < 0.35


@pytest.mark.parametrize(("flux", "wanted"), [(0.0, 2.0), (0.3, 1.0)])
def test_variance_of_a_random_vector(flux: float, wanted: float) -> None:
    """Var <v|X|v> is 2 sum over pairs |X_ij|^2 for signs, half of it for fourth roots of one.

    Derived from the averages of products of independent signs. Of 4,000 vectors the variance is
    good to 2.2 %; 13 % are six standard deviations of it.
    """
    hamiltonian = disordered(4, 25)
    found = spectral_moments(hamiltonian, 2, flux=flux, vectors=4000)
    matrix = hamiltonian.matrix(flux).toarray() / found.half
    square = float(np.sum(np.abs(np.triu(matrix, 1)) ** 2))
    variance = float(np.var(found.samples[:, 1]))
    assert variance / square == pytest.approx(2 * wanted, rel=0.13)


def test_vectors_do_not_depend_on_each_other(monkeypatch: pytest.MonkeyPatch) -> None:
    """The same numbers bit by bit in other blocks, on other threads, with other pieces."""
    hamiltonian = disordered(6, 50)
    for flux in (0.0, 0.2):
        many = spectral_moments(hamiltonian, 77, flux=flux, vectors=45).samples
        few = spectral_moments(hamiltonian, 77, flux=flux, vectors=5).samples
        np.testing.assert_array_equal(few, many[:5])
        for threads in ("1", "5"):
            monkeypatch.setenv("RIBBON_THREADS", threads)
            again = spectral_moments(hamiltonian, 77, flux=flux, vectors=45).samples
            np.testing.assert_array_equal(again, many)
        for steps, rows in ((1, 64), (3, 70), (16, 400)):
            monkeypatch.setattr(chebyshev, "MOST_STEPS", steps)
            monkeypatch.setattr(chebyshev, "FEWEST_ROWS", rows)
            again = spectral_moments(hamiltonian, 77, flux=flux, vectors=45).samples
            np.testing.assert_array_equal(again, many)


@pytest.mark.parametrize(
    ("sites", "vectors"), [(2896, 1), (2897, 512), (50_000, 96), (200_000, 32)]
)
def test_number_of_random_vectors(sites: int, vectors: int) -> None:
    """As `spectral_moments` says: none up to 2,896 sites, then fewer for larger rings.

    The second moment, Tr (2 X^2 - 1) = 0 on a ring with X = -A/2, within six errors.
    """
    found = spectral_moments(ring(sites), 3)
    assert (found.samples.shape[0], found.exact) == (vectors, vectors == 1)
    error = np.full(3, 1e-9 * sites) if found.error is None else found.error
    assert abs(found.values[2]) < 6 * error[2]
    assert found.values[0] == pytest.approx(sites, rel=1e-12)


def test_seeds() -> None:
    """The same seed draws the same vectors, another one others; disorder draws its own."""
    hamiltonian = disordered(6, 20)
    first, again, other = (
        spectral_moments(hamiltonian, 9, vectors=3, seed=seed).samples for seed in (5, 5, 6)
    )
    np.testing.assert_array_equal(first, again)
    assert not np.array_equal(first[:, 1:], other[:, 1:])
    np.testing.assert_allclose(first[:, 0], 120, rtol=1e-14)


@pytest.mark.parametrize(("flux", "width"), [(0.0, 0.0), (0.0, 1.0), (0.41, 1.0)])
def test_both_ways_give_the_same_numbers(flux: float, width: float) -> None:
    """Compiled and scipy, several slabs of rows: equal to rounding (scipy is the judge)."""
    hamiltonian = disordered(7, 1300, lattice="honeycomb-armchair", width=width)
    stretched = chebyshev.stretch(hamiltonian, flux)
    assert stretched.n > 2 * chebyshev.SLAB

    def start(r: int) -> np.ndarray:
        return np.random.default_rng(r).normal(size=hamiltonian.n)

    ways = [
        chebyshev.moments_of(stretched, start, 50, vectors=3, compiled=way) for way in (True, False)
    ]
    np.testing.assert_allclose(ways[0], ways[1], rtol=0, atol=1e-12 * hamiltonian.n)


def test_without_numba() -> None:
    """Where numba is missing, everything is there and gives the same numbers."""
    code = (
        "import sys; sys.modules['numba'] = None\n"
        "from ribbon.analysis import chebyshev, chebyshev_compiled\n"
        "from ribbon.analysis.moments import spectral_moments\n"
        "from ribbon.hopping import Hopping, assemble\n"
        "from ribbon.lattice import close_strip, lay_strip\n"
        "strip = lay_strip('square', rows=3, length=8)\n"
        "ring = close_strip(strip, half_twists=1, orbital='s')\n"
        "found = spectral_moments(assemble(ring, Hopping()), 12, flux=0.2, vectors=2)\n"
        "print(chebyshev_compiled.sweep, found.values.tolist())\n"
    )
    command = [sys.executable, "-W", "error", "-c", code]
    done = subprocess.run(command, capture_output=True, text=True, check=False, timeout=60)
    assert (done.returncode, done.stderr) == (0, "")
    word, _, numbers = done.stdout.partition(" ")
    strip = lay_strip("square", rows=3, length=8)
    here = assemble(close_strip(strip, half_twists=1, orbital="s"), Hopping())
    wanted = spectral_moments(here, 12, flux=0.2, vectors=2).values
    assert word == "None"
    np.testing.assert_allclose(
        np.array(numbers.strip()[1:-1].split(","), float), wanted, rtol=0, atol=1e-12
    )


def test_a_kernel_that_fails_is_not_used(monkeypatch: pytest.MonkeyPatch) -> None:
    """One that numba refuses, or that counts wrongly, gives way to scipy."""
    pytest.importorskip("numba")

    def refused(bonds: Any, even: Any, odd: Any, sums: Any, piece: int) -> None:
        sums[0] = object()

    def wrong(bonds: Any, even: Any, odd: Any, sums: Any, piece: int) -> None:
        sums[:] = 2.0

    for broken in (refused, wrong):
        monkeypatch.setattr(chebyshev_compiled, "_sweep", broken)
        assert chebyshev_compiled._compile() is None
    monkeypatch.setattr(chebyshev_compiled, "numba", None)
    assert chebyshev_compiled._compile() is None


def test_nowhere_to_keep_compiled_code(monkeypatch: pytest.MonkeyPatch) -> None:
    """Read-only installations compile anew, which numba says by a RuntimeError."""
    numba = pytest.importorskip("numba")
    plain = numba.njit

    def njit(*, cache: bool = False, **options: Any) -> Any:
        if cache:
            raise RuntimeError("cannot cache function: no locator available")
        return plain(**options)

    monkeypatch.setattr(numba, "njit", njit)
    assert chebyshev_compiled._compile() is not None


def test_importing_the_package_does_not_load_numba() -> None:
    """It takes longer than the rest."""
    code = "import sys, ribbon.analysis, ribbon.analysis.moments; print('numba' in sys.modules)"
    command = [sys.executable, "-c", code]
    done = subprocess.run(command, capture_output=True, text=True, check=True, timeout=60)
    assert done.stdout.strip() == "False"


# --- shapes --------------------------------------------------------------------------------------


@pytest.mark.parametrize("count", [2, 9, 64])
def test_jackson_kernel(count: int) -> None:
    """g_0 = 1, g_1 = cos(pi/(N + 1)), never negative, and its variance.

    Weisse et al., Rev. Mod. Phys. 78, 275 (2006): (N - a^2 (N - 1))/(2 (N + 1)) (1 - cos(2 pi /
    (N + 1))) about a; 0.002298272139 for N = 64 and a = 0, (pi/N)^2 for many moments.
    """
    factors = jackson(count)
    assert factors[0] == pytest.approx(1, abs=1e-14)
    assert factors[1] == pytest.approx(math.cos(math.pi / (count + 1)), abs=1e-14)
    x = np.cos(np.linspace(0.01, 3.13, 400))
    for a in (0.0, 0.5, -0.93):
        one = np.cos(np.arange(count) * math.acos(a))[None]
        assert jackson_series(one, x)[0].min() > -1e-12
        at = nodes(count, 0.0, 1.0)
        weights = point_weights(one * factors)[0]
        variance = float(weights @ (at - a) ** 2)
        formula = (count - a * a * (count - 1)) / (2 * (count + 1))
        formula *= 1 - math.cos(2 * math.pi / (count + 1))
        # exact at a = 0; the published formula leaves out the shift of the mean elsewhere
        shift = (a * (1 - factors[1])) ** 2
        assert variance == pytest.approx(formula, abs=1e-12 if a == 0 else 1.01 * shift)
    if count == 64:
        zero = point_weights(np.cos(np.arange(64) * math.pi / 2)[None] * factors)[0]
        assert float(zero @ nodes(64, 0.0, 1.0) ** 2) == pytest.approx(0.002298272139, abs=1e-12)


def test_jackson_density_of_a_level_in_the_middle() -> None:
    """One level: width as `Density.broadening` says, never negative, integral by the analytic
    series equal to the trapezoidal sum (numpy) of the density.
    """
    hamiltonian = assemble(Network.from_pairs([(0, 1), (1, 2)]), Hopping())
    moments = spectral_moments(hamiltonian, 400)
    found = moments_density(moments, energies=np.linspace(-0.7, 0.7, 8001))
    assert found.broadening == moments.resolution == pytest.approx(math.pi * moments.half / 400)
    variance = trapezoid(found.density * found.energies**2, found.energies)
    assert math.sqrt(variance) == pytest.approx(found.broadening, rel=0.01)
    assert found.density.min() >= -1e-12
    steps = np.diff(found.energies) * (found.density[1:] + found.density[:-1]) / 2
    rise = found.integrated[0] + np.cumsum(steps)
    np.testing.assert_allclose(found.integrated[1:], rise, rtol=0, atol=1e-5)
    assert found.integrated[4000] == pytest.approx(1.5, abs=1e-9)
    outside = moments_density(moments, energies=[-9.0, 9.0])
    assert outside.density.tolist() == [0, 0]
    assert outside.integrated.tolist() == pytest.approx([0, 3], abs=1e-12)


def test_jackson_density_on_its_own_points() -> None:
    """Twice as many points as moments, ascending; counts and integral are the sites."""
    hamiltonian = disordered(4, 30)
    found = moments_density(spectral_moments(hamiltonian, 150))
    assert (found.energies.size, found.method, found.error) == (300, "moments", None)
    assert np.all(np.diff(found.energies) > 0)
    assert found.counts.sum() == pytest.approx(120, abs=1e-9)
    assert trapezoid(found.density, found.energies) == pytest.approx(120, rel=1e-2)
    assert found.density.min() >= -1e-10


@pytest.mark.parametrize("flux", FLUXES)
@pytest.mark.parametrize("case", RINGS, ids=names)
def test_moments_give_the_density_of_the_levels(
    hamiltonian_of: Build, case: Case, flux: float
) -> None:
    """A Gaussian on every brute-force level (``math``), at, between and beyond them."""
    levels = case.levels(flux)
    for width in (0.4, 0.05):
        grid = np.concatenate([levels[::7], np.linspace(-7, 7, 41)])
        found = density_of_states(
            hamiltonian_of(case), broadening=width, flux=flux, energies=grid, method="moments"
        )
        wanted = np.array([gaussians(levels, e, width) for e in grid.tolist()])
        below = [
            sum((1 + math.erf((e - level) / width / math.sqrt(2))) / 2 for level in levels.tolist())
            for e in grid.tolist()
        ]
        peak = levels.size / width / math.sqrt(2 * math.pi)
        np.testing.assert_allclose(found.density, wanted, rtol=0, atol=SERIES * peak)
        np.testing.assert_allclose(found.integrated, below, rtol=0, atol=SERIES * levels.size)


def test_totals_of_a_moments_density() -> None:
    """Integral, last integrated value and counts are the number of sites, at any grid."""
    hamiltonian = disordered(6, 40)
    found = density_of_states(hamiltonian, broadening=0.2, method="moments")
    assert trapezoid(found.density, found.energies) == pytest.approx(240, abs=1e-5)
    assert found.integrated[-1] == pytest.approx(240, abs=1e-5)
    assert found.counts.sum() == pytest.approx(240, abs=1e-5)
    assert found.counts.size == found.edges.size - 1
    assert (found.levels, found.complete, found.unit) == (240, True, "t")
    for array in (found.density, found.counts, found.integrated, found.edges):
        assert not array.flags.writeable


def test_a_broadening_too_fine_for_the_grid_keeps_the_integral_and_its_error() -> None:
    """The mean over each step, exactly as for levels."""
    moments = spectral_moments(ring(7), 50_001, vectors=2)
    found = moments_density(moments, broadening=2e-4)
    step = found.energies[1] - found.energies[0]
    assert step > found.broadening
    assert found.error is not None
    assert found.error.shape == found.energies.shape
    assert found.density.sum() * step == pytest.approx(7, rel=1e-6)


@pytest.mark.parametrize("flux", [0.0, 0.27])
def test_integrated_density_counts_the_levels_below_a_gap(flux: float) -> None:
    """Far from every level it is the whole number of the law of inertia (`count_below`)."""
    strip = lay_strip("honeycomb-armchair", rows=4, length=12)
    closed = close_strip(strip, half_twists=0)
    hamiltonian = assemble(closed, Hopping(disorder=0.3, seed=2))
    levels = np.linalg.eigvalsh(hamiltonian.matrix(flux).toarray())
    widest = np.argsort(np.diff(levels))[-3:]
    for k in widest.tolist():
        energy, gap = (levels[k] + levels[k + 1]) / 2, levels[k + 1] - levels[k]
        found = density_of_states(
            hamiltonian, broadening=gap / 14, flux=flux, energies=[energy], method="moments"
        )
        wanted = count_below(hamiltonian, float(energy), flux=flux)
        assert found.integrated[0] == pytest.approx(wanted, abs=1e-4)
        assert wanted == k + 1


def honeycomb_bulk(energy: float) -> float:
    """Levels per site and energy: E. W. Hobson & A. Nierenberg, Phys. Rev. 89, 662 (1953) [M]."""
    e = abs(energy)
    if not 0 < e < 3:
        return 0.0
    z0, z1 = (1 + e) ** 2 - (e * e - 1) ** 2 / 4, 4 * e
    z0, z1 = (z1, z0) if e > 1 else (z0, z1)
    return e / np.pi**2 / math.sqrt(z0) * float(ellipk(z1 / z0))


def test_a_large_honeycomb_ring_has_the_bulk_density() -> None:
    """Random vectors: the closed form, folded with the Gaussian (scipy.integrate.quad).

    Within 3 %: edges are 1/80 of the sites, and the error bar 0.3 %.
    """
    strip = lay_strip("honeycomb-zigzag", rows=80, length=75)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping())
    energies, width = [0.45, 0.6, -0.6, 1.4, 1.8, -2.2, 2.5], 0.07
    found = density_of_states(hamiltonian, broadening=width, energies=energies, method="moments")
    assert found.error is not None
    wanted = np.array(
        [
            quad(
                lambda e, at=at: honeycomb_bulk(e) * math.exp(-(((at - e) / width) ** 2) / 2),
                at - 7 * width,
                at + 7 * width,
                limit=200,
                points=[p for p in (-1, 0, 1) if abs(p - at) < 7 * width] or None,
            )[0]
            / (width * math.sqrt(2 * math.pi))
            for at in energies
        ]
    )
    np.testing.assert_allclose(found.density / strip.n / wanted, 1.0, rtol=0, atol=0.03)
    assert np.all(found.error / found.density < 0.005)
    exact = density_of_states(hamiltonian, broadening=width, energies=energies)
    assert (exact.method, exact.error) == ("levels", None)
    off = np.abs(found.density - exact.density) / found.error
    assert off.max() < 4


def test_the_way_is_chosen_by_the_ring() -> None:
    """Blocks or a small matrix: levels; else moments; and what is asked for is done."""
    clean, small, large = ring(3000), disordered(5, 20), disordered(20, 126, width=0.5)
    ways = [density_of_states(h, broadening=0.5).method for h in (clean, small, large)]
    assert ways == ["levels", "levels", "moments"]
    small_ways = [
        density_of_states(small, broadening=0.5, method="moments", energies=[0.3]),
        density_of_states(small, broadening=0.5, method="exact", energies=[0.3]),
    ]
    assert [found.method for found in small_ways] == ["moments", "levels"]
    assert small_ways[0].density == pytest.approx(small_ways[1].density, rel=1e-6)


# --- single sites --------------------------------------------------------------------------------


@pytest.mark.parametrize("flux", [0.0, 0.137])
@pytest.mark.parametrize("case", RINGS[:3], ids=names)
def test_local_density_is_a_function_of_the_matrix(
    hamiltonian_of: Build, case: Case, flux: float
) -> None:
    """The diagonal of a Gaussian of the brute-force matrix (scipy.linalg.eigh)."""
    width, energies = 0.3, [-1.1, 0.0, 0.9]
    levels, states = scipy.linalg.eigh(case.matrix(flux))
    hamiltonian = hamiltonian_of(case)
    chosen = [0, case.sites() - 1, 5, 5]
    found = local_density_moments(
        hamiltonian, chosen, broadening=width, flux=flux, energies=energies
    )
    assert isinstance(found, LocalDensity)
    assert found.sites.tolist() == chosen
    for column, energy in enumerate(energies):
        shape = np.exp(-(((energy - levels) / width) ** 2) / 2) / (width * math.sqrt(2 * math.pi))
        wanted = (np.abs(states) ** 2 @ shape)[chosen]
        np.testing.assert_allclose(found.density[:, column], wanted, rtol=0, atol=SERIES * 2)


@pytest.mark.parametrize("flux", [0.0, 0.3])
def test_local_densities_sum_to_the_total(flux: float) -> None:
    """Over all sites, on the default grid, in several batches: `density_of_states` (exact)."""
    hamiltonian = disordered(5, 60)
    found = local_density_moments(hamiltonian, range(300), broadening=0.2, flux=flux)
    total = density_of_states(
        hamiltonian, broadening=0.2, flux=flux, energies=found.energies, method="exact"
    )
    atol = SERIES * 300 / 0.2
    np.testing.assert_allclose(found.density.sum(axis=0), total.density, rtol=0, atol=atol)
    np.testing.assert_allclose(found.integrated.sum(axis=0), total.integrated, rtol=0, atol=atol)
    np.testing.assert_allclose(found.integrated[:, -1], 1, rtol=0, atol=1e-6)
    assert not found.density.flags.writeable


# --- refusals ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("problem", "sentence", "call"),
    [
        (BadInput, "1 moments are asked for", lambda h: spectral_moments(h, 1)),
        (BadInput, r"2\.5 moments are asked for", lambda h: spectral_moments(h, 2.5)),
        (TooLarge, "100,000 moments are more", lambda h: spectral_moments(h, 100_000)),
        (BadInput, "the seed -1 must be", lambda h: spectral_moments(h, 9, seed=-1)),
        (BadInput, "vectors = 1 must be", lambda h: spectral_moments(h, 9, vectors=1)),
        (BadInput, "vectors = 'some' must", lambda h: spectral_moments(h, 9, vectors="some")),
        (BadInput, r"broadening = -1", lambda h: moments_for(h, -1)),
        (BadInput, r"broadening = nan", lambda h: moments_for(h, math.nan)),
        (TooLarge, r"needs 1,000,00\d moments .* 4 t wide", lambda h: moments_for(h, 1e-5)),
        (
            BadInput,
            r"broadening = 0 must be|broadening = 0\.0 must be",
            lambda h: moments_density(spectral_moments(h, 9), broadening=0.0),
        ),
        (
            BadInput,
            r"finer than 11 moments resolve; ask for 1 or more",
            lambda h: moments_density(spectral_moments(h, 11), broadening=0.9),
        ),
        (
            BadInput,
            "method = 'kpm' must be",
            lambda h: density_of_states(h, broadening=1.0, method="kpm"),
        ),
        (
            BadInput,
            "one or more site numbers",
            lambda h: local_density_moments(h, [], broadening=1.0),
        ),
        (
            BadInput,
            "one or more site numbers",
            lambda h: local_density_moments(h, [0.5], broadening=1.0),
        ),
        (
            BadInput,
            "from 0 to 6; there are 6",
            lambda h: local_density_moments(h, [0, 6], broadening=1.0),
        ),
        (
            BadInput,
            "from -1 to -1",
            lambda h: local_density_moments(h, -1, broadening=1.0),
        ),
    ],
)
def test_refusals(problem: type[Exception], sentence: str, call: Callable[[Any], object]) -> None:
    """Every number out of range is told with what would be right."""
    with pytest.raises(problem, match=sentence):
        call(ring(6))
