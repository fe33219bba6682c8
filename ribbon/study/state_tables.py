"""Tables of edge states, densities and the continuum comparison (see `ribbon.study.tables`)."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ribbon.analysis import edge_content
from ribbon.study.tables import Column, Table

if TYPE_CHECKING:
    from ribbon.study.result import Case

__all__ = [
    "continuum_shift_table",
    "continuum_table",
    "density_table",
    "edges_table",
    "histogram_table",
    "meshes_table",
    "unrolled_table",
]

WANTED = 0.01
"""The accuracy that the column ``spacing_for_1_percent`` is about."""


def edges_table(case: Case) -> Table:
    """Edge weight, decay length, participation and edge momentum of every level."""
    found = case.edges
    if found is None:
        raise ValueError(f"{case.name} has no edge states: the states were not computed")
    columns: dict[str, Column] = {
        "level": found.level,
        "energy": found.energy,
        "edge_weight": found.edge_weight,
        "decay_length": found.decay_length,
        "participation": found.participation,
        "edge_momentum": found.edge_momentum,
        "edge_share": found.edge_share,
    }
    if any(not loop.is_edge for loop in found.loops):
        columns["hole_weight"] = found.hole_weight
    return Table(
        f"edges-{case.name}",
        columns,
        {
            "energy": case.levels.unit,
            "decay_length": "nm",
            "participation": "sites",
            "edge_momentum": "2π/L",
        },
        f"Where the states of the {case.label} live: edges reach {found.within:.4g} nm in",
    )


def unrolled_table(case: Case, position: int) -> Table:
    """Momentum content of one level (by its position among those found) along its edges."""
    found = case.edges
    if found is None or case.hamiltonian.ring is None:
        raise ValueError(f"{case.name} has no edge to unroll")
    level = case.levels.part(
        position,
        position + 1,
        lower=float(case.levels.energies[position]),
        upper=float(case.levels.energies[position]),
    )
    loops = [loop for loop in found.loops if loop.is_edge]
    content = [edge_content(case.hamiltonian, level, loop) for loop in loops]
    return Table(
        f"content-{case.name}",
        {
            "edge_momentum": content[0][0],
            "share": np.mean([power[:, 0] for _, power in content], axis=0),
        },
        {"edge_momentum": "2π/L"},
        f"Momentum content along the edge, level {found.level[position]} of the {case.label}",
    )


def density_table(case: Case) -> Table:
    """Density of states on its grid, and the number of levels below."""
    found = case.density
    if found is None:
        raise ValueError(f"{case.name} has no density of states")
    columns: dict[str, Column] = {
        "energy": found.energies,
        "density": found.density,
        "levels_below": found.integrated,
    }
    if found.error is not None:
        columns["error"] = found.error
    per_energy = f"levels per {found.unit}"
    return Table(
        f"density-{case.name}",
        columns,
        {"energy": found.unit, "density": per_energy, "error": per_energy},
        f"Density of states of the {case.label}, broadened by {found.broadening:g} {found.unit}",
    )


def histogram_table(case: Case) -> Table:
    """Levels counted in bins of energy."""
    found = case.density
    if found is None:
        raise ValueError(f"{case.name} has no density of states")
    return Table(
        f"histogram-{case.name}",
        {"lower": found.edges[:-1], "upper": found.edges[1:], "levels": found.counts},
        {"lower": found.unit, "upper": found.unit},
        f"Levels of the {case.label} counted in bins",
    )


def continuum_table(case: Case) -> Table:
    """Levels beside the continuum formula and what finer meshes lead to.

    ``relative_error`` is (energy - continuum) over the continuum value counted from the band
    bottom or the Dirac point, empty where that is 0.
    """
    found = case.continuum
    if found is None:
        raise ValueError(f"{case.name} has no continuum comparison")
    modes = found.modes
    columns: dict[str, Column] = {
        "level": found.level,
        "energy": found.energy,
        "continuum": found.continuum,
        "extrapolated": found.extrapolated,
        "relative_error": found.relative_error,
        "order": found.order,
        "momentum": modes.wave,
        "transverse": modes.band,
        "parity": modes.parity,
        "phase": found.phase,
        "holds": found.holds,
        "spacing_for_1_percent": found.spacing_for(WANTED),
    }
    unit = found.unit
    return Table(
        f"continuum-{case.name}",
        columns,
        {
            "energy": unit,
            "continuum": unit,
            "extrapolated": unit,
            "momentum": "2π/L",
            "phase": "|k|a",
            "spacing_for_1_percent": "nm",
        },
        f"Levels of the {case.label} beside the continuum formula",
    )


def meshes_table(case: Case) -> Table:
    """Every compared level on every mesh: its energy and error against the spacing."""
    found = case.continuum
    if found is None:
        raise ValueError(f"{case.name} has no continuum comparison")
    meshes, levels = found.meshes.shape
    return Table(
        f"meshes-{case.name}",
        {
            "level": np.tile(found.level, meshes),
            "spacing": np.repeat(found.spacings, levels),
            "energy": found.meshes.ravel(),
            "relative_error": found.errors.ravel(),
        },
        {"spacing": "nm", "energy": found.unit},
        f"Levels of the {case.label} on finer and finer meshes",
    )


def continuum_shift_table(case: Case, control: Case) -> Table:
    """Ribbon minus control mode by mode: on the lattice, in the continuum, and the rest."""
    found = control.continuum_shift
    if found is None:
        raise ValueError(f"{control.name} is not paired with {case.name} mode by mode")
    names = ("energy", "control_energy", "shift", "continuum_shift", "lattice_part")
    return Table(
        f"continuum-shift-{case.name}-{control.name}",
        {
            "level": found.level,
            "control_level": found.control_level,
            "energy": found.energy,
            "control_energy": found.control_energy,
            "shift": found.shift,
            "continuum_shift": found.continuum,
            "lattice_part": found.lattice_part,
            "holds": found.holds,
        },
        dict.fromkeys(names, found.unit),
        f"Levels of the {case.label} minus those of the {control.label}, paired by mode: what "
        "the lattice adds to the shift of the continuum",
    )
