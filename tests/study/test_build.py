"""From a ribbon file to Hamiltonians: the ribbon, its controls, their energies and fillings.

Matrices are judged by ``brute.py``; nm and meV by the formulas of physics: t = hbar^2/(2 m* a^2),
W = (rows + 1) a (square), W = (rows + 1) sqrt(3) a/2 (armchair).
"""

from __future__ import annotations

import math
import os
from pathlib import Path
from typing import Any

import brute
import numpy as np
import pytest
import scipy.constants as si
from brute import Case

from ribbon.errors import BadInput, TooLarge
from ribbon.lattice import shelf
from ribbon.study import build as build_module
from ribbon.study.build import build
from ribbon.study.controls import build_controls
from ribbon.study.forecast import available_bytes
from ribbon.study.ribbonfile import RibbonFile, read_study

ENTRY = 1e-12


def file_of(
    lattice: str = "square",
    rows: int | None = 3,
    length: float | None = 6.0,
    *,
    half_twists: int = 1,
    ribbon: dict[str, Any] | None = None,
    **tables: Any,
) -> RibbonFile:
    sizes = {} if rows is None else {"rows": rows}
    if length is not None:
        sizes["length"] = float(length)
    keys = {"lattice": lattice, **sizes, "half_twists": half_twists, "orbital": "pz"}
    given = {"hopping": {"unit": "t"}, **tables}
    return RibbonFile.model_validate({"ribbon": {**keys, **(ribbon or {})}, **given})


def controls(file: RibbonFile) -> dict[str, Any]:
    models, _ = build_controls(build(file))
    return {model.name: model for model in models}


EVERYTHING = {"control": {"compare": ["plain", "double", "open"]}}
ENERGIES = np.random.default_rng(6).uniform(-1, 1, 64)


@pytest.mark.parametrize(
    "case",
    [
        Case("square", 3, 6, 1, -1),
        Case("honeycomb-zigzag", 4, 3, 1, -1, (1.0, 0.2)),
        Case("honeycomb-armchair", 5, 2, 2, -1),
        Case("triangular", 3, 5, 3, -1),
        Case("kagome", 3, 3, 1, -1),
        Case("lieb", 3, 3, 0),
    ],
)
def test_the_matrix_of_a_file(case: Case) -> None:
    """Every key of [ribbon] and [hopping] arrives in the matrix."""
    hopping = {"unit": "t", "shells": list(case.hoppings), "site_energy": 0.25}
    file = file_of(*case[:3], half_twists=case.half_twists, hopping=hopping)
    plan = build(file)
    matrix = plan.model.hamiltonian.matrix(0.3).toarray()
    expected = case.matrix(0.3, energies=np.full(case.sites(), 0.25))
    np.testing.assert_allclose(matrix, expected, rtol=0, atol=ENTRY)
    assert plan.model.hamiltonian.unit == "t"
    assert plan.model.name == "ribbon"


def test_controls_of_a_twisted_ring() -> None:
    """Plain, double cover, open strip with the disorder of the ribbon; brute force beside each."""
    file = file_of(disorder={"strength": 1.0, "seed": 3}, **EVERYTHING)
    energies = build(file).model.hamiltonian.site_energies
    found = controls(file)
    assert list(found) == ["plain", "double", "open"]
    plain = Case("square", 3, 6, 0).matrix(0.2, energies=energies)
    np.testing.assert_allclose(
        found["plain"].hamiltonian.matrix(0.2).toarray(), plain, rtol=0, atol=ENTRY
    )
    columns = energies.reshape(6, 3)
    lifted = np.concatenate([columns, columns[:, ::-1]]).ravel()
    double = Case("square", 3, 12, 0).matrix(0.2, energies=lifted)
    np.testing.assert_allclose(
        found["double"].hamiltonian.matrix(0.2).toarray(), double, rtol=0, atol=ENTRY
    )
    flat = Case("square", 3, 6, 0).matrix(energies=energies).real
    flat[:3, -3:] = flat[-3:, :3] = 0.0
    np.testing.assert_allclose(
        found["open"].hamiltonian.matrix().toarray(), flat, rtol=0, atol=ENTRY
    )
    assert [model.flux_scale for model in found.values()] == [1.0, 2.0, 1.0]


