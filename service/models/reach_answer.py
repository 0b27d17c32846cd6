"""The answer to POST /v1/reach."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.answers import Answer
from service.models.base import Model
from service.models.faces import FaceName


class LargestSize(Model):
    """The largest size of the disturbance on the face."""

    value: float = Field(
        description="The size; unit `potential_difference`, for a uniform change per unit of the face's datum.",
        examples=[610.0],
    )
    error_bound: float = Field(description="It is not further off.", examples=[1e-9])


class Reached(Model):
    """Where the disturbance has fallen below a fraction."""

    fraction: float = Field(description="Part of the largest size on the face.", examples=[0.1])
    distance: float | None = Field(
        description="Beyond this distance from the face it stays below; unit `length`. null where it never does.",
        examples=[56.8],
    )
    error_bound: float | None = Field(
        description="The distance is not further off; unit `length`. null with it.", examples=[3e-8]
    )
    at: list[float | None] | None = Field(
        description="The place that falls below last, along x, y and z; unit `length`. A coordinate is null far along "
        "an axis, the whole where there is no such place.",
        examples=[[39.9, 30, 56.8]],
    )
    left: float | None = Field(
        description="What is left of it at the far end, in parts of its largest size, where it never falls below.",
        examples=[0.33],
    )
    reason: str | None = Field(
        description="Why it never falls below, where it does not.",
        examples=["At the opposite face z_high, 10 mm away, 0.333 of it is left."],
    )


class DecayRate(Model):
    """A mode of the section, which decays along the axis of the face as exp(-rate * distance)."""

    numbers: list[int] = Field(
        description="Its numbers along the two axes across, in the order x, y, z, counted from 1.", examples=[[1, 1]]
    )
    rate: float = Field(description="Decay rate per unit `length`.", examples=[0.0336])
    length: float | None = Field(
        description="1 / rate; unit `length`. null for a mode that does not decay.", examples=[29.8]
    )


class Decay(Model):
    """How disturbances die away far from the face."""

    length: float | None = Field(
        description="The distance over which the slowest mode that decays falls by a factor e; unit `length`. null "
        "where there is none.",
        examples=[29.8],
    )
    rates: list[DecayRate] = Field(description="The slowest modes.")
    reason: str | None = Field(
        description="Why there is no decay length, where there is none, or what does not decay beside it.",
        examples=[
            "The sides are insulated, so the mean over the section does not decay; the length is that of the first "
            "mode that does."
        ],
    )


class ReachOfFace(Model):
    """How far one face reaches."""

    face: FaceName = Field(description="The face.", examples=["z_low"])
    change: Literal["as_given", "uniform"] = Field(description="What disturbs.", examples=["as_given"])
    reference: float | None = Field(
        description="The level its data are counted from; unit `potential`. null for an inflow and a uniform change.",
        examples=[30],
    )
    largest: LargestSize = Field(description="The largest size of the disturbance on the face.")
    worst: list[Reached] = Field(description="At the worst place of each section, for each fraction.")
    on_axis: list[Reached] = Field(
        description="In the middle of the section, for each fraction; empty where the section has no middle."
    )
    decay: Decay = Field(description="How disturbances die away far from the face.")


class ReachAnswer(Answer):
    """How far from a face its disturbance reaches."""

    reach: ReachOfFace = Field(description="How far the face reaches.")
