"""From a ribbon file to the Hamiltonian of the ribbon and those of its controls."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from ribbon.analysis import Filling, Window
from ribbon.analysis.exact import blocks_of
from ribbon.analysis.levels import FloatArray
from ribbon.errors import BadInput, TooLarge
from ribbon.hopping import Hamiltonian, Hopping, assemble, draw_vacancies, effective_mass
from ribbon.lattice import (
    Lattice,
    Network,
    Ring,
    Strip,
    close_strip,
    fit_strip,
    holds_together,
    lay_strip,
    read_lattice,
    remove_sites,
)
from ribbon.study.forecast import available_bytes
from ribbon.study.result import CaseName
from ribbon.study.site_table import read_site_table

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["BYTES_PER_SITE", "Model", "Plan", "build", "on_network", "strip_of"]

BYTES_PER_SITE = 1500
"""Measured peak of building bonds and matrix, rounded up."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Model:
    """One ring to compute: its Hamiltonian, its name, and how its flux and filling scale."""

    name: CaseName
    label: str
    hamiltonian: Hamiltonian
    flux_scale: float = 1.0
    size_scale: float = 1.0


@dataclass(frozen=True, kw_only=True, eq=False)
class Plan:
    """The ribbon of a file, ready to compute, with what the file asks for."""

    file: RibbonFile
    model: Model
    window: Window
    filling: Filling
    notes: tuple[str, ...]

    @property
    def ring(self) -> Ring:
        """The ring of the ribbon."""
        ring = self.model.hamiltonian.ring
        assert ring is not None
        return ring

    @property
    def fluxes(self) -> FloatArray:
        """Fluxes of the sweep through the ribbon."""
        sweep = self.file.sweep.flux
        return np.linspace(sweep.from_, sweep.to, sweep.points)

    def window_for(self, model: Model) -> Window:
        """The window of a case: a cover that is twice as large has twice as many levels.

        A control without symmetry (the open strip) takes the way that fits it.
        """
        count = self.window.count * max(1, round(model.size_scale))
        lacking = self.window.method == "symmetry" and blocks_of(model.hamiltonian) is None
        own = model.name == "ribbon" or not lacking
        return replace(self.window, count=count, method=self.window.method if own else "auto")

    def filling_for(self, model: Model) -> Filling:
        """The filling of a case: numbers of electrons grow with the cover."""
        electrons = self.filling.electrons
        if isinstance(electrons, str) or electrons is None:
            return self.filling
        return replace(self.filling, electrons=electrons * model.size_scale)


def strip_of(file: RibbonFile) -> tuple[Strip, tuple[str, ...]]:
    """The strip that the file lays, and notes on how its size was found."""
    ribbon = file.ribbon
    lattice = read_lattice(file.lattice_path_or_name)
    rows, length = ribbon.rows, ribbon.length
    notes: list[str] = []
    if rows is None or length is None:
        rows, length = fit_strip(
            lattice,
            half_twists=ribbon.half_twists,
            spacing=ribbon.spacing,
            rows=ribbon.rows,
            width=ribbon.width_nm,
            length=ribbon.length,
            length_nm=ribbon.length_nm,
        )
    strip = lay_strip(lattice, rows=rows, length=length, spacing=ribbon.spacing)
    for key, wanted, got in (
        ("width_nm", ribbon.width_nm, strip.width),
        ("length_nm", ribbon.length_nm, strip.circumference),
    ):
        if wanted is not None and not 0.5 < got / wanted < 2:
            raise BadInput(
                f"ribbon.{key} = {wanted:g}: the nearest size that closes has {got:.4g} nm "
                f"(rows = {rows}, length = {length:g}), which is not near"
            )
        if wanted is not None:
            notes.append(
                f"{key} = {wanted:g}: the nearest size that closes has {got:.6g} nm "
                f"({100 * (got / wanted - 1):+.2f} %), rows = {rows}, length = {length:g}"
            )
    return strip, tuple(notes)


def build(file: RibbonFile) -> Plan:
    """Build the ribbon of a file. Raises `BadInput` for what cannot be built."""
    strip, size_notes = strip_of(file)
    _check_memory(strip.n)
    shells = 1 if file.hopping.shells is None else len(file.hopping.shells)
    ring = close_strip(
        strip,
        half_twists=file.ribbon.half_twists,
        orbital=file.ribbon.orbital,
        shells=shells,
    )
    _check_pieces(ring)
    notes = [*size_notes, *_mass_notes(file, strip.lattice)]
    if file.disorder.vacancies:
        gone = draw_vacancies(ring.n, file.disorder.vacancies, seed=file.disorder.seed)
        ring = remove_sites(ring, gone)
        notes.append(f"{gone.size} of {strip.n} sites were taken out (seed {file.disorder.seed})")
    hamiltonian = assemble(ring, _hopping(file, ring))
    return Plan(
        file=file,
        model=Model(name="ribbon", label=_label(file.ribbon.half_twists), hamiltonian=hamiltonian),
        window=_window(file),
        filling=Filling(
            electrons=_electrons(file),
            chemical_potential=file.sweep.chemical_potential,
            spin=file.sweep.spin,
            temperature=file.sweep.temperature,
        ),
        notes=tuple(notes),
    )


