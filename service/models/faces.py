"""What is known on a face: one tagged model for each condition."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from service.models.base import LONGEST_NAME, Model, Number, Quantity
from service.models.face_maps import AxisIntervals, FaceData

# Bounds of the document itself: coefficients as many as a stack may have layers.
MOST_COEFFICIENTS = 1_000
MOST_PADS = 1_000

FaceName = Literal["x_low", "x_high", "y_low", "y_high", "z_low", "z_high"]


class HeldFace(Model):
    """The potential on the face is given."""

    condition: Literal["held"] = Field(description="The potential on the face is given.")
    value: FaceData = Field(
        description="The potential, in the declared unit `potential`: one value or a map.",
        examples=[30, "303.15 K"],
    )


class FluxFace(Model):
    """The flow per area into the body is given."""

    condition: Literal["flux"] = Field(description="The flow per area into the body is given.")
    inflow: FaceData = Field(
        description="Flow per area, positive into the body, in the declared unit `flux`: one value or a map.",
        examples=["1.5 kW/m^2"],
    )


def _kind_of_coefficient(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    return "one beside each layer" if isinstance(value, list) else "one coefficient"


FilmCoefficient = Annotated[
    Annotated[Quantity, Tag("one coefficient")]
    | Annotated[list[Quantity], Field(min_length=1, max_length=MOST_COEFFICIENTS), Tag("one beside each layer")],
    Discriminator(_kind_of_coefficient),
]


class FilmFace(Model):
    """The flow per area into the body is coefficient * (ambient - potential), and radiation with an emissivity."""

    condition: Literal["film"] = Field(description="The inflow is coefficient * (ambient - potential of the face).")
    coefficient: FilmCoefficient = Field(
        description="Film coefficient of the whole face, greater than zero, in the declared unit `film_coefficient`. "
        "On a side of a stack whose layers conduct differently along x, a list with one for each layer from below, in "
        "proportion to those conductivities.",
        examples=["850 W/(m^2 K)", [850, 52]],
    )
    ambient: FaceData = Field(
        description="Potential of the surroundings, in the declared unit `potential`: one value or a map.",
        examples=[24],
    )
    emissivity: Number | None = Field(
        None,
        gt=0,
        le=1,
        description="Emissivity of a face that also radiates to black surroundings at the ambient, from 0 to 1; for "
        "temperatures only. Beside it the coefficient may be zero.",
        examples=[0.85],
    )


class InsulatedFace(Model):
    """Nothing flows through the face."""

    condition: Literal["insulated"] = Field(description="Nothing flows through the face.")


class UniformFlux(Model):
    """The same flow per area into the body everywhere beside the pads."""

    condition: Literal["flux"] = Field(description="The flow per area into the body is given.")
    inflow: Quantity = Field(
        description="Flow per area, positive into the body, in the declared unit `flux`.", examples=["1.5 kW/m^2"]
    )


class UniformFilm(Model):
    """The same film to the same surroundings everywhere beside the pads."""

    condition: Literal["film"] = Field(description="The inflow is coefficient * (ambient - potential of the face).")
    coefficient: FilmCoefficient = Field(
        description="Film coefficient, greater than zero, in the declared unit `film_coefficient`.",
        examples=["12 W/(m^2 K)"],
    )
    ambient: Quantity = Field(
        description="Potential of the surroundings, in the declared unit `potential`.", examples=[24]
    )


class HeldPad(AxisIntervals):
    """A rectangle of a mixed face with one potential all over: given, or what a given flow makes it.

    Give an interval along each of the face's two axes, and either `value` or `flow`.
    """

    condition: Literal["held"] = Field(description="One potential all over.")
    name: str | None = Field(
        None, min_length=1, max_length=LONGEST_NAME, description="What to call the pad.", examples=["clamp A"]
    )
    value: Quantity | None = Field(None, description="Its potential, in the declared unit `potential`.", examples=[640])
    flow: Quantity | None = Field(
        None,
        description="In place of `value`: the total flow into the body through the pad, in the declared unit `flow`; "
        "its potential is then part of the answer.",
        examples=["35 W"],
    )


class FilmPad(AxisIntervals):
    """A rectangle of a mixed face with a film of its own.

    Give an interval along each of the face's two axes.
    """

    condition: Literal["film"] = Field(description="The inflow is coefficient * (ambient - potential of the face).")
    name: str | None = Field(
        None, min_length=1, max_length=LONGEST_NAME, description="What to call the pad.", examples=["fin block"]
    )
    coefficient: FilmCoefficient = Field(
        description="Film coefficient, greater than zero, in the declared unit `film_coefficient`.",
        examples=["850 W/(m^2 K)"],
    )
    ambient: Quantity = Field(
        description="Potential of the surroundings, in the declared unit `potential`.", examples=[24]
    )


class FluxPad(AxisIntervals):
    """A rectangle of a mixed face with a given inflow.

    Give an interval along each of the face's two axes, and either `inflow` or `flow`.
    """

    condition: Literal["flux"] = Field(description="The flow into the body through the pad is given.")
    name: str | None = Field(
        None, min_length=1, max_length=LONGEST_NAME, description="What to call the pad.", examples=["die 1"]
    )
    inflow: Quantity | None = Field(
        None,
        description="Flow per area, positive into the body, in the declared unit `flux`.",
        examples=["15 kW/m^2"],
    )
    flow: Quantity | None = Field(
        None,
        description="In place of `inflow`: the total flow, spread evenly, in the declared unit `flow`.",
        examples=["35 W"],
    )


class MixedFace(Model):
    """Several conditions on one face: pads that are held, have a film of their own or a given inflow, on a background.

    The background has one condition with uniform data.
    """

    condition: Literal["mixed"] = Field(description="Pads with conditions of their own on a background.")
    background: Annotated[UniformFlux | UniformFilm | InsulatedFace, Field(discriminator="condition")] = Field(
        description="The condition everywhere else.", examples=[{"condition": "insulated"}]
    )
    pads: list[Annotated[HeldPad | FilmPad | FluxPad, Field(discriminator="condition")]] = Field(
        min_length=1,
        max_length=MOST_PADS,
        description="The rectangles; they may touch but not overlap. At most 64 of all mixed faces, unless the server "
        "is set otherwise, are held or behind films; pads with a given inflow may be more.",
        examples=[[{"name": "clamp A", "x": [5, 35], "y": [10, 50], "condition": "held", "value": 640}]],
    )


FaceCondition = Annotated[
    HeldFace | FluxFace | FilmFace | InsulatedFace | MixedFace,
    Field(
        discriminator="condition",
        examples=[{"condition": "held", "value": 30}],
    ),
]


class Faces(Model):
    """What is known on each face. A face is named by its axis and end: x_low is the face at x = 0.

    Every face the body has is wanted: six of a block; a semi-infinite axis has no high face, an infinite one none.
    """

    x_low: FaceCondition | None = Field(None, description="The face at x = 0.")
    x_high: FaceCondition | None = Field(None, description="The face at x = size.x.")
    y_low: FaceCondition | None = Field(None, description="The face at y = 0.")
    y_high: FaceCondition | None = Field(None, description="The face at y = size.y.")
    z_low: FaceCondition | None = Field(None, description="The face at z = 0.")
    z_high: FaceCondition | None = Field(None, description="The face at z = size.z, or on top of the last layer.")
