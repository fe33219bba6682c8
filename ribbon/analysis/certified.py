"""Windows of large spectra: edges counted, slices found, nothing missed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from weakref import WeakKeyDictionary

import numpy as np

from ribbon.analysis.counting import Count, Order, count_negative, find_order
from ribbon.analysis.exact import finish
from ribbon.analysis.levels import Certificate, Levels, tolerance
from ribbon.analysis.window import Found, levels_of_window, nearest_levels
from ribbon.errors import NotCertified, TooLarge
from ribbon.hopping import Hamiltonian

__all__ = ["MOST_LEVELS", "Edge", "bracket", "counted_edge", "edge_with_count", "window"]

MOST_LEVELS = 4_000
MOST_BYTES = 2 * 1024**3
SLICE = 150
MOST_SPARE = 20


@dataclass(frozen=True)
class Edge:
    """An energy on which no level stands, and how many levels lie below it."""

    energy: float
    below: int


_orders: WeakKeyDictionary[Hamiltonian, Order] = WeakKeyDictionary()


def _order_of(hamiltonian: Hamiltonian) -> Order:
    if hamiltonian not in _orders:
        _orders[hamiltonian] = find_order(hamiltonian.matrix(0.0))
    return _orders[hamiltonian]


def _count(hamiltonian: Hamiltonian, energy: float, flux: float) -> Count:
    matrix = hamiltonian.matrix(flux, gauge="seam")
    return count_negative(matrix, energy, _order_of(hamiltonian))


def counted_edge(hamiltonian: Hamiltonian, energy: float, flux: float, *, outward: int) -> Edge:
    """An edge moved outward until no level stands on it, and the count of levels below it."""
    step = tolerance(hamiltonian)
    count = _count(hamiltonian, energy + outward * step, flux)
    while count.radius >= step:
        step = 2 * count.radius
        count = _count(hamiltonian, energy + outward * step, flux)
    return Edge(energy + outward * step, count.below)


def window(
    hamiltonian: Hamiltonian,
    lower: Edge,
    upper: Edge,
    flux: float,
    *,
    states: bool,
    guess: Found | None = None,
) -> Levels:
    """Levels between two counted edges; wide windows are sliced at counted energies.

    ``guess`` holds states that were found already and need not be found again. Raises
    `NotCertified` with the levels found so far as ``partial``.
    """
    wanted = upper.below - lower.below
    if wanted > MOST_LEVELS:
        raise TooLarge(
            f"the window holds {wanted:,} levels; more than {MOST_LEVELS:,} take a narrower "
            "window, or levels.all on a ring small enough for it"
        )
    if wanted * hamiltonian.n * 16 > MOST_BYTES:
        raise TooLarge(
            f"the states of {wanted:,} levels on {hamiltonian.n:,} sites take more than "
            f"{MOST_BYTES / 1024**3:.0f} GiB; ask for a narrower window"
        )
    pieces, doubt = _solve_slices(
        hamiltonian, _slices(hamiltonian, lower, upper, flux), flux, guess
    )
    energies = np.concatenate([piece.energies for piece in pieces])
    found = np.concatenate([piece.states for piece in pieces], axis=1)
    certificate = Certificate(
        method="sparse",
        lower=lower.energy,
        upper=upper.energy,
        count_lower=lower.below,
        count_upper=upper.below,
        found=energies.size,
        radius=tolerance(hamiltonian),
    )
    index = lower.below + np.arange(energies.size)
    levels = finish(hamiltonian, flux, energies, index, certificate, found)
    if doubt is not None:
        raise NotCertified(str(doubt), partial=levels)
    return levels if states else replace(levels, states=None)


def _solve_slices(
    hamiltonian: Hamiltonian,
    slices: list[tuple[Edge, Edge]],
    flux: float,
    guess: Found | None,
) -> tuple[list[Found], NotCertified | None]:
    """Levels of every slice, and the last doubt where one could not be completed."""
    matrix = hamiltonian.matrix(flux, gauge="seam")
    pieces: list[Found] = []
    doubt: NotCertified | None = None
    for low, high in slices:
        wanted = high.below - low.below
        edges = (low.energy, high.energy)
        try:
            found = levels_of_window(matrix, edges, wanted, scale=hamiltonian.scale, guess=guess)
        except NotCertified as problem:
            if not isinstance(problem.partial, Found):
                raise
            doubt, found = problem, problem.partial
        pieces.append(found)
    return pieces, doubt


def _slices(
    hamiltonian: Hamiltonian, lower: Edge, upper: Edge, flux: float
) -> list[tuple[Edge, Edge]]:
    """Cut a window at counted energies until every slice holds few levels."""
    narrow = upper.energy - lower.energy < 1e3 * tolerance(hamiltonian)
    if upper.below - lower.below <= SLICE or narrow:
        return [(lower, upper)]
    middle = (lower.energy + upper.energy) / 2
    below = counted_edge(hamiltonian, middle, flux, outward=-1)
    return [
        *_slices(hamiltonian, lower, below, flux),
        *_slices(hamiltonian, below, upper, flux),
    ]


def bracket(
    hamiltonian: Hamiltonian, energy: float, count: int, flux: float
) -> tuple[Edge, Edge, Found]:
    """Counted edges around ``energy`` that hold at least ``count`` levels, and a first guess."""
    matrix = hamiltonian.matrix(flux, gauge="seam")
    ask = min(count + 4, hamiltonian.n - 2)
    guess = nearest_levels(matrix, energy, ask, hamiltonian.scale)
    distance = np.sort(np.abs(guess.energies - energy))
    reach = float(distance[min(count, distance.size) - 1]) + 2 * tolerance(hamiltonian)
    while True:
        lower = counted_edge(hamiltonian, energy - reach, flux, outward=-1)
        upper = counted_edge(hamiltonian, energy + reach, flux, outward=1)
        if upper.below - lower.below >= min(count, hamiltonian.n):
            return lower, upper, guess
        reach = 1.5 * reach + 1e-3 * hamiltonian.scale / hamiltonian.n


def edge_with_count(hamiltonian: Hamiltonian, flux: float, wanted: int, *, above: bool) -> Edge:
    """An energy with exactly or nearly ``wanted`` levels below it, found by bisection.

    ``above``: at least so many lie below it; else at most so many. A few spare levels are let in
    rather than halving the interval down to rounding.
    """
    outward = 1 if above else -1
    lower, upper = -1.01 * hamiltonian.scale, 1.01 * hamiltonian.scale
    spare = 0
    while upper - lower > tolerance(hamiltonian):
        middle = (lower + upper) / 2
        edge = counted_edge(hamiltonian, middle, flux, outward=outward)
        beyond = outward * (edge.below - wanted)
        if 0 <= beyond <= spare:
            return edge
        if edge.below < wanted or (edge.below == wanted and not above):
            lower = middle
        else:
            upper = middle
        spare = min(spare + 1, MOST_SPARE)
    return counted_edge(hamiltonian, upper if above else lower, flux, outward=outward)
