"""The plain ways: what one writes in an afternoon with numpy and scipy."""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csr_array
from scipy.spatial import cKDTree

from ribbon import Hamiltonian

__all__ = ["by_coo", "by_tree"]


def by_tree(hamiltonian: Hamiltonian) -> csr_array:
    """Neighbours of all sites from one KD-tree, the seam by images, COO to CSR."""
    ring = hamiltonian.ring
    assert ring is not None
    places, length = ring.strip.positions, ring.circumference
    spacing = ring.strip.spacing
    near_end = places[:, 0] < 2 * spacing
    images = places[near_end] + [length, 0.0]
    if ring.flips:
        images[:, 1] *= -1
    everything = np.concatenate([places, images])
    number = np.concatenate([np.arange(len(places)), np.flatnonzero(near_end)])
    pairs = cKDTree(everything).query_pairs(1.01 * spacing, output_type="ndarray")
    inside = pairs[:, 0] < len(places)
    one, two = number[pairs[inside, 0]], number[pairs[inside, 1]]
    phase = np.exp(2j * np.pi * 0.1 * (everything[pairs[inside, 1], 0] - places[one, 0]) / length)
    rows, columns = np.concatenate([one, two]), np.concatenate([two, one])
    return coo_array(
        (np.concatenate([-phase, -phase.conj()]), (rows, columns)), shape=(len(places),) * 2
    ).tocsr()


def by_coo(hamiltonian: Hamiltonian) -> csr_array:
    """Bond lists that are at hand already, COO to CSR."""
    bonds, n = hamiltonian.network.bonds, hamiltonian.n
    ring = hamiltonian.ring
    assert ring is not None
    turns = 0.1 * bonds.displacement[:, 0] / ring.circumference
    values = hamiltonian.amplitudes * np.exp(2j * np.pi * turns)
    rows = np.concatenate([bonds.tail, bonds.head])
    columns = np.concatenate([bonds.head, bonds.tail])
    return coo_array(
        (np.concatenate([values, values.conj()]), (rows, columns)), shape=(n, n)
    ).tocsr()
