"""Arguments and options that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, TypeAlias

import typer

__all__ = ["AsJson", "File", "Quiet", "Set"]

File: TypeAlias = Annotated[
    Path, typer.Argument(metavar="FILE", help="A ribbon file (TOML); `ribbon new` writes one.")
]
Set: TypeAlias = Annotated[
    list[str] | None,
    typer.Option(
        "--set",
        metavar="KEY=VALUE",
        help="Override a key of the file, e.g. ribbon.rows=9; may be given many times.",
    ),
]
Quiet: TypeAlias = Annotated[
    bool, typer.Option("--quiet", help="No progress and no notes; errors only.")
]
AsJson: TypeAlias = Annotated[
    bool, typer.Option("--json", help="Print JSON to standard output, with the checks.")
]
