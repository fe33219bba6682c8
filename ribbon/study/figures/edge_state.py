"""The state that lives most at the edge: flat, in space, and along its unrolled edges."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.analysis.levels import tolerance
from ribbon.lattice import Ring
from ribbon.study.figures.band import EDGE_COLOURS, band_of, draw_band, gathered
from ribbon.study.figures.look import (
    BAND,
    FULL,
    INK,
    LOOKS,
    QUIET,
    RULE,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.figures.space import width_remark
from ribbon.study.figures.unrolled import EdgeWave, edge_wave
from ribbon.study.numbers import number, quantity

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = ["draw_edge_state"]

FloatArray = NDArray[np.float64]

ROOM = 152.0
"""Room for the flat ribbon across the page, mm."""

TALL = 46.0
"""Greatest height of the flat ribbon, mm."""

THIN = 7.0
"""Least height of the flat ribbon, mm; one more slender is shown in part."""

CROWDED = 0.5
"""Sites nearer than this on the page, mm, are gathered into common discs."""

MOST_DISCS = 5_000
MOST_EDGES = 2
SIZES = 24
"""Sizes of discs that are told apart; the area is right to a twelfth of the largest."""

FEW = 120
"""Along an edge of up to so many sites the imaginary part is shown too."""

DASHES: tuple[Any, ...] = ("-", (0, (2.2, 1.2)))


def draw_edge_state(case: Case, *, position: int | None = None) -> Figure:
    """Draw one level on the flat ribbon, on the band in space, and along its unrolled edges.

    ``position`` counts the levels found; by default the level with the largest edge weight.
    Raises `ValueError` where there are no edge states.
    """
    wave = edge_wave(case, position)
    part, scale = _stretch(case, wave)
    tall = scale * _height(case) + 17
    shown = min(len(wave.loops), MOST_EDGES)
    middle, low = (62 if isinstance(case.network, Ring) else 0), (62 if shown else 0)
    with styled():
        figure = new_figure(FULL, tall + middle + low + 6)
        figure.suptitle(_headline(case, wave), x=0.012, ha="left", fontsize=7.5, fontweight="bold")
        heights = [height for height in (tall, middle, low) if height]
        parts: Any = figure.subfigures(len(heights), 1, height_ratios=heights, squeeze=False)[:, 0]
        _draw_flat(parts[0].subplots(), case, wave, part=part, scale=scale)
        if middle:
            left, right = parts[1].subplots(1, 2, width_ratios=[1.15, 1])
            _draw_in_space(left, case, wave)
            _draw_content(right, case, wave)
        if low:
            grid = parts[-1].subplots(2, shown, sharex="col", sharey="row", squeeze=False)
            for column in range(shown):
                _draw_along(grid[:, column], wave, column)
    return figure


def _headline(case: Case, wave: EdgeWave) -> str:
    found = case.edges
    assert found is not None
    at = wave.position
    # what is no more than rounding is written as 0
    value = float(found.energy[at])
    value = 0.0 if abs(value) <= tolerance(case.hamiltonian) else value
    energy = quantity(value, case.levels.unit)
    weight = f"{number(100 * float(found.edge_weight[at]), 3)} %"
    return (
        f"{case.label}, level {found.level[at]} at {energy}: {weight} of it within "
        f"{number(found.within, 3)} nm of an edge"
    )


def _frame(case: Case) -> tuple[float, float, float]:
    """Where the flat ribbon starts, how long it is, and its half-height, nm."""
    network = case.network
    places = network.positions
    if isinstance(network, Ring):
        start = band_of(network).seam
        return start, network.circumference, network.strip.width / 2
    low, high = places[:, :2].min(axis=0), places[:, :2].max(axis=0)
    bond = _bond(case)
    return low[0] - bond / 2, high[0] - low[0] + bond, (high[1] - low[1] + bond) / 2


def _height(case: Case) -> float:
    return 2 * _frame(case)[2]


def _bond(case: Case) -> float:
    """Shortest first-neighbour distance, nm."""
    bonds = case.network.bonds
    steps = np.hypot(*bonds.displacement[bonds.shell == 1, :2].T)
    return float(steps.min()) if steps.size and steps.min() > 0 else 1.0


def _stretch(case: Case, wave: EdgeWave) -> tuple[tuple[float, float], float]:
    """The part of the ribbon that is shown flat, and mm of print per nm.

    A ribbon too slender to be read whole is shown where its density is highest.
    """
    start, length, half = _frame(case)
    scale = min(ROOM / length, TALL / (2 * half), 9.0 / _bond(case))
    if scale * 2 * half >= THIN:
        return (start, start + length), scale
    scale = min(2 * THIN / (2 * half), 9.0 / _bond(case))
    shown = min(ROOM / scale, length)
    centre = float(case.network.positions[np.argmax(wave.density), 0])
    first = float(np.clip(centre - shown / 2, start, start + length - shown))
    return (first, first + shown), scale


def _draw_flat(
    axes: Axes, case: Case, wave: EdgeWave, *, part: tuple[float, float], scale: float
) -> None:
    _, length, half = _frame(case)
    places = case.network.positions[:, :2]
    middle = (
        0.0
        if isinstance(case.network, Ring)
        else float(np.mean([places[:, 1].min(), places[:, 1].max()]))
    )
    axes.add_patch(
        Rectangle(
            (part[0], middle - half), part[1] - part[0], 2 * half, fc=BAND, ec="none", zorder=0
        )
    )
    _draw_bonds(axes, case, part)
    shown = (places[:, 0] >= part[0]) & (places[:, 0] <= part[1])
    points, weight, cell = places[shown], wave.density[shown], 0.0
    if scale * _bond(case) < CROWDED or points.shape[0] > MOST_DISCS:
        cell = max(1.8 * CROWDED, 2.0 * scale * _bond(case)) / scale
        points, weight = gathered(points, weight, cell)
    largest = float(weight.max(initial=0.0))
    strong = weight > 1e-4 * largest
    wide = float(np.clip(0.95 * scale * max(_bond(case), cell), 0.6, 3.4)) * 72 / 25.4
    # discs of one size are one path used many times, which keeps the file small
    steps = np.ceil(SIZES * np.sqrt(weight / max(largest, 1e-300)))
    for step in range(1, SIZES + 1):
        axes.plot(
            *points[strong & (steps == step)].T, ls="none", marker="o", ms=wide * step / SIZES,
            mew=0, color=LOOKS["ribbon"].colour, zorder=3,
        )  # fmt: skip
    axes.set_xlim(*part)
    axes.set_ylim(middle - 1.03 * half, middle + 1.03 * half)
    axes.set_aspect("equal", anchor="W")
    axes.set_xlabel("along the ribbon x (nm)")
    axes.set_ylabel("across y (nm)")
    axes.yaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
    what = (
        "probability, area of discs"
        if not cell
        else f"mean probability of a site in cells of {number(cell, 2)} nm, area of discs"
    )
    text = f"{what} (largest {number(100 * largest, 2)} %)"
    if part[1] - part[0] < 0.999 * length:
        text += f"; {number(part[1] - part[0], 3)} of {number(length, 4)} nm are shown"
    panel_title(axes, text)


def _draw_bonds(axes: Axes, case: Case, part: tuple[float, float]) -> None:
    """Bonds that do not cross the seam, where they can be told apart."""
    bonds = case.network.bonds
    places = case.network.positions[:, :2]
    inside = (bonds.shell == 1) & (bonds.winding == 0)
    start, end = places[bonds.tail[inside]], places[bonds.head[inside]]
    seen = (np.maximum(start[:, 0], end[:, 0]) >= part[0]) & (
        np.minimum(start[:, 0], end[:, 0]) <= part[1]
    )
    if np.count_nonzero(seen) > 2000:
        return
    line = np.stack([start[seen], end[seen], np.full_like(start[seen], np.nan)], axis=1).reshape(
        -1, 2
    )
    axes.plot(line[:, 0], line[:, 1], color=RULE, lw=0.4, zorder=1)


def _draw_in_space(axes: Axes, case: Case, wave: EdgeWave) -> None:
    assert isinstance(case.network, Ring)
    assert case.edges is not None
    band = band_of(case.network)
    draw_band(axes, band, case.edges.loops, bonds=False, density=wave.density)
    remark = width_remark(band)
    panel_title(axes, "the same in space" + (f" ({remark})" if remark else ""))


def _draw_content(axes: Axes, case: Case, wave: EdgeWave) -> None:
    """Stems of the momentum content, one colour and dash an edge."""
    panel_title(axes, "wave numbers along the edge")
    if not wave.numbers:
        axes.set_axis_off()
        axes.text(0, 0.9, "no edge runs round the ring in whole periods", color=QUIET,
                  transform=axes.transAxes, va="top")  # fmt: skip
        return
    for place, (wave_number, share) in enumerate(
        zip(wave.numbers[:MOST_EDGES], wave.content, strict=False)
    ):
        spacing = 1 / wave.loops[place].winding
        # the stems of a second edge stand a little aside
        x = wave_number + 0.22 * spacing * place
        _stems(axes, x, share, colour=EDGE_COLOURS[place], dash=DASHES[place], width=1.0)
    top = max(float(share.max()) for share in wave.content[:MOST_EDGES])
    # of two equal ones the forward one, as in the table of edge states
    best = int(np.argmax(wave.content[0] * (1 + 1e-9 * (wave.numbers[0] > 0))))
    # the number stands on the side of the middle, away from the frame
    left = wave.numbers[0][best] < float(np.mean(wave.numbers[0]))
    axes.annotate(
        f"{number(float(wave.numbers[0][best]))}",
        (wave.numbers[0][best], wave.content[0][best]), xytext=(4 if left else -4, 0),
        textcoords="offset points", ha="left" if left else "right", va="top",
    )  # fmt: skip
    axes.set_ylim(0, 1.06 * top)
    axes.set_xlabel("wave number (2π/L)")
    axes.set_ylabel("share")
    axes.xaxis.set_major_locator(MaxNLocator(6, steps=[1, 2, 5, 10]))


def _stems(
    axes: Axes, x: FloatArray, y: FloatArray, *, colour: str, dash: Any, width: float
) -> None:
    """Upright lines from zero, as one path."""
    high = np.column_stack([np.zeros_like(y), y, np.full_like(y, np.nan)]).ravel()
    axes.plot(np.repeat(x, 3), high, color=colour, lw=width, ls=dash, solid_capstyle="butt")


def _draw_along(axes: NDArray[Any], wave: EdgeWave, column: int) -> None:
    """Amplitude and probability along one unrolled edge, the crossings of the seam marked."""
    loop, place, amplitude = wave.loops[column], wave.place[column], wave.amplitude[column]
    colour = EDGE_COLOURS[column]
    width = float(np.clip(330 / max(place.size, 1), 0.3, 1.3))
    upper, lower = axes
    _stems(upper, place, amplitude.real, colour=colour, dash="-", width=width)
    real = "amplitude"
    if wave.complex:
        real = "real part"
        if place.size <= FEW:
            real = "real part; dots: imaginary"
            upper.plot(place, amplitude.imag, ls="none", marker=".", ms=2.4, color=QUIET)
    _stems(lower, place, wave.density[loop.sites], colour=colour, dash="-", width=width)
    upper.axhline(0, color=QUIET, lw=0.5, zorder=0)
    for panel in axes:
        for crossing in place[np.flatnonzero(np.diff(loop.crossings)) + 1]:
            panel.axvline(crossing, color=INK, lw=0.9, ls=(0, (2, 1.4)), zorder=3)
        panel.set_xlim(0, loop.length)
    turns = "L" if loop.winding == 1 else f"{loop.winding}L"
    name = "the edge" if len(wave.loops) == 1 else f"edge {column + 1} of {len(wave.loops)}"
    said = f"along {name}, {turns} = {number(loop.length)} nm"
    if len(wave.loops) == 1 and wave.complex:
        said += ": a wave that runs one way"
        if wave.partners == 2:
            said += "; its partner runs the other way"
    panel_title(upper, said, colour=colour)
    lower.set_xlabel("place along the edge (nm); dashed: the seam")
    if column == 0:
        upper.set_ylabel(real)
        lower.set_ylabel("probability")
