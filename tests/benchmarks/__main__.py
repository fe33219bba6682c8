"""Time and memory of the main jobs, and ratios against the plain way, measured in one run.

    python -m tests.benchmarks [--quick] [--json FILE] [--figure FILE]

Nothing here asserts a time: machines differ. Medians of the runs are printed.
"""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from tests.benchmarks.densities import densities
from tests.benchmarks.matrices import matrices
from tests.benchmarks.measure import Row, median_seconds, watched
from tests.benchmarks.scaling import draw_scaling, scaling
from tests.benchmarks.spectra import spectra
from tests.benchmarks.sweeps import sweeps
from tests.benchmarks.windows import windows

ROOT = Path(__file__).resolve().parents[2]
EXAMPLE = ROOT / "examples" / "zigzag-graphene.toml"


def studies(quick: bool) -> Iterator[Row]:
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
            out = str(Path(folder) / "study")
            arguments = [*command, "study", str(EXAMPLE), "--out", out, "--quiet", *options]
            seconds, peak = watched(arguments)
        yield {"job": name, "seconds": seconds, "peak_MB": peak}


def main() -> None:
    """Run everything and print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--quick", action="store_true", help="small sizes, under two minutes")
    parser.add_argument("--json", type=Path, help="write the table here too")
    parser.add_argument("--figure", type=Path, help="draw cost against size here")
    parser.add_argument("--only", help="one group of jobs, e.g. windows")
    options = parser.parse_args()
    rows = []
    for group in (matrices, spectra, windows, densities, sweeps, scaling, studies):
        if options.only not in {None, group.__name__}:
            continue
        for row in group(options.quick):
            rows.append(row)
            numbers = "".join(
                f"  {key} {value:.4g}" for key, value in row.items() if isinstance(value, float)
            )
            print(f"{row['job']}:{numbers}  {row.get('against', '')}".rstrip(), flush=True)
    print(f"numpy {np.__version__}, python {sys.version.split()[0]}")
    if options.figure:
        draw_scaling(rows, options.figure)
    if options.json:
        options.json.write_text(json.dumps(rows, indent=2) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
