"""Energy against the wave number along the unrolled edge, the ribbon beside its controls."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.study.figures.look import (
    FULL,
    HALF,
    INK,
    PAPER,
    QUIET,
    RULE,
    label_values,
    look_of,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.findings import HALF as AT_THE_EDGE

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["draw_edges", "ribbon_momentum"]

FloatArray = NDArray[np.float64]

LARGEST = 32.0
"""Area of the mark of a state that lies at the edge altogether, in square points."""

LEAST = 1.5
"""Area of the mark of a state without any weight there: it is seen, as a speck."""


def ribbon_momentum(case: Case, first: Case) -> FloatArray:
    """Edge momentum of every level in 2 pi / L with L that of the first case, the ribbon.

    Where the flux leaves both directions alike (whole and half quanta) it is the size of it.
    """
    assert case.edges is not None
    own, other = case.hamiltonian.ring, first.hamiltonian.ring
    found = np.asarray(case.edges.edge_momentum)
    found = np.abs(found) if _both_ways(first) else found
    if own is None or other is None:
        return found
    return np.asarray(found * (other.circumference / own.circumference))


def _both_ways(case: Case) -> bool:
    """True where k and -k have the same levels."""
    return abs(2 * case.flux - round(2 * case.flux)) < 1e-9


def draw_edges(cases: Sequence[Case]) -> Figure:
    """Draw energy against edge momentum, one panel a case, the area of a mark its edge weight.

    Levels without a momentum along an edge (an open strip) stand against their edge weight.
    Raises `ValueError` where no case has edge states.
    """
    shown = [case for case in cases if case.edges is not None and case.edges.level.size]
    if not shown:
        raise ValueError("no case has edge states; there is nothing to draw")
    with styled():
        figure = new_figure(FULL if len(shown) > 1 else HALF, 92)
        panels = figure.subplots(1, len(shown), sharey=True, squeeze=False)[0]
        momenta = [ribbon_momentum(case, shown[0]) for case in shown]
        window = _window(shown, momenta)
        for axes, case, momentum in zip(panels, shown, momenta, strict=True):
            _draw_panel(axes, case, momentum, window=window)
        energies = np.concatenate([np.abs(case.levels.energies) for case in shown])
        largest = float(energies.max(initial=0.0))
        # room for the ladder of wave numbers above the levels
        low, high = panels[0].get_ylim()
        panels[0].set_ylim(low, high + 0.16 * (high - low))
        # energies that are zero but for rounding are shown on the scale of the hopping
        if largest <= 1e-9 * shown[0].hamiltonian.scale:
            largest = 0.1 * shown[0].hamiltonian.scale
            panels[0].set_ylim(-largest, largest)
        label_values(panels[0].yaxis, "energy", largest=largest, unit=shown[0].levels.unit)
        _draw_key(figure, shown)
    return figure


def _window(cases: Sequence[Case], momenta: Sequence[FloatArray]) -> tuple[float, float] | None:
    """Wave numbers from the least to the largest of all panels, with some room."""
    known = np.concatenate([momentum[np.isfinite(momentum)] for momentum in momenta])
    if not known.size:
        return None
    low, high = float(known.min()), float(known.max())
    room = 0.06 * (high - low) + 0.7
    return low - room, high + room


def _draw_panel(
    axes: Axes, case: Case, momentum: FloatArray, *, window: tuple[float, float] | None
) -> None:
    found = case.edges
    assert found is not None
    look = look_of(case.name)
    there = np.isfinite(momentum)
    along = bool(there.any()) and window is not None
    x = momentum if along else np.asarray(found.edge_weight)
    at_edge = found.edge_weight > AT_THE_EDGE
    for chosen, face, rim in ((~at_edge, PAPER, look.colour), (at_edge, look.colour, PAPER)):
        axes.scatter(
            x[chosen], found.energy[chosen], s=LEAST + LARGEST * found.edge_weight[chosen],
            marker=look.marker, facecolor=face, edgecolor=rim, linewidths=0.5,
        )  # fmt: skip
    panel_title(axes, case.label)
    if not along:
        axes.set_xlim(-0.04, 1.04)
        axes.set_xlabel("part at the edge")
        return
    assert window is not None
    axes.set_xlim(*window)
    _draw_ladder(axes, case, window)
    name = "|edge wave number|" if _both_ways(case) else "edge wave number"
    axes.set_xlabel(f"{name} (2π/L)")
    axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10], min_n_ticks=2))


def _draw_ladder(axes: Axes, case: Case, window: tuple[float, float]) -> None:
    """Every wave number that the edge allows as a tick at the top, and a bar of 2 pi / L."""
    found = case.edges
    assert found is not None
    turns = max((loop.winding for loop in found.loops), default=0)
    if not turns:
        return
    step = 1 / (turns * max(case.flux_scale, 1.0))
    offset = case.flux / max(case.flux_scale, 1.0) % step
    rungs = np.arange(np.ceil((window[0] - offset) / step), (window[1] - offset) / step) * step
    top = axes.get_xaxis_transform()
    if rungs.size <= 160:
        axes.vlines(rungs + offset, 0.965, 0.99, color=RULE, lw=0.7, transform=top)
    left = window[0] + 0.04 * (window[1] - window[0])
    axes.plot([left, left + 1], [0.92, 0.92], color=INK, lw=1.4, transform=top,
              solid_capstyle="butt")  # fmt: skip
    axes.annotate(
        "2π/L", (left + 1, 0.92), xycoords=top, xytext=(3, 0), textcoords="offset points",
        va="center",
    )  # fmt: skip


def _draw_key(figure: Figure, cases: Sequence[Case]) -> None:
    """Marks of three sizes, below the panels."""
    found = cases[0].edges
    assert found is not None
    look = look_of(cases[0].name)
    handles = [
        Line2D(
            [], [], ls="none", marker=look.marker, ms=float(np.sqrt(LEAST + LARGEST * weight)),
            mfc=look.colour if weight > AT_THE_EDGE else PAPER, mec=look.colour, mew=0.6,
            label=f"{weight:.0%}".replace("%", " %"),
        )
        for weight in (0.1, 0.5, 0.75, 1.0)
    ]  # fmt: skip
    figure.legend(
        handles=handles, loc="outside lower left", ncols=4, handletextpad=0.2, columnspacing=1.4,
        title=f"part of the state within {found.within:.3g} nm of an edge (filled: more than half)",
        title_fontsize=7.0, labelcolor=QUIET, alignment="left",
    )  # fmt: skip
