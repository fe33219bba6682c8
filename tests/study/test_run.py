"""Running a study: cases, levels, gaps, currents, notes - against brute force on small rings.

The outside judge is ``brute.py`` (matrices from coordinates alone); identities of the double
cover: P. W. Fowler, Phys. Chem. Chem. Phys. 4, 2878 (2002).
"""

from __future__ import annotations

import math
import re
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from brute import Case

from ribbon.errors import BadInput, TooLarge
from ribbon.hopping.units import boltzmann
from ribbon.study import cases as cases_module
from ribbon.study import forecast as forecast_module
from ribbon.study.build import build
from ribbon.study.character import with_density
from ribbon.study.figures import draw_all, to_svg
from ribbon.study.report import render_report
from ribbon.study.result import StudyResult
from ribbon.study.ribbonfile import RibbonFile
from ribbon.study.run import run_flux, run_levels, run_study

LEVEL = 1e-9
FIVE = {"flux": {"from": 0.0, "to": 1.0, "points": 5}}

RINGS = [
    Case("square", 3, 6, 1, -1),
    Case("square", 4, 5, 3, 1),
    Case("square", 3, 6, 0),
    Case("square", 3, 6, 2),
    Case("honeycomb-zigzag", 3, 3.5, 1, -1),
    Case("honeycomb-zigzag", 2, 4, 1, 1, (1.0, 0.1, 0.05)),
    Case("honeycomb-armchair", 4, 2.5, 1, -1),
    Case("honeycomb-armchair", 5, 3, 1, -1),
    Case("triangular", 3, 6, 1, -1),
    Case("triangular", 4, 4.5, 3, -1),
    Case("kagome", 3, 4, 1, 1),
    Case("lieb", 3, 3, 1, -1),
    Case("square", 1, 16, 1, -1),
    Case("square", 2, 1, 1, -1),
    Case("honeycomb-zigzag", 3, 0.5, 1, -1),
]


def file_of(case: Case, **tables: Any) -> RibbonFile:
    keys: dict[str, Any] = {
        **{"lattice": case.lattice, "rows": case.rows, "length": float(case.length)},
        **{"half_twists": case.half_twists, "orbital": "s" if case.sigma == 1 else "pz"},
    }
    hopping = {"unit": "t", "shells": list(case.hoppings)}
    return RibbonFile.model_validate({"ribbon": keys, "hopping": hopping, "sweep": FIVE, **tables})


def passed(result: StudyResult) -> bool:
    return bool(result.checks) and all(check.passed for check in result.checks)


def gap_of(levels: np.ndarray, electrons: float, spin: int = 2) -> float:
    room = np.clip(electrons - spin * np.arange(levels.size), 0.0, spin)
    lower, upper = np.flatnonzero(room > 0)[-1], np.flatnonzero(room < spin)[0]
    return float(max(levels[upper] - levels[lower], 0.0))


def nearest(levels: np.ndarray, energy: float, index: np.ndarray) -> bool:
    """Whether no level outside ``index`` is nearer to ``energy`` than the farthest inside."""
    distance = np.abs(levels - energy)
    outside = np.delete(distance, index)
    return outside.size == 0 or bool(distance[index].max() <= outside.min() + LEVEL)


