"""What all tables of a ribbon file share: strictness, and keys that exclude each other."""

from __future__ import annotations

import itertools
from collections.abc import Iterable
from typing import Any, ClassVar

from pydantic import BaseModel, ConfigDict, GetJsonSchemaHandler, model_validator
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, PydanticCustomError

__all__ = ["KeyTable", "chosen", "sentence_error"]


def sentence_error(sentence: str) -> PydanticCustomError:
    """Return a problem that is already said in a whole sentence."""
    return PydanticCustomError("sentence", "{sentence}", {"sentence": sentence})


def chosen(data: dict[str, Any], keys: Iterable[str]) -> list[str]:
    """Keys that choose something; ``all = false`` chooses nothing, a number 0 does."""
    return [key for key in keys if data.get(key) is not None and data[key] is not False]


class KeyTable(BaseModel):
    """What all tables share: nothing unknown, nothing converted, nothing infinite.

    ``exclusive`` lists groups of keys of which one at most may be given.
    """

    model_config = ConfigDict(
        frozen=True,
        extra="forbid",
        strict=True,
        allow_inf_nan=False,
        validate_default=False,
        use_attribute_docstrings=True,
    )
    exclusive: ClassVar[tuple[tuple[str, ...], ...]] = ()
    schema_rules: ClassVar[tuple[dict[str, Any], ...]] = ()

    @model_validator(mode="before")
    @classmethod
    def _complete(cls, data: Any) -> Any:
        """Refuse keys that exclude each other, then fill in defaults that hang on other keys."""
        if not isinstance(data, dict):
            return data
        for group in cls.exclusive:
            both = chosen(data, group)
            if len(both) > 1:
                raise PydanticCustomError("exclusive", "keys exclude each other", {"keys": both})
        return cls.completed(dict(data))

    @classmethod
    def completed(cls, data: dict[str, Any]) -> dict[str, Any]:
        """Return the table with the defaults that depend on other keys of it."""
        return data

    @classmethod
    def __get_pydantic_json_schema__(
        cls, core_schema: CoreSchema, handler: GetJsonSchemaHandler
    ) -> JsonSchemaValue:
        """Say in the JSON schema too which keys may not stand together, and which must."""
        schema = handler.resolve_ref_schema(handler(core_schema))
        pairs = (pair for group in cls.exclusive for pair in itertools.combinations(group, 2))
        rules = [cls._rule(pair) for pair in pairs]
        if rules or cls.schema_rules:
            schema["allOf"] = [*rules, *cls.schema_rules]
        return schema

    @classmethod
    def _rule(cls, pair: tuple[str, str]) -> dict[str, Any]:
        """Two keys may not stand together; a switch counts only when it is on."""
        rule: dict[str, Any] = {"required": list(pair)}
        switches = [key for key in pair if cls.model_fields[key].annotation is bool]
        if switches:
            rule["properties"] = {key: {"const": True} for key in switches}
        return {"not": rule}
