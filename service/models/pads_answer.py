"""The answer to POST /v1/pads."""

from __future__ import annotations

from pydantic import Field

from service.models.answers import Answer, PartAnswer
from service.models.base import Model


class PadPotential(Model):
    """A potential of a pad."""

    value: float = Field(description="The potential; unit `potential`.", examples=[81.4])
    error_bound: float = Field(description="It is not further off; unit `potential_difference`.", examples=[4e-8])


class PadPlace(PadPotential):
    """A potential at a place of a pad."""

    at: list[float] = Field(description="Where, along x, y and z; unit `length`.", examples=[[8, 6.5, 3.715]])


class PadFlow(Model):
    """The flow into the body through a pad."""

    value: float | None = Field(
        description="The flow; unit `flow`. null where it has no finite value.", examples=[30.0]
    )
    error_bound: float | None = Field(description="It is not further off; unit `flow`.", examples=[1e-12])


class PadAnswer(PartAnswer):
    """Potentials of one pad."""

    area: float = Field(description="Area of the pad; unit `length` squared.", examples=[30.0])
    flow: PadFlow = Field(description="The flow into the body through it.")
    mean: PadPotential = Field(description="Its mean potential.")
    largest: PadPlace = Field(description="The largest potential of it and its edges, and where.")
    centre: PadPlace = Field(description="The potential of its middle.")


class PadsAnswer(Answer):
    """Potentials of pads."""

    pads: list[PadAnswer] = Field(description="Each pad, in the order asked for.")
