"""Resistances between held pads of mixed faces: what flows between pads that are each at one potential."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Mixed
from service.core.network import Network
from service.core.pad_network import PadNetwork, pad_network
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.pads import Pad, is_held
from service.translation.problem import ReadProblem
from service.translation.resistance_parts import Resistances, Rises

FloatArray = NDArray[np.float64]

METHOD = "panels on the pads, refined; bounds by extrapolation from the refinements"


def are_held(collector: Collector, problem: ReadProblem, pads: list[Pad], *, is_named: bool) -> tuple[bool, list[Pad]]:
    """Whether resistances are wanted between held pads of mixed faces, and between which.

    is_named: whether the question names the pads; film pads are left out where it does not. Noted where a film pad is
    named, or some pads are held and others are fed.
    """
    if not is_named:
        pads = [pad for pad in pads if is_held(problem, pad) or not _is_on_mixed(problem, pad)]
    for index, pad in enumerate(pads):
        if _is_on_mixed(problem, pad) and not is_held(problem, pad):
            detail = f"On the mixed face {pad.face} resistances lead to held pads; name one of these by `patch`."
            collector.add(("evaluate", "pads", index), detail, "not-held")
        elif is_held(problem, pad) and any(pad.part == other.part for other in pads[:index]):
            collector.add(("evaluate", "pads", index), "This held pad is named before; name each once.", "repeated")
    held = [is_held(problem, pad) for pad in pads]
    if any(held) and not all(held):
        detail = "Some pads are held and others are fed a flow; name pads of one kind."
        collector.add(("evaluate", "pads") if is_named else ("evaluate",), detail, "pads-of-two-kinds")
    return bool(pads) and all(held), pads


def _is_on_mixed(problem: ReadProblem, pad: Pad) -> bool:
    return isinstance(problem.body.faces[pad.face], Mixed)


def held_resistances(
    problem: ReadProblem, pads: Sequence[Pad], accuracy: float, with_peaks: bool, keep_going: KeepGoing
) -> Resistances:
    """Everything about the resistances of held pads; those not asked for are part of the environment.

    accuracy: of conductances, as part of the largest.
    """
    asked = [(pad.face, pad.part.patch) for pad in pads if pad.part.patch is not None]
    found = pad_network(problem.body, asked, accuracy=accuracy, keep_going=keep_going)
    between, between_bound = -found.conductance, found.error_bound.copy()
    np.fill_diagonal(between, 0.0)
    np.fill_diagonal(between_bound, 0.0)
    resistors = Network(between, between_bound, found.to_environment, found.to_environment_bound)
    mean = None if found.closed else Rises(*found.rises())
    # A held pad has one potential, its mean and its largest.
    return Resistances(mean, mean if with_peaks else None, _pairs(found), resistors, None, None, 0, METHOD)


def _pairs(found: PadNetwork) -> Rises:
    """Potential between every two pads for a unit of flow from one to the other, all others passing none."""
    size = len(found.pads)
    value, bound = np.zeros((size, size)), np.zeros((size, size))
    for i in range(size):
        for j in range(i):
            pair = found.resistance(i, j)
            value[i, j] = value[j, i] = pair.value
            bound[i, j] = bound[j, i] = pair.error_bound
    return Rises(value, bound)
