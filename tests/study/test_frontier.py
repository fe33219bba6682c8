"""Frontiers that sit on a level, covers at odd filling, lattice files with rounded numbers."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from ribbon.analysis import half_quantum
from ribbon.analysis.counting import count_negative, find_order
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import close_strip, lay_strip, read_lattice
from ribbon.study.ribbonfile import RibbonFile
from ribbon.study.run import run_study
from ribbon.study.tables import levels_table, shift_table


def file_of(**tables: Any) -> RibbonFile:
    ribbon = {"lattice": "square", "rows": 1, "length": 8.0, "half_twists": 0, "orbital": "s"}
    ribbon |= tables.pop("ribbon", {})
    given = {"sweep": {"flux": {"points": 3}}, "control": {"compare": []}, **tables}
    return RibbonFile.model_validate({"ribbon": ribbon, "hopping": {"unit": "t"}, **given})


def test_a_chemical_potential_on_a_level_half_fills_it() -> None:
    """Ring of 8, levels -2 cos(2 pi n / 8): at mu = 0 the two zero levels are half filled, so 8
    electrons and an open shell, in the gap as in the totals (Fermi function at T -> 0).
    """
    sweep = {"chemical_potential": 0.0, "flux": {"points": 3}}
    case = run_study(file_of(sweep=sweep)).ribbon
    assert case.response is not None
    assert case.response.totals is not None
    assert case.electrons == case.response.totals.electrons[0] == 8
    assert case.gap.open_shell


def test_cover_levels_pair_with_the_ribbon_at_odd_filling() -> None:
    """Both levels of the cover that fold onto a ribbon level 0 are its levels 0 and 1."""
    ribbon = {"rows": 3, "half_twists": 1, "length": 7.0}
    sweep = {"electrons": 17.0, "flux": {"points": 3}}
    result = run_study(
        file_of(ribbon=ribbon, sweep=sweep, levels={"all": True}, control={"compare": ["double"]})
    )
    table = shift_table(result.ribbon, result.controls[0])
    level, over = (np.array(table.columns[name]) for name in ("level", "control_level"))
    np.testing.assert_array_equal(over, 2 * level)


def test_occupation_and_gap_agree_on_levels_split_by_little() -> None:
    """Zigzag edge states split by less than a shell of a window, but more than rounding."""
    ribbon = {"lattice": "honeycomb-zigzag", "rows": 9, "length": 39.0}
    case = run_study(file_of(ribbon=ribbon)).ribbon
    occupied = np.array(levels_table(case, "t").columns["occupation"])
    assert 0 < case.gap.gap < 1e-9
    assert set(occupied.tolist()) == {0.0, 2.0}


def test_rounded_lattice_files_keep_their_bonds() -> None:
    """Triangular with three digits: as many bonds as with sixteen, whatever the shells."""
    exact = read_lattice("triangular")
    rounded = replace(exact, repeat=(0.5, 0.866), shells=())
    counts = []
    for lattice, shells in ((exact, 1), (rounded, 1), (rounded, 2)):
        ring = close_strip(lay_strip(lattice, rows=3, length=8), half_twists=0, shells=shells)
        counts.append(int(np.count_nonzero(ring.bonds.shell == 1)))
    assert counts == [56, 56, 56]  # 3 x 8 along, 2 x 2 x 8 across


@pytest.mark.parametrize("offset", [-1e-9, 1e-9])
def test_counts_on_a_flat_band_keep_their_fronts_small(offset: float) -> None:
    """Lieb ring at its flat level: exact against dense, with an error radius far below 1e-9."""
    ring = close_strip(lay_strip("lieb", rows=5, length=40), half_twists=1, orbital="s")
    matrix = assemble(ring, Hopping()).matrix(0.0)
    count = count_negative(matrix, offset, find_order(matrix))
    assert count.below == np.count_nonzero(np.linalg.eigvalsh(matrix.toarray()) < offset)
    assert count.radius < 1e-10


def test_no_period_is_claimed_where_no_level_feels_the_flux() -> None:
    """60 sites, disorder 200 t: localised within a site, dE/dPhi ~ (t/W)^60."""
    ring = close_strip(lay_strip("square", rows=1, length=60), half_twists=0)
    assert half_quantum(assemble(ring, Hopping(disorder=200.0, seed=2))) is None
