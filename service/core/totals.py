"""Flow through faces, patches and planes, and means over faces: the factors integrated in closed form.

A total over a held face is unbounded where the face meets another value in a jump: beside the edge of two held faces
the flux is 2 k J / (pi r), beside a jump inside a held face k J / (pi r), with k the geometric mean of the
conductivities across the line (elementary local solutions u = 2 J theta / pi and J theta / pi). Each factor e by
which a gap left out beside the line shrinks adds `coefficient` to the total.

A bounded total is the limit of totals with a gap. The time integral of each part begins at a common time instead of
ending at a common gap, and the two differ by a constant: for a held face's own data f at an edge with another held
face, (2 / pi) k f per length, because  integral over r > gap of 2 / (pi r)  and the same cut in time at t0 differ by
(2 / pi) (1 + gamma / 2) there and by (2 / pi) gamma / 2 for the other face's data (gamma: Euler's constant).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core import time_form
from service.core.errors import NotPhysical, OutsideBody
from service.core.field import Setting, kept_rows, step_for
from service.core.lines.line import PRIMITIVE, SLOPE, VALUE
from service.core.lines.time_response import Places
from service.core.maps import FaceMap, Rectangle
from service.core.problem import AXES, Body, Face, Held, Inflow, Insulated, axes_along, axis_of, is_high, map_of
from service.core.singular import edge_name, line_name, local_data
from service.core.solvability import generation, map_integral

FloatArray = NDArray[np.float64]

# Totals are computed with an error factor this much below the field's: their bound is in flow, not in potential.
HEADROOM = 1e-3

# Where an unbounded coefficient is below this part of what its line could carry it is zero: two maps that meet.
NO_JUMP = 1e-12


@dataclass(frozen=True)
class Bounded:
    """A number with a bound on its error."""

    value: float
    error_bound: float


@dataclass(frozen=True)
class UnboundedCause:
    """Why a total has no bound.

    kind: "edge" of two held faces, "jump_line" inside a held face, or "endless" for a side that goes on for ever.
    line: which. coefficient: flow gained for each factor e by which the gap shrinks; for "endless" flow per length.
    largest_jump: largest difference of the values that meet.
    """

    kind: str
    line: str
    coefficient: float
    largest_jump: float


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

    inflow: total of each face, into the body. generation: inside. residual: their sum; where faces are unbounded the
    sum of their finite parts, since the logarithms cancel. error_bound: what the residual may be.
    closed: whether it is within that. None where an endless side takes part.
    """

    inflow: dict[Face, Total]
    generation: float
    residual: float | None
    error_bound: float | None
    closed: bool | None


def whole_face(body: Body, axis: int) -> Rectangle:
    """The rectangle of a whole face or section square to an axis."""
    first, second = axes_along(axis)
    return Rectangle(0.0, body.size[first], 0.0, body.size[second])


def mean(setting: Setting, face: Face, rectangle: Rectangle | None, tolerance: float) -> Bounded:
    """Mean of the potential over a face or a rectangle of it."""
    axis = axis_of(face)
    rectangle = _inside(setting.body, axis, rectangle)
    if math.isinf(rectangle.q_high):
        raise NotPhysical("The mean over a side without end is not defined; name a rectangle of it.", ("rectangle",))
    value, bound = _integral(setting, axis, _end(setting.body, face), rectangle, VALUE, tolerance)
    first, second = axes_along(axis)
    area = (rectangle.p_high - rectangle.p_low) * (rectangle.q_high - rectangle.q_low)
    scale = setting.lines[first].scale * setting.lines[second].scale * area
    return Bounded(setting.reference + value / scale, bound / scale)


def plane_total(
    setting: Setting, axis: int, position: float, rectangle: Rectangle | None, tolerance: float
) -> Total:
    """Flow in the direction of an axis through a plane square to it, strictly inside the body or on its faces."""
    if not (0 <= position <= setting.body.size[axis] and math.isfinite(position)):
        raise OutsideBody(
            f"The plane {AXES[axis]} = {position:g} is outside the body, which reaches from 0 to "
            f"{setting.body.size[axis]:g}.",
            (AXES[axis],),
        )
    for face in setting.body.present_faces:
        if axis_of(face) == axis and _end(setting.body, face) == position:
            total = face_total(setting, face, rectangle, None, tolerance)
            return total if not is_high(face) else _negated(total)
    rectangle = _inside(setting.body, axis, rectangle)
    return _flow(setting, axis, position, rectangle, 1.0, tolerance)


