"""Flux sweeps of windows and of complete spectra."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy.sparse.linalg import eigsh
from threadpoolctl import threadpool_limits

from ribbon import Window, sweep_flux
from tests.benchmarks.measure import Row, compare, median_seconds, ring

__all__ = ["sweeps"]

ENERGY = 0.3


def sweeps(quick: bool) -> Iterator[Row]:
    """200 fluxes of a 20-level window with currents, certified, against eigsh at every flux."""
    sites, points = (10_000, 20) if quick else (100_000, 200)
    with threadpool_limits(limits=1, user_api="blas"):
        hamiltonian = ring("square", sites, rows=10, disorder=0.3)
        fluxes = np.linspace(0.0, 1.0, points, endpoint=False) + 0.003
        window = Window(near=ENERGY, count=20)
        ours = median_seconds(lambda: sweep_flux(hamiltonian, fluxes, window=window), 1)
        few = 3 if quick else 5

        def plain() -> None:
            eigsh(hamiltonian.matrix(0.237), k=20, sigma=ENERGY)

        each = median_seconds(plain, few)
        name = f"{points} fluxes of 20 levels with currents, {hamiltonian.n:,} sites, 10 across"
        yield compare(name, ours, each * points, "eigsh at every flux, no currents")
        clean = ring("honeycomb-zigzag", 2000, rows=8)
        whole = Window(all=True)
        taken = median_seconds(lambda: sweep_flux(clean, fluxes, window=whole), 3) / points
        name = f"complete spectrum with currents, {clean.n:,} sites, a flux"
        yield {"job": name, "seconds": taken}
