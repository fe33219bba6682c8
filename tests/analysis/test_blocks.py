"""Blocks solved in batches, on several cores, by halves: always the same levels.

The outside judge is numpy's dense diagonalisation of matrices built by plain loops (brute.py).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from brute import LATTICES, Case, cases
from hypothesis import given
from hypothesis import strategies as st

from ribbon.analysis import all_levels, levels_near
from ribbon.analysis import blocks as blocks_module
from ribbon.analysis.exact import blocks_of
from ribbon.hopping import Hamiltonian, Hopping, assemble
from ribbon.hopping.cores import workers
from ribbon.lattice import close_strip, lay_strip

LEVEL = 1e-10
RINGS = cases(LATTICES, rows=(2, 3, 4, 5), lengths=(1, 2, 2.5, 5, 5.5))


def ring_of(case: Case, offset: float = 0.0) -> Hamiltonian:
    """A clean ring as the library builds it."""
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    orbital: Any = "s" if case.sigma == 1 else "pz"
    ring = close_strip(strip, half_twists=case.half_twists, orbital=orbital)
    return assemble(ring, Hopping(shells=(1.0,), unit="t", site_energy=offset))


@given(
    case=st.sampled_from(RINGS),
    flux=st.sampled_from([0.0, 0.5, 0.137, -0.8]),
    offset=st.sampled_from([0.0, 1.5]),
)
def test_values_labels_and_vectors_agree(case: Case, flux: float, offset: float) -> None:
    """Values alone (by halves where there are any), labels, and vectors: one spectrum."""
    hamiltonian = ring_of(case, offset)
    blocks = blocks_of(hamiltonian)
    if blocks is None:
        return
    dense = case.levels(flux) + offset
    labelled, whole = blocks.labelled(flux), blocks.spectrum(flux)
    for found in (blocks.energies(flux), labelled.energies, whole.energies):
        np.testing.assert_allclose(found, dense, rtol=0, atol=LEVEL)
    pairs = zip((labelled, whole), (labelled.parity, whole.parity), strict=True)
    keys = [np.lexsort((p.energies.round(8), parity, p.momentum.round(8))) for p, parity in pairs]
    for name in ("energies", "momentum", "parity"):
        one, two = getattr(labelled, name)[keys[0]], getattr(whole, name)[keys[1]]
        np.testing.assert_allclose(one, two, rtol=0, atol=1e-7)


@pytest.mark.parametrize(
    ("lattice", "rows", "halved"),
    [
        ("honeycomb-armchair", 5, True),
        ("lieb", 3, True),
        ("square", 4, False),
    ],
)
def test_blocks_fall_into_halves_where_sublattices_survive(
    lattice: str, rows: int, halved: bool
) -> None:
    """The armchair flip keeps the sublattices apart; on the square lattice a block holds the hop
    along the ring on its diagonal.
    """
    blocks = blocks_of(ring_of(Case(lattice, rows, 5, 1, -1)))
    assert blocks is not None
    assert all((half is not None) == halved for half in blocks._halves)


def test_batches_and_cores_change_no_bit(monkeypatch: pytest.MonkeyPatch) -> None:
    """Small batches on one or several cores: equal arrays."""
    blocks = blocks_of(ring_of(Case("honeycomb-zigzag", 6, 40, 1, -1)))
    assert blocks is not None
    plain = blocks.energies(0.2)
    monkeypatch.setattr(blocks_module, "BATCH", 100)
    monkeypatch.setattr(blocks_module, "WORTH_THREADS", 1)
    for cores in ("1", "2", "3"):
        monkeypatch.setenv("RIBBON_THREADS", cores)
        assert workers() == int(cores)
        np.testing.assert_array_equal(blocks.energies(0.2), plain)


def test_cores_are_those_of_this_process(monkeypatch: pytest.MonkeyPatch) -> None:
    """Words in the variable count for nothing, and systems that do not tell are asked again."""
    monkeypatch.setenv("RIBBON_THREADS", "many")
    assert workers() >= 1
    monkeypatch.delattr("os.sched_getaffinity", raising=False)
    monkeypatch.setattr("os.cpu_count", lambda: None)
    assert workers() == 1


def test_states_come_from_the_blocks_that_hold_them(monkeypatch: pytest.MonkeyPatch) -> None:
    """Four levels of a ring of 2,000 sites: a few blocks are solved for vectors, not all."""
    hamiltonian = ring_of(Case("square", 5, 400, 1, -1))
    blocks = blocks_of(hamiltonian)
    assert blocks is not None
    asked: list[int] = []
    solve = type(blocks).solve

    def counted(self: Any, which: int, flux: float, chosen: Any = None) -> Any:
        asked.append(self.wave_numbers(which, 0.0)[slice(None) if chosen is None else chosen].size)
        return solve(self, which, flux, chosen)

    monkeypatch.setattr(type(blocks), "solve", counted)
    found = levels_near(hamiltonian, 0.3, count=4, flux=0.1, states=True)
    assert sum(asked) <= found.m
    assert found.states is not None
    assert found.slopes is not None
    residual = hamiltonian.matrix(0.1) @ found.states - found.states * found.energies
    np.testing.assert_allclose(np.abs(residual), 0, rtol=0, atol=1e-12)
    exact = all_levels(hamiltonian, flux=0.1, slopes=True)
    assert exact.slopes is not None
    np.testing.assert_allclose(found.slopes, exact.slopes[found.index], rtol=0, atol=1e-10)
