"""Potential and flux on grids and at points, extremes and means: the question read, and its answer."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service import cost
from service.core import Field, Grid, Place, Solution
from service.core.estimate import Estimate
from service.core.faces import AXES, axes_along
from service.core.maps import Rectangle
from service.core.mixed import MixedSolution
from service.models import evaluate as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.interfaces import both_sides, interface_answer
from service.translation.places import FacePart, GridPlaces, InterfacePlaces, NamedPoint, PlaceReader
from service.translation.problem import ReadProblem
from service.units import Kind, UnitSystem

FloatArray = NDArray[np.float64]

# A flux is poorly known where its bound is more than this part of it; fluxes below this part of the largest count as
# that.
POORLY_KNOWN, NEGLIGIBLE = 0.1, 1e-3

# A search for both extremes looks at so many places along each axis first, and then climbs on small grids that cost
# as much as so many points.
FIRST_PLACES, CLIMBED = 25, 800


@dataclass(frozen=True)
class FieldsWanted:
    """A question about fields in the solver's numbers."""

    grids: tuple[GridPlaces, ...]
    points: tuple[NamedPoint, ...]
    with_potential: bool
    with_flux: bool
    extremes: bool
    means: tuple[FacePart, ...]
    interfaces: tuple[InterfacePlaces, ...]
    tolerance: float

    @property
    def points_array(self) -> FloatArray:
        """The points, shape (n_points, 3)."""
        return np.array([point.place for point in self.points], dtype=float).reshape(-1, 3)

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
    on_interfaces = sum(len(interface.at) for interface in ask.interfaces)
    cost.check_count(collector, ("evaluate", "interfaces"), "places on interfaces", on_interfaces, settings.points)
    cost.check_grid_points(collector, ask.grids, settings.grid_points)
    collector.raise_if_any()

    reader = PlaceReader(collector, settings, problem)
    grids = tuple(reader.grid(grid, ("evaluate", "grids", index)) for index, grid in enumerate(ask.grids))
    points = tuple(reader.point(point, ("evaluate", "points", index)) for index, point in enumerate(ask.points))
    means = [reader.face_part(part, ("evaluate", "means", index)) for index, part in enumerate(ask.means)]
    for index, part in enumerate(means):
        if part is not None and reader.is_endless(part):
            detail = "The mean over an endless part is that of the far end; give a finite rectangle."
            collector.add(("evaluate", "means", index), detail, "endless")
    interfaces = [
        reader.interface(interface, ("evaluate", "interfaces", index)) for index, interface in enumerate(ask.interfaces)
    ]
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    collector.raise_if_any()
    return FieldsWanted(
        grids,
        points,
        "potential" in ask.quantities,
        "flux" in ask.quantities,
        ask.extremes,
        tuple(part for part in means if part is not None),
        tuple(interface for interface in interfaces if interface is not None),
        tolerance,
    )


