"""Answers about theta put back into the potential, with their bounds."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.core.climbing import Place
from service.core.convergence import Convergence, NodeStep, SeriesStep
from service.core.field import Field
from service.core.film_iteration import Iterated
from service.core.flow_error import FlowError
from service.core.kirchhoff import Transformed

FloatArray = NDArray[np.float64]

# Rounding of theta's inverse, relative to the potential.
STORED = 2e-15


def potential_field(data: Transformed, iterated: Iterated, found: Field, places: Sequence[FloatArray]) -> Field:
    """The field of a potential from that of its theta at places along three axes; the flux is the same in both."""
    kirchhoff = data.kirchhoff
    potential = kirchhoff.potential(found.potential)
    off = kirchhoff.potential_bound(found.potential, found.potential_bound + iterated.error)
    size = abs(kirchhoff.reference) + float(np.abs(potential).max(initial=0.0))
    bound = float(off.max(initial=0.0)) + STORED * size
    flux_bound = found.flux_bound
    if flux_bound is not None:
        flux_bound = flux_bound + FlowError(data, iterated).flux(places, flux_bound.shape)
    return replace(found, potential=potential, potential_bound=bound, flux_bound=flux_bound)


def potential_place(data: Transformed, iterated: Iterated, found: Place) -> Place:
    """A place of theta in the potential; one that the data give outright is not off by the iteration."""
    kirchhoff, theta = data.kirchhoff, np.array([found.value])
    value = float(kirchhoff.potential(theta)[0])
    off = found.error_bound + iterated.error if found.error_bound > 0.0 else 0.0
    bound = float(kirchhoff.potential_bound(theta, off)[0])
    return replace(found, value=value, error_bound=bound + STORED * (abs(value) + abs(kirchhoff.reference)))


def potential_convergence(
    data: Transformed, iterated: Iterated, found: Convergence, least_factor: float
) -> Convergence:
    """How an answer converges, in the potential: what is left by a step divided by the least factor."""
    per = 1 / least_factor

    def potential(theta: float) -> float:
        return float(data.kirchhoff.potential(np.array([theta]))[0])

    def off(theta: float) -> float:
        return float(data.kirchhoff.potential_bound(np.array([found.value]), theta)[0])

    return replace(
        found,
        value=potential(found.value),
        error_bound=off(found.error_bound + iterated.error),
        series=tuple(
            SeriesStep(
                step.terms,
                potential(step.value),
                step.error * per,
                None if step.tail_bound is None else step.tail_bound * per,
            )
            for step in found.series
        ),
        time_form=tuple(
            NodeStep(step.nodes, potential(step.value), step.error * per, step.error_bound * per)
            for step in found.time_form
        ),
        agreement=None if found.agreement is None else off(found.agreement),
        agreement_bound=None if found.agreement_bound is None else off(found.agreement_bound),
    )
