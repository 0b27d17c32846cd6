"""POST /v1/best-values: which values of a few numbers are best."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.best_values import BestValuesQuestion
from service.models.best_values_answer import BestValuesAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.best_values import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/best-values",
    summary="Which values of a few numbers are best",
    responses=answer_responses("/v1/best-values", BestValuesAnswer),
    response_class=Response,
)
async def best_values(
    request: Request,
    question: Annotated[BestValuesQuestion, Body(openapi_examples=body_examples("/v1/best-values"))],
) -> Response:
    """Values of a few numbers, within ranges and under limits, with which a result is lowest or highest.

    Of several results the largest is made as low as can be, or the least as high. Places all over the ranges are looked
    at first, then local searches go on from the best of them and from the numbers as they stand. Rectangles, such as
    pads that are being placed, can be kept apart. Limits are aimed at so that they hold for certain; where no values
    hold them those that miss them least are told, and a warning names which limits. A local search finds what is best
    nearby and proves nothing of what lies elsewhere; how many searches came to the same is told.
    Name the places that may be hottest one by one: a single `highest` over many of them has kinks, which stop a search.
    """
    return await answer(request, question, _CALL)
