"""Hopping between p orbitals along normals in space, and in a uniform magnetic field.

Between unit normals n_i and n_j along a bond of direction u and length d

    <i|H|j> = V_pi(d) [n_i.n_j - (n_i.u)(n_j.u)] + V_sigma(d) (n_i.u)(n_j.u)

(Slater & Koster, Phys. Rev. 94, 1498 (1954), recalled from memory), V_pi = -t < 0. Carried once
round a one-sided ring the normal comes back reversed; that is the "pz" sign, and it is supplied
by the normals alone: the seam's own factor is never applied here. Signs of single normals cancel.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ribbon.errors import BadInput
from ribbon.hopping.amplitudes import Hopping
from ribbon.hopping.field import UniformField, peierls_turns
from ribbon.hopping.hamiltonian import Hamiltonian, assemble
from ribbon.lattice.network import Bonds, Network
from ribbon.lattice.normals import normals_from_geometry
from ribbon.lattice.ring import Ring
from ribbon.lattice.space import RingInSpace
from ribbon.lattice.strip import FloatArray

__all__ = ["SpaceRule", "space_amplitudes", "space_hopping"]

Rule = Literal["slater-koster", "cosine"]
BOND = 0.142
"""Bond length of graphene, nm: Castro Neto et al., Rev. Mod. Phys. 81, 109 (2009)."""


@dataclass(frozen=True, kw_only=True)
class SpaceRule:
    """How places and normals in space change the hoppings; each effect has a switch.

    Parameters
    ----------
    rule
        "slater-koster", or "cosine": -t times the cosine between the normals.
    tilt
        Off: the overlap of the normals is replaced by its sign, so that only the reversal round
        a one-sided ring is left.
    lengths
        Off: every bond counts as long as on the flat strip (or as ``reference``).
    sigma
        Off: no sigma part, whatever ``v_sigma``.
    decay
        beta in exp(-beta (d - d_flat) / d_ref): 3.37 by Pereira, Castro Neto & Peres, Phys. Rev.
        B 80, 045401 (2009). Laws in use differ by a factor of three; vary it.
    reference
        d_ref, nm. By default the spacing of the ring; 0.142 for a bare network, whose first
        neighbours have -t at that distance.
    v_sigma
        V_sigma at the flat length of the first shell (or at ``sigma_reference``), positive for p
        orbitals, in the unit of the hopping. None is built in: values published for two layers
        must not be carried to the length of a bond.
    sigma_decay, sigma_reference
        The same law for the sigma part, exp(-beta (d / d_ref - 1)).
    """

    rule: Rule = "slater-koster"
    tilt: bool = True
    lengths: bool = True
    sigma: bool = True
    decay: float = 3.37
    reference: float | None = None
    v_sigma: float = 0.0
    sigma_decay: float = 3.37
    sigma_reference: float | None = None

    def __post_init__(self) -> None:
        """Check words and numbers."""
        if self.rule not in get_args(Rule):
            raise BadInput(f'rule = {self.rule!r} must be "slater-koster" or "cosine"')
        for name in ("decay", "sigma_decay", "v_sigma"):
            value = getattr(self, name)
            if not (np.isfinite(value) and (value >= 0 or name == "v_sigma")):
                raise BadInput(f"{name} = {value} must be a finite number, zero or positive")
        for name in ("reference", "sigma_reference"):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and value > 0):
                raise BadInput(f"{name} = {value} must be a positive length in nm")


def space_hopping(
    place: RingInSpace | Network,
    hopping: Hopping,
    *,
    rule: SpaceRule | None = None,
    normals: ArrayLike | None = None,
    field: UniformField | None = None,
) -> Hamiltonian:
    """Put a hopping on a ring in space, or on a network with places in space.

    ``hopping`` gives t of each shell on the flat strip, site energies and disorder, as for
    `ribbon.hopping.assemble`; ``normals`` (n, 3) replace those of the ring in space (of a bare
    network: those its neighbours give). The result is on the ring, so that a threading flux can
    still be asked of its ``matrix``; the ring's own orbital plays no part. Raises `BadInput` for
    a ring that was not placed, normals of a wrong shape or of no length, and, with the tilt off,
    normals at right angles, whose sign is open.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.lattice.space import place_in_space
    >>> ring = close_strip(lay_strip("square", rows=1, length=8), half_twists=1, orbital="pz")
    >>> off = SpaceRule(tilt=False, lengths=False)
    >>> twisted = space_hopping(place_in_space(ring), Hopping(), rule=off).matrix().toarray()
    >>> np.round(np.linalg.eigvalsh(twisted)[:3], 4)  # -2 cos(pi / 8) twice: no level at -2
    array([-1.8478, -1.8478, -0.7654])
    """
    network, positions = _placed(place)
    base = assemble(network, hopping)
    if normals is not None:
        directions = _unit(normals, network.n)
    elif isinstance(place, RingInSpace):
        directions = place.normals
    else:
        directions = normals_from_geometry(positions, network.bonds)
    chosen = rule or SpaceRule()
    v_pi, v_sigma = _strengths(network, positions, hopping, rule=chosen)
    bonds = network.bonds
    amplitudes: NDArray[Any] = space_amplitudes(
        positions, directions, bonds, v_pi=v_pi, v_sigma=v_sigma, rule=chosen
    )
    if field is not None:
        turns = peierls_turns(positions, bonds, field)
        amplitudes = amplitudes * np.exp(2j * np.pi * turns)
    amplitudes.setflags(write=False)
    return Hamiltonian(
        network=network,
        hopping=hopping,
        amplitudes=amplitudes,
        site_energies=base.site_energies,
    )


def space_amplitudes(
    positions: FloatArray,
    normals: FloatArray,
    bonds: Bonds,
    *,
    v_pi: FloatArray,
    v_sigma: FloatArray,
    rule: SpaceRule,
) -> FloatArray:
    """<tail|H|head> of every bond between orbitals along unit ``normals``, shape (m,).

    ``v_pi`` and ``v_sigma`` are the two-centre integrals of each bond at its length.
    """
    unit, _ = _steps(positions, bonds)
    one, other = normals[bonds.tail], normals[bonds.head]
    overlap = np.einsum("ij,ij->i", one, other)
    along = np.einsum("ij,ij->i", one, unit) * np.einsum("ij,ij->i", other, unit)
    if rule.rule == "slater-koster":
        overlap = overlap - along
    if not rule.tilt:
        if np.abs(overlap).min(initial=1.0) < 1e-9:
            place = int(np.argmin(np.abs(overlap)))
            raise BadInput(
                f"the normals of sites {bonds.tail[place]} and {bonds.head[place]} overlap by "
                f"{overlap[place]:.1e}, which has no sign to take with the tilt off; keep it on"
            )
        overlap = np.sign(overlap)
    return np.asarray(v_pi * overlap + v_sigma * along)


def _placed(place: RingInSpace | Network) -> tuple[Network, FloatArray]:
    """The network and its places in space."""
    if isinstance(place, RingInSpace):
        return place.ring, place.positions
    if isinstance(place, Ring):
        raise BadInput(
            "a ring lies on its flat strip until it is placed; give place_in_space(ring) or its "
            "relaxed shape"
        )
    if place.positions.shape[1] != 3:
        raise BadInput(
            f"positions have the shape {place.positions.shape}; hopping in space needs (n, 3), "
            "in nm"
        )
    return place, place.positions


def _unit(normals: ArrayLike, n: int) -> FloatArray:
    """Given normals, made unit vectors."""
    given = np.array(normals, dtype=np.float64)
    if given.shape != (n, 3):
        raise BadInput(f"normals have the shape {given.shape}; expected ({n}, 3), one row a site")
    size = np.linalg.norm(given, axis=1)
    if not (np.isfinite(size).all() and size.min(initial=1.0) > 0):
        place = int(np.flatnonzero(~(np.isfinite(size) & (size > 0)))[0])
        raise BadInput(
            f"the normal of site {place} is {given[place].tolist()}; expected a direction"
        )
    return np.asarray(given / size[:, None])


def _steps(positions: FloatArray, bonds: Bonds) -> tuple[FloatArray, FloatArray]:
    """Unit vectors from tail to head and lengths of all bonds, nm."""
    step = positions[bonds.head] - positions[bonds.tail]
    long = np.linalg.norm(step, axis=1)
    if bonds.m and not long.min() > 0:
        place = int(np.argmin(long))
        raise BadInput(
            f"sites {bonds.tail[place]} and {bonds.head[place]} are bonded but stand on one "
            "place; expected a bond of some length"
        )
    return step / long[:, None], long


def _strengths(
    network: Network, positions: FloatArray, hopping: Hopping, *, rule: SpaceRule
) -> tuple[FloatArray, FloatArray]:
    """V_pi and V_sigma of every bond at its length, in the unit of the hopping."""
    bonds = network.bonds
    _, long = _steps(positions, bonds)
    spacing = network.strip.spacing if isinstance(network, Ring) else BOND
    reference = rule.reference or spacing
    if isinstance(network, Ring):
        flat = np.linalg.norm(bonds.displacement, axis=1)
    else:
        flat = np.full(bonds.m, reference)
    length = long if rule.lengths else flat
    v_pi = -np.array(hopping.shells)[bonds.shell - 1]
    v_pi = v_pi * np.exp(-rule.decay * (length - flat) / reference)
    own = rule.sigma_reference or (spacing if isinstance(network, Ring) else reference)
    v_sigma = rule.v_sigma * rule.sigma * np.exp(-rule.sigma_decay * (length / own - 1))
    return np.asarray(v_pi), np.asarray(v_sigma)
