"""What is asked about a problem: grids, points, means, totals and the accuracy."""

from __future__ import annotations

from typing import Annotated, Any, Literal, Self

from pydantic import BeforeValidator, Discriminator, Field, Tag, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import LONGEST_NAME, Model, Number, Quantity
from service.models.face_maps import AxisIntervals, Interval
from service.models.faces import FaceName
from service.models.problem import Problem

# Bounds of the document itself; the service's settings bound the question further.
LONGEST_AXIS = 1_000_000
LONGEST_LIST = 10_000

Name = Annotated[str, Field(min_length=1, max_length=LONGEST_NAME)]


class EvenAxis(Model):
    """Evenly spaced places, both ends included."""

    from_: Quantity = Field(alias="from", description="First place, a length.", examples=[0])
    to: Quantity = Field(description="Last place, a length.", examples=[40])
    count: int = Field(ge=2, le=LONGEST_AXIS, description="How many places, at least 2.", examples=[81])


def _check_layer_reference(value: Any) -> int | str:
    if isinstance(value, bool) or not isinstance(value, int | str) or value == "":
        raise PydanticCustomError("layer", "The number of a layer, counted from 0, or its name is wanted here.")
    return value


LayerReference = Annotated[int | str, BeforeValidator(_check_layer_reference)]


class LayerAxis(Model):
    """Evenly spaced places through a layer of a stack, from its lower side to its upper one, both in the layer."""

    layer: LayerReference = Field(description="The layer, by its number from 0 or its name.", examples=["solder", 1])
    count: int = Field(ge=2, le=LONGEST_AXIS, description="How many places, at least 2.", examples=[9])


def _kind_of_axis(value: Any) -> str:
    """Tag of the unions below: words no field is called, so that they can be taken out of error paths."""
    if isinstance(value, list):
        return "list of places"
    if isinstance(value, LayerAxis) or (isinstance(value, dict) and "layer" in value):
        return "places through a layer"
    if isinstance(value, dict | EvenAxis):
        return "even places"
    return "one place"


def _kind_across(value: Any) -> str:
    """The same for an axis in the plane of the layers."""
    kind = _kind_of_axis(value)
    return "even places" if kind == "places through a layer" else kind


Side = Literal["below", "above"]
SIDE_IN_WORDS = "For places exactly on an interface of a stack: on which side of it they are meant; below if left out."

GridAxis = Annotated[
    Annotated[Quantity, Tag("one place")]
    | Annotated[list[Quantity], Field(min_length=1, max_length=LONGEST_AXIS), Tag("list of places")]
    | Annotated[EvenAxis, Tag("even places")],
    Discriminator(_kind_across),
]

GridHeights = Annotated[
    Annotated[Quantity, Tag("one place")]
    | Annotated[list[Quantity], Field(min_length=1, max_length=LONGEST_AXIS), Tag("list of places")]
    | Annotated[EvenAxis, Tag("even places")]
    | Annotated[LayerAxis, Tag("places through a layer")],
    Discriminator(_kind_of_axis),
]


class Grid(Model):
    """Places on a rectilinear grid. One fixed axis makes a plane, two make a line, three a point."""

    name: Name | None = Field(None, description="What to call the grid in the answer.", examples=["mid-plane"])
    x: GridAxis = Field(
        description="Places along x: one length, a list of lengths, or from, to and count.",
        examples=[{"from": 0, "to": 40, "count": 81}],
    )
    y: GridAxis = Field(
        description="Places along y: one length, a list of lengths, or from, to and count.",
        examples=[[0, 30, 60]],
    )
    z: GridHeights = Field(
        description="Places along z: one length, a list of lengths, or from, to and count; in a stack also a layer and "
        "a count.",
        examples=[20, {"layer": "solder", "count": 9}],
    )
    side: Side | None = Field(None, description=SIDE_IN_WORDS, examples=["above"])


Position = Annotated[
    list[Quantity],
    Field(min_length=3, max_length=3, description="Lengths along x, y and z.", examples=[[20, 30, 5]]),
]


PlanePosition = Annotated[
    list[Quantity],
    Field(min_length=2, max_length=2, description="Lengths along x and y.", examples=[[20, 30]]),
]


