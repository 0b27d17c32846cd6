"""The books of a body: what flows in through every face, what is generated, and what is left over."""

from __future__ import annotations

import math
from dataclasses import dataclass

from service.core.bounded import Bounded, Total
from service.core.endless import neighbourhood
from service.core.faces import Face, axis_of
from service.core.field import Setting
from service.core.section_flow import flow_through
from service.core.sections import whole_face
from service.core.solvability import generation, level_is_pinned
from service.core.totals import face_total, finite_part


@dataclass(frozen=True)
class Balance:
    """The books of the whole body.

    inflow: total of each face, into the body. generation: inside. residual: their sum, less what is carried off; where
    faces are unbounded the sum of their finite parts, since the logarithms cancel. error_bound: what the residual may
    be. closed: whether it is within that. None where an endless side takes part.
    carried_off: what flows away for ever where all axes are endless and no face takes it up, through planes beyond all
    that drives the body; None for other bodies, where nothing does.
    """

    inflow: dict[Face, Total]
    generation: float
    residual: float | None
    error_bound: float | None
    closed: bool | None
    carried_off: Bounded | None = None


def balance(setting: Setting, tolerance: float, gap: float | None) -> Balance:
    """Every face's total, the generation, and what is left over."""
    body = setting.body
    inflow = {face: face_total(setting, face, None, gap, tolerance) for face in body.present_faces}
    generated = generation(body)
    endless = any(cause.kind.startswith("endless") for total in inflow.values() for cause in total.causes)
    if endless or not math.isfinite(generated):
        return Balance(inflow, generated, None, None, None)
    values, bounds = [generated], [4e-16 * abs(generated)]
    for face, total in inflow.items():
        if total.value is None:
            total = finite_part(setting, face, whole_face(body, axis_of(face)), tolerance)
        assert total.value is not None
        assert total.error_bound is not None
        values.append(total.value)
        bounds.append(total.error_bound)
    carried_off = None
    if all(line.is_endless for line in setting.lines) and level_is_pinned(body):
        carried_off = _carried_off(setting, tolerance)
        values.append(-carried_off.value)
        bounds.append(carried_off.error_bound)
    residual = math.fsum(values)
    bound = math.fsum(bounds)
    return Balance(inflow, generated, residual, bound, abs(residual) <= bound, carried_off)


def _carried_off(setting: Setting, tolerance: float) -> Bounded:
    """Flow through the planes square to z beyond all that drives the body."""
    low, high = neighbourhood(setting.lines, 2)
    sides = [(high, 1.0), (low, -1.0)] if setting.body.infinite[2] else [(high, 1.0)]
    flows = [flow_through(setting, 2, place, whole_face(setting.body, 2), sign, tolerance) for place, sign in sides]
    values, bounds = [flow.value or 0.0 for flow in flows], [flow.error_bound or 0.0 for flow in flows]
    return Bounded(math.fsum(values), math.fsum(bounds))
