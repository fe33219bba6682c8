"""Spectra known in closed form, as plain functions, each with its source.

All are for H = -t A with t = 1 unless a name says ``adjacency``; ``sigma`` is +1 for orbitals that
are even under a half turn of the strip ("s") and -1 for odd ones ("pz"); ``flux`` is in quanta
h/e. Every function returns ascending energies. Sources marked [M] are recalled from memory (the
formulas are proved against brute-force matrices in ``test_closed_forms.py``).
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from scipy.optimize import brentq

Spectrum = np.ndarray
TAU = 2 * math.pi


def mode_offset(parity: int, half_twists: int, sigma: int) -> float:
    """0 where a mode of this parity returns with its own sign, else one half."""
    return 0.0 if (parity * sigma) ** half_twists == 1 else 0.5


def take_half(levels: list[float] | np.ndarray) -> Spectrum:
    """One of each two equal members of a list in which everything stands twice."""
    ordered = np.sort(np.asarray(levels))
    np.testing.assert_allclose(ordered[::2], ordered[1::2], rtol=0, atol=1e-9)
    return ordered[::2]


# --- chains and rings of single sites -------------------------------------------------------


def cycle(sites: int, *, flux: float = 0.0) -> Spectrum:
    """Cyclic polyene, x = 2 cos(2 pi (j + flux)/N). Hückel 1931 [M]."""
    j = np.arange(sites)
    return np.sort(-2 * np.cos(TAU * (j + flux) / sites))


def moebius_annulene(sites: int) -> Spectrum:
    """x = 2 cos((2j + 1) pi/N). E. Heilbronner, Tetrahedron Lett. 5 (29), 1923 (1964) [M]."""
    j = np.arange(sites)
    return np.sort(-2 * np.cos((2 * j + 1) * math.pi / sites))


def chain(sites: int) -> Spectrum:
    """Linear polyene, x = 2 cos(j pi/(N + 1)). C. A. Coulson 1938 [M]."""
    j = np.arange(1, sites + 1)
    return np.sort(-2 * np.cos(j * math.pi / (sites + 1)))


def half_filled_total(kind: str, sites: int) -> float:
    """Total pi energy of N electrons in units of |beta|, spin 2.

    Closed shell 4/sin(pi/N), open shell 4/tan(pi/N), linear 2/sin(pi/(2(N + 1))) - 2: sums of
    the three spectra above (Frost & Musulin, J. Chem. Phys. 21, 572 (1953); Zimmerman, J. Am.
    Chem. Soc. 88, 1564 (1966) [M]).
    """
    if kind == "linear":
        return 2 / math.sin(math.pi / (2 * (sites + 1))) - 2
    closed = sites % 4 == (2 if kind == "cycle" else 0)
    return 4 / math.sin(math.pi / sites) if closed else 4 / math.tan(math.pi / sites)


# --- ladders --------------------------------------------------------------------------------


def moebius_ladder_adjacency(rungs: int) -> Spectrum:
    """2 cos(pi j/n) + (-1)^j, j < 2n. N. Biggs, Algebraic Graph Theory, 2nd ed., pp. 20-21 [M]."""
    j = np.arange(2 * rungs)
    return np.sort(2 * np.cos(math.pi * j / rungs) + (-1.0) ** j)


def prism_adjacency(rungs: int) -> Spectrum:
    """2 cos(2 pi j/n) +- 1. Same source."""
    along = 2 * np.cos(TAU * np.arange(rungs) / rungs)
    return np.sort(np.concatenate([along + 1, along - 1]))


def triangular_ladder(sites: int, *, turns: float, sigma: int, flux: float) -> Spectrum:
    """Two rows of triangles: each site meets the two next ones on either side.

    In zigzag order the ring is the circulant graph C(N; 1, 2), N = 2 length, whatever the number
    of half twists ``turns`` (they only decide whether N is even or odd): an amplitude that goes
    once round picks sigma^turns. Circulant spectra: Biggs, as above.
    """
    delta = 0.0 if sigma**turns == 1 else 0.5
    k = TAU * (np.arange(sites) + delta + flux) / sites
    return np.sort(-2 * np.cos(k) - 2 * np.cos(2 * k))


# --- fused hexagons ----------------------------------------------------------------------------


def acene_adjacency(rings: int) -> Spectrum:
    """x = +-1 and (+-1 +- sqrt(9 + 8 cos(k pi/(n + 1))))/2.

    C. A. Coulson, Proc. Phys. Soc. 60, 257 (1948) [M].
    """
    levels = [1.0, -1.0]
    for k in range(1, rings + 1):
        root = math.sqrt(9 + 8 * math.cos(k * math.pi / (rings + 1)))
        levels += [(a + b * root) / 2 for a in (1, -1) for b in (1, -1)]
    return np.sort(levels)


def cyclacene_adjacency(rings: int, *, half_twists: int, sigma: int, flux: float = 0.0) -> Spectrum:
    """x = (s +- sqrt(9 + 8 cos k))/2, k = 2 pi (j + flux + offset)/n.

    s = +1 for modes even under the mirror along the belt, -1 for odd ones. Derived from the same
    factorisation as the acenes; references in Türker & Erkoç, Turk. J. Chem. [M].
    """
    levels = []
    for parity in (1, -1):
        offset = mode_offset(parity, half_twists, sigma)
        for j in range(rings):
            root = math.sqrt(9 + 8 * math.cos(TAU * (j + flux + offset) / rings))
            levels += [(parity + root) / 2, (parity - root) / 2]
    return np.sort(levels)


def moebius_cyclacene_gap(rings: int) -> float:
    """Half the gap of the acene with one ring less: (sqrt(9 - 8 cos(pi/n)) - 1)/2."""
    return (math.sqrt(9 - 8 * math.cos(math.pi / rings)) - 1) / 2


# --- ribbons --------------------------------------------------------------------------------


def square(rows: int, columns: int, *, half_twists: int, sigma: int, flux: float) -> Spectrum:
    """E = -2 cos k - 2 cos(pi q/(rows + 1)), k = 2 pi (n + delta + flux)/columns.

    Parity of mode q is (-1)^(q + 1). K. Yakubo, Y. Avishai & D. Cohen, Phys. Rev. B 67, 125319
    (2003).
    """
    return square_two_hoppings(
        rows, columns, half_twists=half_twists, sigma=sigma, flux=flux, across=1.0
    )


def square_two_hoppings(
    rows: int, columns: int, *, half_twists: int, sigma: int, flux: float, across: float
) -> Spectrum:
    """The same with another hopping across the strip than along it."""
    levels = []
    for q in range(1, rows + 1):
        delta = mode_offset((-1) ** (q + 1), half_twists, sigma)
        k = TAU * (np.arange(columns) + delta + flux) / columns
        levels.append(-2 * np.cos(k) - 2 * across * math.cos(math.pi * q / (rows + 1)))
    return np.sort(np.concatenate(levels))


def armchair(rows: int, length: float, *, half_twists: int, sigma: int, flux: float) -> Spectrum:
    """E = +-|2 cos p + exp(i kappa)|, p = pi r/(rows + 1), kappa the phase per half period.

    K. Wakabayashi et al., Sci. Technol. Adv. Mater. 11, 054504 (2010) [M]; closure in half
    periods: K. Wakabayashi & K. Harigaya, J. Phys. Soc. Jpn. 72, 998 (2003).
    """
    half_periods = round(2 * length)
    levels: list[float] = []
    for r in range(1, rows + 1):
        p = math.pi * r / (rows + 1)
        delta = mode_offset((-1) ** (r + 1), half_twists, sigma)
        for j in range(half_periods):
            kappa = TAU * (j + delta + flux) / half_periods
            energy = abs(2 * math.cos(p) + complex(math.cos(kappa), math.sin(kappa)))
            levels += [energy, -energy]
    return take_half(levels)


def zigzag_by_blocks(
    rows: int, length: float, *, half_twists: int, sigma: int, flux: float
) -> Spectrum:
    """Half a period at a time: x u(m) = s [g u(N + 1 - m) + u(N + 2 - m)], g = 2 cos kappa.

    The two parities s = +-1 under the flip; references as for ``armchair``. Here E = -x.
    """
    half_periods = round(2 * length)
    levels: list[float] = []
    for parity in (1, -1):
        delta = mode_offset(parity, half_twists, sigma)
        for j in range(half_periods):
            g = 2 * math.cos(TAU * (j + delta + flux) / half_periods)
            block = np.zeros((rows, rows))
            for m in range(1, rows + 1):
                block[m - 1, rows - m] += parity * g
                if m >= 2:
                    block[m - 1, rows + 1 - m] += parity
            levels += list(-np.linalg.eigvalsh(block))
    return take_half(levels)


@lru_cache(maxsize=4096)
def transverse_roots(rows: int, g: float) -> tuple[tuple[float, ...], float | None]:
    """Roots 0 < p < pi of sin(pN) + g sin(p(N + 1)) = 0, and eta of the edge state if there is one.

    The edge state (p = pi + i eta for g > 0, i eta for g < 0) obeys sinh(eta N) = |g| sinh(eta
    (N + 1)) and exists when N > |g| (N + 1). Wakabayashi et al. (2010), as above [M].
    """

    def condition(p: float) -> float:
        return math.sin(p * rows) + g * math.sin(p * (rows + 1))

    grid = np.linspace(0, math.pi, 200 * (rows + 1) + 1)[1:-1]
    values = [condition(p) for p in grid]
    roots = tuple(
        float(brentq(condition, a, b, xtol=1e-15, rtol=1e-14))
        for a, b, u, v in zip(grid, grid[1:], values, values[1:], strict=False)
        if u == 0 or u * v < 0  # a root may sit exactly on the grid
    )
    if not 0 < abs(g) < rows / (rows + 1):
        return roots, None

    def bound(eta: float) -> float:
        return abs(g) - math.exp(-eta) * math.expm1(-2 * eta * rows) / math.expm1(
            -2 * eta * (rows + 1)
        )

    return roots, float(brentq(bound, 1e-6, 60.0, xtol=1e-14))


def zigzag_by_roots(
    rows: int, length: float, *, half_twists: int, sigma: int, flux: float
) -> Spectrum:
    """Zigzag levels from the transverse wave numbers alone, +-sqrt(1 + g^2 + 2 g cos p).

    Which sign goes with which parity s, derived here from amplitudes sin(p m) on one sublattice
    and s sin(p(N + 1 - m)) on the other: x = -s sin p/sin(p(N + 1)), and for the edge state
    x = -s sinh(eta)/sinh(eta(N + 1)), times (-1)^N where g > 0.
    """
    half_periods = round(2 * length)
    levels: list[float] = []
    for parity in (1, -1):
        delta = mode_offset(parity, half_twists, sigma)
        for j in range(half_periods):
            g = 2 * math.cos(TAU * (j + delta + flux) / half_periods)
            roots, eta = transverse_roots(rows, g)
            for p in roots:
                size = math.sqrt(1 + g * g + 2 * g * math.cos(p))
                levels.append(math.copysign(size, parity * math.sin(p * (rows + 1))))
            if eta is not None:
                size = math.sinh(eta) / math.sinh(eta * (rows + 1))
                levels.append(parity * size * (1 if g < 0 else (-1) ** rows))
    return take_half(levels)


def edge_energy(rows: int, ks: float) -> float:
    """Energy of the zigzag edge state, to leading order (1 - g^2) g^N (Wakabayashi 2010 [M])."""
    g = 2 * math.cos(ks / 2)
    return (1 - g * g) * g**rows


def lieb(corner_rows: int, length: int, *, half_twists: int, sigma: int, flux: float) -> Spectrum:
    """Lieb ribbon with corner lines at both edges: the subdivided square ribbon.

    With B the corner-link amplitudes, B B^h = degree + adjacency of the square ribbon, so that
    E^2 = 4 + 2 cos k - 2 cos(pi j/M), j = 0 .. M - 1, M corner lines; mode j of the path has parity
    (-1)^(j + M + 1); further levels are 0. Subdivision graphs: D. Cvetković, M. Doob & H. Sachs,
    Spectra of Graphs, section 2.4 [M].
    """
    levels: list[float] = []
    for j in range(corner_rows):
        delta = mode_offset((-1) ** (j + corner_rows + 1), half_twists, sigma)
        for n in range(length):
            k = TAU * (n + delta + flux) / length
            square_of_e = 4 + 2 * math.cos(k) - 2 * math.cos(math.pi * j / corner_rows)
            root = math.sqrt(max(square_of_e, 0.0))
            levels += [root, -root]
    links = (2 * corner_rows - 1) * length
    zeros = corner_rows * length + links - len(levels)
    return np.sort(levels + [0.0] * zeros)


# --- currents ---------------------------------------------------------------------------------


def ring_total(sites: int, electrons: int, flux: float) -> tuple[float, float]:
    """Energy and dE/dflux of spinless electrons on a ring at T = 0, away from crossings.

    Odd numbers, |flux| < 1/2: E = -2 sin(pi Ne/N)/sin(pi/N) cos(2 pi flux/N); even numbers: the
    same with flux - 1/2, 0 < flux < 1. H.-F. Cheung, Y. Gefen, E. K. Riedel & W.-H. Shih, Phys.
    Rev. B 37, 6050 (1988) [formula M].
    """
    shifted = flux - round(flux) if electrons % 2 else flux - math.floor(flux) - 0.5
    size = 2 * math.sin(math.pi * electrons / sites) / math.sin(math.pi / sites)
    angle = TAU * shifted / sites
    return -size * math.cos(angle), size * math.sin(angle) * TAU / sites


def thermal_harmonic(order: int, ratio: float) -> float:
    """I_l/I_0 of a ring at temperature T = ratio T*, k_F L a multiple of 2 pi, k_B T* = D/2 pi^2.

    4 T/(pi T*) exp(-l T/T*)/(1 - exp(-2 l T/T*)); Cheung et al. (1988) as above [M].
    """
    return 4 * ratio / math.pi * math.exp(-order * ratio) / (1 - math.exp(-2 * order * ratio))


def annulene_total(sites: int, flux: float) -> float:
    """-4 cos(2 pi flux/N)/sin(pi/N): 4n + 2 electrons of a cyclic, 4n of a Möbius annulene."""
    return -4 * math.cos(TAU * flux / sites) / math.sin(math.pi / sites)
