"""Flows through faces and planes of a body in theta: those of the potential, but for their bounds and causes."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from service.core import field as fields
from service.core import totals
from service.core.bounded import Bounded, Total
from service.core.conditions import Film, Held, Inflow, map_of
from service.core.faces import Face, axes_along
from service.core.field import Setting
from service.core.film_iteration import Iterated
from service.core.flow_error import FlowError
from service.core.kirchhoff import Transformed
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.unbounded import UnboundedCause, unbounded_lines, unbounded_plane_lines


def face_total(
    data: Transformed, iterated: Iterated, face: Face, where: Rectangle, gap: float | None, tolerance: float
) -> Total:
    """Flow into the body through a rectangle of a face; unbounded where held values meet in a jump."""
    body = data.body
    total = totals.face_total(iterated.setting, face, where, gap, tolerance)
    if any(cause.kind == "endless" for cause in total.causes) and _fades(body, face):
        # What the iteration leaves over far along a face goes on without end; the flow itself does not.
        total = totals.face_total(iterated.setting, face, _with_ends(iterated.setting, face, where), gap, tolerance)
    causes = unbounded_lines(body, face, where) if isinstance(body.faces[face], Held) else []
    return _widened(total, FlowError(data, iterated).face_total(face, where), [cause for cause, _ in causes])


def plane_total(
    data: Transformed,
    iterated: Iterated,
    axis: int,
    position: float,
    where: Rectangle,
    gap: float | None,
    tolerance: float,
) -> Total:
    """Flow along an axis through a rectangle of a plane inside the body; unbounded like that of a face."""
    total = totals.plane_total(iterated.setting, axis, position, where, gap, tolerance)
    causes = unbounded_plane_lines(data.body, axis, position, where)
    off = FlowError(data, iterated).plane_total(axis, position, where)
    return _widened(total, off, [cause for cause, _ in causes])


def _with_ends(setting: Setting, face: Face, where: Rectangle) -> Rectangle:
    """The part of a rectangle on which anything flows."""
    first, second = axes_along(face)
    return Rectangle(
        fields.far_along(setting, first, high=False) if where.p_low == -math.inf else where.p_low,
        fields.far_along(setting, first) if where.p_high == math.inf else where.p_high,
        fields.far_along(setting, second, high=False) if where.q_low == -math.inf else where.q_low,
        fields.far_along(setting, second) if where.q_high == math.inf else where.q_high,
    )


def _fades(body: Body, face: Face) -> bool:
    """Whether the flow through an endless face comes to nothing: all data far along it are at one level."""
    levels: set[float] = set()
    for axis in axes_along(face):
        if math.isfinite(body.size[axis]):
            continue
        if any(source.density != 0.0 and math.isinf(source.high[axis] - source.low[axis]) for source in body.sources):
            return False
        for other, condition in body.faces.items():
            face_map = map_of(condition)
            if face_map is None or axis not in axes_along(other):
                continue
            along = np.moveaxis(face_map.table, axes_along(other).index(axis), 0)
            ends = along[-1:] if body.begins[axis] == 0.0 else along[[0, -1]]
            levels |= {float(value) for value in np.unique(ends)} if isinstance(condition, Held | Film) else set()
            if isinstance(condition, Inflow) and ends.any():
                return False
    return len(levels) <= 1


def _widened(total: Total, off: float, as_given: Sequence[UnboundedCause]) -> Total:
    """A total with a wider bound, and the jumps that make it unbounded in the potential instead of theta."""
    jumps = {cause.line: cause.largest_jump for cause in as_given}
    causes = tuple(replace(cause, largest_jump=jumps.get(cause.line, cause.largest_jump)) for cause in total.causes)
    with_gap = total.with_gap
    if with_gap is not None:
        with_gap = Bounded(with_gap.value, with_gap.error_bound + off)
    bound = None if total.error_bound is None else total.error_bound + off
    return Total(total.value, bound, causes, with_gap)
