"""Where a search for the highest or lowest potential in a region looks first.

On a grid that follows the data of the body, on the faces whose data do not show on it, and in boxes of generation. What
is highest in a part of the body without generation is on the border of that part (maximum principle), so where the grid
leaves out places that data show at, the border is looked at more closely.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from service.core import field
from service.core.climbing import FIRST_ACCURACY, STARTS, Start
from service.core.conditions import Held, map_of
from service.core.endless import neighbourhood
from service.core.faces import Face, axes_along, axis_of
from service.core.field import Setting
from service.core.held_peaks import drives_beyond, extreme_held_within
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.region import Region
from service.core.time_range import widest

FloatArray = NDArray[np.float64]

# Places along an axis of the first grid through a region at the most.
FIRST_PLACES = 25

# Places along an axis of a grid on a face or the border of a region at the most; beyond it only the readings of a face
# or the middles of its cells are looked at.
MOST_FACE_PLACES = 100

# Places spread along an axis of a region, and along one of a region that is flat.
SPREAD, SPREAD_OF_FLAT = 13, 25

# Places beside an edge, in parts of the distance to the next place of a first grid.
BESIDE = np.geomspace(1e-8, 1.0, 17)

# Places far along an endless axis, in parts of the width of the body or its data.
BEYOND = np.geomspace(0.02, 20.0, 11)


def first_grids(setting: Setting, region: Region) -> list[list[FloatArray]]:
    """The axes of each first grid of a region."""
    body = setting.body
    everywhere = [places_along(setting, region, axis) for axis in range(3)]
    on_faces = [
        (_on_face(body, face, face_map, everywhere), face)
        for face, condition in body.faces.items()
        if (face_map := map_of(condition)) is not None
        and not (isinstance(condition, Held) or face_map.is_uniform)
        and region.touches(axis_of(face), body.end_of(face))
    ]
    if region.is_flat:
        # A flat region is a grid by itself, with all the data of the face it may lie on.
        on_it = [grid for grid, face in on_faces if region.lies_on(body, face)]
        return on_it[:1] or [[thinned(places, MOST_FACE_PLACES) for places in everywhere]]
    through = [thinned(places) for places in everywhere]
    grids = [through, *(grid for grid, _ in on_faces)]
    if all(some.size == places.size for some, places in zip(through, everywhere, strict=True)):
        return grids
    return grids + _on_border(body, region, everywhere)


def _on_border(body: Body, region: Region, everywhere: list[FloatArray]) -> list[list[FloatArray]]:
    """Grids on the sides of a region that are not faces of the body."""
    grids = []
    for axis in range(3):
        for end in region.along(axis):
            if math.isfinite(end) and body.face_at(axis, end) is None:
                axes = [thinned(places, MOST_FACE_PLACES) for places in everywhere]
                axes[axis] = np.array([end])
                grids.append(axes)
    return grids


def _on_face(body: Body, face: Face, face_map: FaceMap, everywhere: list[FloatArray]) -> list[FloatArray]:
    """A grid on a face where its data show."""
    axes = [np.array([body.end_of(face)])] * 3
    for other, knots in zip(axes_along(face), (face_map.first_knots, face_map.second_knots), strict=True):
        axes[other] = _data_places(everywhere[other], knots, face_map.bilinear)
    return axes


def grids_at_held_edges(setting: Setting, region: Region, level: float, sign: float) -> list[list[FloatArray]]:
    """Grids on faces that drive the potential beyond a level, next to edges with faces held at that level or beyond.

    There the slope along the driving face grows as the logarithm of the distance from the edge, so that the field goes
    beyond what is held however near to the edge the peak is.
    """
    body = setting.body
    everywhere = [places_along(setting, region, axis) for axis in range(3)]
    grids = []
    for face, condition in body.faces.items():
        axis = axis_of(face)
        if not drives_beyond(condition, level, sign) or not region.touches(axis, body.end_of(face)):
            continue
        for other in body.present_faces:
            across = axis_of(other)
            if across == axis or everywhere[across].size == 1 or not region.touches(across, body.end_of(other)):
                continue
            edge = region.flattened(axis, body.end_of(face)).flattened(across, body.end_of(other))
            held = extreme_held_within(body, edge, sign) if isinstance(body.faces[other], Held) else None
            if held is not None and sign * held.value >= level:
                axes = [thinned(places) for places in everywhere]
                axes[axis] = np.array([body.end_of(face)])
                axes[across] = _beside(everywhere[across], body.end_of(other))
                grids.append(axes)
    return grids


def _beside(places: FloatArray, end: float) -> FloatArray:
    """Places that come near to an end of an axis."""
    away = np.abs(places - end)
    reach = float(away[away > 0].min())
    beside = end + (reach if end == places[0] else -reach) * BESIDE
    return np.unique(np.concatenate([[end], beside, places[np.argsort(away, kind="stable")[:3]]]))


def _data_places(places: FloatArray, knots: FloatArray, bilinear: bool) -> FloatArray:
    """Where a face's data show along an axis: everything if that is little, else its readings or its cells' middles,
    and some of everything.
    """
    if places.size <= MOST_FACE_PLACES:
        return places
    knots = knots[np.isfinite(knots)]
    shown = knots if bilinear else 0.5 * (knots[1:] + knots[:-1])
    inside = (shown > places[0]) & (shown < places[-1])
    return np.unique(np.concatenate([thinned(places), shown[inside]]))


def places_along(setting: Setting, region: Region, axis: int) -> FloatArray:
    """Places of a region along an axis: its ends, where data begin, end or have their middle, and a spread."""
    low, high = region.along(axis)
    if low == high:
        return np.array([low])
    places = [_spread(setting, region, axis)]
    if axis == 2:
        # Behind a contact the potential steps.
        interfaces = np.array(setting.body.interfaces)
        places += [interfaces, np.nextafter(interfaces, math.inf)]
    for part in setting.parts:
        knots = part.knots(axis)
        knots = knots[np.isfinite(knots)]
        places += [knots, 0.5 * (knots[1:] + knots[:-1])]
    unique = np.unique(np.concatenate(places))
    return unique[(unique >= low) & (unique <= high)]


def _spread(setting: Setting, region: Region, axis: int) -> FloatArray:
    """Places all along: even through the body, closer at the ends of a part of it, widening along an endless axis."""
    low, high = region.along(axis)
    line = setting.lines[axis]
    if math.isfinite(low) and math.isfinite(high):
        parts = np.linspace(0.0, 1.0, SPREAD_OF_FLAT if region.is_flat else SPREAD)
        # Closer at the ends of a part of the body, where its extremes are.
        within = parts if region.is_whole(setting.body, axis) else 0.5 - 0.5 * np.cos(math.pi * parts)
        return np.append(low + (high - low) * within[:-1], high)
    beyond = widest(setting.lines) / line.scale * BEYOND
    if math.isfinite(low):
        return np.concatenate([[low], low + beyond])
    if math.isfinite(high):
        return np.concatenate([high - beyond, [high]])
    return np.concatenate([line.data[0] - beyond, line.data, line.data[1] + beyond])


def thinned(places: FloatArray, most: int = FIRST_PLACES) -> FloatArray:
    """Places evenly chosen from those that are too many."""
    if places.size <= most:
        return places
    return places[np.unique(np.linspace(0, places.size - 1, most).round().astype(int))]


def from_boxes(setting: Setting, region: Region, sign: float) -> list[Start]:
    """The middles of the boxes of generation as far as they are in a region, with half their size to climb in."""
    boxes = [box for box in setting.body.generating if sign * box.density > 0]
    if not boxes:
        return []
    ends = np.array([neighbourhood(setting.lines, axis) for axis in range(3)]).T
    bottom, top = (np.clip(corner, *ends) for corner in (region.low, region.high))
    low, high = (np.clip([getattr(box, end) for box in boxes], *ends) for end in ("low", "high"))
    reached = ((low <= top) & (high >= bottom)).all(axis=1)
    low, high = np.maximum(low, bottom)[reached], np.minimum(high, top)[reached]
    if not len(low):
        return []
    middles, halves = 0.5 * (low + high), 0.5 * (high - low)
    rough = field.at_points(setting, middles, tolerance=FIRST_ACCURACY * setting.span, with_flux=False)
    limits = tuple(zip(region.low, region.high, strict=True))
    order = np.argsort(-sign * rough.potential, kind="stable")[:STARTS]
    return [
        Start(
            (float(middles[i, 0]), float(middles[i, 1]), float(middles[i, 2])),
            float(sign * rough.potential[i]),
            setting.span,
            (float(halves[i, 0]), float(halves[i, 1]), float(halves[i, 2])),
            limits,
        )
        for i in order
    ]
