"""Both sides of an interface between two layers of a stack."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.core import Body, Field
from service.translation import answers
from service.translation.places import InterfacePlaces, layer_name
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]


def both_sides(body: Body, asked: InterfacePlaces) -> FloatArray:
    """The places just below the interface, then those just above it, shape (2 n_places, 3)."""
    height = body.interfaces[asked.number - 1]
    heights = np.repeat([height, np.nextafter(height, math.inf)], len(asked.at))
    return np.column_stack([np.vstack([asked.at, asked.at]), heights])


def interface_answer(units: UnitSystem, body: Body, asked: InterfacePlaces, found: Field) -> dict[str, Any]:
    """The answer for one interface. found: potential and flux on both sides."""
    assert found.flux is not None
    assert found.flux_bound is not None
    contact = body.layers[asked.number].contact_below
    below, above = np.split(found.potential, 2)
    # The flux is the same on both sides; the side that is known better is taken.
    fluxes, bounds = np.split(found.flux[2], 2), np.split(found.flux_bound, 2)
    upper_is_better = bounds[1] < bounds[0]
    flux, flux_bound = np.where(upper_is_better, fluxes[::-1], fluxes)[0], np.minimum(*bounds)
    step, step_bound = _step(above - below, 2 * found.potential_bound, -flux / contact, flux_bound / contact)
    answer: dict[str, Any] = {} if asked.name is None else {"name": asked.name}
    return answer | {
        "interface": asked.number,
        "layer_below": layer_name(body, asked.number - 1),
        "layer_above": layer_name(body, asked.number),
        "z": body.interfaces[asked.number - 1],
        "contact_conductance": answers.number_or_none(units.write(Kind.FILM_COEFFICIENT, contact)),
        "at": asked.at,
        "potential_below": below,
        "potential_above": above,
        "error_bound": float(found.potential_bound),
        "step": step,
        "step_error_bound": step_bound,
        "flux": units.write_array(Kind.FLUX, flux),
        "flux_error_bound": units.write_array(Kind.FLUX, flux_bound),
    }


def _step(
    difference: FloatArray, difference_bound: float, from_flux: FloatArray, from_flux_bound: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """The step and its bound: from the flux where that knows it better than the difference of the two sides."""
    by_flux = np.isfinite(from_flux) & (from_flux_bound <= difference_bound)
    return np.where(by_flux, from_flux, difference), np.where(by_flux, from_flux_bound, difference_bound)
