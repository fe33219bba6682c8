"""Elastic energy of a ring in space: half a sum of squares of strains, with its gradient.

All strains are functions of the bond vectors v, so that no site is a special case:

- stretch: |v| / d - 1, d the flat length;
- angle: cosine between two bonds at a site minus its flat value;
- bending: sum of c_j v_j / d over the bonds of a site, for every set of weights c that makes the
  sum vanish on the flat strip (three bonds of a honeycomb, two in line of a square lattice);
- torsion: triple product of three bonds in a row, over their flat lengths; zero where they lie in
  one plane.

Each has its own stiffness in eV, so that a shape does not depend on the scale of lengths.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from scipy.sparse import coo_array, csr_array, kron

from ribbon.errors import BadInput
from ribbon.lattice.network import Bonds
from ribbon.lattice.ring import Ring
from ribbon.lattice.strip import FloatArray, IntArray

__all__ = ["Elastic", "Stiffness"]


@dataclass(frozen=True, kw_only=True)
class Stiffness:
    """Stiffness of each kind of strain, eV; the shape depends on their ratios alone.

    The defaults are of the size of graphene's: bond spring 4070 eV/nm^2 and angle 4.9 eV/rad^2
    (6.5 and 0.78 mdyn), bending rigidity 1.4 eV (``bending`` = 4 sqrt(3) of it on a honeycomb),
    Gaussian rigidity -1.5 eV (``torsion`` = 0.385 of its size). All recalled from memory and
    good to a few tens of a percent.
    """

    stretch: float = 82.0
    angle: float = 6.5
    bending: float = 9.7
    torsion: float = 0.58

    def __post_init__(self) -> None:
        """Check that nothing is negative and that bonds resist."""
        for field in fields(self):
            value = getattr(self, field.name)
            if not (np.isfinite(value) and value >= 0 and (value > 0 or field.name != "stretch")):
                raise BadInput(
                    f"stiffness.{field.name} = {value} must be a finite number of eV, zero or "
                    "positive (that of stretch positive)"
                )


Participants = list[tuple[IntArray, FloatArray]]
"""Numbers of bonds (k,), and the slope of each strain by that bond's vector, (k, 3)."""


