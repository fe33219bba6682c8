"""What a file would build and what it would cost, without computing levels."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from ribbon.analysis.spectrum import choice
from ribbon.lattice import certify_topology, closing_sizes
from ribbon.study.build import build
from ribbon.study.forecast import forecast_levels, forecast_sweep

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["describe"]


def describe(file: RibbonFile) -> dict[str, Any]:
    """Sites, bonds, topology, sizes that close nearby, and the cost expected.

    All entries are plain numbers, texts, lists and mappings.
    """
    plan = build(file)
    ring, hamiltonian = plan.ring, plan.model.hamiltonian
    topology = certify_topology(ring)
    levels = forecast_levels(hamiltonian, plan.window, file.field.flux)
    sweep = forecast_sweep(hamiltonian, plan.fluxes, plan.window)
    near = closing_sizes(
        ring.strip.lattice,
        rows=ring.strip.rows,
        length=ring.strip.length,
        half_twists=ring.half_twists,
        count=5,
    )
    told = {
        "title": file.heading,
        "lattice": ring.strip.lattice.name,
        "rows": ring.strip.rows,
        "length": ring.strip.length,
        "half_twists": ring.half_twists,
        "orbital": file.ribbon.orbital,
        "spacing_nm": ring.strip.spacing,
        "length_nm": ring.circumference,
        "width_nm": ring.strip.width,
        **asdict(topology),
        "all_bonds": ring.bonds.m,
        "amplitudes": list(hamiltonian.hopping.shells),
        "unit": hamiltonian.unit,
        "sizes_that_close": [f"rows = {rows}, length = {length:g}" for rows, length in near],
        "forecast": {
            "levels_method": levels.method,
            "levels_method_because": choice(
                hamiltonian, whole=plan.window.all, method=plan.window.method
            )[1],
            "levels_seconds": levels.seconds,
            "levels_bytes": levels.bytes,
            "sweep_method": sweep.method,
            "sweep_seconds": sweep.seconds,
            "sweep_bytes": sweep.bytes,
        },
        "notes": list(plan.notes),
    }
    if topology.components > 1:
        told["notes"].append(f"the ring falls into {topology.components} detached pieces")
    return told
