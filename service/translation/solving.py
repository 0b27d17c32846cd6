"""From a problem, or the id of a stored one, to the solver's solution, with errors that point into the
request.
"""

from __future__ import annotations

from dataclasses import dataclass

from service.core import Solution, solve
from service.core.errors import (
    AccuracyNotReached,
    CoreError,
    Interrupted,
    NoSteadyState,
    NotPhysical,
    OutsideBody,
)
from service.core.preparation import estimate
from service.cost import check_preparation
from service.kept import Kept
from service.models.evaluate import Question
from service.models.problem import Problem
from service.refusals import Issue, Path, RequestRefused
from service.settings import Settings
from service.store import ProblemStore
from service.translation.answers import KeepGoing
from service.translation.problem import ReadProblem, canonical, path_in_request, problem_id_of, read_problem
from service.units import Kind, UnitSystem


@dataclass(frozen=True)
class Solved:
    """A problem with its solution, ready for questions."""

    problem: ReadProblem
    solution: Solution


class Solver:
    """Solves problems, and keeps the solutions of the last ones for the next question."""

    def __init__(self, settings: Settings, store: ProblemStore) -> None:
        self._settings = settings
        self._store = store
        self.kept: Kept[Solved] = Kept(settings.solutions_kept)

    def of_question(self, question: Question, keep_going: KeepGoing | None = None) -> Solved:
        """The solution of the problem a question is about.

        keep_going: asked where solving takes steps.
        Raises RequestRefused for an id that is not stored, and what reading and solving the problem raise.
        """
        if question.problem is not None:
            return self.of_problem(question.problem, ("problem",), keep_going)
        assert question.problem_id is not None
        solved = self.kept.get(question.problem_id)
        if solved is None:
            content = self._store.get(question.problem_id)
            if content is None:
                detail = "No problem is stored under this id; post it to /v1/problems, or send the problem itself."
                raise RequestRefused((Issue(("problem_id",), detail, "unknown-problem"),))
            solved = self.of_problem(Problem.model_validate_json(content), ("problem_id",), keep_going)
        return solved

    def of_problem(self, problem: Problem, prefix: Path = (), keep_going: KeepGoing | None = None) -> Solved:
        """The solution of a problem that stands in the request at `prefix`."""
        problem_id = problem_id_of(canonical(problem))
        solved = self.kept.get(problem_id)
        if solved is None:
            read = read_problem(problem, self._settings, prefix)
            try:
                check_preparation(estimate(read.body), self._settings)
                solved = Solved(read, solve(read.body, keep_going))
            except Interrupted:
                raise
            except CoreError as error:
                error.field = prefix + path_in_request(error, problem)
                if isinstance(error, NoSteadyState):
                    _name_unit_of_imbalance(error, read.units)
                raise
            self.kept.keep(problem_id, solved)
        return solved


def _name_unit_of_imbalance(error: NoSteadyState, units: UnitSystem) -> None:
    unit = units.declared[Kind.FLOW] + (f"/{units.declared[Kind.LENGTH]}" if error.per_length else "")
    error.imbalance = units.write(Kind.FLOW, error.imbalance)
    error.message = error.sentence.format(amount=f"{error.imbalance:.6g} {unit}")


def point_into_question(error: CoreError, units: UnitSystem) -> None:
    """Make an error the solver raised while it answered point to the part of the question it is about."""
    if isinstance(error, AccuracyNotReached):
        unit = units.declared[Kind.POTENTIAL_DIFFERENCE]
        error.message = error.SENTENCE.format(asked=f"{error.asked:.3g} {unit}", bound=f"{error.bound:.3g} {unit}")
    elif isinstance(error, NoSteadyState):
        _name_unit_of_imbalance(error, units)
        error.field = ("evaluate",)
    elif error.field == ("edge_gap",):
        error.field = ("evaluate", "edge_gap")
    elif error.field == ("face",):
        error.field = ("evaluate", "face")
    elif isinstance(error, OutsideBody | NotPhysical):
        error.field = ("evaluate",)
    elif isinstance(error, Interrupted):
        error.field = ()
