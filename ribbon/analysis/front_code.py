"""Elimination and solves along a band compiled by numba, where that package is there.

Loaded on first use only: numba takes longer to import than the rest of the package. Rows are
taken eight at a time (a panel); what is left of the band is then updated once for all eight,
so that the work is arithmetic and not loads and stores.
"""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np

from ribbon.analysis.front_vector import PANEL, carry, dots, jit, numba, squares, subtract

__all__ = ["EXTRA", "PANEL", "backward", "bound", "eliminate", "forward", "works"]

EXTRA = 16
"""Most rows whose pivot is put off at one time."""


def _factors(panel: Any, inverse: Any, stride: int, column: int) -> Any:  # pragma: no cover
    """Conjugate entries of one column of the panel over the pivots."""
    return (
        panel[column] * inverse[0],
        panel[stride + column] * inverse[1],
        panel[2 * stride + column] * inverse[2],
        panel[3 * stride + column] * inverse[3],
        panel[4 * stride + column] * inverse[4],
        panel[5 * stride + column] * inverse[5],
        panel[6 * stride + column] * inverse[6],
        panel[7 * stride + column] * inverse[7],
    )


def _load(matrix: Any, order: Any, at: Any, arrays: Any, stride: int) -> None:  # pragma: no cover
    """The eight rows of the panel: what earlier ones left in the front, and the matrix."""
    indptr, indices, data = matrix
    sites, place = order
    energy, first = at
    panel, front = arrays
    for row in range(PANEL):
        base = row * stride
        carry(panel, base, front, base, stride)
        site = sites[first + row]
        panel[base + row] -= energy
        for entry in range(indptr[site], indptr[site + 1]):
            column = place[indices[entry]] - first
            if column >= row:
                panel[base + column] += data[entry]


def _size(panel: Any, first: int, row: int, end: int) -> float:  # pragma: no cover
    """Sum of squares right of the diagonal of one row of the panel."""
    total: float = squares(panel, first + PANEL, end - PANEL)
    for column in range(row + 1, PANEL):
        total += panel[first + column] * panel[first + column]
    return total


def _panel(panel: Any, front: Any, inverse: Any, shape: Any, state: Any) -> Any:  # pragma: no cover
    """Eliminate the rows of the panel; rows with a pivot too small are put off.

    ``shape`` holds the stride, the width of the window, and the growth that is allowed; zero
    allows any. ``state`` holds the number of levels below and of rows put off. Returns the
    growth.
    """
    stride, width, allowed = shape
    growth = 0.0
    inverse[:] = 0.0
    for row in range(PANEL):
        base = row * stride
        end = width if state[1] == 0 else stride
        if row > 0:
            factors = _factors(panel, inverse, stride, row)
            for column in range(0, end, PANEL):
                subtract(panel, base + column, base + column, panel, column, stride, factors)
        pivot = panel[base + row]
        size = _size(panel, base, row, end)
        if (abs(pivot) * allowed[0] >= size and abs(pivot) >= allowed[1]) or allowed[0] == 0.0:
            if pivot < 0:
                state[0] += 1
            inverse[row] = 1.0 / pivot
            growth += size / abs(pivot) + abs(pivot)
            continue
        if state[1] == EXTRA:
            return -1.0
        slot = width + state[1]
        state[1] += 1
        for column in range(row + 1, PANEL):
            panel[column * stride + slot] = panel[base + column]
        for column in range(PANEL, slot):
            front[column * stride + slot] = panel[base + column]
        front[slot * stride + slot] = pivot
        for column in range(base, base + stride):
            panel[column] = 0.0
    return growth


def _move(front: Any, panel: Any, inverse: Any, shape: Any, extra: int) -> None:  # pragma: no cover
    """Take the panel's pivots off what is left, and move the window on by one panel."""
    stride, width, _ = shape
    for row in range(PANEL, width):
        factors = _factors(panel, inverse, stride, row)
        source, target = row * stride, (row - PANEL) * stride
        for column in range(row - row % PANEL, width, PANEL):
            subtract(
                front, target + column - PANEL, source + column, panel, column, stride, factors
            )
        if extra > 0:
            for column in range(width, stride, PANEL):
                subtract(front, target + column, source + column, panel, column, stride, factors)
    if extra > 0:
        for row in range(width, width + extra):
            factors = _factors(panel, inverse, stride, row)
            base = row * stride
            for column in range(width, stride, PANEL):
                subtract(front, base + column, base + column, panel, column, stride, factors)
        for row in range(width - PANEL, width):
            for column in range(row * stride + width, (row + 1) * stride):
                front[column] = 0.0


