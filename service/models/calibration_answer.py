"""The answer to POST /v1/calibration."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.models.analysis_answer import AnalysisAnswer
from service.models.base import Model


class Interval95(Model):
    """An interval that covers the true value in 95 of 100 such cases."""

    low: float | None = Field(description="Its lower end; null where the search for it did not settle.", examples=[762])
    high: float | None = Field(description="Its upper end, in the same way.", examples=[941])


class SharedShare(Model):
    """What a shared error contributes."""

    results: list[str] = Field(description="The results that share it.", examples=[["couple 1", "couple 2"]])
    part: float = Field(description="Part of the variance.", examples=[0.31])


class UnknownFound(Model):
    """A number as the readings have it."""

    name: str = Field(description="Its name.", examples=["film"])
    unit: str = Field(description="Its unit; 1 for a plain number.", examples=["W/(m^2 K)"])
    value: float = Field(
        description="The value that meets the readings best, to about a ten-thousandth of its standard uncertainty.",
        examples=[846.3],
    )
    unit_of_uncertainty: str = Field(description="Unit of its differences.", examples=["W/(m^2 K)"])
    standard_uncertainty: float | None = Field(
        description="Its standard uncertainty, in `unit_of_uncertainty`, from the derivatives of the results at the "
        "solution; null where the readings do not tell the number.",
        examples=[45.1],
    )
    interval: Interval95 = Field(
        description="95 % interval from the standard uncertainty, by factors for a number looked for in its logarithm, "
        "cut off at the range."
    )
    profile_interval: Interval95 | None = Field(
        None,
        description="95 % interval that follows the sum of squares itself, to about a hundredth of its width; null "
        "where it was not asked for or the number is not told. An end of the range means that the readings do not "
        "bound the number within it.",
    )
    is_told: bool = Field(
        description="Whether the readings, with what was known before, tell more of it than its range.", examples=[True]
    )
    at_end: Literal["low", "high"] | None = Field(
        description="The end of its range on which it lies; null inside.", examples=[None]
    )
    departure_from_linear: float | None = Field(
        description="By what part the sum of squares, as a root, differs at the ends of the interval from what "
        "derivatives foresee; beyond about 0.15 the plain interval does not hold. null where all results follow in "
        "proportion, or have no value there.",
        examples=[0.02],
    )
    known_before_part: float | None = Field(
        description="Part of its variance that does not come from readings but from what was known before, or from the "
        "smoothness of a map; null where the number is not told.",
        examples=[0.12],
    )
    shares: list[float | None] = Field(
        description="Part of its variance that comes from each reading's own error, in the order given: the readings "
        "that matter are those with large parts.",
        examples=[[0.41, 0.2, 0.1, 0.1, 0.07]],
    )
    shared_shares: list[SharedShare] = Field(description="What shared errors contribute, in the order given.")


class PlaceOfCombination(Model):
    """Other values of numbers that are hardly told apart, with which the readings are met about as well."""

    values: list[float] = Field(description="The numbers, in the order of `numbers`.", examples=[[120.0, 9.0]])
    combination: float | None = Field(
        description="What the combination is there; null where it has no value, as a product with a number of zero.",
        examples=[13.3],
    )
    holds: bool = Field(
        description="Whether that is still within 2.5 standard uncertainties of its value.", examples=[True]
    )


class KnownTogether(Model):
    """Numbers that readings tell hardly or not at all from each other, and the combination that they do tell."""

    numbers: list[str] = Field(description="Their names.", examples=[["film", "conductivity"]])
    form: Literal["product", "sum", "reciprocals"] = Field(
        description="Whether the combination is a product of powers, a sum of multiples, or a sum of multiples of "
        "`reciprocals`, as of resistances in series: that which holds farthest.",
        examples=["product"],
    )
    factors: list[float] = Field(
        description="The powers, or the multiples, in the order of `numbers`; the first is 1.", examples=[[1, -1]]
    )
    expression: str = Field(description="The combination in words.", examples=["film / conductivity"])
    value: float = Field(
        description="Its value, from the numbers in their units as `unknowns` has them.", examples=[1.7778]
    )
    standard_uncertainty: float | None = Field(description="What it is known to.", examples=[0.037])
    are_told: bool = Field(
        description="Whether the numbers are told by themselves as well, if not as well as the combination.",
        examples=[False],
    )
    holds: Literal["throughout", "near", "not_followed"] = Field(
        description="How far the combination holds: `throughout`, at all `places`; only `near` the values found, "
        "beyond which the readings are met by values with another combination; or `not_followed`: beside a map, with "
        "more than 12 unknowns, or where no other place with results was found.",
        examples=["throughout"],
    )
    near: list[float] = Field(description="The numbers as found, in the order of `numbers`.", examples=[[80.0, 6.0]])
    places: list[PlaceOfCombination] = Field(
        description="Other values with which the readings are met about as well. One number, or two where that many go "
        "free, is led from the value found to both ends of its range, or of its interval where it is told, and the "
        "others are fitted anew; a line ends where that leaves the ranges.",
    )


class MapFound(Model):
    """A map as the readings have it. Tables have a row for each place on the first axis, as the map itself."""

    name: str = Field(description="Its name.", examples=["heat load"])
    unit: str = Field(description="Unit of its entries.", examples=["W/m^2"])
    unit_of_uncertainty: str = Field(description="Unit of their differences.", examples=["W/m^2"])
    axes: dict[str, list[float]] = Field(
        description="Places of its entries along its two axes; unit `length`.", examples=[{"x": [0, 20], "y": [0, 30]}]
    )
    table: list[list[float]] = Field(
        description="The entries: the mean of all smooth maps, each as likely as the readings make it. It can be put "
        "into the request as it is.",
        examples=[[[21000, 30500], [18000, 22100]]],
    )
    standard_uncertainties: list[list[float]] = Field(
        description="Their standard uncertainties, given that the map is smooth: beside a step, which is smoothed as "
        "all else, entries are further off, so a load with an edge is better given as patches with unknown inflows.",
        examples=[[[900, 700], [900, 2100]]],
    )
    low: list[list[float]] = Field(
        description="Lower ends of their 95 % intervals.", examples=[[[19240, 29130], [16240, 17980]]]
    )
    high: list[list[float]] = Field(
        description="Upper ends of their 95 % intervals.", examples=[[[22760, 31870], [19760, 26220]]]
    )
    resolved_lengths: list[list[float | None]] = Field(
        description="The length over which the map is smoothed at each entry: what is smaller than it is not seen. "
        "Unit `length`; null where nothing is seen.",
        examples=[[[14.6, 14.2], [15.1, 31.0]]],
    )
    open: list[list[bool]] = Field(
        description="true where readings do not determine the entry: it is far from any, so that it only goes on "
        "smoothly from what was seen, or it is known to no better than 0.29 of the typical size.",
        examples=[[[False, False], [False, True]]],
    )
    open_count: int = Field(description="How many entries that are.", examples=[1])
    departure: float = Field(
        description="Root mean square by which such maps depart from a plane: the mean over what the readings allow, "
        "or as given.",
        examples=[5300],
    )
    told_numbers: float = Field(
        description="How many independent numbers the readings tell about the map (degrees of freedom for signal).",
        examples=[11.4],
    )
    not_told_from: list[str] = Field(
        description="Names of unknowns that readings do not tell from the map: the map stands for the values these "
        "have.",
        examples=[[]],
    )


class ReadingFound(Model):
    """A reading beside what the solution makes of it."""

    result: str = Field(description="The name of the result.", examples=["couple 1"])
    unit: str = Field(description="Its unit.", examples=["degC"])
    value: float = Field(description="What was read.", examples=[84.2])
    unit_of_uncertainty: str = Field(description="Unit of differences.", examples=["K"])
    standard_uncertainty: float = Field(
        description="Its own standard uncertainty as given, in `unit_of_uncertainty`.", examples=[0.5]
    )
    computed: float = Field(description="The result at the solution.", examples=[84.05])
    error_bound: float | None = Field(description="It is not further off; null without a bound.", examples=[6e-8])
    left_over: float = Field(description="The reading less the result.", examples=[0.15])
    normalised: float | None = Field(
        description="What is left over in parts of its standard uncertainty, which the fit has made smaller than that "
        "of the reading. null where the fit follows the reading whatever it says.",
        examples=[0.41],
    )
    leverage: float = Field(
        description="Part of the reading's variance that the fit takes up: near 1 where the solution hangs on this "
        "reading and nothing else would show if it were wrong.",
        examples=[0.46],
    )
    is_outlier: bool = Field(
        description="Whether so large a misfit would show in fewer than one of twenty sets of so many readings.",
        examples=[False],
    )


class ResultPredicted(Model):
    """A result at the solution."""

    name: str = Field(description="Its name.", examples=["heat into the shell"])
    unit: str = Field(description="Its unit.", examples=["W"])
    value: float = Field(description="Its value.", examples=[512.3])
    error_bound: float | None = Field(
        description="The value is no further off the result with just these unknowns; null without a bound.",
        examples=[3e-6],
    )
    unit_of_uncertainty: str = Field(description="Unit of its differences.", examples=["W"])
    standard_uncertainty: float | None = Field(
        description="What the uncertainty of the unknowns makes of it, to first order, correlations included; null "
        "where it follows what is not known.",
        examples=[14.2],
    )


class Consistency(Model):
    """Whether the readings agree with the body within their uncertainties."""

    verdict: Literal["consistent", "contradiction", "too_close", "untested"] = Field(
        description="`contradiction`: readings differ by more than their uncertainties let them, one time in twenty; "
        "`too_close`: by so little that the uncertainties look too large; `untested`: there are no more readings than "
        "they determine, or uncertainties were scaled.",
        examples=["consistent"],
    )
    sentence: str = Field(
        description="The same in words.",
        examples=["The readings agree with the body: chi-squared is 2.9 with 3 degrees of freedom."],
    )
    chi_squared: float = Field(
        description="Sum of squares of what is left over, in standard uncertainties.", examples=[2.9]
    )
    degrees_of_freedom: float = Field(
        description="Readings, and values known before, less what they determine; no integer with a map.", examples=[3]
    )
    probability: float | None = Field(
        description="That chance makes it so large or larger; null where nothing is tested.", examples=[0.41]
    )
    scaled_by: float = Field(
        description="What the given uncertainties were multiplied by; 1 where they are taken as given.", examples=[1]
    )


class OtherSolution(Model):
    """Other values of the unknowns with which the readings are met about as well."""

    values: list[float] = Field(description="The unknowns, in the order asked.", examples=[[212.0, 12.1]])
    chi_squared: float = Field(description="The sum of squares there.", examples=[3.4])


class CalibrationFound(Model):
    """What the readings say."""

    unknowns: list[UnknownFound] = Field(description="The numbers, in the order asked.")
    correlation: list[list[float | None]] = Field(
        description="Correlation coefficients of the numbers; null with one that is not told.",
        examples=[[[1, -0.62], [-0.62, 1]]],
    )
    known_together: list[KnownTogether] = Field(
        description="Groups of numbers that are hardly told from each other (correlations beyond about 0.99)."
    )
    smooth_map: MapFound | None = Field(None, description="The map, where one was asked for.")
    readings: list[ReadingFound] = Field(description="The readings, in the order given.")
    results: list[ResultPredicted] = Field(description="All results at the solution, in the order asked.")
    consistency: Consistency = Field(description="Whether the readings agree with the body.")
    coverage_factor: float = Field(
        description="Half the width of an interval in standard uncertainties: 1.96 where these are given, Student's "
        "where they are scaled.",
        examples=[1.959963984540054],
    )
    other_solutions: list[OtherSolution] = Field(
        description="Other solutions the readings do not rule out, within 95 % of the best."
    )
    minima_count: int = Field(description="How many different solutions the starts led to.", examples=[1])
    linear: bool = Field(
        description="Whether all readings follow the unknowns in proportion, as far as their uncertainties tell: the "
        "solution is then the only one.",
        examples=[False],
    )
    settled: bool = Field(description="Whether the search came to its end.", examples=[True])
    case_count: int = Field(description="How many cases were computed.", examples=[212])


class CalibrationAnswer(AnalysisAnswer):
    """What readings say about what is not known."""

    calibration: CalibrationFound = Field(description="What the readings say.")