def face_total(
    setting: Setting, face: Face, rectangle: Rectangle | None, gap: float | None, tolerance: float
) -> Total:
    """Flow into the body through a face or a rectangle of it.

    gap: width of the strip to leave out along each line that makes the total unbounded, for `with_gap`.
    """
    body, axis = setting.body, axis_of(face)
    rectangle = _inside(body, axis, rectangle)
    condition = body.faces[face]
    if isinstance(condition, Insulated):
        return Total(0.0, 0.0)
    if isinstance(condition, Inflow):
        given = map_integral(
            condition.inflow, (rectangle.p_low, rectangle.q_low), (rectangle.p_high, rectangle.q_high)
        )
        if not math.isfinite(given):
            return Total(None, None, (UnboundedCause("endless", face, _far_inflow(condition, rectangle), 0.0),))
        return Total(given, 4e-16 * abs(given))
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
    total = _flow(setting, axis, _end(setting.body, face), rectangle, sign, tolerance)
    if total.value is None:
        return total
    return Total(total.value - _cut_constant(setting, face, rectangle), total.error_bound)


def balance(setting: Setting, tolerance: float, gap: float | None) -> Balance:
    """Every face's total, the generation, and what is left over."""
    body = setting.body
    inflow = {face: face_total(setting, face, None, gap, tolerance) for face in body.present_faces}
    generated = generation(body)
    endless = any(cause.kind == "endless" for total in inflow.values() for cause in total.causes)
    if endless or not math.isfinite(generated):
        return Balance(inflow, generated, None, None, None)
    values, bounds = [generated], [4e-16 * abs(generated)]
    for face, total in inflow.items():
        if total.value is None:
            total = finite_part(setting, face, whole_face(body, axis_of(face)), tolerance)
        assert total.value is not None and total.error_bound is not None
        values.append(total.value)
        bounds.append(total.error_bound)
    residual = math.fsum(values)
    bound = math.fsum(bounds)
    return Balance(inflow, generated, residual, bound, abs(residual) <= bound)


def unbounded_lines(body: Body, face: Face, rectangle: Rectangle) -> list[tuple[UnboundedCause, tuple[int, bool]]]:
    """Borders of a rectangle of a held face along which the flow out of it has no bound.

    Each with which border it is: the axis along the face (0 or 1) that the border is square to, and whether it is
    the high one. A line that the rectangle reaches across is no cause: the two sides cancel.
    """
    causes = []
    for index in (0, 1):
        for high in (False, True):
            cause = _border_cause(body, face, rectangle, index, high)
            if cause is not None:
                causes.append((cause, (index, high)))
    return causes


def _border_cause(body: Body, face: Face, rectangle: Rectangle, index: int, high: bool) -> UnboundedCause | None:
    axis = axis_of(face)
    across, along = axes_along(face)[index], axes_along(face)[1 - index]
    place, (low, top) = _border(rectangle, index, high)
    if math.isinf(place):
        return None
    own = map_of(body.faces[face])
    assert own is not None
    knots = own.second_knots if index == 0 else own.first_knots
    neighbour: FaceMap | None = None
    name, kind, share = line_name(face, across, place), "jump_line", 1.0
    if place in (0.0, body.size[across]):
        other: Face = f"{AXES[across]}_{'low' if place == 0.0 else 'high'}"  # type: ignore[assignment]
        condition = body.faces[other]
        if not isinstance(condition, Held):
            return None
        neighbour = condition.value
        along_first = axes_along(other)[0] == along
        knots = np.concatenate([knots, neighbour.first_knots if along_first else neighbour.second_knots])
        name, kind, share = edge_name(face, other), "edge", 2.0
    at, weights = _fine_rule(knots, low, top)
    if at.size == 0:
        return None
    jump, size = _jump_along(body, face, own, neighbour, index, place, high, at)
    net, largest = float(weights @ jump), float(np.abs(jump).max())
    if largest <= NO_JUMP * size:
        return None
    mean_conductivity = math.sqrt(body.conductivity[axis] * body.conductivity[across])
    coefficient = share / math.pi * mean_conductivity * net
    if abs(net) <= NO_JUMP * float(weights @ np.abs(jump)):
        coefficient = 0.0
    return UnboundedCause(kind, name, coefficient, largest)


