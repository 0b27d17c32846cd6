"""What passes through each pad of mixed faces, and the levels that are found.

Flows are totals, told by extrapolation from refinements; see `panel_error`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from service.core import time_error
from service.core.bounded import Bounded
from service.core.conditions import FilmPad, FluxPad, HeldPad, MixedPad
from service.core.faces import Face
from service.core.mixed_base import pads_of
from service.core.mixed_levels import Levels
from service.core.panels import STEP
from service.core.stopping import go_on

# No flow is told better than this part of the worst: the error of one is a product with that of all.
LEAST_OF_WORST = 0.125

# Accuracy, in parts of the span, of means over pads that have their base's film.
MEAN_ACCURACY = 1e-10


@dataclass(frozen=True)
class PadAnswer:
    """What passes through a pad of a mixed face.

    face, index, name: which. flow: into the body through it. potential: of a held pad its level, given or found; of a
    film pad the mean over it.
    """

    face: Face
    index: int
    name: str | None
    flow: Bounded
    potential: Bounded


def pad_answers(levels: Levels) -> tuple[PadAnswer, ...]:
    """Flow and potential of every pad, face by face."""
    go_on()
    answers = [
        _pad(levels, face, index, pad)
        for face in levels.base.faces
        for index, pad in enumerate(pads_of(levels.body, face))
    ]
    least = LEAST_OF_WORST * max(answer.flow.error_bound for answer in answers)
    return tuple(
        replace(answer, flow=Bounded(answer.flow.value, max(answer.flow.error_bound, least)))
        if answer.flow.error_bound > 0.0
        else answer
        for answer in answers
    )


def _pad(levels: Levels, face: Face, index: int, pad: MixedPad) -> PadAnswer:
    number = next((n for n, spot in enumerate(levels.base.spots) if (spot.face, spot.pad) == (face, index)), None)
    if number is None:
        return _pad_of_base(levels, face, index, pad)
    spot, rounding = levels.base.spots[number], time_error.step_error(STEP)
    excess = levels.ladder.limit(
        [
            Bounded(
                math.fsum(refined.flows[number]),
                rounding * math.fsum(float(np.abs(flows).sum()) for flows in refined.flows),
            )
            for refined in levels.here.refined
        ]
    )
    if isinstance(pad, HeldPad):
        flow = excess if pad.flow is None else Bounded(pad.flow, 0.0)
        return PadAnswer(face, index, pad.name, flow, levels.of(number))
    assert isinstance(pad, FilmPad)
    share = 1.0 + levels.base.coefficients[face] / spot.excess
    per_flow = 1 / (spot.area * spot.excess)
    potential = levels.limited(Bounded(pad.ambient - per_flow * excess.value, per_flow * excess.error_bound))
    return PadAnswer(face, index, pad.name, Bounded(share * excess.value, share * excess.error_bound), potential)


def _pad_of_base(levels: Levels, face: Face, index: int, pad: MixedPad) -> PadAnswer:
    """A pad with a given inflow, or with the film of the base."""
    means = [
        solution.mean(face, pad.where, tolerance=MEAN_ACCURACY * levels.here.span) for solution in levels.here.solutions
    ]
    mean = levels.limited(levels.ladder.limit(means))
    if isinstance(pad, FluxPad):
        return PadAnswer(face, index, pad.name, Bounded(pad.inflow * pad.where.area, 0.0), mean)
    assert isinstance(pad, FilmPad)
    per_degree = pad.coefficient * pad.where.area
    flow = Bounded(per_degree * (pad.ambient - mean.value), per_degree * mean.error_bound)
    return PadAnswer(face, index, pad.name, flow, mean)
