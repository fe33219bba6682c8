"""Continuum formulas against scipy's and mpmath's root finders, and the rule of refinement.

M. Brey & H. A. Fertig, Phys. Rev. B 73, 235411 (2006); K. Yakubo, Y. Avishai & D. Cohen, Phys.
Rev. B 67, 125319 (2003).
"""

from __future__ import annotations

import math
from typing import Any

import mpmath
import numpy as np
import pytest
from scipy.optimize import brentq

from ribbon.analysis.dispersion import (
    Mesh,
    Modes,
    all_modes,
    continuum_energy,
    finer,
    lattice_energy,
    size_of_wave,
)

ROOT3 = math.sqrt(3)


def mesh(kind: Any, rows: int, length: float, **options: Any) -> Mesh:
    usual = {"spacing": 1.0, "hopping": 1.0, "zero": 0.0, "flips": False, "sign": 1.0, "flux": 0.0}
    return Mesh(kind=kind, rows=rows, length=length, **{**usual, **options})


def modes_at(wave: list[float], band: list[int], sign: int = 1) -> Modes:
    one = np.ones(len(wave), dtype=np.int64)
    return Modes(wave=np.array(wave), band=np.array(band), sign=sign * one, parity=one)


# --- continuum -----------------------------------------------------------------------------------


def dirac_zigzag(kappa: float, band: int) -> float:
    """|E| W/hbar v by brentq on k = q/tan(qW) and (k - z)/(k + z) = exp(-2 W z), W = 1.

    Brey & Fertig, Phys. Rev. B 73, 235411 (2006).
    """
    if band == 1 and kappa > 1:
        edge = brentq(
            lambda z: (kappa - z) - (kappa + z) * math.exp(-2 * z), 1e-6 * kappa, kappa, xtol=1e-15
        )
        return math.sqrt((kappa - edge) * (kappa + edge))
    low, high = (band - 1) * math.pi + 1e-9, band * math.pi - 1e-9
    q = brentq(lambda x: kappa * math.sin(x) - x * math.cos(x), low, high, xtol=1e-15)
    return math.hypot(kappa, q)


@pytest.mark.parametrize("band", [1, 2, 3, 7])
@pytest.mark.parametrize("kappa", [-9.0, -2.0, -0.3, 0.0, 0.4, 0.97, 1.05, 1.7, 3.5, 8.0])
def test_dirac_ribbons_with_zigzag_walls(kappa: float, band: int) -> None:
    """Confined and edge modes either side of k W = 1, in both valleys and halves (brentq).

    k = |2 pi wave/L| - K, K s = 2 pi/3, the sign turned in the second valley.
    """
    own = mesh("zigzag", 20, 3000, spacing=0.142, hopping=2.7)
    valley = 2 * np.pi / (3 * ROOT3 * 0.142)
    wave = (valley + kappa / (31 * 0.142)) * 3000 * ROOT3 * 0.142 / (2 * np.pi)
    wanted = 1.5 * 2.7 * 0.142 * dirac_zigzag(kappa, band) / (31 * 0.142)
    for sign in (1, -1):
        found = continuum_energy(own, modes_at([wave, -wave], [band, band], sign))
        np.testing.assert_allclose(found, sign * wanted, rtol=0, atol=1e-11)


def test_dirac_roots_in_many_digits() -> None:
    """The edge mode far out, k W = 20: |E| = 2 k exp(-k W)/hbar v to many digits (mpmath)."""
    own = mesh("zigzag", 20, 3000)
    wave = (2 * np.pi / (3 * ROOT3) + 20 / 31) * 3000 * ROOT3 / (2 * np.pi)
    found = float(continuum_energy(own, modes_at([wave], [1]))[0])
    with mpmath.workdps(40):
        k = 2 * mpmath.pi * mpmath.mpf(wave) / (3000 * mpmath.mpf(ROOT3)) - 2 * mpmath.pi / (
            3 * mpmath.mpf(ROOT3)
        )
        z = mpmath.findroot(lambda z: (k - z) / (k + z) - mpmath.exp(-62 * z), k * (1 - 1e-12))
        exact = 1.5 * mpmath.sqrt(k**2 - z**2)
    assert abs(found / float(exact) - 1) < 1e-9
    assert found < 1e-8


@pytest.mark.parametrize("band", [1, 8, 9, 10, 14])
def test_dirac_ribbons_with_armchair_walls(band: int) -> None:
    """E = hbar v sqrt(k^2 + q^2), q = pi r/W - 4 pi/(3 sqrt 3 a) (Brey & Fertig 2006)."""
    own = mesh("armchair", 14, 50, spacing=0.142, hopping=2.7)
    k = 2 * np.pi * 3.5 / (50 * 3 * 0.142)
    q = np.pi * band / (15 * ROOT3 * 0.142 / 2) - 4 * np.pi / (3 * ROOT3 * 0.142)
    found = continuum_energy(own, modes_at([3.5, -3.5], [band, band], -1))
    np.testing.assert_allclose(found, -1.5 * 2.7 * 0.142 * math.hypot(k, q), rtol=0, atol=1e-12)
    assert (abs(q) < 1e-12) == (band == 10)


