"""Cases of a request: the same results for other values of its numbers.

A plan is plain data, so that it goes to another process as it is, and computing a case depends on nothing but the plan
and the case: whoever computes it, and beside which others, the results are the same to the last digit.
"""

from __future__ import annotations

import logging
import time
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import TypeAdapter, ValidationError

from service.analysis.evaluations import Evaluate, Evaluations, Failure
from service.core import Solution, solve
from service.core.errors import CoreError, Interrupted
from service.core.preparation import estimate
from service.core.stopping import on_behalf_of
from service.cost import check_preparation
from service.models.problem import Problem
from service.models.results import Result
from service.number_range import is_readable
from service.refusals import Issue, Refusal, RequestRefused
from service.settings import Settings
from service.translation.answers import KeepGoing
from service.translation.collector import Collector
from service.translation.numbers import NumberTarget, Substitution, written
from service.translation.problem import ReadProblem, path_in_request, read_problem
from service.translation.results import ReadResults, ResultValues, evaluate_results, read_results
from service.translation.solving import point_into_question
from service.validation_sentences import issues_of

FloatArray = NDArray[np.float64]

# A failure says what is wrong with the first few fields; a case is one among thousands.
MOST_SAID = 3

_RESULTS: TypeAdapter[list[Result]] = TypeAdapter(list[Result])

logger = logging.getLogger("service")


@dataclass(frozen=True)
class CasePlan:
    """All that computing a case takes.

    document: the request as plain JSON values, its `problem` and `results` above all. numbers: what each changes in it.
    names, units: of the numbers. result_count: how many results there are. relative, absolute: accuracy asked for, in
    parts of the span of a case's data or as a difference of the potential; the usual one if both are None.
    """

    document: dict[str, Any]
    numbers: tuple[NumberTarget, ...]
    names: tuple[str, ...]
    units: tuple[str, ...]
    result_count: int
    relative: float | None = None
    absolute: float | None = None


class CaseSolver:
    """Computes single cases of a plan."""

    def __init__(self, plan: CasePlan, settings: Settings) -> None:
        self._plan = plan
        self._settings = settings
        self._substitution = Substitution(plan.document, plan.numbers)
        self._last: tuple[ReadProblem, Solution] | None = None

    def __call__(self, case: Sequence[float], accuracy: float | None, keep_going: KeepGoing) -> ResultValues:
        """Results of a case. Raises Refusal and CoreError with sentences about the request as the case makes it."""
        self._check_readable(case)
        document = self._substitution(case)
        problem, solution = self._solved(document, keep_going)
        wanted = self._results(document, problem)
        try:
            return evaluate_results(
                wanted, problem, solution, relative=self._relative(solution, accuracy), keep_going=keep_going
            )
        except CoreError as error:
            if not error.field:
                point_into_question(error, problem.units)
            raise

    def _solved(self, document: dict[str, Any], keep_going: KeepGoing) -> tuple[ReadProblem, Solution]:
        if self._last is not None and not self._substitution.changes_problem:
            return self._last
        problem = _validated(Problem, document["problem"], "problem")
        read = read_problem(problem, self._settings, ("problem",))
        check_preparation(estimate(read.body), self._settings)
        try:
            self._last = read, solve(read.body, keep_going)
        except Interrupted:
            raise
        except CoreError as error:
            error.field = ("problem", *path_in_request(error, problem))
            raise
        return self._last

    def _results(self, document: dict[str, Any], problem: ReadProblem) -> ReadResults:
        asked = _validated(_RESULTS, document["results"], "results")
        collector = Collector(problem.units)
        wanted = read_results(collector, asked, problem, self._settings)
        collector.raise_if_any()
        return wanted

    def _relative(self, solution: Solution, accuracy: float | None) -> float | None:
        """Accuracy in parts of the span: the finer of what the analysis and the client want."""
        asked = self._plan.relative
        if self._plan.absolute is not None and solution.span > 0:
            asked = self._plan.absolute / solution.span
        return min((wanted for wanted in (accuracy, asked) if wanted is not None), default=None)

    def _check_readable(self, case: Sequence[float]) -> None:
        for name, value in zip(self._plan.names, case, strict=True):
            if not is_readable(value):
                issue = Issue(("numbers", name), f"{name} = {value:g} is no number that is read.", "number-range")
                raise RequestRefused((issue,))


def _validated(model: Any, value: Any, key: str) -> Any:
    """A validated part of a request. Raises RequestRefused as the service does when a request comes in."""
    try:
        return model.validate_python(value) if isinstance(model, TypeAdapter) else model.model_validate(value)
    except ValidationError as error:
        errors = [{**mistake, "loc": ("body", key, *mistake["loc"])} for mistake in error.errors()]
        raise RequestRefused(issues_of(errors, {key: value})) from None


class _Deadline:
    """Asks whether to go on, and stops one case that takes longer than any request may."""

    def __init__(self, seconds: float, keep_going: KeepGoing | None) -> None:
        self._seconds = seconds
        self._end = time.perf_counter() + seconds
        self._keep_going = keep_going
        self.is_over = False

    def __call__(self) -> None:
        if self._keep_going is not None:
            self._keep_going()
        if time.perf_counter() > self._end:
            self.is_over = True
            raise Interrupted(f"The case was not complete after {self._seconds:g} s.")


def evaluator(plan: CasePlan, settings: Settings, keep_going: KeepGoing | None = None) -> Evaluate:
    """Computes waves of cases here, one after the other.

    A case that cannot be computed fails in its place. Raises Interrupted only.
    """
    solve_case = CaseSolver(plan, settings)

    def evaluate(cases: FloatArray, *, accuracy: float | None = None) -> Evaluations:
        values = np.full((len(cases), plan.result_count), np.nan)
        bounds = values.copy()
        failures: dict[int, Failure] = {}
        for index, case in enumerate(cases):
            in_time = _Deadline(settings.time_limit_seconds, keep_going)
            try:
                with on_behalf_of(in_time):
                    found = solve_case(case, accuracy, in_time)
            except Interrupted as error:
                if not in_time.is_over:
                    raise
                failures[index] = failure_of(error)
            except Exception as error:
                failures[index] = failure_of(error)
            else:
                values[index], bounds[index] = found.values, found.bounds
        return Evaluations(values, bounds, failures)

    return evaluate


def failure_of(error: Exception) -> Failure:
    """Why a case has no results, in the words a client would have been answered with."""
    if isinstance(error, Refusal):
        said = [f"{written(issue.path)}: {issue.detail}" for issue in error.issues[:MOST_SAID]]
        more = len(error.issues) - len(said)
        sentence = " ".join(said) + (f" And {more} more." if more else "") if said else error.detail
        return Failure(error.issues[0].code if error.issues else "refused", sentence)
    if isinstance(error, Interrupted):
        return Failure("time-limit", error.message)
    if isinstance(error, CoreError):
        place = f"{written(error.field)}: " if error.field else ""
        return Failure(_word_of(type(error).__name__), place + error.message)
    logger.error("A case failed inside the service.", exc_info=error)
    return Failure("internal-error", "Something failed inside the service; the log has more.")


def _word_of(name: str) -> str:
    """NoSteadyState as no-steady-state."""
    return "".join(f"-{letter.lower()}" if letter.isupper() else letter for letter in name).lstrip("-")
