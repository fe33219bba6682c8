"""One state along its edges: amplitudes, density and momentum content, ready to be drawn."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ribbon.analysis import edge_content, shell_density, unroll
from ribbon.analysis.density import shell_groups
from ribbon.analysis.levels import tolerance
from ribbon.errors import BadInput
from ribbon.study.findings import strongest_edge_state
from ribbon.study.tables import Table

if TYPE_CHECKING:
    from ribbon.lattice import EdgeLoop
    from ribbon.study.result import Case

__all__ = ["EdgeWave", "content_table", "edge_state_table", "edge_wave"]

FloatArray = NDArray[np.float64]

SAME_WAY = 1e-6
"""A state whose squares cancel to this part runs one way: no phase makes it real."""


@dataclass(frozen=True, eq=False)
class EdgeWave:
    """One level along its edges.

    ``place`` and ``amplitude`` hold one array an edge, from the start of its walk on, in nm and
    with the sign of the orbital carried through the seam. ``density`` is that of every site of
    the network, averaged over the shell. ``numbers`` and ``content`` are wave numbers in 2 pi/L
    and their weights, one array an edge; empty where an edge has no whole number of periods.
    ``partners`` counts the levels of this energy.
    """

    position: int
    loops: tuple[EdgeLoop, ...]
    place: tuple[FloatArray, ...]
    amplitude: tuple[NDArray[np.complex128], ...]
    density: FloatArray
    numbers: tuple[FloatArray, ...]
    content: tuple[FloatArray, ...]
    partners: int

    @property
    def complex(self) -> bool:
        """True where no common phase makes the amplitudes along the edges real."""
        size = max((float(np.abs(wave).max(initial=0.0)) for wave in self.amplitude), default=0.0)
        return any(bool(np.any(np.abs(wave.imag) > 1e-3 * size)) for wave in self.amplitude)


def edge_wave(case: Case, position: int | None = None) -> EdgeWave:
    """The level at a position among those found, by default the one most at the edge.

    Raises `ValueError` where the case has no edge states to show.
    """
    found, states = case.edges, case.levels.states
    if found is None or states is None or not found.level.size:
        raise ValueError(f"the {case.label} has no edge states: none were computed")
    chosen = strongest_edge_state(case) if position is None else position
    loops = tuple(loop for loop in found.loops if loop.is_edge)
    waves = [unroll(case.network, loop, states[:, [chosen]])[:, 0] for loop in loops]
    phase = _phase(np.concatenate(waves)) if waves else 1.0
    numbers, content = _content(case, chosen, loops)
    energies = case.levels.energies
    near = np.abs(energies - energies[chosen]) <= tolerance(case.hamiltonian)
    return EdgeWave(
        position=chosen,
        loops=loops,
        place=tuple(loop.along - loop.along[0] for loop in loops),
        amplitude=tuple((phase * wave).astype(np.complex128) for wave in waves),
        density=shell_density(case.hamiltonian, case.levels, int(case.levels.index[chosen])),
        numbers=numbers,
        content=content,
        partners=int(np.count_nonzero(near)),
    )


def _phase(wave: NDArray[np.complex128]) -> complex:
    """The factor that makes a standing wave real and its largest value positive."""
    size = np.abs(wave)
    largest = wave[np.argmax(size >= size.max(initial=0.0) * (1 - 1e-9))]
    if abs(largest) == 0:
        return 1.0
    total = complex((wave**2).sum())
    if abs(total) <= SAME_WAY * float((size**2).sum()):
        return complex(np.conj(largest) / abs(largest))
    turn = np.exp(-0.5j * np.angle(total))
    return complex(turn if (turn * largest).real >= 0 else -turn)


def _content(
    case: Case, chosen: int, loops: tuple[EdgeLoop, ...]
) -> tuple[tuple[FloatArray, ...], tuple[FloatArray, ...]]:
    """Momentum content along every edge, averaged over the shell as the densities are."""
    levels = case.levels
    assert levels.states is not None
    groups = shell_groups(case.hamiltonian, levels)
    shell = np.flatnonzero(groups == groups[chosen])
    part = replace(
        levels,
        energies=levels.energies[shell],
        index=levels.index[shell],
        states=levels.states[:, shell],
        momentum=None,
        parity=None,
        slopes=None,
    )
    try:
        found = [edge_content(case.hamiltonian, part, loop) for loop in loops]
    except BadInput:
        return (), ()
    return tuple(n for n, _ in found), tuple(power.mean(axis=1) for _, power in found)


def edge_state_table(case: Case) -> Table:
    """The state that the figure shows along its edges, one row for each site that is met."""
    wave = edge_wave(case)
    sizes = [place.size for place in wave.place]
    sites = [loop.sites for loop in wave.loops]
    amplitude = _joined(wave.amplitude).astype(np.complex128)
    level = case.levels.index[wave.position]
    return Table(
        f"edge-state-{case.name}",
        {
            "edge": np.repeat(np.arange(1, len(sizes) + 1), sizes),
            "place": _joined(wave.place),
            "site": _joined(sites).astype(np.int64),
            "crossings": _joined([loop.crossings for loop in wave.loops]).astype(np.int64),
            "real": amplitude.real,
            "imaginary": amplitude.imag,
            "density": _joined([wave.density[chosen] for chosen in sites]),
        },
        {"place": "nm"},
        f"Level {level} of the {case.label} along its unrolled edges; density averaged over the "
        "shell",
    )


def content_table(case: Case) -> Table:
    """Momentum content of the state that the figure shows, edge by edge."""
    wave = edge_wave(case)
    return Table(
        f"edge-content-{case.name}",
        {
            "edge": np.repeat(np.arange(1, len(wave.numbers) + 1), [n.size for n in wave.numbers]),
            "edge_momentum": _joined(wave.numbers),
            "share": _joined(wave.content),
        },
        {"edge_momentum": "2π/L"},
        f"Momentum content along the edges, level {case.levels.index[wave.position]} of the "
        f"{case.label}",
    )


def _joined(parts: Iterable[ArrayLike]) -> NDArray[np.generic]:
    """Arrays one after the other; none at all make an empty one."""
    arrays = [np.asarray(part) for part in parts]
    return np.concatenate(arrays) if arrays else np.zeros(0)
