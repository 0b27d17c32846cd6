"""What every answer carries.

These models describe the answers; answers are built as plain documents and tested against them.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from service.models.base import Model
from service.models.faces import FaceName
from service.models.problem import PotentialName

ProblemId = Annotated[
    str,
    Field(pattern=r"^[0-9a-f]{64}$", description="Content digest of the problem.", examples=["3b0c" * 16]),
]

# From and to along an axis; null for an end that is infinitely far.
Ends = list[float | None]


class Units(Model):
    """The unit of each kind of quantity in the answer."""

    length: str = Field(description="Unit of lengths.", examples=["mm"])
    potential: str = Field(description="Unit of the potential.", examples=["degC"])
    potential_difference: str = Field(
        description="Unit of differences of the potential, error bounds among them.", examples=["K"]
    )
    conductivity: str = Field(description="Unit of conductivities.", examples=["W/(m K)"])
    film_coefficient: str = Field(description="Unit of film coefficients.", examples=["W/(m^2 K)"])
    flux: str = Field(description="Unit of flows per area.", examples=["W/m^2"])
    density: str = Field(description="Unit of generation per volume.", examples=["W/m^3"])
    flow: str = Field(description="Unit of total flows.", examples=["W"])


class Terms(Model):
    """How much was summed."""

    time_nodes: int = Field(description="Nodes of the integral over time.", examples=[46])
    products: int = Field(
        description="Products of one-dimensional profiles that the data were split into.", examples=[2]
    )
    series_terms: int = Field(description="Terms of the double series at the checked places.", examples=[4096])


class Iteration(Model):
    """How film faces were iterated."""

    steps: int = Field(description="Steps taken in all, also for earlier answers about the problem.", examples=[7])
    residual: float = Field(
        description="Nowhere on a film face is more left over of its condition; unit `flux`. Error bounds count it.",
        examples=[0.02],
    )


class Certificate(Model):
    """Evidence for the answer."""

    error_bound: float = Field(
        description="No potential in the answer is further off than this; unit `potential_difference`.",
        examples=[4e-8],
    )
    accuracy_asked: float = Field(
        description="The accuracy that was asked for, or if none was the one aimed at; unit `potential_difference`.",
        examples=[6.1e-7],
    )
    agreement: float | None = Field(
        description="Largest difference between the two representations of the solution at the checked "
        "places; null where only one can be evaluated. Unit `potential_difference`.",
        examples=[3e-13],
    )
    agreement_bound: float | None = Field(
        description="What the difference may be by the bounds of both; unit `potential_difference`.",
        examples=[5e-9],
    )
    checked_places: int = Field(description="At how many places both were evaluated.", examples=[3])
    terms: Terms = Field(description="How much was summed.")
    iteration: Iteration | None = Field(
        None, description="Of film faces that were iterated: where the conductivity varies or they radiate."
    )
    method: str = Field(description="How the answer was computed.", examples=["time form, checked by double series"])


class Remark(Model):
    """A warning."""

    code: str = Field(
        description=(
            "A short word for programs: `unbounded-total`, `level-pinned`, `flux-without-finite-value`, "
            "`flux-poorly-known`, `potential-poorly-known`, `readings-filled`, `accuracy-not-reached`, "
            "`overshoot-left-out`, "
            "`network-not-determined` or `no-environment`; more may be added."
        ),
        examples=["unbounded-total"],
    )
    message: str = Field(
        description="What to be aware of.",
        examples=["The total has no finite value, because of: edge x_low/z_low."],
    )
    where: str = Field(
        description="A JSON pointer into this answer; into the problem where it begins with #/problem.",
        examples=["#/faces/z_low"],
    )


class Answer(Model):
    """What every answer carries."""

    problem_id: ProblemId
    potential: PotentialName = Field(description="Which potential it is.", examples=["temperature"])
    units: Units = Field(description="The unit of each kind of quantity in the answer.")
    certificate: Certificate = Field(description="Evidence for the answer.")
    warnings: list[Remark] = Field(description="What to be aware of; often empty.")


class Rectangle(Model):
    """Intervals along the two axes of a face or plane; null for an end that is infinitely far."""

    x: Ends | None = Field(None, description="From and to along x; unit `length`.", examples=[[5, 35]])
    y: Ends | None = Field(None, description="From and to along y; unit `length`.", examples=[[10, 50]])
    z: Ends | None = Field(None, description="From and to along z; unit `length`.", examples=[[0, 20]])


class PartAnswer(Model):
    """The part of a face that a number is about."""

    name: str | None = Field(None, description="The name of the part or patch.", examples=["sight port"])
    face: FaceName = Field(description="The face.", examples=["z_low"])
    patch: int | None = Field(None, description="Number of the patch of the face's map.", examples=[0])
    rectangle: Rectangle | None = Field(None, description="The rectangle; absent for the whole face.")
