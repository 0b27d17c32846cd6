"""How far a face reaches: the question read, and its answer."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from service import cost
from service.core import Reached, Solution
from service.core.conditions import Film, Held
from service.core.decay_rates import DecayRate
from service.core.estimate import Estimate
from service.core.faces import AXES, Face, axis_of, is_high
from service.core.mixed import MixedSolution
from service.core.varying import VaryingSolution
from service.models import reach as models
from service.settings import Settings
from service.translation import answers
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.places import PlaceReader
from service.translation.problem import ReadProblem
from service.units import Kind

# Fields the search takes, about: a first look at many sections, and for each fraction so many at one of them.
SECTION, FIRST_LOOK, SECTIONS = 25, 61, 40


@dataclass(frozen=True)
class ReachWanted:
    """A question about reach in the solver's numbers. tolerance: in parts of the largest size."""

    face: Face
    fractions: tuple[float, ...]
    change: Literal["as_given", "uniform"]
    modes: int
    tolerance: float
    accuracy: float


def read_reach(
    question: models.ReachQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> ReachWanted:
    """The question in the solver's numbers. Raises RequestRefused with a sentence for each field at fault."""
    collector = Collector(problem.units)
    ask = question.evaluate
    PlaceReader(collector, settings, problem).is_present(ask.face, ("evaluate", "face"))
    accuracy = answers.read_tolerance(collector, question.accuracy, solution)
    if isinstance(solution, MixedSolution):
        detail = (
            "How far a face reaches is told of bodies without mixed faces. Give each face one condition, or ask "
            "/v1/fields for points along a line from the face."
        )
        collector.add(("evaluate",), detail, "mixed-faces")
    if isinstance(solution, VaryingSolution):
        detail = (
            "How far a face reaches is told where the conductivity does not vary with the potential and no face "
            "radiates: only then is what the face drives a part of the field by itself. Leave `conductivity_law` and "
            "`emissivity` out, or ask /v1/fields for points along a line from the face."
        )
        collector.add(("evaluate",), detail, "varies")
    collector.raise_if_any()
    tolerance = accuracy / (solution.span or 1.0)
    return ReachWanted(ask.face, tuple(ask.fractions), ask.change, ask.modes, tolerance, accuracy)


def check_cost(wanted: ReachWanted, solution: Solution, settings: Settings, bytes_a_number: int) -> None:
    """Raise TooCostly when the search, its memory or the answer would pass a limit."""
    cost.check_work(reach_estimates(solution, len(wanted.fractions), wanted.accuracy), settings)


def reach_estimates(solution: Solution, fractions: int, accuracy: float) -> list[Estimate]:
    """Cost of a search for so many distances, to an accuracy of the potential."""
    looks = [(SECTION, SECTION, FIRST_LOOK)] + [(SECTION, SECTION, 1)] * SECTIONS * fractions
    return [solution.estimate_grid(shape, tolerance=accuracy) for shape in looks]


def answer_reach(
    problem: ReadProblem, solution: Solution, wanted: ReachWanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer to a question about reach."""
    found = solution.reach(
        wanted.face,
        wanted.fractions,
        unit=wanted.change == "uniform",
        # The mean over an insulated section does not decay; one more mode tells what does.
        modes=wanted.modes + 1,
        tolerance=wanted.tolerance,
        keep_going=keep_going,
    )
    condition = problem.body.faces[wanted.face]
    has_level = isinstance(condition, Held | Film)
    # A uniform change is one unit of what is declared, and the solver's own unit of an inflow is another.
    factor = 1.0 if has_level or wanted.change == "as_given" else problem.units.read(Kind.FLUX, 1.0)
    ends = [reached.at for reached in found.worst if reached.at is not None]
    places = np.array([at for at in ends if np.isfinite(at).all()])
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, places, wanted.accuracy),
        "warnings": answers.problem_warnings(problem, solution),
        "reach": {
            "face": wanted.face,
            "change": wanted.change,
            "reference": float(found.reference) if has_level and wanted.change == "as_given" else None,
            "largest": {"value": factor * found.largest, "error_bound": factor * found.largest_bound},
            "worst": [_reached(problem, wanted.face, reached) for reached in found.worst],
            "on_axis": [_reached(problem, wanted.face, reached) for reached in found.on_axis],
            "decay": _decay(problem, found.rates, wanted.modes),
        },
    }


def _reached(problem: ReadProblem, face: Face, reached: Reached) -> dict[str, Any]:
    reason = None
    if reached.distance is None:
        assert reached.left is not None
        reason = f"{_far_side(problem, face)}, {reached.left:.3g} of it is left."
    return {
        "fraction": reached.fraction,
        "distance": reached.distance,
        "error_bound": reached.error_bound,
        "at": None if reached.at is None else answers.place(problem, reached.at),
        "left": reached.left,
        "reason": reason,
    }


def _far_side(problem: ReadProblem, face: Face) -> str:
    axis = axis_of(face)
    length = problem.body.size[axis]
    if math.isinf(length):
        return f"Far along {AXES[axis]}"
    opposite = f"{AXES[axis]}_{'low' if is_high(face) else 'high'}"
    return f"At the opposite face {opposite}, {problem.units.show(Kind.LENGTH, length)} away"


def _decay(problem: ReadProblem, rates: Sequence[DecayRate], shown: int) -> dict[str, Any]:
    """How disturbances die away. rates: of all modes that are known. shown: how many of them are listed."""
    reason = None
    if problem.body.layers:
        reason = "The layers of a stack decay together; their rates are not listed."
    elif not rates:
        reason = "The section has no end along an axis, so its modes are not separate and fall as powers of distance."
    elif rates[0].length is None:
        reason = (
            "The sides are insulated, so the mean over the section does not decay; the length is that of the first "
            "mode that does."
        )
    listed = rates[:shown]
    return {
        "length": next((mode.length for mode in rates if mode.length is not None), None),
        "rates": [{"numbers": list(mode.numbers), "rate": mode.rate, "length": mode.length} for mode in listed],
        "reason": reason,
    }