@pytest.mark.parametrize(
    ("lattice", "rows", "length", "half_twists"),
    [
        ("honeycomb-zigzag", 3, 4.5, 1),
        ("honeycomb-armchair", 4, 2.5, 3),
        ("triangular", 4, 4.5, 1),
        ("kagome", 5, 2.5, 1),
    ],
)
def test_neighbours_in_length_where_no_plain_ring_exists(
    lattice: str, rows: int, length: float, half_twists: int
) -> None:
    """Half a period shorter and longer, with the disorder laid on from the start of the cover."""
    disorder = {"strength": 1.0, "seed": 3}
    file = file_of(lattice, rows, length, half_twists=half_twists, disorder=disorder)
    plan = build(file)
    models, notes = build_controls(plan)
    found = {model.name: model.hamiltonian for model in models}
    assert list(found) == ["shorter", "longer", "double"]
    assert any(f"no plain ring of length {length:g} exists" in note for note in notes)
    cover = found["double"].site_energies
    for name, step in (("shorter", -0.5), ("longer", 0.5)):
        near = Case(lattice, rows, length + step, 0)
        energies = cover[: near.sites()]
        np.testing.assert_allclose(
            found[name].matrix(0.3).toarray(),
            near.matrix(0.3, energies=energies),
            rtol=0,
            atol=ENTRY,
        )


def test_the_shortest_ring_has_one_neighbour() -> None:
    """Half a period: nothing shorter."""
    assert list(controls(file_of("honeycomb-zigzag", 3, 0.5))) == ["longer", "double"]


def test_an_untwisted_ribbon_is_its_own_plain_ring() -> None:
    """Said in a note; the cover is kept."""
    models, notes = build_controls(build(file_of(half_twists=0)))
    assert [model.name for model in models] == ["double"]
    assert "the plain ring itself" in notes[0]


def test_no_controls_where_none_are_asked_for() -> None:
    """An empty list, and any order."""
    assert controls(file_of(control={"compare": []})) == {}
    assert list(controls(file_of(control={"compare": ["open", "plain"]}))) == ["open", "plain"]


@pytest.mark.parametrize("half_twists", [0, 1])
@pytest.mark.parametrize("lattice", ["square", "honeycomb-zigzag", "honeycomb-armchair"])
def test_vacancies_are_taken_out_of_every_control(lattice: str, half_twists: int) -> None:
    """The same sites of the plain ring and the strip, both lifts of the cover."""
    rows = {"honeycomb-zigzag": 4}.get(lattice, 5)
    file = file_of(
        lattice,
        rows,
        4,
        half_twists=half_twists,
        disorder={"vacancies": 0.15, "strength": 0.4, "seed": 8},
        **EVERYTHING,
    )
    plan = build(file)
    kept = plan.ring.kept
    assert kept is not None
    whole = plan.ring.strip.n
    assert kept.size == whole - round(0.15 * whole)
    assert any(f"{whole - kept.size} of {whole} sites were taken out" in n for n in plan.notes)
    sizes = {name: model.hamiltonian.n for name, model in controls(file).items()}
    expected = {"plain": kept.size, "double": 2 * kept.size, "open": kept.size}
    assert sizes == {name: expected[name] for name in sizes}
    assert ("plain" in sizes) == (half_twists == 1)
    energies = plan.model.hamiltonian.site_energies
    for name, model in controls(file).items():
        if name != "double":
            np.testing.assert_array_equal(model.hamiltonian.site_energies, energies)


def test_vacancies_of_neighbours_in_length() -> None:
    """What is missing from the cover is missing from the shorter and the longer ring."""
    file = file_of("honeycomb-zigzag", 3, 6.5, disorder={"vacancies": 0.2, "seed": 8})
    found = controls(file)
    kept = found["double"].hamiltonian.ring.kept
    for name in ("shorter", "longer"):
        ring = found[name].hamiltonian.ring
        whole = ring.strip.n
        np.testing.assert_array_equal(ring.kept, kept[kept < whole])


def test_fillings_and_windows_of_the_cover() -> None:
    """Twice the sites: twice the electrons and twice the levels; mu and neutral stay."""
    plan = build(file_of(sweep={"electrons": 7.0}, levels={"count": 9}))
    models, _ = build_controls(plan)
    for model in models:
        twice = 2 if model.name == "double" else 1
        assert plan.filling_for(model).electrons == 7.0 * twice
        assert plan.window_for(model).count == 9 * twice
    neutral = build(file_of())
    assert neutral.filling.electrons == "neutral"
    fixed = build(file_of(sweep={"chemical_potential": 0.0}))
    assert (fixed.filling.electrons, fixed.filling.chemical_potential) == (None, 0.0)
    for plan in (neutral, fixed):
        for model in build_controls(plan)[0]:
            assert plan.filling_for(model) == plan.filling


