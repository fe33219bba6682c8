"""The verb `molecule`: frame, twist and Hückel sheet of an XYZ file."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from ribbon.commands.answer import deliver
from ribbon.commands.options import AsJson, Quiet
from ribbon.commands.output import check_target
from ribbon.errors import BadInput

__all__ = ["molecule"]


class RuleName(StrEnum):
    """How orbital axes enter the bonds."""

    plain = "plain"
    torsion = "torsion"
    cosine = "cosine"
    slater_koster = "slater-koster"


class SetName(StrEnum):
    """Published sets of heteroatom parameters."""

    van_catledge = "van-catledge"
    streitwieser = "streitwieser"


def molecule(
    file: Annotated[
        Path,
        typer.Argument(metavar="FILE.xyz", help="Atoms in angstrom; hydrogens are dropped."),
    ],
    charge: Annotated[int, typer.Option("--charge", help="In elementary charges.")] = 0,
    rule: Annotated[
        RuleName,
        typer.Option(
            "--rule",
            help="Bonds by sign alone (plain), by twist about the bond (torsion), by the angle of "
            "the axes (cosine), or with the part along the bond off (slater-koster).",
        ),
    ] = RuleName.plain,
    heteroatoms: Annotated[
        SetName, typer.Option("--heteroatoms", help="Parameters of N, O, S and B.")
    ] = SetName.van_catledge,
    beta: Annotated[float, typer.Option("--beta", help="Resonance integral in eV.")] = -2.7,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="TABLE.csv", help="Write the levels here, not to stdout."),
    ] = None,
    as_json: AsJson = False,
    quiet: Quiet = False,
) -> None:
    """Print the Hückel levels of a molecule (CSV).

    With --json its frame, twist, bond orders and charges too.
    """
    check_target(out)
    if out is not None and out.exists() and file.exists() and out.samefile(file):
        raise BadInput(f"{out}: is the molecule itself; give another name")
    from ribbon.study.molecule import run_molecule

    result = run_molecule(
        file, charge=charge, rule=rule.value, heteroatoms=heteroatoms.value, beta=beta
    )
    table = result.levels_table()
    files = {} if out is None else {out: table}
    deliver(table, result.story(), files=files, as_json=as_json, quiet=quiet)
