"""Tables: columns as agreed, full precision, and numbers that stand in the literature."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace
from typing import Any

import closed_forms as known
import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import constants
from small_study import make_study

from ribbon.study.result import Check, StudyResult
from ribbon.study.tables import (
    Table,
    bonds_table,
    checks_table,
    flux_table,
    harmonics_table,
    levels_table,
    occupation,
    shift_table,
    sites_table,
    topology_table,
    totals_table,
)

HOPPING = 2.7
SITES = 16


@pytest.fixture(scope="module")
def annulene() -> StudyResult:
    return make_study()


def read_back(table: Table) -> tuple[list[str], list[list[str]]]:
    rows = list(csv.reader(io.StringIO(table.to_csv(), newline="")))
    return rows[0], rows[1:]


@given(st.lists(st.floats(allow_nan=False), min_size=1, max_size=30))
def test_csv_carries_every_bit_of_a_float(values: list[float]):
    """What is read back from the CSV text is the very same number."""
    header, rows = read_back(Table("t", {"level": range(len(values)), "energy": np.array(values)}))
    assert header == ["level", "energy"]
    assert [float(row[1]).hex() for row in rows] == [value.hex() for value in values]


@given(st.lists(st.text(st.characters(exclude_categories=["Cs"]), max_size=20), max_size=8))
def test_csv_quotes_any_text(texts: list[str]):
    """Commas, quotes and line breaks in a text stay inside its cell."""
    table = Table("t", {"number": list(range(len(texts))), "note": texts})
    assert [row[1] for row in read_back(table)[1]] == texts


def test_csv_has_one_header_line_and_unix_line_ends():
    """NaN and None are empty cells, booleans words, the last line ends too."""
    columns: dict[str, Any] = {"a": [1, None], "b": np.array([math.nan, -0.0]), "c": [True, False]}
    assert Table("t", columns).to_csv() == "a,b,c\n1,,true\n,-0.0,false\n"


def test_records_hold_plain_values():
    """Records hold Python numbers, and None where there is nothing."""
    table = Table("t", {"level": np.arange(2), "energy": np.array([0.5, math.nan])})
    records = table.to_records()
    assert records == [{"level": 0, "energy": 0.5}, {"level": 1, "energy": None}]
    assert type(records[0]["level"]) is int


def test_an_empty_table_still_has_its_header():
    """No rows, one line."""
    table = Table("t", {"level": [], "energy": np.zeros(0)})
    assert (table.to_csv(), table.rows, table.to_records()) == ("level,energy\n", 0, [])


def test_columns_of_different_lengths_are_refused():
    """A table is a rectangle."""
    with pytest.raises(ValueError, match=r"table t: columns of different lengths \[1, 2\]"):
        Table("t", {"a": [1], "b": [1, 2]})


def test_a_table_cannot_be_changed_from_outside():
    """Arrays are copied and read-only."""
    source = np.array([1.0, 2.0])
    table = Table("t", {"a": source})
    source[0] = 9
    assert table.columns["a"][0] == 1
    with pytest.raises(ValueError, match="read-only"):
        table.columns["a"][0] = 5  # type: ignore[index]


@given(
    st.lists(st.integers(-3, 3), min_size=1, max_size=12),
    st.floats(0, 1),
    st.sampled_from([1, 2]),
)
def test_occupation_fills_from_below_and_shares_shells(
    energies: list[int], share: float, spin: int
):
    """The sum is the number of electrons, levels of one energy hold alike, none above a gap."""
    energy = np.sort(np.array(energies, dtype=float))
    electrons = share * spin * energy.size
    held = occupation(energy, np.arange(energy.size), electrons=electrons, spin=spin)
    assert_allclose(held.sum(), electrons, rtol=0, atol=1e-9)
    for value in np.unique(energy):
        assert np.ptp(held[energy == value]) < 1e-12
    assert np.all(np.diff(held) <= 1e-12)
    assert np.count_nonzero((held > 1e-9) & (held < spin - 1e-9)) <= np.max(
        np.unique(energy, return_counts=True)[1]
    )


def test_occupation_of_a_window_counts_from_the_complete_spectrum():
    """A window that starts at level 7 of a spectrum filled up to level 8."""
    held = occupation([0.0, 1.0, 2.0], [7, 8, 9], electrons=17, spin=2)
    assert held.tolist() == [2.0, 1.0, 0.0]


def test_occupation_of_nothing_is_nothing():
    """An empty window."""
    assert occupation([], [], electrons=3, spin=2).size == 0


def test_levels_of_the_moebius_annulene(annulene: StudyResult):
    """E = -2t cos((2n+1) pi/16) (Heilbronner 1964), eight levels filled twice."""
    table = levels_table(annulene.ribbon, "eV")
    assert list(table.columns)[:2] == ["level", "energy"]
    assert table.columns["level"].tolist() == list(range(SITES))
    exact = HOPPING * known.moebius_annulene(SITES)
    assert_allclose(table.columns["energy"], exact, rtol=0, atol=1e-12)
    assert_allclose(table.columns["occupation"], [2.0] * 8 + [0.0] * 8, atol=0)
    assert {"momentum", "parity"} <= set(table.columns)
    assert table.units["energy"] == "eV"


def test_an_open_shell_shares_its_electrons(annulene: StudyResult):
    """[16]annulene, planar: two electrons in the two non-bonding levels (Hückel)."""
    held = np.asarray(levels_table(annulene.cases[1], "eV").columns["occupation"])
    assert_allclose(held, [2.0] * 7 + [1.0] * 2 + [0.0] * 7, atol=1e-12)


def test_flux_table_holds_the_current_of_one_electron(annulene: StudyResult):
    """I = -(e/h) dE/dphi with E = -2t cos(2 pi (n + 1/2 + phi)/16), every level at every flux.

    Cheung, Gefen, Riedel & Shih, Phys. Rev. B 37, 6050 (1988), shifted by half a quantum.
    """
    table = flux_table(annulene.ribbon, "eV")
    assert list(table.columns) == ["flux", "level", "energy", "current", "branch"]
    flux, energy, current = (np.asarray(table.columns[k]) for k in ("flux", "energy", "current"))
    angle = 2 * np.pi * (np.arange(SITES)[:, None] + 0.5 + flux) / SITES
    levels = -2 * HOPPING * np.cos(angle)
    slopes = 4 * np.pi * HOPPING / SITES * np.sin(angle)
    per_volt = constants.e**2 / constants.h
    away = np.abs(levels - energy) + 1e-3 * np.abs(-per_volt * slopes - current) / per_volt
    assert away.min(axis=0).max() < 1e-9
    assert table.units["current"] == "A"
    assert table.rows == SITES * 25


def test_rows_that_only_pad_a_sweep_are_left_out(annulene: StudyResult):
    """NaN energies with level -1 make no rows."""
    case = annulene.ribbon
    assert case.response is not None
    energy, level = case.response.energy.copy(), case.response.level.copy()
    energy[3, -1], level[3, -1] = np.nan, -1
    padded = replace(case, response=replace(case.response, energy=energy, level=level))
    table = flux_table(padded, "eV")
    assert table.rows == SITES * 25 - 1
    assert np.isfinite(np.asarray(table.columns["energy"])).all()


def test_total_current_of_the_moebius_annulene(annulene: StudyResult):
    """I = -I0 sin(2 pi phi/N)/sin(pi/N), spin 2, |phi| < 1/2, I0 = (4 pi t/N)(e/h) sin(pi/2).

    Cheung et al. 1988 for an odd number of electrons of each spin on the plain ring; eight of
    each on the Möbius ring of 16 are the same case, as its wave numbers are half-odd.
    """
    table = totals_table(annulene.ribbon, "eV")
    assert list(table.columns)[:3] == ["flux", "current", "electrons"]
    flux = np.asarray(table.columns["flux"])
    inside = flux < 0.49
    largest = 2 * 4 * np.pi * HOPPING / SITES * constants.e**2 / constants.h
    exact = -largest * np.sin(2 * np.pi * flux / SITES) / np.sin(np.pi / SITES)
    found = np.asarray(table.columns["current"])
    assert_allclose(found[inside], exact[inside], rtol=0, atol=1e-9 * largest)
    assert_allclose(table.columns["electrons"], SITES, atol=1e-9)
    half = int(np.argmin(np.abs(flux - 0.5)))
    assert table.columns["shared"][half]
    assert_allclose(
        [table.columns["current_left"][half], table.columns["current_right"][half]],
        [-largest, largest], rtol=0, atol=2e-2 * largest,
    )  # fmt: skip


def test_harmonics_alternate_for_a_closed_shell(annulene: StudyResult):
    """I = sum_l I_l sin(2 pi l phi) with I_l -> (2 I0/pi l) cos(l k_F L) (Cheung et al. 1988).

    k_F L = pi for the wave numbers of the Möbius ring filled up to half a quantum; 24 fluxes a
    period leave a sampling error of some per cent.
    """
    table = harmonics_table(annulene.ribbon, "eV")
    largest = 2 * 4 * np.pi * HOPPING / SITES * constants.e**2 / constants.h
    order = np.asarray(table.columns["order"])[:3]
    exact = 2 * largest / (np.pi * order) * (-1.0) ** order
    assert_allclose(np.asarray(table.columns["sine"])[:3], exact, rtol=0, atol=0.05 * largest)
    assert np.abs(table.columns["cosine"]).max() < 1e-9 * largest


def test_units_without_charge_leave_currents_as_energies():
    """With t as the unit a current is energy per flux quantum, with its sign."""
    study = make_study(unit="t", amplitude=1.0, controls=())
    table = totals_table(study.ribbon, "t")
    assert table.units["current"] == "t per flux quantum"
    assert study.ribbon.response is not None
    assert study.ribbon.response.totals is not None
    assert_allclose(table.columns["current"], -study.ribbon.response.totals.slope, atol=0)


def test_what_was_not_computed_is_refused(annulene: StudyResult):
    """The open strip has no flux response, and the cover no harmonics."""
    by_name = {case.name: case for case in annulene.cases}
    with pytest.raises(ValueError, match="open has no flux response"):
        flux_table(by_name["open"], "eV")
    with pytest.raises(ValueError, match="double has no harmonics"):
        harmonics_table(by_name["double"], "eV")
    case = by_name["ribbon"]
    assert case.response is not None
    bare = replace(case, response=replace(case.response, totals=None))
    with pytest.raises(ValueError, match="ribbon has no totals"):
        totals_table(bare, "eV")


def test_shift_between_moebius_and_planar_annulene(annulene: StudyResult):
    """Sorted Heilbronner levels minus sorted Hückel levels, paired from the middle outward."""
    table = shift_table(annulene.ribbon, annulene.cases[1])
    twisted = HOPPING * known.moebius_annulene(SITES)
    planar = HOPPING * known.cycle(SITES)
    assert_allclose(table.columns["shift"], twisted - planar, rtol=0, atol=1e-12)
    assert np.asarray(table.columns["from_gap"]).tolist() == [*range(-8, 0), *range(1, 9)]


def test_shift_against_the_cover_takes_the_mean_of_two(annulene: StudyResult):
    """The double cover of the Möbius ring of 16 is the cyclic polyene of 32."""
    table = shift_table(annulene.ribbon, annulene.cases[2])
    cover = HOPPING * known.cycle(2 * SITES).reshape(-1, 2).mean(axis=1)
    assert_allclose(table.columns["control_energy"], cover, rtol=0, atol=1e-12)


def test_bonds_make_the_moebius_ladder():
    """Two rows with one half twist: networkx' circulant graph C(20; 1, 10) (Biggs)."""
    study = make_study(rows=2, length=10, points=0, controls=())
    table = bonds_table(study.ribbon)
    graph = nx.Graph()
    graph.add_edges_from(zip(table.columns["tail"], table.columns["head"], strict=True))
    assert nx.is_isomorphic(graph, nx.circulant_graph(20, [1, 10]))
    assert np.count_nonzero(table.columns["winding"]) == 2
    assert np.array_equal(table.columns["mirrored"], np.asarray(table.columns["winding"]) == 1)
    assert table.units["dx"] == "nm"


