"""The look of the figures: colours, line styles, sizes, and files that never vary.

Every case has a colour, a line style and a marker of its own, so that it is told apart by eyes
that see fewer colours and in grey print. Figures are made with the object interface of
matplotlib: no window, no state shared between figures.
"""

from __future__ import annotations

import io
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import Figure
from matplotlib.ticker import ScalarFormatter

from ribbon.study.numbers import axis_unit

__all__ = [
    "BAND",
    "DARK",
    "FACES",
    "FULL",
    "HALF",
    "INK",
    "LOOKS",
    "NIGHT",
    "PALE",
    "PAPER",
    "QUIET",
    "RULE",
    "TINTS",
    "Look",
    "label_values",
    "look_of",
    "mixed",
    "new_figure",
    "panel_title",
    "styled",
    "to_png",
    "to_svg",
]

HALF = 86.0
"""Width of one printed column, mm."""

FULL = 178.0
"""Width of two printed columns, mm."""

INK = "#20242c"
QUIET = "#5d6673"
RULE = "#c3cad3"
BAND = "#e6ebf0"
PAPER = "#ffffff"


@dataclass(frozen=True)
class Look:
    """How one case is drawn: its colour on paper and on a dark page, dashes and marker."""

    colour: str
    dark: str
    dash: str | tuple[float, tuple[float, ...]]
    marker: str


LOOKS = {
    "ribbon": Look("#0a4468", "#9ad9ff", "-", "o"),
    "plain": Look("#cf7f0e", "#f0a030", (0, (5, 1.6)), "s"),
    "double": Look("#8a80e8", "#8f7bf5", (0, (1.2, 1.2)), "D"),
    "open": Look("#14a58a", "#2bb896", (0, (6, 1.4, 1.2, 1.4)), "^"),
    "shorter": Look("#7a1020", "#e0525f", (0, (3, 1.2)), "v"),
    "longer": Look("#5a5f00", "#fff0a8", (0, (8, 2)), "P"),
}

NIGHT = "#14181f"
TINTS = (0.0, 0.3, 0.15)
"""How far the lines of neighbouring branches are mixed with the paper, in turn."""

PALE = 0.75
"""How far a band is mixed with the paper."""


def mixed(colour: str, paper: str, share: float) -> str:
    """The colour mixed with a share of the paper it stands on.

    >>> mixed("#000000", "#ffffff", 0.2)
    '#333333'
    """
    parts = zip(to_rgb(colour), to_rgb(paper), strict=True)
    red, green, blue = ((1 - share) * ink + share * ground for ink, ground in parts)
    return to_hex((red, green, blue))


SHADES = (0.46, 0.51, 0.56, 0.61, 0.66, 0.71, 0.76, 0.81)
"""How far the faces of a band are mixed with the paper, from seen aslant to seen square on."""

SIDES = (LOOKS["ribbon"], LOOKS["plain"])
FACES = tuple(tuple(mixed(look.colour, PAPER, share) for share in SHADES) for look in SIDES)
"""Tints of the two faces of a band in space."""

DARK = {
    INK: "#e8ecf2",
    QUIET: "#a3adba",
    RULE: "#46505d",
    BAND: "#262d37",
    PAPER: NIGHT,
    **{
        mixed(look.colour, PAPER, tint): mixed(look.dark, NIGHT, tint)
        for look in LOOKS.values()
        for tint in (*TINTS, PALE)
    },
    **{
        mixed(look.colour, PAPER, share): mixed(look.dark, NIGHT, share)
        for look in SIDES
        for share in SHADES
    },
}
"""The colour that takes the place of each colour on a dark page."""

_STYLE: Any = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans", "Verdana", "sans-serif"],
    "font.size": 7.5,
    "axes.labelsize": 7.5,
    "axes.titlesize": 7.5,
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "legend.fontsize": 7.0,
    "legend.frameon": False,
    "legend.handlelength": 2.6,
    "text.color": INK,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "axes.facecolor": "none",
    "figure.facecolor": PAPER,
    "savefig.facecolor": "auto",
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "axes.unicode_minus": True,
    "axes.formatter.useoffset": False,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.6,
    "ytick.major.size": 2.6,
    "xtick.direction": "out",
    "ytick.direction": "out",
    "lines.linewidth": 1.1,
    "lines.solid_capstyle": "round",
    "path.simplify": False,
    "svg.fonttype": "none",
    "svg.hashsalt": "halftwist",
    "figure.constrained_layout.h_pad": 0.03,
    "figure.constrained_layout.w_pad": 0.03,
}


def look_of(name: str) -> Look:
    """The look of a case by its name; names without one of their own look like ``plain``."""
    return LOOKS.get(name, LOOKS["plain"])


@contextmanager
def styled() -> Iterator[None]:
    """Within this block matplotlib draws and writes in the look of this package."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_STYLE)
        yield


def new_figure(width: float, height: float) -> Figure:
    """An empty figure, ``width`` by ``height`` in mm; call it within `styled`."""
    return Figure(figsize=(width / 25.4, height / 25.4), layout="constrained")


def panel_title(axes: Axes, text: str, *, colour: str = INK) -> None:
    """Write the title of one panel, at its left."""
    axes.set_title(text, loc="left", color=colour, fontweight="bold")


class _Scaled(ScalarFormatter):
    """Writes ticks times a factor, without offset or power of ten."""

    def __init__(self, factor: float) -> None:
        super().__init__(useOffset=False)
        self.set_scientific(False)
        self.factor = factor

    def set_locs(self, locs: Any) -> None:
        super().set_locs([self.factor * place for place in locs])

    def __call__(self, x: float, pos: int | None = None) -> str:
        return super().__call__(self.factor * x, pos)


def label_values(axis: Axis, text: str, *, largest: float, unit: str) -> None:
    """Label an axis with its unit, in a prefix or power of ten that keeps the ticks short."""
    factor, shown = axis_unit(largest, unit)
    axis.set_major_formatter(_Scaled(factor))
    axis.set_label_text(f"{text} ({shown})")


def to_svg(figure: Figure) -> str:
    """The figure as SVG text, with text as text; the same figure gives the same bytes."""
    buffer = io.StringIO()
    with styled():
        figure.savefig(buffer, format="svg", metadata={"Date": None, "Creator": None})
    return buffer.getvalue().replace("\r\n", "\n")


def to_png(figure: Figure, *, dpi: float = 300.0) -> bytes:
    """The figure as PNG, by default at print resolution."""
    buffer = io.BytesIO()
    with styled():
        figure.savefig(buffer, format="png", dpi=dpi, metadata={"Software": None})
    return buffer.getvalue()
