"""/v1/studies: questions as jobs that outlive a request, with their progress, their cases and their answers."""

from __future__ import annotations

import asyncio
import re
import time
from collections.abc import Iterator
from contextlib import suppress
from typing import Annotated, Any

from fastapi import APIRouter, Body, Header, Path, Query, Request, Response
from fastapi.sse import EventSourceResponse
from pydantic_core import to_json

from service.media import ARRAYS_FORM, FORMS, JSON, Form, check_accepts_json, choose_form
from service.models.analysis_answer import AnalysisAnswer
from service.models.studies import StudiesAnswer, StudyAnswer, StudyQuestion, StudyTable
from service.openapi import answer_examples, body_examples, error_responses
from service.refusals import NotAcceptable, UnknownStudy
from service.request_body import StrictJsonRoute
from service.state import State, state_of
from service.studies.answers import answer_in
from service.studies.forms import BINARY_TABLE, CSV_TABLE, FORM_OF_WORD, LINES_TABLE, TABLE_FORMS, table_in
from service.studies.pages import extent_of
from service.studies.progress import ADDRESS, LOOK_EVERY_SECONDS, events, study_shown
from service.studies.sending import Pieces
from service.studies.store import Study
from service.translation.answers import KeepGoing
from service.translation.case_columns import failures_shown

router = APIRouter(prefix="/v1", tags=["studies"], route_class=StrictJsonRoute)

MOST_LISTED = 100
MOST_FAILURES_SHOWN = 20
# Longest wait for a study to be over that a client can ask for (RFC 7240).
MOST_WAIT_SECONDS = 30
# What to do where the time was over before a study was accepted.
_ADVICE = "the results of the request as it stands are computed first, so ask for fewer of them, or for less accuracy."
# When to ask again how a study stands.
_RETRY_AFTER_SECONDS = 1

# Names of preferences are of either case, and values may be quoted.
_WAIT = re.compile(r"(?:^|[,;\s])wait\s*=\s*(\"?)(\d{1,6})\1(?:$|[,;\s])", re.IGNORECASE)

StudyId = Annotated[str, Path(description="Digest of the question and the release.", examples=["7d41" * 16])]
Prefer = Annotated[
    str | None,
    Header(
        description="With `wait=10` the answer comes as soon as the study is over, at the latest after so many "
        f"seconds; at most {MOST_WAIT_SECONDS} (RFC 7240).",
        examples=["wait=10"],
    ),
]
FormWord = Annotated[
    str | None,
    Query(
        alias="format",
        description="The form, for browsers, in place of Accept: json, jsonl, csv or npz.",
        examples=["csv"],
    ),
]

_BINARY = {
    "schema": {
        "type": "string",
        "format": "binary",
        "description": "Arrays as entries of a ZIP archive of .npy files (numpy.load); the entry `answer` is the JSON "
        "with the name of an entry in place of each array. NaN stands for null.",
    }
}


@router.post(
    "/studies",
    summary="Have a question of many cases answered as a job",
    status_code=202,
    response_class=Response,
    responses={
        202: {
            "model": StudyAnswer,
            "description": "The study was accepted, or is known and not over. `Location` has its address.",
            "content": answer_examples("/v1/studies"),
        },
        200: {"model": StudyAnswer, "description": "The study is finished: the same question was asked before."},
        **error_responses(400, 406, 413, 415, 422, 503, 507),
    },
)
async def post_study(
    request: Request,
    question: Annotated[StudyQuestion, Body(openapi_examples=body_examples("/v1/studies"))],
    prefer: Prefer = None,
) -> Response:
    """Accept a question at once, and answer it in worker processes or on a cluster.

    The same question is one study, whose answer is kept until it is deleted. It goes on when the service was stopped
    or killed, and no case that was done is computed again. Posted again, a study that was cancelled or failed is begun
    again with the cases that it has.
    """
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)

    def work(keep_going: KeepGoing) -> Study:
        return state.studies.accept(question.study, question.question, keep_going)

    study, _ = await state.worker.run(work, _ADVICE)
    headers = {"Location": f"{ADDRESS}/{study.study_id}"}
    return await _when_over(state, study, prefer, headers, status=202)


