"""The ribbon drawn flat, with the seam marked at both ends."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.study.figures.look import BAND, FULL, INK, LOOKS, PAPER, QUIET, new_figure, styled

if TYPE_CHECKING:
    from ribbon.lattice import Network
    from ribbon.study.result import Case

__all__ = ["draw_ribbon"]

FloatArray = NDArray[np.float64]

ROOM = 158.0
"""Room for a drawing across a printed page, mm."""

TALL = 64.0
"""Greatest height of one drawing, mm."""

READABLE = 2.0
"""Shortest bond that is told from its neighbours, mm; below this the ends are drawn apart."""

STOUT = 3.0
"""A ribbon less than so many widths long is drawn whole, however small its marks."""

MARGIN = 1.7
"""Room left around the sites of a drawing, in bonds."""

LARGEST_OVERVIEW = 20_000
"""More bonds than this are not drawn one by one at full length."""

START, END = LOOKS["shorter"].colour, LOOKS["plain"].colour
FACES = (INK, PAPER, QUIET, BAND)


@dataclass(frozen=True)
class _Sheet:
    """What is drawn: the network, the ends of the strip, its walls, and lengths, all in nm."""

    network: Network
    left: float
    right: float
    bottom: float
    top: float
    bond: float
    flips: bool
    closed: bool

    @property
    def height(self) -> float:
        return self.top - self.bottom

    @property
    def length(self) -> float:
        return self.right - self.left


def draw_ribbon(case: Case) -> Figure:
    """Draw sites and bonds of a case flat, with arrows on the two ends that are glued.

    A ribbon that is too long for one readable drawing is shown whole as an outline, with both
    ends enlarged below it.
    """
    sheet = _lay(case.network)
    scale = _scale(sheet)
    with styled():
        if scale * sheet.bond >= READABLE or sheet.length < STOUT * sheet.height:
            figure = new_figure(FULL, scale * (sheet.height + 2 * _margin(sheet, scale)) + 34)
            _draw_part(figure.subplots(), sheet, scale, (sheet.left, sheet.right))
        else:
            figure = _draw_in_parts(sheet)
        figure.suptitle(_headline(case, sheet), x=0.012, ha="left", fontsize=7.5, fontweight="bold")
        if sheet.closed:
            turn = "run against each other: flipped" if sheet.flips else "run alike: not flipped"
            figure.supxlabel(
                f"Glue the ends so that P meets P and Q meets Q (the arrows {turn})",
                x=0.012, ha="left", color=QUIET, fontsize=7.5,
            )  # fmt: skip
    return figure


def _lay(network: Network) -> _Sheet:
    places = network.positions
    first = network.bonds.shell == 1
    steps = np.hypot(*network.bonds.displacement[first, :2].T)
    bond = float(steps.min()) if steps.size and steps.min() > 0 else 1.0
    strip: Any = getattr(network, "strip", None)
    low, high = places.min(axis=0), places.max(axis=0)
    if strip is None:
        return _Sheet(
            network, low[0], max(high[0], low[0] + bond), low[1] - bond, high[1] + bond, bond,
            flips=False, closed=False,
        )  # fmt: skip
    # the cut stands halfway between the last slice and the image of the first one
    gap = strip.circumference - float(np.ptp(places[:, 0]))
    left = float(low[0]) - gap / 2
    half = strip.width / 2
    return _Sheet(
        network, left, left + strip.circumference, -half, half, bond,
        flips=bool(getattr(network, "flips", False)), closed=True,
    )  # fmt: skip


def _scale(sheet: _Sheet) -> float:
    """mm of print per nm that shows the whole ribbon."""
    wide = (ROOM - 10) / sheet.length
    tall = 1.6 * TALL if sheet.length < STOUT * sheet.height else TALL
    return min(wide, tall / sheet.height, 8.0 / sheet.bond)


def _margin(sheet: _Sheet, scale: float) -> float:
    """Room around a drawing, nm: enough for the arrows and letters."""
    return max(MARGIN * sheet.bond, 5.0 / scale)


def _headline(case: Case, sheet: _Sheet) -> str:
    network = case.network
    text = f"{case.label}: {network.n:,} sites, {network.bonds.m:,} bonds"
    if sheet.closed:
        text += f", L = {sheet.length:.4g} nm, W = {sheet.height:.3g} nm between hard walls"
    return text


def _draw_in_parts(sheet: _Sheet) -> Figure:
    room = ROOM / 2 - 6
    scale = min(2.6 / sheet.bond, TALL / sheet.height)
    margin = _margin(sheet, scale)
    crop = min(room / scale - margin, 0.48 * sheet.length)
    overview = max(3.0, ROOM / sheet.length * sheet.height)
    tall = scale * (sheet.height + 2 * margin)
    figure = new_figure(FULL, tall + min(overview, TALL) + 38)
    parts: Any = figure.subfigures(2, 1, height_ratios=[min(overview, TALL) + 14, tall + 24])
    _draw_overview(parts[0].subplots(), sheet, crop)
    ends = parts[1].subplots(1, 2)
    _draw_part(ends[0], sheet, scale, (sheet.left, sheet.left + crop))
    _draw_part(ends[1], sheet, scale, (sheet.right - crop, sheet.right))
    ends[1].set_ylabel("")
    ends[0].set_xlabel(f"x (nm), first {crop:.3g} nm")
    ends[1].set_xlabel(f"x (nm), last {crop:.3g} nm")
    return figure


def _draw_overview(axes: Axes, sheet: _Sheet, crop: float) -> None:
    _draw_band(axes, sheet, (sheet.left, sheet.right))
    note = "whole ribbon against x (nm), to scale"
    if sheet.network.bonds.m <= LARGEST_OVERVIEW:
        inner, _ = _segments(sheet, (sheet.left, sheet.right))
        axes.plot(inner[:, 0], inner[:, 1], color=INK, lw=0.22, solid_capstyle="butt")
    else:
        note += "; its bonds are too many to draw"
    if ROOM / sheet.length * sheet.height >= 3.0:
        axes.set_aspect("equal")
    else:
        note = note.replace("to scale", "its width enlarged")
    for start in (sheet.left, sheet.right - crop):
        frame = Rectangle((start, sheet.bottom), crop, sheet.height, fill=False, lw=0.8)
        frame.set(edgecolor=LOOKS["ribbon"].colour, linestyle=(0, (3, 1.5)))
        axes.add_patch(frame)
    axes.set_xlim(sheet.left - 0.01 * sheet.length, sheet.right + 0.01 * sheet.length)
    axes.set_ylim(sheet.bottom - 0.1 * sheet.height, sheet.top + 0.1 * sheet.height)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_title(f"{note}; dashed: the ends drawn below", loc="left", color=QUIET)


def _draw_part(axes: Axes, sheet: _Sheet, scale: float, part: tuple[float, float]) -> None:
    """Draw what lies between two places along the ribbon, at ``scale`` mm per nm."""
    _draw_band(axes, sheet, part)
    inner, stubs = _segments(sheet, part)
    axes.plot(
        inner[:, 0], inner[:, 1], color=QUIET, lw=float(np.clip(0.3 * scale * sheet.bond, 0.3, 1.4))
    )
    axes.plot(
        stubs[:, 0], stubs[:, 1], color=LOOKS["ribbon"].colour, lw=0.9, ls=(0, (1.6, 1.2)),
        dash_capstyle="butt",
    )  # fmt: skip
    _draw_sites(axes, sheet, scale, part)
    if sheet.closed:
        _draw_ends(axes, sheet, part, _margin(sheet, scale))
    margin = _margin(sheet, scale)
    before = margin if part[0] == sheet.left else 0.0
    after = margin if part[1] == sheet.right else 0.0
    axes.set_xlim(part[0] - before, part[1] + after)
    axes.set_ylim(sheet.bottom - margin, sheet.top + margin)
    axes.set_aspect("equal")
    axes.set_xlabel("along the ribbon x (nm)")
    axes.set_ylabel("across y (nm)")
    axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))


def _draw_band(axes: Axes, sheet: _Sheet, part: tuple[float, float]) -> None:
    axes.add_patch(
        Rectangle(
            (part[0], sheet.bottom), part[1] - part[0], sheet.height, fc=BAND, ec="none", zorder=0
        )
    )


def _draw_sites(axes: Axes, sheet: _Sheet, scale: float, part: tuple[float, float]) -> None:
    places = sheet.network.positions
    shown = (places[:, 0] >= part[0]) & (places[:, 0] <= part[1])
    labels = np.asarray(getattr(sheet.network, "sublattice", np.full(len(places), "")))
    kinds = np.unique(labels)
    size = float(np.clip(0.30 * scale * sheet.bond * 72 / 25.4, 0.5, 7.0))
    for number, kind in enumerate(kinds):
        chosen = shown & (labels == kind)
        face = FACES[number % len(FACES)] if size > 1.2 else INK
        axes.plot(
            places[chosen, 0], places[chosen, 1], ls="none", marker="os^D"[number // 4 % 4],
            ms=size, mfc=face, mec=INK, mew=min(0.7, size / 5), label=f"sublattice {kind}",
        )  # fmt: skip
    _draw_vacancies(axes, sheet, size, part)
    if 1 < kinds.size <= 4 and size > 1.2 and part[0] == sheet.left:
        axes.legend(
            loc="lower left", bbox_to_anchor=(0, 1), ncols=4, borderaxespad=0, handletextpad=0.1
        )


def _draw_vacancies(axes: Axes, sheet: _Sheet, size: float, part: tuple[float, float]) -> None:
    network: Any = sheet.network
    kept = getattr(network, "kept", None)
    if kept is None or network.seam:
        return
    gone = np.delete(network.strip.positions, kept, axis=0)
    gone = gone[(gone[:, 0] >= part[0]) & (gone[:, 0] <= part[1])]
    axes.plot(
        gone[:, 0], gone[:, 1], ls="none", marker="x", ms=max(3.0, size), mec=START, mew=0.9,
        label="vacancy",
    )  # fmt: skip


def _draw_ends(axes: Axes, sheet: _Sheet, part: tuple[float, float], margin: float) -> None:
    """Arrows on the cut: glue the ends so that the arrows run alike and the letters meet."""
    middle = (sheet.bottom + sheet.top) / 2
    for end, turned in ((sheet.left, False), (sheet.right, sheet.flips)):
        if end not in part:
            continue
        # drawn a little outside, so that the bonds that cross the seam stay in sight
        place = end + (-0.5 if end == sheet.left else 0.5) * margin
        tail, tip = (sheet.top, sheet.bottom) if turned else (sheet.bottom, sheet.top)
        axes.plot([place, place], [tail, middle], color=START, lw=2.2, solid_capstyle="butt")
        axes.annotate(
            "", xy=(place, tip), xytext=(place, middle),
            arrowprops={
                "arrowstyle": "-|>,head_width=0.28,head_length=0.5", "color": END, "lw": 2.2,
                "shrinkA": 0, "shrinkB": 0,
            },
        )  # fmt: skip
        for letter, height, colour in (("P", tail, START), ("Q", tip, END)):
            upper = height > middle
            axes.annotate(
                letter, (place, height), xytext=(0, 3 if upper else -3),
                textcoords="offset points", ha="center", va="bottom" if upper else "top",
                color=colour, fontweight="bold", fontsize=9,
            )  # fmt: skip


def _segments(sheet: _Sheet, part: tuple[float, float]) -> tuple[FloatArray, FloatArray]:
    """Bonds inside the strip, and the stubs of those that cross the seam, as broken lines.

    Each is one array of points with a gap (NaN) after every line, so that a drawing holds one
    path instead of thousands.
    """
    bonds = sheet.network.bonds.select(sheet.network.bonds.shell == 1)
    places = sheet.network.positions[:, :2]
    start, end = places[bonds.tail], places[bonds.head]
    step = bonds.displacement[:, :2]
    if not np.any(step):
        step = end - start
    inside = np.abs(start + step - end).max(axis=1) < 1e-6 * sheet.bond
    back = -step
    back[bonds.mirrored, 1] *= -1
    out_tail, out_head = start[~inside], end[~inside]
    stubs = _broken(
        np.concatenate([out_tail, out_head]),
        np.concatenate([out_tail + 0.62 * step[~inside], out_head + 0.62 * back[~inside]]),
    )
    low = np.minimum(start[:, 0], end[:, 0])
    high = np.maximum(start[:, 0], end[:, 0])
    near = inside & (high >= part[0]) & (low <= part[1])
    return _broken(start[near], end[near]), stubs


def _broken(start: FloatArray, end: FloatArray) -> FloatArray:
    gap = np.full_like(start, np.nan)
    return np.stack([start, end, gap], axis=1).reshape(-1, 2)
