"""Whether a body has a steady field, and whether its level is fixed by the data.

A flow that is given decays as a power of time where no finite line loses anything: t^(-1/2) for each endless axis it is
bounded along, t^(-3/2) where that axis is held or has a film at its end, and not at all along an axis where it goes on
for ever. Its field is the integral over time, and so it exists by itself where these powers come to more than 1. Where
they come to 1, the flow spreads in two dimensions and its field grows as the logarithm of time; it exists if the flows
of that kind add up to zero.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.conditions import Film, Held, Inflow
from service.core.errors import NoSteadyState
from service.core.faces import AXES, Face, axes_along, axis_of
from service.core.maps import FaceMap
from service.core.problem import Body

FloatArray = NDArray[np.float64]

# Flows given in decimal that cancel exactly on paper leave this part of their size at most.
BALANCED = 1e-12


def level_is_pinned(body: Body) -> bool:
    """Whether no face fixes the level, so that the field is counted from its own mean, or from its value far away where
    an axis has no end.
    """
    return not any(isinstance(condition, Held | Film) for condition in body.faces.values())


def check_steady_state(body: Body) -> None:
    """Raise NoSteadyState where flows are given that nothing can carry away.

    A body whose faces are all insulated or have a given inflow needs a total of zero if it is closed or endless along
    one axis or two. A flow that goes on without end along an axis has to be carried away there.
    """
    if any(_takes_up(body, face) and math.isfinite(body.size[axis_of(face)]) for face in body.faces):
        return
    endless = [axis for axis in range(3) if math.isinf(body.size[axis])]
    given = _given(body)
    if len(endless) > 1:
        _check_spreading(body, endless, given)
        return
    for axis in endless:
        _check_far_along(body, given, axis, given.density != 0.0)
    if level_is_pinned(body):
        _check_total(given.flows_beyond_what_goes_on(endless[0] if endless else None))


def _takes_up(body: Body, face: Face) -> bool:
    """Whether a face takes up whatever flow it is given."""
    return isinstance(body.faces[face], Held | Film)


@dataclass(frozen=True, eq=False)
class _Given:
    """Inflows and generation as boxes, flat ones for inflows: density (n,), low and high corners (3, n)."""

    density: FloatArray
    low: FloatArray
    high: FloatArray

    def reaches(self, axis: int, *, high: bool) -> NDArray[np.bool_]:
        """Which go on without end along an axis."""
        return np.isposinf(self.high[axis]) if high else np.isneginf(self.low[axis])

    def goes_on(self, axis: int) -> NDArray[np.bool_]:
        """Which go on without end along an axis on either side."""
        return self.reaches(axis, high=True) | self.reaches(axis, high=False)

    def per_length(self, axis: int | None) -> FloatArray:
        """Flow of each per length of an axis, or all of it."""
        widths = self.high - self.low
        others = [other for other in range(3) if other != axis]
        return self.density * np.where(widths > 0, widths, 1.0)[others].prod(axis=0)

    def flows_beyond_what_goes_on(self, axis: int | None) -> FloatArray:
        """Flow of each, counted from what it is far along an axis on either side of 0."""
        if axis is None:
            return self.per_length(None)
        low, high = self.low[axis], self.high[axis]
        flat = (low == high).astype(float)
        length = np.where(np.isinf(high), 0.0, high) - np.where(np.isinf(low), 0.0, low) + flat
        return self.per_length(axis) * length


def _given(body: Body) -> _Given:
    densities, lows, highs = [np.zeros(0)], [np.zeros((3, 0))], [np.zeros((3, 0))]
    for face, condition in body.faces.items():
        if isinstance(condition, Inflow):
            density, low, high = _cells(body, face, condition.inflow)
            densities.append(density)
            lows.append(low)
            highs.append(high)
    for source in body.generating:
        densities.append(np.array([source.density]))
        lows.append(np.array(source.low)[:, None])
        highs.append(np.array(source.high)[:, None])
    density = np.concatenate(densities)
    there = density != 0.0
    return _Given(density[there], np.concatenate(lows, axis=1)[:, there], np.concatenate(highs, axis=1)[:, there])


def _cells(body: Body, face: Face, face_map: FaceMap) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Mean inflow of each cell between the knots of a face, and its corners."""
    cells, axes = face_map.cell_means, axes_along(face)
    if face_map.is_uniform:
        cells = cells[:1, :1]
        first, second = (np.array([body.begins[axis], body.size[axis]]) for axis in axes)
    else:
        first, second = face_map.first_knots, face_map.second_knots
    low, high = np.full((3, *cells.shape), body.end_of(face)), np.full((3, *cells.shape), body.end_of(face))
    low[axes[0]], high[axes[0]] = first[:-1, None], first[1:, None]
    low[axes[1]], high[axes[1]] = second[:-1], second[1:]
    return cells.ravel(), low.reshape(3, -1), high.reshape(3, -1)