def test_sites_carry_place_label_and_energy(annulene: StudyResult):
    """One row a site, in the order of the matrix."""
    table = sites_table(annulene.ribbon)
    assert list(table.columns) == ["site", "x", "y", "sublattice", "site_energy"]
    assert_allclose(np.diff(table.columns["x"]), annulene.ribbon.network.circumference / SITES)
    bare = sites_table(annulene.cases[3])
    assert "sublattice" not in bare.columns


def test_topology_of_strip_ring_and_cover():
    """One loop and not orientable with a half twist, two loops without; disc for the strip."""
    study = make_study(rows=3, length=10, points=0)
    table = topology_table(study.cases)
    assert table.columns["case"] == ("ribbon", "plain", "double", "open")
    assert table.columns["boundary_loops"] == (1, 2, 2, 1)
    assert table.columns["orientable"] == (False, True, True, True)
    assert table.columns["euler_characteristic"] == (0, 0, 0, 1)
    assert table.columns["coordination"][0] == "3:20 4:10"
    assert table.columns["face_sizes"][1] == "4:20"


def test_checks_are_listed_with_number_and_limit():
    """A check without a flux leaves the cell empty."""
    checks = (
        Check(name="hermitian", passed=True, value=0.0, limit=1e-12, flux=0.137),
        Check(name="seam", passed=False, value=0.5, limit=1e-9, note="a, b"),
    )
    header, rows = read_back(checks_table(checks))
    assert header == ["check", "flux", "passed", "value", "limit", "note"]
    assert rows[0] == ["hermitian", "0.137", "true", "0.0", "1e-12", ""]
    assert rows[1] == ["seam", "", "false", "0.5", "1e-09", "a, b"]
