"""The range of the potential that accuracies refer to."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from service.core import field, time_error, time_form
from service.core.conditions import Film, Held, Inflow, map_of
from service.core.endless import neighbourhood
from service.core.faces import Face, axes_along, axis_of, is_high
from service.core.lines.line import VALUE, Line
from service.core.lines.places import Places
from service.core.maps import FaceMap
from service.core.problem import Body
from service.core.split import SOURCES, Part

FloatArray = NDArray[np.float64]

# Places along an axis at which the rise is read, and strongest boxes and patches at which it is read as well.
PLACES, HOT_PLACES = 5, 8


def span_of(body: Body, lines: tuple[Line, Line, Line], parts: tuple[Part, ...]) -> float:
    """Range of held values and ambients, or what inflows and sources raise, whichever is larger.

    The rise is read off a few places of the body (its ends, its middle, the middles of patches and boxes), to the two
    digits that a scale needs.
    """
    maps = [map_of(condition) for condition in body.faces.values() if isinstance(condition, Held | Film)]
    levels = [level for face_map in maps if face_map is not None for level in (face_map.lowest, face_map.highest)]
    flows = [part for part in parts if part.cause == SOURCES or isinstance(body.faces[part.cause], Inflow)]  # type: ignore[index]
    raised = rises(body, lines, flows)
    return max(
        max(levels) - min(levels) if levels else 0.0,
        float(max(raised.max(), 0.0) - min(raised.min(), 0.0)),
    )


def rises(body: Body, lines: tuple[Line, Line, Line], parts: Sequence[Part]) -> FloatArray:
    """What parts raise at a few places of a body: its ends, its middle, the middles of patches and boxes."""
    if not parts:
        return np.zeros(1)
    grid = [Places(_coordinates(lines, parts, axis), VALUE) for axis in range(3)]
    hot = _strongest(body, lines)
    points = [Places(hot[:, axis], VALUE) for axis in range(3)]
    rows, step = field.kept_rows(), time_error.COARSEST_STEP
    on_grid = sum(
        (time_form.on_grid(time_form.integrate(lines, part, grid, step, rows)) for part in parts), start=np.zeros(())
    )
    if not len(hot):
        return np.asarray(on_grid).ravel()
    at_points = sum(
        (time_form.at_points(time_form.integrate(lines, part, points, step, rows)) for part in parts),
        start=np.zeros(()),
    )
    return np.concatenate([on_grid.ravel(), at_points])


def _strongest(body: Body, lines: tuple[Line, Line, Line]) -> FloatArray:
    """The middles of the boxes, patches and readings that raise most where there are many, by their data and size.

    A box raises the potential by about its density times the square of its least size, a patch by its inflow times it.
    """
    found = []
    limits = np.array([neighbourhood(lines, axis) for axis in range(3)]).T
    if len(body.generating) > 1:
        for source in body.generating:
            low, high = np.maximum(source.low, limits[0]), np.minimum(source.high, limits[1])
            found.append((abs(source.density) * float((high - low).min()) ** 2, 0.5 * (low + high)))
    for face, condition in body.faces.items():
        if isinstance(condition, Inflow) and condition.inflow.table.size > 9:
            found.extend(_strongest_cells(body, face, condition.inflow, limits))
    found.sort(key=lambda entry: -entry[0])
    return np.array([place for _, place in found[:HOT_PLACES]]).reshape(-1, 3)


def _strongest_cells(body: Body, face: Face, face_map: FaceMap, limits: FloatArray) -> list[tuple[float, FloatArray]]:
    first, second = axes_along(face)
    at, sizes = [], []
    for axis, places in ((first, face_map.first_places), (second, face_map.second_places)):
        ends = np.clip(places, limits[0, axis], limits[1, axis])
        widths = np.diff(ends)
        at.append(ends if face_map.bilinear else 0.5 * (ends[1:] + ends[:-1]))
        sizes.append(
            np.minimum(np.append(widths, widths[-1]), np.append(widths[0], widths)) if face_map.bilinear else widths
        )
    strength = np.abs(face_map.table) * np.minimum(sizes[0][:, None], sizes[1])
    cells = []
    for index in np.argsort(-strength, axis=None, kind="stable")[:HOT_PLACES]:
        i, j = np.unravel_index(int(index), strength.shape)
        place = np.zeros(3)
        place[first], place[second] = at[0][i], at[1][j]
        place[axis_of(face)] = body.size[axis_of(face)] if is_high(face) else 0.0
        cells.append((float(strength[i, j]), place))
    return cells


def _coordinates(lines: tuple[Line, Line, Line], flows: Sequence[Part], axis: int) -> FloatArray:
    low, high = neighbourhood(lines, axis)
    places = [low, 0.5 * (low + high), high]
    for part in flows:
        knots = part.knots(axis)
        if knots.size > 2:
            middle = 0.5 * (knots[1:] + knots[:-1])
            places.extend(middle[np.isfinite(middle)])
    unique = np.unique(places)
    return unique[np.unique(np.linspace(0, unique.size - 1, min(unique.size, PLACES)).round().astype(int))]
