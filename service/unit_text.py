"""Text such as "25 mm" to an exact number of another unit, or a sentence that says why not.

Only names and numbers that pass a narrow pattern reach the library of units, since it would evaluate
arithmetic ("2**3**4**5 m") and guess at commas. Conversions are exact rational arithmetic rounded once. Names
mean what that library says: Btu is 1055.056 J.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

import pint

from service.number_range import LARGEST_NUMBER, RANGE_IN_WORDS, SMALLEST_NUMBER

LONGEST_TEXT = 64
# A unit such as Btu/(hr ft^2 degF) has four names; six leave room and keep the parser's work small.
MOST_NAMES = 6

# Exponents of at most three digits: exact arithmetic would build a power of ten as long as it is asked to.
_NUMBER = r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?"
# Possessive, so that a long word before an unreadable sign is scanned once and not in all its parts.
_NAME = r"[A-Za-z_°µΩ]++(?:\^-?[1-4])?+"
_QUANTITY = re.compile(rf"\s*({_NUMBER})\s*(.*?)\s*", re.DOTALL | re.ASCII)
_UNIT = re.compile(rf"(?:{_NAME}|[ */()]|1(?= ?/))+")
_NAMES = re.compile(_NAME)

# What people type, or copy from a data sheet, and the form the patterns know.
_TYPED_FORMS = str.maketrans({"²": "^2", "³": "^3", "μ": "µ", "·": " ", "\u00a0": " ", "\u202f": " "})
_OFFSET_UNITS = ("degC", "degF")

# Exact arithmetic: with the library's floats 25 um comes out as 2.4999999999999998e-05 m.
_REGISTRY: pint.UnitRegistry[Fraction] = pint.UnitRegistry(non_int_type=Fraction)


_ZERO = Fraction(0)


class UnitError(ValueError):
    """A text that is no quantity, or one of another dimension. The message is a sentence for the client."""


@dataclass(frozen=True)
class Target:
    """The unit a quantity is converted to. meaning: the quantity with its article, such as "a heat flux"."""

    unit: str
    meaning: str
    is_level: bool


@lru_cache(maxsize=8192)
def convert(text: str, target: Target) -> float:
    """The quantity in units of the target. Raises UnitError when it is none or measures something else."""
    number, unit = _split(text)
    if unit == target.unit:
        exact = number
    elif target.is_level:
        exact = _convert_level(number, unit, target)
    else:
        factor = factor_between(unit, target.unit)
        if factor is None:
            raise _refusal(unit, target, number)
        exact = number * factor
    if exact and not SMALLEST_NUMBER <= abs(exact) <= LARGEST_NUMBER:
        raise UnitError(f"The quantity in {target.unit} has to be {RANGE_IN_WORDS}.")
    return float(exact)


@lru_cache(maxsize=4096)
def factor_between(unit_text: str, target_unit: str) -> Fraction | None:
    """How many target units one unit is, as differences; None if unknown or of another dimension."""
    unit, target = _parse(_as_difference(unit_text)), _parse(_as_difference(target_unit))
    if unit is None or target is None or unit.dimensionality != target.dimensionality:
        return None
    return Fraction(_REGISTRY.Quantity(Fraction(1), unit).to(target).magnitude)


def inverse_of(unit: str) -> str:
    """One over a readable unit, in plain words where there are some: W/K for K/W, S for ohm, 1/kohm for kohm."""
    if unit == "ohm":
        return "S"
    if unit.count("/") == 1:
        dividend, divisor = (part.strip() for part in unit.split("/"))
        turned = f"{_without_brackets(divisor)}/{in_brackets(_without_brackets(dividend))}"
        if dividend != "1" and factor_between(turned, f"1/({unit})") == 1:
            return turned
    return f"1/{in_brackets(unit)}"


def _without_brackets(unit: str) -> str:
    is_bracketed = unit.startswith("(") and unit.endswith(")") and unit.count("(") == 1
    return unit[1:-1] if is_bracketed else unit


def in_brackets(unit: str) -> str:
    """A unit as it can stand after a stroke."""
    return f"({unit})" if any(sign in unit for sign in "/* ") else unit


def check_declared(unit: str, target: Target) -> None:
    """Raise UnitError unless quantities of the target's kind can be declared to be in this unit."""
    _check_unit_text(unit)
    if target.is_level:
        _convert_level(Fraction(1), unit, target)
    elif factor_between(unit, target.unit) is None:
        raise _refusal(unit, target)


