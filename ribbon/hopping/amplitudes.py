"""Amplitudes, site energies and disorder: what is put on the sites and bonds of a network."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ribbon.errors import BadInput
from ribbon.hopping.units import check_unit, hbar2_over_2m
from ribbon.lattice import Network, Ring

__all__ = ["Hopping", "SiteEnergy", "draw_vacancies", "effective_mass", "resolve_site_energies"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
SiteEnergy = (
    float | FloatArray | Mapping[str, float] | Callable[[FloatArray, FloatArray], FloatArray]
)

LARGEST = 1e12


@dataclass(frozen=True, kw_only=True, eq=False)
class Hopping:
    """Amplitudes per shell and site energies, all in ``unit``.

    Parameters
    ----------
    shells
        t of first, second and third neighbours; the matrix element is -t.
    site_energy
        A number, an array with one value a site, a mapping from sublattice label to a number,
        or a callable on the arrays x and y (nm; y from the midline).
    disorder
        Full width of the uniform distribution of random site energies, drawn from ``seed``.

    Raises `BadInput` for amplitudes that are not finite or a negative width.

    >>> Hopping(shells=(2.7, 0.1)).shells
    (2.7, 0.1)
    """

    shells: tuple[float, ...] = (1.0,)
    site_energy: SiteEnergy = 0.0
    disorder: float = 0.0
    seed: int = 1
    unit: str = "t"

    def __post_init__(self) -> None:
        """Check the numbers; an array of site energies is copied and read-only from then on."""
        if isinstance(self.site_energy, np.ndarray):
            held = np.array(self.site_energy, dtype=np.float64)
            held.setflags(write=False)
            object.__setattr__(self, "site_energy", held)
        check_unit(self.unit)
        if not 1 <= len(self.shells) <= 3:
            raise BadInput(f"hopping.shells = {list(self.shells)} must be one to three numbers")
        if any(not math.isfinite(t) or abs(t) > LARGEST for t in self.shells):
            raise BadInput(f"hopping.shells = {list(self.shells)} must be finite numbers")
        if not (math.isfinite(self.disorder) and 0 <= self.disorder < LARGEST):
            raise BadInput(f"disorder.strength = {self.disorder} must be zero or a positive number")
        if self.seed < 0:
            raise BadInput(f"disorder.seed = {self.seed} must be zero or a positive whole number")


def effective_mass(mass: float, spacing: float, *, unit: str = "meV") -> Hopping:
    """Hopping of the square lattice for electrons of effective mass ``mass``.

    t = hbar^2 / (2 m* a^2) with a = ``spacing`` in nm, and the site energy 4 t, so that
    energies are counted from the band bottom of the endless plane.

    >>> round(effective_mass(0.067, 2.0).shells[0], 2)
    142.16
    """
    if not (math.isfinite(mass) and mass > 0):
        raise BadInput(f"hopping.mass = {mass} must be a positive number of electron masses")
    amplitude = hbar2_over_2m(mass, unit) / spacing**2
    return Hopping(shells=(amplitude,), site_energy=4 * amplitude, unit=unit)


def draw_vacancies(n: int, fraction: float, *, seed: int) -> IntArray:
    """Sites to remove: ``fraction`` of ``n`` sites rounded to a count, drawn from ``seed``."""
    if not 0 <= fraction < 1:
        raise BadInput(f"disorder.vacancies = {fraction} must be from 0 to below 1")
    count = round(fraction * n)
    if count >= n:
        raise BadInput(f"disorder.vacancies = {fraction} would remove every site")
    return np.sort(_generator(seed, 1).choice(n, size=count, replace=False)).astype(np.int64)


def resolve_site_energies(network: Network, hopping: Hopping) -> FloatArray:
    """Site energies of a network, shape (n,), disorder included.

    Raises `BadInput` when an array has the wrong length, a value is not finite, a label is
    unknown, or a term given by place does not fit the seam: what the flip carries onto each
    other must be equal. Arrays and disorder are attached to sites and always fit.
    """
    energies = _given(network, hopping.site_energy)
    if not np.isfinite(energies).all():
        raise BadInput("hopping.site_energy holds a value that is not a finite number")
    if hopping.disorder:
        total = network.strip.n if isinstance(network, Ring) else network.n
        drawn = hopping.disorder * (_generator(hopping.seed, 0).random(total) - 0.5)
        kept = network.kept if isinstance(network, Ring) else None
        energies = energies + (drawn if kept is None else drawn[kept])
    return energies


def _generator(seed: int, purpose: int) -> np.random.Generator:
    """Independent streams for site energies (0) and vacancies (1) of one seed."""
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(purpose,)))


def _given(network: Network, term: SiteEnergy) -> FloatArray:
    if isinstance(term, Mapping):
        return _by_sublattice(network, term)
    if callable(term):
        return _by_place(network, term)
    values = np.asarray(term, dtype=np.float64)
    if values.ndim == 0:
        return np.broadcast_to(np.float64(values), (network.n,))  # one number, whatever the size
    if values.shape != (network.n,):
        raise BadInput(
            f"site energies have the shape {values.shape}; expected one for each of the "
            f"{network.n} sites"
        )
    return values.copy()


def _by_sublattice(network: Network, term: Mapping[str, float]) -> FloatArray:
    if not isinstance(network, Ring):
        raise BadInput("site energies by sublattice need a ring laid from a lattice")
    labels = network.strip.cell.sublattice
    for label in term:
        if label not in labels:
            raise BadInput(
                f"hopping.site_energy names the sublattice {label!r}; this lattice has "
                f"{', '.join(sorted(set(labels.tolist())))}"
            )
    values = np.array([term.get(label, 0.0) for label in labels], dtype=np.float64)
    image = values[network.closure.back_site]
    if not np.array_equal(values, image):
        place = int(np.flatnonzero(values != image)[0])
        raise BadInput(
            f"hopping.site_energy by sublattice does not fit this seam: the flip carries "
            f"sublattice {labels[place]} onto {labels[network.closure.back_site[place]]}, whose "
            "energy differs (a staggered energy on a one-sided zigzag ring needs a domain wall); "
            "give equal energies, or an even number of half twists"
        )
    every = np.resize(values, network.strip.n)
    return every if network.kept is None else every[network.kept]


def _by_place(network: Network, term: Callable[[FloatArray, FloatArray], FloatArray]) -> FloatArray:
    x, y = network.positions[:, 0], network.positions[:, 1]
    values = _evaluate(term, x, y)
    if isinstance(network, Ring):
        image = _evaluate(term, x + network.circumference, -y if network.flips else y)
        scale = float(np.max(np.abs(values), initial=1.0))
        gap = np.abs(values - image)
        if gap.max() > 1e-9 * scale:
            worst = int(np.argmax(gap))
            raise BadInput(
                "the site energy given as a function of x and y does not fit the seam: at "
                f"({x[worst]:.6g}, {y[worst]:.6g}) nm it is {values[worst]:.6g}, but "
                f"{image[worst]:.6g} at the place the seam identifies with it; give an array to "
                "attach energies to sites"
            )
    return values


def _evaluate(
    term: Callable[[FloatArray, FloatArray], FloatArray], x: FloatArray, y: FloatArray
) -> FloatArray:
    values = np.asarray(term(x, y), dtype=np.float64)
    try:
        return np.broadcast_to(values, x.shape).copy()
    except ValueError:
        raise BadInput(
            f"the site energy function returned the shape {values.shape}; expected {x.shape}"
        ) from None
