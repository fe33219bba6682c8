"""The ribbon file: one short TOML text that says what to build and what to ask.

`read_study` turns a file into a `RibbonFile`, whose attributes are the tables and keys of the
file with every default filled in. Of keys that exclude each other the unused ones are None.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Annotated, Any

from pydantic import BaseModel, Field, PrivateAttr, ValidationError, model_validator

from ribbon.errors import BadInput
from ribbon.study.key_table import KeyTable, sentence_error
from ribbon.study.keys import (
    Continuum,
    Control,
    Disorder,
    Edges,
    Hopping,
    Levels,
    MagneticField,
    Ribbon,
    Sweep,
)
from ribbon.study.sentences import one_line, sentence_of
from ribbon.study.site_table import read_site_table
from ribbon.study.starter import starter
from ribbon.study.toml_text import apply_overrides, load_toml, toml_value

__all__ = [
    "RibbonFile",
    "complete_toml",
    "json_schema",
    "read_site_table",
    "read_study",
    "starter",
]


class RibbonFile(KeyTable):
    """A ribbon file: a title and tables of keys, checked when it is made.

    >>> file = RibbonFile.model_validate(
    ...     {"ribbon": {"lattice": "square", "rows": 1, "length": 16, "orbital": "pz"}}
    ... )
    >>> file.ribbon.half_twists, file.hopping.shells, file.levels.count
    (1, (2.7,), 40)
    """

    title: Annotated[str, Field(max_length=300, pattern=r"^[^\x00-\x1f\x7f]*$")] = ""
    """heads the report and the figures"""
    ribbon: Ribbon
    hopping: Hopping = Field(default_factory=Hopping)
    field: MagneticField = Field(default_factory=MagneticField)
    disorder: Disorder = Field(default_factory=Disorder)
    levels: Levels = Field(default_factory=Levels)
    sweep: Sweep = Field(default_factory=Sweep)
    edges: Edges = Field(default_factory=Edges)
    continuum: Continuum = Field(default_factory=Continuum)
    control: Control = Field(default_factory=Control)

    _folder: Path = PrivateAttr(default_factory=Path)

    @model_validator(mode="after")
    def _temperature(self) -> RibbonFile:
        if self.sweep.temperature > 0 and self.hopping.unit not in {"eV", "meV"}:
            raise sentence_error(
                f"sweep.temperature = {self.sweep.temperature:g} needs energies in eV or meV; "
                f'hopping.unit = "{self.hopping.unit}" has no temperature scale'
            )
        return self

    def __eq__(self, other: object) -> bool:
        """Two files are equal when every key is; where they stand does not count."""
        return isinstance(other, RibbonFile) and self.model_dump() == other.model_dump()

    def __hash__(self) -> int:
        """Equal files, equal hashes."""
        return hash(complete_toml(self))

    @property
    def folder(self) -> Path:
        """The folder where relative paths of the file start."""
        return self._folder

    @property
    def heading(self) -> str:
        """The title, or what the ribbon is in a few words."""
        ribbon = self.ribbon
        wide = f"{ribbon.width_nm:g} nm" if ribbon.rows is None else f"{ribbon.rows}"
        long = f"{ribbon.length_nm:g} nm" if ribbon.length is None else f"{ribbon.length:g}"
        name = Path(ribbon.lattice).stem
        twists = f"{ribbon.half_twists} half twist" + "s" * (ribbon.half_twists != 1)
        return self.title or f"{name}, {wide} by {long}, {twists}"

    @property
    def lattice_path_or_name(self) -> Path | str:
        """The lattice: a path, when it ends in .toml or holds a slash, or a name on the shelf."""
        text = self.ribbon.lattice
        return self.folder / text if text.endswith(".toml") or "/" in text else text

    @property
    def site_table_path(self) -> Path | None:
        """The CSV table of site energies, if the file names one."""
        table = self.hopping.site_table
        return None if table is None else self.folder / table


def read_study(path: str | Path, *, overrides: Sequence[str] = ()) -> RibbonFile:
    """Read and check a ribbon file.

    ``overrides`` are texts like ``"ribbon.rows=9"`` that set single keys; a key so set puts
    aside the keys of the file that it excludes. Raises `BadInput` with one sentence: the file,
    the key, what was given, what was expected.
    """
    path = Path(path)
    table = load_toml(path)
    keys = apply_overrides(table, overrides)
    _set_aside(table, keys)
    try:
        file = RibbonFile.model_validate(table)
    except ValidationError as problem:
        source = f"{path} with --set {' '.join(keys)}" if keys else f"{path}"
        raise BadInput(f"{one_line(source)}: {sentence_of(problem, RibbonFile)}") from None
    file._folder = path.parent
    return file


def _set_aside(table: dict[str, Any], keys: Sequence[str]) -> None:
    """Take out of ``table`` what a key that was set on the command line excludes."""
    for key in keys:
        name, _, last = key.partition(".")
        field = RibbonFile.model_fields.get(name)
        inner = table.get(name)
        if field is None or not isinstance(inner, dict) or inner.get(last) is False:
            continue
        for group in getattr(field.annotation, "exclusive", ()):
            for other in set(group) - {last} if last in group else ():
                if f"{name}.{other}" not in keys:
                    inner.pop(other, None)


def complete_toml(file: RibbonFile) -> str:
    """Write the file out with every default filled in; reading it back gives an equal file.

    >>> text = complete_toml(RibbonFile.model_validate(
    ...     {"ribbon": {"lattice": "square", "rows": 3, "length": 9, "half_twists": 0}}
    ... ))
    >>> print(text[:61])
    title = ""
    <BLANKLINE>
    [ribbon]
    lattice = "square"
    rows = 3
    length = 9.0
    """
    lines = [f"title = {toml_value(file.title)}"]
    for name in RibbonFile.model_fields:
        value = getattr(file, name)
        if isinstance(value, BaseModel):
            lines += ["", f"[{name}]"]
            entries = value.model_dump(exclude_none=True)
            lines += [f"{key} = {toml_value(entry)}" for key, entry in entries.items()]
    return "\n".join(lines) + "\n"


def json_schema() -> dict[str, Any]:
    """The JSON schema of a ribbon file, for editors that complete and check while one types."""
    return RibbonFile.model_json_schema()
