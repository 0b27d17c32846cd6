"""What the data of faces say of extremes: the highest held value, and whether anything could lift the field above it.

A steady field without generation has its extremes on the surface (maximum principle), and on an insulated part of it
only if nothing flows in there.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core.climbing import Place, name_of_place
from service.core.conditions import Condition, Film, Held, Inflow
from service.core.faces import Face, axes_along, axis_of
from service.core.maps import FaceMap, Peak
from service.core.problem import Body
from service.core.profiles import chebyshev_places
from service.core.region import Region

FloatArray = NDArray[np.float64]


def may_exceed(body: Body, level: float, sign: float) -> bool:
    """Whether an inflow, a source or an ambient could lift the potential above a level (below, for sign -1)."""
    drives = any(drives_beyond(condition, level, sign) for condition in body.faces.values())
    return drives or any(sign * source.density > 0 for source in body.generating)


def drives_beyond(condition: Condition, level: float, sign: float) -> bool:
    """Whether a face's inflow or ambient could lift the potential above a level (below, for sign -1)."""
    if isinstance(condition, Inflow):
        return highest_of(condition.inflow, sign) > 0
    return isinstance(condition, Film) and highest_of(condition.ambient, sign) > level


def highest_of(face_map: FaceMap, sign: float) -> float:
    """The highest of a face's data, for sign -1 the lowest turned round, with what may lie beyond it."""
    slack = 0.0 if face_map.peaks is None else face_map.peaks[1 if sign > 0 else 0].slack
    return sign * (face_map.highest if sign > 0 else face_map.lowest) + slack


def extreme_held(body: Body, sign: float) -> Place | None:
    """The highest (lowest) held value and a place where it is held."""
    return extreme_held_within(body, Region.whole(body), sign)


def extreme_held_within(body: Body, region: Region, sign: float) -> Place | None:
    """The same on the parts of faces that lie in a region, as far as their data tell.

    Of a region on a held face the data of that face alone, also where another one meets it in a jump.
    """
    best: tuple[Peak, Face] | None = None
    for face in held_faces_under(body, region) or body.present_faces:
        condition = body.faces[face]
        if not isinstance(condition, Held) or not region.touches(axis_of(face), body.end_of(face)):
            continue
        first, second = axes_along(face)
        whole = region.is_whole(body, first) and region.is_whole(body, second)
        peak = (
            _peak_of(condition.value, [body.size[first], body.size[second]], sign)
            if whole
            else _peak_within(condition.value, region.along(first), region.along(second), sign)
        )
        if peak is not None and (best is None or sign * peak.value > sign * best[0].value):
            best = peak, face
    if best is None:
        return None
    peak, face = best
    place = [0.0, 0.0, 0.0]
    place[axis_of(face)] = body.end_of(face)
    for axis, at in zip(axes_along(face), (peak.first, peak.second), strict=True):
        place[axis] = at
    found = (place[0], place[1], place[2])
    return Place(found, peak.value, peak.slack, name_of_place(body, found))


def held_faces_under(body: Body, region: Region) -> list[Face]:
    """The held faces that all of a region lies on: one, or those that meet in an edge or corner."""
    return [face for face in body.present_faces if isinstance(body.faces[face], Held) and region.lies_on(body, face)]


def _peak_of(face_map: FaceMap, lengths: Sequence[float], sign: float) -> Peak:
    """Where the data of a face are highest (lowest)."""
    if face_map.peaks is not None:
        return face_map.peaks[1 if sign > 0 else 0]
    table = sign * face_map.table
    i, j = np.unravel_index(int(table.argmax()), table.shape)
    # The places of curved data include their knots, where readings are highest and lowest under any law.
    places = [
        chebyshev_places(knots) if curved else knots
        for knots, curved in zip((face_map.first_knots, face_map.second_knots), face_map.curved, strict=True)
    ]
    first = _representative(places[0], int(i), face_map.bilinear, lengths[0])
    second = _representative(places[1], int(j), face_map.bilinear, lengths[1])
    return Peak(sign * float(table[i, j]), first, second, 0.0)


def _peak_within(
    face_map: FaceMap, first: tuple[float, float], second: tuple[float, float], sign: float
) -> Peak | None:
    """Where the data of a face are highest (lowest) in a rectangle; None where they do not tell it outright."""
    if face_map.peaks is not None:
        peak = face_map.peaks[1 if sign > 0 else 0]
        inside = first[0] <= peak.first <= first[1] and second[0] <= peak.second <= second[1]
        return peak if inside else None
    ends, all_knots = (first, second), (face_map.first_knots, face_map.second_knots)
    if face_map.bilinear or any(face_map.curved):
        # Highest at readings, and where the border of the rectangle cuts the lines through them.
        p, q = (
            np.unique([place for place in (*interval, *knots) if math.isfinite(place) and low <= place <= high])
            for knots, interval, (low, high) in zip(all_knots, ends, ends, strict=True)
        )
        table = face_map.at(p, q)
        i, j = np.unravel_index(int((sign * table).argmax()), table.shape)
        return Peak(float(table[i, j]), float(p[i]), float(q[j]), face_map.error)
    if any(low == high and low in knots[1:-1] for knots, (low, high) in zip(all_knots, ends, strict=True)):
        # A line along which cells meet belongs to none of them.
        return None
    cells = [_cells_within(knots, *interval) for knots, interval in zip(all_knots, ends, strict=True)]
    table = sign * face_map.table[cells[0], cells[1]]
    i, j = np.unravel_index(int(table.argmax()), table.shape)
    places = [
        _representative(np.clip(knots[some.start : some.stop + 1], *interval), int(number), False, interval[1])
        for knots, some, interval, number in zip(all_knots, cells, ends, (i, j), strict=True)
    ]
    return Peak(sign * float(table[i, j]), places[0], places[1], 0.0)


def _cells_within(knots: FloatArray, low: float, high: float) -> slice:
    """The cells between knots that an interval has a part of."""
    first = min(max(int(np.searchsorted(knots, low, side="right")) - 1, 0), knots.size - 2)
    return slice(first, max(int(np.searchsorted(knots, high, side="left")), first + 1))


def _representative(knots: FloatArray, index: int, bilinear: bool, length: float) -> float:
    """A reading's own place, or the middle of a cell; in a cell without an end a place off the end it has, or 0."""
    if bilinear:
        return float(knots[index + 1] if np.isneginf(knots[index]) else min(knots[index], length))
    low, high = float(knots[index]), float(min(knots[index + 1], length))
    if math.isfinite(low) and math.isfinite(high):
        return 0.5 * (low + high)
    # As far from the others' knots as these are apart.
    finite = knots[np.isfinite(knots)]
    beyond = float(np.ptp(finite)) if finite.size else 0.0
    return low + beyond if math.isfinite(low) else high - beyond if math.isfinite(high) else 0.0
