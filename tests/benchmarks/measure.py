"""How time, memory and ratios are measured: medians in one run, memory in processes of its own."""

from __future__ import annotations

import contextlib
import json
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from ribbon import Hamiltonian, Hopping, assemble, close_strip, lay_strip

__all__ = ["Row", "alone", "compare", "median_seconds", "ring", "watched"]

Row = dict[str, Any]


def median_seconds(job: Callable[[], object], runs: int) -> float:
    """Median wall time of several runs, after one that warms up where there are many."""
    if runs > 2:
        job()
    times = []
    for _ in range(runs):
        start = time.perf_counter()
        job()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def compare(job: str, ours: float, plain: float, against: str) -> Row:
    """One line of the table."""
    return {"job": job, "seconds": ours, "plain": plain, "ratio": plain / ours, "against": against}


def ring(
    lattice: str, sites: float, *, rows: int, disorder: float = 0.0, half_twists: int = 1
) -> Hamiltonian:
    """A ring of about so many sites, in units of t."""
    per_period = lay_strip(lattice, rows=rows, length=1).n
    length = max(1, round(sites / per_period))
    strip = lay_strip(lattice, rows=rows, length=length)
    closed = close_strip(strip, half_twists=half_twists, orbital="pz")
    return assemble(closed, Hopping(shells=(1.0,), unit="t", disorder=disorder))


def alone(code: str) -> Row:
    """Run code in a process of its own.

    It may set ``seconds`` and ``base`` (kB of memory before the job); the peak comes back as
    ``peak_MB`` above the base.
    """
    text = (
        "import json, time\n"
        "def memory():\n"
        "    with open('/proc/self/status') as told:\n"
        "        return next(int(line.split()[1]) for line in told if line.startswith('VmHWM'))\n"
        f"base = 0\nseconds = 0.0\n{code}\n"
        "print(json.dumps({'seconds': seconds, 'peak_MB': (memory() - base) / 1024}))\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", text], check=True, capture_output=True, text=True, timeout=1200
    )
    found: Row = json.loads(done.stdout.splitlines()[-1])
    return found


def watched(arguments: list[str]) -> tuple[float, float]:
    """Seconds and peak memory (MB) of a command, its memory read while it runs (Linux)."""
    start, peak = time.perf_counter(), 0
    with subprocess.Popen(arguments, stdout=subprocess.DEVNULL) as child:
        status = Path(f"/proc/{child.pid}/status")
        while child.poll() is None:
            with contextlib.suppress(OSError):
                peak = max(peak, *_high_water(status.read_text(encoding="ascii")))
            time.sleep(0.02)
    if child.returncode:
        raise subprocess.CalledProcessError(child.returncode, arguments)
    return time.perf_counter() - start, peak / 1024


def _high_water(status: str) -> list[int]:
    return [0, *(int(line.split()[1]) for line in status.splitlines() if line.startswith("VmHWM"))]
