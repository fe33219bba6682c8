"""Wave numbers along edges, against Bloch's theorem and slow Fourier sums over double covers."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import brute
import numpy as np
import pytest
from brute import Case

from ribbon.analysis import all_levels, edge_content, edge_states, levels_near, unroll
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip, walk_edges

Build = Callable[..., Any]
MOMENTUM = 1e-9
EDGE_LINES = {
    **{"square": 1, "triangular": 1, "honeycomb-zigzag": 2},
    **{"honeycomb-armchair": 2, "kagome": 1, "lieb": 1},
}
"""Lines of sites from the outermost on that the rim of a strip passes through."""


def noise(case: Case, seed: int = 3) -> np.ndarray:
    return np.random.default_rng(seed).uniform(-0.6, 0.6, case.sites())


def zigzag(
    rows: int, length: float, half_twists: int, orbital: str = "s", flux: float = 0.0
) -> Any:
    """States of a wide zigzag ring: the Hamiltonian, its levels nearest to zero, their edges."""
    strip = lay_strip("honeycomb-zigzag", rows=rows, length=length)
    ring = close_strip(strip, half_twists=half_twists, orbital=orbital)
    hamiltonian = assemble(ring, Hopping())
    levels = levels_near(hamiltonian, 0.0, count=24, flux=flux, states=True)
    return hamiltonian, levels, edge_states(hamiltonian, levels)


@pytest.mark.parametrize("orbital", ["s", "pz"])
@pytest.mark.parametrize("flux", [0.0, 0.29])
@pytest.mark.parametrize(
    ("rows", "length", "half_twists", "step"),
    [(30, 26, 1, 0.5), (29, 25.5, 1, 0.5), (30, 27, 0, 1.0), (29, 27, 2, 1.0), (30, 26, 3, 0.5)],
)
def test_momenta_of_edge_states_are_spaced_by_the_edge(
    rows: int, length: float, half_twists: int, step: float, orbital: str, flux: float
) -> None:
    """pi/L on the one edge of length 2 L, 2 pi/L on the two edges of a plain ring, plus the flux.

    Bloch's theorem on the edge's own length; kinetic wave numbers k L/2 pi = n step + flux.
    """
    _, _, found = zigzag(rows, length, half_twists, orbital, flux)
    ks = 2 * np.pi * found.edge_momentum / length
    bound = np.abs(2 * np.cos(ks / 2)) < 0.8
    forward = bound & (found.edge_momentum > 0)
    assert np.count_nonzero(forward) >= 6
    inner = np.unique(np.round(found.edge_momentum[forward], 6))
    assert inner.size >= 3
    np.testing.assert_allclose(np.diff(inner), step, rtol=0, atol=1e-5)
    off = (inner - flux) / step
    np.testing.assert_allclose(off, np.rint(off), rtol=0, atol=1e-5)
    np.testing.assert_allclose(found.edge_share[bound], 1.0, rtol=0, atol=1e-8)


@pytest.mark.parametrize("flux", [0.0, 0.17, 0.5])
@pytest.mark.parametrize(
    "case",
    [
        *[Case("square", 5, 7, h, sigma) for h in (1, 2, 3) for sigma in (1, -1)],
        Case("honeycomb-zigzag", 4, 5, 1, -1),
        Case("honeycomb-zigzag", 5, 4.5, 3),
        Case("honeycomb-zigzag", 3, 5, 0),
        Case("honeycomb-armchair", 7, 4, 1),
        Case("honeycomb-armchair", 6, 3.5, 1, -1),
        Case("honeycomb-armchair", 6, 4, 0),
    ],
)
def test_edge_momentum_is_the_momentum_of_a_clean_ring(
    hamiltonian_of: Build, case: Case, flux: float
) -> None:
    """A Bloch wave runs along its edge with its own wave number, all of it, modulo the zone."""
    hamiltonian = hamiltonian_of(case)
    levels = all_levels(hamiltonian, flux=flux, states=True)
    found = edge_states(hamiltonian, levels)
    off = (found.edge_momentum - levels.momentum) / case.length
    np.testing.assert_allclose(off, np.rint(off), rtol=0, atol=MOMENTUM)
    inside = np.abs(np.abs(levels.momentum) - case.length / 2) > 1
    np.testing.assert_allclose(
        found.edge_momentum[inside], levels.momentum[inside], rtol=0, atol=MOMENTUM
    )
    np.testing.assert_allclose(found.edge_share, 1.0, rtol=0, atol=1e-8)


def edge_waves(case: Case, states: np.ndarray) -> np.ndarray:
    """Fourier weights along an edge of length 2 L or L, by slow sums over the double cover.

    A state of the ring is a function on the endless strip with psi(x + L, (-1)^h y) = sigma^h
    psi(x, y); what stands on its lower edge is summed with exp(-i q x), one q after the other.
    Kinds of site (by their place in a period and their height) are summed each for itself.
    """
    sites = brute.ring_sites(*case[:3])
    place = {(round(x, 4), round(y, 4)): i for i, (x, y) in enumerate(sites)}
    period = brute.PERIOD[case.lattice]
    around = case.length * period
    turns = 2 if case.half_twists % 2 else 1
    heights = sorted({y for _, y in sites})
    count = round(turns * case.length)
    numbers = np.arange(-(count // 2), count - count // 2)
    totals: dict[tuple[float, float], np.ndarray] = {}
    for x, y in brute.endless(case.lattice, case.rows, 0, turns * around):
        if y > heights[2 * EDGE_LINES[case.lattice] - 1] or y > 0:
            continue
        if heights.index(min(heights, key=lambda h: abs(h - y))) >= EDGE_LINES[case.lattice]:
            continue
        turn = int((x + 1e-6) // around)
        flip = -1 if case.half_twists % 2 and turn else 1
        site = place[round(x - turn * around, 4), round(flip * y, 4)]
        value = case.sigma ** (case.half_twists * turn) * states[site]
        kind = (round(x % period, 3) % round(period, 3), round(y, 3))
        total = totals.setdefault(kind, np.zeros((count, states.shape[1]), dtype=complex))
        for i, n in enumerate(numbers):
            total[i] += np.exp(-2j * np.pi * n * x / (turns * around)) * value
    weight = np.sum([np.abs(total) ** 2 for total in totals.values()], axis=0)
    return weight / weight.sum(axis=0)


@pytest.mark.parametrize(
    "case",
    [
        Case("square", 5, 7, 1),
        Case("square", 4, 6, 3, -1),
        Case("square", 4, 6, 0),
        Case("honeycomb-zigzag", 5, 4.5, 1, -1),
        Case("honeycomb-zigzag", 4, 4, 1),
        Case("honeycomb-armchair", 6, 3.5, 1, -1),
        Case("honeycomb-armchair", 7, 3, 2),
        Case("triangular", 6, 5.5, 1),
    ],
)
def test_momentum_content_against_slow_sums(hamiltonian_of: Build, case: Case) -> None:
    """Content of disordered states equals plain sums over the double cover of brute-force states.

    Both are free of the gauge: at flux 0.23 the states are complex and come from two solvers.
    """
    flux, energies = 0.23, noise(case, seed=9)
    hamiltonian = hamiltonian_of(case, energies)
    levels = all_levels(hamiltonian, flux=flux, states=True)
    _, states = np.linalg.eigh(case.matrix(flux, energies=energies))
    wanted = edge_waves(case, states)
    loops = [loop for loop in walk_edges(hamiltonian.ring) if loop.is_edge]
    lower = min(loops, key=lambda loop: hamiltonian.ring.positions[loop.sites[0], 1])
    number, weight = edge_content(hamiltonian, levels, lower)
    turns = 2 if case.half_twists % 2 else 1
    count = round(turns * case.length)
    steps = np.arange(-(count // 2), count - count // 2)
    np.testing.assert_allclose(number, steps / turns + flux, rtol=0, atol=MOMENTUM)
    np.testing.assert_allclose(weight, wanted, rtol=0, atol=1e-8)
    np.testing.assert_allclose(weight.sum(axis=0), 1.0, rtol=0, atol=1e-12)
    if turns == 2:
        found = edge_states(hamiltonian, levels)
        np.testing.assert_allclose(found.edge_share, wanted.max(axis=0), rtol=0, atol=1e-8)
        strongest = steps[np.argmax(wanted, axis=0)] / turns + flux
        np.testing.assert_allclose(found.edge_momentum, strongest, rtol=0, atol=MOMENTUM)


def test_an_edge_without_the_state_has_no_say() -> None:
    """Two edges, the state on one of them: content and momentum are those of its own edge.

    Upper row at 0, the rows below 60 t away, above or below at random but for the first: states
    near 0 are plane waves of the upper row but for parts of order (t/60)^2 (perturbation theory);
    of their weight, (t/60)^8 is on the other edge, scrambled.
    """
    columns, rows = 9, 5
    strip = lay_strip("square", rows=rows, length=columns)
    line = np.rint(strip.positions[:, 1] / strip.spacing + 2).astype(int)
    side = np.where(line == 3, 1, np.random.default_rng(1).choice([-1, 1], strip.n))
    energies = np.where(line == 4, 0.0, 60.0 * side)
    hamiltonian = assemble(close_strip(strip, half_twists=0), Hopping(site_energy=energies))
    levels = levels_near(hamiltonian, 0.0, count=columns, flux=0.21, states=True)
    found = edge_states(hamiltonian, levels)
    wanted = -2 * np.cos(2 * np.pi * found.edge_momentum / columns)
    np.testing.assert_allclose(levels.energies, wanted, rtol=0, atol=0.05)
    np.testing.assert_allclose(found.edge_share, 1.0, rtol=0, atol=0.01)


@pytest.mark.parametrize(("orbital", "half_twists"), [("s", 1), ("pz", 1), ("pz", 2), ("pz", 3)])
def test_unrolled_amplitudes_run_on_smoothly(orbital: str, half_twists: int) -> None:
    """A plane wave of a one-row ring turns by the same phase at every step, the seam and the
    closing of the edge included (E. Heilbronner 1964 for the sign [M]).
    """
    columns, flux = 9, 0.2
    ring = close_strip(
        lay_strip("square", rows=1, length=columns), half_twists=half_twists, orbital=orbital
    )
    levels = all_levels(assemble(ring, Hopping()), flux=flux, states=True)
    loop = walk_edges(ring)[0]
    amplitude = unroll(ring, loop, levels.states)
    assert amplitude.shape == (columns * (2 if half_twists % 2 else 1), levels.m)
    ratio = np.roll(amplitude, -1, axis=0) / amplitude
    wanted = np.exp(2j * np.pi * (levels.momentum - flux) / columns)
    np.testing.assert_allclose(ratio, np.broadcast_to(wanted, ratio.shape), rtol=0, atol=1e-9)
