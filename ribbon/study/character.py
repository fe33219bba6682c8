"""What else a study says of a case: edge states, density of states, continuum comparison."""

from __future__ import annotations

from dataclasses import replace

from ribbon.analysis import (
    compare_continuum,
    continuum_shift,
    density_of_states,
    edge_states,
    levels_density,
)
from ribbon.errors import BadInput, NotCertified, TooLarge
from ribbon.study.build import Plan
from ribbon.study.cases import threads_for
from ribbon.study.result import Case

__all__ = ["with_continuum", "with_density", "with_edges", "with_shift"]


def with_edges(plan: Plan, case: Case) -> Case:
    """Add the edge states. Raises `TooLarge` where the states were too large to keep."""
    if case.levels.states is None:
        raise TooLarge(
            f"edge states of the {case.label}: the states of {case.levels.m:,} levels on "
            f"{case.network.n:,} sites are too large to keep; a smaller levels.count would fit"
        )
    found = edge_states(case.hamiltonian, case.levels, within=plan.file.edges.within_nm)
    return replace(case, edges=found)


def with_density(plan: Plan, case: Case) -> Case:
    """Add the density of states: from all levels where they are cheap, else from moments.

    Where the broadening is too fine for moments, the window's levels alone are shown.
    """
    hamiltonian, width = case.hamiltonian, plan.file.levels.broadening
    try:
        with threads_for(hamiltonian):
            found = density_of_states(hamiltonian, broadening=width, flux=case.flux)
    except TooLarge:
        if not case.levels.m:
            return case
        found = levels_density(case.levels, broadening=width, sites=hamiltonian.n)
    return replace(case, density=found)


def with_continuum(plan: Plan, case: Case) -> Case:
    """Add the continuum comparison.

    Raises `BadInput` where there is no formula for this ring, `NotCertified` where its levels
    are not those of the closed form.
    """
    found = compare_continuum(
        case.hamiltonian, levels=case.levels, refinements=plan.file.continuum.refinements
    )
    return replace(case, continuum=found)


def with_shift(ribbon: Case, control: Case) -> Case:
    """Pair the levels of the ribbon with those of its plain control, mode by mode."""
    if control.name != "plain" or ribbon.continuum is None or control.continuum is None:
        return control
    try:
        found = continuum_shift(ribbon.continuum, ribbon.hamiltonian, control.hamiltonian)
    except (BadInput, NotCertified):
        return control
    return replace(control, continuum_shift=found)
