"""Where words and files go: answers to stdout, notes to stderr, files whole or not at all."""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ribbon.errors import BadInput
from ribbon.study.whole import write_whole

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = [
    "ReaderGoneError",
    "check_target",
    "emit",
    "guard_inputs",
    "hush_stdout",
    "json_text",
    "note",
    "write_texts",
]


class ReaderGoneError(Exception):
    """Whoever read our standard output has seen enough."""


def emit(text: str) -> None:
    """Write an answer to standard output and make sure that it got there."""
    if sys.stdout is None:
        raise BadInput("standard output is closed; there is nowhere to print to")
    try:
        sys.stdout.write(text if text.endswith("\n") else text + "\n")
        sys.stdout.flush()
    except BrokenPipeError:
        hush_stdout()
        raise ReaderGoneError from None
    except OSError as problem:
        hush_stdout()
        raise BadInput(f"standard output cannot be written ({problem.strerror})") from None


def hush_stdout() -> None:
    """Send what is left in the buffer nowhere, so that the exit does not stumble over it."""
    with contextlib.suppress(OSError, ValueError, AttributeError):
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, sys.stdout.fileno())
        os.close(nowhere)


def note(text: str, *, quiet: bool = False) -> None:
    """Tell the person something that is not the answer."""
    if not quiet and sys.stderr is not None:
        with contextlib.suppress(OSError):
            print(text, file=sys.stderr, flush=True)


def json_text(value: object) -> str:
    """Write valid JSON: numbers that are not finite become null, arrays and tables become lists.

    >>> print(json_text({"gap": float("nan"), "levels": (1, 2)}))
    {
      "gap": null,
      "levels": [
        1,
        2
      ]
    }
    """
    import json

    return json.dumps(_plain(value), indent=2, ensure_ascii=False, allow_nan=False)


def _plain(value: Any) -> Any:
    """Turn whatever the study room hands over into what JSON knows."""
    import dataclasses
    import math

    if hasattr(value, "to_records"):
        value = value.to_records()
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        value = {field.name: getattr(value, field.name) for field in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(key): _plain(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    return value if value is None or isinstance(value, bool | int | str) else str(value)


def check_target(path: Path | None, *, not_over: Path | None = None) -> None:
    """Refuse a place that cannot be written before anything long is computed."""
    if path is None:
        return
    if path.is_dir():
        raise BadInput(f"{path}: is a folder; give the name of a file")
    parent = path.parent
    if not parent.is_dir():
        raise BadInput(f"{path}: there is no folder {parent} to write to")
    if not os.access(parent, os.W_OK):
        raise BadInput(f"{path}: the folder {parent} cannot be written to")
    if not_over is not None and path.exists() and path.samefile(not_over):
        raise BadInput(f"{path}: is the ribbon file itself; give another name")


def guard_inputs(file: RibbonFile, *targets: Path | None) -> None:
    """Refuse to write over the lattice file or site table that a ribbon file reads."""
    lattice = file.lattice_path_or_name
    named = [lattice if isinstance(lattice, Path) else None, file.site_table_path]
    read = [source for source in named if source is not None and source.exists()]
    for target in targets:
        if target is not None and target.exists() and any(map(target.samefile, read)):
            raise BadInput(f"{target}: is read by the ribbon file; give another name")


def write_texts(texts: Mapping[Path, str]) -> None:
    """Write text files, all of them whole or none."""
    write_whole({path: text.encode() for path, text in texts.items()})
