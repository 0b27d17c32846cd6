"""Flow through faces, patches and planes, and means over faces: the factors integrated in closed form.

A total over a held face is unbounded where the face meets another value in a jump: beside the edge of two held faces
the flux is 2 k J / (pi r), beside a jump inside a held face k J / (pi r), with k the geometric mean of the
conductivities across the line (elementary local solutions u = 2 J theta / pi and J theta / pi). Each factor e by
which a gap left out beside the line shrinks adds `coefficient` to the total.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.core import map_error, time_error, time_form
from service.core.conditions import Held, Inflow, Insulated
from service.core.endless import cut_off, endless_sides, far_profiles, far_setting, neighbourhood, with_interval
from service.core.errors import NotPhysical, OutsideBody
from service.core.faces import AXES, Face, axes_along, axis_of, is_high
from service.core.field import Setting, far_along, kept_rows, points_at_once, step_for
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE
from service.core.lines.places import Places
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.profiles import Profiles
from service.core.solvability import generation, level_is_pinned
from service.core.unbounded import (
    UnboundedCause,
    cut_constant,
    unbounded_lines,
    unbounded_plane_lines,
)

FloatArray = NDArray[np.float64]

# Totals are computed with an error factor this much below the field's: their bound is in flow, not in potential.
HEADROOM = 1e-3

# What a flow per length far along has to exceed to go on without end, in terms of its bound.
FAR_BOUNDS = 4.0

# Means over rectangles whose sides differ by more than this factor are had one after another: the widest of some says
# how all of them are integrated.
LIKE_SIZE = 4.0

# Rounding of a given inflow integrated from the products of its map, relative to their sizes.
GIVEN = 2e-15


@dataclass(frozen=True)
class Bounded:
    """A number with a bound on its error."""

    value: float
    error_bound: float


@dataclass(frozen=True)
class Total:
    """Flow through a face, a part of it, or a plane.

    value, error_bound: None where the total is unbounded. causes: the lines that make it so.
    with_gap: the flow without a strip of the given width along those lines, where a gap was named.
    """

    value: float | None
    error_bound: float | None
    causes: tuple[UnboundedCause, ...] = ()
    with_gap: Bounded | None = None


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


def whole_face(body: Body, axis: int) -> Rectangle:
    """The rectangle of a whole face or section square to an axis."""
    first, second = axes_along(axis)
    return Rectangle(body.begins[first], body.size[first], body.begins[second], body.size[second])


def mean(setting: Setting, face: Face, rectangle: Rectangle | None, tolerance: float) -> Bounded:
    """Mean of the potential over a face or a rectangle of it."""
    return means(setting, face, [checked_rectangle(setting.body, axis_of(face), rectangle)], tolerance)[0]


def means(setting: Setting, face: Face, rectangles: Sequence[Rectangle], tolerance: float) -> list[Bounded]:
    """Means of the potential over rectangles of a face, those of about the same size at once."""
    axis = axis_of(face)
    checked = [checked_rectangle(setting.body, axis, rectangle) for rectangle in rectangles]
    if any(endless_sides(rectangle) for rectangle in checked):
        raise NotPhysical("The mean over a side without end is not defined; name a rectangle of it.", ("rectangle",))
    first, second = axes_along(axis)
    scale = setting.lines[first].scale * setting.lines[second].scale
    found: dict[int, Bounded] = {}
    for numbers in _of_like_size(checked, points_at_once(setting)):
        some = [checked[number] for number in numbers]
        values, bounds = _integrals(setting, axis, setting.body.end_of(face), some, VALUE, tolerance)
        areas = scale * np.array([rectangle.area for rectangle in some])
        for number, value, bound in zip(numbers, values / areas, bounds / areas, strict=True):
            found[number] = Bounded(setting.reference + float(value), float(bound) + setting.map_error)
    return [found[number] for number in range(len(checked))]


def _of_like_size(rectangles: Sequence[Rectangle], most: int) -> list[list[int]]:
    """Numbers of rectangles that a line integrates in the same way: within a factor LIKE_SIZE, so many at the most."""
    groups: dict[tuple[int, int], list[int]] = {}
    for number, where in enumerate(rectangles):
        width, height = where.p_high - where.p_low, where.q_high - where.q_low
        size = (math.floor(math.log(width, LIKE_SIZE)), math.floor(math.log(height, LIKE_SIZE)))
        groups.setdefault(size, []).append(number)
    return [group[start : start + most] for group in groups.values() for start in range(0, len(group), most)]


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
    finite = _flow(setting, axis, position, rectangle, 1.0, tolerance)
    causes = unbounded_plane_lines(body, axis, position, rectangle)
    net = [cause for cause, _ in causes if cause.coefficient != 0.0]
    if not net:
        return finite
    with_gap = None
    if gap is not None:
        inner = _without_strips(rectangle, [border for _, border in causes], gap)
        rest = _flow(setting, axis, position, inner, 1.0, tolerance)
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
    total = _flow(setting, axis, setting.body.end_of(face), rectangle, sign, tolerance)
    if total.value is None:
        return total
    return Total(total.value - cut_constant(setting.body, face, rectangle, setting.reference), total.error_bound)


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
    flows = [_flow(setting, 2, place, whole_face(setting.body, 2), sign, tolerance) for place, sign in sides]
    values, bounds = [flow.value or 0.0 for flow in flows], [flow.error_bound or 0.0 for flow in flows]
    return Bounded(math.fsum(values), math.fsum(bounds))


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


def _flow(setting: Setting, axis: int, position: float, rectangle: Rectangle, sign: float, tolerance: float) -> Total:
    """sign times the flow along an axis through a rectangle of a plane; endless ones are followed to the far field."""
    for index, high in endless_sides(rectangle):
        far = far_setting(setting, axes_along(axis)[index], high=high)
        goes_on = _flow(far, axis, position, with_interval(rectangle, index, 0.0, 1.0), sign, tolerance)
        cause = _goes_on(goes_on, _section_name(setting.body, axis, position))
        if cause is not None:
            return Total(None, None, (cause,))
    if endless_sides(rectangle):
        bounded = cut_off(setting, axis, rectangle)
        if bounded is None:
            name = _section_name(setting.body, axis, position)
            return Total(None, None, (UnboundedCause("endless", name, 0.0, 0.0),))
        rectangle = bounded
    first, second = axes_along(axis)
    factor = -sign / (setting.lines[axis].scale * setting.lines[first].scale * setting.lines[second].scale)
    if setting.body.layers and axis != 2:
        return _flow_through_layers(setting, axis, position, rectangle, factor, tolerance)
    value, bound = _integral(setting, axis, position, rectangle, SLOPE, tolerance)
    return Total(factor * value, abs(factor) * bound + _of_maps(setting, axis, position, rectangle))


def _of_maps(setting: Setting, axis: int, position: float, rectangle: Rectangle) -> float:
    """What the flow may be off by because maps stand for formulas; far along endless axes nothing is left of it."""
    for index, high in endless_sides(rectangle):
        far = far_along(setting, axes_along(axis)[index], high=high)
        low, top = [(rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)][index]
        rectangle = with_interval(rectangle, index, *((low, max(low, far)) if high else (min(far, top), top)))
    return map_error.of_flow(setting.body, axis, position, rectangle)


def _flow_through_layers(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, factor: float, tolerance: float
) -> Total:
    """Flow through a rectangle of a plane that cuts the layers, each of which conducts in its own way."""
    body = setting.body
    borders = (0.0, *body.interfaces, body.size[2])
    value = bound = 0.0
    for layer, (low, high) in zip(body.layers, pairwise(borders), strict=True):
        low, high = max(low, rectangle.q_low), min(high, rectangle.q_high)
        if low < high:
            share = factor * layer.conductivity[axis] / body.conductivity[axis]
            piece = Rectangle(rectangle.p_low, rectangle.p_high, low, high)
            integral, error = _integral(setting, axis, position, piece, SLOPE, tolerance)
            value, bound = value + share * integral, bound + abs(share) * error
    return Total(value, bound + _of_maps(setting, axis, position, rectangle))


def _goes_on(per_length: Total, name: str) -> UnboundedCause | None:
    """Why a flow has no bound, from what it is per length far along; None where that is nothing."""
    if per_length.value is None:
        return UnboundedCause("endless_plane", name, per_length.causes[0].coefficient, 0.0)
    assert per_length.error_bound is not None
    if abs(per_length.value) <= FAR_BOUNDS * per_length.error_bound:
        return None
    return UnboundedCause("endless", name, per_length.value, 0.0)


def _section_name(body: Body, axis: int, position: float) -> str:
    """The face at a position, or the plane."""
    face = body.face_at(axis, position)
    return f"plane {AXES[axis]} = {position:g}" if face is None else f"face {face}"


def _integral(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, order: int, tolerance: float
) -> tuple[float, float]:
    """Integral of the potential (VALUE) or its slope (SLOPE) over a rectangle, in scaled lengths, with its bound."""
    values, bounds = _integrals(setting, axis, position, [rectangle], order, tolerance)
    return float(values[0]), float(bounds[0])


def _integrals(
    setting: Setting, axis: int, position: float, rectangles: Sequence[Rectangle], order: int, tolerance: float
) -> tuple[FloatArray, FloatArray]:
    """The same over several rectangles of a plane."""
    first, second = axes_along(axis)
    ends = np.array([(where.p_low, where.p_high, where.q_low, where.q_high) for where in rectangles]).T
    places: list[Places] = [Places(np.array([position]), order)] * 3  # type: ignore[arg-type]
    places[first], places[second] = Places(ends[0], PRIMITIVE, ends[1]), Places(ends[2], PRIMITIVE, ends[3])
    step, rows = step_for(setting, HEADROOM * tolerance), kept_rows()
    values, bounds = np.zeros(len(rectangles)), np.zeros(len(rectangles))
    for part in setting.parts:
        integral = time_form.integrate(setting.lines, part, places, step, rows)
        values = values + time_form.at_points(integral)
        bounds = bounds + time_error.bound_at_points(integral)
    return values, bounds


def checked_rectangle(body: Body, axis: int, rectangle: Rectangle | None) -> Rectangle:
    """The rectangle, or the whole face or section where there is none. Raises OutsideBody unless it lies in it."""
    whole = whole_face(body, axis)
    if rectangle is None:
        return whole
    fits = (
        whole.p_low <= rectangle.p_low < rectangle.p_high <= whole.p_high
        and whole.q_low <= rectangle.q_low < rectangle.q_high <= whole.q_high
    )
    if not fits:
        raise OutsideBody(
            f"The rectangle from ({rectangle.p_low:g}, {rectangle.q_low:g}) to ({rectangle.p_high:g}, "
            f"{rectangle.q_high:g}) has to have a positive extent and lie within ({whole.p_low:g}, "
            f"{whole.q_low:g}) to ({whole.p_high:g}, {whole.q_high:g}).",
            ("rectangle",),
        )
    return rectangle


def _given_total(face: Face, profiles: tuple[Profiles, Profiles], rectangle: Rectangle) -> Total:
    """A given inflow integrated over a rectangle; its bound is the rounding of the products it is summed from."""
    for index, high in endless_sides(rectangle):
        far = far_profiles(profiles[index], high=high)
        if far is None:
            # Where nothing is given nothing adds up, however far the rectangle reaches.
            continue
        other = (far, profiles[1]) if index == 0 else (profiles[0], far)
        cause = _goes_on(_given_total(face, other, with_interval(rectangle, index, 0.0, 1.0)), f"face {face}")
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