def test_square_strips() -> None:
    """E = (hbar^2/2m)[(2 pi wave/L)^2 + (pi q/W)^2] (Yakubo, Avishai & Cohen 2003)."""
    own = mesh("square", 5, 12, spacing=0.5, hopping=8.0)
    found = continuum_energy(own, modes_at([0.0, 1.5, -2.0], [1, 2, 4]))
    wanted = [
        2 * ((2 * np.pi * n / 6) ** 2 + (np.pi * q / 3) ** 2) for n, q in ((0, 1), (1.5, 2), (2, 4))
    ]
    np.testing.assert_allclose(found, wanted, rtol=0, atol=1e-12)


@pytest.mark.parametrize("kind", ["square", "zigzag", "armchair"])
def test_phases_from_site_to_site(kind: Any) -> None:
    """|k| a and, across, pi q a/W (square) or |E| a/hbar v (honeycomb); zigzag from the valley."""
    own = mesh(kind, 20, 60, spacing=0.3, hopping=2.0)
    wave, band = [21.0, -24.5, 3.0], [2, 1, 9]
    found = size_of_wave(own, modes_at(wave, band))
    period = {"square": 1.0, "zigzag": ROOT3, "armchair": 3.0}[kind]
    k = 2 * np.pi * np.abs(wave) / (60 * period)
    energy = continuum_energy(own, modes_at(wave, band))
    across = np.pi * np.array(band) / 21 if kind == "square" else np.abs(energy) / (2.0 * 1.5)
    if kind == "zigzag":
        k = np.abs(k - 2 * np.pi / (3 * ROOT3))
    np.testing.assert_allclose(found, np.maximum(k, across), rtol=0, atol=1e-12)


# --- refinement ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("kind", "rows", "length"),
    [
        ("square", 5, 8), ("zigzag", 4, 7), ("zigzag", 5, 6.5), ("zigzag", 3, 8),
        ("armchair", 5, 4), ("armchair", 4, 5.5), ("armchair", 8, 3),
    ],
)  # fmt: skip
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_finer_meshes_are_the_same_ring(kind: Any, rows: int, length: float, sign: float) -> None:
    """W, L, hbar v (or hbar^2/2m), closure and the offset of the valleys are kept, four times over.

    Each mode keeps exp(2 pi i wave) parity^h = sigma^h, |k| - K and its continuum energy; band
    numbers stay within the rows, so that different modes stay different.
    """
    flips = not (kind == "zigzag" and rows == 3)
    own = mesh(kind, rows, length, spacing=0.142, hopping=2.7, flips=flips, sign=sign, flux=0.2)
    modes = all_modes(own)
    fine, same = own, modes
    for step in range(4):
        fine, same = finer(fine, same)
        ratio = (4 if kind == "zigzag" else 2) ** (step + 1)
        for name in ("width", "circumference", "stiffness", "flux", "zero", "flips", "sign"):
            assert abs(getattr(fine, name) - getattr(own, name)) < 1e-12, name
        np.testing.assert_allclose(fine.spacing, own.spacing / ratio, rtol=0, atol=1e-15)
        parity = same.parity if flips else np.ones_like(same.parity)
        closing = np.exp(2j * np.pi * (same.wave - own.flux)) * parity
        np.testing.assert_allclose(closing, sign, rtol=0, atol=1e-9)
        np.testing.assert_allclose(
            continuum_energy(fine, same), continuum_energy(own, modes), rtol=0, atol=1e-9
        )
        assert same.band.min() >= 1
        assert same.band.max() <= fine.rows
        labels = np.round(np.column_stack([same.wave, same.band, same.sign]), 6)
        assert np.unique(labels, axis=0).shape[0] == modes.wave.size
        if kind == "zigzag":  # distance from the Dirac point of the finer mesh, K L = 2 pi length/3
            before = np.abs(modes.wave) - own.length / 3
            after = np.abs(same.wave) - fine.length / 3
            np.testing.assert_allclose(after, before, rtol=0, atol=1e-9)
            valley = fine.length / 3 - own.length / 3
            assert abs(2 * valley - round(2 * valley)) < 1e-9
            assert rows % 2 == 1 or abs(valley - round(valley)) < 1e-9


def test_zigzag_ribbons_approach_dirac_as_one_over_n() -> None:
    """Recipe R7: lattice/Dirac of the lowest three levels at k - K = 4/(N s) for N = 100, 200, 400.

    .926 .991 .985, .963 .995 .993, .981 .998 .996 with W = (N + 1/2) 3a/2 (computed twice, other
    program; Brey & Fertig 2006): each doubling of N halves what is missing from 1.
    """
    printed = {100: (0.926, 0.991, 0.985), 200: (0.963, 0.995, 0.993), 400: (0.981, 0.998, 0.996)}
    missing = []
    for rows, wanted in printed.items():
        k = 4 / (rows * ROOT3)
        wave = (2 * np.pi / (3 * ROOT3) + k) * 1000 * ROOT3 / (2 * np.pi)
        own = mesh("zigzag", rows, 1000)
        lattice = lattice_energy(own, modes_at([wave] * 3, [1, 2, 3]))
        width = (rows + 0.5) * 1.5
        dirac = [1.5 * dirac_zigzag(k * width, band) / width for band in (1, 2, 3)]
        np.testing.assert_allclose(lattice / dirac, wanted, rtol=0, atol=6e-4)
        missing.append(1 - lattice / dirac)
    ratios = np.array(missing[:-1]) / np.array(missing[1:])
    np.testing.assert_allclose(ratios, 2.0, rtol=0, atol=0.06)
