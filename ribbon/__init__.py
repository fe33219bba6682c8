"""Ribbons closed into rings with half twists: levels, edge states, flux response, topology.

Names at this root load when they are first used, so that importing the package is quick.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from ribbon.analysis import (
        Filling,
        Levels,
        Window,
        all_levels,
        compare_continuum,
        count_below,
        density_of_states,
        edge_states,
        find_gap,
        levels_between,
        levels_near,
        sweep_flux,
    )
    from ribbon.hopping import Hamiltonian, Hopping, assemble, effective_mass
    from ribbon.lattice import (
        Network,
        certify_topology,
        close_strip,
        lay_strip,
        read_lattice,
    )
    from ribbon.study import read_results, read_study, run_study, write_folder

__version__ = "0.1.0"

_ROOMS = {
    "lattice": (
        "Network",
        "certify_topology",
        "close_strip",
        "lay_strip",
        "read_lattice",
    ),
    "hopping": ("Hamiltonian", "Hopping", "assemble", "effective_mass"),
    "analysis": (
        "Filling",
        "Levels",
        "Window",
        "all_levels",
        "compare_continuum",
        "count_below",
        "density_of_states",
        "edge_states",
        "find_gap",
        "levels_between",
        "levels_near",
        "sweep_flux",
    ),
    "study": ("read_results", "read_study", "run_study", "write_folder"),
}
_HOME = {name: room for room, names in _ROOMS.items() for name in names}

__all__ = [
    "Filling",
    "Hamiltonian",
    "Hopping",
    "Levels",
    "Network",
    "Window",
    "all_levels",
    "assemble",
    "certify_topology",
    "close_strip",
    "compare_continuum",
    "count_below",
    "density_of_states",
    "edge_states",
    "effective_mass",
    "find_gap",
    "lay_strip",
    "levels_between",
    "levels_near",
    "read_lattice",
    "read_results",
    "read_study",
    "run_study",
    "sweep_flux",
    "write_folder",
]


def __getattr__(name: str) -> object:
    """Load a public name from its room when it is first asked for."""
    if name not in _HOME:
        raise AttributeError(f"module 'ribbon' has no attribute {name!r}")
    value = getattr(import_module(f"ribbon.{_HOME[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    """Names a user may ask for."""
    return sorted([*__all__, "__version__"])
