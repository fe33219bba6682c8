"""What a spectrum is: `Levels`, and the certificate that none is missing."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ribbon.hopping import Hamiltonian

__all__ = [
    "AnyArray",
    "Certificate",
    "FloatArray",
    "IntArray",
    "Levels",
    "finest",
    "shell_edges",
    "tolerance",
]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
AnyArray = NDArray[Any]

SAME = 1e-10
"""Levels closer than this part of the bonds at a site are one shell."""

FINE = 1e-12
"""Levels closer than this part of the bonds at a site are filled as one shell: no more than
rounding, so that edge states split by little are not shared out."""

ROUNDING = 100 * float(np.finfo(np.float64).eps)
"""Error of a computed level in parts of a bound of the spectrum."""


def tolerance(hamiltonian: Hamiltonian) -> float:
    """Levels closer than this are one shell: 1e-10 of the bonds at a site, and rounding.

    A common offset or a deep site does not make it coarser than rounding does.
    """
    return SAME * hamiltonian.bond_scale + ROUNDING * hamiltonian.scale


def finest(hamiltonian: Hamiltonian) -> float:
    """Levels closer than this are filled as one shell: rounding, no more."""
    return FINE * hamiltonian.bond_scale + ROUNDING * hamiltonian.scale


@dataclass(frozen=True, kw_only=True)
class Certificate:
    """Why no level of the window is missing.

    ``method`` is "symmetry", "dense" or "sparse". The number of levels below ``lower`` is
    ``count_lower``, below ``upper`` it is ``count_upper`` (of the whole spectrum: 0 and n).
    ``radius`` bounds how near to an edge a level would have to lie to be miscounted.
    """

    method: str
    lower: float
    upper: float
    count_lower: int
    count_upper: int
    found: int
    radius: float = 0.0

    @property
    def complete(self) -> bool:
        """True where as many levels were found as were counted."""
        return self.found == self.count_upper - self.count_lower


@dataclass(frozen=True, kw_only=True, eq=False)
class Levels:
    """Levels in ascending order, shape (m,), and what is known of them.

    Parameters
    ----------
    energies
        In ``unit``.
    index
        Position in the complete spectrum, from 0.
    certificate
        Says that none is missing between its edges.
    flux
        In flux quanta h/e.
    momentum
        k L / 2 pi of the kinetic wave number, n + delta + flux, folded into the zone; None
        where the ring has no translation symmetry.
    parity
        +1 or -1 under the flip about the midline (with its glide, where there is one).
    states
        Columns are orthonormal states in the uniform gauge, shape (n, m).
    slopes
        dE/d(flux) of single levels; degenerate ones are resolved inside their shell.
    residual
        Largest norm of H psi - E psi, where states were computed.
    """

    energies: FloatArray
    index: IntArray
    certificate: Certificate
    flux: float
    unit: str
    momentum: FloatArray | None = None
    parity: IntArray | None = None
    states: AnyArray | None = None
    slopes: FloatArray | None = None
    residual: float | None = None

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for name in ("energies", "index", "momentum", "parity", "states", "slopes"):
            array = getattr(self, name)
            if array is not None:
                array.setflags(write=False)

    @property
    def m(self) -> int:
        """Number of levels held."""
        return self.energies.size

    def part(self, first: int, last: int, *, lower: float, upper: float) -> Levels:
        """Levels at positions first <= i < last of these, with the certificate of a window."""
        chosen = slice(first, last)
        certificate = replace(
            self.certificate,
            lower=lower,
            upper=upper,
            count_lower=int(self.certificate.count_lower + first),
            count_upper=int(self.certificate.count_lower + last),
            found=last - first,
        )

        def cut(array: AnyArray | None) -> AnyArray | None:
            return None if array is None else array[..., chosen]

        return replace(
            self,
            energies=self.energies[chosen],
            index=self.index[chosen],
            certificate=certificate,
            momentum=cut(self.momentum),
            parity=cut(self.parity),
            states=cut(self.states),
            slopes=cut(self.slopes),
        )


def shell_edges(energies: FloatArray, same: float) -> IntArray:
    """Positions where shells begin, and the end: ascending levels closer than ``same`` join.

    >>> shell_edges(np.array([0.0, 1.0, 1.0, 2.0]), 1e-9).tolist()
    [0, 1, 3, 4]
    """
    breaks = np.flatnonzero(np.diff(energies) > same) + 1
    return np.concatenate([[0], breaks, [energies.size]])