def on_network(hamiltonian: Hamiltonian, network: Network, energies: FloatArray) -> Hamiltonian:
    """The same amplitudes on another network, with these site energies."""
    hopping = replace(hamiltonian.hopping, site_energy=energies, disorder=0.0)
    return assemble(network, hopping)


def _label(half_twists: int) -> str:
    if half_twists == 0:
        return "plain ring"
    return "one half twist" if half_twists == 1 else f"{half_twists} half twists"


def _hopping(file: RibbonFile, ring: Ring) -> Hopping:
    keys = file.hopping
    if keys.mass is not None:
        base = effective_mass(keys.mass, ring.strip.spacing, unit=keys.unit)
        bottom = 4 * base.shells[0]
    else:
        assert keys.shells is not None
        if not any(keys.shells):
            raise BadInput(f"hopping.shells = {list(keys.shells)} holds no amplitude but zero")
        base, bottom = Hopping(shells=keys.shells, unit=keys.unit), 0.0
    return replace(
        base,
        site_energy=_site_energy(file, ring, bottom),
        disorder=file.disorder.strength,
        seed=file.disorder.seed,
    )


def _site_energy(
    file: RibbonFile, ring: Ring, bottom: float
) -> float | dict[str, float] | FloatArray:
    keys = file.hopping
    if file.site_table_path is not None:
        energies = read_site_table(file.site_table_path, ring.strip.n) + bottom
        return np.asarray(energies if ring.kept is None else energies[ring.kept])
    if isinstance(keys.site_energy, dict):
        labels = {str(label) for label in ring.strip.cell.sublattice}
        named = dict(keys.site_energy)
        return named if not bottom else {k: named.get(k, 0.0) + bottom for k in labels | set(named)}
    return float(keys.site_energy or 0.0) + bottom


def _mass_notes(file: RibbonFile, lattice: Lattice) -> list[str]:
    if file.hopping.mass is None:
        return []
    line = lattice.lines[0]
    square = (
        len(lattice.lines) == 1
        and len(line.x) == 1
        and abs(lattice.period - 1) < 1e-9
        and abs(lattice.repeat[1] - 1) < 1e-9
        and abs(lattice.repeat[0] % 1) < 1e-9
    )
    if not square:
        raise BadInput(
            f'hopping.mass needs the square lattice, not "{lattice.name}"; give hopping.shells'
        )
    if file.ribbon.spacing is None:
        return [
            f"ribbon.spacing was left at {lattice.spacing:g} nm; with hopping.mass it sets the "
            "mesh and with it the energies: state it"
        ]
    return []


def _electrons(file: RibbonFile) -> float | Literal["neutral"] | None:
    electrons = file.sweep.electrons
    if electrons is None or isinstance(electrons, str):
        return None if electrons is None else "neutral"
    return float(electrons)


def _window(file: RibbonFile) -> Window:
    keys = file.levels
    between = None if keys.between is None else (keys.between[0], keys.between[1])
    return Window(
        near=keys.near, count=keys.count or 40, between=between, all=keys.all, method=keys.method
    )


def _check_pieces(ring: Ring) -> None:
    """Refuse a ring whose complete strip already falls into pieces (armchair, one row)."""
    if holds_together(ring.strip, ring.shells):
        return
    bonds = ring.bonds
    graph = coo_array((np.ones(bonds.m), (bonds.tail, bonds.head)), shape=(ring.n, ring.n))
    pieces, _ = connected_components(graph, directed=False)
    what = f"falls into {pieces} detached pieces" if pieces > 1 else "has no bond round the ring"
    advice = "its first neighbours do not join along the strip"
    for rows in range(ring.strip.rows + 1, ring.strip.rows + 5):
        wider = lay_strip(ring.strip.lattice, rows=rows, length=1)
        if holds_together(wider, ring.shells):
            advice = f"rows = {rows} or more hold together"
            break
    raise BadInput(f"ribbon.rows = {ring.strip.rows} of {ring.strip.lattice.name} {what}; {advice}")


def _check_memory(sites: int) -> None:
    need = sites * BYTES_PER_SITE
    have = available_bytes()
    if need > 0.8 * have:
        raise TooLarge(
            f"{sites:,} sites need about {need / 1024**3:.1f} GiB to build, and "
            f"{have / 1024**3:.1f} GiB are free here; fewer ribbon.rows or a shorter "
            f"ribbon.length with at most {int(0.8 * have / BYTES_PER_SITE):,} sites would fit"
        )
