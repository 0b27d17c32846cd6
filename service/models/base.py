"""What all request models share: frozen, strict, no unknown keys, and quantities with or without a unit."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, WithJsonSchema
from pydantic_core import PydanticCustomError

from service.number_range import LARGEST_NUMBER, RANGE_IN_WORDS, is_readable

LONGEST_QUANTITY = 64
LONGEST_NAME = 200


class Model(BaseModel):
    """Base of every request and answer model."""

    model_config = ConfigDict(frozen=True, strict=True, extra="forbid", allow_inf_nan=False)


def check_number(value: Any) -> float:
    """A finite JSON number as a float; a sentence for anything else, true and "12" among them."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise PydanticCustomError("number", "A number is wanted here{got}.", {"got": _got(value)})
    return _bounded(value)


def _check_quantity(value: Any) -> float | str:
    if isinstance(value, str):
        if not value.strip():
            raise PydanticCustomError("quantity", 'The text is empty; write for example "25 mm".')
        if len(value) > LONGEST_QUANTITY:
            raise PydanticCustomError(
                "quantity", "The text is longer than {limit} characters.", {"limit": LONGEST_QUANTITY}
            )
        return value
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise PydanticCustomError(
            "quantity",
            "A number in the declared unit or a text with a number and a unit is wanted here{got}.",
            {"got": _got(value)},
        )
    return _bounded(value)


def _bounded(value: float) -> float:
    if is_readable(value):
        return float(value)
    raise PydanticCustomError("number_range", "The number has to be {range}.", {"range": RANGE_IN_WORDS})


def _got(value: Any) -> str:
    """The JSON word for what came instead, never the thing itself."""
    words = {bool: "true or false", str: "a text", list: "a list", dict: "an object", type(None): "null"}
    word = words.get(type(value))
    return f", not {word}" if word else ""


Number = Annotated[float, BeforeValidator(check_number)]

Quantity = Annotated[
    float | str,
    BeforeValidator(_check_quantity),
    WithJsonSchema(
        {
            "anyOf": [
                {"type": "number", "minimum": -LARGEST_NUMBER, "maximum": LARGEST_NUMBER},
                {"type": "string", "minLength": 3, "maxLength": LONGEST_QUANTITY},
            ],
        }
    ),
]
