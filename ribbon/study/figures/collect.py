"""All figures of a study, and the numbers that each shows."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure

from ribbon.study.figures.continuum import draw_continuum, errors_table
from ribbon.study.figures.currents import draw_currents
from ribbon.study.figures.density import draw_density, per_site_table
from ribbon.study.figures.edge_state import draw_edge_state
from ribbon.study.figures.edges import draw_edges, ribbon_momentum
from ribbon.study.figures.flux import branch_lines, draw_flux
from ribbon.study.figures.levels import draw_levels, level_window
from ribbon.study.figures.ribbon import draw_ribbon
from ribbon.study.figures.shift import draw_shift
from ribbon.study.figures.space import draw_space, space_table
from ribbon.study.figures.unrolled import content_table, edge_state_table
from ribbon.study.state_tables import edges_table, histogram_table
from ribbon.study.tables import (
    Table,
    harmonics_table,
    levels_table,
    shift_table,
    sites_table,
    totals_table,
)

if TYPE_CHECKING:
    from ribbon.study.result import Case, StudyResult

__all__ = ["draw_all", "figure_data"]


def draw_all(result: StudyResult) -> dict[str, Figure]:
    """Every figure the study has numbers for, under the name of its file, in order."""
    ribbon = result.ribbon
    figures = {"ribbon": draw_ribbon(ribbon)}
    if ribbon.hamiltonian.ring is not None:
        figures["space"] = draw_space(ribbon)
    figures["levels"] = draw_levels(result.cases)
    if ribbon.response is not None:
        figures["flux"] = draw_flux(result.cases)
        if ribbon.response.totals is not None:
            figures["currents"] = draw_currents(result.cases)
    control = result.nearest_control
    if control is not None:
        figures["shift"] = draw_shift(ribbon, control)
    if _has_edge_states(ribbon):
        figures["edge-state"] = draw_edge_state(ribbon)
        figures["edges"] = draw_edges(result.cases)
    if ribbon.density is not None:
        figures["density"] = draw_density(result.cases)
    if ribbon.continuum is not None and ribbon.continuum.level.size:
        figures["continuum"] = draw_continuum(ribbon)
    return figures


def _has_edge_states(case: Case) -> bool:
    """True where there is a state to show at the edge (a window may hold no level)."""
    return case.edges is not None and case.edges.level.size > 0 and case.levels.states is not None


def figure_data(result: StudyResult) -> dict[str, Table]:
    """The numbers behind the figures, under the same names.

    Harmonics, the momentum content along the edge and the histogram have names of their own.
    """
    unit = result.ribbon.levels.unit
    control = result.nearest_control
    data = {
        "ribbon": sites_table(result.ribbon),
        "levels": _stacked("levels", result.cases, (levels_table(c, unit) for c in result.cases)),
    }
    swept = [case for case in result.cases if case.response is not None]
    summed = [c for c in swept if c.response is not None and c.response.totals is not None]
    barred = [case for case in swept if case.harmonics is not None]
    if swept:
        data["flux"] = _stacked("flux", swept, (_lines(case, swept[0]) for case in swept))
    if summed:
        data["currents"] = _stacked("currents", summed, (totals_table(c, unit) for c in summed))
    if barred:
        data["harmonics"] = _stacked(
            "harmonics", barred, (harmonics_table(c, unit) for c in barred)
        )
    if control is not None:
        data["shift"] = shift_table(result.ribbon, control)
    return data | _state_data(result)


def _state_data(result: StudyResult) -> dict[str, Table]:
    """The numbers behind the figures of states, of the density and of the continuum."""
    ribbon, data = result.ribbon, {}
    if ribbon.hamiltonian.ring is not None:
        data["space"] = space_table(ribbon)
    if _has_edge_states(ribbon):
        data["edge-state"] = edge_state_table(ribbon)
        data["edge-content"] = content_table(ribbon)
        edged = [case for case in result.cases if case.edges is not None and case.edges.level.size]
        data["edges"] = _stacked("edges", edged, (_edges(case, ribbon) for case in edged))
    if ribbon.density is not None:
        dense = [case for case in result.cases if case.density is not None]
        data["density"] = _stacked("density", dense, map(per_site_table, dense))
        data["histogram"] = histogram_table(ribbon)
    if ribbon.continuum is not None and ribbon.continuum.level.size:
        data["continuum"] = errors_table(ribbon)
    return data


def _stacked(name: str, cases: Sequence[Case], tables: Iterable[Table]) -> Table:
    """Tables one below the other, with the case in the first column."""
    parts = list(tables)
    names = list(dict.fromkeys(column for part in parts for column in part.columns))
    columns: dict[str, Any] = {
        "case": [
            case.name for case, part in zip(cases, parts, strict=True) for _ in range(part.rows)
        ]
    }
    for column in names:
        columns[column] = [
            value for part in parts for value in part.columns.get(column, [None] * part.rows)
        ]
    units = {key: unit for part in parts for key, unit in part.units.items()}
    return Table(name, columns, units, parts[0].about)


def _lines(case: Case, first: Case) -> Table:
    """The points of the branches that the flux figure shows."""
    assert case.response is not None
    low, high = level_window(first)
    names, lines = branch_lines(case.response)
    seen = (lines > low) & (lines < high)
    branch, place = np.nonzero(seen)
    flux = np.asarray(case.response.flux)[place]
    return Table(
        f"flux-{case.name}",
        {
            "flux": flux,
            "ribbon_flux": flux / case.flux_scale,
            "branch": names[branch],
            "energy": lines[branch, place],
        },
        {"flux": "h/e", "ribbon_flux": "h/e", "energy": case.levels.unit},
        "Levels against flux, as drawn",
    )


def _edges(case: Case, ribbon: Case) -> Table:
    """Edge states of a case, with the wave number as the figure shows it."""
    table = edges_table(case)
    return Table(
        table.name,
        {**table.columns, "ribbon_momentum": ribbon_momentum(case, ribbon)},
        {**table.units, "ribbon_momentum": "2π/L of the ribbon"},
        table.about,
    )
