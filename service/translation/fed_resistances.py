"""Resistances between pads that are fed a flow: rises by the influence matrix."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core import peaks, solve
from service.core.fed_pads import Pad as FedPad
from service.core.fed_pads import check_pads, environment, with_flow_into
from service.core.influence_kept import kept_influence
from service.core.network import network
from service.translation.answers import KeepGoing
from service.translation.pads import Pad
from service.translation.problem import ReadProblem
from service.translation.resistance_parts import Resistances, Rises

FloatArray = NDArray[np.float64]

METHOD = "one time integral for all pairs of pads on parallel faces; the general integral as the check"


def check_fed(problem: ReadProblem, pads: Sequence[Pad]) -> None:
    """Raise NotPhysical or NoSteadyState where flows into the pads raise nothing, or without end."""
    check_pads(problem.body, [_fed(pad) for pad in pads])


def span_of_rises(problem: ReadProblem, pads: Sequence[Pad]) -> float:
    """Span of the field that a unit of flow into the largest pad alone raises, which is the least of all pads."""
    largest = max(pads, key=lambda pad: pad.where.area)
    return solve(with_flow_into(environment(problem.body), _fed(largest), 1.0)).span


def fed_resistances(
    problem: ReadProblem, pads: Sequence[Pad], tolerance: float, with_peaks: bool, keep_going: KeepGoing
) -> Resistances:
    """Everything about the resistances of pads that are fed. tolerance: of a rise per unit flow."""
    fed = [_fed(pad) for pad in pads]
    found = kept_influence(problem.body, fed, tolerance=tolerance, keep_going=keep_going)
    keep_going()
    highest = None
    if with_peaks:
        highest = Rises(*peaks(problem.body, fed, tolerance=tolerance, keep_going=keep_going))
    return Resistances(
        Rises(found.mean, found.bound),
        highest,
        _pairs(found.mean, found.bound),
        network(found.mean, found.bound),
        found.agreement,
        found.agreement_bound,
        found.checked,
        METHOD,
    )


def _fed(pad: Pad) -> FedPad:
    return FedPad(pad.face, pad.where, pad.part.name)


def _pairs(mean: FloatArray, bound: FloatArray) -> Rises:
    """Difference of two pads' rises for a unit of flow from one to the other."""
    own, own_bound = np.diag(mean), np.diag(bound)
    value = own[:, None] + own - mean - mean.T
    error = own_bound[:, None] + own_bound + bound + bound.T
    np.fill_diagonal(value, 0.0)
    np.fill_diagonal(error, 0.0)
    return Rises(value, error)
