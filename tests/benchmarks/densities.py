"""Moments of the density of states against the plain recursion."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from threadpoolctl import threadpool_limits

from ribbon import Hamiltonian
from ribbon.analysis.moments import spectral_moments
from tests.benchmarks.measure import Row, compare, median_seconds, ring

__all__ = ["densities"]

STEPS = 16
BYTES_PER_STEP = 24
"""Of a fused step: two vectors read and one written, 8 bytes a site each (performance limit)."""


def densities(quick: bool) -> Iterator[Row]:
    """One random vector's share of a block of 32."""
    sites, moments, vectors = (50_000, 256, 32) if quick else (1_000_000, 1024, 32)
    bandwidth = _bandwidth()
    for lattice, rows in (("square", 20), ("honeycomb-zigzag", 10)):
        hamiltonian = ring(lattice, sites, rows=rows, disorder=1.0)

        def ours(h: Hamiltonian = hamiltonian) -> object:
            return spectral_moments(h, moments, vectors=vectors)

        taken = median_seconds(ours, 1 if not quick else 3) / vectors
        with threadpool_limits(limits=1, user_api="blas"):  # two slow its dot products down
            plain = median_seconds(lambda h=hamiltonian: _plain(h), 3) * moments / STEPS
        name = f"{moments:,} moments, {lattice}, {hamiltonian.n:,} sites, per vector"
        limit = moments / 2 * BYTES_PER_STEP * hamiltonian.n / bandwidth
        yield compare(name, taken, plain, "plain recursion") | {"of_limit": limit / taken}


def _plain(hamiltonian: Hamiltonian) -> list[float]:
    """2 (A v1) - v0 and two dot products a step, one vector."""
    matrix = hamiltonian.matrix() / (1.01 * hamiltonian.scale)
    start = np.random.default_rng(1).choice([-1.0, 1.0], hamiltonian.n)
    before, now = start, matrix @ start
    found = []
    for _ in range(STEPS):
        before, now = now, 2 * (matrix @ now) - before
        found += [float(start @ now), float(now @ now)]
    return found


def _bandwidth() -> float:
    """Bytes a second of a large copy, read and write."""
    one = np.zeros(50_000_000)
    two = np.ones_like(one)
    return 2 * one.nbytes / median_seconds(lambda: np.copyto(two, one), 5)
