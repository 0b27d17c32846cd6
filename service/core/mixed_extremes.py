"""The hottest and the coldest place of a body with mixed faces, and of parts of its faces."""

from __future__ import annotations

from dataclasses import replace

from service.core import extremes
from service.core.extremes import Place
from service.core.faces import Face, axes_along, axis_of
from service.core.field import KeepGoing
from service.core.maps import Rectangle
from service.core.mixed_levels import Levels
from service.core.mixed_refinement import SHARE
from service.core.totals import Bounded


def extreme(levels: Levels, sign: float, tolerance: float, keep_going: KeepGoing | None) -> Place:
    """The hottest place of the closed body, or the coldest where the sign is -1."""
    held = [_held_place(levels, number) for number, spot in enumerate(levels.base.spots) if spot.is_held]
    on_face = extremes.extreme_held(levels.base.body, sign)
    best = max([*held, *([on_face] if on_face else [])], key=lambda place: sign * place.value, default=None)
    films = [spot.level for spot in levels.base.spots if not spot.is_held and spot.level is not None]
    exceeds = best is not None and any(sign * ambient > sign * best.value for ambient in films)
    if best is not None and not exceeds and not extremes.may_exceed(levels.base.body, sign * best.value, sign):
        return best
    found = [
        solution.extremes(tolerance=SHARE * tolerance, keep_going=keep_going) for solution in levels.here.solutions[:2]
    ]
    fine, middle = (both.hottest if sign > 0 else both.coldest for both in found)
    error = fine.error_bound + middle.error_bound + abs(fine.value - middle.value)
    if best is None or sign * fine.value > sign * best.value + error:
        return replace(fine, error_bound=error)
    # The two cannot be told apart, or the held one is the higher.
    return replace(best, error_bound=best.error_bound + max(sign * (fine.value - best.value), 0.0) + error)


def peak(
    levels: Levels, face: Face, rectangle: Rectangle | None, tolerance: float, keep_going: KeepGoing | None
) -> Place:
    """The highest potential on a face or a rectangle of it."""
    number = levels.held_spot_around(face, rectangle)
    if number is not None:
        return _held_place(levels, number)
    fine, middle = (
        solution.peak(face, rectangle, tolerance=SHARE * tolerance, keep_going=keep_going)
        for solution in levels.here.solutions[:2]
    )
    error = fine.error_bound + middle.error_bound + abs(fine.value - middle.value)
    known = levels.limited(Bounded(fine.value, error))
    return replace(fine, value=known.value, error_bound=known.error_bound)


def _held_place(levels: Levels, number: int) -> Place:
    spot, level = levels.base.spots[number], levels.of(number)
    place = [0.0, 0.0, 0.0]
    first, second = axes_along(spot.face)
    place[axis_of(spot.face)] = levels.body.end_of(spot.face)
    place[first] = 0.5 * (spot.where.p_low + spot.where.p_high)
    place[second] = 0.5 * (spot.where.q_low + spot.where.q_high)
    return Place((place[0], place[1], place[2]), level.value, level.error_bound, f"face {spot.face}")
