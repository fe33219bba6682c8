"""Verbs that tell, and compute nothing: `describe` and `lattices`."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from ribbon.commands.answer import load
from ribbon.commands.options import AsJson, File, Quiet, Set
from ribbon.commands.output import emit, json_text

__all__ = ["describe", "lattices"]


def describe(
    file: File, as_json: AsJson = False, overrides: Set = None, quiet: Quiet = False
) -> None:
    """Say what would be built, and what it would cost.

    Sites, bonds and topology, the sizes that close, the memory and time expected.
    """
    ribbon_file = load(file, overrides)
    from ribbon.study.describe import describe as describe_file

    told = describe_file(ribbon_file)
    if as_json:
        emit(json_text(told))
        return
    lines = list(_lines(told))
    width = max(len(name) for name, _ in lines)
    emit("\n".join(f"{name:<{width}}  {value}" for name, value in lines))


def _lines(told: Mapping[str, Any], prefix: str = "") -> Iterator[tuple[str, str]]:
    """Name and value for every line; a table in the table gives its lines in turn."""
    for key, value in told.items():
        name = prefix + str(key).replace("_", " ")
        if isinstance(value, Mapping):
            yield from _lines(value, f"{name} ")
        elif isinstance(value, list | tuple):
            yield name, "; ".join(_words(entry) for entry in value) or "none"
        else:
            yield name, _words(value)


def _words(value: Any) -> str:
    if value is None:
        return "-"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:.6g}" if isinstance(value, float) else str(value)


def lattices() -> None:
    """List the lattices on the shelf."""
    from ribbon.lattice import read_lattice, shelf

    found = {name: read_lattice(name).about for name in shelf()}
    width = max(map(len, found), default=0)
    emit("\n".join(f"{name:<{width}}  {about}" for name, about in found.items()))
