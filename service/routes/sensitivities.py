"""POST /v1/sensitivities: derivatives of results by numbers."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.sensitivities import SensitivitiesQuestion
from service.models.sensitivities_answer import SensitivitiesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.sensitivities import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/sensitivities",
    summary="How each result changes with each number",
    responses=answer_responses("/v1/sensitivities", SensitivitiesAnswer),
    response_class=Response,
)
async def sensitivities(
    request: Request,
    question: Annotated[SensitivitiesQuestion, Body(openapi_examples=body_examples("/v1/sensitivities"))],
) -> Response:
    """The derivative of every result by every number: sizes, conductivities, coefficients, levels, loads, positions.

    Each is told to a part in a million or better wherever the values allow it, with an estimate of its error. Usually
    four or eight cases are computed for each number, and up to 49 more for all that bend sharply, have kinks or cases
    that fail.
    """
    return await answer(request, question, _CALL)
