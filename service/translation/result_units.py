"""What numbers measure, and the units results are told in, those of differences and ratios of results among them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

from service.unit_text import Target, UnitError, convert, in_brackets
from service.units import PHYSICS, Kind, UnitSystem

# The unit of a ratio of two results of one unit.
NO_UNIT = "1"


@dataclass(frozen=True)
class Measure:
    """What a number measures.

    unit: the text it is told in. difference_unit: of differences of two such numbers and of error bounds. meaning: the
    quantity with its article, such as "a heat flow". is_level: whether it counts from the zero of a scale.
    """

    unit: str
    difference_unit: str
    meaning: str
    is_level: bool = False

    def read(self, value: float | str) -> float:
        """A number in the unit as it is, or a text with its own unit as such a number. Raises UnitError."""
        if not isinstance(value, str):
            return value
        if self.unit == NO_UNIT:
            raise UnitError("This number has no unit; write a bare number.")
        return convert(value, Target(self.unit, self.meaning, self.is_level))

    @cached_property
    def step(self) -> Measure:
        """What differences of such numbers measure."""
        meaning = f"a difference of {_bare(self.meaning)}" if self.is_level else self.meaning
        return Measure(self.difference_unit, self.difference_unit, meaning)

    def less(self, other: Measure) -> Measure:
        """What a difference measures. Raises UnitError where there is no such difference."""
        if other == self:
            return self.step
        if other == self.step:
            return self
        raise UnitError(f"{_capital(other.meaning)} in {other.unit} cannot be taken off {self.meaning} in {self.unit}.")

    def over(self, other: Measure) -> Measure:
        """What a ratio measures. Of levels it means something only if they have a zero of their own."""
        if self.unit == other.unit:
            return Measure(NO_UNIT, NO_UNIT, "a ratio")
        # V/A over A is (V/A)/A: of several strokes nobody knows which one divides.
        of = in_brackets(self.unit) if "/" in self.unit else self.unit
        unit = self.unit if other.unit == NO_UNIT else f"{of}/{in_brackets(other.unit)}"
        return Measure(unit, unit, f"{self.meaning} over {other.meaning}")

    @property
    def has_own_zero(self) -> bool:
        """Whether twice the number means twice as much, which it does not for 20 degC."""
        return not (self.is_level and self.unit != self.difference_unit)


def measures_of(units: UnitSystem) -> Mapping[str, Measure]:
    """What results that are not made of others measure, by the word each is asked for with."""
    names, declared = PHYSICS[units.potential].names, units.declared
    difference, length = declared[Kind.POTENTIAL_DIFFERENCE], declared[Kind.LENGTH]
    level = Measure(declared[Kind.POTENTIAL], difference, names[Kind.POTENTIAL], is_level=True)
    slope = f"{difference}/{in_brackets(length)}"
    flow = Measure(declared[Kind.FLOW], declared[Kind.FLOW], names[Kind.FLOW])
    return dict.fromkeys(("potential", "mean", "highest", "lowest"), level) | {
        "gradient": Measure(slope, slope, f"a gradient of {_bare(level.meaning)}"),
        "flux": Measure(declared[Kind.FLUX], declared[Kind.FLUX], names[Kind.FLUX]),
        "inflow": flow,
        "flow": flow,
        "reach": Measure(length, length, names[Kind.LENGTH]),
    }


def _bare(meaning: str) -> str:
    """A quantity without its article."""
    return meaning.split(" ", 1)[1]


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
