"""Rings built the slow way, from coordinates and plain loops, as an outside judge of the library.

Nothing here imports the library. Lengths are in units of the nearest-neighbour distance.
An endless strip is written down site by site, every pair of sites within reach is looked at,
and a partner that lies beyond the ring is folded back: going once forward through the seam takes
``(x + L, (-1)^h y)`` to ``(x, y)`` and multiplies the amplitude by ``sigma^h``. All images are
summed. Both directions of a bond are found separately, so that Hermiticity is a result here.
"""

from __future__ import annotations

import cmath
import math
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np

ROOT3 = math.sqrt(3.0)
CLOSE = 1e-6

# Distances of the first, second and third neighbours in the plane.
SHELLS = {
    "square": (1.0, math.sqrt(2.0), 2.0),
    "triangular": (1.0, ROOT3, 2.0),
    "honeycomb-zigzag": (1.0, ROOT3, 2.0),
    "honeycomb-armchair": (1.0, ROOT3, 2.0),
    "kagome": (1.0, ROOT3, 2.0),
    "lieb": (1.0, math.sqrt(2.0), 2.0),
}
PERIOD = {
    "square": 1.0,
    "triangular": 1.0,
    "honeycomb-zigzag": ROOT3,
    "honeycomb-armchair": 3.0,
    "kagome": 2.0,
    "lieb": 2.0,
}
LATTICES = tuple(SHELLS)


class Case(NamedTuple):
    """A ring to try; ``hoppings`` holds t of the first, second, third neighbours."""

    lattice: str
    rows: int
    length: float
    half_twists: int
    sigma: int = 1
    hoppings: tuple[float, ...] = (1.0,)

    def matrix(self, flux: float = 0.0, **options: Any) -> np.ndarray:
        """The brute-force matrix of this ring."""
        return ring_matrix(*self[:3], **self.seam(), flux=flux, **options)

    def levels(self, flux: float = 0.0, **options: Any) -> np.ndarray:
        """The brute-force levels of this ring."""
        return ring_levels(*self[:3], **self.seam(), flux=flux, **options)

    def sites(self) -> int:
        """How many sites the ring has."""
        return len(ring_sites(*self[:3]))

    def seam(self) -> dict[str, Any]:
        """Everything but the sizes, as keywords."""
        return dict(zip(self._fields[3:], self[3:], strict=True))


class DoesNotCloseError(Exception):
    """The seam does not carry the strip onto itself."""


class Step(NamedTuple):
    """From site ``tail`` to an image of site ``head``, ``along`` apart, through the seam
    ``winding`` times."""

    tail: int
    head: int
    shell: int
    along: float
    winding: int


def line(lattice: str, number: int) -> tuple[float, list[float]]:
    """Height, and places within one period, of the ``number``-th line of sites from below."""
    half, odd = divmod(number, 2)
    if lattice == "square":
        return float(number), [0.0]
    if lattice == "triangular":
        return number * ROOT3 / 2, [number / 2]
    if lattice == "honeycomb-zigzag":  # lines 2m and 2m + 1 are the zigzag chain m
        return 1.5 * half + 0.5 * odd, [(half + odd) * ROOT3 / 2]
    if lattice == "honeycomb-armchair":  # dimers along x, every second line pushed by half a period
        return number * ROOT3 / 2, [1.5 * odd, 1.5 * odd + 1.0]
    if lattice == "kagome":  # full lines, and lines of the tips of the triangles between them
        return number * ROOT3 / 2, ([0.5 + half] if odd else [0.0, 1.0])
    if lattice == "lieb":  # corners and links along x, and lines of the links across
        return float(number), ([0.0] if odd else [0.0, 1.0])
    raise ValueError(lattice)


def lines_across(lattice: str, rows: int) -> int:
    """Lines of sites in a strip of so many rows (a row of zigzag honeycomb is a zigzag chain)."""
    return 2 * rows if lattice == "honeycomb-zigzag" else rows


def endless(lattice: str, rows: int, lower: float, upper: float) -> list[tuple[float, float]]:
    """The sites of the endless strip with lower <= x < upper, y counted from the midline."""
    heights = [line(lattice, number)[0] for number in range(lines_across(lattice, rows))]
    middle = (min(heights) + max(heights)) / 2
    period = PERIOD[lattice]
    sites = []
    for number in range(lines_across(lattice, rows)):
        height, places = line(lattice, number)
        for place in places:
            first = math.ceil((lower - CLOSE - place) / period)
            last = math.ceil((upper - CLOSE - place) / period)
            sites += [(place + cell * period, height - middle) for cell in range(first, last)]
    return sorted(sites, key=lambda site: (round(site[0], 6), site[1]))


