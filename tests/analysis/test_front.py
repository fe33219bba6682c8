"""The quick count along a band: against dense counts, and what it does where it must not be quick.

Claim under test: the count is the number of levels below the energy unless a level lies within
the radius; where the radius is not as small as was asked for, the way that stands every energy
counts. Sylvester's law of inertia: B. N. Parlett, The Symmetric Eigenvalue Problem (1998) [M].
"""

from __future__ import annotations

from typing import Any

import brute
import closed_forms as known
import numpy as np
import pytest
from brute import Case
from scipy.sparse import csr_array, random_array
from scipy.sparse.linalg import spsolve

from ribbon.analysis import count_below, find_gap, front
from ribbon.analysis.counting import Order, count_negative, find_order
from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble, draw_vacancies
from ribbon.lattice import Network, close_strip, lay_strip, remove_sites

RINGS = 60
SLACK = 2e-13  # rounding of the dense levels, in parts of the scale

needs_numba = pytest.mark.skipif(front.compiled() is None, reason="numba is not installed")


@pytest.fixture
def any_size(monkeypatch: pytest.MonkeyPatch) -> None:
    """The quick way for rings small enough for a dense judge."""
    monkeypatch.setattr(front, "FEWEST", 0)


def random_matrix(number: int) -> tuple[csr_array, np.random.Generator] | None:
    """A random ring of up to 900 sites; None where the seam does not close."""
    rng = np.random.default_rng([77, number])
    rows, twists = int(rng.integers(1, 7)), int(rng.integers(0, 3))
    length = float(rng.integers(8, 400 // (rows * 2) + 9)) + 0.5 * (rng.random() < 0.2)
    shells = int(rng.integers(1, 4)) if rng.random() < 0.3 else 1
    strip = lay_strip(brute.LATTICES[number % 6], rows=rows, length=length)
    orbital: Any = ["s", "pz"][number % 2]
    try:
        ring = close_strip(strip, half_twists=twists, orbital=orbital, shells=shells)
    except BadInput:
        return None
    if ring.n > 900:
        return None
    if rng.random() < 0.3:
        ring = remove_sites(ring, draw_vacancies(ring.n, rng.choice([0.02, 0.15]), seed=number))
    width = float(rng.choice([0, 0, 0.05, 0.3, 2, 8]))
    hopping = Hopping(shells=(1.0, *rng.uniform(-0.5, 0.5, shells - 1)), disorder=width, unit="t")
    flux = float(rng.choice([0.0, 0.5, rng.uniform(-1, 1)]))
    gauge: Any = "seam" if rng.random() < 0.8 else "uniform"
    return assemble(ring, hopping).matrix(flux, gauge=gauge), rng


def energies_of(levels: np.ndarray, rng: np.random.Generator) -> list[float]:
    """Special energies, levels, 1e-13 to 1e-9 beside levels, and anywhere."""
    beside = rng.choice([-1, 1], 4) * 10.0 ** rng.uniform(-13, -9, 4)
    drawn = (rng.choice(levels, 3), rng.choice(levels, 4) + beside)
    inside = rng.uniform(levels[0], levels[-1], 3)
    return [0.0, 1.0, -1.0, 2.0, 0.3, *np.concatenate([*drawn, inside]).tolist()]


def assert_right(count: Any, levels: np.ndarray, energy: float, scale: float) -> None:
    """Right unless a level lies within the radius."""
    reach = count.radius + SLACK * scale
    fewest, most = (np.count_nonzero(levels < energy + sign * reach) for sign in (-1, 1))
    assert fewest <= count.below <= most, (energy, count)


@needs_numba
@pytest.mark.parametrize("kind", range(6))
def test_no_wrong_count_goes_unflagged(kind: int, any_size: None) -> None:
    """60 random rings of each lattice, 15 energies each, levels among them."""
    quick = counted = 0
    for number in range(kind, 6 * RINGS, 6):
        made = random_matrix(number)
        if made is None:
            continue
        matrix, rng = made
        levels = np.linalg.eigvalsh(matrix.toarray())
        order = find_order(matrix)
        for energy in energies_of(levels, rng):
            scale = float(abs(matrix).sum(axis=1).max()) + abs(energy)
            if order.band is not None:
                found = front.count_along(matrix, energy, order.band)
                if found is not None:
                    assert_right(found, levels, energy, scale)
                    quick += 1
            count = count_negative(matrix, energy, order)
            assert count.radius < 1e-10 * scale
            assert_right(count, levels, energy, scale)
            counted += 1
    assert quick > counted / 2
    assert counted > 300


@needs_numba
@pytest.mark.parametrize(
    ("case", "energy"),
    [
        (Case("square", 7, 661, 0), 0.0),
        (Case("square", 8, 600, 0), 1 + 1e-12),
        (Case("square", 10, 1000, 1, -1), -1.0),
        (Case("honeycomb-zigzag", 4, 800, 1), 1e-14),
        (Case("honeycomb-zigzag", 10, 500, 1, -1), 1.0),
        (Case("honeycomb-armchair", 11, 400, 1), 1.0),
        (Case("honeycomb-armchair", 5, 600, 1, -1), 0.0),
    ],
)
def test_special_energies_of_clean_rings(case: Case, energy: float, ring_of: Any) -> None:
    """Closed forms; unpivoted elimination gives 408 for 214 at such energies."""
    form = {
        "square": known.square,
        "honeycomb-zigzag": known.zigzag_by_blocks,
        "honeycomb-armchair": known.armchair,
    }[case.lattice]
    length = round(case.length)
    levels = form(case.rows, length, half_twists=case.half_twists, sigma=case.sigma, flux=0.0)
    matrix = assemble(ring_of(case), Hopping(shells=(1.0,), unit="t")).matrix()
    order = find_order(matrix)
    assert order.band is not None
    for near in (energy, energy - 3e-10, energy + 3e-10):
        assert_right(count_negative(matrix, near, order), levels, near, 4.0)


@needs_numba
def test_the_quick_way_is_taken_where_it_should_be() -> None:
    """20,000 disordered sites, real and complex: a radius above rounding, below the tolerance."""
    ring = close_strip(lay_strip("square", rows=10, length=2000), half_twists=0)
    hamiltonian = assemble(ring, Hopping(disorder=2.0, seed=3, unit="t"))
    for flux in (0.0, 0.3):
        matrix = hamiltonian.matrix(flux, gauge="seam")
        order = find_order(matrix)
        count = count_negative(matrix, 0.3, order)
        assert 1e-14 < count.radius < 2e-10
        slow = Order(structure=order.structure)
        slow.__dict__["band"] = None
        assert count_negative(matrix, 0.3, slow).below == count.below


@needs_numba
def test_a_narrower_radius_is_had_from_the_slow_way() -> None:
    """``within`` below what the quick way can promise."""
    ring = close_strip(lay_strip("square", rows=5, length=800), half_twists=0)
    matrix = assemble(ring, Hopping(disorder=2.0, seed=3, unit="t")).matrix()
    order = find_order(matrix)
    quick, slow = (count_negative(matrix, 0.3, order, within=w) for w in (1e-9, 1e-13))
    assert quick.below == slow.below
    assert slow.radius < quick.radius < 1e-9


@needs_numba
def test_every_count_agrees_without_compiled_code(monkeypatch: pytest.MonkeyPatch) -> None:
    """The same numbers where numba is missing."""
    ring = close_strip(
        lay_strip("honeycomb-armchair", rows=7, length=200), half_twists=1, orbital="pz"
    )
    hopping = Hopping(disorder=1.0, seed=3, unit="t")
    with_code = [count_below(assemble(ring, hopping), e, flux=0.2) for e in (-1.0, 0.0, 0.7)]
    monkeypatch.setattr(front, "compiled", lambda: None)
    assert front.find_band(assemble(ring, hopping).matrix()) is None
    without = [count_below(assemble(ring, hopping), e, flux=0.2) for e in (-1.0, 0.0, 0.7)]
    assert without == with_code


@needs_numba
def test_rows_in_any_order_are_brought_to_a_band() -> None:
    """A ring with its sites shuffled, handed over as bare bonds."""
    ring = close_strip(lay_strip("triangular", rows=4, length=600), half_twists=0)
    shuffled = np.random.default_rng(4).permutation(ring.n)
    pairs = zip(shuffled[ring.bonds.tail], shuffled[ring.bonds.head], strict=True)
    energies = np.random.default_rng(5).uniform(-1, 1, ring.n)
    network = Network.from_pairs([(int(a), int(b)) for a, b in pairs])
    matrix = assemble(network, Hopping(site_energy=energies, unit="t")).matrix()
    order = find_order(matrix)
    assert order.band is not None
    assert len(order.band.pieces) == 1
    levels = np.linalg.eigvalsh(matrix.toarray())
    for energy in (-2.0, 0.1, 1.5):
        assert_right(count_negative(matrix, energy, order), levels, energy, 7.0)


@needs_numba
def test_what_has_no_band_or_is_complex_all_along_is_left_to_the_slow_way() -> None:
    """A random graph; a ring in the uniform gauge."""
    tangle = random_array((3000, 3000), density=2e-3, rng=np.random.default_rng(1))
    assert front.find_band(csr_array(tangle + tangle.T)) is None
    ring = close_strip(lay_strip("square", rows=3, length=700), half_twists=0)
    hamiltonian = assemble(ring, Hopping(disorder=1.0, seed=1, unit="t"))
    matrix = hamiltonian.matrix(0.3)
    order = find_order(matrix)
    assert order.band is not None
    assert front.count_along(matrix, 0.4, order.band) is None
    assert front.factor_along(matrix, 0.4, order.band) is None
    seam = hamiltonian.matrix(0.3, gauge="seam")
    assert count_negative(matrix, 0.4, order).below == count_negative(seam, 0.4, order).below


@needs_numba
@pytest.mark.parametrize("flux", [0.0, 0.3])
def test_solves_agree_with_a_general_solver(flux: float) -> None:
    """Real and complex right-hand sides against scipy's sparse solver."""
    ring = close_strip(lay_strip("kagome", rows=4, length=500), half_twists=0)
    matrix = assemble(ring, Hopping(disorder=2.0, seed=1, unit="t")).matrix(flux, gauge="seam")
    band = find_order(matrix).band
    assert band is not None
    factor = front.factor_along(matrix, 0.3, band)
    assert factor is not None
    rng = np.random.default_rng(2)
    given = rng.standard_normal(ring.n) + 1j * rng.standard_normal(ring.n) * (flux > 0)
    given = given if flux else given.real
    found = np.empty_like(given)
    found[band.sites] = factor.solve(given[band.sites])
    shifted = (matrix - 0.3 * csr_array(np.eye(ring.n))).tocsc()
    expected = spsolve(shifted, given)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-8 * np.abs(expected).max())


@needs_numba
def test_the_gap_of_a_long_disordered_ring() -> None:
    """Frontier levels of 2,400 sites by counts alone, against the dense spectrum."""
    ring = close_strip(lay_strip("square", rows=4, length=600), half_twists=0)
    hamiltonian = assemble(ring, Hopping(disorder=2.0, seed=6, unit="t"))
    gap = find_gap(hamiltonian, electrons=2000)
    levels = np.linalg.eigvalsh(hamiltonian.matrix().toarray())
    np.testing.assert_allclose([gap.lower, gap.upper], levels[[999, 1000]], rtol=0, atol=1e-10)
