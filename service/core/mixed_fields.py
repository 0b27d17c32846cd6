"""The field of a body with mixed faces, with finer panels where its bound asks for them.

It errs by what the density of the flows into its pads errs nearby; its bound is the change from half as many panels,
or what that should be after the change before it.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.core.bounded import Bounded
from service.core.errors import AccuracyNotReached
from service.core.faces import axes_along, axis_of
from service.core.field import OFFERED, Field, check_inside
from service.core.mixed_base import Spot
from service.core.mixed_levels import Levels
from service.core.mixed_panels import Refined
from service.core.mixed_refinement import SHARE, Refinement
from service.core.panel_error import ORDER_OF_FIELDS, left_over, times_too_wide
from service.core.panel_noise import noise
from service.core.problem import Body
from service.core.solution import Solution

FloatArray = NDArray[np.float64]

# At the corners of pads changes of the flux fall by less than 2 from one refinement to the next, so that the last one
# falls short of what is left; by 1.4 where it was looked for on held pads, by more on films.
FLUX_SAFETY = 3.0


def field_of_panels(
    levels: Levels, ask: Callable[[Solution, float], Field], points: FloatArray, tolerance: float
) -> Field:
    """The field at points, shape (n, 3), with finer panels until its bound meets the tolerance.

    ask: the field at these points that a refinement's solution answers to a tolerance.
    Raises AccuracyNotReached where no finer panels are allowed.
    """
    count, share = levels.here.count, SHARE * tolerance
    while True:
        here = levels.ladder.at(count)
        if not here.refined:
            return ask(here.solutions[0], tolerance)
        finest = here.refined[0]
        found = _compared(
            [
                _on_spots(levels, ask(solution, share), solution, refined, finest, points, share)
                for solution, refined in zip(here.solutions, here.refined, strict=True)
            ],
            _noise(levels, finest, points),
            _unsettled(levels, here),
            here.span,
        )
        potential, bound = levels.within_limits(found.potential, found.potential_bound)
        found = replace(found, potential=potential, potential_bound=bound)
        if found.potential_bound <= tolerance:
            return found
        finer = levels.ladder.finer(count, times_too_wide(found.potential_bound, tolerance), ORDER_OF_FIELDS)
        if finer is None:
            raise AccuracyNotReached(tolerance, OFFERED * found.potential_bound)
        count = finer


def _unsettled(levels: Levels, here: Refinement) -> float:
    """By what part the flows of the finest panels, and levels that are found, may still be off."""
    flows = [
        [Bounded(math.fsum(refined.flows[number]), 0.0) for refined in here.refined]
        for number in range(len(levels.base.spots))
    ]
    found = [
        [Bounded(float(refined.levels[number]), 0.0) for refined in here.refined]
        for number, spot in enumerate(levels.base.spots)
        if spot.level is None
    ]
    size = math.fsum(abs(fine.value) for fine, _, _ in flows)
    span = here.span
    parts = [times_too_wide(_distance_to_limit(levels, values), size) for values in flows]
    parts += [times_too_wide(_distance_to_limit(levels, values), span) for values in found]
    return max(parts)


def _distance_to_limit(levels: Levels, values: Sequence[Bounded]) -> float:
    limit = levels.ladder.limit(values)
    return abs(limit.value - values[0].value) + limit.error_bound


def _noise(levels: Levels, refined: Refined, points: FloatArray) -> tuple[FloatArray, FloatArray]:
    """How far potential and flux may be off where panels are told apart, shape (n,) each."""
    potential, flux = noise(levels.base, refined, points)
    for spot in levels.base.spots:
        if spot.is_held:
            potential[_places_on(levels.body, spot, points)[0]] = 0.0
    return potential, flux


def _on_spots(
    levels: Levels,
    answer: Field,
    solution: Solution,
    refined: Refined,
    finest: Refined,
    points: FloatArray,
    tolerance: float,
) -> Field:
    """A field with what is known of spots: the level of held ones, and panels' own flux on borders of panels."""
    for number, spot in enumerate(levels.base.spots):
        on_it, inside = _places_on(levels.body, spot, points)
        if spot.is_held:
            answer.potential[on_it] = refined.levels[number]
        if answer.flux is None or answer.flux_bound is None:
            continue
        between = np.flatnonzero(inside & np.isnan(answer.flux).any(axis=0))
        if between.size:
            # Between two panels the field of their densities has no finite flux, which the true one has.
            grid, moved = finest.grids[number], points[between].copy()
            for axis, edges in zip(axes_along(spot.face), (grid.first, grid.second), strict=True):
                panel = np.clip(np.searchsorted(edges, moved[:, axis], side="right") - 1, 0, edges.size - 2)
                on_edge = np.isin(moved[:, axis], edges)
                moved[on_edge, axis] = 0.5 * (edges[panel] + edges[panel + 1])[on_edge]
            beside = solution.field_at(moved, tolerance=tolerance, with_flux=True)
            answer.flux[:, between] = beside.flux
            answer.flux_bound[between] = beside.flux_bound
        if spot.is_held:
            for axis in axes_along(spot.face):
                answer.flux[axis, inside] = 0.0
    return answer


