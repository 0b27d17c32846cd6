"""POST /v1/reach: how far from a face its disturbance reaches."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.reach import ReachQuestion
from service.models.reach_answer import ReachAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.reach import answer_reach, check_cost, read_reach

router = APIRouter(prefix="/v1", tags=["answers"], route_class=AnswerRoute)

_CALL = Call(read_reach, check_cost, answer_reach, has_tolerance=False)


@router.post(
    "/reach",
    summary="How far from a face its disturbance reaches",
    responses=answer_responses("/v1/reach", ReachAnswer),
    response_class=Response,
)
async def reach(
    request: Request,
    question: Annotated[ReachQuestion, Body(openapi_examples=body_examples("/v1/reach"))],
) -> Response:
    """The distance from a face beyond which what its data drive stays below a fraction of its largest size there.

    At the worst place of the section and in its middle, each with a bound on the distance; with the decay rates of
    the modes of the section and the decay length of the slowest.
    """
    return await answer(request, question, _CALL)
