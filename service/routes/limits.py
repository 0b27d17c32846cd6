"""POST /v1/limits: whether limits hold."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.limits import LimitsQuestion
from service.models.limits_answer import LimitsAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.limits import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/limits",
    summary="Whether limits hold, and by how much",
    responses=answer_responses("/v1/limits", LimitsAnswer),
    response_class=Response,
)
async def limits(
    request: Request,
    question: Annotated[LimitsQuestion, Body(openapi_examples=body_examples("/v1/limits"))],
) -> Response:
    """Results of a problem held against limits: whether each holds, by how much, and whether that is certain.

    A result is a number read off the field: the potential at a place, the mean or the highest potential of a pad or a
    layer, the flow through a face, a gradient, a difference or a ratio of others. A limit holds for certain only where
    its margin is larger than the error bound of its result.
    """
    return await answer(request, question, _CALL)
