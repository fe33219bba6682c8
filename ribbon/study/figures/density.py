"""Density of states per site, the ribbon beside its controls, and the levels below an energy."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from ribbon.study.figures.look import (
    BAND,
    FULL,
    PALE,
    PAPER,
    QUIET,
    label_values,
    look_of,
    mixed,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.numbers import quantity
from ribbon.study.result import KINSHIP
from ribbon.study.tables import Table

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["density_difference", "draw_density", "per_site_table"]

FloatArray = NDArray[np.float64]

READABLE = 400.0
"""A spectrum of more broadenings than this is shown in part, around the levels found."""

AROUND = 75.0
"""So many broadenings are shown then to either side of the levels found."""

SPOILED = 3.0
"""So many broadenings from the end of a window, levels beyond it are missed in the density."""


def draw_density(cases: Sequence[Case]) -> Figure:
    """Draw the density of states per site, the number of levels below, and what differs.

    The difference is that of the first case from its nearest control. Where only a window of
    levels is known, lines are drawn inside it only. Raises `ValueError` without any density.
    """
    shown = [case for case in cases if case.density is not None]
    if not shown:
        raise ValueError("no case has a density of states; there is nothing to draw")
    control = _nearest(shown)
    with styled():
        figure = new_figure(FULL, 120 if control else 96)
        ratios = [2.2, 1.2, 1.0] if control else [2.2, 1.2]
        panels = figure.subplots(len(ratios), 1, sharex=True, height_ratios=ratios)
        whole = _span(shown)
        low, high = _shown(shown, whole)
        _draw_histogram(panels[0], shown[0], (low, high))
        for case in shown:
            _draw_lines(panels[:2], case, (low, high))
        if control is not None:
            _draw_difference(panels[2], (shown[0], control), (low, high))
        _draw_ends(panels, shown)
        panels[0].set_xlim(low, high)
        panels[0].legend(
            loc="lower left", bbox_to_anchor=(0, 1), ncols=6, borderaxespad=0.2,
            columnspacing=1.4,
        )  # fmt: skip
        largest = max(abs(low), abs(high))
        label_values(panels[-1].xaxis, "energy", largest=largest, unit=shown[0].levels.unit)
        if (low, high) != whole:
            unit = shown[0].levels.unit
            text = f"around the levels found; the whole runs from {quantity(whole[0], unit)}"
            text += f" to {quantity(whole[1], unit)}"
            panels[1].set_title(text, loc="left", color=QUIET)
        _label(panels, shown[0].levels.unit)
        figure.align_ylabels()
    return figure


def _nearest(cases: Sequence[Case]) -> Case | None:
    """The control next of kin that has a density too, for the first case."""
    by_name = {case.name: case for case in cases[1:]}
    return next((by_name[name] for name in KINSHIP if name in by_name), None)


def _inside(case: Case) -> tuple[float, float]:
    """Energies between which the density of a case is known."""
    found = case.density
    assert found is not None
    if found.complete:
        return float(found.energies[0]), float(found.energies[-1])
    window = case.levels.certificate
    energies = case.levels.energies
    return max(window.lower, float(energies[0])), min(window.upper, float(energies[-1]))


def _span(cases: Sequence[Case]) -> tuple[float, float]:
    """Energies that are drawn: all that any case knows."""
    ends = [_inside(case) for case in cases]
    low, high = min(end[0] for end in ends), max(end[1] for end in ends)
    width = max(case.density.broadening for case in cases if case.density is not None)
    if high - low < width:
        low, high = low - width, high + width
    return low, high


def _shown(cases: Sequence[Case], whole: tuple[float, float]) -> tuple[float, float]:
    """Energies in view: the whole span where it can be read, else around the levels found."""
    width = max(case.density.broadening for case in cases if case.density is not None)
    energies = cases[0].levels.energies
    if whole[1] - whole[0] <= READABLE * width or not energies.size:
        return whole
    low = max(float(energies[0]) - AROUND * width, whole[0])
    return low, min(float(energies[-1]) + AROUND * width, whole[1])


def _curves(case: Case) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Energies inside what is known, density per site and levels below per site."""
    found = case.density
    assert found is not None
    low, high = _inside(case)
    kept = (found.energies >= low) & (found.energies <= high)
    sites = case.network.n
    return found.energies[kept], found.density[kept] / sites, found.integrated[kept] / sites


