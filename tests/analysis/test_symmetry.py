"""Quantum numbers of clean rings: the rule that closes the ring, and time reversal."""

from __future__ import annotations

import numpy as np
import pytest

from ribbon.analysis import all_levels
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip

CASES = [
    ("square", 3, 7.0),
    ("honeycomb-zigzag", 2, 6.0),
    ("honeycomb-zigzag", 3, 5.5),
    ("honeycomb-armchair", 5, 4.0),
    ("honeycomb-armchair", 4, 6.5),
    ("triangular", 4, 4.5),
    ("kagome", 5, 6.5),
]


@pytest.mark.parametrize("orbital", ["s", "pz"])
@pytest.mark.parametrize(("lattice", "rows", "length"), CASES)
def test_momentum_and_parity_close_the_ring(
    lattice: str, rows: int, length: float, orbital: str
) -> None:
    """exp(i k L) parity = sigma at flux 0 for one half twist, glides included: the seam maps a
    Bloch wave onto itself (Bloch's theorem with the flip as a symmetry).
    """
    ring = close_strip(lay_strip(lattice, rows=rows, length=length), half_twists=1, orbital=orbital)
    levels = all_levels(assemble(ring, Hopping()))
    assert levels.momentum is not None
    assert levels.parity is not None
    sigma = 1.0 if orbital == "s" else -1.0
    phase = np.exp(2j * np.pi * levels.momentum) * levels.parity
    np.testing.assert_allclose(phase, sigma, rtol=0, atol=1e-9)


@pytest.mark.parametrize(
    ("lattice", "rows", "length"), [("honeycomb-zigzag", 1, 6.0), ("honeycomb-zigzag", 3, 7.0)]
)
def test_time_reversed_partners_of_a_plain_ring_share_their_parity(
    lattice: str, rows: int, length: float
) -> None:
    """H is real: level (k, p) at -k is its complex conjugate and has the same parity."""
    ring = close_strip(lay_strip(lattice, rows=rows, length=length), half_twists=0)
    levels = all_levels(assemble(ring, Hopping()))
    assert levels.momentum is not None
    assert levels.parity is not None
    inner = np.abs(np.abs(levels.momentum) - length / 2) > 1e-9
    labels = [
        sorted(zip(sign * levels.momentum[inner], levels.parity[inner], strict=True))
        for sign in (1, -1)
    ]
    np.testing.assert_allclose(labels[0], labels[1], rtol=0, atol=1e-9)