@dataclass(frozen=True, eq=False)
class Elastic:
    """Elastic energy of a ring as a function of the places of its sites, (n, 3) in nm.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.lattice.space import place_in_space
    >>> ring = close_strip(lay_strip("square", rows=2, length=12), half_twists=1, orbital="pz")
    >>> energies = Elastic(ring, Stiffness()).energies(place_in_space(ring).positions)
    >>> sorted(energies), min(energies.values()) > 0
    (['angle', 'bending', 'stretch', 'torsion'], True)
    """

    ring: Ring
    stiffness: Stiffness

    @cached_property
    def bonds(self) -> Bonds:
        """First-neighbour bonds."""
        return self.ring.bonds.select(self.ring.bonds.shell == 1)

    @cached_property
    def lengths(self) -> FloatArray:
        """Flat lengths of the bonds, nm."""
        return np.asarray(np.linalg.norm(self.bonds.displacement, axis=1))

    @cached_property
    def incidence(self) -> csr_array:
        """From places of sites to bond vectors, shape (m, n)."""
        m = self.bonds.m
        column = np.concatenate([self.bonds.head, self.bonds.tail])
        value = np.repeat([1.0, -1.0], m)
        return coo_array((value, (np.tile(np.arange(m), 2), column)), (m, self.ring.n)).tocsr()

    def energies(self, positions: FloatArray) -> dict[str, float]:
        """Energy by kind of strain, eV."""
        vectors = self.incidence @ positions
        strains = {name: part[0] for name, part in self._curved(vectors).items()}
        strains["bending"] = self._balance @ vectors
        return {name: float(np.vdot(part, part)) / 2 for name, part in strains.items()}

    def energy_and_gradient(self, positions: FloatArray) -> tuple[float, FloatArray]:
        """Total energy (eV) and its gradient by the places (eV/nm, shape (n, 3))."""
        vectors = self.incidence @ positions
        bent = self._balance @ vectors
        total, slope = float(np.vdot(bent, bent)), self._balance.T @ bent
        pulls = []
        for strain, participants in self._curved(vectors).values():
            total += float(np.vdot(strain, strain))
            pulls += [strain[:, None] * part for _, part in participants]
        slope += self._scatter @ np.concatenate(pulls)
        return total / 2, np.asarray(self.incidence.T @ slope)

    def stiffness_matrix(self, positions: FloatArray) -> csr_array:
        """Products of the slopes of all strains, shape (3n, 3n); row 3i + k is site i, component k.

        The matrix of second derivatives but for the strains' own curvature, so never negative.
        """
        vectors = self.incidence @ positions
        size = (3 * self.bonds.m,) * 2
        eye = np.eye(3)
        total = csr_array(kron(self._balance.T @ self._balance, eye))
        for strain, participants in self._curved(vectors).values():
            column = np.stack([3 * number[:, None] + np.arange(3) for number, _ in participants])
            value = np.stack([part for _, part in participants])
            row = np.broadcast_to(np.arange(strain.size)[None, :, None], column.shape)
            place = (row.ravel(), column.ravel())
            slopes = coo_array((value.ravel(), place), (strain.size, size[0])).tocsr()
            total = total + slopes.T @ slopes
        spread = csr_array(kron(self.incidence, eye))
        return csr_array(spread.T @ total @ spread)

    def _curved(self, vectors: FloatArray) -> dict[str, tuple[FloatArray, Participants]]:
        """Strains that are not linear, times the root of their stiffness, with their slopes."""
        return {
            "stretch": self._stretch(vectors),
            "angle": self._angle(vectors),
            "torsion": self._torsion(vectors),
        }

    def _stretch(self, vectors: FloatArray) -> tuple[FloatArray, Participants]:
        root = np.sqrt(self.stiffness.stretch)
        long = np.linalg.norm(vectors, axis=1)
        slope = root * vectors / (long * self.lengths)[:, None]
        return root * (long / self.lengths - 1), [(np.arange(long.size), slope)]

    def _angle(self, vectors: FloatArray) -> tuple[FloatArray, Participants]:
        one, other, sign, flat = self._pairs
        root = np.sqrt(self.stiffness.angle)
        long = np.linalg.norm(vectors, axis=1)
        unit = vectors / long[:, None]
        cosine = sign * _dot(unit[one], unit[other])
        slope = sign[:, None] * unit[other] - cosine[:, None] * unit[one]
        back = sign[:, None] * unit[one] - cosine[:, None] * unit[other]
        return root * (cosine - flat), [
            (one, root * slope / long[one][:, None]),
            (other, root * back / long[other][:, None]),
        ]

    def _torsion(self, vectors: FloatArray) -> tuple[FloatArray, Participants]:
        before, middle, after = self._rows
        scale = self.lengths[before] * self.lengths[middle] * self.lengths[after]
        scale = np.sqrt(self.stiffness.torsion) / scale
        a, b, c = vectors[before], vectors[middle], vectors[after]
        by_a = np.cross(b, c) * scale[:, None]
        return _dot(a, by_a), [
            (before, by_a),
            (middle, np.cross(c, a) * scale[:, None]),
            (after, np.cross(a, b) * scale[:, None]),
        ]

    @cached_property
    def _scatter(self) -> csr_array:
        """Adds the pulls of all curved strains to their bonds."""
        one, other, *_ = self._pairs
        number = np.concatenate([np.arange(self.bonds.m), one, other, *self._rows])
        place = (number, np.arange(number.size))
        return coo_array((np.ones(number.size), place), (self.bonds.m, number.size)).tocsr()

    @cached_property
    def _darts(self) -> _Darts:
        return _darts(self.ring.n, self.bonds)

    @cached_property
    def _pairs(self) -> tuple[IntArray, IntArray, FloatArray, FloatArray]:
        """Two bonds at a site: their numbers, sign of the product of darts, flat cosine."""
        darts = self._darts
        # each dart with those that follow it at the same site
        later = np.repeat(darts.start + darts.count, darts.count) - np.arange(darts.bond.size) - 1
        first = np.repeat(np.arange(darts.bond.size), later)
        second = first + 1 + _counted(later)
        flat = darts.flat / np.linalg.norm(darts.flat, axis=1)[:, None]
        sign = darts.sign[first] * darts.sign[second]
        return darts.bond[first], darts.bond[second], sign, _dot(flat[first], flat[second])

    @cached_property
    def _rows(self) -> tuple[IntArray, IntArray, IntArray]:
        """Three bonds in a row, numbers of each."""
        darts, bonds = self._darts, self.bonds
        at_head = darts.count[bonds.head]
        every = darts.count[bonds.tail] * at_head
        middle = np.repeat(np.arange(bonds.m), every)
        place, width = _counted(every), at_head[middle]
        before = darts.bond[darts.start[bonds.tail[middle]] + place // width]
        after = darts.bond[darts.start[bonds.head[middle]] + place % width]
        true = (before != middle) & (after != middle) & (before != after)
        return before[true], middle[true], after[true]

    @cached_property
    def _balance(self) -> csr_array:
        """From bond vectors to bending strains times the root of their stiffness."""
        darts = self._darts
        row, dart, weight, done = [], [], [], 0
        for degree in np.unique(darts.count[darts.count > 1]):
            sites = np.flatnonzero(darts.count == degree)
            place = darts.start[sites][:, None] + np.arange(degree)
            _, size, turned = np.linalg.svd(np.swapaxes(darts.flat[place], 1, 2))
            size = np.pad(size, ((0, 0), (0, degree - size.shape[1])))
            site, kind = np.nonzero(size <= 1e-6 * size[:, :1])
            number = done + np.arange(site.size)
            row.append(np.repeat(number, degree))
            dart.append(place[site].ravel())
            weight.append(turned[site, kind].ravel())
            done += site.size
        chosen = np.concatenate([np.zeros(0, dtype=np.int64), *dart])
        value = np.concatenate([np.zeros(0), *weight]) * darts.sign[chosen]
        value *= np.sqrt(self.stiffness.bending) / self.ring.strip.spacing
        where = (np.concatenate([np.zeros(0, dtype=np.int64), *row]), darts.bond[chosen])
        return coo_array((value, where), (done, self.bonds.m)).tocsr()


@dataclass(frozen=True, kw_only=True, eq=False)
class _Darts:
    """Both ways along every bond, sorted by the site they leave.

    ``flat`` (2m, 2) is the step on the flat strip in the frame of that site; darts of site i are
    ``start[i]`` to ``start[i] + count[i]``.
    """

    bond: IntArray
    sign: FloatArray
    flat: FloatArray
    start: IntArray
    count: IntArray


def _darts(n: int, bonds: Bonds) -> _Darts:
    site = np.concatenate([bonds.tail, bonds.head])
    back = -bonds.displacement
    back[bonds.mirrored, 1] *= -1
    order = np.argsort(site, kind="stable")
    count = np.bincount(site, minlength=n)
    return _Darts(
        bond=np.tile(np.arange(bonds.m), 2)[order],
        sign=np.repeat([1.0, -1.0], bonds.m)[order],
        flat=np.concatenate([bonds.displacement, back])[order],
        start=np.cumsum(count) - count,
        count=count,
    )


def _counted(counts: IntArray) -> IntArray:
    """0, 1, ... counts[0] - 1, 0, 1, ... counts[1] - 1, and so on."""
    return np.asarray(np.arange(counts.sum()) - np.repeat(np.cumsum(counts) - counts, counts))


def _dot(one: FloatArray, other: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("ij,ij->i", one, other))
