"""The level diagram: the twisted ribbon beside its controls on one energy axis."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from numpy.typing import NDArray

from ribbon.analysis.levels import shell_edges, tolerance
from ribbon.study.figures.look import (
    BAND,
    FULL,
    HALF,
    INK,
    PAPER,
    QUIET,
    Look,
    label_values,
    look_of,
    new_figure,
    styled,
)
from ribbon.study.numbers import wrapped
from ribbon.study.tables import levels_table
from ribbon.study.wording import gap_text

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["draw_levels", "level_window"]

FloatArray = NDArray[np.float64]

HALF_TICK = 0.36
"""Half the length of a level's tick; columns stand 1 apart."""

SPLIT = 4
"""A shell of up to so many levels is drawn as that many short ticks side by side."""

MARKED = 26
"""Up to so many shells in view carry a mark for their filling."""


def level_window(case: Case, *, most: int = 36) -> tuple[float, float]:
    """Energies between which the ``most`` levels nearest to the gap lie, with some room."""
    energies = np.asarray(case.levels.energies)
    # a band that is full or empty has one frontier level only, the other is NaN
    middle = float(np.nanmean([case.gap.lower, case.gap.upper]))
    if energies.size == 0:
        return middle - 1.0, middle + 1.0
    reach = np.sort(np.abs(energies - middle))[: max(most, 2)][-1]
    low = float(energies[energies >= middle - 1.0001 * reach].min())
    high = float(energies[energies <= middle + 1.0001 * reach].max())
    room = 0.06 * max(high - low, 1e-6 * case.hamiltonian.scale)
    return low - room, high + room


def draw_levels(cases: Sequence[Case], *, most: int = 36) -> Figure:
    """Draw levels as ticks, one column a case; degenerate ones side by side, filled ones heavy.

    All columns share the window that shows the ``most`` levels of the first case nearest to its
    gap. The gap at the filling is shaded.
    """
    window = level_window(cases[0], most=most)
    with styled():
        figure = new_figure(HALF if len(cases) <= 2 else FULL, 96)
        axes = figure.subplots()
        marked = all(_shell_count(case, window) <= MARKED for case in cases)
        for place, case in enumerate(cases):
            _draw_column(axes, case, place, window, marked=marked)
        _label(axes, cases, window)
        _key(axes, marked=marked)
    return figure


def _shells(case: Case) -> tuple[NDArray[np.int64], FloatArray]:
    """Where the shells of degenerate levels begin and end, and the energies."""
    energies = np.asarray(case.levels.energies)
    if energies.size == 0:
        return np.zeros(1, dtype=np.int64), energies
    return shell_edges(energies, tolerance(case.hamiltonian)), energies


def _shell_count(case: Case, window: tuple[float, float]) -> int:
    edges, energies = _shells(case)
    starts = energies[edges[:-1]]
    return int(np.count_nonzero((starts >= window[0]) & (starts <= window[1])))


def _draw_column(
    axes: Axes, case: Case, place: int, window: tuple[float, float], *, marked: bool
) -> None:
    look = look_of(case.name)
    if not case.gap.open_shell:
        low, high = max(case.gap.lower, window[0]), min(case.gap.upper, window[1])
        axes.add_patch(
            Rectangle((place - 0.45, low), 0.9, max(high - low, 0.0), fc=BAND, ec="none", zorder=0)
        )
    edges, energies = _shells(case)
    filling = levels_table(case, case.levels.unit).columns["occupation"]
    for first, last in pairwise(edges.tolist()):
        energy = float(energies[first])
        if window[0] <= energy <= window[1]:
            share = float(filling[first]) / case.spin
            _draw_shell(axes, look, (place, energy), last - first, share=share, marked=marked)


def _draw_shell(
    axes: Axes, look: Look, at: tuple[float, float], count: int, *, share: float, marked: bool
) -> None:
    """Draw one shell of ``count`` levels, filled to ``share``, at (column, energy)."""
    place, energy = at
    parts = count if count <= SPLIT else 1
    edges = np.linspace(place - HALF_TICK, place + HALF_TICK, parts + 1)
    gap = 0.035 if parts > 1 else 0.0
    width = 1.9 if share > 0.99 else 1.3 if share > 0.01 else 0.75
    style = (0, (2.2, 1.0)) if 0.01 <= share <= 0.99 else "-"
    for left, right in pairwise(edges.tolist()):
        axes.plot(
            [left + gap, right - gap], [energy, energy], color=look.colour, lw=width, ls=style,
            solid_capstyle="butt", dash_capstyle="butt",
        )  # fmt: skip
        if marked:
            axes.plot(
                [(left + right) / 2], [energy], marker="o", ms=3.6, mew=0.8, mec=look.colour,
                ls="none", mfc=look.colour if share > 0.01 else PAPER, mfcalt=PAPER,
                fillstyle="left" if 0.01 <= share <= 0.99 else "full",
            )  # fmt: skip
    if parts != count:
        axes.annotate(
            f"×{count}", (place + HALF_TICK, energy), xytext=(2, 0), textcoords="offset points",
            va="center", color=look.colour, fontsize=7,
        )  # fmt: skip


def _label(axes: Axes, cases: Sequence[Case], window: tuple[float, float]) -> None:
    unit = cases[0].levels.unit
    axes.set_xlim(-0.6, len(cases) - 0.4)
    axes.set_ylim(*window)
    largest = max(abs(window[0]), abs(window[1]))
    label_values(axes.yaxis, "energy", largest=largest, unit=unit)
    axes.set_xticks(
        range(len(cases)),
        [f"{wrapped(case.label, 20)}\n{wrapped(gap_text(case.gap, unit), 20)}" for case in cases],
    )
    axes.tick_params(axis="x", length=0)
    axes.spines["bottom"].set_visible(False)


def _key(axes: Axes, *, marked: bool) -> None:
    """What heavy, light and broken ticks mean, above the columns."""
    mark = {"marker": "o", "ms": 3.6, "mew": 0.8, "mec": INK} if marked else {"marker": ""}
    handles = [
        Line2D([], [], color=INK, lw=1.9, mfc=INK, label="filled", **mark),
        Line2D(
            [], [], color=INK, lw=1.3, ls=(0, (2.2, 1.0)), mfc=INK, mfcalt=PAPER,
            fillstyle="left", label="partly", **mark,
        ),
        Line2D([], [], color=INK, lw=0.75, mfc=PAPER, label="empty", **mark),
        Rectangle((0, 0), 1, 1, fc=BAND, ec="none", label="gap"),
    ]  # fmt: skip
    axes.legend(
        handles=handles, loc="lower left", bbox_to_anchor=(0, 1), ncols=4, borderaxespad=0.3,
        handlelength=1.8, columnspacing=1.2, labelcolor=QUIET,
    )  # fmt: skip
