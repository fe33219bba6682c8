"""The figures of a study, one function each; all return a matplotlib figure.

matplotlib is imported with this package: import it only where figures are drawn.
"""

from ribbon.study.figures.collect import draw_all, figure_data
from ribbon.study.figures.currents import draw_currents
from ribbon.study.figures.flux import draw_flux
from ribbon.study.figures.levels import draw_levels
from ribbon.study.figures.look import to_png, to_svg
from ribbon.study.figures.ribbon import draw_ribbon
from ribbon.study.figures.shift import draw_shift

__all__ = [
    "draw_all",
    "draw_currents",
    "draw_flux",
    "draw_levels",
    "draw_ribbon",
    "draw_shift",
    "figure_data",
    "to_png",
    "to_svg",
]
