"""What a lattice file says: lines of sites that repeat across a strip.

A lattice is a cycle of *lines* of sites parallel to the ring. The cycle is repeated with a
step ``repeat``; along the ring everything repeats with ``period``. All lengths of a `Lattice`
are in units of the nearest-neighbour ``spacing``, itself in nm.
"""

from __future__ import annotations

import itertools
import math
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from scipy.spatial import cKDTree

from ribbon.errors import BadInput

__all__ = ["TOLERANCE", "Lattice", "Line", "read_lattice", "shelf"]

TOLERANCE = 1e-6
"""Two sites closer than this (in units of the spacing) are the same site."""

LARGEST_FILE = 1_000_000
LARGEST_NUMBER = 1e6


@dataclass(frozen=True, kw_only=True)
class Line:
    """One line of sites: height ``y`` and the places ``x`` within one period, with labels."""

    y: float
    x: tuple[float, ...]
    species: tuple[str, ...]
    sublattice: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Lattice:
    """A lattice definition; see the module text for the meaning of the fields.

    ``shells`` holds the distances of first, second and third neighbours in units of the
    spacing. Raises `BadInput` when two sites coincide, a length is not positive and finite,
    or the lines do not fit together.

    >>> read_lattice("square").shells[0]
    1.0
    """

    name: str
    about: str = ""
    source: str = ""
    spacing: float
    period: float
    repeat: tuple[float, float]
    lines_per_row: int = 1
    lines: tuple[Line, ...]
    shells: tuple[float, ...] = field(default=())

    def __post_init__(self) -> None:
        """Check the description as a whole and find the shells if they were left out."""
        _positive(self.spacing, "spacing")
        _positive(self.period, "period")
        _positive(self.repeat[1], "the second number of repeat (the step across)")
        if not 1 <= self.lines_per_row <= 1000:
            raise BadInput(f"lines_per_row = {self.lines_per_row} must be from 1 to 1000")
        heights = [line.y for line in self.lines]
        if any(b <= a for a, b in itertools.pairwise(heights)):
            raise BadInput("lines must be listed bottom to top, each y above the one before")
        if heights[-1] - heights[0] >= self.repeat[1]:
            raise BadInput(
                f"the lines are {heights[-1] - heights[0]:g} high, but repeat steps only "
                f"{self.repeat[1]:g} across: a cycle must be lower than its step"
            )
        found = _distances(self)
        if abs(found[0] - 1) > 1e-3:
            raise BadInput(
                f"the nearest sites stand {found[0]:.6g} apart; lengths are in units of the "
                "spacing, so this must be 1"
            )
        if self.shells:
            _check_shells(self.shells, found)
        else:
            object.__setattr__(self, "shells", tuple(found[:3]))

    def line_height(self, number: int) -> float:
        """Height of line ``number`` (any integer) of the endless two-dimensional lattice."""
        cycle, line = divmod(number, len(self.lines))
        return self.lines[line].y + cycle * self.repeat[1]


def shelf() -> dict[str, Path]:
    """Names and paths of the lattice files that are shipped.

    >>> "honeycomb-zigzag" in shelf()
    True
    """
    package = Path(__file__).resolve().parent.parent
    for folder in (package / "_lattices", package.parent / "lattices"):
        if folder.is_dir():
            return {path.stem: path for path in sorted(folder.glob("*.toml"))}
    return {}


def read_lattice(name_or_path: str | Path) -> Lattice:
    """Read a lattice from the shelf by name, or from a file by path.

    A text that ends in ``.toml`` or holds a path separator is a path; anything else is a name.
    Raises `BadInput` with the file and the key that is wrong.
    """
    text = str(name_or_path)
    if isinstance(name_or_path, str) and not text.endswith(".toml") and "/" not in text:
        known = shelf()
        if text not in known:
            raise BadInput(
                f'lattice "{text}" is not on the shelf; there are {", ".join(known)}, '
                "or give the path of a lattice file (.toml)"
            )
        return read_lattice(known[text])
    path = Path(name_or_path)
    try:
        return _from_mapping(_load(path))
    except BadInput as problem:
        raise BadInput(f"lattice file {path}: {problem}") from None


def _load(path: Path) -> dict[str, Any]:
    try:
        if path.is_dir():
            raise BadInput("this is a folder; give the path of a lattice file (.toml)")
        if path.stat().st_size > LARGEST_FILE:
            raise BadInput("the file is larger than 1 MB; a lattice file holds one cycle of lines")
        with path.open("rb") as stream:
            return tomllib.load(stream)
    except OSError as problem:
        raise BadInput(f"cannot be read ({problem.strerror or problem})") from None
    except UnicodeDecodeError:
        raise BadInput("is not UTF-8 text; a lattice file is TOML") from None
    except tomllib.TOMLDecodeError as problem:
        raise BadInput(f"is not valid TOML: {problem}") from None


def _from_mapping(table: Mapping[str, Any]) -> Lattice:
    known = set(Lattice.__dataclass_fields__)
    for key in table:
        if key not in known:
            raise BadInput(f"unknown key {key!r}; a lattice has {', '.join(sorted(known))}")
    for key in ("name", "spacing", "period", "repeat", "lines"):
        if key not in table:
            raise BadInput(f"the key {key!r} is missing")
    lines = table["lines"]
    if not isinstance(lines, list) or not 1 <= len(lines) <= 1000:
        raise BadInput("lines must be a list of 1 to 1000 tables { y, x, species, sublattice }")
    return Lattice(
        name=_text(table["name"], "name"),
        about=_text(table.get("about", ""), "about"),
        source=_text(table.get("source", ""), "source"),
        spacing=_number(table["spacing"], "spacing"),
        period=_number(table["period"], "period"),
        repeat=_pair(table["repeat"]),
        lines_per_row=_whole(table.get("lines_per_row", 1), "lines_per_row"),
        lines=tuple(_line(entry, place) for place, entry in enumerate(lines)),
        shells=_numbers(table.get("shells", []), "shells"),
    )


