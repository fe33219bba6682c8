"""All figures of a study, and the numbers that each shows."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.figure import Figure

from ribbon.study.figures.currents import draw_currents
from ribbon.study.figures.flux import branch_lines, draw_flux
from ribbon.study.figures.levels import draw_levels, level_window
from ribbon.study.figures.ribbon import draw_ribbon
from ribbon.study.figures.shift import draw_shift
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
    """Every figure the study has numbers for, under the name of its file."""
    figures = {"ribbon": draw_ribbon(result.ribbon), "levels": draw_levels(result.cases)}
    if result.ribbon.response is not None:
        figures["flux"] = draw_flux(result.cases)
        if result.ribbon.response.totals is not None:
            figures["currents"] = draw_currents(result.cases)
    control = result.nearest_control
    if control is not None:
        figures["shift"] = draw_shift(result.ribbon, control)
    return figures


def figure_data(result: StudyResult) -> dict[str, Table]:
    """The numbers behind the figures, under the same names (the harmonics under their own)."""
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
