"""Levels against flux, the twisted ribbon beside its controls."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.study.figures.levels import level_window
from ribbon.study.figures.look import (
    BAND,
    FULL,
    HALF,
    PAPER,
    RULE,
    TINTS,
    label_values,
    look_of,
    mixed,
    new_figure,
    panel_title,
    styled,
)

if TYPE_CHECKING:
    from ribbon.analysis import FluxResponse
    from ribbon.study.result import Case

__all__ = ["branch_lines", "draw_flux"]

FloatArray = NDArray[np.float64]

DENSE = 30_000
"""Panels with more points than this hold their lines as a picture."""


def branch_lines(response: FluxResponse) -> tuple[NDArray[np.int64], FloatArray]:
    """Energies along each branch, shape (branches, fluxes), NaN where it is out of the window.

    The branches come with their numbers, in the order of their mean energy.
    """
    there = np.isfinite(response.energy) & (response.branch >= 0)
    names, row = np.unique(response.branch[there], return_inverse=True)
    column = np.broadcast_to(np.arange(response.flux.size)[:, None], there.shape)[there]
    lines = np.full((names.size, response.flux.size), np.nan)
    lines[row, column] = response.energy[there]
    counts = np.isfinite(lines).sum(axis=1)
    order = np.argsort(np.nansum(lines, axis=1) / np.maximum(counts, 1), kind="stable")
    return names[order].astype(np.int64), lines[order]


def draw_flux(cases: Sequence[Case], *, most: int = 36) -> Figure:
    """Draw levels against flux, one panel a case, on shared axes.

    Lines follow the branches through crossings, so that states, not places in the order, are
    joined. The flux is that through the ribbon; the double cover carries twice as much. The
    window shows the ``most`` levels of the first case nearest to its gap.
    """
    swept = [case for case in cases if case.response is not None]
    if not swept:
        raise ValueError("no case was swept in flux; there is nothing to draw")
    window = level_window(swept[0], most=most)
    with styled():
        figure = new_figure(FULL if len(swept) > 1 else HALF, 92)
        panels = figure.subplots(1, len(swept), sharex=True, sharey=True, squeeze=False)[0]
        for axes, case in zip(panels, swept, strict=True):
            _draw_panel(axes, case, window)
        panels[0].set_ylim(*window)
        largest = max(abs(window[0]), abs(window[1]))
        label_values(panels[0].yaxis, "energy", largest=largest, unit=swept[0].levels.unit)
        figure.supxlabel("flux through the ribbon (h/e)", fontsize=7.5)
    return figure


def _draw_panel(axes: Axes, case: Case, window: tuple[float, float]) -> None:
    response = case.response
    assert response is not None
    flux = np.asarray(response.flux) / case.flux_scale
    _, lines = branch_lines(response)
    seen = ((lines > window[0]) & (lines < window[1])).any(axis=1)
    lines = lines[seen]
    _shade_gap(axes, case, flux)
    dense = lines.size > DENSE
    look = look_of(case.name)
    for turn, tint in enumerate(TINTS):
        chosen = lines[turn :: len(TINTS)]
        x = np.tile(np.append(flux, np.nan), len(chosen))
        y = np.column_stack([chosen, np.full(len(chosen), np.nan)]).ravel()
        y = np.where(
            (y > window[0] - _height(window)) & (y < window[1] + _height(window)), y, np.nan
        )
        axes.plot(
            x, y, color=mixed(look.colour, PAPER, tint), lw=0.45 if dense else 0.9,
            marker="." if flux.size == 1 else "", rasterized=dense,
        )  # fmt: skip
    if flux.min() < 0.5 < flux.max():
        axes.axvline(0.5, color=RULE, lw=0.6, ls=(0, (2, 2)), zorder=0.5)
    if flux.size > 1:
        axes.set_xlim(float(flux.min()), float(flux.max()))
    axes.xaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
    times = "" if case.flux_scale == 1 else f" (flux × {case.flux_scale:g})"
    panel_title(axes, case.label + times)


def _height(window: tuple[float, float]) -> float:
    return window[1] - window[0]


def _shade_gap(axes: Axes, case: Case, flux: FloatArray) -> None:
    """Shade between the highest filled and the lowest empty level at every flux.

    At fixed chemical potential the number of electrons, and with it these levels, may change.
    """
    response = case.response
    assert response is not None
    moved = np.zeros(flux.size, dtype=np.int64)
    if response.totals is not None:
        added = np.asarray(response.totals.electrons) - case.electrons
        moved = np.rint(added / case.spin).astype(np.int64)
    edges = []
    for index in (case.gap.lower_index, case.gap.upper_index):
        found = np.where(response.level == (index + moved)[:, None], response.energy, np.nan)
        known = np.isfinite(found)
        edges.append(np.where(known.any(axis=1), np.where(known, found, 0.0).sum(axis=1), np.nan))
    if case.gap.upper_index > case.gap.lower_index:
        axes.fill_between(flux, edges[0], edges[1], color=BAND, lw=0, zorder=0)
