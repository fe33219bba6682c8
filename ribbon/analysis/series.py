"""From Chebyshev moments to a density and its integral.

Jackson's kernel damps the truncated series so that it is never negative: nearly Gaussian, of the
width pi / count in the middle of (-1, 1) and narrower towards its ends (A. Weisse, G. Wellein,
A. Alvermann & H. Fehske, Rev. Mod. Phys. 78, 275 (2006)). For any other shape the moments are
turned into weights on fixed points, which are broadened as levels are.
"""

from __future__ import annotations

import numpy as np
from scipy.fft import dct

from ribbon.analysis.levels import FloatArray

__all__ = ["jackson", "jackson_series", "nodes", "point_weights"]


def nodes(moments: int, middle: float, half: float) -> FloatArray:
    """Energies on which `point_weights` stand, ascending: zeros of the T of twice the degree."""
    angle = np.pi * (np.arange(2 * moments)[::-1] + 0.5) / (2 * moments)
    return np.asarray(middle + half * np.cos(angle))


def point_weights(samples: FloatArray) -> FloatArray:
    """Weights on the `nodes` that have these moments, shape (r, 2 count).

    Gauss and Chebyshev's quadrature: the sum over the nodes of any polynomial of a degree below
    three times the count is that polynomial's mean over the truncated series of the density.
    """
    points = 2 * samples.shape[1]
    return np.asarray(dct(samples, type=3, n=points, axis=1)[:, ::-1] / points)


def jackson(count: int) -> FloatArray:
    """Factors of Jackson's kernel for ``count`` moments (Weisse et al. 2006).

    >>> jackson(2).round(6).tolist()
    [1.0, 0.5]
    """
    n, step = np.arange(count), np.pi / (count + 1)
    factor = (count - n + 1) * np.cos(step * n) + np.sin(step * n) / np.tan(step)
    return np.asarray(factor / (count + 1))


def jackson_series(samples: FloatArray, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Density in x = (E - middle) / half, and its integral, both of shape (r, p).

    With x = cos(theta), the density is (m_0 + 2 sum m_n cos(n theta)) / (pi sin(theta)) and its
    integral from below m_0 (1 - theta/pi) - 2 sum m_n sin(n theta) / (n pi), term by term.
    Beyond the interval there is nothing.
    """
    count = samples.shape[1]
    damped = samples * jackson(count)
    n = np.arange(1, count)
    density, below = np.empty((2, samples.shape[0], x.size))
    for first in range(0, x.size, 256):
        part = x[first : first + 256]
        angle = np.arccos(np.clip(part, -1, 1))
        phase = n[:, None] * angle
        series = damped[:, :1] + 2 * damped[:, 1:] @ np.cos(phase)
        inside = np.abs(part) < 1
        width = np.sqrt(np.where(inside, 1 - part**2, 1.0))
        density[:, first : first + 256] = np.where(inside, series / (np.pi * width), 0.0)
        waves = (damped[:, 1:] / n) @ np.sin(phase)
        below[:, first : first + 256] = damped[:, :1] * (1 - angle / np.pi) - 2 / np.pi * waves
    return density, below
