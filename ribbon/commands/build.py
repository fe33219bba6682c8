"""Verbs that write files to work with: `new` and `export`."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from ribbon.commands.answer import load
from ribbon.commands.options import File, Quiet, Set
from ribbon.commands.output import check_target, guard_inputs, note, write_texts
from ribbon.errors import BadInput

__all__ = ["export", "new"]


def new(
    path: Annotated[Path, typer.Argument(metavar="PATH", help="The file to write.")],
    lattice: Annotated[
        str,
        typer.Option(
            "--lattice", metavar="NAME", help="A name from `ribbon lattices`, or a lattice file."
        ),
    ] = "honeycomb-zigzag",
    quiet: Quiet = False,
) -> None:
    """Write a commented starter file."""
    from ribbon.study.starter import starter

    check_target(path)
    if path.exists():
        raise BadInput(f"{path}: exists already; `ribbon new` does not write over a file")
    write_texts({path: starter(lattice, path=path)})
    note(f"{path} is written; next: ribbon describe {path}", quiet=quiet)


def export(
    file: File,
    path: Annotated[
        Path,
        typer.Argument(metavar="PATH", help="By suffix: .mtx .npz .graphml .csv .xyz"),
    ],
    overrides: Set = None,
    quiet: Quiet = False,
) -> None:
    """Write the ring for other programs, by suffix.

    Matrix (.mtx, .npz), graph (.graphml), bonds (.csv) or positions (.xyz).
    """
    check_target(path, not_over=file)
    ribbon_file = load(file, overrides)
    guard_inputs(ribbon_file, path)
    from ribbon.study.export import export as write_export

    write_export(ribbon_file, path)
    note(f"{path} is written", quiet=quiet)