@pytest.mark.parametrize("case", RINGS)
def test_a_study_of_every_lattice(case: Case) -> None:
    """Ribbon: levels, both gaps, sweep, totals; every check passes."""
    result = run_study(file_of(case, levels={"count": 6, "near": 0.1}, field={"flux": 0.2}))
    assert passed(result)
    ribbon = result.ribbon
    levels = case.levels(0.2)
    assert ribbon.flux == 0.2
    np.testing.assert_allclose(
        ribbon.levels.energies, levels[ribbon.levels.index], rtol=0, atol=LEVEL
    )
    assert ribbon.levels.m >= min(6, case.sites())
    assert nearest(levels, 0.1, ribbon.levels.index)
    assert math.isclose(ribbon.gap.gap, gap_of(levels, case.sites()), abs_tol=LEVEL)
    if case.half_twists % 2:
        other = case._replace(sigma=-case.sigma).levels(0.2)
        assert ribbon.other_gap is not None
        assert math.isclose(ribbon.other_gap.gap, gap_of(other, case.sites()), abs_tol=LEVEL)
    else:
        assert ribbon.other_gap is None
    assert ribbon.response is not None
    for point, flux in enumerate(ribbon.response.flux):
        seen = ribbon.response.level[point] >= 0
        expected = case.levels(float(flux))[ribbon.response.level[point][seen]]
        np.testing.assert_allclose(
            ribbon.response.energy[point][seen], expected, rtol=0, atol=LEVEL
        )
    totals = ribbon.response.totals
    assert totals is not None
    filled = np.clip(case.sites() - 2 * np.arange(case.sites()), 0, 2)
    sums = [float(filled @ case.levels(float(flux))) for flux in totals.flux]
    np.testing.assert_allclose(totals.energy, sums, rtol=0, atol=1e-8)
    assert ribbon.topology.sites == case.sites()


@pytest.mark.parametrize("case", RINGS)
def test_controls_of_a_study(case: Case) -> None:
    """Each control is the untwisted ring it says it is, swept at its own flux."""
    result = run_study(file_of(case, levels={"all": True}, field={"flux": 0.2}))
    expected = {}
    for control in result.controls:
        step = {"double": case.length, "shorter": -0.5, "longer": 0.5}.get(control.name, 0)
        untwisted = case._replace(half_twists=0, sigma=1, length=case.length + step)
        scale = 2.0 if control.name == "double" else 1.0
        expected[control.name] = untwisted
        assert control.flux == 0.2 * scale
        assert control.flux_scale == scale
        levels = untwisted.levels(0.2 * scale)
        np.testing.assert_allclose(control.levels.energies, levels, rtol=0, atol=LEVEL)
        assert math.isclose(control.gap.gap, gap_of(levels, untwisted.sites()), abs_tol=LEVEL)
        assert control.response is not None
        np.testing.assert_allclose(
            control.response.flux, scale * np.linspace(0, 1, 5), rtol=0, atol=1e-15
        )
        at_half = untwisted.levels(0.5 * scale)
        np.testing.assert_allclose(control.response.energy[2], at_half, rtol=0, atol=LEVEL)
        assert control.topology.boundary_loops == 2
        assert control.topology.orientable
        assert control.other_gap is None
    plain_exists = float(case.length).is_integer()
    if case.half_twists == 0:
        assert set(expected) == {"double"}
    elif plain_exists:
        assert set(expected) == {"plain", "double"}
    else:
        assert set(expected) - {"shorter"} == {"longer", "double"}
        assert ("shorter" in expected) == (case.length > 0.5)


@pytest.mark.parametrize(
    "case", [Case("square", 3, 6, 1, -1), Case("honeycomb-zigzag", 3, 3.5, 1, -1)]
)
def test_disorder_is_lifted_to_the_cover(case: Case) -> None:
    """Levels of both orbital signs together are those of the cover at twice the flux."""
    disorder = {"strength": 2.0, "seed": 11}
    common = {"levels": {"all": True}, "disorder": disorder, "field": {"flux": 0.15}}
    result = run_study(file_of(case, **common))
    assert passed(result)
    other = run_levels(file_of(case._replace(sigma=-case.sigma), **common))
    both = np.sort(np.concatenate([result.ribbon.levels.energies, other.ribbon.levels.energies]))
    cover = next(control for control in result.controls if control.name == "double")
    np.testing.assert_allclose(cover.levels.energies, both, rtol=0, atol=LEVEL)
    assert result.ribbon.levels.certificate.method == "dense"
    energies = result.ribbon.hamiltonian.site_energies
    np.testing.assert_allclose(
        result.ribbon.levels.energies, case.levels(0.15, energies=energies), rtol=0, atol=LEVEL
    )


