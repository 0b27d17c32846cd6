"""The excess flow on the spots of a mixed body at one refinement, by Galerkin's method on panels.

    mean over each panel of (G q) + q / (h - h_base) = level - mean of u_base

in the total flows of the panels as unknowns: a symmetric positive definite matrix. A held spot whose flow is given adds
its level as an unknown. Where nothing but the spots fixes the level, G is known up to a constant, which is one more
unknown, and the flows have to balance. The grids of half and a quarter as many panels are nested in the full one, and
their matrices are sums of entries of its matrix.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve

from service.core import time_error, time_form
from service.core.conditions import Condition, Film, Inflow, map_of
from service.core.errors import NotPhysical
from service.core.faces import Face, axes_along, is_high
from service.core.field import kept_rows
from service.core.lines.line import PRIMITIVE, VALUE
from service.core.lines.places import Places
from service.core.maps import FaceMap
from service.core.mixed_base import Base, Spot
from service.core.panels import Panels, graded, influence, keeps_level
from service.core.solvability import generation, map_integral
from service.core.split import lines_of, parts_of, reference_level
from service.core.stopping import go_on

FloatArray = NDArray[np.float64]

# How exact the base's potential on the panels is, in parts of what drives it; far below what panels resolve.
BASE_ACCURACY = 1e-13

# Refinements looked at together: all panels, half and a quarter as many along each axis.
LEVELS = 3

# Steps between the doubles about a panel's edges that the narrowest one is wide at the least, so that rounding leaves
# the grading as it is.
LEAST_STEPS = 16


@dataclass(frozen=True, eq=False)
class Refined:
    """Excess flow at one refinement.

    grids: panels of each spot. flows: into each panel, beyond what the base lets in, shape (count,) for each spot.
    levels: what each spot is held at, or its ambient; found for those with a given flow.
    """

    grids: tuple[Panels, ...]
    flows: tuple[FloatArray, ...]
    levels: FloatArray


@dataclass(frozen=True, eq=False)
class System:
    """Equations of a base at one refinement, before any data: matrix, mean potential of each panel for a unit of flow
    into each.
    """

    base: Base
    grids: tuple[Panels, ...]
    matrix: FloatArray

    @property
    def starts(self) -> NDArray[np.intp]:
        """Index of each spot's first panel, and at the end the number of panels."""
        return np.concatenate([[0], np.cumsum([grid.count for grid in self.grids])])

    def spread(self, values: FloatArray) -> FloatArray:
        """A value of each spot, repeated for its panels."""
        return np.repeat(values, [grid.count for grid in self.grids], axis=0)

    def solve(self, potentials: FloatArray) -> FloatArray:
        """Flows of the panels that bring about mean potentials, shape (number of panels, n) each."""
        go_on()
        matrix = self.matrix.copy()
        areas = np.concatenate([grid.areas for grid in self.grids])
        matrix.flat[:: areas.size + 1] += 1 / (areas * self.spread(np.array([spot.excess for spot in self.base.spots])))
        # The transpose is the same and in the order of LAPACK.
        try:
            factor = cho_factor(matrix.T, check_finite=False, overwrite_a=True)
            flows = np.asarray(cho_solve(factor, potentials, check_finite=False))
        except np.linalg.LinAlgError:
            raise without_digits(self.base) from None
        if not np.isfinite(flows).all():
            raise without_digits(self.base)
        return flows

    def summed(self, flows: FloatArray) -> FloatArray:
        """Total of each spot, shape (number of spots, n), of flows of the panels."""
        return np.add.reduceat(flows, self.starts[:-1], axis=0)

    def halved(self, means: FloatArray) -> tuple[System, FloatArray]:
        """The equations with half as many panels along each axis, and the means over those."""
        go_on()
        rows = self._gathered(self.matrix)
        matrix = self._gathered(np.ascontiguousarray(rows.T))
        half = System(self.base, tuple(grid.halved() for grid in self.grids), matrix)
        return half, self._gathered(means[:, None])[:, 0]

    def _gathered(self, rows: FloatArray) -> FloatArray:
        """Means over the panels of the halved grids from those over panels, shape (number of panels, n)."""
        found = []
        for grid, start in zip(self.grids, self.starts, strict=False):
            n, m = grid.shape
            some = rows[start : start + grid.count] * grid.shares[:, None]
            found.append(some.reshape(n // 2, 2, m // 2, 2, -1).sum(axis=(1, 3)).reshape(grid.count // 4, -1))
        return np.concatenate(found)


def without_digits(base: Base) -> NotPhysical:
    """What is raised where rounding leaves no digit of the flows."""
    return NotPhysical(
        "The pads of the mixed faces and the gaps between them are too unlike in size for the digits of numbers; leave "
        "the least of them out, or make it larger.",
        ("faces", base.faces[0], "pads"),
    )


def system_of(base: Base, count: int) -> System:
    """The equations of a base with so many panels along each axis of every spot; a multiple of 4."""
    grids = tuple(_grid(base, spot, count) for spot in base.spots)
    return System(base, grids, influence(lines_of(base.body), base.axis, base.factors, grids))


def _grid(base: Base, spot: Spot, count: int) -> Panels:
    """Panels that narrow towards the borders of a spot, but not towards a side of the body, which mirrors it."""
    edges = []
    ends = ((spot.where.p_low, spot.where.p_high), (spot.where.q_low, spot.where.q_high))
    for axis, (low, high) in zip(axes_along(spot.face), ends, strict=True):
        inside = {"at_low": low != base.body.begins[axis], "at_high": high != base.body.size[axis]}
        edges.append(graded(low, high, count, **inside))
    return Panels(edges[0], edges[1], is_high(spot.face))


def are_told_apart(base: Base, spot: Spot, count: int) -> bool:
    """Whether the edges of so many panels along each axis of a spot keep their distances when they are rounded."""
    grid = _grid(base, spot, count)
    return all(
        bool((np.diff(edges) >= LEAST_STEPS * np.spacing(np.abs(edges).max())).all())
        for edges in (grid.first, grid.second)
    )


def needs_balance(base: Base) -> bool:
    """Whether nothing but spots fixes the level, so that all flows have to balance."""
    return keeps_level(lines_of(base.body))


def solve_system(
    system: System, levels: Sequence[float | None], flows: FloatArray, means: FloatArray, given: float
) -> Refined:
    """The flows of a system's panels.

    levels: of each spot, None where `flows` has its total flow instead. means: of the base's potential over each panel.
    given: sum of all other flows into the body, used where they have to balance.
    """
    base, spots = system.base, system.base.spots
    known = np.array([0.0 if level is None else level for level in levels])
    floating = np.flatnonzero([level is None for level in levels])
    constant = needs_balance(base) and floating.size < len(spots)
    # What the panels take for the known levels, for a unit of each unknown one, and for a unit less everywhere.
    columns = [system.spread(known) - means]
    columns += [system.spread((np.arange(len(spots)) == index).astype(float)) for index in floating]
    columns += [-np.ones(means.size)] if constant else []
    answers = system.solve(np.stack(columns, axis=1))
    sums = system.summed(answers)
    # The base lets in its own share of a given flow: least (ambient - level).
    least = np.array([base.coefficients[spot.face] * spot.area for spot in spots])[floating]
    ambient = np.array([_usual(base, spot.face) for spot in spots])[floating]
    equations = sums[floating, 1:]
    equations[:, : floating.size] -= np.diag(least)
    right = flows[floating] - least * ambient - sums[floating, 0]
    if constant:
        total = sums.sum(axis=0)
        equations, right = np.vstack([equations, total[1:]]), np.append(right, -given - total[0])
    try:
        unknown = np.linalg.solve(equations, right) if right.size else right
    except np.linalg.LinAlgError:
        raise without_digits(base) from None
    found = answers[:, 0] + answers[:, 1:] @ unknown
    known[floating] = unknown[: floating.size]
    return Refined(system.grids, tuple(np.split(found, system.starts[1:-1])), known)


def _usual(base: Base, face: Face) -> float:
    face_map = map_of(base.body.faces[face])
    return 0.0 if face_map is None else face_map.usual


def base_means(base: Base, grids: Sequence[Panels]) -> FloatArray:
    """Mean of the base's potential over each panel, shape (number of panels,)."""
    lines, reference = lines_of(base.body), reference_level(base.body)
    parts = parts_of(base.body, reference)
    first, second = axes_along(base.axis)
    step, found = time_error.step_for(BASE_ACCURACY), []
    for grid in grids:
        places = [Places(np.array([lines[base.axis].length if grid.high else 0.0]), VALUE)] * 3
        for axis, some in ((first, grid.along_first), (second, grid.along_second)):
            places[axis] = Places(some.low, PRIMITIVE, some.high)
        total, rows = np.zeros(grid.count), kept_rows()
        for part in parts:
            total += time_form.on_grid(time_form.integrate(lines, part, places, step, rows)).ravel()
        found.append(reference + total / (grid.areas * lines[first].scale * lines[second].scale))
    return np.concatenate(found)


def given_total(base: Base) -> float:
    """Sum of the flows given to the base and of what is generated in it; they have to be bounded."""
    flows = [generation(base.body)]
    for face, condition in base.body.faces.items():
        if isinstance(condition, Inflow):
            first, second = axes_along(face)
            low = (base.body.begins[first], base.body.begins[second])
            flows.append(map_integral(condition.inflow, low, (base.body.size[first], base.body.size[second]))[0])
    return math.fsum(flows)


def with_flows(base: Base, refined: Refined) -> dict[Face, Condition]:
    """Conditions of the body whose field is the answer: of the base, with the excess flow as inflow or as ambient."""
    conditions: dict[Face, Condition] = dict(base.body.faces)
    for face in base.faces:
        chosen = [
            (grid, flows / grid.areas)
            for spot, grid, flows in zip(base.spots, refined.grids, refined.flows, strict=True)
            if spot.face == face
        ]
        condition = base.body.faces[face]
        if not chosen:
            continue
        if isinstance(condition, Film):
            chosen = [(grid, density / condition.coefficient) for grid, density in chosen]
            conditions[face] = Film(condition.coefficient, _with_cells(base, face, condition.ambient, chosen))
        else:
            background = condition.inflow if isinstance(condition, Inflow) else FaceMap.uniform(0.0)
            conditions[face] = Inflow(_with_cells(base, face, background, chosen))
    return conditions


def _with_cells(base: Base, face: Face, background: FaceMap, cells: Sequence[tuple[Panels, FloatArray]]) -> FaceMap:
    """A map with densities of panels added."""
    first, second = axes_along(face)
    extent = (base.body.size[first], base.body.size[second])
    begins = (base.body.begins[first], base.body.begins[second])
    old_p, old_q = background.first_knots, background.second_knots
    if background.is_uniform:
        old_p, old_q = np.array([begins[0], extent[0]]), np.array([begins[1], extent[1]])
    knots_p = np.unique(np.concatenate([old_p, *(grid.first for grid, _ in cells)]))
    knots_q = np.unique(np.concatenate([old_q, *(grid.second for grid, _ in cells)]))
    old_rows = np.searchsorted(old_p, knots_p[:-1], side="right") - 1
    old_columns = np.searchsorted(old_q, knots_q[:-1], side="right") - 1
    old = np.full((1, 1), background.lowest) if background.is_uniform else background.table
    table = old[np.ix_(old_rows, old_columns)]
    for grid, density in cells:
        rows = np.searchsorted(knots_p, grid.first)
        columns = np.searchsorted(knots_q, grid.second)
        wide = np.repeat(density.reshape(grid.shape), np.diff(rows), axis=0)
        table[rows[0] : rows[-1], columns[0] : columns[-1]] += np.repeat(wide, np.diff(columns), axis=1)
    return FaceMap(knots_p, knots_q, table, False, extent, background.usual, begins)
