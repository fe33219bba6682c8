"""The gap of a family of belts against their length: cyclic, one-sided, and the linear chain.

Belts of n hexagons with zigzag edges (two zigzag chains) in Hückel theory. The gap of the cyclic
belts jumps between odd and even n; that of the one-sided belts falls smoothly. Writes
gap-against-length.svg and .csv into the current folder.
"""

import csv
import math
from pathlib import Path

from matplotlib.figure import Figure

import ribbon

HUECKEL = ribbon.Hopping(shells=(1.0,), unit="beta")


def gap(hexagons: int, half_twists: int) -> float:
    """Gap of one neutral belt in |beta|."""
    strip = ribbon.lay_strip("honeycomb-zigzag", rows=2, length=hexagons)
    ring = ribbon.close_strip(strip, half_twists=half_twists, orbital="pz")
    return ribbon.find_gap(ribbon.assemble(ring, HUECKEL)).gap


def linear(hexagons: int) -> float:
    """Gap of the linear chain of hexagons, Coulson 1948."""
    return math.sqrt(9 - 8 * math.cos(math.pi / (hexagons + 1))) - 1


def main() -> None:
    """Write the table and the picture."""
    sizes = range(3, 41)
    columns = {
        "cyclic": [gap(n, 0) for n in sizes],
        "one_sided": [gap(n, 1) for n in sizes],
        "linear": [linear(n) for n in sizes],
    }
    with Path("gap-against-length.csv").open("w", newline="", encoding="utf-8") as stream:
        table = csv.writer(stream)
        table.writerow(["hexagons", *columns])
        table.writerows(zip(sizes, *columns.values(), strict=True))
    figure = Figure(figsize=(3.4, 2.6), layout="constrained")
    axes = figure.subplots()
    for name, style, label in (
        ("cyclic", "s--", "cyclic"),
        ("one_sided", "o-", "one half twist"),
        ("linear", ":", "linear chain"),
    ):
        axes.plot(sizes, columns[name], style, ms=3, lw=1, label=label)
    axes.set_xlabel("hexagons in the belt")
    axes.set_ylabel("gap (|β|)")
    axes.legend(frameon=False)
    figure.savefig("gap-against-length.svg")


if __name__ == "__main__":
    main()
