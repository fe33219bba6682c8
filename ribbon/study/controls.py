"""The controls that stand beside the twisted ring: plain, double cover, open strip."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ribbon.errors import BadInput
from ribbon.hopping import assemble
from ribbon.lattice import (
    close_strip,
    double_cover,
    lay_strip,
    open_strip,
    remove_sites,
    reseam,
)
from ribbon.study.build import Model, Plan, on_network
from ribbon.study.result import CaseName

__all__ = ["build_controls"]


def build_controls(plan: Plan) -> tuple[tuple[Model, ...], tuple[str, ...]]:
    """The controls that the file asks for, and notes on those that do not exist."""
    models: list[Model] = []
    notes: list[str] = []
    for name in plan.file.control.compare:
        found, note = _CONTROLS[name](plan)
        models += found
        notes += note
    return tuple(models), tuple(notes)


def _plain(plan: Plan) -> tuple[list[Model], list[str]]:
    ring, hamiltonian = plan.ring, plan.model.hamiltonian
    if ring.half_twists == 0:
        return [], ["the ribbon is the plain ring itself; it has no plain control"]
    try:
        plain = reseam(ring, half_twists=0)
    except BadInput:
        return _neighbours(plan)
    model = Model(
        name="plain",
        label="plain ring",
        hamiltonian=on_network(hamiltonian, plain, hamiltonian.site_energies),
    )
    return [model], []


def _neighbours(plan: Plan) -> tuple[list[Model], list[str]]:
    """Plain rings half a period shorter and longer, where that of the same length is none."""
    ring, hamiltonian = plan.ring, plan.model.hamiltonian
    cover, lift = double_cover(ring)
    held = np.arange(cover.strip.n) if cover.kept is None else cover.kept
    energies = np.full(cover.strip.n, np.nan)
    energies[held] = hamiltonian.site_energies[lift]
    models = []
    names: tuple[tuple[CaseName, float], ...] = (("shorter", -0.5), ("longer", 0.5))
    for name, step in names:
        length = ring.strip.length + step
        if length <= 0:
            continue
        strip = lay_strip(
            ring.strip.lattice, rows=ring.strip.rows, length=length, spacing=ring.strip.spacing
        )
        try:
            near = close_strip(strip, half_twists=0, shells=ring.shells)
        except BadInput:
            continue
        values = energies[: strip.n]
        near = remove_sites(near, np.flatnonzero(np.isnan(values)))
        models.append(
            Model(
                name=name,
                label=f"{name} plain ring",
                hamiltonian=on_network(hamiltonian, near, values[~np.isnan(values)]),
                size_scale=near.n / ring.n,
            )
        )
    missing = f"no plain ring of length {ring.strip.length:g} exists"
    if not models:
        return [], [f"{missing}, nor one half a period shorter or longer"]
    return models, [
        f"{missing}; its neighbours, half a period shorter and longer, stand in its place beside "
        "the double cover"
    ]


def _double(plan: Plan) -> tuple[list[Model], list[str]]:
    hamiltonian = plan.model.hamiltonian
    cover, lift = double_cover(plan.ring)
    model = Model(
        name="double",
        label="double cover",
        hamiltonian=on_network(hamiltonian, cover, hamiltonian.site_energies[lift]),
        flux_scale=2.0,
        size_scale=2,
    )
    return [model], []


def _open(plan: Plan) -> tuple[list[Model], list[str]]:
    ring, hamiltonian = plan.ring, plan.model.hamiltonian
    network = open_strip(ring.strip, shells=ring.shells)
    if ring.kept is not None:
        network = remove_sites(network, np.setdiff1d(np.arange(ring.strip.n), ring.kept))
    used = int(np.max(network.bonds.shell, initial=1))
    hopping = replace(
        hamiltonian.hopping,
        shells=hamiltonian.hopping.shells[:used],
        site_energy=hamiltonian.site_energies,
        disorder=0.0,
    )
    return [Model(name="open", label="open strip", hamiltonian=assemble(network, hopping))], []


_CONTROLS = {"plain": _plain, "double": _double, "open": _open}