def _row_of(front: Any, slot: int, stride: int, row: Any) -> None:  # pragma: no cover
    """Complete row of one slot from the upper triangle."""
    for column in range(slot):
        row[column] = front[column * stride + slot]
    for column in range(slot, stride):
        row[column] = front[slot * stride + column]


def _set_row(front: Any, slot: int, stride: int, row: Any) -> None:  # pragma: no cover
    for column in range(slot):
        front[column * stride + slot] = row[column]
    for column in range(slot, stride):
        front[slot * stride + column] = row[column]


def _turn(front: Any, shape: Any, extra: int, rows: Any) -> None:  # pragma: no cover
    """Turn the rows put off among themselves until they do not couple to each other (Jacobi)."""
    stride, width, _ = shape
    for _ in range(6):
        for one in range(width, width + extra):
            for two in range(one + 1, width + extra):
                first, both = front[one * stride + one], front[one * stride + two]
                second = front[two * stride + two]
                if abs(both) <= 1e-14 * (abs(first) + abs(second)):
                    continue
                angle = 0.5 * np.arctan2(2 * both, first - second)
                cosine, sine = np.cos(angle), np.sin(angle)
                _row_of(front, one, stride, rows[0])
                _row_of(front, two, stride, rows[1])
                for column in range(stride):
                    left, right = rows[0, column], rows[1, column]
                    rows[0, column] = cosine * left + sine * right
                    rows[1, column] = cosine * right - sine * left
                rows[0, one] = cosine**2 * first + 2 * cosine * sine * both + sine**2 * second
                rows[1, two] = sine**2 * first - 2 * cosine * sine * both + cosine**2 * second
                rows[0, two] = rows[1, one] = 0.0
                _set_row(front, one, stride, rows[0])
                _set_row(front, two, stride, rows[1])


def _retire(front: Any, shape: Any, state: Any, rows: Any) -> float:  # pragma: no cover
    """Eliminate rows that were put off and have a pivot large enough now; returns the growth."""
    stride, width, allowed = shape
    growth = 0.0
    row = rows[0]
    slot = width
    while slot < width + state[1]:
        _row_of(front, slot, stride, row)
        pivot = row[slot]
        row[slot] = 0.0
        size = squares(row, 0, stride)
        if abs(pivot) * allowed[0] < size or abs(pivot) < allowed[1]:
            slot += 1
            continue
        if pivot < 0:
            state[0] += 1
        growth += size / abs(pivot) + abs(pivot)
        for other in range(width + state[1]):
            factor = row[other] / pivot
            if factor != 0.0:
                for column in range(other, width + state[1]):
                    front[other * stride + column] -= factor * row[column]
        last = width + state[1] - 1
        if slot != last:
            _row_of(front, last, stride, row)
            row[slot], row[last] = row[last], 0.0
            _set_row(front, slot, stride, row)
        row[:] = 0.0
        _set_row(front, last, stride, row)
        state[1] -= 1
        slot = width
    return growth


