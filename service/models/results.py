"""Results with names: the single numbers that limits, tolerances, sizing, calibration and studies are about."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import LONGEST_NAME, Model, Quantity
from service.models.evaluate import (
    SIDE_IN_WORDS,
    FacePart,
    LayerReference,
    PatchReference,
    Plane,
    Side,
)
from service.models.face_maps import AxisIntervals
from service.models.faces import FaceName
from service.models.reach import Fraction

# Most results of one question; each may be a search through the body.
MOST_RESULTS = 100

ResultName = Annotated[
    str,
    Field(
        min_length=1,
        max_length=LONGEST_NAME,
        description="What the result is called; each name is used once.",
        examples=["rise of the die"],
    ),
]

ResultReference = Annotated[str, Field(min_length=1, max_length=LONGEST_NAME)]

Direction = Literal["x", "y", "z"]

ResultPosition = Annotated[
    list[Quantity],
    Field(
        min_length=3,
        max_length=3,
        description='Lengths along x, y and z. The words "low", "middle" and "high" stand for the sides of the body '
        "along that axis and the middle between them, wherever these are.",
        examples=[[20, "30 mm", "high"], ["middle", "middle", "low"]],
    ),
]


class PotentialResult(Model):
    """The potential at a place."""

    result: Literal["potential"] = Field(description="The potential at a place; unit `potential`.")
    name: ResultName
    at: ResultPosition
    side: Side | None = Field(None, description=SIDE_IN_WORDS, examples=["above"])


class GradientResult(Model):
    """How steeply the potential changes at a place."""

    result: Literal["gradient"] = Field(
        description="The slope of the potential at a place; unit `potential_difference` per `length`."
    )
    name: ResultName
    at: ResultPosition
    along: Direction | None = Field(
        None, description="The axis along which the slope is wanted; its size if left out.", examples=["z"]
    )
    side: Side | None = Field(None, description=SIDE_IN_WORDS, examples=["above"])


class FluxResult(Model):
    """The flow per area at a place."""

    result: Literal["flux"] = Field(description="The flow per area at a place; unit `flux`.")
    name: ResultName
    at: ResultPosition
    along: Direction | None = Field(
        None,
        description="The axis whose component is wanted, positive along it; the size of the vector if left out.",
        examples=["z"],
    )
    side: Side | None = Field(None, description=SIDE_IN_WORDS, examples=["above"])


class MeanResult(FacePart):
    """The mean potential of a face, a patch of its map, or a rectangle given by an interval along both its axes."""

    result: Literal["mean"] = Field(description="The mean potential over a face or a part of it; unit `potential`.")
    name: ResultName


class _Extreme(AxisIntervals):
    """Where the highest or lowest potential is looked for: the whole body if nothing is named."""

    name: ResultName
    face: FaceName | None = Field(
        None,
        description="The face on which it is looked for, all of it unless `patch` or intervals along its axes are "
        "given.",
        examples=["z_high"],
    )
    patch: PatchReference | None = Field(
        None,
        description="A patch of the face's map, by its number from 0 or its name.",
        examples=["sight port", 0],
    )
    layer: LayerReference | None = Field(
        None,
        description="The layer of a stack in which it is looked for, by its number from 0 or its name; its own side of "
        "the interfaces belongs to it.",
        examples=["solder", 1],
    )
    box: AxisIntervals | None = Field(
        None,
        description="The box inside the body in which it is looked for, from side to side along an axis that is left "
        "out.",
        examples=[{"x": [5, 35], "z": [0, "2 mm"]}],
    )

    @model_validator(mode="after")
    def _one_region(self) -> Self:
        if sum(region is not None for region in (self.face, self.layer, self.box)) > 1:
            raise PydanticCustomError("one_of", "Give one of `face`, `layer` and `box` at the most.")
        if self.face is None:
            if self.patch is not None:
                raise PydanticCustomError("one_of", "A patch is one of a face; give its `face` as well.")
            if any(interval is not None for interval in (self.x, self.y, self.z)):
                raise PydanticCustomError(
                    "one_of", "Intervals belong to a face or a box; give `face`, or put them into `box`."
                )
        return self


class HighestResult(_Extreme):
    """The highest potential of the body, a part of a face, a layer or a box."""

    result: Literal["highest"] = Field(
        description="The highest potential of the whole body, a part of a face, a layer or a box; unit `potential`."
    )


class LowestResult(_Extreme):
    """The lowest potential of the body, a part of a face, a layer or a box."""

    result: Literal["lowest"] = Field(
        description="The lowest potential of the whole body, a part of a face, a layer or a box; unit `potential`."
    )


_EDGE_GAP = (
    "Width of the strip left out along every line where held values jump, a length: without it a flow across such a "
    "line has no finite value."
)


class InflowResult(FacePart):
    """The flow into the body through a face, a patch of its map or a rectangle of it."""

    result: Literal["inflow"] = Field(description="The flow into the body through a face or a part of it; unit `flow`.")
    name: ResultName
    edge_gap: Quantity | None = Field(None, description=_EDGE_GAP, examples=["10 um"])


class FlowResult(Plane):
    """The flow through a plane square to an axis, or a rectangle of it."""

    result: Literal["flow"] = Field(
        description="The flow through a plane or a rectangle of it, positive along the axis; unit `flow`."
    )
    name: ResultName
    edge_gap: Quantity | None = Field(None, description=_EDGE_GAP, examples=["10 um"])


class ReachResult(Model):
    """How far from a face the disturbance by its data has fallen to a fraction of its largest size on the face."""

    result: Literal["reach"] = Field(
        description="The distance from a face at which what its data drive has everywhere fallen below a fraction of "
        "its largest size on the face; unit `length`."
    )
    name: ResultName
    face: FaceName = Field(description="The face whose disturbance is followed.", examples=["z_low"])
    fraction: Fraction = Field(
        description="What it has to have fallen below, in parts of its largest size on the face.", examples=[0.1]
    )


class DifferenceResult(Model):
    """One result less another of the same kind."""

    result: Literal["difference"] = Field(
        description="One result less another. Two potentials make a difference of the potential."
    )
    name: ResultName
    of: ResultReference = Field(
        description="The name of a result that stands before this one.", examples=["die, highest"]
    )
    less: ResultReference = Field(
        description="The name of the result to take off, which stands before this one as well.",
        examples=["cold plate, mean"],
    )


class RatioResult(Model):
    """One result over another, such as a rise over a flow."""

    result: Literal["ratio"] = Field(
        description='One result over another; its unit is that of the one over that of the other, such as "K/W".'
    )
    name: ResultName
    of: ResultReference = Field(
        description="The name of a result that stands before this one.", examples=["rise of the die"]
    )
    over: ResultReference = Field(
        description="The name of the result to divide by, which stands before this one as well.",
        examples=["heat of the die"],
    )


Result = Annotated[
    PotentialResult
    | GradientResult
    | FluxResult
    | MeanResult
    | HighestResult
    | LowestResult
    | InflowResult
    | FlowResult
    | ReachResult
    | DifferenceResult
    | RatioResult,
    Field(
        discriminator="result",
        examples=[{"result": "highest", "name": "die, highest", "face": "z_high", "patch": "die"}],
    ),
]

Results = Annotated[
    list[Result],
    Field(
        min_length=1,
        max_length=MOST_RESULTS,
        description="The results that are wanted, each with a name of its own. Differences and ratios name results "
        "before them.",
        examples=[
            [
                {"result": "highest", "name": "window, highest", "face": "z_low", "patch": "window"},
                {"result": "mean", "name": "cooled side, mean", "face": "x_high"},
                {"result": "difference", "name": "drop", "of": "window, highest", "less": "cooled side, mean"},
            ]
        ],
    ),
]