def test_vacancies() -> None:
    """Rows and columns struck out of the brute-force matrix; detached pieces are told."""
    case = Case("honeycomb-zigzag", 3, 4.5, 1, -1)
    result = run_study(file_of(case, disorder={"vacancies": 0.4, "seed": 2}))
    assert passed(result)
    ribbon = result.ribbon
    kept = ribbon.hamiltonian.ring.kept  # type: ignore[union-attr]
    assert kept is not None
    assert kept.size == 27 - 11
    matrix = case.matrix()[np.ix_(kept, kept)]
    np.testing.assert_allclose(
        ribbon.levels.energies, np.linalg.eigvalsh(matrix), rtol=0, atol=LEVEL
    )
    assert ribbon.electrons == kept.size
    assert ribbon.topology.components > 1
    assert any(f"leave {ribbon.topology.components} detached pieces" in n for n in result.notes)
    assert any("11 of 27 sites were taken out (seed 2)" in note for note in result.notes)


def test_the_open_strip_has_no_flux() -> None:
    """Levels before closing, at zero flux, whatever the ribbon's flux; no sweep."""
    case = Case("square", 3, 6, 1, -1)
    control = {"compare": ["open"]}
    result = run_study(file_of(case, control=control, levels={"all": True}, field={"flux": 0.3}))
    flat = case._replace(half_twists=0).matrix().real
    flat[:3, -3:] = flat[-3:, :3] = 0.0
    (strip,) = result.controls
    np.testing.assert_allclose(strip.levels.energies, np.linalg.eigvalsh(flat), rtol=0, atol=LEVEL)
    assert (strip.flux, strip.response, strip.harmonics, strip.half) == (0.0, None, None, None)
    assert strip.topology.boundary_loops == 1
    assert result.nearest_control is strip


def test_the_nearest_of_kin_comes_first() -> None:
    """Plain before shorter and longer before the cover before the strip."""
    every = {"compare": ["open", "double", "plain"]}
    case = Case("square", 3, 6, 1, -1)
    nearest_control = run_study(file_of(case, control=every)).nearest_control
    assert nearest_control is not None
    assert nearest_control.name == "plain"
    case = Case("honeycomb-zigzag", 3, 3.5, 1, -1)
    nearest_control = run_study(file_of(case, control=every)).nearest_control
    assert nearest_control is not None
    assert nearest_control.name == "shorter"
    assert run_study(file_of(case, control={"compare": []})).nearest_control is None


# --- fillings ------------------------------------------------------------------------------------


def test_a_temperature() -> None:
    """Free energy of brute-force levels; the ensemble is told in a note."""
    case = Case("square", 2, 6, 1, -1)
    sweep = {**FIVE, "temperature": 400.0}
    hopping = {"unit": "eV", "shells": [1.0]}
    result = run_study(file_of(case, sweep=sweep, hopping=hopping))
    assert passed(result)
    assert any("not the canonical ensemble" in note for note in result.notes)
    response = result.ribbon.response
    assert response is not None
    assert response.totals is not None
    thermal = 400.0 * boltzmann("eV")
    for number, flux in enumerate(response.flux):
        levels = case.levels(float(flux))
        mu = response.totals.chemical_potential[number]
        omega = -2 * thermal * np.logaddexp(0.0, (mu - levels) / thermal).sum()
        free = omega + 12 * mu
        assert math.isclose(response.totals.energy[number], free, abs_tol=1e-8)
    assert not response.totals.shared.any()


@pytest.mark.parametrize("mu", [-0.7, 0.0, 0.4])
def test_a_chemical_potential(mu: float) -> None:
    """Electrons are counted below it: for the gap at the file's flux, for totals at each flux."""
    case = Case("honeycomb-armchair", 5, 3, 1, -1)
    sweep = {**FIVE, "chemical_potential": mu, "spin": 1}
    result = run_study(file_of(case, sweep=sweep, field={"flux": 0.1}))
    assert passed(result)
    for study_case in result.cases:
        assert study_case.response is not None
        totals = study_case.response.totals
        assert totals is not None
        np.testing.assert_array_equal(totals.chemical_potential, mu)
        twice = study_case.name == "double"
        ring = case._replace(
            half_twists=0 if study_case.name != "ribbon" else 1,
            sigma=1 if study_case.name != "ribbon" else -1,
            length=6 if twice else 3,
        )
        below = np.count_nonzero(ring.levels(study_case.flux) < mu - 1e-9)
        assert study_case.electrons == below
        flux = float(totals.flux[1])
        exact = ring.levels(flux)
        share = np.count_nonzero(exact < mu - 1e-9) + 0.5 * np.count_nonzero(
            np.abs(exact - mu) < 1e-9
        )
        assert totals.electrons[1] == share