def per_site_table(case: Case) -> Table:
    """The lines of a case as drawn: density and number of levels below, for each site."""
    energy, density, below = _curves(case)
    unit = case.levels.unit
    return Table(
        f"density-per-site-{case.name}",
        {"energy": energy, "density_per_site": density, "levels_below_per_site": below},
        {"energy": unit, "density_per_site": f"levels per {unit} and site"},
        f"Density of states of the {case.label}, per site",
    )


def density_difference(case: Case, control: Case) -> tuple[FloatArray, FloatArray]:
    """Levels below an energy per site, case minus control, where both are known."""
    energy, _, below = _curves(case)
    other, _, beneath = _curves(control)
    low, high = _inside(control)
    if not control.density or not other.size:
        return np.zeros(0), np.zeros(0)
    there = (energy >= low) & (energy <= high)
    if control.density.complete:
        # beyond a complete spectrum there are no levels, or all of them
        there = np.ones(energy.size, dtype=bool)
    return energy[there], below[there] - np.interp(energy[there], other, beneath)


def _draw_histogram(axes: Axes, case: Case, view: tuple[float, float]) -> None:
    found = case.density
    assert found is not None
    first, last = np.searchsorted(found.edges, view)
    first, last = max(int(first) - 1, 0), min(int(last), found.counts.size)
    edges, counts = found.edges[first : last + 1], found.counts[first:last]
    height = counts / (np.diff(edges) * case.network.n)
    colour = mixed(look_of(case.name).colour, PAPER, PALE)
    axes.stairs(height, edges, fill=True, color=colour, lw=0, zorder=0.5,
                label=f"{case.label}, counted")  # fmt: skip


def _draw_lines(panels: Any, case: Case, view: tuple[float, float]) -> None:
    look = look_of(case.name)
    energy, density, below = _curves(case)
    seen = (energy >= view[0]) & (energy <= view[1])
    for axes, values in zip(panels, (density, below), strict=True):
        axes.plot(
            energy[seen], values[seen], color=look.colour, ls=look.dash, lw=1.1, label=case.label
        )


def _draw_difference(axes: Axes, cases: tuple[Case, Case], view: tuple[float, float]) -> None:
    case, control = cases
    energy, moved = density_difference(case, control)
    seen = (energy >= view[0]) & (energy <= view[1])
    axes.axhline(0, color=QUIET, lw=0.6, zorder=0)
    axes.plot(energy[seen], moved[seen], color=look_of(case.name).colour, lw=0.9)
    panel_title(axes, f"levels below: {case.label} minus {control.label}")


def _draw_ends(panels: Any, cases: Sequence[Case]) -> None:
    """Shade where a window of levels ends: levels beyond it are missed there."""
    partial = [case for case in cases if case.density is not None and not case.density.complete]
    if not partial:
        return
    lows, highs = zip(*(_inside(case) for case in partial), strict=True)
    reach = SPOILED * max(case.density.broadening for case in partial if case.density is not None)
    low, high = max(lows), min(highs)
    reach = min(reach, (high - low) / 2)
    for axes in panels:
        for start, stop in ((min(lows), low + reach), (high - reach, max(highs))):
            axes.axvspan(start, stop, color=BAND, lw=0, zorder=0)
    names = ", ".join(case.label for case in partial)
    panels[1].set_title(
        f"{names}: known inside a window of levels only; shaded: levels beyond it are missed",
        loc="left", color=QUIET,
    )  # fmt: skip


def _label(panels: Any, unit: str) -> None:
    """Units of the upright axes, in powers of ten where they are small."""
    top = float(panels[0].get_ylim()[1])
    label_values(panels[0].yaxis, "density", largest=top, unit=f"per {unit} and site")
    panels[1].set_ylabel("levels below\n(per site)")
    if len(panels) > 2:
        low, high = panels[2].get_ylim()
        largest = max(abs(low), abs(high))
        if largest < 1e-9:
            # nothing but rounding: show it on the scale of one level in a thousand sites
            largest = 1e-3
            panels[2].set_ylim(-largest, largest)
        label_values(panels[2].yaxis, "difference", largest=largest, unit="per site")
        panels[2].set_ylabel(panels[2].get_ylabel().replace(" (", "\n(", 1))
