"""Windows of large spectra: edges counted, slices found, nothing missed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from weakref import WeakKeyDictionary

import numpy as np

from ribbon.analysis.counting import Count, Order, count_negative, find_order
from ribbon.analysis.exact import finish, to_uniform
from ribbon.analysis.levels import (
    AnyArray,
    Certificate,
    FloatArray,
    IntArray,
    Levels,
    shell_edges,
    tolerance,
)
from ribbon.analysis.window import Found, levels_of_window, nearest_levels
from ribbon.errors import NotCertified, TooLarge
from ribbon.hopping import Hamiltonian

__all__ = ["MOST_LEVELS", "Edge", "bracket", "counted_edge", "edge_with_count", "window"]

MOST_LEVELS = 4_000
MOST_BYTES = 2 * 1024**3
SLICE = 80
FIRST_SPARE, MOST_SPARE = 3, 20


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


def _count(hamiltonian: Hamiltonian, energy: float, flux: float, within: float) -> Count:
    matrix = hamiltonian.matrix(flux, gauge="seam")
    return count_negative(matrix, energy, _order_of(hamiltonian), within=within)


def counted_edge(hamiltonian: Hamiltonian, energy: float, flux: float, *, outward: int) -> Edge:
    """An edge moved outward until no level stands on it, and the count of levels below it."""
    step = tolerance(hamiltonian)
    count = _count(hamiltonian, energy + outward * step, flux, step)
    while count.radius >= step:
        step = 2 * count.radius
        count = _count(hamiltonian, energy + outward * step, flux, step)
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
    levels = _finish(hamiltonian, flux, pieces, (index, certificate), states=states)
    if doubt is not None:
        raise NotCertified(str(doubt), partial=levels)
    return levels


def _finish(
    hamiltonian: Hamiltonian,
    flux: float,
    pieces: list[Found],
    labels: tuple[IntArray, Certificate],
    *,
    states: bool,
) -> Levels:
    """Levels with slopes; large states are not copied where no shell has to be resolved."""
    index, certificate = labels
    energies = np.concatenate([piece.energies for piece in pieces])
    if np.any(np.diff(shell_edges(energies, tolerance(hamiltonian))) > 1):
        whole = np.concatenate([piece.states for piece in pieces], axis=1)
        levels = finish(hamiltonian, flux, energies, index, certificate, whole)
        return levels if states else replace(levels, states=None)
    found: AnyArray | None = None
    if states:
        parts = [piece.states for piece in pieces]
        joined = parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)
        found = to_uniform(hamiltonian, flux, joined)
    residuals = np.concatenate([piece.residuals for piece in pieces])
    return Levels(
        energies=energies,
        index=index,
        certificate=certificate,
        flux=flux,
        unit=hamiltonian.unit,
        states=found,
        slopes=_slopes(hamiltonian, flux, pieces),
        residual=float(np.max(residuals, initial=0.0)),
    )


def _slopes(hamiltonian: Hamiltonian, flux: float, pieces: list[Found]) -> FloatArray:
    """Slopes dE/d(flux) of single levels from the few bonds that cross the seam."""
    if hamiltonian.ring is None:
        return np.zeros(sum(piece.energies.size for piece in pieces))
    slope = hamiltonian.slope_matrix(flux, gauge="seam")
    there = np.flatnonzero(slope.data)
    rows = np.searchsorted(slope.indptr, there, side="right") - 1
    columns, values = slope.indices[there], slope.data[there, None]
    return np.concatenate(
        [
            np.sum(piece.states[rows].conj() * values * piece.states[columns], axis=0).real
            for piece in pieces
        ]
    )


def _solve_slices(
    hamiltonian: Hamiltonian,
    slices: list[tuple[Edge, Edge]],
    flux: float,
    guess: Found | None,
) -> tuple[list[Found], NotCertified | None]:
    """Levels of every slice, and the last doubt where one could not be completed."""
    matrix, band = hamiltonian.matrix(flux, gauge="seam"), _order_of(hamiltonian).band
    pieces: list[Found] = []
    doubt: NotCertified | None = None
    for low, high in slices:
        wanted = high.below - low.below
        edges = (low.energy, high.energy)
        try:
            found = levels_of_window(
                matrix, edges, wanted, scale=hamiltonian.scale, guess=guess, band=band
            )
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
    matrix, band = hamiltonian.matrix(flux, gauge="seam"), _order_of(hamiltonian).band
    ask = min(count + 2, hamiltonian.n)
    guess = nearest_levels(matrix, energy, ask, hamiltonian.scale, band=band)
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
    low, high = Edge(-1.01 * hamiltonian.scale, 0), Edge(1.01 * hamiltonian.scale, hamiltonian.n)
    spare, slow = FIRST_SPARE, 0
    while high.energy - low.energy > tolerance(hamiltonian):
        share = 0.5
        if slow < 2 and high.below > low.below:
            # levels lie nearly evenly in a narrow interval: go where the wanted one is due
            due = (wanted + outward * spare / 2 - low.below) / (high.below - low.below)
            share = min(max(due, 0.02), 0.98)
        width = high.energy - low.energy
        middle = low.energy + share * width
        edge = counted_edge(hamiltonian, middle, flux, outward=outward)
        beyond = outward * (edge.below - wanted)
        if 0 <= beyond <= spare:
            return edge
        if edge.below < wanted or (edge.below == wanted and not above):
            low = Edge(middle, edge.below)
        else:
            high = Edge(middle, edge.below)
        slow = slow + 1 if slow < 2 and high.energy - low.energy > width / 2 else 0
        spare = min(spare + 1, MOST_SPARE)
    end = high if above else low
    return counted_edge(hamiltonian, end.energy, flux, outward=outward)
