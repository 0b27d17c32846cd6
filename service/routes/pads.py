"""POST /v1/pads: mean, largest and centre potential of pads."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.pads import PadsQuestion
from service.models.pads_answer import PadsAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, Call, answer
from service.translation.pads import answer_pads, check_cost, read_pads

router = APIRouter(prefix="/v1", tags=["answers"], route_class=AnswerRoute)

_CALL = Call(read_pads, check_cost, answer_pads)


@router.post(
    "/pads",
    summary="Mean, largest and centre potential of pads",
    responses=answer_responses("/v1/pads", PadsAnswer),
    response_class=Response,
)
async def pads(
    request: Request,
    question: Annotated[PadsQuestion, Body(openapi_examples=body_examples("/v1/pads"))],
) -> Response:
    """How hot each pad is: its mean, its largest and its centre potential, with its flow and its area.

    A pad is a patch of a face with a given flow, or a pad of a mixed face. Every number has its error bound.
    """
    return await answer(request, question, _CALL)
