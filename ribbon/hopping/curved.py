"""An effective-mass electron on a curved ring: the metric of the surface and its potential.

A place (x, y) of the strip (x along the midline, y from it, nm) goes to

    r = ((R + y cos alpha) cos theta, (R + y cos alpha) sin theta, y sin alpha),

theta = x / R, alpha = h theta / 2, R = L / 2 pi (as `ribbon.lattice.space` lays a ring). Lines of
equal x are straight and meet the midline and each other line at right angles, so the metric is
ds^2 = f^2 dx^2 + dy^2 with the stretch f; with c = h / 2R and P = R + y cos alpha

    f^2 = (P / R)^2 + (c y)^2,   K = -c^2 / f^4,   M = sin alpha (f^2 + c^2 y^2) / (2 R f^3).

The energy of a state psi is (hbar^2 / 2m) int [ |psi_x|^2 / f + f |psi_y|^2 + f V |psi|^2 ] dx dy
against int f |psi|^2 dx dy, with V = -(M^2 - K) of da Costa, Phys. Rev. A 23, 1982 (1981)
(recalled from memory). On the sites of the square lattice each bond takes its term with f at the
middle of the bond, walls included; psi -> psi sqrt(f) at the sites then gives a symmetric matrix,

    <i|H|j> = -t w_ij / sqrt(f_i f_j),   <i|H|i> = t [ sum_j w_ij / f_i + a^2 V_i ],

w = 1 / f along and f across. Its levels err by the square of the spacing. Handedness changes none.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import get_args

import numpy as np

from ribbon.errors import BadInput
from ribbon.hopping.amplitudes import Hopping
from ribbon.hopping.hamiltonian import Hamiltonian, assemble
from ribbon.lattice.definition import TOLERANCE
from ribbon.lattice.ring import Ring
from ribbon.lattice.space import Form
from ribbon.lattice.strip import FloatArray, Strip, frozen

__all__ = ["CurvedSurface", "curved_hopping", "surface_of"]


@dataclass(frozen=True, kw_only=True)
class CurvedSurface:
    """A surface with a circle of ``radius`` (nm) for a midline, in the coordinates of its strip.

    ``form`` is "twisted" (``half_twists`` 1 or more), "annulus" (flat) or "cylinder" (bent round
    its axis, metric flat). Going on by 2 pi R with y -> (-1)^h y changes nothing but the sign of
    the mean curvature. Raises `BadInput` for numbers and words that do not fit.

    >>> surface = CurvedSurface(radius=1.0, half_twists=1)
    >>> x, y = np.array([0.0, np.pi]), np.array([0.1, 0.1])
    >>> surface.stretch(x, y).round(6).tolist()  # outside and above the midline
    [1.101136, 1.001249]
    >>> surface.gaussian_curvature(x, 0 * y).tolist(), surface.mean_curvature(x, 0 * y).tolist()
    ([-0.25, -0.25], [0.0, 0.5])
    """

    radius: float
    half_twists: int
    form: Form = "twisted"

    def __post_init__(self) -> None:
        """Check the numbers, and that the form has this many half twists."""
        if not (np.isfinite(self.radius) and self.radius > 0):
            raise BadInput(f"radius = {self.radius} must be a positive length in nm")
        if self.half_twists != int(self.half_twists) or self.half_twists < 0:
            raise BadInput(f"half_twists = {self.half_twists} must be a whole number, 0 or more")
        if self.form not in get_args(Form):
            raise BadInput(f'form = {self.form!r} must be "twisted", "annulus" or "cylinder"')
        if (self.form == "twisted") != (self.half_twists > 0):
            fit = '"twisted"' if self.half_twists else '"annulus" or "cylinder"'
            raise BadInput(
                f"form = {self.form!r} does not fit half_twists = {self.half_twists}, which goes "
                f"with {fit}"
            )

    @property
    def twist_rate(self) -> float:
        """Turning of the lines across per length of the midline, c = h / 2R, rad/nm."""
        return self.half_twists / (2 * self.radius)

    def stretch(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """Length on the surface per length along x, f = sqrt(g_xx); also the area per dx dy.

        Exactly 1 on a cylinder.
        """
        if self.form == "cylinder":
            return np.ones(np.broadcast(x, y).shape)
        reach = 1 + y * np.cos(self.twist_rate * x) / self.radius
        return np.asarray(np.hypot(reach, self.twist_rate * y))

    def gaussian_curvature(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """K in 1/nm^2: negative everywhere on a twisted surface, zero on the others."""
        return np.asarray(-(self.twist_rate**2) / self.stretch(x, y) ** 4)

    def mean_curvature(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """M in 1/nm, along the normal that stands up at x = 0 (outward on a cylinder: -1/2R)."""
        f = self.stretch(x, y)
        if self.form == "cylinder":
            return np.asarray(-f / (2 * self.radius))
        lean = np.sin(self.twist_rate * x) / (2 * self.radius)
        return np.asarray(lean * (f**2 + (self.twist_rate * y) ** 2) / f**3)

    def potential(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """The geometric potential over hbar^2 / 2m: -(M^2 - K) in 1/nm^2, nowhere positive."""
        return self.gaussian_curvature(x, y) - self.mean_curvature(x, y) ** 2


def surface_of(ring: Ring, *, form: Form | None = None) -> CurvedSurface:
    """The surface on which `ribbon.lattice.space.place_in_space` lays a ring.

    ``form`` is "twisted" for a twisted ring and "annulus" for a plain one where it is not given.
    Raises `BadInput` where the walls stand as far from the midline as its centre (a cylinder may
    be as wide as it likes), and for a form that does not fit the half twists.
    """
    chosen: Form = form or ("twisted" if ring.half_twists else "annulus")
    surface = CurvedSurface(
        radius=ring.circumference / (2 * np.pi), half_twists=ring.half_twists, form=chosen
    )
    half = ring.strip.width / 2
    if chosen != "cylinder" and half >= surface.radius:
        raise BadInput(
            f"ribbon.rows = {ring.strip.rows} puts the walls {half:.6g} nm from the midline, "
            f"whose circle has the radius {surface.radius:.6g} nm; a band that wide would meet "
            "itself: take a longer ring" + ("" if ring.half_twists else ' or form = "cylinder"')
        )
    return surface


def curved_hopping(
    ring: Ring,
    hopping: Hopping,
    *,
    form: Form | None = None,
    metric: bool = True,
    potential: bool = True,
) -> Hamiltonian:
    """Put a hopping of the square lattice on the curved surface of a ring.

    ``hopping`` is that of the flat strip, as a rule `ribbon.hopping.effective_mass`: its t stands
    for hbar^2 / (2 m a^2), and what it holds of site energies and disorder is kept. ``metric``
    off leaves every length as on the flat strip; ``potential`` off leaves out the geometric
    potential. With both off amplitudes and site energies are, to the bit, those of
    `ribbon.hopping.assemble`. Walls are hard, one spacing beyond the outermost rows. The seam
    factor of the orbital and a threading flux act as ever. Raises `BadInput` for another lattice,
    for second neighbours, and as `surface_of` does.

    >>> from ribbon.hopping import effective_mass
    >>> from ribbon.lattice import close_strip, lay_strip
    >>> ring = close_strip(lay_strip("square", rows=1, length=8), half_twists=1, orbital="s")
    >>> curved = curved_hopping(ring, effective_mass(0.067, ring.strip.spacing))
    >>> plain = assemble(ring, curved.hopping)
    >>> ratio = curved.amplitudes / plain.amplitudes
    >>> ratio.round(6).tolist()  # on the midline f = 1: a chain, with a potential of its own
    [1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0]
    """
    strip = _check(ring, hopping)
    surface = surface_of(ring, form=form)
    flat = assemble(ring, hopping)
    amplitudes, energies = flat.amplitudes, flat.site_energies
    (t,), a = hopping.shells, strip.spacing
    x, y = ring.positions.T
    if metric:
        amplitudes = amplitudes * _bond_weights(ring, surface)
        # the four of the flat strip stand in its site energy already
        energies = energies + t * (_site_weights(surface, x, y, spacing=a) - 4.0)
    if potential:
        energies = energies + t * a**2 * surface.potential(x, y)
    return Hamiltonian(
        network=ring,
        hopping=hopping,
        amplitudes=frozen(np.array(amplitudes)),
        site_energies=frozen(np.array(energies)),
    )


def _bond_weights(ring: Ring, surface: CurvedSurface) -> FloatArray:
    """w_ij / sqrt(f_i f_j) of every bond, shape (m,).

    All in the frame of the tail: the far end is taken at the image that the bond leads to, where
    the stretch is that of the site itself.
    """
    bonds = ring.bonds
    x, y = ring.positions[bonds.tail].T
    dx, dy = bonds.displacement.T
    middle = surface.stretch(x + dx / 2, y + dy / 2)
    weight = np.where(np.abs(dx) > np.abs(dy), 1 / middle, middle)
    ends = surface.stretch(x, y) * surface.stretch(x + dx, y + dy)
    return np.asarray(weight / np.sqrt(ends))


def _site_weights(
    surface: CurvedSurface, x: FloatArray, y: FloatArray, *, spacing: float
) -> FloatArray:
    """Sum of w_ij / f_i over the four neighbours of a place, shape (n,).

    All four count, whether there is a site or a wall: psi is zero at a wall and where a site was
    removed, and the slope towards it costs what it costs.
    """
    half = spacing / 2
    along = 1 / surface.stretch(x - half, y) + 1 / surface.stretch(x + half, y)
    across = surface.stretch(x, y - half) + surface.stretch(x, y + half)
    return np.asarray((along + across) / surface.stretch(x, y))


def _check(ring: Ring, hopping: Hopping) -> Strip:
    """The strip of a ring that this discretisation fits."""
    if not isinstance(ring, Ring):
        raise BadInput(
            f"a curved surface needs a ring made by close_strip, not a {type(ring).__name__}"
        )
    strip = ring.strip
    if not _is_square(strip):
        raise BadInput(
            f"ribbon.lattice = {strip.lattice.name!r}: an effective mass on a curved surface "
            'needs the sites of the "square" lattice'
        )
    if ring.shells != 1 or len(hopping.shells) != 1:
        raise BadInput(
            f"the ring has shells = {ring.shells} and hopping.shells = {list(hopping.shells)}; "
            "an effective mass on a curved surface takes first neighbours alone: give one"
        )
    return strip


def _is_square(strip: Strip) -> bool:
    """True where the sites of a period fill a square grid, ``rows`` wide, whatever its name."""
    cell = strip.cell
    x, y = cell.x, cell.y + (strip.rows - 1) / 2
    off = max(float(np.abs(z - np.rint(z)).max()) for z in (x, y))
    return (
        cell.n == strip.rows * round(cell.period)
        and abs(cell.period - round(cell.period)) < TOLERANCE
        and off < TOLERANCE
        and bool(y.min() > -0.5)
        and bool(y.max() < strip.rows - 0.5)
    )
