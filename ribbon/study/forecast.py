"""What a job will cost, said before it starts: measured constants, scaled to this machine.

A short calibration (a small dense diagonalisation, some 20 ms, once) says how fast the machine
is now against the one the constants were measured on.
"""

from __future__ import annotations

import os
import time
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.linalg
from threadpoolctl import threadpool_limits

from ribbon.analysis import Window
from ribbon.analysis.exact import blocks_of, dense_bytes, fits_dense
from ribbon.analysis.levels import FloatArray
from ribbon.analysis.reduction import enough_fluxes
from ribbon.errors import TooLarge
from ribbon.hopping import Hamiltonian

__all__ = [
    "MOST_KEPT",
    "Forecast",
    "available_bytes",
    "forecast_levels",
    "forecast_sweep",
    "levels_wanted",
    "refuse_if_too_large",
    "slowness",
]

# seconds on the machine where the calibration took CALIBRATED, measured with the benchmark
CALIBRATED = 5.0e-3
CALIBRATION_SIZE = 160
DENSE_STATES = 4.0e-10
DENSE_VALUES = 1.5e-10
BLOCK = 2.0e-9
BLOCK_BASE = 2.0e-6
SPARSE_SITE = 1.0e-4
REDUCED_SITE = 6.0e-5
REDUCED_FLUX = 3.0e-3
REDUCED_VECTORS = 400
BYTES_PER_ROW = 400
"""Of a level at one flux: arrays, tables and their text."""
MOST_KEPT = 256 * 1024**2
"""States are kept up to this size; levels alone beyond it."""
SHARE = 0.8
"""Part of the free memory that a job may take."""


@dataclass(frozen=True, kw_only=True)
class Forecast:
    """Expected time in seconds and memory in bytes, and the method it is for."""

    method: str
    seconds: float
    bytes: int

    @property
    def memory(self) -> str:
        """The memory in words."""
        if self.bytes >= 1024**3:
            return f"{self.bytes / 1024**3:.1f} GiB"
        return f"{max(1, round(self.bytes / 1024**2))} MiB"


@lru_cache(maxsize=1)
def slowness() -> float:
    """How many times slower this machine is than the one the constants were measured on."""
    draw = np.random.default_rng(0).standard_normal((2, CALIBRATION_SIZE, CALIBRATION_SIZE))
    matrix = draw[0] + 1j * draw[1]
    matrix = matrix + matrix.conj().T
    times = []
    with threadpool_limits(limits=1, user_api="blas"):
        for _ in range(3):
            start = time.perf_counter()
            scipy.linalg.eigh(matrix, driver="evd", check_finite=False)
            times.append(time.perf_counter() - start)
    return min(times) / CALIBRATED


def available_bytes() -> int:
    """Memory that is free on this machine; 8 GiB where the system does not tell."""
    try:
        return int(os.sysconf("SC_AVPHYS_PAGES") * os.sysconf("SC_PAGE_SIZE"))
    except (AttributeError, OSError, ValueError):
        return 8 * 1024**3


def levels_wanted(hamiltonian: Hamiltonian, window: Window) -> int:
    """How many levels a window holds at most."""
    if window.all or window.between is not None:
        return hamiltonian.n
    return min(window.count, hamiltonian.n)


def refuse_if_too_large(expected: Forecast, what: str, advice: str) -> None:
    """Raise `TooLarge` where the memory forecast exceeds what is free."""
    have = available_bytes()
    if expected.bytes > SHARE * have:
        raise TooLarge(
            f"{what} would take about {expected.memory}, and {have / 1024**3:.1f} GiB are free "
            f"here; {advice}"
        )


def forecast_levels(hamiltonian: Hamiltonian, window: Window, flux: float) -> Forecast:
    """Expected cost of one window of levels."""
    n = hamiltonian.n
    blocks = blocks_of(hamiltonian)
    if blocks is not None:
        kept = 16 * n * min(levels_wanted(hamiltonian, window), MOST_KEPT // (16 * n))
        seconds = sum(
            s.momenta.size * (BLOCK_BASE + BLOCK * s.size**3) + 1e-7 * s.size**2 * s.momenta.size
            for s in blocks.sectors
        )
        store = sum(16 * 4 * s.momenta.size * s.size**2 for s in blocks.sectors)
        seconds *= slowness()
        return Forecast(method="symmetry", seconds=seconds, bytes=store + 2 * kept)
    if window.all and fits_dense(hamiltonian, flux, states=True):
        return _dense(n, DENSE_STATES)
    if n <= 600:
        return _dense(n, DENSE_VALUES)
    seconds = slowness() * SPARSE_SITE * n * (1 + (window.count or 40) / 40)
    held = n * (1500 + 32 * min(window.count, n))
    return Forecast(method="sparse", seconds=seconds, bytes=held)


def forecast_sweep(hamiltonian: Hamiltonian, fluxes: FloatArray, window: Window) -> Forecast:
    """Expected cost of a flux sweep."""
    one = forecast_levels(hamiltonian, window, 0.25)
    points = fluxes.size
    if one.method != "symmetry" and fits_dense(hamiltonian, 0.25, states=True):
        one = _dense(hamiltonian.n, DENSE_STATES)
        reduced = np.abs(fluxes - np.rint(fluxes)).round(12)
        points = np.unique(reduced).size
    wanted = levels_wanted(hamiltonian, window)
    held = BYTES_PER_ROW * fluxes.size * wanted
    if one.method == "sparse" and window.method == "auto" and enough_fluxes(hamiltonian, fluxes):
        seconds = slowness() * (REDUCED_SITE * hamiltonian.n + REDUCED_FLUX * points)
        basis = 8 * REDUCED_VECTORS * hamiltonian.n
        return Forecast(method="reduced", seconds=seconds, bytes=one.bytes + held + basis)
    if one.method == "dense":  # states of the window at every flux, until its mirror comes
        held += 16 * points * hamiltonian.n * wanted
    return Forecast(method=one.method, seconds=one.seconds * points, bytes=one.bytes + held)


def _dense(n: int, cost: float) -> Forecast:
    need = dense_bytes(n, complex_=True, states=True)
    return Forecast(method="dense", seconds=slowness() * cost * n**3, bytes=need)
