"""Faces and sections of a body as rectangles, and the field integrated over rectangles of them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core import time_error, time_form
from service.core.errors import OutsideBody
from service.core.faces import axes_along
from service.core.field import Setting, kept_rows, step_for
from service.core.lines.line import PRIMITIVE
from service.core.lines.places import Places
from service.core.maps import Rectangle
from service.core.problem import Body

FloatArray = NDArray[np.float64]

# Totals are computed with an error factor this much below the field's: their bound is in flow, not in potential.
HEADROOM = 1e-3


def whole_face(body: Body, axis: int) -> Rectangle:
    """The rectangle of a whole face or section square to an axis."""
    first, second = axes_along(axis)
    return Rectangle(body.begins[first], body.size[first], body.begins[second], body.size[second])


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


def integral(
    setting: Setting, axis: int, position: float, rectangle: Rectangle, order: int, tolerance: float
) -> tuple[float, float]:
    """Integral of the potential (VALUE) or its slope (SLOPE) over a rectangle, in scaled lengths, with its bound."""
    values, bounds = integrals(setting, axis, position, [rectangle], order, tolerance)
    return float(values[0]), float(bounds[0])


def integrals(
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
        summed = time_form.integrate(setting.lines, part, places, step, rows)
        values = values + time_form.at_points(summed)
        bounds = bounds + time_error.bound_at_points(summed)
    return values, bounds
