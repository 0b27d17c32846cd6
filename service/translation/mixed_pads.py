"""What passes through the pads of mixed faces."""

from __future__ import annotations

import math
from collections.abc import Mapping

from service.core import Solution
from service.core.faces import Face
from service.core.mixed import MixedSolution
from service.core.mixed_pads import PadAnswer
from service.translation.places import FacePart
from service.units import Kind, UnitSystem

Answers = Mapping[tuple[Face, int], PadAnswer]

# Flows are told to this part of the sum of their sizes if no accuracy is asked for.
USUAL_OF_FLOWS = 1e-5


def pad_answers(solution: Solution, tolerance: float) -> Answers:
    """Flow and potential of each pad of mixed faces, by face and number; empty where no face is mixed.

    tolerance: of potentials; flows are refined to the same part of their sizes as that is of the span.
    """
    if not isinstance(solution, MixedSolution):
        return {}
    solution.refine_flows(min(tolerance / (solution.span or 1.0), USUAL_OF_FLOWS))
    return {(pad.face, pad.index): pad for pad in solution.pads()}


def flow_tolerance(units: UnitSystem, solution: Solution, passed: Answers, tolerance: float) -> float | None:
    """The accuracy of flows that one of potentials comes to, in the declared unit; None where no face is mixed.

    It is the same part of the sum of the sizes of all flows through pads as `tolerance` is of the span.
    """
    if not passed:
        return None
    size = math.fsum(abs(pad.flow.value) for pad in passed.values())
    return units.write(Kind.FLOW, tolerance / (solution.span or 1.0) * size)


def mixed_pad(answers: Answers, part: FacePart) -> PadAnswer | None:
    """What is known of a part of a face that is a pad of a mixed one; None for any other part."""
    return None if part.patch is None else answers.get((part.face, part.patch))


def flow_of(units: UnitSystem, passed: PadAnswer) -> dict[str, float]:
    """The flow through a pad, in the declared unit."""
    return {
        "value": units.write(Kind.FLOW, float(passed.flow.value)),
        "error_bound": units.write(Kind.FLOW, float(passed.flow.error_bound)),
    }


def potential_of(passed: PadAnswer) -> dict[str, float]:
    """The level of a held pad, or the mean over a film pad."""
    return {"value": float(passed.potential.value), "error_bound": float(passed.potential.error_bound)}