@router.get(
    "/studies",
    summary="The studies that came in last",
    response_class=Response,
    responses={200: {"model": StudiesAnswer, "description": "The newest first."}, **error_responses(406, 503)},
)
async def list_studies(request: Request) -> Response:
    """How the last hundred studies stand."""
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)

    def listed() -> bytes:
        shown = []
        for study in state.studies.newest(MOST_LISTED):
            # One may be deleted meanwhile.
            with suppress(UnknownStudy):
                shown.append(_shown(state, study))
        return to_json({"studies": shown})

    return Response(await asyncio.to_thread(listed), media_type=JSON)


@router.get(
    "/studies/{study_id}",
    summary="How a study stands",
    response_class=Response,
    responses={200: {"model": StudyAnswer, "description": "How it stands."}, **error_responses(404, 406, 503)},
)
async def get_study(request: Request, study_id: StudyId, prefer: Prefer = None) -> Response:
    """State, progress, time left, and what failed."""
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)
    study = await asyncio.to_thread(state.studies.study, study_id)
    return await _when_over(state, study, prefer, {}, status=200)


@router.get(
    "/studies/{study_id}/results",
    summary="The table of cases so far",
    response_class=Response,
    responses={
        200: {
            "model": StudyTable,
            "description": "The cases that are done.",
            "content": {
                LINES_TABLE.media_type: {"schema": {"type": "string", "description": "One case a line as JSON."}},
                CSV_TABLE.media_type: {
                    "schema": {
                        "type": "string",
                        "description": "RFC 4180: a case a row; each result beside its error bound, the margin of "
                        "each limit beside whether it holds, empty cells where there is none.",
                    }
                },
                BINARY_TABLE.media_type: _BINARY,
            },
        },
        **error_responses(404, 406, 422, 503),
    },
)
async def study_results(request: Request, study_id: StudyId, form_word: FormWord = None) -> Response:
    """Numbers, results and error bounds of each case that is done, in the order of the cases, and how limits hold.

    A case that could not be computed has no results and says why. Cases that are not done yet are left out. JSON lines
    and CSV come piece by piece and may be of any length; one that is broken off is a part of the table.
    """
    form = _form_of(request, form_word)
    state = state_of(request)

    def pieces() -> Iterator[bytes]:
        study = state.studies.study(study_id)
        store = state.studies.store
        yield from table_in(form, store, extent_of(store, study), state.settings.answer_bytes)

    return _sent(state, form, pieces())


@router.get(
    "/studies/{study_id}/answer",
    summary="The answer of a finished study",
    response_class=Response,
    responses={
        200: {
            "model": AnalysisAnswer,
            "description": "What the call of this question answers; here what all of them have in common.",
            "content": {ARRAYS_FORM.media_type: _BINARY},
        },
        **error_responses(404, 406, 409, 422, 503),
    },
)
async def study_answer(request: Request, study_id: StudyId) -> Response:
    """The answer of the question, in the forms of the call that answers it while a client waits."""
    form = choose_form(request.headers.get("accept"), FORMS)
    state = state_of(request)

    def pieces() -> Iterator[bytes]:
        yield answer_in(form, state.studies.answer(study_id), state.settings.answer_bytes)

    return _sent(state, form, pieces())


