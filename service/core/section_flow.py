"""Flow through a rectangle of a face or a section, followed to the far field where it has no end."""

from __future__ import annotations

from itertools import pairwise

from service.core import map_error
from service.core.bounded import Total
from service.core.endless import cut_off, endless_sides, far_setting, with_interval
from service.core.faces import AXES, axes_along
from service.core.field import Setting, far_along
from service.core.lines.line import SLOPE
from service.core.maps import Rectangle
from service.core.problem import Body
from service.core.sections import integral
from service.core.unbounded import UnboundedCause

# What a flow per length far along has to exceed to go on without end, in terms of its bound.
FAR_BOUNDS = 4.0


def flow_through(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, sign: float, tolerance: float
) -> Total:
    """sign times the flow along an axis through a rectangle of a plane; endless ones are followed to the far field."""
    for index, high in endless_sides(rectangle):
        far = far_setting(setting, axes_along(axis)[index], high=high)
        per_length = flow_through(far, axis, position, with_interval(rectangle, index, 0.0, 1.0), sign, tolerance)
        cause = why_endless(per_length, _section_name(setting.body, axis, position))
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
    value, bound = integral(setting, axis, position, rectangle, SLOPE, tolerance)
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
            found, error = integral(setting, axis, position, piece, SLOPE, tolerance)
            value, bound = value + share * found, bound + abs(share) * error
    return Total(value, bound + _of_maps(setting, axis, position, rectangle))


def why_endless(per_length: Total, name: str) -> UnboundedCause | None:
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
