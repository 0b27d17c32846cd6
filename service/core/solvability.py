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
                "The sides of the bar are insulated or have a given inflow, and the inflow and generation per length "
                "come to {amount} far along the bar; it has to come to zero there.",
                endless,
                ("faces",),
                per_length=True,
            )
    elif any(isinstance(body.faces[face], Held | Film) for face in ("z_low", "z_high")):
        return
    if level_is_pinned(body):
        total, size = total_given(body)
        if abs(total) > BALANCED * size:
            raise NoSteadyState(
                "Every face is insulated or has a given inflow, and the inflows and the generation add up to "
                "{amount}; they have to add up to zero, or one face has to be held or get a film.",
                total,
                ("faces",),
            )


def map_integral(face_map: FaceMap, low: tuple[float, float], high: tuple[float, float]) -> tuple[float, float]:
    """Integral of a map over a bounded rectangle of its face, and the sum of the sizes of its products."""
    first = face_map.first.integrals(np.array([low[0]]), np.array([high[0]]))
    second = face_map.second.integrals(np.array([low[1]]), np.array([high[1]]))
    return float((first * second).sum()), float(np.abs(first * second).sum())


def given_inflows(body: Body, face: Face) -> list[float]:
    """Given inflow of a face, stretch by stretch between its knots; empty for other conditions.

    On the side of an endless bar it is counted from what it comes to far away.
    """
    condition = body.faces[face]
    if not isinstance(condition, Inflow):
        return []
    first, second = axes_along(face)
    face_map = condition.inflow
    widths = np.diff(np.minimum(face_map.first_knots, body.size[first]))
    heights = np.diff(np.minimum(face_map.second_knots, body.size[second]))
    cells = face_map.table
    if face_map.bilinear:
        cells = 0.25 * (cells[1:, 1:] + cells[1:, :-1] + cells[:-1, 1:] + cells[:-1, :-1])
    if math.isinf(body.size[second]):
        # What goes on for ever cancels between the sides, which has been checked; the rest counts.
        cells, heights = (cells - cells[:, -1:])[:, :-1], heights[:-1]
    return [float(flow) for flow in (cells * widths[:, None] * heights).ravel()]


def generation(body: Body) -> float:
    """Total generated in the body."""
    return math.fsum(
        source.density * math.prod(high - low for low, high in zip(source.low, source.high, strict=True))
        for source in body.generating
        if source.density != 0.0
    )


def total_given(body: Body) -> tuple[float, float]:
    """Sum of all given inflows and generation, and the sum of their sizes."""
    flows = [flow for face in body.present_faces for flow in given_inflows(body, face)]
    for source in body.generating:
        section = source.density * (source.high[0] - source.low[0]) * (source.high[1] - source.low[1])
        # A source without end is counted from what it is far away, like an inflow.
        flows.append(section * (-source.low[2] if source.high[2] == math.inf else source.high[2] - source.low[2]))
    return math.fsum(flows), math.fsum(map(abs, flows))


def _far_inflows(face_map: FaceMap, across: float) -> list[float]:
    """Inflow per length far along the bar, stretch by stretch across a side."""
    widths = np.diff(np.minimum(face_map.first_knots, across))
    far = face_map.table[:, -1]
    if face_map.bilinear:
        far = 0.5 * (far[1:] + far[:-1])
    return [float(flow) for flow in widths * far]


def _flow_per_length_far_away(body: Body) -> tuple[float, float]:
    flows = []
    for face in ("x_low", "x_high", "y_low", "y_high"):
        condition = body.faces[face]
        if isinstance(condition, Inflow):
            across = body.size[axes_along(face)[0]]
            flows.extend(_far_inflows(condition.inflow, across))
    flows.extend(
        source.density * (source.high[0] - source.low[0]) * (source.high[1] - source.low[1])
        for source in body.generating
        if source.high[2] == math.inf
    )
    return math.fsum(flows), math.fsum(map(abs, flows))
