"""The analysis room: levels, gaps, flux response."""

from ribbon.analysis.filling import Filling, Gap, find_gap, occupations
from ribbon.analysis.flux import FluxResponse, Totals, Window, sweep_flux
from ribbon.analysis.harmonic import HalfQuantum, Harmonics, half_quantum, harmonics
from ribbon.analysis.levels import Certificate, Levels
from ribbon.analysis.spectrum import (
    all_levels,
    count_below,
    levels_at,
    levels_between,
    levels_near,
)

__all__ = [
    "Certificate",
    "Filling",
    "FluxResponse",
    "Gap",
    "HalfQuantum",
    "Harmonics",
    "Levels",
    "Totals",
    "Window",
    "all_levels",
    "count_below",
    "find_gap",
    "half_quantum",
    "harmonics",
    "levels_at",
    "levels_between",
    "levels_near",
    "occupations",
    "sweep_flux",
]
