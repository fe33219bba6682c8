"""One case of a study: levels, gap, topology and flux response of one model."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import Any

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
from ribbon.study.build import Model, Plan
from ribbon.study.forecast import (
    MOST_KEPT,
    Forecast,
    forecast_levels,
    forecast_sweep,
    levels_wanted,
    refuse_if_too_large,
)
from ribbon.study.result import Case

__all__ = ["Progress", "levels_case", "levels_with_states", "threads_for", "with_sweep"]

Progress = Callable[..., None]
"""Called with the name of a stage and, where known, the fraction of it that is done."""

SLOW_SWEEP = 120.0
"""A double cover whose sweep is forecast to take longer (seconds) is left without one."""


def levels_case(plan: Plan, model: Model) -> Case:
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
    with threads_for(hamiltonian):
        levels = levels_with_states(hamiltonian, window, flux)
        electrons = _electron_number(plan, model, flux)
        gap, other, doubts = _gaps(plan, model, electrons, flux)
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
        doubts=doubts,
    )


def _gaps(
    plan: Plan, model: Model, electrons: float, flux: float
) -> tuple[Gap, Gap | None, tuple[str, ...]]:
    """The gap, that with the other orbital sign, and what could not be certified of them."""
    spin = plan.filling.spin
    try:
        gap = find_gap(model.hamiltonian, electrons=electrons, spin=spin, flux=flux)
        return gap, _other_gap(plan, model, electrons, flux), ()
    except NotCertified as doubt:
        # the levels of the window stand all the same
        nan = float("nan")
        unknown = Gap(
            lower=nan, upper=nan, gap=nan, lower_index=-1, upper_index=-1, open_shell=False
        )
        return unknown, None, (str(doubt),)


def levels_with_states(hamiltonian: Hamiltonian, window: Any, flux: float) -> Levels:
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


def with_sweep(plan: Plan, model: Model, case: Case, progress: Progress) -> tuple[Case, list[str]]:
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
    with threads_for(model.hamiltonian):
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


@contextmanager
def threads_for(hamiltonian: Hamiltonian) -> Iterator[None]:
    """One BLAS thread for small blocks, which two slow down; all of them for large dense work."""
    clean = blocks_of(hamiltonian) is not None
    dense = not clean and hamiltonian.n >= 1000 and fits_dense(hamiltonian, 0.25, states=True)
    with threadpool_limits(limits=None if dense else 1, user_api="blas"):
        yield
