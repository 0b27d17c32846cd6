"""What a body is like far along an endless axis, and how far that is.

Far along an axis nothing changes with it any more: what drives the body there is what its data come to, along a line
without ends. That is a body of the same kind with one dimension less.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from service.core import time_range
from service.core.field import Setting, far_along
from service.core.lines.line import Drive, Line
from service.core.maps import Profiles, Rectangle
from service.core.problem import axes_along
from service.core.split import Part

# A side of a rectangle: which of the two axes along its face or plane it bounds, and whether from above.
Side = tuple[int, bool]


def endless_sides(rectangle: Rectangle) -> list[Side]:
    """The sides along which a rectangle has no end."""
    ends = ((rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high))
    return [(index, high) for index in (0, 1) for high in (False, True) if math.isinf(ends[index][high])]


def with_interval(rectangle: Rectangle, index: int, low: float, high: float) -> Rectangle:
    """The rectangle from `low` to `high` along one of its axes."""
    if index == 0:
        return replace(rectangle, p_low=low, p_high=high)
    return replace(rectangle, q_low=low, q_high=high)


def far_profiles(profiles: Profiles, *, high: bool) -> Profiles | None:
    """What profiles come to far along their line, all along one without ends; None where that is nothing."""
    far = profiles.right[-1:] if high else profiles.left[:1]
    return Profiles(np.array([-math.inf, math.inf]), far.copy(), far.copy()) if far.any() else None


def far_setting(setting: Setting, axis: int, *, high: bool) -> Setting:
    """What a field is computed from far along an endless axis, where it is the same all along."""
    lines = list(setting.lines)
    lines[axis] = Line(math.inf, lines[axis].scale, 0.0, 0.0, -math.inf)
    parts = [far for part in setting.parts if (far := _far_part(part, axis, high=high)) is not None]
    return replace(setting, lines=(lines[0], lines[1], lines[2]), parts=tuple(parts))


def _far_part(part: Part, axis: int, *, high: bool) -> Part | None:
    drives: list[Drive] = list(part.drives)
    drive = drives[axis]
    far = far_profiles(drive, high=high) if isinstance(drive, Profiles) else None
    if far is None:
        return None
    drives[axis] = far
    return replace(part, drives=(drives[0], drives[1], drives[2]))


def neighbourhood(lines: Sequence[Line], axis: int) -> tuple[float, float]:
    """The whole of a finite axis; along an endless one as far beyond the data as the body or its data are wide."""
    line = lines[axis]
    low, high = line.stretch
    if not line.is_endless:
        return low, high
    beyond = time_range.widest(lines) / line.scale
    return max(low - beyond, line.begins), high + beyond


def cut_off(setting: Setting, axis: int, rectangle: Rectangle) -> Rectangle | None:
    """A rectangle of a plane square to an axis that holds all the flow through one without end, where none goes on.

    Endless itself where nothing drives the body there; None where what drives it goes on and cancels, and does so only
    slowly with the distance.
    """
    for index, high in endless_sides(rectangle):
        along = axes_along(axis)[index]
        goes_on = bool(far_setting(setting, along, high=high).parts)
        if not time_range.has_decay(setting.lines):
            if goes_on:
                return None
            continue
        if goes_on or time_range.is_undying(setting.lines):
            ends = [(rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)][index]
            far = far_along(setting, along, high=high)
            rectangle = with_interval(rectangle, index, *((ends[0], far) if high else (far, ends[1])))
    return rectangle