def _eliminate(
    matrix: Any, order: Any, energy: float, count: int, work: Any, kept: Any
) -> Any:  # pragma: no cover
    """Eliminate ``count`` rows along a band.

    Parameters
    ----------
    matrix
        ``indptr``, ``indices`` and ``data``, real.
    order
        Sites in the order of elimination, and the place of every site in it.
    work
        The empty front and panel, both flat, then stride, width of the window, what is allowed
        (growth, smallest pivot), the bound of the spectrum.
    kept
        Where the rows of the factor and the inverse pivots go, or empty arrays.

    Returns the levels below, the rows put off to the end (-1: too many), and how large the terms
    grew whose rounding meets in one row.
    """
    front, panel, stride, width, allowed, scale = work
    rows_kept, pivots_kept = kept
    shape = (stride, width, allowed)
    state = np.zeros(2, np.int64)
    inverse, rows = np.zeros(PANEL), np.zeros((2, stride))
    grown, rounded = np.zeros(width // PANEL + 1), np.zeros(width // PANEL + 1)
    worst, standing = 0.0, 0.0
    place = 0
    for first in range(0, count, PANEL):
        _load(matrix, order, (energy, first), (panel, front), stride)
        growth = _panel(panel, front, inverse, shape, state)
        if growth < 0:
            return state[0], -1, np.inf
        if pivots_kept.size:
            pivots_kept[first : first + PANEL] = inverse
            for row in range(PANEL):
                carry(rows_kept, (first + row) * width, panel, row * stride, width)
        _move(front, panel, inverse, shape, state[1])
        if state[1] > 0:
            growth += _retire(front, shape, state, rows)
            if state[1] > 1:
                _turn(front, shape, state[1], rows)
                growth += _retire(front, shape, state, rows)
        grown[place] = growth
        size = scale
        for value in grown:
            size += value
        rounded[place] = 10.0 * growth + size
        meeting = 0.0
        for value in rounded:
            meeting += value
        standing = standing + rounded[place] if state[1] > 0 else 0.0
        worst = max(worst, meeting + standing)
        place = place + 1 if place + 1 < grown.size else 0
    return state[0], state[1], worst


def _forward(rows: Any, pivots: Any, width: int, vectors: Any) -> None:  # pragma: no cover
    """Solve with the lower factor and the pivots, in place, for several vectors at once."""
    held = np.zeros(PANEL)
    for first in range(0, pivots.size, PANEL):
        start = first * width
        for vector in vectors:
            for row in range(PANEL):
                value = vector[first + row]
                held[row] = value * pivots[first + row]
                for later in range(row + 1, PANEL):
                    vector[first + later] -= rows[start + row * width + later] * held[row]
            factors = (held[0], held[1], held[2], held[3], held[4], held[5], held[6], held[7])
            for column in range(PANEL, width, PANEL):
                subtract(
                    vector, first + column, first + column, rows, start + column, width, factors
                )
            for row in range(PANEL):
                vector[first + row] = held[row]


def _backward(rows: Any, pivots: Any, width: int, vectors: Any) -> None:  # pragma: no cover
    """Solve with the upper factor, in place, for several vectors at once."""
    for panel in range(pivots.size // PANEL - 1, -1, -1):
        first = panel * PANEL
        start = first * width
        for vector in vectors:
            found = dots(rows, start + PANEL, width, vector, first + PANEL, width - PANEL)
            for row in range(PANEL - 1, -1, -1):
                total = found[row]
                for later in range(PANEL - 1, row, -1):  # the newest comes last: less to wait for
                    total += rows[start + row * width + later] * vector[first + later]
                vector[first + row] -= total * pivots[first + row]


def _bound(matrix: Any, energy: float) -> Any:  # pragma: no cover
    """Largest absolute row sum of the matrix less an energy, and largest on its diagonal."""
    indptr, indices, data = matrix
    worst, deepest = 0.0, 0.0
    for row in range(indptr.size - 1):
        total, diagonal = 0.0, 0.0
        for entry in range(indptr[row], indptr[row + 1]):
            if indices[entry] == row:
                diagonal += data[entry].real
            else:
                total += abs(data[entry])
        worst = max(worst, total + abs(diagonal - energy))
        deepest = max(deepest, abs(diagonal))
    return worst, deepest


_factors, _load, _size, _panel, _move, _row_of, _set_row, _turn, _retire = (
    jit(one) for one in (_factors, _load, _size, _panel, _move, _row_of, _set_row, _turn, _retire)
)
eliminate = jit(_eliminate)
forward, backward, bound = jit(_forward), jit(_backward), jit(_bound)


@cache
def works() -> bool:
    """True where the code compiles and eliminates one panel rightly."""
    if numba is None:
        return False
    starts = np.arange(2 * PANEL + 1, dtype=np.int32)
    matrix = (starts, starts[:-1].copy(), np.arange(-4.5, 2 * PANEL - 4.5))
    places = np.arange(2 * PANEL)
    width, stride = 2 * PANEL, 2 * PANEL + EXTRA
    front, panel, held = np.zeros(stride**2), np.zeros(PANEL * stride), (np.empty(0), np.empty(0))
    work = (front, panel, stride, width, np.array([1e3, 1e-9]), 1.0)
    try:
        below, carried, _ = eliminate(matrix, (places, places), 0.0, PANEL, work, held)
    except (numba.core.errors.NumbaError, NotImplementedError):
        # a processor or release that cannot compile this: the way without numba is as right
        return False
    return bool(below == 5 and carried == 0)
