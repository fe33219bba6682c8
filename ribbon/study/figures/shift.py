"""What moved: the levels of the ribbon minus those of a control."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.analysis.levels import tolerance
from ribbon.study.figures.look import (
    FULL,
    QUIET,
    RULE,
    label_values,
    look_of,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.tables import shift_table

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["draw_shift"]


def draw_shift(case: Case, control: Case, *, most: int = 24) -> Figure:
    """Draw where the levels nearest to the gap stand in both, and how far each moved.

    Levels are paired by their place counted from the frontier: the highest filled one of the
    ribbon with that of the control, and so on in both directions.
    """
    table = shift_table(case, control)
    place = np.asarray(table.columns["from_gap"])
    near = np.sort(np.argsort(np.abs(place), kind="stable")[:most])
    here, there, moved, place = (
        np.asarray(table.columns[name])[near]
        for name in ("energy", "control_energy", "shift", "from_gap")
    )
    with styled():
        figure = new_figure(FULL, 84)
        left, right = figure.subplots(1, 2, width_ratios=[1, 1.35])
        _draw_pairs(left, (case, control), here, there)
        _draw_shifts(right, case, place, moved)
    return figure


def _draw_pairs(
    axes: Axes, cases: tuple[Case, Case], here: NDArray[np.float64], there: NDArray[np.float64]
) -> None:
    own, other = (look_of(case.name) for case in cases)
    for energy, before in zip(here, there, strict=True):
        axes.plot([0.3, 0.7], [before, energy], color=RULE, lw=0.7, zorder=1)
    axes.hlines(there, 0.0, 0.3, color=other.colour, lw=1.2)
    axes.hlines(here, 0.7, 1.0, color=own.colour, lw=1.2)
    axes.set_xticks([0.15, 0.85], [cases[1].label, cases[0].label])
    axes.tick_params(axis="x", length=0)
    axes.spines["bottom"].set_visible(False)
    largest = float(np.abs([here, there]).max(initial=0.0))
    label_values(axes.yaxis, "energy", largest=largest, unit=cases[0].levels.unit)
    panel_title(axes, "levels in both")


def _draw_shifts(
    axes: Axes, case: Case, place: NDArray[np.int64], moved: NDArray[np.float64]
) -> None:
    look = look_of(case.name)
    filled = place < 0
    axes.vlines(place, 0, moved, color=RULE, lw=1.0, zorder=1)
    for chosen, face, name in ((filled, look.colour, "filled"), (~filled, "none", "empty")):
        axes.plot(
            place[chosen], moved[chosen], ls="none", marker=look.marker, ms=4.2, mfc=face,
            mec=look.colour, mew=0.9, label=name,
        )  # fmt: skip
    axes.axhline(0, color=QUIET, lw=0.6, zorder=0)
    axes.axvline(0, color=RULE, lw=0.6, ls=(0, (2, 2)), zorder=0)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.set_xlabel("place from the gap (−1 highest filled, 1 lowest empty)")
    largest = float(np.abs(moved).max(initial=0.0))
    # where nothing moved but rounding, the axis shows the scale of the hopping instead
    if largest <= tolerance(case.hamiltonian):
        largest = case.hamiltonian.scale
        axes.set_ylim(-largest / 10, largest / 10)
    label_values(axes.yaxis, "shift", largest=largest, unit=case.levels.unit)
    axes.legend(loc="lower right", bbox_to_anchor=(1, 1), ncols=2, borderaxespad=0.2)
    panel_title(axes, "ribbon minus control")
