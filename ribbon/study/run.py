"""Running a study: the ribbon, its controls, the checks."""

from __future__ import annotations

import platform
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from datetime import UTC, datetime
from importlib import metadata
from math import isnan
from typing import TYPE_CHECKING, Any

from threadpoolctl import threadpool_limits

from ribbon.analysis import (
    FluxResponse,
    Gap,
    Harmonics,
    Levels,
    count_below,
    find_gap,
    half_quantum,
    harmonics,
    sweep_flux,
)
from ribbon.analysis.exact import blocks_of, fits_dense
from ribbon.analysis.levels import tolerance
from ribbon.errors import BadInput, NotCertified
from ribbon.hopping import Hamiltonian, assemble
from ribbon.lattice import certify_topology, reseam
from ribbon.study.build import Model, Plan, build
from ribbon.study.checks import GENERIC_FLUX, check_levels, check_ring, check_structure
from ribbon.study.controls import build_controls
from ribbon.study.forecast import (
    MOST_KEPT,
    Forecast,
    forecast_levels,
    forecast_sweep,
    levels_wanted,
    refuse_if_too_large,
)
from ribbon.study.result import Case, Check, StudyResult

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["Progress", "run_flux", "run_levels", "run_study"]

Progress = Callable[..., None]
"""Called with the name of a stage and, where known, the fraction of it that is done."""

SLOW_SWEEP = 120.0
"""A double cover whose sweep is forecast to take longer (seconds) is left without one."""


