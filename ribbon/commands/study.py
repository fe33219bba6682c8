"""The verb that does everything the file asks for: `study`."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from ribbon.commands.answer import judge, known, load
from ribbon.commands.options import File, Quiet, Set
from ribbon.commands.output import emit, note
from ribbon.commands.progress import Progress

if TYPE_CHECKING:
    from ribbon.study.result import Check

__all__ = ["study"]


def study(
    file: File,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="The folder to write; default NAME-study."),
    ] = None,
    replace: Annotated[
        bool, typer.Option("--replace", help="Replace the folder, if it is a study folder.")
    ] = False,
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Do everything the file asks for and write a study folder.

    The folder holds the report, figures, tables, results and the input; its path is printed.
    """
    ribbon_file = load(file, overrides)
    folder = out if out is not None else Path(f"{file.stem}-study")
    from ribbon.study.folder import check_folder, write_folder
    from ribbon.study.run import run_study

    check_folder(folder, replace=replace)
    with Progress(quiet=quiet) as progress:
        result, doubt = known(lambda: run_study(ribbon_file, progress=progress))
        progress("writing the folder")
        written = write_folder(result, folder, replace=replace)
    for line in result.notes:
        note(f"note: {line}", quiet=quiet)
    lines = [] if quiet else [_line(check) for check in result.checks]
    emit("\n".join([*lines, str(written / "report.html")]))
    judge(result, doubt)


def _line(check: Check) -> str:
    """One check on one line: the verdict, the number and its limit."""
    where = "" if check.flux is None else f" at flux {check.flux:.4g}"
    verdict = "pass" if check.passed else "FAIL"
    return f"{verdict}  {check.name}{where}: {check.value:.3g} (limit {check.limit:.3g})"
