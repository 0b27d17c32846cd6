"""How results change with numbers: the question read, and its answer."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from service.analysis.derivatives import ACCURACY, RADIUS, Derivatives, NominalFailed, derivatives, most_cases
from service.analysis.evaluations import Evaluate, FloatArray
from service.models import sensitivities as models
from service.refusals import Issue, Path, RequestRefused
from service.translation.analysis import Analysis, AnalysisCall, Prepared
from service.translation.answers import number_or_none
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo, NumberTarget
from service.units import PHYSICS, Kind


def read_sensitivities(question: models.SensitivitiesQuestion, prepared: Prepared) -> Analysis:
    """The question with its numbers found. Raises RequestRefused."""
    collector = prepared.collector()
    infos, targets = prepared.numbers(collector, question.numbers)
    collector.raise_if_any()
    radii = read_radii(collector, question.numbers, infos, targets, prepared)
    collector.raise_if_any()

    def run(evaluate: Evaluate) -> dict[str, Any]:
        found = derivatives_of(evaluate, infos, radii)
        effects = _Effects(found, prepared, infos)
        return {
            "numbers": [_number_shown(found, index, info) for index, info in enumerate(infos)],
            "derivatives": [
                {"result": prepared.results.infos[result].name, "number": info.name}
                | {"unit": unit_of_derivative(prepared, result, info)}
                | derivative_shown(found, result, index)
                | effects.shown(result, index)
                for result in range(len(prepared.results.infos))
                for index, info in enumerate(infos)
            ],
            "case_count": found.n_cases,
        }

    return Analysis(prepared, prepared.plan(infos, targets), most_cases(len(infos)), run, ACCURACY)


def read_radii(
    collector: Collector,
    asked: Sequence[models.VariedNumber],
    infos: Sequence[NumberInfo],
    targets: Sequence[NumberTarget],
    prepared: Prepared,
    path: Path = ("numbers",),
) -> FloatArray:
    """By how much each number is varied at first, shape (n_numbers,). Notes steps that are none."""
    radii = []
    for index, (reference, info, target) in enumerate(zip(asked, infos, targets, strict=True)):
        if reference.step is None:
            radii.append(abs(info.nominal) * RADIUS or _usual_step(info, target, prepared))
            continue
        here = (*path, index, "step")
        radius = read_measured(collector, info.measure.step, reference.step, here)
        if radius <= 0:
            collector.add(here, "The step has to be greater than zero.", "not-positive")
        radii.append(radius)
    return np.array(radii)


def _usual_step(info: NumberInfo, target: NumberTarget, prepared: Prepared) -> float:
    """For a number that is zero: from the body, the data, or the numbers it moves."""
    names = PHYSICS[prepared.problem.potential].names
    meaning = info.measure.step.meaning
    if meaning == names[Kind.LENGTH]:
        return RADIUS * min(extent.high for extent in prepared.problem.extents if math.isfinite(extent.high))
    if meaning == names[Kind.POTENTIAL_DIFFERENCE] and prepared.solution.span > 0:
        return RADIUS * prepared.solution.span
    moved = max((abs(leaf.base) for leaf in target.leaves if leaf.base is not None), default=0.0)
    return RADIUS * moved or 1.0


def derivatives_of(evaluate: Evaluate, infos: Sequence[NumberInfo], radii: FloatArray) -> Derivatives:
    """Derivatives at the numbers as they stand. Raises RequestRefused where even that case cannot be computed."""
    try:
        return derivatives(evaluate, np.array([info.nominal for info in infos]), radii)
    except NominalFailed as error:
        issue = Issue(("problem",), f"The request as it stands has no results. {error.failure.message}", "no-results")
        raise RequestRefused((issue,)) from None


def unit_of_derivative(prepared: Prepared, result: int, info: NumberInfo) -> str:
    """Unit of differences of a result over that of a number."""
    return prepared.results.infos[result].measure.step.over(info.measure.step).unit


def derivative_shown(found: Derivatives, result: int, number: int) -> dict[str, Any]:
    """One entry of the table of derivatives."""
    place = result, number
    return {
        "derivative": number_or_none(found.first[place]),
        "error_estimate": number_or_none(found.first_error[place]),
        "smooth": bool(found.smooth[place]),
        "affine": bool(found.affine[place]),
        "below": number_or_none(found.below[place]),
        "above": number_or_none(found.above[place]),
        "second_derivative": number_or_none(found.second[place]),
        "second_error_estimate": number_or_none(found.second_error[place]),
    }


class _Effects:
    """Derivatives on a common scale: what one per cent of each number does to a result, and which does most.

    Numbers that are zero, or count from no zero of their own, have no per cent.
    """

    def __init__(self, found: Derivatives, prepared: Prepared, infos: Sequence[NumberInfo]) -> None:
        sizes = np.array([info.nominal if info.measure.has_own_zero and info.nominal else np.nan for info in infos])
        self._changes = found.first * sizes / 100
        has_parts = np.array([info.measure.has_own_zero for info in prepared.results.infos])
        whole = np.where(has_parts & np.isfinite(found.values) & (found.values != 0), found.values, np.nan)
        self._relative = found.first * sizes / whole[:, None]
        # What may be nothing has no rank.
        told = np.abs(found.first) > found.first_error
        ranked = np.where(told & np.isfinite(self._changes), np.abs(self._changes), -np.inf)
        order = np.argsort(-ranked, axis=1, kind="stable")
        self._ranks = np.argsort(order, axis=1, kind="stable") + 1
        self._is_ranked = np.isfinite(ranked)

    def shown(self, result: int, number: int) -> dict[str, Any]:
        """What the table of derivatives tells of this beside."""
        place = result, number
        return {
            "per_cent": number_or_none(self._changes[place]),
            "relative": number_or_none(self._relative[place]),
            "rank": int(self._ranks[place]) if self._is_ranked[place] else None,
        }


def _number_shown(found: Derivatives, index: int, info: NumberInfo) -> dict[str, Any]:
    failure = found.failures.get(index)
    return {
        "name": info.name,
        "unit": info.measure.unit,
        "nominal": info.nominal,
        "varied": found.sides[index],
        **({"reason": {"code": failure.code, "message": failure.message}} if failure is not None else {}),
    }


CALL = AnalysisCall("sensitivities", models.SensitivitiesQuestion, read_sensitivities)