def _border(rectangle: Rectangle, index: int, high: bool) -> tuple[float, tuple[float, float]]:
    """Where a border lies and from where to where it runs."""
    p, q = (rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)
    across, along = (p, q) if index == 0 else (q, p)
    return across[1 if high else 0], along


def _fine_rule(knots: FloatArray, low: float, high: float) -> tuple[FloatArray, FloatArray]:
    """Gauss points and weights on each stretch between knots, exact for the bilinear data of both faces."""
    if math.isinf(high):
        finite = knots[np.isfinite(knots)]
        high = max(float(finite.max()), low) + 1.0
    cuts = np.unique(np.concatenate([[low, high], knots[(knots > low) & (knots < high)]]))
    nodes, weights = np.polynomial.legendre.leggauss(4)
    half = 0.5 * np.diff(cuts)
    middle = 0.5 * (cuts[1:] + cuts[:-1])
    return (middle[:, None] + half[:, None] * nodes).ravel(), (half[:, None] * weights).ravel()


def _jump_along(
    body: Body,
    face: Face,
    own: FaceMap,
    neighbour: FaceMap | None,
    index: int,
    place: float,
    high: bool,
    at: FloatArray,
) -> tuple[FloatArray, float]:
    """Own value less the other's along a border, and the size of the data."""
    inside = _side_value(own, index, place, at, from_above=not high)
    if neighbour is None:
        outside = _side_value(own, index, place, at, from_above=high)
    else:
        # On the neighbour the edge is where its own axis, square to this face, ends.
        across = axes_along(face)[index]
        end = body.size[axis_of(face)] if is_high(face) else 0.0
        position = 1 - axes_along(across).index(axes_along(face)[1 - index])
        outside = _side_value(neighbour, position, end, at, from_above=end == 0.0)
    size = float(max(np.abs(inside).max(), np.abs(outside).max()))
    return inside - outside, size


def _side_value(face_map: FaceMap, index: int, place: float, at: FloatArray, *, from_above: bool) -> FloatArray:
    """Values along a line of a map where one axis is at `place`, from its upper or lower side."""
    if face_map.is_uniform:
        return np.full_like(at, face_map.lowest)
    fixed = np.full_like(at, place)
    p, q = (fixed, at) if index == 0 else (at, fixed)
    values = local_data(face_map, p, q).values
    # The order of the four sides: (left, left), (left, right), (right, left), (right, right).
    if index == 0:
        pair = values[2:] if from_above else values[:2]
    else:
        pair = values[1::2] if from_above else values[0::2]
    return np.asarray(pair.mean(axis=0))


def _cut_constant(setting: Setting, face: Face, rectangle: Rectangle) -> float:
    """What the cut in time adds to a held face's total at its edges with other held faces (see the module)."""
    body, axis = setting.body, axis_of(face)
    condition = body.faces[face]
    if not isinstance(condition, Held):
        return 0.0
    own = condition.value.minus(setting.reference)
    total = 0.0
    for index in (0, 1):
        across = axes_along(face)[index]
        for high in (False, True):
            place, (low, top) = _border(rectangle, index, high)
            knots = own.second_knots if index == 0 else own.first_knots
            at, weights = _fine_rule(knots, low, top)
            if math.isinf(place) or at.size == 0:
                continue
            mean_conductivity = math.sqrt(body.conductivity[axis] * body.conductivity[across])
            inside = _side_value(own, index, place, at, from_above=not high)
            if place in (0.0, body.size[across]):
                other: Face = f"{AXES[across]}_{'low' if place == 0.0 else 'high'}"  # type: ignore[assignment]
                if isinstance(body.faces[other], Held):
                    total += 2 / math.pi * mean_conductivity * float(weights @ inside)
            else:
                outside = _side_value(own, index, place, at, from_above=high)
                total += 1 / math.pi * mean_conductivity * float(weights @ (inside - outside))
    return total


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
    borders = [rectangle.p_low, rectangle.p_high, rectangle.q_low, rectangle.q_high]
    for _, (index, high) in causes:
        borders[2 * index + high] += -gap if high else gap
    inner = Rectangle(*borders)
    if not (inner.p_low < inner.p_high and inner.q_low < inner.q_high):
        raise NotPhysical(f"The edge gap {gap:g} leaves nothing of {face}.", ("edge_gap",))
    total = finite_part(setting, face, inner, tolerance)
    if total.value is None or total.error_bound is None:
        return None
    return Bounded(total.value, total.error_bound)


