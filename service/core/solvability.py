"""Whether a body has a steady field, and whether its level is fixed by the data."""

from __future__ import annotations

import math

import numpy as np

from service.core.errors import NoSteadyState
from service.core.maps import FaceMap
from service.core.problem import Body, Face, Film, Held, Inflow, axes_along, axis_of

# Flows given in decimal that cancel exactly on paper leave this part of their size at most.
BALANCED = 1e-12


def level_is_pinned(body: Body) -> bool:
    """Whether no face fixes the level, so that the field is counted from its own mean (or its far value in a bar)."""
    return not any(isinstance(condition, Held | Film) for condition in body.faces.values())


def check_steady_state(body: Body) -> None:
    """Raise NoSteadyState where flows are given that nothing can carry away.

    A body whose faces are all insulated or have a given inflow needs a total of zero. A bar with insulated sides
    cannot carry any generation or inflow that goes on without end.
    """
    sides_fix = any(isinstance(body.faces[face], Held | Film) for face in body.faces if axis_of(face) != 2)
    if sides_fix:
        return
    if math.isinf(body.size[2]):
        endless, size = _flow_per_length_far_away(body)
        if abs(endless) > BALANCED * size:
            raise NoSteadyState(
                f"The sides of the bar are insulated or have a given inflow, and the inflow and generation per length "
                f"come to {endless:.6g} far along the bar; it has to come to zero there.",
                endless,
                ("faces",),
            )
    elif any(isinstance(body.faces[face], Held | Film) for face in ("z_low", "z_high")):
        return
    if level_is_pinned(body):
        total, size = total_given(body)
        if abs(total) > BALANCED * size:
            raise NoSteadyState(
                f"Every face is insulated or has a given inflow, and the inflows and the generation add up to "
                f"{total:.6g}; they have to add up to zero, or one face has to be held or get a film.",
                total,
                ("faces",),
            )


def map_integral(face_map: FaceMap, low: tuple[float, float], high: tuple[float, float]) -> float:
    """Integral of a map over a rectangle of its face."""
    first = face_map.first.integrals(np.array([low[0]]), np.array([high[0]]))
    second = face_map.second.integrals(np.array([low[1]]), np.array([high[1]]))
    return float(np.nansum(first * second))


def given_inflow(body: Body, face: Face) -> float:
    """Total of the given inflow of a face; zero for other conditions."""
    condition = body.faces[face]
    if not isinstance(condition, Inflow):
        return 0.0
    first, second = axes_along(face)
    return map_integral(condition.inflow, (0.0, 0.0), (body.size[first], body.size[second]))


def generation(body: Body) -> float:
    """Total generated in the body."""
    return math.fsum(
        source.density * math.prod(high - low for low, high in zip(source.low, source.high, strict=True))
        for source in body.sources
        if source.density != 0.0
    )


def total_given(body: Body) -> tuple[float, float]:
    """Sum of all given inflows and generation, and the sum of their sizes."""
    flows = [given_inflow(body, face) for face in body.present_faces]
    sizes = [
        source.density * math.prod(high - low for low, high in zip(source.low, source.high, strict=True))
        for source in body.sources
        if source.density != 0.0
    ]
    return math.fsum(flows + sizes), math.fsum(map(abs, flows + sizes))


def _flow_per_length_far_away(body: Body) -> tuple[float, float]:
    flows = []
    for face in ("x_low", "x_high", "y_low", "y_high"):
        condition = body.faces[face]
        if isinstance(condition, Inflow):
            across = body.size[axes_along(face)[0]]
            along = condition.inflow.first.integrals(np.zeros(1), np.array([across]))[0]
            flows.append(float(along @ condition.inflow.second.right[-1]))
    for source in body.sources:
        if source.high[2] == math.inf:
            flows.append(
                source.density * (source.high[0] - source.low[0]) * (source.high[1] - source.low[1])
            )
    return math.fsum(flows), math.fsum(map(abs, flows))
