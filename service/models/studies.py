"""Studies: what comes in, and how they stand."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field

from service.models.analysis_answer import FailureAnswer
from service.models.base import Model
from service.models.cases_answer import LimitColumn, NumberColumn, ResultColumn

StudyId = Annotated[str, Field(description="Digest of the question and the release.", examples=["7d41" * 16])]
StateWord = Literal["waiting", "running", "finished", "cancelled", "failed"]


class StudyQuestion(Model):
    """A question to be answered by cases, as a job that outlives the request."""

    study: str = Field(
        description="Which question: the last part of the address of the call that answers it while a client waits.",
        examples=["cases", "limits"],
    )
    question: dict[str, Any] = Field(
        description="The body of that call.",
        examples=[{"problem_id": "3b0c" * 16, "results": [], "numbers": [], "cases": {"list": []}}],
    )


class StudyProgress(Model):
    """How far a study is."""

    cases_done: int = Field(description="Cases with an outcome, also those that failed.", examples=[1200])
    cases_failed: int = Field(description="Cases that could not be computed.", examples=[3])
    cases_expected: int = Field(description="Of about how many, estimated when the study came in.", examples=[20000])
    seconds_left: float | None = Field(
        description="An estimate of how long it still takes; null unless it is running and has cases.", examples=[95.5]
    )


class StudyFault(Model):
    """Why a study failed."""

    code: str = Field(description="A short word for programs.", examples=["other-release"])
    message: str = Field(
        description="A sentence.", examples=["The study was begun by release 0.1.0 of the service; post it again."]
    )


class StudyAnswer(Model):
    """How a study stands."""

    study_id: StudyId
    study: str = Field(description="Which question.", examples=["cases"])
    state: StateWord = Field(description="Where it is.", examples=["running"])
    waits_for_cluster: bool = Field(
        description="Whether it runs and the cluster does not answer; it goes on when that does.", examples=[False]
    )
    created: str = Field(description="When it came in, UTC.", examples=["2031-04-02T08:15:00.000Z"])
    started: str | None = Field(
        description="When it began; null while it waits.", examples=["2031-04-02T08:15:00.300Z"]
    )
    ended: str | None = Field(description="When it was over; null before.", examples=["2031-04-02T08:17:30.100Z"])
    progress: StudyProgress = Field(description="How far it is.")
    failures: list[FailureAnswer] = Field(
        description="The first cases that could not be computed; the table of cases has all of them.",
    )
    fault: StudyFault | None = Field(description="Why it failed; null otherwise.")
    results: str = Field(
        description="Address of the table of cases so far.", examples=["/v1/studies/" + "7d41" * 16 + "/results"]
    )
    answer: str | None = Field(
        description="Address of the answer; null until it is finished.",
        examples=["/v1/studies/" + "7d41" * 16 + "/answer"],
    )


class StudiesAnswer(Model):
    """The studies that came in last."""

    studies: list[StudyAnswer] = Field(description="The newest first, at most 100.")


class StudyTable(Model):
    """The cases of a study that are done, in their order."""

    study_id: StudyId
    state: StateWord = Field(
        description="Where the study is; the table is whole when it is finished.", examples=["running"]
    )
    case: list[int] = Field(
        description="The number of each case, counted from 0 in the order in which the study asks for them.",
        examples=[[0, 1, 2]],
    )
    numbers: list[NumberColumn] = Field(description="The numbers, one column each.")
    columns: list[ResultColumn] = Field(description="The results, one column each.")
    limits: list[LimitColumn] = Field(description="The limits of the question, one column each.")
    failures: list[FailureAnswer] = Field(description="The cases that could not be computed, and why.")