def test_windows_and_fluxes_of_a_file() -> None:
    """The three ways to ask for levels, and an even grid with both ends."""
    assert build(file_of()).window.count == 40
    assert build(file_of(levels={"all": True})).window.all
    assert build(file_of(levels={"between": [-1, 0.5]})).window.between == (-1.0, 0.5)
    assert build(file_of(levels={"near": 0.3})).window.near == 0.3
    sweep = {"flux": {"from": -0.5, "to": 1.0, "points": 4}}
    np.testing.assert_allclose(
        build(file_of(sweep=sweep)).fluxes, [-0.5, 0.0, 0.5, 1.0], rtol=0, atol=1e-15
    )


# --- sizes in nm, masses in electron masses ------------------------------------------------------


def test_sizes_in_nm() -> None:
    """Armchair graphene, 1.5 nm by 12 nm, half a twist: the nearest that closes, with its error."""
    file = file_of("honeycomb-armchair", None, None, ribbon={"width_nm": 1.5, "length_nm": 12.0})
    plan = build(file)
    strip = plan.ring.strip
    a = 0.142
    assert brute.closes("honeycomb-armchair", strip.rows, strip.length, 1)
    width, around = (strip.rows + 1) * math.sqrt(3) * a / 2, 3 * a * strip.length
    assert math.isclose(strip.width, width, rel_tol=1e-12)
    assert abs(width - 1.5) <= math.sqrt(3) * a / 2
    assert abs(around - 12.0) <= 3 * a / 2 + 1e-9
    for key, wanted, got in (("width_nm", 1.5, width), ("length_nm", 12.0, around)):
        note = next(note for note in plan.notes if note.startswith(key))
        assert f"{got:.6g} nm ({100 * (got / wanted - 1):+.2f} %)" in note
        assert f"rows = {strip.rows}, length = {strip.length:g}" in note


def test_one_size_in_nm_and_one_in_periods() -> None:
    """What is given as a number stays."""
    plan = build(file_of("square", None, 9, ribbon={"width_nm": 4.9, "spacing": 0.5}))
    assert (plan.ring.strip.rows, plan.ring.strip.length) == (9, 9.0)
    assert len(plan.notes) == 1


def test_effective_mass_ring() -> None:
    """GaAs, a = 2 nm: t from the constants, 4t on the diagonal; the open strip has the same."""
    hopping = {"mass": 0.067}
    file = file_of("square", 3, 6, ribbon={"spacing": 2.0}, hopping=hopping, **EVERYTHING)
    plan = build(file)
    t = si.hbar**2 / (2 * 0.067 * si.m_e * 4e-18) / si.e * 1e3
    assert (plan.model.hamiltonian.unit, plan.notes) == ("meV", ())
    expected = Case("square", 3, 6, 1, -1, (t,)).matrix(energies=np.full(18, 4 * t))
    matrix = plan.model.hamiltonian.matrix().toarray()
    np.testing.assert_allclose(matrix, expected, rtol=0, atol=1e-9)
    for model in controls(file).values():
        np.testing.assert_allclose(model.hamiltonian.site_energies, 4 * t, rtol=1e-12)


def test_a_mesh_left_at_its_default_is_pointed_out() -> None:
    """With a mass the spacing sets the energies."""
    plan = build(file_of(hopping={"mass": 0.067}))
    assert any("ribbon.spacing was left at 1 nm" in note for note in plan.notes)


@pytest.mark.parametrize("lattice", ["triangular", "kagome", "lieb"])
def test_a_mass_needs_the_square_lattice(lattice: str) -> None:
    """t = hbar^2/(2 m a^2) holds there only."""
    with pytest.raises(BadInput, match=f'needs the square lattice, not "{lattice}"'):
        build(file_of(lattice, 3, 4, hopping={"mass": 0.067}))


def test_a_square_lattice_file_of_ones_own_takes_a_mass(tmp_path: Path) -> None:
    """Recognised by its geometry, not by its name."""
    own = tmp_path / "mesh.toml"
    own.write_text(shelf()["square"].read_text().replace('"square"', '"mesh"'), encoding="utf-8")
    plan = build(file_of(str(own), 3, 6, hopping={"mass": 1.0}, ribbon={"spacing": 1.0}))
    t = si.hbar**2 / (2 * si.m_e * 1e-18) / si.e * 1e3
    assert math.isclose(-plan.model.hamiltonian.amplitudes[0], t, rel_tol=1e-12)


