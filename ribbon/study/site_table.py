"""Site energies from a CSV table with the columns site,energy."""

from __future__ import annotations

import csv
import io
import math
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from ribbon.errors import BadInput
from ribbon.study.keys import LARGEST_ENERGY
from ribbon.study.sentences import shown
from ribbon.study.toml_text import read_text

__all__ = ["read_site_table"]

LARGEST_TABLE = 100_000_000
HEADER = ["site", "energy"]


def read_site_table(path: str | Path, n: int) -> NDArray[np.float64]:
    """Read one energy for each of ``n`` sites, in any order, into an array in site order.

    Raises `BadInput` with the file and line where a site is missing, doubled or unknown, or an
    energy is no finite number.
    """
    path = Path(path)
    rows = csv.reader(io.StringIO(read_text(path, largest=LARGEST_TABLE), newline=""), strict=True)
    energies = np.full(n, np.nan)
    try:
        header = next(rows, [])
        if [name.strip() for name in header] != HEADER:
            given = shown(",".join(header))
            raise BadInput(f"{path}, line 1: the header is {given}; it must be site,energy")
        for row in rows:
            if row:
                site, energy = _entry(row, n, f"{path}, line {rows.line_num}")
                if not math.isnan(energies[site]):
                    raise BadInput(f"{path}, line {rows.line_num}: site {site} was given before")
                energies[site] = energy
    except csv.Error as problem:
        raise BadInput(f"{path}, line {rows.line_num}: is not valid CSV: {problem}") from None
    missing = np.flatnonzero(np.isnan(energies))
    if missing.size:
        more = f" and {missing.size - 1} more" if missing.size > 1 else ""
        raise BadInput(
            f"{path}, line {rows.line_num}: the table ends without site {missing[0]}{more}; "
            f"the ring has the sites 0 to {n - 1}"
        )
    energies.flags.writeable = False
    return energies


def _entry(row: list[str], n: int, where: str) -> tuple[int, float]:
    if len(row) != len(HEADER):
        raise BadInput(f"{where}: {len(row)} columns where there must be two, site,energy")
    text, number = row[0].strip(), row[1].strip()
    if not (text.isascii() and text.isdigit()):
        raise BadInput(f"{where}: site {shown(text)} must be a whole number from 0")
    # the length is looked at first: digits without end are not for int()
    if len(text) > 18 or int(text) >= n:
        raise BadInput(
            f"{where}: site {text[:18]} is not in the ring, whose sites are 0 to {n - 1}"
        )
    try:
        energy = float(number)
    except ValueError:
        raise BadInput(f"{where}: energy {shown(number)} must be a number") from None
    if not abs(energy) <= LARGEST_ENERGY:
        raise BadInput(
            f"{where}: energy {shown(number)} must be finite, at most {LARGEST_ENERGY:g}"
        )
    return int(text), energy
