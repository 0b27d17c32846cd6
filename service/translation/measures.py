"""What the number at a path of a request measures, and how it is read."""

from __future__ import annotations

from service.number_range import RANGE_IN_WORDS, is_readable
from service.refusals import Path
from service.translation.collector import UNREAD, Collector
from service.translation.result_units import NO_UNIT, Measure
from service.unit_text import UnitError, inverse_of
from service.units import PHYSICS, Kind, UnitSystem


def read_measured(collector: Collector, measure: Measure, value: float | str, path: Path) -> float:
    """A quantity as a number in the unit of a measure; UNREAD, and noted, if it is none."""
    try:
        number = measure.read(value)
    except UnitError as error:
        collector.add(path, str(error), "unit")
        return UNREAD
    if not is_readable(number):
        collector.add(path, f"The number has to be {RANGE_IN_WORDS}.", "number-range")
        return UNREAD
    return number


def measure_of_kind(kind: Kind, units: UnitSystem) -> Measure:
    """That of a quantity with a declared unit."""
    unit = units.declared[kind]
    is_level = kind is Kind.POTENTIAL
    difference = units.declared[Kind.POTENTIAL_DIFFERENCE] if is_level else unit
    return Measure(unit, difference, PHYSICS[units.potential].names[kind], is_level)


def plain_measure(unit: str = NO_UNIT, meaning: str = "a plain number") -> Measure:
    """That of a plain number, or of a unit that is composed of declared ones."""
    return Measure(unit, unit, meaning)


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
# Parts of a problem that hold numbers.
_PHYSICAL = {"body", "faces", "sources"}
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
    if keys[0] == "problem" and (len(keys) < 2 or keys[1] not in _PHYSICAL):
        return None
    if last in _COORDINATES:
        return measure_of_kind(Kind.CONDUCTIVITY if "conductivity" in keys else Kind.LENGTH, units)
    if last in _PLAIN_KEYS:
        return plain_measure()
    if last == "per_degree":
        return plain_measure(inverse_of(units.declared[Kind.POTENTIAL_DIFFERENCE]), "a relative change")
    if last == "contact_resistance_below":
        return plain_measure(inverse_of(units.declared[Kind.FILM_COEFFICIENT]), "a resistance times area")
    if keys[:2] == ["problem", "faces"] and last in _DATA and len(keys) > 3 and keys[3] == "inflow":
        return measure_of_kind(Kind.FLUX, units)
    if keys[:2] == ["problem", "faces"] and last in _DATA:
        return measure_of_kind(Kind.POTENTIAL, units)
    return measure_of_kind(_KINDS[last], units) if last in _KINDS else None
