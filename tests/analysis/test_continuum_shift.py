"""What a twist moves, on the lattice and in the continuum (Yakubo, Avishai & Cohen 2003)."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from ribbon.analysis import all_levels, compare_continuum, continuum_shift
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip


def moebius_of(rows: int, columns: int, *, half_twists: int = 1, orbital: str = "s") -> Any:
    """A square ring of width 1 in units with hbar^2/2m = 1: t = 1/a^2, energies from the bottom."""
    spacing = 1.0 / (rows + 1)
    strip = lay_strip("square", rows=rows, length=columns, spacing=spacing)
    ring = close_strip(strip, half_twists=half_twists, orbital=orbital)
    return assemble(ring, Hopping(shells=(1 / spacing**2,), site_energy=4 / spacing**2))


def ring(lattice: str, rows: int, length: float, half_twists: int = 1, orbital: str = "s") -> Any:
    strip = lay_strip(lattice, rows=rows, length=length)
    return assemble(close_strip(strip, half_twists=half_twists, orbital=orbital), Hopping())


@pytest.mark.parametrize("flux", [0.0, 0.15])
def test_a_twist_moves_even_modes_by_half_a_quantum(flux: float) -> None:
    """Twisted minus plain by mode: [(n + delta + phi)^2 - (n + phi)^2](2 pi/L)^2, delta = 1/2 for
    even q only; on the lattice 2 cos k' - 2 cos k (closed form).
    """
    twisted, plain = (moebius_of(9, 30, half_twists=h) for h in (1, 0))
    whole = all_levels(twisted, flux=flux)
    own = compare_continuum(twisted, levels=whole, refinements=0)
    found = continuum_shift(own, twisted, plain)
    assert found.level.size > 0.9 * twisted.n
    np.testing.assert_allclose(found.shift, found.energy - found.control_energy, rtol=0, atol=1e-12)
    control = all_levels(plain, flux=flux)
    np.testing.assert_allclose(
        found.control_energy, control.energies[found.control_level], rtol=0, atol=1e-9
    )
    np.testing.assert_array_equal(own.level[np.isin(own.level, found.level)], found.level)
    wave, band = own.modes.wave[found.level], own.modes.band[found.level]
    delta = np.where(band % 2 == 0, 0.5, 0.0)
    k, before = (2 * np.pi * n / 3.0 for n in (wave, wave - delta))
    np.testing.assert_allclose(found.continuum, k**2 - before**2, rtol=0, atol=1e-9)
    lattice = 200 * (np.cos(before / 10) - np.cos(k / 10))
    np.testing.assert_allclose(found.shift, lattice, rtol=0, atol=1e-9)
    np.testing.assert_allclose(found.lattice_part, lattice - (k**2 - before**2), rtol=0, atol=1e-8)
    meant = np.maximum(np.maximum(np.abs(k), np.abs(before)) / 10, np.pi * band / 10) <= 0.5
    np.testing.assert_array_equal(found.holds, meant)


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "finer"),
    [("square", 11, 30, (23, 60)), ("honeycomb-armchair", 23, 20, (47, 40))],
)
def test_the_part_of_the_lattice_goes_away(
    lattice: str, rows: int, length: int, finer: tuple[int, int]
) -> None:
    """Of the shift of the same modes, four times less (order 2) on the square lattice.

    On honeycomb at least a third less in the mean: order 1 in the error of one level.
    """
    parts = []
    for across, along, t in ((rows, length, 1.0), (*finer, 4.0 if lattice == "square" else 2.0)):
        strip = lay_strip(lattice, rows=across, length=along)
        pair = [
            assemble(close_strip(strip, half_twists=h, orbital="s"), Hopping(shells=(t,)))
            for h in (1, 0)
        ]
        own = compare_continuum(pair[0], levels=all_levels(pair[0]), refinements=0)
        found = continuum_shift(own, *pair)
        order = np.lexsort((np.round(found.continuum, 8), np.round(np.abs(found.continuum), 8)))
        formula = own.continuum[np.searchsorted(own.level, found.level)] - own.zero
        small = order[np.argsort(np.abs(formula[order]), kind="stable")]
        moved = small[np.abs(found.continuum[small]) > 1e-6][:6]
        parts.append((found.continuum[moved], np.abs(found.lattice_part[moved])))
    np.testing.assert_allclose(parts[0][0], parts[1][0], rtol=0, atol=1e-8)
    if lattice == "square":
        np.testing.assert_allclose(parts[0][1] / parts[1][1], 4.0, rtol=0, atol=0.12)
    assert parts[1][1].sum() < 0.67 * parts[0][1].sum()


def test_shifts_keep_the_half_of_the_spectrum() -> None:
    """Electrons and holes of a zigzag ring are not mixed: each level's control has its sign."""
    twisted, plain = (ring("honeycomb-zigzag", 6, 14, h) for h in (1, 0))
    own = compare_continuum(twisted, levels=all_levels(twisted), refinements=0)
    found = continuum_shift(own, twisted, plain)
    assert found.level.size > 0.9 * twisted.n
    clear = (np.abs(found.energy) > 1e-3) & (np.abs(found.control_energy) > 1e-3)
    np.testing.assert_array_equal(
        np.sign(found.energy[clear]), np.sign(found.control_energy[clear])
    )
    assert np.unique(found.control_level).size == found.level.size
    assert np.all(np.abs(found.shift) < 0.5)
    same = continuum_shift(own, twisted, twisted)
    np.testing.assert_array_equal(same.level, same.control_level)
    np.testing.assert_allclose(same.shift, 0.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose(same.continuum, 0.0, rtol=0, atol=1e-12)