@router.get(
    "/studies/{study_id}/progress",
    summary="Progress of a study as server-sent events",
    response_class=Response,
    responses={
        200: {
            "description": "Events until the study is over: `event` is its state, `data` what the address of the study "
            "answers, `id` grows with every change.",
            "content": {"text/event-stream": {"schema": {"type": "string"}}},
        },
        204: {"description": "The study is over, and the client knows its last event."},
        **error_responses(404, 503),
    },
)
async def study_progress(
    request: Request,
    study_id: StudyId,
    last_event_id: Annotated[
        str | None, Header(description="The last event a client has seen, of a stream that broke.", examples=["17"])
    ] = None,
) -> Response:
    """How the study stands whenever that changes. A stream that broke is taken up with `Last-Event-ID`."""
    state = state_of(request)
    study = await asyncio.to_thread(state.studies.study, study_id)
    last_seen = int(last_event_id) if re.fullmatch(r"[0-9]{1,15}", last_event_id or "") else 0  # type: ignore[arg-type]
    if study.is_over and study.revision <= last_seen:
        return Response(status_code=204)

    def show(name: str) -> tuple[Study, dict[str, Any]]:
        now = state.studies.study(name)
        return now, _shown(state, now)

    return EventSourceResponse(events(study_id, show, last_seen), headers={"Cache-Control": "no-cache"})


@router.post(
    "/studies/{study_id}/cancel",
    summary="Cancel a study",
    response_class=Response,
    responses={200: {"model": StudyAnswer, "description": "How it stands now."}, **error_responses(404, 406, 503)},
)
async def cancel_study(request: Request, study_id: StudyId) -> Response:
    """End a study that waits or runs; one that is over stays as it is. Its finished cases are kept."""
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)
    study = await asyncio.to_thread(state.studies.cancel, study_id)
    return Response(await asyncio.to_thread(_document, state, study), media_type=JSON)


@router.delete(
    "/studies/{study_id}",
    summary="Forget a study",
    status_code=204,
    responses={204: {"description": "It is forgotten, with all its cases."}, **error_responses(404, 409, 503)},
)
async def forget_study(request: Request, study_id: StudyId) -> Response:
    """Drop a study that is over, and make room."""
    await asyncio.to_thread(state_of(request).studies.forget, study_id)
    return Response(status_code=204)


async def _when_over(state: State, study: Study, prefer: str | None, headers: dict[str, str], status: int) -> Response:
    """How a study stands, once it is over or the client wants to wait no longer. status: of one that is not over."""
    waited = _WAIT.search(prefer or "")
    headers["Vary"] = "Prefer"
    if waited is not None:
        seconds = min(int(waited[2]), MOST_WAIT_SECONDS)
        headers["Preference-Applied"] = f"wait={seconds}"
        end = time.monotonic() + seconds
        while not study.is_over and time.monotonic() < end:
            await asyncio.sleep(LOOK_EVERY_SECONDS)
            study = await asyncio.to_thread(state.studies.study, study.study_id)
    if not study.is_over:
        headers["Retry-After"] = str(_RETRY_AFTER_SECONDS)
    body = await asyncio.to_thread(_document, state, study)
    return Response(body, 200 if study.is_over else status, headers, JSON)


def _document(state: State, study: Study) -> bytes:
    return to_json(_shown(state, study))


def _shown(state: State, study: Study) -> dict[str, Any]:
    studies = state.studies
    failures = dict(studies.store.failures(study.study_id, MOST_FAILURES_SHOWN)) if study.failed else {}
    if study.state != "running":
        return study_shown(study, failures_shown(failures), 1, waits_for_cluster=False)
    return study_shown(
        study, failures_shown(failures), studies.crew.size, waits_for_cluster=not studies.crew.is_reachable
    )


def _form_of(request: Request, word: str | None) -> Form:
    """The form of a table: that of the address, or what the client accepts. Raises NotAcceptable."""
    if word is None:
        return choose_form(request.headers.get("accept"), TABLE_FORMS)
    if word not in FORM_OF_WORD:
        raise NotAcceptable(f"Tables come as {', '.join(FORM_OF_WORD)}; leave `format` out, or name one of them.")
    return FORM_OF_WORD[word]


def _sent(state: State, form: Form, pieces: Iterator[bytes]) -> Response:
    headers = {"Vary": "Accept"}
    if form.media_type != JSON:
        headers["Content-Disposition"] = f'attachment; filename="{form.file_name}"'
    return Pieces(state.sending, pieces, form.media_type, headers)
