"""POST /v1/convergence: how the answer converges at some places."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.convergence_answer import ConvergenceAnswer
from service.models.evaluate import ConvergenceQuestion
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.convergence import answer_convergence, check_cost, read_convergence

router = APIRouter(prefix="/v1", tags=["answers"], route_class=AnswerRoute)

_CALL = Call(read_convergence, check_cost, answer_convergence)


@router.post(
    "/convergence",
    summary="How the answer converges at some places",
    responses=answer_responses("/v1/convergence", ConvergenceAnswer),
    response_class=Response,
)
async def convergence(
    request: Request,
    question: Annotated[ConvergenceQuestion, Body(openapi_examples=body_examples("/v1/convergence"))],
) -> Response:
    """Value and bound at each place, and why to trust them.

    The double series term by term with the bound on its tail, the overshoot of the truncated series beside a
    jump, the agreement of the series with the integral over time, the nodes that integral takes, and what a
    tenfold tighter accuracy costs.
    """
    return await answer(request, question, _CALL)
