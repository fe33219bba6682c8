"""Assembly: one plain sparse matrix, its structure computed once.

Row i of the matrix is site i of the network. A bond from i to j adds
``-t * seam factor * phase`` to <i|H|j> and its conjugate to <j|H|i>; entries that meet on one
place (short rings) add. Electrons have the charge -e: <i|H|j> carries exp(+i (e/hbar) int A.dl),
which for a threading flux is exp(2 pi i phi (x_j - x_i) / L) in the uniform gauge.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from ribbon.errors import BadInput
from ribbon.hopping.amplitudes import Hopping, resolve_site_energies
from ribbon.hopping.template import Template, find_template
from ribbon.lattice import Network, Ring

__all__ = ["Gauge", "Hamiltonian", "assemble"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
AnyArray = NDArray[Any]
Gauge = Literal["uniform", "seam"] | FloatArray


@dataclass(frozen=True, kw_only=True, eq=False)
class Hamiltonian:
    """A network with its hopping; ``matrix`` gives the sparse matrix at a flux.

    ``amplitudes`` holds <tail|H|head> of every bond at zero flux, seam factor included, and
    ``site_energies`` the diagonal, disorder included; both in ``hopping.unit``. One made by
    `assemble` on a ring as it was laid computes its amplitudes when they are first asked for.
    """

    network: Network
    hopping: Hopping
    amplitudes: AnyArray
    site_energies: FloatArray

    def __getattr__(self, name: str) -> Any:
        """Amplitudes of every bond, when they are first asked for."""
        if name != "amplitudes" or "network" not in self.__dict__:
            raise AttributeError(f"{type(self).__name__!r} object has no attribute {name!r}")
        value = _amplitudes(self.network, self.hopping)
        object.__setattr__(self, name, value)
        return value

    @property
    def is_regular(self) -> bool:
        """True where bonds and amplitudes are those of the ring as it was laid, none edited."""
        return "_regular" in self.__dict__

    @cached_property
    def _template(self) -> Template | None:
        """One period of the matrix, or None where it does not repeat."""
        if not self.is_regular or self.ring is None:
            return None
        return find_template(self.ring, self.hopping.shells, diagonal=bool(self._diagonal.size))

    @property
    def n(self) -> int:
        """Number of sites, the size of the matrix."""
        return self.network.n

    @property
    def unit(self) -> str:
        """Unit of energy."""
        return self.hopping.unit

    @property
    def ring(self) -> Ring | None:
        """The ring, or None for a bare network."""
        return self.network if isinstance(self.network, Ring) else None

    @cached_property
    def scale(self) -> float:
        """An upper bound of the spectrum's absolute value (largest absolute row sum)."""
        rows = self._row_sums + np.abs(self.site_energies)
        return float(np.max(rows, initial=0.0)) or 1.0

    @cached_property
    def bond_scale(self) -> float:
        """Largest sum of the bonds at one site; the bound of the spectrum where there is none."""
        return float(np.max(self._row_sums, initial=0.0)) or self.scale

    @cached_property
    def _row_sums(self) -> FloatArray:
        """Sum of the absolute amplitudes at every site."""
        if self._template is not None:
            return self._template.row_sums()
        bonds, weight = self.network.bonds, np.abs(self.amplitudes)
        rows = np.bincount(bonds.tail, weights=weight, minlength=self.n)
        rows += np.bincount(bonds.head, weights=weight, minlength=self.n)
        return np.asarray(rows, dtype=np.float64)

    @cached_property
    def site_turns(self) -> FloatArray:
        """x of every site as a fraction of the circumference (zeros for a bare network)."""
        if self.ring is None:
            return np.zeros(self.n)
        return self.network.positions[:, 0] / self.ring.circumference

    def bond_turns(self, gauge: Gauge) -> FloatArray:
        """Phase of every bond in turns per flux quantum, shape (m,)."""
        bonds = self.network.bonds
        if self.ring is None:
            return np.zeros(bonds.m)
        if isinstance(gauge, str) and gauge == "seam":
            return bonds.winding.astype(np.float64)
        return bonds.displacement[:, 0] / self.ring.circumference

    def matrix(self, flux: float = 0.0, *, gauge: Gauge = "uniform") -> csr_array:
        """The Hamiltonian at a threading flux in flux quanta h/e.

        ``gauge`` is "uniform", "seam" (all phase on the bonds that cross the seam), or an array
        of site phases chi added to the uniform gauge: <i|H|j> -> <i|H|j> exp(i(chi_j - chi_i)).
        Real where every phase is real, complex otherwise. Raises `BadInput` for a flux that is
        not finite, or a flux through a network that is not a ring.
        """
        data = self.data(flux, gauge=gauge)
        indices, indptr = self._structure
        return csr_array((data, indices, indptr), shape=(self.n, self.n))

    @cached_property
    def _structure(self) -> tuple[AnyArray, AnyArray]:
        """``indices`` and ``indptr``, the same for every flux and gauge."""
        if self._template is not None:
            return self._template.structure()
        return self._pattern.indices, self._pattern.indptr

    def tunable(
        self, *, gauge: Literal["uniform", "seam"] = "seam"
    ) -> Callable[[float], csr_array]:
        """A function of the flux that rewrites one complex matrix in place and returns it.

        For sweeps: in the seam gauge only the entries that cross the seam are touched, so that a
        new flux costs microseconds whatever the size. The matrix of an earlier call changes with
        every later one; copy it to keep it.

        >>> from ribbon.lattice import close_strip, lay_strip
        >>> strip = lay_strip("square", rows=2, length=9)
        >>> ring = assemble(close_strip(strip, half_twists=0), Hopping())
        >>> tuned = ring.tunable()
        >>> abs(tuned(0.3) - ring.matrix(0.3, gauge="seam")).max() < 1e-15
        np.True_
        """
        matrix = self.matrix(0.25, gauge=gauge)
        data = matrix.data.astype(np.complex128, copy=False)
        matrix = csr_array((data, matrix.indices, matrix.indptr), shape=matrix.shape)
        template, wound = self._template, None
        if template is not None and gauge == "seam":
            wound = template.wound()

        def tune(flux: float) -> csr_array:
            if wound is not None:
                place, amplitude, winding = wound
                matrix.data[place] = amplitude * np.exp(2j * np.pi * flux * winding)
            elif template is not None:
                template.fill(matrix.data, flux, self.site_energies, seam=False)
            else:
                matrix.data[:] = self.data(flux, gauge=gauge)
            return matrix

        return tune

    def data(self, flux: float = 0.0, *, gauge: Gauge = "uniform") -> AnyArray:
        """Data array of `matrix` alone; the structure never changes with flux or gauge."""
        self._check(flux, gauge)
        if self._template is not None and isinstance(gauge, str):
            return self._from_template(flux, gauge, slope=False)
        bonds = self.amplitudes * self._phases(flux, gauge)
        values = np.concatenate([bonds, bonds.conj(), self.site_energies[self._diagonal]])
        pattern = self._pattern
        out: AnyArray = (
            np.add.reduceat(values[pattern.order], pattern.starts) if values.size else values
        )
        return out

    def slope_matrix(self, flux: float, *, gauge: Gauge = "uniform") -> csr_array:
        """Derivative of `matrix` with respect to the flux in flux quanta, same structure."""
        self._check(flux, gauge)
        if self._template is not None and isinstance(gauge, str):
            data = self._from_template(flux, gauge, slope=True)
            indices, indptr = self._structure
            return csr_array((data, indices, indptr), shape=(self.n, self.n))
        bonds = self.amplitudes * self._phases(flux, gauge)
        bonds = 2j * np.pi * self.bond_turns(gauge) * bonds
        values = np.concatenate([bonds, bonds.conj(), np.zeros(self._diagonal.size)])
        pattern = self._pattern
        data = np.add.reduceat(values[pattern.order], pattern.starts) if values.size else values
        return csr_array((data, pattern.indices, pattern.indptr), shape=(self.n, self.n))

    def _from_template(self, flux: float, gauge: str, *, slope: bool) -> AnyArray:
        template, seam = self._template, gauge == "seam"
        assert template is not None
        real = not slope and template.is_real(flux, seam=seam)
        out = np.empty(template.nnz, dtype=np.float64 if real else np.complex128)
        return template.fill(out, flux, self.site_energies, seam=seam, slope=slope)

    def _check(self, flux: float, gauge: Gauge) -> None:
        """Refuse a flux or gauge that means nothing."""
        if not np.isfinite(flux):
            raise BadInput(f"field.flux = {flux} must be a finite number of flux quanta")
        if flux and self.ring is None:
            raise BadInput("a threading flux needs a ring; this network is not closed round one")
        if isinstance(gauge, str) and gauge not in {"uniform", "seam"}:
            raise BadInput(f'field.gauge = {gauge!r} must be "uniform" or "seam"')
        if not isinstance(gauge, str) and np.shape(gauge) != (self.n,):
            raise BadInput(
                f"the gauge has the shape {np.shape(gauge)}; expected one phase for each of the "
                f"{self.n} sites"
            )

    def _phases(self, flux: float, gauge: Gauge) -> AnyArray:
        given = None if isinstance(gauge, str) else np.asarray(gauge, dtype=np.float64)
        turns = flux * self.bond_turns(gauge)
        half = np.rint(2 * turns)
        if given is None and np.array_equal(half, 2 * turns):
            return np.asarray(1.0 - 2.0 * (half % 2))
        angle = 2 * np.pi * turns
        if given is not None:
            bonds = self.network.bonds
            angle = angle + given[bonds.head] - given[bonds.tail]
        return np.asarray(np.exp(1j * angle))

    @cached_property
    def _diagonal(self) -> IntArray:
        """Sites that get a diagonal entry: all or none, so that no stored zero becomes an edge."""
        return np.arange(self.n if np.any(self.site_energies) else 0)

    @cached_property
    def _pattern(self) -> _Pattern:
        bonds = self.network.bonds
        rows = np.concatenate([bonds.tail, bonds.head, self._diagonal])
        columns = np.concatenate([bonds.head, bonds.tail, self._diagonal])
        key = rows * self.n + columns
        order = np.argsort(key, kind="stable")
        key = key[order]
        starts = np.flatnonzero(np.concatenate([[True], np.diff(key) > 0]) if key.size else key)
        counts = np.bincount(key[starts] // self.n, minlength=self.n)
        indices, indptr = key[starts] % self.n, np.concatenate([[0], np.cumsum(counts)])
        small = max(self.n, starts.size) < 2**31
        return _Pattern(
            order=order,
            starts=starts,
            indices=indices.astype(np.int32) if small else indices,
            indptr=indptr.astype(np.int32) if small else indptr,
        )


@dataclass(frozen=True, kw_only=True, eq=False)
class _Pattern:
    """Structure of the matrix: where each contribution goes."""

    order: IntArray
    starts: IntArray
    indices: NDArray[np.int32] | NDArray[np.int64]
    indptr: NDArray[np.int32] | NDArray[np.int64]


def assemble(network: Network, hopping: Hopping) -> Hamiltonian:
    """Put a hopping on a network.

    The network must hold bonds for as many shells as the hopping names. Raises `BadInput`
    otherwise, and for site energies that do not fit the seam.

    >>> ring = Network.from_pairs([(0, 1), (1, 2), (2, 0)])
    >>> assemble(ring, Hopping(shells=(1.0,))).matrix().toarray()
    array([[ 0., -1., -1.],
           [-1.,  0., -1.],
           [-1., -1.,  0.]])
    """
    if isinstance(network, Ring):
        shells = network.shells
    else:
        shells = int(np.max(network.bonds.shell, initial=1))
    if len(hopping.shells) != shells:
        raise BadInput(
            f"hopping.shells names {len(hopping.shells)} amplitudes, but the network was closed "
            f"with shells = {shells}"
        )
    energies = resolve_site_energies(network, hopping)
    energies.setflags(write=False)
    found = object.__new__(Hamiltonian)
    for name, value in (("network", network), ("hopping", hopping), ("site_energies", energies)):
        object.__setattr__(found, name, value)
    if isinstance(network, Ring) and network.is_laid:
        object.__setattr__(found, "_regular", True)
    return found


def _amplitudes(network: Network, hopping: Hopping) -> FloatArray:
    """<tail|H|head> of every bond at zero flux."""
    bonds = network.bonds
    amplitudes = -np.array(hopping.shells)[bonds.shell - 1]
    if isinstance(network, Ring):
        amplitudes = amplitudes * network.closure.factor(bonds.winding)
    amplitudes.setflags(write=False)
    return amplitudes
