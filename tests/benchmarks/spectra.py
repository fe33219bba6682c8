"""Complete spectra of clean rings."""

from __future__ import annotations

from collections.abc import Iterator

import scipy.linalg

from ribbon import all_levels
from ribbon.lattice import closing_sizes, lay_strip, shelf
from tests.benchmarks.measure import Row, alone, compare, median_seconds, ring

__all__ = ["spectra"]

ACROSS = 20

WHOLE = """
from ribbon import Hopping, all_levels, assemble, close_strip, lay_strip
strip = lay_strip({lattice!r}, rows={rows}, length={length})
ring = close_strip(strip, half_twists=1, orbital="pz")
hamiltonian = assemble(ring, Hopping())
base = memory()
start = time.perf_counter()
levels = all_levels(hamiltonian, flux=0.1)
seconds = time.perf_counter() - start
"""


def spectra(quick: bool) -> Iterator[Row]:
    """Against dense at 4,000 sites, and alone at a million for every lattice of the shelf."""
    small = ring("honeycomb-zigzag", 1000 if quick else 4000, rows=4)
    dense = small.matrix(0.1).toarray()
    ours = median_seconds(lambda: all_levels(small, flux=0.1), 5)
    plain = median_seconds(lambda: scipy.linalg.eigvalsh(dense), 1)
    name = f"complete spectrum, clean, {small.n:,} sites, flux 0.1"
    yield compare(name, ours, plain, "dense eigvalsh")
    for lattice in shelf():
        rows, length = _size(lattice, 1e5 if quick else 1e6)
        found = alone(WHOLE.format(lattice=lattice, rows=rows, length=length))
        sites = lay_strip(lattice, rows=rows, length=length).n
        yield {"job": f"complete spectrum with labels, {lattice}, {sites:,} sites", **found}


def _size(lattice: str, sites: float) -> tuple[int, float]:
    """Rows and length that close with a half twist, about 20 sites across."""
    per_row = lay_strip(lattice, rows=10, length=1).n / 10
    columns = {"honeycomb-armchair": 2, "honeycomb-zigzag": 2, "kagome": 2, "lieb": 2}
    rows = max(2, round(ACROSS * columns.get(lattice, 1) / per_row))
    length = sites / (per_row * rows)
    return closing_sizes(lattice, rows=rows, length=round(length), half_twists=1, count=1)[0]