def is_same_kind(unit: str, other: str) -> bool:
    """Whether a text is a readable unit of the same dimension as another."""
    try:
        _check_unit_text(unit)
    except UnitError:
        return False
    return factor_between(unit, other) is not None


def _split(text: str) -> tuple[Fraction, str]:
    """Number and unit text of "25 mm"."""
    if len(text) > LONGEST_TEXT:
        raise UnitError(f"The text is longer than {LONGEST_TEXT} characters; write a number and a unit.")
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise UnitError('The text does not begin with a number; write for example "25 mm".')
    number, unit = match.groups()
    if not unit:
        raise UnitError("The text has no unit; add one, or write a bare number for the declared unit.")
    if unit[0] in ",.'_":
        raise UnitError("The number is not readable; write decimals with a point and leave thousands unmarked.")
    _check_unit_text(unit)
    return Fraction(number), unit


def _check_unit_text(unit: str) -> None:
    typed = unit.translate(_TYPED_FORMS)
    if len(unit) > LONGEST_TEXT or _UNIT.fullmatch(typed) is None:
        raise UnitError(
            "The unit is not readable; write names with powers from ^-4 to ^4, joined by spaces, *, / and "
            "brackets, for example W/(m^2 K)."
        )
    if len(_NAMES.findall(typed)) > MOST_NAMES:
        raise UnitError(f"The unit has more than {MOST_NAMES} names.")


@lru_cache(maxsize=4096)
def _parse(text: str) -> pint.Unit | None:
    """The library's unit for a text that passed the patterns, or None if it knows no such name."""
    # A space multiplies, which the library would take as the end of a name or refuse.
    text = re.sub(r"(?<=[A-Za-z_°µΩ)1-4])\s+(?=[A-Za-z_°µΩ(])", "*", text.translate(_TYPED_FORMS).strip())
    try:
        return _REGISTRY.parse_units(text)
    except Exception:
        # The library raises its own and several built-in errors for names and brackets it cannot read.
        return None


def _in_letters(unit: str) -> str:
    return unit.replace("°", "deg")


def _as_difference(unit: str) -> str:
    """degC and degF without their offset: what they mean everywhere but in a level."""
    return re.sub(r"(?<![A-Za-z_])(degC|degF)(?![A-Za-z_])", r"delta_\1", _in_letters(unit))


def _convert_level(number: Fraction, unit_text: str, target: Target) -> Fraction:
    """A potential that may count from an offset: 68 degF = 20 degC."""
    named = _in_letters(unit_text)
    if "delta_" in named:
        raise UnitError(
            f'The unit "{unit_text}" measures a difference; wanted is {target.meaning} such as {target.unit}.'
        )
    unit, wanted = _parse(named), _parse(_in_letters(target.unit))
    has_offset_inside = named not in _OFFSET_UNITS and any(name in named for name in _OFFSET_UNITS)
    if unit is None or wanted is None or has_offset_inside or unit.dimensionality != wanted.dimensionality:
        raise _refusal(unit_text, target)
    return Fraction(_REGISTRY.Quantity(number, unit).to(wanted).magnitude)


def _refusal(unit: str, target: Target, number: Fraction = _ZERO) -> UnitError:
    """Why a unit is none of the target's kind. number: how many of it there are, 0 if that is not known."""
    wanted = f"wanted is {target.meaning} such as {target.unit}"
    if _parse(_as_difference(unit)) is None:
        return UnitError(f'The unit "{unit}" is not known; {wanted}.')
    what = target.meaning.split(" ", 1)[1]
    inverse = factor_between(f"1/({unit})", target.unit)
    if inverse is not None and SMALLEST_NUMBER <= abs(number) <= LARGEST_NUMBER:
        proper = f"{float(inverse / number):.12g} {target.unit}"
        return UnitError(f'The unit "{unit}" measures one over {target.meaning}; write {proper} instead.')
    return UnitError(f'The unit "{unit}" does not measure {what}; {wanted}.{_bracket_hint(unit, target)}')


def _bracket_hint(unit: str, target: Target) -> str:
    """A word on W/m K and W/mK: the first multiplies by K, the second divides by a millikelvin."""
    if unit.count("/") != 1 or "(" in unit:
        return ""
    divided, divisor = (part.strip() for part in unit.split("/"))
    for bracketed in (f"{divided}/({divisor})", f"{divided}/({divisor[:-1]} {divisor[-1:]})"):
        if factor_between(bracketed, target.unit) is not None:
            return f" Write {bracketed} if everything after the stroke divides."
    return ""
