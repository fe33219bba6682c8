"""What `describe` says of a file, without computing levels.

Counts and topology against ``brute.py`` and the closed facts of a band: one edge for odd half
twists, two for even, V - E + F = 0; lengths and widths from the geometry of the lattices.
"""

from __future__ import annotations

import json
import math
import re
from typing import Any

import numpy as np
import pytest
from brute import PERIOD, Case, closes, steps

from ribbon.errors import BadInput
from ribbon.study import build as build_module
from ribbon.study import forecast as forecast_module
from ribbon.study.build import build
from ribbon.study.describe import describe
from ribbon.study.ribbonfile import RibbonFile

KEYS = {
    *("sites", "bonds", "coordination", "boundary_loops", "orientable", "bipartite"),
    *("euler_characteristic", "length_nm", "width_nm"),
}
RINGS = [
    Case("square", 3, 6, 1, -1),
    Case("square", 2, 7, 0),
    Case("honeycomb-zigzag", 4, 6, 1, -1),
    Case("honeycomb-zigzag", 3, 6.5, 3, 1),
    Case("honeycomb-armchair", 5, 4, 2),
    Case("triangular", 4, 5.5, 1, 1),
    Case("kagome", 3, 4, 1, 1),
    Case("lieb", 5, 4, 1, -1),
]


def file_of(case: Case, ribbon: dict[str, Any] | None = None, **tables: Any) -> RibbonFile:
    keys = {
        **{"lattice": case.lattice, "rows": case.rows, "length": float(case.length)},
        **{"half_twists": case.half_twists, "orbital": "s" if case.sigma == 1 else "pz"},
    }
    given = {"hopping": {"unit": "t", "shells": list(case.hoppings)}, **tables}
    return RibbonFile.model_validate({"ribbon": {**keys, **(ribbon or {})}, **given})


@pytest.mark.parametrize("case", RINGS)
def test_counts_sizes_and_topology(case: Case) -> None:
    """At least the keys that are promised, with the right numbers."""
    told = describe(file_of(case, ribbon={"spacing": 0.3}))
    assert set(told) >= KEYS
    assert told["sites"] == case.sites()
    assert told["bonds"] == told["all_bonds"] == len(steps(*case[:4])) // 2
    assert sum(told["coordination"].values()) == told["sites"]
    assert sum(d * n for d, n in told["coordination"].items()) == 2 * told["bonds"]
    assert told["boundary_loops"] == (1 if case.half_twists % 2 else 2)
    assert told["orientable"] == (case.half_twists % 2 == 0)
    assert told["euler_characteristic"] == 0
    assert math.isclose(told["length_nm"], 0.3 * case.length * PERIOD[case.lattice])
    levels = case.levels()
    symmetric = bool(np.abs(levels + levels[::-1]).max() < 1e-9)
    assert told["bipartite"] <= symmetric  # Coulson & Rushbrooke (1940): bipartite, so symmetric
    if told["bipartite"]:
        zeros = np.count_nonzero(np.abs(levels) < 1e-9)
        assert told["guaranteed_zero_levels"] <= zeros
    assert told["components"] == 1


@pytest.mark.parametrize(
    ("lattice", "rows", "width"),
    [
        ("square", 4, 5.0),
        ("honeycomb-zigzag", 4, 7.0),
        ("honeycomb-armchair", 5, 6 * math.sqrt(3) / 2),
        ("triangular", 3, 4 * math.sqrt(3) / 2),
    ],
)
def test_width_between_the_hard_walls(lattice: str, rows: int, width: float) -> None:
    """(rows + 1) a, (3 rows + 2) a/2, (rows + 1) sqrt(3) a/2: L. Brey & H. A. Fertig, Phys. Rev. B
    73, 235411 (2006) for graphene."""
    told = describe(file_of(Case(lattice, rows, 4, 0), ribbon={"spacing": 0.5}))
    assert math.isclose(told["width_nm"], 0.5 * width, rel_tol=1e-12)


@pytest.mark.parametrize("case", RINGS)
def test_sizes_that_close_are_named(case: Case) -> None:
    """The file's own first, then near ones; each closes."""
    sizes = describe(file_of(case))["sizes_that_close"]
    found = [re.fullmatch(r"rows = (\d+), length = ([\d.]+)", text).groups() for text in sizes]
    assert (int(found[0][0]), float(found[0][1])) == (case.rows, case.length)
    assert len(set(found)) == len(found) == 5
    for rows, length in found:
        assert closes(case.lattice, int(rows), float(length), case.half_twists)


def test_it_can_be_written_as_json() -> None:
    """Plain numbers, texts, lists and mappings only."""
    told = describe(file_of(RINGS[2]))
    back = json.loads(json.dumps(told, allow_nan=False))
    assert back["coordination"] == {str(d): n for d, n in told["coordination"].items()}
    assert back["title"] == "honeycomb-zigzag, 4 by 6, 1 half twist"
    assert (back["half_twists"], back["orbital"], back["unit"]) == (1, "pz", "t")
    assert back["amplitudes"] == [1.0]


def test_a_site_bonded_to_itself_counts_two() -> None:
    """One column: the middle site 2 + 2, the outer ones exchange through the flip: 1 + 2."""
    assert describe(file_of(Case("square", 3, 1, 1)))["coordination"] == {3: 2, 4: 1}
    plain = describe(file_of(Case("square", 3, 1, 0)))
    assert (plain["coordination"], plain["bonds"]) == ({3: 2, 4: 1}, 5)


