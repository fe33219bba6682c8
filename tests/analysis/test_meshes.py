"""Finer meshes of a ring: built and diagonalised for themselves, then orders and extrapolation.

The rule of refinement is written down here again (rows + 1 and columns doubled; zigzag rows
4 N + 2 and length 4-fold), the finer rings are assembled, and what `compare_continuum` says of
them must be there. Continuum solutions: M. Brey & H. A. Fertig, Phys. Rev. B 73, 235411 (2006);
K. Yakubo, Y. Avishai & D. Cohen, Phys. Rev. B 67, 125319 (2003).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from brute import Case
from scipy.optimize import brentq

from ribbon.analysis import all_levels, compare_continuum
from ribbon.analysis.dispersion import all_modes, mesh_of
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip

Build = Callable[..., Any]
MEMBER = 1e-9
ROOT3 = math.sqrt(3)


def ring(
    lattice: str,
    rows: int,
    length: float,
    half_twists: int = 1,
    orbital: str = "s",
    *,
    scale: float = 1.0,
    energy: float = 0.0,
) -> Any:
    """A ring with t = ``scale``; the spacing shrinks with the mesh, so that L and W may stay."""
    strip = lay_strip(lattice, rows=rows, length=length)
    closed = close_strip(strip, half_twists=half_twists, orbital=orbital)
    return assemble(closed, Hopping(shells=(scale,), site_energy=energy))


def refined(lattice: str, rows: int, length: float) -> tuple[int, float, float]:
    """Rows, length and hopping of the next mesh, by the rule."""
    if lattice == "honeycomb-zigzag":
        return 4 * rows + 2, 4 * length, 4.0
    return 2 * (rows + 1) - 1, 2 * length, 4.0 if lattice == "square" else 2.0


# --- every mesh is a ring ------------------------------------------------------------------------


@pytest.mark.parametrize("flux", [0.0, 0.27])
@pytest.mark.parametrize(
    ("case", "steps"),
    [
        (Case("square", 3, 5, 1), 2),
        (Case("square", 4, 6, 1, -1), 2),
        (Case("square", 4, 5, 2), 2),
        (Case("honeycomb-armchair", 4, 2.5, 1), 2),
        (Case("honeycomb-armchair", 5, 3, 3, -1), 2),
        (Case("honeycomb-armchair", 5, 2, 0), 2),
        (Case("honeycomb-zigzag", 2, 3, 1), 1),
        (Case("honeycomb-zigzag", 2, 4, 0), 1),
        (Case("honeycomb-zigzag", 3, 2.5, 1, -1), 1),
        (Case("honeycomb-zigzag", 3, 2.5, 1), 1),
        (Case("honeycomb-zigzag", 1, 1.5, 3), 2),
    ],
)
def test_levels_of_finer_meshes_are_levels_of_finer_rings(
    case: Case, steps: int, flux: float
) -> None:
    """Every value is a level of a matrix on that mesh, as often as it is claimed: no two modes of
    the ring are followed to one level. Width, circumference and zero are kept.
    """
    orbital = "s" if case.sigma == 1 else "pz"
    hamiltonian = ring(*case[:4], orbital, energy=0.3)
    found = compare_continuum(
        hamiltonian, levels=all_levels(hamiltonian, flux=flux), refinements=steps
    )
    rows, length, scale = case.rows, case.length, 1.0
    own = hamiltonian.ring.strip
    spacing, zero = own.spacing, found.zero
    assert abs(zero - (0.3 - (4 if case.lattice == "square" else 0))) < 1e-12
    for step in range(1, steps + 1):
        rows, length, factor = refined(case.lattice, rows, length)
        scale, spacing = scale * factor, spacing / (4 if "zigzag" in case.lattice else 2)
        strip = lay_strip(case.lattice, rows=rows, length=length, spacing=spacing)
        assert abs(strip.width - own.width) < 1e-12
        assert abs(strip.circumference - own.circumference) < 1e-12
        np.testing.assert_allclose(found.spacings[step], spacing, rtol=0, atol=1e-15)
        energy = zero + (4 * scale if case.lattice == "square" else 0.0)
        fine = assemble(
            close_strip(strip, half_twists=case.half_twists, orbital=orbital),
            Hopping(shells=(scale,), site_energy=energy),
        )
        if fine.n <= 200:  # brute force where it takes no time, else the matrix of the package
            levels = energy + scale * Case(case.lattice, rows, length, *case[3:5]).levels(flux)
        else:
            levels = np.linalg.eigvalsh(fine.matrix(flux).toarray())
        assert_members(found.meshes[step], levels)


def assert_members(values: np.ndarray, levels: np.ndarray) -> None:
    """Each value takes a level of its own, ascending (greedy; both within a tolerance)."""
    place = 0
    for value in np.sort(values):
        while place < levels.size and levels[place] < value - MEMBER:
            place += 1
        assert place < levels.size, value
        assert abs(levels[place] - value) < MEMBER, (value, levels[place])
        place += 1


@pytest.mark.parametrize("lattice", ["square", "honeycomb-zigzag", "honeycomb-armchair"])
def test_refinement_by_hand(lattice: str) -> None:
    """The values on the second mesh are those that the finer ring itself gives for its modes.

    Both comparisons are made and their levels nearest to zero looked up in one another: the same
    continuum values, and the first mesh of the finer ring is the second of the coarser.
    """
    rows, length = (6, 9) if lattice == "square" else (5, 6.5)
    if lattice == "honeycomb-armchair":
        rows, length = 5, 6
    coarse = ring(lattice, rows, length, energy=4.0 if lattice == "square" else 0.0)
    own = compare_continuum(coarse, flux=0.11, refinements=2)
    rows, length, scale = refined(lattice, rows, length)
    spacing = float(own.spacings[1])
    strip = lay_strip(lattice, rows=rows, length=length, spacing=spacing)
    fine = assemble(
        close_strip(strip, half_twists=1, orbital="s"),
        Hopping(shells=(scale,), site_energy=4 * scale if lattice == "square" else 0.0),
    )
    other = compare_continuum(fine, levels=all_levels(fine, flux=0.11), refinements=1)
    for i in range(own.level.size):
        near = np.abs(other.continuum - own.continuum[i]) < 1e-7
        near &= np.abs(other.energy - own.meshes[1, i]) < 1e-8
        assert near.any(), i
        assert np.abs(other.meshes[1, near] - own.meshes[2, i]).min() < 1e-7


# --- orders --------------------------------------------------------------------------------------


@pytest.mark.parametrize("half_twists", [0, 1])
def test_square_rings_converge_with_the_square_of_the_spacing(half_twists: int) -> None:
    """Order 2, and leading error -(a^2/12)(k^4 + kappa^4)/(k^2 + kappa^2) (Taylor of the cosine).

    Extrapolated levels reach the closed form (2 pi wave/L)^2 + (pi q/W)^2 to 1e-8.
    """
    hamiltonian = ring("square", 9, 40, half_twists, energy=4.0)
    found = compare_continuum(hamiltonian, flux=0.1, refinements=3)
    assert found.kind == "square"
    k = 2 * np.pi * found.modes.wave / 40
    kappa = np.pi * found.modes.band / 10
    exact = k**2 + kappa**2
    np.testing.assert_allclose(found.continuum, exact, rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.order, 2.0, rtol=0, atol=0.05)
    np.testing.assert_allclose(found.extrapolated / exact, 1.0, rtol=0, atol=1e-8)
    leading = -(k**4 + kappa**4) / 12 / exact
    np.testing.assert_allclose(found.errors[3] * 64 / leading, 1.0, rtol=0, atol=2e-3)
    assert np.all(np.abs(found.relative_error) > 1e-4)
    spacings = hamiltonian.ring.strip.spacing / 2.0 ** np.arange(4)
    np.testing.assert_allclose(found.spacings, spacings, rtol=0, atol=1e-15)


def test_armchair_rings_converge_by_their_transverse_mode() -> None:
    """Order 2 for the metallic mode, q = pi r/W - 4 pi/(3 sqrt 3 a) = 0; about 1 for all others.

    E = hbar v sqrt(k^2 + q^2), hbar v = 3 t a/2, which the extrapolation comes near to.
    """
    rows, length = 11, 8
    hamiltonian = ring("honeycomb-armchair", rows, length)
    found = compare_continuum(hamiltonian, flux=0.2, refinements=4)
    q = 2 * np.pi * found.modes.band / ((rows + 1) * ROOT3) - 4 * np.pi / (3 * ROOT3)
    k = 2 * np.pi * found.modes.wave / (3 * length)
    exact = found.modes.sign * 1.5 * np.hypot(k, q)
    np.testing.assert_allclose(found.continuum, exact, rtol=0, atol=1e-12)
    metallic = np.abs(q) < 1e-9
    assert 4 <= np.count_nonzero(metallic) < found.level.size
    np.testing.assert_allclose(found.order[metallic], 2.0, rtol=0, atol=0.05)
    np.testing.assert_allclose(found.order[~metallic], 1.0, rtol=0, atol=0.2)
    assert np.abs(found.meshes[-1] - exact)[~metallic].min() > 1e-4
    np.testing.assert_allclose(found.extrapolated, exact, rtol=0, atol=1e-7)


def test_zigzag_rings_converge_linearly() -> None:
    """Confined modes k = q/tan(qW): order about 1; Neville's extrapolation nears the formula.

    Both valleys, k = |2 pi wave/L| - K, solved by scipy's brentq, W = (3 N + 2) a/2.
    """
    rows, length = 10, 19
    hamiltonian = ring("honeycomb-zigzag", rows, length)
    found = compare_continuum(hamiltonian, levels=all_levels(hamiltonian, flux=0.1), refinements=4)
    width = (3 * rows + 2) / 2
    k = 2 * np.pi * np.abs(found.modes.wave) / (ROOT3 * length) - 2 * np.pi / (3 * ROOT3)
    confined = ((found.modes.band > 1) | (k * width < 1)) & (np.abs(found.continuum) < 0.35)
    assert np.count_nonzero(confined) >= 5
    for i in np.flatnonzero(confined):
        low, high = (found.modes.band[i] - 1 + 1e-9) * np.pi, (found.modes.band[i] - 1e-9) * np.pi
        x = brentq(lambda x, i=i: k[i] * width * math.sin(x) - x * math.cos(x), low, high)
        exact = found.modes.sign[i] * 1.5 * math.hypot(k[i], x / width)
        np.testing.assert_allclose(found.continuum[i], exact, rtol=0, atol=1e-10)
        assert abs(found.extrapolated[i] - exact) < 1e-6
        assert abs(found.meshes[-1, i] - exact) > 2e-6
    np.testing.assert_allclose(found.order[confined], 1.0, rtol=0, atol=0.1)


def test_extrapolation_uses_every_mesh() -> None:
    """Richardson by hand with two square meshes: (4 E(a/2) - E(a))/3 (L. F. Richardson 1911 [M]).

    Two zigzag meshes, errors in the spacing: (4 E(a/4) - E(a))/3; two armchair ones, where the
    odd terms turn their sign with each halving: (E(a) + 2 E(a/2))/3.
    """
    weights = {
        "square": (-1 / 3, 4 / 3),
        "honeycomb-zigzag": (-1 / 3, 4 / 3),
        "honeycomb-armchair": (1 / 3, 2 / 3),
    }
    for lattice, (first, second) in weights.items():
        rows = 5 if lattice != "honeycomb-zigzag" else 4
        found = compare_continuum(ring(lattice, rows, 8), refinements=1)
        wanted = first * found.meshes[0] + second * found.meshes[1]
        np.testing.assert_allclose(found.extrapolated, wanted, rtol=0, atol=1e-12)
        assert np.all(np.isfinite(found.order) | (np.abs(found.continuum - found.zero) < 1e-9))


# --- the spacing for an accuracy -----------------------------------------------------------------


@pytest.mark.parametrize("accuracy", [0.01, 0.002])
def test_at_the_spacing_told_the_error_is_the_one_asked_for(accuracy: float) -> None:
    """A ring laid anew at that spacing (rows and columns to the nearest) has that error.

    Ground level of W = 1 nm, L = 3 nm, q = 1: 1 - (pi a)^2/12 + ... of pi^2 (closed form).
    """
    rows = 3
    strip = lay_strip("square", rows=rows, length=12, spacing=0.25)
    hamiltonian = assemble(
        close_strip(strip, half_twists=1, orbital="s"), Hopping(shells=(16.0,), site_energy=64.0)
    )
    found = compare_continuum(hamiltonian, refinements=5)
    assert abs(found.relative_error[0] + 0.0505) < 1e-3
    spacing = float(found.spacing_for(accuracy)[0])
    np.testing.assert_allclose(
        spacing, math.sqrt(12 * accuracy) / np.pi, rtol=0, atol=0.01 * spacing
    )
    across = round(1 / spacing)
    fine = 1 / across
    strip = lay_strip("square", rows=across - 1, length=3 * across, spacing=fine)
    t = 1 / fine**2
    again = assemble(
        close_strip(strip, half_twists=1, orbital="s"), Hopping(shells=(t,), site_energy=4 * t)
    )
    error = abs(all_levels(again).energies[0] / np.pi**2 - 1)
    nearest = accuracy * (fine / spacing) ** 2  # rows are whole numbers
    np.testing.assert_allclose(error / nearest, 1.0, rtol=0, atol=0.02)
    np.testing.assert_allclose(error / accuracy, 1.0, rtol=0, atol=0.15)


def test_spacings_follow_the_measured_power() -> None:
    """Order 1 with zigzag edges: a tenth of the error takes a tenth of the spacing, about.

    On the meshes themselves the law is exact: asked for the error a mesh has, its spacing.
    """
    hamiltonian = ring("honeycomb-zigzag", 10, 19)
    found = compare_continuum(hamiltonian, refinements=4, flux=0.1)
    k = 2 * np.pi * np.abs(found.modes.wave) / (ROOT3 * 19) - 2 * np.pi / (3 * ROOT3)
    confined = (found.modes.band == 1) & (k * 16 < 0.5)
    assert confined.any()
    coarse, fine = (found.spacing_for(accuracy)[confined] for accuracy in (0.002, 0.0002))
    np.testing.assert_allclose(coarse / fine, 10, rtol=0, atol=0.5)
    for level in np.flatnonzero(confined):
        for mesh, spacing in enumerate(found.spacings):
            asked = abs(float(found.errors[mesh, level]))
            told = found.spacing_for(asked)[level]
            np.testing.assert_allclose(told, spacing, rtol=0, atol=1e-12)


def test_no_spacing_where_the_error_does_not_shrink() -> None:
    """A level that the lattice has exactly (armchair, k = q = 0, E = 0) has no error to shrink."""
    found = compare_continuum(ring("honeycomb-armchair", 5, 6, 0), refinements=3)
    exact = np.abs(found.continuum) < 1e-12
    assert np.count_nonzero(exact) == 2
    assert np.isnan(found.spacing_for(0.01)[exact]).all()
    assert np.isnan(found.errors[:, exact]).all()
    assert np.isnan(found.order[exact]).all()
    assert np.isfinite(found.spacing_for(0.01)[~exact]).any()


def test_every_mesh_has_as_many_modes_as_sites() -> None:
    """The closed forms know all levels of a ring, and of the rings on its finer meshes."""
    sizes: dict[str, tuple[int, float]] = {
        "square": (3, 5),
        "honeycomb-zigzag": (3, 4.5),
        "honeycomb-armchair": (4, 3.5),
    }
    for lattice, first in sizes.items():
        size = first
        for _ in range(3):
            hamiltonian = ring(lattice, *size)
            assert all_modes(mesh_of(hamiltonian, 0.3)).wave.size == hamiltonian.n
            size = refined(lattice, *size)[:2]