def _balances(flows: FloatArray) -> float | None:
    """None where flows add up to zero, else what they add up to."""
    total = math.fsum(flows)
    return None if abs(total) <= BALANCED * math.fsum(np.abs(flows)) else total


def _check_total(flows: FloatArray) -> None:
    total = _balances(flows)
    if total is not None:
        raise NoSteadyState(
            "Every face is insulated or has a given inflow, and the inflows and the generation add up to "
            "{amount}; they have to add up to zero, or one face has to be held or get a film.",
            total,
            ("faces",),
        )


def _check_far_along(body: Body, given: _Given, axis: int, chosen: NDArray[np.bool_]) -> None:
    """Of those chosen, the flow per length far along either side of an axis has to be zero."""
    for high in (True, False):
        there = chosen & given.reaches(axis, high=high)
        flow = _balances(given.per_length(axis)[there])
        if flow is not None:
            sides = " on either side" if body.infinite[axis] else ""
            raise NoSteadyState(
                "Nothing beside it takes up what is given far along the "
                f"{AXES[axis]} axis, where the inflow and generation per length come to {{amount}}; they have to come "
                f"to zero there{sides}.",
                flow,
                ("faces",),
                per_length=True,
            )


def _check_spreading(body: Body, endless: list[int], given: _Given) -> None:
    """Flows in a body with two or three endless axes that loses nothing along the others."""
    powers = np.zeros(given.density.size)
    for axis in endless:
        takes_up = not body.infinite[axis] and _takes_up(body, f"{AXES[axis]}_low")  # type: ignore[arg-type]
        powers += np.where(given.goes_on(axis), 0.0, 1.5 if takes_up else 0.5)
    too_much = np.flatnonzero(powers < 1.0)
    if too_much.size:
        worst = int(too_much[0])
        axes = " and ".join(AXES[axis] for axis in endless if given.goes_on(axis)[worst])
        raise NoSteadyState(
            f"Inflow or generation goes on without end along {axes}, and nothing takes it up there; a face has to be "
            "held or get a film, or the flow has to end.",
            float(given.density[worst]),
            ("faces",),
        )
    in_two_dimensions = powers == 1.0
    bounded = in_two_dimensions & ~np.any([given.goes_on(axis) for axis in endless], axis=0)
    total = _balances(given.per_length(None)[bounded])
    if total is not None:
        raise NoSteadyState(
            "The inflows and the generation add up to {amount}, which can only spread in two dimensions and would "
            "raise the potential without limit; they have to add up to zero, or a face has to be held or get a film.",
            total,
            ("faces",),
        )
    for axis in endless:
        _check_far_along(body, given, axis, in_two_dimensions)


def map_integral(face_map: FaceMap, low: tuple[float, float], high: tuple[float, float]) -> tuple[float, float]:
    """Integral of a map over a bounded rectangle of its face, and the sum of the sizes of its products."""
    first = face_map.first.integrals(np.array([low[0]]), np.array([high[0]]))
    second = face_map.second.integrals(np.array([low[1]]), np.array([high[1]]))
    return float((first * second).sum()), float(np.abs(first * second).sum())


def generation(body: Body) -> float:
    """Total generated in the body; not finite where a source has no end."""
    amounts = [
        source.density * math.prod(high - low for low, high in zip(source.low, source.high, strict=True))
        for source in body.generating
    ]
    return math.fsum(amounts) if all(map(math.isfinite, amounts)) else sum(amounts)