def _line(entry: object, place: int) -> Line:
    where = f"lines[{place}]"
    if not isinstance(entry, dict) or not {"y", "x"} <= set(entry):
        raise BadInput(f"{where} must be a table with at least y and x")
    extra = set(entry) - {"y", "x", "species", "sublattice"}
    if extra:
        raise BadInput(f"{where} has the unknown key {min(extra)!r}")
    x = _numbers(entry["x"], f"{where}.x")
    if not x:
        raise BadInput(f"{where}.x is empty; a line holds at least one site")
    return Line(
        y=_number(entry["y"], f"{where}.y"),
        x=x,
        species=_labels(entry.get("species", "site"), len(x), f"{where}.species"),
        sublattice=_labels(entry.get("sublattice", "A"), len(x), f"{where}.sublattice"),
    )


def _labels(value: object, count: int, where: str) -> tuple[str, ...]:
    if isinstance(value, str):
        return (value,) * count
    if isinstance(value, list) and len(value) == count and all(isinstance(v, str) for v in value):
        return tuple(value)
    raise BadInput(f"{where} must be one text, or a list of {count} texts (one for each x)")


def _text(value: object, where: str) -> str:
    if not isinstance(value, str):
        raise BadInput(f"{where} = {value!r} must be a text")
    return value


def _number(value: object, where: str) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise BadInput(f"{where} = {value!r} must be a number")
    if not math.isfinite(value) or abs(value) > LARGEST_NUMBER:
        raise BadInput(f"{where} = {value!r} must be finite and at most {LARGEST_NUMBER:g}")
    return float(value)


def _whole(value: object, where: str) -> int:
    if isinstance(value, bool) or not isinstance(value, int):
        raise BadInput(f"{where} = {value!r} must be a whole number")
    return value


def _numbers(value: object, where: str) -> tuple[float, ...]:
    if not isinstance(value, list) or len(value) > 10_000:
        raise BadInput(f"{where} = {value!r} must be a list of numbers")
    return tuple(_number(entry, where) for entry in value)


def _pair(value: object) -> tuple[float, float]:
    numbers = _numbers(value, "repeat")
    if len(numbers) != 2:
        raise BadInput(f"repeat = {value!r} must be two numbers [along, across]")
    return numbers[0], numbers[1]


def _positive(value: float, where: str) -> None:
    if not (math.isfinite(value) and value > 0):
        raise BadInput(f"{where} = {value!r} must be a positive number")


def _distances(lattice: Lattice) -> list[float]:
    """Distinct site distances of the endless two-dimensional lattice, shortest first.

    The search reaches a few spacings, and farther only where that finds too few: a large cell
    has very many pairs of sites.
    """
    farthest = 3.0 * max(1.0, min(lattice.period, math.hypot(*lattice.repeat)))
    found: list[float] = []
    for reach in (2.6, 5.2, farthest):
        found = _distances_within(lattice, reach)
        wanted = max(3, len(lattice.shells))
        if len(found) >= wanted and found[-1] > max(lattice.shells, default=0.0):
            break
    return found


def _distances_within(lattice: Lattice, reach: float) -> list[float]:
    x = np.concatenate([line.x for line in lattice.lines])
    y = np.concatenate([[line.y] * len(line.x) for line in lattice.lines])
    cycles = np.arange(-math.ceil(reach / lattice.repeat[1]) - 1, 2 + reach // lattice.repeat[1])
    along = np.arange(-math.ceil(reach / lattice.period) - 1, 2 + reach // lattice.period)
    if x.size * cycles.size * along.size > 5_000_000:
        raise BadInput(
            f"period = {lattice.period:g} and repeat = {list(lattice.repeat)} do not fit a lattice "
            "of spacing 1: lengths are in units of the spacing"
        )
    shift_x, shift_y = cycles * lattice.repeat[0], cycles * lattice.repeat[1]
    all_x = (x[:, None] + shift_x)[..., None] % lattice.period + along * lattice.period
    all_y = np.broadcast_to((y[:, None] + shift_y)[..., None], all_x.shape)
    points = np.column_stack([all_x.ravel(), all_y.ravel()])
    home = np.column_stack([x % lattice.period, y])
    pairs = cKDTree(home).sparse_distance_matrix(cKDTree(points), reach, output_type="coo_matrix")
    distance = np.sort(pairs.data)
    if np.count_nonzero(distance < TOLERANCE) > len(home):
        raise BadInput("two sites of the lattice stand on the same place")
    distance = distance[distance >= TOLERANCE]
    # numbers in a file are rounded: distances this close are one shell
    first = np.concatenate([[True], np.diff(distance) > 1e3 * TOLERANCE])[: distance.size]
    return [float(value) for value in distance[first]]


def _check_shells(shells: tuple[float, ...], found: list[float]) -> None:
    if not 1 <= len(shells) <= 3 or any(b <= a for a, b in itertools.pairwise(shells)):
        raise BadInput(f"shells = {list(shells)} must be one to three growing distances")
    for value in shells:
        if min(abs(value - distance) for distance in found) > 1e3 * TOLERANCE:
            near = min(found, key=lambda distance: abs(value - distance))
            raise BadInput(
                f"shells names the distance {value:g}, which no two sites have; "
                f"the nearest that occurs is {near:.9g}"
            )