def check_cost(wanted: FieldsWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the work, its memory or the answer would pass a limit."""
    cost.check_answer(wanted.numbers * bytes_a_number, settings.answer_bytes)
    tolerance, with_flux = wanted.tolerance, wanted.with_flux
    estimates = [solution.estimate_grid(grid.shape, tolerance=tolerance, with_flux=with_flux) for grid in wanted.grids]
    if wanted.points:
        count = len(wanted.points)
        estimates.append(solution.estimate_points(count, tolerance=tolerance, with_flux=with_flux))
    estimates += [
        solution.estimate_points(2 * len(interface.at), tolerance=tolerance, with_flux=True)
        for interface in wanted.interfaces
    ]
    if wanted.extremes:
        estimates.append(search_estimate(solution, tolerance))
    cost.check_work(estimates, settings)


def search_estimate(solution: Solution, tolerance: float) -> Estimate:
    """Cost of a search for the extremes: its first grid, and the places of all small ones it may climb on."""
    first = solution.estimate_grid((FIRST_PLACES, FIRST_PLACES, FIRST_PLACES), tolerance=tolerance)
    climbs = solution.estimate_points(CLIMBED, tolerance=tolerance)
    return Estimate(first.multiplications + climbs.multiplications, max(first.bytes, climbs.bytes))


class _Answering:
    """Answers the parts of one question, and collects what they say of accuracy on the way."""

    def __init__(self, problem: ReadProblem, solution: Solution, wanted: FieldsWanted, keep_going: KeepGoing) -> None:
        self.problem = problem
        self.units = problem.units
        self.solution = solution
        self.wanted = wanted
        self.keep_going = keep_going
        self.warnings = answers.problem_warnings(problem, solution)
        self.bounds: list[float] = []
        self.places = [wanted.points_array]

    def grid(self, index: int, grid: GridPlaces) -> dict[str, Any]:
        """Values on one grid."""
        wanted = self.wanted
        found = self.solution.field(
            Grid(*grid.sides),
            tolerance=wanted.tolerance,
            with_flux=wanted.with_flux,
            keep_going=self.keep_going,
        )
        self.warnings += self._flux_warnings(found, f"#/grids/{index}/flux")
        self.bounds.append(float(found.potential_bound))
        self.places.append(_corners_and_middle(grid))
        return _grid_answer(self.units, grid, found, wanted)

    def points(self) -> list[dict[str, Any]]:
        """Values at all points."""
        wanted = self.wanted
        if not wanted.points:
            return []
        found = self.solution.field_at(
            wanted.points_array,
            tolerance=wanted.tolerance,
            with_flux=wanted.with_flux,
            keep_going=self.keep_going,
        )
        self.warnings += self._flux_warnings(found, "#/points")
        self.bounds.append(float(found.potential_bound))
        return [_point_answer(self.units, point, found, row, wanted) for row, point in enumerate(wanted.points)]

    def extremes(self) -> dict[str, Any]:
        """The highest and the lowest potential of the body."""
        self.keep_going()
        found = self.solution.extremes(tolerance=self.wanted.tolerance, keep_going=self.keep_going)
        self._note_bound(found.hottest.error_bound, "#/extremes/highest")
        self._note_bound(found.coldest.error_bound, "#/extremes/lowest")
        return {"highest": self._place(found.hottest), "lowest": self._place(found.coldest)}

    def _place(self, place: Place) -> dict[str, Any]:
        return {
            "at": answers.place(self.problem, place.position),
            "value": float(place.value),
            "error_bound": float(place.error_bound),
            "where": place.where,
        }

    def mean(self, index: int, part: FacePart) -> dict[str, Any]:
        """The mean of one part of a face."""
        self.keep_going()
        mean = self.solution.mean(part.face, part.where, tolerance=self.wanted.tolerance)
        self._note_bound(mean.error_bound, f"#/means/{index}")
        return describe_part(part) | {"value": float(mean.value), "error_bound": float(mean.error_bound)}

    def interface(self, index: int, asked: InterfacePlaces) -> dict[str, Any]:
        """Both sides of an interface."""
        sides = both_sides(self.solution.body, asked)
        found = self.solution.field_at(
            sides, tolerance=self.wanted.tolerance, with_flux=True, keep_going=self.keep_going
        )
        self.warnings += self._flux_warnings(found, f"#/interfaces/{index}/flux")
        self.bounds.append(float(found.potential_bound))
        self.places.append(sides)
        return interface_answer(self.units, self.solution.body, asked, found)

    def _flux_warnings(self, found: Field, where: str) -> list[answers.Warning_]:
        warnings = _without_finite_value(found, where)
        if isinstance(self.solution, MixedSolution):
            warnings += _poorly_known(found, where)
        return warnings

    def _note_bound(self, bound: float, where: str) -> None:
        self.bounds.append(float(bound))
        self.warnings += answers.missed_accuracy(
            bound, self.wanted.tolerance, self.units.declared[Kind.POTENTIAL_DIFFERENCE], where
        )


def answer_fields(
    problem: ReadProblem, solution: Solution, wanted: FieldsWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer, with numpy arrays for its tables."""
    solution.prepare(tolerance=wanted.tolerance, keep_going=keep_going)
    answering = _Answering(problem, solution, wanted, keep_going)
    answer: dict[str, Any] = {
        "grids": [answering.grid(index, grid) for index, grid in enumerate(wanted.grids)],
        "points": answering.points(),
    }
    if wanted.extremes:
        answer["extremes"] = answering.extremes()
    if wanted.means:
        answer["means"] = [answering.mean(index, part) for index, part in enumerate(wanted.means)]
    if wanted.interfaces:
        answer["interfaces"] = [answering.interface(index, asked) for index, asked in enumerate(wanted.interfaces)]
    keep_going()
    places = np.concatenate(answering.places)
    unit = problem.units.declared[Kind.POTENTIAL_DIFFERENCE]
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, places, wanted.tolerance, answering.bounds),
        "warnings": answering.warnings + answers.poorly_known(solution, answering.bounds, unit),
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


def _point_answer(units: UnitSystem, point: NamedPoint, found: Field, row: int, wanted: FieldsWanted) -> dict[str, Any]:
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
        answer["flux_error_bound"] = answers.number_or_none(units.write(Kind.FLUX, float(found.flux_bound[row])))
    return answer


def _finite(potential: FloatArray) -> FloatArray:
    """The potential as it is; a value that is not finite is a fault of ours and must not become a null."""
    if not np.isfinite(potential).all():
        raise FloatingPointError("a potential is not finite")
    return potential


def _poorly_known(found: Field, where: str) -> list[answers.Warning_]:
    """A remark on fluxes whose bounds are a considerable part of them, as they are beside pads of mixed faces."""
    if found.flux is None or found.flux_bound is None:
        return []
    size = np.linalg.norm(found.flux, axis=0)
    known = np.isfinite(size)
    if not known.any():
        return []
    # Where next to nothing flows any bound is a large part of it; that matters to nobody.
    counts = np.maximum(size, NEGLIGIBLE * size[known].max())
    count = int((found.flux_bound[known] > POORLY_KNOWN * counts[known]).sum())
    if not count:
        return []
    return [
        answers.warning(
            "flux-poorly-known",
            f"At {count} of {size.size} places the bound of the flux is more than a tenth of the flux there. On pads "
            "of mixed faces and beside them flux densities are known less well than flows: /v1/flux-totals tells what "
            "passes through each pad.",
            where,
        )
    ]


def _without_finite_value(found: Field, where: str) -> list[answers.Warning_]:
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


def _corners_and_middle(grid: GridPlaces) -> FloatArray:
    """Three places of a grid, shape (3, 3): its first and last corner and the middle."""
    rows = [[axis[round(part * (axis.size - 1))] for axis in grid.sides] for part in (0.0, 0.5, 1.0)]
    return np.array(rows, dtype=float)
