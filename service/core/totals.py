"""Flow through faces, patches and planes: the factors integrated in closed form.

A total over a held face is unbounded where the face meets another value in a jump: beside the edge of two held faces
the flux is 2 k J / (pi r), beside a jump inside a held face k J / (pi r), with k the geometric mean of the
conductivities across the line (elementary local solutions u = 2 J theta / pi and J theta / pi). Each factor e by
which a gap left out beside the line shrinks adds `coefficient` to the total.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.core.bounded import Bounded, Total
from service.core.conditions import Held, Inflow, Insulated
from service.core.endless import endless_sides, far_profiles, with_interval
from service.core.errors import NotPhysical, OutsideBody
from service.core.faces import AXES, Face, axis_of, is_high
from service.core.field import Setting
from service.core.maps import Rectangle
from service.core.profiles import Profiles
from service.core.section_flow import flow_through, why_endless
from service.core.sections import checked_rectangle
from service.core.unbounded import (
    UnboundedCause,
    cut_constant,
    unbounded_lines,
    unbounded_plane_lines,
)

FloatArray = NDArray[np.float64]

# Rounding of a given inflow integrated from the products of its map, relative to their sizes.
GIVEN = 2e-15


def plane_total(
    setting: Setting, axis: int, position: float, rectangle: Rectangle | None, gap: float | None, tolerance: float
) -> Total:
    """Flow in the direction of an axis through a plane square to it, inside the body or on its faces.

    gap: as for a face; an inner plane is unbounded where it meets a held face on a line where its data jump.
    """
    body = setting.body
    if not (body.begins[axis] <= position <= body.size[axis] and math.isfinite(position)):
        raise OutsideBody(
            f"The plane {AXES[axis]} = {position:g} is outside the body, which reaches from {body.begins[axis]:g} to "
            f"{body.size[axis]:g}.",
            (AXES[axis],),
        )
    for face in body.present_faces:
        if axis_of(face) == axis and body.end_of(face) == position:
            total = face_total(setting, face, rectangle, gap, tolerance)
            return total if not is_high(face) else negated(total)
    rectangle = checked_rectangle(body, axis, rectangle)
    finite = flow_through(setting, axis, position, rectangle, 1.0, tolerance)
    causes = unbounded_plane_lines(body, axis, position, rectangle)
    net = [cause for cause, _ in causes if cause.coefficient != 0.0]
    if not net:
        return finite
    with_gap = None
    if gap is not None:
        inner = _without_strips(rectangle, [border for _, border in causes], gap)
        rest = flow_through(setting, axis, position, inner, 1.0, tolerance)
        ends_on_jump = any(cause.coefficient for cause, _ in unbounded_plane_lines(body, axis, position, inner))
        if not ends_on_jump and rest.value is not None and rest.error_bound is not None:
            with_gap = Bounded(rest.value, rest.error_bound)
    return Total(None, None, (*net, *finite.causes), with_gap)


def _without_strips(rectangle: Rectangle, borders: Sequence[tuple[int, bool]], gap: float) -> Rectangle:
    """The rectangle less a strip of the gap's width along some of its borders."""
    ends = [rectangle.p_low, rectangle.p_high, rectangle.q_low, rectangle.q_high]
    for index, high in borders:
        ends[2 * index + high] += -gap if high else gap
    inner = Rectangle(*ends)
    if not (inner.p_low < inner.p_high and inner.q_low < inner.q_high):
        raise NotPhysical(f"The edge gap {gap:g} leaves nothing of the face or plane.", ("edge_gap",))
    return inner


def face_total(setting: Setting, face: Face, rectangle: Rectangle | None, gap: float | None, tolerance: float) -> Total:
    """Flow into the body through a face or a rectangle of it.

    gap: width of the strip to leave out along each line that makes the total unbounded, for `with_gap`.
    """
    body, axis = setting.body, axis_of(face)
    rectangle = checked_rectangle(body, axis, rectangle)
    condition = body.faces[face]
    if isinstance(condition, Insulated):
        return Total(0.0, 0.0)
    if isinstance(condition, Inflow):
        given = _given_total(face, (condition.inflow.first, condition.inflow.second), rectangle)
        return _widened(given, condition.inflow.error, rectangle)
    causes = unbounded_lines(body, face, rectangle) if isinstance(condition, Held) else []
    net = [cause for cause, _ in causes if cause.coefficient != 0.0]
    finite = finite_part(setting, face, rectangle, tolerance)
    if not net:
        return finite
    with_gap = _with_gap(setting, face, rectangle, causes, gap, tolerance)
    return Total(None, None, (*net, *finite.causes), with_gap)


def finite_part(setting: Setting, face: Face, rectangle: Rectangle, tolerance: float) -> Total:
    """The total of a held or film face; where it is unbounded, what is left when the logarithms are dropped."""
    axis = axis_of(face)
    sign = -1.0 if is_high(face) else 1.0
    total = flow_through(setting, axis, setting.body.end_of(face), rectangle, sign, tolerance)
    if total.value is None:
        return total
    return Total(total.value - cut_constant(setting.body, face, rectangle, setting.reference), total.error_bound)


def _with_gap(
    setting: Setting,
    face: Face,
    rectangle: Rectangle,
    causes: Sequence[tuple[UnboundedCause, tuple[int, bool]]],
    gap: float | None,
    tolerance: float,
) -> Bounded | None:
    if gap is None:
        return None
    inner = _without_strips(rectangle, [border for _, border in causes], gap)
    if any(cause.coefficient != 0.0 for cause, _ in unbounded_lines(setting.body, face, inner)):
        # The strip ends just on another jump.
        return None
    total = finite_part(setting, face, inner, tolerance)
    if total.value is None or total.error_bound is None:
        return None
    return Bounded(total.value, total.error_bound)


def _given_total(face: Face, profiles: tuple[Profiles, Profiles], rectangle: Rectangle) -> Total:
    """A given inflow integrated over a rectangle; its bound is the rounding of the products it is summed from."""
    for index, high in endless_sides(rectangle):
        far = far_profiles(profiles[index], high=high)
        if far is None:
            # Where nothing is given nothing adds up, however far the rectangle reaches.
            continue
        other = (far, profiles[1]) if index == 0 else (profiles[0], far)
        cause = why_endless(_given_total(face, other, with_interval(rectangle, index, 0.0, 1.0)), f"face {face}")
        if cause is not None:
            return Total(None, None, (cause,))
        knots = profiles[index].knots
        ends = knots[np.isfinite(knots)] if np.isfinite(knots).any() else np.zeros(1)
        p, q = (rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)
        low, high_end = (p, q)[index]
        # What goes on for ever cancels across it.
        last = (low, max(float(ends[-1]), low)) if high else (min(float(ends[0]), high_end), high_end)
        rectangle = with_interval(rectangle, index, *last)
    first = profiles[0].integrals(np.array([rectangle.p_low]), np.array([rectangle.p_high]))
    second = profiles[1].integrals(np.array([rectangle.q_low]), np.array([rectangle.q_high]))
    return Total(float((first * second).sum()), GIVEN * float(np.abs(first * second).sum()))


def _widened(total: Total, error: float, rectangle: Rectangle) -> Total:
    """A total of data that may be off by an error per area."""
    if error == 0.0 or total.error_bound is None:
        return total
    return replace(total, error_bound=total.error_bound + error * rectangle.area)


def negated(total: Total) -> Total:
    """The flow the other way."""
    return Total(
        None if total.value is None else -total.value,
        total.error_bound,
        total.causes,
        None if total.with_gap is None else Bounded(-total.with_gap.value, total.with_gap.error_bound),
    )
