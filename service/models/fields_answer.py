"""The answer to POST /v1/fields."""

from __future__ import annotations

from pydantic import Field

from service.models.answers import Answer, PartAnswer
from service.models.base import Model

# In x, y, z order; null where the flux has no finite value.
Table = list[list[list[float | None]]]


class Axes(Model):
    """Places along the axes of a grid, lengths."""

    x: list[float] = Field(description="Places along x; unit `length`.", examples=[[0, 20, 40]])
    y: list[float] = Field(description="Places along y; unit `length`.", examples=[[0, 30, 60]])
    z: list[float] = Field(description="Places along z; unit `length`.", examples=[[20]])


class FluxTables(Model):
    """Components of the flux density on a grid, each in x, y, z order, positive along its axis."""

    x: Table = Field(description="Component along x; unit `flux`.", examples=[[[[1250.0]]]])
    y: Table = Field(description="Component along y; unit `flux`.", examples=[[[[0.0]]]])
    z: Table = Field(description="Component along z; unit `flux`.", examples=[[[[-310.5]]]])


class Flux(Model):
    """Components of the flux density at a point, each positive along its axis; null where it has no finite
    value.
    """

    x: float | None = Field(description="Component along x; unit `flux`.", examples=[1250.0])
    y: float | None = Field(description="Component along y; unit `flux`.", examples=[0.0])
    z: float | None = Field(description="Component along z; unit `flux`.", examples=[-310.5])


class GridAnswer(Model):
    """Values on one grid, in x, y, z order."""

    name: str | None = Field(None, description="The name the request gave.", examples=["mid-plane"])
    shape: list[int] = Field(description="Number of places along x, y and z.", examples=[[3, 3, 1]])
    axes: Axes = Field(description="Places along the axes.")
    potential: Table | None = Field(
        None, description="The potential; unit `potential`.", examples=[[[[30.0], [31.5]], [[30.0], [33.0]]]]
    )
    error_bound: float | None = Field(
        None,
        description="No potential on the grid is further off; unit `potential_difference`.",
        examples=[4e-8],
    )
    flux: FluxTables | None = Field(None, description="The flux density vector; null where it has no finite value.")
    flux_error_bound: Table | None = Field(
        None,
        description="No component of the flux at the place is further off; unit `flux`.",
        examples=[[[[1e-6]]]],
    )


class PointAnswer(Model):
    """Values at one point."""

    name: str | None = Field(None, description="The name the request gave.", examples=["probe A"])
    at: list[float] = Field(description="Where, along x, y and z; unit `length`.", examples=[[20, 30, 5]])
    potential: float | None = Field(None, description="The potential; unit `potential`.", examples=[412.3])
    error_bound: float | None = Field(
        None, description="The potential is not further off; unit `potential_difference`.", examples=[4e-8]
    )
    flux: Flux | None = Field(None, description="The flux density vector.")
    flux_error_bound: float | None = Field(
        None, description="No component of the flux is further off; unit `flux`.", examples=[1e-6]
    )


class ExtremePlace(Model):
    """A place of highest or lowest potential."""

    at: list[float | None] = Field(
        description="Where, along x, y and z; unit `length`. null where it lies infinitely far.",
        examples=[[20, 30, 0]],
    )
    value: float = Field(description="The potential there; unit `potential`.", examples=[640.0])
    error_bound: float = Field(
        description=(
            "The value, and the peak it belongs to, are not further off; unit `potential_difference`. Extremes that "
            "the data do not give outright are searched for, from every patch, reading and box."
        ),
        examples=[0.0],
    )
    where: str = Field(description="On which face, or inside.", examples=["face z_low"])


class Extremes(Model):
    """The places of highest and lowest potential of the body."""

    highest: ExtremePlace = Field(description="The highest potential: the hottest place of a temperature.")
    lowest: ExtremePlace = Field(description="The lowest potential: the coldest place of a temperature.")


class MeanAnswer(PartAnswer):
    """The mean potential of a face or a part of it."""

    value: float = Field(description="The mean; unit `potential`.", examples=[412.3])
    error_bound: float = Field(description="The mean is not further off; unit `potential_difference`.", examples=[4e-8])


class InterfaceAnswer(Model):
    """Both sides of an interface between two layers of a stack, each list in the order of the places."""

    name: str | None = Field(None, description="The name the request gave.", examples=["under the chip"])
    interface: int = Field(description="Number of the layer above it, counted from 0.", examples=[1])
    layer_below: str = Field(description="The layer below, by its name or its number.", examples=["base"])
    layer_above: str = Field(description="The layer above, by its name or its number.", examples=["solder"])
    z: float = Field(description="Height of the interface; unit `length`.", examples=[3.0])
    contact_conductance: float | None = Field(
        description="Contact conductance per area; unit `film_coefficient`. null where bonded perfectly.",
        examples=[25000.0],
    )
    at: list[list[float]] = Field(description="Places along x and y; unit `length`.", examples=[[[20, 30]]])
    potential_below: list[float] = Field(
        description="Potential on top of the layer below; unit `potential`.", examples=[[61.2]]
    )
    potential_above: list[float] = Field(
        description="Potential at the bottom of the layer above; unit `potential`.", examples=[[64.9]]
    )
    error_bound: float = Field(description="No potential is further off; unit `potential_difference`.", examples=[4e-8])
    step: list[float] = Field(
        description="Potential above less potential below; unit `potential_difference`. It is the flux downwards over "
        "the contact conductance, and zero where the layers are bonded perfectly.",
        examples=[[3.7]],
    )
    step_error_bound: list[float] = Field(
        description="No step is further off; unit `potential_difference`.", examples=[[1e-9]]
    )
    flux: list[float | None] = Field(
        description="Flux density through the interface, positive along z; unit `flux`. null where it has no finite "
        "value.",
        examples=[[-92500.0]],
    )
    flux_error_bound: list[float | None] = Field(description="No flux is further off; unit `flux`.", examples=[[1e-4]])


class FieldsAnswer(Answer):
    """Potential and flux on grids and at points."""

    grids: list[GridAnswer] = Field(description="Values on each grid, in the order asked for.")
    points: list[PointAnswer] = Field(description="Values at each point, in the order asked for.")
    extremes: Extremes | None = Field(None, description="The highest and lowest potential, if asked for.")
    means: list[MeanAnswer] | None = Field(None, description="The means, in the order asked for.")
    interfaces: list[InterfaceAnswer] | None = Field(
        None, description="Both sides of each interface asked for, in the order asked for."
    )