def run_study(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """Everything the file asks for: the ribbon beside its controls, and the checks.

    Raises `BadInput` for what cannot be built, `TooLarge` where the job does not fit, and
    `NotCertified` where a window cannot be completed.
    """
    return _run(file, progress or _silent, sweep=True, controls=True, scope="study")


def run_levels(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The levels of the ribbon alone, with the checks that concern them."""
    return _run(file, progress or _silent, sweep=False, controls=False, scope="levels")


def run_flux(file: RibbonFile, *, progress: Progress | None = None) -> StudyResult:
    """The flux response of the ribbon alone, with the checks that concern it."""
    return _run(file, progress or _silent, sweep=True, controls=False, scope="flux")


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


def _run(
    file: RibbonFile, progress: Progress, *, sweep: bool, controls: bool, scope: str
) -> StudyResult:
    clock = _Clock()
    progress("building the ribbon")
    with clock.stage("build"):
        plan = build(file)
        models, control_notes = build_controls(plan) if controls else ((), ())
    notes = [*plan.notes, *control_notes]
    cases: list[Case] = []
    failed: list[Check] = []
    for model in (plan.model, *models):
        with clock.stage(f"levels, {model.name}"):
            progress(f"levels of the {model.label}")
            try:
                case = _levels_case(plan, model)
            except NotCertified as doubt:
                if not cases:
                    raise
                failed.append(_doubtful(f"levels, {model.label}", doubt))
                continue
        if sweep and model.hamiltonian.ring is not None:
            with clock.stage(f"flux, {model.name}"):
                try:
                    case, said = _with_sweep(plan, model, case, progress)
                except NotCertified as doubt:
                    said, failed = [], [*failed, _doubtful(f"flux sweep, {model.label}", doubt)]
                notes += said
        cases.append(case)
    with clock.stage("checks"):
        progress("checks")
        checks = (*_checks(plan, cases[0], scope), *failed)
    notes += _remarks(plan, cases[0])
    if scope == "levels":
        notes.append(_gaps(cases[0]))
    return StudyResult(
        title=file.heading,
        file=file,
        cases=tuple(cases),
        checks=checks,
        notes=tuple(notes),
        seconds=clock.seconds,
        provenance=_provenance(file),
    )


def _doubtful(name: str, doubt: NotCertified) -> Check:
    """A failed check in place of an answer that could not be certified."""
    return Check(name=name, passed=False, value=float("inf"), limit=0.0, note=str(doubt))


def _levels_case(plan: Plan, model: Model) -> Case:
    """Levels of the window, gap and topology of one model at the file's flux."""
    hamiltonian = model.hamiltonian
    on_ring = hamiltonian.ring is not None
    flux = plan.file.field.flux * model.flux_scale if on_ring else 0.0
    window = plan.window_for(model)
    refuse_if_too_large(
        forecast_levels(hamiltonian, window, flux),
        f"the spectrum of the {model.label} ({hamiltonian.n:,} sites)",
        "a smaller ribbon, or on a disordered one a smaller levels.count, would fit",
    )
    with _threads(hamiltonian):
        levels = _with_states(hamiltonian, window, flux)
        electrons = _electron_number(plan, model, flux)
        gap = find_gap(hamiltonian, electrons=electrons, spin=plan.filling.spin, flux=flux)
        other = _other_gap(plan, model, electrons, flux)
    return Case(
        name=model.name,
        label=model.label,
        network=hamiltonian.network,
        hamiltonian=hamiltonian,
        flux=flux,
        levels=levels,
        gap=gap,
        other_gap=other,
        topology=certify_topology(hamiltonian.network),
        electrons=electrons,
        spin=plan.filling.spin,
        flux_scale=model.flux_scale,
    )


def _with_states(hamiltonian: Hamiltonian, window: Any, flux: float) -> Levels:
    """Levels, with their states where these fit into a file one would like to keep."""
    wanted = levels_wanted(hamiltonian, window)
    try:
        if blocks_of(hamiltonian) is not None:
            # shells may hold many more levels than were asked for; energies alone are cheap
            wanted = window.find(hamiltonian, flux=flux).m
        states = hamiltonian.n * wanted * 16 <= MOST_KEPT
        found: Levels = window.find(hamiltonian, flux=flux, states=states)
    except NotCertified as doubt:
        if not isinstance(doubt.partial, Levels):
            raise
        return doubt.partial  # its certificate is incomplete, and the check of it fails
    return found


def _electron_number(plan: Plan, model: Model, flux: float) -> float:
    filling = plan.filling_for(model)
    number = filling.number(model.hamiltonian.n)
    if number is not None:
        return number
    assert filling.chemical_potential is not None
    return _electrons_at(model.hamiltonian, filling.chemical_potential, filling.spin, flux)


def _electrons_at(hamiltonian: Hamiltonian, potential: float, spin: int, flux: float) -> float:
    """Electrons at a chemical potential and 0 K; a level that stands on it is half filled."""
    below = count_below(hamiltonian, potential, flux=flux)
    upto = count_below(hamiltonian, potential + 2 * tolerance(hamiltonian), flux=flux)
    return spin * (below + upto) / 2


def _other_gap(plan: Plan, model: Model, electrons: float, flux: float) -> Gap | None:
    """The gap with the other orbital sign, for a one-sided ring."""
    ring = model.hamiltonian.ring
    if model.name != "ribbon" or ring is None or not ring.flips:
        return None
    other = reseam(ring, orbital="s" if ring.orbital == "pz" else "pz")
    energies = model.hamiltonian.site_energies
    hopping = replace(model.hamiltonian.hopping, site_energy=energies, disorder=0.0)
    partner = assemble(other, hopping)
    potential = plan.filling.chemical_potential
    if potential is not None:  # the reservoir sets the level, not the number
        electrons = _electrons_at(partner, potential, plan.filling.spin, flux)
    return find_gap(partner, electrons=electrons, spin=plan.filling.spin, flux=flux)


def _with_sweep(plan: Plan, model: Model, case: Case, progress: Progress) -> tuple[Case, list[str]]:
    """Add the flux response, its harmonics and the half-quantum test to a case."""
    fluxes = plan.fluxes * model.flux_scale
    expected = forecast_sweep(model.hamiltonian, fluxes, plan.window_for(model))
    if model.name == "double" and expected.seconds > SLOW_SWEEP:
        return case, [_left_out(model, expected)]
    refuse_if_too_large(
        expected,
        f"the flux sweep of the {model.label} ({fluxes.size:,} fluxes)",
        "fewer sweep.flux.points or a narrower levels window would fit",
    )
    stage = f"flux sweep of the {model.label}"
    if expected.seconds > 1:
        progress(f"{stage}: about {expected.seconds:.0f} s, {expected.memory}")
    with _threads(model.hamiltonian):
        response = sweep_flux(
            model.hamiltonian,
            fluxes,
            window=plan.window_for(model),
            filling=plan.filling_for(model),
            progress=lambda done, of: progress(stage, done / of),
        )
        half = half_quantum(model.hamiltonian, response.totals) if _cheap(model) else None
    notes = []
    if response.totals is None:
        notes.append(
            f"totals of the {model.label} are left out: they need the complete spectrum of "
            f"{model.hamiltonian.n:,} sites without symmetry, which does not fit"
        )
    # harmonics of the cover would count its own flux quanta, half of those of the ribbon
    found = _harmonics(response) if model.flux_scale == 1.0 else None
    return replace(case, response=response, harmonics=found, half=half), notes


def _cheap(model: Model) -> bool:
    """True where two more complete spectra cost little."""
    clean = blocks_of(model.hamiltonian) is not None
    return clean or (
        model.hamiltonian.n <= 2500 and fits_dense(model.hamiltonian, 0.25, states=False)
    )


def _left_out(model: Model, expected: Forecast) -> str:
    return (
        f"the flux sweep of the {model.label} ({model.hamiltonian.n:,} sites) was left out: it "
        f"would take about {expected.seconds / 60:.0f} minutes; fewer sweep.flux.points, a "
        "smaller ribbon or one without disorder brings it back"
    )


def _harmonics(response: FluxResponse) -> Harmonics | None:
    if response.totals is None:
        return None
    try:
        return harmonics(response.totals)
    except BadInput:
        return None


def _checks(plan: Plan, case: Case, scope: str) -> Iterator[Check]:
    """Checks of the ribbon at its own flux and at a generic one."""
    hamiltonian = case.hamiltonian
    if scope == "study":
        yield from check_structure(plan.ring, case.topology)
    with _threads(hamiltonian):
        fluxes = [case.flux] if abs(case.flux - GENERIC_FLUX) < 1e-9 else [case.flux, GENERIC_FLUX]
        for flux in fluxes:
            yield from check_ring(hamiltonian, flux, near=plan.window.near)
        yield from check_levels(hamiltonian, case.levels)


def _remarks(plan: Plan, case: Case) -> list[str]:
    """What a reader should be told about the numbers."""
    notes = []
    if case.topology.components > 1:
        notes.append(f"the vacancies leave {case.topology.components} detached pieces")
    if case.response is not None and case.harmonics is None and case.response.totals is not None:
        notes.append("no harmonics: the sweep does not cover whole flux quanta in equal steps")
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


def _gaps(case: Case) -> str:
    """The gap in a line, with that of the other orbital sign where there is one."""
    unit = case.levels.unit

    def size(gap: Gap) -> str:
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


@contextmanager
def _threads(hamiltonian: Hamiltonian) -> Iterator[None]:
    """One BLAS thread for small blocks, which two slow down; all of them for large dense work."""
    clean = blocks_of(hamiltonian) is not None
    dense = not clean and hamiltonian.n >= 1000 and fits_dense(hamiltonian, 0.25, states=True)
    with threadpool_limits(limits=None if dense else 1, user_api="blas"):
        yield
