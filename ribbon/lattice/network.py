"""Sites and bonds as arrays: the `Network`, enough to assemble a Hamiltonian."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ribbon.errors import BadInput
from ribbon.lattice.strip import FloatArray, IntArray, frozen

__all__ = ["Bonds", "BoolArray", "Network"]

BoolArray = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True, eq=False)
class Bonds:
    """Bonds as arrays of one length m; each bond stands once, in either direction.

    Parameters
    ----------
    tail, head
        Site numbers; a site may be bonded to itself round the ring.
    displacement
        From tail to head in the endless strip, nm, shape (m, d).
    winding
        How often the step from tail to head crosses the seam forward.
    shell
        1 for first, 2 for second, 3 for third neighbours.
    mirrored
        True where the step crosses a flipped seam an odd number of times.
    """

    tail: IntArray
    head: IntArray
    displacement: FloatArray
    winding: IntArray
    shell: IntArray
    mirrored: BoolArray

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for array in (
            self.tail,
            self.head,
            self.displacement,
            self.winding,
            self.shell,
            self.mirrored,
        ):
            frozen(array)

    @property
    def m(self) -> int:
        """Number of bonds."""
        return self.tail.size

    def select(self, chosen: BoolArray | IntArray) -> Bonds:
        """The chosen bonds, by mask or by number."""
        return Bonds(
            tail=self.tail[chosen],
            head=self.head[chosen],
            displacement=self.displacement[chosen],
            winding=self.winding[chosen],
            shell=self.shell[chosen],
            mirrored=self.mirrored[chosen],
        )


@dataclass(frozen=True, kw_only=True, eq=False)
class Network:
    """Sites (``positions``, shape (n, 2) or (n, 3), nm) and their bonds, nothing else.

    >>> triangle = Network.from_pairs([(0, 1), (1, 2), (2, 0)])
    >>> triangle.n, triangle.bonds.m
    (3, 3)
    """

    positions: FloatArray
    bonds: Bonds

    def __post_init__(self) -> None:
        """Check that bonds join sites that exist; make the positions read-only."""
        if self.positions.ndim != 2 or self.positions.shape[1] not in {2, 3}:
            raise BadInput(
                f"positions have the shape {self.positions.shape}; expected (n, 2) or (n, 3)"
            )
        frozen(self.positions)
        ends = np.concatenate([self.bonds.tail, self.bonds.head])
        if ends.size and (ends.min() < 0 or ends.max() >= self.n):
            raise BadInput(
                f"a bond names site {ends.max() if ends.min() >= 0 else ends.min()}, "
                f"but sites are numbered 0 to {self.n - 1}"
            )

    @property
    def n(self) -> int:
        """Number of sites."""
        return len(self.positions)

    @classmethod
    def from_pairs(
        cls,
        pairs: Iterable[tuple[int, int]] | ArrayLike,
        *,
        positions: ArrayLike | None = None,
        sites: int | None = None,
    ) -> Network:
        """Make a network from a list of bonded pairs, all first neighbours.

        ``positions`` (nm) may be left out where only energies are wanted; then all stand at 0.
        Raises `BadInput` for a pair that joins a site to itself, stands twice, or names a site
        that does not exist.
        """
        given = pairs if isinstance(pairs, np.ndarray) else np.array(list(pairs))  # type: ignore[arg-type]  # any list
        ends = given.astype(np.int64).reshape(-1, 2)
        if positions is None:
            places = np.zeros(((int(ends.max()) + 1) if sites is None else sites, 2))
        else:
            places = np.array(positions, dtype=np.float64)
        if not np.isfinite(places).all():
            raise BadInput("a position is not a finite number")
        if np.any(ends[:, 0] == ends[:, 1]):
            alone = int(ends[ends[:, 0] == ends[:, 1]][0, 0])
            raise BadInput(f"the pair ({alone}, {alone}) joins a site to itself")
        if np.unique(np.sort(ends, axis=1), axis=0).shape[0] != ends.shape[0]:
            raise BadInput("a pair of sites is listed twice; each bond stands once")
        if ends.size and not 0 <= ends.min() <= ends.max() < len(places):
            raise BadInput(f"a pair names a site outside 0 to {len(places) - 1}")
        count = ends.shape[0]
        return cls(
            positions=places,
            bonds=Bonds(
                tail=ends[:, 0].copy(),
                head=ends[:, 1].copy(),
                displacement=places[ends[:, 1]] - places[ends[:, 0]],
                winding=np.zeros(count, dtype=np.int64),
                shell=np.ones(count, dtype=np.int64),
                mirrored=np.zeros(count, dtype=bool),
            ),
        )
