"""What is known on a face: one tagged model for each condition."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from service.models.base import Model, Quantity
from service.models.face_maps import FaceData

# Bound of the document itself: as many as a stack may have layers.
MOST_COEFFICIENTS = 1_000

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
    """The flow per area into the body is coefficient * (ambient - potential)."""

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


class InsulatedFace(Model):
    """Nothing flows through the face."""

    condition: Literal["insulated"] = Field(description="Nothing flows through the face.")


FaceCondition = Annotated[
    HeldFace | FluxFace | FilmFace | InsulatedFace,
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
