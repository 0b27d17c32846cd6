"""The way from a question about a decision to its answer while the client waits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from service.core import Solution
from service.media import FORMS, Form
from service.routes.answering import Call
from service.settings import Settings
from service.translation.analysis import Analysis, AnalysisCall, check_cost, prepare
from service.translation.answers import KeepGoing
from service.translation.case_time import check_time
from service.translation.cases import evaluator
from service.translation.problem import ReadProblem

# What to do where the time was over.
_ADVICE = (
    "send it as a study to POST /v1/studies, which may take as long as it has to, or ask for fewer cases or results."
)


def call_of(kind: AnalysisCall[Any], forms: Sequence[Form] = FORMS) -> Call[Any, Analysis]:
    """The steps of a call whose cases are computed here and now. forms: of its answers."""

    def read(question: Any, problem: ReadProblem, solution: Solution, settings: Settings) -> Analysis:
        return kind.read(question, prepare(question, problem, solution, settings))

    return Call(read, _check_cost, _answer, forms, has_tolerance=False, advice=_ADVICE)


def _check_cost(analysis: Analysis, _: Solution, settings: Settings, __: int) -> None:
    check_cost(analysis, settings)
    check_time(analysis, settings)


def _answer(_: ReadProblem, __: Solution, analysis: Analysis, keep_going: KeepGoing) -> dict[str, Any]:
    return analysis.answer(evaluator(analysis.plan, analysis.prepared.settings, keep_going))
