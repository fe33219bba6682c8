"""Running a study: the ribbon, its controls, the checks."""

from __future__ import annotations

import platform
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib import metadata
from math import isnan
from typing import TYPE_CHECKING, Any, Literal

from ribbon.analysis import Gap, Levels
from ribbon.analysis.continuum import MEANT_FOR
from ribbon.analysis.spectrum import choice
from ribbon.errors import BadInput, NotCertified
from ribbon.study.build import Model, Plan, build
from ribbon.study.cases import Progress, levels_case, levels_with_states, threads_for, with_sweep
from ribbon.study.character import with_continuum, with_density, with_edges, with_shift
from ribbon.study.checks import GENERIC_FLUX, check_levels, check_ring, check_structure
from ribbon.study.controls import build_controls
from ribbon.study.result import Case, Check, StudyResult

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["Progress", "run_continuum", "run_edges", "run_flux", "run_levels", "run_study"]

Scope = Literal["study", "levels", "flux", "edges", "continuum"]


def run_study(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """Everything the file asks for: the ribbon beside its controls, and the checks.

    Raises `BadInput` for what cannot be built, `TooLarge` where the job does not fit, and
    `NotCertified` where a window cannot be completed.
    """
    return _run(file, progress or _silent, "study")


def run_levels(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The levels of the ribbon alone, with the checks that concern them."""
    return _run(file, progress or _silent, "levels")


def run_flux(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The flux response of the ribbon alone, with the checks that concern it."""
    return _run(file, progress or _silent, "flux")


def run_edges(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The edge states of the ribbon alone. Raises `TooLarge` where its states do not fit."""
    return _run(file, progress or _silent, "edges")


def run_continuum(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The continuum comparison of the ribbon alone.

    Raises `BadInput` where there is no formula for it.
    """
    return _run(file, progress or _silent, "continuum")


def _silent(stage: str, fraction: float | None = None) -> None:
    """Show nothing."""


class _Clock:
    """Seconds spent in every stage."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Time one stage."""
        start = time.perf_counter()
        yield
        self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - start


def _run(file: RibbonFile, progress: Progress, scope: Scope) -> StudyResult:
    clock = _Clock()
    progress("building the ribbon")
    with clock.stage("build"):
        plan = build(file)
        models, control_notes = build_controls(plan) if scope == "study" else ((), ())
    told = _Told(notes=[*plan.notes, *control_notes], failed=[])
    cases: list[Case] = []
    for model in (plan.model, *models):
        with clock.stage(f"levels, {model.name}"):
            progress(f"levels of the {model.label}")
            try:
                case = levels_case(plan, model)
            except NotCertified as doubt:
                if not cases:
                    raise
                told.failed.append(_doubtful(f"levels, {model.label}", doubt))
                continue
        told.failed.extend(_doubtful(f"gap, {model.label}", doubt) for doubt in case.doubts)
        if scope in {"study", "flux"} and model.hamiltonian.ring is not None:
            with clock.stage(f"flux, {model.name}"):
                case = _swept(plan, model, case, told, progress)
        with clock.stage(f"edges, continuum, density, {model.name}"):
            case = _described(plan, case, scope, told)
        cases.append(case)
    cases = [cases[0], *(with_shift(cases[0], control) for control in cases[1:])]
    with clock.stage("checks"):
        progress("checks")
        checks = (*_checks(plan, cases[0], scope), *told.failed)
    notes = [*told.notes, *_remarks(plan, cases[0])]
    if scope == "levels":
        notes += [_method(plan, cases[0]), _gaps(cases[0])]
    return StudyResult(
        title=file.heading,
        file=file,
        cases=tuple(cases),
        checks=checks,
        notes=tuple(notes),
        seconds=clock.seconds,
        provenance=_provenance(file),
    )


@dataclass(frozen=True)
class _Told:
    """What came up on the way: remarks for the reader, and checks that failed."""

    notes: list[str]
    failed: list[Check]


def _swept(plan: Plan, model: Model, case: Case, told: _Told, progress: Progress) -> Case:
    """The case with its flux response, or a failed check in its place."""
    try:
        case, said = with_sweep(plan, model, case, progress)
    except NotCertified as doubt:
        told.failed.append(_doubtful(f"flux sweep, {model.label}", doubt))
        return case
    told.notes.extend(said)
    return case


def _described(plan: Plan, case: Case, scope: Scope, told: _Told) -> Case:
    """The case with edges, continuum and density; in a study what cannot be is noted."""
    if scope == "edges":
        return with_edges(plan, case)
    if scope == "continuum":
        return with_continuum(plan, case)
    if scope != "study":
        return case
    for work in (with_edges, with_density, with_continuum):
        if work is with_continuum and case.hamiltonian.ring is None:
            continue
        try:
            case = work(plan, case)
        except BadInput as problem:
            if case.name == "ribbon" or work is not with_continuum:
                told.notes.append(f"left out: {problem}")
        except NotCertified as doubt:
            told.failed.append(_doubtful(f"continuum, {case.label}", doubt))
    return case


def _doubtful(name: str, doubt: object) -> Check:
    """A failed check in place of an answer that could not be certified."""
    return Check(name=name, passed=False, value=float("inf"), limit=0.0, note=str(doubt))


def _checks(plan: Plan, case: Case, scope: Scope) -> Iterator[Check]:
    """Checks of the ribbon at its own flux and at a generic one."""
    hamiltonian = case.hamiltonian
    if scope == "study":
        yield from check_structure(plan.ring, case.topology)
    with threads_for(hamiltonian):
        fluxes = [case.flux] if abs(case.flux - GENERIC_FLUX) < 1e-9 else [case.flux, GENERIC_FLUX]
        for flux in fluxes:
            yield from check_ring(hamiltonian, flux, near=plan.window.near)
            if scope == "study":
                yield from check_levels(hamiltonian, _window_at(plan, case, flux))
        if scope != "study":
            yield from check_levels(hamiltonian, case.levels)


def _window_at(plan: Plan, case: Case, flux: float) -> Levels:
    """The levels of the window at a flux: those of the case at its own."""
    if flux == case.flux:
        return case.levels
    return levels_with_states(case.hamiltonian, plan.window, flux)


def _remarks(plan: Plan, case: Case) -> list[str]:
    """What a reader should be told about the numbers."""
    notes = []
    if case.topology.components > 1:
        notes.append(f"the vacancies leave {case.topology.components} detached pieces")
    if case.response is not None and case.harmonics is None and case.response.totals is not None:
        notes.append("no harmonics: the sweep does not cover whole flux quanta in equal steps")
    if case.continuum is not None and case.levels.m and not case.continuum.holds.any():
        notes.append(
            "no level of the window lies where the continuum formula is meant to hold (|k| a up "
            f"to {MEANT_FOR}); levels.near = {case.continuum.zero:.6g} asks for those that do"
        )
    if case.levels.m == 0:
        edges = case.levels.certificate
        notes.append(f"the window from {edges.lower:g} to {edges.upper:g} holds no level")
    if plan.ring.half_twists and not plan.ring.flips:
        notes.append(
            "an even number of half twists gives the levels of the plain ring in this flat model"
        )
    if plan.filling.temperature > 0 and plan.filling.chemical_potential is None:
        notes.append(
            "at a temperature above 0 K the chemical potential is solved for the number of "
            "electrons at every flux; this is not the canonical ensemble"
        )
    return notes


def _method(plan: Plan, case: Case) -> str:
    """Which way the levels were found, and why, in a line."""
    window = plan.window
    _, why = choice(case.hamiltonian, whole=window.all, method=window.method)
    return f"method: {case.levels.certificate.method} ({why})"


def _gaps(case: Case) -> str:
    """The gap in a line, with that of the other orbital sign where there is one."""
    unit = case.levels.unit

    def size(gap: Gap) -> str:
        if not gap.known:
            return "not certified"
        if isnan(gap.gap):
            return "none (all levels full)" if isnan(gap.upper) else "none (all levels empty)"
        return "none (open shell)" if gap.open_shell else f"{gap.gap:.9g} {unit}"

    ring = case.hamiltonian.ring
    own = "" if ring is None or case.other_gap is None else f' with orbital "{ring.orbital}"'
    other = "" if case.other_gap is None else f", with the other sign {size(case.other_gap)}"
    return f"gap at {case.electrons:g} electrons{own}: {size(case.gap)}{other}"


def _provenance(file: RibbonFile) -> dict[str, Any]:
    packages = ("numpy", "scipy", "networkx", "pydantic", "matplotlib", "xarray", "h5netcdf")
    return {
        "halftwist": metadata.version("halftwist"),
        "python": platform.python_version(),
        "packages": {name: metadata.version(name) for name in packages},
        "seed": file.disorder.seed,
        "written": datetime.now(UTC).isoformat(timespec="seconds"),
    }
