"""The range of the potential that accuracies refer to."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from service.core import field, time_error, time_form
from service.core.lines.line import VALUE, Line
from service.core.lines.time_response import Places
from service.core.problem import Body, Film, Held, Inflow, map_of
from service.core.split import SOURCES, Part

FloatArray = NDArray[np.float64]

# Places along an axis at which the rise is read.
PLACES = 5


def span_of(body: Body, lines: tuple[Line, Line, Line], parts: tuple[Part, ...]) -> float:
    """Range of held values and ambients, or what inflows and sources raise, whichever is larger.

    The rise is read off a few places of the body (its ends, its middle, the middles of patches and boxes), to the two
    digits that a scale needs.
    """
    maps = [map_of(condition) for condition in body.faces.values() if isinstance(condition, Held | Film)]
    levels = [level for face_map in maps if face_map is not None for level in (face_map.lowest, face_map.highest)]
    flows = [part for part in parts if part.cause == SOURCES or isinstance(body.faces[part.cause], Inflow)]  # type: ignore[index]
    rises = _rises(lines, flows) if flows else np.zeros(1)
    return max(
        max(levels) - min(levels) if levels else 0.0,
        float(max(rises.max(), 0.0) - min(rises.min(), 0.0)),
    )


def _rises(lines: tuple[Line, Line, Line], flows: list[Part]) -> FloatArray:
    places = [Places(_coordinates(lines, flows, axis), VALUE) for axis in range(3)]
    rows = field.kept_rows()
    return sum(
        (time_form.on_grid(time_form.integrate(lines, part, places, time_error.COARSEST_STEP, rows)) for part in flows),
        start=np.zeros(()),
    )


def _coordinates(lines: tuple[Line, Line, Line], flows: list[Part], axis: int) -> FloatArray:
    line = lines[axis]
    reach = line.length
    if line.is_endless:
        reach = max(other.extent for other in lines if not other.is_endless) / line.scale
    places = [0.0, 0.5 * reach, reach]
    for part in flows:
        knots = part.knots(axis)
        if knots.size > 2:
            middle = 0.5 * (knots[1:] + knots[:-1])
            places.extend(middle[np.isfinite(middle)])
    unique = np.unique(places)
    return unique[np.unique(np.linspace(0, unique.size - 1, min(unique.size, PLACES)).round().astype(int))]
