"""Closed forms of clean rings with known transverse modes, on the lattice and in the continuum.

Square lattice with hard walls, honeycomb with zigzag edges and with armchair edges, first
neighbours, equal site energies. Energies here are counted from the band bottom (square) or from
the Dirac point (honeycomb). Wave numbers are kinetic, ``wave`` = n + delta + flux in 2 pi / L,
folded into (-length/2, length/2]. ``band`` counts transverse modes from 1, on honeycomb with
zigzag edges from the one nearest to the Dirac point; ``sign`` tells the two halves of the Dirac
spectrum apart.

Sources: square, Yakubo, Avishai & Cohen, Phys. Rev. B 67, 125319 (2003); honeycomb lattices,
Wakabayashi, Sasaki, Nakanishi & Enoki, Sci. Technol. Adv. Mater. 11, 054504 (2010, recalled from
memory); Dirac ribbons, Brey & Fertig, Phys. Rev. B 73, 235411 (2006).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian
from ribbon.lattice import Lattice

__all__ = [
    "Kind",
    "Mesh",
    "Modes",
    "all_modes",
    "continuum_energy",
    "finer",
    "lattice_energy",
    "mesh_of",
    "size_of_wave",
]

Kind = Literal["square", "zigzag", "armchair"]

ROOT3 = math.sqrt(3)
PERIODS: dict[Kind, float] = {"square": 1.0, "zigzag": ROOT3, "armchair": 3.0}

HALVINGS = 80
FLAT = 1e-9
"""Waves this near to the zone boundary stand on it."""
REFINE: dict[Kind, int] = {"square": 2, "armchair": 2, "zigzag": 4}
"""How much finer the next mesh is: the least that keeps W, L, the closure and the offset."""


@dataclass(frozen=True, kw_only=True)
class Mesh:
    """A clean ring as the closed forms know it; lengths in nm, ``sign`` is sigma^h.

    ``length`` counts lattice periods, ``hopping`` is t, ``zero`` the band bottom or Dirac point
    on the Hamiltonian's own zero of energy.
    """

    kind: Kind
    rows: int
    length: float
    spacing: float
    hopping: float
    zero: float
    flips: bool
    sign: float
    flux: float

    @property
    def period(self) -> float:
        """Lattice period along the ring, nm."""
        return PERIODS[self.kind] * self.spacing

    @property
    def circumference(self) -> float:
        """Length once round, nm."""
        return self.length * self.period

    @property
    def width(self) -> float:
        """Width between the hard walls, nm."""
        lines = {
            "square": self.rows + 1.0,
            "zigzag": (3 * self.rows + 2) / 2,
            "armchair": (self.rows + 1) * ROOT3 / 2,
        }
        return lines[self.kind] * self.spacing

    @property
    def stiffness(self) -> float:
        """hbar^2/2m* = t a^2 (square) or hbar v = 3 t a / 2 (honeycomb): what meshes share."""
        square = self.kind == "square"
        return self.hopping * (self.spacing**2 if square else 1.5 * self.spacing)

    def offset(self, parity: AnyArray) -> FloatArray:
        """delta of the closing rule exp(ikL) parity^h = sigma^h: 0 or 1/2."""
        closing = self.sign * (parity if self.flips else np.ones_like(parity))
        return np.where(closing > 0, 0.0, 0.5)


@dataclass(frozen=True, kw_only=True, eq=False)
class Modes:
    """Quantum numbers of m levels; see the module text."""

    wave: FloatArray
    band: IntArray
    sign: IntArray
    parity: IntArray

    def select(self, chosen: AnyArray) -> Modes:
        """The chosen modes, by mask or by number."""
        return Modes(
            wave=self.wave[chosen],
            band=self.band[chosen],
            sign=self.sign[chosen],
            parity=self.parity[chosen],
        )


def mesh_of(hamiltonian: Hamiltonian, flux: float) -> Mesh:
    """The mesh of a Hamiltonian; `BadInput` says why there is no continuum formula for one."""
    ring = hamiltonian.ring
    if ring is None:
        raise BadInput("a continuum comparison needs a ring; this network is not closed round one")
    lattice = ring.strip.lattice
    kind = _kind(lattice)
    if kind is None:
        raise BadInput(
            f'there is no continuum formula for lattice "{lattice.name}"; there is one for '
            "square, honeycomb-zigzag and honeycomb-armchair"
        )
    if ring.shells > 1 and any(hamiltonian.hopping.shells[1:]):
        raise BadInput(
            "the continuum formulas know first neighbours only; give hopping.shells one number"
        )
    energies = hamiltonian.site_energies
    if ring.kept is not None or np.ptp(energies) > 0:
        raise BadInput(
            "the continuum formulas are for clean rings; disorder, vacancies and unequal site "
            "energies have none"
        )
    hopping = hamiltonian.hopping.shells[0]
    if hopping <= 0:
        raise BadInput(f"hopping.shells = [{hopping:g}]: the continuum limit needs t > 0")
    return Mesh(
        kind=kind,
        rows=ring.strip.rows,
        length=ring.strip.length,
        spacing=ring.strip.spacing,
        hopping=float(hopping),
        zero=float(energies[0]) - (4 * hopping if kind == "square" else 0.0),
        flips=ring.flips,
        sign=float(ring.closure.factor(np.array([1]))[0]),
        flux=flux,
    )


def _kind(lattice: Lattice) -> Kind | None:
    """Which of the known lattices a definition describes, by its geometry."""
    lines = lattice.lines
    heights = [lattice.line_height(i + 1) - lattice.line_height(i) for i in range(len(lines) * 2)]
    sizes = {len(line.x) for line in lines}

    def like(period: float, sites: int, steps: tuple[float, ...], per_row: int) -> bool:
        wanted = np.resize(steps, len(heights))
        return (
            abs(lattice.period - period) < 1e-4
            and sizes == {sites}
            and bool(np.allclose(heights, wanted, rtol=0, atol=1e-4))
            and lattice.lines_per_row == per_row
        )

    if like(1.0, 1, (1.0,), 1):
        return "square"
    if like(ROOT3, 1, (0.5, 1.0), 2):
        return "zigzag"
    return "armchair" if like(3.0, 2, (ROOT3 / 2,), 1) else None


def all_modes(mesh: Mesh) -> Modes:
    """Every mode of a ring, as many as it has sites."""
    signs = (1,) if mesh.kind == "square" else (1, -1)
    parts = []
    for sign in signs:
        for parity in (1, -1):
            wave = _waves(mesh, parity)
            band = np.arange(1, mesh.rows + 1)
            grid = np.repeat(wave, band.size), np.tile(band, wave.size)
            found = _parity(mesh, *grid, sign=sign)
            kept = found == parity
            parts.append([array[kept] for array in (*grid, np.full(kept.size, sign), found)])
    wave, band, sign_of, parity_of = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Modes(wave=wave, band=band, sign=sign_of, parity=parity_of)


def _waves(mesh: Mesh, parity: int) -> FloatArray:
    """Wave numbers in (-length/2, length/2] that the closing rule allows."""
    start = float(mesh.offset(np.array(float(parity)))) + mesh.flux
    half = mesh.length / 2
    first = np.floor(-half - start + FLAT) + 1
    last = np.floor(half - start + FLAT)
    return np.asarray(np.arange(first, last + 1) + start)


def _parity(mesh: Mesh, wave: FloatArray, band: IntArray, *, sign: int) -> IntArray:
    """Parity of a mode under the flip about the midline (with its glide)."""
    alternating = 1 - 2 * ((band + 1) % 2)
    if mesh.kind != "zigzag":
        return np.asarray(alternating)
    # amplitudes sin p(N+1-m) on one sublattice, parity * sin pm on the other; p = pi - theta
    theta, _, edge = _zigzag_roots(mesh.rows, _bloch(mesh, wave), band)
    rows = 1 if mesh.rows % 2 else -1
    ratio = np.sin(theta) * np.sin((mesh.rows + 1) * theta)
    return np.where(edge | (ratio > 0), -sign * rows, sign * rows).astype(np.int64)


def _bloch(mesh: Mesh, wave: FloatArray) -> FloatArray:
    """g = 2 cos(ks/2) of zigzag chains, 0 at the zone boundary."""
    g = 2 * np.cos(np.pi * np.abs(wave) / mesh.length)
    return np.where(np.abs(g) < FLAT, 0.0, g)


def lattice_energy(mesh: Mesh, modes: Modes) -> FloatArray:
    """Energy of every mode on the lattice, from the band bottom or the Dirac point."""
    t, n = mesh.hopping, mesh.rows
    if mesh.kind == "square":
        along, across = np.pi * modes.wave / mesh.length, np.pi * modes.band / (2 * (n + 1))
        return np.asarray(4 * t * (np.sin(along) ** 2 + np.sin(across) ** 2))
    if mesh.kind == "armchair":
        half, p = np.pi * modes.wave / mesh.length, np.pi * modes.band / (n + 1)
        # |2 cos p + exp(i 3ka/2)|, written as a sum of squares
        size = np.hypot(2 * np.cos(p) + np.cos(half), np.sin(half))
        return np.asarray(modes.sign * t * size)
    theta, eta, edge = _zigzag_roots(n, _bloch(mesh, modes.wave), modes.band)
    with np.errstate(invalid="ignore", divide="ignore"):
        inside = np.abs(np.sin(theta) / np.sin((n + 1) * theta))
        # sinh(eta) / sinh((n + 1) eta) without overflow
        bound = np.exp(-n * eta) * np.expm1(-2 * eta) / np.expm1(-2 * (n + 1) * eta)
    return np.asarray(modes.sign * t * np.where(edge, np.where(eta < np.inf, bound, 0.0), inside))


def _zigzag_roots(n: int, g: FloatArray, band: IntArray) -> tuple[FloatArray, FloatArray, AnyArray]:
    """theta = pi - p of sin(n theta) = g sin((n+1) theta), or eta where the mode is an edge state.

    For 0 <= g < n/(n+1) the first mode has no real root: sinh(n eta) = g sinh((n+1) eta).
    """
    edge = (band == 1) & (g * (n + 1) < n)
    step = np.pi / (n + 1)
    low, high = (band - 1) * step, band * step
    rising = np.where(band % 2 == 1, 1.0, -1.0)  # sign of the left side at the upper end

    def inside(theta: FloatArray) -> FloatArray:
        return np.asarray(rising * (np.sin(n * theta) - g * np.sin((n + 1) * theta)))

    theta = _bisect(inside, low, high)
    with np.errstate(divide="ignore"):
        top = np.where(edge, -np.log(np.where(edge, g, 1.0)), 1.0)
    ended = ~np.isfinite(top)

    def outside(eta: FloatArray) -> FloatArray:
        ratio = np.exp(-eta) * np.expm1(-2 * n * eta) / np.expm1(-2 * (n + 1) * eta)
        return np.asarray(g - ratio)

    eta = _bisect(outside, np.full(g.shape, 1e-300), np.where(ended, 1.0, top))
    return theta, np.where(ended, np.inf, eta), edge


def _bisect(
    function: Callable[[FloatArray], FloatArray], low: AnyArray, high: AnyArray
) -> FloatArray:
    """Where functions that rise from below to above zero cross it, all at once."""
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        below = function(middle) < 0
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return (low + high) / 2


def size_of_wave(mesh: Mesh, modes: Modes) -> FloatArray:
    """Largest phase from site to site, |k| a: the continuum is meant for small ones."""
    along = 2 * np.pi * np.abs(modes.wave) / mesh.circumference
    if mesh.kind == "square":
        return np.asarray(mesh.spacing * np.maximum(along, np.pi * modes.band / mesh.width))
    energy = np.abs(continuum_energy(mesh, modes))
    near = energy / mesh.stiffness
    off = np.abs(along - _valley(mesh)) if mesh.kind == "zigzag" else along
    return np.asarray(mesh.spacing * np.maximum(near, off))


def _valley(mesh: Mesh) -> float:
    """Wave number of the Dirac points of zigzag ribbons, K s = 2 pi / 3, per nm."""
    return 2 * np.pi / (3 * mesh.period)


def continuum_energy(mesh: Mesh, modes: Modes) -> FloatArray:
    """Energy of every mode in the continuum: Schroedinger or Dirac with hard walls."""
    along = 2 * np.pi * modes.wave / mesh.circumference
    if mesh.kind == "square":
        return np.asarray(mesh.stiffness * (along**2 + (np.pi * modes.band / mesh.width) ** 2))
    if mesh.kind == "armchair":
        across = np.pi * modes.band / mesh.width - 4 * np.pi / (3 * ROOT3 * mesh.spacing)
        return np.asarray(modes.sign * mesh.stiffness * np.hypot(along, across))
    off = np.abs(along) - _valley(mesh)
    size = _dirac_zigzag(off * mesh.width, modes.band) / mesh.width
    return np.asarray(modes.sign * mesh.stiffness * size)


def _dirac_zigzag(kappa: FloatArray, band: IntArray) -> FloatArray:
    """|E| W / hbar v of zigzag walls: kappa = x cot x confined, kappa > 1 the edge mode."""
    edge = (band == 1) & (kappa > 1)

    def confined(x: FloatArray) -> FloatArray:
        return np.asarray(kappa - x / np.tan(x))

    small = 1e-12
    x = _bisect(confined, (band - 1) * np.pi + small, band * np.pi - small)
    # z = kappa tanh z is the root of (kappa - z)/(kappa + z) = exp(-2z)
    z = _bisect(lambda z: z - kappa * np.tanh(z), np.full(kappa.shape, 1e-9), np.maximum(kappa, 1))
    decayed = np.exp(-np.where(edge, z, 0.0))
    bound = kappa * 2 * decayed / (1 + decayed**2)
    return np.where(edge, bound, np.hypot(kappa, x))


def finer(mesh: Mesh, modes: Modes) -> tuple[Mesh, Modes]:
    """The next finer mesh of the same ring in the continuum, and the same modes on it."""
    ratio = REFINE[mesh.kind]
    rows = ratio * mesh.rows + (2 if mesh.kind == "zigzag" else ratio - 1)
    power = 2 if mesh.kind == "square" else 1
    fine = replace(
        mesh,
        rows=rows,
        length=ratio * mesh.length,
        spacing=mesh.spacing / ratio,
        hopping=mesh.hopping * ratio**power,
    )
    if mesh.kind == "armchair":
        # q = pi r / W - 4 pi / (3 sqrt(3) a) turns its sign; E depends on its size only
        return fine, replace(modes, band=rows + 1 - modes.band)
    if mesh.kind == "zigzag":
        # the Dirac point moves out; the distance from it stays
        wave = modes.wave + np.where(modes.wave >= 0, mesh.length, -mesh.length)
        parity = modes.parity if mesh.rows % 2 == 0 else -modes.parity
        return fine, replace(modes, wave=wave, parity=parity)
    return fine, modes