def _flow(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, sign: float, tolerance: float
) -> Total:
    """sign times the flow along an axis through a rectangle of a plane; endless ones are followed to the far field."""
    first, second = axes_along(axis)
    factor = -sign * math.sqrt(setting.body.conductivity[axis])
    factor /= setting.lines[first].scale * setting.lines[second].scale
    if math.isinf(rectangle.q_high):
        far = _far_along(setting)
        beyond = Rectangle(rectangle.p_low, rectangle.p_high, far, 2 * far)
        leftover, leftover_bound = _integral(setting, axis, position, beyond, SLOPE, tolerance)
        if abs(leftover) > 4 * leftover_bound:
            face = f"{AXES[axis]} = {position:g}"
            return Total(None, None, (UnboundedCause("endless", face, factor * leftover / far, 0.0),))
        rectangle = Rectangle(rectangle.p_low, rectangle.p_high, rectangle.q_low, far)
    value, bound = _integral(setting, axis, position, rectangle, SLOPE, tolerance)
    return Total(factor * value, abs(factor) * bound)


def _far_along(setting: Setting) -> float:
    """A distance along an endless bar beyond which the field shows nothing of its end, in the caller's unit."""
    knots = [part.knots(2) for part in setting.parts]
    last = max((float(knot[np.isfinite(knot)].max()) for knot in knots if knot.size), default=0.0)
    return last + 2 * time_form.CUT / math.sqrt(time_form.slowest_rate(setting.lines)) / setting.lines[2].scale


def _integral(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, order: int, tolerance: float
) -> tuple[float, float]:
    """Integral of the potential (VALUE) or its slope (SLOPE) over a rectangle, in scaled lengths, with its bound."""
    first, second = axes_along(axis)
    places: list[Places] = [Places(np.array([position]), order)] * 3  # type: ignore[arg-type]
    places[first] = Places(np.array([rectangle.p_low]), PRIMITIVE, np.array([rectangle.p_high]))
    places[second] = Places(np.array([rectangle.q_low]), PRIMITIVE, np.array([rectangle.q_high]))
    step, rows = step_for(setting, HEADROOM * tolerance), kept_rows()
    value = bound = 0.0
    for part in setting.parts:
        integral = time_form.integrate(setting.lines, part, places, step, rows)
        value += float(time_form.at_points(integral)[0])
        bound += float(time_form.bound_at_points(integral)[0])
    return value, bound


def _inside(body: Body, axis: int, rectangle: Rectangle | None) -> Rectangle:
    whole = whole_face(body, axis)
    if rectangle is None:
        return whole
    fits = (
        0 <= rectangle.p_low < rectangle.p_high <= whole.p_high
        and 0 <= rectangle.q_low < rectangle.q_high <= whole.q_high
    )
    if not fits:
        raise OutsideBody(
            f"The rectangle from ({rectangle.p_low:g}, {rectangle.q_low:g}) to ({rectangle.p_high:g}, "
            f"{rectangle.q_high:g}) has to have a positive extent and lie within (0, 0) to ({whole.p_high:g}, "
            f"{whole.q_high:g}).",
            ("rectangle",),
        )
    return rectangle


def _end(body: Body, face: Face) -> float:
    return body.size[axis_of(face)] if is_high(face) else 0.0


def _far_inflow(condition: Inflow, rectangle: Rectangle) -> float:
    first = condition.inflow.first.integrals(np.array([rectangle.p_low]), np.array([rectangle.p_high]))[0]
    return float(first @ condition.inflow.second.right[-1])


def _negated(total: Total) -> Total:
    return Total(
        None if total.value is None else -total.value,
        total.error_bound,
        total.causes,
        None if total.with_gap is None else Bounded(-total.with_gap.value, total.with_gap.error_bound),
    )