def test_a_number_of_electrons_is_doubled_in_the_cover() -> None:
    """Density, not number, is what ribbon and cover share."""
    result = run_study(file_of(Case("square", 3, 6, 1, -1), sweep={**FIVE, "electrons": 7.0}))
    electrons = {case.name: case.electrons for case in result.cases}
    assert electrons == {"ribbon": 7.0, "plain": 7.0, "double": 14.0}


@pytest.mark.parametrize("brim", ["full", "below the band"])
def test_full_and_empty_bands_make_a_report(brim: str) -> None:
    """No gap to speak of (NaN): figures and report are made all the same, and say no number."""
    filling = {"spin": 1} if brim == "full" else {"chemical_potential": -50.0}
    file = file_of(
        Case("square", 2, 5, 1, -1),
        sweep={**FIVE, **filling},
        control={"compare": ["plain"]},
    )
    result = run_study(file)
    assert passed(result)
    assert math.isnan(result.ribbon.gap.gap)
    svg = {name: to_svg(figure) for name, figure in draw_all(result).items()}
    page = render_report(result, svg)
    assert ("all levels full" if brim == "full" else "all levels empty") in page
    assert not re.search(r"\bnan\b", re.sub(r"<[^>]*>", " ", page), re.IGNORECASE)


def test_levels_of_a_full_band_say_no_number() -> None:
    """The gap in a line."""
    result = run_levels(file_of(Case("square", 2, 5, 1, -1), sweep={"spin": 1}))
    assert not any("nan" in note for note in result.notes)


def test_more_electrons_than_fit_are_refused() -> None:
    """In one sentence with the number that fits."""
    with pytest.raises(BadInput, match=r"sweep\.electrons = 25 must be from 0 to 24"):
        run_study(file_of(Case("square", 2, 6, 1, -1), sweep={"electrons": 25.0}))


# --- flux ----------------------------------------------------------------------------------------


def test_harmonics_need_whole_quanta() -> None:
    """Half a quantum: no harmonics and a note; whole quanta: those of the ribbon, not the cover."""
    case = Case("square", 2, 6, 1, -1)
    half = run_study(file_of(case, sweep={"flux": {"to": 0.5, "points": 5}}))
    assert half.ribbon.harmonics is None
    assert any("no harmonics" in note for note in half.notes)
    whole = run_study(file_of(case, sweep={"flux": {"from": -1.0, "to": 1.0, "points": 33}}))
    assert whole.ribbon.harmonics is not None
    assert {c.name: c.harmonics is None for c in whole.controls} == {
        "plain": False,
        "double": True,
    }
    assert not any("no harmonics" in note for note in whole.notes)
    assert whole.ribbon.half is not None
    assert not whole.ribbon.half.holds


def test_the_order_and_signs_of_the_harmonics() -> None:
    """-dE/d(flux) of a Möbius annulene, 8 sites, 8 electrons: E = -4 cos(2 pi flux/8)/sin(pi/8).

    Heilbronner (1964); Fourier coefficients by the trapezoidal sum of the closed form.
    """
    sweep = {"flux": {"from": -0.5, "to": 0.5, "points": 65}}
    result = run_study(file_of(Case("square", 1, 8, 1, -1), sweep=sweep))
    found = result.ribbon.harmonics
    assert found is not None
    flux = np.linspace(-0.5, 0.5, 65)[:-1]
    current = -4 * (2 * np.pi / 8) * np.sin(2 * np.pi * flux / 8) / math.sin(math.pi / 8)
    current[0] = 0.0  # shells meet at half a quantum and share
    for number, order in enumerate(found.order):
        sine = 2 / 64 * np.sin(2 * np.pi * order * flux) @ current
        assert math.isclose(found.sine[number], sine, abs_tol=1e-9)
        assert abs(found.cosine[number]) < 1e-9


