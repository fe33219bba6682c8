"""The figures of a study, one function each; all return a matplotlib figure.

matplotlib is imported with this package: import it only where figures are drawn.
"""

from ribbon.study.figures.collect import draw_all, figure_data
from ribbon.study.figures.continuum import draw_continuum
from ribbon.study.figures.currents import draw_currents
from ribbon.study.figures.density import draw_density
from ribbon.study.figures.edge_state import draw_edge_state
from ribbon.study.figures.edges import draw_edges
from ribbon.study.figures.flux import draw_flux
from ribbon.study.figures.levels import draw_levels
from ribbon.study.figures.look import to_png, to_svg
from ribbon.study.figures.ribbon import draw_ribbon
from ribbon.study.figures.shift import draw_shift
from ribbon.study.figures.space import draw_space, space_points

__all__ = [
    "draw_all",
    "draw_continuum",
    "draw_currents",
    "draw_density",
    "draw_edge_state",
    "draw_edges",
    "draw_flux",
    "draw_levels",
    "draw_ribbon",
    "draw_shift",
    "draw_space",
    "figure_data",
    "space_points",
    "to_png",
    "to_svg",
]
