"""Files and folders written whole or not at all: under a temporary name, then moved in place."""

from __future__ import annotations

import contextlib
import os
import shutil
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from ribbon.errors import BadInput

__all__ = ["whole_folder", "write_whole"]


def write_whole(contents: Mapping[Path, bytes]) -> None:
    """Write files: all under temporary names first, then moved in place.

    Devices and pipes cannot be moved over; they are written directly. Raises `BadInput` with
    the path and the reason where one cannot be written; then none is left half-written.
    """
    moves: dict[Path, Path] = {}
    path = Path()
    try:
        for path, content in contents.items():
            goal = Path(os.path.realpath(path))
            direct = goal.exists() and not goal.is_file()
            part = goal if direct else goal.with_name(f".{goal.name[:200]}.{os.getpid()}.part")
            if not direct:
                moves[part] = goal
            _write(part, content, sync=not direct)
        for part, goal in moves.items():
            part.replace(goal)
    except OSError as problem:
        raise BadInput(f"{path}: cannot be written ({problem.strerror or problem})") from None
    finally:
        for part in moves:
            with contextlib.suppress(OSError):
                part.unlink()


def _write(path: Path, content: bytes, *, sync: bool) -> None:
    """Write and, for a file on a disk, wait until the disk has it or says that it is full."""
    with path.open("wb") as stream:
        stream.write(content)
        stream.flush()
        if sync:
            os.fsync(stream.fileno())


@contextmanager
def whole_folder(goal: Path) -> Iterator[Path]:
    """A temporary folder beside ``goal`` that takes its place when the block ends well.

    What stood at ``goal`` is removed only then. Raises `BadInput` where the disk refuses.
    """
    part = goal.with_name(f".{goal.name}.{os.getpid()}.part")
    old = goal.with_name(f".{goal.name}.{os.getpid()}.old")
    try:
        part.mkdir()
        yield part
        if goal.exists():
            goal.rename(old)
        part.rename(goal)
    except OSError as problem:
        if old.exists() and not goal.exists():
            old.rename(goal)
        raise BadInput(f"{goal}: cannot be written ({problem.strerror or problem})") from None
    finally:
        shutil.rmtree(part, ignore_errors=True)
        shutil.rmtree(old, ignore_errors=True)
