"""POST /v1/problems and GET /v1/problems/{id}: check and store a problem, and give it back."""

from __future__ import annotations

from typing import Annotated, Any

from fastapi import APIRouter, Body, Path, Request, Response
from pydantic_core import to_json

from service import __version__
from service.media import JSON, check_accepts_json
from service.models.operation import ProblemAnswer
from service.models.problem import Problem
from service.openapi import answer_examples, body_examples, error_responses
from service.refusals import UnknownProblem
from service.request_body import StrictJsonRoute
from service.state import State, state_of
from service.translation.answers import KeepGoing, problem_warnings, units_shown
from service.translation.problem import canonical
from service.translation.solving import Solved

router = APIRouter(prefix="/v1", tags=["problems"], route_class=StrictJsonRoute)


@router.post(
    "/problems",
    summary="Check and store a problem",
    status_code=201,
    response_class=Response,
    responses={
        201: {
            "model": ProblemAnswer,
            "description": "The problem is new and was stored; `Location` has its address.",
            "content": answer_examples("/v1/problems"),
        },
        200: {"model": ProblemAnswer, "description": "The same problem was stored before."},
        **error_responses(400, 406, 413, 415, 422, 503, 507),
    },
)
async def store_problem(
    request: Request, problem: Annotated[Problem, Body(openapi_examples=body_examples("/v1/problems"))]
) -> Response:
    """Check a problem and store it under its content digest, which is its id.

    The same problem posted twice is one problem. Everything a question would find wrong with the problem is
    found here: units, sizes, maps that do not fit their faces, flows that cannot balance.
    """
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)

    def work(keep_going: KeepGoing) -> tuple[bool, Solved]:
        solved = state.solver.of_problem(problem, keep_going=keep_going)
        return state.store.put(solved.problem.problem_id, canonical(problem)), solved

    (is_new, solved), _ = await state.worker.run(work)
    response = _response(_content(problem, solved), solved.problem.problem_id)
    response.status_code = 201 if is_new else 200
    response.headers["Location"] = f"/v1/problems/{solved.problem.problem_id}"
    return response


@router.get(
    "/problems/{problem_id}",
    summary="A stored problem",
    response_class=Response,
    responses={
        200: {"model": ProblemAnswer, "description": "The problem."},
        304: {"description": "The client has it already: `If-None-Match` names its `ETag`."},
        **error_responses(404, 406, 503),
    },
)
async def stored_problem(
    request: Request,
    problem_id: Annotated[str, Path(description="Content digest of the problem.", examples=["3b0c" * 16])],
) -> Response:
    """A problem as it is stored: what was posted, with defaults filled in."""
    check_accepts_json(request.headers.get("accept"))
    state = state_of(request)
    found, _ = await state.worker.run(lambda keep_going: _stored(state, problem_id, keep_going))
    if found is None:
        raise UnknownProblem("No problem is stored under this id; post it to /v1/problems.")
    if _has_it_already(request, problem_id):
        return Response(status_code=304, headers={"ETag": _etag(problem_id)})
    return _response(found, problem_id)


def _stored(state: State, problem_id: str, keep_going: KeepGoing) -> dict[str, Any] | None:
    content = state.store.get(problem_id)
    if content is None:
        return None
    problem = Problem.model_validate_json(content)
    return _content(problem, state.solver.of_problem(problem, keep_going=keep_going))


def _content(problem: Problem, solved: Solved) -> dict[str, Any]:
    return {
        "problem_id": solved.problem.problem_id,
        "problem": problem.model_dump(mode="json", exclude_none=True),
        "units": units_shown(solved.problem.units),
        "warnings": problem_warnings(solved.problem, solved.solution),
    }


def _etag(problem_id: str) -> str:
    """The document depends on the problem and, in its warnings, on the release."""
    return f'"{problem_id}-{__version__}"'


def _has_it_already(request: Request, problem_id: str) -> bool:
    """RFC 9110, section 13.1.2: a list of tags compared without regard to weakness, or * for any."""
    tags = [tag.strip().removeprefix("W/") for tag in request.headers.get("if-none-match", "").split(",")]
    return "*" in tags or _etag(problem_id) in tags


def _response(content: dict[str, Any], problem_id: str) -> Response:
    headers = {"ETag": _etag(problem_id), "Cache-Control": "no-cache"}
    return Response(to_json(content), media_type=JSON, headers=headers)
