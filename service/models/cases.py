"""Tables of cases: the same results for many values of some numbers."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag

from service.models.base import Model, Quantity
from service.models.limits import AnalysisQuestion, Limits
from service.models.numbers import MOST_NUMBERS, NumberReference

# Bounds of the document itself; the service's settings bound the number of cases further.
MOST_CASES = 1_000_000
LONGEST_TABLE = 2_000_000


class EvenValues(Model):
    """Evenly spaced values, both ends included."""

    from_: Quantity = Field(alias="from", description="First value, in the unit of the number.", examples=[10])
    to: Quantity = Field(description="Last value, in the unit of the number.", examples=[20])
    count: int = Field(ge=2, le=MOST_CASES, description="How many values, at least 2.", examples=[11])


def _kind_of_values(value: Any) -> str:
    """Tag of the union below: words no field is called, so that they can be taken out of error paths."""
    return "list of values" if isinstance(value, list) else "even values"


Values = Annotated[
    Annotated[list[Quantity], Field(min_length=1, max_length=MOST_CASES), Tag("list of values")]
    | Annotated[EvenValues, Tag("even values")],
    Discriminator(_kind_of_values),
]


class ListOfCases(Model):
    """Cases written out one by one."""

    table: Literal["list"] = Field(description="Which kind of table this is.")
    rows: list[Annotated[list[Quantity], Field(min_length=1, max_length=MOST_NUMBERS)]] = Field(
        min_length=1,
        max_length=MOST_CASES,
        description="One row for each case, with a value for each number in their order.",
        examples=[[[850, 40], [900, "42 mm"]]],
    )


class CsvOfCases(Model):
    """Cases as text, as a spreadsheet writes them."""

    table: Literal["csv"] = Field(description="Which kind of table this is.")
    csv: str = Field(
        max_length=LONGEST_TABLE,
        description="The first row holds the names of all numbers in any order; each further row is a case of bare "
        "numbers in their units. Separated by commas, semicolons or tabs; a decimal comma is read when it does not "
        "separate.",
        examples=["film,width\n850,40\n900,42\n"],
    )


class GridOfCases(Model):
    """Every combination of values of the numbers."""

    table: Literal["grid"] = Field(description="Which kind of table this is.")
    values: list[Values] = Field(
        min_length=1,
        max_length=MOST_NUMBERS,
        description="For each number, in their order, a list of values or from, to and count. The last number varies "
        "fastest.",
        examples=[[[800, 850, 900], {"from": 36, "to": 44, "count": 5}]],
    )


class DesignOfCases(Model):
    """Samples that fill the ranges of the numbers: a design of experiments."""

    table: Literal["design"] = Field(description="Which kind of table this is.")
    method: Literal["latin_hypercube", "sobol", "random"] = Field(
        description="How the ranges are filled: `latin_hypercube` has one sample in each of so many equal parts of "
        "each range; `sobol` is a scrambled sequence, most even for a power of two; `random` is even chance.",
        examples=["latin_hypercube"],
    )
    count: int = Field(ge=1, le=MOST_CASES, description="How many cases.", examples=[200])
    low: list[Quantity] = Field(
        min_length=1,
        max_length=MOST_NUMBERS,
        description="Lower end of the range of each number.",
        examples=[[800, 36]],
    )
    high: list[Quantity] = Field(
        min_length=1,
        max_length=MOST_NUMBERS,
        description="Upper end of the range of each number.",
        examples=[[900, 44]],
    )
    seed: int = Field(
        0, ge=0, le=2**32 - 1, description="Decides the samples: the same seed gives the same ones.", examples=[7]
    )


CaseTable = Annotated[
    ListOfCases | CsvOfCases | GridOfCases | DesignOfCases,
    Field(
        discriminator="table",
        description="The cases: a list, a CSV text, every combination of values, or a design of experiments.",
        examples=[{"table": "list", "rows": [[850, 40], [900, "42 mm"]]}],
    ),
]


class CasesQuestion(AnalysisQuestion):
    """The same results for many values of some numbers."""

    numbers: list[NumberReference] = Field(
        min_length=1,
        max_length=MOST_NUMBERS,
        description="The numbers that differ from case to case.",
        examples=[[{"name": "film", "at": "/problem/faces/x_high/coefficient"}]],
    )
    cases: CaseTable
    limits: Limits = Field(
        default_factory=list,
        description="Limits that each case is held against.",
        examples=[[{"result": "probe A", "at_most": 60}]],
    )
