"""Normals of sites in space from where their neighbours stand, and signs that follow one another.

A normal is a line: its sign is arbitrary site by site, and cancels from every closed path. What
does not cancel is whether it comes back reversed round the ring.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import breadth_first_order, connected_components, minimum_spanning_tree

from ribbon.errors import BadInput
from ribbon.lattice.network import Bonds, BoolArray
from ribbon.lattice.strip import FloatArray, IntArray

__all__ = ["normals_from_geometry", "orient_normals"]

STRAIGHT = 1e-6
"""Two bonds whose directions are this close to one line span no plane."""


def normals_from_geometry(positions: FloatArray, bonds: Bonds) -> FloatArray:
    """Unit normal of every site from its first neighbours, shape (n, 3); signs are arbitrary.

    Three bonds: the direction that makes equal angles with them (the axis of the pi orbital,
    Haddon, Acc. Chem. Res. 21, 243 (1988), recalled from memory); more: the direction whose
    cosines with them vary least. Two bonds: the normal of their plane. One bond, or two in one
    line: the neighbour's normal, made orthogonal to the bond. ``positions`` (n, 3) in nm.
    Raises `BadInput` for places in a plane's coordinates, bonds of no length and lone sites.

    >>> from ribbon.lattice.network import Network
    >>> bent = np.array([[1.0, 0, 0], [0, 0, 0], [0, 1, 0]])
    >>> chain = Network.from_pairs([(0, 1), (1, 2)], positions=bent)
    >>> np.abs(normals_from_geometry(bent, chain.bonds)[:, 2])
    array([1., 1., 1.])
    """
    first = bonds.select(bonds.shell == 1)
    site, far, unit = _darts(positions, first)
    count = np.bincount(site, minlength=len(positions))
    if count.min() == 0:
        lone = int(np.argmin(count))
        raise BadInput(f"site {lone} has no first neighbours, so its normal is not known; give it")
    normals, known = _least_varying(site, unit, count)
    _from_plane(normals, known, site, unit)
    while not known.all():
        ready = known[far] & ~known[site]
        if not ready.any():
            _from_shape(normals, known, positions, (site, unit))
            continue
        owner, one = np.unique(site[ready], return_index=True)
        normals[owner] = _across(normals[far[ready][one]], unit[ready][one])
        known[owner] = True
    return normals


def orient_normals(normals: FloatArray, bonds: Bonds) -> tuple[FloatArray, IntArray]:
    """Normals with signs that follow one another, and the bonds across which they cannot.

    Signs are carried along a spanning tree of the first-neighbour bonds, over the least tilted
    ones first, from the lowest site of each piece, which keeps its own. The second array holds
    the numbers of the first-neighbour bonds (places in ``bonds``) whose ends then point to
    opposite sides: none for a two-sided band, a cut across the ring for a one-sided one.

    >>> from ribbon.lattice.network import Network
    >>> ring = Network.from_pairs([(0, 1), (1, 2), (2, 0)], sites=3)
    >>> up = np.array([[0.0, 0, 1], [0, 0, -1], [0, 0, 1]])
    >>> orient_normals(up, ring.bonds)[0][:, 2], orient_normals(up, ring.bonds)[1].size
    (array([1., 1., 1.]), 0)
    """
    n = len(normals)
    chosen = np.flatnonzero((bonds.shell == 1) & (bonds.tail != bonds.head))
    tail, head = bonds.tail[chosen], bonds.head[chosen]
    overlap = np.einsum("ij,ij->i", normals[tail], normals[head])
    parent = _spanning_tree(n, (tail, head), 2.0 - np.abs(overlap))
    sign = np.where(np.einsum("ij,ij->i", normals, normals[parent]) < 0, -1.0, 1.0)
    while np.any(parent != parent[parent]):  # pointer doubling: signs multiply up to the root
        sign *= sign[parent]
        parent = parent[parent]
    agree = overlap * sign[tail] * sign[head]
    return np.asarray(normals * sign[:, None]), chosen[agree < 0]


def _darts(positions: FloatArray, bonds: Bonds) -> tuple[IntArray, IntArray, FloatArray]:
    """Both ways along every bond: site, neighbour, unit vector from the one to the other."""
    if positions.ndim != 2 or positions.shape[1] != 3:
        raise BadInput(f"positions have the shape {positions.shape}; normals need (n, 3), in nm")
    step = positions[bonds.head] - positions[bonds.tail]
    long = np.linalg.norm(step, axis=1)
    if bonds.m and not long.min() > 0:
        place = int(np.argmin(long))
        raise BadInput(
            f"sites {bonds.tail[place]} and {bonds.head[place]} are bonded but stand on one place; "
            "expected a bond of some length"
        )
    unit = step / long[:, None]
    site = np.concatenate([bonds.tail, bonds.head])
    far = np.concatenate([bonds.head, bonds.tail])
    return site, far, np.concatenate([unit, -unit])


def _summed(site: IntArray, values: FloatArray, n: int) -> FloatArray:
    """Sums of rows by site, shape (n, k)."""
    return np.stack([np.bincount(site, column, minlength=n) for column in values.T], axis=1)


def _least_varying(
    site: IntArray, unit: FloatArray, count: IntArray
) -> tuple[FloatArray, BoolArray]:
    """Normals of sites with three bonds or more, and which sites these are."""
    mean = _summed(site, unit, count.size) / count[:, None]
    off = unit - mean[site]
    outer = np.einsum("ij,ik->ijk", off, off).reshape(-1, 9)
    spread = _summed(site, outer, count.size).reshape(-1, 3, 3)
    size, axes = np.linalg.eigh(spread)
    known = (count >= 3) & (size[:, 1] > STRAIGHT)
    return np.where(known[:, None], axes[:, :, 0], 0.0), known


def _from_plane(
    normals: FloatArray,
    known: BoolArray,
    site: IntArray,
    unit: FloatArray,
) -> None:
    """Normals of sites with two bonds that span a plane."""
    order = np.argsort(site, kind="stable")
    count = np.bincount(site, minlength=len(normals))
    two = np.flatnonzero(count == 2)
    start = (np.cumsum(count) - count)[two]
    across = np.cross(unit[order[start]], unit[order[start + 1]])
    size = np.linalg.norm(across, axis=1)
    good = size > STRAIGHT
    normals[two[good]] = across[good] / size[good, None]
    known[two[good]] = True


def _across(given: FloatArray, along: FloatArray) -> FloatArray:
    """Unit vectors nearest to the given ones that are orthogonal to unit vectors ``along``."""
    across = given - np.einsum("ij,ij->i", given, along)[:, None] * along
    thin = np.linalg.norm(across, axis=1) <= STRAIGHT  # given along the bond: any will do
    across[thin] = np.cross(along[thin], np.eye(3)[np.argmin(np.abs(along[thin]), axis=1)])
    return np.asarray(across / np.linalg.norm(across, axis=1)[:, None])


def _from_shape(
    normals: FloatArray,
    known: BoolArray,
    positions: FloatArray,
    darts: tuple[IntArray, FloatArray],
) -> None:
    """Where no neighbour knows (a straight chain): the direction in which the sites spread least.

    One site of the chain gets it, made orthogonal to its bond; the others take it over.
    """
    site, unit = darts
    first = int(np.flatnonzero(~known)[0])
    centred = positions - positions.mean(axis=0)
    thin = np.linalg.eigh(centred.T @ centred)[1][:, 0]
    normals[first] = _across(thin[None], unit[np.flatnonzero(site == first)[:1]])[0]
    known[first] = True


def _spanning_tree(n: int, ends: tuple[IntArray, IntArray], weight: FloatArray) -> IntArray:
    """Parent of every site in the lightest spanning tree of each piece; roots are their own."""
    graph = coo_array((weight, ends), shape=(n, n)).tocsr()
    # bonds that stand twice have summed weights, of which only the order matters
    tree = minimum_spanning_tree(graph).tocoo()
    _, piece = connected_components(graph, directed=False)
    _, root = np.unique(piece, return_index=True)
    # one more node joins the lowest site of every piece, so that one search finds all
    start = np.full(root.size, n)
    row, column = np.concatenate([tree.row, start]), np.concatenate([tree.col, root])
    joined = coo_array((np.ones(row.size), (row, column)), shape=(n + 1, n + 1)).tocsr()
    parent = breadth_first_order(joined, n, directed=False)[1][:n].astype(np.int64)
    return np.where(parent == n, np.arange(n), parent)
