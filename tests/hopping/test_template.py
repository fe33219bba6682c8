"""Matrices replicated from one period against the general assembly bond by bond.

The outside judge of the general assembly is ``brute.py`` (tests/hopping/test_hopping.py); here
both ways must agree entry by entry, so that neither can drift.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from brute import LATTICES, Case, cases
from hypothesis import given
from hypothesis import strategies as st

from ribbon.hopping import Hamiltonian, Hopping, assemble
from ribbon.hopping.template import find_template
from ribbon.lattice import close_strip, lay_strip, remove_sites, reseam

RINGS = cases(LATTICES, rows=(1, 2, 3, 4, 5), lengths=(5, 5.5, 8, 9.5))
AMPLITUDES = (1.0, 0.3, -0.2)


def both(case: Case, *, shells: int = 1, disorder: float = 0.0) -> tuple[Hamiltonian, Hamiltonian]:
    """The ring assembled from one period, and the same one bond by bond."""
    strip = lay_strip(case.lattice, rows=case.rows, length=case.length)
    ring = close_strip(
        strip,
        half_twists=case.half_twists,
        orbital="s" if case.sigma == 1 else "pz",
        shells=shells,
    )
    hopping = Hopping(shells=AMPLITUDES[:shells], unit="t", disorder=disorder, seed=3)
    fast = assemble(ring, hopping)
    return fast, replace(fast, amplitudes=fast.amplitudes)


def same(one: Any, other: Any) -> None:
    """Structure equal, entries equal to rounding, kind of number equal."""
    np.testing.assert_array_equal(one.indptr, other.indptr)
    np.testing.assert_array_equal(one.indices, other.indices)
    assert one.indices.dtype == other.indices.dtype
    assert one.dtype == other.dtype
    np.testing.assert_allclose(one.data, other.data, rtol=0, atol=1e-14)


@given(
    case=st.sampled_from(RINGS),
    shells=st.integers(1, 3),
    flux=st.sampled_from([0.0, 0.5, 1.0, -0.25, 0.137]),
    disorder=st.sampled_from([0.0, 1.0]),
)
def test_one_period_gives_the_same_matrix(
    case: Case, shells: int, flux: float, disorder: float
) -> None:
    """All lattices, twists, orbitals, half-odd lengths, shells, disorder; both gauges."""
    fast, slow = both(case, shells=shells, disorder=disorder)
    for gauge in ("uniform", "seam"):
        same(fast.matrix(flux, gauge=gauge), slow.matrix(flux, gauge=gauge))
        same(fast.slope_matrix(flux, gauge=gauge), slow.slope_matrix(flux, gauge=gauge))
    assert fast.scale == pytest.approx(slow.scale, abs=1e-12)
    assert fast.bond_scale == pytest.approx(slow.bond_scale, abs=1e-12)


def test_most_of_the_rings_above_have_a_template() -> None:
    """The test above would be empty if every ring fell back."""
    found = [both(case)[0]._template is not None for case in RINGS]
    assert np.mean(found) > 0.7


@pytest.mark.parametrize("length", [1, 2])
def test_short_rings_fall_back(length: int) -> None:
    """Where an image meets an image entries add, and the general assembly does it."""
    ring = close_strip(lay_strip("square", rows=3, length=length), half_twists=0)
    assert find_template(ring, (1.0,), diagonal=False) is None


def test_edited_rings_fall_back() -> None:
    """Vacancies, a moved seam, bonds or amplitudes changed by hand: no template."""
    ring = close_strip(lay_strip("square", rows=3, length=20), half_twists=1, orbital="pz")
    assert assemble(ring, Hopping())._template is not None
    for other in (
        remove_sites(ring, [4]),
        reseam(ring, seam=2),
        replace(ring, bonds=ring.bonds.select(np.arange(ring.bonds.m) > 0)),
    ):
        assert assemble(other, Hopping())._template is None
    weak = assemble(ring, Hopping())
    amplitudes = weak.amplitudes.copy()
    amplitudes[0] *= 0.5
    weak = replace(weak, amplitudes=amplitudes)
    assert weak._template is None
    assert abs(weak.matrix() - assemble(ring, Hopping()).matrix()).max() == pytest.approx(0.5)


def test_a_large_matrix_needs_no_bonds() -> None:
    """Neither bonds nor positions nor amplitudes are computed for the matrix of a laid ring."""
    ring = close_strip(
        lay_strip("honeycomb-zigzag", rows=20, length=2500), half_twists=1, orbital="pz"
    )
    hamiltonian = assemble(ring, Hopping())
    matrix = hamiltonian.matrix(0.2)
    assert matrix.shape == (100_000, 100_000)
    assert not {"bonds", "positions"} & vars(ring).keys()
    assert "amplitudes" not in vars(hamiltonian)
    assert hamiltonian.site_energies.strides == (0,)
    assert ring.bonds.m == 147_500
    assert abs(matrix - matrix.conj().T).max() == 0  # to the bit


@pytest.mark.parametrize("gauge", ["seam", "uniform"])
@pytest.mark.parametrize("kind", ["laid", "vacancies", "disorder"])
def test_a_tunable_matrix_follows_the_flux(gauge: Any, kind: str) -> None:
    """One matrix rewritten in place equals a fresh one at every flux."""
    ring = close_strip(lay_strip("kagome", rows=3, length=9), half_twists=1, orbital="pz")
    if kind == "vacancies":
        ring = remove_sites(ring, [3, 17])
    hamiltonian = assemble(ring, Hopping(disorder=1.0 if kind == "disorder" else 0.0))
    tune = hamiltonian.tunable(gauge=gauge)
    first = tune(0.4)
    for flux in (0.0, 0.5, 0.137, -1.2):
        fresh = hamiltonian.matrix(flux, gauge=gauge)
        assert tune(flux) is first
        np.testing.assert_allclose(first.toarray(), fresh.toarray(), rtol=0, atol=1e-14)


def test_unknown_attributes_stay_unknown() -> None:
    """Computing late does not hide a slip of the pen."""
    ring = close_strip(lay_strip("square", rows=2, length=5), half_twists=0)
    with pytest.raises(AttributeError, match="bnods"):
        _ = ring.bnods
    with pytest.raises(AttributeError, match="amplitude'"):
        _ = assemble(ring, Hopping()).amplitude
