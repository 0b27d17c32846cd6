"""Units of the four potentials: bare numbers in declared units and texts with their own to the solver and
back.

The solver wants one consistent set: lengths in the declared length unit, the potential in the declared
potential unit, flows in W, A, mol/s (or kg/s) or m^3/s, and everything else in what these imply. So a bare
length or level reaches the solver digit for digit.

What a temperature means belongs to the field, not to the text: a level may carry an offset (30 degC = 303.15
K), a difference and anything per kelvin never does.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.unit_text import Target, UnitError, check_declared, convert, factor_between, inverse_of, is_same_kind


class Kind(StrEnum):
    """What a number in a request measures."""

    LENGTH = "length"
    POTENTIAL = "potential"
    POTENTIAL_DIFFERENCE = "potential_difference"
    CONDUCTIVITY = "conductivity"
    FILM_COEFFICIENT = "film_coefficient"
    FLUX = "flux"
    DENSITY = "density"
    FLOW = "flow"
    RESISTANCE = "resistance"


@dataclass(frozen=True)
class Physics:
    """One potential: what its quantities are called and the units they have unless declared otherwise."""

    names: Mapping[Kind, str]
    defaults: Mapping[Kind, str]


def _names(
    potential: str, conductivity: str, film: str, flux: str, density: str, flow: str, resistance: str
) -> dict[Kind, str]:
    return {
        Kind.LENGTH: "a length",
        Kind.POTENTIAL: potential,
        Kind.POTENTIAL_DIFFERENCE: f"a difference of {potential.split(' ', 1)[1]}",
        Kind.CONDUCTIVITY: conductivity,
        Kind.FILM_COEFFICIENT: film,
        Kind.FLUX: flux,
        Kind.DENSITY: density,
        Kind.FLOW: flow,
        Kind.RESISTANCE: resistance,
    }


def _units(
    potential: str, conductivity: str, film: str, flux: str, density: str, flow: str, resistance: str
) -> dict[Kind, str]:
    return {
        Kind.LENGTH: "m",
        Kind.POTENTIAL: potential,
        Kind.CONDUCTIVITY: conductivity,
        Kind.FILM_COEFFICIENT: film,
        Kind.FLUX: flux,
        Kind.DENSITY: density,
        Kind.FLOW: flow,
        Kind.RESISTANCE: resistance,
    }


PHYSICS: dict[str, Physics] = {
    "temperature": Physics(
        _names(
            "a temperature",
            "a thermal conductivity",
            "a film coefficient",
            "a heat flux",
            "a heat generation per volume",
            "a heat flow",
            "a thermal resistance",
        ),
        _units("degC", "W/(m K)", "W/(m^2 K)", "W/m^2", "W/m^3", "W", "K/W"),
    ),
    "electric_potential": Physics(
        _names(
            "a voltage",
            "an electrical conductivity",
            "a contact conductance per area",
            "a current density",
            "a current source per volume",
            "a current",
            "a resistance",
        ),
        _units("V", "S/m", "S/m^2", "A/m^2", "A/m^3", "A", "ohm"),
    ),
    "concentration": Physics(
        _names(
            "a concentration",
            "a diffusivity",
            "a film velocity",
            "a diffusive flux",
            "a generation rate per volume",
            "a rate of transport",
            "a resistance to transport",
        ),
        _units("mol/m^3", "m^2/s", "m/s", "mol/(m^2 s)", "mol/(m^3 s)", "mol/s", "s/m^3"),
    ),
    "hydraulic_head": Physics(
        _names(
            "a hydraulic head",
            "a hydraulic conductivity",
            "a leakance",
            "a seepage velocity",
            "a recharge per volume",
            "a discharge",
            "a resistance to seepage",
        ),
        _units("m", "m/s", "1/s", "m/s", "1/s", "m^3/s", "s/m^2"),
    ),
}

# A concentration may count mass instead of amount; its flows then do too.
_MASS_CONCENTRATION = _units("kg/m^3", "m^2/s", "m/s", "kg/(m^2 s)", "kg/(m^3 s)", "kg/s", "s/m^3")


@dataclass(frozen=True)
class UnitSystem:
    """The declared units of one problem. Build it with `declare`.

    potential: which of the four potentials. declared: unit text for each kind, the client's own words.
    """

    potential: str
    declared: Mapping[Kind, str]

    def read(self, kind: Kind, value: float | str) -> float:
        """A number in the declared unit, or a text with its own, as a number of the solver's consistent set.

        Raises UnitError when the text is no quantity or measures something else.
        """
        if isinstance(value, str):
            value = convert(value, self._targets[kind])
        return value if kind in _CARRIED_OVER else value * self._to_solver[kind]

    def read_resistance_of_area(self, value: float | str) -> float:
        """The film coefficient or contact conductance, in the solver's units, of a resistance times area.

        A bare number is in one over the declared unit of film coefficients; 0 reads as infinity. Raises UnitError like
        `read`.
        """
        if isinstance(value, str):
            unit = inverse_of(self.declared[Kind.FILM_COEFFICIENT])
            value = convert(value, Target(unit, "a resistance times area", is_level=False))
        return self.read(Kind.FILM_COEFFICIENT, 1.0 / value) if value else math.inf

    def write(self, kind: Kind, value: float) -> float:
        """A number of the solver's set in the declared unit."""
        return value if kind in _CARRIED_OVER else value / self._to_solver[kind]

    def write_array(self, kind: Kind, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """As `write`, for an array of any shape."""
        return values if kind in _CARRIED_OVER else values / self._to_solver[kind]

    def show(self, kind: Kind, value: float | str) -> str:
        """The quantity as the client would write it, for messages."""
        return value.strip() if isinstance(value, str) else f"{value:g} {self.declared[kind]}"

    @cached_property
    def lowest_level(self) -> float:
        """Absolute zero of temperatures, in the declared unit; -infinity for the other potentials."""
        return self.read(Kind.POTENTIAL, "0 K") if self.potential == "temperature" else -math.inf

    def is_too_low(self, level: float) -> bool:
        """Whether a level lies below the lowest there is, by more than a conversion rounds it."""
        return level < self.lowest_level - ROUNDED * abs(self.lowest_level)

    @cached_property
    def _targets(self) -> dict[Kind, Target]:
        names = PHYSICS[self.potential].names
        return {kind: Target(unit, names[kind], kind is Kind.POTENTIAL) for kind, unit in self.declared.items()}

    @cached_property
    def _to_solver(self) -> dict[Kind, float]:
        """Solver units in one declared unit of each kind: flow / (length * potential) for a conductivity, and
        so on.
        """
        length = f"({self.declared[Kind.LENGTH]})"
        potential = f"({self.declared[Kind.POTENTIAL_DIFFERENCE]})"
        flow = f"({_base_flow(self)})"
        implied = {
            Kind.CONDUCTIVITY: f"{flow}/{length}/{potential}",
            Kind.FILM_COEFFICIENT: f"{flow}/{length}^2/{potential}",
            Kind.FLUX: f"{flow}/{length}^2",
            Kind.DENSITY: f"{flow}/{length}^3",
            Kind.FLOW: flow,
            Kind.RESISTANCE: f"{potential}/{flow}",
        }
        factors = {kind: factor_between(self.declared[kind], unit) for kind, unit in implied.items()}
        assert all(factor is not None for factor in factors.values())
        return {kind: float(factor) for kind, factor in factors.items() if factor is not None}


# What converting a level rounds, in parts of absolute zero.
ROUNDED = 1e-14

# The solver works in the declared units of these, so their numbers pass unchanged.
_CARRIED_OVER = frozenset({Kind.LENGTH, Kind.POTENTIAL, Kind.POTENTIAL_DIFFERENCE})


def _base_flow(units: UnitSystem) -> str:
    if units.potential == "concentration" and is_same_kind(units.declared[Kind.POTENTIAL], "kg/m^3"):
        return _MASS_CONCENTRATION[Kind.FLOW]
    return PHYSICS[units.potential].defaults[Kind.FLOW]


def declare(potential: str, given: Mapping[Kind, str]) -> tuple[UnitSystem, dict[Kind, str]]:
    """The unit system of a problem and, by kind, a sentence for each declared unit that cannot be used.

    given: the units the client declared; the rest take the defaults of the potential.
    """
    physics = PHYSICS[potential]
    defaults = physics.defaults
    if potential == "concentration" and is_same_kind(given.get(Kind.POTENTIAL, ""), "kg/m^3"):
        defaults = _MASS_CONCENTRATION
    declared, refused = dict(defaults), {}
    for kind, unit in given.items():
        try:
            check_declared(unit, Target(defaults[kind], physics.names[kind], kind is Kind.POTENTIAL))
        except UnitError as error:
            refused[kind] = str(error)
        else:
            declared[kind] = unit
    declared[Kind.POTENTIAL_DIFFERENCE] = _difference_unit(declared[Kind.POTENTIAL])
    return UnitSystem(potential, declared), refused


def _difference_unit(potential_unit: str) -> str:
    """The unit of differences: K for degC, delta_degF for degF, the potential's own otherwise."""
    return {"degC": "K", "degF": "delta_degF"}.get(potential_unit.replace("°", "deg"), potential_unit)
