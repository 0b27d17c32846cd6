"""How the answer converges at some places: the question read, and its answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from service import cost
from service.core import Convergence, Solution
from service.models import evaluate as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.places import NamedPoint, PlaceReader
from service.translation.problem import ReadProblem


@dataclass(frozen=True)
class ConvergenceWanted:
    """A question about convergence in the solver's numbers."""

    points: tuple[NamedPoint, ...]
    overshoot_terms: int
    tolerance: float


def read_convergence(
    question: models.ConvergenceQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> ConvergenceWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    cost.check_count(
        collector, ("evaluate", "points"), "points", len(ask.points), settings.convergence_points
    )
    collector.raise_if_any()
    reader = PlaceReader(collector, settings, problem)
    points = tuple(
        reader.point(point, ("evaluate", "points", index)) for index, point in enumerate(ask.points)
    )
    tolerance = answers.read_tolerance(collector, question.accuracy, solution)
    collector.raise_if_any()
    return ConvergenceWanted(points, ask.overshoot_terms, tolerance)


def answer_convergence(
    problem: ReadProblem, solution: Solution, wanted: ConvergenceWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about convergence."""
    points = []
    bounds = []
    for point in wanted.points:
        keep_going()
        (found,) = solution.convergence(np.array([point.at]), tolerance=wanted.tolerance)
        points.append(({} if point.name is None else {"name": point.name}) | _point(point, found))
        bounds.append(float(found.error_bound))
    keep_going()
    places = np.array([point.at for point in wanted.points])
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, places, wanted.tolerance, bounds),
        "warnings": answers.problem_warnings(problem, solution),
        "points": points,
        "overshoot": [
            {
                "face": overshoot.face,
                "terms": int(overshoot.terms),
                "overshoot": answers.number_or_none(float(overshoot.overshoot)),
                "at": [float(coordinate) for coordinate in overshoot.at],
            }
            for overshoot in solution.overshoot(wanted.overshoot_terms)
        ],
    }


def check_cost(
    wanted: ConvergenceWanted, solution: Solution, settings: Settings, bytes_a_number: int
) -> None:
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
