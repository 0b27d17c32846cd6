"""Reading the fields of a request one by one, so that one answer names all that are wrong."""

from __future__ import annotations

import math

from service.core.errors import CoreError
from service.models.face_maps import Interval
from service.refusals import Issue, Path, RequestRefused
from service.translation.extent import AxisExtent
from service.unit_text import UnitError
from service.units import Kind, UnitSystem

# What stands for a number that could not be read; the request is refused before anyone works with it.
UNREAD = math.nan


class Collector:
    """Reads fields in the units of a problem and keeps a sentence for each that cannot be used.

    prefix: path of the problem in the request, empty when the body is the problem itself.
    """

    def __init__(self, units: UnitSystem, prefix: Path = ()) -> None:
        self.units = units
        self.prefix = prefix
        self.issues: list[Issue] = []

    def add(self, path: Path, detail: str, code: str) -> None:
        """Note what is wrong with the field at a path below the prefix."""
        self.issues.append(Issue(self.prefix + path, detail, code))

    def add_core_error(self, path: Path, error: CoreError) -> None:
        """Note what the solver says about a part that lies at a path below the prefix."""
        self.add(path + error.field, error.message, "not-physical")

    def read(self, kind: Kind, value: float | str, path: Path) -> float:
        """The number in the solver's units, UNREAD if there is none."""
        try:
            number = self.units.read(kind, value)
        except UnitError as error:
            self.add(path, str(error), "unit")
            return UNREAD
        if kind is Kind.POTENTIAL and self.units.is_too_low(number):
            self.add(path, self.too_low(f"The temperature is {self.units.show(kind, value)}"), "absolute-zero")
            return UNREAD
        return number

    def too_low(self, what: str) -> str:
        """What is said of a temperature below absolute zero; `what` begins the sentence."""
        zero = f"{self.units.lowest_level:g} {self.units.declared[Kind.POTENTIAL]}"
        return f"{what}; there is none below absolute zero, {zero}."

    def read_positive(self, kind: Kind, value: float | str, path: Path, what: str) -> float:
        """As `read`, for a quantity that has to be greater than zero; `what` begins the sentence."""
        number = self.read(kind, value, path)
        if number <= 0:
            shown = self.units.show(kind, value)
            self.add(path, f"{what} is {shown}; it has to be greater than zero.", "not-positive")
            return UNREAD
        return number

    def read_resistance_of_area(self, value: float | str, path: Path, what: str) -> float:
        """The conductance per area of a resistance times area, which must not be negative; infinite for zero."""
        try:
            number = self.units.read_resistance_of_area(value)
        except UnitError as error:
            self.add(path, str(error), "unit")
            return UNREAD
        if number < 0:
            shown = value.strip() if isinstance(value, str) else f"{value:g}"
            self.add(path, f"{what} is {shown}; it must not be negative.", "negative")
            return UNREAD
        return number

    def read_interval(self, interval: Interval, extent: AxisExtent, path: Path) -> tuple[float, float]:
        """From and to along an axis of the body; "begin" and "end" are its sides."""
        first, second = interval
        low = extent.low if first == "begin" else self.read_place(first, extent, (*path, 0))
        high = extent.high if second == "end" else self.read_place(second, extent, (*path, 1))
        return low, high

    def read_place(self, value: float | str, extent: AxisExtent, path: Path) -> float:
        """A coordinate along an axis of the body, UNREAD if there is none."""
        return extent.settle(self.read(Kind.LENGTH, value, path))

    def raise_if_any(self) -> None:
        """Refuse the request if a field could not be used."""
        if self.issues:
            raise RequestRefused(tuple(self.issues))
