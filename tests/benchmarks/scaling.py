"""Cost against size: log-log figure and fitted exponents for each path."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure

from ribbon import Hamiltonian, all_levels, count_below, levels_near
from ribbon.analysis.moments import spectral_moments
from tests.benchmarks.measure import Row, median_seconds, ring

__all__ = ["draw_scaling", "scaling"]


def _fresh(hamiltonian: Hamiltonian) -> object:
    return hamiltonian.data(0.1)


PATHS: dict[str, tuple[float, Callable[[Hamiltonian], object]]] = {
    "matrix at a new flux": (0.0, _fresh),
    "complete spectrum, clean": (0.0, lambda h: all_levels(h, flux=0.1)),
    "count below an energy": (1.0, lambda h: count_below(h, 0.3)),
    "20 certified levels": (1.0, lambda h: levels_near(h, 0.3, count=20)),
    "256 moments, 2 vectors": (1.0, lambda h: spectral_moments(h, 256, vectors=2)),
}


def scaling(quick: bool) -> Iterator[Row]:
    """Seconds of every path at sizes a factor of about three apart, 10 across."""
    sizes = (3_000, 10_000, 30_000) if quick else (3_000, 10_000, 30_000, 100_000, 300_000)
    for name, (disorder, job) in PATHS.items():
        taken = []
        for sites in sizes:
            hamiltonian = ring("square", sites, rows=10, disorder=disorder)
            job(hamiltonian)
            taken.append(median_seconds(lambda j=job, h=hamiltonian: j(h), 2))
        slope = float(np.polyfit(np.log(sizes[1:]), np.log(taken[1:]), 1)[0])
        yield {
            "job": f"cost against size: {name}",
            "exponent": slope,
            "sizes": sizes,
            "each": taken,
        }


def draw_scaling(rows: list[Row], path: Path) -> None:
    """The figure of these rows, log-log."""
    figure = Figure(figsize=(6.4, 3.4), layout="constrained")
    axes = figure.subplots()
    for row, mark in zip((r for r in rows if "exponent" in r), "osD^v", strict=False):
        name = row["job"].partition(": ")[2]
        label = f"{name}: n^{row['exponent']:.2f}"
        axes.loglog(row["sizes"], row["each"], marker=mark, ms=4, lw=1, label=label)
    axes.set_xlabel("sites")
    axes.set_ylabel("seconds")
    axes.legend(frameon=False, fontsize=7, loc="upper left", bbox_to_anchor=(1.0, 1.0))
    figure.savefig(path, dpi=130)