def field_on_held_pads(levels: Levels, points: FloatArray) -> Field | None:
    """The field at points all of which are on held pads: the levels of those; None where others are among them."""
    check_inside(levels.body, (points[:, 0], points[:, 1], points[:, 2]))
    potential, bound, found = np.zeros(len(points)), 0.0, np.zeros(len(points), dtype=bool)
    for number, spot in enumerate(levels.base.spots):
        on_it, _ = _places_on(levels.body, spot, points)
        if spot.is_held and on_it.any():
            level = levels.of(number)
            potential[on_it], bound = level.value, max(bound, level.error_bound)
            found |= on_it
    return Field(potential, bound, None, None, 0) if found.all() else None


def _places_on(body: Body, spot: Spot, points: FloatArray) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Which points are on a spot, and which of them are not on its border, or where that is the border of the body."""
    first, second = axes_along(spot.face)
    on_face = points[:, axis_of(spot.face)] == body.end_of(spot.face)
    on_it, inside = on_face.copy(), on_face.copy()
    ends = ((spot.where.p_low, spot.where.p_high), (spot.where.q_low, spot.where.q_high))
    for axis, (low, high) in zip((first, second), ends, strict=True):
        place = points[:, axis]
        on_it &= (place >= low) & (place <= high)
        inside &= ((place > low) | (place == body.begins[axis])) & ((place < high) | (place == body.size[axis]))
    return on_it, inside & on_it


def _compared(
    fields: Sequence[Field], noise_of_panels: tuple[FloatArray, FloatArray], unsettled: float, span: float
) -> Field:
    """The field of the finest panels, with what it may still be off by in its bounds.

    unsettled: by what part flows may be off. Well off the pads a field is off by some such part, whatever its changes
    at a place come to by chance.
    """
    fine, middle, coarse = fields
    left = left_over(np.abs(fine.potential - middle.potential), np.abs(middle.potential - coarse.potential))
    at_places = np.where(fine.potential == middle.potential, left, np.maximum(left, 0.5 * unsettled * span))
    bound = float((at_places + noise_of_panels[0]).max()) + fine.potential_bound + middle.potential_bound
    if fine.flux is None or middle.flux is None or coarse.flux is None:
        return replace(fine, potential_bound=bound)
    assert fine.flux_bound is not None
    assert middle.flux_bound is not None
    last, before = np.abs(fine.flux - middle.flux), np.abs(middle.flux - coarse.flux)
    flux_left = left_over(np.nan_to_num(last), np.nan_to_num(before)).max(axis=0)
    flux_left = np.maximum(flux_left, 2.0 * unsettled * np.nan_to_num(np.abs(fine.flux)).max(axis=0))
    flux_left *= FLUX_SAFETY
    flux_left += noise_of_panels[1] + fine.flux_bound + middle.flux_bound
    return replace(fine, potential_bound=bound, flux_bound=flux_left)
