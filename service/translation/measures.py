"""What a number of a request or a result measures, and in which unit it is read."""

from __future__ import annotations

from dataclasses import dataclass

from service.number_range import RANGE_IN_WORDS, is_readable
from service.refusals import Path
from service.translation.collector import UNREAD, Collector
from service.unit_text import Target, UnitError, convert, inverse_of
from service.units import Kind, UnitSystem

# The unit of plain numbers.
PLAIN = "1"


@dataclass(frozen=True)
class Measure:
    """How one kind of number is read.

    unit: of the number. difference_unit: of its differences, tolerances and error bounds among them; another one for
    levels of temperature. kind: what it measures; None for a plain number and for units composed of declared ones.
    """

    unit: str
    difference_unit: str
    kind: Kind | None = None

    @property
    def step(self) -> Measure:
        """That of differences of such numbers."""
        kind = Kind.POTENTIAL_DIFFERENCE if self.kind is Kind.POTENTIAL else self.kind
        return Measure(self.difference_unit, self.difference_unit, kind)

    def read(self, collector: Collector, value: float | str, path: Path) -> float:
        """A quantity as a number in `unit`; UNREAD, and noted, if it is none."""
        try:
            number = self._number(collector.units, value)
        except UnitError as error:
            collector.add(path, str(error), "unit")
            return UNREAD
        if not is_readable(number):
            collector.add(path, f"The number has to be {RANGE_IN_WORDS}.", "number-range")
            return UNREAD
        return number

    def _number(self, units: UnitSystem, value: float | str) -> float:
        if not isinstance(value, str):
            return value
        if self.kind is not None:
            return units.in_declared(self.kind, value)
        if self.unit == PLAIN:
            raise UnitError("The number has no unit; write it without quotation marks.")
        return convert(value, Target(self.unit, f"a quantity in {self.unit}", is_level=False))


def measure_of_kind(kind: Kind, units: UnitSystem) -> Measure:
    """That of a quantity with a declared unit."""
    unit = units.declared[kind]
    return Measure(unit, units.declared[Kind.POTENTIAL_DIFFERENCE] if kind is Kind.POTENTIAL else unit, kind)


def plain_measure(unit: str = PLAIN) -> Measure:
    """That of a plain number, or of a unit that is composed of declared ones."""
    return Measure(unit, unit)


# What stands at the end of a path, where the key alone tells.
_KINDS = {
    "thickness": Kind.LENGTH,
    "edge_gap": Kind.LENGTH,
    "at": Kind.LENGTH,
    "conductivity": Kind.CONDUCTIVITY,
    "in_plane": Kind.CONDUCTIVITY,
    "through": Kind.CONDUCTIVITY,
    "contact_conductance_below": Kind.FILM_COEFFICIENT,
    "coefficient": Kind.FILM_COEFFICIENT,
    "generation": Kind.DENSITY,
    "density": Kind.DENSITY,
    "far_level": Kind.POTENTIAL,
    "reference": Kind.POTENTIAL,
    "potential": Kind.POTENTIAL,
    "ambient": Kind.POTENTIAL,
    "flow": Kind.FLOW,
    "inflow": Kind.FLUX,
    "value": Kind.POTENTIAL,
}
_PLAIN_KEYS = {"emissivity", "fraction", "factor"}
_COORDINATES = {"x", "y", "z"}
# Data of a map, which measure what the face's datum does.
_DATA = {"background", "table", "value"}


def is_coordinate(path: Path) -> bool:
    """Whether the last key of a path is an axis along which lengths are counted."""
    keys = [part for part in path if isinstance(part, str)]
    return bool(keys) and keys[-1] in _COORDINATES and "conductivity" not in keys


def measure_at(path: Path, units: UnitSystem) -> Measure | None:
    """What the number at a path of a request measures, None where there is no number that can be varied.

    path: from the top of the request, beginning with "problem" or "results".
    """
    keys = [part for part in path if isinstance(part, str)]
    last = keys[-1]
    if last in _COORDINATES:
        return measure_of_kind(Kind.CONDUCTIVITY if "conductivity" in keys else Kind.LENGTH, units)
    if last in _PLAIN_KEYS:
        return plain_measure()
    if last == "per_degree":
        return plain_measure(inverse_of(units.declared[Kind.POTENTIAL_DIFFERENCE]))
    if last == "contact_resistance_below":
        return plain_measure(inverse_of(units.declared[Kind.FILM_COEFFICIENT]))
    if keys[:2] == ["problem", "faces"] and last in _DATA and len(keys) > 3 and keys[3] == "inflow":
        return measure_of_kind(Kind.FLUX, units)
    if keys[:2] == ["problem", "faces"] and last in _DATA:
        return measure_of_kind(Kind.POTENTIAL, units)
    return measure_of_kind(_KINDS[last], units) if last in _KINDS else None
