"""Data of a face as a client writes them: one number, patches over a background, a table of readings, a formula."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag, WithJsonSchema, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import LONGEST_NAME, Model, Quantity
from service.number_range import LARGEST_NUMBER

# Bounds of the document itself; the service's settings bound the problem further.
MOST_PATCHES = 1_000
LONGEST_AXIS = 10_000
LONGEST_CSV = 2_000_000
LONGEST_EXPRESSION = 500

IntervalEnd = Annotated[
    Quantity,
    WithJsonSchema({"anyOf": [{"type": "number"}, {"type": "string", "maxLength": 64, "minLength": 3}]}),
]

Interval = Annotated[
    list[IntervalEnd],
    Field(
        min_length=2,
        max_length=2,
        description='From and to along this axis, lengths; a text such as "5 mm" carries its own unit. "begin" as '
        'the first and "end" as the second stand for the sides of the body, also where it has no end there; '
        "a pad of a mixed face has to be finite.",
        examples=[[5, 35], [10, "end"]],
    ),
]


class AxisIntervals(Model):
    """Intervals along some of the three axes; which of them are wanted depends on the face or plane."""

    x: Interval | None = Field(None, description="From and to along x, lengths.", examples=[[5, 35]])
    y: Interval | None = Field(None, description="From and to along y, lengths.", examples=[[10, 50]])
    z: Interval | None = Field(None, description="From and to along z, lengths.", examples=[[10, "end"]])


class Patch(AxisIntervals):
    """A rectangle of a face with its own constant value: where the face is given a flow, a pad.

    Give an interval along each of the face's two axes, and either `value` or, on a face with a given flow, `flow`.
    """

    value: Quantity | None = Field(
        None,
        description="The value on the patch, of the same kind and declared unit as the background.",
        examples=[640, "1.5 kW/m^2"],
    )
    flow: Quantity | None = Field(
        None,
        description="In place of `value` on a face with a given flow: the total flow into the body through the patch, "
        "in the declared unit `flow`, spread evenly over it.",
        examples=["35 W"],
    )
    name: str | None = Field(
        None,
        min_length=1,
        max_length=LONGEST_NAME,
        description="What to call the patch.",
        examples=["sight port"],
    )


class PatchesMap(Model):
    """Constant patches over a background. Patches may touch but not overlap."""

    map: Literal["patches"] = Field(description="Which kind of map this is.")
    background: Quantity = Field(
        description="The value outside all patches, in the declared unit of the face's datum.", examples=[30]
    )
    patches: list[Patch] = Field(
        max_length=MOST_PATCHES,
        description="The rectangles and their values.",
        examples=[[{"x": [5, 35], "y": [10, 50], "value": 640, "name": "sight port"}]],
    )


# Checked by the validation library itself: there may be a hundred thousand of them.
Reading = Annotated[float, Field(ge=-LARGEST_NUMBER, le=LARGEST_NUMBER)]


class SamplesMap(Model):
    """Readings on rectilinear axes, bilinear between them.

    Either both axes of the face and `table`, or all of it as one text `csv`.
    """

    map: Literal["samples"] = Field(description="Which kind of map this is.")
    x: list[Quantity] | None = Field(
        None, max_length=LONGEST_AXIS, description="Places of the readings along x, increasing lengths.",
        examples=[[0, 20, 40]],
    )  # fmt: skip
    y: list[Quantity] | None = Field(
        None, max_length=LONGEST_AXIS, description="Places of the readings along y, increasing lengths.",
        examples=[[0, 30, 60]],
    )  # fmt: skip
    z: list[Quantity] | None = Field(
        None, max_length=LONGEST_AXIS, description="Places of the readings along z, increasing lengths.",
        examples=[[0, 10]],
    )  # fmt: skip
    table: list[list[Reading | None]] | None = Field(
        None,
        max_length=LONGEST_AXIS,
        description="One row for each place on the first of the face's axes (in the order x, y, z), one "
        "entry for each place on the second, bare numbers in the declared unit of the face's datum. null "
        "marks a missing reading.",
        examples=[[[30, 32, 31], [35, 44, 36], [30, 33, 31]]],
    )
    csv: str | None = Field(
        None,
        max_length=LONGEST_CSV,
        description="The same as text: the first row holds the places on the second axis, the first column "
        "those on the first axis, the corner is free. Separated by commas, semicolons or tabs; a decimal "
        "comma is read when it does not separate. Bare numbers in declared units; an empty entry is a "
        "missing reading.",
        examples=["x/y,0,30,60\n0,30,32,31\n20,35,44,36\n40,30,33,31\n"],
    )
    beyond: Literal["refuse", "hold"] = Field(
        "refuse",
        description="What to do where the readings end before the face: refuse, or hold the outermost reading.",
        examples=["hold"],
    )
    fill_missing: Literal["smooth"] | None = Field(
        None,
        description="Without it missing readings are refused. `smooth` lets each missing reading be the mean "
        "of its neighbours weighted by their nearness, and the answer says how many were filled.",
        examples=["smooth"],
    )

    @model_validator(mode="after")
    def _one_form(self) -> SamplesMap:
        if (self.csv is None) == (self.table is None):
            raise PydanticCustomError("one_of", "Give the readings either as `table` with its axes or as `csv`.")
        if self.csv is not None and (self.x or self.y or self.z):
            raise PydanticCustomError("one_of", "The axes of readings in `csv` stand in the text; leave x, y, z out.")
        return self


class FormulaMap(Model):
    """A formula in the two coordinates of the face.

    It is replaced by polynomials in pieces; how far these may be from it is inside the error bounds of every answer.
    """

    map: Literal["formula"] = Field(description="Which kind of map this is.")
    expression: str = Field(
        min_length=1,
        max_length=LONGEST_EXPRESSION,
        description="An expression in the coordinates of the face's two axes, bare numbers in the declared unit "
        "`length`; its value is in the declared unit of the face's datum. Numbers, + - * / and ^ (or **), parentheses, "
        "pi and e, sin cos tan asin acos atan sinh cosh tanh exp log (the natural one, also ln) log10 sqrt abs min "
        "max. "
        "Kinks of abs, min and max may run along an axis; jumps are for patches.",
        examples=["30 + 600*exp(-((x-20)/8)^2)*sin(pi*y/60)"],
    )


def _kind_of(value: Any) -> str | None:
    """Tag of the union below.

    Tags are words no field is called, so that they can be taken out of error paths.
    """
    if not isinstance(value, dict):
        named = getattr(value, "map", None)
        return f"map of {named}" if named else "one value"
    named = value.get("map")
    if named in ("patches", "samples", "formula"):
        return f"map of {named}"
    return None


FaceData = Annotated[
    Annotated[Quantity, Tag("one value")]
    | Annotated[PatchesMap, Tag("map of patches")]
    | Annotated[SamplesMap, Tag("map of samples")]
    | Annotated[FormulaMap, Tag("map of formula")],
    Discriminator(
        _kind_of,
        custom_error_type="map",
        custom_error_message='A map has to say which it is: "map" is "patches", "samples" or "formula".',
    ),
]
