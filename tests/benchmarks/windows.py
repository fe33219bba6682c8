"""Certified counts and windows of disordered rings against general sparse ways."""

from __future__ import annotations

from collections.abc import Iterator

from scipy.sparse import csc_array, eye_array
from scipy.sparse.linalg import splu
from threadpoolctl import threadpool_limits

from ribbon import count_below
from tests.benchmarks.measure import Row, alone, compare, median_seconds, ring

__all__ = ["windows"]

ENERGY = 0.3
LEVELS = 20
DISORDER = 2.0

SETUP = """
import scipy.sparse.linalg
from threadpoolctl import threadpool_limits
from ribbon import levels_near
from tests.benchmarks.measure import ring
limits = threadpool_limits(1, user_api="blas")
hamiltonian = ring("square", {sites}, rows={rows}, disorder={disorder})
matrix = hamiltonian.matrix(0.0, gauge="seam")
small = ring("square", 3000, rows={rows}, disorder={disorder})
levels_near(small, {energy}, count={levels})  # compiled code is loaded before the clock runs
base = memory()
start = time.perf_counter()
"""
OURS = (
    SETUP
    + """
levels_near(hamiltonian, {energy}, count={levels}, states=True)
seconds = time.perf_counter() - start
"""
)
PLAIN = (
    SETUP
    + """
scipy.sparse.linalg.eigsh(matrix, k={levels}, sigma={energy})
seconds = time.perf_counter() - start
"""
)


def windows(quick: bool) -> Iterator[Row]:
    """Counts, then windows with their certificate and states; one BLAS thread."""
    with threadpool_limits(limits=1, user_api="blas"):
        yield from _counts(quick)
    sizes = [(20_000, 10)] if quick else [(100_000, 10), (100_000, 20), (1_000_000, 20)]
    for sites, rows in sizes:
        given = {"sites": sites, "rows": rows, "disorder": DISORDER, "energy": ENERGY}
        ours, plain = (alone(code.format(**given, levels=LEVELS)) for code in (OURS, PLAIN))
        name = f"{LEVELS} certified levels, disordered, {sites:,} sites, {rows} across"
        row = compare(name, ours["seconds"], plain["seconds"], "eigsh, no certificate")
        yield row | {"memory": ours["peak_MB"] / plain["peak_MB"], "peak_MB": ours["peak_MB"]}


def _counts(quick: bool) -> Iterator[Row]:
    sites = 20_000 if quick else 1_000_000
    for lattice, flux in (("square", 0.0), ("square", 0.1), ("honeycomb-zigzag", 0.0)):
        rows = 20 if lattice == "square" else 10
        hamiltonian = ring(lattice, sites, rows=rows, disorder=DISORDER)
        matrix = hamiltonian.matrix(flux, gauge="seam")
        shifted = csc_array(matrix - (ENERGY + 1.6e-7) * eye_array(hamiltonian.n))
        count_below(hamiltonian, 0.1, flux=flux)
        ours = median_seconds(lambda h=hamiltonian, f=flux: count_below(h, ENERGY, flux=f), 3)
        plain = median_seconds(
            lambda m=shifted: splu(
                m, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0,
                options={"SymmetricMode": True},
            ),
            1,
        )  # fmt: skip
        kind = "complex" if flux else "real"
        name = f"certified count, {lattice}, {kind}, {hamiltonian.n:,} sites, 20 across"
        yield compare(name, ours, plain, "one sparse LU, symmetric mode")
