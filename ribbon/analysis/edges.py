"""Where states live: at the edges or inside, how far they reach in, how they run along.

Edges are walked on the bonds (`ribbon.lattice.walk_edges`), never looked up: a one-sided ribbon
has one, of length 2 L. Densities of a degenerate shell are averaged over it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from ribbon.analysis.density import shell_groups, shell_means
from ribbon.analysis.levels import AnyArray, FloatArray, IntArray, Levels
from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian
from ribbon.lattice import EdgeLoop, Network, Ring, distance_to_edges, walk_edges

__all__ = ["EdgeStates", "RowProfile", "edge_content", "edge_states", "row_profile", "unroll"]

NOTHING = 1e-14
"""Part of the largest row below which a density is rounding."""
ROUGH = 0.5
"""A decay is called exponential where its logarithm strays less than this from a line."""
WITHIN = 2.0
"""Default reach of an edge, in longest first-neighbour bonds."""


@dataclass(frozen=True, kw_only=True, eq=False)
class EdgeStates:
    """How each of m levels lives at the edges; arrays have the shape (m,).

    Parameters
    ----------
    level, energy
        As in the `Levels` given.
    edge_weight
        Probability within ``within`` (nm) of an edge that runs round the ring (of any edge,
        for a network that is no ring).
    hole_weight
        The same for edges of holes, where vacancies left some and no edge is as near.
    decay_length
        Length in nm over which the amplitude falls by e from the edge inward, from a fit to
        the rows weighted by their density; NaN where the state does not decay.
    participation
        1 / sum of the squared probabilities: how many sites a state occupies.
    edge_momentum
        Strongest wave number along the unrolled edge, kinetic, in 2 pi / L; multiples of 1/2
        on a one-sided ribbon, of 1 on a plain one (plus the flux). NaN where no edge winds.
    edge_share
        Part of the momentum content that stands there.
    """

    level: IntArray
    energy: FloatArray
    edge_weight: FloatArray
    hole_weight: FloatArray
    decay_length: FloatArray
    participation: FloatArray
    edge_momentum: FloatArray
    edge_share: FloatArray
    within: float
    loops: tuple[EdgeLoop, ...]
    unit: str

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for value in vars(self).values():
            if isinstance(value, np.ndarray):
                value.setflags(write=False)


@dataclass(frozen=True, kw_only=True, eq=False)
class RowProfile:
    """Mean density of a site, row by row from the edge inward (both edges taken together).

    ``depth`` in nm, shape (r,); ``density``, shape (r, m).
    """

    depth: FloatArray
    density: FloatArray


def edge_states(
    hamiltonian: Hamiltonian, levels: Levels, *, within: float | None = None
) -> EdgeStates:
    """Edge weight, decay length, participation and edge momentum of every level.

    ``within`` is the reach of an edge in nm, by default two nearest-neighbour bonds. Raises
    `BadInput` where the levels hold no states, the reach is not positive, or the network lies
    in no plane.
    """
    if levels.states is None:
        raise BadInput("edge states need states; ask for the levels with states=True")
    network = hamiltonian.network
    reach = WITHIN * _longest_bond(network) if within is None else within
    if not (np.isfinite(reach) and reach > 0):
        raise BadInput(f"edges.within_nm = {within} must be a positive length in nm")
    loops = walk_edges(network)
    edges = tuple(loop for loop in loops if loop.is_edge) or loops
    holes = tuple(loop for loop in loops if loop not in edges)
    groups = shell_groups(hamiltonian, levels)
    density = shell_means(np.abs(levels.states) ** 2, groups)
    near = distance_to_edges(network, edges) <= reach * (1 + 1e-9)
    at_hole = (distance_to_edges(network, holes) <= reach * (1 + 1e-9)) & ~near
    momentum, share = _strongest(hamiltonian, levels, edges, groups)
    return EdgeStates(
        level=levels.index.copy(),
        energy=levels.energies.copy(),
        edge_weight=near.astype(np.float64) @ density,
        hole_weight=at_hole.astype(np.float64) @ density,
        decay_length=_decay(row_profile(network, density, edges)),
        participation=1.0 / np.maximum((density**2).sum(axis=0), np.finfo(np.float64).tiny),
        edge_momentum=momentum,
        edge_share=share,
        within=float(reach),
        loops=loops,
        unit=levels.unit,
    )


def row_profile(
    network: Network, density: FloatArray, edges: tuple[EdgeLoop, ...] | None = None
) -> RowProfile:
    """Mean density of the sites of each row, from the edges inward; ``density`` is (n, m).

    Rows are those of the strip; of a bare network, shells of one bond's width round its edges.
    """
    if isinstance(network, Ring):
        lattice = network.strip.lattice
        pitch = lattice.repeat[1] * lattice.lines_per_row / len(lattice.lines)
        height = np.abs(network.strip.positions[:, 1])
        depth = (height.max() - height) / network.strip.spacing
        depth = depth if network.kept is None else depth[network.kept]
        pitch_nm = pitch * network.strip.spacing
    else:
        loops = walk_edges(network) if edges is None else edges
        pitch, pitch_nm = 1.0, _longest_bond(network)
        depth = distance_to_edges(network, loops) / pitch_nm
    row = np.floor(depth / pitch + 1e-6).astype(np.int64)
    rows, row = np.unique(row, return_inverse=True)
    size = np.bincount(row)
    gather = csr_array((1.0 / size[row], (row, np.arange(row.size))), shape=(rows.size, row.size))
    return RowProfile(depth=rows * pitch_nm, density=np.asarray(gather @ density))


def _decay(profile: RowProfile) -> FloatArray:
    """Decay length of the amplitude from the logarithm of the row densities."""
    density, depth = profile.density, profile.depth[:, None]
    weight = density / np.maximum(density.max(axis=0), np.finfo(np.float64).tiny)
    weight = np.where(weight > NOTHING, weight, 0.0)
    log = np.log(np.where(weight > 0, weight, 1.0))
    total = weight.sum(axis=0)
    x = depth - (weight * depth).sum(axis=0) / total
    y = log - (weight * log).sum(axis=0) / total
    spread = (weight * x**2).sum(axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (weight * x * y).sum(axis=0) / spread
        rough = np.sqrt((weight * (y - slope * x) ** 2).sum(axis=0) / total)
        length = np.where(slope < 0, -2.0 / slope, np.nan)
    falls = weight[-1] <= np.exp(-2.0) * weight[0]
    # a node in the last row is no decay: the line itself must fall as far
    falls_along = slope * (depth[-1] - depth[0]) <= -2.0
    decays = falls & falls_along & (weight[0] == 1.0) & (rough < ROUGH) & (depth.shape[0] > 1)
    single = falls & (weight[0] == 1.0) & (np.count_nonzero(weight, axis=0) == 1)
    return np.where(single, 0.0, np.where(decays, length, np.nan))


def unroll(network: Network, loop: EdgeLoop, states: AnyArray) -> AnyArray:
    """Amplitudes along an unrolled edge, shape (k, m): one entry for each site the loop meets.

    Every crossing of the seam brings the sign of the orbital, so that the result runs on
    smoothly and closes after the full length of the edge.
    """
    found: AnyArray = states[loop.sites]
    if isinstance(network, Ring):
        found = network.closure.factor(loop.crossings)[:, None] * found
    return found


def edge_content(
    hamiltonian: Hamiltonian, levels: Levels, loop: EdgeLoop
) -> tuple[FloatArray, FloatArray]:
    """Kinetic wave numbers along an edge (in 2 pi / L, ascending) and their weights, (q, m).

    Weights of a level sum to 1. Wave numbers are spaced by 1 / winding. Raises `BadInput` for
    a loop that does not run round the ring, or whose length is no whole number of periods.
    """
    numbers, power = _edge_power(hamiltonian, levels, loop)
    return numbers, _normed(power)


def _edge_power(
    hamiltonian: Hamiltonian, levels: Levels, loop: EdgeLoop
) -> tuple[FloatArray, FloatArray]:
    """Wave numbers along an edge, and the probability that stands in each.

    Summed over the kinds of site that a period of the edge has: kinds that cancel each other
    do not make a state vanish. The sum over all wave numbers is the probability on the edge.
    """
    ring = hamiltonian.ring
    if ring is None or not loop.is_edge or levels.states is None:
        raise BadInput("momentum content needs an edge that runs round the ring, and states")
    periods = loop.winding * ring.strip.length
    count = round(periods)
    if abs(periods - count) > 1e-6:
        raise BadInput(f"the edge is {periods:g} periods long; momentum needs a whole number")
    amplitude = unroll(ring, loop, levels.states)
    place = (loop.along - loop.along[0]) / ring.strip.period
    period = np.floor(place + 1e-6)
    height = np.abs(ring.positions[loop.sites, 1]) / ring.strip.spacing
    kinds = np.rint(np.stack([place - period, height]) * 1e6)
    _, kind = np.unique(kinds, axis=1, return_inverse=True)
    kind = kind.ravel()
    grid = np.zeros((int(kind.max()) + 1, count, levels.m), dtype=np.complex128)
    np.add.at(grid, (kind, period.astype(np.int64) % count), amplitude)
    power = (np.abs(np.fft.fft(grid, axis=1)) ** 2).sum(axis=0) / count
    number = np.fft.fftfreq(count, 1 / count)
    order = np.argsort(number)
    return number[order] / loop.winding + levels.flux, power[order]


def _normed(power: FloatArray) -> FloatArray:
    return np.asarray(power / np.maximum(power.sum(axis=0), np.finfo(np.float64).tiny))


def _strongest(
    hamiltonian: Hamiltonian, levels: Levels, edges: tuple[EdgeLoop, ...], groups: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Strongest wave number of every level along the edges, and its share."""
    nothing = np.full(levels.m, np.nan)
    ring = hamiltonian.ring
    if ring is None or not levels.m:
        return nothing, nothing.copy()
    windings = {loop.winding for loop in edges}
    whole = abs(sum(windings) * ring.strip.length - round(sum(windings) * ring.strip.length))
    if len(windings) != 1 or 0 in windings or whole > 1e-6:
        return nothing, nothing.copy()
    # probabilities of all edges are added and averaged over the shell before they are normed: an
    # edge or a partner without the state has no say
    found = [_edge_power(hamiltonian, levels, loop) for loop in edges]
    number = found[0][0]
    content = _normed(shell_means(np.sum([power for _, power in found], axis=0), groups))
    # of two equal ones, as time reversal makes them, the forward one
    ahead = content * (1 + 1e-9 * (number > 0))[:, None]
    best = np.argmax(ahead, axis=0)
    return number[best], content[best, np.arange(levels.m)]


def _longest_bond(network: Network) -> float:
    bonds = network.bonds
    first = bonds.displacement[bonds.shell == 1]
    return float(np.max(np.linalg.norm(first, axis=1), initial=0.0)) or 1.0
