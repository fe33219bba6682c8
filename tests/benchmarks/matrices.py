"""Building matrices and changing their flux."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import partial

import numpy as np

from ribbon import Hopping, assemble, close_strip, lay_strip
from tests.benchmarks.measure import Row, alone, compare, median_seconds, ring
from tests.benchmarks.plain import by_coo, by_tree

__all__ = ["matrices"]

BUILD = """
from ribbon import Hopping, assemble, close_strip, lay_strip
base = memory()
start = time.perf_counter()
strip = lay_strip("honeycomb-zigzag", rows=20, length={length})
ring = close_strip(strip, half_twists=1, orbital="pz")
matrix = assemble(ring, Hopping()).matrix(0.1)
seconds = time.perf_counter() - start
"""


def matrices(quick: bool) -> Iterator[Row]:
    """Everything about matrices."""
    yield from _build(quick)
    yield from _flux(quick)


def _build(quick: bool) -> Iterator[Row]:
    sites = 1e5 if quick else 1e7
    runs = 3 if quick else 5

    def ours() -> object:
        strip = lay_strip("honeycomb-zigzag", rows=20, length=sites / 40)
        closed = close_strip(strip, half_twists=1, orbital="pz")
        return assemble(closed, Hopping()).matrix(0.1)

    built = median_seconds(ours, runs)
    hamiltonian = ring("honeycomb-zigzag", sites, rows=20)
    matrix = hamiltonian.matrix(0.1)
    size = sum(a.nbytes for a in (matrix.data, matrix.indices, matrix.indptr)) / 1024**2
    name = f"complex CSR of {hamiltonian.n:,} honeycomb sites"
    copied = median_seconds(matrix.copy, runs)
    yield compare(f"{name}: one copy of the arrays", built, copied, "copy")
    peak = alone(BUILD.format(length=int(sites / 40)))["peak_MB"]
    yield {"job": f"{name}: peak memory", "peak_MB": peak, "matrix_MB": size, "part": peak / size}
    del matrix
    listed = median_seconds(lambda: by_coo(hamiltonian), 1 if sites > 1e6 else runs)
    yield compare(name, built, listed, "COO to CSR, bonds at hand")
    fresh = ring("honeycomb-zigzag", sites, rows=20)
    searched = median_seconds(lambda: by_tree(fresh), 1)
    yield compare(name, built, searched, "KD-tree over all sites")


def _next(tune: Callable[[float], object], fluxes: Iterator[float]) -> object:
    return tune(float(next(fluxes)))


def _flux(quick: bool) -> Iterator[Row]:
    runs = 3 if quick else 5
    hamiltonian = ring("honeycomb-zigzag", 1e5 if quick else 1e6, rows=20)
    fluxes = iter(np.linspace(0.01, 0.4, 1000))
    seam, uniform = hamiltonian.tunable(gauge="seam"), hamiltonian.tunable(gauge="uniform")
    matrix = uniform(0.3)
    target = np.empty_like(matrix.data)
    copied = median_seconds(lambda: np.copyto(target, matrix.data), runs)
    for gauge, tune in (("seam", seam), ("uniform", uniform)):
        taken = median_seconds(partial(_next, tune, fluxes), runs)
        yield compare(f"new flux, {hamiltonian.n:,} sites, {gauge} gauge", taken, copied, "copy")
