"""A problem as a client writes it: the potential, its units, the body, its faces and sources."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from service.models.base import LONGEST_NAME, Model, Quantity
from service.models.face_maps import Interval
from service.models.faces import Faces

PotentialName = Literal["temperature", "electric_potential", "concentration", "hydraulic_head"]

UnitText = Annotated[str, Field(min_length=1, max_length=64)]


class DeclaredUnits(Model):
    """The units of bare numbers in the problem and in questions about it, and of every answer.

    What is left out takes the usual SI unit of the potential; temperatures take degC.
    """

    length: UnitText | None = Field(None, description="Unit of lengths; m if left out.", examples=["mm"])
    potential: UnitText | None = Field(
        None,
        description="Unit of the potential; degC, V, mol/m^3 or m if left out. A concentration in kg/m^3 or "
        "mg/l makes all flows count mass. Differences of a temperature in degC are in K.",
        examples=["degC"],
    )
    conductivity: UnitText | None = Field(
        None,
        description="Unit of conductivities; W/(m K), S/m, m^2/s or m/s if left out.",
        examples=["W/(m K)"],
    )
    film_coefficient: UnitText | None = Field(
        None, description="Unit of film coefficients; W/(m^2 K), S/m^2, m/s or 1/s if left out.",
        examples=["W/(m^2 K)"],
    )  # fmt: skip
    flux: UnitText | None = Field(
        None,
        description="Unit of flows per area; W/m^2, A/m^2, mol/(m^2 s) or m/s if left out.",
        examples=["kW/m^2"],
    )
    density: UnitText | None = Field(
        None, description="Unit of generation per volume; W/m^3, A/m^3, mol/(m^3 s) or 1/s if left out.",
        examples=["MW/m^3"],
    )  # fmt: skip
    flow: UnitText | None = Field(
        None, description="Unit of total flows in answers; W, A, mol/s or m^3/s if left out.", examples=["W"]
    )


class Size(Model):
    """Edge lengths of the body, which reaches from 0 to the size along each axis."""

    x: Quantity = Field(description="Length along x, greater than zero.", examples=[40])
    y: Quantity = Field(description="Length along y, greater than zero.", examples=[60])
    z: Quantity = Field(
        description='Length along z, greater than zero, or "semi-infinite" for a bar that has no far end.',
        examples=["semi-infinite", 25],
    )


class AxisConductivities(Model):
    """Conductivity along each axis, for a body that conducts differently along them."""

    x: Quantity = Field(description="Conductivity along x, greater than zero.", examples=[95])
    y: Quantity = Field(description="Conductivity along y, greater than zero.", examples=[95])
    z: Quantity = Field(description="Conductivity along z, greater than zero.", examples=[130])


def _kind_of_conductivity(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    return "along each axis" if isinstance(value, dict | AxisConductivities) else "the same along all"


Conductivity = Annotated[
    Annotated[Quantity, Tag("the same along all")] | Annotated[AxisConductivities, Tag("along each axis")],
    Discriminator(_kind_of_conductivity),
]


class Body(Model):
    """A homogeneous rectangular body with one corner at the origin."""

    size: Size = Field(
        description="Edge lengths, in the declared unit `length`.",
        examples=[{"x": 40, "y": 60, "z": "semi-infinite"}],
    )
    conductivity: Conductivity = Field(
        description="Conductivity, in the declared unit `conductivity`: one value, or one along each axis.",
        examples=[{"x": 95, "y": 95, "z": 130}, 95],
    )


class Source(Model):
    """A box inside the body with uniform generation per volume. Sources may overlap and then add up."""

    x: Interval | None = Field(
        None, description="From and to along x; the whole length if left out.", examples=[[0, 40]]
    )
    y: Interval | None = Field(
        None, description="From and to along y; the whole length if left out.", examples=[[0, 60]]
    )
    z: Interval | None = Field(
        None, description="From and to along z; the whole length if left out.", examples=[[0, 20]]
    )
    density: Quantity = Field(
        description="Generation per volume, in the declared unit `density`; negative for a sink.",
        examples=["2 MW/m^3"],
    )
    name: str | None = Field(
        None,
        min_length=1,
        max_length=LONGEST_NAME,
        description="What to call the source.",
        examples=["heater"],
    )


class Problem(Model):
    """A rectangular body, what is known on its faces and what is generated inside."""

    name: str | None = Field(
        None,
        min_length=1,
        max_length=LONGEST_NAME,
        description="What to call the problem. Part of what its id stands for.",
        examples=["sight-port bar in a cooled frame"],
    )
    potential: PotentialName = Field(
        "temperature",
        description="Which potential it is; sets unit names and labels.",
        examples=["temperature"],
    )
    units: DeclaredUnits = Field(
        default_factory=DeclaredUnits,
        description="Units of bare numbers and of answers.",
        examples=[{"length": "mm", "potential": "degC"}],
    )
    body: Body = Field(description="Size and conductivity.")
    faces: Faces = Field(description="What is known on each face.")
    sources: list[Source] = Field(
        default_factory=list,
        max_length=1_000,
        description="Generation inside the body.",
        examples=[[{"x": [0, 40], "y": [0, 60], "z": [0, 20], "density": "2 MW/m^3"}]],
    )
