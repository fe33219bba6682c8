"""Time and memory of the main jobs, and ratios against the plain way, measured in one run.

    python -m tests.benchmarks [--quick] [--json FILE]

Nothing here asserts a time: machines differ. Medians of the runs are printed.
"""

from __future__ import annotations

import argparse
import json
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import scipy.linalg
from scipy.sparse import coo_array
from scipy.sparse.linalg import eigsh
from threadpoolctl import threadpool_limits

import ribbon
from ribbon.analysis.counting import count_negative, find_order

ROOT = Path(__file__).resolve().parents[2]
EXAMPLE = ROOT / "examples" / "zigzag-graphene.toml"


def median_seconds(job: Callable[[], object], runs: int) -> float:
    """Median wall time of several runs."""
    times = []
    for _ in range(runs):
        start = time.perf_counter()
        job()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def hamiltonian(length: float, *, rows: int = 8, disorder: float = 0.0) -> ribbon.Hamiltonian:
    """A one-sided zigzag ring."""
    strip = ribbon.lay_strip("honeycomb-zigzag", rows=rows, length=length)
    ring = ribbon.close_strip(strip, half_twists=1, orbital="pz")
    return ribbon.assemble(ring, ribbon.Hopping(shells=(1.0,), disorder=disorder))


def plain_matrix(pairs: list[tuple[int, int]], n: int) -> coo_array:
    """The plain way: Python lists, one bond at a time."""
    rows, columns, values = [], [], []
    for tail, head in pairs:
        rows += [tail, head]
        columns += [head, tail]
        values += [-1.0, -1.0]
    return coo_array((values, (rows, columns)), shape=(n, n)).tocsr()


def compare(name: str, ours: float, plain: float, what: str) -> dict[str, object]:
    """One line of the table."""
    return {"job": name, "seconds": ours, "plain": plain, "ratio": plain / ours, "against": what}


def studies(quick: bool) -> Iterator[dict[str, object]]:
    """Whole runs of the command, in processes of their own."""
    command = [sys.executable, "-m", "ribbon.cli"]
    seconds = median_seconds(
        lambda: subprocess.run([*command, "--help"], check=True, capture_output=True), 5
    )
    yield {"job": "ribbon --help", "seconds": seconds}
    jobs = {"study, clean, 2,000 sites, 101 fluxes, two controls": []}
    if not quick:
        jobs["study, disordered, 2,000 sites, 21 fluxes"] = [
            "--set",
            "disorder.strength=0.3",
            "--set",
            "sweep.flux.points=21",
        ]
    for name, options in jobs.items():
        with tempfile.TemporaryDirectory() as folder:
            start = time.perf_counter()
            out = str(Path(folder) / "study")
            subprocess.run(
                [*command, "study", str(EXAMPLE), "--out", out, "--quiet", *options],
                check=True,
                capture_output=True,
            )
            taken = time.perf_counter() - start
        # the largest child so far; the jobs run in ascending order of size
        peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
        yield {"job": name, "seconds": taken, "peak_MB": peak}


def kernels(quick: bool) -> Iterator[dict[str, object]]:
    """Assembly, complete spectra, counts and windows against the plain way."""
    runs = 3 if quick else 5
    long = hamiltonian(1000.0 if quick else 5000.0, rows=10, disorder=0.3)
    bonds = long.network.bonds
    pairs = list(zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True))
    fresh = median_seconds(
        lambda: ribbon.assemble(long.network, ribbon.Hopping()).matrix(0.3), runs
    )
    lists = median_seconds(lambda: plain_matrix(pairs, long.n), runs)
    yield compare(f"assemble {long.n:,} sites", fresh, lists, "python lists")
    flux = median_seconds(lambda: long.data(0.3), runs)
    yield compare(f"new flux, {long.n:,} sites", flux, lists, "python lists")

    clean = hamiltonian(62.0 if quick else 125.0)
    blocks = median_seconds(lambda: ribbon.all_levels(clean, flux=0.3), runs)
    dense_matrix = clean.matrix(0.3).toarray()
    dense = median_seconds(lambda: scipy.linalg.eigvalsh(dense_matrix), 1 if quick else 3)
    yield compare(f"complete clean spectrum, {clean.n:,} sites", blocks, dense, "dense")

    matrix = long.matrix(0.0, gauge="seam")
    order = find_order(matrix)
    with threadpool_limits(limits=1, user_api="blas"):
        count = median_seconds(lambda: count_negative(matrix, 0.1, order), runs)
        yield {"job": f"certified count, {long.n:,} sites", "seconds": count}
        size = 20
        ours = median_seconds(lambda: ribbon.levels_near(long, 0.1, count=size), 1)
        plain = median_seconds(lambda: eigsh(matrix, k=size, sigma=0.1), 1)
        yield compare(
            f"{size} certified levels, {long.n:,} sites", ours, plain, "eigsh, no certificate"
        )


def main() -> None:
    """Run everything and print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--quick", action="store_true", help="small sizes, under two minutes")
    parser.add_argument("--json", type=Path, help="write the table here too")
    options = parser.parse_args()
    rows = []
    for group in (kernels, studies):
        for row in group(options.quick):
            rows.append(row)
            numbers = "".join(
                f"  {key} {value:.4g}" for key, value in row.items() if isinstance(value, float)
            )
            print(f"{row['job']}:{numbers}  {row.get('against', '')}".rstrip(), flush=True)
    print(f"numpy {np.__version__}, python {sys.version.split()[0]}")
    if options.json:
        options.json.write_text(json.dumps(rows, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
