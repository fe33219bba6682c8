"""Verbs whose answer is a table: `levels`, `flux`, `edges` and `continuum`."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, TypeAlias

import typer

from ribbon.commands.answer import deliver, heading, judge, known, load, trust
from ribbon.commands.options import AsJson, File, Quiet, Set
from ribbon.commands.output import check_target, guard_inputs
from ribbon.commands.progress import Progress
from ribbon.errors import BadInput, TooLarge

__all__ = ["continuum", "edges", "flux", "levels"]

Out: TypeAlias = Annotated[
    Path | None,
    typer.Option("--out", metavar="TABLE.csv", help="Write the table here, not to stdout."),
]


def levels(
    file: File,
    out: Out = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print the levels that the file asks for (CSV)."""
    check_target(out, not_over=file)
    ribbon_file = load(file, overrides)
    guard_inputs(ribbon_file, out)
    from ribbon.study.run import run_levels
    from ribbon.study.tables import levels_table

    with Progress(quiet=quiet) as progress:
        result, doubt = known(lambda: run_levels(ribbon_file, progress=progress))
    case = result.ribbon
    table = levels_table(case, ribbon_file.hopping.unit)
    story = {
        **heading(result),
        "flux": case.flux,
        "levels": table,
        "gap": case.gap,
        "other_gap": case.other_gap,
        "certificate": case.levels.certificate,
        "residual": case.levels.residual,
        **trust(result),
    }
    files = {} if out is None else {out: table}
    deliver(table, story, files=files, as_json=as_json, quiet=quiet)
    judge(result, doubt)


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
    check_target(out, not_over=file)
    ribbon_file = load(file, overrides)
    guard_inputs(ribbon_file, out)
    from ribbon.study.run import run_edges
    from ribbon.study.state_tables import edges_table

    with Progress(quiet=quiet) as progress:
        result, doubt = known(lambda: run_edges(ribbon_file, progress=progress))
    case = result.ribbon
    assert case.edges is not None
    table = edges_table(case)
    loops = [
        {
            "winding": loop.winding,
            "sites": loop.sites.size,
            "length_nm": loop.length,
            "perimeter_nm": loop.perimeter,
        }
        for loop in case.edges.loops
    ]
    story = {
        **heading(result),
        "flux": case.flux,
        "within_nm": case.edges.within,
        "edges": table,
        "loops": loops,
        **trust(result),
    }
    files = {} if out is None else {out: table}
    deliver(table, story, files=files, as_json=as_json, quiet=quiet)
    judge(result, doubt)


def continuum(
    file: File,
    out: Out = None,
    as_json: AsJson = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Print how far each level is from the continuum formula (CSV)."""
    check_target(out, not_over=file)
    ribbon_file = load(file, overrides)
    guard_inputs(ribbon_file, out)
    from ribbon.study.run import run_continuum
    from ribbon.study.state_tables import continuum_table, meshes_table

    with Progress(quiet=quiet) as progress:
        result, doubt = known(lambda: run_continuum(ribbon_file, progress=progress))
    case = result.ribbon
    assert case.continuum is not None
    table = continuum_table(case)
    story = {
        **heading(result),
        "flux": case.flux,
        "kind": case.continuum.kind,
        "zero": case.continuum.zero,
        "continuum": table,
        "meshes": meshes_table(case),
        **trust(result),
    }
    files = {} if out is None else {out: table}
    deliver(table, story, files=files, as_json=as_json, quiet=quiet)
    judge(result, doubt)