def _check_interface_reference(value: Any) -> int | str:
    if isinstance(value, bool) or not isinstance(value, int | str) or value == "":
        raise PydanticCustomError(
            "interface",
            "The number of an interface, counted from 1, or the names of the layers below and above it, such as "
            '"base/solder", are wanted here.',
        )
    return value


class Point(Model):
    """One place with a name."""

    name: Name | None = Field(None, description="What to call the point in the answer.", examples=["probe A"])
    at: Position
    side: Side | None = Field(None, description=SIDE_IN_WORDS, examples=["above"])


class Interface(Model):
    """Places on an interface between two layers of a stack, seen from both sides."""

    name: Name | None = Field(None, description="What to call them in the answer.", examples=["under the chip"])
    interface: Annotated[int | str, BeforeValidator(_check_interface_reference)] = Field(
        description="The interface: the number of the layer above it, counted from 0, so that 1 is the lowest; or the "
        "names of the layers below and above it with a slash between them.",
        examples=["base/solder", 1],
    )
    at: list[PlanePosition] = Field(
        min_length=1,
        max_length=LONGEST_LIST,
        description="Places in the plane of the interface, lengths along x and y each.",
        examples=[[[10, 10], [20, 30]]],
    )


def _check_patch_reference(value: Any) -> int | str:
    if isinstance(value, bool) or not isinstance(value, int | str) or value == "":
        raise PydanticCustomError("patch", "The number of a patch, counted from 0, or its name is wanted here.")
    return value


PatchReference = Annotated[int | str, BeforeValidator(_check_patch_reference)]


class FacePart(AxisIntervals):
    """A face, a patch of its map, or a rectangle given by an interval along each of the face's two axes."""

    face: FaceName = Field(description="The face.", examples=["z_low"])
    patch: PatchReference | None = Field(
        None,
        description="A patch of the face's map, by its number from 0 or its name.",
        examples=["sight port", 0],
    )
    name: Name | None = Field(None, description="What to call the part in the answer.", examples=["left half"])


def _kind_of_extent(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    return "from and to" if isinstance(value, list) else "one place"


PlaceOrInterval = Annotated[
    Annotated[Quantity, Tag("one place")] | Annotated[Interval, Tag("from and to")],
    Discriminator(_kind_of_extent),
]


class Plane(Model):
    """A plane square to one axis, whole or a rectangle of it.

    A single length along one axis says where it lies; intervals along the others, if given, cut a rectangle.
    """

    x: PlaceOrInterval | None = Field(
        None, description="Where the plane lies along x, or from and to along x.", examples=[[0, 20]]
    )
    y: PlaceOrInterval | None = Field(
        None, description="Where the plane lies along y, or from and to along y.", examples=[[0, 30]]
    )
    z: PlaceOrInterval | None = Field(
        None, description="Where the plane lies along z, or from and to along z.", examples=[20]
    )
    name: Name | None = Field(None, description="What to call the plane in the answer.", examples=["flange"])


class Accuracy(Model):
    """How far off any value may be: as a difference of the potential, or as part of the span of the data."""

    absolute: Quantity | None = Field(
        None,
        description="Largest error, a difference of the potential; of resistances, that of the rise for a flow of one "
        "declared unit.",
        examples=["1e-6 K"],
    )
    relative: Number | None = Field(
        None, ge=1e-14, le=0.1, description="Largest error as part of the span of the data.", examples=[1e-9]
    )

    @model_validator(mode="after")
    def _one_of(self) -> Self:
        if (self.absolute is None) == (self.relative is None):
            raise PydanticCustomError("one_of", "Give either `absolute` or `relative`.")
        return self


class Question(Model):
    """A problem, or the id of a stored one, and the accuracy wanted."""

    problem: Problem | None = Field(None, description="The problem itself; or give `problem_id`.")
    problem_id: str | None = Field(
        None,
        pattern=r"^[0-9a-f]{64}$",
        description="The id that POST /v1/problems answered; or give `problem`.",
        examples=["3b0c" * 16],
    )
    accuracy: Accuracy | None = Field(
        None,
        description="Accuracy wanted. If left out, 1e-9 of the span of the data; 1e-4 where a film face is iterated "
        "along which the potential varies; beside mixed faces 5e-3, and 1e-5 for flows; or what can be promised.",
        examples=[{"absolute": "1e-6 K"}],
    )

    @model_validator(mode="after")
    def _one_of_problem(self) -> Self:
        if (self.problem is None) == (self.problem_id is None):
            raise PydanticCustomError("one_of", "Give either `problem` or `problem_id`.")
        return self


Quantities = Literal["potential", "flux"]


def _potential_alone() -> list[Quantities]:
    return ["potential"]


class FieldsEvaluate(Model):
    """Where the potential and the flux are wanted."""

    grids: list[Grid] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Grids of places.",
        examples=[[{"name": "mid-plane", "x": {"from": 0, "to": 40, "count": 81}, "y": [0, 30, 60], "z": 20}]],
    )
    points: list[Point] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Named points.",
        examples=[[{"name": "probe A", "at": [20, 30, 5]}]],
    )
    quantities: list[Quantities] = Field(
        default_factory=_potential_alone,
        min_length=1,
        max_length=2,
        description="What is wanted there: the potential, the flux density vector, or both.",
        examples=[["potential", "flux"]],
    )
    extremes: bool = Field(
        False,
        description="Whether the highest and the lowest potential of the body are wanted.",
        examples=[True],
    )
    means: list[FacePart] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Mean potentials of faces or parts of them.",
        examples=[[{"face": "z_low", "patch": "sight port"}]],
    )

    interfaces: list[Interface] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Places on interfaces of a stack, answered with the potential on both sides, the step across the "
        "contact and the flux through it.",
        examples=[[{"interface": "base/solder", "at": [[20, 30]]}]],
    )

    @model_validator(mode="after")
    def _something(self) -> Self:
        if not (self.grids or self.points or self.means or self.extremes or self.interfaces):
            raise PydanticCustomError(
                "nothing", "Ask for something: `grids`, `points`, `means`, `extremes` or `interfaces`."
            )
        return self


