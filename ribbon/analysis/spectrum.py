"""Levels of a Hamiltonian: complete, near an energy, between two energies, or counted.

The way is chosen from what is asked: momentum and parity blocks for clean rings, dense for
complete spectra that fit the memory allowed, shift-and-invert with certified counts otherwise.
Levels within `tolerance` of each other are one shell; a level within `tolerance` of an edge
counts as standing on it.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np

from ribbon.analysis.certified import MOST_LEVELS, bracket, counted_edge, edge_with_count, window
from ribbon.analysis.exact import (
    Choose,
    blocks_of,
    by_dense,
    by_symmetry,
    part_by_dense,
    part_by_symmetry,
)
from ribbon.analysis.levels import FloatArray, Levels, shell_edges, tolerance
from ribbon.analysis.symmetry import why_no_blocks
from ribbon.errors import BadInput, TooLarge
from ribbon.hopping import Hamiltonian

__all__ = [
    "Method",
    "all_levels",
    "choice",
    "count_below",
    "levels_at",
    "levels_between",
    "levels_near",
    "nearest_shells",
]

Method = Literal["auto", "symmetry", "dense", "sparse"]

DENSE_WINDOW = 600


def all_levels(
    hamiltonian: Hamiltonian,
    *,
    flux: float = 0.0,
    states: bool = False,
    slopes: bool = False,
    method: Method = "auto",
) -> Levels:
    """The complete spectrum at a flux.

    Clean rings are split into momentum and parity blocks and carry these labels; others are
    diagonalised dense. ``slopes`` adds dE/d(flux), ``states`` the states and the slopes. Raises
    `TooLarge` where the dense matrix would not fit, naming what would.

    >>> from ribbon.lattice import Network
    >>> from ribbon.hopping import Hopping, assemble
    >>> benzene = assemble(Network.from_pairs([(i, (i + 1) % 6) for i in range(6)]), Hopping())
    >>> all_levels(benzene).energies.round(6).tolist()
    [-2.0, -1.0, -1.0, 1.0, 1.0, 2.0]
    """
    chosen = _choose(hamiltonian, method, fallback="dense")
    if chosen == "symmetry" and states:
        return part_by_symmetry(hamiltonian, flux, _everything, states=True)
    if chosen == "symmetry":
        return by_symmetry(hamiltonian, flux, slopes=slopes)
    if chosen == "dense":
        found = by_dense(hamiltonian, flux, states=states or slopes)
        return found if states else replace(found, states=None)
    raise BadInput('a complete spectrum takes the method "symmetry" or "dense", not "sparse"')


def levels_between(
    hamiltonian: Hamiltonian,
    lower: float,
    upper: float,
    *,
    flux: float = 0.0,
    states: bool = False,
    method: Method = "auto",
) -> Levels:
    """All levels from ``lower`` to ``upper``, edges included, certified by counts.

    A shell that an edge cuts is completed. Raises `BadInput` for edges that are not ascending,
    `NotCertified` with what was found where the iteration cannot complete the window.
    """
    if not (np.isfinite(lower) and np.isfinite(upper) and lower < upper):
        raise BadInput(f"levels.between = [{lower}, {upper}] must be two ascending numbers")
    chosen = _choose(hamiltonian, method, fallback="window")
    if chosen != "sparse":
        same = tolerance(hamiltonian)
        return _part(
            hamiltonian,
            flux,
            lambda energies: (*_inside(energies, lower, upper, same), (lower, upper)),
            states=states,
            symmetry=chosen == "symmetry",
        )
    low = counted_edge(hamiltonian, lower, flux, outward=-1)
    high = counted_edge(hamiltonian, upper, flux, outward=1)
    return window(hamiltonian, low, high, flux, states=states)


def levels_near(
    hamiltonian: Hamiltonian,
    energy: float,
    *,
    count: int,
    flux: float = 0.0,
    states: bool = False,
    method: Method = "auto",
) -> Levels:
    """The ``count`` levels nearest to ``energy``, whole shells, certified by counts.

    More than ``count`` come back where the last shell would be cut; all of them where there are
    fewer. Raises as `levels_between` does.
    """
    if not np.isfinite(energy):
        raise BadInput(f"levels.near = {energy} must be a finite energy")
    if count != int(count) or count < 1:
        raise BadInput(f"levels.count = {count} must be a whole number, 1 or more")
    chosen = _choose(hamiltonian, method, fallback="window")
    if chosen != "sparse" or count + 2 >= hamiltonian.n:
        same = tolerance(hamiltonian)
        return _part(
            hamiltonian,
            flux,
            lambda energies: nearest_shells(energies, energy, count, same),
            states=states,
            symmetry=chosen == "symmetry",
        )
    if count > MOST_LEVELS:
        raise TooLarge(
            f"levels.count = {count:,} without symmetry is more than {MOST_LEVELS:,}; ask for "
            "fewer, or for levels.all on a ring small enough for it"
        )
    low, high, guess = bracket(hamiltonian, energy, count, flux)
    found = window(hamiltonian, low, high, flux, states=states, guess=guess)
    first, last, edges = nearest_shells(found.energies, energy, count, tolerance(hamiltonian))
    return found.part(first, last, lower=edges[0], upper=edges[1])


def levels_at(hamiltonian: Hamiltonian, first: int, last: int, *, flux: float = 0.0) -> Levels:
    """Levels number ``first`` to ``last`` (both included, counted from 0), whole shells."""
    if not 0 <= first <= last < hamiltonian.n:
        raise BadInput(f"levels {first} to {last} are asked for; there are {hamiltonian.n}")
    if _choose(hamiltonian, "auto", fallback="window") != "sparse":
        whole = all_levels(hamiltonian, flux=flux)
        edges = shell_edges(whole.energies, tolerance(hamiltonian))
        start = int(edges[np.searchsorted(edges, first, side="right") - 1])
        stop = int(edges[np.searchsorted(edges, last, side="right")])
        energies = whole.energies[start:stop]
        return whole.part(start, stop, lower=energies[0], upper=energies[-1])
    lower = edge_with_count(hamiltonian, flux, first, above=False)
    upper = edge_with_count(hamiltonian, flux, last + 1, above=True)
    return window(hamiltonian, lower, upper, flux, states=False)


def count_below(hamiltonian: Hamiltonian, energy: float, *, flux: float = 0.0) -> int:
    """Number of levels below ``energy``; a level within `tolerance` of it is not below.

    From the blocks of a clean ring, else by the law of inertia (see `ribbon.analysis.counting`).
    """
    if not np.isfinite(energy):
        raise BadInput(f"the energy {energy} must be finite")
    blocks = blocks_of(hamiltonian)
    if blocks is not None:
        same = tolerance(hamiltonian)
        return int(np.searchsorted(blocks.energies(flux), energy - same))
    return counted_edge(hamiltonian, energy, flux, outward=-1).below


def nearest_shells(
    energies: FloatArray, energy: float, count: int, same: float
) -> tuple[int, int, tuple[float, float]]:
    """First and last position of the ``count`` levels nearest to an energy, and the edges."""
    distance = np.abs(energies - energy)
    if count >= energies.size:
        return 0, energies.size, (float(energies[0]), float(energies[-1]))
    reach = np.partition(distance, count - 1)[count - 1] + same
    edges = shell_edges(energies, same)
    near = np.flatnonzero(distance <= reach)
    first = int(edges[np.searchsorted(edges, near[0], side="right") - 1])
    last = int(edges[np.searchsorted(edges, near[-1], side="right")])
    return first, last, (float(energies[first]), float(energies[last - 1]))


def choice(
    hamiltonian: Hamiltonian, *, whole: bool = False, method: Method = "auto"
) -> tuple[str, str]:
    """The method that a request gets, and why, in a few words.

    ``whole`` asks for the complete spectrum, else for a window of it.

    >>> from ribbon.lattice import close_strip, lay_strip
    >>> from ribbon.hopping import Hopping, assemble
    >>> ring = close_strip(lay_strip("square", rows=3, length=9), half_twists=0)
    >>> choice(assemble(ring, Hopping()))
    ('symmetry', 'a clean ring: momentum and parity are quantum numbers')
    """
    chosen = _choose(hamiltonian, method, fallback="dense" if whole else "window")
    if method != "auto":
        return chosen, "as asked for"
    if chosen == "symmetry":
        return chosen, "a clean ring: momentum and parity are quantum numbers"
    why = why_no_blocks(hamiltonian)
    if chosen == "dense":
        size = "" if whole else f", and {hamiltonian.n:,} sites are few"
        return chosen, f"{why}{size}"
    return chosen, f"{why}, and {hamiltonian.n:,} sites are too many for a dense matrix to pay"


def _choose(hamiltonian: Hamiltonian, method: Method, *, fallback: str) -> str:
    if method not in {"auto", "symmetry", "dense", "sparse"}:
        raise BadInput(f'method = {method!r} must be "auto", "symmetry", "dense" or "sparse"')
    if method == "symmetry" and blocks_of(hamiltonian) is None:
        raise BadInput(
            f'the method "symmetry" does not apply: {why_no_blocks(hamiltonian)}; use "auto"'
        )
    if method != "auto":
        return method
    if blocks_of(hamiltonian) is not None:
        return "symmetry"
    if fallback == "window":
        return "dense" if hamiltonian.n <= DENSE_WINDOW else "sparse"
    return fallback


def _part(
    hamiltonian: Hamiltonian, flux: float, choose: Choose, *, states: bool, symmetry: bool
) -> Levels:
    """A window of a complete spectrum."""
    way = part_by_symmetry if symmetry else part_by_dense
    return way(hamiltonian, flux, choose, states=states)


def _everything(energies: FloatArray) -> tuple[int, int, tuple[float, float]]:
    return 0, energies.size, (float(energies[0]), float(energies[-1]))


def _inside(energies: FloatArray, lower: float, upper: float, same: float) -> tuple[int, int]:
    """Positions of the levels in a closed window, shells completed."""
    first = int(np.searchsorted(energies, lower - same))
    last = int(np.searchsorted(energies, upper + same, side="right"))
    if first >= last:
        return first, first
    edges = shell_edges(energies, same)
    start = edges[np.searchsorted(edges, first, side="right") - 1]
    return int(start), int(edges[np.searchsorted(edges, last - 1, side="right")])
