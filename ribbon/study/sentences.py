"""One sentence for whatever is wrong with a ribbon file."""

from __future__ import annotations

import difflib
import json
from collections.abc import Iterator
from typing import Any, get_args

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

__all__ = ["known_keys", "one_line", "sentence_of", "shown"]

LONGEST_VALUE = 60
LONGEST_NUMBER = 200

ADVICE = {
    ("ribbon.half_twists", "greater_than_equal"): (
        "; handedness is a matter of the ring in space, not of its levels"
    ),
    ("ribbon.lattice", "missing"): (
        "; give a name from `ribbon lattices` or the path of a lattice file"
    ),
    ("disorder.vacancies", "less_than"): "; it is a fraction of the sites",
    ("hopping.shells", "too_long"): "; first, second and third neighbours at most",
    ("levels.count", "less_than_equal"): "; levels.all = true asks for the whole spectrum",
    ("field.flux", "less_than_equal"): "; levels have period one in flux",
    ("field.flux", "greater_than_equal"): "; levels have period one in flux",
    ("sweep.spin", "literal_error"): ", the electrons that a level holds",
}
"""What to add to the sentence about one kind of problem with one key."""


def one_line(text: str) -> str:
    """Fold a text into one line.

    >>> one_line("a\\n  b")
    'a b'
    """
    return " ".join(text.split())


def shown(value: object) -> str:
    """Show a value as a TOML file would, cut where it grows long.

    >>> shown("8"), shown(True), shown([1, "x"])
    ('"8"', 'true', '[1, "x"]')
    """
    if isinstance(value, list | tuple):
        text = "[" + ", ".join(shown(entry) for entry in value[:LONGEST_VALUE]) + "]"
    elif isinstance(value, dict):
        text = "{ " + ", ".join(f"{k} = {shown(v)}" for k, v in list(value.items())[:9]) + " }"
    elif isinstance(value, bool | str):
        text = json.dumps(value, ensure_ascii=False)
    elif isinstance(value, int) and value.bit_length() > LONGEST_NUMBER:
        text = "a number of hundreds of digits" if value > 0 else "a number far below zero"
    else:
        text = str(value)
    text = one_line(text)
    return text if len(text) <= LONGEST_VALUE else text[: LONGEST_VALUE - 3] + "..."


def known_keys(model: type[BaseModel], prefix: str = "") -> Iterator[str]:
    """Every key a file may hold, with its table: ``ribbon``, ``ribbon.rows``, ...

    >>> from ribbon.study.keys import SweepFlux
    >>> list(known_keys(SweepFlux, "sweep.flux."))
    ['sweep.flux.from', 'sweep.flux.to', 'sweep.flux.points']
    """
    for name, field in model.model_fields.items():
        key = prefix + (field.alias or name)
        yield key
        inner = [kind for kind in (field.annotation, *get_args(field.annotation)) if _table(kind)]
        if inner:
            yield from known_keys(inner[0], f"{key}.")


def _table(kind: Any) -> bool:
    return isinstance(kind, type) and issubclass(kind, BaseModel)


def sentence_of(problem: ValidationError, model: type[BaseModel]) -> str:
    """The first thing that is wrong in one sentence, and how many more there are."""
    errors = [error for error in problem.errors(include_url=False) if not _echo(error)]
    more = len(errors) - 1
    tail = f" (and {more} more problem{'s' if more > 1 else ''})" if more else ""
    return one_line(_said(errors[0], model)) + tail


def _echo(error: ErrorDetails) -> bool:
    """A list whose entries were refused is reported as too short once more."""
    return error["type"] == "too_short" and len(error["input"]) >= error["ctx"]["min_length"]


def _path(error: ErrorDetails) -> str:
    """Dotted key, list places in brackets, without the tags of alternatives."""
    path = ""
    for part in error["loc"]:
        if isinstance(part, int):
            path += f"[{part}]"
        elif not part.startswith("<"):
            path += f".{part}" if path else part
    return path


def _said(error: ErrorDetails, model: type[BaseModel]) -> str:
    path, kind = _path(error), error["type"]
    context = error.get("ctx", {})
    if kind == "sentence":
        return str(context["sentence"])
    if kind == "exclusive":
        *others, last = (f"{path}.{key}" for key in context["keys"])
        return f"{', '.join(others)} and {last} exclude each other; keep one of them"
    if kind == "extra_forbidden":
        return _unknown(path, model)
    advice = ADVICE.get((path, kind), "")
    if kind == "missing":
        return f"{path} is missing{advice}"
    said = _FORMS[kind].format(**context).replace("'", '"')
    if kind == "float_type" and type(error["input"]) is int:
        said = "is too large a number"
    if kind == "literal_error":
        said += _near_word(error)
    return f"{path} = {shown(error['input'])} {said}{advice}"


_FORMS = {
    "int_type": "must be a whole number",
    "float_type": "must be a number",
    "finite_number": "must be a finite number",
    "bool_type": "must be true or false",
    "string_type": "must be a text in quotes",
    "string_too_short": "must not be empty",
    "string_too_long": "must be a text of at most {max_length} characters",
    "string_pattern_mismatch": "must be a text without line breaks or control characters",
    "tuple_type": "must be a list in square brackets",
    "dict_type": "must be a table",
    "model_type": "must be a table of keys",
    "too_short": "must have at least {min_length} entry",
    "too_long": "must have at most {max_length} entries",
    "greater_than": "must be more than {gt:g}",
    "greater_than_equal": "must be {ge:.12g} or more",
    "less_than": "must be less than {lt:g}",
    "less_than_equal": "must be at most {le:.12g}",
    "literal_error": "must be {expected}",
}
"""What each kind of problem says after "key = value"; kinds are those of the model library."""


def _near_word(error: ErrorDetails) -> str:
    words = [word for word in str(error["ctx"]["expected"]).split("'") if word.isalnum()]
    near = difflib.get_close_matches(str(error["input"]).lower(), [w.lower() for w in words], 1)
    match = [word for word in words if near and word.lower() == near[0]]
    return f'; did you mean "{match[0]}"?' if match else ""


def _unknown(path: str, model: type[BaseModel]) -> str:
    """An unknown key, with the key that was probably meant."""
    path = one_line(path)[:LONGEST_NUMBER]
    known = list(known_keys(model))
    table, _, name = path.rpartition(".")
    siblings = {key.rpartition(".")[2]: key for key in known if key.rpartition(".")[0] == table}
    anywhere = {key.rpartition(".")[2]: key for key in known}
    for choice in (siblings, anywhere):
        near = difflib.get_close_matches(name.lower(), choice, n=1, cutoff=0.6)
        if near:
            return f"{path} is not a key here; did you mean {choice[near[0]]}?"
    where = f"[{table}] has" if table else "the tables are"
    return f"{path} is not a key here; {where} {', '.join(siblings)}"
