"""What all decisions share: the request as it stands, the plan of its cases, and what every answer carries."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Generic, TypeVar

import numpy as np
from numpy.typing import NDArray

from service.analysis.evaluations import Evaluate
from service.analysis.limits import Limit
from service.core import Solution
from service.core.estimate import Estimate
from service.core.stopping import go_on
from service.cost import check_cases, check_work
from service.models import limits as models
from service.models.numbers import NumberReference
from service.refusals import Path
from service.settings import Settings
from service.translation import answers
from service.translation.cases import CasePlan
from service.translation.collector import Collector
from service.translation.measures import read_measured
from service.translation.numbers import NumberInfo, NumberTarget, read_numbers
from service.translation.problem import ReadProblem
from service.translation.results import (
    ReadResults,
    ResultValues,
    estimate_results,
    evaluate_results,
    read_results,
)

FloatArray = NDArray[np.float64]
Asked = TypeVar("Asked", bound=models.AnalysisQuestion)


@dataclass(frozen=True)
class Prepared:
    """A request about decisions, read and computed as it stands.

    document: the request as plain JSON values, the problem written out in it. nominal: its results as it stands.
    seconds: of a processor that these took. relative, absolute: accuracy asked for, as in a CasePlan.
    """

    problem: ReadProblem
    solution: Solution
    settings: Settings
    document: dict[str, Any]
    results: ReadResults
    nominal: ResultValues
    seconds: float
    relative: float | None
    absolute: float | None

    @cached_property
    def index_of(self) -> Mapping[str, int]:
        """Numbers of the results by their names."""
        return {info.name: index for index, info in enumerate(self.results.infos)}

    def collector(self) -> Collector:
        """Reads further fields of the request."""
        return Collector(self.problem.units)

    def result(self, collector: Collector, name: str, path: Path) -> int:
        """The number of a result by its name; 0, and noted, if there is none."""
        index = self.index_of.get(name)
        if index is None:
            known = ", ".join(f'"{info.name}"' for info in self.results.infos[:_MOST_LISTED])
            more = ", …" if len(self.results.infos) > _MOST_LISTED else ""
            collector.add(path, f'There is no result "{name}"; there are {known}{more}.', "no-such-result")
        return index or 0

    def limits(
        self, collector: Collector, asked: Sequence[models.Limit], path: Path = ("limits",)
    ) -> tuple[Limit, ...]:
        """Limits in the units of their results. Notes what is at fault."""
        read = []
        for index, limit in enumerate(asked):
            here = (*path, index)
            number = self.result(collector, limit.result, (*here, "result"))
            measure = self.results.infos[number].measure
            at_most, at_least = (
                far if side is None else read_measured(collector, measure, side, (*here, name))
                for side, far, name in ((limit.at_most, math.inf, "at_most"), (limit.at_least, -math.inf, "at_least"))
            )
            if at_least > at_most:
                detail = "`at_least` is greater than `at_most`; no value holds both."
                collector.add((*here, "at_least"), detail, "order")
            read.append(Limit(number, at_most, at_least))
        return tuple(read)

    def numbers(
        self, collector: Collector, references: Sequence[NumberReference], path: Path = ("numbers",)
    ) -> tuple[tuple[NumberInfo, ...], tuple[NumberTarget, ...]]:
        """The numbers the request points to. Notes what is at fault."""
        return read_numbers(collector, references, self.document, self.problem.units, path)

    def plan(self, infos: Sequence[NumberInfo], targets: Sequence[NumberTarget]) -> CasePlan:
        """The plan of cases of these numbers."""
        return CasePlan(
            {key: self.document[key] for key in ("problem", "results")},
            tuple(targets),
            tuple(info.name for info in infos),
            tuple(info.measure.unit for info in infos),
            len(self.results.infos),
            self.relative,
            self.absolute,
        )

    def results_shown(
        self, values: FloatArray, bounds: FloatArray, places: Mapping[int, Sequence[float]] | None = None
    ) -> list[dict[str, Any]]:
        """The results of one case in the words of the answer. places: where extremes lie, by the number of a result."""
        at = {} if places is None else places
        return [
            {
                "name": info.name,
                "unit": info.measure.unit,
                "value": float(values[index]),
                "error_bound": answers.number_or_none(bounds[index]),
                **({"at": answers.place(self.problem, at[index])} if index in at else {}),
            }
            for index, info in enumerate(self.results.infos)
        ]

    def estimates(self, finest: float | None = None) -> Sequence[Estimate]:
        """What one case costs, about, in the accuracy asked for or a finer one, in parts of the span."""
        asked = [relative for relative in (self.relative, finest) if relative is not None]
        return estimate_results(self.results, self.solution, relative=min(asked, default=None))


@dataclass(frozen=True)
class Analysis:
    """One question of a decision, ready to be answered by whoever computes its cases.

    most_cases: how many cases it takes at the most. run: the answer from a way to compute cases; deterministic, so that
    a run can be taken up again from the cases it had. finest: accuracy that cases are asked for, in parts of the span,
    where that is finer than the client's.
    """

    prepared: Prepared
    plan: CasePlan
    most_cases: int
    run: Callable[[Evaluate], dict[str, Any]]
    finest: float | None = None

    def answer(self, evaluate: Evaluate) -> dict[str, Any]:
        """The whole answer: what every answer of a decision carries, and its own. Warnings of both are joined."""
        own = self.run(evaluate)
        common = envelope(self.prepared)
        warnings = [*common.pop("warnings"), *own.pop("warnings", [])]
        return {**common, **own, "warnings": warnings}


@dataclass(frozen=True)
class AnalysisCall(Generic[Asked]):
    """One kind of question: its name in addresses and studies, its model, and how it is read.

    read: raises RequestRefused with a sentence for each field at fault.
    """

    name: str
    model: type[Asked]
    read: Callable[[Asked, Prepared], Analysis]


def prepare(
    question: models.AnalysisQuestion, problem: ReadProblem, solution: Solution, settings: Settings
) -> Prepared:
    """A request with its results computed as it stands.

    Raises RequestRefused with a sentence for each field at fault, and what the solver raises, pointing to results.
    """
    collector = Collector(problem.units)
    results = read_results(collector, question.results, problem, settings)
    relative = absolute = None
    if question.accuracy is not None:
        relative = question.accuracy.relative
        if question.accuracy.absolute is not None:
            absolute = answers.read_tolerance(collector, question.accuracy, solution)
    collector.raise_if_any()
    document = question.model_dump(mode="json", exclude_none=True, by_alias=True)
    document["problem"] = problem.given.model_dump(mode="json", exclude_none=True, by_alias=True)
    # Before the request as it stands is computed, which may be all the work there is.
    check_work(estimate_results(results, solution, relative=relative), settings)
    wanted = absolute / solution.span if absolute is not None and solution.span > 0 else relative
    begun = time.thread_time()
    nominal = evaluate_results(results, problem, solution, relative=wanted, keep_going=go_on)
    seconds = time.thread_time() - begun
    return Prepared(problem, solution, settings, document, results, nominal, seconds, relative, absolute)


def check_cost(analysis: Analysis, settings: Settings) -> None:
    """Raise TooCostly where a question takes more cases or work than one request may."""
    check_cases(analysis.most_cases, analysis.prepared.estimates(analysis.finest), settings)


def envelope(prepared: Prepared) -> dict[str, Any]:
    """What the answer of every decision carries."""
    problem, solution = prepared.problem, prepared.solution
    tolerance = (prepared.relative or solution.usual_accuracy) * (solution.span or 1.0)
    return {
        "problem_id": problem.problem_id,
        "potential": problem.potential,
        "units": answers.units_shown(problem.units),
        "certificate": answers.certificate(problem, solution, np.zeros((0, 3)), prepared.absolute or tolerance),
        "results": prepared.results_shown(prepared.nominal.values, prepared.nominal.bounds, prepared.nominal.places),
        "warnings": answers.problem_warnings(problem, solution),
    }


_MOST_LISTED = 20
