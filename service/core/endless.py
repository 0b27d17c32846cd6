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
from service.core.faces import axes_along
from service.core.field import Setting, far_along
from service.core.lines.line import Drive, Line
from service.core.maps import Rectangle
from service.core.profiles import Profiles
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
    """A rectangle of a plane square to an axis that holds all the flow through one without end.

    It stays endless where nothing drives the body far along. None where the flow has no limit however slowly it grows,
    though it comes to nothing per length.
    """
    sides = endless_sides(rectangle)
    if not time_range.has_decay(setting.lines):
        return rectangle if all(_adds_up(setting.lines, part, axis, sides) for part in setting.parts) else None
    for index, high in sides:
        along = axes_along(axis)[index]
        if time_range.is_undying(setting.lines) or far_setting(setting, along, high=high).parts:
            low, top = [(rectangle.p_low, rectangle.p_high), (rectangle.q_low, rectangle.q_high)][index]
            far = far_along(setting, along, high=high)
            rectangle = with_interval(rectangle, index, *((low, far) if high else (far, top)))
    return rectangle


def _adds_up(lines: Sequence[Line], part: Part, axis: int, sides: Sequence[Side]) -> bool:
    """Whether a part's flow along an axis through an endless rectangle falls fast enough with time to have a total.

    Each line leaves a power of t; their product has to fall faster than 1 / t.
    """
    endless = {axes_along(axis)[index] for index, _ in sides}
    powers = [
        _power(line, drive, slope=number == axis, throughout=number in endless)
        for number, (line, drive) in enumerate(zip(lines, part.drives, strict=True))
    ]
    return sum(powers) > 1.0


def _power(line: Line, drive: Drive, *, slope: bool, throughout: bool) -> float:
    """p of the t^(-p) that a line's answer falls with: its value or slope, or its integral throughout."""
    if not line.is_endless:
        return 0.0
    takes_up = line.film_low > 0.0
    goes_on = isinstance(drive, Profiles) and bool(drive.left[0].any() or drive.right[-1].any())
    power = 0.5 if goes_on == takes_up else 1.5 if takes_up else 0.0
    if slope and not takes_up:
        return power + (0.5 if goes_on else 1.0)
    if throughout:
        return power - (1.0 if takes_up else 0.5)
    return power
