"""Levels on the lattice beside the continuum, and how the difference goes with the spacing."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, NullFormatter
from numpy.typing import NDArray

from ribbon.analysis.continuum import MEANT_FOR
from ribbon.study.figures.look import (
    FULL,
    INK,
    LOOKS,
    PAPER,
    QUIET,
    RULE,
    label_values,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.numbers import number, wrapped
from ribbon.study.tables import Table

if TYPE_CHECKING:
    from ribbon.analysis import ContinuumComparison
    from ribbon.study.result import Case

__all__ = ["draw_continuum", "errors_table"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MOST = 8
"""Greatest number of levels that are followed."""

FLOOR = 1e-12
"""Errors below this are rounding and are not drawn."""

COLUMNS = ("lattice", "continuum", "mesh → 0")
MARKERS = "os^DvPX<"


@dataclass(frozen=True, eq=False)
class _Choice:
    """Levels that are shown, by their place in the comparison, and how many share each."""

    place: IntArray
    shared: IntArray
    meant: bool


def draw_continuum(case: Case, *, most: int = MOST) -> Figure:
    """Draw levels on the lattice, in the continuum and extrapolated, and the error on each mesh.

    Up to ``most`` distinct levels nearest to the band bottom or Dirac point, of those for which
    the formula is meant to hold; where it is meant for none, the nearest anyway, with a remark.
    Raises `ValueError` where there is no comparison.
    """
    found = case.continuum
    if found is None or not found.level.size:
        raise ValueError(f"the {case.label} was not compared with the continuum")
    choice = _choose(found, most)
    with styled():
        figure = new_figure(FULL, 96)
        left, right = figure.subplots(1, 2, width_ratios=[1, 1.25])
        _draw_levels(left, found, choice)
        _draw_errors(right, found, choice)
        formula = "Schrödinger" if found.kind == "square" else "Dirac"
        text = f"{case.label} beside the {formula} formula with hard walls"
        if not choice.meant:
            text += f": no level found has |k|a up to {MEANT_FOR:g}, where it is meant to hold"
        figure.suptitle(wrapped(text, 105), x=0.012, ha="left", fontsize=7.5, fontweight="bold")
    return figure


def errors_table(case: Case, *, most: int = MOST) -> Table:
    """The levels that the figure follows: their energy and error on every mesh."""
    found = case.continuum
    if found is None:
        raise ValueError(f"the {case.label} was not compared with the continuum")
    place = _choose(found, most).place
    meshes = found.spacings.size
    unit = found.unit
    return Table(
        f"continuum-errors-{case.name}",
        {
            "level": np.tile(found.level[place], meshes),
            "transverse": np.tile(found.modes.band[place], meshes),
            "momentum": np.tile(found.modes.wave[place], meshes),
            "spacing": np.repeat(found.spacings, place.size),
            "energy": found.meshes[:, place].ravel(),
            "continuum": np.tile(found.continuum[place], meshes),
            "extrapolated": np.tile(found.extrapolated[place], meshes),
            "relative_error": found.errors[:, place].ravel(),
        },
        {"momentum": "2π/L", "spacing": "nm"}
        | dict.fromkeys(("energy", "continuum", "extrapolated"), unit),
        f"Levels of the {case.label} on finer meshes, as drawn",
    )


def _choose(found: ContinuumComparison, most: int) -> _Choice:
    """Distinct levels that hold, nearest to zero first, then in ascending order."""
    chosen = np.flatnonzero(found.holds)
    meant = bool(chosen.size)
    if not meant:
        chosen = np.arange(found.level.size)
    # levels are one where every mesh and the formula agree
    rows = np.vstack([found.meshes, found.continuum])[:, chosen]
    keys = np.rint(rows / (1e-9 * found.scale)).astype(np.int64)
    _, first, shared = np.unique(keys, axis=1, return_index=True, return_counts=True)
    size = np.abs(found.continuum[chosen[first]] - found.zero)
    order = np.lexsort((chosen[first], np.round(size / found.scale, 9)))[:most]
    place, count = chosen[first][order], shared[order]
    upward = np.argsort(found.energy[place], kind="stable")
    return _Choice(place[upward].astype(np.int64), count[upward].astype(np.int64), meant)


def _look(order: int) -> tuple[str, Any, str]:
    """Colour, dash and marker of one of the levels followed."""
    looks = list(LOOKS.values())
    look = looks[order % len(looks)]
    return look.colour, looks[(order + order // len(looks)) % len(looks)].dash, MARKERS[order % 8]


def _draw_levels(axes: Axes, found: ContinuumComparison, choice: _Choice) -> None:
    values = np.stack([found.energy, found.continuum, found.extrapolated])[:, choice.place]
    known = [column for column, row in enumerate(values) if np.isfinite(row).any()]
    for order in range(choice.place.size):
        colour, _, _ = _look(order)
        for column in known:
            axes.plot([column - 0.3, column + 0.3], [values[column, order]] * 2, color=colour,
                      lw=1.3, solid_capstyle="butt")  # fmt: skip
        for one, two in pairwise(known):
            axes.plot([one + 0.3, two - 0.3], values[[one, two], order], color=RULE, lw=0.7)
    axes.set_xticks(known, [COLUMNS[column] for column in known])
    axes.tick_params(axis="x", length=0)
    axes.spines["bottom"].set_visible(False)
    _name_levels(axes, found, choice, values=values)
    largest = float(np.nanmax(np.abs(values), initial=0.0))
    label_values(axes.yaxis, "energy", largest=largest, unit=found.unit)
    panel_title(axes, "levels")


def _name_levels(
    axes: Axes, found: ContinuumComparison, choice: _Choice, *, values: FloatArray
) -> None:
    """The quantum numbers at the left of the columns, moved apart where levels are close."""
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    room = max(high - low, 1e-6 * found.scale)
    axes.set_ylim(low - 0.06 * room, high + 0.06 * room)
    axes.set_xlim(-1.25, 2.4)
    where = _apart(values[0], 0.052 * room)
    for order, place in enumerate(choice.place):
        colour, _, _ = _look(order)
        axes.plot([-0.42, -0.32], [where[order], values[0, order]], color=RULE, lw=0.6)
        axes.text(-0.45, where[order], _name(found, int(place)), color=colour, ha="right",
                  va="center", fontsize=7)  # fmt: skip


def _name(found: ContinuumComparison, place: int) -> str:
    """Transverse number and size of the wave number of a level, with its half of a Dirac cone."""
    wave = abs(float(found.modes.wave[place]))
    half = "" if found.kind == "square" else "+" if found.modes.sign[place] > 0 else "−"
    return f"{half}{int(found.modes.band[place])}, {number(wave, 3)}"


def _apart(values: FloatArray, least: float) -> FloatArray:
    """Ascending places at least so far apart, as near to the values as simple pushing brings."""
    order = np.argsort(values, kind="stable")
    places = values[order].astype(np.float64)
    for _ in range(200):
        gaps = np.diff(places)
        short = np.maximum(least - gaps, 0) / 2
        if not short.any():
            break
        places[:-1] -= short
        places[1:] += short
    result = np.empty_like(places)
    result[order] = places
    return result


def _draw_errors(axes: Axes, found: ContinuumComparison, choice: _Choice) -> None:
    errors = np.abs(found.errors[:, choice.place])
    errors = np.where(errors > FLOOR, errors, np.nan)
    panel_title(axes, "relative error against the lattice spacing")
    axes.set_xlabel("spacing (nm)")
    axes.set_ylabel("|relative error|")
    if not np.isfinite(errors).any():
        axes.set_xticks([])
        axes.set_yticks([])
        text = "no level has an error to speak of:\nthe formula gives 0, or the lattice is exact"
        axes.text(0.5, 0.5, text, ha="center", va="center", color=QUIET, transform=axes.transAxes)
        return
    axes.set_xscale("log")
    axes.set_yscale("log")
    for order in range(choice.place.size):
        colour, dash, marker = _look(order)
        axes.plot(
            found.spacings, errors[:, order], color=colour, ls=dash, lw=1.0, marker=marker, ms=4,
            mec=colour, mfc=PAPER if order % 2 else colour, mew=0.8,
            label=_name(found, int(choice.place[order])),
        )  # fmt: skip
    _frame(axes, found, errors)
    _draw_guides(axes)
    axes.legend(
        loc="upper left", bbox_to_anchor=(1.0, 1.0), title="mode, |k|L/2π", title_fontsize=7.0,
        handlelength=2.4, alignment="left", borderaxespad=0.3,
    )  # fmt: skip


def _frame(axes: Axes, found: ContinuumComparison, errors: FloatArray) -> None:
    """Limits, ticks at the meshes, the ribbon's own spacing and the 1 % line."""
    spacings = found.spacings
    axes.set_xlim(spacings.min() / 1.5, spacings.max() * 1.5)
    low, high = float(np.nanmin(errors)), float(np.nanmax(errors))
    axes.set_ylim(min(low, 0.01) / 2.5, max(high, 0.01) * 8)
    axes.xaxis.set_major_locator(FixedLocator(list(spacings)))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: number(value, 3)))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.xaxis.set_minor_locator(FixedLocator([]))
    axes.axhline(0.01, color=INK, lw=0.7, ls=(0, (4, 2)), zorder=0)
    axes.axvline(float(spacings[0]), color=RULE, lw=0.8, zorder=0)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{number(100 * value, 3)} %"))
    axes.annotate(
        "this ribbon", (float(spacings[0]), 0.0), xycoords=axes.get_xaxis_transform(),
        xytext=(-3, 4), textcoords="offset points", ha="right", va="bottom", color=QUIET,
    )  # fmt: skip


def _draw_guides(axes: Axes) -> None:
    """A fan of two slopes in the corner that errors leave free: order 1 and order 2."""
    left, right = axes.get_xlim()
    top = axes.get_ylim()[1] / 1.5
    ends = left * (right / left) ** np.array([0.46, 0.2])
    for order in (1, 2):
        line = top * (ends / ends[0]) ** order
        axes.plot(ends, line, color=QUIET, lw=0.9, ls=(0, (1, 1.2)), zorder=0.5)
        axes.annotate(
            f"order {order}", (ends[1], line[1]), xytext=(-3, 0), textcoords="offset points",
            ha="right", va="center", color=QUIET, fontsize=7,
        )  # fmt: skip