def test_further_neighbours_are_counted_apart() -> None:
    """Topology is that of the first shell; all bonds are told too."""
    case = Case("honeycomb-zigzag", 4, 6, 1, -1)
    first = describe(file_of(case))
    more = describe(file_of(case._replace(hoppings=(1.0, 0.1, 0.05))))
    for key in KEYS | {"faces", "face_sizes"}:
        assert more[key] == first[key]
    assert (
        more["all_bonds"] == build(file_of(case._replace(hoppings=(1.0, 0.1, 0.05)))).ring.bonds.m
    )
    assert more["all_bonds"] > more["bonds"]


def test_vacancies_and_detached_pieces_are_told() -> None:
    """What is left is described; pieces that came off are warned of."""
    case = Case("square", 3, 8, 1)
    told = describe(file_of(case, disorder={"vacancies": 0.5, "seed": 1}))
    assert told["sites"] == 12
    assert told["components"] > 1
    assert any("12 of 24 sites were taken out" in note for note in told["notes"])
    assert any(f"falls into {told['components']} detached pieces" in n for n in told["notes"])


def test_sizes_given_in_nm_are_told_with_their_error() -> None:
    """Width and length in nm, rows and periods that were taken."""
    keys = {"width_nm": 1.0, "length_nm": 5.0}
    file = RibbonFile.model_validate(
        {"ribbon": {"lattice": "honeycomb-armchair", "orbital": "pz", **keys}}
    )
    told = describe(file)
    assert abs(told["width_nm"] - 1.0) < 0.13
    assert abs(told["length_nm"] - 5.0) < 0.22
    assert sum(note.startswith(("width_nm = 1:", "length_nm = 5:")) for note in told["notes"]) == 2
    assert closes("honeycomb-armchair", told["rows"], told["length"], 1)


def test_the_forecast() -> None:
    """Clean rings by symmetry, disordered ones dense or sparse; cost grows with size and points."""
    small = Case("square", 4, 20, 1)
    clean = describe(file_of(small))["forecast"]
    assert (clean["levels_method"], clean["sweep_method"]) == ("symmetry", "symmetry")
    disorder = {"strength": 1.0}
    rough = describe(file_of(small, disorder=disorder))["forecast"]
    assert (rough["levels_method"], rough["sweep_method"]) == ("dense", "dense")
    large = Case("square", 4, 400, 1)
    wide = describe(file_of(large, disorder=disorder))["forecast"]
    assert (wide["levels_method"], wide["sweep_method"]) == ("sparse", "dense")
    assert wide["sweep_seconds"] > rough["sweep_seconds"]
    few = describe(file_of(large, disorder=disorder, sweep={"flux": {"points": 3}}))["forecast"]
    assert few["sweep_seconds"] < wide["sweep_seconds"]
    assert few["levels_seconds"] == wide["levels_seconds"]
    whole = describe(file_of(large, disorder=disorder, levels={"all": True}))["forecast"]
    assert whole["levels_method"] == "dense"
    assert whole["levels_bytes"] >= 1600**2 * 16


def test_levels_are_not_computed(monkeypatch: pytest.MonkeyPatch) -> None:
    """Disordered sites are described without a spectrum being asked for."""
    for name in ("eigh", "eigvalsh"):
        monkeypatch.setattr(f"scipy.linalg.{name}", None)
        monkeypatch.setattr(f"numpy.linalg.{name}", None)
    told = describe(
        file_of(Case("honeycomb-zigzag", 10, 500, 1), disorder={"strength": 1.0, "seed": 1})
    )
    assert (told["sites"], told["boundary_loops"]) == (10_000, 1)


def test_a_ribbon_that_cannot_be_built_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """One sentence: what does not close, what falls apart, what does not fit."""
    with pytest.raises(BadInput, match=r"does not close .* rows = 3 with length = 3\.5"):
        describe(file_of(Case("honeycomb-zigzag", 3, 4, 1)))
    with pytest.raises(BadInput, match="detached pieces"):
        describe(file_of(Case("honeycomb-armchair", 1, 4, 1)))
    monkeypatch.setattr(build_module, "available_bytes", lambda: 1_000_000)
    with pytest.raises(BadInput, match="sites need about"):
        describe(file_of(Case("square", 10, 1000, 1)))


def test_the_forecast_is_calibrated_on_this_machine(monkeypatch: pytest.MonkeyPatch) -> None:
    """Twice as slow a machine is told twice the time; memory stays."""
    one = describe(file_of(Case("square", 5, 40, 1, -1)))["forecast"]
    slow = forecast_module.slowness()
    assert slow > 0
    monkeypatch.setattr(forecast_module, "slowness", lambda: 2 * slow)
    two = describe(file_of(Case("square", 5, 40, 1, -1)))["forecast"]
    assert two["levels_seconds"] == pytest.approx(2 * one["levels_seconds"])
    assert two["sweep_seconds"] == pytest.approx(2 * one["sweep_seconds"])
    assert two["levels_bytes"] == one["levels_bytes"]


@pytest.mark.parametrize(
    ("more", "method", "word"),
    [
        ({}, "symmetry", "momentum and parity"),
        ({"disorder": {"strength": 1.0}}, "dense", "few"),
        ({"disorder": {"vacancies": 0.1}, "levels": {"all": True}}, "dense", "removed"),
    ],
)
def test_the_method_is_told_with_its_reason(more: dict[str, Any], method: str, word: str) -> None:
    """Which way the levels will be found, and why."""
    told = describe(file_of(Case("square", 5, 40, 1, -1), **more))["forecast"]
    assert told["levels_method"] == method
    assert word in told["levels_method_because"]