def test_levels_alone_and_flux_alone() -> None:
    """Neither controls nor, for levels, a sweep; gap and other gap in a note."""
    case = Case("honeycomb-armchair", 5, 8, 1, -1)
    levels = run_levels(file_of(case))
    assert [c.name for c in levels.cases] == ["ribbon"]
    assert (levels.ribbon.response, levels.ribbon.harmonics) == (None, None)
    other = case._replace(sigma=1).levels()
    said = f"{gap_of(other, case.sites()):.9g} t"
    assert any(said in note and '"pz"' in note for note in levels.notes)
    flux = run_flux(file_of(case))
    assert [c.name for c in flux.cases] == ["ribbon"]
    assert flux.ribbon.response is not None
    assert passed(levels)
    assert passed(flux)


def test_every_level_can_be_asked_for() -> None:
    """All, more than there are, and between two energies where there are none."""
    case = Case("square", 2, 6, 1, -1)
    every = run_study(file_of(case, levels={"all": True}))
    more = run_study(file_of(case, levels={"count": 1000}))
    for result in (every, more):
        np.testing.assert_allclose(result.ribbon.levels.energies, case.levels(), rtol=0, atol=LEVEL)
        assert passed(result)
    none = run_study(file_of(case, levels={"between": [20.0, 21.0]}))
    assert none.ribbon.levels.m == 0
    assert passed(none)


# --- what does not fit ---------------------------------------------------------------------------


def test_a_cover_that_would_take_too_long_is_not_swept(monkeypatch: pytest.MonkeyPatch) -> None:
    """Its levels stay, its sweep is left out with a note; the ribbon's own is kept."""
    monkeypatch.setattr(cases_module, "SLOW_SWEEP", 0.0)
    result = run_study(file_of(Case("square", 2, 6, 1, -1), disorder={"strength": 1.0}))
    swept = {case.name: case.response is not None for case in result.cases}
    assert swept == {"ribbon": True, "plain": True, "double": False}
    assert any(
        "the flux sweep of the double cover (24 sites) was left out" in n for n in result.notes
    )
    assert result.controls[1].levels.m == 24
    assert passed(result)


