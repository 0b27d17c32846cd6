"""Numbers of a request that a decision is about, each pointed to where it stands."""

from __future__ import annotations

from typing import Annotated, Any, Self

from pydantic import Discriminator, Field, Tag, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Quantity
from service.models.evaluate import Name

LONGEST_POINTER = 500
MOST_POINTERS = 200
MOST_NUMBERS = 100

Pointer = Annotated[str, Field(min_length=2, max_length=LONGEST_POINTER, pattern=r"^/")]


def _kind_of_pointers(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    return "several places" if isinstance(value, list) else "one place"


Pointers = Annotated[
    Annotated[Pointer, Tag("one place")]
    | Annotated[list[Pointer], Field(min_length=1, max_length=MOST_POINTERS), Tag("several places")],
    Discriminator(_kind_of_pointers),
]


class NumberReference(Model):
    """A number of the request: where it stands, as a JSON pointer (RFC 6901) into the request, or how it moves others.

    Exactly one of `at`, `shift` and `scale`. Pointers begin with /problem or /results; what a problem leaves out has to
    be written into it before it can be pointed to.
    """

    name: Name = Field(description="What to call the number; no two may have the same name.", examples=["film"])
    at: Pointers | None = Field(
        None,
        description="Where the number stands: a pointer, or several that all take the same value.",
        examples=["/problem/faces/x_high/coefficient", ["/problem/body/size/x", "/problem/body/size/y"]],
    )
    shift: Pointers | None = Field(
        None,
        description="Places of numbers of one kind to all of which this number is added; it is zero as the request "
        "stands. So a pad moves with both its ends, and a place with the size.",
        examples=[["/problem/faces/z_high/inflow/patches/0/x/0", "/problem/faces/z_high/inflow/patches/0/x/1"]],
    )
    scale: Pointers | None = Field(
        None,
        description="Places of numbers, or of whole maps, lists of coefficients and conductivities, all of which this "
        "number multiplies; it is one as the request stands. Of a map it scales the data, not the coordinates.",
        examples=["/problem/faces/z_low/inflow"],
    )
    about: Quantity | None = Field(
        None,
        description="Beside `scale` of potentials: the level from which they are counted when they are scaled; zero in "
        "the declared unit if left out.",
        examples=[30, "20 degC"],
    )

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        if sum(way is not None for way in (self.at, self.shift, self.scale)) != 1:
            raise PydanticCustomError("one_of", "Give exactly one of `at`, `shift` and `scale`.")
        if self.about is not None and self.scale is None:
            raise PydanticCustomError("about", "`about` goes with `scale` only.")
        return self