def ring_sites(
    lattice: str, rows: int, length: float, *, start: float = 0.0
) -> list[tuple[float, float]]:
    """Sites of one turn in their order: by x, then y."""
    return endless(lattice, rows, start, start + length * PERIOD[lattice])


def _place(site: tuple[float, float]) -> tuple[int, int]:
    return round(site[0] * 1e4), round(site[1] * 1e4)


@lru_cache(maxsize=512)
def steps(
    lattice: str, rows: int, length: float, half_twists: int, shells: int = 1, start: float = 0.0
) -> tuple[Step, ...]:
    """Every step from a site of the ring to a neighbour, folded back with its winding."""
    around = length * PERIOD[lattice]
    reach = SHELLS[lattice][shells - 1]
    home = ring_sites(lattice, rows, length, start=start)
    number = {_place(site): index for index, site in enumerate(home)}
    patch = endless(lattice, rows, start - reach - 1, start + around + reach + 1)
    found = []
    for tail, (x, y) in enumerate(home):
        for there_x, there_y in patch:
            distance = math.hypot(there_x - x, there_y - y)
            for shell in range(shells):
                if abs(distance - SHELLS[lattice][shell]) < CLOSE:
                    winding = math.floor((there_x - start + CLOSE) / around)
                    flip = -1 if half_twists * winding % 2 else 1
                    head = number.get(_place((there_x - winding * around, flip * there_y)))
                    if head is None:
                        raise DoesNotCloseError(f"{lattice} {rows} x {length}, h = {half_twists}")
                    found.append(Step(tail, head, shell, there_x - x, winding))
    return tuple(found)


def ring_matrix(
    lattice: str,
    rows: int,
    length: float,
    *,
    half_twists: int,
    sigma: int = 1,
    hoppings: tuple[float, ...] = (1.0,),
    flux: float = 0.0,
    energies: np.ndarray | None = None,
    gauge: str = "uniform",
    start: float = 0.0,
) -> np.ndarray:
    """The dense matrix H of a ring: H_ij = -t, with the seam's sign and the flux's phase."""
    around = length * PERIOD[lattice]
    size = len(ring_sites(lattice, rows, length, start=start))
    matrix = [[0j] * size for _ in range(size)]
    for step in steps(lattice, rows, length, half_twists, len(hoppings), start):
        turn = step.along / around if gauge == "uniform" else step.winding
        sign = sigma ** abs(half_twists * step.winding)
        amplitude = -hoppings[step.shell] * sign * cmath.exp(2j * math.pi * flux * turn)
        matrix[step.tail][step.head] += amplitude
    if energies is not None:
        for site in range(size):
            matrix[site][site] += float(energies[site])
    return np.array(matrix)


def ring_levels(lattice: str, rows: int, length: float, **options: Any) -> np.ndarray:
    """Ascending eigenvalues of ``ring_matrix``, after both of its triangles were compared."""
    matrix = ring_matrix(lattice, rows, length, **options)
    if np.abs(matrix - matrix.conj().T).max() > 1e-13:
        raise AssertionError("the brute-force matrix is not Hermitian")
    return np.linalg.eigvalsh(matrix)


def closes(lattice: str, rows: int, length: float, half_twists: int) -> bool:
    """Whether the seam carries the strip onto itself, tried on the sites of a few periods."""
    around = length * PERIOD[lattice]
    reach = around + 2 * PERIOD[lattice]
    there = {_place(site) for site in endless(lattice, rows, -1e-9, reach + around)}
    flip = -1 if half_twists % 2 else 1
    return all(
        _place((x + around, flip * y)) in there for x, y in endless(lattice, rows, 0.0, reach)
    )


def strip_bonds(lattice: str, rows: int, length: float) -> int:
    """First-neighbour bonds of a ring, every image counted: half the number of steps."""
    found = steps(lattice, rows, length, 0)
    return len(found) // 2


def cases(
    lattices: tuple[str, ...] = LATTICES,
    *,
    rows: tuple[int, ...] = (1, 2, 3, 4, 5),
    lengths: tuple[float, ...] = (0.5, 1, 1.5, 2, 2.5, 3, 4),
    hoppings: tuple[float, ...] = (1.0,),
) -> list[Case]:
    """Every ring of these sizes that closes, h = 0..3, both orbital signs where they differ."""
    return [
        Case(lattice, across, length, half_twists, sigma, hoppings)
        for lattice in lattices
        for across in rows
        for length in lengths
        for half_twists in range(4)
        for sigma in ((1, -1) if half_twists else (1,))
        if closes(lattice, across, length, half_twists)
    ]
