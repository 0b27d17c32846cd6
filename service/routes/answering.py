"""The way from a question to its answer that the calls share: kept answers, worker, encoding and headers."""

from __future__ import annotations

import asyncio
import hashlib
import time
from collections.abc import Callable, Coroutine, Sequence
from dataclasses import dataclass, replace
from typing import Any, Generic, TypeVar

from fastapi import Request, Response

from service import __version__
from service.core import AccuracyNotReached, CoreError, Interrupted, Solution
from service.core.stopping import on_behalf_of
from service.media import FORMS, JSON_FORM, Form, choose_form
from service.models.evaluate import Question
from service.refusals import TooCostly
from service.request_body import StrictJsonRoute
from service.settings import Settings
from service.state import KeptAnswer, State, state_of
from service.translation.answers import KeepGoing
from service.translation.problem import ReadProblem
from service.translation.solving import Solved, point_into_question

# Parts of a question may each be promised less than the one before.
EASED_AT_MOST = 3

Asked = TypeVar("Asked", bound=Question)
Wanted = TypeVar("Wanted")
Outcome = TypeVar("Outcome")


@dataclass(frozen=True)
class Call(Generic[Asked, Wanted]):
    """The three steps of one call: read the question, refuse what is too costly, answer.

    forms: of its answers. has_tolerance: whether what is wanted has a `tolerance` in the potential's unit, which gives
    way to what can be promised where the client asked for none. advice: what to do where the time was over.
    """

    read: Callable[[Asked, ReadProblem, Solution, Settings], Wanted]
    check_cost: Callable[[Wanted, Solution, Settings, int], None]
    answer: Callable[[ReadProblem, Solution, Wanted, KeepGoing], dict[str, Any]]
    forms: Sequence[Form] = FORMS
    has_tolerance: bool = True
    advice: str = "ask for fewer places or totals, or for less accuracy."


class AnswerRoute(StrictJsonRoute):
    """A route whose answers are kept under the digest of the request, so that asking again costs no work."""

    forms: Sequence[Form] = FORMS

    def answered_before(self, request: Request) -> Response | None:
        """The answer to a request of the same bytes and form, if it is still kept."""
        form = choose_form(request.headers.get("accept"), self.forms)
        kept = state_of(request).answers.get(_key(request, form))
        return None if kept is None else _response(kept, 'cache;desc="hit"')


async def answer(request: Request, question: Asked, call: Call[Asked, Wanted]) -> Response:
    """Answer a question off the event loop, and keep the answer."""
    state = state_of(request)
    form = choose_form(request.headers.get("accept"), call.forms)
    key = _key(request, form)

    def answer_while_waited_for(keep_going: KeepGoing) -> tuple[bytes, dict[str, float]]:
        with on_behalf_of(keep_going):
            return _work(state, question, call, form, keep_going)

    work = state.worker.run(answer_while_waited_for, call.advice)
    (body, times), waited = await _unless_client_leaves(request, work)
    kept = KeptAnswer(body, form.media_type, f'"{key}"', form.file_name)
    state.answers.keep(key, kept)
    times = {"queue": waited, **times}
    return _response(kept, ", ".join(f"{name};dur={1000 * seconds:.3f}" for name, seconds in times.items()))


async def _unless_client_leaves(request: Request, work: Coroutine[Any, Any, Outcome]) -> Outcome:
    """The outcome of the work, which is stopped at its next step when the client goes away before."""
    working = asyncio.ensure_future(work)
    leaving = asyncio.ensure_future(_client_leaves(request))
    try:
        await asyncio.wait({working, leaving}, return_when=asyncio.FIRST_COMPLETED)
        if not working.done():
            raise Interrupted("The request was given up before its answer was complete.")
        return working.result()
    finally:
        working.cancel()
        leaving.cancel()


async def _client_leaves(request: Request) -> None:
    """Return once the connection is closed; the body has been read, so nothing else can come."""
    while (await request.receive())["type"] != "http.disconnect":
        pass


def _work(
    state: State, question: Asked, call: Call[Asked, Wanted], form: Form, keep_going: KeepGoing
) -> tuple[bytes, dict[str, float]]:
    """The encoded answer and the seconds that each step took. Runs in a thread of the worker."""
    times = {}
    started = time.perf_counter()

    def lap(name: str) -> None:
        nonlocal started
        now = time.perf_counter()
        times[name] = now - started
        started = now

    solved = state.solver.of_question(question, keep_going)
    try:
        wanted = call.read(question, solved.problem, solved.solution, state.settings)
        call.check_cost(wanted, solved.solution, state.settings, form.bytes_a_number)
        lap("prepare")
        content = _answer_as_well_as_can_be(question, call, solved, wanted, keep_going)
        lap("compute")
    except CoreError as error:
        point_into_question(error, solved.problem.units)
        raise
    body = form.encode(content)
    lap("encode")
    if len(body) > state.settings.answer_bytes:
        raise TooCostly(
            f"The answer takes {len(body)} bytes; at most {state.settings.answer_bytes} are sent.",
            len(body),
            state.settings.answer_bytes,
        )
    return body, times


def _answer_as_well_as_can_be(
    question: Asked, call: Call[Asked, Wanted], solved: Solved, wanted: Wanted, keep_going: KeepGoing
) -> dict[str, Any]:
    """The answer; where no accuracy was asked for and the usual one cannot be promised, to one that can."""
    gives_way = question.accuracy is None and call.has_tolerance
    for _ in range(EASED_AT_MOST if gives_way else 0):
        try:
            return call.answer(solved.problem, solved.solution, wanted, keep_going)
        except AccuracyNotReached as error:
            wanted = replace(wanted, tolerance=error.bound)  # type: ignore[type-var]
    return call.answer(solved.problem, solved.solution, wanted, keep_going)


def _key(request: Request, form: Form) -> str:
    """Digest of all an answer depends on: the call, the request's bytes, the form and the release."""
    parts = (request.scope["path"], request.state.body_digest, form.media_type, __version__)
    return hashlib.sha256("\n".join(parts).encode()).hexdigest()


def _response(kept: KeptAnswer, timing: str) -> Response:
    headers = {"ETag": kept.etag, "Vary": "Accept", "Server-Timing": timing}
    if kept.media_type != JSON_FORM.media_type:
        headers["Content-Disposition"] = f'attachment; filename="{kept.file_name}"'
    return Response(kept.body, media_type=kept.media_type, headers=headers)
