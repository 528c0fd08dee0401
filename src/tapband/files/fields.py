"""Types of values in the campaign file: what pydantic checks of a value before its unit is read."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError


class Part(BaseModel):
    """A table of the campaign file: strict, no unknown keys."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, allow_inf_nan=False)


def example(value: object, text: str, **rules: Any) -> Any:
    """A required key with its description and an example."""
    return Field(description=text, examples=[value], **rules)


def _quantity(value: object) -> object:
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        raise PydanticCustomError("quantity", "must be a number, or a number with its unit in quotes")
    return value


def _sizes(value: object) -> object:
    if isinstance(value, list):
        if not value:
            raise PydanticCustomError("quantity", "must hold at least one size")
        return [_quantity(item) for item in value]
    return _quantity(value)


def _names(value: object) -> list[str]:
    names = value if isinstance(value, list) else [value]
    if not names or not all(isinstance(name, str) and name for name in names):
        raise PydanticCustomError("names", "must be text in quotes, or a list of such")
    return [str(name) for name in names]


_QUANTITY = {"anyOf": [{"type": "string", "minLength": 1}, {"type": "number"}]}

Quantity = Annotated[Any, PlainValidator(_quantity), WithJsonSchema(_QUANTITY)]
"""A number, or text of a number and its unit."""

Sizes = Annotated[
    Any,
    PlainValidator(_sizes),
    WithJsonSchema({"anyOf": [*_QUANTITY["anyOf"], {"type": "array", "items": _QUANTITY, "minItems": 1}]}),
]
"""A quantity, or a list of them whose absolute values add."""


def names_of(known: Sequence[str]) -> tuple[PlainValidator, WithJsonSchema]:
    """Marks of a type: one name or a list of names, read as a list; an editor offers the known ones."""
    one = {"type": "string", "enum": list(known)}
    many = {"type": "array", "items": one, "minItems": 1}
    return PlainValidator(_names), WithJsonSchema({"anyOf": [one, many]})


Pair = Annotated[list[Quantity], Field(min_length=2, max_length=2)]
"""A range: its two ends."""
Text = Annotated[str, Field(min_length=1)]
