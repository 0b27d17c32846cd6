"""POST /v1/sizing: where one number makes limits hold."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Body, Request, Response

from service.models.sizing import SizingQuestion
from service.models.sizing_answer import SizingAnswer
from service.openapi import answer_responses, body_examples
from service.routes.answering import AnswerRoute, answer
from service.routes.deciding import call_of
from service.translation.sizing import CALL

router = APIRouter(prefix="/v1", tags=["decisions"], route_class=AnswerRoute)

_CALL = call_of(CALL)


@router.post(
    "/sizing",
    summary="Where one number makes limits hold",
    responses=answer_responses("/v1/sizing", SizingAnswer),
    response_class=Response,
)
async def sizing(
    request: Request,
    question: Annotated[SizingQuestion, Body(openapi_examples=body_examples("/v1/sizing"))],
) -> Response:
    """The intervals of one number within which all limits hold, or the values at which a result has a given one.

    Each edge is told to full accuracy, with the limit that ends the interval there, a bound on the edge, and how fast
    the result changes with the number. Where limits hold nowhere the value is told at which the worst of them is missed
    least, and which limits exclude each other. The range is looked at place by place first, and whatever shows between
    places is followed; what is narrower than their spacing and does not show can be missed. A list of sizes that can be
    had is held against the limits one by one. With tolerances limits have to hold at all corners of the tolerance zone,
    and each edge names the corner that binds; each place then takes as many cases as there are corners and ends.
    """
    return await answer(request, question, _CALL)
