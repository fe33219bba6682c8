"""Verbs whose answer is a table: `levels`, `flux`, `edges` and `continuum`."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, TypeAlias

import typer

from ribbon.commands.answer import deliver, heading, judge, known, load, trust
from ribbon.commands.options import AsJson, File, Quiet, Set
from ribbon.commands.output import check_target, guard_inputs
from ribbon.commands.progress import Progress
from ribbon.errors import BadInput, TooLarge

if TYPE_CHECKING:
    from ribbon.study.result import StudyResult
    from ribbon.study.tables import Table

__all__ = ["continuum", "edges", "flux", "levels"]

Out: TypeAlias = Annotated[
    Path | None,
    typer.Option("--out", metavar="TABLE.csv", help="Write the table here, not to stdout."),
]


@dataclass(frozen=True)
class _Asked:
    """What the verbs with one table share on their command lines."""

    file: Path
    out: Path | None
    as_json: bool
    overrides: list[str] | None
    quiet: bool


Tell = Callable[["StudyResult"], tuple["Table", dict[str, Any]]]
"""The table of a result, and what its JSON says beside heading, checks and notes."""


def _one_table(asked: _Asked, run: str, tell: Tell) -> None:
    """Run what ``run`` names in the study room and deliver its table."""
    check_target(asked.out, not_over=asked.file)
    ribbon_file = load(asked.file, asked.overrides)
    guard_inputs(ribbon_file, asked.out)
    from ribbon.study import run as runs

    with Progress(quiet=asked.quiet) as progress:
        result, doubt = known(lambda: getattr(runs, run)(ribbon_file, progress=progress))
    table, told = tell(result)
    story = {**heading(result), "flux": result.ribbon.flux, **told, **trust(result)}
    files = {} if asked.out is None else {asked.out: table}
    deliver(table, story, files=files, as_json=asked.as_json, quiet=asked.quiet)
    judge(result, doubt)


def levels(
    file: File,
    out: Out = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print the levels that the file asks for (CSV)."""
    _one_table(_Asked(file, out, as_json, overrides, quiet), "run_levels", _levels)


def _levels(result: StudyResult) -> tuple[Table, dict[str, Any]]:
    from ribbon.study.tables import levels_table

    case = result.ribbon
    table = levels_table(case, result.file.hopping.unit)
    return table, {
        "levels": table,
        "gap": case.gap,
        "other_gap": case.other_gap,
        "certificate": case.levels.certificate,
        "residual": case.levels.residual,
    }


def flux(
    file: File,
    out: Out = None,
    totals: Annotated[
        Path | None,
        typer.Option("--totals", metavar="TABLE.csv", help="Write the table of totals here."),
    ] = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print levels and currents against flux (CSV)."""
    if out is not None and totals is not None and out.resolve() == totals.resolve():
        raise BadInput(f"--out and --totals both name {out}; give each table its own file")
    check_target(out, not_over=file)
    check_target(totals, not_over=file)
    ribbon_file = load(file, overrides)
    guard_inputs(ribbon_file, out, totals)
    from ribbon.hopping.units import current_factor
    from ribbon.study.run import run_flux
    from ribbon.study.tables import flux_table, totals_table

    with Progress(quiet=quiet) as progress:
        result, doubt = known(lambda: run_flux(ribbon_file, progress=progress))
    case, unit = result.ribbon, ribbon_file.hopping.unit
    if case.response is None:  # a point could not be certified; the failed check says which
        judge(result, doubt)
    table = flux_table(case, unit)
    summed = case.response is not None and case.response.totals is not None
    sums = totals_table(case, unit) if summed else None
    if totals is not None and sums is None:
        raise TooLarge(" ".join(line for line in result.notes if line.startswith("totals")))
    story = {
        **heading(result),
        "current_unit": current_factor(unit)[1],
        "flux": table,
        "totals": sums,
        "harmonics": case.harmonics,
        "half_quantum": case.half,
        **trust(result),
    }
    wanted = ((out, table), (totals, sums))
    files = {path: entry for path, entry in wanted if path is not None and entry is not None}
    deliver(table, story, files=files, as_json=as_json, quiet=quiet)
    judge(result, doubt)


def edges(
    file: File,
    out: Out = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print how the states live at the edges (CSV).

    Edge weight, decay length, participation and edge momentum of every level.
    """
    _one_table(_Asked(file, out, as_json, overrides, quiet), "run_edges", _edges)


def _edges(result: StudyResult) -> tuple[Table, dict[str, Any]]:
    from ribbon.study.state_tables import edges_table

    found = result.ribbon.edges
    assert found is not None
    table = edges_table(result.ribbon)
    loops = [
        {
            "winding": loop.winding,
            "sites": loop.sites.size,
            "length_nm": loop.length,
            "perimeter_nm": loop.perimeter,
        }
        for loop in found.loops
    ]
    return table, {"within_nm": found.within, "edges": table, "loops": loops}


def continuum(
    file: File,
    out: Out = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print how far each level is from the continuum formula (CSV)."""
    _one_table(_Asked(file, out, as_json, overrides, quiet), "run_continuum", _continuum)


def _continuum(result: StudyResult) -> tuple[Table, dict[str, Any]]:
    from ribbon.study.state_tables import continuum_table, meshes_table

    found = result.ribbon.continuum
    assert found is not None
    table = continuum_table(result.ribbon)
    return table, {
        "kind": found.kind,
        "zero": found.zero,
        "continuum": table,
        "meshes": meshes_table(result.ribbon),
    }
