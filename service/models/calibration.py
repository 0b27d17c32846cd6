"""The question what readings say about numbers and a map that are not known."""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from service.models.base import Model, Quantity
from service.models.evaluate import Name
from service.models.limits import AnalysisQuestion
from service.models.numbers import NumberReference, Pointer

MOST_UNKNOWNS = 20
MOST_READINGS = 1000
MOST_SHARED = 20
MOST_STARTS = 32

Uncertainty = Annotated[
    Quantity,
    Field(
        description="Standard uncertainty, greater than zero, in the unit of differences: of a temperature in degC it "
        "is in K. Of an accuracy stated as plus or minus a without more, a / sqrt(3).",
        examples=[0.5, "0.3 K"],
    ),
]


class KnownBefore(Model):
    """What is known of a number apart from the readings."""

    value: Quantity = Field(description="Its value, in the unit of the number.", examples=[45])
    standard_uncertainty: Uncertainty


class UnknownNumber(NumberReference):
    """A number that is not known, and the range in which it is looked for."""

    low: Quantity = Field(description="Least value it may have, in the unit of the number.", examples=[20])
    high: Quantity = Field(description="Greatest value it may have.", examples=[5000, "5 kW/(m^2 K)"])
    spacing: Literal["linear", "logarithmic"] | None = Field(
        None,
        description="Whether it is looked for evenly over the range or evenly in its logarithm, which suits a number "
        "greater than zero of which hardly the size is known and gives it an interval by factors. If left out, "
        "logarithmic where `low` is greater than zero and `high` at least ten times as large. Where all results follow "
        "in proportion it makes no difference.",
        examples=["logarithmic"],
    )
    known_before: KnownBefore | None = Field(
        None, description="What is known of it apart from the readings, from a data sheet for example."
    )


class SmoothMapUnknown(Model):
    """The entries of a map of readings of a face, which are not known but vary smoothly."""

    name: Name = Field(description="What to call the map.", examples=["heat load"])
    map: Pointer = Field(
        description="Where the map stands: a JSON pointer to a map of `samples` with a `table`, whose entries are "
        "where the search begins.",
        examples=["/problem/faces/z_high/inflow"],
    )
    typical: Quantity | None = Field(
        None,
        description="A size its entries may have, greater than zero, in the unit of their differences; the largest of "
        "the table if left out. It is the width of what bends of the map are thought possible, and entries that are "
        "known to no better than a fraction of it are said to be open.",
        examples=["20 kW/m^2"],
    )
    departure: Quantity | None = Field(
        None,
        description="How far the map is thought to depart from a plane, as a root mean square over its entries. If "
        "left out it is told from the readings, as far as they tell it.",
        examples=["5 kW/m^2"],
    )


class Reading(Model):
    """What was read of a result."""

    result: Name = Field(
        description="The name of the result that was read; it may be read several times.", examples=["couple 1"]
    )
    value: Quantity = Field(description="The reading, in the unit of the result.", examples=[84.2, "357 K"])
    standard_uncertainty: Uncertainty


class SharedError(Model):
    """An error that several readings have in common, as of one reference junction, and which does not average out."""

    results: list[Name] = Field(
        min_length=1,
        max_length=MOST_READINGS,
        description="Names of the results whose readings share it, all of one unit.",
        examples=[["couple 1", "couple 2"]],
    )
    standard_uncertainty: Uncertainty


class CalibrationQuestion(AnalysisQuestion):
    """What readings say about what is not known."""

    unknowns: list[UnknownNumber] = Field(
        default_factory=list,
        max_length=MOST_UNKNOWNS,
        description="Numbers that are not known.",
        examples=[[{"name": "film", "at": "/problem/faces/x_high/coefficient", "low": 20, "high": 5000}]],
    )
    smooth_map: SmoothMapUnknown | None = Field(
        None,
        description="A map that is not known, beside the numbers or alone.",
        examples=[{"name": "heat load", "map": "/problem/faces/z_high/inflow", "typical": "20 kW/m^2"}],
    )
    readings: list[Reading] = Field(
        min_length=1,
        max_length=MOST_READINGS,
        description="What was read, each with its uncertainty. Results without a reading are predicted.",
        examples=[[{"result": "couple 1", "value": 84.2, "standard_uncertainty": 0.5}]],
    )
    shared_errors: list[SharedError] = Field(
        default_factory=list,
        max_length=MOST_SHARED,
        description="Errors that readings have in common, on top of their own.",
        examples=[[{"results": ["couple 1", "couple 2"], "standard_uncertainty": 0.3}]],
    )
    uncertainties: Literal["given", "relative"] = Field(
        "given",
        description="Whether uncertainties are taken as given, or only as weights: then all are scaled by what the "
        "readings leave over, and intervals are Student's. Not with a map.",
        examples=["given"],
    )
    profile_intervals: bool = Field(
        False,
        description="Whether intervals that follow the sum of squares itself are wanted too. They hold where results "
        "bend so much that plain ones do not, and take several times as many cases.",
        examples=[True],
    )
    starts: int | None = Field(
        None,
        ge=1,
        le=MOST_STARTS,
        description="How many places of the ranges the search begins at, so that other solutions are noticed; the "
        "first is the request as it stands, the others are the most promising of four times as many, which still may "
        "miss a solution. 5 if left out, 2 beside a map. It does not matter where results follow all unknowns in "
        "proportion.",
        examples=[5],
    )
    seed: int = Field(0, ge=0, le=2**31 - 1, description="Which places these are.", examples=[0])

    @model_validator(mode="after")
    def _something_unknown(self) -> Self:
        if not self.unknowns and self.smooth_map is None:
            raise PydanticCustomError("nothing", "Give `unknowns`, a `smooth_map` or both.")
        if self.smooth_map is not None and self.uncertainties == "relative":
            raise PydanticCustomError(
                "relative", "Beside a map uncertainties have to be given: how smooth it is, is told by them."
            )
        return self
