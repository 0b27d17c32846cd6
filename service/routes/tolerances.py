"""POST /v1/tolerances: stack-ups, samples and variance shares."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.tolerances import TolerancesQuestion
from service.models.tolerances_answer import TolerancesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.tolerances import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/tolerances",
    summary="What tolerances of numbers do to results",
    responses=answer_responses("/v1/tolerances", TolerancesAnswer),
    response_class=Response,
)
async def tolerances(
    request: Request,
    question: Annotated[TolerancesQuestion, Body(openapi_examples=body_examples("/v1/tolerances"))],
) -> Response:
    """Tolerances stacked up: worst case and root sum square with what each number adds, and the result at the corners.

    With `samples` also the spread of each result, the probability that each limit holds and that all do, all with
    intervals; with `variance_indices` the Sobol indices. Thousands of samples go to POST /v1/studies.
    """
    return await answer(request, question, _CALL)
