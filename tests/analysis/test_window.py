"""Shift and invert: every level of a window, with and without compiled code.

Residuals are those of the assembled matrix, orthonormality that of the plain product; dense
levels and closed forms judge.
"""

from __future__ import annotations

import subprocess
import sys
from typing import Any

import closed_forms as known
import numpy as np
import pytest
from brute import Case
from scipy.sparse.linalg import eigsh

from ribbon.analysis import front, levels_between, levels_near
from ribbon.analysis.lanczos import largest
from ribbon.analysis.window import nearest_levels
from ribbon.errors import NotCertified
from ribbon.hopping import Hamiltonian, Hopping, assemble
from ribbon.lattice import close_strip, lay_strip


@pytest.fixture(params=["compiled", "scipy"])
def way(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Both ways to solve; the compiled one for small rings too."""
    if request.param == "scipy":
        monkeypatch.setattr(front, "compiled", lambda: None)
    elif front.compiled() is None:
        pytest.skip("numba is not installed")
    monkeypatch.setattr(front, "FEWEST", 0)
    return str(request.param)


def disordered(lattice: str, rows: int, length: float, width: float) -> Hamiltonian:
    """A ring with a little or much disorder."""
    ring = close_strip(lay_strip(lattice, rows=rows, length=length), half_twists=0)
    return assemble(ring, Hopping(disorder=width, seed=8, unit="t"))


def barely_clean(case: Case, ring_of: Any) -> Hamiltonian:
    """Clean to within rounding, and not clean in the eyes of the library."""
    ring = ring_of(case)
    site_energy = np.zeros(ring.n)
    site_energy[0] = 1e-300
    return assemble(ring, Hopping(shells=(1.0,), site_energy=site_energy))


def assert_states(hamiltonian: Hamiltonian, flux: float, found: Any) -> None:
    """Residuals to 1e-9 of the scale, orthonormal to 1e-10, as many as counted."""
    matrix, states = hamiltonian.matrix(flux), found.states
    residual = np.linalg.norm(matrix @ states - states * found.energies, axis=0)
    assert residual.max(initial=0.0) < 1e-9 * hamiltonian.scale
    assert found.residual < 1e-9 * hamiltonian.scale
    gram = states.conj().T @ states
    np.testing.assert_allclose(gram, np.eye(found.m), rtol=0, atol=1e-10)
    assert found.certificate.complete


@pytest.mark.parametrize("flux", [0.0, 0.3])
@pytest.mark.parametrize("lattice", ["square", "honeycomb-armchair", "lieb"])
def test_disordered_windows_equal_dense_ones(lattice: str, flux: float, way: str) -> None:
    """20 levels about 0.3 and about a level, and slopes against finite differences."""
    hamiltonian = disordered(lattice, 5, 60, 2.0)
    levels = np.linalg.eigvalsh(hamiltonian.matrix(flux).toarray())
    for energy in (0.3, float(levels[levels.size // 2])):
        found = levels_near(hamiltonian, energy, count=20, flux=flux, states=True, method="sparse")
        np.testing.assert_allclose(found.energies, levels[found.index], rtol=0, atol=1e-11)
        nearest = np.sort(np.abs(levels - energy))[:20]
        np.testing.assert_allclose(np.sort(np.abs(found.energies - energy)), nearest, atol=1e-11)
        assert_states(hamiltonian, flux, found)
    step = 1e-5
    moved = [np.linalg.eigvalsh(hamiltonian.matrix(flux + d).toarray()) for d in (-step, step)]
    slopes = (moved[1] - moved[0])[found.index] / (2 * step)
    np.testing.assert_allclose(found.slopes, slopes, rtol=0, atol=1e-6)


def test_wide_windows_are_sliced(way: str) -> None:
    """Half of the 600 levels, and empty windows."""
    hamiltonian = disordered("square", 5, 120, 1.0)
    levels = np.linalg.eigvalsh(hamiltonian.matrix().toarray())
    found = levels_between(hamiltonian, -1.0, 1.0, states=True, method="sparse")
    inside = levels[(levels > -1) & (levels < 1)]
    assert inside.size > 200
    np.testing.assert_allclose(found.energies, inside, rtol=0, atol=1e-11)
    assert_states(hamiltonian, 0.0, found)
    assert levels_between(hamiltonian, 9.0, 10.0, method="sparse").m == 0


def test_pairs_that_the_plain_call_loses_are_found(way: str, ring_of: Any) -> None:
    """Clean square ring of 6,000 sites, full of exact pairs; closed form of the ring.

    The plain call at the tolerance 1e-4 brings 20 levels; within their reach there are 26.
    """
    case = Case("square", 6, 1000, 0)
    levels = known.square(6, 1000, half_twists=0, sigma=1, flux=0.0)
    hamiltonian = barely_clean(case, ring_of)
    start = np.random.default_rng(0).standard_normal(hamiltonian.n)
    plain = eigsh(hamiltonian.matrix(), k=20, sigma=-0.5187, v0=start, tol=1e-4)[0]
    reach = float(np.abs(plain + 0.5187).max()) - 1e-7
    true = levels[np.abs(levels + 0.5187) < reach]
    assert np.count_nonzero(np.abs(plain + 0.5187) < reach) < true.size
    found = levels_between(
        hamiltonian, -0.5187 - reach, -0.5187 + reach, states=True, method="sparse"
    )
    np.testing.assert_allclose(found.energies, np.sort(true), rtol=0, atol=1e-10)
    assert_states(hamiltonian, 0.0, found)


@pytest.mark.parametrize("energy", [0.0, 1.0, -1.0])
def test_targets_on_levels_of_high_multiplicity(energy: float, way: str, ring_of: Any) -> None:
    """A flat band of the Lieb ribbon and round energies: the whole shell."""
    case = Case("lieb", 5, 24, 0)
    levels = known.lieb(3, 24, half_twists=0, sigma=1, flux=0.0)
    found = levels_near(barely_clean(case, ring_of), energy, count=3, states=True, method="sparse")
    first, last = found.index[0], found.index[-1]
    np.testing.assert_allclose(found.energies, levels[first : last + 1], rtol=0, atol=1e-9)
    if energy == 0:
        assert found.m == np.count_nonzero(np.abs(levels) < 1e-9)
    assert_states(barely_clean(case, ring_of), 0.0, found)


PLAIN = """
from scipy.sparse import csr_array, diags_array
from scipy.sparse.linalg import eigsh
chain = diags_array([-1, -1, -1, -1], offsets=[-999, -1, 1, 999], shape=(1000, 1000), dtype=float)
eigsh(csr_array(chain), k=6, sigma=0.0)
"""


def test_the_plain_call_breaks_on_a_level_and_ours_does_not(ring_of: Any) -> None:
    """A chain of 1,000 sites closed into a ring has two levels at zero: E - H is singular.

    The plain call raises; run in a process of its own, because SuperLU can do worse.
    """
    plain = subprocess.run([sys.executable, "-c", PLAIN], capture_output=True, check=False)
    assert plain.returncode != 0
    found = levels_near(
        barely_clean(Case("square", 1, 1000, 0), ring_of), 0.0, count=6, method="sparse"
    )
    levels = np.sort(-2 * np.cos(2 * np.pi * np.arange(1000) / 1000))
    np.testing.assert_allclose(found.energies, levels[found.index], rtol=0, atol=1e-10)
    assert np.count_nonzero(np.abs(found.energies) < 1e-9) == 2


def test_windows_agree_with_the_plain_call(way: str) -> None:
    """Where nothing is degenerate the plain call is right: 3,000 disordered sites."""
    matrix = disordered("square", 10, 300, 2.0).matrix()
    expected = np.sort(eigsh(matrix, k=12, sigma=0.31, return_eigenvectors=False))
    found = nearest_levels(matrix, 0.31, 12, 6.0, band=front.find_band(matrix))
    np.testing.assert_allclose(found.energies, expected, rtol=0, atol=1e-11)


def test_a_matrix_that_cannot_be_factorised_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    """No inverse stands its test: a sentence, not a wrong level."""
    monkeypatch.setattr("ribbon.analysis.window.ACCURATE", -1.0)
    matrix = disordered("square", 5, 60, 2.0).matrix()
    with pytest.raises(NotCertified, match="cannot be factorised"):
        nearest_levels(matrix, 0.31, 12, 6.0)


@pytest.mark.parametrize("starts", [1, 3])
@pytest.mark.parametrize("kind", [np.float64, np.complex128])
def test_largest_eigenvalues_of_a_known_operator(kind: Any, starts: int) -> None:
    """Diagonal operators, one with a level of multiplicity three."""
    rng = np.random.default_rng(1)
    values = np.concatenate([[50.0, 50.0, 50.0, -40.0], rng.uniform(-1, 1, 400)])
    begin = rng.standard_normal((starts, values.size)).astype(kind)
    found = largest(lambda vector: values * vector, begin, 4)
    gram = found.vectors.conj() @ found.vectors.T
    np.testing.assert_allclose(gram, np.eye(found.values.size), rtol=0, atol=1e-12)
    copies = np.count_nonzero(np.abs(found.values - 50) < 1e-9)
    assert 1 <= copies <= 3
    assert copies >= starts
