"""The hottest and the coldest place of a body with mixed faces, and of parts of it."""

from __future__ import annotations

from dataclasses import replace

from service.core.bounded import Bounded
from service.core.climbing import Place
from service.core.faces import axes_along, axis_of
from service.core.field import KeepGoing
from service.core.held_peaks import extreme_held_within, may_exceed
from service.core.mixed_levels import Levels
from service.core.mixed_refinement import SHARE
from service.core.region import Region


def extreme(levels: Levels, region: Region, sign: float, tolerance: float, keep_going: KeepGoing | None) -> Place:
    """The hottest place of a region, or the coldest where the sign is -1."""
    best = _best_held(levels, region, sign)
    everywhere = _best_held(levels, Region.whole(levels.body), sign)
    if best is not None and everywhere is not None:
        is_best = sign * best.value >= sign * everywhere.value
        if _is_on_held_pad(levels, region) or (is_best and not _may_exceed(levels, sign * best.value, sign)):
            return best
    fine, middle = (
        (solution.highest_within if sign > 0 else solution.lowest_within)(
            region.low, region.high, tolerance=SHARE * tolerance, keep_going=keep_going
        )
        for solution in levels.here.solutions[:2]
    )
    error = fine.error_bound + middle.error_bound + abs(fine.value - middle.value)
    if best is None or sign * fine.value > sign * best.value + error:
        known = levels.limited(Bounded(fine.value, error))
        return replace(fine, value=known.value, error_bound=known.error_bound)
    # The two cannot be told apart, or the held one is the higher.
    return replace(best, error_bound=best.error_bound + max(sign * (fine.value - best.value), 0.0) + error)


def _best_held(levels: Levels, region: Region, sign: float) -> Place | None:
    """The highest (lowest) of what is held in a region: pads of mixed faces, and whole faces."""
    pads = (_held_place(levels, number, region) for number, spot in enumerate(levels.base.spots) if spot.is_held)
    held = [place for place in (*pads, extreme_held_within(levels.base.body, region, sign)) if place is not None]
    if not held:
        return None
    best = max(held, key=lambda place: sign * place.value)
    # Of levels that are found another one may be the highest.
    highest = max(sign * place.value + place.error_bound for place in held)
    return replace(best, error_bound=max(best.error_bound, highest - sign * best.value))


def _may_exceed(levels: Levels, level: float, sign: float) -> bool:
    """Whether an inflow, a source or an ambient could lift the potential above a level (below, for sign -1)."""
    films = [spot.level for spot in levels.base.spots if not spot.is_held and spot.level is not None]
    return any(sign * ambient > level for ambient in films) or may_exceed(levels.base.body, level, sign)


def _is_on_held_pad(levels: Levels, region: Region) -> bool:
    """Whether all of a region lies on one held pad."""
    return any(
        region.lies_on(levels.body, face) and levels.held_spot_around(face, region.section(axis_of(face))) is not None
        for face in levels.base.faces
    )


def _held_place(levels: Levels, number: int, region: Region) -> Place | None:
    """The middle of the part of a held spot that lies in a region, with its level; None if no part of it does."""
    spot, level = levels.base.spots[number], levels.of(number)
    axis = axis_of(spot.face)
    if not region.touches(axis, levels.body.end_of(spot.face)):
        return None
    place = [0.0, 0.0, 0.0]
    place[axis] = levels.body.end_of(spot.face)
    sides = ((spot.where.p_low, spot.where.p_high), (spot.where.q_low, spot.where.q_high))
    for other, side in zip(axes_along(spot.face), sides, strict=True):
        ends = region.along(other)
        low, high = max(ends[0], side[0]), min(ends[1], side[1])
        # A pad that a region only touches is no part of it.
        if low > high or (low == high and ends[0] < ends[1]):
            return None
        place[other] = 0.5 * (low + high)
    return Place((place[0], place[1], place[2]), level.value, level.error_bound, f"face {spot.face}")
