"""What varies with the potential as a client writes it, to the solver's laws."""

from __future__ import annotations

import math

from service.core import ConductivityLaw, NotPhysical, Radiation
from service.models import problem as models
from service.refusals import Path
from service.translation.collector import Collector
from service.units import Kind

# Stefan-Boltzmann constant, W/(m^2 K^4), CODATA 2018.
STEFAN_BOLTZMANN = 5.670374419e-8

_PATH: Path = ("body", "conductivity_law")


def read_law(
    collector: Collector, law: models.LinearLaw | models.TableLaw | None, along_x: float
) -> ConductivityLaw | None:
    """The law of a body; None where there is none or it could not be read, which is then noted.

    along_x: the body's conductivity along x, to which conductivities in a table are referred.
    """
    noted = len(collector.issues)
    try:
        match law:
            case None:
                return None
            case models.LinearLaw():
                reference = collector.read(Kind.POTENTIAL, law.reference, (*_PATH, "reference"))
                return None if math.isnan(reference) else ConductivityLaw.linear(reference, law.per_degree)
            case models.TableLaw():
                potentials = [
                    collector.read(Kind.POTENTIAL, value, (*_PATH, "potential", index))
                    for index, value in enumerate(law.potential)
                ]
                factors = _factors(collector, law, along_x)
                return None if len(collector.issues) > noted else ConductivityLaw.table(potentials, factors)
    except NotPhysical as error:
        collector.add((*_PATH, *error.field[1:]), error.message, "not-physical")
        return None


def _factors(collector: Collector, law: models.TableLaw, along_x: float) -> list[float]:
    """Factors of a table; where some could not be read that is noted."""
    if law.conductivity is not None and law.factor is not None:
        collector.add((*_PATH, "conductivity"), "Give either `factor` or `conductivity`, not both.", "one-of")
        return []
    if law.conductivity is None:
        if law.factor is None:
            collector.add((*_PATH, "factor"), "Give either `factor` or `conductivity`.", "missing")
        return law.factor or []
    if len(law.conductivity) != len(law.potential):
        detail = (
            f"There are {len(law.conductivity)} conductivities and {len(law.potential)} potentials; one is wanted at "
            "each potential."
        )
        collector.add((*_PATH, "conductivity"), detail, "shape")
    values = [
        collector.read_positive(Kind.CONDUCTIVITY, value, (*_PATH, "conductivity", index), "The conductivity")
        for index, value in enumerate(law.conductivity)
    ]
    return [value / along_x for value in values]


def read_radiation(collector: Collector, emissivity: float | None, path: Path) -> Radiation | None:
    """Radiation of a face of an emissivity, in the solver's units."""
    if emissivity is None:
        return None
    units = collector.units
    if units.potential != "temperature":
        collector.add(path, "Only a temperature radiates; leave the emissivity out.", "not-a-temperature")
        return None
    kelvin = units.read(Kind.POTENTIAL_DIFFERENCE, "1 K")
    flux = units.read(Kind.FLUX, "1 W/m^2")
    zero = -units.read(Kind.POTENTIAL, "0 K")
    return Radiation(emissivity * STEFAN_BOLTZMANN * flux / kelvin**4, zero)
