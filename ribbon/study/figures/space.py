"""The ribbon as a band in space, drawn from its own sites and bonds."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch

from ribbon.lattice import EdgeLoop, walk_edges
from ribbon.study.figures.band import (
    EDGE_COLOURS,
    MOST_BONDS,
    Band,
    band_of,
    draw_band,
    project,
    space_points,
)
from ribbon.study.figures.look import FACES, FULL, INK, QUIET, new_figure, styled
from ribbon.study.numbers import number, wrapped
from ribbon.study.tables import Table

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["draw_space", "space_points", "space_table", "width_remark"]


def draw_space(case: Case) -> Figure:
    """Draw a ring in space: band, bonds, and every edge walked in a colour of its own.

    Raises `ValueError` for a network that is no ring.
    """
    ring = case.hamiltonian.ring
    if ring is None:
        raise ValueError(f"the {case.label} is not closed into a ring; it has no band in space")
    loops = walk_edges(ring)
    band = band_of(ring)
    with styled():
        figure = new_figure(FULL, 98)
        axes, side = figure.subplots(1, 2, width_ratios=[3.1, 1])
        draw_band(axes, band, loops, bonds=True)
        _draw_scale(axes, band)
        _mark_seam(axes, band)
        _draw_key(side, band, loops)
        text = f"{case.label}: L = {number(ring.circumference)} nm"
        text += f", W = {number(ring.strip.width, 3)} nm between hard walls"
        figure.suptitle(text, x=0.012, ha="left", fontsize=7.5, fontweight="bold")
    return figure


def width_remark(band: Band) -> str:
    """What was done to the width so that the band can be seen, empty where nothing was."""
    if abs(band.enlarged - 1) < 1e-9:
        return ""
    return f"width drawn at {number(band.enlarged, 2)} of its size"


def space_table(case: Case) -> Table:
    """Sites of a ring in space, as drawn."""
    ring = case.hamiltonian.ring
    if ring is None:
        raise ValueError(f"the {case.label} is not closed into a ring; it has no band in space")
    band = band_of(ring)
    x, y, z = band.points(*ring.positions.T).T
    remark = width_remark(band)
    return Table(
        f"space-{case.name}",
        {"site": np.arange(ring.n), "x": x, "y": y, "z": z},
        dict.fromkeys("xyz", "nm"),
        f"Sites of the {case.label} in space, as drawn" + (f" ({remark})" if remark else ""),
    )


def _draw_scale(axes: Axes, band: Band) -> None:
    """A bar as long as it says, along what is seen unshortened."""
    size = band.radius / 2
    power = 10 ** np.floor(np.log10(size))
    size = float(max(step for step in (1, 2, 5) if step * power <= size * (1 + 1e-9)) * power)
    left, right = axes.get_xlim()
    low = left + 0.012 * (right - left), axes.get_ylim()[0]
    axes.plot([low[0], low[0] + size], [low[1], low[1]], color=INK, lw=1.2, clip_on=False)
    axes.annotate(
        f"{number(size)} nm", (low[0] + size / 2, low[1]), xytext=(0, 3),
        textcoords="offset points", ha="center", va="bottom",
    )  # fmt: skip


def _mark_seam(axes: Axes, band: Band) -> None:
    """Name the line where the ends of the strip are glued, outside the band."""
    edge = band.half / band.enlarged
    ends, _ = project(band.points(np.full(2, band.seam), np.array([-edge, edge])))
    outer = ends[np.argmax(np.abs(ends - ends.mean(axis=0)) @ [0, 1] + ends @ [1, -1])]
    axes.annotate(
        "seam", outer, xytext=(7, -7), textcoords="offset points", ha="left", va="top",
        arrowprops={"arrowstyle": "-", "lw": 0.6, "color": INK, "shrinkA": 0, "shrinkB": 2},
    )  # fmt: skip


def _draw_key(axes: Axes, band: Band, loops: Sequence[EdgeLoop]) -> None:
    """What the tints and the heavy lines are, and what was changed for the eye."""
    handles: list[Patch | Line2D] = [
        Patch(fc=FACES[0][-3], ec="none", label="upper side of the strip"),
        Patch(fc=FACES[1][-3], ec="none", label="its lower side"),
    ]
    for place, loop in enumerate(loop for loop in loops if loop.is_edge):
        dash = (0, (4, 2)) if place % 2 else "-"
        length = "L" if loop.winding == 1 else f"{loop.winding}L"
        text = f"edge of length {length} = {number(loop.length)} nm"
        handles.append(Line2D([], [], color=EDGE_COLOURS[place % 2], lw=1.7, ls=dash, label=text))
    if any(not loop.is_edge for loop in loops):
        handles.append(Line2D([], [], color=INK, lw=0.7, label="edge of a hole"))
    axes.set_axis_off()
    axes.legend(handles=handles, loc="upper left", bbox_to_anchor=(0, 1), borderaxespad=0,
                handlelength=1.8)  # fmt: skip
    axes.text(0, 0, "\n\n".join(wrapped(line, 31) for line in _remarks(band)), va="bottom",
              color=QUIET, transform=axes.transAxes)  # fmt: skip


def _remarks(band: Band) -> list[str]:
    ring = band.ring
    if ring.flips:
        found = [
            "At the seam the two tints meet: follow either, and you come to the other.",
            "The band has one side.",
        ]
    else:
        found = ["The two tints never meet: the band has two sides."]
    turn = "no turn" if not ring.half_twists else f"{ring.half_twists} × 180° of turn, left-handed"
    found.append(f"{turn[0].upper()}{turn[1:]}.")
    if remark := width_remark(band):
        found.append(f"{remark[0].upper()}{remark[1:]}.")
    if ring.bonds.m > MOST_BONDS:
        found.append(f"Its {ring.bonds.m:,} bonds are too many to draw.")
    return found