class FieldsQuestion(Question):
    """Potential and flux density on grids and at points."""

    evaluate: FieldsEvaluate = Field(description="Where the potential and the flux are wanted.")


class FluxTotalsEvaluate(Model):
    """Which total flows are wanted."""

    faces: list[FaceName] | None = Field(
        None,
        max_length=6,
        description="Faces whose inflow is wanted; all of them if left out.",
        examples=[["z_low"]],
    )
    patches: list[FacePart] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Parts of faces whose inflow is wanted.",
        examples=[[{"face": "z_low", "patch": "sight port"}]],
    )
    planes: list[Plane] = Field(
        default_factory=list,
        max_length=LONGEST_LIST,
        description="Planes through which the flow is wanted, positive along the axis.",
        examples=[[{"z": 20}]],
    )
    edge_gap: Quantity | None = Field(
        None,
        description="Width of the strip left out along every line where held values jump, a length. With it "
        "an unbounded total also comes with the finite flow through the rest.",
        examples=["10 um"],
    )


class FluxTotalsQuestion(Question):
    """Total flow through faces, parts of faces and planes."""

    evaluate: FluxTotalsEvaluate = Field(
        default_factory=lambda: FluxTotalsEvaluate(faces=None, edge_gap=None),
        description="Which total flows are wanted; the inflow of every face if left out.",
        examples=[{"faces": ["z_low"], "edge_gap": "10 um"}],
    )


class ConvergenceEvaluate(Model):
    """Where the convergence of the answer is to be shown."""

    points: list[Point] = Field(
        min_length=1,
        max_length=LONGEST_LIST,
        description="The places.",
        examples=[[{"name": "probe A", "at": [20, 30, 5]}]],
    )
    overshoot_terms: int = Field(
        32,
        ge=1,
        le=4096,
        description="Number of series terms along each axis for which the overshoot beside a jump is wanted.",
        examples=[32],
    )


class ConvergenceQuestion(Question):
    """How the answer converges at some places."""

    evaluate: ConvergenceEvaluate = Field(description="Where the convergence is to be shown.")