def test_totals_out_of_reach_are_left_out(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without symmetry and memory: levels along the flux, no totals, a note."""
    monkeypatch.setattr("ribbon.analysis.flux.fits_dense", lambda *_, **__: False)
    file = file_of(
        Case("square", 2, 9, 1, -1),
        disorder={"strength": 1.0},
        control={"compare": []},
        levels={"count": 3},
    )
    result = run_study(file)
    response = result.ribbon.response
    assert response is not None
    assert response.totals is None
    assert result.ribbon.harmonics is None
    assert any("totals of the one half twist are left out" in note for note in result.notes)


def test_a_job_larger_than_memory_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """Before it starts, with what would fit."""
    real = forecast_module.available_bytes()
    file = file_of(Case("square", 2, 6, 1, -1), disorder={"strength": 1.0})
    for little, advice in ((100, "levels.count"), (20_000, "sweep.flux.points")):
        monkeypatch.setattr(forecast_module, "available_bytes", lambda n=little: n)
        with pytest.raises(TooLarge, match=f"would take about .*{advice}"):
            run_study(file)
    monkeypatch.setattr(forecast_module, "available_bytes", lambda: real)
    assert passed(run_study(file))


def test_states_are_kept_up_to_a_size(monkeypatch: pytest.MonkeyPatch) -> None:
    """Beyond it levels come alone; the certificate is checked either way."""
    file = file_of(Case("square", 2, 6, 1, -1), levels={"all": True}, control={"compare": []})
    assert run_levels(file).ribbon.levels.states is not None
    monkeypatch.setattr(cases_module, "MOST_KEPT", 16)
    without = run_levels(file)
    assert without.ribbon.levels.states is None
    names = {check.name for check in without.checks}
    assert "count certificate" in names
    assert "largest residual" not in names


# --- what is told besides ------------------------------------------------------------------------


def test_progress_names_every_stage() -> None:
    """Stages in words, and fractions from 0 to 1 along a sweep."""
    told: list[tuple[str, float | None]] = []

    def progress(stage: str, fraction: float | None = None) -> None:
        told.append((stage, fraction))

    run_study(file_of(Case("square", 2, 6, 1, -1)), progress=progress)
    stages = [stage for stage, _ in told]
    assert stages[0] == "building the ribbon"
    assert stages[-1] == "checks"
    for label in ("one half twist", "plain ring", "double cover"):
        assert f"levels of the {label}" in stages
        fractions = [f for stage, f in told if stage == f"flux sweep of the {label}" and f]
        np.testing.assert_allclose(fractions, np.arange(1, 6) / 5)


def test_what_a_result_remembers() -> None:
    """Times of each stage, versions, seed, title, the file itself."""
    file = file_of(Case("square", 2, 6, 1, -1), title="A ring", disorder={"seed": 5})
    result = run_study(file)
    assert (result.title, result.file) == ("A ring", file)
    assert set(result.seconds) >= {"build", "levels, ribbon", "flux, double", "checks"}
    assert all(value >= 0 for value in result.seconds.values())
    assert result.provenance["seed"] == 5
    assert set(result.provenance) >= {"halftwist", "python", "packages", "written"}
    assert result.provenance["packages"]["numpy"] == np.__version__


def test_the_same_file_gives_the_same_numbers() -> None:
    """Bit for bit, random sites and energies included."""
    file = file_of(
        Case("honeycomb-zigzag", 3, 3.5, 1, -1),
        disorder={"strength": 1.0, "vacancies": 0.1, "seed": 3},
    )
    one, two = run_study(file), run_study(file)
    for first, second in zip(one.cases, two.cases, strict=True):
        np.testing.assert_array_equal(first.levels.energies, second.levels.energies)
        assert first.response is not None
        assert second.response is not None
        np.testing.assert_array_equal(first.response.slope, second.response.slope)
        np.testing.assert_array_equal(first.response.branch, second.response.branch)
    assert [check.value for check in one.checks] == [check.value for check in two.checks]


def test_the_density_of_a_large_disordered_ring_comes_from_moments() -> None:
    """Too many sites for a dense spectrum: the whole band all the same, with its error."""
    tables = {
        "ribbon": {"lattice": "square", "rows": 4, "length": 700, "orbital": "s"},
        "disorder": {"strength": 1.0},
        "levels": {"count": 4, "broadening": 0.2},
        "control": {"compare": []},
        "sweep": {"flux": {"points": 2}},
    }
    plan = build(RibbonFile.model_validate({**tables, "hopping": {"unit": "t"}}))
    case = with_density(plan, cases_module.levels_case(plan, plan.model))
    found = case.density
    assert found is not None
    assert (found.method, found.complete) == ("moments", True)
    whole = np.trapezoid(found.density, found.energies)
    assert whole == pytest.approx(2800, rel=1e-3)
    fine = with_density(replace_broadening(plan, 1e-9), case).density
    assert fine is not None
    assert (fine.method, fine.complete) == ("levels", False)


def replace_broadening(plan: Any, width: float) -> Any:
    """The same plan with another broadening."""
    levels = plan.file.levels.model_copy(update={"broadening": width})
    return replace(plan, file=plan.file.model_copy(update={"levels": levels}))


def test_a_method_that_does_not_fit_a_control_is_not_forced_on_it() -> None:
    """The open strip has no momentum: asked for symmetry, the ribbon gets it and the strip not."""
    tables = {
        "ribbon": {"lattice": "square", "rows": 3, "length": 6, "orbital": "s"},
        "levels": {"method": "symmetry"},
        "control": {"compare": ["open"]},
        "sweep": {"flux": {"points": 2}},
    }
    result = run_study(RibbonFile.model_validate(tables))
    ways = [case.levels.certificate.method for case in result.cases]
    assert ways == ["symmetry", "dense"]
    with pytest.raises(BadInput, match="does not apply"):
        run_study(RibbonFile.model_validate({**tables, "disorder": {"strength": 1.0}}))
