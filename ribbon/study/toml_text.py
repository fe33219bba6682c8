"""TOML in and out: reading with care, overriding single keys, writing short inline values."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from ribbon.errors import BadInput
from ribbon.study.sentences import one_line, shown

__all__ = ["apply_overrides", "load_toml", "parse_toml", "read_text", "toml_value"]

LARGEST_FILE = 1_000_000
BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


def read_text(path: Path, *, largest: int = LARGEST_FILE) -> str:
    """Read a UTF-8 text file; `BadInput` says why it cannot be read.

    The size is found by reading, so that pipes and devices are limited too.
    """
    try:
        with path.open("rb") as stream:
            data = stream.read(largest + 1)
    except FileNotFoundError:
        raise BadInput(f"{path}: there is no such file") from None
    except IsADirectoryError:
        raise BadInput(f"{path}: this is a folder, not a file") from None
    except (OSError, ValueError) as problem:
        reason = getattr(problem, "strerror", None) or problem
        raise BadInput(f"{path}: cannot be read ({reason})") from None
    if len(data) > largest:
        raise BadInput(f"{path}: is larger than {largest / 1e6:g} MB, too large for such a file")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = data.count(b"\n", 0, problem.start) + 1
        raise BadInput(f"{path}, line {line}: is not UTF-8 text") from None


def load_toml(path: Path) -> dict[str, Any]:
    """Read a TOML file that holds something."""
    table = parse_toml(read_text(path), str(path))
    if not table:
        raise BadInput(f"{path}: is empty; `ribbon new PATH` writes a file to start from")
    return table


def parse_toml(text: str, source: str) -> dict[str, Any]:
    """Parse TOML; `BadInput` names the source and the line."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        reason = one_line(str(problem))
    except (ValueError, RecursionError) as problem:
        reason = "nested too deeply" if isinstance(problem, RecursionError) else str(problem)
    raise BadInput(f"{source}: is not valid TOML: {one_line(reason)}")


def apply_overrides(table: dict[str, Any], overrides: Sequence[str]) -> list[str]:
    """Set keys of ``table`` from texts like ``ribbon.rows=9``; returns the keys that were set.

    >>> table = {"ribbon": {"rows": 8}}
    >>> apply_overrides(table, ["ribbon.rows=9", "hopping.unit=t"])
    ['ribbon.rows', 'hopping.unit']
    >>> table
    {'ribbon': {'rows': 9}, 'hopping': {'unit': 't'}}
    """
    keys = []
    for override in overrides:
        name, equals, text = override.partition("=")
        parts = [part.strip() for part in name.split(".")]
        if not equals or not all(BARE_KEY.fullmatch(part) for part in parts):
            raise BadInput(
                f"--set {shown(override)} must have the form table.key=value, "
                "for example --set ribbon.rows=9"
            )
        *tables, last = parts
        target = table
        for depth, part in enumerate(tables):
            target = target.setdefault(part, {})
            if not isinstance(target, dict):
                inner = ".".join(tables[: depth + 1])
                raise BadInput(f"--set {shown(override)}: {inner} is a value, not a table of keys")
        target[last] = _override_value(text.strip(), override)
        keys.append(".".join(parts))
    return keys


def _override_value(text: str, override: str) -> Any:
    """Read a value as TOML; a bare word, which TOML does not know, is a text."""
    if not text:
        raise BadInput(f"--set {shown(override)} gives no value")
    try:
        parsed = tomllib.loads(f"value = {text}")
    except (ValueError, RecursionError):
        parsed = {}
    if set(parsed) == {"value"}:
        return parsed["value"]
    if text[0] in "\"'[{" or not text.isprintable():
        raise BadInput(f"--set {shown(override)}: the value is not valid TOML")
    return text


def toml_value(value: object) -> str:
    """Write a value on one line of TOML.

    >>> toml_value({"from": 0.0, "to": 1.0}), toml_value(("plain",)), toml_value(True)
    ('{ from = 0.0, to = 1.0 }', '["plain"]', 'true')
    """
    if isinstance(value, str):
        # a JSON text is a TOML text, but for the one control character JSON leaves bare
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, Mapping):
        entries = (f"{_toml_key(key)} = {toml_value(entry)}" for key, entry in value.items())
        return "{ " + ", ".join(entries) + " }"
    if isinstance(value, Sequence):
        return "[" + ", ".join(toml_value(entry) for entry in value) + "]"
    return str(value).lower() if isinstance(value, bool) else repr(value)


def _toml_key(key: str) -> str:
    return key if BARE_KEY.fullmatch(key) else toml_value(key)
