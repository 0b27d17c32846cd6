"""The answer to POST /v1/resistances."""

from __future__ import annotations

from pydantic import Field

from service.models.answers import Answer, PartAnswer, Units
from service.models.base import Model

Matrix = list[list[float]]


class ResistanceUnits(Units):
    """The unit of each kind of quantity in the answer, those of resistances among them."""

    resistance: str = Field(description="Unit of resistances.", examples=["K/W"])
    conductance: str = Field(description="Unit of conductances: one over that of resistances.", examples=["W/K"])


class PadOfMatrix(PartAnswer):
    """A pad, by its place in the matrices."""

    area: float = Field(description="Area of the pad; unit `length` squared.", examples=[30.0])


class Rises(Model):
    """Rise of each pad above the environment per unit flow into each pad.

    Means are symmetric, peaks are not.
    """

    value: Matrix = Field(
        description="Row i, column j: rise of pad i for a unit flow into pad j, spread evenly over it; unit "
        "`resistance`.",
        examples=[[[1.82, 0.31], [0.31, 1.64]]],
    )
    error_bound: Matrix = Field(
        description="No entry is further off than that of the same place; unit `resistance`.",
        examples=[[[2e-9, 1e-9], [1e-9, 2e-9]]],
    )


class ResistancesCertificate(Model):
    """Evidence for the matrix."""

    error_bound: float = Field(
        description="No mean rise per unit flow is further off than this; of several held pads, and where there are no "
        "rises, no entry of `pairs`. Unit `resistance`.",
        examples=[2e-9],
    )
    accuracy_asked: float = Field(description="The accuracy that was asked for; unit `resistance`.", examples=[1e-8])
    agreement: float | None = Field(
        description="Entries between some pads were computed once more by the general integral, from pad to pad and "
        "back: the largest difference from the matrix, which is symmetric by reciprocity; unit `resistance`. null "
        "for held pads.",
        examples=[4e-12],
    )
    agreement_bound: float | None = Field(
        description="What that difference may be by the bounds of both; unit `resistance`. null for held pads.",
        examples=[4e-9],
    )
    checked_entries: int = Field(description="How many entries were computed once more.", examples=[6])
    method: str = Field(
        description="How the answer was computed.", examples=["one time integral for all pairs of pads"]
    )


class ResistanceNetwork(Model):
    """Resistors between every two pads, and from each to the environment, that are equivalent to the body.

    The environment is all held values and ambients together, taken as zero. A negative resistor is part of an exact
    equivalent all the same.
    """

    between: Matrix = Field(
        description="Conductance between pads i and j, zero on the diagonal; unit `conductance`.",
        examples=[[[0.0, 0.107], [0.107, 0.0]]],
    )
    between_error_bound: Matrix = Field(
        description="No conductance between pads is further off; unit `conductance`.",
        examples=[[[0.0, 1e-9], [1e-9, 0.0]]],
    )
    to_environment: list[float] = Field(
        description="Conductance between each pad and the environment; unit `conductance`.", examples=[[0.461, 0.523]]
    )
    to_environment_error_bound: list[float] = Field(
        description="No conductance to the environment is further off; unit `conductance`.", examples=[[2e-9, 2e-9]]
    )
    negative: int = Field(description="How many of the resistors are negative.", examples=[0])


class ResistancesAnswer(Answer):
    """Rise of pads per unit flow, and the equivalent network."""

    units: ResistanceUnits = Field(description="The unit of each kind of quantity in the answer.")
    certificate: ResistancesCertificate = Field(description="Evidence for the matrix.")  # type: ignore[assignment]
    pads: list[PadOfMatrix] = Field(description="The pads, in the order of the matrices.")
    mean: Rises | None = Field(
        description="Rise of the mean of each pad; of a held pad, of its level, all other held pads passing no "
        "flow. null where nothing but the pads takes up a flow."
    )
    peak: Rises | None = Field(None, description="Largest rise of each pad, if asked for.")
    pairs: Rises = Field(
        description="Potential between pads i and j for a unit of flow from one to the other, all others passing none: "
        "the resistance between two pads."
    )
    network: ResistanceNetwork | None = Field(
        description="The equivalent network; null where pads are too much alike for the accuracy asked for."
    )
