"""Means of the potential over faces and rectangles of them."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from service.core.bounded import Bounded
from service.core.endless import endless_sides
from service.core.errors import NotPhysical
from service.core.faces import Face, axes_along, axis_of
from service.core.field import Setting, points_at_once
from service.core.lines.line import VALUE
from service.core.maps import Rectangle
from service.core.sections import checked_rectangle, integrals

# Means over rectangles whose sides differ by more than this factor are had one after another: the widest of some says
# how all of them are integrated.
LIKE_SIZE = 4.0


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
        values, bounds = integrals(setting, axis, setting.body.end_of(face), some, VALUE, tolerance)
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
