"""The analysis room: levels, gaps, flux response, edge states, continuum, densities."""

from ribbon.analysis.continuum import (
    ContinuumComparison,
    ContinuumShift,
    compare_continuum,
    continuum_shift,
    continuum_zero,
)
from ribbon.analysis.density import (
    Density,
    density_of_states,
    levels_density,
    local_density,
    moments_density,
    shell_density,
)
from ribbon.analysis.edges import EdgeStates, edge_content, edge_states, row_profile, unroll
from ribbon.analysis.filling import Filling, Gap, find_gap, occupations
from ribbon.analysis.flux import FluxResponse, Totals, Window, sweep_flux
from ribbon.analysis.harmonic import HalfQuantum, Harmonics, half_quantum, harmonics
from ribbon.analysis.levels import Certificate, Levels
from ribbon.analysis.moments import (
    LocalDensity,
    Moments,
    local_density_moments,
    moments_for,
    spectral_moments,
)
from ribbon.analysis.spectrum import (
    all_levels,
    count_below,
    levels_at,
    levels_between,
    levels_near,
)

__all__ = [
    "Certificate",
    "ContinuumComparison",
    "ContinuumShift",
    "Density",
    "EdgeStates",
    "Filling",
    "FluxResponse",
    "Gap",
    "HalfQuantum",
    "Harmonics",
    "Levels",
    "LocalDensity",
    "Moments",
    "Totals",
    "Window",
    "all_levels",
    "compare_continuum",
    "continuum_shift",
    "continuum_zero",
    "count_below",
    "density_of_states",
    "edge_content",
    "edge_states",
    "find_gap",
    "half_quantum",
    "harmonics",
    "levels_at",
    "levels_between",
    "levels_density",
    "levels_near",
    "local_density",
    "local_density_moments",
    "moments_density",
    "moments_for",
    "occupations",
    "row_profile",
    "shell_density",
    "spectral_moments",
    "sweep_flux",
    "unroll",
]
