"""A study as a client writes it: to the analysis that is to be run, to its id, and to the size of its chunks."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from pydantic import ValidationError

from service import __version__
from service.core.errors import CoreError
from service.core.stopping import on_behalf_of
from service.cost import check_work
from service.models.limits import AnalysisQuestion, Limit
from service.refusals import Issue, Refusal, RequestRefused, TooCostly
from service.settings import Settings
from service.studies.chunks import chunk_size_for
from service.studies.store import Acceptance
from service.translation.analyses import ANALYSES
from service.translation.analysis import Analysis, prepare
from service.translation.case_columns import Columns, columns_of
from service.translation.case_time import seconds_a_case
from service.translation.problem import canonical, problem_id_of
from service.translation.solving import Solver, point_into_question
from service.validation_sentences import issues_of

KeepGoing = Callable[[], None]

# What is kept free beside the numbers of a case: for the answer, which tells them again, and for failures in words.
_ROOM_FACTOR = 3
_ROOM_A_CASE = 200
# An answer tells of each case and limit the margin with its bound, and whether it holds in a word.
_ROOM_A_LIMIT = 60
_LEAST_ROOM = 100_000
# What becomes of a case and of a limit of it while the answer is made of all of them: measured, and something on top.
_MEMORY_FACTOR = 3
_MEMORY_A_LIMIT = 200


@dataclass(frozen=True)
class ReadStudy:
    """A study ready to be run. question: its canonical text. limits: those it asks about, which have been read."""

    study_id: str
    name: str
    question: bytes
    limits: Sequence[Limit]
    analysis: Analysis

    @property
    def columns(self) -> Columns:
        """The columns of its table of cases, with the limits of its question."""
        plan, prepared = self.analysis.plan, self.analysis.prepared
        named = tuple(zip(plan.names, plan.units, strict=True))
        return columns_of(named, prepared, self.limits, prepared.limits(prepared.collector(), self.limits))


def read_study(name: str, content: Any, solver: Solver, settings: Settings, keep_going: KeepGoing) -> ReadStudy:
    """A study from its name and the plain JSON of its question.

    Raises RequestRefused and CoreError with pointers that begin with the key `question`.
    """
    if name not in ANALYSES:
        detail = f"One of {', '.join(ANALYSES)} is wanted here."
        raise RequestRefused((Issue(("study",), detail, "unknown-study"),))
    call = ANALYSES[name]
    with _pointing_below("question"), on_behalf_of(keep_going):
        question = _validated(call.model, content)
        solved = solver.of_question(question, keep_going)
        try:
            analysis = call.read(question, prepare(question, solved.problem, solved.solution, settings))
        except CoreError as error:
            point_into_question(error, solved.problem.units)
            raise
    text = _canonical(question)
    digest = hashlib.sha256("\n".join((name, __version__)).encode() + b"\n" + _named_by_digest(question))
    limits: Sequence[Limit] = getattr(question, "limits", None) or ()
    return ReadStudy(digest.hexdigest(), name, text, limits, analysis)


def acceptance(study: ReadStudy, settings: Settings, keep_going: KeepGoing) -> Acceptance:
    """What the store is told of a new study. Raises TooCostly for one that passes a limit."""
    expected = study.analysis.most_cases
    if expected > settings.study_cases:
        raise TooCostly(
            f"The study would take up to {expected} cases; at most {settings.study_cases} are allowed.",
            expected,
            settings.study_cases,
        )
    columns = study.columns
    memory = expected * (_MEMORY_FACTOR * columns.bytes_a_case + _MEMORY_A_LIMIT * len(columns.limits))
    if memory > settings.memory_bytes:
        raise TooCostly(
            f"The answer would be made of up to {expected} cases, which take about {memory} bytes of memory; at most "
            f"{settings.memory_bytes} are allowed. Ask for fewer cases, results or limits, or in several studies.",
            memory,
            settings.memory_bytes,
        )
    check_work(study.analysis.prepared.estimates(study.analysis.finest), settings)
    return Acceptance(
        study.study_id,
        study.name,
        study.question,
        __version__,
        columns,
        chunk_size_for(seconds_a_case(study.analysis, settings, keep_going)),
        expected,
        _LEAST_ROOM + expected * _room_a_case(columns),
    )


def _room_a_case(columns: Columns) -> int:
    return _ROOM_FACTOR * columns.bytes_a_case + _ROOM_A_LIMIT * len(columns.limits) + _ROOM_A_CASE


def _validated(model: type[AnalysisQuestion], content: Any) -> AnalysisQuestion:
    try:
        return model.model_validate(content)
    except ValidationError as error:
        errors = [{**mistake, "loc": ("body", *mistake["loc"])} for mistake in error.errors()]
        raise RequestRefused(issues_of(errors, content)) from None


@contextmanager
def _pointing_below(key: str) -> Iterator[None]:
    """Make pointers of errors, which count from a question, count from the object that has it under a key."""
    try:
        yield
    except Refusal as error:
        error.issues = tuple(Issue((key, *issue.path), issue.detail, issue.code) for issue in error.issues)
        raise
    except CoreError as error:
        if error.field:
            error.field = (key, *error.field)
        raise


def _canonical(question: AnalysisQuestion) -> bytes:
    """The one JSON text of a question: keys sorted, nothing that was left out."""
    return _text(question.model_dump(mode="json", exclude_none=True, by_alias=True))


def _named_by_digest(question: AnalysisQuestion) -> bytes:
    """The same with the digest of the problem in place of it, so that it does not matter which of both was sent."""
    content = question.model_dump(mode="json", exclude_none=True, by_alias=True)
    if question.problem is not None:
        del content["problem"]
        content["problem_id"] = problem_id_of(canonical(question.problem))
    return _text(content)


def _text(content: Any) -> bytes:
    return json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()
