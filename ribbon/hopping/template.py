"""One period of the matrix, replicated: assembly at memory speed for rings as they were laid.

Every period of a laid ring has the same row structure; only rows next to the seam differ, and
these are folded one by one. Arrays are filled in CSR order, without a sort and without any
array over the bonds.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ribbon.hopping.cores import share_out
from ribbon.lattice import Ring
from ribbon.lattice.definition import TOLERANCE
from ribbon.lattice.ring import cell_bonds
from ribbon.lattice.seam import fold

__all__ = ["Template", "find_template"]

PART = 1 << 21
"""Entries filled by one core at a time."""

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
AnyArray = NDArray[Any]


@dataclass(frozen=True, kw_only=True, eq=False)
class Rows:
    """Entries of some rows in CSR order: column, amplitude at zero flux, turns per quantum."""

    counts: IntArray
    column: IntArray
    amplitude: FloatArray
    uniform: FloatArray
    winding: IntArray
    diagonal: IntArray

    @cached_property
    def wound(self) -> IntArray:
        """Entries that cross the seam."""
        return np.flatnonzero(self.winding)


@dataclass(frozen=True, kw_only=True, eq=False)
class Template:
    """The rows of one period, those before ``first`` and from ``last`` on folded at the seam.

    ``body`` has columns counted from the period's own first site; ``head`` and ``tail`` hold the
    periods next to the seam with true columns. ``n`` sites, ``size`` of them in a period.
    """

    n: int
    size: int
    periods: int
    body: Rows
    head: Rows
    tail: Rows

    @property
    def nnz(self) -> int:
        """Number of stored entries."""
        return self.head.column.size + self.periods * self.body.column.size + self.tail.column.size

    @property
    def _middle(self) -> slice:
        start = self.head.column.size
        return slice(start, start + self.periods * self.body.column.size)

    def structure(self) -> tuple[AnyArray, AnyArray]:
        """``indices`` and ``indptr``, 32-bit where that is enough."""
        kind = np.int32 if max(self.n, self.nnz) < 2**31 else np.int64
        indices = np.empty(self.nnz, dtype=kind)
        indptr = np.empty(self.n + 1, dtype=kind)
        indices[: self._middle.start] = self.head.column
        indices[self._middle.stop :] = self.tail.column
        before = self.head.counts.size
        start = np.arange(before, before + self.periods * self.size, self.size, dtype=kind)
        block = indices[self._middle].reshape(self.periods, -1)
        column = self.body.column.astype(kind)[None, :]
        self._by_parts(lambda part: np.add(start[part, None], column, out=block[part]))
        indptr[0] = 0
        indptr[1 : before + 1] = np.cumsum(self.head.counts)
        width = self.body.column.size
        ahead = self._middle.start + width * np.arange(self.periods, dtype=kind)
        rows = indptr[before + 1 : before + 1 + self.periods * self.size]
        ends = np.cumsum(self.body.counts).astype(kind)
        ending = rows.reshape(self.periods, -1)
        self._by_parts(lambda part: np.add(ahead[part, None], ends[None, :], out=ending[part]))
        indptr[before + 1 + self.periods * self.size :] = self._middle.stop + np.cumsum(
            self.tail.counts
        )
        return indices, indptr

    def _by_parts(self, work: Callable[[slice], object]) -> None:
        """Do the work on stretches of periods, on all cores where there are many."""
        step = max(1, -(-PART // self.body.column.size))
        parts = [slice(i, i + step) for i in range(0, self.periods, step)]
        share_out(work, parts)

    def fill(
        self, out: AnyArray, flux: float, energies: FloatArray, *, seam: bool, slope: bool = False
    ) -> AnyArray:
        """Write the entries at a flux into ``out``, or their derivative by the flux."""
        block = out[self._middle].reshape(self.periods, -1)
        period = self.entries(self.body, flux, seam=seam, slope=slope)
        self._by_parts(lambda part: np.copyto(block[part], period))
        self.fill_ends(out, flux, seam=seam, slope=slope)
        if self.body.diagonal.size:
            inner = slice(self.head.counts.size, self.n - self.tail.counts.size)
            own = np.zeros(()) if slope else energies[inner].reshape(self.periods, -1)
            block[:, self.body.diagonal] = own
            self._ends_diagonal(out, np.zeros_like(energies) if slope else energies)
        return out

    def entries(self, rows: Rows, flux: float, *, seam: bool, slope: bool) -> AnyArray:
        """Entries of some rows at a flux, or their derivative by it."""
        turns = rows.winding.astype(np.float64) if seam else rows.uniform
        return _Phases(self.turns[seam], flux, slope).values(rows, turns)

    def is_real(self, flux: float, *, seam: bool) -> bool:
        """True where every phase of a flux is real."""
        return _Phases(self.turns[seam], flux, slope=False).real

    @cached_property
    def turns(self) -> tuple[FloatArray, FloatArray]:
        """Sizes of turns per flux quantum that occur: in the uniform gauge, and on the seam."""
        wound = np.concatenate([[0], np.abs(self.head.winding), np.abs(self.tail.winding)])
        return np.unique(np.abs(self.body.uniform)), np.unique(wound).astype(np.float64)

    def fill_ends(self, out: AnyArray, flux: float, *, seam: bool, slope: bool = False) -> None:
        """Rewrite the rows next to the seam alone: in the seam gauge no other entry changes."""
        for rows, place in (
            (self.head, slice(0, self._middle.start)),
            (self.tail, slice(self._middle.stop, None)),
        ):
            values = self.entries(rows, flux, seam=seam, slope=slope)
            if rows.diagonal.size and not slope:
                values[rows.diagonal] = out[place][rows.diagonal].real
            out[place] = values

    def _ends_diagonal(self, out: AnyArray, energies: FloatArray) -> None:
        out[: self._middle.start][self.head.diagonal] = energies[: self.head.counts.size]
        out[self._middle.stop :][self.tail.diagonal] = energies[self.n - self.tail.counts.size :]

    def wound(self) -> tuple[IntArray, FloatArray, IntArray]:
        """Entries that cross the seam: place in the data array, amplitude, winding."""
        place = [self.head.wound, self._middle.stop + self.tail.wound]
        rows = (self.head, self.tail)
        return (
            np.concatenate(place),
            np.concatenate([part.amplitude[part.wound] for part in rows]),
            np.concatenate([part.winding[part.wound] for part in rows]),
        )

    def row_sums(self) -> FloatArray:
        """Sum of the absolute amplitudes of every row, shape (n,)."""
        parts = [_row_sums(self.head), np.tile(_row_sums(self.body), self.periods)]
        return np.concatenate([*parts, _row_sums(self.tail)])


@dataclass(frozen=True, eq=False)
class _Phases:
    """Phases of a flux: one table for all rows, so that both entries of a bond agree to the bit.

    ``turns`` are the sizes that occur, in turns per flux quantum.
    """

    turns: FloatArray
    flux: float
    slope: bool

    @property
    def real(self) -> bool:
        """True where every phase is 1 or -1."""
        twice = 2 * self.flux * self.turns
        return bool(np.array_equal(np.rint(twice), twice))

    def values(self, rows: Rows, turns: FloatArray) -> AnyArray:
        """Entries of some rows, diagonal left at zero; real where every phase is."""
        place = np.searchsorted(self.turns, np.abs(turns))
        if self.real and not self.slope:
            half = np.rint(2 * self.flux * self.turns)
            return np.asarray(rows.amplitude * (1.0 - 2.0 * (half % 2))[place])
        phase = np.exp(2j * np.pi * self.flux * self.turns)[place]
        values = rows.amplitude * np.where(turns < 0, phase.conj(), phase)
        return np.asarray(2j * np.pi * turns * values if self.slope else values)


def _row_sums(rows: Rows) -> FloatArray:
    owner = np.repeat(np.arange(rows.counts.size), rows.counts)
    weight = np.abs(rows.amplitude)
    return np.asarray(np.bincount(owner, weight, minlength=rows.counts.size), dtype=np.float64)


def find_template(ring: Ring, shells: tuple[float, ...], *, diagonal: bool) -> Template | None:
    """The template of a laid ring; None where it is too short or was edited."""
    strip = ring.strip
    if not ring.is_laid or ring.seam:
        return None
    size = strip.cell.n
    whole = _whole_period(ring, shells, diagonal=diagonal)
    row, column = whole[0], whole[1]
    back = max(0, -int(np.floor(column.min(initial=0) / size)))
    ahead = max(0, int(np.floor(column.max(initial=0) / size)))
    last = strip.n // size - ahead
    if last <= back:
        return None
    before = np.arange(back * size)
    after = np.arange(last * size, strip.n)
    ends = [_folded(ring, whole, part) for part in (before, after)]
    if any(part is None for part in ends):
        return None
    head, tail = ends
    assert head is not None
    assert tail is not None
    body = Rows(
        counts=np.bincount(row, minlength=size),
        column=column,
        amplitude=whole[2],
        uniform=whole[3],
        winding=np.zeros(row.size, dtype=np.int64),
        diagonal=np.flatnonzero(row == column),
    )
    return Template(n=strip.n, size=size, periods=last - back, body=body, head=head, tail=tail)


def _whole_period(
    ring: Ring, shells: tuple[float, ...], *, diagonal: bool
) -> tuple[IntArray, IntArray, FloatArray, FloatArray]:
    """Row, column, amplitude and turns of one period of the endless strip, in CSR order."""
    strip = ring.strip
    size = strip.cell.n
    bonds = cell_bonds(strip, ring.shells)
    value = -np.array(shells)[bonds.shell - 1]
    turns = _merged(bonds.displacement[:, 0]) * strip.spacing / ring.circumference
    period, place = np.divmod(bonds.head, size)
    own = np.arange(size if diagonal else 0)
    row = np.concatenate([bonds.tail, place, own])
    column = np.concatenate([bonds.head, bonds.tail - period * size, own])
    amplitude = np.concatenate([value, value, np.zeros(own.size)])
    uniform = np.concatenate([turns, -turns, np.zeros(own.size)])
    order = np.lexsort((column, row))
    return row[order], column[order], amplitude[order], uniform[order]


def _merged(step: FloatArray) -> FloatArray:
    """Steps that differ by rounding alone made equal in size.

    A bond across a flipped seam is met from its other end as the image of another bond of the
    period; both must give the same phase to the bit.
    """
    size = np.abs(step)
    order = np.argsort(size)
    first = np.concatenate([[True], np.diff(size[order]) > TOLERANCE])
    merged = np.empty_like(size)
    merged[order] = size[order][first][np.cumsum(first) - 1] if size.size else size
    return np.asarray(np.copysign(merged, step))


def _folded(
    ring: Ring, whole: tuple[IntArray, IntArray, FloatArray, FloatArray], sites: IntArray
) -> Rows | None:
    """Rows of some sites with their columns folded back; None where two fall on one place."""
    size = ring.strip.cell.n
    row, column, amplitude, uniform = whole
    counts = np.bincount(row, minlength=size)
    starts = np.concatenate([[0], np.cumsum(counts)])
    place = sites % size
    count = counts[place]
    inside = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    entry = np.repeat(starts[place], count) + inside
    owner = np.repeat(sites, count)
    target = column[entry] + (owner // size) * size
    folded, winding = fold(ring.strip, ring.closure, target)
    order = np.lexsort((folded, owner))
    if np.any((np.diff(folded[order]) == 0) & (np.diff(owner[order]) == 0)):
        return None
    factor = ring.closure.factor(winding)
    return Rows(
        counts=count,
        column=folded[order],
        amplitude=(amplitude[entry] * factor)[order],
        uniform=uniform[entry][order],
        winding=winding[order],
        diagonal=np.flatnonzero((folded == owner)[order] & (amplitude[entry][order] == 0)),
    )
