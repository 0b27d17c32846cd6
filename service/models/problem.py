"""A problem as a client writes it: the potential, its units, the body, its faces and sources."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from service.models.base import LONGEST_NAME, Model, Number, Quantity
from service.models.face_maps import Interval
from service.models.faces import Faces

PotentialName = Literal["temperature", "electric_potential", "concentration", "hydraulic_head"]

# Bound of the document itself; the service's settings bound the problem further.
MOST_LAYERS = 1_000
MOST_ENTRIES = 1_000

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
    resistance: UnitText | None = Field(
        None,
        description="Unit of resistances between pads; K/W, ohm, s/m^3 or s/m^2 if left out. Conductances are in its "
        "inverse.",
        examples=["K/W", "mohm"],
    )


_OPEN = '"semi-infinite" (from 0, no far end) or "infinite" (no end at all)'


class Size(Model):
    """Edge lengths of the body, which reaches from 0 to the size along each axis that ends.

    An infinite axis has places from minus to plus infinity and no faces; a semi-infinite one has the low face alone.
    """

    x: Quantity = Field(description=f"Length along x, greater than zero, or {_OPEN}.", examples=[40])
    y: Quantity = Field(description=f"Length along y, greater than zero, or {_OPEN}.", examples=[60, "infinite"])
    z: Quantity | None = Field(
        None,
        description=f"Length along z, greater than zero, or {_OPEN}. Left out exactly where `layers` are given, whose "
        "thicknesses add up to it.",
        examples=["semi-infinite", 25],
    )


class AxisConductivities(Model):
    """Conductivity along each axis, for a body that conducts differently along them."""

    x: Quantity = Field(description="Conductivity along x, greater than zero.", examples=[95])
    y: Quantity = Field(description="Conductivity along y, greater than zero.", examples=[95])
    z: Quantity = Field(description="Conductivity along z, greater than zero.", examples=[130])


class PlaneConductivities(Model):
    """Conductivity along x and y alike, and along z, as sheets and laminates have it."""

    in_plane: Quantity = Field(description="Conductivity along x and y, greater than zero.", examples=[12])
    through: Quantity = Field(description="Conductivity along z, greater than zero.", examples=[0.8])


def _kind_of_conductivity(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    if isinstance(value, PlaneConductivities) or (isinstance(value, dict) and value.keys() & {"in_plane", "through"}):
        return "in the plane and through it"
    return "along each axis" if isinstance(value, dict | AxisConductivities) else "the same along all"


Conductivity = Annotated[
    Annotated[Quantity, Tag("the same along all")]
    | Annotated[AxisConductivities, Tag("along each axis")]
    | Annotated[PlaneConductivities, Tag("in the plane and through it")],
    Discriminator(_kind_of_conductivity),
]


class Layer(Model):
    """One layer of a stack, which fills its whole section."""

    name: str | None = Field(
        None,
        min_length=1,
        max_length=LONGEST_NAME,
        description="What to call the layer; no two layers of a stack may have the same name.",
        examples=["solder"],
    )
    thickness: Quantity = Field(description="Thickness along z, greater than zero.", examples=["80 um"])
    conductivity: Conductivity = Field(
        description="Conductivity, in the declared unit `conductivity`: one value, one along each axis, or one in the "
        "plane and one through it. The ratio of y to x has to be the same in all layers.",
        examples=[57, {"in_plane": 12, "through": 0.8}],
    )
    contact_conductance_below: Quantity | None = Field(
        None,
        description="Contact conductance per area between this layer and the one below it, greater than zero, in the "
        "declared unit `film_coefficient`; bonded perfectly if left out. The first layer has none.",
        examples=["25 kW/(m^2 K)"],
    )
    contact_resistance_below: Quantity | None = Field(
        None,
        description="In place of it the contact resistance, times area: one over the conductance, in one over the "
        "declared unit `film_coefficient`; 0 where the layers are bonded perfectly.",
        examples=["40 mm^2 K/W", 4e-5],
    )
    generation: Quantity | None = Field(
        None,
        description="Generation per volume in the whole layer, in the declared unit `density`; none if left out.",
        examples=["2 MW/m^3"],
    )


class LinearLaw(Model):
    """The conductivity is its given value times 1 + per_degree * (potential - reference)."""

    law: Literal["linear"] = Field(description="Which kind of law this is.")
    reference: Quantity = Field(
        description="Potential at which the conductivity has its given value, in the declared unit `potential`.",
        examples=[20],
    )
    per_degree: Number = Field(
        description="Part of the conductivity gained for each unit of potential difference; negative where it falls.",
        examples=[-0.0004],
    )


class TableLaw(Model):
    """The conductivity is linear between the entries of a table, of its values or of factors on the given one."""

    law: Literal["table"] = Field(description="Which kind of law this is.")
    potential: list[Quantity] = Field(
        min_length=2,
        max_length=MOST_ENTRIES,
        description="Potentials of the entries, increasing, in the declared unit `potential`. They have to cover every "
        "potential in the body.",
        examples=[[20, 400, 1600]],
    )
    factor: list[Number] | None = Field(
        None,
        min_length=2,
        max_length=MOST_ENTRIES,
        description="Factor on the body's conductivity at each, greater than zero; or give `conductivity`.",
        examples=[[1.0, 0.86, 0.71]],
    )
    conductivity: list[Quantity] | None = Field(
        None,
        min_length=2,
        max_length=MOST_ENTRIES,
        description="Conductivity itself at each, greater than zero, in the declared unit `conductivity`; or give "
        "`factor`. The body's own conductivity may then be left out. A body that conducts differently along its axes "
        "has these values along x, and those along y and z in proportion.",
        examples=[[1.9, 1.63, 1.35]],
    )


class Body(Model):
    """A rectangular body, of one material or a stack of layers along z, with one corner at the origin.

    Either `size.z` and `conductivity`, or `layers`.
    """

    size: Size = Field(
        description="Edge lengths, in the declared unit `length`.",
        examples=[{"x": 40, "y": 60, "z": "semi-infinite"}, {"x": 40, "y": 60}],
    )
    conductivity: Conductivity | None = Field(
        None,
        description="Conductivity, in the declared unit `conductivity`: one value, or one along each axis. It may be "
        "left out where the conductivity law is a table of conductivities.",
        examples=[{"x": 95, "y": 95, "z": 130}, 95],
    )
    conductivity_law: Annotated[LinearLaw | TableLaw, Field(discriminator="law")] | None = Field(
        None,
        description="How the conductivity varies with the potential, alike along all axes; it does not if left out. "
        "Not for layers.",
        examples=[{"law": "linear", "reference": 20, "per_degree": -0.0004}],
    )
    far_level: Quantity | None = Field(
        None,
        description="Potential far away along endless axes, in the declared unit `potential`, where no face fixes it: "
        "undisturbed ground, remote earth. Zero if left out.",
        examples=[9.5, "283 K"],
    )
    layers: list[Layer] | None = Field(
        None,
        min_length=1,
        max_length=MOST_LAYERS,
        description="Layers of a stack from z = 0 up.",
        examples=[[{"name": "base", "thickness": 3, "conductivity": 390}, {"thickness": 0.6, "conductivity": 24}]],
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
