"""Closed forms of clean rings, on the lattice and in the continuum, against outside judges.

Lattice: joint spectra of the matrix, the translation and the flip built from coordinates
(``brute.py``). Continuum: scipy's and mpmath's root finders. Recipes and values of the sheet of
published results are named where they are used; sources marked [M] are recalled from memory.
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
from brute import Case, cases
from hypothesis import given, settings
from hypothesis import strategies as st

from ribbon.analysis.dispersion import (
    Mesh,
    Modes,
    all_modes,
    lattice_energy,
    mesh_of,
)
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip

Build = Callable[..., Any]
LEVEL = 1e-10
"""Eigenvalues of dense matrices of up to a hundred sites."""
LATTICES = ("square", "honeycomb-zigzag", "honeycomb-armchair")
SMALL = [
    case
    for case in cases(LATTICES, rows=(1, 2, 3, 4, 5, 6), lengths=(1, 1.5, 2, 2.5, 3, 4, 4.5))
    if not (case.lattice == "honeycomb-armchair" and case.rows == 1)
]
ROOT3 = math.sqrt(3)


def mesh(kind: Any, rows: int, length: float, **options: Any) -> Mesh:
    usual = {"spacing": 1.0, "hopping": 1.0, "zero": 0.0, "flips": False, "sign": 1.0, "flux": 0.0}
    return Mesh(kind=kind, rows=rows, length=length, **{**usual, **options})


def modes_at(wave: list[float], band: list[int], sign: int = 1) -> Modes:
    one = np.ones(len(wave), dtype=np.int64)
    return Modes(wave=np.array(wave), band=np.array(band), sign=sign * one, parity=one)


# --- joint spectra -------------------------------------------------------------------------------


def carried(case: Case, along: float, *, flip: bool) -> np.ndarray:
    """The map (x, y) -> (x + along, y or -y) on functions of the endless strip that close.

    A function of the ring obeys psi(x + L, (-1)^h y) = sigma^h psi(x, y).
    """
    sites = brute.ring_sites(*case[:3])
    place = {(round(x, 4), round(y, 4)): i for i, (x, y) in enumerate(sites)}
    around = case.length * brute.PERIOD[case.lattice]
    out = np.zeros((len(sites), len(sites)))
    for i, (x, y) in enumerate(sites):
        turns = math.floor((x + along + 1e-6) / around)
        there_y = -y if flip else y
        back = -there_y if case.half_twists * turns % 2 else there_y
        there = round(x + along - turns * around, 4) + 0.0, round(back, 4) + 0.0
        out[i, place[there]] = case.sigma ** abs(case.half_twists * turns)
    return out


def glide(case: Case) -> float:
    """What the flip needs along the strip: half a period where rows are odd or even, else 0."""
    period = brute.PERIOD[case.lattice]
    odd_zigzag = case.lattice == "honeycomb-zigzag" and case.rows % 2 == 1
    even_armchair = case.lattice == "honeycomb-armchair" and case.rows % 2 == 0
    return period / 2 if odd_zigzag or even_armchair else 0.0


def joint(energy: Any, turn: Any, flip: Any) -> Any:
    """One Hermitian combination of commuting operators, or of their eigenvalues."""
    total = energy.astype(complex)
    for factor, one in ((0.5132, turn), (1.2719, flip)):
        adjoint = one.conj().T
        total = total + factor * (one + adjoint) + 0.7381 * factor * 1j * (adjoint - one)
    return total


@settings(max_examples=150)
@given(
    case=st.sampled_from(SMALL),
    flux=st.one_of(
        st.sampled_from([0.0, 0.5, -0.25]),
        st.integers(-999_999, 999_999).map(lambda millionths: millionths / 1e6),
    ),
)
def test_modes_are_the_joint_spectrum(case: Case, flux: float) -> None:
    """Energy, wave number and parity of every mode at once, h = 0..3, "s" and "pz", any flux.

    H, the translation by a period and the flip (with its glide) commute; in the uniform gauge a
    mode has the eigenvalues E, exp(i k s) and parity exp(i k g), k = 2 pi (wave - flux)/L. The
    spectra of one generic combination agree as multisets. (A wave nearer than 1e-9 to the zone
    boundary counts as standing on it: fluxes are millionths.)
    """
    period = brute.PERIOD[case.lattice]
    matrix = case.matrix(flux)
    turn = carried(case, period, flip=False)
    flip = carried(case, glide(case), flip=True)
    for one, other in ((matrix, turn), (matrix, flip), (turn, flip)):
        np.testing.assert_allclose(one @ other, other @ one, rtol=0, atol=1e-12)
    wanted = np.linalg.eigvalsh(joint(matrix, turn, flip))

    kind: Any = case.lattice.removeprefix("honeycomb-")
    odd = case.half_twists % 2 == 1
    zero = -4.0 if kind == "square" else 0.0
    own = mesh(
        kind, case.rows, case.length,
        zero=zero, flips=odd, sign=float(case.sigma**case.half_twists), flux=flux,
    )  # fmt: skip
    modes = all_modes(own)
    energy = own.zero + lattice_energy(own, modes)
    k = 2 * np.pi * (modes.wave - flux) / (case.length * period)
    found = joint(energy, np.exp(1j * k * period), modes.parity * np.exp(1j * k * glide(case)))
    assert modes.wave.size == case.sites()
    np.testing.assert_allclose(np.sort(energy), case.levels(flux), rtol=0, atol=LEVEL)
    np.testing.assert_allclose(found.imag, 0, rtol=0, atol=LEVEL)
    np.testing.assert_allclose(np.sort(found.real), wanted, rtol=0, atol=LEVEL)
    inside = (modes.wave > -case.length / 2 - 1e-9) & (modes.wave <= case.length / 2 + 1e-9)
    assert inside.all()


@pytest.mark.parametrize("flux", [0.0, 0.3])
@pytest.mark.parametrize("case", [c for c in SMALL if c.rows > 1][:: len(SMALL) // 20])
def test_the_mesh_of_a_hamiltonian(hamiltonian_of: Build, case: Case, flux: float) -> None:
    """Read off an assembled ring: the closed form gives the brute-force levels; walls as stated.

    W = (rows + 1) a, (3 rows + 2) a/2 or (rows + 1) sqrt(3) a/2: from missing line to missing
    line (Brey & Fertig 2006).
    """
    own = mesh_of(hamiltonian_of(case, 0.7), flux)
    found = own.zero + lattice_energy(own, all_modes(own))
    np.testing.assert_allclose(np.sort(found), 0.7 + case.levels(flux), rtol=0, atol=LEVEL)
    wide = {
        "square": case.rows + 1,
        "zigzag": (3 * case.rows + 2) / 2,
        "armchair": (case.rows + 1) * ROOT3 / 2,
    }[own.kind]
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    np.testing.assert_allclose(own.width, wide * strip.spacing, rtol=0, atol=1e-12)
    around = case.length * brute.PERIOD[case.lattice] * strip.spacing
    np.testing.assert_allclose(own.circumference, around, rtol=0, atol=1e-12)


# --- zigzag --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("rows", "length"), [(2, 5), (5, 6), (10, 4)])
def test_zigzag_roots_as_a_multiset(rows: int, length: int) -> None:
    """Recipe R5: the 2 N roots of sin pN + g sin p(N + 1) = 0 at each k of a plain ring.

    Wakabayashi et al., Sci. Technol. Adv. Mater. 11, 054504 (2010) [M]; found again by
    ``closed_forms.transverse_roots`` (brentq), in the package's matrix and in brute force.
    """
    levels: list[float] = []
    for n in range(length):
        g = 2 * math.cos(math.pi * n / length)
        roots, eta = known.transverse_roots(rows, g)
        sizes = [math.sqrt(1 + g * g + 2 * g * math.cos(p)) for p in roots]
        if abs(g) < 1e-12:
            sizes.append(0.0)  # ks = pi: the edge state of the outer row alone
        elif eta is not None:
            sizes.append(math.sinh(eta) / math.sinh(eta * (rows + 1)))
        assert len(sizes) == rows
        levels += sizes + [-one for one in sizes]
    wanted = np.sort(levels)
    ring = close_strip(lay_strip("honeycomb-zigzag", rows=rows, length=length), half_twists=0)
    matrix = assemble(ring, Hopping()).matrix().toarray()
    brute_levels = Case("honeycomb-zigzag", rows, length, 0).levels()
    own = mesh("zigzag", rows, length)
    modes = all_modes(own)
    for found in (np.linalg.eigvalsh(matrix), brute_levels, np.sort(lattice_energy(own, modes))):
        np.testing.assert_allclose(found, wanted, rtol=0, atol=1e-8)
    for wave in np.unique(modes.wave):
        assert np.count_nonzero(modes.wave == wave) == 2 * rows


def edge_mode(rows: int, ks: float) -> float:
    own = mesh("zigzag", rows, 100)
    return float(lattice_energy(own, modes_at([ks * 100 / (2 * np.pi)], [1]))[0])


def test_the_energy_of_an_edge_state() -> None:
    """R5: (1 - g^2) g^N = 1.82230e-5 at N = 10, ks = 2.8 (computed twice; Wakabayashi 2010 [M])."""
    found = edge_mode(10, 2.8)
    np.testing.assert_allclose(found, 1.82230e-5, rtol=0, atol=6e-11)
    np.testing.assert_allclose(found, known.edge_energy(10, 2.8), rtol=0, atol=1e-13)
    eta = known.transverse_roots(10, 2 * math.cos(1.4))[1]
    assert eta is not None
    exact = math.sinh(eta) / math.sinh(11 * eta)
    np.testing.assert_allclose(found, exact, rtol=0, atol=1e-16)


@pytest.mark.parametrize(("rows", "critical"), [(2, 2.46192), (5, 2.28204), (10, 2.19787)])
def test_where_the_edge_state_begins(rows: int, critical: float) -> None:
    """ks_c = 2 arccos(N/2(N + 1)), values as printed: the root passes from real to complex there.

    On either side, in 40 digits (mpmath), E^2 = 1 + g^2 + 2 g cos p; at the point E = 1/(N + 1).
    """
    exact = 2 * math.acos(rows / (2 * (rows + 1)))
    np.testing.assert_allclose(exact, critical, rtol=0, atol=5e-6)
    np.testing.assert_allclose(edge_mode(rows, exact), 1 / (rows + 1), rtol=0, atol=1e-7)
    for ks in (exact - 0.05, exact + 0.05):
        with mpmath.workdps(40):
            g = 2 * mpmath.cos(mpmath.mpf(ks) / 2)
            start = mpmath.mpc(0, 0.6) if ks > exact else mpmath.mpf("0.4") / rows
            theta = mpmath.findroot(
                lambda x, g=g: mpmath.sin(rows * x) / x - g * mpmath.sin((rows + 1) * x) / x, start
            )
            energy = abs(mpmath.sqrt(1 + g**2 - 2 * g * mpmath.cos(theta)))
        np.testing.assert_allclose(edge_mode(rows, ks), float(energy), rtol=0, atol=1e-13)


def test_deep_edge_states_keep_their_digits() -> None:
    """1000 rows: (1 - g^2) g^N below the smallest rounding of a matrix is a number still."""
    ks = 2.15
    g = 2 * math.cos(ks / 2)
    with mpmath.workdps(60):
        exact = float((1 - mpmath.mpf(g) ** 2) * mpmath.mpf(g) ** 1000)
    assert 0 < exact < 1e-20
    assert abs(edge_mode(1000, ks) / exact - 1) < 1e-10
