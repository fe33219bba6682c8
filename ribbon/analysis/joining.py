"""Joining the levels of a sweep into branches that run through crossings.

Clean rings: by momentum and parity, inside one block by overlap of the eigenvectors. Others: by
overlap of the states of neighbouring flux points (uniform gauge, in which states of one branch
change slowly), never by sorted position.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import linear_sum_assignment

from ribbon.analysis.levels import AnyArray, FloatArray, IntArray
from ribbon.analysis.symmetry import Spectrum

__all__ = ["follow_bands", "follow_states"]

CLEAR = 0.6
FAINT = 0.25


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
