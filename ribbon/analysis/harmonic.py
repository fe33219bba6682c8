"""Harmonics of a total current, and whether a ring really repeats after half a flux quantum."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ribbon.analysis.exact import blocks_of, fits_dense
from ribbon.analysis.flux import Totals
from ribbon.analysis.levels import FloatArray, IntArray, tolerance
from ribbon.analysis.spectrum import all_levels
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian

__all__ = ["HalfQuantum", "Harmonics", "half_quantum", "harmonics"]

PROBES = (0.137, 0.0, 0.311)


@dataclass(frozen=True, kw_only=True, eq=False)
class Harmonics:
    """-dE/d(flux) = sum over l of sine_l sin(2 pi l flux) + cosine_l cos(2 pi l flux).

    In the unit of the Hamiltonian per flux quantum; times -`current_factor` it is the current.
    """

    order: IntArray
    sine: FloatArray
    cosine: FloatArray


@dataclass(frozen=True, kw_only=True)
class HalfQuantum:
    """Does the spectrum repeat after half a flux quantum?

    ``difference`` is the largest difference of sorted levels between flux and flux + 1/2.
    ``current_difference`` is the same for the total slope along a sweep, None where the sweep
    does not show it.
    """

    holds: bool
    difference: float
    current_difference: float | None


def harmonics(totals: Totals, *, orders: int = 8) -> Harmonics:
    """Fourier harmonics of the total current over whole periods of the flux.

    Raises `BadInput` unless the sweep covers whole flux quanta in equal steps.
    """
    flux = totals.flux
    periods = _periods(flux)
    if not periods:
        raise BadInput(
            "harmonics need sweep.flux over one whole flux quantum in equal steps, such as "
            "{ from = 0.0, to = 1.0, points = 101 }"
        )
    count = flux.size - 1
    order = np.arange(1, min(orders, (count // periods - 1) // 2) + 1)
    angle = 2 * np.pi * np.outer(order, flux[:-1])
    current = -totals.slope[:-1]
    return Harmonics(
        order=order,
        sine=2 / count * np.sin(angle) @ current,
        cosine=2 / count * np.cos(angle) @ current,
    )


def half_quantum(hamiltonian: Hamiltonian, totals: Totals | None = None) -> HalfQuantum | None:
    """Compare complete spectra at flux and flux + 1/2; None where they are out of reach,
    or where no level feels the flux.

    ``totals`` of a sweep over one flux quantum in an even number of equal steps show the same
    for the total current.
    """
    clean = blocks_of(hamiltonian) is not None
    if hamiltonian.ring is None or not (clean or fits_dense(hamiltonian, 0.25, states=False)):
        return None
    felt, difference = 0.0, 0.0
    for flux in PROBES if clean else PROBES[:1]:
        here, quarter, there = (
            all_levels(hamiltonian, flux=flux + step).energies for step in (0.0, 0.25, 0.5)
        )
        felt = max(felt, float(np.abs(here - quarter).max()))
        difference = max(difference, float(np.abs(here - there).max()))
    if felt <= 100 * tolerance(hamiltonian):
        return None  # localised: no level feels the flux, and any period would seem to hold
    return HalfQuantum(
        holds=difference <= 10 * tolerance(hamiltonian),
        difference=difference,
        current_difference=_current_difference(totals),
    )


def _current_difference(totals: Totals | None) -> float | None:
    periods = 0 if totals is None else _periods(totals.flux)
    if totals is None or not periods or (totals.flux.size - 1) % (2 * periods):
        return None
    half = (totals.flux.size - 1) // (2 * periods)
    once = totals.slope[:-1]
    return float(np.abs(once - np.roll(once, -half)).max())


def _periods(flux: FloatArray) -> int:
    """How many whole flux quanta an evenly spaced sweep covers; 0 for any other sweep."""
    if flux.size < 3:
        return 0
    steps = np.diff(flux)
    span = float(flux[-1] - flux[0])
    even = bool(np.allclose(steps, steps[0], rtol=0, atol=1e-9))
    whole = round(span)
    fits = whole >= 1 and (flux.size - 1) % whole == 0
    return whole if even and fits and abs(span - whole) <= 1e-9 else 0
