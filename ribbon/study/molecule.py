"""A molecule from a file: its frame, its twist, and its Hückel sheet."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, get_args

import numpy as np

from ribbon.analysis.aromaticity import Stability, judge_stability
from ribbon.analysis.heteroatoms import PARAMETERS, Parameters, ParameterSet, PiAtoms, pi_atoms
from ribbon.analysis.hueckel import (
    BETA,
    MOST_STATES,
    HueckelSheet,
    Rule,
    hueckel_matrix,
    hueckel_sheet,
)
from ribbon.errors import BadInput
from ribbon.lattice.framework import FLAT, Framework, find_framework
from ribbon.lattice.molecule import Molecule, bond_atoms
from ribbon.study.molecule_file import MoleculeFile, read_molecule
from ribbon.study.tables import Table

__all__ = ["MoleculeResult", "run_molecule"]

ANGSTROM = 0.1
"""In nm."""

PI_COLUMN = "pi"
"""A column of the file with this name gives the pi electrons of every atom."""


@dataclass(frozen=True, kw_only=True, eq=False)
class MoleculeResult:
    """Everything found for one molecule.

    ``lines`` holds for each atom its line in the file; ``notes`` what a reader should know.
    """

    source: str
    file: MoleculeFile
    molecule: Molecule
    framework: Framework
    atoms: PiAtoms
    sheet: HueckelSheet
    stability: Stability
    charge: int
    rule: Rule
    parameters: Parameters
    lines: tuple[int, ...]
    notes: tuple[str, ...]

    def levels_table(self) -> Table:
        """The levels: place in the complete spectrum, x, E - alpha in eV, electrons."""
        sheet = self.sheet
        return Table(
            "levels-molecule",
            {
                "level": sheet.index,
                "x": sheet.x,
                "energy": sheet.energies,
                "occupation": sheet.occupation,
            },
            {"x": "beta", "energy": "eV from alpha", "occupation": "electrons at 0 K"},
            f"Hückel levels of {self.source}, E = alpha + x beta with beta = {sheet.beta:g} eV",
        )

    def atoms_table(self) -> Table:
        """The atoms: line of the file, element, place, electrons given and held, charge."""
        places = self.framework.network.positions / ANGSTROM
        nothing = np.full(len(places), np.nan)
        populations, charges = self.sheet.populations, self.sheet.charges
        return Table(
            "atoms-molecule",
            {
                "atom": np.arange(len(places)),
                "line": self.lines,
                "element": self.molecule.elements.tolist(),
                "kind": self.atoms.kinds.tolist(),
                **{axis: places[:, k] for k, axis in enumerate("xyz")},
                "electrons": self.atoms.electrons,
                "population": nothing if populations is None else populations,
                "charge": nothing if charges is None else charges,
            },
            {**dict.fromkeys("xyz", "angstrom"), "charge": "e"},
            "Atoms with a p orbital; the charge is that of the pi electrons",
        )

    def bonds_table(self) -> Table:
        """The bonds: ends, length, sign of the overlap of the axes, order times that sign."""
        bonds = self.framework.network.bonds
        orders = self.sheet.bond_orders
        return Table(
            "bonds-molecule",
            {
                "tail": bonds.tail,
                "head": bonds.head,
                "length": np.linalg.norm(bonds.displacement, axis=1) / ANGSTROM,
                "sign": self.framework.signs.astype(np.int64),
                "order": np.full(bonds.m, np.nan) if orders is None else orders,
            },
            {"length": "angstrom"},
            "Bonds between atoms with a p orbital; a positive order binds, whatever the sign",
        )

    def story(self) -> dict[str, Any]:
        """The answer as plain names and values, lengths in angstrom, energies in beta."""
        framework, sheet, twist = self.framework, self.sheet, self.framework.twisting
        linking = None if twist is None else round(twist.linking_half_turns)
        return {
            "title": self.file.comment or self.source,
            "unit": "beta",
            "beta_ev": sheet.beta,
            "atoms": self.molecule.n,
            "bonds": framework.network.bonds.m,
            "kind": framework.kind,
            "meaning": framework.meaning,
            "faces": framework.surface.sizes,
            "euler_characteristic": framework.euler_characteristic,
            "boundary_loops": framework.boundary_loops,
            "orientable": framework.orientable,
            "linking_half_turns": linking,
            "twist_half_turns": None if twist is None else twist.twist_half_turns,
            "writhe_half_turns": None if twist is None else twist.writhe_half_turns,
            "charge": self.charge,
            "electrons": sheet.electrons,
            "rule": self.rule,
            "heteroatoms": self.parameters.source,
            "levels": sheet.x,
            "level_index": sheet.index,
            "occupation": sheet.occupation,
            "homo": sheet.homo,
            "lumo": sheet.lumo,
            "gap": sheet.gap,
            "gap_ev": sheet.gap_ev,
            "open_shell": sheet.open_shell,
            "pi_energy": sheet.pi_energy,
            **_stability(self.stability),
            "bond_orders": self.bonds_table(),
            "charges": sheet.charges,
            "atom_table": self.atoms_table(),
            "doubtful_bonds": self.doubtful_bonds(),
            "certificate": sheet.certificate,
            "notes": self.notes,
        }

    def doubtful_bonds(self) -> list[dict[str, Any]]:
        """Distances that were hard to decide, by the lines of their atoms."""
        line = self.file.lines
        return [
            {
                "lines": [int(line[pair.first]), int(line[pair.second])],
                "length_angstrom": pair.length / ANGSTROM,
                "limit_angstrom": pair.limit / ANGSTROM,
                "bonded": pair.bonded,
                "why": pair.why,
            }
            for pair in self.molecule.doubtful
        ]


def _stability(found: Stability) -> dict[str, Any]:
    return {
        "delocalisation_energy": found.delocalisation_energy,
        "why_no_delocalisation": found.why_no_delocalisation or None,
        "other_sign_energy": found.other_sign_energy,
        "other_sign_gap": found.other_sign_gap,
        "other_closure_energy": found.other_closure_energy,
        "other_closure_gap": found.other_closure_gap,
        "closure_energy": found.closure_energy,
        "verdict": found.verdict,
    }


def run_molecule(
    path: str | Path,
    *,
    charge: int = 0,
    rule: Rule = "plain",
    heteroatoms: ParameterSet = "van-catledge",
    beta: float = BETA,
) -> MoleculeResult:
    """Read an XYZ file and answer for the molecule in it.

    ``charge`` in elementary charges; ``rule`` and ``heteroatoms`` as in
    `ribbon.analysis.hueckel.hueckel_matrix` and `ribbon.analysis.heteroatoms`; ``beta`` in eV.
    A column ``pi`` of the file gives the pi electrons of each atom. Raises `BadInput` in one
    sentence for whatever cannot be answered.
    """
    if heteroatoms not in get_args(ParameterSet):
        known = " or ".join(f'"{name}"' for name in PARAMETERS)
        raise BadInput(f"heteroatoms = {heteroatoms!r} must be {known}")
    parameters = PARAMETERS[heteroatoms]
    file = read_molecule(path)
    source = str(path)
    try:
        molecule = _bonded(file)
        framework = find_framework(molecule)
        atoms = _pi_atoms(file, molecule, framework, charge=charge)
        matrix = hueckel_matrix(framework, atoms, parameters=parameters, rule=rule)
        sheet = hueckel_sheet(matrix, framework, atoms, charge=charge, beta=beta)
        stability = judge_stability(framework, atoms, sheet, parameters=parameters, rule=rule)
    except BadInput as problem:
        raise type(problem)(f"{source}: {problem}") from None
    return MoleculeResult(
        source=source,
        file=file,
        molecule=molecule,
        framework=framework,
        atoms=atoms,
        sheet=sheet,
        stability=stability,
        charge=charge,
        rule=rule,
        parameters=parameters,
        lines=tuple(file.lines[molecule.given].tolist()),
        notes=(*atoms.notes, *_notes(file, molecule, framework), *_sheet_notes(sheet)),
    )


def _bonded(file: MoleculeFile) -> Molecule:
    symbols, lines = file.elements.tolist(), file.lines.tolist()
    return bond_atoms(
        file.elements,
        file.positions * ANGSTROM,
        hydrogens=file.hydrogens * ANGSTROM,
        name=lambda atom: f"the {symbols[atom]} on line {lines[atom]}",
    )


def _pi_atoms(
    file: MoleculeFile, molecule: Molecule, framework: Framework, *, charge: int
) -> PiAtoms:
    faces: Sequence[Sequence[int]] = framework.surface.faces
    if framework.kind == "ring" and framework.way_round is not None:
        faces = [framework.way_round.core.tolist()]
    found = pi_atoms(
        molecule.elements,
        molecule.neighbours,
        hydrogens_known=len(file.hydrogens) > 0,
        charge=charge,
        in_five_ring=sorted({atom for face in faces if len(face) == 5 for atom in face}),
    )
    if PI_COLUMN not in file.columns:
        return found
    own = file.columns[PI_COLUMN][molecule.given]
    if not np.isin(own, (0, 1, 2)).all():
        worst = int(np.flatnonzero(~np.isin(own, (0, 1, 2)))[0])
        raise BadInput(
            f"line {file.lines[molecule.given[worst]]}: {PI_COLUMN} = {own[worst]:g} must be 0, 1 "
            "or 2, the pi electrons of the atom"
        )
    kinds = [
        f"{symbol}:" if two and symbol in {"N", "O", "S"} else symbol
        for symbol, two in zip(molecule.elements.tolist(), own == 2, strict=True)
    ]
    return PiAtoms(kinds=np.array(kinds), electrons=own.astype(np.int64))


def _notes(file: MoleculeFile, molecule: Molecule, framework: Framework) -> list[str]:
    notes = []
    if molecule.doubtful:
        first = molecule.doubtful[0]
        ends = [int(file.lines[atom]) for atom in (first.first, first.second)]
        taken = "a bond" if first.bonded else "no bond"
        notes.append(
            f"{len(molecule.doubtful)} distance(s) leave doubt whether there is a bond; the first "
            f"is {first.length / ANGSTROM:.3f} angstrom between the atoms on lines {ends[0]} and "
            f"{ends[1]}, taken as {taken}: {first.why}"
        )
    if molecule.saturated:
        lines = file.lines[list(molecule.saturated)].tolist()
        told = ", ".join(map(str, lines[:5])) + (" ..." if len(lines) > 5 else "")
        notes.append(
            f"{len(lines)} saturated atom(s) have no p orbital and were left out (line {told})"
        )
    if framework.remark:
        notes.append(framework.remark)
    if framework.weakest < FLAT:
        notes.append(
            f"some axes are nearly at right angles (overlap {framework.weakest:.2g}), so that the "
            "sign of that bond means little"
        )
    return notes


def _sheet_notes(sheet: HueckelSheet) -> list[str]:
    notes = []
    if sheet.open_shell:
        notes.append(
            "an open shell: the frontier level is partly filled, equal levels share its electrons; "
            "a real molecule would distort or take a higher spin"
        )
    if sheet.pi_energy is None:
        notes.append(
            f"more than {MOST_STATES:,} atoms: the levels around the gap are given, counted so "
            "that none is missing, without bond orders, charges and total energy"
        )
    return notes
