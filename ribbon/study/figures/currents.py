"""Total current against flux, and its harmonics, for the ribbon and its controls."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from ribbon.hopping.units import current_factor
from ribbon.study.figures.look import (
    FULL,
    INK,
    PALE,
    PAPER,
    RULE,
    label_values,
    look_of,
    mixed,
    new_figure,
    panel_title,
    styled,
)
from ribbon.study.wording import NOISE

if TYPE_CHECKING:
    from ribbon.analysis import Totals
    from ribbon.study.result import Case

__all__ = ["broken_current", "draw_currents"]

FloatArray = NDArray[np.float64]

MOST_MARKS = 12
"""More shared shells than this in a sweep are shown as a band instead of one by one."""


def broken_current(totals: Totals, factor: float) -> tuple[FloatArray, FloatArray]:
    """Current against flux as a line that breaks where a shell is shared.

    There the line ends at the value from the left and starts again at that from the right.
    """
    flux, current = np.asarray(totals.flux), factor * np.asarray(totals.slope)
    shared = np.flatnonzero(totals.shared)
    sides = np.column_stack([
        factor * np.asarray(totals.left)[shared],
        np.full(shared.size, np.nan),
        factor * np.asarray(totals.right)[shared],
    ])  # fmt: skip
    lengths = np.ones(flux.size, dtype=np.int64)
    lengths[shared] = 3
    line = np.repeat(current, lengths)
    line[np.repeat(np.isin(np.arange(flux.size), shared), lengths)] = sides.ravel()
    return np.repeat(flux, lengths), line


def draw_currents(cases: Sequence[Case]) -> Figure:
    """Draw the total current against the flux, and its harmonics as stems beside it.

    Open marks show fluxes where a shell cut by the filling is shared equally; a dotted line
    joins the two one-sided values there. Where that happens often, a band lies between them.
    """
    summed = [c for c in cases if c.response is not None and c.response.totals is not None]
    if not summed:
        raise ValueError("no case has a total current; there is nothing to draw")
    unit = summed[0].levels.unit
    factor, label = current_factor(unit)
    largest = _largest(summed, factor)
    if largest <= NOISE * abs(factor) * max(case.hamiltonian.scale for case in summed):
        largest, factor = 1.0, 0.0  # rounding is drawn as the zero it is
    barred = [case for case in summed if case.harmonics is not None]
    with styled():
        figure = new_figure(FULL, 78)
        if barred:
            left, right = figure.subplots(1, 2, width_ratios=[1.25, 1])
            _draw_harmonics(right, barred, factor, label)
        else:
            left = figure.subplots()
        for case in summed:
            _draw_total(left, case, factor)
        left.axhline(0, color=RULE, lw=0.6, zorder=0)
        left.set_xlabel("flux through the ribbon (h/e)")
        label_values(left.yaxis, "current", largest=largest, unit=label)
        left.margins(x=0)
        figure.legend(*left.get_legend_handles_labels(), loc="outside upper left", ncols=4)
        panel_title(left, "total current")
    return figure


def _largest(cases: Sequence[Case], factor: float) -> float:
    found = 0.0
    for case in cases:
        totals = case.response.totals if case.response is not None else None
        if totals is not None:
            sides = [totals.slope, totals.left, totals.right]
            found = max(found, float(np.nanmax(np.abs(factor * np.asarray(sides)))))
    return found


def _draw_total(axes: Axes, case: Case, factor: float) -> None:
    assert case.response is not None
    totals = case.response.totals
    assert totals is not None
    look = look_of(case.name)
    often = np.count_nonzero(totals.shared) > MOST_MARKS
    if often:
        flux, current = np.asarray(totals.flux), factor * np.asarray(totals.slope)
    else:
        flux, current = broken_current(totals, factor)
    axes.plot(
        flux / case.flux_scale, current, color=look.colour, ls=look.dash, label=case.label,
        lw=2.0 if case.name == "ribbon" else 1.1, zorder=3 if case.name == "ribbon" else 4,
        marker=look.marker if np.size(totals.flux) < 3 else "",
    )  # fmt: skip
    if often:
        low, high = (factor * np.asarray(side) for side in (totals.left, totals.right))
        pale = mixed(look.colour, PAPER, PALE)
        axes.fill_between(flux / case.flux_scale, low, high, color=pale, lw=0, zorder=1)
    else:
        _mark_shared(axes, case, totals, factor)


def _mark_shared(axes: Axes, case: Case, totals: Totals, factor: float) -> None:
    look = look_of(case.name)
    for place in np.flatnonzero(totals.shared):
        x = totals.flux[place] / case.flux_scale
        axes.plot(
            [x, x], [factor * totals.left[place], factor * totals.right[place]],
            color=look.colour, lw=0.6, ls=(0, (1, 1.5)), zorder=2,
        )  # fmt: skip
        axes.plot(
            [x], [factor * totals.slope[place]], marker=look.marker, ms=4, mfc=PAPER,
            mec=look.colour, mew=0.9, ls="none", zorder=5, clip_on=False,
        )  # fmt: skip


def _draw_harmonics(axes: Axes, cases: Sequence[Case], factor: float, label: str) -> None:
    """Stems of the sine amplitudes; whole amplitudes where there are cosines too."""
    whole = any(_has_cosines(case) for case in cases)
    width = min(0.24, 0.8 / len(cases))
    for place, case in enumerate(cases):
        harmonics = case.harmonics
        assert harmonics is not None
        sine, cosine = np.asarray(harmonics.sine), np.asarray(harmonics.cosine)
        # the harmonics are those of minus the slope
        heights = abs(factor) * np.hypot(sine, cosine) if whole else -factor * sine
        look = look_of(case.name)
        x = np.asarray(harmonics.order) + (place - (len(cases) - 1) / 2) * width
        axes.vlines(x, 0, heights, color=look.colour, ls=look.dash, lw=1.3, zorder=2)
        axes.plot(
            x, heights, ls="none", marker=look.marker, ms=3.8, mec=look.colour, mew=0.9,
            mfc=look.colour if place == 0 else PAPER, zorder=3,
        )  # fmt: skip
    axes.axhline(0, color=INK, lw=0.6, zorder=1)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.set_xlabel("harmonic of the flux quantum")
    largest = float(np.abs(axes.get_ylim()).max())
    text = "amplitude" if whole else "sine amplitude"
    label_values(axes.yaxis, text, largest=largest, unit=label)
    panel_title(axes, "harmonics")


def _has_cosines(case: Case) -> bool:
    assert case.harmonics is not None
    sine, cosine = np.abs(case.harmonics.sine), np.abs(case.harmonics.cosine)
    return bool(cosine.max(initial=0.0) > 1e-3 * max(sine.max(initial=0.0), 1e-300))
