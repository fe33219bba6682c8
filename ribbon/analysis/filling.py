"""Filling levels with electrons: gaps, occupations and the totals of a flux response.

The zero of energy is that of the Hamiltonian. At fixed electron number and temperature above
zero the chemical potential is solved for the number at every flux; this is the grand canonical
ensemble with a flux-dependent chemical potential, not the canonical one.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import brentq
from scipy.special import expit, xlogy

from ribbon.analysis.exact import blocks_of, fits_dense
from ribbon.analysis.levels import FloatArray, IntArray, Levels, finest, shell_edges
from ribbon.analysis.spectrum import all_levels, levels_at
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian
from ribbon.hopping.units import boltzmann

__all__ = ["Filled", "Filling", "Gap", "fill", "find_gap", "occupations"]


@dataclass(frozen=True, kw_only=True)
class Filling:
    """How levels are filled.

    ``electrons`` is a number or "neutral" (one electron a site) and excludes
    ``chemical_potential`` (in the unit of the Hamiltonian). ``spin`` is the number of electrons
    a level holds, 1 or 2; ``temperature`` in K.
    """

    electrons: float | Literal["neutral"] | None = "neutral"
    chemical_potential: float | None = None
    spin: int = 2
    temperature: float = 0.0

    def __post_init__(self) -> None:
        """Check the combination."""
        if self.spin not in {1, 2}:
            raise BadInput(f"sweep.spin = {self.spin} must be 1 or 2 electrons a level")
        if not (np.isfinite(self.temperature) and self.temperature >= 0):
            raise BadInput(f"sweep.temperature = {self.temperature} must be 0 K or more")
        if self.chemical_potential is not None and not np.isfinite(self.chemical_potential):
            raise BadInput("sweep.chemical_potential must be a finite energy")

    def number(self, sites: int) -> float | None:
        """Electron number for so many sites, or None at fixed chemical potential.

        Raises `BadInput` when the levels cannot hold so many.
        """
        if self.chemical_potential is not None:
            return None
        number = float(sites) if self.electrons in {"neutral", None} else float(self.electrons)
        if not 0 <= number <= self.spin * sites:
            raise BadInput(
                f"sweep.electrons = {number:g} must be from 0 to {self.spin * sites}, what "
                f"{sites} levels hold with spin = {self.spin}"
            )
        return number


@dataclass(frozen=True, kw_only=True)
class Gap:
    """Frontier levels at a filling: highest occupied ``lower``, lowest with room ``upper``.

    ``gap`` is zero and ``open_shell`` true where the filling cuts a shell of equal levels, or
    leaves a level partly filled.
    """

    lower: float
    upper: float
    gap: float
    lower_index: int
    upper_index: int
    open_shell: bool

    @property
    def known(self) -> bool:
        """False where the frontier could not be certified."""
        return not (np.isnan(self.lower) and np.isnan(self.upper))


@dataclass(frozen=True, kw_only=True)
class Filled:
    """One flux point of the totals, in the unit of the Hamiltonian (see `Totals`)."""

    slope: float
    left: float
    right: float
    shared: bool
    electrons: float
    chemical_potential: float
    energy: float


def find_gap(
    hamiltonian: Hamiltonian,
    *,
    electrons: float | Literal["neutral"] = "neutral",
    spin: int = 2,
    flux: float = 0.0,
) -> Gap:
    """Frontier levels and gap at a filling with so many electrons, at zero temperature.

    Where every level is full or empty there is no gap to speak of: ``upper`` or ``lower`` and
    ``gap`` are then NaN. Raises `NotCertified` where the frontier cannot be certified.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> benzene = assemble(Network.from_pairs([(i, (i + 1) % 6) for i in range(6)]), Hopping())
    >>> round(find_gap(benzene).gap, 6)
    2.0
    """
    number = Filling(electrons=electrons, spin=spin).number(hamiltonian.n)
    assert number is not None
    highest = int(np.ceil(number / spin - 1e-12)) - 1
    lowest = int(np.floor(number / spin + 1e-12))
    if highest < 0 or lowest >= hamiltonian.n:
        return _no_gap(hamiltonian, flux, full=highest >= 0)
    if blocks_of(hamiltonian) is not None or fits_small(hamiltonian, flux):
        energies = all_levels(hamiltonian, flux=flux).energies
        lower, upper = float(energies[highest]), float(energies[lowest])
    else:
        found = levels_at(hamiltonian, min(highest, lowest), max(highest, lowest), flux=flux)
        place = dict(zip(found.index.tolist(), found.energies.tolist(), strict=True))
        lower, upper = place[highest], place[lowest]
    gap = max(upper - lower, 0.0)
    open_shell = gap <= finest(hamiltonian)
    return Gap(
        lower=lower,
        upper=upper,
        gap=0.0 if open_shell else gap,
        lower_index=highest,
        upper_index=lowest,
        open_shell=open_shell,
    )


def _no_gap(hamiltonian: Hamiltonian, flux: float, *, full: bool) -> Gap:
    """Frontier of a spectrum that is full or empty: one level, and no gap."""
    place = hamiltonian.n - 1 if full else 0
    energy = float(levels_at(hamiltonian, place, place, flux=flux).energies[-1 if full else 0])
    return Gap(
        lower=energy if full else float("nan"),
        upper=float("nan") if full else energy,
        gap=float("nan"),
        lower_index=place if full else -1,
        upper_index=hamiltonian.n if full else place,
        open_shell=False,
    )


def fits_small(hamiltonian: Hamiltonian, flux: float) -> bool:
    """True where a dense diagonalisation is the quicker way to two levels."""
    return hamiltonian.n <= 1500 and fits_dense(hamiltonian, flux, states=False)


def occupations(levels: Levels, filling: Filling, *, sites: int, same: float) -> FloatArray | None:
    """Electrons in every level of ``levels``, shape (m,); None where only a window is known."""
    if levels.certificate.count_lower or levels.m < sites:
        return None
    occupied, _, _ = _occupy(levels.energies, filling, sites=sites, same=same, unit=levels.unit)
    return occupied


def fill(
    energies: FloatArray, slopes: FloatArray, filling: Filling, *, same: float, unit: str
) -> Filled:
    """Fill a complete spectrum with slopes dE/d(flux); levels within ``same`` are one shell.

    At zero temperature a shell cut by the filling is shared equally and flagged; ``left`` and
    ``right`` are the one-sided slopes, filling the shell's members that are lowest just before
    and just after this flux.
    """
    spin = filling.spin
    occupied, potential, cut = _occupy(energies, filling, sites=energies.size, same=same, unit=unit)
    electrons = float(occupied.sum())
    slope = float(occupied @ slopes)
    left = right = slope
    if cut is not None and filling.temperature == 0:
        first, last = cut
        rest = float(occupied[first:last].sum())
        outside = slope - float(occupied[first:last] @ slopes[first:last])
        steep = np.sort(slopes[first:last])
        if filling.chemical_potential is None:
            right = outside + _lowest(steep, rest, spin)
            left = outside + _lowest(steep[::-1], rest, spin)
        else:
            right = outside + spin * float(steep[steep < 0].sum())
            left = outside + spin * float(steep[steep > 0].sum())
    return Filled(
        slope=slope,
        left=left,
        right=right,
        shared=cut is not None,
        electrons=electrons,
        chemical_potential=potential,
        energy=_potential(energies, occupied, filling, potential, unit),
    )


def _lowest(slopes: FloatArray, electrons: float, spin: int) -> float:
    """Slope of a shell whose members are filled one after another in the order given."""
    room = np.clip(electrons - spin * np.arange(slopes.size), 0.0, spin)
    return float(room @ slopes)


def _occupy(
    energies: FloatArray, filling: Filling, *, sites: int, same: float, unit: str
) -> tuple[FloatArray, float, tuple[int, int] | None]:
    """Occupations, chemical potential, and the shell that the filling cuts at T = 0."""
    number = filling.number(sites)
    if filling.temperature > 0:
        thermal = boltzmann(unit) * filling.temperature
        potential = filling.chemical_potential
        if number is not None and number in {0.0, float(filling.spin * sites)}:
            # nothing can move: any potential beyond the band does
            return np.full(sites, number / sites), float("nan"), None
        if potential is None:
            assert number is not None
            potential = _solve_potential(energies, number / filling.spin, thermal)
        return filling.spin * expit((potential - energies) / thermal), potential, None
    if number is None:
        assert filling.chemical_potential is not None
        return _below(energies, filling.chemical_potential, filling.spin, same)
    return _from_bottom(energies, number, filling.spin, same)


def _below(
    energies: FloatArray, potential: float, spin: int, same: float
) -> tuple[FloatArray, float, tuple[int, int] | None]:
    first, last = (int(np.searchsorted(energies, potential + s * same)) for s in (-1, 1))
    occupied = np.zeros(energies.size)
    occupied[:first] = spin
    occupied[first:last] = spin / 2
    return occupied, potential, (first, last) if last > first else None


def _from_bottom(
    energies: FloatArray, number: float, spin: int, same: float
) -> tuple[FloatArray, float, tuple[int, int] | None]:
    edges: IntArray = shell_edges(energies, same)
    shell = int(np.searchsorted(spin * edges, number * (1 + 1e-14), side="right")) - 1
    occupied = np.zeros(energies.size)
    occupied[: edges[shell]] = spin
    rest = number - spin * int(edges[shell])
    if rest <= 1e-9 or shell + 1 >= edges.size:
        full = int(edges[shell])
        below = energies[full - 1] if full else energies[0]
        above = energies[full] if full < energies.size else energies[-1]
        return occupied, float((below + above) / 2), None
    first, last = int(edges[shell]), int(edges[shell + 1])
    occupied[first:last] = rest / (last - first)
    return occupied, float(energies[first]), (first, last)


def _solve_potential(energies: FloatArray, levels: float, thermal: float) -> float:
    if not 0 < levels < energies.size:
        raise BadInput(
            "sweep.electrons leaves all levels full or empty: no chemical potential gives this "
            "number at a temperature above zero"
        )
    spread = 60 * thermal + thermal * np.log(energies.size + 1)
    whole = int(levels)
    low, high = energies[:whole], energies[whole:]
    rest = np.log(levels - whole) if levels > whole else -np.inf

    def excess(potential: float) -> float:
        # electrons above the filling against holes below it, by logarithms: inside a gap both
        # are too small to show in a sum of occupations
        electrons = np.logaddexp.reduce(-np.logaddexp(0.0, (high - potential) / thermal))
        holes = np.logaddexp.reduce(
            -np.logaddexp(0.0, (potential - low) / thermal), initial=-np.inf
        )
        return float(electrons - np.logaddexp(holes, rest))

    ends = (energies[0] - spread, energies[-1] + spread)
    return float(brentq(excess, *ends, xtol=1e-14 * thermal, rtol=1e-14))


def _potential(
    energies: FloatArray, occupied: FloatArray, filling: Filling, potential: float, unit: str
) -> float:
    """The thermodynamic potential whose derivative by flux is the total slope.

    Energy (or free energy F = E - TS) at fixed number, grand potential E - TS - mu N at fixed
    chemical potential.
    """
    total = float(occupied @ energies)
    if filling.temperature > 0:
        share = occupied / filling.spin
        entropy = -filling.spin * float((xlogy(share, share) + xlogy(1 - share, 1 - share)).sum())
        total -= boltzmann(unit) * filling.temperature * entropy
    if filling.chemical_potential is not None:
        total -= potential * float(occupied.sum())
    return total
