"""Joining the levels of a sweep into branches that run through crossings.

Clean rings: by momentum and parity, inside one block by overlap of the eigenvectors. Others: by
overlap of the states of neighbouring flux points (uniform gauge, in which states of one branch
change slowly), never by sorted position.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import linear_sum_assignment

from ribbon.analysis.blocks import Spectrum
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray

__all__ = ["Follower", "follow_bands", "follow_states"]

CLEAR = 0.6
FAINT = 0.25
MIXED = 0.2
"""Overlaps this close to one half say that a state is shared by two branches."""
PATIENCE = 2
"""For so many sweep points a branch keeps the state it had before it was mixed."""


def follow_bands(
    before: tuple[IntArray, ...], old: Spectrum, new: Spectrum
) -> tuple[IntArray, ...]:
    """Branch number of every band of every block, shape (blocks, size) for each sector.

    ``before`` holds those of the ``old`` spectrum; bands of one block are matched by overlap.
    """
    return tuple(
        _match_blocks(branch, v, w)
        for branch, v, w in zip(before, old.vectors, new.vectors, strict=True)
    )


def _match_blocks(branch: IntArray, old: AnyArray, new: AnyArray) -> IntArray:
    overlap = np.abs(old.conj().swapaxes(1, 2) @ new) ** 2
    source = overlap.argmax(axis=1)
    clear = (overlap.max(axis=1) > CLEAR).all(axis=1)
    for block in np.flatnonzero(~clear):
        row, column = linear_sum_assignment(-overlap[block])
        source[block, column] = row
    return np.take_along_axis(branch, source, axis=1)


def follow_states(
    branch: IntArray,
    old: AnyArray,
    new: AnyArray,
    energies: tuple[FloatArray, FloatArray],
    first: int,
) -> IntArray:
    """Branch numbers of the ``new`` states; a state like none of the old starts a new branch.

    ``energies`` are those expected of the old states at the new flux, and the new ones; they
    settle between partners of a shell, whose states may turn among themselves. ``first`` is
    the first unused branch number.
    """
    overlap = np.abs(old.conj().T @ new) ** 2
    spread = np.abs(energies[0][:, None] - energies[1][None, :])
    width = float(np.median(spread.min(axis=0))) + 1e-300 if spread.size else 1.0
    worth = overlap + 0.1 * np.exp(-spread / (10 * width))
    row, column = linear_sum_assignment(-worth)
    out = np.full(new.shape[1], -1, dtype=np.int64)
    kept = overlap[row, column] > FAINT
    out[column[kept]] = branch[row[kept]]
    fresh = np.flatnonzero(out < 0)
    out[fresh] = first + np.arange(fresh.size)
    return out


class Follower:
    """Carries branch numbers from one flux point to the next.

    Where a sweep point hits a narrow crossing the states are even mixtures of both branches; the
    branch then keeps the state it had before, for a few points, and is matched against that.
    """

    def __init__(self) -> None:
        """Start with no branch."""
        self.states: AnyArray | None = None
        self.energies: FloatArray = np.zeros(0)
        self.slopes: FloatArray = np.zeros(0)
        self.branch: IntArray = np.zeros(0, dtype=np.int64)
        self.flux: FloatArray = np.zeros(0)
        self.waits: IntArray = np.zeros(0, dtype=np.int64)
        self.next = 0

    def join(
        self, states: AnyArray, energies: FloatArray, slopes: FloatArray, flux: float
    ) -> IntArray:
        """Branch numbers of the states of the next flux point (uniform gauge)."""
        if self.states is None:
            branch = np.arange(energies.size)
        else:
            expected = self.energies + (flux - self.flux) * self.slopes
            branch = follow_states(
                self.branch, self.states, states, (expected, energies), self.next
            )
        self.next = max(self.next, int(branch.max(initial=-1)) + 1)
        self._remember(branch, states, energies, slopes, flux)
        return branch

    def _remember(
        self,
        branch: IntArray,
        states: AnyArray,
        energies: FloatArray,
        slopes: FloatArray,
        flux: float,
    ) -> None:
        """Take the new point as reference, but for branches that are mixed there."""
        states, energies, slopes = states.copy(), energies.copy(), slopes.copy()
        fluxes = np.full(branch.size, flux)
        waits = np.zeros(branch.size, dtype=np.int64)
        if self.states is not None and self.branch.size:
            place = {int(number): i for i, number in enumerate(self.branch)}
            old = np.array([place.get(int(number), -1) for number in branch], dtype=np.int64)
            overlap = np.abs(np.einsum("ij,ij->j", self.states[:, old].conj(), states)) ** 2
            mixed = (old >= 0) & (np.abs(overlap - 0.5) < MIXED) & (self.waits[old] < PATIENCE)
            source = old[mixed]
            if source.size:
                states = states.astype(np.result_type(states, self.states))
                states[:, mixed] = self.states[:, source]
            energies[mixed], slopes[mixed] = self.energies[source], self.slopes[source]
            fluxes[mixed], waits[mixed] = self.flux[source], self.waits[source] + 1
        self.branch, self.states, self.energies = branch, states, energies
        self.slopes, self.flux, self.waits = slopes, fluxes, waits
