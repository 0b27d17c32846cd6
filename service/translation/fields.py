"""Potential and flux on grids and at points, extremes and means: the question read, and its answer."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service import cost
from service.core import Field, Grid, Place, Solution
from service.core.maps import Rectangle
from service.core.problem import AXES, axes_along
from service.models import evaluate as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.places import FacePart, GridPlaces, NamedPoint, PlaceReader
from service.translation.problem import ReadProblem
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class FieldsWanted:
    """A question about fields in the solver's numbers."""

    grids: tuple[GridPlaces, ...]
    points: tuple[NamedPoint, ...]
    with_potential: bool
    with_flux: bool
    extremes: bool
    means: tuple[FacePart, ...]
    tolerance: float

    @property
    def points_array(self) -> FloatArray:
        """The points, shape (n_points, 3)."""
        return np.array([point.at for point in self.points], dtype=float).reshape(-1, 3)

    @property
    def numbers(self) -> int:
        """How many numbers the answer's arrays hold."""
        a_place = self.with_potential + (4 if self.with_flux else 0)
        return sum(a_place * math.prod(grid.shape) + sum(grid.shape) for grid in self.grids)


def read_fields(
    question: models.FieldsQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> FieldsWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    cost.check_count(collector, ("evaluate", "grids"), "grids", len(ask.grids), settings.grids)
    cost.check_count(collector, ("evaluate", "points"), "points", len(ask.points), settings.points)
    cost.check_count(collector, ("evaluate", "means"), "means", len(ask.means), settings.means)
    cost.check_grid_points(collector, ask.grids, settings.grid_points)
    collector.raise_if_any()

    reader = PlaceReader(collector, settings, problem)
    grids = tuple(reader.grid(grid, ("evaluate", "grids", index)) for index, grid in enumerate(ask.grids))
    points = tuple(
        reader.point(point, ("evaluate", "points", index)) for index, point in enumerate(ask.points)
    )
    means = [reader.face_part(part, ("evaluate", "means", index)) for index, part in enumerate(ask.means)]
    for index, part in enumerate(means):
        if part is not None and reader.is_endless(part):
            detail = "The mean over an endless part is that of the far end; give a finite rectangle."
            collector.add(("evaluate", "means", index), detail, "endless")
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    collector.raise_if_any()
    return FieldsWanted(
        grids,
        points,
        "potential" in ask.quantities,
        "flux" in ask.quantities,
        ask.extremes,
        tuple(part for part in means if part is not None),
        tolerance,
    )


def check_cost(wanted: FieldsWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the work, its memory or the answer would pass a limit."""
    cost.check_answer(wanted.numbers * bytes_a_number, settings.answer_bytes)
    tolerance, with_flux = wanted.tolerance, wanted.with_flux
    estimates = [
        solution.estimate_grid(grid.shape, tolerance=tolerance, with_flux=with_flux) for grid in wanted.grids
    ]
    if wanted.points:
        count = len(wanted.points)
        estimates.append(solution.estimate_points(count, tolerance=tolerance, with_flux=with_flux))
    cost.check_work(estimates, settings)


def answer_fields(
    problem: ReadProblem, solution: Solution, wanted: FieldsWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer, with numpy arrays for its tables."""
    units = problem.units
    warnings = answers.problem_warnings(problem, solution)
    bounds: list[float] = []
    places = [wanted.points_array]
    grids = []
    for index, grid in enumerate(wanted.grids):
        found = solution.field(
            Grid(*grid.axes), tolerance=wanted.tolerance, with_flux=wanted.with_flux, keep_going=keep_going
        )
        grids.append(_grid_answer(units, grid, found, wanted))
        warnings += _flux_warnings(found, f"#/grids/{index}/flux")
        bounds.append(float(found.potential_bound))
        places.append(_corners_and_middle(grid))
    points = []
    if wanted.points:
        found = solution.field_at(
            wanted.points_array, tolerance=wanted.tolerance, with_flux=wanted.with_flux, keep_going=keep_going
        )
        points = [_point_answer(units, point, found, row, wanted) for row, point in enumerate(wanted.points)]
        warnings += _flux_warnings(found, "#/points")
        bounds.append(float(found.potential_bound))
    answer: dict[str, Any] = {"grids": grids, "points": points}
    if wanted.extremes:
        keep_going()
        extremes = solution.extremes(tolerance=wanted.tolerance, keep_going=keep_going)
        answer["extremes"] = {"highest": _place(extremes.hottest), "lowest": _place(extremes.coldest)}
        bounds += [extremes.hottest.error_bound, extremes.coldest.error_bound]
    if wanted.means:
        answer["means"] = []
        for part in wanted.means:
            keep_going()
            mean = solution.mean(part.face, part.where, tolerance=wanted.tolerance)
            answer["means"].append(
                describe_part(part) | {"value": float(mean.value), "error_bound": float(mean.error_bound)}
            )
            bounds.append(float(mean.error_bound))
    keep_going()
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(units),
        "certificate": answers.certificate(
            problem, solution, np.concatenate(places), wanted.tolerance, bounds
        ),
        "warnings": warnings,
        **answer,
    }


def describe_part(part: FacePart) -> dict[str, Any]:
    """Name, face, patch and rectangle of a part, as far as it has them."""
    described: dict[str, Any] = {"name": part.name, "face": part.face, "patch": part.patch}
    if part.where is not None:
        described["rectangle"] = rectangle_shown(part.where, axes_along(part.face))
    return {key: value for key, value in described.items() if value is not None}


def rectangle_shown(where: Rectangle, along: tuple[int, int]) -> dict[str, list[float | None]]:
    """A rectangle as intervals along its two axes; null for an end that is infinitely far."""
    ends = ((where.p_low, where.p_high), (where.q_low, where.q_high))
    return {
        AXES[axis]: [answers.number_or_none(end) for end in interval]
        for axis, interval in zip(along, ends, strict=True)
    }


def _grid_answer(units: UnitSystem, grid: GridPlaces, found: Field, wanted: FieldsWanted) -> dict[str, Any]:
    answer: dict[str, Any] = {} if grid.name is None else {"name": grid.name}
    answer["shape"] = list(grid.shape)
    answer["axes"] = dict(zip(AXES, grid.axes, strict=True))
    if wanted.with_potential:
        answer["potential"] = _finite(found.potential)
        answer["error_bound"] = float(found.potential_bound)
    if wanted.with_flux:
        assert found.flux is not None
        assert found.flux_bound is not None
        answer["flux"] = answers.vector(units, found.flux)
        answer["flux_error_bound"] = units.write_array(Kind.FLUX, found.flux_bound)
    return answer


def _point_answer(
    units: UnitSystem, point: NamedPoint, found: Field, row: int, wanted: FieldsWanted
) -> dict[str, Any]:
    answer: dict[str, Any] = {} if point.name is None else {"name": point.name}
    answer["at"] = list(point.at)
    if wanted.with_potential:
        answer["potential"] = float(_finite(found.potential)[row])
        answer["error_bound"] = float(found.potential_bound)
    if wanted.with_flux:
        assert found.flux is not None
        assert found.flux_bound is not None
        flux = answers.vector(units, found.flux[:, row])
        answer["flux"] = {axis: answers.number_or_none(float(value)) for axis, value in flux.items()}
        answer["flux_error_bound"] = answers.number_or_none(
            units.write(Kind.FLUX, float(found.flux_bound[row]))
        )
    return answer


def _finite(potential: FloatArray) -> FloatArray:
    """The potential as it is; a value that is not finite is a fault of ours and must not become a null."""
    if not np.isfinite(potential).all():
        raise FloatingPointError("a potential is not finite")
    return potential


def _flux_warnings(found: Field, where: str) -> list[answers.Warning_]:
    if found.flux is None:
        return []
    unbounded = ~np.isfinite(found.flux)
    count = int(unbounded.any(axis=0).sum())
    if not count:
        return []
    return [
        answers.warning(
            "flux-without-finite-value",
            f"The flux has no finite value at {count} of {found.flux[0].size} places, which lie on lines "
            "where the data of faces jump; it is null there.",
            where,
        )
    ]


def _place(place: Place) -> dict[str, Any]:
    return {
        "at": [answers.number_or_none(float(coordinate)) for coordinate in place.position],
        "value": float(place.value),
        "error_bound": float(place.error_bound),
        "where": place.where,
    }


def _corners_and_middle(grid: GridPlaces) -> FloatArray:
    """Three places of a grid, shape (3, 3): its first and last corner and the middle."""
    rows = [[axis[round(part * (axis.size - 1))] for axis in grid.axes] for part in (0.0, 0.5, 1.0)]
    return np.array(rows, dtype=float)
