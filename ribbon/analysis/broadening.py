"""Levels, or points with weights, drawn out into Gaussians on a grid of energies."""

from __future__ import annotations

import numpy as np
from scipy.special import erf

from ribbon.analysis.levels import FloatArray
from ribbon.errors import BadInput

__all__ = ["MOST_POINTS", "POINTS", "REACH", "bins", "broadened", "check_broadening", "grid"]

POINTS = 801
REACH = 6.0
"""A level broadened by a Gaussian is followed so many widths to either side."""
MOST_POINTS = 20_001


def check_broadening(broadening: float) -> None:
    """Raise `BadInput` for a broadening that is not a positive number."""
    if not (np.isfinite(broadening) and broadening > 0):
        raise BadInput(f"levels.broadening = {broadening} must be a positive energy")


def grid(low: float, high: float, broadening: float) -> FloatArray:
    """An even grid over levels from ``low`` to ``high`` that resolves the broadening if it can."""
    low, high = low - REACH * broadening, high + REACH * broadening
    points = int(np.clip(np.ceil((high - low) / broadening * 4), POINTS, MOST_POINTS))
    return np.linspace(low, high, points)


def bins(low: float, high: float, broadening: float) -> FloatArray:
    """Edges of a histogram of levels from ``low`` to ``high``, a broadening apart if it can."""
    count = int(np.clip(np.ceil((high - low) / broadening) + 1, 1, MOST_POINTS))
    middle, half = (low + high) / 2, max(count * broadening, 1.001 * (high - low)) / 2
    return np.linspace(middle - half, middle + half, count + 1)


def broadened(
    energies: FloatArray, points: FloatArray, broadening: float, weights: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Sums of Gaussians and of their integrals on ``points``, both of shape (r, p).

    ``energies``, shape (m,), ascend; ``weights`` holds one row for each sum, shape (r, m). A
    piece of the points is done at a time, with the energies near it.
    """
    shape = (weights.shape[0], points.size)
    density, below = np.empty(shape), np.empty(shape)
    passed = np.concatenate([np.zeros((shape[0], 1)), np.cumsum(weights, axis=1)], axis=1)
    reach = 9 * broadening
    for first in range(0, points.size, 64):
        part = slice(first, first + 64)
        low = int(np.searchsorted(energies, points[part].min() - reach))
        high = int(np.searchsorted(energies, points[part].max() + reach))
        off = (points[part] - energies[low:high, None]) / broadening
        near = weights[:, low:high]
        density[:, part] = near @ np.exp(-(off**2) / 2)
        below[:, part] = passed[:, low, None] + near @ (1 + erf(off / np.sqrt(2))) / 2
    return density / (broadening * np.sqrt(2 * np.pi)), below