def test_energies_by_sublattice_on_top_of_the_band_bottom() -> None:
    """With a mass, labels add to 4t; with labels left out, 4t alone."""
    file = file_of(hopping={"mass": 1.0, "site_energy": {"A": 5.0}}, ribbon={"spacing": 1.0})
    bottom = 4 * si.hbar**2 / (2 * si.m_e * 1e-18) / si.e * 1e3
    found = build(file).model.hamiltonian.site_energies
    np.testing.assert_allclose(found, bottom + 5.0, rtol=1e-12)


def test_a_table_of_site_energies(tmp_path: Path) -> None:
    """Numbered as the complete strip; vacancies take theirs with them; a mass adds 4t."""
    table = "site,energy\n" + "".join(f"{i},{float(e)!r}\n" for i, e in enumerate(ENERGIES[:18]))
    (tmp_path / "sites.csv").write_text(table, encoding="utf-8")
    (tmp_path / "ring.toml").write_text(
        '[ribbon]\nlattice = "square"\nrows = 3\nlength = 6\norbital = "s"\n'
        '[hopping]\nunit = "t"\nsite_table = "sites.csv"\n',
        encoding="utf-8",
    )
    plan = build(read_study(tmp_path / "ring.toml"))
    np.testing.assert_array_equal(plan.model.hamiltonian.site_energies, ENERGIES[:18])
    plan = build(read_study(tmp_path / "ring.toml", overrides=["disorder.vacancies=0.3"]))
    kept = plan.ring.kept
    assert kept is not None
    np.testing.assert_array_equal(plan.model.hamiltonian.site_energies, ENERGIES[kept])
    massive = read_study(
        tmp_path / "ring.toml",
        overrides=["hopping.mass=1.0", "hopping.unit=meV", "ribbon.spacing=1.0"],
    )
    bottom = 4 * si.hbar**2 / (2 * si.m_e * 1e-18) / si.e * 1e3
    found = build(massive).model.hamiltonian.site_energies
    np.testing.assert_allclose(found, ENERGIES[:18] + bottom, rtol=0, atol=1e-9)


# --- refused -------------------------------------------------------------------------------------


def test_a_strip_that_falls_apart_is_refused() -> None:
    """Armchair, one row: dimers."""
    with pytest.raises(BadInput, match="falls into 4 detached pieces; rows = 2 or more"):
        build(file_of("honeycomb-armchair", 1, 4))


def test_a_single_dimer_is_no_ribbon_either() -> None:
    """Armchair, one row, one period: no bond leads round the ring."""
    with pytest.raises(BadInput, match="rows = 2 or more"):
        build(file_of("honeycomb-armchair", 1, 1))


def test_a_ribbon_that_does_not_close_is_refused() -> None:
    """With sizes that do."""
    with pytest.raises(BadInput, match="does not close with half_twists = 1; the nearest sizes"):
        build(file_of("kagome", 4, 4))


def test_a_ribbon_larger_than_memory_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """Before it is built, with the number of sites that would fit."""
    monkeypatch.setattr(build_module, "available_bytes", lambda: 1_000_000)
    with pytest.raises(TooLarge, match=r"900 sites need about .* at most 533 sites would fit"):
        build(file_of("square", 9, 100))
    assert build(file_of("square", 5, 100)).ring.n == 500


@pytest.mark.parametrize("problem", [AttributeError, OSError, ValueError])
def test_systems_that_do_not_tell_their_memory(
    problem: type[Exception], monkeypatch: pytest.MonkeyPatch
) -> None:
    """8 GiB are taken for granted."""

    def silent(_: str) -> int:
        raise problem

    monkeypatch.setattr(os, "sysconf", silent)
    assert available_bytes() == 8 * 1024**3


def test_a_neighbour_that_does_not_close_is_left_out(tmp_path: Path) -> None:
    """A lattice file whose period is twice the true one: lengths of a quarter close one-sided.

    The plain neighbours are then a quarter away, not half a period; the study goes on.
    """
    own = tmp_path / "wide.toml"
    text = shelf()["honeycomb-zigzag"].read_text()
    text = text.replace("period = 1.7320508075688772", "period = 3.4641016151377544")
    text = text.replace("x = [0.0]", "x = [0.0, 1.7320508075688772]")
    text = text.replace("x = [0.8660254037844386]", "x = [0.8660254037844386, 2.598076211353316]")
    own.write_text(text, encoding="utf-8")
    file = file_of(str(own), 3, 2.75)
    assert build(file).ring.n == 33
    assert "double" in controls(file)
