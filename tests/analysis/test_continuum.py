"""Levels of rings beside continuum formulas: published errors, orders, offsets, shifts, refusals.

Meshes and their extrapolation are in ``test_meshes.py``, the formulas in ``test_dispersion.py``.
Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from brute import Case
from scipy import constants

from ribbon.analysis import (
    all_levels,
    compare_continuum,
    continuum,
    continuum_shift,
    continuum_zero,
    levels_between,
)
from ribbon.errors import BadInput, NotCertified
from ribbon.hopping import Hopping, assemble, effective_mass
from ribbon.lattice import Network, close_strip, lay_strip, remove_sites

Build = Callable[..., Any]
LEVEL = 1e-10


def moebius_of(rows: int, columns: int, *, half_twists: int = 1, orbital: str = "s") -> Any:
    """A square ring of width 1 in units with hbar^2/2m = 1: t = 1/a^2, energies from the bottom."""
    spacing = 1.0 / (rows + 1)
    strip = lay_strip("square", rows=rows, length=columns, spacing=spacing)
    ring = close_strip(strip, half_twists=half_twists, orbital=orbital)
    return assemble(ring, Hopping(shells=(1 / spacing**2,), site_energy=4 / spacing**2))


def ring(lattice: str, rows: int, length: float, half_twists: int = 1, orbital: str = "s") -> Any:
    strip = lay_strip(lattice, rows=rows, length=length)
    return assemble(close_strip(strip, half_twists=half_twists, orbital=orbital), Hopping())


# --- published numbers ---------------------------------------------------------------------------


def test_errors_of_a_flat_moebius_strip() -> None:
    """Recipe R7, L = 6, W = 1: exact levels, errors at M = 19, 39, 79 as computed elsewhere.

    9.869604, 10.966227 (2), 14.256095 (2), 19.739209 (2); ground level 2.05e-3, 5.14e-4, 1.285e-4
    too low, n = +-1 1.87e-3, 4.68e-4, 1.17e-4; the ratio per halving is 4.0 +- 0.05.
    """
    printed = {19: (2.05e-3, 1.87e-3), 39: (5.14e-4, 4.68e-4), 79: (1.285e-4, 1.17e-4)}
    exact = np.array([9.869604, 10.966227, 10.966227, 14.256095, 14.256095, 19.739209, 19.739209])
    errors = []
    for rows, (ground, first) in printed.items():
        found = compare_continuum(moebius_of(rows, 6 * (rows + 1)), refinements=0)
        np.testing.assert_allclose(found.continuum[:7], exact, rtol=0, atol=6e-7)
        np.testing.assert_array_equal(found.energy, found.meshes[0])
        error = found.relative_error[:3]
        np.testing.assert_allclose(error, [-ground, -first, -first], rtol=0, atol=6e-3 * ground)
        by_hand = (found.energy[:7] - exact) / exact
        np.testing.assert_allclose(found.relative_error[:7], by_hand, rtol=0, atol=1e-7)
        errors.append(error)
    ratios = [errors[0] / errors[1], errors[1] / errors[2]]
    np.testing.assert_allclose(ratios, 4.0, rtol=0, atol=0.05)


def test_levels_in_milli_electronvolt() -> None:
    """m* = 0.067, W = 40 nm: hbar^2/2m (pi/W)^2 from the constants of scipy alone; zero at the band
    bottom, whatever offset the rings carries.
    """
    hopping = effective_mass(0.067, 2.0)
    strip = lay_strip("square", rows=19, length=120, spacing=2.0)
    closed = close_strip(strip, half_twists=1, orbital="s")
    kinetic = constants.hbar**2 / (2 * 0.067 * constants.m_e) / (1e-3 * constants.e) * 1e18
    found = compare_continuum(assemble(closed, hopping))
    wanted = kinetic * ((np.pi / 40) ** 2 + (2 * np.pi * np.array([0, 1, 1]) / 240) ** 2)
    np.testing.assert_allclose(found.continuum[:3], wanted, rtol=0, atol=1e-9)
    assert (found.unit, found.kind) == ("meV", "square")
    assert abs(found.zero) < 1e-9
    shifted = assemble(closed, replace(hopping, site_energy=4 * hopping.shells[0] + 25.0))
    np.testing.assert_allclose(continuum_zero(shifted), 25.0, rtol=0, atol=1e-9)
    moved = compare_continuum(shifted)
    np.testing.assert_allclose(moved.continuum, found.continuum + 25, rtol=0, atol=1e-9)
    np.testing.assert_allclose(moved.relative_error, found.relative_error, rtol=0, atol=1e-9)


def test_the_width_ends_at_the_missing_rows() -> None:
    """Three rows, 12 columns: the mode n = 1, q = 1 is 4 % off with W = (rows + 1) a.

    Taking W = rows a instead would make it 38 %: E = 2(1 - cos k) + 2(1 - cos pi/4), closed form.
    """
    found = compare_continuum(ring("square", 3, 12), refinements=1)
    mode = (np.abs(np.abs(found.modes.wave) - 1) < 1e-9) & (found.modes.band == 1)
    assert np.count_nonzero(mode) == 2
    k = 2 * np.pi / 12
    energy = 4 - 2 * np.cos(k) - 2 * np.cos(np.pi / 4)
    right, wrong = (energy / (k**2 + (np.pi / width) ** 2) - 1 for width in (4, 3))
    np.testing.assert_allclose([right, wrong], [-0.042, -0.377], rtol=0, atol=1e-3)
    np.testing.assert_allclose(found.relative_error[mode], right, rtol=0, atol=1e-9)


# --- pairing with the matrix ---------------------------------------------------------------------


@pytest.mark.parametrize(
    "case",
    [
        Case("square", 4, 9, 1, -1),
        Case("honeycomb-zigzag", 5, 6.5, 1, -1),
        Case("honeycomb-zigzag", 4, 7, 0),
        Case("honeycomb-armchair", 6, 4.5, 3),
    ],
)
@pytest.mark.parametrize("flux", [0.0, 0.5, -0.31])
def test_the_first_mesh_is_the_matrix(hamiltonian_of: Build, case: Case, flux: float) -> None:
    """All levels, or a window at its own flux: those of brute force, by index, with the
    wave number and parity that the levels carry.
    """
    hamiltonian = hamiltonian_of(case, 0.4)
    brute_levels = 0.4 + case.levels(flux)
    whole = all_levels(hamiltonian, flux=flux)
    found = compare_continuum(hamiltonian, levels=whole, flux=99.0, refinements=1)
    np.testing.assert_allclose(found.energy, brute_levels, rtol=0, atol=LEVEL)
    np.testing.assert_allclose(found.modes.wave, whole.momentum, rtol=0, atol=1e-9)
    np.testing.assert_array_equal(found.modes.parity, whole.parity)
    assert found.flux == flux
    window = levels_between(hamiltonian, brute_levels[7] - 1e-6, brute_levels[19] + 1e-6, flux=flux)
    part = compare_continuum(hamiltonian, levels=window, refinements=1)
    np.testing.assert_array_equal(part.level, window.index)
    np.testing.assert_allclose(part.energy, brute_levels[window.index], rtol=0, atol=LEVEL)
    np.testing.assert_allclose(
        part.extrapolated, found.extrapolated[window.index], rtol=0, atol=LEVEL
    )


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "zero"), [("square", 7, 20, -4.0), ("honeycomb-zigzag", 6, 12, 0)]
)
def test_left_alone_it_takes_the_levels_nearest_to_zero(
    lattice: str, rows: int, length: int, zero: float
) -> None:
    """The 20 levels nearest to the band bottom or the Dirac point, at the flux asked for."""
    hamiltonian = ring(lattice, rows, length)
    levels = Case(lattice, rows, length, 1).levels(0.2)
    found = compare_continuum(hamiltonian, flux=0.2)
    nearest = np.sort(np.abs(levels - zero))[:20]
    np.testing.assert_allclose(np.sort(np.abs(found.energy - zero)), nearest, rtol=0, atol=LEVEL)
    assert found.zero == zero == continuum_zero(hamiltonian)
    assert np.all(np.diff(found.level) > 0)


def test_where_the_formula_is_meant_to_hold() -> None:
    """Phases up to 0.5 from site to site: pi q a/W and k a of every mode (closed form)."""
    hamiltonian = ring("square", 11, 30)
    found = compare_continuum(hamiltonian, levels=all_levels(hamiltonian), refinements=0)
    energy = found.energy + 4
    across = np.arange(1, 12) * np.pi / 12
    k = 2 * np.pi * np.abs(found.modes.wave) / 30
    q = np.argmin(
        np.abs(energy[:, None] - (4 - 2 * np.cos(k)[:, None] - 2 * np.cos(across))), axis=1
    )
    phase = np.maximum(k, across[q])
    np.testing.assert_allclose(found.phase, phase, rtol=0, atol=1e-9)
    np.testing.assert_array_equal(found.holds, phase <= 0.5)
    assert found.holds.any()
    assert not found.holds.all()
    assert np.all(np.abs(found.relative_error[found.holds]) < 0.5**2 / 12)
    assert np.isnan(found.order).all()
    assert np.isnan(found.extrapolated).all()
    assert np.isnan(found.spacing_for(0.01)).all()


# --- valleys -------------------------------------------------------------------------------------


def lowest_confined(length: int) -> float:
    """|E| W/hbar v of the lowest confined level of 100 zigzag rows, lattice and continuum."""
    hamiltonian = ring("honeycomb-zigzag", 100, length, half_twists=0)
    found = compare_continuum(hamiltonian, levels=all_levels(hamiltonian), refinements=0)
    kappa = (np.abs(found.modes.wave) / length - 1 / 3) * 2 * np.pi / math.sqrt(3) * 151
    confined = (found.modes.band > 1) | (kappa < 1)
    lowest = np.argmin(np.where(confined, np.abs(found.continuum), np.inf))
    scale = 151 / 1.5
    assert abs(found.relative_error[lowest]) < 0.02
    return float(np.abs(found.continuum[lowest]) * scale)


def test_the_offset_of_the_valleys_is_kept() -> None:
    """100 rows: at length 240 a wave number meets the Dirac point, k = q/tan(qW) gives pi/2.

    At 241 the nearest is K L = 2 pi/3 off, kappa = -2 pi 151/(3 sqrt 3 241), and the lowest
    confined level a third higher (Brey & Fertig 2006, solved here by hand-made bisection).
    """
    on, off = lowest_confined(240), lowest_confined(241)
    np.testing.assert_allclose(on, np.pi / 2, rtol=0, atol=1e-9)
    kappa = -2 * np.pi * 151 / (3 * math.sqrt(3) * 241)
    low, high = np.pi / 2, np.pi - 1e-9
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if middle / math.tan(middle) > kappa else (low, middle)
    np.testing.assert_allclose(off, math.hypot(kappa, low), rtol=0, atol=1e-9)
    np.testing.assert_allclose(off / on, 4 / 3, rtol=0, atol=0.02)


# --- refusals ------------------------------------------------------------------------------------


def refused(hamiltonian: Any, match: str, **options: Any) -> None:
    with pytest.raises(BadInput, match=match):
        compare_continuum(hamiltonian, **options)


def test_rings_without_a_formula(ring_of: Build) -> None:
    """Each raise says what the formulas are for."""
    closed = ring_of(Case("square", 4, 8, 1))
    clean = "for clean rings; disorder, vacancies and unequal"
    refused(assemble(closed, Hopping(disorder=0.1)), clean)
    refused(assemble(remove_sites(closed, [5]), Hopping()), clean)
    refused(assemble(closed, Hopping(site_energy=lambda x, y: 0 * x + y**2)), clean)
    second = ring_of(Case("square", 4, 8, 1, 1, (1.0, 0.1)))
    refused(assemble(second, Hopping(shells=(1.0, 0.1))), "first neighbours only; give hopping.sh")
    compare_continuum(assemble(second, Hopping(shells=(1.0, 0.0))), refinements=0)
    for lattice in ("kagome", "triangular", "lieb"):
        other = ring_of(Case(lattice, 3, 6, 0))
        refused(assemble(other, Hopping()), f'no continuum formula for lattice "{lattice}"')
    for t in (0.0, -1.0):
        refused(assemble(closed, Hopping(shells=(t,))), f"hopping.shells = .{t:g}.: .* needs t > 0")
    moved = ring_of(Case("square", 4, 8, 1), seam=2)
    refused(assemble(moved, Hopping()), "need levels with momentum and parity: a clean ring")


def test_other_refusals() -> None:
    """No ring, refinements and accuracies that are none, a control of another size."""
    chain = assemble(Network.from_pairs([(0, 1), (1, 2)]), Hopping())
    refused(chain, "a continuum comparison needs a ring")
    with pytest.raises(BadInput, match="a continuum comparison needs a ring"):
        continuum_zero(chain)
    hamiltonian = ring("square", 4, 8)
    for wrong in (9, -1, 1.5):
        refused(hamiltonian, f"continuum.refinements = {wrong} must be a whole", refinements=wrong)
    found = compare_continuum(hamiltonian)
    for accuracy in (0.0, -0.01, math.nan, math.inf):
        with pytest.raises(BadInput, match=r"accuracy = .* must be a positive number, 0\.01"):
            found.spacing_for(accuracy)
    for rows, columns in ((4, 9), (5, 8)):
        with pytest.raises(BadInput, match="same rows, length and spacing"):
            continuum_shift(found, hamiltonian, ring("square", rows, columns, 0))


def test_a_spectrum_that_is_not_the_closed_form(monkeypatch: pytest.MonkeyPatch) -> None:
    """Levels, wave numbers or parities tampered with are noticed, never compared."""
    hamiltonian = ring("square", 4, 8)

    def tampered(**changes: Any) -> Callable[..., Any]:
        def levels(hamiltonian: Any, **options: Any) -> Any:
            whole = all_levels(hamiltonian, **options)
            return replace(
                whole, **{name: change(getattr(whole, name)) for name, change in changes.items()}
            )

        return levels

    def nudged(energies: np.ndarray) -> np.ndarray:
        return energies + 1e-7 * (np.arange(energies.size) == 9)

    def turned(parity: np.ndarray) -> np.ndarray:
        return np.where(np.arange(parity.size) == 0, -parity, parity)

    def shifted(momentum: np.ndarray) -> np.ndarray:
        return momentum + 0.25 * (np.arange(momentum.size) == 11)

    compare_continuum(hamiltonian, refinements=0)
    for changes in ({"energies": nudged}, {"parity": turned}, {"momentum": shifted}):
        monkeypatch.setattr(continuum, "all_levels", tampered(**changes))
        with pytest.raises(NotCertified, match="closed form of a square ring and the levels"):
            compare_continuum(hamiltonian, refinements=0)
