"""Atoms of molecules from plain geometry, in angstrom, for the tests of the molecule rooms.

Nothing here is taken from the package: polygons, fused hexagons, cylinders and the twisted ring
r(x, y) = ((R + y cos a) cos t, (R + y cos a) sin t, y sin a) with t = x / R and a = h t / 2.
"""

from __future__ import annotations

import itertools
import math

import numpy as np
from numpy.typing import NDArray

Places = NDArray[np.float64]

BOND = 1.40


def polygon(sites: int, bond: float = BOND) -> Places:
    """A planar regular ring."""
    turn = 2 * np.pi * np.arange(sites) / sites
    radius = bond / (2 * math.sin(math.pi / sites))
    return radius * np.stack([np.cos(turn), np.sin(turn), 0 * turn], axis=1)


def fused_hexagons(*cells: tuple[int, int]) -> Places:
    """A planar benzenoid from the axial places of its hexagons (corners met twice stand once)."""
    corners: dict[tuple[int, int], None] = {}
    for q, r in cells:
        for x, y in [(0, 2), (1, 1), (1, -1), (0, -2), (-1, -1), (-1, 1)]:
            corners[2 * q + r + x, 3 * r + y] = None
    flat = np.array(list(corners), dtype=np.float64) * [BOND * math.sqrt(3) / 2, BOND / 2]
    return np.column_stack([flat, np.zeros(len(flat))])


def acene(rings: int) -> Places:
    return fused_hexagons(*[(q, 0) for q in range(rings)])


def twisted(x: Places, y: Places, length: float, half_twists: int) -> Places:
    """Places (x, y) of a strip on the left-handed twisted ring of that circumference."""
    radius = length / (2 * np.pi)
    turn = x / radius
    lean = half_twists * turn / 2
    out = radius + y * np.cos(lean)
    return np.stack([out * np.cos(turn), out * np.sin(turn), y * np.sin(lean)], axis=1)


def belt_strip(rings: int, rows: int = 2) -> tuple[Places, Places, float]:
    """x, y and length of a strip of ``rows`` zigzag chains, ``rings`` hexagons round."""
    period = BOND * math.sqrt(3)
    column = []
    for row in range(rows):
        shift = (row % 2) * period / 2
        column.append((shift, 1.5 * BOND * row))
        column.append(((shift + period / 2) % period, 1.5 * BOND * row + BOND / 2))
    x, y = np.array(column).T
    x = np.where(x > period - 1e-9, 0.0, x)
    x = (x + period * np.arange(rings)[:, None]).ravel()
    y = np.tile(y - (y.min() + y.max()) / 2, rings)
    return x, y, rings * period


def twisted_belt(rings: int, half_twists: int, rows: int = 2) -> Places:
    x, y, length = belt_strip(rings, rows)
    return twisted(x, y, length, half_twists)


def cyclacene(rings: int, rows: int = 2) -> Places:
    """The strip rolled up into a cylinder; arcs become chords."""
    x, y, length = belt_strip(rings, rows)
    turn, radius = 2 * np.pi * x / length, length / (2 * np.pi)
    return np.stack([radius * np.cos(turn), radius * np.sin(turn), y], axis=1)


def annulene(sites: int, half_twists: int) -> Places:
    """A zigzag chain closed on the twisted ring; one cis bond where zigzag would not close."""
    high = np.where(np.arange(sites) % 2 == 0, 1.0, -1.0) * BOND / 4
    fits = (sites + half_twists) % 2 == 0
    step = BOND * math.sqrt(3) / 2
    x = step * np.arange(sites)
    length = step * sites if fits else step * (sites - 1) + BOND
    return twisted(x, high, length, half_twists)


def paraphenylene_hoop(rings: int, half_twists: int = 0) -> Places:
    """Hexagons joined by single bonds into a hoop, each tangent to a cylinder or turned on."""
    side = 2 * BOND + 1.48 / math.cos(math.pi / rings)
    radius = side / (2 * math.sin(math.pi / rings))
    corner = np.arange(6) * np.pi / 3
    flat = np.stack([BOND * np.cos(corner), BOND * np.sin(corner)], axis=1)
    atoms = []
    for turn in 2 * np.pi * np.arange(rings) / rings:
        out = np.array([np.cos(turn), np.sin(turn), 0.0])
        along = np.array([-np.sin(turn), np.cos(turn), 0.0])
        middle = radius * math.cos(math.pi / rings) * out
        lean = half_twists * turn / 2
        across = math.cos(lean) * np.array([0.0, 0.0, 1.0]) - math.sin(lean) * out
        atoms += [middle + a * along + b * across for a, b in flat]
    return np.array(atoms)


def biphenyl(angle: float = 0.0) -> Places:
    """Two hexagons 1.48 apart, the second turned about the bond between them."""
    corner = np.arange(6) * np.pi / 3
    ring = BOND * np.stack([np.cos(corner), np.sin(corner), 0 * corner], axis=1)
    second = ring * [-1, 1, 1] + [2 * BOND + 1.48, 0, 0]
    turn = np.array(
        [[1, 0, 0], [0, math.cos(angle), -math.sin(angle)], [0, math.sin(angle), math.cos(angle)]]
    )
    return np.concatenate([ring, second @ turn.T])


def dodecahedron() -> Places:
    """Twenty atoms of a cage of pentagons, bonds 1.45."""
    golden = (1 + math.sqrt(5)) / 2
    points = [*itertools.product((-1.0, 1.0), repeat=3)]
    for a, b in itertools.product((-1 / golden, 1 / golden), (-golden, golden)):
        points += [(0.0, a, b), (a, b, 0.0), (b, 0.0, a)]
    return np.array(points) * 1.45 * golden / 2


def buckminsterfullerene() -> Places:
    """Sixty atoms: the cyclic permutations of (0, 1, 3g), (2, 1 + 2g, g), (1, 2 + g, 2g)."""
    g = (1 + math.sqrt(5)) / 2
    points = set()
    for base in [(0.0, 1.0, 3 * g), (2.0, 1 + 2 * g, g), (1.0, 2 + g, 2 * g)]:
        for signs in itertools.product((-1.0, 1.0), repeat=3):
            signed = [s * value + 0.0 for s, value in zip(signs, base, strict=True)]
            points |= {tuple(signed[k:] + signed[:k]) for k in range(3)}
    return np.array(sorted(points)) * 1.43 / 2


def turned(places: Places, seed: int) -> tuple[Places, NDArray[np.int64]]:
    """Atoms in random order, turned and moved at random; and the order."""
    generator = np.random.default_rng(seed)
    basis, _ = np.linalg.qr(generator.standard_normal((3, 3)))
    basis *= np.sign(np.linalg.det(basis))
    order = generator.permutation(len(places))
    return (places @ basis.T + generator.uniform(-9, 9, 3))[order], order


def annulene_hydrogens(sites: int, half_twists: int) -> Places:
    """Hydrogens on the strip, straight up or down from the atoms of `annulene`."""
    high = np.where(np.arange(sites) % 2 == 0, 1.0, -1.0)
    step = BOND * math.sqrt(3) / 2
    fits = (sites + half_twists) % 2 == 0
    length = step * sites if fits else step * (sites - 1) + BOND
    return twisted(step * np.arange(sites), high * (BOND / 4 + 1.09), length, half_twists)
