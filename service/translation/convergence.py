"""How the answer converges at some places: the question read, and its answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from service import cost
from service.core import Convergence, Solution
from service.core.conditions import map_of
from service.core.varying import VaryingSolution
from service.models import evaluate as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.places import NamedPoint, PlaceReader
from service.translation.problem import ReadProblem

# Places around each knot of a map at which the solver looks for the overshoot, about.
PLACES_A_KNOT = 50


@dataclass(frozen=True)
class ConvergenceWanted:
    """A question about convergence in the solver's numbers.

    memory_bytes: most that the overshoot may take.
    """

    points: tuple[NamedPoint, ...]
    overshoot_terms: int
    tolerance: float
    memory_bytes: float


def read_convergence(
    question: models.ConvergenceQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> ConvergenceWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    cost.check_count(collector, ("evaluate", "points"), "points", len(ask.points), settings.convergence_points)
    collector.raise_if_any()
    reader = PlaceReader(collector, settings, problem)
    points = tuple(reader.point(point, ("evaluate", "points", index)) for index, point in enumerate(ask.points))
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    if isinstance(solution, VaryingSolution):
        detail = (
            "How series and integral converge is told where the conductivity does not vary with the potential and no "
            "face radiates. Leave `conductivity_law` and `emissivity` out, or ask /v1/fields, whose certificate has "
            "the agreement of the two."
        )
        collector.add(("evaluate",), detail, "varies")
    collector.raise_if_any()
    return ConvergenceWanted(points, ask.overshoot_terms, tolerance, settings.memory_bytes)


def answer_convergence(
    problem: ReadProblem, solution: Solution, wanted: ConvergenceWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about convergence."""
    points = []
    bounds = []
    for point in wanted.points:
        keep_going()
        (found,) = solution.convergence(np.array([point.place]), tolerance=wanted.tolerance, keep_going=keep_going)
        points.append(({} if point.name is None else {"name": point.name}) | _point(point, found))
        bounds.append(float(found.error_bound))
    keep_going()
    warnings = answers.problem_warnings(problem, solution)
    overshoot = _overshoot(problem, solution, wanted)
    if overshoot is None:
        overshoot = []
        warnings.append(
            answers.warning(
                "overshoot-left-out",
                "The overshoot was not computed: with so many patches or readings it would take too much "
                "memory. Ask for fewer `overshoot_terms`, or for a map with fewer places.",
                "#/overshoot",
            )
        )
    places = np.array([point.place for point in wanted.points])
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, places, wanted.tolerance, bounds),
        "warnings": warnings,
        "points": points,
        "overshoot": overshoot,
    }


def _overshoot(problem: ReadProblem, solution: Solution, wanted: ConvergenceWanted) -> list[dict[str, Any]] | None:
    """Overshoot of the truncated series on each driven face, None where the tables for it would be too large."""
    if _overshoot_bytes(problem, wanted.overshoot_terms) > wanted.memory_bytes:
        return None
    return [
        {
            "face": found.face,
            "terms": int(found.terms),
            "overshoot": answers.number_or_none(float(found.overshoot)),
            "at": [float(coordinate) for coordinate in found.at],
        }
        for found in solution.overshoot(wanted.overshoot_terms)
    ]


def _overshoot_bytes(problem: ReadProblem, terms: int) -> float:
    """Size of the tables for the overshoot of the face with most knots.

    The solver looks at about fifty places around each knot and evaluates all terms there: a table of places
    by terms for each axis, and a few of places by places.
    """
    largest = 0.0
    for condition in problem.body.faces.values():
        face_map = map_of(condition)
        if face_map is not None:
            first, second = (
                PLACES_A_KNOT * (knots.size + 1) for knots in (face_map.first_knots, face_map.second_knots)
            )
            largest = max(largest, 8.0 * (3 * (first + second) * terms + 4 * first * second))
    return largest


def check_cost(wanted: ConvergenceWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """The number of points is bounded, and so is the series at each; the time limit bounds the rest."""


def _point(point: NamedPoint, found: Convergence) -> dict[str, Any]:
    return {
        "at": list(point.at),
        "value": float(found.value),
        "error_bound": float(found.error_bound),
        "agreement": _maybe(found.agreement),
        "agreement_bound": _maybe(found.agreement_bound),
        "terms_needed": None if found.terms_needed is None else int(found.terms_needed),
        "series": [
            {
                "terms": int(step.terms),
                "value": answers.number_or_none(float(step.value)),
                "error": answers.number_or_none(float(step.error)),
                "tail_bound": _maybe(step.tail_bound),
            }
            for step in found.series
        ],
        "time_nodes": int(found.node_count),
        "time_steps": [
            {
                "nodes": int(step.nodes),
                "value": float(step.value),
                "error": float(step.error),
                "error_bound": answers.number_or_none(float(step.error_bound)),
            }
            for step in found.time_form
        ],
        "tenfold_tighter": {
            "time_nodes": int(found.node_count_tenfold),
            "cost_ratio": float(found.cost_ratio_tenfold),
        },
    }


def _maybe(value: float | None) -> float | None:
    return None if value is None else answers.number_or_none(float(value))
